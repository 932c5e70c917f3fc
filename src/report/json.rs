//! The report for scripts. Keys say their unit; instants are RFC 3339 in UTC.

use serde_json::{Map, Value, json};

use super::Heading;
use super::words;
use crate::night::{NightReport, Remark, RevisionNote};
use crate::record::{Hold, Visit};
use crate::time::Span;
use crate::weather::WeatherSample;

pub(super) fn object(report: &NightReport, heading: &Heading<'_>) -> Value {
    let bounds = &report.bounds;
    let summary = &report.summary;
    let counts = &summary.visits;
    let split: Map<String, Value> = summary
        .split
        .parts()
        .into_iter()
        .map(|(label, ms)| (label, json!(ms)))
        .collect();
    let under_way = report
        .under_way
        .as_ref()
        .map(|(visit, subject)| json!({"visit": visit.0, "subject": subject.as_str()}));
    json!({
        "night": bounds.night.to_string(),
        "survey": heading.survey,
        "site": heading.site,
        "mode": words::mode(bounds.mode),
        "ours": bounds.ours,
        "closed": report.closed,
        "darkness": bounds.darkness.map(span),
        "darkness_ms": bounds.darkness.map_or(0, |dark| dark.length_ms()),
        "split_ms": split,
        "counts": {
            "done": counts.done,
            "short": counts.short,
            "lost": counts.lost,
            "refused": counts.refused,
            "unreported": counts.unreported,
        },
        "visits": report.visits.iter().map(|visit| of_visit(visit)).collect::<Vec<_>>(),
        "under_way": under_way,
        "holds": report.holds.iter().map(hold).collect::<Vec<_>>(),
        "revisions": report.revisions.iter().map(revision).collect::<Vec<_>>(),
        "remarks": report.remarks.iter().map(remark).collect::<Vec<_>>(),
        "weather": report.weather.iter().map(sample).collect::<Vec<_>>(),
    })
}

fn span(span: Span) -> Value {
    json!({"start": span.start.to_string(), "end": span.end.to_string()})
}

fn of_visit(visit: &Visit) -> Value {
    json!({
        "visit": visit.id.0,
        "kind": words::kind(visit.kind),
        "subject": visit.subject.as_str(),
        "began": visit.began.to_string(),
        "exposing": span(visit.exposing),
        "exposed_s": visit.exposed_s,
        "planned_s": visit.planned.total_s(),
        "outcome": words::outcome(visit.outcome),
        "cause": words::loss(visit.outcome),
        "credit": visit.credit,
        "airmass": visit.airmass,
        "snr": visit.snr,
        "rv_error_m_s": visit.rv_error_m_s,
        "predicted_rv_error_m_s": visit.predicted_rv_error_m_s,
        "note": visit.note,
    })
}

fn hold(hold: &Hold) -> Value {
    json!({
        "cause": hold.cause.label(),
        "start": hold.span.start.to_string(),
        "end": hold.span.end.to_string(),
        "detail": hold.detail,
    })
}

fn revision(revision: &RevisionNote) -> Value {
    let (cause, words) = words::plan_cause(&revision.cause);
    json!({
        "number": revision.number,
        "made_at": revision.made_at.to_string(),
        "cause": cause,
        "words": words,
        "entries": revision.entries,
        "value": revision.value,
        "bound": revision.bound,
    })
}

fn remark(remark: &Remark) -> Value {
    json!({"at": remark.at.to_string(), "by": remark.by, "text": remark.text})
}

fn sample(sample: &WeatherSample) -> Value {
    let values: Map<String, Value> = sample
        .values
        .iter()
        .map(|(quantity, value)| (quantity.label().to_owned(), json!(value)))
        .collect();
    json!({
        "at": sample.at.to_string(),
        "safe": sample.safe,
        "wind_from_deg": sample.wind_from.map(|from| from.deg()),
        "values": values,
    })
}
