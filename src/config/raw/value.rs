//! # A value of the file, read as what its key wants
//!
//! Every reader gives what was wanted, or notes what is wrong and gives nothing.

use super::Table;
use crate::config::keys::Keys;
use crate::config::near::nearest;
use crate::config::problem::Problems;
use crate::config::time::{duration_text, parse_duration};
use crate::electrode::UnknownName;
use std::ops::{Range, RangeInclusive};
use std::str::FromStr;
use std::time::Duration;
use toml::de::DeValue;

/// A value of the file.
#[derive(Debug, Clone)]
pub(in crate::config) struct Value<'a> {
    /// Where the value stands.
    pub(in crate::config) span: Range<usize>,
    /// Where its key stands.
    pub(in crate::config) key_span: Range<usize>,
    /// Its key, with the tables above.
    pub(in crate::config) path: String,
    pub(super) key: &'a str,
    pub(super) example: &'static str,
    pub(super) inner: &'a DeValue<'a>,
}

impl<'a> Value<'a> {
    /// The key without the tables above.
    pub(in crate::config) const fn key(&self) -> &'a str {
        self.key
    }

    /// Notes what is wrong with this value.
    pub(in crate::config) fn refuse(
        &self,
        problems: &mut Problems<'_>,
        problem: &str,
        instead: &str,
    ) {
        problems.add(&self.span, &self.path, problem, instead);
    }

    /// Notes that what this value names is not there.
    pub(in crate::config) fn points_nowhere(
        &self,
        problems: &mut Problems<'_>,
        problem: &str,
        instead: &str,
    ) {
        problems.missing(&self.span, &self.path, problem, instead);
    }

    /// The text, when it is text at all.
    pub(in crate::config) fn as_text(&self) -> Option<&'a str> {
        self.inner.as_str()
    }

    /// The whole number, when it is one at all.
    pub(in crate::config) fn as_whole(&self) -> Option<i64> {
        let figure = self.inner.as_integer()?;
        i64::from_str_radix(figure.as_str(), figure.radix()).ok()
    }

    /// Key and value, to be told apart from others.
    pub(in crate::config) fn shown(&self) -> String {
        match (self.inner.as_str(), self.as_whole()) {
            (Some(text), _) => format!("{} `{text}`", self.key),
            (None, Some(whole)) => format!("{} {whole}", self.key),
            (None, None) => self.key.to_owned(),
        }
    }

    /// Whether it is a table.
    pub(in crate::config) fn is_table(&self) -> bool {
        self.inner.is_table()
    }

    /// A text.
    pub(in crate::config) fn text(&self, problems: &mut Problems<'_>) -> Option<&'a str> {
        let text = self.inner.as_str();
        if text.is_none() {
            self.mistyped("text between quotes", problems);
        }
        text
    }

    /// A name: text that is neither empty nor hides anything.
    pub(in crate::config) fn name(&self, problems: &mut Problems<'_>) -> Option<&'a str> {
        let text = self.text(problems)?;
        let fault = if text.is_empty() {
            "is empty"
        } else if text.trim() != text {
            "begins or ends with a blank"
        } else if text.chars().any(char::is_control) {
            "holds a control character"
        } else {
            return Some(text);
        };
        self.refuse(problems, &format!("`{}` {fault}", self.key), &self.like());
        None
    }

    /// A finite number.
    pub(in crate::config) fn number(&self, problems: &mut Problems<'_>) -> Option<f64> {
        let figure: Option<f64> = match self.inner {
            DeValue::Float(figure) => figure.as_str().parse().ok(),
            #[expect(
                clippy::cast_precision_loss,
                reason = "a whole number typed where a figure is wanted is small, or refused by its range"
            )]
            DeValue::Integer(_) => self.as_whole().map(|n| n as f64),
            DeValue::String(_)
            | DeValue::Boolean(_)
            | DeValue::Datetime(_)
            | DeValue::Array(_)
            | DeValue::Table(_) => {
                self.mistyped("a number", problems);
                return None;
            }
        };
        let figure = figure.filter(|figure| figure.is_finite());
        if figure.is_none() {
            self.refuse(
                problems,
                &format!("`{}` is no finite number", self.key),
                &self.like(),
            );
        }
        figure
    }

    /// A number within a range, both ends included.
    pub(in crate::config) fn number_in(
        &self,
        range: &RangeInclusive<f64>,
        unit: &str,
        problems: &mut Problems<'_>,
    ) -> Option<f64> {
        let figure = self.number(problems)?;
        if range.contains(&figure) {
            return Some(figure);
        }
        self.refuse(
            problems,
            &format!(
                "{} is outside {} to {}",
                with(figure, unit),
                range.start(),
                with(*range.end(), unit)
            ),
            &self.like(),
        );
        None
    }

    /// A whole number within a range, both ends included.
    pub(in crate::config) fn whole_in<T>(
        &self,
        range: RangeInclusive<T>,
        problems: &mut Problems<'_>,
    ) -> Option<T>
    where
        T: TryFrom<i64> + PartialOrd + std::fmt::Display,
    {
        if !self.inner.is_integer() {
            self.mistyped("a whole number", problems);
            return None;
        }
        let figure = self.as_whole();
        if let Some(whole) = figure.and_then(|n| T::try_from(n).ok())
            && range.contains(&whole)
        {
            return Some(whole);
        }
        let given = figure.map_or("this figure".to_owned(), |n| n.to_string());
        self.refuse(
            problems,
            &format!("{given} is outside {} to {}", range.start(), range.end()),
            &self.like(),
        );
        None
    }

    /// A duration within a range, both ends included.
    pub(in crate::config) fn duration_in(
        &self,
        range: RangeInclusive<Duration>,
        problems: &mut Problems<'_>,
    ) -> Option<Duration> {
        let Some(text) = self.inner.as_str() else {
            self.mistyped("a duration between quotes", problems);
            return None;
        };
        let Ok(duration) = parse_duration(text) else {
            self.refuse(
                problems,
                &format!("`{text}` is no duration"),
                "write `500ms`, `90s`, `5m`, `2h`, `7d` or `1h30m`",
            );
            return None;
        };
        if range.contains(&duration) {
            return Some(duration);
        }
        let (shortest, longest) = (duration_text(*range.start()), duration_text(*range.end()));
        self.refuse(
            problems,
            &format!("{text} is outside {shortest} to {longest}"),
            &self.like(),
        );
        None
    }

    /// One of a set of words.
    pub(in crate::config) fn word<T: FromStr<Err = UnknownName>>(
        &self,
        problems: &mut Problems<'_>,
    ) -> Option<T> {
        let text = self.text(problems)?;
        match T::from_str(text) {
            Ok(word) => Some(word),
            Err(UnknownName { what, given, known }) => {
                let instead = match nearest(&given, known.iter().copied()) {
                    Some(word) => format!("did you mean `{word}`?"),
                    None => format!("write one of {}", quoted(&known)),
                };
                self.refuse(problems, &format!("`{given}` is no {what}"), &instead);
                None
            }
        }
    }

    /// A list of texts, none empty.
    pub(in crate::config) fn texts(
        &self,
        problems: &mut Problems<'_>,
    ) -> Option<Vec<(&'a str, Self)>> {
        let Some(list) = self.inner.as_array() else {
            self.mistyped("a list of texts", problems);
            return None;
        };
        let items = list.iter().map(|item| Self {
            span: item.span(),
            inner: item.get_ref(),
            ..self.clone()
        });
        let texts: Vec<Option<(&'a str, Self)>> = items
            .map(|item| {
                let text = item.as_text().filter(|text| !text.is_empty());
                if text.is_none() {
                    let problem = format!("`{}` wants texts that are not empty", self.key);
                    item.refuse(problems, &problem, &self.like());
                }
                Some((text?, item))
            })
            .collect();
        texts.into_iter().collect()
    }

    /// A table with these keys.
    pub(in crate::config) fn table(
        &self,
        keys: &'static Keys,
        problems: &mut Problems<'_>,
    ) -> Option<Table<'a>> {
        let table = self.open_table(keys, problems)?;
        table.refuse_unknown(problems);
        Some(table)
    }

    /// A table whose keys are names of the engineer's.
    pub(in crate::config) fn open_table(
        &self,
        keys: &'static Keys,
        problems: &mut Problems<'_>,
    ) -> Option<Table<'a>> {
        let Some(entries) = self.inner.as_table() else {
            self.mistyped("a table", problems);
            return None;
        };
        Some(Table {
            span: self.span.clone(),
            keys,
            path: self.path.clone(),
            entries,
        })
    }

    /// A list of tables with these keys: `[[line]]` and its like.
    pub(in crate::config) fn tables(
        &self,
        keys: &'static Keys,
        problems: &mut Problems<'_>,
    ) -> Vec<Table<'a>> {
        let Some(list) = self.inner.as_array() else {
            problems.add(
                &self.key_span,
                &self.path,
                &format!(
                    "`{}` is {}, and must be a list of tables",
                    self.key,
                    self.kind()
                ),
                &format!("write `[[{}]]`", self.key),
            );
            return Vec::new();
        };
        let items = list.iter().map(|item| Self {
            span: item.span(),
            inner: item.get_ref(),
            ..self.clone()
        });
        items
            .filter_map(|item| item.table(keys, problems))
            .collect()
    }

    /// What to write, by the example.
    pub(in crate::config) fn like(&self) -> String {
        if self.path == self.key {
            format!("write `{}`", self.example)
        } else {
            format!("write for example `{} = {}`", self.key, self.example)
        }
    }

    fn mistyped(&self, wanted: &str, problems: &mut Problems<'_>) {
        let problem = format!("`{}` wants {wanted}, not {}", self.key, self.kind());
        self.refuse(problems, &problem, &self.like());
    }

    const fn kind(&self) -> &'static str {
        match self.inner {
            DeValue::String(_) => "text",
            DeValue::Integer(_) => "a whole number",
            DeValue::Float(_) => "a decimal number",
            DeValue::Boolean(_) => "true or false",
            DeValue::Datetime(_) => "a date",
            DeValue::Array(_) => "a list",
            DeValue::Table(_) => "a table",
        }
    }
}

/// A figure with its unit, if it has one.
fn with(figure: f64, unit: &str) -> String {
    if unit.is_empty() {
        figure.to_string()
    } else {
        format!("{figure} {unit}")
    }
}

/// Words between code marks: `a`, `b`.
pub(in crate::config) fn quoted(words: &[&str]) -> String {
    let words: Vec<String> = words.iter().map(|word| format!("`{word}`")).collect();
    words.join(", ")
}
