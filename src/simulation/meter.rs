//! # Live meters on the far end of a serial line: the near end is a real pseudo-terminal
//!
//! One thread per line, waiting in the kernel. A meter talks only while somebody has the line open, like an adapter that nobody reads.

use super::electrode::Shown;
use super::random::bits_at;
use super::talk::{Talk, find_request, modbus_answer, query_line, stream_line};
use crate::electrode::units::Timestamp;
use rustix::event::{PollFd, PollFlags, Timespec, poll};
use rustix::fd::{AsFd, BorrowedFd, OwnedFd};
use rustix::io::Errno;
use rustix::pty::{OpenptFlags, ioctl_tiocgptpeer, openpt, ptsname, unlockpt};
use rustix::termios::{OptionalActions, QueueSelector, tcflush, tcgetattr, tcsetattr};
use std::ffi::OsStr;
use std::io::{PipeReader, PipeWriter};
use std::os::unix::ffi::OsStrExt;
use std::path::{Path, PathBuf};
use std::thread::JoinHandle;
use std::{fmt, fs, io};

/// A meter that talks on its own does so this often.
const STREAM_EVERY_MS: i64 = 1_000;
/// How often to look whether somebody has opened the line.
const LOOK_EVERY_MS: i64 = 100;
/// After so long a silence an unfinished question is forgotten.
const FORGET_AFTER_MS: i64 = 50;
/// More unanswered bytes than this are forgotten too.
const LONGEST_QUESTION: usize = 512;

/// What the meters of a line show: index of the meter on its line, and the time.
pub type Figures = Box<dyn FnMut(usize, Timestamp) -> Shown + Send>;

/// Why a simulated line could not be made or ended.
#[derive(Debug, thiserror::Error)]
pub enum SimulatedLineError {
    /// No pseudo-terminal.
    #[error("cannot make a pseudo-terminal for `{}`", link.display())]
    Terminal {
        /// The line's stable name.
        link: PathBuf,
        /// What the system said.
        source: Errno,
    },
    /// Its stable name could not be set.
    #[error("cannot set the link `{}`", link.display())]
    Link {
        /// The line's stable name.
        link: PathBuf,
        /// What the system said.
        source: io::Error,
    },
    /// No thread or no pipe for it.
    #[error("cannot start the meters of `{}`", link.display())]
    Start {
        /// The line's stable name.
        link: PathBuf,
        /// What the system said.
        source: io::Error,
    },
    /// The meters' thread ended by a panic of the figures' closure.
    #[error("the meters of `{}` ended by themselves", link.display())]
    Ended {
        /// The line's stable name.
        link: PathBuf,
    },
}

/// A serial line with simulated meters, plugged in until [`unplug`](Self::unplug) or drop.
pub struct SimulatedLine {
    link: PathBuf,
    now: fn() -> Timestamp,
    state: State,
}

enum State {
    Plugged {
        thread: JoinHandle<Bus>,
        stop: PipeWriter,
    },
    Unplugged(Bus),
    Ended,
}

/// The meters at the far end.
struct Bus {
    talk: Talk,
    figures: Figures,
    heard: Vec<u8>,
}

impl SimulatedLine {
    /// Makes the line and starts its meters; the device is reached by the symbolic link `link`, which is made or replaced.
    ///
    /// # Errors
    /// [`SimulatedLineError`] when there is no pseudo-terminal, link or thread to be had.
    pub fn start(
        link: &Path,
        talk: Talk,
        figures: Figures,
        now: fn() -> Timestamp,
    ) -> Result<Self, SimulatedLineError> {
        let bus = Bus {
            talk,
            figures,
            heard: Vec::new(),
        };
        let mut line = Self {
            link: link.to_owned(),
            now,
            state: State::Unplugged(bus),
        };
        line.plug()?;
        Ok(line)
    }

    /// The stable name of the device, for the configuration.
    pub fn device(&self) -> &Path {
        &self.link
    }

    /// Pulls the line out: whoever has it open reads its end, and its name is gone. Nothing happens when it is out already.
    ///
    /// # Errors
    /// [`SimulatedLineError::Ended`] when the meters had ended by themselves.
    pub fn unplug(&mut self) -> Result<(), SimulatedLineError> {
        match std::mem::replace(&mut self.state, State::Ended) {
            State::Plugged { thread, stop } => {
                drop(stop);
                let bus = thread.join();
                // The name may have been taken away by the user: then there is nothing to do.
                fs::remove_file(&self.link).ok();
                self.state = State::Unplugged(bus.map_err(|_| SimulatedLineError::Ended {
                    link: self.link.clone(),
                })?);
            }
            other => self.state = other,
        }
        Ok(())
    }

