//! # The demo's logbook: what technicians entered about electrodes, lots and the round they made every week

use super::electrode::tenths;
use super::random::normal_at;
use super::site::{
    DAY_MS, DISINFECT_1, DemoSite, MINUTE_MS, NEUTRAL_1, POND_1, RACEWAY_1A, RACEWAY_1B,
};
use crate::electrode::buffers::{BufferKind, buffer_at};
use crate::electrode::history::{Grab, Hold, Lot, ProbeId, ProbeSpec, Stage, Tag};
use crate::electrode::orp::{CheckSolution, ReferenceElectrode, check_solution_at};
use crate::electrode::standard::OutsideTable;
use crate::electrode::units::{Celsius, Timestamp};

const FOREMAN: &str = "M. Oake";
const TECHNICIAN: &str = "T. Brill";

/// Noise of a settled reading in a beaker, standard deviation, mV.
const SETTLED_MV: f64 = 0.15;
/// Every probe of the site has this reference electrode.
const REFERENCE: ReferenceElectrode = ReferenceElectrode::AgCl3M;

/// The probe at each point and its serial number, in the order of [`DemoSite::TAGS`].
const PROBES: [(&str, &str); 6] = [
    ("P-2101", "24-0611"),
    ("P-2102", "24-0612"),
    ("P-2103", "24-0640"),
    ("P-2104", "24-0641"),
    ("P-2088", "23-1177"),
    ("R-0307", "24-0090"),
];

/// What a bottle holds.
#[derive(Debug, Clone, Copy)]
enum Standard {
    Buffer(BufferKind),
    Check(CheckSolution),
}

/// A bottle on the shelf.
#[derive(Debug, Clone, Copy)]
struct Bottle {
    standard: Standard,
    lot: &'static str,
}

const PHTHALATE: Bottle = Bottle {
    standard: Standard::Buffer(BufferKind::Phthalate),
    lot: "PT-5512",
};
const PHOSPHATE: Bottle = Bottle {
    standard: Standard::Buffer(BufferKind::Phosphate),
    lot: "PO-7023",
};
const BORAX: Bottle = Bottle {
    standard: Standard::Buffer(BufferKind::Borax),
    lot: "BX-1180",
};
const ZOBELL: Bottle = Bottle {
    standard: Standard::Check(CheckSolution::Zobell),
    lot: "ZB-0044",
};

/// One line of the logbook.
#[derive(Debug, Clone, PartialEq)]
pub struct Entry {
    /// When it was so.
    pub at: Timestamp,
    /// Who did it.
    pub by: &'static str,
    /// What was done.
    pub what: Entered,
}

/// What was done.
#[derive(Debug, Clone, PartialEq)]
pub enum Entered {
    /// A bottle came onto the shelf.
    Lot(Lot),
    /// A probe was unpacked.
    Probe(ProbeSpec),
    /// A probe went into its liquid.
    Placed {
        /// The probe.
        probe: ProbeId,
        /// The point.
        point: Tag,
    },
    /// A probe was calibrated with these figures.
    Calibration {
        /// The probe.
        probe: ProbeId,
        /// What it read.
        readings: Vec<InBeaker>,
    },
    /// A probe was checked with these figures.
    Verification {
        /// The probe.
        probe: ProbeId,
        /// When in the visit.
        stage: Stage,
        /// What it read.
        readings: Vec<InBeaker>,
    },
    /// A bench reference.
    Grab(Grab),
    /// A function check.
    Hold(Hold),
}

/// A settled reading in a buffer or check solution, as a technician writes it down.
#[derive(Debug, Clone, PartialEq)]
pub struct InBeaker {
    /// Buffer kind or check solution by its name.
    pub name: &'static str,
    /// Number on the bottle.
    pub lot: &'static str,
    /// mV, to a tenth.
    pub mv: f64,
    /// °C, to a tenth, from the thermometer in the beaker.
    pub temp_c: f64,
}

