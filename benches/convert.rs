//! Rows per second of the conversion with uncertainty over a slice, beside a bare loop of the same arithmetic over plain figures.
//!
//! `cargo bench --bench convert`

#![expect(
    clippy::unwrap_used,
    clippy::disallowed_methods,
    clippy::print_stdout,
    reason = "a bench measures time, prints it and may stop"
)]

use halfcell::electrode::convert::{Converted, Inputs, to_ph, to_ph_slice};
use halfcell::electrode::history::ElectrodeLine;
use halfcell::electrode::slope::SLOPE_PER_KELVIN;
use halfcell::electrode::units::{Celsius, Millivolts};
use std::hint::black_box;
use std::time::Instant;

/// Rows at a time: 64 KiB in, 64 KiB out, so that the arithmetic is measured and not the memory.
const ROWS: usize = 4_096;
const ROUNDS: u32 = 20_000;

fn main() {
    let line = ElectrodeLine {
        offset_mv: -4.2,
        slope: 0.973,
        var_offset_mv2: 0.12,
        var_slope: 6e-6,
        cov_mv: -3e-4,
    };
    let inputs = Inputs {
        u_mv: 0.3,
        u_temp_c: 0.2,
        u_junction: 0.01,
    };
    let mv_figures: Vec<f64> = (0..ROWS)
        .map(|i| f64::from(u16::try_from(i % 600).unwrap()) - 300.0)
        .collect();
    let c_figures: Vec<f64> = (0..ROWS)
        .map(|i| f64::from(u16::try_from(i % 35).unwrap()) + 1.5)
        .collect();
    let mv: Vec<Millivolts> = mv_figures
        .iter()
        .map(|f| Millivolts::new(*f).unwrap())
        .collect();
    let t: Vec<Celsius> = c_figures
        .iter()
        .map(|f| Celsius::new(*f).unwrap())
        .collect();
    let mut out = vec![Converted { value: 0.0, u: 0.0 }; ROWS];

    let single = rate(|| {
        for ((out, mv), t) in out.iter_mut().zip(&mv).zip(&t) {
            *out = to_ph(*mv, *t, &line, 7.0, &inputs).unwrap();
        }
        black_box(&mut out);
    });
    let ours = rate(|| {
        to_ph_slice(
            black_box(&mv),
            black_box(&t),
            &line,
            (7.0, &inputs),
            &mut out,
        )
        .unwrap();
        black_box(&mut out);
    });
    let (mut ph, mut u) = (vec![0.0; ROWS], vec![0.0; ROWS]);
    let bare = rate(|| {
        bare_loop(
            black_box(&mv_figures),
            black_box(&c_figures),
            (&line, &inputs),
            &mut ph,
            &mut u,
        );
        black_box((&mut ph, &mut u));
    });
    println!("slice, checked, with u   {:7.1} million rows/s", ours / 1e6);
    println!("bare loop, same sums     {:7.1} million rows/s", bare / 1e6);
    println!("ratio ours : bare        {:7.2}", ours / bare);
    println!(
        "one reading at a time    {:7.1} million rows/s",
        single / 1e6
    );
}

/// The arithmetic of the slice conversion over plain figures: no check, no quantity.
fn bare_loop(
    mv: &[f64],
    c: &[f64],
    (line, inputs): (&ElectrodeLine, &Inputs),
    ph: &mut [f64],
    u: &mut [f64],
) {
    let per_k = 1.0 / (line.slope * SLOPE_PER_KELVIN);
    let var_e = inputs.u_mv * inputs.u_mv + line.var_offset_mv2;
    let rel_s = line.var_slope / (line.slope * line.slope);
    let cov = 2.0 * line.cov_mv / line.slope;
    let var_t = inputs.u_temp_c * inputs.u_temp_c;
    let var_j = inputs.u_junction * inputs.u_junction;
    for (((mv, c), ph), u) in mv.iter().zip(c).zip(ph).zip(u) {
        let per_t = 1.0 / (c + 273.15);
        let g = per_k * per_t;
        let d = (mv - line.offset_mv) * g;
        *ph = 7.0 - d;
        *u = 2.0
            * (g * (g * var_e + d * cov) + d * d * (rel_s + per_t * per_t * var_t) + var_j).sqrt();
    }
}

/// Rows per second: the best of five runs, so that a busy neighbour does not count.
fn rate(mut pass: impl FnMut()) -> f64 {
    let rows = f64::from(ROUNDS) * f64::from(u32::try_from(ROWS).unwrap());
    (0..5)
        .map(|_| {
            let start = Instant::now();
            for _ in 0..ROUNDS {
                pass();
            }
            rows / start.elapsed().as_secs_f64()
        })
        .fold(0.0, f64::max)
}
