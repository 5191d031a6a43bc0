#![no_main]

#[allow(dead_code, reason = "each target uses one of the checks")]
#[path = "../checks.rs"]
mod checks;

use halfcell::config::site::Site;
use libfuzzer_sys::fuzz_target;
use std::sync::LazyLock;

static SITE: LazyLock<Site> = LazyLock::new(checks::text_site);

fuzz_target!(|data: &[u8]| checks::pattern(data, &SITE));
