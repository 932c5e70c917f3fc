//! Keeping facts: the journal and the tables drawn from it, in one transaction.

use rusqlite::{Connection, OptionalExtension, TransactionBehavior, params};

use super::rows::{darkness_parts, encode, kind_of, target_body};
use super::{SqliteLedger, labels};
use crate::catalogue::Survey;
use crate::night::{Fact, Lease};
use crate::ports::LedgerFault;
use crate::record::{NightSummary, PlanRevision, QueueEntry, Visit};
use crate::time::{NightDate, Span};
use crate::weather::{Quantity, WeatherSample};

impl SqliteLedger {
    /// Keeps all facts or none.
    pub(super) fn append_facts(
        &mut self,
        night: NightDate,
        facts: &[Fact],
    ) -> Result<(), LedgerFault> {
        let mut bodies = Vec::with_capacity(facts.len());
        for fact in facts {
            bodies.push(encode(fact).map_err(|error| LedgerFault::Contradicted {
                path: self.path.clone(),
                detail: error.to_string(),
            })?);
        }
        self.in_transaction(|connection| {
            let night = night.to_string();
            for (fact, body) in facts.iter().zip(&bodies) {
                if already_reported(connection, fact)? {
                    continue;
                }
                connection
                    .prepare_cached(
                        "INSERT INTO journal (night, at_unix_ms, kind, body) VALUES (?, ?, ?, ?)",
                    )?
                    .execute(params![night, instant_of(fact), kind_of(fact), body])?;
                draw(connection, connection.last_insert_rowid(), &night, fact)?;
            }
            Ok(())
        })
    }

    /// Keeps the settings of the survey's targets as they are from a night on; a target whose
    /// settings are those that were kept last takes no room.
    ///
    /// # Errors
    /// [`LedgerFault::Unwritable`]; nothing was kept.
    pub fn keep_targets(&mut self, night: NightDate, survey: &Survey) -> Result<(), LedgerFault> {
        let mut bodies = Vec::with_capacity(survey.targets.len());
        for target in &survey.targets {
            let body = target_body(target, &survey.programmes)
                .map_err(|error| self.damaged(error.to_string()))?;
            bodies.push((target.id.as_str(), body));
        }
        self.in_transaction(|connection| {
            let mut kept = connection.prepare_cached(
                "SELECT body FROM target_snapshots WHERE target = ? ORDER BY id DESC LIMIT 1",
            )?;
            let mut keep = connection.prepare_cached(
                "INSERT INTO target_snapshots (night, target, body) VALUES (?, ?, ?)",
            )?;
            for (target, body) in &bodies {
                let last: Option<String> = kept.query_row([target], |row| row.get(0)).optional()?;
                if last.as_ref() != Some(body) {
                    keep.execute(params![night.to_string(), target, body])?;
                }
            }
            Ok(())
        })
    }

    /// Runs the work as one transaction that holds the right to write from its first statement.
    pub(super) fn in_transaction<T>(
        &mut self,
        work: impl FnOnce(&Connection) -> rusqlite::Result<T>,
    ) -> Result<T, LedgerFault> {
        let run = |connection: &mut Connection| {
            let transaction =
                connection.transaction_with_behavior(TransactionBehavior::Immediate)?;
            let done = work(&transaction)?;
            transaction.commit()?;
            Ok(done)
        };
        let outcome = run(&mut self.connection);
        outcome.map_err(|error| self.writing(error))
    }
}

/// Whether this is the end of a visit under a report key that is known for it.
fn already_reported(connection: &Connection, fact: &Fact) -> rusqlite::Result<bool> {
    match fact {
        Fact::VisitEnded {
            report_key, visit, ..
        } => connection
            .prepare_cached("SELECT 1 FROM visits WHERE visit = ? AND report_key = ?")?
            .exists(params![visit.id.0, report_key]),
        _ => Ok(false),
    }
}

