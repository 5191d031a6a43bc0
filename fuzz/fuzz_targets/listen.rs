#![no_main]

#[allow(dead_code, reason = "each target uses one of the checks")]
#[path = "../checks.rs"]
mod checks;

use libfuzzer_sys::fuzz_target;

fuzz_target!(|data: &[u8]| checks::listen(data));
