//! A fact as its kind and its body.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

use super::plan::{LeaseRow, RevisionRow};
use super::visit::{SummaryRow, VisitRow};
use super::{Num, RowError, SpanRow, night, utc};
use crate::catalogue::TargetId;
use crate::ledger::labels::{self, UnknownLabel};
use crate::night::Fact;
use crate::record::VisitId;
use crate::time::Utc;
use crate::units::Angle;
use crate::weather::WeatherSample;

#[derive(Serialize, Deserialize)]
struct NightOpenedRow {
    night: String,
    span: SpanRow,
    darkness: Option<SpanRow>,
    ours: bool,
    mode: String,
}

#[derive(Serialize, Deserialize)]
struct HoldRow {
    at_unix_ms: i64,
    cause: String,
    #[serde(default, skip_serializing_if = "Option::is_none")]
    detail: Option<String>,
}

#[derive(Serialize, Deserialize)]
struct LeaseExtendedRow {
    visit: String,
    at_unix_ms: i64,
    expires_unix_ms: i64,
}

#[derive(Serialize, Deserialize)]
struct VisitEndedRow {
    at_unix_ms: i64,
    report_key: String,
    visit: VisitRow,
}

/// The wind's direction is kept in radians, as it is in memory: degrees would not come back exact.
#[derive(Serialize, Deserialize)]
struct WeatherRow {
    at_unix_ms: i64,
    values: BTreeMap<String, Num>,
    wind_from_rad: Option<Num>,
    safe: Option<bool>,
}

#[derive(Serialize, Deserialize)]
struct TargetActRow {
    at_unix_ms: i64,
    target: String,
    by: String,
    #[serde(default, skip_serializing_if = "Option::is_none")]
    until_unix_ms: Option<i64>,
    #[serde(default, skip_serializing_if = "Option::is_none")]
    reason: Option<String>,
}

#[derive(Serialize, Deserialize)]
struct VisitSkippedRow {
    at_unix_ms: i64,
    visit: String,
    cause: String,
    by: String,
}

#[derive(Serialize, Deserialize)]
struct NoteRow {
    at_unix_ms: i64,
    by: String,
    text: String,
}

#[derive(Serialize, Deserialize)]
struct ClockRow {
    at_unix_ms: i64,
    by_ms: i64,
}

#[derive(Serialize, Deserialize)]
struct InstantRow {
    at_unix_ms: i64,
}

/// The word for a fact in the journal.
pub(in crate::ledger) const fn kind_of(fact: &Fact) -> &'static str {
    match fact {
        Fact::NightOpened { .. } => "night_opened",
        Fact::PlanPublished(_) => "plan_published",
        Fact::HoldBegan { .. } => "hold_began",
        Fact::HoldEnded { .. } => "hold_ended",
        Fact::LeaseGranted(_) => "lease_granted",
        Fact::LeaseExtended { .. } => "lease_extended",
        Fact::VisitEnded { .. } => "visit_ended",
        Fact::WeatherNoted(_) => "weather_noted",
        Fact::TargetPaused { .. } => "target_paused",
        Fact::TargetResumed { .. } => "target_resumed",
        Fact::TargetUrgent { .. } => "target_urgent",
        Fact::VisitSkipped { .. } => "visit_skipped",
        Fact::Note { .. } => "note",
        Fact::ClockStepped { .. } => "clock_stepped",
        Fact::Resumed { .. } => "resumed",
        Fact::DarknessBegan { .. } => "darkness_began",
        Fact::DarknessEnded { .. } => "darkness_ended",
        Fact::NightClosed(_) => "night_closed",
    }
}

