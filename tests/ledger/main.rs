//! The ledger's promises, tested by breaking the world.

#![expect(
    clippy::unwrap_used,
    reason = "helpers of tests, outside the test functions"
)]

mod broken;
mod chain;
mod copies;
mod import;
mod kept;
mod killed;
mod model;
mod sealed;
mod trouble;
mod upgraded;
mod writer;

use halfcell::electrode::history::{EventId, ProbeId, ProbeKind, ProbeSpec, Tag};
use halfcell::electrode::orp::ReferenceElectrode;
use halfcell::electrode::units::Timestamp;
use halfcell::ledger::event::{Body, NewEvent};
use halfcell::ledger::{Ledger, PointId, Reader};
use halfcell::watch::flags::{Flag, Test, Tests};
use halfcell::watch::reading::{Reading, TemperatureSource};
use std::ops::ControlFlow;
use std::path::PathBuf;

/// When the tests are.
const NOW: Timestamp = Timestamp::from_ms(1_800_000_000_000);

/// A fresh ledger in a folder of its own.
struct Fresh {
    folder: tempfile::TempDir,
    path: PathBuf,
    ledger: Ledger,
    point: PointId,
}

fn fresh() -> Fresh {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("site.db");
    let mut ledger = Ledger::open(&path).unwrap();
    let point = ledger.point(&Tag::from("POND-3"), ProbeKind::Ph).unwrap();
    Fresh {
        folder,
        path,
        ledger,
        point,
    }
}

fn reading(t_ms: i64, mv: f64) -> Reading {
    let mut tests = Tests::NONE;
    tests.mark(Test::Spike);
    tests.mark(Test::NoCalibration);
    Reading {
        at: Timestamp::from_ms(t_ms),
        mv: Some(mv),
        temp_c: Some(21.3),
        value: Some(7.1234),
        u: Some(0.041_237),
        calibration: Some(12 as EventId),
        flag: Flag::Suspect,
        tests,
        temperature_source: TemperatureSource::Fixed,
    }
}

fn event(at_ms: i64, body: Body) -> NewEvent {
    NewEvent {
        at: Timestamp::from_ms(at_ms),
        entered: Timestamp::from_ms(at_ms + 5),
        by: "M. Oake".to_owned(),
        body,
    }
}

fn probe(id: &str) -> Body {
    Body::ProbeAdded(ProbeSpec {
        id: ProbeId::from(id),
        kind: ProbeKind::Ph,
        reference: ReferenceElectrode::ALL[0],
        ph_iso: 0.1 + 0.2 + 6.7,
        serial: None,
    })
}

fn all(path: &std::path::Path, point: PointId) -> Vec<(i64, Reading)> {
    let mut rows = Vec::new();
    Reader::open(path)
        .unwrap()
        .readings(
            point,
            Timestamp::from_ms(i64::MIN / 4),
            Timestamp::from_ms(i64::MAX / 4),
            |seq, reading| {
                rows.push((seq, reading));
                ControlFlow::Continue(())
            },
        )
        .unwrap();
    rows
}
