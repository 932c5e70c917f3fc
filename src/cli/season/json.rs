//! A season's figures as JSON.

use serde_json::{Map, Value, json};

use crate::page::queue::round;
use crate::season::{
    Difference, Estimate, Frame, FrameTarget, SeasonResults, TargetDifference, TargetResult,
};

/// Everything.
pub fn of(frame: &Frame, results: &SeasonResults) -> Value {
    let targets = frame.targets.iter().zip(&results.targets);
    let programmes = frame.programmes.iter().zip(&results.programmes);
    let labels: Vec<&str> = results.darkness.iter().map(|(l, _)| l.as_str()).collect();
    json!({
        "first_night": frame.first,
        "nights": frame.nights,
        "realisations": results.realisations,
        "seed": frame.seed,
        "worst_odds_error": round(results.worst_error(), 5),
        "targets": targets.map(|(t, r)| target(frame, t, r)).collect::<Vec<_>>(),
        "programmes": programmes.map(|(programme, result)| json!({
            "programme": programme.id,
            "share_wanted": round(programme.share_wanted, 5),
            "share_used": round(result.share_used.value, 5),
            "share_used_error": round(result.share_used.error, 5),
            "hours": round(result.hours.value, 3),
            "hours_error": round(result.hours.error, 3),
        })).collect::<Vec<_>>(),
        "darkness": shares(&results.darkness),
        "darkness_by_night": results.nights.iter().map(|night| {
            let mut row = Map::new();
            row.insert("night".to_owned(), json!(night.night));
            row.insert("darkness_h".to_owned(), json!(round(night.darkness_h, 4)));
            row.insert("mean_h".to_owned(), hours(&labels, &night.parts_h));
            Value::Object(row)
        }).collect::<Vec<_>>(),
        "darkness_by_month": results.months.iter().map(|month| json!({
            "month": month.month,
            "darkness_h": round(month.darkness_h, 3),
            "lost_h": round(month.lost_h, 3),
            "oversubscription": round(month.oversubscription, 4),
            "mean_h": hours(&labels, &month.parts_h),
        })).collect::<Vec<_>>(),
        "price_by_month_and_ra": results.prices.iter().map(|price| json!({
            "month": price.month,
            "ra_h": price.ra_h,
            "price_per_hour": round(price.price_per_hour, 4),
            "hours": round(price.hours, 3),
        })).collect::<Vec<_>>(),
    })
}

/// What changes against another scenario.
pub fn difference(name: &str, difference: &Difference) -> Value {
    json!({
        "against": name,
        "exposing_h": estimate(difference.exposing_h),
        "targets_reached": estimate(difference.reached),
        "targets": difference.targets.iter().map(target_difference).collect::<Vec<_>>(),
    })
}

fn target_difference(target: &TargetDifference) -> Value {
    json!({
        "target": target.target,
        "visits": target.visits.map(|v| round(v, 4)),
        "visits_against": target.visits_against.map(|v| round(v, 4)),
        "difference": round(target.difference.value, 4),
        "difference_error": round(target.difference.error, 4),
        "odds_difference": round(target.odds_difference.value, 5),
        "odds_difference_error": round(target.odds_difference.error, 5),
    })
}

fn estimate(estimate: Estimate) -> Value {
    json!({"value": round(estimate.value, 4), "error": round(estimate.error, 4)})
}

fn target(frame: &Frame, target: &FrameTarget, result: &TargetResult) -> Value {
    let rounded = |value: &Option<f64>| value.map(|v| round(v, 4));
    let owed: Map<String, Value> = result
        .owed_by_cause
        .iter()
        .map(|(cause, part)| (cause.clone(), json!(round(*part, 4))))
        .collect();
    let windows = target.windows.iter().zip(&result.windows);
    json!({
        "target": target.id,
        "programme": frame.programmes.get(target.programme).map(|p| &p.id),
        "wanted": round(target.wanted, 3),
        "visits_p10": round(result.visits_p10, 3),
        "visits_p50": round(result.visits_p50, 3),
        "visits_p90": round(result.visits_p90, 3),
        "visits_mean": round(result.visits_mean.value, 4),
        "visits_mean_error": round(result.visits_mean.error, 4),
        "odds": round(result.odds.value, 5),
        "odds_error": round(result.odds.error, 5),
        "longest_gap_p50": rounded(&result.longest_gap_p50),
        "owed": round(result.owed, 4),
        "owed_by_cause": owed,
        "candidates_days": target.candidates_d,
        "sigma_k_m_s": result.sigma_k_m_s.iter().map(rounded).collect::<Vec<_>>(),
        "smallest_planets": smallest(frame, target, result),
        "windows": windows.map(|(label, odds)| json!({
            "window": label,
            "odds": round(odds.value, 5),
            "odds_error": round(odds.error, 5),
        })).collect::<Vec<_>>(),
    })
}

/// Over the programme's periods, before the season and at its end.
fn smallest(frame: &Frame, target: &FrameTarget, result: &TargetResult) -> Vec<Value> {
    let Some(programme) = frame.programmes.get(target.programme) else {
        return Vec::new();
    };
    let both = target.smallest_k_m_s.iter().zip(&result.smallest_k_m_s);
    let periods = programme.periods_d.iter().zip(both);
    periods
        .map(|(period_d, (now, end))| {
            let mass = |k: &Option<f64>| k.and_then(|k| frame.msini_earth(target, *period_d, k));
            json!({
                "period_days": round(*period_d, 4),
                "k_m_s_now": now.map(|k| round(k, 4)),
                "k_m_s_p50": end.map(|k| round(k, 4)),
                "msini_earth_now": mass(now).map(|m| round(m, 4)),
                "msini_earth_p50": mass(end).map(|m| round(m, 4)),
            })
        })
        .collect()
}

fn shares(darkness: &[(String, f64)]) -> Value {
    let parts = darkness.iter();
    let parts = parts.map(|(label, share)| (label.clone(), json!(round(*share, 6))));
    Value::Object(parts.collect())
}

fn hours(labels: &[&str], parts_h: &[f64]) -> Value {
    let parts = labels.iter().zip(parts_h);
    let parts = parts.map(|(label, h)| ((*label).to_owned(), json!(round(*h, 4))));
    Value::Object(parts.collect())
}
