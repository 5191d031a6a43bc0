//! Laws of whole machines, in made-up time: whatever is split, delayed or thrown in between, no value is wrong.

use crate::harness::{MS, line, meter, site, text};
use halfcell::config::site::{Protocol, Site, Source};
use halfcell::daemon::clock::instant;
use halfcell::meters::checksum::crc16_modbus;
use halfcell::meters::machine::{Action, LineMachine};
use halfcell::meters::sample::{Figure, Sample};
use proptest::prelude::*;
use std::path::Path;
use std::sync::Arc;
use std::time::{Duration, Instant};

const TIMEOUT: Duration = Duration::from_millis(100);
const METERS: u8 = 3;

/// What becomes of one answer.
#[derive(Debug, Clone)]
struct Fate {
    /// How late it begins; up to nearly a timeout after its question was given up.
    after_ms: u64,
    /// Thrown in before it.
    junk: Vec<u8>,
    /// Where it is cut; each piece comes 3 ms after the one before.
    cuts: Vec<usize>,
    /// Whether there is one at all.
    comes: bool,
}

fn fate(junk: impl Strategy<Value = u8>) -> impl Strategy<Value = Fate> {
    (
        prop_oneof![3 => 0_u64..50, 1 => 90_u64..180],
        prop::collection::vec(junk, 0..30),
        prop::collection::vec(0_usize..40, 0..3),
        prop::bool::weighted(0.85),
    )
        .prop_map(|(after_ms, junk, cuts, comes)| Fate {
            after_ms,
            junk,
            cuts,
            comes,
        })
}

fn asked_site(protocol: Protocol) -> Arc<Site> {
    let source = |n: u8| match protocol {
        Protocol::ModbusRtu => Source::Modbus {
            unit: n + 1,
            every: 200 * MS,
            timeout: TIMEOUT,
        },
        Protocol::Query | Protocol::Stream => Source::Query {
            ask: format!("Q{n}\r").into_bytes(),
            every: 200 * MS,
            timeout: TIMEOUT,
            text: text(r"^.*A(?<mv>\d+);(?<temp_c>\d+)#$"),
        },
    };
    let meters = (0..METERS).map(|n| meter(&format!("m{n}"), 0, source(n)));
    site(
        vec![line(Path::new("/dev/null"), protocol)],
        meters.collect(),
    )
}

/// Both figures of a sample, as they were on the wire.
fn figures(sample: &Sample, scale: f64) -> (f64, f64) {
    let figure = |n: usize| match sample.figures[n] {
        Some(Figure::Number(figure)) => (figure / scale).round(),
        Some(Figure::OverRange) | None => f64::NAN,
    };
    (figure(0), figure(1))
}

/// Asks and answers by the fates; every sample must be the answer to the very question that is out, of the very meter.
fn every_sample_answers_its_own_question(
    protocol: Protocol,
    fates: &[Fate],
    answer: impl Fn(&[u8], u16) -> (u8, Vec<u8>),
    scale: f64,
) -> Result<usize, TestCaseError> {
    let begun = instant();
    let mut machine = LineMachine::new(&asked_site(protocol), 0, begun).unwrap();
    machine.on_open(begun);
    let mut coming: Vec<(Instant, Vec<u8>)> = Vec::new();
    let (mut out, mut n, mut n_samples) = ((0_u8, 0_u16), 0_u16, 0);
    while usize::from(n) < fates.len() || !coming.is_empty() {
        coming.sort_by_key(|(at, _)| *at);
        let wake = machine.wake_at().unwrap();
        let heard = coming.first().is_some_and(|(at, _)| *at <= wake);
        let actions = if heard {
            let (at, bytes) = coming.remove(0);
            machine.on_bytes(&bytes, at)
        } else {
            machine.on_wake(wake)
        };
        for action in actions {
            match action {
                Action::Send(question) => {
                    let Some(fate) = fates.get(usize::from(n)) else {
                        return Ok(n_samples);
                    };
                    n += 1;
                    let (meter, said) = answer(&question, n);
                    out = (meter, n);
                    let mut bytes = fate.junk.clone();
                    bytes.extend(if fate.comes { said } else { Vec::new() });
                    let mut cuts: Vec<usize> = fate
                        .cuts
                        .iter()
                        .map(|c| c.min(&bytes.len()).to_owned())
                        .collect();
                    cuts.extend([0, bytes.len()]);
                    cuts.sort_unstable();
                    for (i, cut) in (0_u32..).zip(cuts.windows(2)) {
                        let at = wake + Duration::from_millis(fate.after_ms) + 3 * MS * i;
                        coming.push((at, bytes[cut[0]..cut[1]].to_vec()));
                    }
                    coming.retain(|(_, bytes)| !bytes.is_empty());
                }
                Action::Deliver(sample) => {
                    n_samples += 1;
                    let got = figures(&sample, scale);
                    prop_assert_eq!(sample.meter, usize::from(out.0));
                    prop_assert_eq!(got, (f64::from(out.1), f64::from(out.0)));
                }
                Action::Silent { .. } | Action::Back { .. } => {}
            }
        }
    }
    Ok(n_samples)
}

