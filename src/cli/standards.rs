//! # From what was typed after `--buffer` to a settled reading in a known standard
//!
//! in: kind, bare value or lot as typed, mV, °C; the probe; the lots. out: the standard's value at that temperature with its u.
//! Always: a kind, a lot or a temperature that is not known is refused, never guessed; an expired lot needs an override.

use super::failure::Failure;
use super::figures;
use super::typed::{self, TypedBuffer};
use crate::config::site::Site;
use crate::config::time;
use crate::electrode::buffers::{BufferKind, buffer_at};
use crate::electrode::history::{Book, Lot, ProbeKind, ProbeSpec, StandardReading};
use crate::electrode::orp::{CheckSolution, ReferenceElectrode, check_solution_at};
use crate::electrode::standard::StandardValue;
use crate::electrode::units::{Celsius, Timestamp};

/// Standard uncertainty of a buffer known only by the pH on its label (common practice, no source).
const U_BARE_PH: f64 = 0.02;
/// Likewise of a check solution known only by its mV (common practice, no source).
const U_BARE_MV: f64 = 5.0;
/// Standard uncertainty of a settled reading, mV (common practice, no source).
const U_SETTLED_MV: f64 = 0.2;
/// Standard uncertainty of a buffer's temperature, °C (common practice, no source).
const U_BUFFER_TEMP_C: f64 = 0.3;
/// A certificate farther than this from its kind's table belongs to another kind, pH.
const OTHER_KIND_PH: f64 = 0.5;

/// What a buffer is judged by: the probe, when, and whether an expired lot may pass.
#[derive(Debug, Clone, Copy)]
pub(super) struct Asked<'a> {
    /// The site, for its zone.
    pub(super) site: &'a Site,
    /// What is known of lots.
    pub(super) book: &'a Book,
    /// The probe that was in the buffer.
    pub(super) probe: &'a ProbeSpec,
    /// When.
    pub(super) at: Timestamp,
    /// What becomes of an expired lot.
    pub(super) expired: Expired,
}

/// What becomes of an expired lot.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Expired {
    /// Refused.
    Refused,
    /// Refused, but an override with a stated reason would let it pass.
    WantsOverride,
    /// Passes: it was overridden.
    Overridden,
}

/// What a name stands for.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Named {
    Kind(BufferKind),
    Solution(CheckSolution),
    Bare(f64),
    Word,
}

impl Named {
    fn of(name: &str) -> Self {
        let kind = name.parse().map(Self::Kind);
        kind.or_else(|_| name.parse().map(Self::Solution))
            .or_else(|_| typed::figure(name).map(Self::Bare))
            .unwrap_or(Self::Word)
    }
}

/// The readings as typed, each with its standard's value.
pub(super) fn readings(
    asked: Asked<'_>,
    typed: &[TypedBuffer],
) -> Result<Vec<StandardReading>, Failure> {
    typed.iter().map(|buffer| reading(asked, buffer)).collect()
}

fn reading(asked: Asked<'_>, buffer: &TypedBuffer) -> Result<StandardReading, Failure> {
    let t = Celsius::new(buffer.temp_c).map_err(|error| Failure::request(error.to_string()))?;
    let lot = lot(asked, buffer)?;
    // A lot's number alone stands for what is in the bottle.
    let name = match lot {
        Some(lot) if Named::of(&buffer.name) == Named::Word && buffer.lot.is_none() => {
            lot.kind.as_str()
        }
        _ => buffer.name.as_str(),
    };
    fits(asked.probe, name)?;
    let standard = match lot {
        Some(lot) => of_lot(asked.probe, lot, t)?,
        None => of_name(asked.probe, name, t)?,
    };
    if let (Some(lot), Named::Bare(labelled)) = (lot, Named::of(name)) {
        let margin = match asked.probe.kind {
            ProbeKind::Ph => OTHER_KIND_PH,
            ProbeKind::Orp => 50.0,
        };
        if (labelled - standard.value).abs() > margin {
            return Err(Failure::request(format!(
                "lot `{}` is worth {} at {t}, not {labelled}",
                lot.number,
                figures::plain(asked.probe.kind, standard.value)
            ))
            .remedy("name the bottle the probe was in"));
        }
    }
    Ok(StandardReading {
        name: name.to_owned(),
        lot: lot.map(|lot| lot.number.clone()),
        value: standard.value,
        u_value: standard.u,
        value_per_c: standard.per_c,
        mv: buffer.mv,
        u_mv: U_SETTLED_MV,
        temp_c: buffer.temp_c,
        u_temp_c: U_BUFFER_TEMP_C,
    })
}

