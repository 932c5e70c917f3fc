//! The audit of the list as tables.

use std::collections::BTreeMap;

use comfy_table::{CellAlignment, Table, presets};

use crate::audit::{CandidateAudit, MonthUse, OwedCause, StarAudit, SurveyAudit, VelocityErrors};
use crate::catalogue::Survey;
use crate::record::HoldCause;

/// Milliseconds in an hour.
const HOUR_MS: f64 = 3_600_000.0;

/// Everything.
pub fn of(survey: &Survey, audit: &SurveyAudit) -> String {
    let mut text = format!("{}\n\n", nights(audit));
    text.push_str(&lines(&stars(survey, audit)));
    text.push_str(
        "\noverdue: wanted intervals since the last visit · gap: median and longest, days\n\
         mostly: the weightiest cause of what is owed · phases: widest part of the orbit without a visit\n\
         σ(K) in m/s, σ(m) of m sin i in Earth masses, from the visits' own velocity errors\n",
    );
    text.push_str(&format!("\nOwed in all\n{}", lines(&causes(audit))));
    text.push_str(&format!("\nProgrammes\n{}", lines(&programmes(audit))));
    if !audit.months.is_empty() {
        text.push_str(&format!("\nDarkness, hours\n{}", lines(&darkness(audit))));
    }
    if let Some(errors) = &audit.errors {
        text.push_str(&format!("\n{}\n", drift(errors)));
    }
    text
}

/// Which nights the audit is of.
pub fn nights(audit: &SurveyAudit) -> String {
    if audit.first > audit.until {
        return format!(
            "No night up to {} counts: the record begins later",
            audit.until
        );
    }
    format!(
        "Nights {} to {}, {} of them recorded",
        audit.first, audit.until, audit.recorded_nights
    )
}

/// A table's lines without blanks at their ends.
pub fn lines(table: &Table) -> String {
    table
        .lines()
        .map(|line| format!("{}\n", line.trim_end()))
        .collect()
}

/// A table whose columns but the first stand to the right.
pub fn table<const N: usize>(header: [&str; N]) -> Table {
    let mut table = Table::new();
    table.load_style(presets::NOTHING).set_header(header);
    for column in 1..N {
        if let Some(column) = table.column_mut(column) {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    table
}

/// A number, or a dash where there is none.
pub fn number(value: Option<f64>, decimals: usize) -> String {
    value.map_or_else(|| "–".to_owned(), |v| format!("{v:.decimals$}"))
}

/// The cause of the largest part of what is owed.
pub fn mostly(audit: &StarAudit) -> Option<OwedCause> {
    let parts = audit.owed_by_cause.by_cause.iter();
    let largest = parts.max_by(|a, b| a.1.total_cmp(b.1));
    largest.map(|(cause, _)| *cause)
}

/// A cause for people.
pub const fn words(cause: OwedCause) -> &'static str {
    match cause {
        OwedCause::NotDue => "not due",
        other => other.label(),
    }
}

fn stars(survey: &Survey, audit: &SurveyAudit) -> Table {
    let mut rows = table([
        "target", "visits", "owed", "mostly", "overdue", "gap", "longest", "period", "phases",
        "σ(K)", "σ(m)",
    ]);
    for (star, found) in &audit.stars {
        add_rows(&mut rows, survey.targets[*star].id.as_str(), found);
    }
    rows
}

/// A line for the star with its first candidate, one more for each further candidate.
fn add_rows(table: &mut Table, id: &str, audit: &StarAudit) {
    let star = [
        id.to_owned(),
        audit.visits.to_string(),
        format!("{:.1}", audit.owed),
        mostly(audit).map_or(String::new(), |cause| words(cause).to_owned()),
        format!("{:.1}", audit.overdue),
        number(audit.gaps.map(|g| g.median_d), 1),
        number(audit.gaps.map(|g| g.longest_d), 1),
    ];
    let none = || ["–"; 4].map(str::to_owned);
    let cells = |candidate: &CandidateAudit| {
        [
            format!("{:.4}", candidate.period_d),
            format!("{:.0} %", 100.0 * candidate.coverage.largest_gap),
            number(candidate.errors.as_ref().map(|e| e.sigma_k_m_s), 2),
            number(candidate.mass.map(|m| m.sigma_earth), 2),
        ]
    };
    let first = audit.candidates.first().map_or_else(none, cells);
    table.add_row(star.into_iter().chain(first));
    for candidate in audit.candidates.iter().skip(1) {
        let blank = std::array::from_fn::<String, 7, _>(|_| String::new());
        table.add_row(blank.into_iter().chain(cells(candidate)));
    }
}

fn causes(audit: &SurveyAudit) -> Table {
    let mut total: BTreeMap<OwedCause, f64> = BTreeMap::new();
    for (_, found) in &audit.stars {
        for (cause, part) in &found.owed_by_cause.by_cause {
            *total.entry(*cause).or_default() += part;
        }
    }
    let mut rows = table(["cause", "visits"]);
    for (cause, part) in &total {
        rows.add_row([words(*cause).to_owned(), format!("{part:.1}")]);
    }
    let sum: f64 = total.values().sum();
    rows.add_row(["all".to_owned(), format!("{sum:.1}")]);
    rows
}

fn programmes(audit: &SurveyAudit) -> Table {
    let mut rows = table(["programme", "share wanted", "used", "hours", "visits owed"]);
    for programme in &audit.programmes {
        rows.add_row([
            programme.programme.clone(),
            format!("{:.0} %", 100.0 * programme.wanted_share),
            format!("{:.0} %", 100.0 * programme.used_share),
            format!("{:.1}", programme.used_s / 3600.0),
            format!("{:.1}", programme.owed),
        ]);
    }
    rows
}

fn darkness(audit: &SurveyAudit) -> Table {
    let mut rows = table([
        "month", "nights", "dark", "exposing", "overhead", "calibr.", "weather", "instr.",
        "operator", "idle",
    ]);
    for month in &audit.months {
        rows.add_row(month_cells(month));
    }
    rows
}

fn month_cells(month: &MonthUse) -> [String; 10] {
    let split = &month.split;
    let hours = |ms: i64| format!("{:.1}", ms as f64 / HOUR_MS);
    let held = |causes: &[HoldCause]| {
        let ms = causes.iter().filter_map(|cause| split.held_ms.get(cause));
        hours(ms.sum())
    };
    [
        format!("{:04}-{:02}", month.month.0, month.month.1),
        month.nights.to_string(),
        hours(split.total_ms()),
        hours(split.exposing_ms),
        hours(split.overhead_ms),
        hours(split.calibration_ms),
        held(&[HoldCause::Weather, HoldCause::FeedLost]),
        held(&[HoldCause::Instrument, HoldCause::Ledger]),
        held(&[HoldCause::Operator]),
        hours(split.idle_ms.values().sum()),
    ]
}

/// A line on the velocity errors.
pub fn drift(errors: &VelocityErrors) -> String {
    let usual = format!(
        "Velocity errors: reported {:.2} times the predicted (median)",
        errors.ratio
    );
    match errors.drifting_since() {
        Some(night) => format!("{usual}; LARGER THAN USUAL since {night}"),
        None => format!("{usual}; no drift"),
    }
}
