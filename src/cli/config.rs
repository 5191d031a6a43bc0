//! # `config`: is the site's file right

use super::context::{Context, counted, misconfigured, put, read_config};
use super::exit::Exit;
use super::failure::Failure;
use crate::config;
use clap::Subcommand;
use serde_json::json;
use std::path::{Path, PathBuf};

/// The site's configuration: check
#[derive(Debug, clap::Args)]
pub(super) struct Args {
    #[command(subcommand)]
    action: Action,
}

#[derive(Debug, Subcommand)]
enum Action {
    /// Validate a configuration: every error at once, with its place and what to write instead
    #[command(after_help = "\
Example:
  halfcell config check /etc/halfcell/halfcell.toml")]
    Check {
        /// The file (default: the one of --config)
        file: Option<PathBuf>,
    },
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let Action::Check { file } = &args.action;
    let file = file.as_deref().unwrap_or_else(|| context.config_path());
    check(context, file)
}

fn check(context: &Context, file: &Path) -> Result<Exit, Failure> {
    let text = read_config(file)?;
    let loaded = config::load(&text);
    if context.json {
        let (site, problems) = match &loaded {
            Ok(site) => (Some(site), &[][..]),
            Err(problems) => (None, problems.as_slice()),
        };
        context.put_json(&json!({
            "file": file,
            "good": site.is_some(),
            "lines": site.map(|site| site.lines.len()),
            "meters": site.map(|site| site.meters.len()),
            "points": site.map(|site| site.points.len()),
            "problems": problems,
        }))?;
    }
    match loaded {
        Ok(_) if context.json => Ok(Exit::Done),
        Ok(site) => put(&format!(
            "{} is good: {}, {}, {}\n",
            file.display(),
            counted(site.lines.len(), "line"),
            counted(site.meters.len(), "meter"),
            counted(site.points.len(), "point")
        )),
        Err(problems) => Err(misconfigured(file, &text, &problems)),
    }
}
