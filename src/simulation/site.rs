//! # The demo's site: six points on four lines, two of them in trouble
//!
//! Invented. Two ponds, a pair of electrodes in one raceway, a neutralisation tank, a disinfection basin. The tank's electrode has worn
//! out of its slope window by the last calibration; the electrode of the second pond has lost its temperature sensor.

use super::electrode::{Fault, Shown, SimulatedElectrode};
use super::liquid::{Liquid, LiquidKind};
use super::meter::{SimulatedLine, SimulatedLineError};
use super::talk::Talk;
use crate::electrode::history::ProbeKind;
use crate::electrode::units::Timestamp;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::time::Duration;

pub(super) const MINUTE_MS: i64 = 60_000;
pub(super) const HOUR_MS: i64 = 60 * MINUTE_MS;
pub(super) const DAY_MS: i64 = 24 * HOUR_MS;

/// When the sun stands highest over the site, hours after midnight UTC.
const NOON_UTC_H: f64 = 16.2;
/// When the technician begins the weekly round, ms after midnight UTC: a morning hour at the site.
const ROUND_BEGINS_MS: i64 = 13 * HOUR_MS + 10 * MINUTE_MS;
/// Slope of the worn electrode in the last weekly round, where 0.85 is the usual end.
const WORN_SLOPE: f64 = 0.832;
/// What it had when it was new.
const FRESH_SLOPE: f64 = 0.945;
/// The worn electrode wore out in this time, unless the history is shorter.
const WORE_OUT_MS: i64 = 16 * DAY_MS;
/// Rinse water in the beaker beside the raceway: pH and °C.
const RINSE: (f64, f64) = (6.3, 15.0);

/// Indices of the points, in the order of every list here.
pub(super) const POND_1: usize = 0;
pub(super) const POND_2: usize = 1;
pub(super) const RACEWAY_1A: usize = 2;
pub(super) const RACEWAY_1B: usize = 3;
pub(super) const NEUTRAL_1: usize = 4;
pub(super) const DISINFECT_1: usize = 5;

/// Each line: its name, and the points of its meters in order.
const LINES: [(&str, &[usize]); 4] = [
    ("pond-1-usb", &[POND_1]),
    ("pond-2-usb", &[POND_2]),
    ("raceway-bus", &[RACEWAY_1A, RACEWAY_1B, DISINFECT_1]),
    ("neutral-usb", &[NEUTRAL_1]),
];
/// Unit addresses on the raceway bus, in the order of its meters.
const UNITS: [u8; 3] = [11, 12, 21];
const ASK: &str = "READ?\r\n";

/// One row of the history, as a meter's memory would give it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Row {
    /// When, a whole minute.
    pub at: Timestamp,
    /// Index into [`DemoSite::TAGS`].
    pub point: usize,
    /// What the meter showed.
    pub shown: Shown,
}

/// The demo's site with its whole past and future.
#[derive(Debug, Clone, PartialEq)]
pub struct DemoSite {
    first_row: Timestamp,
    last_row: Timestamp,
    pub(super) last_round: Timestamp,
    pub(super) hold: (Timestamp, Timestamp),
    pub(super) electrodes: [SimulatedElectrode; 6],
    pub(super) liquids: [Liquid; 6],
}

impl DemoSite {
    /// The points, in the order of every index here.
    pub const TAGS: [&'static str; 6] = [
        "POND-1",
        "POND-2",
        "RACEWAY-1A",
        "RACEWAY-1B",
        "NEUTRAL-1",
        "DISINFECT-1",
    ];

