//! # Which figure is which
//!
//! Unit beside a figure before a name above or before it, both before what the figures themselves look like. Where two columns could
//! each be the one, neither is.

use super::super::checksum;
use super::super::figure::characters;
use super::pattern::pattern;
use super::shape::{Figures, Piece, Shape, shape};
use super::token::Mark;
use super::words::{Meaning, name, unit};
use crate::config::site::Checksum;
use std::fmt;

/// How sure a guess is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Sure {
    /// By the look of the figures alone.
    Perhaps,
    /// A name says so, and the figures do not contradict it.
    Likely,
    /// The unit stands beside it.
    Certain,
}

impl fmt::Display for Sure {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Perhaps => "perhaps",
            Self::Likely => "likely",
            Self::Certain => "certain",
        })
    }
}

/// A column that was told from the others.
#[derive(Debug, Clone, PartialEq)]
pub struct Told {
    /// Which, from 0.
    pub column: usize,
    /// Factor to mV, or to °C.
    pub scale: f64,
    /// How sure.
    pub sure: Sure,
    /// What for.
    pub why: String,
}

/// A column of figures.
#[derive(Debug, Clone, PartialEq)]
pub struct Column {
    /// As last printed.
    pub example: String,
    /// The word behind it.
    pub unit: Option<String>,
    /// The word before or above it.
    pub name: Option<String>,
}

/// What is known of a meter's lines.
#[derive(Debug, Clone, PartialEq)]
pub struct Guess {
    /// The figures of a line.
    pub columns: Vec<Column>,
    /// The electrode's tension.
    pub mv: Told,
    /// The temperature, or why it is not known.
    pub temp_c: Result<Told, String>,
    /// The pattern that reads them.
    pub pattern: String,
    /// The checksum behind each line.
    pub checksum: Option<Checksum>,
    /// Words seen where a figure should be.
    pub over_range: Vec<String>,
}

/// Why nothing is guessed.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum CannotTell {
    /// No line has a figure in it.
    #[error("the lines hold no figures")]
    NoFigures,
    /// The lines are too different.
    #[error("only {n_alike} of {n_lines} lines have the same shape")]
    NoShape {
        /// Lines of the commonest shape.
        n_alike: usize,
        /// Lines with figures.
        n_lines: usize,
    },
    /// `12,5` is one figure or two.
    #[error(
        "a comma is all that stands between digits: it may be the decimal mark or part two figures"
    )]
    CommaOrSeparator,
    /// No column looks like an electrode's tension.
    #[error("no column can be told to be the millivolts")]
    NoTension,
    /// Several do.
    #[error("columns {} could each be the millivolts", listed(columns))]
    ManyTensions {
        /// Which, from 0.
        columns: Vec<usize>,
    },
    /// A word between two figures belongs to either.
    #[error("`{word}` may be the unit of the figure before it or the name of the one behind it")]
    UnitOrName {
        /// The word.
        word: String,
    },
    /// A word before the figures changes and is no known status.
    #[error("`{}` take turns before the figures: they may name several meters", words.join("`, `"))]
    SeveralMeters {
        /// The words.
        words: Vec<String>,
    },
    /// A small whole number before the figures takes turns.
    #[error("column {} counts through a few whole numbers: it may name several channels", column + 1)]
    Channels {
        /// Which, from 0.
        column: usize,
    },
    /// The pattern made of the lines does not read them back.
    #[error("the lines cannot be read back by a pattern of their shape")]
    NotReadBack,
}

fn listed(columns: &[usize]) -> String {
    let numbers: Vec<String> = columns.iter().map(|c| (c + 1).to_string()).collect();
    numbers.join(", ")
}

/// What stands in these lines.
///
/// # Errors
/// Why it cannot be told.
pub fn guess(lines: &[Vec<u8>]) -> Result<Guess, CannotTell> {
    let checksum = Checksum::ALL.iter().copied().find(|kind| {
        lines.len() >= 3
            && lines
                .iter()
                .all(|line| checksum::body(line, *kind).is_some())
    });
    let texts: Vec<String> = lines
        .iter()
        .map(|line| {
            characters(checksum.map_or(line.as_slice(), |kind| {
                checksum::body(line, kind).unwrap_or(line)
            }))
        })
        .collect();
    let shape = shape(&texts)?;
    let mv = tension(&shape)?;
    let temp_c = temperature(&shape, &mv);
    refuse_several(&shape, &mv, temp_c.as_ref().ok())?;
    let pattern = pattern(&shape, &mv, temp_c.as_ref().ok());
    let guess = Guess {
        columns: shape.columns.iter().map(Column::of).collect(),
        mv,
        temp_c,
        pattern,
        checksum,
        over_range: over_range(&texts),
    };
    if reads_back(&guess, &shape, &texts) {
        Ok(guess)
    } else {
        Err(CannotTell::NotReadBack)
    }
}

