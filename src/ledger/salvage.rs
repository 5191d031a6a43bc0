//! # Salvage: what can be read of a damaged ledger, into a new one
//!
//! Rows are copied table by table as they stand, hashes too, so that the chain still proves what is left. Where a page cannot
//! be read the next readable row is sought. Sealed hours that are lost are sealed again from the arrival table where it still
//! holds their readings. Roll-ups are made anew.

use super::codec::{Rows, SEQ};
use super::error::LedgerError;
use super::event::Body;
use super::rollup::{self, HOUR_MS};
use super::row;
use super::rows::decode;
use super::seal;
use super::store::Ledger;
use crate::electrode::history::Tag;
use crate::electrode::units::Timestamp;
use rusqlite::types::Value;
use rusqlite::{Connection, OpenFlags, params, params_from_iter};
use std::collections::{BTreeSet, HashSet};
use std::path::Path;

/// What was salvaged.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Salvaged {
    /// Events copied.
    pub n_events: u64,
    /// Sealed hours copied.
    pub n_sealed: u64,
    /// Readings of the arrival table copied, sealed ones among them.
    pub n_readings: u64,
    /// What could not be read, and what was rescued in its place.
    pub lost: Vec<String>,
}

/// A table copied by its whole-number key, which is its first column.
struct Table {
    name: &'static str,
    columns: &'static str,
    n_columns: usize,
}

const fn table(name: &'static str, columns: &'static str, n_columns: usize) -> Table {
    Table {
        name,
        columns,
        n_columns,
    }
}

/// Rows asked for at once.
const AT_ONCE: usize = 500;

/// Copies what can be read of the ledger at `path` into the new file `to`, at the time `now`.
///
/// # Errors
/// [`LedgerError::Exists`]; when not even the list of tables can be read; what the new ledger's file says.
pub fn salvage(path: &Path, to: &Path, now: Timestamp) -> Result<Salvaged, LedgerError> {
    if to.exists() {
        return Err(LedgerError::Exists {
            path: to.to_path_buf(),
        });
    }
    let unreadable = |source| LedgerError::of(path, "read the damaged file", source);
    let flags = OpenFlags::SQLITE_OPEN_READ_ONLY | OpenFlags::SQLITE_OPEN_NO_MUTEX;
    let from = Connection::open_with_flags(path, flags).map_err(unreadable)?;
    from.query_row("SELECT count(*) FROM sqlite_schema", [], |_| Ok(()))
        .map_err(unreadable)?;
    let mut into = Ledger::open(to)?;
    let mut found = Salvaged::default();
    let transaction = into.begin()?;
    let copied = copy(&from, &transaction, &mut found)
        .and_then(|()| parts(&transaction, path, &mut found))
        .and_then(|()| markers(&from, &transaction));
    copied.map_err(|source| LedgerError::of(to, "write the new ledger", source))?;
    rescue(&transaction, to, now, &mut found)?;
    transaction
        .commit()
        .map_err(|source| LedgerError::of(to, "write the new ledger", source))?;
    Ok(found)
}

fn copy(from: &Connection, into: &Connection, found: &mut Salvaged) -> rusqlite::Result<()> {
    // A point that is lost must not take its readings with it.
    into.pragma_update(None, "defer_foreign_keys", true)?;
    let points = table("point", "id, tag, quantity", 3);
    copy_table(from, into, &points, &mut found.lost)?;
    let events = table("event", "id, at_ms, entered_ms, by, body, hash", 6);
    found.n_events = copy_table(from, into, &events, &mut found.lost)?;
    let sealed = table(
        "sealed",
        "id, point_id, hour, part, n, seq_lo, seq_hi, t_lo, t_hi, codec, data, sha256",
        12,
    );
    found.n_sealed = copy_table(from, into, &sealed, &mut found.lost)?;
    let readings = table(
        "reading",
        "seq, point_id, t_ms, mv_uv, temp_mc, value_u, u_u, calibration_id, flags",
        9,
    );
    found.n_readings = copy_table(from, into, &readings, &mut found.lost)?;
    Ok(())
}