    /// The site with `days` (at least 1) of history that ends at the whole minute at or before `end`.
    pub fn new(end: Timestamp, days: u32) -> Self {
        let span_ms = i64::from(days.max(1)) * DAY_MS;
        let last_row = Timestamp::from_ms(end.ms() - end.ms().rem_euclid(MINUTE_MS));
        let first_row = last_row.plus_ms(MINUTE_MS - span_ms);
        // The last morning that left time for a round, or the middle of a history that holds no such morning.
        let since_round = (last_row.ms() - 2 * HOUR_MS - ROUND_BEGINS_MS).rem_euclid(DAY_MS);
        let morning = last_row.plus_ms(-2 * HOUR_MS - since_round);
        let last_round = if morning.plus_ms(-6 * HOUR_MS) > first_row {
            morning
        } else {
            first_row.plus_ms(span_ms / 2)
        };
        // Four days before, in the late morning; in a shorter history somewhere in its second half.
        let hold = last_round.plus_ms(2 * HOUR_MS - 4 * DAY_MS);
        let hold = if hold > first_row {
            hold
        } else {
            first_row.plus_ms(span_ms * 3 / 5)
        };
        let liquid = |kind, seed| Liquid {
            kind,
            seed,
            noon_utc_h: NOON_UTC_H,
        };
        let raceway = liquid(LiquidKind::Raceway, 3);
        let mut site = Self {
            first_row,
            last_row,
            last_round,
            hold: (hold, hold.plus_ms(40 * MINUTE_MS)),
            electrodes: electrodes(first_row),
            liquids: [
                liquid(LiquidKind::Pond { swing_ph: 0.9 }, 1),
                liquid(LiquidKind::Pond { swing_ph: 1.2 }, 2),
                raceway,
                raceway,
                liquid(LiquidKind::NeutralisationTank, 4),
                liquid(LiquidKind::DisinfectionBasin, 5),
            ],
        };
        site.break_things(span_ms);
        site
    }

    /// The tank's electrode wears out, the second pond's loses its temperature sensor.
    fn break_things(&mut self, span_ms: i64) {
        let since = self
            .last_round
            .plus_ms(-WORE_OUT_MS)
            .max(self.first_row.plus_ms(-HOUR_MS));
        let worn = &mut self.electrodes[NEUTRAL_1];
        // Ordinary ageing before, so that the glass has the fresh slope when it begins to wear.
        worn.slope = FRESH_SLOPE + worn.slope_loss_per_day * since.days_since(worn.commissioned);
        let ordinary = worn.slope_loss_per_day * self.last_round.days_since(since);
        let slope_loss_per_day =
            (FRESH_SLOPE - WORN_SLOPE - ordinary) / self.last_round.days_since(since);
        worn.faults = vec![(since, Fault::WornGlass { slope_loss_per_day })];

        let lost = self.last_row.plus_ms(-(3 * DAY_MS).min(span_ms / 3));
        self.electrodes[POND_2].faults = vec![(lost, Fault::TemperatureSensorOpen)];
    }

    /// First row of the history.
    pub fn first_row(&self) -> Timestamp {
        self.first_row
    }

    /// What the meter of a point (an index into [`TAGS`](Self::TAGS)) shows at any time: history and live readings alike.
    pub fn shown(&self, point: usize, at: Timestamp) -> Shown {
        let electrode = &self.electrodes[point];
        if point == RACEWAY_1A && (self.hold.0..self.hold.1).contains(&at) {
            // It stands in the rinse beaker while somebody cleans it: what the hold is for.
            let (ph, temp_c) = RINSE;
            return Shown {
                mv: super::electrode::tenths(electrode.mv_at(at, ph, temp_c)),
                temp_c,
            };
        }
        electrode.shown_in(&self.liquids[point], at)
    }

