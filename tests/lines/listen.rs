//! `listen` beside twenty meters whose formats are invented here. Each reads the rate that was set and says what a wrong rate makes of
//! its bytes until it is right.

use halfcell::config::site::{Site, Source};
use halfcell::meters::sample::Figure;
use halfcell::meters::text::TextDecoder;
use rustix::event::{PollFd, PollFlags, Timespec, poll};
use rustix::fs::{Mode, OFlags};
use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};
use rustix::termios::{OptionalActions, tcgetattr, tcsetattr};
use serde_json::Value;
use std::path::PathBuf;
use std::process::{Command, Stdio};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread::JoinHandle;

type Print = fn(usize) -> String;

/// Tension in mV and temperature in °C at a step, where there is one.
type Said = (fn(usize) -> f64, Option<fn(usize) -> f64>);

/// What is true of a meter.
struct Truth {
    name: &'static str,
    baud: u32,
    print: Print,
    /// Its tension in mV and temperature in °C at a step; `None` where nobody could tell from its lines.
    said: Option<Said>,
}

/// −23.4 mV and what comes after, in tenths.
fn mv(n: usize) -> f64 {
    -23.4 + 0.1 * f64::from(u8::try_from(n % 7).unwrap())
}

fn temp(n: usize) -> f64 {
    18.2 + 0.1 * f64::from(u8::try_from(n % 3).unwrap())
}

fn ph(n: usize) -> f64 {
    7.0 - mv(n) / 57.8
}

fn comma(x: f64, places: usize) -> String {
    format!("{x:.places$}").replace('.', ",")
}

const BOTH: Option<Said> = Some((mv, Some(temp)));

