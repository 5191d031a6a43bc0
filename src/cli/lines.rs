//! # `status --lines`: what became of every byte, line by line and meter by meter

use super::context::{Context, ledger_failed, put};
use super::exit::Exit;
use super::failure::Failure;
use super::figures::{self, NOTHING};
use crate::config::site::Site;
use crate::config::time;
use crate::electrode::units::Timestamp;
use crate::ledger::LineState;
use crate::meters::report::{LineReport, MeterReport};
use serde_json::{Value, json};

/// A line of the site with what its daemon last said of it.
struct Row<'a> {
    line: &'a str,
    device: String,
    said: Option<(Timestamp, LineReport)>,
}

/// The counts of every line of the site, as its daemon last wrote them.
pub(super) fn run(context: &Context, site: &Site) -> Result<Exit, Failure> {
    let states = context.reader(site)?.lines();
    let states = states.map_err(|error| ledger_failed(&error))?;
    let rows: Vec<Row<'_>> = site
        .lines
        .iter()
        .map(|line| Row {
            line: &line.name,
            device: line.device.to_string(),
            said: states
                .iter()
                .find(|state| state.line == line.name)
                .and_then(report),
        })
        .collect();
    if context.json {
        let lines: Vec<Value> = rows.iter().map(object).collect();
        return context.put_json(&json!({
            "site": site.name,
            "time": time::rfc3339_ms(context.now),
            "lines": lines,
        }));
    }
    put(&format!(
        "{}, {}\n\n{}",
        site.name,
        time::local_with_zone(context.now, site.timezone),
        text(&rows, context.now)
    ))
}

/// What the daemon wrote; `None` when another version wrote it in other words.
fn report(state: &LineState) -> Option<(Timestamp, LineReport)> {
    Some((state.at, serde_json::from_str(&state.body).ok()?))
}

fn object(row: &Row<'_>) -> Value {
    let report = row.said.as_ref().map(|(_, report)| json!(report));
    let mut object = match report {
        Some(Value::Object(object)) => object,
        _ => serde_json::Map::new(),
    };
    object.insert("line".to_owned(), json!(row.line));
    object.insert("device".to_owned(), json!(row.device));
    let at = row.said.as_ref().map(|(at, _)| time::rfc3339_ms(*at));
    object.insert("time".to_owned(), json!(at));
    Value::Object(object)
}

