//! # The file as written: tables and values that know where they stand
//!
//! Every reader here gives the value, or notes what is wrong with it and gives nothing.

use super::keys::Keys;
use super::near::{instead_of, nearest};
use super::problem::Problems;
use super::time::{duration_text, parse_duration};
use crate::electrode::UnknownName;
use std::ops::{Range, RangeInclusive};
use std::str::FromStr;
use std::time::Duration;
use toml::Spanned;
use toml::de::{DeTable, DeValue};

/// A table of the file.
#[derive(Debug, Clone)]
pub(super) struct Table<'a> {
    /// Where it stands: its header, or all of an inline table.
    pub(super) span: Range<usize>,
    keys: &'static Keys,
    path: String,
    entries: &'a DeTable<'a>,
}

/// A value of the file.
#[derive(Debug, Clone)]
pub(super) struct Value<'a> {
    /// Where the value stands.
    pub(super) span: Range<usize>,
    /// Where its key stands.
    pub(super) key_span: Range<usize>,
    /// Its key, with the tables above.
    pub(super) path: String,
    key: &'a str,
    example: &'static str,
    inner: &'a DeValue<'a>,
}

impl<'a> Table<'a> {
    /// The whole file.
    pub(super) fn root(
        root: &'a Spanned<DeTable<'a>>,
        keys: &'static Keys,
        problems: &mut Problems<'_>,
    ) -> Self {
        let table = Self {
            span: 0..0,
            keys,
            path: String::new(),
            entries: root.get_ref(),
        };
        table.refuse_unknown(problems);
        table
    }

    /// The value of a key, if it is there.
    pub(super) fn find(&self, key: &'static str) -> Option<Value<'a>> {
        self.values().find(|value| value.key == key)
    }

    /// The value of a key that must be there.
    pub(super) fn need(&self, key: &'static str, problems: &mut Problems<'_>) -> Option<Value<'a>> {
        let found = self.find(key);
        if found.is_none() {
            self.lacks(key, problems);
        }
        found
    }

    /// Notes that a key is not there.
    pub(super) fn lacks(&self, key: &'static str, problems: &mut Problems<'_>) {
        let example = self.keys.example(key);
        let instead = if self.path.is_empty() {
            format!("add a table `{example}`")
        } else {
            format!("add `{key} = {example}`")
        };
        problems.missing(
            &self.span,
            &self.path_of(key),
            &format!("`{key}` is missing in {}", self.keys.table),
            &instead,
        );
    }

    /// Every value, in the order of the file.
    pub(super) fn values(&self) -> impl Iterator<Item = Value<'a>> + use<'a> {
        let (keys, path) = (self.keys, self.path.clone());
        let mut values: Vec<Value<'a>> = self
            .entries
            .iter()
            .map(|(key, value)| Value {
                span: value.span(),
                key_span: key.span(),
                path: join(&path, key.get_ref()),
                key: key.get_ref(),
                example: keys.example(key.get_ref()),
                inner: value.get_ref(),
            })
            .collect();
        values.sort_by_key(|value| value.key_span.start);
        values.into_iter()
    }

    /// The key with the tables above it.
    pub(super) fn path_of(&self, key: &str) -> String {
        join(&self.path, key)
    }

    fn refuse_unknown(&self, problems: &mut Problems<'_>) {
        let known = || self.keys.known.iter().map(|(key, _)| *key);
        for value in self.values() {
            if !known().any(|key| key == value.key) {
                problems.add(
                    &value.key_span,
                    &value.path,
                    &format!("`{}` is no key of {}", value.key, self.keys.table),
                    &instead_of(value.key, known()),
                );
            }
        }
    }
}

impl<'a> Value<'a> {
    /// The key without the tables above.
    pub(super) const fn key(&self) -> &'a str {
        self.key
    }

    /// Notes what is wrong with this value.
    pub(super) fn refuse(&self, problems: &mut Problems<'_>, problem: &str, instead: &str) {
        problems.add(&self.span, &self.path, problem, instead);
    }

    /// The text, when it is text at all.
    pub(super) fn as_text(&self) -> Option<&'a str> {
        self.inner.as_str()
    }

    /// The whole number, when it is one at all.
    pub(super) fn as_whole(&self) -> Option<i64> {
        let figure = self.inner.as_integer()?;
        i64::from_str_radix(figure.as_str(), figure.radix()).ok()
    }

    /// Key and value, to be told apart from others.
    pub(super) fn shown(&self) -> String {
        match (self.inner.as_str(), self.as_whole()) {
            (Some(text), _) => format!("{} `{text}`", self.key),
            (None, Some(whole)) => format!("{} {whole}", self.key),
            (None, None) => self.key.to_owned(),
        }
    }

    /// Whether it is a table.
    pub(super) fn is_table(&self) -> bool {
        self.inner.is_table()
    }

    /// A text.
    pub(super) fn text(&self, problems: &mut Problems<'_>) -> Option<&'a str> {
        let text = self.inner.as_str();
        if text.is_none() {
            self.mistyped("text between quotes", problems);
        }
        text
    }

    /// A name: text that is neither empty nor hides anything.
    pub(super) fn name(&self, problems: &mut Problems<'_>) -> Option<&'a str> {
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
    pub(super) fn number(&self, problems: &mut Problems<'_>) -> Option<f64> {
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
    pub(super) fn number_in(
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
    pub(super) fn whole_in<T>(
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
    pub(super) fn duration_in(
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
    pub(super) fn word<T: FromStr<Err = UnknownName>>(
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
    pub(super) fn texts(&self, problems: &mut Problems<'_>) -> Option<Vec<(&'a str, Self)>> {
        let Some(list) = self.inner.as_array() else {
            self.mistyped("a list of texts", problems);
            return None;
        };
        let items = list.iter().map(|item| Self {
            span: item.span(),
            inner: item.get_ref(),
            ..self.clone()
        });
        let mut texts = Some(Vec::new());
        for item in items {
            match (item.inner.as_str(), &mut texts) {
                (Some(text), Some(texts)) if !text.is_empty() => texts.push((text, item)),
                (Some(text), None) if !text.is_empty() => {}
                _ => {
                    item.refuse(
                        problems,
                        &format!("`{}` wants texts that are not empty", self.key),
                        &self.like(),
                    );
                    texts = None;
                }
            }
        }
        texts
    }

    /// A table with these keys.
    pub(super) fn table(
        &self,
        keys: &'static Keys,
        problems: &mut Problems<'_>,
    ) -> Option<Table<'a>> {
        let table = self.open_table(keys, problems)?;
        table.refuse_unknown(problems);
        Some(table)
    }

    /// A table whose keys are names of the engineer's.
    pub(super) fn open_table(
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
    pub(super) fn tables(
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
    pub(super) fn like(&self) -> String {
        format!("write for example `{} = {}`", self.key, self.example)
    }

    fn mistyped(&self, wanted: &str, problems: &mut Problems<'_>) {
        let problem = format!("`{}` wants {wanted}, not {}", self.key, self.kind());
        self.refuse(problems, &problem, &self.like());
    }

    const fn kind(&self) -> &'static str {
        match self.inner {
            DeValue::String(_) => "text",
            DeValue::Integer(_) => "a whole number",
            DeValue::Float(_) => "a number",
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
pub(super) fn quoted(words: &[&str]) -> String {
    let words: Vec<String> = words.iter().map(|word| format!("`{word}`")).collect();
    words.join(", ")
}

fn join(path: &str, key: &str) -> String {
    if path.is_empty() {
        key.to_owned()
    } else {
        format!("{path}.{key}")
    }
}
