//! # What happened to the electrodes of a site, and what follows for a moment
//!
//! in: facts about probes (added, placed, calibrated, verified, serviced), lots, grab samples, holds.
//! out: the probe at a point and the calibration in force at any time.
//! Always: 1. facts may come in any order of time; the answer for a moment depends only on the facts at or before it,
//! later-entered ones winning ties. 2. a calibration is never edited, only superseded or struck out.
//! Not here: how the facts are kept (`ledger`), what a reading makes of them (`pipeline`).

use super::named::named;
use super::orp::ReferenceElectrode;
use super::units::Timestamp;
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;
use std::fmt;

/// The ledger's number of an event; a calibration is known by it.
pub type EventId = i64;

macro_rules! text_id {
    ($(#[$doc:meta])* $name:ident) => {
        $(#[$doc])*
        #[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
        #[serde(transparent)]
        pub struct $name(pub String);

        impl fmt::Display for $name {
            fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.pad(&self.0)
            }
        }

        impl From<&str> for $name {
            fn from(text: &str) -> Self {
                Self(text.to_owned())
            }
        }
    };
}

text_id!(
    /// A probe's id: the name people gave the electrode.
    ProbeId
);
text_id!(
    /// A point's tag.
    Tag
);

named! {
    /// What a probe measures.
    ProbeKind, "kind of probe" {
        /// Glass electrode.
        Ph = "ph",
        /// Platinum or gold electrode.
        Orp = "orp",
    }
}

named! {
    /// What came of a calibration.
    Verdict, "verdict" {
        /// Within every window.
        Accepted = "accepted",
        /// In force, but something is near its limit; the reasons say what.
        AcceptedWithWarning = "accepted-with-warning",
        /// Not in force; the calibration before stays.
        Rejected = "rejected",
    }
}

named! {
    /// When a verification was made.
    Stage, "stage" {
        /// Before cleaning or adjusting.
        AsFound = "as-found",
        /// After it.
        AsLeft = "as-left",
        /// Between calibrations.
        Check = "check",
    }
}

named! {
    /// A service that may move offset and slope.
    Service, "service" {
        /// The glass or metal was cleaned.
        Cleaned = "cleaned",
        /// The reference got new electrolyte.
        Regelled = "regelled",
        /// A new cap or membrane.
        NewCap = "new-cap",
        /// A new cable.
        NewCable = "new-cable",
    }
}

/// One physical electrode.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ProbeSpec {
    /// The name people gave it.
    pub id: ProbeId,
    /// Glass or metal.
    pub kind: ProbeKind,
    /// Its reference electrode.
    pub reference: ReferenceElectrode,
    /// pH at which its potential does not depend on temperature; 7.00 unless known better.
    pub ph_iso: f64,
    /// The maker's serial number.
    pub serial: Option<String>,
}

/// Offset and slope with their covariance (standard uncertainties squared, k = 1).
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct ElectrodeLine {
    /// Potential at the isopotential pH, mV (ORP: reading minus the check solution's value).
    pub offset_mv: f64,
    /// Fraction of the theoretical Nernst slope (ORP: 1).
    pub slope: f64,
    /// Variance of the offset, mV².
    pub var_offset_mv2: f64,
    /// Variance of the slope.
    pub var_slope: f64,
    /// Covariance of the two, mV.
    pub cov_mv: f64,
}

/// A settled reading in a buffer or check solution.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct StandardReading {
    /// The buffer as named: a kind, a bare pH, or a check solution.
    pub name: String,
    /// Bottle batch it came from.
    pub lot: Option<String>,
    /// Its value at the reading's temperature: pH, or mV against the probe's own reference.
    pub value: f64,
    /// Standard uncertainty of that value (k = 1).
    pub u_value: f64,
    /// How the value moves with temperature, per °C.
    pub value_per_c: f64,
    /// Settled reading, mV.
    pub mv: f64,
    /// Standard uncertainty of the settled reading, mV.
    pub u_mv: f64,
    /// Temperature of the buffer, °C.
    pub temp_c: f64,
    /// Standard uncertainty of the temperature, °C.
    pub u_temp_c: f64,
}

/// A calibration as recorded.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Calibration {
    /// The probe.
    pub probe: ProbeId,
    /// What was read.
    pub readings: Vec<StandardReading>,
    /// The fit.
    pub line: ElectrodeLine,
    /// Measured minus fitted, one per reading, mV.
    pub residuals_mv: Vec<f64>,
    /// Accepted or not.
    pub verdict: Verdict,
    /// Why not, or what is near its limit.
    pub reasons: Vec<String>,
    /// Largest error the calibration before would have made in these buffers, in the value's unit; the sign says high or low.
    pub as_found_error: Option<f64>,
    /// Lowest and highest standard the line rests on, in the value's unit.
    pub span: [f64; 2],
    /// Why a refusal was overridden.
    pub override_why: Option<String>,
}

