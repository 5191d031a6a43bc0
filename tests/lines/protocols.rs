//! The three protocols, each from the wire to the sample.

use crate::harness::{MS, Peer, Running, line, meter, numbers, run, site, text};
use halfcell::config::site::{Protocol, Source};
use halfcell::daemon::line::FromLine;
use halfcell::meters::checksum::crc16_modbus;
use halfcell::meters::counters::Reason;
use halfcell::meters::port::Port;
use rustix::termios::InputModes;
use std::time::Duration;

const LIMIT: Duration = Duration::from_secs(10);
const PATTERN: &str = r"^\s*(?<mv>[-+]?\d+[.,]\d+)\s*mV\s+(?<temp_c>[-+]?\d+[.,]\d+)";

fn counters(told: &[FromLine]) -> halfcell::meters::counters::Counters {
    let last = told.iter().rev().find_map(|m| match m {
        FromLine::Counters { counters, .. } => Some((**counters).clone()),
        _ => None,
    });
    last.unwrap()
}

#[test]
fn a_talker_is_heard_through_junk_and_nothing_is_invented() {
    run(async {
        let peer = Peer::mute();
        let source = Source::Stream {
            text: text(PATTERN),
        };
        let site = site(
            vec![line(&peer.path, Protocol::Stream)],
            vec![meter("a", 0, source)],
        );
        // Said before anybody listens: it may have lost its beginning.
        peer.say("7.5 mV 25.0\r\n");
        peer.said_all(13);
        let mut running = Running::start(&site, 0);
        peer.say("-177,5 mV 25.0 C\r\n");
        running
            .until("a first sample", LIMIT, |told| numbers(told, 0).len() == 1)
            .await;
        peer.say([0xFF, 0x00, 0x00]);
        peer.say(" 1.0 mV 1.0\r\n");
        peer.say([b'x'; 5000]);
        peer.say("\r\n pH 7.00 ATC\r\n OL mV 25.0\r\n");
        peer.say("12.5 m");
        peer.say(b"V\t24.9\xB0C\n");
        running
            .until("three samples", LIMIT, |told| numbers(told, 0).len() == 3)
            .await;
        let told = running.end().await;
        assert_eq!(
            numbers(&told, 0),
            [[-177.5, 25.0], [f64::INFINITY, 25.0], [12.5, 24.9]]
        );
        let counters = counters(&told);
        assert_eq!(counters.rejected(Reason::Damaged), 1);
        assert_eq!(counters.rejected(Reason::TooLong), 1);
        assert_eq!(counters.rejected(Reason::NoMatch), 1);
        assert_eq!(
            counters.lines,
            counters.samples() + counters.rejected_total()
        );
    });
}

#[test]
fn two_meters_on_one_line_answer_each_its_own_question_and_the_echo_is_none() {
    run(async {
        let peer = Peer::start(|heard| match heard {
            b"A?\r" => vec![
                (Duration::ZERO, b"A?\r".to_vec()),
                (20 * MS, b"-12.0 mV 20.0\r".to_vec()),
            ],
            b"B?\r" => vec![(Duration::ZERO, b"B?\r+34.0 mV 21.0\r".to_vec())],
            _ => Vec::new(),
        });
        let source = |ask: &str| Source::Query {
            ask: ask.as_bytes().to_vec(),
            every: 50 * MS,
            timeout: 200 * MS,
            text: text(PATTERN),
        };
        let meters = vec![meter("a", 0, source("A?\r")), meter("b", 0, source("B?\r"))];
        let site = site(vec![line(&peer.path, Protocol::Query)], meters);
        let mut running = Running::start(&site, 0);
        running
            .until("ten of each", LIMIT, |t| {
                numbers(t, 0).len() >= 10 && numbers(t, 1).len() >= 10
            })
            .await;
        let told = running.end().await;
        assert!(numbers(&told, 0).iter().all(|n| n == &[-12.0, 20.0]));
        assert!(numbers(&told, 1).iter().all(|n| n == &[34.0, 21.0]));
        let counters = counters(&told);
        assert!(counters.rejected(Reason::Echo) >= 20, "{counters:?}");
        assert_eq!(counters.meters[0].timeouts + counters.meters[1].timeouts, 0);
        assert!(
            counters.meters[0].latency >= 20 * MS && counters.meters[0].latency < 200 * MS,
            "{counters:?}"
        );
    });
}

