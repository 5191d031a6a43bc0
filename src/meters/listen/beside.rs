//! # Which figure a word belongs to: a unit stands behind its figure, a name before it
//!
//! `pH 7.02 mV -23.4` and `7.02 pH -23.4 mV` differ only in where they begin and end.

use super::guess::CannotTell;
use super::shape::{Figures, Piece};
use super::words::{Meaning, name, unit};

/// How a word hangs together with a figure.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
enum Bond {
    /// A separator is between them.
    Separator,
    /// A blank.
    Blank,
    /// `:` or `=`, which nothing but a name has behind it.
    NameMark,
    /// Nothing.
    Glued,
}

/// Gives each word that does not change to the figure it belongs to.
pub(super) fn assign(pieces: &[Piece], columns: &mut [Figures]) -> Result<(), CannotTell> {
    let mut unclear: Vec<(&str, usize, usize)> = Vec::new();
    let (mut first, mut last) = (None, None);
    for (at, piece) in pieces.iter().enumerate() {
        let Piece::Word(words) = piece else { continue };
        let word = if let [word] = words.as_slice() {
            word.as_str()
        } else {
            ""
        };
        let before = pieces.get(..at).unwrap_or(&[]).iter().rev();
        let behind = pieces.get(at + 1..).unwrap_or(&[]).iter();
        // Behind a figure `:` is a separator like others.
        let before = bond(before).map(|(column, by)| match by {
            Bond::NameMark => (column, Bond::Separator),
            Bond::Separator | Bond::Blank | Bond::Glued => (column, by),
        });
        match (before, bond(behind)) {
            (Some((column, by)), Some((_, other))) if by > other => put_unit(columns, column, word),
            (Some((_, by)), Some((column, other))) if by < other => {
                put_label(columns, column, word);
            }
            (Some((before, _)), Some((behind, _))) => unclear.push((word, before, behind)),
            (Some((column, _)), None) => {
                put_unit(columns, column, word);
                if column + 1 == columns.len() {
                    last = Some(word);
                }
            }
            (None, Some((column, _))) => {
                put_label(columns, column, word);
                if column == 0 {
                    first = Some(word);
                }
            }
            (None, None) => {}
        }
    }
    let Some((word, ..)) = unclear.first() else {
        return Ok(());
    };
    let units = match (first, last) {
        (None, Some(_)) => true,
        (Some(_), None) => false,
        (Some(first), Some(last)) => {
            let (of_first, beside) = (name(first), unit(word));
            let contradict =
                of_first != Meaning::Other && beside != Meaning::Other && of_first != beside;
            match (unit(last), of_first) {
                _ if contradict => false,
                (Meaning::Other, Meaning::Other) => return Err(unit_or_name(word)),
                (Meaning::Other, _) => false,
                _ => true,
            }
        }
        (None, None) => return Err(unit_or_name(word)),
    };
    for (word, before, behind) in unclear {
        if units {
            put_unit(columns, before, word);
        } else {
            put_label(columns, behind, word);
        }
    }
    Ok(())
}

fn unit_or_name(word: &str) -> CannotTell {
    CannotTell::UnitOrName {
        word: word.to_owned(),
    }
}

/// The figure nearest in this direction, if nothing but blanks and marks is between, and what binds it.
fn bond<'a>(towards: impl Iterator<Item = &'a Piece>) -> Option<(usize, Bond)> {
    let mut by = Bond::Glued;
    for piece in towards {
        match piece {
            Piece::Column(column) => return Some((*column, by)),
            Piece::Blank => by = by.min(Bond::Blank),
            Piece::Marks(marks) if matches!(marks.as_str(), ":" | "=" | "->") => {
                by = Bond::NameMark;
            }
            Piece::Marks(_) => by = Bond::Separator,
            Piece::Word(_) | Piece::Time { .. } => return None,
        }
    }
    None
}

fn put_unit(columns: &mut [Figures], column: usize, word: &str) {
    if let Some(figures) = columns.get_mut(column).filter(|_| !word.is_empty()) {
        figures.unit.get_or_insert_with(|| word.to_owned());
    }
}

fn put_label(columns: &mut [Figures], column: usize, word: &str) {
    if let Some(figures) = columns.get_mut(column).filter(|_| !word.is_empty()) {
        figures.label = Some(word.to_owned());
    }
}
