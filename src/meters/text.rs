//! # A text line into the figures of a meter
//!
//! in: a whole line. out: one figure per signal, or the reason why not.
//! Always: 1. A damaged line, a wrong checksum or a figure cut short gives nothing. 2. An over-range word is a figure, never a gap.

use super::checksum;
use super::counters::Reason;
use super::figure::{characters, number};
use super::sample::{Figure, Sample};
use crate::config::site::{Checksum, Meter, OWN_TIME, Signal, TextShape};
use regex_lite::{Captures, Match, Regex, RegexBuilder};

/// Numbers that stand in for an over-range word while the pattern is tried: one of them has the shape that it asks for.
const STAND_INS: [&str; 8] = ["9.9", "+9.9", "9,9", "+9,9", "9", "+9", "99.99", "9999.9"];

/// The compiled pattern of a text meter.
#[derive(Debug, Clone)]
pub struct TextDecoder {
    meter: usize,
    pattern: Regex,
    checksum: Option<Checksum>,
    over_range: Vec<String>,
    signals: Vec<Signal>,
}

/// A pattern that does not compile. The configuration is checked before, so this names a defect.
#[derive(Debug, thiserror::Error)]
#[error("pattern of meter `{meter}` does not compile")]
pub struct PatternError {
    /// The meter.
    pub meter: String,
    /// What is wrong with it.
    pub source: regex_lite::Error,
}

impl TextDecoder {
    /// For a meter with text of this shape; `index` is its place in [`Site::meters`](crate::config::site::Site::meters).
    ///
    /// # Errors
    /// When the pattern does not compile or is larger than 1 MiB compiled.
    pub fn new(index: usize, meter: &Meter, text: &TextShape) -> Result<Self, PatternError> {
        let pattern = RegexBuilder::new(&text.pattern)
            .size_limit(1 << 20)
            .build()
            .map_err(|source| PatternError {
                meter: meter.name.clone(),
                source,
            })?;
        let mut over_range: Vec<String> = text
            .over_range
            .iter()
            .map(|w| w.trim().to_owned())
            .collect();
        over_range.retain(|word| !word.is_empty());
        Ok(Self {
            meter: index,
            pattern,
            checksum: text.checksum,
            over_range,
            signals: meter.signals.clone(),
        })
    }

    /// The meter this is for.
    pub fn meter(&self) -> usize {
        self.meter
    }

    /// The sample in a whole line.
    ///
    /// # Errors
    /// The reason why there is none.
    pub fn decode(&self, line: &[u8]) -> Result<Sample, Reason> {
        if line.contains(&0) {
            return Err(Reason::Damaged);
        }
        let body = match self.checksum {
            Some(kind) => checksum::body(line, kind).ok_or(Reason::Checksum)?,
            None => line,
        };
        let text = characters(body);
        match self.pattern.captures(&text) {
            Some(found) => self.figures(&text, &found, None),
            None => self.over_range(&text).ok_or(Reason::NoMatch)?,
        }
    }

    /// Reads the groups; one that lies on `stand_in` is over range.
    fn figures(
        &self,
        text: &str,
        found: &Captures<'_>,
        stand_ins: Option<&[(usize, usize)]>,
    ) -> Result<Sample, Reason> {
        let mut figures = Vec::with_capacity(self.signals.len());
        for signal in &self.signals {
            figures.push(match found.name(&signal.name) {
                Some(group) => Some(self.figure(text, group, signal, stand_ins.unwrap_or(&[]))?),
                None => None,
            });
        }
        if figures.iter().all(Option::is_none) {
            return Err(Reason::NoMatch);
        }
        Ok(Sample {
            meter: self.meter,
            figures,
            own_time: found
                .name(OWN_TIME)
                .map(|group| group.as_str().trim().to_owned()),
        })
    }

