//! Text lines parsed per second on one core, as a multiple of what 64 lines at 115 200 baud can carry.
//!
//! `cargo bench --bench lines`

#![expect(
    clippy::unwrap_used,
    clippy::disallowed_methods,
    clippy::print_stdout,
    reason = "a bench measures time, prints it and may stop"
)]

use halfcell::config;
use halfcell::meters::machine::LineMachine;
use std::hint::black_box;
use std::time::{Duration, Instant};

const SITE: &str = r#"
[site]
name = "bench"
timezone = "UTC"
ledger = "/tmp/bench.db"

[[line]]
name = "line"
device = "/dev/ttyUSB0"
protocol = "stream"

[[meter]]
name = "meter"
line = "line"
pattern = '(?<mv>[-+]?\d+[.,]\d+)\s*mV\s+(?<temp_c>[-+]?\d+[.,]\d+)'
over_range = ["----", "OL"]

[[point]]
tag = "P"
quantity = "ph"
signal = "meter.mv"
temperature = "meter.temp_c"
every = "1s"
tolerance = 0.1
"#;

/// Lines in one go.
const LINES: usize = 2_000;

/// A frame of 8N1 takes ten bits.
const BYTES_PER_SECOND: f64 = 64.0 * 115_200.0 / 10.0;

fn main() {
    let site = config::load(SITE).unwrap();
    let said: Vec<u8> = (0..LINES)
        .flat_map(|n| format!("{}.{} mV  {}.5 C\r\n", n % 400, n % 10, n % 40).into_bytes())
        .collect();
    let mut machine = LineMachine::new(&site, 0, Instant::now()).unwrap();
    // As reads of a busy port come.
    let mut once = || {
        let now = Instant::now();
        let taken = said
            .chunks(256)
            .map(|piece| machine.on_bytes(piece, now).len());
        assert_eq!(black_box(taken.sum::<usize>()), LINES);
    };
    let begun = Instant::now();
    let mut rounds = 0;
    while begun.elapsed() < Duration::from_secs(3) {
        once();
        rounds += 1;
    }
    let seconds = begun.elapsed().as_secs_f64();
    let bytes = f64::from(rounds) * f64::from(u32::try_from(said.len()).unwrap()) / seconds;
    let lines = f64::from(rounds) * f64::from(u32::try_from(LINES).unwrap()) / seconds;
    println!(
        "{:.0} lines/s, {:.1} MB/s on one core: {:.0} times what 64 lines at 115 200 baud can carry ({:.0} kB/s)",
        lines,
        bytes / 1e6,
        bytes / BYTES_PER_SECOND,
        BYTES_PER_SECOND / 1e3
    );
}
