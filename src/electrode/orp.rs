//! # ORP: reference electrodes and check solutions by temperature, Eh and rH
//!
//! in: a reference electrode or check solution and its temperature. out: its potential with u; from an ORP its Eh, from Eh and pH the rH.
//! Not here: the offset of a probe (`fit`), the value against its own reference (`convert`).

mod table;

use super::buffers::{BufferKind, buffer_at};
use super::convert::Converted;
use super::named::named;
use super::slope::{FARADAY, GAS_CONSTANT, nernst_slope};
use super::standard::{OutsideTable, Row, StandardValue, interpolate};
use super::units::Celsius;

named! {
    /// The reference electrode inside a probe: silver/silver chloride or calomel, by its potassium chloride filling.
    ReferenceElectrode, "reference electrode" {
        /// Ag/AgCl, 0.1 mol/L.
        AgCl0_1M = "agcl-0.1m",
        /// Ag/AgCl, 1 mol/L.
        AgCl1M = "agcl-1m",
        /// Ag/AgCl, 3 mol/L.
        AgCl3M = "agcl-3m",
        /// Ag/AgCl, 3.3 mol/L.
        AgCl3_3M = "agcl-3.3m",
        /// Ag/AgCl, 3.5 mol/L.
        AgCl3_5M = "agcl-3.5m",
        /// Ag/AgCl, 4 mol/L.
        AgCl4M = "agcl-4m",
        /// Ag/AgCl, saturated.
        AgClSaturated = "agcl-sat",
        /// Ag/AgCl, filling not known: taken as 3.5 mol/L with u of 5 mV (ours).
        AgClUnknown = "agcl-unknown",
        /// Calomel, 0.1 mol/L.
        Calomel0_1M = "calomel-0.1m",
        /// Calomel, 1 mol/L.
        Calomel1M = "calomel-1m",
        /// Calomel, 3.5 mol/L.
        Calomel3_5M = "calomel-3.5m",
        /// Calomel, saturated.
        CalomelSaturated = "calomel-sat",
    }
}

named! {
    /// A solution of known redox potential.
    CheckSolution, "check solution" {
        /// Potassium ferrocyanide and ferricyanide in potassium chloride.
        Zobell = "zobell",
        /// Ferrous and ferric ammonium sulfate in sulfuric acid.
        Light = "light",
        /// Quinhydrone in pH 4 buffer.
        Quinhydrone4 = "quinhydrone-4",
        /// Quinhydrone in pH 7 buffer.
        Quinhydrone7 = "quinhydrone-7",
    }
}

/// Potential of a reference electrode against the standard hydrogen electrode at temperature `t`, mV, liquid junction included.
///
/// - **Range** silver 0–80 °C (0.1 mol/L 0–60 °C), calomel 10–40 °C. `t` is the temperature of the reference element, which lags the
///   liquid's by minutes.
/// - **Result** mV, standard uncertainty (k = 1) 1 to 6 mV, and mV/°C.
/// - **Source** `orp/table.rs`. 4 mol/L: 200 mV at 25 °C (Standard Methods 2580 through its figures for Light's solution), moving with
///   temperature as 3.5 mol/L does (ours). 0.1 mol/L: 289.5 mV at 25 °C (Reference Electrodes in Metal Corrosion, Int. J. Corrosion 2010,
///   Table 2, junction not included), moving as `E0(T) − (RT/F)·ln a`, E0 by Bates & Bower, J. Res. NBS 53 (1954) 283 (from memory),
///   a = 0.1 × 0.769.
///
/// # Errors
/// [`OutsideTable`] outside the range.
pub fn reference_at(r: ReferenceElectrode, t: Celsius) -> Result<StandardValue, OutsideTable> {
    let shifted = |by_mv: f64, u: f64| {
        interpolate(table::AGCL_3_5M, r.name(), t).map(|at| StandardValue {
            value: at.value + by_mv,
            u: at.u.hypot(u),
            ..at
        })
    };
    match r {
        ReferenceElectrode::AgCl0_1M => agcl_0_1m(t),
        // 200 mV at 25 °C, where 3.5 mol/L has 205 mV.
        ReferenceElectrode::AgCl4M => shifted(-5.0, 2.0),
        ReferenceElectrode::AgClUnknown => shifted(0.0, 5.0),
        ReferenceElectrode::AgCl1M => interpolate(table::AGCL_1M, r.name(), t),
        ReferenceElectrode::AgCl3M => interpolate(table::AGCL_3M, r.name(), t),
        ReferenceElectrode::AgCl3_3M => interpolate(table::AGCL_3_3M, r.name(), t),
        ReferenceElectrode::AgCl3_5M => interpolate(table::AGCL_3_5M, r.name(), t),
        ReferenceElectrode::AgClSaturated => interpolate(table::AGCL_SATURATED, r.name(), t),
        ReferenceElectrode::Calomel0_1M => interpolate(table::CALOMEL_0_1M, r.name(), t),
        ReferenceElectrode::Calomel1M => interpolate(table::CALOMEL_1M, r.name(), t),
        ReferenceElectrode::Calomel3_5M => interpolate(table::CALOMEL_3_5M, r.name(), t),
        ReferenceElectrode::CalomelSaturated => interpolate(table::CALOMEL_SATURATED, r.name(), t),
    }
}

