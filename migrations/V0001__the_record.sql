-- Instants are POSIX milliseconds (columns ..._unix_ms), nights the date of their evening.
-- Nothing here is ever changed or deleted: what is put right is a new row (see the triggers).

PRAGMA application_id = 0x4E574C47;
PRAGMA user_version = 1;

-- Every fact of every night, in order, as it was told. The tables below with a `seq` are drawn
-- from it, in the same transaction, so that they can be asked; `ledger check` compares the two.
CREATE TABLE journal (
  seq         INTEGER PRIMARY KEY AUTOINCREMENT,
  night       TEXT NOT NULL,
  at_unix_ms  INTEGER,
  kind        TEXT NOT NULL,
  body        TEXT NOT NULL
) STRICT;
CREATE INDEX journal_by_night ON journal (night, seq);

CREATE TABLE nights (
  seq                     INTEGER PRIMARY KEY REFERENCES journal (seq),
  night                   TEXT NOT NULL,
  span_start_unix_ms      INTEGER NOT NULL,
  span_end_unix_ms        INTEGER NOT NULL,
  darkness_start_unix_ms  INTEGER,
  darkness_end_unix_ms    INTEGER,
  ours                    INTEGER NOT NULL CHECK (ours IN (0, 1)),
  mode                    TEXT NOT NULL CHECK (mode IN ('real', 'rehearsal', 'invented_clock'))
) STRICT;
CREATE INDEX nights_by_night ON nights (night, seq);

CREATE TABLE night_summaries (
  seq                     INTEGER PRIMARY KEY REFERENCES journal (seq),
  night                   TEXT NOT NULL,
  darkness_start_unix_ms  INTEGER,
  darkness_end_unix_ms    INTEGER,
  visits_done             INTEGER NOT NULL,
  visits_short            INTEGER NOT NULL,
  visits_lost             INTEGER NOT NULL,
  visits_refused          INTEGER NOT NULL,
  visits_unreported       INTEGER NOT NULL
) STRICT;
CREATE INDEX night_summaries_by_night ON night_summaries (night, seq);

-- Where a night's darkness went; the parts of a summary add up to its darkness.
CREATE TABLE darkness_parts (
  summary  INTEGER NOT NULL REFERENCES night_summaries (seq),
  part     TEXT NOT NULL,
  ms       INTEGER NOT NULL,
  PRIMARY KEY (summary, part)
) STRICT, WITHOUT ROWID;

CREATE TABLE plan_revisions (
  seq              INTEGER PRIMARY KEY REFERENCES journal (seq),
  night            TEXT NOT NULL,
  number           INTEGER NOT NULL,
  made_at_unix_ms  INTEGER NOT NULL,
  from_unix_ms     INTEGER NOT NULL,
  cause            TEXT NOT NULL,
  request          TEXT,
  value            REAL,
  bound            REAL,
  UNIQUE (night, number)
) STRICT;

CREATE TABLE planned_visits (
  revision                INTEGER NOT NULL REFERENCES plan_revisions (seq),
  position                INTEGER NOT NULL,
  kind                    TEXT NOT NULL CHECK (kind IN ('science', 'standard', 'calibration')),
  subject                 TEXT NOT NULL,
  start_unix_ms           INTEGER NOT NULL,
  end_unix_ms             INTEGER NOT NULL,
  setup_s                 REAL,
  exposure_count          INTEGER NOT NULL,
  exposure_s              REAL,
  predicted_rv_error_m_s  REAL,
  airmass                 REAL,
  altitude_deg            REAL,
  azimuth_deg             REAL,
  moon_separation_deg     REAL,
  value_total             REAL,
  value_cadence           REAL,
  value_coverage          REAL,
  value_window            REAL,
  value_quality           REAL,
  value_weight            REAL,
  value_share             REAL,
  value_season            REAL,
  because                 TEXT NOT NULL,
  PRIMARY KEY (revision, position)
) STRICT, WITHOUT ROWID;
CREATE INDEX planned_visits_by_subject ON planned_visits (subject, start_unix_ms);