    fn figure(
        &self,
        text: &str,
        group: Match<'_>,
        signal: &Signal,
        stand_ins: &[(usize, usize)],
    ) -> Result<Figure, Reason> {
        let said = group.as_str().trim();
        let stands_in = stand_ins
            .iter()
            .any(|(from, to)| group.start() < *to && *from < group.end());
        if stands_in || self.over_range.iter().any(|word| word == said) {
            return Ok(Figure::OverRange);
        }
        let before = text.get(..group.start()).unwrap_or("");
        let after = text.get(group.end()..).unwrap_or("");
        if cut_short(before, said, after) {
            return Err(Reason::Figure);
        }
        let figure = number(said).ok_or(Reason::Figure)?;
        let signed = said.starts_with(['-', '+']);
        let sign = if signed {
            1.0
        } else {
            sign_apart(before).ok_or(Reason::Figure)?
        };
        let scaled = figure * sign * signal.scale;
        if scaled.is_finite() {
            Ok(Figure::Number(scaled))
        } else {
            Err(Reason::Figure)
        }
    }

    /// The sample of a line in which an over-range word stands where the pattern wants a number.
    fn over_range(&self, text: &str) -> Option<Result<Sample, Reason>> {
        let words = self.words_in(text);
        if words.is_empty() {
            return None;
        }
        STAND_INS.iter().find_map(|stand_in| {
            let mut replaced = String::with_capacity(text.len());
            let (mut places, mut copied) = (Vec::new(), 0);
            for (from, to) in &words {
                replaced.push_str(text.get(copied..*from)?);
                places.push((replaced.len(), replaced.len() + stand_in.len()));
                replaced.push_str(stand_in);
                copied = *to;
            }
            replaced.push_str(text.get(copied..)?);
            let found = self.pattern.captures(&replaced)?;
            Some(self.figures(&replaced, &found, Some(&places)))
        })
    }

    /// Where over-range words stand by themselves; a word of one repeated character takes the whole run.
    fn words_in(&self, text: &str) -> Vec<(usize, usize)> {
        let mut places: Vec<(usize, usize)> = Vec::new();
        let mut at = 0;
        while let Some(rest) = text.get(at..).filter(|rest| !rest.is_empty()) {
            let apart = !text
                .get(..at)
                .unwrap_or("")
                .ends_with(|c: char| c.is_alphanumeric());
            let word = self
                .over_range
                .iter()
                .filter(|w| apart && rest.starts_with(w.as_str()))
                .max_by_key(|w| w.len());
            let length = word.map_or(0, |word| {
                let first = word.chars().next().unwrap_or(' ');
                let run: usize = rest
                    .chars()
                    .take_while(|c| *c == first)
                    .map(char::len_utf8)
                    .sum();
                let length = if word.chars().all(|c| c == first) {
                    run
                } else {
                    word.len()
                };
                let ends = !rest
                    .get(length..)
                    .unwrap_or("")
                    .starts_with(|c: char| c.is_alphanumeric());
                if ends { length } else { 0 }
            });
            if length > 0 {
                places.push((at, at + length));
            }
            at += length.max(rest.chars().next().map_or(1, char::len_utf8));
        }
        places
    }
}

/// Whether the figure goes on outside the group, so that the group holds a part of it only.
fn cut_short(before: &str, said: &str, after: &str) -> bool {
    let digit = |c: char| c.is_ascii_digit();
    let opens = said.starts_with(digit) || said.starts_with(['.', ',']);
    let before_cut = opens
        && (before.ends_with(digit)
            || before.strip_suffix('.').is_some_and(|b| b.ends_with(digit)));
    let after_cut = said.ends_with(digit)
        && (after.starts_with(digit)
            || after
                .strip_prefix('.')
                .is_some_and(|a| a.starts_with(digit)));
    before_cut || after_cut
}

/// The factor of a sign that stands before the group; `None` where a dash may be a sign or a hyphen.
fn sign_apart(before: &str) -> Option<f64> {
    let Some(ahead) = before.trim_end().strip_suffix('-') else {
        return Some(1.0);
    };
    let ahead = ahead.trim_end();
    (ahead.is_empty() || ahead.ends_with([',', ';', ':', '=', '|'])).then_some(-1.0)
}

#[cfg(test)]
mod tests;
