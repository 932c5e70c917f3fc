//! The audit as CSV: a row for each star and candidate, a star without candidates in one row.

use crate::audit::{CandidateAudit, OwedCause, StarAudit, SurveyAudit};
use crate::catalogue::{Survey, Target};
use crate::cli::Trouble;

const STAR: [&str; 13] = [
    "target",
    "programme",
    "visits",
    "credited",
    "wanted",
    "owed",
    "overdue",
    "gap_median_days",
    "gap_p90_days",
    "gap_longest_days",
    "waiting_days",
    "barycentric_spread_km_s",
    "earth_irradiation_msini_earth",
];
const CANDIDATE: [&str; 8] = [
    "period_days",
    "largest_phase_gap",
    "evenness",
    "evenness_p",
    "sigma_k_m_s",
    "sigma_k_with_jitter_m_s",
    "sigma_msini_earth",
    "aliases_days",
];

/// All rows.
///
/// # Errors
/// [`Trouble`] when the text cannot be made.
pub fn of(survey: &Survey, audit: &SurveyAudit) -> Result<String, Trouble> {
    let mut writer = csv::Writer::from_writer(Vec::new());
    let broken = |error: csv::Error| Trouble::machine("the CSV cannot be made").because(&error);
    let causes = OwedCause::ALL.map(|cause| format!("owed_{}", cause.label()));
    let header = STAR.map(str::to_owned).into_iter().chain(causes);
    writer
        .write_record(header.chain(CANDIDATE.map(str::to_owned)))
        .map_err(broken)?;
    for (star, found) in &audit.stars {
        let target = &survey.targets[*star];
        let programme = &survey.programmes[target.programme].id;
        let star = star_cells(target, programme, found);
        let candidates: Vec<[String; 8]> = match found.candidates.as_slice() {
            [] => vec![Default::default()],
            candidates => candidates.iter().map(candidate_cells).collect(),
        };
        for candidate in candidates {
            let row = star.iter().cloned().chain(candidate);
            writer.write_record(row).map_err(broken)?;
        }
    }
    let bytes = writer
        .into_inner()
        .map_err(|error| Trouble::machine("the CSV cannot be made").because(error.error()))?;
    Ok(String::from_utf8_lossy(&bytes).into_owned())
}

fn cell(value: Option<f64>, decimals: usize) -> String {
    value.map_or_else(String::new, |value| format!("{value:.decimals$}"))
}

fn star_cells(target: &Target, programme: &str, audit: &StarAudit) -> Vec<String> {
    let gaps = audit.gaps;
    let mut cells = vec![
        target.id.to_string(),
        programme.to_owned(),
        audit.visits.to_string(),
        cell(Some(audit.credited), 4),
        cell(Some(audit.wanted), 4),
        cell(Some(audit.owed), 4),
        cell(Some(audit.overdue), 4),
        cell(gaps.map(|g| g.median_d), 4),
        cell(gaps.map(|g| g.p90_d), 4),
        cell(gaps.map(|g| g.longest_d), 4),
        cell(audit.waiting_d, 4),
        cell(audit.barycentric.map(|b| b.spread_km_s()), 4),
        cell(
            audit
                .at_earth_irradiation
                .as_ref()
                .and_then(|s| s.msini_earth),
            4,
        ),
    ];
    cells.extend(OwedCause::ALL.map(|cause| {
        let part = audit.owed_by_cause.by_cause.get(&cause).copied();
        cell(Some(part.unwrap_or(0.0)), 4)
    }));
    cells
}

fn candidate_cells(candidate: &CandidateAudit) -> [String; 8] {
    let aliases: Vec<String> = candidate
        .aliases
        .iter()
        .map(|alias| format!("{:.6}", alias.period_d))
        .collect();
    [
        candidate.period_d.to_string(),
        cell(Some(candidate.coverage.largest_gap), 5),
        cell(Some(candidate.coverage.evenness.statistic), 5),
        cell(Some(candidate.coverage.evenness.p), 6),
        cell(candidate.errors.as_ref().map(|e| e.sigma_k_m_s), 5),
        cell(candidate.sigma_k_with_jitter_m_s, 5),
        cell(candidate.mass.map(|m| m.sigma_earth), 5),
        aliases.join(" "),
    ]
}