/// The instant that a fact tells of; a summary tells of none.
fn instant_of(fact: &Fact) -> Option<i64> {
    let at = match fact {
        Fact::NightOpened { span, .. } => span.start,
        Fact::PlanPublished(plan) => plan.made_at,
        Fact::LeaseGranted(lease) => lease.granted,
        Fact::WeatherNoted(sample) => sample.at,
        Fact::HoldBegan { at, .. }
        | Fact::HoldEnded { at, .. }
        | Fact::LeaseExtended { at, .. }
        | Fact::VisitEnded { at, .. }
        | Fact::TargetPaused { at, .. }
        | Fact::TargetResumed { at, .. }
        | Fact::TargetUrgent { at, .. }
        | Fact::VisitSkipped { at, .. }
        | Fact::Note { at, .. }
        | Fact::ClockStepped { at, .. }
        | Fact::Resumed { at }
        | Fact::DarknessBegan { at }
        | Fact::DarknessEnded { at } => *at,
        Fact::NightClosed(_) => return None,
    };
    Some(at.unix_ms())
}

/// Draws the rows that reports ask from a fact that the journal holds as number `seq`. The check of
/// a ledger draws them anew from its journal with this same function.
pub(super) fn draw(
    connection: &Connection,
    seq: i64,
    night: &str,
    fact: &Fact,
) -> rusqlite::Result<()> {
    match fact {
        Fact::NightOpened {
            span,
            darkness,
            ours,
            mode,
            ..
        } => {
            let (dark_start, dark_end) = ends(*darkness);
            connection
                .prepare_cached("INSERT INTO nights VALUES (?, ?, ?, ?, ?, ?, ?, ?)")?
                .execute(params![
                    seq,
                    night,
                    span.start.unix_ms(),
                    span.end.unix_ms(),
                    dark_start,
                    dark_end,
                    ours,
                    labels::run_mode(*mode)
                ])?;
        }
        Fact::PlanPublished(plan) => draw_plan(connection, seq, plan)?,
        Fact::HoldBegan { at, cause, detail } => {
            connection
                .prepare_cached("INSERT INTO holds VALUES (?, ?, ?, ?, ?)")?
                .execute(params![
                    seq,
                    night,
                    labels::hold_cause(*cause),
                    at.unix_ms(),
                    detail
                ])?;
        }
        // The end belongs to the last hold of that cause in the night that has none yet.
        Fact::HoldEnded { at, cause } => {
            connection
                .prepare_cached(
                    "INSERT INTO hold_ends (seq, hold, ended_unix_ms)
                     SELECT ?1, h.seq, ?2 FROM holds AS h
                     WHERE h.night = ?3 AND h.cause = ?4
                       AND NOT EXISTS (SELECT 1 FROM hold_ends AS e WHERE e.hold = h.seq)
                     ORDER BY h.seq DESC LIMIT 1",
                )?
                .execute(params![
                    seq,
                    at.unix_ms(),
                    night,
                    labels::hold_cause(*cause)
                ])?;
        }
        Fact::LeaseGranted(lease) => draw_lease(connection, seq, night, lease)?,
        Fact::LeaseExtended { visit, at, expires } => {
            connection
                .prepare_cached("INSERT INTO lease_extensions VALUES (?, ?, ?, ?)")?
                .execute(params![seq, visit.0, at.unix_ms(), expires.unix_ms()])?;
        }
        Fact::VisitEnded {
            at,
            report_key,
            visit,
        } => {
            let word = Word {
                seq: Some(seq),
                source: "report",
                learnt_unix_ms: at.unix_ms(),
                report_key: Some(report_key),
                by: None,
                why: None,
            };
            insert_visit(connection, &word, visit)?;
        }
        Fact::WeatherNoted(sample) => draw_weather(connection, seq, night, sample)?,
        Fact::NightClosed(summary) => draw_summary(connection, seq, night, summary)?,
        _ => draw_event(connection, seq, night, fact)?,
    }
    Ok(())
}

fn ends(span: Option<Span>) -> (Option<i64>, Option<i64>) {
    (
        span.map(|s| s.start.unix_ms()),
        span.map(|s| s.end.unix_ms()),
    )
}

