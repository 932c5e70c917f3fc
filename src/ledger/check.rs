//! The check of a whole ledger: its pages, its references, its journal against its tables, and the
//! accounting of its nights.

use rusqlite::types::Value;
use rusqlite::{Connection, Rows};

use super::SqliteLedger;
use super::rows::decode;
use super::write::draw;
use crate::ports::LedgerFault;

/// Tables that are drawn from the journal, with the columns to compare and how to order them. Of
/// `visits` only the reported rows are, and their numbers depend on what people added between.
const DRAWN: [(&str, &str); 11] = [
    ("nights", "SELECT * FROM nights ORDER BY seq"),
    ("night_summaries", "SELECT * FROM night_summaries ORDER BY seq"),
    ("darkness_parts", "SELECT * FROM darkness_parts ORDER BY summary, part"),
    ("plan_revisions", "SELECT * FROM plan_revisions ORDER BY seq"),
    ("planned_visits", "SELECT * FROM planned_visits ORDER BY revision, position"),
    ("left_out", "SELECT * FROM left_out ORDER BY revision, position"),
    (
        "visits",
        "SELECT seq, source, learnt_unix_ms, report_key, visit, night, kind, subject, began_unix_ms,
           exposing_start_unix_ms, exposing_end_unix_ms, exposed_s, planned_count, planned_s,
           outcome, loss_cause, credit, airmass, snr, rv_error_m_s, predicted_rv_error_m_s,
           mid_bjd_tdb, note
         FROM visits WHERE source = 'report' ORDER BY seq",
    ),
    (
        "leases",
        "SELECT l.*, e.* FROM leases AS l LEFT JOIN lease_extensions AS e ON e.visit = l.visit
         ORDER BY l.seq, e.seq",
    ),
    ("holds", "SELECT h.*, e.* FROM holds AS h LEFT JOIN hold_ends AS e ON e.hold = h.seq ORDER BY h.seq"),
    ("weather_samples", "SELECT * FROM weather_samples ORDER BY seq"),
    ("events", "SELECT * FROM events ORDER BY seq"),
];

/// Questions whose every answer is a fault, in words.
const FAULTS: [&str; 4] = [
    "SELECT 'night ' || s.night || ': its parts add up to ' || CAST(whole AS INTEGER) || ' ms of '
       || (coalesce(s.darkness_end_unix_ms, 0) - coalesce(s.darkness_start_unix_ms, 0))
       || ' ms of darkness'
     FROM (SELECT summary, total(ms) AS whole FROM darkness_parts GROUP BY summary)
     JOIN night_summaries AS s ON s.seq = summary
     WHERE whole <> coalesce(s.darkness_end_unix_ms, 0) - coalesce(s.darkness_start_unix_ms, 0)",
    "SELECT 'row ' || v.id || ' of visit ' || v.visit || ' does not supersede the row before it'
     FROM visits AS v
     WHERE v.supersedes IS NOT
       (SELECT max(w.id) FROM visits AS w WHERE w.visit = v.visit AND w.id < v.id)",
    "SELECT 'visit ' || v.visit || ': its credit is ' || v.credit || ', not between 0 and 1'
     FROM visits AS v WHERE v.credit NOT BETWEEN 0 AND 1",
    "SELECT 'visit ' || v.visit || ': its exposure ends before it begins'
     FROM visits AS v WHERE v.exposing_end_unix_ms < v.exposing_start_unix_ms",
];

/// So many faults of one kind are told; more of them say nothing new.
const TOLD_OF_A_KIND: usize = 20;

/// Rows of a table.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct TableCount {
    /// Its name.
    pub table: &'static str,
    /// How many rows it has.
    pub rows: i64,
}

/// What a check found.
#[derive(Clone, Debug, PartialEq, Eq, Default)]
pub struct CheckReport {
    /// Rows by table.
    pub counts: Vec<TableCount>,
    /// The faults in words; empty for a sound ledger.
    pub faults: Vec<String>,
}

