-- The index by time made every commit write a page per point; sealed hours answer in its place.
DROP INDEX reading_by_point_time;

-- Closed hours for good: one blob per point, hour and part. The layout behind `codec` is in DEVELOPERS.md.
CREATE TABLE sealed(
  id INTEGER PRIMARY KEY,
  point_id INTEGER NOT NULL REFERENCES point(id),
  hour INTEGER NOT NULL,                -- t_ms / 3 600 000, rounded down
  part INTEGER NOT NULL,                -- an hour gets another part when rows for it arrive after it was sealed
  n INTEGER NOT NULL,
  seq_lo INTEGER NOT NULL, seq_hi INTEGER NOT NULL,
  t_lo INTEGER NOT NULL, t_hi INTEGER NOT NULL,
  codec INTEGER NOT NULL,
  data BLOB NOT NULL,
  sha256 BLOB NOT NULL CHECK(length(sha256) = 32),
  UNIQUE(point_id, hour, part)) STRICT;

CREATE TRIGGER sealed_is_not_changed BEFORE UPDATE ON sealed
BEGIN SELECT RAISE(ABORT, 'sealed hours are never changed'); END;
CREATE TRIGGER sealed_is_not_deleted BEFORE DELETE ON sealed
BEGIN SELECT RAISE(ABORT, 'sealed hours are never deleted'); END;

-- Roll-ups of sealed rows, in the steps of `reading`. n counts rows that have a value; flag_hi is the worst flag of all rows.
CREATE TABLE minute(
  point_id INTEGER NOT NULL, bucket INTEGER NOT NULL,  -- t_ms / 60 000, rounded down
  n INTEGER NOT NULL, lo INTEGER, hi INTEGER, total INTEGER NOT NULL, u_hi INTEGER, flag_hi INTEGER NOT NULL,
  PRIMARY KEY(point_id, bucket)) STRICT, WITHOUT ROWID;
CREATE TABLE hour(
  point_id INTEGER NOT NULL, bucket INTEGER NOT NULL,  -- t_ms / 3 600 000, rounded down
  n INTEGER NOT NULL, lo INTEGER, hi INTEGER, total INTEGER NOT NULL, u_hi INTEGER, flag_hi INTEGER NOT NULL,
  PRIMARY KEY(point_id, bucket)) STRICT, WITHOUT ROWID;

-- Rows of a point up to sealed_to lie in `sealed`, those behind it only in `reading`.
ALTER TABLE point_state ADD COLUMN sealed_to INTEGER NOT NULL DEFAULT 0;
ALTER TABLE point_state ADD COLUMN t_max INTEGER;    -- no row of the point is later
ALTER TABLE point_state ADD COLUMN t_open INTEGER;   -- no row behind sealed_to is earlier; NULL when there is none
UPDATE point_state SET
  t_max = (SELECT max(t_ms) FROM reading WHERE reading.point_id = point_state.point_id),
  t_open = (SELECT min(t_ms) FROM reading WHERE reading.point_id = point_state.point_id);

CREATE TRIGGER reading_is_pruned_only_when_sealed BEFORE DELETE ON reading
WHEN OLD.seq > coalesce((SELECT sealed_to FROM point_state WHERE point_id = OLD.point_id), 0)
BEGIN SELECT RAISE(ABORT, 'readings are deleted only when they are sealed'); END;

-- What the daemon and the audit say of themselves, for `status --ledger`.
CREATE TABLE note(name TEXT PRIMARY KEY, at_ms INTEGER NOT NULL, body TEXT NOT NULL CHECK(json_valid(body))) STRICT, WITHOUT ROWID;

-- Unsealed readings in the units people use. Sealed ones need our decoder: `halfcell export`.
CREATE VIEW readings_unsealed AS
SELECT r.seq, p.tag AS point, strftime('%Y-%m-%dT%H:%M:%fZ', r.t_ms / 1000.0, 'unixepoch') AS time,
  r.mv_uv / 1e3 AS mv, r.temp_mc / 1e3 AS temp_c,
  r.value_u / iif(p.quantity = 'ph', 1e4, 1e2) AS value, r.u_u / 1e6 AS u,
  r.flags & 15 AS flag, r.calibration_id AS calibration
FROM reading r JOIN point p ON p.id = r.point_id JOIN point_state s ON s.point_id = r.point_id
WHERE r.seq > s.sealed_to;
