//! The audit as JSON.

use serde_json::{Map, Value, json};

use crate::audit::{
    CandidateAudit, DETECTION_SNR, MonthUse, OwedByCause, OwedCause, Peak, ProgrammeUse,
    Sensitivity, StarAudit, SurveyAudit, VelocityErrors,
};
use crate::catalogue::Survey;
use crate::page::queue::round;

/// Decimals of visits.
const VISITS: i32 = 4;

/// Everything.
pub fn of(survey: &Survey, audit: &SurveyAudit) -> Value {
    let targets: Vec<Value> = audit
        .stars
        .iter()
        .map(|(star, found)| {
            let target = &survey.targets[*star];
            let programme = &survey.programmes[target.programme].id;
            star_json((target.id.as_str(), programme), found)
        })
        .collect();
    json!({
        "since": audit.first.to_string(),
        "until": audit.until.to_string(),
        "recorded_nights": audit.recorded_nights,
        "detection_snr": DETECTION_SNR,
        "velocity_errors_counted": "each visit's own, without jitter and floor",
        "targets": targets,
        "programmes": audit.programmes.iter().map(programme_json).collect::<Vec<_>>(),
        "velocity_errors": errors_json(audit.errors.as_ref()),
        "darkness": audit.months.iter().map(month_json).collect::<Vec<_>>(),
    })
}

fn star_json((target, programme): (&str, &str), audit: &StarAudit) -> Value {
    let gaps = audit.gaps.as_ref();
    json!({
        "target": target,
        "programme": programme,
        "visits": audit.visits,
        "credited": round(audit.credited, VISITS),
        "wanted": round(audit.wanted, VISITS),
        "owed": round(audit.owed, VISITS),
        "owed_by_cause": causes_json(&audit.owed_by_cause, audit.owed),
        "unserved_nights": audit.owed_by_cause.unserved.len(),
        "overdue": round(audit.overdue, 4),
        "longest_gap_days": gaps.map(|g| round(g.longest_d, 5)),
        "waiting_days": audit.waiting_d.map(|d| round(d, 5)),
        "gaps_days": {
            "median": gaps.map(|g| round(g.median_d, 5)),
            "p90": gaps.map(|g| round(g.p90_d, 5)),
            "longest": gaps.map(|g| round(g.longest_d, 5)),
        },
        "candidates": audit.candidates.iter().map(candidate_json).collect::<Vec<_>>(),
        "sensitivity": audit.sensitivity.iter().map(sensitivity_json).collect::<Vec<_>>(),
        "earth_irradiation_period_days": audit.earth_irradiation_period_d.map(|d| round(d, 4)),
        "at_earth_irradiation": audit.at_earth_irradiation.as_ref().map(sensitivity_json),
        "window_peaks": audit.peaks.iter().map(peak_json).collect::<Vec<_>>(),
        "barycentric_km_s": {
            "min": audit.barycentric.map(|b| round(b.min_km_s, 5)),
            "max": audit.barycentric.map(|b| round(b.max_km_s, 5)),
            "spread": audit.barycentric.map(|b| round(b.spread_km_s(), 5)),
            "share_of_wanted": round(audit.spread_share, 4),
        },
        "velocity_errors": errors_json(audit.errors.as_ref()),
    })
}

/// The parts, rounded so that they still add up to the rounded whole: the largest takes up the
/// rounding of the others.
fn causes_json(causes: &OwedByCause, owed: f64) -> Value {
    let mut parts: Vec<(OwedCause, f64)> = causes
        .by_cause
        .iter()
        .map(|(cause, part)| (*cause, round(*part, VISITS)))
        .collect();
    let sum: f64 = parts.iter().map(|(_, part)| part).sum();
    if let Some(largest) = parts.iter_mut().max_by(|a, b| a.1.total_cmp(&b.1)) {
        largest.1 = round(largest.1 + round(owed, VISITS) - sum, VISITS);
    }
    let named: Map<String, Value> = parts
        .into_iter()
        .map(|(cause, part)| (cause.label().to_owned(), part.into()))
        .collect();
    Value::Object(named)
}

fn candidate_json(candidate: &CandidateAudit) -> Value {
    let aliases: Vec<f64> = candidate
        .aliases
        .iter()
        .map(|alias| round(alias.period_d, 6))
        .collect();
    let errors = candidate.errors.as_ref();
    let eccentric = errors.and_then(|e| e.eccentric.as_ref());
    json!({
        "period_days": candidate.period_d,
        "largest_phase_gap": round(candidate.coverage.largest_gap, 5),
        "evenness": round(candidate.coverage.evenness.statistic, 5),
        "evenness_p": round(candidate.coverage.evenness.p, 6),
        "sigma_k_m_s": errors.map(|e| round(e.sigma_k_m_s, 5)),
        "sigma_k_with_jitter_m_s": candidate.sigma_k_with_jitter_m_s.map(|s| round(s, 5)),
        "sigma_phase_m_s": errors.map(|e| round(e.sigma_phase_m_s, 5)),
        "sigma_k_eccentric_m_s": eccentric.map(|e| round(e.sigma_k_m_s, 5)),
        "sigma_harmonic_m_s": eccentric.map(|e| round(e.sigma_harmonic_m_s, 5)),
        "msini_earth": candidate.mass.and_then(|m| m.msini_earth).map(|m| round(m, 4)),
        "sigma_msini_earth": candidate.mass.map(|m| round(m.sigma_earth, 5)),
        "aliases_days": aliases,
    })
}

fn sensitivity_json(found: &Sensitivity) -> Value {
    json!({
        "period_days": round(found.period_d, 4),
        "k_m_s": round(found.k_m_s, 4),
        "msini_earth": found.msini_earth.map(|m| round(m, 4)),
    })
}

fn peak_json(peak: &Peak) -> Value {
    json!({
        "frequency_per_day": round(peak.frequency_per_day, 7),
        "power": round(peak.power, 5),
        "name": peak.name,
    })
}

fn programme_json(programme: &ProgrammeUse) -> Value {
    json!({
        "programme": programme.programme,
        "wanted_share": round(programme.wanted_share, 4),
        "used_share": round(programme.used_share, 4),
        "used_hours": round(programme.used_s / 3600.0, 3),
        "owed": round(programme.owed, VISITS),
    })
}

fn errors_json(errors: Option<&VelocityErrors>) -> Value {
    let Some(errors) = errors else {
        return Value::Null;
    };
    let nights: Vec<Value> = errors
        .nights
        .iter()
        .map(|night| {
            json!({
                "night": night.night.to_string(),
                "visits": night.visits,
                "reported_over_predicted": round(night.ratio, 4),
                "drifting": night.drifting,
            })
        })
        .collect();
    json!({
        "reported_over_predicted": round(errors.ratio, 4),
        "drifting_since": errors.drifting_since().map(|night| night.to_string()),
        "nights": nights,
    })
}

fn month_json(month: &MonthUse) -> Value {
    let split: Map<String, Value> = month
        .split
        .parts()
        .into_iter()
        .map(|(part, ms)| (part, ms.into()))
        .collect();
    json!({
        "month": format!("{:04}-{:02}", month.month.0, month.month.1),
        "nights": month.nights,
        "darkness_ms": month.split.total_ms(),
        "split_ms": split,
    })
}
