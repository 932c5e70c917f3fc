//! Asking the ledger.

use rusqlite::{OptionalExtension, Params, Row, params};
use thiserror::Error;

use super::rows::{RowError, decode};
use super::{SqliteLedger, labels};
use crate::catalogue::TargetId;
use crate::night::{Fact, RunMode};
use crate::ports::{Ledger, LedgerFault};
use crate::record::{Exposures, Hold, NightSummary, PlanRevision, Visit, VisitId};
use crate::time::{NightDate, Span, Utc};
use crate::weather::WeatherSample;

/// A night as it was opened and, if it was, closed.
#[derive(Clone, Debug, PartialEq)]
pub struct NightRecord {
    /// The night.
    pub night: NightDate,
    /// Noon to noon.
    pub span: Span,
    /// `None`: no darkness.
    pub darkness: Option<Span>,
    /// The night was ours.
    pub ours: bool,
    /// Real or not.
    pub mode: RunMode,
    /// `None`: not closed.
    pub summary: Option<NightSummary>,
}

/// A target's place in one revision of a night's plan.
#[derive(Clone, Debug, PartialEq)]
pub struct PlannedVisit {
    /// Number of the revision.
    pub revision: u32,
    /// When the first exposure was to start; `None`: left out.
    pub start: Option<Utc>,
    /// Total value where it was planned.
    pub value: Option<f64>,
    /// The reason in plain words.
    pub because: String,
}

/// A lease whose visit has ended with no word, or has not ended.
#[derive(Clone, Debug, PartialEq)]
pub struct OpenLease {
    /// The visit's name.
    pub visit: VisitId,
    /// Its night.
    pub night: NightDate,
    /// Its target.
    pub subject: TargetId,
    /// Granted until the later of its planned end and its (first) expiry.
    pub span: Span,
    /// It was recorded as unreported, so that it may be settled; else the daemon still waits.
    pub unreported: bool,
}

/// What a person did, or what befell the daemon.
#[derive(Clone, Debug, PartialEq)]
pub struct Event {
    /// The night.
    pub night: NightDate,
    /// The fact.
    pub fact: Fact,
}

