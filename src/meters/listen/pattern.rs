//! # The pattern that reads lines of a shape

use super::guess::Told;
use super::shape::{Piece, Shape};
use super::token::Mark;
use crate::config::site::OWN_TIME;

/// The pattern from the beginning of the line to the last figure wanted.
pub(super) fn pattern(shape: &Shape, mv: &Told, temp_c: Option<&Told>) -> String {
    let figure = match shape.mark {
        Mark::Point => r"[-+]?\s*\d*\.?\d+(?:[eE][-+]?\d+)?",
        Mark::Comma => r"[-+]?\s*\d*,?\d+(?:[eE][-+]?\d+)?",
    };
    let last = temp_c.map_or(mv.column, |t| t.column.max(mv.column));
    let has_unit = shape.columns.get(last).is_some_and(|f| f.unit.is_some());
    let mut parts = vec![r"^\s*".to_owned()];
    let mut timed = false;
    let mut done = false;
    for piece in &shape.pieces {
        // The unit behind the last figure makes a line of another kind no line of this one.
        let unit = matches!(piece, Piece::Word(_));
        if done && !(has_unit && (unit || matches!(piece, Piece::Blank | Piece::Marks(_)))) {
            break;
        }
        parts.push(match piece {
            Piece::Column(column) => {
                let named = match column {
                    c if *c == mv.column => format!("(?<mv>{figure})"),
                    c if temp_c.is_some_and(|t| t.column == *c) => format!("(?<temp_c>{figure})"),
                    _ => format!("(?:{figure})"),
                };
                if *column == last {
                    done = true;
                }
                named + r"\s*"
            }
            Piece::Time { of_day } if *of_day && !timed => {
                timed = true;
                format!(r"(?<{OWN_TIME}>[\d:.,]+)")
            }
            Piece::Time { .. } => r"[-\d:./]+".to_owned(),
            Piece::Word(words) => {
                let words: Vec<String> = words.iter().map(|w| regex_lite::escape(w)).collect();
                match words.as_slice() {
                    [word] => word.clone(),
                    many => format!("(?:{})", many.join("|")),
                }
            }
            Piece::Blank => r"\s+".to_owned(),
            Piece::Marks(marks) => {
                let marks = marks.split_whitespace().map(regex_lite::escape);
                format!(r"\s*{}\s*", marks.collect::<Vec<_>>().join(r"\s+"))
            }
        });
        if done && unit {
            break;
        }
    }
    let pattern = parts.concat();
    pattern
        .replace(r"\s*\s+", r"\s+")
        .replace(r"\s*\s*", r"\s*")
}
