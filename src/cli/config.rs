//! # `halfcell config check FILE`: is this configuration good, and if not, what to write instead

use crate::config::{load, render, render_styled};
use serde_json::json;
use std::fs;
use std::io::ErrorKind;
use std::path::Path;

/// How the answer is to look.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Form {
    /// For people, without colours.
    Plain,
    /// For people at a terminal.
    Styled,
    /// For programs.
    Json,
}

/// What came of a check.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Checked {
    /// To be printed, without a line end: on stdout when `code` is 0 or the form is JSON, else on stderr.
    pub text: String,
    /// Exit code: 0 good, 2 the file is wrong or not there, 3 it cannot be read.
    pub code: u8,
}

/// Checks a configuration file.
///
/// As JSON: `{"file", "good", "lines", "meters", "points", "problems": [{"line", "column", "key", "problem", "instead"}]}`, the counts `null` when it is not good.
pub fn check(path: &Path, form: Form) -> Checked {
    let file = path.display().to_string();
    match fs::read(path) {
        Ok(bytes) => check_text(&file, &bytes, form),
        Err(error) => {
            let code = match error.kind() {
                ErrorKind::NotFound | ErrorKind::IsADirectory => 2,
                _ => 3,
            };
            let problem = format!("cannot be read: {error}");
            let instead = "name a configuration file that halfcell may read";
            let text = match form {
                Form::Json => unreadable_json(&file, &problem, instead),
                Form::Plain | Form::Styled => {
                    format!("error: {file} {problem}\n  do:    {instead}")
                }
            };
            Checked { text, code }
        }
    }
}

fn check_text(file: &str, bytes: &[u8], form: Form) -> Checked {
    let text = match std::str::from_utf8(bytes) {
        Ok(text) => text,
        Err(error) => {
            let good = String::from_utf8_lossy(&bytes[..error.valid_up_to()]);
            let line = good.matches('\n').count() + 1;
            let problem = format!("is not UTF-8 on line {line}");
            let instead = "save it as UTF-8 text";
            let text = match form {
                Form::Json => unreadable_json(file, &problem, instead),
                Form::Plain | Form::Styled => {
                    format!("error: {file} {problem}\n  do:    {instead}")
                }
            };
            return Checked { text, code: 2 };
        }
    };
    match load(text) {
        Ok(site) => {
            let [lines, meters, points] = [site.lines.len(), site.meters.len(), site.points.len()];
            let text = match form {
                Form::Json => json!({
                    "file": file, "good": true, "lines": lines, "meters": meters, "points": points, "problems": [],
                })
                .to_string(),
                Form::Plain | Form::Styled => format!(
                    "{file} is good: {}, {}, {}",
                    counted(lines, "line"),
                    counted(meters, "meter"),
                    counted(points, "point")
                ),
            };
            Checked { text, code: 0 }
        }
        Err(errors) => {
            let counted = counted(errors.len(), "problem");
            let text = match form {
                Form::Json => json!({
                    "file": file, "good": false, "lines": null, "meters": null, "points": null, "problems": errors,
                })
                .to_string(),
                Form::Plain => format!("{}\n\n{file} has {counted}", render(file, text, &errors)),
                Form::Styled => format!("{}\n\n{file} has {counted}", render_styled(file, text, &errors)),
            };
            Checked { text, code: 2 }
        }
    }
}

fn unreadable_json(file: &str, problem: &str, instead: &str) -> String {
    json!({
        "file": file, "good": false, "lines": null, "meters": null, "points": null,
        "problems": [{ "line": null, "column": null, "key": null, "problem": problem, "instead": instead }],
    })
    .to_string()
}

fn counted(n: usize, what: &str) -> String {
    let plural = if n == 1 { "" } else { "s" };
    format!("{n} {what}{plural}")
}

#[cfg(test)]
mod tests {
    use super::*;

    fn file(bytes: &[u8]) -> tempfile::NamedTempFile {
        let file = tempfile::NamedTempFile::new().unwrap();
        fs::write(file.path(), bytes).unwrap();
        file
    }

    fn said(bytes: &[u8], form: Form) -> (String, u8) {
        let file = file(bytes);
        let checked = check(file.path(), form);
        let name = file.path().display().to_string();
        (checked.text.replace(&name, "FILE"), checked.code)
    }

    const GOOD: &str = include_str!("../../config/neutralisation.toml");

    #[test]
    fn a_good_file_is_called_good_with_what_is_in_it() {
        assert_eq!(
            said(GOOD.as_bytes(), Form::Plain),
            ("FILE is good: 2 lines, 3 meters, 2 points".to_owned(), 0)
        );
        assert_eq!(
            said(GOOD.as_bytes(), Form::Json),
            (
                r#"{"file":"FILE","good":true,"lines":2,"meters":3,"points":2,"problems":[]}"#
                    .to_owned(),
                0
            )
        );
    }

    #[test]
    fn a_wrong_file_is_shown_with_place_and_remedy_and_ends_with_2() {
        let wrong = GOOD.replacen("baud     = 2400", "baud     = 24", 1);
        let want = "\
error: line.baud: 24 is outside 50 to 10000000
  --> FILE:11:12
   |
11 | baud     = 24
   |            ^^
   |
   = help: write for example `baud = 9600`

FILE has 1 problem";
        assert_eq!(said(wrong.as_bytes(), Form::Plain), (want.to_owned(), 2));
        let want = r#"{"file":"FILE","good":false,"lines":null,"meters":null,"points":null,"problems":[{"column":12,"instead":"write for example `baud = 9600`","key":"line.baud","line":11,"problem":"24 is outside 50 to 10000000"}]}"#;
        assert_eq!(said(wrong.as_bytes(), Form::Json), (want.to_owned(), 2));
    }

    #[test]
    fn colours_only_repeat_what_the_words_say() {
        let wrong = GOOD.replacen("baud     = 2400", "baud     = 24", 1);
        let (styled, _) = said(wrong.as_bytes(), Form::Styled);
        assert!(styled.contains('\u{1b}'));
        assert!(styled.contains("24 is outside 50 to 10000000"), "{styled}");
    }

    #[test]
    fn bytes_that_are_no_text_are_refused_with_their_line() {
        let want = "error: FILE is not UTF-8 on line 2\n  do:    save it as UTF-8 text";
        assert_eq!(
            said(b"[site]\nname = \"\xb0\"", Form::Plain),
            (want.to_owned(), 2)
        );
    }

    #[test]
    fn a_file_that_is_not_there_ends_with_2() {
        let folder = tempfile::tempdir().unwrap();
        let checked = check(&folder.path().join("absent.toml"), Form::Plain);
        assert_eq!(checked.code, 2);
        assert!(
            checked.text.contains("absent.toml cannot be read: "),
            "{}",
            checked.text
        );
        let checked = check(folder.path(), Form::Json);
        assert_eq!(checked.code, 2);
    }
}