    /// The history, one row per point and minute, all points of a minute together, oldest first.
    pub fn history(&self) -> impl Iterator<Item = Row> + '_ {
        let minutes = (self.last_row.ms() - self.first_row.ms()) / MINUTE_MS;
        (0..=minutes).flat_map(move |minute| {
            let at = self.first_row.plus_ms(minute * MINUTE_MS);
            (0..Self::TAGS.len()).map(move |point| Row {
                at,
                point,
                shown: self.shown(point, at),
            })
        })
    }

    /// The configuration, for lines that [`start_lines`](Self::start_lines) puts into `folder`.
    pub fn config_text(&self, folder: &Path, ledger: &Path, commit_window: Duration) -> String {
        let quoted = |path: &Path| toml::Value::String(path.display().to_string()).to_string();
        let mut text = include_str!("sable-creek.toml")
            .replace("@LEDGER@", &quoted(ledger))
            .replace(
                "@COMMIT_WINDOW@",
                &format!("{}ms", commit_window.as_millis()),
            );
        for (name, _) in LINES {
            text = text.replace(
                &format!("@DEVICE:{name}@"),
                &quoted(&device_in(folder, name)),
            );
        }
        text
    }

    /// Starts the four lines with their live meters; each device is a link in `folder` named like its line.
    ///
    /// # Errors
    /// [`SimulatedLineError`] of the first line that could not be made.
    pub fn start_lines(
        &self,
        folder: &Path,
        now: fn() -> Timestamp,
    ) -> Result<Vec<SimulatedLine>, SimulatedLineError> {
        let site = Arc::new(self.clone());
        LINES
            .iter()
            .map(|(name, points)| {
                let site = Arc::clone(&site);
                let talk = match *name {
                    "raceway-bus" => Talk::ModbusRtu {
                        units: UNITS.to_vec(),
                    },
                    "neutral-usb" => Talk::Query {
                        ask: ASK.as_bytes().to_vec(),
                    },
                    _ => Talk::Stream,
                };
                let figures = move |meter: usize, at| site.shown(points[meter], at);
                SimulatedLine::start(&device_in(folder, name), talk, Box::new(figures), now)
            })
            .collect()
    }
}

fn device_in(folder: &Path, line: &str) -> PathBuf {
    folder.join(line)
}