/// Copies a table; an error of the source is a loss, one of the target an error.
fn copy_table(
    from: &Connection,
    into: &Connection,
    table: &Table,
    lost: &mut Vec<String>,
) -> rusqlite::Result<u64> {
    let Table {
        name,
        columns,
        n_columns,
    } = table;
    let key = columns.split(',').next().unwrap_or("id");
    let select =
        format!("SELECT {columns} FROM {name} WHERE {key} > ? ORDER BY {key} LIMIT {AT_ONCE}");
    let marks = vec!["?"; *n_columns].join(", ");
    let mut insert = into.prepare(&format!(
        "INSERT OR IGNORE INTO {name}({columns}) VALUES ({marks})"
    ))?;
    let (mut last, mut n, mut gap, mut jump) = (0_i64, 0, None, 1_i64);
    loop {
        let (rows, is_broken) = read_some(from, &select, last, *n_columns);
        let n_rows = rows.len();
        for values in rows {
            let Some(Value::Integer(key)) = values.first() else {
                continue;
            };
            let key = *key;
            if let Some(first) = gap.take() {
                lost.push(format!(
                    "{name}: numbers {first} to {} cannot be read",
                    key - 1
                ));
                jump = 1;
            }
            // A row that the new table refuses is damaged too.
            match insert.execute(params_from_iter(values)) {
                Ok(_) => n += 1,
                Err(error)
                    if error.sqlite_error_code()
                        == Some(rusqlite::ErrorCode::ConstraintViolation) =>
                {
                    lost.push(format!("{name}: number {key} is damaged"));
                }
                Err(error) => return Err(error),
            }
            last = key;
        }
        if is_broken {
            gap.get_or_insert(last + 1);
            last = last.saturating_add(jump);
            jump = jump.saturating_mul(2);
            if jump > i64::MAX / 4 {
                break;
            }
        } else if n_rows < AT_ONCE {
            break;
        }
    }
    if let Some(first) = gap {
        lost.push(format!(
            "{name}: what follows number {} cannot be read",
            first - 1
        ));
    }
    Ok(n)
}

/// Rows behind `last` up to the first that cannot be read; whether there was one.
fn read_some(
    from: &Connection,
    select: &str,
    last: i64,
    n_columns: usize,
) -> (Vec<Vec<Value>>, bool) {
    let mut found = Vec::new();
    let mut read = || -> rusqlite::Result<()> {
        let mut statement = from.prepare_cached(select)?;
        let mut rows = statement.query([last])?;
        while let Some(row) = rows.next()? {
            found.push(
                (0..n_columns)
                    .map(|column| row.get(column))
                    .collect::<rusqlite::Result<_>>()?,
            );
        }
        Ok(())
    };
    let is_broken = read().is_err();
    (found, is_broken)
}

/// Takes out what is no blob as it was sealed, and makes the roll-ups of the rest.
fn parts(into: &Connection, path: &Path, found: &mut Salvaged) -> rusqlite::Result<()> {
    into.execute_batch("DELETE FROM minute; DELETE FROM hour; DROP TRIGGER sealed_is_not_deleted")?;
    let mut damaged = Vec::new();
    {
        let mut statement =
            into.prepare("SELECT id, n, codec, data, sha256, point_id FROM sealed ORDER BY id")?;
        let mut parts = statement.query([])?;
        let mut rows = Rows::default();
        while let Some(part) = parts.next()? {
            match decode(path, part, &mut rows) {
                Ok(()) => rollup::add(into, part.get(5)?, &rows)?,
                Err(error) => damaged.push((part.get::<_, i64>(0)?, error.to_string())),
            }
        }
    }
    for (id, what) in damaged {
        into.execute("DELETE FROM sealed WHERE id = ?", [id])?;
        found.n_sealed -= 1;
        found.lost.push(what);
    }
    into.execute_batch(
        "CREATE TRIGGER sealed_is_not_deleted BEFORE DELETE ON sealed
BEGIN SELECT RAISE(ABORT, 'sealed hours are never deleted'); END;",
    )
}

/// The state of each point, and the counters beyond every number known.
fn markers(from: &Connection, into: &Connection) -> rusqlite::Result<()> {
    let known = |sql: &str, id: Option<i64>| -> i64 {
        let read = match id {
            Some(id) => from.query_row(sql, [id], |row| row.get(0)),
            None => from.query_row(sql, [], |row| row.get(0)),
        };
        read.unwrap_or(0)
    };
    let ids: Vec<i64> = into
        .prepare("SELECT id FROM point")?
        .query_map([], |row| row.get(0))?
        .collect::<rusqlite::Result<_>>()?;
    for id in ids {
        let sealed_to = known(
            "SELECT sealed_to FROM point_state WHERE point_id = ?",
            Some(id),
        );
        into.execute(
            "INSERT INTO point_state(point_id, seq, t_ms, mv_uv, temp_mc, value_u, u_u, calibration_id, flags)
             SELECT point_id, seq, t_ms, mv_uv, temp_mc, value_u, u_u, calibration_id, flags
             FROM reading WHERE point_id = ? ORDER BY seq DESC LIMIT 1",
            [id],
        )?;
        into.execute(
            "INSERT OR IGNORE INTO point_state(point_id, seq, t_ms, flags)
             SELECT point_id, seq_hi, t_hi, 9 FROM sealed WHERE point_id = ? ORDER BY seq_hi DESC LIMIT 1",
            [id],
        )?;
        into.execute(
            "UPDATE point_state SET sealed_to = max(?2, coalesce((SELECT max(seq_hi) FROM sealed WHERE point_id = ?1), 0))
             WHERE point_id = ?1",
            params![id, sealed_to],
        )?;
        into.execute(
            "UPDATE point_state SET
               t_max = max(coalesce((SELECT max(t_ms) FROM reading WHERE point_id = ?1), t_ms),
                           coalesce((SELECT max(t_hi) FROM sealed WHERE point_id = ?1), t_ms)),
               t_open = (SELECT min(t_ms) FROM reading WHERE point_id = ?1 AND seq > sealed_to)
             WHERE point_id = ?1",
            [id],
        )?;
    }
    let next = |name: &str| {
        known(
            &format!("SELECT next FROM counter WHERE name = '{name}'"),
            None,
        )
    };
    into.execute(
        "UPDATE counter SET next = max(?, 1 + (SELECT coalesce(max(id), 0) FROM event)) WHERE name = 'event'",
        [next("event")],
    )?;
    into.execute(
        "UPDATE counter SET next = max(?, 1 + (SELECT coalesce(max(seq), 0) FROM reading),
           1 + (SELECT coalesce(max(seq_hi), 0) FROM sealed)) WHERE name = 'reading'",
        [next("reading")],
    )?;
    Ok(())
}

