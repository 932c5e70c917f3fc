//! What people add, import and amend.

use rusqlite::{OptionalExtension, params};

use super::SqliteLedger;
use super::read::{visit_columns, visit_from_row};
use super::write::{Word, insert_visit};
use crate::ports::LedgerFault;
use crate::record::{Visit, VisitId};
use crate::time::Utc;

/// How a person's word on a visit came in.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum HandSource {
    /// Typed in.
    Log,
    /// From a file of records.
    Import,
    /// A correction of what stood: its visit must be known, and the reason told.
    Amendment,
}

impl HandSource {
    const fn label(self) -> &'static str {
        match self {
            HandSource::Log => "log",
            HandSource::Import => "import",
            HandSource::Amendment => "amendment",
        }
    }

    /// Marks the names of visits that the observatory did not hand out: they share no numbers with
    /// those that it did.
    const fn mark(self) -> char {
        match self {
            HandSource::Import => 'i',
            HandSource::Log | HandSource::Amendment => 'h',
        }
    }
}

/// A person's word on a visit.
#[derive(Clone, Debug, PartialEq)]
pub struct HandEntry {
    /// The visit. Where its name is empty it is a new one and gets its name from the ledger; else it
    /// supersedes what stood under that name.
    pub visit: Visit,
    /// How it came.
    pub source: HandSource,
    /// Who.
    pub by: String,
    /// Why, where something is superseded.
    pub why: Option<String>,
}

/// A row about a visit with where it came from.
#[derive(Clone, Debug, PartialEq)]
pub struct Recorded {
    /// What it says.
    pub visit: Visit,
    /// `report`, `log`, `import` or `amendment`.
    pub source: String,
    /// When the ledger learnt it.
    pub learnt: Utc,
    /// Who, where a person said it.
    pub by: Option<String>,
    /// Why, where a person superseded something.
    pub why: Option<String>,
    /// Nothing superseded it.
    pub stands: bool,
}

impl SqliteLedger {
    /// Keeps what people say of visits, all or none, and gives the visits' names in that order.
    ///
    /// # Errors
    /// [`LedgerFault::Unwritable`], or [`LedgerFault::Contradicted`] for an amendment of a visit that
    /// is not known or without a reason; nothing was kept.
    pub fn keep_by_hand(
        &mut self,
        entries: &[HandEntry],
        now: Utc,
    ) -> Result<Vec<VisitId>, LedgerFault> {
        self.in_transaction(|connection| {
            let mut names = Vec::with_capacity(entries.len());
            for entry in entries {
                let mut visit = entry.visit.clone();
                if visit.id.0.is_empty() {
                    let stem = format!("{}-{}", visit.night, entry.source.mark());
                    // The plus keeps the reading to the night: most visits supersede nothing.
                    let used: u32 = connection
                        .prepare_cached(
                            "SELECT count(*) FROM visits
                             WHERE night = ?1 AND +supersedes IS NULL
                               AND substr(visit, 1, length(?2)) = ?2",
                        )?
                        .query_row(params![visit.night.to_string(), stem], |row| row.get(0))?;
                    visit.id = VisitId(format!("{stem}{:04}", used + 1));
                }
                let word = Word {
                    seq: None,
                    source: entry.source.label(),
                    learnt_unix_ms: now.unix_ms(),
                    report_key: None,
                    by: Some(&entry.by),
                    why: entry.why.as_deref(),
                };
                insert_visit(connection, &word, &visit)?;
                names.push(visit.id);
            }
            Ok(names)
        })
    }

    /// The visit of that name as it stands.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn visit(&self, id: &VisitId) -> Result<Option<Visit>, LedgerFault> {
        let sql = concat!(
            "SELECT ",
            visit_columns!(),
            " FROM visits_now WHERE visit = ?"
        );
        let found = self
            .connection
            .prepare_cached(sql)
            .and_then(|mut query| {
                query
                    .query_row([&id.0], |row| Ok(visit_from_row(row)))
                    .optional()
            })
            .map_err(|error| self.reading(error))?;
        found
            .transpose()
            .map_err(|error| self.damaged(error.to_string()))
    }

    /// All that was ever said of visits, oldest first within each, by the time of the visit.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn history(&self) -> Result<Vec<Recorded>, LedgerFault> {
        let sql = concat!(
            "SELECT ",
            visit_columns!(),
            ", source, learnt_unix_ms, by_whom, why,
               NOT EXISTS (SELECT 1 FROM visits AS l WHERE l.supersedes = visits.id) AS stands
             FROM visits ORDER BY exposing_start_unix_ms, id"
        );
        self.collect(sql, [], |row| {
            Ok(Recorded {
                visit: visit_from_row(row)?,
                source: row.get("source")?,
                learnt: Utc::from_unix_ms(row.get("learnt_unix_ms")?),
                by: row.get("by_whom")?,
                why: row.get("why")?,
                stands: row.get("stands")?,
            })
        })
    }
}
