//! Queues and leases.

use serde::{Deserialize, Serialize};

use super::visit::ExposuresRow;
use super::{Num, RowError, float, night, num, utc};
use crate::catalogue::TargetId;
use crate::ledger::labels;
use crate::night::Lease;
use crate::record::{LeftOut, PlanRevision, QueueEntry, ValueParts, VisitId};

#[derive(Debug, Serialize, Deserialize)]
struct ValueRow {
    total: Num,
    cadence: Num,
    coverage: Num,
    window: Num,
    quality: Num,
    weight: Num,
    share: Num,
    season: Num,
}

impl From<ValueParts> for ValueRow {
    fn from(value: ValueParts) -> Self {
        ValueRow {
            total: Num(value.total),
            cadence: Num(value.cadence),
            coverage: Num(value.coverage),
            window: Num(value.window),
            quality: Num(value.quality),
            weight: Num(value.weight),
            share: Num(value.share),
            season: Num(value.season),
        }
    }
}

impl From<ValueRow> for ValueParts {
    fn from(row: ValueRow) -> Self {
        ValueParts {
            total: row.total.0,
            cadence: row.cadence.0,
            coverage: row.coverage.0,
            window: row.window.0,
            quality: row.quality.0,
            weight: row.weight.0,
            share: row.share.0,
            season: row.season.0,
        }
    }
}

#[derive(Debug, Serialize, Deserialize)]
struct EntryRow {
    kind: String,
    subject: String,
    start_unix_ms: i64,
    end_unix_ms: i64,
    setup_s: Num,
    exposures: ExposuresRow,
    predicted_rv_error_m_s: Option<Num>,
    airmass: Option<Num>,
    altitude_deg: Option<Num>,
    azimuth_deg: Option<Num>,
    moon_separation_deg: Option<Num>,
    value: ValueRow,
    because: String,
}

impl From<&QueueEntry> for EntryRow {
    fn from(entry: &QueueEntry) -> Self {
        EntryRow {
            kind: labels::entry_kind(entry.kind).to_owned(),
            subject: entry.subject.as_str().to_owned(),
            start_unix_ms: entry.start.unix_ms(),
            end_unix_ms: entry.end.unix_ms(),
            setup_s: Num(entry.setup_s),
            exposures: entry.exposures.into(),
            predicted_rv_error_m_s: num(entry.predicted_rv_error_m_s),
            airmass: num(entry.airmass),
            altitude_deg: num(entry.altitude_deg),
            azimuth_deg: num(entry.azimuth_deg),
            moon_separation_deg: num(entry.moon_separation_deg),
            value: entry.value.into(),
            because: entry.because.clone(),
        }
    }
}

impl TryFrom<EntryRow> for QueueEntry {
    type Error = RowError;
    fn try_from(row: EntryRow) -> Result<Self, RowError> {
        Ok(QueueEntry {
            kind: labels::to_entry_kind(&row.kind)?,
            subject: TargetId::new(&row.subject),
            start: utc(row.start_unix_ms),
            end: utc(row.end_unix_ms),
            setup_s: row.setup_s.0,
            exposures: row.exposures.into(),
            predicted_rv_error_m_s: float(row.predicted_rv_error_m_s),
            airmass: float(row.airmass),
            altitude_deg: float(row.altitude_deg),
            azimuth_deg: float(row.azimuth_deg),
            moon_separation_deg: float(row.moon_separation_deg),
            value: row.value.into(),
            because: row.because,
        })
    }
}

#[derive(Debug, Serialize, Deserialize)]
struct LeftOutRow {
    target: String,
    because: String,
}

#[derive(Debug, Serialize, Deserialize)]
pub(super) struct RevisionRow {
    night: String,
    number: u32,
    made_at_unix_ms: i64,
    from_unix_ms: i64,
    cause: String,
    #[serde(skip_serializing_if = "Option::is_none")]
    request: Option<String>,
    entries: Vec<EntryRow>,
    left_out: Vec<LeftOutRow>,
    value: Num,
    bound: Option<Num>,
}

impl From<&PlanRevision> for RevisionRow {
    fn from(plan: &PlanRevision) -> Self {
        let (cause, request) = labels::plan_cause(&plan.cause);
        let left_out = plan.left_out.iter().map(|left| LeftOutRow {
            target: left.target.as_str().to_owned(),
            because: left.because.clone(),
        });
        RevisionRow {
            night: plan.night.to_string(),
            number: plan.number,
            made_at_unix_ms: plan.made_at.unix_ms(),
            from_unix_ms: plan.from.unix_ms(),
            cause: cause.to_owned(),
            request: request.map(str::to_owned),
            entries: plan.entries.iter().map(EntryRow::from).collect(),
            left_out: left_out.collect(),
            value: Num(plan.value),
            bound: num(plan.bound),
        }
    }
}

impl TryFrom<RevisionRow> for PlanRevision {
    type Error = RowError;
    fn try_from(row: RevisionRow) -> Result<Self, RowError> {
        let entries = row.entries.into_iter().map(QueueEntry::try_from);
        let left_out = row.left_out.into_iter().map(|left| LeftOut {
            target: TargetId::new(&left.target),
            because: left.because,
        });
        Ok(PlanRevision {
            night: night(&row.night)?,
            number: row.number,
            made_at: utc(row.made_at_unix_ms),
            from: utc(row.from_unix_ms),
            cause: labels::to_plan_cause(&row.cause, row.request.as_deref())?,
            entries: entries.collect::<Result<_, _>>()?,
            left_out: left_out.collect(),
            value: row.value.0,
            bound: float(row.bound),
        })
    }
}

#[derive(Debug, Serialize, Deserialize)]
pub(super) struct LeaseRow {
    visit: String,
    entry: EntryRow,
    revision: u32,
    claim_key: String,
    holder: String,
    granted_unix_ms: i64,
    expires_unix_ms: i64,
}

impl From<&Lease> for LeaseRow {
    fn from(lease: &Lease) -> Self {
        LeaseRow {
            visit: lease.visit.0.clone(),
            entry: (&lease.entry).into(),
            revision: lease.revision,
            claim_key: lease.claim_key.clone(),
            holder: lease.holder.clone(),
            granted_unix_ms: lease.granted.unix_ms(),
            expires_unix_ms: lease.expires.unix_ms(),
        }
    }
}

impl TryFrom<LeaseRow> for Lease {
    type Error = RowError;
    fn try_from(row: LeaseRow) -> Result<Self, RowError> {
        Ok(Lease {
            visit: VisitId(row.visit),
            entry: row.entry.try_into()?,
            revision: row.revision,
            claim_key: row.claim_key,
            holder: row.holder,
            granted: utc(row.granted_unix_ms),
            expires: utc(row.expires_unix_ms),
        })
    }
}
