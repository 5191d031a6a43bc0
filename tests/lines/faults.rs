//! A Modbus slave that spoils one answer. Whatever it does, no wrong value is taken and the next questions are answered.

use crate::harness::{MS, Peer, Running, Said, alone, line, meter, numbers, run, site};
use halfcell::config::site::{Protocol, Source};
use halfcell::daemon::line::FromLine;
use halfcell::meters::checksum::crc16_modbus;
use halfcell::meters::counters::Reason;
use std::time::Duration;
use tokio::task::LocalSet;

const TIMEOUT: Duration = Duration::from_millis(150);

/// What becomes of the spoiled answer.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Spoiled {
    /// Taken all the same: it is whole.
    Taken,
    /// Not taken.
    Lost,
}
use Spoiled::{Lost, Taken};

fn crc(mut frame: Vec<u8>) -> Vec<u8> {
    frame.extend(crc16_modbus(&frame).to_le_bytes());
    frame
}

/// The right answer to the n-th question.
fn right(n: u8) -> Vec<u8> {
    crc(vec![11, 4, 4, 0, n, 0, 250])
}

fn at_once(bytes: Vec<u8>) -> Said {
    vec![(Duration::ZERO, bytes)]
}

fn stray(n: usize, then: Vec<u8>) -> Said {
    // Stray bytes that look like the beginning of an answer are the worst ones.
    let junk = (0..n).map(|i| [11, 4, 4, 0xA5, 0x5A][i % 5]);
    at_once(junk.chain(then).collect())
}

/// Asks eight times; the third answer is as `spoil` makes it.
async fn check(fault: &str, spoiled: Spoiled, spoil: impl Fn(u8, &[u8]) -> Said + Send + 'static) {
    let mut n = 0;
    let peer = Peer::start(move |heard| {
        if heard.len() < 8 {
            return Vec::new();
        }
        n += 1;
        if n == 3 {
            spoil(n, heard)
        } else {
            at_once(right(n))
        }
    });
    let source = Source::Modbus {
        unit: 11,
        every: 40 * MS,
        timeout: TIMEOUT,
    };
    let site = site(
        vec![line(&peer.path, Protocol::ModbusRtu)],
        vec![meter("m", 0, source)],
    );
    let mut running = Running::start(&site, 0);
    let mv = |told: &[FromLine]| -> Vec<f64> {
        numbers(told, 0)
            .iter()
            .map(|n| (n[0] * 10.0).round())
            .collect()
    };
    running
        .until(fault, Duration::from_secs(10), |told| {
            mv(told).last().is_some_and(|n| *n >= 8.0)
        })
        .await;
    let got = mv(&running.end().await);
    let wanted: Vec<f64> = (1..=8)
        .filter(|n| *n != 3 || spoiled == Taken)
        .map(f64::from)
        .collect();
    assert_eq!(got[..wanted.len()], wanted, "{fault}");
}

