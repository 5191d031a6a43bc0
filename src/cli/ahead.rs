//! # What an electrode is thought to be now, and by when it must be calibrated

use crate::config::site::Point;
use crate::electrode::ageing::{
    CalibrateBy, Demands, Prior, Reason, State, Track, calibrate_by, learn, observe,
};
use crate::electrode::fit::Limits;
use crate::electrode::history::{Book, ProbeHistory, ProbeKind};
use crate::electrode::units::Timestamp;
use crate::watch::reading::Reading;

/// The banks of noise, one per kind of probe, as this site's electrodes have shown them up to a moment.
#[derive(Debug)]
pub(super) struct Learnt {
    at: Timestamp,
    glass: Prior,
    metal: Prior,
}

impl Learnt {
    /// From every probe's events up to `at`.
    pub(super) fn from(book: &Book, at: Timestamp) -> Self {
        let bank = |kind: ProbeKind| {
            let events: Vec<_> = book
                .probes()
                .filter(|probe| probe.spec.kind == kind)
                .map(|probe| observe(probe, &[], at))
                .collect();
            learn(&events, &Prior::of(kind))
        };
        Self {
            at,
            glass: bank(ProbeKind::Ph),
            metal: bank(ProbeKind::Orp),
        }
    }

    /// The probe's track under it; `None` before its first reading in a standard.
    pub(super) fn track(&self, probe: &ProbeHistory) -> Option<Track> {
        let bank = match probe.spec.kind {
            ProbeKind::Ph => &self.glass,
            ProbeKind::Orp => &self.metal,
        };
        Track::run(&observe(probe, &[], self.at), bank)
    }
}

/// What a track says of its electrode at a moment.
#[derive(Debug)]
pub(super) struct Ahead {
    /// Offset, drift and slope now.
    pub(super) now: Option<State>,
    /// When to calibrate; only for a probe that sits at a point and has a calibration in force.
    pub(super) calibrate_by: Option<CalibrateBy>,
    /// Events with standards that the figures rest on.
    pub(super) n_events: usize,
}

/// Looks at `probe`, which sits at `point` if anywhere, from `at`.
pub(super) fn look(
    track: &Track,
    probe: &ProbeHistory,
    (point, reading): (Option<&Point>, Option<&Reading>),
    at: Timestamp,
) -> Ahead {
    let in_force = probe.calibration_at(at);
    let by = point.zip(in_force).and_then(|(point, calibration)| {
        let line = (&calibration.fact.line, calibration.at);
        calibrate_by(track, line, &demands(probe, point, reading), at)
    });
    Ahead {
        now: track.filtered_at(at),
        calibrate_by: by,
        n_events: track.n_events(),
    }
}

/// What the point asks. The liquid's usual pH and temperature are the newest reading's, to half a pH and five degrees, so that the
/// answer stands still while the liquid moves a little.
fn demands(probe: &ProbeHistory, point: &Point, reading: Option<&Reading>) -> Demands {
    let limits = Limits::default();
    let coarse = |figure: f64, step: f64| (figure / step).round() * step;
    let value = reading.and_then(|reading| reading.value);
    let temp_c = reading.and_then(|reading| reading.temp_c);
    let offset_mv = match probe.spec.kind {
        ProbeKind::Ph => limits.offset_warn_mv,
        ProbeKind::Orp => limits.orp_offset_warn_mv,
    };
    Demands {
        kind: probe.spec.kind,
        ph_iso: probe.spec.ph_iso,
        tolerance: point.tolerance,
        slope: [limits.slope_warn[0], limits.slope_accept[1]],
        offset_mv,
        usual_ph: value.map_or(probe.spec.ph_iso, |value| coarse(value, 0.5)),
        usual_temp_c: temp_c
            .filter(|c| (-5.0..=130.0).contains(c))
            .map_or(25.0, |c| coarse(c, 5.0)),
        u_junction: point.u_junction,
    }
}

/// Why the date is what it is, for people.
pub(super) const fn because(reason: Reason) -> &'static str {
    match reason {
        Reason::Uncertainty => "its uncertainty reaches the tolerance then",
        Reason::Slope => "its slope leaves the window then",
        Reason::Offset => "its offset leaves the window then",
        Reason::Age => "nothing else comes first",
    }
}

/// The same in one word, for JSON.
pub(super) const fn reason_word(reason: Reason) -> &'static str {
    match reason {
        Reason::Uncertainty => "uncertainty",
        Reason::Slope => "slope",
        Reason::Offset => "offset",
        Reason::Age => "age",
    }
}
