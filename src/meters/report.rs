//! # The counts of a line as they are kept and shown: names instead of indices, the same words in the ledger and in JSON

use super::counters::{Counters, MeterCounters, Reason};
use crate::config::site::Site;
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;
use std::time::Duration;

/// What one line has heard, thrown away and waited for since its task began.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LineReport {
    /// Why the port is lost; `None` while it is open.
    pub lost: Option<String>,
    /// Bytes heard.
    pub bytes: u64,
    /// Text lines ended, or Modbus answers taken.
    pub lines: u64,
    /// Samples of all meters.
    pub samples: u64,
    /// How often something was thrown away, by reason; reasons that never came up are left out.
    pub rejected: BTreeMap<String, u64>,
    /// The last few that were thrown away, oldest first.
    pub examples: Vec<ExampleReport>,
    /// Times the port was opened again.
    pub reopenings: u64,
    /// The meters on the line.
    pub meters: Vec<MeterReport>,
}

/// Something that was thrown away.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct ExampleReport {
    /// Why.
    pub reason: String,
    /// Its beginning, printable.
    pub text: String,
}

/// What became of one meter.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct MeterReport {
    /// Its name.
    pub meter: String,
    /// Samples delivered.
    pub samples: u64,
    /// Questions asked.
    pub asked: u64,
    /// Questions without an answer in time.
    pub timeouts: u64,
    /// From the last answered question to its answer, ms; `None` where nothing was answered yet.
    pub latency_ms: Option<f64>,
    /// The longest such time, ms.
    pub latency_max_ms: Option<f64>,
    /// The time the meter last printed, as it stood there.
    pub own_time: Option<String>,
    /// How far that was ahead of our clock in the site's zone, s, in half a day either way.
    pub clock_ahead_s: Option<f64>,
    /// How much further ahead it is than when its line's task began, s.
    pub clock_drift_s: Option<f64>,
}

impl LineReport {
    /// The counts of a line of this site.
    pub fn new(site: &Site, counters: &Counters) -> Self {
        let rejected = Reason::ALL
            .into_iter()
            .map(|reason| (reason.name().to_owned(), counters.rejected(reason)))
            .filter(|(_, n)| *n > 0)
            .collect();
        let examples = counters.examples.iter().map(|example| ExampleReport {
            reason: example.reason.name().to_owned(),
            text: example.text.clone(),
        });
        let meters = counters.meters.iter().map(|of| {
            let name = site.meters.get(of.meter).map(|meter| meter.name.clone());
            MeterReport::new(name.unwrap_or_default(), of)
        });
        Self {
            lost: counters.lost.clone(),
            bytes: counters.bytes,
            lines: counters.lines,
            samples: counters.samples(),
            rejected,
            examples: examples.collect(),
            reopenings: counters.reopenings,
            meters: meters.collect(),
        }
    }

    /// How often something was thrown away.
    pub fn rejected_total(&self) -> u64 {
        self.rejected.values().sum()
    }
}

impl MeterReport {
    fn new(meter: String, of: &MeterCounters) -> Self {
        let answered = of.asked > 0 && of.latency_max > Duration::ZERO;
        let ms = |span: Duration| answered.then(|| (span.as_secs_f64() * 1e4).round() / 10.0);
        let clock = of.clock.as_ref();
        Self {
            meter,
            samples: of.samples,
            asked: of.asked,
            timeouts: of.timeouts,
            latency_ms: ms(of.latency),
            latency_max_ms: ms(of.latency_max),
            own_time: clock.map(|clock| clock.said.clone()),
            clock_ahead_s: clock.map(|clock| clock.ahead_s),
            clock_drift_s: clock.map(|clock| clock.ahead_s - clock.first_ahead_s),
        }
    }
}
