//! # A line cut into numbers, times, words and what stands between

/// Which of `.` and `,` is the decimal mark.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Mark {
    /// `.`; a comma separates fields.
    Point,
    /// `,`.
    Comma,
}

/// A piece of a line.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Token<'a> {
    /// A figure with its sign.
    Number(&'a str),
    /// A time of day or a date.
    Time(&'a str),
    /// Letters, and what units are made of.
    Word(&'a str),
    /// Anything else: blanks, separators.
    Gap(&'a str),
}

impl<'a> Token<'a> {
    pub(super) fn text(self) -> &'a str {
        let (Self::Number(text) | Self::Time(text) | Self::Word(text) | Self::Gap(text)) = self;
        text
    }
}

/// The pieces of a line, in order, nothing left out.
pub(super) fn tokens(line: &str, mark: Mark) -> Vec<Token<'_>> {
    let mut tokens = Vec::new();
    let mut at = 0;
    while let Some(rest) = line.get(at..).filter(|rest| !rest.is_empty()) {
        let before = line.get(..at).unwrap_or("");
        let token = time(rest)
            .filter(|_| !before.ends_with(|c: char| c.is_ascii_digit()))
            .map(Token::Time)
            .or_else(|| number(before, rest, mark).map(Token::Number))
            .or_else(|| run(rest, is_of_a_word).map(Token::Word))
            .unwrap_or_else(|| gap(before, rest, mark));
        at += token.text().len();
        tokens.push(token);
    }
    tokens
}

fn is_of_a_word(c: char) -> bool {
    c.is_alphabetic() || matches!(c, '°' | 'µ' | 'º' | '%' | '_')
}

/// The characters from the beginning on that are all so; none if there is none.
fn run(text: &str, so: impl Fn(char) -> bool) -> Option<&str> {
    let end = text.find(|c| !so(c)).unwrap_or(text.len());
    text.get(..end).filter(|run| !run.is_empty())
}

/// Everything up to where something else begins; one character at least.
fn gap<'a>(before: &str, rest: &'a str, mark: Mark) -> Token<'a> {
    let mut end = rest.chars().next().map_or(rest.len(), char::len_utf8);
    while let Some(next) = rest.get(end..).and_then(|tail| tail.chars().next()) {
        let tail = rest.get(end..).unwrap_or("");
        let before_tail = format!("{before}{}", rest.get(..end).unwrap_or(""));
        if is_of_a_word(next) || time(tail).is_some() || number(&before_tail, tail, mark).is_some()
        {
            break;
        }
        end += next.len_utf8();
    }
    Token::Gap(rest.get(..end).unwrap_or(rest))
}

/// A figure that begins here. Its sign is a sign only where no letter or digit touches it from before.
fn number<'a>(before: &str, rest: &'a str, mark: Mark) -> Option<&'a str> {
    let touched = before.ends_with(|c: char| c.is_alphanumeric());
    let sign = usize::from(rest.starts_with(['-', '+']) && !touched);
    let mut end = sign;
    // A sign may stand apart at the beginning of a field only.
    if sign == 1 && rest.get(1..)?.starts_with(' ') {
        let field = before.trim_end();
        if !(field.is_empty() || field.ends_with([',', ';', ':', '=', '|'])) {
            return None;
        }
        end += run(rest.get(1..)?, |c| c == ' ')?.len();
    }
    let whole = digits(rest.get(end..)?);
    end += whole;
    let decimal = match mark {
        Mark::Point => '.',
        Mark::Comma => ',',
    };
    let fraction = rest.get(end..)?.strip_prefix(decimal).map_or(0, digits);
    if fraction > 0 {
        end += 1 + fraction;
    }
    if whole + fraction == 0 {
        return None;
    }
    let exponent = rest.get(end..)?;
    if let Some(power) = exponent.strip_prefix(['e', 'E']) {
        let signed = power.strip_prefix(['-', '+']).unwrap_or(power);
        let n = digits(signed);
        let ends = !signed.get(n..)?.starts_with(|c: char| c.is_alphanumeric());
        if n > 0 && n <= 2 && ends {
            end += 1 + (power.len() - signed.len()) + n;
        }
    }
    rest.get(..end)
}

fn digits(text: &str) -> usize {
    text.bytes().take_while(u8::is_ascii_digit).count()
}

/// A date (`2026-03-02`, `02.03.26`, `3/2/2026`) or a time of day (`9:14`, `09:14:05.5`) that begins here.
fn time(rest: &str) -> Option<&str> {
    let first = digits(rest);
    if !(1..=4).contains(&first) {
        return None;
    }
    let joint = rest.get(first..)?.chars().next()?;
    if !matches!(joint, ':' | '-' | '/' | '.') {
        return None;
    }
    let second = digits(rest.get(first + 1..)?);
    let mut end = first + 1 + second;
    if !(1..=2).contains(&second) {
        return None;
    }
    let third = rest.get(end..)?.strip_prefix(joint).map_or(0, digits);
    if third > 0 {
        end += 1 + third;
    } else if joint != ':' || second != 2 || first > 2 {
        return None;
    }
    if joint == ':' {
        let fraction = rest.get(end..)?.strip_prefix(['.', ',']).map_or(0, digits);
        // `09:14:05,25.1` would be a field, `09:14:05,5;` a fraction.
        let more = rest
            .get(end + 1 + fraction..)
            .is_some_and(|rest| rest.starts_with(['.', ',']));
        if third > 0 && fraction > 0 && !more {
            end += 1 + fraction;
        }
    }
    rest.get(..end)
}

#[cfg(test)]
mod tests {
    use super::*;
    use Token::{Gap, Number, Time, Word};
    use proptest::prelude::*;

    #[test]
    fn lines_fall_into_their_pieces() {
        assert_eq!(
            tokens("pH 7.02 -23.4mV  18.2°C", Mark::Point),
            [
                Word("pH"),
                Gap(" "),
                Number("7.02"),
                Gap(" "),
                Number("-23.4"),
                Word("mV"),
                Gap("  "),
                Number("18.2"),
                Word("°C")
            ]
        );
        assert_eq!(
            tokens("02.03.2026 09:14:05;-23,4;18,2", Mark::Comma),
            [
                Time("02.03.2026"),
                Gap(" "),
                Time("09:14:05"),
                Gap(";"),
                Number("-23,4"),
                Gap(";"),
                Number("18,2")
            ]
        );
        assert_eq!(
            tokens("CH-1,- 23.4,+1.5E-3", Mark::Point),
            [
                Word("CH"),
                Gap("-"),
                Number("1"),
                Gap(","),
                Number("- 23.4"),
                Gap(","),
                Number("+1.5E-3")
            ]
        );
    }

    proptest! {
        #[test]
        fn nothing_of_a_line_is_left_out(line in "[-+.,:;=/ eE0-9A-Cµ°|]{0,40}", comma in any::<bool>()) {
            let mark = if comma { Mark::Comma } else { Mark::Point };
            let text: String = tokens(&line, mark).into_iter().map(Token::text).collect();
            prop_assert_eq!(text, line);
        }
    }
}
