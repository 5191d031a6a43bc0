//! # Bytes into lines, whatever ends them
//!
//! Always: 1. At most [`LONGEST`] bytes are held. 2. The same bytes give the same lines however they are split over reads.
//! 3. What began before we listened, or paused in the middle for [`PAUSE`], never becomes a line.

use std::time::{Duration, Instant};

/// Longest line taken, bytes without terminator.
pub const LONGEST: usize = 256;

/// A talker that stops this long inside a line was cut off; what follows up to the next terminator is thrown away too.
pub const PAUSE: Duration = Duration::from_secs(2);

/// A line whose first byte comes this long after opening began after it.
const FRESH: Duration = Duration::from_millis(100);

/// A piece of what was heard.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Piece {
    /// A whole line, without its terminator.
    Line(Vec<u8>),
    /// The beginning of a line that grew beyond [`LONGEST`]; the rest of it is dropped.
    TooLong(Vec<u8>),
    /// A line without its beginning or end.
    Half(Vec<u8>),
}

/// Cuts a line's bytes at its terminator.
#[derive(Debug, Clone)]
pub struct Splitter {
    terminator: Option<Vec<u8>>,
    held: Vec<u8>,
    skipping: Skipping,
    last: Option<Instant>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Skipping {
    /// The line is whole so far.
    No,
    /// Just opened: whole only if nothing comes for [`FRESH`].
    Opened(Instant),
    /// Its beginning is missing.
    Headless,
    /// Already reported; nothing more of it is kept than shows its end.
    Reported,
}

impl Splitter {
    /// For lines that end so; `None`: CR, LF or both, in any order.
    pub fn new(terminator: Option<Vec<u8>>) -> Self {
        Self {
            terminator: terminator.filter(|t| !t.is_empty()),
            held: Vec::new(),
            skipping: Skipping::No,
            last: None,
        }
    }

    /// The line was opened: what is being said right now may have begun before.
    pub fn opened(&mut self, now: Instant) {
        self.held.clear();
        self.skipping = Skipping::Opened(now);
        self.last = None;
    }

    /// A new line is to begin with the next byte; what was held comes back.
    pub fn restart(&mut self) -> Vec<u8> {
        self.skipping = Skipping::No;
        std::mem::take(&mut self.held)
    }

    /// Whether a line has begun and not ended.
    pub fn in_a_line(&self) -> bool {
        !self.held.is_empty()
    }

    /// Takes bytes, gives back what they complete. Empty lines are no lines.
    pub fn push(&mut self, bytes: &[u8], now: Instant) -> Vec<Piece> {
        let mut pieces = Vec::new();
        if bytes.is_empty() {
            return pieces;
        }
        if let Skipping::Opened(opened) = self.skipping {
            let fresh = now.saturating_duration_since(opened) >= FRESH;
            self.skipping = if fresh {
                Skipping::No
            } else {
                Skipping::Headless
            };
        }
        let paused = self
            .last
            .is_some_and(|last| now.saturating_duration_since(last) >= PAUSE);
        if paused && !self.held.is_empty() && self.skipping != Skipping::Reported {
            pieces.push(Piece::Half(std::mem::take(&mut self.held)));
            self.skipping = Skipping::Reported;
        }
        self.last = Some(now);
        for &byte in bytes {
            self.held.push(byte);
            if let Some(length) = self.line_length() {
                self.held.truncate(length);
                let line = std::mem::take(&mut self.held);
                match std::mem::replace(&mut self.skipping, Skipping::No) {
                    Skipping::No if line.is_empty() => {}
                    Skipping::No => pieces.push(Piece::Line(line)),
                    Skipping::Opened(_) | Skipping::Headless => pieces.push(Piece::Half(line)),
                    Skipping::Reported => {}
                }
            } else if self.held.len() > LONGEST + self.terminator.as_ref().map_or(0, Vec::len) {
                self.too_long(&mut pieces);
            }
        }
        pieces
    }

    /// Length of the line held, when its terminator stands at its end.
    fn line_length(&self) -> Option<usize> {
        match &self.terminator {
            Some(terminator) => self
                .held
                .strip_suffix(terminator.as_slice())
                .map(<[u8]>::len),
            None => self
                .held
                .strip_suffix(b"\r")
                .or(self.held.strip_suffix(b"\n"))
                .map(<[u8]>::len),
        }
    }

