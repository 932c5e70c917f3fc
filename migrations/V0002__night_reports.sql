-- The reports of nights as they were written. A late word on a night adds a new one; the last is
-- the one that stands.

PRAGMA user_version = 2;

CREATE TABLE night_reports (
  id               INTEGER PRIMARY KEY AUTOINCREMENT,
  night            TEXT NOT NULL,
  written_unix_ms  INTEGER NOT NULL,
  text             TEXT NOT NULL,
  html             TEXT NOT NULL,
  json             TEXT NOT NULL
) STRICT;
CREATE INDEX night_reports_by_night ON night_reports (night, id);

CREATE TRIGGER night_reports_never_edited BEFORE UPDATE ON night_reports
  BEGIN SELECT raise(ABORT, 'a report is never edited'); END;
CREATE TRIGGER night_reports_never_deleted BEFORE DELETE ON night_reports
  BEGIN SELECT raise(ABORT, 'a report is never deleted'); END;