fn draw_plan(connection: &Connection, seq: i64, plan: &PlanRevision) -> rusqlite::Result<()> {
    let (cause, request) = labels::plan_cause(&plan.cause);
    connection
        .prepare_cached("INSERT INTO plan_revisions VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)")?
        .execute(params![
            seq,
            plan.night.to_string(),
            plan.number,
            plan.made_at.unix_ms(),
            plan.from.unix_ms(),
            cause,
            request,
            plan.value,
            plan.bound
        ])?;
    for (position, entry) in (0i64..).zip(&plan.entries) {
        draw_entry(connection, seq, position, entry)?;
    }
    let mut insert = connection.prepare_cached("INSERT INTO left_out VALUES (?, ?, ?, ?)")?;
    for (position, left) in (0i64..).zip(&plan.left_out) {
        insert.execute(params![seq, position, left.target.as_str(), left.because])?;
    }
    Ok(())
}

fn draw_entry(
    connection: &Connection,
    revision: i64,
    position: i64,
    entry: &QueueEntry,
) -> rusqlite::Result<()> {
    connection
        .prepare_cached(
            "INSERT INTO planned_visits VALUES
             (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        )?
        .execute(params![
            revision,
            position,
            labels::entry_kind(entry.kind),
            entry.subject.as_str(),
            entry.start.unix_ms(),
            entry.end.unix_ms(),
            entry.setup_s,
            entry.exposures.count,
            entry.exposures.seconds,
            entry.predicted_rv_error_m_s,
            entry.airmass,
            entry.altitude_deg,
            entry.azimuth_deg,
            entry.moon_separation_deg,
            entry.value.total,
            entry.value.cadence,
            entry.value.coverage,
            entry.value.window,
            entry.value.quality,
            entry.value.weight,
            entry.value.share,
            entry.value.season,
            entry.because
        ])?;
    Ok(())
}

fn draw_lease(
    connection: &Connection,
    seq: i64,
    night: &str,
    lease: &Lease,
) -> rusqlite::Result<()> {
    connection
        .prepare_cached("INSERT INTO leases VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)")?
        .execute(params![
            seq,
            night,
            lease.visit.0,
            lease.revision,
            lease.claim_key,
            lease.holder,
            labels::entry_kind(lease.entry.kind),
            lease.entry.subject.as_str(),
            lease.entry.start.unix_ms(),
            lease.entry.end.unix_ms(),
            lease.granted.unix_ms(),
            lease.expires.unix_ms()
        ])?;
    Ok(())
}

fn draw_weather(
    connection: &Connection,
    seq: i64,
    night: &str,
    sample: &WeatherSample,
) -> rusqlite::Result<()> {
    let value = |quantity: Quantity| sample.values.get(&quantity).copied();
    connection
        .prepare_cached(
            "INSERT INTO weather_samples VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        )?
        .execute(params![
            seq,
            night,
            sample.at.unix_ms(),
            sample.safe,
            sample.wind_from.map(|angle| angle.deg()),
            value(Quantity::RainMmH),
            value(Quantity::HumidityPercent),
            value(Quantity::DewPointSpreadK),
            value(Quantity::WindMS),
            value(Quantity::GustMS),
            value(Quantity::CloudPercent),
            value(Quantity::SkyMinusAirK),
            value(Quantity::SkyBrightnessMag),
            value(Quantity::SeeingArcsec)
        ])?;
    Ok(())
}

fn draw_summary(
    connection: &Connection,
    seq: i64,
    night: &str,
    summary: &NightSummary,
) -> rusqlite::Result<()> {
    let (dark_start, dark_end) = ends(summary.darkness);
    connection
        .prepare_cached("INSERT INTO night_summaries VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)")?
        .execute(params![
            seq,
            night,
            dark_start,
            dark_end,
            summary.visits.done,
            summary.visits.short,
            summary.visits.lost,
            summary.visits.refused,
            summary.visits.unreported
        ])?;
    let mut insert = connection.prepare_cached("INSERT INTO darkness_parts VALUES (?, ?, ?)")?;
    for (part, ms) in darkness_parts(&summary.split) {
        insert.execute(params![seq, part, ms])?;
    }
    Ok(())
}

/// What a person did, or what befell the daemon, as one flat row.
#[derive(Default)]
struct EventColumns<'a> {
    target: Option<&'a str>,
    visit: Option<&'a str>,
    by: Option<&'a str>,
    text: Option<&'a str>,
    until_unix_ms: Option<i64>,
    step_ms: Option<i64>,
}

fn event_columns(fact: &Fact) -> EventColumns<'_> {
    let none = EventColumns::default();
    match fact {
        Fact::TargetPaused {
            target, by, reason, ..
        } => EventColumns {
            target: Some(target.as_str()),
            by: Some(by),
            text: Some(reason),
            ..none
        },
        Fact::TargetResumed { target, by, .. } => EventColumns {
            target: Some(target.as_str()),
            by: Some(by),
            ..none
        },
        Fact::TargetUrgent {
            target,
            until,
            by,
            reason,
            ..
        } => EventColumns {
            target: Some(target.as_str()),
            by: Some(by),
            text: Some(reason),
            until_unix_ms: Some(until.unix_ms()),
            ..none
        },
        Fact::VisitSkipped {
            visit, cause, by, ..
        } => EventColumns {
            visit: Some(&visit.0),
            by: Some(by),
            text: Some(labels::loss_cause(*cause)),
            ..none
        },
        Fact::Note { by, text, .. } => EventColumns {
            by: Some(by),
            text: Some(text),
            ..none
        },
        Fact::ClockStepped { by_ms, .. } => EventColumns {
            step_ms: Some(*by_ms),
            ..none
        },
        _ => none,
    }
}