fn text(rows: &[Row<'_>], now: Timestamp) -> String {
    let mut text = figures::table(
        &[
            "LINE", "PORT", "BYTES", "LINES", "GOOD", "REJECTED", "REOPENED", "AGE", "DEVICE",
        ],
        rows.iter().map(|row| line_cells(row, now)).collect(),
        &[2, 3, 4, 5, 6],
    );
    let meters: Vec<Vec<String>> = rows
        .iter()
        .filter_map(|row| Some((row.line, &row.said.as_ref()?.1)))
        .flat_map(|(line, report)| report.meters.iter().map(move |m| meter_cells(line, m)))
        .collect();
    if !meters.is_empty() {
        text.push('\n');
        text.push_str(&figures::table(
            &[
                "METER",
                "LINE",
                "GOOD",
                "ASKED",
                "TIMEOUTS",
                "LATENCY",
                "LONGEST",
                "ITS CLOCK",
            ],
            meters,
            &[2, 3, 4, 5, 6],
        ));
    }
    for row in rows {
        if let Some((_, report)) = &row.said {
            text.push_str(&remarks(row.line, report));
        }
    }
    text
}

fn line_cells(row: &Row<'_>, now: Timestamp) -> Vec<String> {
    let mut cells = vec![row.line.to_owned()];
    match &row.said {
        None => {
            cells.push("no daemon has run it yet".to_owned());
            cells.extend(std::iter::repeat_n(NOTHING.to_owned(), 6));
        }
        Some((at, report)) => cells.extend([
            if report.lost.is_some() {
                "lost"
            } else {
                "open"
            }
            .to_owned(),
            report.bytes.to_string(),
            report.lines.to_string(),
            report.samples.to_string(),
            report.rejected_total().to_string(),
            report.reopenings.to_string(),
            figures::age(*at, now),
        ]),
    }
    cells.push(row.device.clone());
    cells
}

fn meter_cells(line: &str, meter: &MeterReport) -> Vec<String> {
    let asked = meter.asked > 0;
    let if_asked = |n: u64| {
        if asked {
            n.to_string()
        } else {
            NOTHING.to_owned()
        }
    };
    let ms = |ms: Option<f64>| ms.map_or_else(|| NOTHING.to_owned(), |ms| format!("{ms:.1} ms"));
    let clock = match (meter.clock_ahead_s, meter.clock_drift_s) {
        (Some(ahead), Some(drift)) => format!(
            "{} s to ours, {} s since first heard",
            figures::with_sign(ahead, 1),
            figures::with_sign(drift, 1)
        ),
        _ => NOTHING.to_owned(),
    };
    vec![
        meter.meter.clone(),
        line.to_owned(),
        meter.samples.to_string(),
        if_asked(meter.asked),
        if_asked(meter.timeouts),
        ms(meter.latency_ms),
        ms(meter.latency_max_ms),
        clock,
    ]
}

/// Why the port is lost, what was thrown away and why, and the last few of it.
fn remarks(line: &str, report: &LineReport) -> String {
    let lost = report.lost.iter();
    let lost = lost.map(|cause| format!("\n{line} is lost: {cause}\n"));
    let mut parts: Vec<String> = lost.collect();
    if !report.rejected.is_empty() {
        let reasons = report.rejected.iter();
        let reasons: Vec<String> = reasons.map(|(reason, n)| format!("{reason} {n}")).collect();
        parts.push(format!(
            "\n{line} has thrown away: {}; the last of it:\n",
            reasons.join(", ")
        ));
        let examples = report.examples.iter();
        parts.extend(examples.map(|one| format!("  {}: {}\n", one.reason, one.text)));
    }
    parts.concat()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::meters::report::ExampleReport;

    #[test]
    fn the_counts_of_a_line_and_its_meters_are_told_whole() {
        let now = Timestamp::from_ms(1_772_457_240_000);
        let meter = MeterReport {
            meter: "pond-3".to_owned(),
            samples: 1195,
            asked: 1200,
            timeouts: 3,
            latency_ms: Some(41.26),
            latency_max_ms: Some(180.0),
            own_time: Some("09:14:02".to_owned()),
            clock_ahead_s: Some(2.0),
            clock_drift_s: Some(0.04),
        };
        let report = LineReport {
            lost: Some("the device is gone".to_owned()),
            bytes: 23_900,
            lines: 1197,
            samples: 1195,
            rejected: [("checksum".to_owned(), 1), ("no-match".to_owned(), 1)].into(),
            examples: vec![ExampleReport {
                reason: "no-match".to_owned(),
                text: r"\xffpH 7.0".to_owned(),
            }],
            reopenings: 2,
            meters: vec![meter],
        };
        let rows = [
            Row {
                line: "pond-usb",
                device: "/dev/ttyUSB0".to_owned(),
                said: Some((now.plus_ms(-4_000), report)),
            },
            Row {
                line: "new",
                device: "/dev/ttyUSB1".to_owned(),
                said: None,
            },
        ];
        assert_eq!(
            text(&rows, now),
            r"LINE      PORT                      BYTES  LINES  GOOD  REJECTED  REOPENED  AGE  DEVICE
pond-usb  lost                      23900   1197  1195         2         2  4 s  /dev/ttyUSB0
new       no daemon has run it yet      -      -     -         -         -  -    /dev/ttyUSB1

METER   LINE      GOOD  ASKED  TIMEOUTS  LATENCY   LONGEST  ITS CLOCK
pond-3  pond-usb  1195   1200         3  41.3 ms  180.0 ms  +2.0 s to ours, +0.0 s since first heard

pond-usb is lost: the device is gone

pond-usb has thrown away: checksum 1, no-match 1; the last of it:
  no-match: \xffpH 7.0
"
        );
    }
}
