//! # The port at one rate after another, and what is understood there

use super::{device, framing_text, say, shown};
use crate::cli::failure::{Failure, chain};
use crate::config::site::{Framing, Line, Parity, Protocol};
use crate::daemon::clock;
use crate::meters::listen::propose::Heading;
use crate::meters::listen::rate::{ENOUGH_LINES, Heard, RATES, heard};
use crate::meters::port::{Port, PortError};
use std::cell::Cell;
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

/// Lines after which more would say nothing new.
const PLENTY: usize = 12;

/// Silent rates in a row, with nothing heard at any, after which a line counts as silent: at a wrong rate something arrives.
const SILENT_RATES: usize = 4;

/// How long an answer may take.
const ANSWER: Duration = Duration::from_millis(600);

/// What any meter may answer to.
const WORDS: [(&str, &[u8]); 2] = [("\\r", b"\r"), ("\\r\\n", b"\r\n")];

/// Whoever may be on the line, it names itself to this if it follows the common commands of IEEE 488.2.
const IDENTIFY: &[u8] = b"*IDN?\r\n";

/// Lines that were understood, and how.
#[derive(Debug)]
pub(super) struct Understood {
    pub(super) framing: Framing,
    pub(super) lines: Vec<Vec<u8>>,
    pub(super) terminator: Option<Vec<u8>>,
    /// What it was asked with, as a configuration writes it.
    pub(super) ask: Option<&'static str>,
    pub(super) identification: Option<String>,
}

/// A device that is listened to.
#[derive(Debug)]
pub(super) struct Ear {
    device: PathBuf,
    rates: Vec<u32>,
    patience: Duration,
    /// Bytes heard at all rates.
    n_bytes: Cell<usize>,
}

impl Ear {
    pub(super) fn new(device: PathBuf, baud: Option<u32>, patience: Duration) -> Self {
        Self {
            device,
            rates: baud.map_or_else(|| RATES.to_vec(), |baud| vec![baud]),
            patience,
            n_bytes: Cell::new(0),
        }
    }

    pub(super) fn device(&self) -> &Path {
        &self.device
    }

    pub(super) fn rates(&self) -> &[u32] {
        &self.rates
    }

    pub(super) fn rates_text(&self) -> String {
        let rates: Vec<String> = self.rates.iter().map(ToString::to_string).collect();
        rates.join(", ")
    }

    /// What a block says of this line.
    pub(super) fn heading(&self, framing: Framing) -> Heading {
        let name = self.device.file_name().map(|name| name.to_string_lossy());
        let name: String = name.map_or_else(String::new, |name| {
            name.chars()
                .map(|c| {
                    if c.is_ascii_alphanumeric() || c == '-' {
                        c
                    } else {
                        '-'
                    }
                })
                .collect()
        });
        Heading {
            name: format!("line-{}", name.trim_matches('-')),
            device: device(&self.device),
            framing,
        }
    }

    /// The port at this framing; `None` where the adapter cannot do it.
    pub(super) fn open(&self, framing: Framing) -> Result<Option<Port>, Failure> {
        let line = Line {
            name: "listen".to_owned(),
            device: device(&self.device),
            framing,
            protocol: Protocol::Stream,
        };
        match Port::open(&line) {
            Ok(port) => Ok(Some(port)),
            Err(PortError::Framing { .. }) => Ok(None),
            Err(error) => Err(Failure::world(chain(&error)).remedy(error.remedy())),
        }
    }

    /// Listens at every rate until lines are understood.
    pub(super) async fn listen(&self) -> Result<Option<Understood>, Failure> {
        for parity in [Parity::None, Parity::Even, Parity::Odd] {
            for (n, baud) in self.rates.iter().enumerate() {
                if self.n_bytes.get() == 0 && (n >= SILENT_RATES || parity != Parity::None) {
                    return Ok(None);
                }
                let framing = framing(*baud, parity);
                if let Some(understood) = self.listen_at(framing).await? {
                    return Ok(Some(understood));
                }
            }
        }
        Ok(None)
    }

    async fn listen_at(&self, mut framing: Framing) -> Result<Option<Understood>, Failure> {
        let Some(port) = self.open(framing)? else {
            return Ok(None);
        };
        say(&format!("listening at {}\n", framing_text(framing)));
        self.forget(&port)?;
        let begun = clock::instant();
        let (mut bytes, mut n_shown) = (Vec::new(), 0);
        let mut until = begun + self.patience;
        loop {
            let more = read_until(&port, &mut bytes, until)
                .await
                .map_err(|e| self.gone(&e))?;
            self.n_bytes.set(self.n_bytes.get() + more);
            let over = clock::instant() >= until;
            match heard(&bytes) {
                Heard::Junk => {
                    say("  not understood at this rate\n");
                    return Ok(None);
                }
                Heard::Little if over && bytes.contains(&b'\n') | bytes.contains(&b'\r') => {
                    // A slow talker gets the time for a few lines.
                    if until >= begun + self.patience * 5 {
                        return Ok(None);
                    }
                    until += self.patience;
                }
                Heard::Silent | Heard::Little if over => {
                    say(if bytes.is_empty() {
                        "  silent\n"
                    } else {
                        "  too little to say\n"
                    });
                    return Ok(None);
                }
                Heard::Silent | Heard::Little => {}
                Heard::Text {
                    lines,
                    seven_bits,
                    terminator,
                } => {
                    for line in lines.iter().skip(n_shown) {
                        say(&format!("  {}\n", shown(line)));
                    }
                    n_shown = lines.len();
                    if over || lines.len() >= PLENTY {
                        if let Some(parity) = seven_bits {
                            (framing.data_bits, framing.parity) = (7, parity);
                        }
                        return Ok(Some(Understood {
                            framing,
                            lines,
                            terminator,
                            ask: None,
                            identification: None,
                        }));
                    }
                }
            }
        }
    }

