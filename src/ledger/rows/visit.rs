//! Visits and the accounting of a night.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

use super::{Num, RowError, SpanRow, float, night, num, utc};
use crate::catalogue::TargetId;
use crate::ledger::labels;
use crate::record::{DarknessSplit, Exposures, NightSummary, Visit, VisitCounts, VisitId};

#[derive(Clone, Copy, Debug, Serialize, Deserialize)]
pub(super) struct ExposuresRow {
    count: u32,
    seconds: Num,
}

impl From<Exposures> for ExposuresRow {
    fn from(exposures: Exposures) -> Self {
        ExposuresRow {
            count: exposures.count,
            seconds: Num(exposures.seconds),
        }
    }
}

impl From<ExposuresRow> for Exposures {
    fn from(row: ExposuresRow) -> Self {
        Exposures {
            count: row.count,
            seconds: row.seconds.0,
        }
    }
}

#[derive(Debug, Serialize, Deserialize)]
pub(super) struct VisitRow {
    visit: String,
    night: String,
    kind: String,
    subject: String,
    began_unix_ms: i64,
    exposing: SpanRow,
    exposed_s: Num,
    planned: ExposuresRow,
    outcome: String,
    #[serde(skip_serializing_if = "Option::is_none")]
    loss_cause: Option<String>,
    credit: Num,
    airmass: Option<Num>,
    snr: Option<Num>,
    rv_error_m_s: Option<Num>,
    predicted_rv_error_m_s: Option<Num>,
    mid_bjd_tdb: Option<Num>,
    note: String,
}

impl From<&Visit> for VisitRow {
    fn from(visit: &Visit) -> Self {
        let (outcome, loss_cause) = labels::outcome(visit.outcome);
        VisitRow {
            visit: visit.id.0.clone(),
            night: visit.night.to_string(),
            kind: labels::entry_kind(visit.kind).to_owned(),
            subject: visit.subject.as_str().to_owned(),
            began_unix_ms: visit.began.unix_ms(),
            exposing: visit.exposing.into(),
            exposed_s: Num(visit.exposed_s),
            planned: visit.planned.into(),
            outcome: outcome.to_owned(),
            loss_cause: loss_cause.map(str::to_owned),
            credit: Num(visit.credit),
            airmass: num(visit.airmass),
            snr: num(visit.snr),
            rv_error_m_s: num(visit.rv_error_m_s),
            predicted_rv_error_m_s: num(visit.predicted_rv_error_m_s),
            mid_bjd_tdb: num(visit.mid_bjd_tdb),
            note: visit.note.clone(),
        }
    }
}

impl TryFrom<VisitRow> for Visit {
    type Error = RowError;
    fn try_from(row: VisitRow) -> Result<Self, RowError> {
        Ok(Visit {
            id: VisitId(row.visit),
            night: night(&row.night)?,
            kind: labels::to_entry_kind(&row.kind)?,
            subject: TargetId::new(&row.subject),
            began: utc(row.began_unix_ms),
            exposing: row.exposing.into(),
            exposed_s: row.exposed_s.0,
            planned: row.planned.into(),
            outcome: labels::to_outcome(&row.outcome, row.loss_cause.as_deref())?,
            credit: row.credit.0,
            airmass: float(row.airmass),
            snr: float(row.snr),
            rv_error_m_s: float(row.rv_error_m_s),
            predicted_rv_error_m_s: float(row.predicted_rv_error_m_s),
            mid_bjd_tdb: float(row.mid_bjd_tdb),
            note: row.note,
        })
    }
}

/// The parts of a split of darkness under the names of reports, absent parts left out.
pub(in crate::ledger) fn darkness_parts(split: &DarknessSplit) -> Vec<(String, i64)> {
    let plain = [
        ("exposing", split.exposing_ms),
        ("overhead", split.overhead_ms),
        ("calibration", split.calibration_ms),
    ];
    let plain = plain.into_iter().map(|(part, ms)| (part.to_owned(), ms));
    let held = split
        .held_ms
        .iter()
        .map(|(cause, ms)| (format!("held_{}", labels::hold_cause(*cause)), *ms));
    let idle = split
        .idle_ms
        .iter()
        .map(|(cause, ms)| (format!("idle_{}", labels::idle_cause(*cause)), *ms));
    plain.chain(held).chain(idle).collect()
}

#[derive(Debug, Serialize, Deserialize)]
pub(super) struct SummaryRow {
    night: String,
    darkness: Option<SpanRow>,
    exposing_ms: i64,
    overhead_ms: i64,
    calibration_ms: i64,
    held_ms: BTreeMap<String, i64>,
    idle_ms: BTreeMap<String, i64>,
    done: u32,
    short: u32,
    lost: u32,
    refused: u32,
    unreported: u32,
}

impl From<&NightSummary> for SummaryRow {
    fn from(summary: &NightSummary) -> Self {
        let split = &summary.split;
        let held = split.held_ms.iter();
        let idle = split.idle_ms.iter();
        SummaryRow {
            night: summary.night.to_string(),
            darkness: summary.darkness.map(SpanRow::from),
            exposing_ms: split.exposing_ms,
            overhead_ms: split.overhead_ms,
            calibration_ms: split.calibration_ms,
            held_ms: held
                .map(|(cause, ms)| (labels::hold_cause(*cause).to_owned(), *ms))
                .collect(),
            idle_ms: idle
                .map(|(cause, ms)| (labels::idle_cause(*cause).to_owned(), *ms))
                .collect(),
            done: summary.visits.done,
            short: summary.visits.short,
            lost: summary.visits.lost,
            refused: summary.visits.refused,
            unreported: summary.visits.unreported,
        }
    }
}

impl TryFrom<SummaryRow> for NightSummary {
    type Error = RowError;
    fn try_from(row: SummaryRow) -> Result<Self, RowError> {
        let mut split = DarknessSplit {
            exposing_ms: row.exposing_ms,
            overhead_ms: row.overhead_ms,
            calibration_ms: row.calibration_ms,
            ..DarknessSplit::default()
        };
        for (cause, ms) in &row.held_ms {
            split.held_ms.insert(labels::to_hold_cause(cause)?, *ms);
        }
        for (cause, ms) in &row.idle_ms {
            split.idle_ms.insert(labels::to_idle_cause(cause)?, *ms);
        }
        Ok(NightSummary {
            night: night(&row.night)?,
            darkness: row.darkness.map(Into::into),
            split,
            visits: VisitCounts {
                done: row.done,
                short: row.short,
                lost: row.lost,
                refused: row.refused,
                unreported: row.unreported,
            },
        })
    }
}