const METERS: [Truth; 20] = [
    Truth {
        name: "units behind",
        baud: 9600,
        said: BOTH,
        print: |n| format!("{:.1} mV  {:.1} C\r\n", mv(n), temp(n)),
    },
    Truth {
        name: "names before",
        baud: 4800,
        said: BOTH,
        print: |n| format!("pH {:.2} mV {:.1} T {:.1}\r\n", ph(n), mv(n), temp(n)),
    },
    Truth {
        name: "names with colons",
        baud: 19_200,
        said: BOTH,
        print: |n| format!("pH:{:.2} mV:{:.1} T:{:.1}\n", ph(n), mv(n), temp(n)),
    },
    Truth {
        name: "decimal commas and semicolons",
        baud: 2400,
        said: BOTH,
        print: |n| {
            format!(
                "{};{} mV;{} \u{b0}C\r",
                comma(ph(n), 2),
                comma(mv(n), 1),
                comma(temp(n), 1)
            )
        },
    },
    Truth {
        name: "its own time first",
        baud: 115_200,
        said: BOTH,
        print: |n| {
            format!(
                "02.03.2026 09:14:{:02} E={:.2}mV T={:.1}\u{b0}C\r\n",
                n % 60,
                mv(n),
                temp(n)
            )
        },
    },
    Truth {
        name: "a header now and then",
        baud: 38_400,
        said: BOTH,
        print: |n| {
            if n % 5 == 0 {
                "time,pH,mV,temp\r\n".to_owned()
            } else {
                format!(
                    "09:14:{:02},{:.2},{:.1},{:.1}\r\n",
                    n % 60,
                    ph(n),
                    mv(n),
                    temp(n)
                )
            }
        },
    },
    Truth {
        name: "status words",
        baud: 57_600,
        said: BOTH,
        print: |n| {
            format!(
                "{:>8.1}mV {:>6.1}C {}\r\n",
                mv(n),
                temp(n),
                if n.is_multiple_of(3) { "STAB" } else { "WAIT" }
            )
        },
    },
    Truth {
        name: "a status before",
        baud: 1200,
        said: BOTH,
        print: |n| {
            format!(
                "{} {:.1} mV {:.1} C\r\n",
                if n.is_multiple_of(3) { "ATC" } else { "MTC" },
                mv(n),
                temp(n)
            )
        },
    },
    Truth {
        name: "volts",
        baud: 9600,
        said: BOTH,
        print: |n| format!("{:+.4} V, {:.1} degC\r\n", mv(n) / 1000.0, temp(n)),
    },
    Truth {
        name: "ORP with a name only",
        baud: 9600,
        said: Some((|n| mv(n) + 650.0, Some(temp))),
        print: |n| {
            format!(
                "ORP {:.0}.0;TEMP {:.1}\r\n",
                mv(n) + 650.0 - (mv(n) + 650.0).fract(),
                temp(n)
            )
        },
    },
    Truth {
        name: "an exclusive-or checksum",
        baud: 9600,
        said: BOTH,
        print: |n| {
            let body = format!("$M,{:.1},mV,{:.1},C", mv(n), temp(n));
            let sum = body.bytes().skip(1).fold(0, |a, b| a ^ b);
            format!("{body}*{sum:02X}\r\n")
        },
    },
    Truth {
        name: "no units, a sign",
        baud: 19_200,
        said: BOTH,
        print: |n| format!("{:+08.2} {:.1}\r\n", mv(n), temp(n)),
    },
    Truth {
        name: "over range at times",
        baud: 9600,
        said: BOTH,
        print: |n| {
            if n % 6 == 5 {
                format!("---- mV {:.1} C\r\n", temp(n))
            } else {
                format!("{:.1} mV {:.1} C\r\n", mv(n), temp(n))
            }
        },
    },
    Truth {
        name: "a battery beside",
        baud: 4800,
        said: BOTH,
        print: |n| format!("BAT=3012 mV E={:.1} mV T={:.1} C\r\n", mv(n), temp(n)),
    },
    Truth {
        name: "degrees Fahrenheit",
        baud: 9600,
        said: Some((mv, None)),
        print: |n| format!("{:.1} mV {:.1} F\r\n", mv(n), temp(n) * 1.8 + 32.0),
    },
    Truth {
        name: "a counter and microvolts",
        baud: 9600,
        said: BOTH,
        print: |n| format!("#{n:05} {:.0} uV {:.2} C\n\r", mv(n) * 1000.0, temp(n)),
    },
    Truth {
        name: "exponents and bars",
        baud: 115_200,
        said: BOTH,
        print: |n| format!("| {:.3E} mV | {:.1} C |\r\n", mv(n), temp(n)),
    },
    Truth {
        name: "fields of words",
        baud: 9600,
        said: BOTH,
        print: |n| format!("MV,{:.1},TEMP,{:.1}\r\n", mv(n), temp(n)),
    },
    // Nobody can tell these two.
    Truth {
        name: "two channels of tension",
        baud: 9600,
        said: None,
        print: |n| {
            format!(
                "{:.1} mV {:.1} mV {:.1} C\r\n",
                mv(n),
                mv(n) + 40.0,
                temp(n)
            )
        },
    },
    Truth {
        name: "two meters by turns",
        baud: 9600,
        said: None,
        print: |n| {
            format!(
                "{} {:.1} mV {:.1} C\r\n",
                if n % 2 == 0 { "EAST" } else { "WEST" },
                mv(n) + if n % 2 == 0 { 0.0 } else { 90.0 },
                temp(n)
            )
        },
    },
];

/// A meter behind a pseudo-terminal.
struct Talker {
    path: PathBuf,
    stop: Arc<AtomicBool>,
    thread: Option<JoinHandle<()>>,
}