/// Standard potential of the silver/silver chloride electrode, mV, and its change per °C.
///
/// `E0 = 236.55 − 0.48564·t − 3.4205e-3·t² + 5.869e-6·t³`, t in °C, 0–95 °C: Bates & Bower, J. Res. NBS 53 (1954) 283 (from memory).
pub fn agcl_standard_potential(t: Celsius) -> (f64, f64) {
    let c = t.c();
    (
        236.55 + c * (-0.485_64 + c * (-3.4205e-3 + c * 5.869e-6)),
        -0.485_64 + c * (-2.0 * 3.4205e-3 + c * 3.0 * 5.869e-6),
    )
}

fn agcl_0_1m(t: Celsius) -> Result<StandardValue, OutsideTable> {
    // ln(0.1 × 0.769), the mean activity of 0.1 mol/kg potassium chloride; within 0.2 mV over the range (computed).
    const LN_A: f64 = -2.565_25;
    inside(ReferenceElectrode::AgCl0_1M.name(), t, 0.0, 60.0)?;
    let rf = 1000.0 * GAS_CONSTANT / FARADAY;
    let (e0, e0_per_c) = agcl_standard_potential(t);
    let (e0_25, _) = agcl_standard_potential(Celsius::STANDARD);
    Ok(StandardValue {
        value: 289.5 + (e0 - e0_25) - rf * LN_A * (t.c() - Celsius::STANDARD.c()),
        u: 3.0,
        per_c: e0_per_c - rf * LN_A,
    })
}

/// Potential of a check solution at temperature `t` against reference electrode `r` at the same temperature, mV.
///
/// | solution | against SHE | range | u (k = 1) | source |
/// |---|---|---|---|---|
/// | `zobell` | 430.28 − 2.5157·(t−25) − 3.7979e-3·(t−25)² | 8–85 °C | 1.3 mV + 0.15 mV per °C from 25 °C | Nordstrom, Geochim. Cosmochim. Acta 41 (1977) 1835 (from memory); u: what Standard Methods 2580 differs by, as a rectangle (ours) |
/// | `light` | 675 | 23–27 °C | 3 mV | Light (1972) through Standard Methods 2580; its temperature coefficient is not verified |
/// | `quinhydrone-4` | 699.2 − 0.74·(t−25) − k(T)·pH(phthalate, T) | 10–40 °C | 2 mV | Biilmann, Clark (from memory); within 0.5 mV of ASTM D1498 at 20, 25, 30 °C |
/// | `quinhydrone-7` | 295, 285, 275 at 20, 25, 30 °C | 20–30 °C | 3 mV | ASTM D1498 (from memory), a 7.00 buffer; 6.865 phosphate gives 8 mV more: enter it as a lot with its own values |
///
/// u combines the solution's with the reference electrode's.
///
/// # Errors
/// [`OutsideTable`] when the solution or the reference electrode has no value at `t`.
pub fn check_solution_at(
    s: CheckSolution,
    r: ReferenceElectrode,
    t: Celsius,
) -> Result<StandardValue, OutsideTable> {
    let solution = check_solution_vs_she(s, t)?;
    let reference = reference_at(r, t)?;
    Ok(StandardValue {
        value: solution.value - reference.value,
        u: solution.u.hypot(reference.u),
        per_c: solution.per_c - reference.per_c,
    })
}