/// The electrodes as commissioned shortly before the first row.
fn electrodes(first_row: Timestamp) -> [SimulatedElectrode; 6] {
    let glass = |seed, offset_mv, slope| SimulatedElectrode {
        kind: ProbeKind::Ph,
        seed,
        commissioned: first_row.plus_ms(-2 * HOUR_MS),
        offset_mv,
        drift_mv_per_day: -0.05,
        wander_mv: 0.25,
        slope,
        slope_loss_per_day: 0.000_15,
        noise_mv: 0.12,
        response_s: 8.0,
        faults: Vec::new(),
    };
    [
        glass(101, -3.1, 0.986),
        glass(102, 5.4, 0.979),
        glass(103, -1.2, 0.991),
        SimulatedElectrode {
            drift_mv_per_day: 0.55,
            ..glass(104, 2.6, 0.983)
        },
        SimulatedElectrode {
            drift_mv_per_day: 0.5,
            wander_mv: 0.6,
            noise_mv: 0.3,
            response_s: 25.0,
            ..glass(105, -9.8, 0.95)
        },
        SimulatedElectrode {
            kind: ProbeKind::Orp,
            noise_mv: 0.6,
            wander_mv: 0.8,
            response_s: 20.0,
            ..glass(106, 3.7, 1.0)
        },
    ]
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::config;
    use crate::simulation::electrode::OPEN_SENSOR_TEMP_C;
    use std::collections::HashSet;
    use std::fs::File;
    use std::io::{BufRead, BufReader};

    const END: Timestamp = Timestamp::from_ms(1_780_000_012_345);

    #[test]
    fn a_history_of_fourteen_days_has_every_minute_of_every_point_once() {
        let site = DemoSite::new(END, 14);
        let rows: Vec<Row> = site.history().collect();
        assert_eq!(rows.len(), 14 * 1440 * 6);
        let last = rows.last().unwrap().at;
        assert!(last <= END && END.ms() - last.ms() < MINUTE_MS);
        let places: HashSet<_> = rows.iter().map(|row| (row.at, row.point)).collect();
        assert_eq!(places.len(), rows.len());
    }

    #[test]
    fn figures_are_in_the_digits_of_the_meters_and_the_same_when_asked_again() {
        let site = DemoSite::new(END, 2);
        for row in site.history() {
            for figure in [row.shown.mv, row.shown.temp_c] {
                assert!(
                    (figure * 10.0 - (figure * 10.0).round()).abs() < 1e-9,
                    "{row:?}"
                );
            }
            assert!(row.shown.mv.abs() < 1_000.0, "{row:?}");
        }
        assert!(site.history().eq(DemoSite::new(END, 2).history()));
    }

    #[test]
    fn the_second_pond_alone_loses_its_temperature_sensor_and_never_finds_it_again() {
        let site = DemoSite::new(END, 14);
        let open = |shown: Shown| (shown.temp_c - OPEN_SENSOR_TEMP_C).abs() < 1e-9;
        let mut lost = None;
        for row in site.history() {
            if open(row.shown) {
                assert_eq!(row.point, POND_2);
                lost.get_or_insert(row.at);
            } else if row.point == POND_2 {
                assert_eq!(lost, None, "found again at {:?}", row.at);
            }
        }
        let days = END.days_since(lost.unwrap());
        assert!((2.9..3.1).contains(&days), "{days} days before the end");
        assert!(open(site.shown(POND_2, END.plus_ms(DAY_MS))));
    }

    #[test]
    fn the_two_electrodes_of_the_raceway_see_one_liquid_except_during_the_hold() {
        let site = DemoSite::new(END, 14);
        let (from, until) = site.hold;
        for minute in -30..70 {
            let at = from.plus_ms(minute * MINUTE_MS);
            let apart = (site.shown(RACEWAY_1A, at).mv - site.shown(RACEWAY_1B, at).mv).abs();
            if (from..until).contains(&at) {
                assert!(
                    apart > 25.0,
                    "minute {minute} of the hold: {apart} mV apart"
                );
            } else {
                assert!(apart < 15.0, "minute {minute}: {apart} mV apart");
            }
        }
    }

    #[test]
    fn the_configuration_is_accepted_and_names_six_points_on_four_lines_of_three_protocols() {
        let folder = Path::new("/tmp/it's a folder");
        let site = DemoSite::new(END, 14);
        let text = site.config_text(
            folder,
            &folder.join("ledger.db"),
            Duration::from_millis(250),
        );
        let loaded = config::load(&text).unwrap();
        assert_eq!(loaded.ledger, folder.join("ledger.db"));
        assert_eq!(loaded.commit_window, Duration::from_millis(250));
        let tags: Vec<_> = loaded.points.iter().map(|point| &*point.tag.0).collect();
        assert_eq!(tags, DemoSite::TAGS);
        let protocols: HashSet<_> = loaded
            .lines
            .iter()
            .map(|line| line.protocol.name())
            .collect();
        assert_eq!((loaded.lines.len(), protocols.len()), (4, 3));
        for (line, (name, points)) in loaded.lines.iter().zip(LINES) {
            assert_eq!(line.name, name);
            assert_eq!(
                line.device,
                config::site::Device::Path(device_in(folder, name))
            );
            let n_meters = loaded
                .meters
                .iter()
                .filter(|meter| loaded.lines[meter.line].name == name)
                .count();
            assert_eq!(n_meters, points.len());
        }
    }

    #[test]
    fn live_meters_go_on_where_the_history_ends() {
        let folder = tempfile::tempdir().unwrap();
        let site = DemoSite::new(END, 1);
        let live = END.plus_ms(5_000);
        let lines = site
            .start_lines(folder.path(), || END.plus_ms(5_000))
            .unwrap();
        assert_eq!(lines.len(), LINES.len());
        for (line, point) in [(0, POND_1), (1, POND_2)] {
            let mut port = BufReader::new(File::open(lines[line].device()).unwrap());
            let mut text = String::new();
            port.read_line(&mut text).unwrap();
            let shown = site.shown(point, live);
            let words: Vec<_> = text.split_whitespace().map(str::to_owned).collect();
            let expected = [
                format!("{:.1}", shown.mv),
                "mV".to_owned(),
                format!("{:.1}", shown.temp_c),
                "C".to_owned(),
            ];
            assert_eq!(words, expected, "{}", DemoSite::TAGS[point]);
        }
    }
}
