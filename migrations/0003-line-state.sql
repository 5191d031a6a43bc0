-- What each line has heard, thrown away and waited for since its task began: the newest counts only, replaced, no record.
CREATE TABLE line_state(
  line TEXT PRIMARY KEY,
  t_ms INTEGER NOT NULL,
  body TEXT NOT NULL CHECK(json_valid(body))) STRICT, WITHOUT ROWID;