    /// Plugs the line in again: a new pseudo-terminal under the same name. Nothing happens when it is in already.
    ///
    /// # Errors
    /// [`SimulatedLineError`] as for [`start`](Self::start), and `Ended` after the meters ended by themselves.
    pub fn plug(&mut self) -> Result<(), SimulatedLineError> {
        let link = || self.link.clone();
        match self.state {
            State::Plugged { .. } => return Ok(()),
            State::Ended => return Err(SimulatedLineError::Ended { link: link() }),
            State::Unplugged(_) => {}
        }
        let (near, far) = pseudo_terminal().map_err(|source| SimulatedLineError::Terminal {
            link: link(),
            source,
        })?;
        point_link(&self.link, &near).map_err(|source| SimulatedLineError::Link {
            link: link(),
            source,
        })?;
        let start = |source| SimulatedLineError::Start {
            link: link(),
            source,
        };
        let (stopped, stop) = io::pipe().map_err(start)?;
        let State::Unplugged(mut bus) = std::mem::replace(&mut self.state, State::Ended) else {
            return Err(SimulatedLineError::Ended { link: link() });
        };
        let now = self.now;
        let thread = std::thread::Builder::new()
            .name("simulated-meters".to_owned())
            .spawn(move || {
                // A far end that fails is a line that was pulled out: the near end reads its end.
                bus.serve(&far, &stopped, now).ok();
                bus
            })
            .map_err(start)?;
        self.state = State::Plugged { thread, stop };
        Ok(())
    }
}

impl Drop for SimulatedLine {
    fn drop(&mut self) {
        // Nobody is left to be told that the meters had ended before.
        self.unplug().ok();
    }
}

impl fmt::Debug for SimulatedLine {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_struct("SimulatedLine")
            .field("link", &self.link)
            .finish_non_exhaustive()
    }
}

/// What ended a wait.
enum Woken {
    Stopped,
    Unopened,
    Bytes,
    Time,
}

impl Bus {
    /// Talks on the far end until `stop`'s other end is closed.
    fn serve(
        &mut self,
        far: &OwnedFd,
        stop: &PipeReader,
        now: fn() -> Timestamp,
    ) -> Result<(), Errno> {
        loop {
            let woken = wait(stop, Some(far.as_fd()), self.rest_ms(now()))?;
            let (answer, after_ms) = match woken {
                Woken::Stopped => return Ok(()),
                Woken::Unopened => {
                    self.heard.clear();
                    tcflush(far, QueueSelector::IOFlush)?;
                    (Vec::new(), LOOK_EVERY_MS)
                }
                Woken::Bytes => {
                    let mut bytes = [0; 256];
                    match rustix::io::read(far, &mut bytes) {
                        Ok(n) => {
                            self.heard.extend_from_slice(&bytes[..n]);
                            self.on_bytes(now())
                        }
                        Err(Errno::IO | Errno::AGAIN | Errno::INTR) => (Vec::new(), LOOK_EVERY_MS),
                        Err(errno) => return Err(errno),
                    }
                }
                Woken::Time => self.on_time(now()),
            };
            if after_ms > 0 && matches!(wait(stop, None, Some(after_ms))?, Woken::Stopped) {
                return Ok(());
            }
            match rustix::io::write(far, &answer) {
                // What nobody takes is lost, as on a wire.
                Ok(_) | Err(Errno::AGAIN | Errno::INTR | Errno::IO) => {}
                Err(errno) => return Err(errno),
            }
        }
    }

    /// How long to wait for bytes, ms; `None` for as long as it takes.
    fn rest_ms(&self, now: Timestamp) -> Option<i64> {
        match &self.talk {
            Talk::Stream => Some(STREAM_EVERY_MS - now.ms().rem_euclid(STREAM_EVERY_MS)),
            Talk::Query { .. } | Talk::ModbusRtu { .. } if self.heard.is_empty() => None,
            Talk::Query { .. } | Talk::ModbusRtu { .. } => Some(FORGET_AFTER_MS),
        }
    }

    /// After a silence: what to say, and after how many ms.
    fn on_time(&mut self, now: Timestamp) -> (Vec<u8>, i64) {
        self.heard.clear();
        match &self.talk {
            Talk::Stream => (stream_line((self.figures)(0, now)), 0),
            Talk::Query { .. } | Talk::ModbusRtu { .. } => (Vec::new(), 0),
        }
    }

    /// After new bytes: what to answer, and after how many ms.
    fn on_bytes(&mut self, now: Timestamp) -> (Vec<u8>, i64) {
        let answer = match &self.talk {
            Talk::Stream => None,
            Talk::Query { ask } => self.heard.ends_with(ask).then(|| {
                let after_ms = 50 + (bits_at(0, now.ms()) % 101).cast_signed();
                (query_line((self.figures)(0, now)), after_ms)
            }),
            Talk::ModbusRtu { units } => find_request(units, &self.heard).map(|request| {
                let shown = (self.figures)(request.meter, now);
                (modbus_answer(&request, shown), 0)
            }),
        };
        if answer.is_some() || self.heard.len() > LONGEST_QUESTION {
            self.heard.clear();
        }
        answer.unwrap_or_default()
    }
}