/// Seals again, from the arrival table, what events say was sealed and is not there.
fn rescue(
    into: &rusqlite::Transaction<'_>,
    to: &Path,
    now: Timestamp,
    found: &mut Salvaged,
) -> Result<(), LedgerError> {
    let failed = |source| LedgerError::of(to, "rescue readings", source);
    for (point, hour, part, n) in lost_parts(into).map_err(failed)? {
        let rows = left_rows(into, &point, hour).map_err(failed)?;
        let n_left = rows.len() as u64;
        if n_left > 0 {
            seal::seal_again(into, to, &point, &rows, now)?;
        }
        found.lost.push(format!(
            "part {part} of the hour {hour} of `{point}`, {n} readings: {n_left} were still in the arrival table and are sealed again"
        ));
    }
    Ok(())
}

type LostPart = (Tag, i64, i64, u64);

fn lost_parts(into: &Connection) -> rusqlite::Result<Vec<LostPart>> {
    let there: HashSet<(String, i64, i64)> = into
        .prepare("SELECT p.tag, hour, part FROM sealed s JOIN point p ON p.id = s.point_id")?
        .query_map([], |row| Ok((row.get(0)?, row.get(1)?, row.get(2)?)))?
        .collect::<rusqlite::Result<_>>()?;
    let mut statement = into
        .prepare("SELECT body FROM event WHERE body GLOB '{\"event\":\"sealed\",*' ORDER BY id")?;
    let mut events = statement.query([])?;
    let mut lost = Vec::new();
    while let Some(event) = events.next()? {
        let body: String = event.get(0)?;
        if let Ok(Body::Sealed {
            point,
            hour,
            part,
            n,
            ..
        }) = serde_json::from_str(&body)
        {
            let hour = hour.ms().div_euclid(HOUR_MS);
            if !there.contains(&(point.0.clone(), hour, part)) {
                lost.push((point, hour, part, n));
            }
        }
    }
    Ok(lost)
}

/// Rows of an hour that count as sealed and lie in no sealed part.
fn left_rows(into: &Connection, point: &Tag, hour: i64) -> rusqlite::Result<Rows> {
    let mut sealed: BTreeSet<i64> = BTreeSet::new();
    let mut statement = into.prepare(
        "SELECT s.id, n, codec, data, sha256 FROM sealed s JOIN point p ON p.id = s.point_id WHERE p.tag = ? AND hour = ?",
    )?;
    let mut parts = statement.query(params![point.0, hour])?;
    let mut rows = Rows::default();
    while let Some(part) = parts.next()? {
        if decode(Path::new(""), part, &mut rows).is_ok() {
            sealed.extend(rows.column(SEQ));
        }
    }
    let mut left = Rows::default();
    let mut statement = into.prepare(concat!(
        "SELECT ",
        row::columns!(),
        " FROM reading WHERE point_id = (SELECT id FROM point WHERE tag = ?1) AND t_ms >= ?2 AND t_ms < ?3
            AND seq <= (SELECT s.sealed_to FROM point_state s WHERE s.point_id = reading.point_id) ORDER BY seq"
    ))?;
    let mut rows = statement.query(params![point.0, hour * HOUR_MS, (hour + 1) * HOUR_MS])?;
    while let Some(row) = rows.next()? {
        let packed = row::read(row, 0)?;
        if !sealed.contains(&packed[SEQ]) {
            left.push(&packed);
        }
    }
    Ok(left)
}
