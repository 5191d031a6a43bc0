-- "half" in ASCII: tells a ledger from any other database.
PRAGMA application_id = 1751215206;

CREATE TABLE point(
  id INTEGER PRIMARY KEY,
  tag TEXT NOT NULL UNIQUE,
  quantity TEXT NOT NULL CHECK(quantity IN ('ph', 'orp'))) STRICT;

-- Arrival order; the only table the live path writes. Nothing is unique on time: clocks step back.
CREATE TABLE reading(
  seq INTEGER PRIMARY KEY,              -- given by the writer from `counter`, never reused
  point_id INTEGER NOT NULL,
  t_ms INTEGER NOT NULL,                -- UTC as the wall clock said
  mv_uv INTEGER, temp_mc INTEGER,       -- raw: 1 µV, 0.001 °C; NULL = missing or over range, the tests say which
  value_u INTEGER, u_u INTEGER,         -- as reported: 1e-4 pH (ORP: 1e-2 mV), u in 1e-6 of the unit
  calibration_id INTEGER,
  flags INTEGER NOT NULL) STRICT;       -- bits 0-3 flag, 4-7 where the temperature came from, 8 and up the tests not passed
CREATE INDEX reading_by_point_time ON reading(point_id, t_ms);

CREATE TRIGGER reading_is_written_once BEFORE UPDATE ON reading
BEGIN SELECT RAISE(ABORT, 'readings are never changed'); END;

-- The next number to give out.
CREATE TABLE counter(name TEXT PRIMARY KEY, next INTEGER NOT NULL) STRICT, WITHOUT ROWID;
INSERT INTO counter VALUES ('reading', 1), ('event', 1);

-- The newest reading of each point, so that a point that fell silent is found at once.
CREATE TABLE point_state(
  point_id INTEGER PRIMARY KEY REFERENCES point(id),
  seq INTEGER NOT NULL, t_ms INTEGER NOT NULL,
  mv_uv INTEGER, temp_mc INTEGER, value_u INTEGER, u_u INTEGER,
  calibration_id INTEGER, flags INTEGER NOT NULL) STRICT;

-- Appended, chained, never changed. The encoding behind `hash` is in src/ledger/chain.rs.
CREATE TABLE event(
  id INTEGER PRIMARY KEY,
  at_ms INTEGER NOT NULL,
  entered_ms INTEGER NOT NULL,
  by TEXT NOT NULL,
  body TEXT NOT NULL CHECK(json_valid(body)),
  hash BLOB NOT NULL CHECK(length(hash) = 32)) STRICT;

CREATE TRIGGER event_is_not_changed BEFORE UPDATE ON event
BEGIN SELECT RAISE(ABORT, 'events are only appended'); END;
CREATE TRIGGER event_is_not_deleted BEFORE DELETE ON event
BEGIN SELECT RAISE(ABORT, 'events are only appended'); END;
