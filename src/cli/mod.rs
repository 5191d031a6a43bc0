//! # The command line: one file per command; parse, call, print
//!
//! in: the process's arguments. out: data on standard output, talk on standard error, one of four exit codes.
//! Always: 1. a wrong request writes nothing. 2. a value never stands without its unit. 3. words carry the meaning, colour only repeats it.
//! Not here: what a figure means (the science rooms), SQL (`ledger`).

mod ahead;
mod audit;
mod backup;
mod calibrate;
mod config;
mod context;
mod demo;
mod derived;
mod exit;
mod export;
mod failure;
mod figures;
mod grab;
mod health;
mod hold;
mod import;
mod lines;
mod listen;
mod log;
mod lot;
mod probe;
mod rows;
mod run;
mod salvage;
mod standards;
mod status;
mod storage;
mod typed;
mod verify;

use clap::{Parser, Subcommand};
use context::Context;
use exit::Exit;
use failure::Failure;
use std::error::Error as _;
use std::io::{IsTerminal, Write as _};
use std::path::PathBuf;
use std::process::ExitCode;

/// Whether to trust the number on the meter: raw millivolts in, pH or Eh with its uncertainty out, nothing lost, every electrode judged.
#[derive(Debug, Parser)]
#[command(
    name = "halfcell",
    version,
    max_term_width = 100,
    arg_required_else_help = true
)]
#[command(after_help = "\
Times T are RFC 3339, `YYYY-MM-DD HH:MM` in the site's zone, or an age like `-2h`; durations are 90s, 5m, 2h, 7d.
Exit codes: 0 done; 1 the answer is no; 2 the request was wrong; 3 the world failed.

Example:
  halfcell status --at -2h")]
struct Cli {
    /// The site's configuration
    #[arg(
        long,
        global = true,
        value_name = "FILE",
        env = "HALFCELL_CONFIG",
        hide_env_values = true,
        default_value = "/etc/halfcell/halfcell.toml",
        help_heading = "Everywhere"
    )]
    config: PathBuf,
    /// The ledger, instead of the one the configuration names
    #[arg(long, global = true, value_name = "FILE", help_heading = "Everywhere")]
    ledger: Option<PathBuf>,
    /// Print data as JSON
    #[arg(long, global = true, help_heading = "Everywhere")]
    json: bool,
    #[command(subcommand)]
    command: Command,
}

/// One variant per command, in the order a day needs them.
#[derive(Debug, Subcommand)]
enum Command {
    Run(run::Args),
    Demo(demo::Args),
    Status(status::Args),
    Health(health::Args),
    Calibrate(calibrate::Args),
    Verify(verify::Args),
    Grab(grab::Args),
    Hold(hold::Args),
    Probe(probe::Args),
    Lot(lot::Args),
    Export(export::Args),
    Import(import::Args),
    Audit(audit::Args),
    Listen(listen::Args),
    Backup(backup::Args),
    Salvage(salvage::Args),
    Config(config::Args),
}

/// Runs the program with the process's arguments.
pub fn run() -> ExitCode {
    let cli = match Cli::try_parse() {
        Ok(cli) => cli,
        Err(answer) => return answered(&answer).into(),
    };
    let context = Context::new(cli.config, cli.ledger, cli.json);
    let ended = match &cli.command {
        Command::Run(args) => run::run(&context, args),
        Command::Demo(args) => demo::run(&context, args),
        Command::Status(args) => status::run(&context, args),
        Command::Health(args) => health::run(&context, args),
        Command::Calibrate(args) => calibrate::run(&context, args),
        Command::Verify(args) => verify::run(&context, args),
        Command::Grab(args) => grab::run(&context, args),
        Command::Hold(args) => hold::run(&context, args),
        Command::Probe(args) => probe::run(&context, args),
        Command::Lot(args) => lot::run(&context, args),
        Command::Export(args) => export::run(&context, args),
        Command::Import(args) => import::run(&context, args),
        Command::Audit(args) => audit::run(&context, args),
        Command::Listen(args) => listen::run(&context, args),
        Command::Backup(args) => backup::run(&context, args),
        Command::Salvage(args) => salvage::run(&context, args),
        Command::Config(args) => config::run(&context, args),
    };
    match ended {
        Ok(exit) => exit.into(),
        Err(failure) => {
            tell(&failure);
            failure.exit().into()
        }
    }
}

