//! # Which known word a mistyped one most likely was

/// Beyond this length a word was not mistyped, it is something else.
const LONGEST: usize = 64;

/// The known word nearest to `bad`, if one is near enough to be worth asking for.
pub(super) fn nearest<'k>(bad: &str, known: impl IntoIterator<Item = &'k str>) -> Option<&'k str> {
    if bad.len() > LONGEST {
        return None;
    }
    let bad = bad.to_lowercase();
    known
        .into_iter()
        .map(|word| {
            (
                strsim::damerau_levenshtein(&bad, &word.to_lowercase()),
                word,
            )
        })
        .filter(|(distance, word)| *distance <= 1 + word.len() / 4)
        .min()
        .map(|(_, word)| word)
}

/// What to write instead of `bad`: the nearest known word, or all of them.
pub(super) fn instead_of<'k>(bad: &str, known: impl IntoIterator<Item = &'k str>) -> String {
    let known: Vec<&str> = known.into_iter().collect();
    match nearest(bad, known.iter().copied()) {
        Some(word) => format!("did you mean `{word}`?"),
        None => format!("known here: {}", known.join(", ")),
    }
}
