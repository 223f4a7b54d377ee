"""Schema 1 as SQL text: the tables. Released once and never edited again; a change is a new migration with its own text."""

TABLES = """
CREATE TABLE meta (name TEXT PRIMARY KEY, value TEXT NOT NULL) STRICT;

CREATE TABLE setting (
  seq INTEGER PRIMARY KEY CHECK (seq > 0), name TEXT NOT NULL CHECK (name <> ''), value TEXT NOT NULL CHECK (json_valid(value)),
  who TEXT NOT NULL CHECK (trim(who) <> ''), at TEXT NOT NULL CHECK (at GLOB
    '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T[0-9][0-9]:[0-9][0-9]:[0-9][0-9].[0-9][0-9][0-9]Z'),
  previous_sha256 BLOB NOT NULL CHECK (length(previous_sha256) = 32), sha256 BLOB NOT NULL UNIQUE CHECK (length(sha256) = 32)) STRICT;

CREATE TABLE blob (
  sha256 BLOB PRIMARY KEY CHECK (length(sha256) = 32), kind TEXT NOT NULL CHECK (kind IN ('sheet', 'recipe', 'body', 'trace')),
  bytes BLOB NOT NULL) STRICT;

CREATE TABLE sheet (
  sha256 BLOB PRIMARY KEY REFERENCES blob (sha256), file_name TEXT NOT NULL, media TEXT NOT NULL, pages INTEGER NOT NULL CHECK (pages >
    0)) STRICT;

CREATE TABLE maker (id INTEGER PRIMARY KEY CHECK (id > 0), name TEXT NOT NULL UNIQUE CHECK (trim(name) <> '')) STRICT;

CREATE TABLE pump (
  id INTEGER PRIMARY KEY CHECK (id > 0), key TEXT NOT NULL UNIQUE CHECK (key GLOB '[A-Z0-9]*' AND key NOT GLOB '*[^A-Z0-9-]*'),
  maker_id INTEGER NOT NULL REFERENCES maker (id), model TEXT NOT NULL CHECK (trim(model) <> ''),
  stages INTEGER NOT NULL CHECK (stages BETWEEN 1 AND 1000), rated_rpm REAL CHECK (rated_rpm > 0 AND rated_rpm < 1e6)) STRICT;

CREATE TABLE alias (
  key TEXT PRIMARY KEY CHECK (key GLOB '[A-Z0-9]*' AND key NOT GLOB '*[^A-Z0-9-]*'), pump_id INTEGER NOT NULL REFERENCES pump (id),
  seq INTEGER NOT NULL REFERENCES event (seq)) STRICT;

CREATE TABLE revision (
  id INTEGER PRIMARY KEY CHECK (id > 0), pump_id INTEGER NOT NULL REFERENCES pump (id), number INTEGER NOT NULL CHECK (number > 0),
  parent_id INTEGER REFERENCES revision (id), saved_at TEXT NOT NULL CHECK (saved_at GLOB
    '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T[0-9][0-9]:[0-9][0-9]:[0-9][0-9].[0-9][0-9][0-9]Z'),
  who TEXT NOT NULL CHECK (trim(who) <> ''), why TEXT NOT NULL CHECK (trim(why) <> ''), save_key TEXT NOT NULL UNIQUE CHECK (save_key <>
    ''),
  body_sha256 BLOB NOT NULL REFERENCES blob (sha256), read_rule TEXT NOT NULL CHECK (read_rule <> ''), rule_json TEXT NOT NULL CHECK
    (json_valid(rule_json)),
  stages INTEGER NOT NULL CHECK (stages BETWEEN 1 AND 1000), rated_rpm REAL CHECK (rated_rpm > 0 AND rated_rpm < 1e6),
  density_kgm3 REAL NOT NULL CHECK (density_kgm3 > 0 AND density_kgm3 < 1e5),
  settings_json TEXT NOT NULL CHECK (json_valid(settings_json)), made_by_json TEXT NOT NULL CHECK (json_valid(made_by_json)),
  UNIQUE (pump_id, number)) STRICT;

CREATE TABLE revision_recipe (
  id INTEGER PRIMARY KEY CHECK (id > 0), revision_id INTEGER NOT NULL REFERENCES revision (id), sheet_sha256 BLOB REFERENCES sheet
    (sha256),
  page INTEGER NOT NULL CHECK (page >= 0), recipe_sha256 BLOB NOT NULL REFERENCES blob (sha256)) STRICT;
CREATE UNIQUE INDEX revision_recipe_source ON revision_recipe (revision_id, coalesce(sheet_sha256, x''), page);

CREATE TABLE installation (
  id INTEGER PRIMARY KEY CHECK (id > 0), tag TEXT NOT NULL UNIQUE CHECK (trim(tag) <> ''), pump_id INTEGER NOT NULL REFERENCES pump (id),
  station TEXT NOT NULL, serial TEXT NOT NULL) STRICT;

CREATE TABLE curve (
  id INTEGER PRIMARY KEY CHECK (id > 0), revision_id INTEGER NOT NULL REFERENCES revision (id), local_id TEXT NOT NULL CHECK (local_id <>
    ''),
  quantity TEXT NOT NULL CHECK (quantity <> ''), diameter_mm REAL CHECK (diameter_mm > 0 AND diameter_mm < 1e6),
  speed_rpm REAL CHECK (speed_rpm > 0 AND speed_rpm < 1e6), level REAL CHECK (level BETWEEN -1e300 AND 1e300),
  applies_to TEXT NOT NULL CHECK (applies_to IN ('this', 'all', 'unknown')), label_by TEXT, label TEXT, casting TEXT, basis TEXT NOT NULL,
    kind TEXT NOT NULL,
  sheet_sha256 BLOB REFERENCES sheet (sha256), page INTEGER NOT NULL CHECK (page >= 0),
  orders INTEGER CHECK (orders BETWEEN 0 AND 8),
  q_lo REAL CHECK (q_lo BETWEEN -1e300 AND 1e300), q_hi REAL CHECK (q_hi BETWEEN -1e300 AND 1e300 AND q_hi > q_lo),
  q_mid REAL CHECK (q_mid BETWEEN -1e300 AND 1e300), q_half REAL CHECK (q_half > 0 AND q_half < 1e300),
  c0 REAL CHECK (c0 BETWEEN -1e300 AND 1e300), p0 REAL CHECK (p0 BETWEEN -1e300 AND 1e300),
  c1 REAL CHECK (c1 BETWEEN -1e300 AND 1e300), p1 REAL CHECK (p1 BETWEEN -1e300 AND 1e300),
  c2 REAL CHECK (c2 BETWEEN -1e300 AND 1e300), p2 REAL CHECK (p2 BETWEEN -1e300 AND 1e300),
  c3 REAL CHECK (c3 BETWEEN -1e300 AND 1e300), p3 REAL CHECK (p3 BETWEEN -1e300 AND 1e300),
  c4 REAL CHECK (c4 BETWEEN -1e300 AND 1e300), p4 REAL CHECK (p4 BETWEEN -1e300 AND 1e300),
  c5 REAL CHECK (c5 BETWEEN -1e300 AND 1e300), p5 REAL CHECK (p5 BETWEEN -1e300 AND 1e300),
  c6 REAL CHECK (c6 BETWEEN -1e300 AND 1e300), p6 REAL CHECK (p6 BETWEEN -1e300 AND 1e300),
  c7 REAL CHECK (c7 BETWEEN -1e300 AND 1e300), p7 REAL CHECK (p7 BETWEEN -1e300 AND 1e300),
  c8 REAL CHECK (c8 BETWEEN -1e300 AND 1e300), p8 REAL CHECK (p8 BETWEEN -1e300 AND 1e300),
  sigma REAL CHECK (sigma >= 0 AND sigma < 1e300), max_miss REAL CHECK (max_miss >= 0 AND max_miss < 1e300),
  cov BLOB CHECK (length(cov) = 8 * (orders + 1) * (orders + 1)), sha256 BLOB NOT NULL CHECK (length(sha256) = 32),
  UNIQUE (revision_id, local_id),
  CHECK ((orders IS NULL) = (c0 IS NULL) AND (orders IS NULL) = (q_lo IS NULL) AND (orders IS NULL) = (q_hi IS NULL)
    AND (orders IS NULL) = (q_mid IS NULL) AND (orders IS NULL) = (q_half IS NULL) AND (orders IS NULL) = (sigma IS NULL)
    AND (orders IS NULL) = (max_miss IS NULL) AND (orders IS NULL) = (cov IS NULL)),
  CHECK (orders IS NULL OR (c0 IS NOT NULL) = (orders >= 0) AND (p0 IS NOT NULL) = (orders >= 0) AND (c1 IS NOT NULL) = (orders >= 1) AND
    (p1 IS NOT NULL) = (orders >= 1) AND (c2 IS NOT NULL) = (orders >= 2) AND (p2 IS NOT NULL) = (orders >= 2) AND (c3 IS NOT NULL) =
    (orders >= 3) AND (p3 IS NOT NULL) = (orders >= 3) AND (c4 IS NOT NULL) = (orders >= 4) AND (p4 IS NOT NULL) = (orders >= 4) AND (c5
    IS NOT NULL) = (orders >= 5) AND (p5 IS NOT NULL) = (orders >= 5) AND (c6 IS NOT NULL) = (orders >= 6) AND (p6 IS NOT NULL) = (orders
    >= 6) AND (c7 IS NOT NULL) = (orders >= 7) AND (p7 IS NOT NULL) = (orders >= 7) AND (c8 IS NOT NULL) = (orders >= 8) AND (p8 IS NOT
    NULL) = (orders >= 8))) STRICT;

CREATE TABLE trace (
  curve_id INTEGER PRIMARY KEY REFERENCES curve (id), n INTEGER NOT NULL CHECK (n BETWEEN 1 AND 200),
  bytes BLOB NOT NULL CHECK (length(bytes) = 24 * n)) STRICT;

CREATE TABLE finding (
  id INTEGER PRIMARY KEY CHECK (id > 0), revision_id INTEGER NOT NULL REFERENCES revision (id), key TEXT NOT NULL CHECK (length(key) =
    16),
  rule TEXT NOT NULL, severity TEXT NOT NULL CHECK (severity IN ('error', 'warning', 'note')), subject TEXT NOT NULL,
  json TEXT NOT NULL CHECK (json_valid(json))) STRICT;
CREATE INDEX finding_revision ON finding (revision_id, key);

CREATE TABLE event (
  seq INTEGER PRIMARY KEY CHECK (seq > 0), at TEXT NOT NULL CHECK (at GLOB
    '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T[0-9][0-9]:[0-9][0-9]:[0-9][0-9].[0-9][0-9][0-9]Z'), who TEXT NOT NULL CHECK (trim(who) <>
    ''),
  kind TEXT NOT NULL CHECK (kind IN ('saved', 'submitted', 'released', 'superseded', 'withdrawn', 'renamed', 'merged', 'commented',
    'waived', 'tagged')),
  pump_id INTEGER NOT NULL REFERENCES pump (id), revision_id INTEGER REFERENCES revision (id), why TEXT NOT NULL CHECK (trim(why) <> ''),
  json TEXT NOT NULL CHECK (json_valid(json)), previous_sha256 BLOB NOT NULL CHECK (length(previous_sha256) = 32),
  sha256 BLOB NOT NULL UNIQUE CHECK (length(sha256) = 32)) STRICT;
CREATE INDEX event_revision ON event (revision_id, seq);
CREATE INDEX event_pump ON event (pump_id, seq);

CREATE TABLE release_span (
  revision_id INTEGER PRIMARY KEY REFERENCES revision (id), pump_id INTEGER NOT NULL REFERENCES pump (id),
  valid_from TEXT NOT NULL CHECK (valid_from GLOB
    '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T[0-9][0-9]:[0-9][0-9]:[0-9][0-9].[0-9][0-9][0-9]Z'), valid_to TEXT CHECK (valid_to GLOB
    '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T[0-9][0-9]:[0-9][0-9]:[0-9][0-9].[0-9][0-9][0-9]Z' AND valid_to >= valid_from)) STRICT;
CREATE UNIQUE INDEX release_span_open ON release_span (pump_id) WHERE valid_to IS NULL;
CREATE INDEX release_span_pump ON release_span (pump_id, valid_from);
"""