impl SqliteLedger {
    /// Checks everything: reads every page and every row. The journal is folded anew into fresh
    /// tables, which must equal those of the file.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] when the check itself could not be made.
    pub fn check(&self) -> Result<CheckReport, LedgerFault> {
        let mut report = CheckReport::default();
        // One snapshot for all questions, whatever others write meanwhile.
        let snapshot = self
            .connection
            .unchecked_transaction()
            .map_err(|error| self.reading(error))?;
        self.tell(&mut report, "PRAGMA integrity_check(20)", |answer| {
            (answer != "ok").then(|| format!("structure: {answer}"))
        })?;
        if !report.faults.is_empty() {
            return Ok(report);
        }
        self.tell(
            &mut report,
            "SELECT \"table\" || ' row ' || coalesce(rowid, '') FROM pragma_foreign_key_check",
            |row| Some(format!("reference to nothing: {row}")),
        )?;
        for question in FAULTS {
            self.tell(&mut report, question, Some)?;
        }
        self.check_drawn(&mut report)?;
        for table in super::export::TABLES {
            let rows = self
                .connection
                .query_row(&format!("SELECT count(*) FROM {table}"), [], |row| {
                    row.get(0)
                })
                .map_err(|error| self.reading(error))?;
            report.counts.push(TableCount { table, rows });
        }
        drop(snapshot);
        Ok(report)
    }

    /// Adds what a query of one text column answers.
    fn tell(
        &self,
        report: &mut CheckReport,
        sql: &str,
        word: impl Fn(String) -> Option<String>,
    ) -> Result<(), LedgerFault> {
        let answers: Vec<String> = self.collect(sql, [], |row| Ok(row.get(0)?))?;
        let faults = answers.into_iter().filter_map(word);
        report.faults.extend(faults.take(TOLD_OF_A_KIND));
        Ok(())
    }

    /// Draws the tables anew from the journal, in a passing file that SQLite removes by itself, and
    /// compares.
    fn check_drawn(&self, report: &mut CheckReport) -> Result<(), LedgerFault> {
        let fresh = Connection::open("").map_err(|error| self.reading(error))?;
        self.copy_schema(&fresh)?;
        fresh
            .execute_batch("BEGIN")
            .map_err(|error| self.reading(error))?;
        let unreadable = self.collect(
            "SELECT seq, night, kind, body FROM journal ORDER BY seq",
            [],
            |row| {
                let (seq, night): (i64, String) = (row.get("seq")?, row.get("night")?);
                let (kind, body): (String, String) = (row.get("kind")?, row.get("body")?);
                let drawn = match decode(&kind, &body) {
                    Ok(fact) => draw(&fresh, seq, &night, &fact)
                        .err()
                        .map(|e| e.to_string()),
                    Err(error) => Some(error.to_string()),
                };
                Ok(drawn.map(|error| format!("journal row {seq} ({kind}): {error}")))
            },
        )?;
        let unreadable = unreadable.into_iter().flatten();
        report.faults.extend(unreadable.take(TOLD_OF_A_KIND));
        for (table, sql) in DRAWN {
            if let Some(row) = self.first_difference(&fresh, sql)? {
                report.faults.push(format!(
                    "table {table} differs from the journal at its row {row}"
                ));
            }
        }
        Ok(())
    }

    /// The file's own tables without their rows; references and triggers are not needed.
    fn copy_schema(&self, fresh: &Connection) -> Result<(), LedgerFault> {
        let statements: Vec<String> = self.collect(
            "SELECT sql FROM sqlite_schema
             WHERE type = 'table' AND name NOT LIKE 'sqlite_%' OR type = 'index' AND sql IS NOT NULL",
            [],
            |row| Ok(row.get(0)?),
        )?;
        fresh
            .execute_batch("PRAGMA foreign_keys = OFF")
            .map_err(|error| self.reading(error))?;
        for statement in statements {
            fresh
                .execute_batch(&statement)
                .map_err(|error| self.reading(error))?;
        }
        Ok(())
    }

    /// The first row (from 1) at which the two answers part.
    fn first_difference(&self, fresh: &Connection, sql: &str) -> Result<Option<u64>, LedgerFault> {
        let compare = || -> rusqlite::Result<Option<u64>> {
            let (mut kept, mut drawn) = (self.connection.prepare(sql)?, fresh.prepare(sql)?);
            let width = kept.column_count();
            let (mut kept, mut drawn) = (kept.query([])?, drawn.query([])?);
            let mut number = 1;
            loop {
                let (a, b) = (values(&mut kept, width)?, values(&mut drawn, width)?);
                if a != b {
                    return Ok(Some(number));
                }
                if a.is_none() {
                    return Ok(None);
                }
                number += 1;
            }
        };
        compare().map_err(|error| self.reading(error))
    }
}

fn values(rows: &mut Rows<'_>, width: usize) -> rusqlite::Result<Option<Vec<Value>>> {
    rows.next()?
        .map(|row| (0..width).map(|column| row.get(column)).collect())
        .transpose()
}