impl Bottle {
    fn name(self) -> &'static str {
        match self.standard {
            Standard::Buffer(kind) => kind.name(),
            Standard::Check(solution) => solution.name(),
        }
    }

    /// pH, or mV against the site's reference electrode.
    fn value(self, temp_c: Celsius) -> Result<f64, OutsideTable> {
        Ok(match self.standard {
            Standard::Buffer(kind) => buffer_at(kind, temp_c)?.value,
            Standard::Check(solution) => check_solution_at(solution, REFERENCE, temp_c)?.value,
        })
    }
}

impl DemoSite {
    /// The logbook up to the end of the history, oldest first.
    ///
    /// # Errors
    /// [`OutsideTable`] when a beaker's temperature has no value in its standard's table: a defect of the scenario.
    pub fn logbook(&self) -> Result<Vec<Entry>, OutsideTable> {
        let mut book = self.commissioning();
        for (n, round) in self.rounds().into_iter().enumerate() {
            let by = if n % 2 == 0 { FOREMAN } else { TECHNICIAN };
            for ((point, (probe, _)), minutes) in PROBES.iter().enumerate().zip((0..).step_by(10)) {
                let at = round.plus_ms(minutes * MINUTE_MS);
                // A new probe has nothing to be found.
                if n > 0 && [POND_1, RACEWAY_1B, NEUTRAL_1].contains(&point) {
                    let at = at.plus_ms(-4 * MINUTE_MS);
                    let what = self.verification(point, Stage::AsFound, &[PHOSPHATE], at)?;
                    book.push(Entry { at, by, what });
                }
                let what = Entered::Calibration {
                    probe: (*probe).into(),
                    readings: self.in_beakers(point, bottles_for(point), at)?,
                };
                book.push(Entry { at, by, what });
            }
        }
        let between = self.last_round.plus_ms(-7 * DAY_MS / 2);
        if between > self.first_row() {
            book.push(Entry {
                at: between,
                by: TECHNICIAN,
                what: self.verification(DISINFECT_1, Stage::Check, &[ZOBELL], between)?,
            });
        }
        book.push(self.grab(POND_1, self.last_round.plus_ms(70 * MINUTE_MS)));
        book.push(Entry {
            at: self.hold.0,
            by: TECHNICIAN,
            what: Entered::Hold(Hold {
                point: Self::TAGS[RACEWAY_1A].into(),
                until: self.hold.1,
                why: "cleaning the raceway and its electrodes".to_owned(),
            }),
        });
        book.sort_by_key(|entry| entry.at);
        Ok(book)
    }

    /// Bottles opened, probes unpacked and placed, all before the first row.
    fn commissioning(&self) -> Vec<Entry> {
        let before = |minutes: i64| self.first_row().plus_ms(-minutes * MINUTE_MS);
        let bottles = [PHTHALATE, PHOSPHATE, BORAX, ZOBELL].map(|bottle| {
            let lot = Lot {
                number: bottle.lot.to_owned(),
                kind: bottle.name().to_owned(),
                opened: Some(before(180)),
                expires: Some(self.last_round.plus_ms(150 * DAY_MS)),
                values: Vec::new(),
                u: None,
            };
            (before(180), Entered::Lot(lot))
        });
        let probes = PROBES
            .iter()
            .zip(&self.electrodes)
            .map(|((id, serial), electrode)| {
                let spec = ProbeSpec {
                    id: (*id).into(),
                    kind: electrode.kind,
                    reference: REFERENCE,
                    ph_iso: 7.0,
                    serial: Some((*serial).to_owned()),
                };
                (before(120), Entered::Probe(spec))
            });
        let placements = PROBES.iter().zip(Self::TAGS).map(|((id, _), tag)| {
            let (probe, point) = ((*id).into(), tag.into());
            (before(20), Entered::Placed { probe, point })
        });
        bottles
            .into_iter()
            .chain(probes)
            .chain(placements)
            .map(|(at, what)| Entry {
                at,
                by: FOREMAN,
                what,
            })
            .collect()
    }