/// The body of a fact as JSON.
pub(in crate::ledger) fn encode(fact: &Fact) -> Result<String, RowError> {
    let text = match fact {
        Fact::NightOpened {
            night,
            span,
            darkness,
            ours,
            mode,
        } => serde_json::to_string(&NightOpenedRow {
            night: night.to_string(),
            span: (*span).into(),
            darkness: darkness.map(SpanRow::from),
            ours: *ours,
            mode: labels::run_mode(*mode).to_owned(),
        }),
        Fact::PlanPublished(plan) => serde_json::to_string(&RevisionRow::from(plan)),
        Fact::HoldBegan { at, cause, detail } => serde_json::to_string(&HoldRow {
            at_unix_ms: at.unix_ms(),
            cause: labels::hold_cause(*cause).to_owned(),
            detail: Some(detail.clone()),
        }),
        Fact::HoldEnded { at, cause } => serde_json::to_string(&HoldRow {
            at_unix_ms: at.unix_ms(),
            cause: labels::hold_cause(*cause).to_owned(),
            detail: None,
        }),
        Fact::LeaseGranted(lease) => serde_json::to_string(&LeaseRow::from(lease)),
        Fact::LeaseExtended { visit, at, expires } => serde_json::to_string(&LeaseExtendedRow {
            visit: visit.0.clone(),
            at_unix_ms: at.unix_ms(),
            expires_unix_ms: expires.unix_ms(),
        }),
        Fact::VisitEnded {
            at,
            report_key,
            visit,
        } => serde_json::to_string(&VisitEndedRow {
            at_unix_ms: at.unix_ms(),
            report_key: report_key.clone(),
            visit: visit.into(),
        }),
        Fact::WeatherNoted(sample) => serde_json::to_string(&WeatherRow::from(sample)),
        Fact::TargetPaused { .. } | Fact::TargetResumed { .. } | Fact::TargetUrgent { .. } => {
            serde_json::to_string(&target_act(fact))
        }
        Fact::VisitSkipped {
            at,
            visit,
            cause,
            by,
        } => serde_json::to_string(&VisitSkippedRow {
            at_unix_ms: at.unix_ms(),
            visit: visit.0.clone(),
            cause: labels::loss_cause(*cause).to_owned(),
            by: by.clone(),
        }),
        Fact::Note { at, by, text } => serde_json::to_string(&NoteRow {
            at_unix_ms: at.unix_ms(),
            by: by.clone(),
            text: text.clone(),
        }),
        Fact::ClockStepped { at, by_ms } => serde_json::to_string(&ClockRow {
            at_unix_ms: at.unix_ms(),
            by_ms: *by_ms,
        }),
        Fact::Resumed { at } | Fact::DarknessBegan { at } | Fact::DarknessEnded { at } => {
            serde_json::to_string(&InstantRow {
                at_unix_ms: at.unix_ms(),
            })
        }
        Fact::NightClosed(summary) => serde_json::to_string(&SummaryRow::from(summary)),
    };
    Ok(text?)
}

impl From<&WeatherSample> for WeatherRow {
    fn from(sample: &WeatherSample) -> Self {
        let values = sample.values.iter();
        WeatherRow {
            at_unix_ms: sample.at.unix_ms(),
            values: values
                .map(|(quantity, value)| (labels::quantity(*quantity).to_owned(), Num(*value)))
                .collect(),
            wind_from_rad: sample.wind_from.map(|angle| Num(angle.rad())),
            safe: sample.safe,
        }
    }
}

impl TryFrom<WeatherRow> for WeatherSample {
    type Error = RowError;
    fn try_from(row: WeatherRow) -> Result<Self, RowError> {
        let mut values = BTreeMap::new();
        for (label, value) in &row.values {
            values.insert(labels::to_quantity(label)?, value.0);
        }
        Ok(WeatherSample {
            at: utc(row.at_unix_ms),
            values,
            wind_from: row.wind_from_rad.map(|rad| Angle::from_rad(rad.0)),
            safe: row.safe,
        })
    }
}

/// What a person did to a target, as one shape; `None` for other facts.
fn target_act(fact: &Fact) -> Option<TargetActRow> {
    let (at, target, by, until, reason) = match fact {
        Fact::TargetPaused {
            at,
            target,
            by,
            reason,
        } => (at, target, by, None, Some(reason)),
        Fact::TargetResumed { at, target, by } => (at, target, by, None, None),
        Fact::TargetUrgent {
            at,
            target,
            until,
            by,
            reason,
        } => (at, target, by, Some(until.unix_ms()), Some(reason)),
        _ => return None,
    };
    Some(TargetActRow {
        at_unix_ms: at.unix_ms(),
        target: target.as_str().to_owned(),
        by: by.clone(),
        until_unix_ms: until,
        reason: reason.cloned(),
    })
}