/// A verification as recorded.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Verification {
    /// The probe.
    pub probe: ProbeId,
    /// When in the visit.
    pub stage: Stage,
    /// What was read.
    pub readings: Vec<StandardReading>,
    /// Value by the calibration in force minus the standard, one per reading, in the value's unit.
    pub errors: Vec<f64>,
    /// Whether every error is within the tolerance.
    pub passed: bool,
    /// The tolerance it was held against.
    pub tolerance: f64,
    /// Why it failed.
    pub reasons: Vec<String>,
}

/// A fact with its times and its author.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Dated<T> {
    /// The ledger's number.
    pub id: EventId,
    /// When it was so.
    pub at: Timestamp,
    /// When it was entered.
    pub entered: Timestamp,
    /// Who entered it.
    pub by: String,
    /// The fact.
    pub fact: T,
}

/// A bottle batch.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Lot {
    /// Number on the bottle.
    pub number: String,
    /// A buffer kind, a check solution, or a free word when it has values of its own.
    pub kind: String,
    /// When the bottle was opened.
    pub opened: Option<Timestamp>,
    /// Not to be used at or after this moment.
    pub expires: Option<Timestamp>,
    /// Certificate: value and the temperature (°C) it holds at; empty means the kind's own table.
    pub values: Vec<[f64; 2]>,
    /// Expanded uncertainty (k = 2) of the certificate's values.
    pub u: Option<f64>,
}

/// A bench reference for a point.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Grab {
    /// The point.
    pub point: Tag,
    /// pH, or mV against the probe's own reference.
    pub value: f64,
    /// Expanded uncertainty (k = 2).
    pub u: f64,
}

/// A function check: alarms suppressed, readings marked, ending by itself.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Hold {
    /// The point.
    pub point: Tag,
    /// First moment after the hold.
    pub until: Timestamp,
    /// Why.
    pub why: String,
}

/// Everything that happened to one probe.
#[derive(Debug, Clone, PartialEq)]
pub struct ProbeHistory {
    /// The probe.
    pub spec: ProbeSpec,
    /// When it was added.
    pub added: Timestamp,
    /// Where it went, in order of time; `None` is out of service for good.
    pub moves: Vec<Dated<Option<Tag>>>,
    /// Calibrations in order of time, rejected ones too.
    pub calibrations: Vec<Dated<Calibration>>,
    /// Calibrations struck out after the fact: their ids and when they were struck.
    pub struck: Vec<Dated<EventId>>,
    /// Verifications in order of time.
    pub verifications: Vec<Dated<Verification>>,
    /// Services in order of time.
    pub services: Vec<Dated<Service>>,
    /// Events somebody confirmed though they were far off: their ids and when they were confirmed.
    pub confirmed: Vec<Dated<EventId>>,
}

impl ProbeHistory {
    /// The calibration in force at `t`: the last accepted one at or before it that is not struck out.
    pub fn calibration_at(&self, t: Timestamp) -> Option<&Dated<Calibration>> {
        self.calibrations[..self.calibrations.partition_point(|c| c.at <= t)]
            .iter()
            .rev()
            .find(|c| {
                c.fact.verdict != Verdict::Rejected && !self.struck.iter().any(|s| s.fact == c.id)
            })
    }

    /// Where the probe sits at `t`.
    pub fn point_at(&self, t: Timestamp) -> Option<&Tag> {
        self.moves[..self.moves.partition_point(|m| m.at <= t)]
            .last()?
            .fact
            .as_ref()
    }

    /// Whether it has been retired at `t`.
    pub fn retired_at(&self, t: Timestamp) -> bool {
        self.moves[..self.moves.partition_point(|m| m.at <= t)]
            .last()
            .is_some_and(|m| m.fact.is_none())
    }
}

/// What is known of a site's probes, lots, grab samples and holds.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Book {
    probes: BTreeMap<ProbeId, ProbeHistory>,
    placements: BTreeMap<Tag, Vec<Dated<ProbeId>>>,
    lots: BTreeMap<String, Dated<Lot>>,
    grabs: Vec<Dated<Grab>>,
    holds: BTreeMap<Tag, Vec<Dated<Hold>>>,
}

/// Inserts by time, then by number.
fn insert_dated<T>(list: &mut Vec<Dated<T>>, fact: Dated<T>) {
    let place = list.partition_point(|other| (other.at, other.id) < (fact.at, fact.id));
    list.insert(place, fact);
}