    /// When the rounds began: before the first row, then every week up to the last.
    fn rounds(&self) -> Vec<Timestamp> {
        let start = self.first_row();
        let mut rounds = vec![self.last_round];
        let mut earlier = self.last_round.plus_ms(-7 * DAY_MS);
        while earlier > start.plus_ms(DAY_MS) {
            rounds.push(earlier);
            earlier = earlier.plus_ms(-7 * DAY_MS);
        }
        rounds.push(start.plus_ms(-100 * MINUTE_MS));
        rounds.reverse();
        rounds
    }

    fn verification(
        &self,
        point: usize,
        stage: Stage,
        bottles: &[Bottle],
        at: Timestamp,
    ) -> Result<Entered, OutsideTable> {
        Ok(Entered::Verification {
            probe: PROBES[point].0.into(),
            stage,
            readings: self.in_beakers(point, bottles, at)?,
        })
    }

    /// A bottle sampled at the point and measured at the bench.
    fn grab(&self, point: usize, at: Timestamp) -> Entry {
        let value = self.liquids[point].at(at).value + 0.012 * normal_at(0x6AB, at.ms());
        Entry {
            at,
            by: TECHNICIAN,
            what: Entered::Grab(Grab {
                point: Self::TAGS[point].into(),
                value: (value * 100.0).round() / 100.0,
                u: 0.03,
            }),
        }
    }

    /// The probe of `point` in each beaker in turn.
    fn in_beakers(
        &self,
        point: usize,
        bottles: &[Bottle],
        at: Timestamp,
    ) -> Result<Vec<InBeaker>, OutsideTable> {
        let electrode = &self.electrodes[point];
        let reading = |(n, bottle): (i64, &Bottle)| {
            let chance = |what: u64| normal_at(electrode.seed ^ what, at.ms() + n);
            let temp_c = tenths(20.0 + 0.5 * chance(0xBEA).clamp(-3.0, 3.0));
            // A beaker indoors always has a temperature in °C.
            let value = bottle.value(Celsius::new(temp_c).unwrap_or(Celsius::STANDARD))?;
            let mv = electrode.potential_mv_at(at, value, temp_c) + SETTLED_MV * chance(0x5E7);
            Ok(InBeaker {
                name: bottle.name(),
                lot: bottle.lot,
                mv: tenths(mv),
                temp_c,
            })
        };
        (0..).zip(bottles).map(reading).collect()
    }
}

