//! # What the lines of a meter have in common

use super::super::figure::number;
use super::beside::assign;
use super::guess::CannotTell;
use super::token::{Mark, Token, tokens};
use std::collections::BTreeMap;

/// Fewest lines of one shape that a guess may stand on.
const FEWEST: usize = 3;

/// A line's fixed and changing parts, in order.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Piece {
    /// A figure: index into [`Shape::columns`].
    Column(usize),
    /// A date or a time of day.
    Time {
        /// Whether it is a time of day.
        of_day: bool,
    },
    /// A word; more than one where it changes.
    Word(Vec<String>),
    /// Blanks only.
    Blank,
    /// Marks, with blanks around them or not.
    Marks(String),
}

/// One figure of every line.
#[derive(Debug, Clone, PartialEq, Default)]
pub(super) struct Figures {
    /// As printed.
    pub(super) texts: Vec<String>,
    /// As numbers.
    pub(super) values: Vec<f64>,
    /// The word behind it.
    pub(super) unit: Option<String>,
    /// The word before it.
    pub(super) label: Option<String>,
    /// The word above it.
    pub(super) header: Option<String>,
}

/// The shape most lines have.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Shape {
    pub(super) mark: Mark,
    pub(super) pieces: Vec<Piece>,
    pub(super) columns: Vec<Figures>,
}

/// The shape of most of these lines.
pub(super) fn shape(lines: &[String]) -> Result<Shape, CannotTell> {
    let mark = mark(lines)?;
    let cut: Vec<Vec<Token<'_>>> = lines.iter().map(|line| tokens(line.trim(), mark)).collect();
    let with_figures =
        |tokens: &&Vec<Token<'_>>| tokens.iter().any(|token| matches!(token, Token::Number(_)));
    let mut groups: BTreeMap<String, Vec<&Vec<Token<'_>>>> = BTreeMap::new();
    for tokens in cut.iter().filter(with_figures) {
        groups.entry(key(tokens)).or_default().push(tokens);
    }
    let n: usize = groups.values().map(Vec::len).sum();
    let largest = groups.into_values().max_by_key(Vec::len);
    let Some(group) = largest else {
        return Err(CannotTell::NoFigures);
    };
    if group.len() < FEWEST || 2 * group.len() <= n {
        return Err(CannotTell::NoShape {
            n_alike: group.len(),
            n_lines: n,
        });
    }
    let (pieces, mut columns) = merged(&group);
    assign(&pieces, &mut columns)?;
    headers(&cut, &mut columns, &pieces);
    Ok(Shape {
        mark,
        pieces,
        columns,
    })
}

/// Whether `,` is the decimal mark: where it stands between digits and no point does, and it is not all that parts the figures.
fn mark(lines: &[String]) -> Result<Mark, CannotTell> {
    let (mut points, mut commas, mut parted) = (0, 0, 0);
    for line in lines {
        let tokens = tokens(line, Mark::Point);
        let rest: String = tokens
            .iter()
            .map(|token| match token {
                Token::Time(_) => "@",
                other => other.text(),
            })
            .collect();
        let between = |mark: char| {
            rest.match_indices(mark)
                .filter(|(at, _)| {
                    let digit = |text: Option<char>| text.is_some_and(|c| c.is_ascii_digit());
                    digit(rest.get(..*at).and_then(|t| t.chars().next_back()))
                        && digit(rest.get(at + 1..).and_then(|t| t.chars().next()))
                })
                .count()
        };
        let n_commas = between(',');
        points += between('.');
        commas += n_commas;
        let apart = rest.trim().contains([';', '\t', ' ', '|', ':', '='])
            || tokens.iter().any(|token| matches!(token, Token::Word(_)));
        parted += if apart { n_commas } else { 0 };
    }
    match (points, commas) {
        (_, 0) | (1.., _) => Ok(Mark::Point),
        _ if parted == commas => Ok(Mark::Comma),
        _ => Err(CannotTell::CommaOrSeparator),
    }
}