/// Why a row could not be turned into a value.
#[derive(Debug, Error)]
pub(super) enum ReadError {
    #[error(transparent)]
    Storage(#[from] rusqlite::Error),
    #[error(transparent)]
    Row(#[from] RowError),
}

impl From<labels::UnknownLabel> for ReadError {
    fn from(error: labels::UnknownLabel) -> Self {
        ReadError::Row(error.into())
    }
}

fn instant(row: &Row<'_>, column: &str) -> rusqlite::Result<Utc> {
    Ok(Utc::from_unix_ms(row.get(column)?))
}

fn night_of(row: &Row<'_>) -> Result<NightDate, ReadError> {
    let text: String = row.get("night")?;
    Ok(NightDate::parse(&text).map_err(RowError::from)?)
}

fn text<'a>(row: &'a Row<'_>, column: &str) -> rusqlite::Result<&'a str> {
    Ok(row.get_ref(column)?.as_str()?)
}

/// The columns that [`visit_from_row`] reads, to stand first in a query. By place and not by name:
/// looking names up took most of the time that reading three years of visits took.
macro_rules! visit_columns {
    () => {
        "visit, night, kind, subject, began_unix_ms, exposing_start_unix_ms, \
         exposing_end_unix_ms, exposed_s, planned_count, planned_s, outcome, loss_cause, credit, \
         airmass, snr, rv_error_m_s, predicted_rv_error_m_s, mid_bjd_tdb, note"
    };
}
pub(super) use visit_columns;

/// The visit of a row that begins with [`visit_columns`].
pub(super) fn visit_from_row(row: &Row<'_>) -> Result<Visit, ReadError> {
    let instant = |index| row.get(index).map(Utc::from_unix_ms);
    let text = |index| Ok::<&str, rusqlite::Error>(row.get_ref(index)?.as_str()?);
    let loss_cause = row.get_ref(11)?.as_str_or_null();
    let loss_cause = loss_cause.map_err(rusqlite::Error::from)?;
    Ok(Visit {
        id: VisitId(row.get(0)?),
        night: NightDate::parse(text(1)?).map_err(RowError::from)?,
        kind: labels::to_entry_kind(text(2)?)?,
        subject: TargetId::new(text(3)?),
        began: instant(4)?,
        exposing: Span::new(instant(5)?, instant(6)?),
        exposed_s: row.get(7)?,
        planned: Exposures {
            count: row.get(8)?,
            seconds: row.get(9)?,
        },
        outcome: labels::to_outcome(text(10)?, loss_cause)?,
        credit: row.get(12)?,
        airmass: row.get(13)?,
        snr: row.get(14)?,
        rv_error_m_s: row.get(15)?,
        predicted_rv_error_m_s: row.get(16)?,
        mid_bjd_tdb: row.get(17)?,
        note: row.get(18)?,
    })
}

/// The fact of a row with `seq`, `kind` and `body` of the journal.
fn fact_from_row(row: &Row<'_>) -> Result<Fact, ReadError> {
    Ok(decode(text(row, "kind")?, text(row, "body")?)?)
}

/// A darkness as two nullable columns.
fn darkness(row: &Row<'_>) -> rusqlite::Result<Option<Span>> {
    let start: Option<i64> = row.get("darkness_start_unix_ms")?;
    let end: Option<i64> = row.get("darkness_end_unix_ms")?;
    Ok(start
        .zip(end)
        .map(|(a, b)| Span::new(Utc::from_unix_ms(a), Utc::from_unix_ms(b))))
}

impl Ledger for SqliteLedger {
    fn append(&mut self, night: NightDate, facts: &[Fact]) -> Result<(), LedgerFault> {
        self.append_facts(night, facts)
    }

    fn facts(&self, night: NightDate) -> Result<Vec<Fact>, LedgerFault> {
        self.collect(
            "SELECT seq, kind, body FROM journal WHERE night = ? ORDER BY seq",
            [night.to_string()],
            fact_from_row,
        )
    }

    fn visits(&self, until: Option<NightDate>) -> Result<Vec<Visit>, LedgerFault> {
        // Beyond every date that a night can have.
        let until = until.map_or_else(|| "9999".to_owned(), |night| night.to_string());
        self.collect(
            concat!(
                "SELECT ",
                visit_columns!(),
                " FROM visits_now WHERE night <= ? ORDER BY exposing_start_unix_ms, id"
            ),
            [until],
            visit_from_row,
        )
    }

    fn open_night(&self) -> Result<Option<NightDate>, LedgerFault> {
        let found = self.collect(
            "SELECT night FROM nights AS n
             WHERE NOT EXISTS (SELECT 1 FROM night_summaries AS s
                               WHERE s.night = n.night AND s.seq > n.seq)
             ORDER BY night DESC LIMIT 1",
            [],
            night_of,
        )?;
        Ok(found.first().copied())
    }
}

impl SqliteLedger {
    /// All rows of a query as values.
    pub(super) fn collect<T>(
        &self,
        sql: &str,
        parameters: impl Params,
        mut make: impl FnMut(&Row<'_>) -> Result<T, ReadError>,
    ) -> Result<Vec<T>, LedgerFault> {
        let run = || -> Result<Vec<T>, ReadError> {
            let mut statement = self.connection.prepare_cached(sql)?;
            let mut rows = statement.query(parameters)?;
            let mut values = Vec::new();
            while let Some(row) = rows.next()? {
                values.push(make(row)?);
            }
            Ok(values)
        };
        run().map_err(|error| match error {
            ReadError::Storage(error) => self.reading(error),
            ReadError::Row(error) => self.damaged(error.to_string()),
        })
    }

    /// The first night that the record knows, opened or with a visit.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn first_night(&self) -> Result<Option<NightDate>, LedgerFault> {
        let found = self.collect(
            "SELECT night FROM (SELECT min(night) AS night FROM nights
                                UNION ALL SELECT min(night) FROM visits)
             WHERE night IS NOT NULL ORDER BY night LIMIT 1",
            [],
            night_of,
        )?;
        Ok(found.first().copied())
    }

    /// The last night that the record knows, opened or with a visit.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn last_night(&self) -> Result<Option<NightDate>, LedgerFault> {
        let found = self.collect(
            "SELECT night FROM (SELECT max(night) AS night FROM nights
                                UNION ALL SELECT max(night) FROM visits)
             WHERE night IS NOT NULL ORDER BY night DESC LIMIT 1",
            [],
            night_of,
        )?;
        Ok(found.first().copied())
    }

    /// The last night that was opened; visits added by hand do not open one.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn last_opened_night(&self) -> Result<Option<NightDate>, LedgerFault> {
        let sql = "SELECT night FROM nights ORDER BY night DESC LIMIT 1";
        Ok(self.collect(sql, [], night_of)?.first().copied())
    }

    /// The nights from `first` to `last`, both included, in order; each as it was opened last, with
    /// its last summary.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn nights(
        &self,
        first: NightDate,
        last: NightDate,
    ) -> Result<Vec<NightRecord>, LedgerFault> {
        self.collect(
            "SELECT n.*, (SELECT j.body FROM night_summaries AS s JOIN journal AS j USING (seq)
                          WHERE s.night = n.night AND s.seq > n.seq
                          ORDER BY s.seq DESC LIMIT 1) AS body
             FROM nights AS n
             WHERE n.night BETWEEN ? AND ?
               AND n.seq = (SELECT max(m.seq) FROM nights AS m WHERE m.night = n.night)
             ORDER BY n.night",
            [first.to_string(), last.to_string()],
            |row| {
                let body: Option<String> = row.get("body")?;
                let summary = match body.map(|body| decode("night_closed", &body)).transpose()? {
                    Some(Fact::NightClosed(summary)) => Some(summary),
                    _ => None,
                };
                Ok(NightRecord {
                    night: night_of(row)?,
                    span: Span::new(
                        instant(row, "span_start_unix_ms")?,
                        instant(row, "span_end_unix_ms")?,
                    ),
                    darkness: darkness(row)?,
                    ours: row.get("ours")?,
                    mode: labels::to_run_mode(text(row, "mode")?)?,
                    summary,
                })
            },
        )
    }

    /// The holds that touch a span, by their start, cut to it. One that nothing ended lasts to the
    /// end of its night.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn holds(&self, within: Span) -> Result<Vec<Hold>, LedgerFault> {
        // A hold lasts at most from its night's noon to the next: an earlier start cannot touch.
        let earliest = within.start.plus_ms(-crate::time::DAY_MS);
        self.collect(
            "SELECT * FROM holds_now
             WHERE began_unix_ms BETWEEN ?1 AND ?2 AND coalesce(ended_unix_ms, ?2) > ?3
             ORDER BY began_unix_ms, seq",
            [
                earliest.unix_ms(),
                within.end.unix_ms(),
                within.start.unix_ms(),
            ],
            |row| {
                let ended: Option<i64> = row.get("ended_unix_ms")?;
                let end = ended.map_or(within.end, Utc::from_unix_ms);
                Ok(Hold {
                    cause: labels::to_hold_cause(text(row, "cause")?)?,
                    span: Span::new(instant(row, "began_unix_ms")?, end).intersect(&within),
                    detail: row.get("detail")?,
                })
            },
        )
    }

    /// The last plan that was published for a night.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn latest_plan(&self, night: NightDate) -> Result<Option<PlanRevision>, LedgerFault> {
        let plans = self.plans(
            "SELECT j.kind, j.body FROM plan_revisions AS p JOIN journal AS j USING (seq)
             WHERE p.night = ? ORDER BY p.number DESC LIMIT 1",
            night,
        )?;
        Ok(plans.into_iter().next())
    }

    /// Every plan that was published for a night, in order.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn plan_revisions(&self, night: NightDate) -> Result<Vec<PlanRevision>, LedgerFault> {
        self.plans(
            "SELECT j.kind, j.body FROM plan_revisions AS p JOIN journal AS j USING (seq)
             WHERE p.night = ? ORDER BY p.number",
            night,
        )
    }

    fn plans(&self, sql: &str, night: NightDate) -> Result<Vec<PlanRevision>, LedgerFault> {
        let facts = self.collect(sql, [night.to_string()], fact_from_row)?;
        let plans = facts.into_iter().filter_map(|fact| match fact {
            Fact::PlanPublished(plan) => Some(plan),
            _ => None,
        });
        Ok(plans.collect())
    }

    /// What each revision of a night's plan meant for a target, in the order of the revisions.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn planned_for(
        &self,
        target: &TargetId,
        night: NightDate,
    ) -> Result<Vec<PlannedVisit>, LedgerFault> {
        // The plus keeps the reading to the night's revisions: by subject it would be all nights.
        self.collect(
            "SELECT p.number, v.start_unix_ms, v.value_total, v.because
               FROM plan_revisions AS p JOIN planned_visits AS v ON v.revision = p.seq
               WHERE p.night = ?1 AND +v.subject = ?2
             UNION ALL
             SELECT p.number, NULL, NULL, l.because
               FROM plan_revisions AS p JOIN left_out AS l ON l.revision = p.seq
               WHERE p.night = ?1 AND l.target = ?2
             ORDER BY 1, 2",
            params![night.to_string(), target.as_str()],
            |row| {
                let start: Option<i64> = row.get(1)?;
                Ok(PlannedVisit {
                    revision: row.get(0)?,
                    start: start.map(Utc::from_unix_ms),
                    value: row.get(2)?,
                    because: row.get(3)?,
                })
            },
        )
    }

    /// The weather kept within a span, by time.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn weather(&self, within: Span) -> Result<Vec<WeatherSample>, LedgerFault> {
        let facts = self.collect(
            "SELECT j.kind, j.body FROM weather_samples AS w JOIN journal AS j USING (seq)
             WHERE w.at_unix_ms >= ? AND w.at_unix_ms < ? ORDER BY w.at_unix_ms, w.seq",
            [within.start.unix_ms(), within.end.unix_ms()],
            fact_from_row,
        )?;
        let samples = facts.into_iter().filter_map(|fact| match fact {
            Fact::WeatherNoted(sample) => Some(sample),
            _ => None,
        });
        Ok(samples.collect())
    }

    /// What people did and what befell the daemon from night `first` to `last`, both included, in
    /// the order in which it was kept.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn events(&self, first: NightDate, last: NightDate) -> Result<Vec<Event>, LedgerFault> {
        self.collect(
            "SELECT e.night, j.kind, j.body FROM events AS e JOIN journal AS j USING (seq)
             WHERE e.night BETWEEN ? AND ? ORDER BY e.seq",
            [first.to_string(), last.to_string()],
            |row| {
                Ok(Event {
                    night: night_of(row)?,
                    fact: fact_from_row(row)?,
                })
            },
        )
    }

    /// Leases of science visits with no word on how they went, by time.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn leases_without_word(&self) -> Result<Vec<OpenLease>, LedgerFault> {
        self.collect(
            "SELECT l.visit, l.night, l.subject, l.granted_unix_ms, l.end_unix_ms,
                    l.expires_unix_ms, v.outcome IS NOT NULL AS unreported
             FROM leases AS l LEFT JOIN visits_now AS v ON v.visit = l.visit
             WHERE l.kind = 'science' AND (v.outcome IS NULL OR v.outcome = 'unreported')
             ORDER BY l.granted_unix_ms",
            [],
            |row| {
                let end = instant(row, "end_unix_ms")?.max(instant(row, "expires_unix_ms")?);
                Ok(OpenLease {
                    visit: VisitId(row.get("visit")?),
                    night: night_of(row)?,
                    subject: TargetId::new(text(row, "subject")?),
                    span: Span::new(instant(row, "granted_unix_ms")?, end),
                    unreported: row.get("unreported")?,
                })
            },
        )
    }

    /// The settings of a target as they were in a night, as JSON; `None` when they were not kept by
    /// then.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`] or [`LedgerFault::Damaged`].
    pub fn target_as_of(
        &self,
        target: &TargetId,
        night: NightDate,
    ) -> Result<Option<serde_json::Value>, LedgerFault> {
        let body: Option<String> = self
            .connection
            .prepare_cached(
                "SELECT body FROM target_snapshots WHERE target = ? AND night <= ?
                 ORDER BY night DESC, id DESC LIMIT 1",
            )
            .and_then(|mut query| {
                query
                    .query_row(params![target.as_str(), night.to_string()], |row| {
                        row.get(0)
                    })
                    .optional()
            })
            .map_err(|error| self.reading(error))?;
        body.map(|body| serde_json::from_str(&body))
            .transpose()
            .map_err(|error| self.damaged(error.to_string()))
    }
}
