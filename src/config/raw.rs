//! # The file as written: tables and values that know where they stand

mod value;

use super::keys::Keys;
use super::near::{instead_of, nearest};
use super::problem::Problems;
use std::ops::Range;
use toml::Spanned;
use toml::de::DeTable;
pub(super) use value::{Value, quoted};

/// A table of the file.
#[derive(Debug, Clone)]
pub(super) struct Table<'a> {
    /// Where it stands: its header, or all of an inline table.
    span: Range<usize>,
    keys: &'static Keys,
    path: String,
    entries: &'a DeTable<'a>,
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
        // Said already, where it was mistyped.
        let meant = |value: Value<'_>| {
            !self.knows(value.key) && nearest(value.key, self.unused()) == Some(key)
        };
        if self.values().any(meant) {
            return;
        }
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

    fn knows(&self, key: &str) -> bool {
        self.keys.known.iter().any(|(known, _)| *known == key)
    }

    /// Known keys that do not stand in this table: only these can a mistyped one have meant.
    fn unused(&self) -> impl Iterator<Item = &'static str> {
        let known = self.keys.known.iter().map(|(key, _)| *key);
        known.filter(|key| self.find(key).is_none())
    }

    fn refuse_unknown(&self, problems: &mut Problems<'_>) {
        for value in self.values() {
            if !self.knows(value.key) {
                let instead = match nearest(value.key, self.unused()) {
                    Some(key) => format!("did you mean `{key}`?"),
                    None => instead_of(value.key, self.keys.known.iter().map(|(key, _)| *key)),
                };
                problems.add(
                    &value.key_span,
                    &value.path,
                    &format!("`{}` is no key of {}", value.key, self.keys.table),
                    &instead,
                );
            }
        }
    }
}

fn join(path: &str, key: &str) -> String {
    if path.is_empty() {
        key.to_owned()
    } else {
        format!("{path}.{key}")
    }
}
