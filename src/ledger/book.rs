//! # Events in the tables: appended and chained, read back, made into the book

use super::chain::{self, Entry, Hash};
use super::error::LedgerError;
use super::event::{Body, Event, NewEvent};
use crate::electrode::history::{Book, EventId};
use crate::electrode::units::Timestamp;
use rusqlite::{Connection, OptionalExtension, params};
use std::path::Path;

/// The text of a body, when it comes back from it as it went in.
pub(super) fn text_of(body: &Body) -> Result<String, LedgerError> {
    let text = serde_json::to_string(body).unwrap_or_default();
    match serde_json::from_str::<Body>(&text) {
        Ok(back) if back == *body => Ok(text),
        _ => Err(LedgerError::UnstorableEvent { text }),
    }
}

/// Appends `event`; the caller holds the transaction.
pub(super) fn append(
    connection: &Connection,
    path: &Path,
    event: &NewEvent,
) -> Result<EventId, LedgerError> {
    let body = text_of(&event.body)?;
    let insert = || -> rusqlite::Result<EventId> {
        let id = take(connection, "event", 1)?;
        let before: Option<Hash> = connection
            .prepare_cached("SELECT hash FROM event ORDER BY id DESC LIMIT 1")?
            .query_row([], |row| row.get(0))
            .optional()?;
        let entry = Entry {
            id,
            at_ms: event.at.ms(),
            entered_ms: event.entered.ms(),
            by: &event.by,
            body: &body,
        };
        let hash = chain::link(&before.unwrap_or(chain::START), &entry);
        connection
            .prepare_cached("INSERT INTO event(id, at_ms, entered_ms, by, body, hash) VALUES (?, ?, ?, ?, ?, ?)")?
            .execute(params![id, entry.at_ms, entry.entered_ms, entry.by, entry.body, hash])?;
        Ok(id)
    };
    insert().map_err(|source| LedgerError::of(path, "append an event", source))
}

/// Takes `n` numbers from a counter; the first of them comes back.
pub(super) fn take(connection: &Connection, counter: &str, n: i64) -> rusqlite::Result<i64> {
    connection
        .prepare_cached("UPDATE counter SET next = next + ?2 WHERE name = ?1 RETURNING next - ?2")?
        .query_row(params![counter, n], |row| row.get(0))
}

/// The events after number `after`, in order, without seals: those are many and speak to the audit only.
pub(super) fn events(
    connection: &Connection,
    path: &Path,
    after: EventId,
) -> Result<Vec<Event>, LedgerError> {
    let at = |source| LedgerError::of(path, "read events", source);
    let mut statement = connection
        .prepare_cached(
            "SELECT id, at_ms, entered_ms, by, body FROM event WHERE id > ? AND body NOT GLOB '{\"event\":\"sealed\",*' ORDER BY id",
        )
        .map_err(at)?;
    let mut rows = statement.query([after]).map_err(at)?;
    let mut events = Vec::new();
    while let Some(row) = rows.next().map_err(at)? {
        let id = row.get(0).map_err(at)?;
        let body: String = row.get(4).map_err(at)?;
        events.push(Event {
            id,
            at: Timestamp::from_ms(row.get(1).map_err(at)?),
            entered: Timestamp::from_ms(row.get(2).map_err(at)?),
            by: row.get(3).map_err(at)?,
            body: serde_json::from_str(&body)
                .map_err(|source| LedgerError::UnreadableEvent { id, source })?,
        });
    }
    Ok(events)
}

/// The book of every event that was so at or before `until`.
pub(super) fn book(
    connection: &Connection,
    path: &Path,
    until: Option<Timestamp>,
) -> Result<Book, LedgerError> {
    let mut book = Book::default();
    for event in events(connection, path, 0)? {
        if until.is_none_or(|until| event.at <= until) {
            event.enter(&mut book);
        }
    }
    Ok(book)
}