impl Column {
    fn of(figures: &Figures) -> Self {
        Self {
            example: figures.texts.last().cloned().unwrap_or_default(),
            unit: figures.unit.clone(),
            name: figures.header.clone().or_else(|| figures.label.clone()),
        }
    }
}

/// What the words beside a column say, and how sure that is.
fn said(figures: &Figures) -> Option<(Meaning, Sure, String)> {
    let named = figures
        .header
        .iter()
        .flat_map(|header| header.split(' '))
        .chain(figures.label.as_deref())
        .map(|word| (name(word), word))
        .filter(|(meaning, _)| *meaning != Meaning::Other)
        .collect::<Vec<_>>();
    if let Some((_, word)) = named.iter().find(|(m, _)| *m == Meaning::NotMeasured) {
        return Some((
            Meaning::NotMeasured,
            Sure::Likely,
            format!("`{word}` names it"),
        ));
    }
    if let Some(word) = &figures.unit {
        let strange = figures.header.is_some() || figures.label.is_some();
        let sure = match (named.is_empty(), strange) {
            (true, true) => Sure::Likely,
            _ => Sure::Certain,
        };
        return Some((unit(word), sure, format!("`{word}` stands behind it")));
    }
    // Of two names, `pH mV` say, the one that is a unit counts.
    let unit_like = |(m, _): &&(Meaning, &str)| matches!(m, Meaning::Tension(_) | Meaning::Celsius);
    let (meaning, word) = named.iter().find(unit_like).or(named.first())?;
    Some((*meaning, Sure::Likely, format!("`{word}` names it")))
}

fn within(figures: &Figures, low: f64, high: f64, scale: f64) -> bool {
    figures.values.len() == figures.texts.len()
        && figures
            .values
            .iter()
            .all(|value| (low..=high).contains(&(value * scale)))
}

fn has_fraction(figures: &Figures, mark: Mark) -> bool {
    let mark = match mark {
        Mark::Point => '.',
        Mark::Comma => ',',
    };
    figures.texts.iter().all(|text| text.contains(mark))
}

fn is_signed(figures: &Figures) -> bool {
    figures
        .texts
        .iter()
        .any(|text| text.starts_with(['-', '+']))
}

/// Which column is the electrode's tension. No electrode gives more than 2.5 V; a pH electrode less than 0.6 V.
fn tension(shape: &Shape) -> Result<Told, CannotTell> {
    let (mut told, mut unnamed) = (Vec::new(), Vec::new());
    for (column, figures) in shape.columns.iter().enumerate() {
        match said(figures) {
            Some((Meaning::Tension(scale), sure, why))
                if within(figures, -2500.0, 2500.0, scale) =>
            {
                told.push(Told {
                    column,
                    scale,
                    sure,
                    why,
                });
            }
            // A sign is what few other quantities of water have; a temperature may, near freezing.
            None if figures.unit.is_none()
                && is_signed(figures)
                && has_fraction(figures, shape.mark)
                && within(figures, -1500.0, 1500.0, 1.0)
                && figures.values.iter().any(|value| value.abs() > 15.0) =>
            {
                unnamed.push(Told {
                    column,
                    scale: 1.0,
                    sure: Sure::Perhaps,
                    why: "it has a sign and is of the size".to_owned(),
                });
            }
            Some(_) | None => {}
        }
    }
    // A unit beside the figure outweighs a name alone: `E 12.3; -23.4 mV`.
    let best = told.iter().map(|t| t.sure).max();
    told.retain(|t| Some(t.sure) == best);
    let mut found = if told.is_empty() { unnamed } else { told };
    match found.len() {
        0 => Err(CannotTell::NoTension),
        1 => found.pop().ok_or(CannotTell::NoTension),
        _ => Err(CannotTell::ManyTensions {
            columns: found.iter().map(|t| t.column).collect(),
        }),
    }
}

