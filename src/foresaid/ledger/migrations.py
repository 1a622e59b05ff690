"""The schema, as numbered steps; this file is its only home.

``PRAGMA user_version`` holds the number of the last step that ran. A step is never edited
once it has landed: a change is a new step.
"""

from __future__ import annotations

APPLICATION_ID = 0x46534149  # "FSAI"

_FIRST_TABLES = (
    "load",
    "codebook",
    "forecaster",
    "alias",
    "instrument",
    "price",
    "action",
    "collection",
    "statement",
    "call",
    "reading",
    "withdrawal",
    "decision",
    "seal",
    "settlement",
    "outcome",
    "analysis",
    "reply",
    "correction",
    "history",
)


def _refuse_changes(table: str) -> str:
    return f"""
CREATE TRIGGER {table}_no_update BEFORE UPDATE ON "{table}"
BEGIN SELECT RAISE(ABORT, 'rows of {table} are never changed'); END;
CREATE TRIGGER {table}_no_delete BEFORE DELETE ON "{table}"
BEGIN SELECT RAISE(ABORT, 'rows of {table} are never deleted'); END;
"""


_TABLES = """
CREATE TABLE load (
  id INTEGER PRIMARY KEY,
  what TEXT NOT NULL CHECK (what IN
    ('instruments', 'prices', 'actions', 'forecasters', 'calls', 'readings')),
  file TEXT NOT NULL,
  sha256 TEXT NOT NULL CHECK (length(sha256) = 64),
  series TEXT NOT NULL DEFAULT ''
    CHECK (series IN ('', 'raw', 'split-adjusted', 'total-return')),
  n_rows INTEGER NOT NULL CHECK (n_rows >= 0),
  loaded_at TEXT NOT NULL
) STRICT;

CREATE TABLE codebook (
  digest TEXT PRIMARY KEY CHECK (length(digest) = 64),
  name TEXT NOT NULL,
  source TEXT NOT NULL,
  first_used_at TEXT NOT NULL
) STRICT;

CREATE TABLE forecaster (
  id INTEGER PRIMARY KEY,
  handle TEXT NOT NULL UNIQUE,
  name TEXT NOT NULL,
  role TEXT NOT NULL,
  desk TEXT NOT NULL,
  load INTEGER NOT NULL REFERENCES load
) STRICT;

CREATE TABLE alias (
  alias TEXT PRIMARY KEY,
  forecaster INTEGER NOT NULL REFERENCES forecaster
) STRICT;

CREATE TABLE instrument (
  id INTEGER PRIMARY KEY,
  symbol TEXT NOT NULL UNIQUE,
  name TEXT NOT NULL,
  currency TEXT NOT NULL,
  zone TEXT NOT NULL,
  opens TEXT NOT NULL,
  closes TEXT NOT NULL,
  sense TEXT NOT NULL CHECK (sense IN ('direct', 'inverse')),
  kind TEXT NOT NULL,
  market TEXT NOT NULL,
  benchmark TEXT NOT NULL,
  base TEXT NOT NULL,
  term TEXT NOT NULL,
  load INTEGER NOT NULL REFERENCES load
) STRICT;

CREATE TABLE price (
  instrument INTEGER NOT NULL REFERENCES instrument,
  session TEXT NOT NULL CHECK (session IS date(session)),
  load INTEGER NOT NULL REFERENCES load,
  open REAL,
  high REAL,
  low REAL,
  close REAL NOT NULL,
  volume REAL,
  total REAL,
  PRIMARY KEY (instrument, session, load)
) STRICT, WITHOUT ROWID;

CREATE TABLE action (
  id INTEGER PRIMARY KEY,
  instrument INTEGER NOT NULL REFERENCES instrument,
  effective TEXT NOT NULL CHECK (effective IS date(effective)),
  kind TEXT NOT NULL CHECK (kind IN
    ('split', 'dividend', 'rebase', 'cash-out', 'merger', 'wind-up', 'halt', 'resume')),
  ratio REAL,
  amount REAL,
  currency TEXT NOT NULL,
  "into" TEXT NOT NULL,
  load INTEGER NOT NULL REFERENCES load,
  UNIQUE (instrument, effective, kind)
) STRICT;

CREATE TABLE collection (
  id INTEGER PRIMARY KEY,
  name TEXT NOT NULL UNIQUE,
  sampling_rule TEXT NOT NULL,
  screened INTEGER
) STRICT;

CREATE TABLE statement (
  id INTEGER PRIMARY KEY,
  ref TEXT NOT NULL UNIQUE,
  forecaster INTEGER NOT NULL REFERENCES forecaster,
  said_at TEXT NOT NULL,
  said_zone TEXT NOT NULL,
  outlet TEXT NOT NULL,
  link TEXT NOT NULL,
  quote TEXT NOT NULL,
  capture_sha256 TEXT NOT NULL DEFAULT '',
  collection INTEGER REFERENCES collection,
  copy_of INTEGER REFERENCES statement,
  digest TEXT NOT NULL,
  load INTEGER NOT NULL REFERENCES load
) STRICT;

CREATE TABLE call (
  id INTEGER PRIMARY KEY,
  statement INTEGER NOT NULL UNIQUE REFERENCES statement,
  instrument INTEGER REFERENCES instrument,
  claim_typed TEXT NOT NULL,
  claim TEXT NOT NULL,
  not_a_call TEXT NOT NULL,
  horizon_typed TEXT NOT NULL,
  horizon TEXT NOT NULL,
  horizon_imputed INTEGER NOT NULL CHECK (horizon_imputed IN (0, 1)),
  deadline TEXT CHECK (deadline IS NULL OR deadline IS date(deadline)),
  sessions INTEGER CHECK (sessions IS NULL OR sessions > 0),
  probability_low REAL CHECK (probability_low BETWEEN 0 AND 1),
  probability_high REAL CHECK (probability_high BETWEEN probability_low AND 1),
  likelihood TEXT NOT NULL,
  given TEXT NOT NULL,
  currency TEXT NOT NULL,
  horizon_class TEXT NOT NULL,
  specificity_class TEXT NOT NULL,
  coder TEXT NOT NULL,
  coded_at TEXT NOT NULL,
  revises INTEGER REFERENCES statement,
  note TEXT NOT NULL,
  codebook TEXT NOT NULL REFERENCES codebook,
  CHECK (not_a_call <> '' OR
         (instrument IS NOT NULL AND (deadline IS NULL) <> (sessions IS NULL)))
) STRICT;

CREATE TABLE reading (
  id INTEGER PRIMARY KEY,
  statement INTEGER NOT NULL REFERENCES statement,
  instrument INTEGER REFERENCES instrument,
  claim TEXT NOT NULL,
  horizon TEXT NOT NULL,
  probability_low REAL,
  probability_high REAL,
  coder TEXT NOT NULL,
  coded_at TEXT NOT NULL,
  load INTEGER NOT NULL REFERENCES load
) STRICT;

CREATE TABLE withdrawal (
  id INTEGER PRIMARY KEY,
  statement INTEGER NOT NULL UNIQUE REFERENCES statement,
  withdrawn_at TEXT NOT NULL,
  who TEXT NOT NULL,
  why TEXT NOT NULL
) STRICT;

CREATE TABLE decision (
  id INTEGER PRIMARY KEY,
  call INTEGER NOT NULL REFERENCES call,
  met INTEGER NOT NULL CHECK (met IN (0, 1)),
  decided_at TEXT NOT NULL,
  who TEXT NOT NULL,
  evidence TEXT NOT NULL
) STRICT;

CREATE TABLE seal (
  id INTEGER PRIMARY KEY,
  sealed_at TEXT NOT NULL,
  last_call INTEGER REFERENCES call,
  last_load INTEGER REFERENCES load,
  codebook TEXT NOT NULL REFERENCES codebook,
  digest TEXT NOT NULL
) STRICT;

CREATE TABLE settlement (
  id INTEGER PRIMARY KEY,
  as_of TEXT NOT NULL CHECK (as_of IS date(as_of)),
  codebook TEXT NOT NULL REFERENCES codebook,
  vintage INTEGER NOT NULL,
  last_call INTEGER NOT NULL,
  last_decision INTEGER NOT NULL,
  program TEXT NOT NULL,
  settled_at TEXT NOT NULL
) STRICT;

CREATE TABLE outcome (
  settlement INTEGER NOT NULL REFERENCES settlement,
  call INTEGER NOT NULL REFERENCES call,
  result TEXT NOT NULL CHECK (result IN ('hit', 'miss', 'void', 'open', 'not a call')),
  reason TEXT NOT NULL,
  matured INTEGER NOT NULL CHECK (matured IN (0, 1)),
  direction TEXT NOT NULL,
  reference_session TEXT,
  reference_price REAL,
  first_session TEXT,
  deadline_session TEXT,
  decided_session TEXT,
  decided_price REAL,
  move_frac REAL,
  move_points REAL,
  measured REAL,
  alternates TEXT NOT NULL,
  flags TEXT NOT NULL,
  chance REAL CHECK (chance BETWEEN 0 AND 1),
  chance_model TEXT NOT NULL,
  chance_windows INTEGER NOT NULL,
  chance_hits INTEGER NOT NULL,
  chance_disjoint INTEGER NOT NULL,
  chance_volatility REAL,
  chance_modelled REAL,
  PRIMARY KEY (settlement, call)
) STRICT, WITHOUT ROWID;

CREATE TABLE analysis (
  id INTEGER PRIMARY KEY,
  settlement INTEGER NOT NULL REFERENCES settlement,
  run_at TEXT NOT NULL,
  settings TEXT NOT NULL,
  digest TEXT NOT NULL
) STRICT;

CREATE TABLE reply (
  id INTEGER PRIMARY KEY,
  forecaster INTEGER NOT NULL REFERENCES forecaster,
  notice_sent_at TEXT NOT NULL,
  deadline TEXT NOT NULL,
  answer TEXT NOT NULL,
  effect TEXT NOT NULL
) STRICT;

CREATE TABLE correction (
  id INTEGER PRIMARY KEY,
  statement INTEGER REFERENCES statement,
  field TEXT NOT NULL,
  old_value TEXT NOT NULL,
  new_value TEXT NOT NULL,
  reason TEXT NOT NULL,
  corrected_at TEXT NOT NULL
) STRICT;

CREATE TABLE history (
  seq INTEGER PRIMARY KEY,
  at TEXT NOT NULL,
  what TEXT NOT NULL,
  detail TEXT NOT NULL,
  previous TEXT NOT NULL,
  digest TEXT NOT NULL UNIQUE
) STRICT;

CREATE INDEX statement_by_forecaster ON statement (forecaster);
CREATE INDEX statement_by_original ON statement (copy_of) WHERE copy_of IS NOT NULL;
CREATE INDEX call_by_instrument ON call (instrument);

CREATE VIEW calls_readable AS
SELECT s.ref, f.handle AS forecaster, i.symbol AS instrument, c.claim, s.said_at, c.horizon,
       c.deadline, c.sessions, c.probability_low, c.probability_high, c.horizon_class,
       c.specificity_class, s.outlet, s.link, s.quote, c.coder, c.coded_at
FROM call c
JOIN statement s ON s.id = c.statement
JOIN forecaster f ON f.id = s.forecaster
LEFT JOIN instrument i ON i.id = c.instrument;

CREATE VIEW prices_readable AS
SELECT i.symbol AS instrument, p.session, p.open, p.high, p.low, p.close, p.volume, p.total,
       l.file, l.sha256, l.loaded_at
FROM price p
JOIN instrument i ON i.id = p.instrument
JOIN load l ON l.id = p.load;

CREATE VIEW outcomes_readable AS
SELECT t.as_of, s.ref, f.handle AS forecaster, i.symbol AS instrument, c.claim, o.result,
       o.reason, o.reference_session, o.reference_price, o.deadline_session,
       o.decided_session, o.decided_price, o.chance, o.flags
FROM outcome o
JOIN settlement t ON t.id = o.settlement
JOIN call c ON c.id = o.call
JOIN statement s ON s.id = c.statement
JOIN forecaster f ON f.id = s.forecaster
LEFT JOIN instrument i ON i.id = c.instrument;
"""

_CONFIRMATIONS = """
CREATE TABLE confirmation (
  id INTEGER PRIMARY KEY,
  instrument INTEGER NOT NULL REFERENCES instrument,
  session TEXT NOT NULL CHECK (session IS date(session)),
  high REAL,
  low REAL,
  close REAL NOT NULL,
  confirmed_at TEXT NOT NULL,
  who TEXT NOT NULL,
  evidence TEXT NOT NULL
) STRICT;

ALTER TABLE settlement ADD COLUMN last_confirmation INTEGER NOT NULL DEFAULT 0;
ALTER TABLE outcome ADD COLUMN loss REAL;
ALTER TABLE outcome ADD COLUMN loss_reference REAL;
ALTER TABLE outcome ADD COLUMN covered REAL;
"""

APPEND_ONLY = (*_FIRST_TABLES, "confirmation")
MIGRATIONS: tuple[str, ...] = (
    _TABLES + "".join(_refuse_changes(table) for table in _FIRST_TABLES),
    _CONFIRMATIONS + _refuse_changes("confirmation"),
)