/// The fact of a kind and a body.
pub(in crate::ledger) fn decode(kind: &str, body: &str) -> Result<Fact, RowError> {
    Ok(match kind {
        "night_opened" => {
            let row: NightOpenedRow = serde_json::from_str(body)?;
            Fact::NightOpened {
                night: night(&row.night)?,
                span: row.span.into(),
                darkness: row.darkness.map(Into::into),
                ours: row.ours,
                mode: labels::to_run_mode(&row.mode)?,
            }
        }
        "plan_published" => {
            Fact::PlanPublished(serde_json::from_str::<RevisionRow>(body)?.try_into()?)
        }
        "hold_began" => {
            let row: HoldRow = serde_json::from_str(body)?;
            Fact::HoldBegan {
                at: utc(row.at_unix_ms),
                cause: labels::to_hold_cause(&row.cause)?,
                detail: row.detail.unwrap_or_default(),
            }
        }
        "hold_ended" => {
            let row: HoldRow = serde_json::from_str(body)?;
            Fact::HoldEnded {
                at: utc(row.at_unix_ms),
                cause: labels::to_hold_cause(&row.cause)?,
            }
        }
        "lease_granted" => Fact::LeaseGranted(serde_json::from_str::<LeaseRow>(body)?.try_into()?),
        "lease_extended" => {
            let row: LeaseExtendedRow = serde_json::from_str(body)?;
            Fact::LeaseExtended {
                visit: VisitId(row.visit),
                at: utc(row.at_unix_ms),
                expires: utc(row.expires_unix_ms),
            }
        }
        "visit_ended" => {
            let row: VisitEndedRow = serde_json::from_str(body)?;
            Fact::VisitEnded {
                at: utc(row.at_unix_ms),
                report_key: row.report_key,
                visit: row.visit.try_into()?,
            }
        }
        "weather_noted" => {
            Fact::WeatherNoted(serde_json::from_str::<WeatherRow>(body)?.try_into()?)
        }
        "target_paused" | "target_resumed" | "target_urgent" => {
            target_fact(kind, serde_json::from_str(body)?)
        }
        "visit_skipped" => {
            let row: VisitSkippedRow = serde_json::from_str(body)?;
            Fact::VisitSkipped {
                at: utc(row.at_unix_ms),
                visit: VisitId(row.visit),
                cause: labels::to_loss_cause(&row.cause)?,
                by: row.by,
            }
        }
        "note" => {
            let row: NoteRow = serde_json::from_str(body)?;
            Fact::Note {
                at: utc(row.at_unix_ms),
                by: row.by,
                text: row.text,
            }
        }
        "clock_stepped" => {
            let row: ClockRow = serde_json::from_str(body)?;
            Fact::ClockStepped {
                at: utc(row.at_unix_ms),
                by_ms: row.by_ms,
            }
        }
        "resumed" => Fact::Resumed { at: instant(body)? },
        "darkness_began" => Fact::DarknessBegan { at: instant(body)? },
        "darkness_ended" => Fact::DarknessEnded { at: instant(body)? },
        "night_closed" => Fact::NightClosed(serde_json::from_str::<SummaryRow>(body)?.try_into()?),
        other => return Err(UnknownLabel::new("kind of fact", other).into()),
    })
}

fn instant(body: &str) -> Result<Utc, RowError> {
    Ok(utc(serde_json::from_str::<InstantRow>(body)?.at_unix_ms))
}

fn target_fact(kind: &str, row: TargetActRow) -> Fact {
    let at = utc(row.at_unix_ms);
    let target = TargetId::new(&row.target);
    let (by, reason) = (row.by, row.reason.unwrap_or_default());
    match kind {
        "target_paused" => Fact::TargetPaused {
            at,
            target,
            by,
            reason,
        },
        "target_resumed" => Fact::TargetResumed { at, target, by },
        _ => Fact::TargetUrgent {
            at,
            target,
            until: row.until_unix_ms.map_or(at, utc),
            by,
            reason,
        },
    }
}