/// The lot that is named, known, of the kind that was typed, and not expired.
fn lot<'a>(asked: Asked<'a>, buffer: &TypedBuffer) -> Result<Option<&'a Lot>, Failure> {
    let number = match &buffer.lot {
        Some(number) => number,
        None if Named::of(&buffer.name) == Named::Word => &buffer.name,
        None => return Ok(None),
    };
    let Some(lot) = asked.book.lot(number).map(|lot| &lot.fact) else {
        return Err(unknown(asked.book, buffer, number));
    };
    let named = Named::of(&buffer.name);
    let by_kind = matches!(named, Named::Kind(_) | Named::Solution(_))
        || (named == Named::Word && buffer.lot.is_some());
    if by_kind && lot.kind != buffer.name {
        return Err(Failure::request(format!(
            "lot `{number}` is {}, not {}",
            lot.kind, buffer.name
        ))
        .remedy("name the bottle the probe was in"));
    }
    let remedy = match asked.expired {
        Expired::Overridden => return Ok(Some(lot)),
        Expired::Refused => "take a fresh bottle",
        Expired::WantsOverride => {
            "take a fresh bottle; to use it all the same add `--override --why TEXT`"
        }
    };
    if let Some(expires) = lot.expires.filter(|expires| *expires <= asked.at) {
        let when = time::local(expires, asked.site.timezone);
        return Err(
            Failure::request(format!("lot `{number}` ({}) expired {when}", lot.kind))
                .remedy(remedy),
        );
    }
    Ok(Some(lot))
}

fn unknown(book: &Book, buffer: &TypedBuffer, number: &str) -> Failure {
    if buffer.lot.is_none() {
        return Failure::request(format!("unknown buffer `{}`", buffer.name)).remedy(format!(
            "write one of {}, a bare value, or the number of a lot",
            super::lot::kinds()
        ));
    }
    let failure = Failure::request(format!("unknown lot `{number}`"));
    // `7.00,-1.2,25,0` and `phthalate,177,5,25` have four fields too.
    if typed::figure(number).is_ok() {
        return failure.remedy(format!(
            "write figures with a decimal point; if `{number}` is a lot, add it: `halfcell lot add --number {number} --kind …`"
        ));
    }
    let known: Vec<&str> = book.lots().map(|lot| lot.fact.number.as_str()).collect();
    let add = format!("add it: `halfcell lot add --number {number} --kind …`");
    failure.remedy(if known.is_empty() {
        add
    } else {
        format!("name one of {}, or {add}", known.join(", "))
    })
}

/// A pH electrode goes into pH buffers, a metal electrode into check solutions.
fn fits(probe: &ProbeSpec, name: &str) -> Result<(), Failure> {
    let wrong = match (probe.kind, Named::of(name)) {
        (ProbeKind::Ph, Named::Solution(_)) => {
            Some("is an ORP check solution and the probe a pH electrode")
        }
        (ProbeKind::Orp, Named::Kind(_)) => Some("is a pH buffer and the probe an ORP electrode"),
        (ProbeKind::Ph, Named::Bare(ph)) if !(0.0..=14.0).contains(&ph) => {
            Some("is no pH of a buffer")
        }
        (ProbeKind::Orp, Named::Bare(mv)) if mv.abs() > 1_500.0 => {
            Some("mV is no potential of a check solution")
        }
        _ => None,
    };
    match wrong {
        None => Ok(()),
        Some(wrong) => Err(Failure::request(format!("`{name}` {wrong}"))
            .at(format!("probe `{}`", probe.id))
            .remedy(match probe.kind {
                ProbeKind::Ph => "name the buffer the probe was in, or its pH",
                ProbeKind::Orp => "name the check solution the probe was in, or its mV against the probe's own reference",
            })),
    }
}