/// Waits for the stop, for bytes at the far end, or for the time.
fn wait(
    stop: &PipeReader,
    far: Option<BorrowedFd<'_>>,
    rest_ms: Option<i64>,
) -> Result<Woken, Errno> {
    let rest = rest_ms.map(|ms| Timespec {
        tv_sec: ms / 1_000,
        tv_nsec: ms % 1_000 * 1_000_000,
    });
    let mut waiting = vec![PollFd::new(stop, PollFlags::IN)];
    waiting.extend(far.map(|far| PollFd::from_borrowed_fd(far, PollFlags::IN)));
    match poll(&mut waiting, rest.as_ref()) {
        Ok(_) => {}
        // A signal may cut a wait short; the caller comes back.
        Err(Errno::INTR) => return Ok(Woken::Time),
        Err(errno) => return Err(errno),
    }
    let far = waiting.get(1).map_or(PollFlags::empty(), PollFd::revents);
    Ok(if !waiting[0].revents().is_empty() {
        Woken::Stopped
    } else if far.contains(PollFlags::IN) {
        Woken::Bytes
    } else if far.intersects(PollFlags::HUP | PollFlags::ERR) {
        Woken::Unopened
    } else {
        Woken::Time
    })
}

/// A raw pseudo-terminal: the path of its near end, and its far end.
fn pseudo_terminal() -> Result<(PathBuf, OwnedFd), Errno> {
    let flags = OpenptFlags::RDWR | OpenptFlags::NOCTTY | OpenptFlags::CLOEXEC;
    let far = openpt(flags)?;
    unlockpt(&far)?;
    rustix::io::ioctl_fionbio(&far, true)?;
    let path = ptsname(&far, Vec::new())?;
    // Opened once and closed again, so that the kernel says "nobody has it open" until somebody has.
    let near = ioctl_tiocgptpeer(&far, flags)?;
    let mut raw = tcgetattr(&near)?;
    raw.make_raw();
    tcsetattr(&near, OptionalActions::Now, &raw)?;
    Ok((PathBuf::from(OsStr::from_bytes(path.to_bytes())), far))
}

