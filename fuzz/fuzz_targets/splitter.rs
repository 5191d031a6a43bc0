#![no_main]

#[allow(dead_code, reason = "each target uses one of the checks")]
#[path = "../checks.rs"]
mod checks;

use libfuzzer_sys::fuzz_target;
use std::sync::LazyLock;
use std::time::Instant;

static NOW: LazyLock<Instant> = LazyLock::new(Instant::now);

fuzz_target!(|data: &[u8]| checks::splitter(data, *NOW));