CREATE TABLE left_out (
  revision  INTEGER NOT NULL REFERENCES plan_revisions (seq),
  position  INTEGER NOT NULL,
  target    TEXT NOT NULL,
  because   TEXT NOT NULL,
  PRIMARY KEY (revision, position)
) STRICT, WITHOUT ROWID;

-- One row for each word on how a visit went. A later word on the same visit supersedes the one
-- before: a report that came after its lease ran out, or a person's correction.
CREATE TABLE visits (
  id                      INTEGER PRIMARY KEY AUTOINCREMENT,
  seq                     INTEGER UNIQUE REFERENCES journal (seq),
  supersedes              INTEGER UNIQUE REFERENCES visits (id),
  source                  TEXT NOT NULL CHECK (source IN ('report', 'log', 'import', 'amendment')),
  learnt_unix_ms          INTEGER NOT NULL,
  report_key              TEXT,
  by_whom                 TEXT,
  why                     TEXT,
  visit                   TEXT NOT NULL,
  night                   TEXT NOT NULL,
  kind                    TEXT NOT NULL CHECK (kind IN ('science', 'standard', 'calibration')),
  subject                 TEXT NOT NULL,
  began_unix_ms           INTEGER NOT NULL,
  exposing_start_unix_ms  INTEGER NOT NULL,
  exposing_end_unix_ms    INTEGER NOT NULL,
  exposed_s               REAL NOT NULL,
  planned_count           INTEGER NOT NULL,
  planned_s               REAL NOT NULL,
  outcome                 TEXT NOT NULL
                          CHECK (outcome IN ('done', 'short', 'lost', 'refused', 'unreported')),
  loss_cause              TEXT CHECK ((loss_cause IS NOT NULL) = (outcome = 'lost')),
  credit                  REAL NOT NULL,
  airmass                 REAL,
  snr                     REAL,
  rv_error_m_s            REAL,
  predicted_rv_error_m_s  REAL,
  mid_bjd_tdb             REAL,
  note                    TEXT NOT NULL,
  UNIQUE (visit, report_key),
  CHECK ((source = 'report') = (seq IS NOT NULL)),
  CHECK ((source = 'report') = (report_key IS NOT NULL)),
  CHECK ((source = 'report') = (by_whom IS NULL)),
  CHECK (source <> 'amendment' OR (supersedes IS NOT NULL AND why IS NOT NULL))
) STRICT;
CREATE INDEX visits_by_visit ON visits (visit, id);
CREATE INDEX visits_by_night ON visits (night, exposing_start_unix_ms);
CREATE INDEX visits_by_subject ON visits (subject, exposing_start_unix_ms);
-- A visit begins once; everything later on it supersedes.
CREATE UNIQUE INDEX visits_begin_once ON visits (visit) WHERE supersedes IS NULL;
-- The same line imported twice is one visit, even when two imports run at once.
CREATE UNIQUE INDEX visits_imported_once
  ON visits (subject, exposing_start_unix_ms + exposing_end_unix_ms)
  WHERE source = 'import' AND supersedes IS NULL;

-- The word that stands for each visit.
CREATE VIEW visits_now AS
  SELECT * FROM visits AS v
  WHERE NOT EXISTS (SELECT 1 FROM visits AS later WHERE later.supersedes = v.id);

CREATE TABLE leases (
  seq              INTEGER PRIMARY KEY REFERENCES journal (seq),
  night            TEXT NOT NULL,
  visit            TEXT NOT NULL UNIQUE,
  revision         INTEGER NOT NULL,
  claim_key        TEXT NOT NULL,
  holder           TEXT NOT NULL,
  kind             TEXT NOT NULL CHECK (kind IN ('science', 'standard', 'calibration')),
  subject          TEXT NOT NULL,
  start_unix_ms    INTEGER NOT NULL,
  end_unix_ms      INTEGER NOT NULL,
  granted_unix_ms  INTEGER NOT NULL,
  expires_unix_ms  INTEGER NOT NULL
) STRICT;