impl Talker {
    /// One that prints every 20 ms, or answers each carriage return when `asked`.
    fn start(baud: u32, asked: bool, print: impl Fn(usize) -> String + Send + 'static) -> Self {
        let master = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY).unwrap();
        grantpt(&master).unwrap();
        unlockpt(&master).unwrap();
        let path = PathBuf::from(ptsname(&master, Vec::new()).unwrap().into_string().unwrap());
        let slave = rustix::fs::open(&path, OFlags::RDWR | OFlags::NOCTTY, Mode::empty()).unwrap();
        let mut modes = tcgetattr(&slave).unwrap();
        modes.make_raw();
        tcsetattr(&slave, OptionalActions::Now, &modes).unwrap();
        rustix::io::ioctl_fionbio(&master, true).unwrap();
        let stop = Arc::new(AtomicBool::new(false));
        let stopped = Arc::clone(&stop);
        let thread = std::thread::spawn(move || {
            let mut n = 0;
            while !stopped.load(Ordering::Relaxed) {
                let wait = Timespec {
                    tv_sec: 0,
                    tv_nsec: 20_000_000,
                };
                let mut fds = [PollFd::new(&master, PollFlags::IN)];
                let heard = poll(&mut fds, Some(&wait)).unwrap() > 0;
                let mut question = [0; 64];
                let n_heard = if heard {
                    rustix::io::read(&master, &mut question).unwrap_or(0)
                } else {
                    0
                };
                if asked && !question[..n_heard].contains(&b'\r') || !asked && n_heard > 0 {
                    continue;
                }
                let set = tcgetattr(&slave).unwrap().output_speed();
                // One character of its own is one byte: a degree sign is not UTF-8 on a meter.
                let text = print(n);
                let line = text.chars().map(|c| u8::try_from(u32::from(c)).unwrap());
                let bytes: Vec<u8> = if set == baud {
                    line.collect()
                } else if asked {
                    Vec::new()
                } else {
                    garbled(line.collect(), n, set < baud)
                };
                n += 1;
                // Nobody reads: what does not fit is lost, as on a wire.
                rustix::io::write(&master, &bytes).unwrap_or(0);
            }
        });
        Self {
            path,
            stop,
            thread: Some(thread),
        }
    }
}

impl Drop for Talker {
    fn drop(&mut self) {
        self.stop.store(true, Ordering::Relaxed);
        self.thread.take().unwrap().join().unwrap();
    }
}

/// What a receiver at another rate makes of bytes: too slow, it merges them; too fast, it sees each bit many times.
fn garbled(bytes: Vec<u8>, n: usize, slow: bool) -> Vec<u8> {
    let spread = |(i, byte): (usize, u8)| -> Vec<u8> {
        let bit = |k: u8| if byte >> k & 1 == 1 { 0xFF } else { 0x00 };
        if slow {
            if i % 3 == n % 3 {
                vec![byte.rotate_left(3) ^ 0x9C]
            } else {
                Vec::new()
            }
        } else {
            vec![bit(0) & 0xF8, bit(3) | 0x80, bit(5) & 0xE0]
        }
    };
    bytes.into_iter().enumerate().flat_map(spread).collect()
}

fn listen(path: &std::path::Path, words: &[&str]) -> (Option<i32>, Value, String) {
    let output = Command::new(env!("CARGO_BIN_EXE_halfcell"))
        .args(["listen", path.to_str().unwrap(), "--json"])
        .args(words)
        .stdin(Stdio::null())
        .output()
        .unwrap();
    let json = serde_json::from_slice(&output.stdout).unwrap_or(Value::Null);
    (
        output.status.code(),
        json,
        String::from_utf8_lossy(&output.stderr).into_owned(),
    )
}

/// The block in a site with nothing else, as `config check` reads it.
fn checked(block: &str) -> Site {
    let text = format!(
        "[site]\nname = \"found\"\ntimezone = \"UTC\"\nledger = \"/tmp/found.db\"\n\n{block}"
    );
    let name = block.split("[[meter]]\nname    = \"").nth(1).unwrap();
    let name = name.split('"').next().unwrap();
    let point = format!(
        "\n[[point]]\ntag = \"P\"\nquantity = \"orp\"\nsignal = \"{name}.mv\"\n\
         temperature = {{ fixed = 25.0 }}\nevery = \"1s\"\ntolerance = 10.0\n"
    );
    let loaded = halfcell::config::load(&(text + &point));
    assert!(loaded.is_ok(), "{block}\n{loaded:#?}");
    loaded.unwrap()
}

