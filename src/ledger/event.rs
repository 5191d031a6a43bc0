//! # Events: what is appended to the chain

use crate::electrode::history::{
    Book, Calibration, Dated, EventId, Grab, Hold, Lot, ProbeId, ProbeSpec, Service, Tag,
    Verification,
};
use crate::electrode::units::Timestamp;
use crate::watch::status::Status;
use serde::{Deserialize, Serialize};

/// An event as recorded.
#[derive(Debug, Clone, PartialEq)]
pub struct Event {
    /// Its number: rising, never reused.
    pub id: EventId,
    /// When it was so.
    pub at: Timestamp,
    /// When it was entered.
    pub entered: Timestamp,
    /// Who entered it; the daemon enters as `halfcell`.
    pub by: String,
    /// What happened.
    pub body: Body,
}

/// An event to be recorded.
#[derive(Debug, Clone, PartialEq)]
pub struct NewEvent {
    /// When it was so.
    pub at: Timestamp,
    /// When it is entered.
    pub entered: Timestamp,
    /// Who enters it.
    pub by: String,
    /// What happened.
    pub body: Body,
}

/// What happened.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(tag = "event", rename_all = "kebab-case")]
pub enum Body {
    /// A probe was added.
    ProbeAdded(ProbeSpec),
    /// A probe went into the liquid of a point; whatever sat there is out.
    ProbePlaced {
        /// The probe.
        probe: ProbeId,
        /// The point.
        point: Tag,
    },
    /// A probe went out of service for good.
    ProbeRetired {
        /// The probe.
        probe: ProbeId,
    },
    /// A probe was serviced.
    ProbeServiced {
        /// The probe.
        probe: ProbeId,
        /// What was done.
        what: Service,
    },
    /// A lot was added or corrected.
    LotAdded(Lot),
    /// A calibration, accepted or rejected.
    Calibration(Calibration),
    /// A calibration was struck out.
    CalibrationStruck {
        /// Whose.
        probe: ProbeId,
        /// Which.
        calibration: EventId,
        /// Why.
        why: String,
    },
    /// A verification.
    Verification(Verification),
    /// A bench reference.
    Grab(Grab),
    /// A function check.
    Hold(Hold),
    /// A probe's status changed.
    StatusChanged {
        /// The probe.
        probe: ProbeId,
        /// From.
        from: Option<Status>,
        /// To.
        to: Status,
        /// Why.
        reasons: Vec<String>,
    },
    /// A line's port was lost.
    LineLost {
        /// The line.
        line: String,
        /// What the system said.
        cause: String,
    },
    /// It is back.
    LineBack {
        /// The line.
        line: String,
        /// How long it was away, ms.
        away_ms: u64,
    },
    /// A meter stopped giving samples though its line is open.
    MeterSilent {
        /// The meter.
        meter: String,
        /// Since when.
        since: Timestamp,
        /// What was heard instead.
        cause: String,
    },
    /// It speaks again.
    MeterBack {
        /// The meter.
        meter: String,
        /// How long it was silent, ms.
        away_ms: u64,
    },
    /// The wall clock jumped.
    ClockStep {
        /// What the clock would have said.
        before: Timestamp,
        /// What it says.
        after: Timestamp,
        /// The first reading after the step.
        seq: i64,
    },
    /// The daemon started.
    DaemonStarted {
        /// Its version.
        version: String,
        /// SHA-256 of the configuration, hexadecimal.
        config_sha256: String,
    },
    /// The daemon stopped in order.
    DaemonStopped {
        /// Why.
        why: String,
    },
    /// A changed configuration was taken up.
    ConfigChanged {
        /// SHA-256 of the configuration, hexadecimal.
        config_sha256: String,
    },
    /// Readings were dropped because the ledger could not be written for too long.
    ReadingsDropped {
        /// How many.
        n: u64,
        /// The first dropped.
        from: Timestamp,
        /// The last dropped.
        to: Timestamp,
    },
    /// Readings were imported.
    Import {
        /// File name without its folder.
        file: String,
        /// Rows kept.
        kept: u64,
        /// Rows already there.
        repeated: u64,
        /// Rows that could not be read.
        broken: u64,
        /// Rows with the time of a kept row but other figures: kept too.
        conflicting: u64,
    },
    /// Readings of a point were sealed: their blob stands in the chain by its hash.
    Sealed {
        /// The point.
        point: Tag,
        /// Beginning of the hour.
        hour: Timestamp,
        /// Which part of the hour.
        part: i64,
        /// How many readings.
        n: u64,
        /// SHA-256 of the blob, hexadecimal.
        sha256: String,
    },
}

impl Event {
    /// Enters the event into the book, if it is a fact about electrodes.
    pub fn enter(self, book: &mut Book) {
        let Self {
            id,
            at,
            entered,
            by,
            body,
        } = self;
        macro_rules! dated {
            ($fact:expr) => {
                Dated {
                    id,
                    at,
                    entered,
                    by,
                    fact: $fact,
                }
            };
        }
        match body {
            Body::ProbeAdded(spec) => book.add_probe(dated!(spec)),
            Body::ProbePlaced { probe, point } => book.move_probe(&probe, dated!(Some(point))),
            Body::ProbeRetired { probe } => book.move_probe(&probe, dated!(None)),
            Body::ProbeServiced { probe, what } => book.add_service(&probe, dated!(what)),
            Body::LotAdded(lot) => book.add_lot(dated!(lot)),
            Body::Calibration(calibration) => book.add_calibration(dated!(calibration)),
            Body::CalibrationStruck {
                probe, calibration, ..
            } => book.strike_calibration(&probe, dated!(calibration)),
            Body::Verification(verification) => book.add_verification(dated!(verification)),
            Body::Grab(grab) => book.add_grab(dated!(grab)),
            Body::Hold(hold) => book.add_hold(dated!(hold)),
            Body::StatusChanged { .. }
            | Body::LineLost { .. }
            | Body::LineBack { .. }
            | Body::MeterSilent { .. }
            | Body::MeterBack { .. }
            | Body::ClockStep { .. }
            | Body::DaemonStarted { .. }
            | Body::DaemonStopped { .. }
            | Body::ConfigChanged { .. }
            | Body::ReadingsDropped { .. }
            | Body::Import { .. }
            | Body::Sealed { .. } => {}
        }
    }
}