/// Which column is the temperature.
fn temperature(shape: &Shape, mv: &Told) -> Result<Told, String> {
    let (mut told, mut unnamed, mut other) = (Vec::new(), Vec::new(), None);
    for (column, figures) in shape.columns.iter().enumerate() {
        if column == mv.column {
            continue;
        }
        let one = |sure, why| Told {
            column,
            scale: 1.0,
            sure,
            why,
        };
        match said(figures) {
            Some((Meaning::Celsius, sure, why)) if within(figures, -10.0, 110.0, 1.0) => {
                told.push(one(sure, why));
            }
            Some((Meaning::OtherTemperature, ..)) => other.clone_from(&figures.unit),
            None if figures.unit.is_none()
                && has_fraction(figures, shape.mark)
                && within(figures, 14.01, 45.0, 1.0)
                && steady(figures) =>
            {
                let why = "it is steady and of the size".to_owned();
                unnamed.push(one(Sure::Perhaps, why));
            }
            Some(_) | None => {}
        }
    }
    let best = told.iter().map(|t| t.sure).max();
    told.retain(|t| Some(t.sure) == best);
    let found = if told.is_empty() { unnamed } else { told };
    match (found.as_slice(), other) {
        ([one], _) => Ok(one.clone()),
        ([], Some(unit)) => Err(format!(
            "a temperature in {unit} cannot be used: set the meter to °C"
        )),
        ([], None) => Err("no column can be told to be the temperature".to_owned()),
        (many, _) => {
            let columns: Vec<usize> = many.iter().map(|t| t.column).collect();
            Err(format!(
                "columns {} could each be the temperature",
                listed(&columns)
            ))
        }
    }
}

/// Water does not change by more than a few degrees while one listens.
fn steady(figures: &Figures) -> bool {
    let high = figures.values.iter().copied().fold(f64::MIN, f64::max);
    let low = figures.values.iter().copied().fold(f64::MAX, f64::min);
    high - low < 3.0
}

/// Words that say how a meter is, not which (trade words, no source).
const STATUS: [&str; 34] = [
    "ok", "stable", "stab", "stbl", "unstable", "wait", "warn", "warning", "hold", "held", "atc",
    "mtc", "auto", "man", "manual", "meas", "measure", "ready", "rdy", "busy", "drift", "err",
    "error", "fault", "good", "bad", "run", "live", "valid", "invalid", "s", "m", "w", "r",
];

/// Refuses lines in which several meters may take turns.
fn refuse_several(shape: &Shape, mv: &Told, temp_c: Option<&Told>) -> Result<(), CannotTell> {
    let last = temp_c.map_or(mv.column, |t| t.column.max(mv.column));
    for piece in &shape.pieces {
        match piece {
            Piece::Word(words) if words.len() > 1 => {
                let status = words
                    .iter()
                    .all(|word| STATUS.contains(&word.to_lowercase().as_str()));
                if !status {
                    return Err(CannotTell::SeveralMeters {
                        words: words.clone(),
                    });
                }
            }
            Piece::Column(column) if *column == last => return Ok(()),
            Piece::Column(column) if ![mv.column, last].contains(column) => {
                let Some(figures) = shape.columns.get(*column) else {
                    continue;
                };
                let mut kinds: Vec<&String> = figures.texts.iter().collect();
                kinds.sort();
                kinds.dedup();
                let whole = figures
                    .texts
                    .iter()
                    .all(|text| text.bytes().all(|b| b.is_ascii_digit()) && text.len() <= 2);
                if whole && kinds.len() > 1 && 2 * kinds.len() <= figures.texts.len() {
                    return Err(CannotTell::Channels { column: *column });
                }
            }
            Piece::Column(_)
            | Piece::Time { .. }
            | Piece::Word(_)
            | Piece::Blank
            | Piece::Marks(_) => {}
        }
    }
    Ok(())
}

/// Words that stand alone where a figure could (trade words, no source).
fn over_range(lines: &[String]) -> Vec<String> {
    let mut found: Vec<String> = Vec::new();
    for word in lines
        .iter()
        .flat_map(|line| line.split([' ', ';', ',', '\t', '|', '=', ':']))
    {
        let dashes = word.len() >= 3 && word.bytes().all(|b| b == b'-');
        let known = [
            "OL", "OFL", "OVER", "OVR", "UNDER", "UR", "OR", "Over", "Under",
        ]
        .contains(&word);
        if (dashes || known) && !found.iter().any(|w| w == word) {
            found.push(word.to_owned());
        }
    }
    found
}

/// Whether the pattern gives the very figures of the columns.
fn reads_back(guess: &Guess, shape: &Shape, lines: &[String]) -> bool {
    let Ok(pattern) = regex_lite::Regex::new(&guess.pattern) else {
        return false;
    };
    let found: Vec<_> = lines
        .iter()
        .filter_map(|line| pattern.captures(line))
        .collect();
    let same = |group: &str, told: &Told| {
        let Some(figures) = shape.columns.get(told.column) else {
            return false;
        };
        let read = found
            .iter()
            .filter_map(|found| Some(found.name(group)?.as_str().trim()));
        read.eq(figures.texts.iter().map(|text| text.trim()))
    };
    same("mv", &guess.mv)
        && guess.temp_c.as_ref().is_ok_and(|t| same("temp_c", t)) | guess.temp_c.is_err()
}
