//! One star in depth, for the terminal.

use comfy_table::Table;

use super::text::{drift, lines, nights, number, table, words};
use crate::audit::{CandidateAudit, DETECTION_SNR, StarAudit, SurveyAudit};
use crate::catalogue::Target;

/// Rows of the table of the smallest planets.
const PERIODS_TOLD: usize = 12;

/// Everything of one star.
pub fn of(target: &Target, star: &StarAudit, audit: &SurveyAudit) -> String {
    let mut text = format!("{}. {}\n\n", target.id, nights(audit));
    text.push_str(&cadence(star));
    for candidate in &star.candidates {
        text.push_str(&format!("\n{}", one_candidate(candidate)));
    }
    if !star.sensitivity.is_empty() {
        text.push_str(&format!(
            "\nSmallest planet found at {DETECTION_SNR:.0} times the error of K\n{}",
            lines(&smallest(star))
        ));
    }
    if !star.peaks.is_empty() {
        text.push_str(&format!(
            "\nStrongest frequencies of the sampling\n{}",
            lines(&peaks(star))
        ));
    }
    if let Some(range) = &star.barycentric {
        text.push_str(&format!(
            "\nBarycentric velocity from {:.2} to {:.2} km/s: a spread of {:.2} km/s, {:.0} % of the wanted\n",
            range.min_km_s,
            range.max_km_s,
            range.spread_km_s(),
            100.0 * star.spread_share
        ));
    }
    if let Some(errors) = &star.errors {
        text.push_str(&format!("\n{}\n", drift(errors)));
    }
    text
}

fn cadence(star: &StarAudit) -> String {
    let mut text = format!(
        "{} visits worth {:.1}, {:.1} wanted, {:.1} owed; {:.1} wanted intervals since the last\n",
        star.visits, star.credited, star.wanted, star.owed, star.overdue
    );
    if let Some(gaps) = &star.gaps {
        text.push_str(&format!(
            "gaps of {:.1} days (median), {:.1} (nine tenths are shorter), {:.1} (longest)\n",
            gaps.median_d, gaps.p90_d, gaps.longest_d
        ));
    }
    let causes = &star.owed_by_cause.by_cause;
    if !causes.is_empty() {
        let mut rows = table(["owed because of", "visits"]);
        for (cause, part) in causes {
            rows.add_row([words(*cause).to_owned(), format!("{part:.2}")]);
        }
        text.push_str(&format!("\n{}", lines(&rows)));
    }
    text
}

fn one_candidate(candidate: &CandidateAudit) -> String {
    let coverage = &candidate.coverage;
    let mut text = format!(
        "Candidate at {:.4} days\n  widest phase without a visit {:.3}; Kuiper's V {:.3}, odds of even \
         phases {:.3}\n",
        candidate.period_d, coverage.largest_gap, coverage.evenness.statistic, coverage.evenness.p
    );
    match &candidate.errors {
        None => text.push_str("  too few visits to determine its orbit\n"),
        Some(errors) => {
            text.push_str(&format!(
                "  σ(K) {:.3} m/s ({} with jitter and floor), phase × K {:.3} m/s\n",
                errors.sigma_k_m_s,
                number(candidate.sigma_k_with_jitter_m_s, 3),
                errors.sigma_phase_m_s
            ));
            if let Some(eccentric) = &errors.eccentric {
                text.push_str(&format!(
                    "  with eccentric terms free: σ(K) {:.3} m/s, e × K {:.3} m/s\n",
                    eccentric.sigma_k_m_s, eccentric.sigma_harmonic_m_s
                ));
            }
        }
    }
    if let Some(mass) = &candidate.mass {
        text.push_str(&format!(
            "  m sin i {} ± {:.2} Earth masses\n",
            number(mass.msini_earth, 2),
            mass.sigma_earth
        ));
    }
    for alias in &candidate.aliases {
        text.push_str(&format!(
            "  not told from {:.5} days (keeps {:.0} % of the power)\n",
            alias.period_d,
            100.0 * alias.power
        ));
    }
    text
}

fn smallest(star: &StarAudit) -> Table {
    let mut rows = table(["period, days", "K, m/s", "m sin i, Earth masses"]);
    let stride = star.sensitivity.len().div_ceil(PERIODS_TOLD).max(1);
    let told = star.sensitivity.iter().step_by(stride);
    for found in told {
        rows.add_row([
            format!("{:.2}", found.period_d),
            format!("{:.2}", found.k_m_s),
            number(found.msini_earth, 2),
        ]);
    }
    if let Some(found) = &star.at_earth_irradiation {
        rows.add_row([
            format!("{:.2} (light as on Earth)", found.period_d),
            format!("{:.2}", found.k_m_s),
            number(found.msini_earth, 2),
        ]);
    }
    rows
}

fn peaks(star: &StarAudit) -> Table {
    let mut rows = table(["per day", "power", "name"]);
    for peak in &star.peaks {
        rows.add_row([
            format!("{:.5}", peak.frequency_per_day),
            format!("{:.3}", peak.power),
            peak.name.clone().unwrap_or_default(),
        ]);
    }
    rows
}