#[test]
fn no_fault_of_the_table_gives_a_wrong_value_or_costs_more_than_its_own_poll() {
    let _alone = alone();
    run(async {
        let all = LocalSet::new();
        let rows = [
            all.spawn_local(check("one stray byte before", Taken, |n, _| {
                stray(1, right(n))
            })),
            all.spawn_local(check("two stray bytes before", Taken, |n, _| {
                stray(2, right(n))
            })),
            all.spawn_local(check("a 00 glitch before", Taken, |n, _| {
                at_once([vec![0], right(n)].concat())
            })),
            all.spawn_local(check("5 stray bytes before", Taken, |n, _| {
                stray(5, right(n))
            })),
            all.spawn_local(check("40 stray bytes before", Taken, |n, _| {
                stray(40, right(n))
            })),
            all.spawn_local(check("200 stray bytes before", Taken, |n, _| {
                stray(200, right(n))
            })),
            all.spawn_local(check("2000 stray bytes before", Taken, |n, _| {
                stray(2000, right(n))
            })),
            all.spawn_local(check("10 ms after the timeout", Lost, |n, _| {
                vec![(TIMEOUT + 15 * MS, right(n))]
            })),
            all.spawn_local(check("50 ms after the timeout", Lost, |n, _| {
                vec![(TIMEOUT + 50 * MS, right(n))]
            })),
            all.spawn_local(check("140 ms after the timeout", Lost, |n, _| {
                vec![(TIMEOUT + 140 * MS, right(n))]
            })),
            all.spawn_local(check("an echo before the answer", Taken, |n, heard| {
                at_once([heard.to_vec(), right(n)].concat())
            })),
            all.spawn_local(check("an echo alone", Lost, |_, heard| {
                at_once(heard.to_vec())
            })),
            all.spawn_local(check("fewer registers", Lost, |_, _| {
                at_once(crc(vec![11, 4, 2, 0x30, 0x39]))
            })),
            all.spawn_local(check("another function", Lost, |_, _| {
                at_once(crc(vec![11, 3, 4, 0x30, 0x39, 0, 1]))
            })),
            all.spawn_local(check("a wrong CRC", Lost, |n, _| {
                let mut answer = right(n);
                answer[4] ^= 0x40;
                at_once(answer)
            })),
            all.spawn_local(check("another unit", Lost, |_, _| {
                at_once(crc(vec![12, 4, 4, 0x30, 0x39, 0, 1]))
            })),
            all.spawn_local(check("cut off", Lost, |n, _| {
                at_once(right(n)[..6].to_vec())
            })),
            all.spawn_local(check("silence", Lost, |_, _| {
                vec![(Duration::ZERO, Vec::new())]
            })),
            all.spawn_local(check("an exception", Lost, |_, _| {
                at_once(crc(vec![11, 0x84, 2]))
            })),
            all.spawn_local(check("three bytes behind", Taken, |n, _| {
                at_once([right(n), vec![0xFF, 11, 4]].concat())
            })),
            all.spawn_local(check("byte by byte", Taken, |n, _| {
                right(n)
                    .into_iter()
                    .zip(0..)
                    .map(|(byte, i)| (4 * i * MS, vec![byte]))
                    .collect()
            })),
        ];
        all.await;
        for row in rows {
            row.await.unwrap();
        }
    });
}

#[test]
fn an_exception_is_shown_by_its_name_and_a_dead_unit_does_not_starve_the_others() {
    let _alone = alone();
    run(async {
        let peer = Peer::start(|heard| match heard {
            [1, 4, ..] if heard.len() == 8 => at_once(crc(vec![1, 0x84, 2])),
            [2, 4, ..] if heard.len() == 8 => at_once(crc(vec![2, 4, 4, 0, 7, 0, 250])),
            _ if heard.len() >= 8 => vec![(Duration::ZERO, Vec::new())],
            _ => Vec::new(),
        });
        let source = |unit| Source::Modbus {
            unit,
            every: 20 * MS,
            timeout: 50 * MS,
        };
        let meters = vec![
            meter("refuses", 0, source(1)),
            meter("well", 0, source(2)),
            meter("dead", 0, source(3)),
        ];
        let site = site(vec![line(&peer.path, Protocol::ModbusRtu)], meters);
        let mut running = Running::start(&site, 0);
        let silent = |told: &[FromLine], of: usize| {
            told.iter().find_map(|m| match m {
                FromLine::MeterSilent { meter, cause, .. } if *meter == of => Some(cause.clone()),
                _ => None,
            })
        };
        running
            .until(
                "both known as silent and the well one read 40 times",
                Duration::from_secs(10),
                |told| {
                    silent(told, 0).is_some()
                        && silent(told, 2).is_some()
                        && numbers(told, 1).len() >= 40
                },
            )
            .await;
        let told = running.end().await;
        assert_eq!(
            silent(&told, 0).unwrap(),
            "unit 1 answers with exception 2, illegal data address"
        );
        assert_eq!(silent(&told, 2).unwrap(), "unit 3: no answer");
        let Some(FromLine::Counters { counters, .. }) = told.last() else {
            panic!("no counters at the end")
        };
        assert_eq!(
            (counters.meters[2].asked, counters.meters[2].timeouts),
            (3, 3)
        );
        assert!(counters.rejected(Reason::Exception) >= 3);
        assert_eq!(counters.meters[1].timeouts, 0);
    });
}
