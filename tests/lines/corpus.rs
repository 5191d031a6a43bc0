//! The fuzzers' corpus, replayed: whatever once reached a new path of a decoder still does no harm.

use halfcell::daemon::clock::instant;
use std::fs;
use std::path::Path;

#[expect(
    clippy::expect_used,
    clippy::panic,
    unreachable_pub,
    reason = "a check that fails must stop the fuzzer too"
)]
#[path = "../../fuzz/checks.rs"]
mod checks;

/// Gives every kept input of a target to its check.
fn replay(target: &str, check: impl Fn(&[u8])) {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("fuzz/corpus")
        .join(target);
    let mut n = 0;
    for entry in fs::read_dir(folder).unwrap() {
        check(&fs::read(entry.unwrap().path()).unwrap());
        n += 1;
    }
    assert!(n >= 3, "only {n} inputs for {target}");
}

#[test]
fn what_the_fuzzers_found_their_way_with_does_no_harm() {
    let (now, site) = (instant(), checks::text_site());
    replay("splitter", |data| checks::splitter(data, now));
    replay("pattern", |data| checks::pattern(data, &site));
    replay("modbus", checks::modbus);
    replay("listen", checks::listen);
}
