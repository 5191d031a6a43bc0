//! # The hash chain of events
//!
//! `hash = SHA-256(hash of the event before ‖ length of the entry ‖ entry)`, with 32 zero bytes before the first event, and
//! `entry = id ‖ at_ms ‖ entered_ms ‖ length of by ‖ by ‖ body`. Numbers and lengths are 8 bytes, big-endian, numbers signed in two's complement;
//! `by` and `body` are UTF-8 exactly as in the table.

use sha2::{Digest, Sha256};

/// A link of the chain.
pub(super) type Hash = [u8; 32];

/// What stands before the first event.
pub(super) const START: Hash = [0; 32];

/// One event as stored.
#[derive(Debug)]
pub(super) struct Entry<'a> {
    pub(super) id: i64,
    pub(super) at_ms: i64,
    pub(super) entered_ms: i64,
    pub(super) by: &'a str,
    pub(super) body: &'a str,
}

/// The hash of `entry` behind `before`.
pub(super) fn link(before: &Hash, entry: &Entry<'_>) -> Hash {
    let length = 4 * 8 + entry.by.len() + entry.body.len();
    let mut sha = Sha256::new();
    sha.update(before);
    sha.update((length as u64).to_be_bytes());
    sha.update(entry.id.to_be_bytes());
    sha.update(entry.at_ms.to_be_bytes());
    sha.update(entry.entered_ms.to_be_bytes());
    sha.update((entry.by.len() as u64).to_be_bytes());
    sha.update(entry.by.as_bytes());
    sha.update(entry.body.as_bytes());
    sha.finalize().into()
}