fn of_name(probe: &ProbeSpec, name: &str, t: Celsius) -> Result<StandardValue, Failure> {
    match Named::of(name) {
        Named::Kind(kind) => buffer_at(kind, t)
            .map_err(|error| Failure::request(error.to_string()).remedy(error.remedy())),
        Named::Solution(solution) => of_solution(solution, probe.reference, t),
        Named::Bare(value) => Ok(StandardValue {
            value,
            u: u_bare(probe.kind),
            per_c: 0.0,
        }),
        Named::Word => Err(Failure::request(format!("unknown buffer `{name}`"))
            .remedy(format!("write one of {}", super::lot::kinds()))),
    }
}

fn of_solution(
    solution: CheckSolution,
    reference: ReferenceElectrode,
    t: Celsius,
) -> Result<StandardValue, Failure> {
    check_solution_at(solution, reference, t)
        .map_err(|error| Failure::request(error.to_string()).remedy(error.remedy()))
}

const fn u_bare(kind: ProbeKind) -> f64 {
    match kind {
        ProbeKind::Ph => U_BARE_PH,
        ProbeKind::Orp => U_BARE_MV,
    }
}

/// The certificate's value at `t`. Between its temperatures a known kind follows its own table, shifted to meet the certificate;
/// a word of the user's own goes straight from value to value and has none outside them.
fn of_lot(probe: &ProbeSpec, lot: &Lot, t: Celsius) -> Result<StandardValue, Failure> {
    let table = |t: Celsius| match Named::of(&lot.kind) {
        Named::Kind(_) | Named::Solution(_) => of_name(probe, &lot.kind, t).map(Some),
        Named::Bare(_) | Named::Word => Ok(None),
    };
    let own_u = lot.u.map(|u| u / 2.0);
    let Some(here) = table(t)? else {
        return own_values(probe, lot, t);
    };
    let mut shifts = Vec::new();
    for [value, temp_c] in &lot.values {
        let there = Celsius::new(*temp_c).map_err(|error| Failure::request(error.to_string()))?;
        if let Some(there) = table(there)? {
            shifts.push([value - there.value, *temp_c]);
        }
    }
    let (shift, shift_per_c) = between(&shifts, t.c()).unwrap_or((0.0, 0.0));
    Ok(StandardValue {
        value: here.value + shift,
        u: own_u.unwrap_or(here.u),
        per_c: here.per_c + shift_per_c,
    })
}

/// How far from its only temperature, or outside its temperatures, a certificate without a table still holds, °C.
const HOLDS_WITHIN_C: f64 = 5.0;

fn own_values(probe: &ProbeSpec, lot: &Lot, t: Celsius) -> Result<StandardValue, Failure> {
    let (lowest, highest) = match (lot.values.first(), lot.values.last()) {
        (Some(first), Some(last)) => (first[1], last[1]),
        _ => (f64::NAN, f64::NAN),
    };
    match between(&lot.values, t.c()) {
        Some((value, per_c)) if t.c() >= lowest - HOLDS_WITHIN_C && t.c() <= highest + HOLDS_WITHIN_C => Ok(StandardValue {
            value,
            u: lot.u.map_or(u_bare(probe.kind), |u| u / 2.0),
            per_c,
        }),
        _ => Err(Failure::request(format!(
            "lot `{}` states no value near {t}: its certificate goes from {lowest} °C to {highest} °C",
            lot.number
        ))
        .remedy("bring the buffer to a temperature of its certificate, or enter more of the certificate with `halfcell lot add --correct`")),
    }
}