/// The figures of each sample that a talker's bytes give, in these pieces.
fn heard(site: &Site, pieces: &[&[u8]]) -> (Vec<Vec<Option<Figure>>>, u64, u64) {
    let now = instant();
    let mut machine = LineMachine::new(site, 0, now).unwrap();
    let deliveries = |action| match action {
        Action::Deliver(sample) => Some(sample.figures),
        Action::Send(_) | Action::Silent { .. } | Action::Back { .. } => None,
    };
    let samples: Vec<_> = pieces
        .iter()
        .flat_map(|piece| machine.on_bytes(piece, now))
        .filter_map(deliveries)
        .collect();
    let counters = machine.counters();
    (samples, counters.lines, counters.rejected_total())
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(300))]

    #[test]
    fn a_text_answer_is_never_credited_to_another_question(
        fates in prop::collection::vec(fate(any::<u8>().prop_filter("ends an answer", |b| *b != b'#')), 1..25),
    ) {
        every_sample_answers_its_own_question(Protocol::Query, &fates, |question, n| {
            let meter = question[1] - b'0';
            (meter, format!("\rA{n};{meter}#\r").into_bytes())
        }, 1.0)?;
    }

    #[test]
    fn a_modbus_answer_is_never_credited_to_another_question(fates in prop::collection::vec(fate(any::<u8>()), 1..25)) {
        every_sample_answers_its_own_question(Protocol::ModbusRtu, &fates, |question, n| {
            let unit = question[0];
            let mut frame = vec![unit, 4, 4];
            frame.extend(n.to_be_bytes());
            frame.extend([0, unit - 1]);
            frame.extend(crc16_modbus(&frame).to_le_bytes());
            (unit - 1, frame)
        }, 0.1)?;
    }

    #[test]
    fn a_talkers_bytes_give_the_same_samples_in_any_split(
        said in prop::collection::vec(prop_oneof![
            (-2000_i32..2000, 0_i32..400).prop_map(|(mv, t)| format!("{}.{} mV {}.{} C\r\n", mv / 10, (mv % 10).abs(), t / 10, t % 10).into_bytes()),
            prop::collection::vec(any::<u8>(), 0..40),
            Just(b" OL mV 20.0 C\r".to_vec()),
            Just(vec![b'x'; 700]),
        ], 0..30),
        cuts in prop::collection::vec(0_usize..3000, 0..30),
    ) {
        let source = Source::Stream { text: text(r"(?<mv>[-+]?\d+[.,]\d+)\s*mV\s+(?<temp_c>[-+]?\d+[.,]\d+)") };
        let site = site(vec![line(Path::new("/dev/null"), Protocol::Stream)], vec![meter("m", 0, source)]);
        let said = said.concat();
        let mut cuts: Vec<usize> = cuts.into_iter().map(|c| c.min(said.len())).chain([0, said.len()]).collect();
        cuts.sort_unstable();
        let pieces: Vec<&[u8]> = cuts.windows(2).map(|w| &said[w[0]..w[1]]).collect();
        let whole = heard(&site, &[&said]);
        prop_assert_eq!(whole.1, whole.0.len() as u64 + whole.2, "each line is a sample or a counted reason");
        prop_assert_eq!(heard(&site, &pieces), whole);
    }
}

#[test]
fn answers_in_time_without_junk_are_all_taken() {
    let fates = vec![
        Fate {
            after_ms: 10,
            junk: Vec::new(),
            cuts: vec![2],
            comes: true
        };
        30
    ];
    let n = every_sample_answers_its_own_question(
        Protocol::Query,
        &fates,
        |question, n| {
            let meter = question[1] - b'0';
            (meter, format!("A{n};{meter}#\r").into_bytes())
        },
        1.0,
    );
    assert_eq!(n.unwrap(), 30);
}