/// Potential of a check solution against the standard hydrogen electrode, mV; table, range and sources at [`check_solution_at`].
///
/// # Errors
/// [`OutsideTable`] outside the range.
pub fn check_solution_vs_she(s: CheckSolution, t: Celsius) -> Result<StandardValue, OutsideTable> {
    let from_25 = t.c() - Celsius::STANDARD.c();
    match s {
        CheckSolution::Zobell => {
            inside(s.name(), t, 8.0, 85.0)?;
            Ok(StandardValue {
                value: 430.28 - 2.5157 * from_25 - 3.7979e-3 * from_25 * from_25,
                u: 1.3 + 0.15 * from_25.abs(),
                per_c: -2.5157 - 2.0 * 3.7979e-3 * from_25,
            })
        }
        CheckSolution::Light => {
            inside(s.name(), t, 23.0, 27.0)?;
            Ok(StandardValue {
                value: 675.0,
                u: 3.0,
                per_c: 0.0,
            })
        }
        CheckSolution::Quinhydrone4 => {
            inside(s.name(), t, 10.0, 40.0)?;
            let buffer = buffer_at(BufferKind::Phthalate, t)?;
            let k = nernst_slope(t).mv_per_ph();
            Ok(StandardValue {
                value: 699.2 - 0.74 * from_25 - k * buffer.value,
                u: 2.0,
                per_c: -0.74 - k * (buffer.value / t.to_kelvin().k() + buffer.per_c),
            })
        }
        CheckSolution::Quinhydrone7 => {
            const ROWS: &[Row] = &[
                Row(20.0, 295.0, 3.0),
                Row(25.0, 285.0, 3.0),
                Row(30.0, 275.0, 3.0),
            ];
            interpolate(ROWS, s.name(), t)
        }
    }
}

fn inside(name: &str, t: Celsius, lowest_c: f64, highest_c: f64) -> Result<(), OutsideTable> {
    if t.c() >= lowest_c && t.c() <= highest_c {
        Ok(())
    } else {
        Err(OutsideTable {
            name: name.to_owned(),
            temp: t,
            lowest_c,
            highest_c,
        })
    }
}

/// Eh, the potential against the standard hydrogen electrode: `Eh = ORP + E_ref(T)`, mV, u at k = 2.
///
/// `orp` is the value against the probe's own reference `r`, `t` the temperature of the reference element and `u_temp_c` its standard
/// uncertainty. Source: Standard Methods 2580, ASTM D1498 (from memory).
///
/// # Errors
/// [`OutsideTable`] when the reference has no value at `t`.
pub fn eh(
    orp: Converted,
    r: ReferenceElectrode,
    t: Celsius,
    u_temp_c: f64,
) -> Result<Converted, OutsideTable> {
    let reference = reference_at(r, t)?;
    Ok(Converted {
        value: orp.value + reference.value,
        u: orp
            .u
            .hypot(2.0 * reference.u)
            .hypot(2.0 * reference.per_c * u_temp_c),
    })
}

/// rH of a liquid from its pH and its Eh in mV, both at temperature `t`: `rH = 2·pH + 2·Eh/k(T)`; 0 is water under hydrogen of 1 atm,
/// 41.55 under oxygen at 25 °C. u at k = 2 from both, taken as independent. Source: Clark (1923), from memory.
pub fn rh(ph: Converted, eh: Converted, t: Celsius) -> Converted {
    let k = nernst_slope(t).mv_per_ph();
    Converted {
        value: 2.0 * ph.value + 2.0 * eh.value / k,
        u: (2.0 * ph.u).hypot(2.0 * eh.u / k),
    }
}