/// Straight from value to value (`[value, temp_c]`, rising in temperature) and flat outside: the value at `temp_c` and how it moves per °C.
fn between(values: &[[f64; 2]], temp_c: f64) -> Option<(f64, f64)> {
    let (first, last) = (values.first()?, values.last()?);
    if temp_c <= first[1] {
        return Some((first[0], 0.0));
    }
    if temp_c >= last[1] {
        return Some((last[0], 0.0));
    }
    let pair = values.windows(2).find(|pair| temp_c <= pair[1][1])?;
    let per_c = (pair[1][0] - pair[0][0]) / (pair[1][1] - pair[0][1]);
    Some((pair[0][0] + per_c * (temp_c - pair[0][1]), per_c))
}

/// Refuses a certificate value that belongs to another kind of buffer.
pub(super) fn plausible(kind: &str, value: f64, temp_c: f64) -> Result<(), Failure> {
    let Named::Kind(known) = Named::of(kind) else {
        return Ok(());
    };
    let table = Celsius::new(temp_c)
        .ok()
        .and_then(|t| buffer_at(known, t).ok());
    match table {
        Some(table) if (table.value - value).abs() > OTHER_KIND_PH => Err(Failure::request(format!(
            "{value} at {temp_c} °C is no value of {kind}, which is pH {:.3} there",
            table.value
        ))
        .remedy("check the kind and the certificate; a buffer of another composition takes a word of your own as --kind")),
        _ => Ok(()),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::electrode::history::ProbeId;

    fn glass() -> ProbeSpec {
        ProbeSpec {
            id: ProbeId::from("P-1"),
            kind: ProbeKind::Ph,
            reference: ReferenceElectrode::AgCl3M,
            ph_iso: 7.0,
            serial: None,
        }
    }

    fn bottle(kind: &str, values: &[[f64; 2]], u: Option<f64>) -> Lot {
        Lot {
            number: "L1".into(),
            kind: kind.into(),
            opened: None,
            expires: None,
            values: values.to_vec(),
            u,
        }
    }

    fn at(lot: &Lot, c: f64) -> StandardValue {
        of_lot(&glass(), lot, Celsius::new(c).unwrap()).unwrap()
    }

    #[test]
    fn a_lot_without_values_is_worth_what_its_kind_is() {
        let t = Celsius::new(22.0).unwrap();
        let table = buffer_at(BufferKind::Phthalate, t).unwrap();
        assert_eq!(at(&bottle("phthalate", &[], None), 22.0), table);
    }

    #[test]
    fn a_certificate_gives_its_own_values_back_and_halves_its_expanded_u() {
        let lot = bottle("phthalate", &[[4.002, 20.0], [4.010, 25.0]], Some(0.006));
        for (c, value) in [(20.0, 4.002), (25.0, 4.010)] {
            let got = at(&lot, c);
            assert!((got.value - value).abs() < 1e-9, "{c} °C: {}", got.value);
            assert!((got.u - 0.003).abs() < 1e-12);
        }
    }

    #[test]
    fn beside_its_only_temperature_a_certificate_follows_the_table_of_its_kind() {
        let t = |c| {
            buffer_at(BufferKind::Borax, Celsius::new(c).unwrap())
                .unwrap()
                .value
        };
        let lot = bottle("borax", &[[t(25.0) + 0.01, 25.0]], None);
        assert!((at(&lot, 15.0).value - (t(15.0) + 0.01)).abs() < 1e-9);
    }

    #[test]
    fn a_kind_of_ones_own_goes_straight_between_its_values_and_not_far_beyond() {
        let lot = bottle("house-7", &[[7.06, 10.0], [7.00, 25.0]], None);
        let middle = at(&lot, 17.5);
        assert!((middle.value - 7.03).abs() < 1e-9);
        assert!((middle.per_c + 0.004).abs() < 1e-9);
        assert!((middle.u - U_BARE_PH).abs() < 1e-12);
        let far = of_lot(&glass(), &lot, Celsius::new(40.0).unwrap());
        assert!(
            far.unwrap_err()
                .to_string()
                .contains("its certificate goes from 10 °C to 25 °C")
        );
    }

    #[test]
    fn a_certificate_of_another_kind_is_noticed() {
        assert!(plausible("phthalate", 4.01, 25.0).is_ok());
        assert!(plausible("phthalate", 6.86, 25.0).is_err());
        assert!(plausible("house-7", 7.0, 25.0).is_ok());
    }
}