/// What a probe of this point is calibrated in: around the values of its liquid.
fn bottles_for(point: usize) -> &'static [Bottle] {
    match point {
        NEUTRAL_1 => &[PHTHALATE, PHOSPHATE, BORAX],
        DISINFECT_1 => &[ZOBELL],
        _ => &[PHOSPHATE, BORAX],
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::electrode::fit::{Fit, Limits, fit, fit_orp};
    use crate::electrode::history::{StandardReading, Verdict};

    const END: Timestamp = Timestamp::from_ms(1_780_000_012_345);

    /// Every calibration of a probe, as the electrode room judges it.
    fn fits(site: &DemoSite, id: &str) -> Vec<(Timestamp, Fit)> {
        let limits = Limits::default();
        let mut fits = Vec::new();
        for entry in site.logbook().unwrap() {
            match entry.what {
                Entered::Calibration { probe, readings } if probe.0 == id => {
                    let readings: Vec<_> = readings.iter().map(standard_reading).collect();
                    let fit = if id.starts_with('P') {
                        fit(&readings, 7.0, None, &limits)
                    } else {
                        fit_orp(&readings, &limits)
                    };
                    fits.push((entry.at, fit.unwrap()));
                }
                _ => {}
            }
        }
        fits
    }

    /// As the command line completes what was written down.
    fn standard_reading(reading: &InBeaker) -> StandardReading {
        let temp = Celsius::new(reading.temp_c).unwrap();
        let standard = reading
            .name
            .parse()
            .map(|kind| buffer_at(kind, temp))
            .or_else(|_| {
                let solution = reading.name.parse::<CheckSolution>();
                solution.map(|solution| check_solution_at(solution, REFERENCE, temp))
            })
            .unwrap()
            .unwrap();
        StandardReading {
            name: reading.name.to_owned(),
            lot: Some(reading.lot.to_owned()),
            value: standard.value,
            u_value: standard.u,
            value_per_c: standard.per_c,
            mv: reading.mv,
            u_mv: SETTLED_MV,
            temp_c: reading.temp_c,
            u_temp_c: 0.2,
        }
    }

    #[test]
    fn figures_in_the_logbook_give_the_true_slope_back() {
        let site = DemoSite::new(END, 14);
        for (point, (id, _)) in PROBES.iter().enumerate().take(5) {
            for (at, fit) in fits(&site, id) {
                let slope = fit.line.slope;
                let truth = site.electrodes[point].slope_at(at);
                // 0.15 mV on two readings 133 mV apart are 0.0016 of the slope, five times that at the outside.
                assert!(
                    (slope - truth).abs() < 0.008,
                    "{id}: {slope}, truly {truth}"
                );
            }
        }
    }

    #[test]
    fn the_tanks_electrode_wears_out_of_its_window_by_the_last_round_and_the_others_do_not() {
        // Whatever the length of the history and the hour at which it ends.
        for (days, hour) in [
            (1, 0),
            (1, 9),
            (2, 13),
            (7, 4),
            (14, 0),
            (14, 19),
            (40, 7),
            (120, 22),
        ] {
            let site = DemoSite::new(END.plus_ms(hour * 60 * MINUTE_MS), days);
            for (id, _) in PROBES {
                let fits = fits(&site, id);
                let (last, earlier) = fits.split_last().unwrap();
                assert!(!earlier.is_empty(), "{id}, {days} days");
                for (_, fit) in earlier {
                    let reasons = &fit.reasons;
                    assert_ne!(
                        fit.verdict,
                        Verdict::Rejected,
                        "{id}, {days} d: {reasons:?}"
                    );
                }
                let last = &last.1;
                if id == PROBES[NEUTRAL_1].0 {
                    assert_eq!(
                        last.verdict,
                        Verdict::Rejected,
                        "{id}, {days} days: {last:?}"
                    );
                    assert!((0.80..0.85).contains(&last.line.slope), "{last:?}");
                } else {
                    assert_eq!(
                        last.verdict,
                        Verdict::Accepted,
                        "{id}, {days} days: {last:?}"
                    );
                }
            }
        }
    }

    #[test]
    fn every_probe_is_calibrated_and_in_place_before_the_first_row_and_weekly_after() {
        let site = DemoSite::new(END, 28);
        let book = site.logbook().unwrap();
        assert!(book.is_sorted_by_key(|entry| entry.at));
        assert!(book.iter().all(|entry| entry.at < END));
        let before: Vec<_> = book.iter().filter(|e| e.at < site.first_row()).collect();
        for (id, _) in PROBES {
            let seen = |wanted: fn(&Entered) -> Option<&ProbeId>| {
                before
                    .iter()
                    .any(|e| wanted(&e.what).is_some_and(|probe| probe.0 == id))
            };
            assert!(seen(|what| match what {
                Entered::Calibration { probe, .. } => Some(probe),
                _ => None,
            }));
            assert!(seen(|what| match what {
                Entered::Placed { probe, .. } => Some(probe),
                _ => None,
            }));
        }
        let rounds = site.rounds();
        assert_eq!(rounds.len(), 5);
        for pair in rounds[1..].windows(2) {
            assert_eq!(pair[1].ms() - pair[0].ms(), 7 * DAY_MS);
        }
    }

    #[test]
    fn the_check_solution_is_found_with_the_true_offset() {
        let site = DemoSite::new(END, 14);
        let book = site.logbook().unwrap();
        let (at, reading) = book
            .iter()
            .find_map(|entry| match &entry.what {
                Entered::Calibration { readings, .. } if readings[0].name == "zobell" => {
                    Some((entry.at, readings[0].clone()))
                }
                _ => None,
            })
            .unwrap();
        // Five times the noise of a settled reading.
        let temp = Celsius::new(reading.temp_c).unwrap();
        let truth = ZOBELL.value(temp).unwrap() + site.electrodes[DISINFECT_1].offset_mv_at(at);
        assert!(
            (reading.mv - truth).abs() < 0.8,
            "{} mV, truly {truth}",
            reading.mv
        );
    }
}