CREATE TABLE lease_extensions (
  seq              INTEGER PRIMARY KEY REFERENCES journal (seq),
  visit            TEXT NOT NULL,
  at_unix_ms       INTEGER NOT NULL,
  expires_unix_ms  INTEGER NOT NULL
) STRICT;

CREATE TABLE holds (
  seq            INTEGER PRIMARY KEY REFERENCES journal (seq),
  night          TEXT NOT NULL,
  cause          TEXT NOT NULL
                 CHECK (cause IN ('weather', 'feed_lost', 'instrument', 'operator', 'ledger')),
  began_unix_ms  INTEGER NOT NULL,
  detail         TEXT NOT NULL
) STRICT;
CREATE INDEX holds_by_night ON holds (night, cause, seq);
CREATE INDEX holds_by_time ON holds (began_unix_ms);

CREATE TABLE hold_ends (
  seq            INTEGER PRIMARY KEY REFERENCES journal (seq),
  hold           INTEGER NOT NULL UNIQUE REFERENCES holds (seq),
  ended_unix_ms  INTEGER NOT NULL
) STRICT;

-- A hold that nothing ended lasts to the end of its night; NULL where the night is not known.
CREATE VIEW holds_now AS
  SELECT h.seq, h.night, h.cause, h.began_unix_ms,
    coalesce(
      (SELECT e.ended_unix_ms FROM hold_ends AS e WHERE e.hold = h.seq),
      (SELECT max(n.span_end_unix_ms) FROM nights AS n WHERE n.night = h.night)
    ) AS ended_unix_ms,
    h.detail
  FROM holds AS h;

CREATE TABLE weather_samples (
  seq                  INTEGER PRIMARY KEY REFERENCES journal (seq),
  night                TEXT NOT NULL,
  at_unix_ms           INTEGER NOT NULL,
  safe                 INTEGER CHECK (safe IN (0, 1)),
  wind_from_deg        REAL,
  rain_mm_h            REAL,
  humidity_percent     REAL,
  dew_point_spread_k   REAL,
  wind_m_s             REAL,
  gust_m_s             REAL,
  cloud_percent        REAL,
  sky_minus_air_k      REAL,
  sky_brightness_mag   REAL,
  seeing_arcsec        REAL
) STRICT;
CREATE INDEX weather_samples_by_time ON weather_samples (at_unix_ms);

-- What people did and what befell the daemon.
CREATE TABLE events (
  seq            INTEGER PRIMARY KEY REFERENCES journal (seq),
  night          TEXT NOT NULL,
  at_unix_ms     INTEGER NOT NULL,
  kind           TEXT NOT NULL,
  target         TEXT,
  visit          TEXT,
  by_whom        TEXT,
  text           TEXT,
  until_unix_ms  INTEGER,
  step_ms        INTEGER
) STRICT;
CREATE INDEX events_by_night ON events (night, seq);
CREATE INDEX events_by_target ON events (target, seq) WHERE target IS NOT NULL;

-- The settings of a target from a night on, kept when they differ from the last kept.
CREATE TABLE target_snapshots (
  id      INTEGER PRIMARY KEY AUTOINCREMENT,
  night   TEXT NOT NULL,
  target  TEXT NOT NULL,
  body    TEXT NOT NULL
) STRICT;
CREATE INDEX target_snapshots_by_target ON target_snapshots (target, night, id);

CREATE TRIGGER journal_never_edited BEFORE UPDATE ON journal
  BEGIN SELECT raise(ABORT, 'facts are never edited'); END;
CREATE TRIGGER journal_never_deleted BEFORE DELETE ON journal
  BEGIN SELECT raise(ABORT, 'facts are never deleted'); END;
CREATE TRIGGER visits_never_edited BEFORE UPDATE ON visits
  BEGIN SELECT raise(ABORT, 'a correction is a new row that supersedes'); END;
CREATE TRIGGER visits_never_deleted BEFORE DELETE ON visits
  BEGIN SELECT raise(ABORT, 'visits are never deleted'); END;