/// The argument parser has answered in the command's place: help, or what is wrong with the arguments.
fn answered(answer: &clap::Error) -> Exit {
    let exit = Exit::from(answer);
    if let Some(mistyped) = answer
        .source()
        .and_then(|source| source.downcast_ref::<typed::Mistyped>())
    {
        let mut failure = Failure::request(&mistyped.what).remedy(&mistyped.instead);
        if let Some(argument) = answer.get(clap::error::ContextKind::InvalidArg) {
            failure = failure.at(format!("argument `{argument}`"));
        }
        tell(&failure);
    } else if answer.print().is_err() {
        // Whoever should read it has gone; the code still says it.
    }
    exit
}

/// Tells a failure on standard error, quietly when nobody reads there either.
fn tell(failure: &Failure) {
    if matches!(failure, Failure::ReaderGone) {
        return;
    }
    let stderr = std::io::stderr();
    let coloured = stderr.is_terminal() && std::env::var_os("NO_COLOR").is_none();
    let (on, off) = if coloured {
        ("\x1b[1;31m", "\x1b[0m")
    } else {
        ("", "")
    };
    let mut stderr = stderr.lock();
    if let Some(pictures) = failure.pictures() {
        drop(writeln!(stderr, "{pictures}\n"));
    }
    drop(writeln!(stderr, "{on}error:{off} {failure}"));
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::CommandFactory;

    /// Every command and subcommand that does something, with its path.
    fn commands(command: &clap::Command, path: &str, found: &mut Vec<(String, clap::Command)>) {
        let path = format!("{path} {}", command.get_name()).trim().to_owned();
        if command.get_subcommands().next().is_none() {
            found.push((path, command.clone()));
        } else {
            for sub in command.get_subcommands() {
                commands(sub, &path, found);
            }
        }
    }

    /// Splits as a shell would, as far as our examples need: spaces and quotes.
    fn words(line: &str) -> Vec<String> {
        let mut words = vec![String::new()];
        let mut quote = None;
        for c in line.chars() {
            match (quote, c) {
                (None, '\'' | '"') => quote = Some(c),
                (Some(open), c) if c == open => quote = None,
                (None, ' ') => words.push(String::new()),
                (_, c) => words.last_mut().unwrap().push(c),
            }
        }
        words.retain(|word| !word.is_empty());
        words
    }

    #[test]
    fn the_argument_tree_is_sound() {
        Cli::command().debug_assert();
    }

    #[test]
    fn help_of_every_command_carries_an_example_that_parses() {
        let mut found = Vec::new();
        commands(&Cli::command(), "", &mut found);
        assert!(found.len() >= 12, "only {} commands", found.len());
        for (path, command) in found {
            let help = command
                .get_after_help()
                .map(ToString::to_string)
                .unwrap_or_default();
            let joined = help.replace("\\\n", " ");
            let examples: Vec<&str> = joined
                .lines()
                .map(str::trim)
                .filter(|line| line.starts_with(&path))
                .collect();
            assert!(
                !examples.is_empty(),
                "`{path} --help` shows no example of itself"
            );
            for example in examples {
                let line = example
                    .split(" | ")
                    .next()
                    .unwrap()
                    .split(" > ")
                    .next()
                    .unwrap();
                if let Err(wrong) = Cli::try_parse_from(words(line)) {
                    panic!("the example `{example}` does not parse: {wrong}");
                }
            }
        }
    }

    #[test]
    fn every_command_and_argument_says_what_it_is() {
        let mut found = Vec::new();
        commands(&Cli::command(), "", &mut found);
        for (path, command) in found {
            assert!(
                command.get_about().is_some(),
                "`{path}` does not say what it does"
            );
            for argument in command.get_arguments().filter(|a| a.get_id() != "help") {
                assert!(
                    argument.get_help().is_some(),
                    "`{path}`: {} is unexplained",
                    argument.get_id()
                );
            }
        }
    }

    #[test]
    fn json_and_files_may_stand_before_or_after_the_command() {
        for line in [
            "halfcell --json --config a.toml --ledger b.db status",
            "halfcell status --json --config a.toml --ledger b.db",
            "halfcell --config a.toml probe --ledger b.db list --json",
        ] {
            let cli = Cli::try_parse_from(words(line)).unwrap();
            assert!(cli.json, "{line}");
            assert_eq!(cli.config, PathBuf::from("a.toml"), "{line}");
            assert_eq!(cli.ledger, Some(PathBuf::from("b.db")), "{line}");
        }
    }
}