/// Makes `link` point to `device`, at no moment to nothing.
fn point_link(link: &Path, device: &Path) -> io::Result<()> {
    let fresh = link.with_extension("new");
    match fs::remove_file(&fresh) {
        Err(error) if error.kind() != io::ErrorKind::NotFound => return Err(error),
        Ok(()) | Err(_) => {}
    }
    std::os::unix::fs::symlink(device, &fresh)?;
    fs::rename(&fresh, link)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::fs::{File, OpenOptions};
    use std::io::Write;
    use std::os::unix::fs::OpenOptionsExt;
    use std::sync::Arc;
    use std::sync::atomic::{AtomicUsize, Ordering};

    /// Longer than any answer takes.
    const LIMIT_MS: i64 = 5_000;

    fn wall_clock() -> Timestamp {
        let now = rustix::time::clock_gettime(rustix::time::ClockId::Realtime);
        Timestamp::from_ms(now.tv_sec * 1_000 + now.tv_nsec / 1_000_000)
    }

    /// Meter n shows −23.4 mV less n, and 18.2 °C.
    fn line(link: &Path, talk: Talk) -> SimulatedLine {
        let figures = |meter: usize, _: Timestamp| Shown {
            mv: -23.4 - f64::from(u8::try_from(meter).unwrap()),
            temp_c: 18.2,
        };
        SimulatedLine::start(link, talk, Box::new(figures), wall_clock).unwrap()
    }

    fn open(device: &Path) -> File {
        OpenOptions::new()
            .read(true)
            .write(true)
            .custom_flags(rustix::fs::OFlags::NOCTTY.bits().cast_signed())
            .open(device)
            .unwrap()
    }

    /// The next bytes until there are `n`, or what there is when the line ends or stays silent for `silence_ms`.
    fn read(port: &File, n: usize, silence_ms: i64) -> Vec<u8> {
        let mut got = Vec::new();
        let silence = Timespec {
            tv_sec: silence_ms / 1_000,
            tv_nsec: silence_ms % 1_000 * 1_000_000,
        };
        while got.len() < n {
            let mut waiting = [PollFd::new(port, PollFlags::IN)];
            if poll(&mut waiting, Some(&silence)).unwrap() == 0 {
                break;
            }
            let mut bytes = vec![0; n - got.len()];
            match rustix::io::read(port, &mut bytes) {
                Ok(0) | Err(_) => break,
                Ok(more) => got.extend_from_slice(&bytes[..more]),
            }
        }
        got
    }

    #[test]
    fn a_stream_meter_prints_lines_that_plain_file_reading_gets() {
        let folder = tempfile::tempdir().unwrap();
        let line = line(&folder.path().join("pond"), Talk::Stream);
        let port = open(line.device());
        let expected = b"   -23.4 mV  18.2 C\r\n";
        assert_eq!(read(&port, expected.len(), LIMIT_MS), expected);
        assert_eq!(read(&port, expected.len(), LIMIT_MS), expected);
    }

    #[test]
    fn a_query_meter_answers_its_question_and_no_other() {
        let folder = tempfile::tempdir().unwrap();
        let talk = Talk::Query {
            ask: b"READ?\r\n".to_vec(),
        };
        let line = line(&folder.path().join("tank"), talk);
        let mut port = open(line.device());
        port.write_all(b"WHO?\r\n").unwrap();
        assert_eq!(read(&port, 1, 300), b"");
        // The question may arrive in pieces.
        port.write_all(b"REA").unwrap();
        port.write_all(b"D?\r\n").unwrap();
        let expected = b"MV -23.4 T 18.2\r\n";
        assert_eq!(read(&port, expected.len(), LIMIT_MS), expected);
    }

    #[test]
    fn the_units_of_a_bus_answer_each_for_itself() {
        let folder = tempfile::tempdir().unwrap();
        let units = Talk::ModbusRtu { units: vec![1, 2] };
        let line = line(&folder.path().join("bus"), units);
        let mut port = open(line.device());
        // Source of every check in these frames: computed with a general CRC library (Python `crcmod`, predefined "modbus").
        // −23.4 mV is −234, ff16 as a signed word; −24.4 mV is −244, ff0c; 18.2 °C is 182, 00b6.
        for (request, answer) in [
            ("01 04 00 00 00 02 71 cb", "01 04 04 ff 16 00 b6 ab e2"),
            ("02 03 00 00 00 02 c4 38", "02 03 04 ff 0c 00 b6 b8 92"),
            ("01 04 00 02 00 01 90 0a", "01 84 02 c2 c1"),
        ] {
            port.write_all(&bytes(request)).unwrap();
            let answer = bytes(answer);
            assert_eq!(read(&port, answer.len(), LIMIT_MS), answer, "{request}");
        }
        port.write_all(&bytes("03 04 00 00 00 02 70 29")).unwrap();
        assert_eq!(read(&port, 1, 300), b"", "unit 3 is not there");
    }

    fn bytes(hexadecimal: &str) -> Vec<u8> {
        hexadecimal
            .split(' ')
            .map(|byte| u8::from_str_radix(byte, 16).unwrap())
            .collect()
    }

    #[test]
    fn a_line_pulled_out_ends_for_its_reader_and_comes_back_under_its_name() {
        let folder = tempfile::tempdir().unwrap();
        let mut line = line(&folder.path().join("pond"), Talk::Stream);
        let port = open(line.device());
        assert_eq!(read(&port, 1, LIMIT_MS).len(), 1);
        line.unplug().unwrap();
        assert!(!line.device().exists());
        let rest = read(&port, 4_096, LIMIT_MS);
        assert!(
            rest.len() < 100,
            "the line did not end: {} bytes",
            rest.len()
        );
        line.plug().unwrap();
        let port = open(line.device());
        assert_eq!(read(&port, 8, LIMIT_MS), b"   -23.4");
    }

    #[test]
    fn a_meter_says_nothing_while_nobody_has_its_line_open() {
        let folder = tempfile::tempdir().unwrap();
        let n_asked = Arc::new(AtomicUsize::new(0));
        let counted = Arc::clone(&n_asked);
        let figures = move |_: usize, _: Timestamp| {
            counted.fetch_add(1, Ordering::SeqCst);
            Shown {
                mv: -23.4,
                temp_c: 18.2,
            }
        };
        // By this clock the next second always begins in a millisecond, so a meter that talked to nobody would be far on by now.
        let clock = || Timestamp::from_ms(999);
        let link = folder.path().join("pond");
        let line = SimulatedLine::start(&link, Talk::Stream, Box::new(figures), clock).unwrap();
        let a_while = Timespec {
            tv_sec: 0,
            tv_nsec: 200_000_000,
        };
        poll(&mut [], Some(&a_while)).unwrap();
        assert_eq!(n_asked.load(Ordering::SeqCst), 0);
        let port = open(line.device());
        assert_eq!(read(&port, 8, LIMIT_MS), b"   -23.4");
    }

    #[test]
    fn a_line_is_gone_when_it_is_dropped() {
        let folder = tempfile::tempdir().unwrap();
        let line = line(&folder.path().join("pond"), Talk::Stream);
        let link = line.device().to_owned();
        assert!(link.exists());
        drop(line);
        assert!(fs::symlink_metadata(&link).is_err());
    }
}
