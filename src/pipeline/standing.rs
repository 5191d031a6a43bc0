//! # What stands at a moment: the book, and how far each electrode has aged since its buffers
//!
//! in: the book. out: who is in force where, and offset and slope as the electrode's own history makes them, with covariance.
//! Always: what stands for a moment rests on facts at or before it, under the noise of practice and what this probe has shown until
//! then; so a reading gets the same u however its row came.
//! Not here: grab samples and second probes. They need rows beside the facts; `best` and `health` use them.

use crate::electrode::ageing::{Prior, Segment, Track, observe};
use crate::electrode::history::{Book, ProbeHistory, ProbeId};
use crate::electrode::units::Timestamp;
use std::collections::BTreeMap;
use std::sync::{Arc, Mutex, PoisonError};

/// The end of time: every fact counts for the track, and each moment sees only those before it.
const ALL: Timestamp = Timestamp::from_ms(i64::MAX);

/// The book with each probe's track.
#[derive(Debug, Default)]
pub struct Standing {
    book: Arc<Book>,
    tracks: BTreeMap<ProbeId, Arc<Tracked>>,
}

/// A probe's track, and the stretch of it last asked for: most readings lie on the same.
#[derive(Debug)]
struct Tracked {
    track: Track,
    stretch: Mutex<Option<Segment>>,
}

impl Standing {
    /// From a book.
    pub fn new(book: Arc<Book>) -> Self {
        Self::default().with(book)
    }

    /// With a later book: only the tracks of probes whose history has changed are run again.
    #[must_use]
    pub fn with(&self, book: Arc<Book>) -> Self {
        let mut tracks = BTreeMap::new();
        for history in book.probes() {
            let id = &history.spec.id;
            let before = self
                .tracks
                .get(id)
                .filter(|_| self.book.probe(id) == Some(history));
            if let Some(tracked) = before.cloned().or_else(|| run(history)) {
                tracks.insert(id.clone(), tracked);
            }
        }
        Self { book, tracks }
    }

    /// The book.
    pub fn book(&self) -> &Book {
        &self.book
    }

    /// A probe's track; `None` before its first reading in a standard.
    pub fn track(&self, probe: &ProbeId) -> Option<&Track> {
        self.tracks.get(probe).map(|tracked| &tracked.track)
    }

    /// The stretch of a probe's track around `t`, as known at `t`.
    pub fn stretch(&self, probe: &ProbeId, t: Timestamp) -> Option<Segment> {
        let tracked = self.tracks.get(probe)?;
        let mut last = tracked
            .stretch
            .lock()
            .unwrap_or_else(PoisonError::into_inner);
        if last.is_none_or(|stretch| !stretch.holds(t)) {
            *last = tracked.track.filtered_segment(t);
        }
        *last
    }
}

fn run(history: &ProbeHistory) -> Option<Arc<Tracked>> {
    let track = Track::run(&observe(history, &[], ALL), &Prior::of(history.spec.kind))?;
    Some(Arc::new(Tracked {
        track,
        stretch: Mutex::new(None),
    }))
}
