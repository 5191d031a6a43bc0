//! # What is wrong with a configuration, where, and what to write instead

use annotate_snippets::{AnnotationKind, Level, Renderer, Snippet};
use serde::Serialize;
use std::ops::Range;

/// One thing wrong with a configuration.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, thiserror::Error)]
#[error("line {line}, column {column}, `{key}`: {problem}; {instead}")]
pub struct ConfigError {
    /// Line of the file, from 1.
    pub line: usize,
    /// Column in characters, from 1.
    pub column: usize,
    /// The key it is about, with the table it stands in: `point.alarm.low`.
    pub key: String,
    /// What is wrong, with its figures.
    pub problem: String,
    /// What to write instead.
    pub instead: String,
    /// The bytes of the file it is about.
    #[serde(skip)]
    pub span: Range<usize>,
}

/// Every error with the lines it is about, for files and pipes.
pub fn render(path: &str, text: &str, errors: &[ConfigError]) -> String {
    pictures(&Renderer::plain(), path, text, errors)
}

/// As [`render`], with colours for a terminal.
pub fn render_styled(path: &str, text: &str, errors: &[ConfigError]) -> String {
    pictures(&Renderer::styled(), path, text, errors)
}

fn pictures(renderer: &Renderer, path: &str, text: &str, errors: &[ConfigError]) -> String {
    let mut pictures: Vec<String> = Vec::new();
    for error in errors {
        let title = format!("{}: {}", error.key, error.problem);
        let mark = AnnotationKind::Primary.span(error.span.clone());
        let picture = Level::ERROR
            .primary_title(title)
            .element(Snippet::source(text).path(path).annotation(mark))
            .element(Level::HELP.message(&error.instead));
        pictures.push(renderer.render(&[picture]));
    }
    pictures.join("\n\n")
}

/// Why an error is there, so that one slip does not raise ten.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Origin {
    /// The text is no TOML.
    Syntax,
    /// The key itself is wrong.
    Own,
    /// Something is missing, which may be only because a broken line hid it.
    Missing,
}

/// Collects what is wrong.
#[derive(Debug)]
pub(super) struct Problems<'t> {
    text: &'t str,
    found: Vec<(Origin, ConfigError)>,
}

impl<'t> Problems<'t> {
    pub(super) const fn new(text: &'t str) -> Self {
        Self {
            text,
            found: Vec::new(),
        }
    }

    /// The text is no TOML here.
    pub(super) fn syntax(&mut self, error: &toml::de::Error) {
        let instead = if error.message().contains("escape") {
            "put text with backslashes between single quotes, or double each backslash"
        } else if error.message().contains("duplicate key") {
            "keep one of the two; a list of tables has double brackets: `[[line]]`, `[[meter]]`, `[[point]]`"
        } else {
            "write `key = value`, text between quotes, one pair a line"
        };
        let end = self.text.len();
        let span = error.span().unwrap_or(end..end);
        self.push(Origin::Syntax, span, ["TOML", error.message(), instead]);
    }

    /// A key is wrong.
    pub(super) fn add(&mut self, span: &Range<usize>, key: &str, problem: &str, instead: &str) {
        self.push(Origin::Own, span.clone(), [key, problem, instead]);
    }

    /// Something is not there.
    pub(super) fn missing(&mut self, span: &Range<usize>, key: &str, problem: &str, instead: &str) {
        self.push(Origin::Missing, span.clone(), [key, problem, instead]);
    }

    /// Line of a place in the file, from 1.
    pub(super) fn line_of(&self, span: &Range<usize>) -> usize {
        self.place(span.start).0
    }

    /// Everything found, in the order of the file. What may follow from broken syntax is left out as long as there is any.
    pub(super) fn finish(self) -> Vec<ConfigError> {
        let broken: Vec<usize> = self
            .found
            .iter()
            .filter(|(origin, _)| *origin == Origin::Syntax)
            .map(|(_, error)| error.line)
            .collect();
        let mut errors: Vec<ConfigError> = self
            .found
            .into_iter()
            .filter(|(origin, error)| match origin {
                Origin::Syntax => true,
                Origin::Own => !broken.contains(&error.line),
                Origin::Missing => broken.is_empty(),
            })
            .map(|(_, error)| error)
            .collect();
        errors.sort_by_key(|error| (error.span.start, error.span.end));
        errors
    }

    fn push(&mut self, origin: Origin, span: Range<usize>, words: [&str; 3]) {
        let [key, problem, instead] = words.map(str::to_owned);
        let (line, column) = self.place(span.start);
        self.found.push((
            origin,
            ConfigError {
                line,
                column,
                key,
                problem,
                instead,
                span,
            },
        ));
    }

    fn place(&self, at: usize) -> (usize, usize) {
        let before = self.text.get(..at).unwrap_or(self.text);
        let line = before.rsplit('\n').next().unwrap_or("");
        (before.matches('\n').count() + 1, line.chars().count() + 1)
    }
}
