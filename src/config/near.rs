//! # Which known word a mistyped one most likely was

/// Beyond this length a word was not mistyped, it is something else.
const LONGEST: usize = 64;

/// From this length on, the beginning of a known word is taken for the word.
const BEGINNING: usize = 3;

/// The known word nearest to `bad`, if one is near enough to be worth asking for.
pub(super) fn nearest<'k>(bad: &str, known: impl IntoIterator<Item = &'k str>) -> Option<&'k str> {
    if bad.len() > LONGEST {
        return None;
    }
    let bad = bad.to_lowercase();
    known
        .into_iter()
        .map(|word| (distance(&bad, &word.to_lowercase()), word))
        .filter(|(distance, word)| *distance <= 1.max((word.len() + 2) / 4))
        .min()
        .map(|(_, word)| word)
}

fn distance(bad: &str, word: &str) -> usize {
    if bad.len() >= BEGINNING && word.starts_with(bad) {
        1
    } else {
        strsim::damerau_levenshtein(bad, word)
    }
}

/// What to write instead of `bad`: the nearest known word, or all of them.
pub(super) fn instead_of<'k>(bad: &str, known: impl IntoIterator<Item = &'k str>) -> String {
    let known: Vec<&str> = known.into_iter().collect();
    match nearest(bad, known.iter().copied()) {
        Some(word) => format!("did you mean `{word}`?"),
        None if known.is_empty() => "there is none yet".to_owned(),
        None => format!("known here: {}", known.join(", ")),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_slip_is_recognised_and_another_word_is_not() {
        for (bad, known, want) in [
            ("baut", "baud", Some("baud")),
            ("vm", "mv", Some("mv")),
            ("Protocoll", "protocol", Some("protocol")),
            ("modbus", "modbus-rtu", Some("modbus-rtu")),
            ("Mars", "Mahe", None),
            ("colour", "ledger", None),
            ("", "mv", None),
        ] {
            assert_eq!(nearest(bad, [known]), want, "{bad}");
        }
    }
}