/// Equal for lines that differ in their figures and words only.
fn key(tokens: &[Token<'_>]) -> String {
    let of = |token: &Token<'_>| match token {
        Token::Number(_) => "#".to_owned(),
        Token::Time(text) => format!("@{}", u8::from(text.contains(':'))),
        Token::Word(_) => "w".to_owned(),
        Token::Gap(gap) if gap.trim().is_empty() => " ".to_owned(),
        Token::Gap(gap) => gap.trim().to_owned(),
    };
    tokens.iter().map(of).collect()
}

/// The common shape of lines of one key.
fn merged(group: &[&Vec<Token<'_>>]) -> (Vec<Piece>, Vec<Figures>) {
    let (mut pieces, mut columns) = (Vec::new(), Vec::<Figures>::new());
    let n_tokens = group.first().map_or(0, |tokens| tokens.len());
    for at in 0..n_tokens {
        let (mut words, mut figures) = (Vec::<String>::new(), Figures::default());
        let mut piece = None;
        for token in group.iter().filter_map(|tokens| tokens.get(at)) {
            match token {
                Token::Number(text) => {
                    figures.texts.push((*text).to_owned());
                    figures.values.extend(number(text));
                }
                Token::Time(text) => {
                    piece = Some(Piece::Time {
                        of_day: text.contains(':'),
                    });
                }
                Token::Word(word) if !words.iter().any(|known| known == word) => {
                    words.push((*word).to_owned());
                }
                Token::Word(_) => {}
                Token::Gap(gap) if gap.trim().is_empty() => piece = Some(Piece::Blank),
                Token::Gap(gap) => piece = Some(Piece::Marks(gap.trim().to_owned())),
            }
        }
        if !figures.texts.is_empty() {
            piece = Some(Piece::Column(columns.len()));
            columns.push(figures);
        } else if !words.is_empty() {
            piece = Some(Piece::Word(words));
        }
        pieces.extend(piece);
    }
    (pieces, columns)
}

/// Names above the columns, from a line without figures that has as many fields.
fn headers(cut: &[Vec<Token<'_>>], columns: &mut [Figures], pieces: &[Piece]) {
    let n_times = pieces
        .iter()
        .filter(|piece| matches!(piece, Piece::Time { .. }))
        .count();
    if columns.is_empty() || pieces.iter().any(|piece| matches!(piece, Piece::Word(_))) {
        return;
    }
    let words_only = |tokens: &&Vec<Token<'_>>| {
        let other = |token: &Token<'_>| matches!(token, Token::Number(_) | Token::Time(_));
        !tokens.iter().any(other)
    };
    for tokens in cut.iter().filter(words_only) {
        // `mV (raw)` is one field: only separators part names; where there are none, blanks do.
        let line: String = tokens.iter().map(|token| token.text()).collect();
        let separator = [';', '\t', '|', ',']
            .into_iter()
            .find(|s| line.contains(*s));
        let fields: Vec<&str> = match separator {
            Some(separator) => line.split(separator).map(str::trim).collect(),
            None => line.split_whitespace().collect(),
        };
        // Date and time may share a name or have one each; they come first or not at all.
        let n_first = fields.len().checked_sub(columns.len());
        let fits = n_first.is_some_and(|n| n == n_times || n == usize::from(n_times > 0));
        let times_first = pieces
            .iter()
            .position(|piece| matches!(piece, Piece::Column(_)))
            .is_some_and(|first| {
                let later = pieces.get(first..).unwrap_or(&[]);
                !later
                    .iter()
                    .any(|piece| matches!(piece, Piece::Time { .. }))
            });
        if fits && times_first {
            let names = fields.iter().skip(n_first.unwrap_or(0));
            for (column, name) in columns.iter_mut().zip(names) {
                let word = name.split(|c: char| !(c.is_alphanumeric() || c == '°' || c == '_'));
                let words: Vec<&str> = word.filter(|w| !w.is_empty()).collect();
                column.header = Some(words.join(" "));
            }
        }
    }
}