    /// Asks with generic words at every rate until something answers.
    pub(super) async fn ask(&self) -> Result<Option<Understood>, Failure> {
        for baud in &self.rates {
            let framing = framing(*baud, Parity::None);
            let Some(port) = self.open(framing)? else {
                continue;
            };
            say(&format!("asking at {}\n", framing_text(framing)));
            let identification = self.answer(&port, IDENTIFY).await?;
            let identification = identification
                .iter()
                .rev()
                .find(|line| !line.is_empty())
                .map(|line| shown(line));
            if let Some(text) = &identification {
                say(&format!("  it names itself: {text}\n"));
            }
            for (word, bytes) in WORDS {
                let mut lines = Vec::new();
                for n in 0..PLENTY {
                    let answer = self.answer(&port, bytes).await?;
                    for line in &answer {
                        say(&format!("  {word} -> {}\n", shown(line)));
                    }
                    lines.extend(answer);
                    if n >= 1 && lines.is_empty() {
                        break;
                    }
                }
                if lines.len() >= ENOUGH_LINES {
                    return Ok(Some(Understood {
                        framing,
                        lines,
                        terminator: None,
                        ask: Some(word),
                        identification,
                    }));
                }
            }
            if identification.is_some() {
                return Ok(Some(Understood {
                    framing,
                    lines: Vec::new(),
                    terminator: None,
                    ask: None,
                    identification,
                }));
            }
        }
        Ok(None)
    }

    /// Throws away what came before this rate was set.
    fn forget(&self, port: &Port) -> Result<(), Failure> {
        let mut bytes = [0; 1024];
        for _ in 0..64 {
            if port.read_now(&mut bytes).map_err(|e| self.gone(&e))? == 0 {
                break;
            }
        }
        Ok(())
    }

    /// The lines of text that come back within [`ANSWER`], without the echo.
    async fn answer(&self, port: &Port, question: &[u8]) -> Result<Vec<Vec<u8>>, Failure> {
        self.forget(port)?;
        port.write(question).await.map_err(|e| self.gone(&e))?;
        // As if a line had ended before: the answer begins with its own first byte.
        let mut bytes = b"\n".to_vec();
        let until = clock::instant() + ANSWER.min(self.patience);
        while clock::instant() < until {
            read_until(port, &mut bytes, until)
                .await
                .map_err(|e| self.gone(&e))?;
            let echo = bytes
                .strip_prefix(b"\n")
                .is_some_and(|b| question.starts_with(b));
            if !echo && bytes.len() > 1 && bytes.ends_with(b"\n") | bytes.ends_with(b"\r") {
                break;
            }
        }
        self.n_bytes.set(self.n_bytes.get() + bytes.len() - 1);
        let text = bytes
            .iter()
            .all(|b| matches!(b, b' '..=b'~' | b'\t' | b'\r' | b'\n' | 0xA0..));
        let whole = bytes.split(|b| b"\r\n".contains(b));
        let lines = whole
            .filter(|line| {
                line.iter().any(u8::is_ascii_graphic) && *line != question.trim_ascii_end()
            })
            .map(<[u8]>::to_vec);
        Ok(if text { lines.collect() } else { Vec::new() })
    }

    pub(super) fn gone(&self, error: &std::io::Error) -> Failure {
        Failure::world(format!("{}: {error}", self.device.display()))
            .remedy("plug the adapter in again and start anew")
    }

    /// Why nothing was understood.
    pub(super) fn not_understood(&self) -> Failure {
        let at = format!("{}, rates {}", self.device.display(), self.rates_text());
        if self.n_bytes.get() == 0 {
            return Failure::no("the line is silent").at(at).remedy(
                "see that the meter is on, prints by itself, and RX and TX are not swapped; try --ask, then --modbus",
            );
        }
        Failure::no(format!(
            "cannot tell: {} bytes were heard and no lines of text among them",
            self.n_bytes.get()
        ))
        .at(at)
        .remedy("look up the rate in the meter's manual and give it with --baud; try --modbus")
    }
}

pub(super) const fn framing(baud: u32, parity: Parity) -> Framing {
    Framing {
        baud,
        data_bits: 8,
        parity,
        stop_bits: 1,
    }
}

/// Adds what is heard next, if anything is before `until`.
pub(super) async fn read_until(
    port: &Port,
    bytes: &mut Vec<u8>,
    until: Instant,
) -> std::io::Result<usize> {
    let mut some = [0; 1024];
    match tokio::time::timeout_at(until.into(), port.read(&mut some)).await {
        Ok(read) => {
            let n = read?;
            bytes.extend(some.get(..n).unwrap_or(&[]));
            Ok(n)
        }
        Err(_) => Ok(0),
    }
}