/// Whether the block reads the meter's own lines to what is true.
fn right(truth: &Truth, said: Said, answer: &Value) -> Result<(), String> {
    let site = checked(answer["block"].as_str().unwrap());
    if answer["baud"] != truth.baud {
        return Err(format!("rate {} instead of {}", answer["baud"], truth.baud));
    }
    let meter = &site.meters[0];
    let (Source::Stream { text } | Source::Query { text, .. }) = &meter.source else {
        return Err("no text meter".to_owned());
    };
    let decoder = TextDecoder::new(0, meter, text).unwrap();
    let mut n_read = 0;
    for n in 0..40 {
        let line: Vec<u8> = (truth.print)(n)
            .trim()
            .chars()
            .map(|c| u8::try_from(u32::from(c)).unwrap())
            .collect();
        let Ok(sample) = decoder.decode(&line) else {
            continue;
        };
        for (signal, figure) in meter.signals.iter().zip(&sample.figures) {
            let truth = match signal.name.as_str() {
                "mv" => said.0(n),
                _ => said.1.ok_or("a temperature that is none")?(n),
            };
            match figure {
                Some(Figure::Number(figure)) if (figure - truth).abs() > 0.9 => {
                    return Err(format!("{} {figure} instead of {truth}", signal.name));
                }
                Some(_) => n_read += 1,
                None => return Err(format!("{} is missing", signal.name)),
            }
        }
    }
    let n_signals = 1 + usize::from(said.1.is_some());
    if meter.signals.len() != n_signals || n_read < 25 * n_signals {
        return Err(format!(
            "only {n_read} figures of {} signals read",
            meter.signals.len()
        ));
    }
    Ok(())
}

#[test]
fn twenty_meters_are_found_or_said_to_be_beyond_telling_and_none_is_guessed_wrongly() {
    let found: Vec<_> = std::thread::scope(|scope| {
        let meters: Vec<_> = METERS
            .iter()
            .map(|truth| {
                scope.spawn(move || {
                    let talker = Talker::start(truth.baud, false, truth.print);
                    (truth, listen(&talker.path, &["--for", "2s"]))
                })
            })
            .collect();
        meters
            .into_iter()
            .map(|meter| meter.join().unwrap())
            .collect()
    });
    let (mut n_right, mut wrong) = (0, Vec::new());
    for (truth, (code, answer, talk)) in found {
        match (truth.said, answer["verdict"].as_str()) {
            (Some(said), Some("told")) => match right(truth, said, &answer) {
                Ok(()) => n_right += 1,
                Err(why) => wrong.push(format!("{}: {why}\n{answer:#}", truth.name)),
            },
            (None, Some("cannot-tell")) => {
                assert_eq!(code, Some(1), "{}: {talk}", truth.name);
                assert!(talk.contains("cannot tell: "), "{talk}");
                n_right += 1;
            }
            (None, Some("told")) => wrong.push(format!("{}: guessed\n{answer:#}", truth.name)),
            (Some(_), _) => println!("{}: not told\n{talk}", truth.name),
            (None, _) => panic!("{}: {talk}", truth.name),
        }
    }
    println!("{n_right} of {} right, {} wrong", METERS.len(), wrong.len());
    assert!(wrong.is_empty(), "guessed wrongly:\n{}", wrong.join("\n"));
    assert!(n_right >= 18, "only {n_right} of 20 right");
}

#[test]
fn a_silent_line_is_said_to_be_silent() {
    let talker = Talker::start(9600, true, |_| String::new());
    let (code, _, talk) = listen(&talker.path, &["--for", "150ms"]);
    assert_eq!(code, Some(1), "{talk}");
    assert!(talk.contains("the line is silent"), "{talk}");
}

#[test]
fn bytes_at_no_rate_that_is_tried_are_told_from_silence() {
    let talker = Talker::start(31_250, false, |n| format!("{:.1} mV\r\n", mv(n)));
    let (code, _, talk) = listen(&talker.path, &["--for", "400ms"]);
    assert_eq!(code, Some(1), "{talk}");
    assert!(talk.contains("no lines of text among them"), "{talk}");
}

#[test]
fn a_meter_that_answers_to_a_carriage_return_is_asked_and_becomes_a_query_line() {
    let talker = Talker::start(19_200, true, |n| {
        format!("{:.1} mV {:.1} C\r\n", mv(n), temp(n))
    });
    let (code, answer, talk) = listen(&talker.path, &["--ask"]);
    assert_eq!(code, Some(0), "{talk}");
    let site = checked(answer["block"].as_str().unwrap());
    assert!(
        matches!(&site.meters[0].source, Source::Query { ask, .. } if ask == b"\r"),
        "{answer:#}"
    );
    assert_eq!(site.lines[0].framing.baud, 19_200);
}