#[test]
fn a_late_text_answer_is_credited_to_nobody() {
    run(async {
        let mut asked = 0;
        let peer = Peer::start(move |heard| {
            if !heard.ends_with(b"?\r") {
                return Vec::new();
            }
            asked += 1;
            // Every third answer comes after its time.
            let after = if asked % 3 == 0 { 130 * MS } else { 5 * MS };
            vec![(
                after,
                format!("{}.0 mV {}.0\r", i32::from(heard[0]), asked).into_bytes(),
            )]
        });
        let source = |ask: &str| Source::Query {
            ask: ask.as_bytes().to_vec(),
            every: 20 * MS,
            timeout: 100 * MS,
            text: text(PATTERN),
        };
        let meters = vec![meter("a", 0, source("a?\r")), meter("b", 0, source("b?\r"))];
        let site = site(vec![line(&peer.path, Protocol::Query)], meters);
        let mut running = Running::start(&site, 0);
        running
            .until("ten of each", LIMIT, |t| {
                numbers(t, 0).len() >= 10 && numbers(t, 1).len() >= 10
            })
            .await;
        let told = running.end().await;
        for (meter, own) in [(0, 97.0), (1, 98.0)] {
            for said in numbers(&told, meter) {
                assert!(
                    (said[0] - own).abs() < 0.01,
                    "meter {meter} was given {said:?}"
                );
                assert!(said[1] % 3.0 > 0.5, "the late answer {said:?} was taken");
            }
        }
        assert!(counters(&told).rejected(Reason::Unasked) >= 3);
    });
}

#[test]
fn a_meter_that_is_there_and_mute_is_silent_and_its_line_is_not_lost() {
    run(async {
        let peer = Peer::mute();
        let source = Source::Query {
            ask: b"?\r".to_vec(),
            every: 20 * MS,
            timeout: 30 * MS,
            text: text(PATTERN),
        };
        let site = site(
            vec![line(&peer.path, Protocol::Query)],
            vec![meter("a", 0, source)],
        );
        let mut running = Running::start(&site, 0);
        running
            .until("a silent meter", LIMIT, |t| {
                t.iter()
                    .any(|m| matches!(m, FromLine::MeterSilent { meter: 0, .. }))
            })
            .await;
        let told = running.end().await;
        assert!(
            !told.iter().any(|m| matches!(m, FromLine::Lost { .. })),
            "{told:#?}"
        );
    });
}

#[test]
fn units_of_a_bus_are_read_in_turn_with_adjacent_registers_in_one_request() {
    run(async {
        let peer = Peer::start(|heard| {
            let [unit, 4, 0, 0, 0, 2, _, _] = heard else {
                return Vec::new();
            };
            let mut answer = vec![*unit, 4, 4, 0xF9, *unit, 0, 250];
            answer.extend(crc16_modbus(&answer).to_le_bytes());
            vec![(Duration::ZERO, answer)]
        });
        let source = |unit| Source::Modbus {
            unit,
            every: 30 * MS,
            timeout: 100 * MS,
        };
        let meters = vec![
            meter("a", 0, source(1)),
            meter("b", 0, source(11)),
            meter("c", 0, source(2)),
        ];
        let site = site(vec![line(&peer.path, Protocol::ModbusRtu)], meters);
        let mut running = Running::start(&site, 0);
        running
            .until("ten of each", LIMIT, |t| {
                (0..3).all(|m| numbers(t, m).len() >= 10)
            })
            .await;
        let told = running.end().await;
        for (meter, unit) in [(0, 1_i16), (1, 11), (2, 2)] {
            let mv = f64::from(i16::from_be_bytes([0xF9, 0]) + unit) * 0.1;
            assert!(
                numbers(&told, meter)
                    .iter()
                    .all(|n| (n[0] - mv).abs() < 1e-9 && (n[1] - 25.0).abs() < 1e-9)
            );
        }
    });
}

#[test]
fn a_port_has_one_owner_and_loses_no_damaged_byte() {
    run(async {
        let peer = Peer::mute();
        let mut of = line(&peer.path, Protocol::Stream);
        of.framing.parity = halfcell::config::site::Parity::Even;
        let port = Port::open(&of).unwrap();
        let second = Port::open(&of).unwrap_err();
        assert!(
            second
                .to_string()
                .starts_with("line `stream-line`: cannot open /dev/pts/"),
            "{second}"
        );
        assert_eq!(
            second.remedy(),
            "stop the other program that has the port open"
        );
        let modes = peer.modes().input_modes;
        assert!(
            !modes.intersects(InputModes::IGNPAR | InputModes::IGNBRK | InputModes::PARMRK),
            "{modes:?}"
        );
        assert!(modes.contains(InputModes::INPCK), "{modes:?}");
        drop(port);
        assert!(Port::open(&of).is_ok(), "free again");
    });
}