impl Book {
    /// Every probe by id.
    pub fn probes(&self) -> impl Iterator<Item = &ProbeHistory> {
        self.probes.values()
    }

    /// One probe's history.
    pub fn probe(&self, id: &ProbeId) -> Option<&ProbeHistory> {
        self.probes.get(id)
    }

    /// Every lot by number.
    pub fn lots(&self) -> impl Iterator<Item = &Dated<Lot>> {
        self.lots.values()
    }

    /// One lot.
    pub fn lot(&self, number: &str) -> Option<&Dated<Lot>> {
        self.lots.get(number)
    }

    /// Grab samples in order of time.
    pub fn grabs(&self) -> &[Dated<Grab>] {
        &self.grabs
    }

    /// The probe in the liquid at `point` at time `t`.
    pub fn probe_at(&self, point: &Tag, t: Timestamp) -> Option<&ProbeHistory> {
        let placed = self.placements.get(point)?;
        let last = placed[..placed.partition_point(|p| p.at <= t)].last()?;
        let probe = self.probes.get(&last.fact)?;
        (probe.point_at(t) == Some(point)).then_some(probe)
    }

    /// The hold on `point` at time `t`, if there is one.
    pub fn hold_at(&self, point: &Tag, t: Timestamp) -> Option<&Dated<Hold>> {
        let holds = self.holds.get(point)?;
        holds[..holds.partition_point(|h| h.at <= t)]
            .iter()
            .rev()
            .find(|h| h.fact.until > t)
    }

    /// Takes up a new probe; the first of a name stays.
    pub fn add_probe(&mut self, probe: Dated<ProbeSpec>) {
        self.probes
            .entry(probe.fact.id.clone())
            .or_insert(ProbeHistory {
                spec: probe.fact,
                added: probe.at,
                moves: Vec::new(),
                calibrations: Vec::new(),
                struck: Vec::new(),
                verifications: Vec::new(),
                services: Vec::new(),
                confirmed: Vec::new(),
            });
    }

    /// A probe goes to a point, or (`None`) out of service for good.
    pub fn move_probe(&mut self, id: &ProbeId, to: Dated<Option<Tag>>) {
        if let Some(point) = &to.fact {
            let placed = Dated {
                id: to.id,
                at: to.at,
                entered: to.entered,
                by: to.by.clone(),
                fact: id.clone(),
            };
            insert_dated(self.placements.entry(point.clone()).or_default(), placed);
        }
        if let Some(probe) = self.probes.get_mut(id) {
            insert_dated(&mut probe.moves, to);
        }
    }

    /// Takes up a lot; a later entry of the same number replaces the earlier.
    pub fn add_lot(&mut self, lot: Dated<Lot>) {
        self.lots.insert(lot.fact.number.clone(), lot);
    }

    /// Takes up a calibration.
    pub fn add_calibration(&mut self, calibration: Dated<Calibration>) {
        if let Some(probe) = self.probes.get_mut(&calibration.fact.probe) {
            insert_dated(&mut probe.calibrations, calibration);
        }
    }

    /// Strikes a calibration out: it is in force at no time any more.
    pub fn strike_calibration(&mut self, probe: &ProbeId, struck: Dated<EventId>) {
        if let Some(probe) = self.probes.get_mut(probe) {
            insert_dated(&mut probe.struck, struck);
        }
    }

    /// Takes up a verification.
    pub fn add_verification(&mut self, verification: Dated<Verification>) {
        if let Some(probe) = self.probes.get_mut(&verification.fact.probe) {
            insert_dated(&mut probe.verifications, verification);
        }
    }

    /// Takes up a service.
    pub fn add_service(&mut self, probe: &ProbeId, service: Dated<Service>) {
        if let Some(probe) = self.probes.get_mut(probe) {
            insert_dated(&mut probe.services, service);
        }
    }

    /// Confirms a calibration, verification or grab sample that was held out: it counts however far off it is.
    pub fn confirm(&mut self, probe: &ProbeId, confirmed: Dated<EventId>) {
        if let Some(probe) = self.probes.get_mut(probe) {
            insert_dated(&mut probe.confirmed, confirmed);
        }
    }

    /// Takes up a grab sample.
    pub fn add_grab(&mut self, grab: Dated<Grab>) {
        insert_dated(&mut self.grabs, grab);
    }

    /// Takes up a hold.
    pub fn add_hold(&mut self, hold: Dated<Hold>) {
        insert_dated(self.holds.entry(hold.fact.point.clone()).or_default(), hold);
    }
}