fn draw_event(connection: &Connection, seq: i64, night: &str, fact: &Fact) -> rusqlite::Result<()> {
    let event = event_columns(fact);
    connection
        .prepare_cached("INSERT INTO events VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)")?
        .execute(params![
            seq,
            night,
            instant_of(fact),
            kind_of(fact),
            event.target,
            event.visit,
            event.by,
            event.text,
            event.until_unix_ms,
            event.step_ms
        ])?;
    Ok(())
}

/// Where a row about a visit comes from.
pub(super) struct Word<'a> {
    pub(super) seq: Option<i64>,
    pub(super) source: &'static str,
    pub(super) learnt_unix_ms: i64,
    pub(super) report_key: Option<&'a str>,
    pub(super) by: Option<&'a str>,
    pub(super) why: Option<&'a str>,
}

/// Keeps a word on a visit; it supersedes the one that stood, if any.
pub(super) fn insert_visit(
    connection: &Connection,
    word: &Word<'_>,
    visit: &Visit,
) -> rusqlite::Result<()> {
    let stood: Option<i64> = connection
        .prepare_cached("SELECT max(id) FROM visits WHERE visit = ?")?
        .query_row([&visit.id.0], |row| row.get(0))?;
    let (outcome, loss_cause) = labels::outcome(visit.outcome);
    connection
        .prepare_cached(
            "INSERT INTO visits VALUES (NULL,
             ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        )?
        .execute(params![
            word.seq,
            stood,
            word.source,
            word.learnt_unix_ms,
            word.report_key,
            word.by,
            word.why,
            visit.id.0,
            visit.night.to_string(),
            labels::entry_kind(visit.kind),
            visit.subject.as_str(),
            visit.began.unix_ms(),
            visit.exposing.start.unix_ms(),
            visit.exposing.end.unix_ms(),
            visit.exposed_s,
            visit.planned.count,
            visit.planned.seconds,
            outcome,
            loss_cause,
            visit.credit,
            visit.airmass,
            visit.snr,
            visit.rv_error_m_s,
            visit.predicted_rv_error_m_s,
            visit.mid_bjd_tdb,
            visit.note
        ])?;
    Ok(())
}