    fn too_long(&mut self, pieces: &mut Vec<Piece>) {
        // The end of what is dropped may be the beginning of a terminator.
        let keep = self.terminator.as_ref().map_or(0, |t| t.len() - 1);
        let tail = self.held.split_off(self.held.len() - keep);
        let dropped = std::mem::replace(&mut self.held, tail);
        if self.skipping != Skipping::Reported {
            pieces.push(Piece::TooLong(dropped));
            self.skipping = Skipping::Reported;
        }
    }
}

#[cfg(test)]
#[expect(clippy::disallowed_methods, reason = "a moment to count from")]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn lines(terminator: Option<&[u8]>, chunks: &[&[u8]]) -> Vec<Piece> {
        let now = Instant::now();
        let mut splitter = Splitter::new(terminator.map(<[u8]>::to_vec));
        chunks
            .iter()
            .flat_map(|chunk| splitter.push(chunk, now))
            .collect()
    }

    fn line(text: &str) -> Piece {
        Piece::Line(text.as_bytes().to_vec())
    }

    #[test]
    fn any_of_cr_lf_and_both_end_a_line_unless_told_otherwise() {
        assert_eq!(
            lines(None, &[b"a\rb\nc\r\nd\n\re\r"]),
            ["a", "b", "c", "d", "e"].map(line)
        );
        assert_eq!(lines(Some(b"\x03"), &[b"a\rb\x03c"]), [line("a\rb")]);
        assert_eq!(
            lines(Some(b"\r\n"), &[b"a\rb\r", b"\nc\r\n"]),
            [line("a\rb"), line("c")]
        );
    }

    #[test]
    fn a_line_already_being_said_when_the_port_opens_is_half() {
        let opened = Instant::now();
        let mut splitter = Splitter::new(None);
        splitter.opened(opened);
        assert_eq!(
            splitter.push(b"7.5 mV\r-177.5 mV\r", opened),
            [Piece::Half(b"7.5 mV".to_vec()), line("-177.5 mV")]
        );
        splitter.opened(opened);
        assert_eq!(
            splitter.push(b"-177.5 mV\r", opened + FRESH),
            [line("-177.5 mV")]
        );
    }

    #[test]
    fn two_halves_with_a_long_pause_between_are_not_one_line() {
        let now = Instant::now();
        let mut splitter = Splitter::new(None);
        assert_eq!(splitter.push(b"-17", now), []);
        assert_eq!(
            splitter.push(b"7.5 mV\r-12.0 mV\r", now + PAUSE),
            [Piece::Half(b"-17".to_vec()), line("-12.0 mV")]
        );
    }

    #[test]
    fn an_endless_line_is_reported_once_and_never_held() {
        let now = Instant::now();
        let mut splitter = Splitter::new(Some(b"\r\n".to_vec()));
        let mut pieces = Vec::new();
        for _ in 0..1000 {
            pieces.extend(splitter.push(&[b'x'; 100], now));
            assert!(
                splitter.held.len() <= LONGEST + 2,
                "{} bytes held",
                splitter.held.len()
            );
        }
        pieces.extend(splitter.push(b"\r", now));
        pieces.extend(splitter.push(b"\nok\r\n", now));
        assert_eq!(pieces.len(), 2);
        assert!(matches!(&pieces[0], Piece::TooLong(_)));
        assert_eq!(pieces[1], line("ok"));
    }

    proptest! {
        #[test]
        fn any_split_of_the_same_bytes_gives_the_same_lines(
            bytes in proptest::collection::vec(prop_oneof![Just(b'\r'), Just(b'\n'), any::<u8>()], 0..1500),
            cuts in proptest::collection::vec(0_usize..1500, 0..20),
            configured in any::<bool>(),
        ) {
            let terminator = configured.then_some(b"\r\n".as_slice());
            let mut cuts: Vec<usize> = cuts.into_iter().map(|c| c.min(bytes.len())).chain([0, bytes.len()]).collect();
            cuts.sort_unstable();
            let chunks: Vec<&[u8]> = cuts.windows(2).map(|w| &bytes[w[0]..w[1]]).collect();
            prop_assert_eq!(lines(terminator, &chunks), lines(terminator, &[&bytes]));
        }
    }
}
