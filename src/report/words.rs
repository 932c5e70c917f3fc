//! Words and figures that the faces share.

use chrono::DateTime;

use crate::night::{NightReport, RevisionNote, RunMode};
use crate::record::{EntryKind, HoldCause, LossCause, Outcome, PlanCause};
use crate::time::{Span, Utc};
use crate::weather::Quantity;

const MINUTE_MS: f64 = 60_000.0;
const HOUR_MS: f64 = 3_600_000.0;

pub(super) fn minutes(ms: i64) -> f64 {
    ms as f64 / MINUTE_MS
}

pub(super) fn hours(ms: i64) -> f64 {
    ms as f64 / HOUR_MS
}

/// Hours and minutes of the day, UTC.
pub(super) fn clock(at: Utc) -> String {
    written(at, "%H:%M")
}

/// Date, hours and minutes, UTC.
pub(super) fn moment(at: Utc) -> String {
    written(at, "%Y-%m-%d %H:%M")
}

fn written(at: Utc, pattern: &str) -> String {
    DateTime::from_timestamp_millis(at.unix_ms())
        .map_or_else(|| at.to_string(), |at| at.format(pattern).to_string())
}

/// From when to when, by the clock.
pub(super) fn from_to(span: Span) -> String {
    format!("{}–{}", clock(span.start), clock(span.end))
}

/// A share of darkness in per cent; 0 where there is none.
pub(super) fn percent(ms: i64, darkness_ms: i64) -> f64 {
    if darkness_ms > 0 {
        100.0 * ms as f64 / darkness_ms as f64
    } else {
        0.0
    }
}

/// What a reader must know before anything else, unless the night is real and closed.
pub(super) fn warnings(report: &NightReport) -> Vec<&'static str> {
    let mut warnings = Vec::new();
    match report.bounds.mode {
        RunMode::Real => {}
        RunMode::Rehearsal => warnings.push("A rehearsal: invented sky, invented observatory."),
        RunMode::InventedClock => warnings.push("Run in invented time: no real night."),
    }
    if !report.bounds.ours {
        warnings.push("This night was not ours.");
    }
    if !report.closed {
        warnings.push("The night is still open: this is the account as it stands.");
    }
    warnings
}

pub(super) const fn mode(mode: RunMode) -> &'static str {
    match mode {
        RunMode::Real => "real",
        RunMode::Rehearsal => "rehearsal",
        RunMode::InventedClock => "invented_clock",
    }
}

pub(super) const fn kind(kind: EntryKind) -> &'static str {
    match kind {
        EntryKind::Science => "science",
        EntryKind::Standard => "standard",
        EntryKind::Calibration => "calibration",
    }
}

pub(super) const fn outcome(outcome: Outcome) -> &'static str {
    match outcome {
        Outcome::Done => "done",
        Outcome::Short => "short",
        Outcome::Lost(_) => "lost",
        Outcome::Refused => "refused",
        Outcome::Unreported => "unreported",
    }
}

pub(super) const fn loss(outcome: Outcome) -> Option<&'static str> {
    match outcome {
        Outcome::Lost(cause) => Some(match cause {
            LossCause::Weather => "weather",
            LossCause::Instrument => "instrument",
            LossCause::Operator => "operator",
            LossCause::Acquisition => "acquisition",
            LossCause::Other => "other",
        }),
        _ => None,
    }
}

/// The outcome with the cause of a loss.
pub(super) fn outcome_words(of: Outcome) -> String {
    match loss(of) {
        Some(cause) => format!("{} ({cause})", outcome(of)),
        None => outcome(of).to_owned(),
    }
}

pub(super) fn hold(cause: HoldCause) -> String {
    spaced(cause.label())
}

/// A label as words.
pub(super) fn spaced(label: &str) -> String {
    label.replace('_', " ")
}

/// Why a revision was made: its label, and in words.
pub(super) fn plan_cause(cause: &PlanCause) -> (&'static str, String) {
    let plain = |label, words: &str| (label, words.to_owned());
    match cause {
        PlanCause::Evening => plain("evening", "first queue of the night"),
        PlanCause::HoldEnded => plain("hold_ended", "a hold ended"),
        PlanCause::VisitDeviated => plain("visit_deviated", "a visit did not go as planned"),
        PlanCause::Request(words) => ("request", format!("asked for: {words}")),
        PlanCause::WeatherChanged => plain("weather_changed", "wind or seeing changed"),
        PlanCause::SettingsChanged => plain("settings_changed", "the settings changed"),
        PlanCause::Recovered => plain("recovered", "came back within the night"),
    }
}

/// How much of what no plan could have beaten a revision reaches, per cent.
pub(super) fn reached(revision: &RevisionNote) -> Option<f64> {
    let bound = revision.bound.filter(|bound| *bound > 0.0)?;
    Some((100.0 * revision.value / bound).min(100.0))
}

/// A quantity's words with the unit, and its decimals.
pub(super) const fn quantity(quantity: Quantity) -> (&'static str, usize) {
    match quantity {
        Quantity::RainMmH => ("rain, mm/h", 1),
        Quantity::HumidityPercent => ("humidity, %", 0),
        Quantity::DewPointSpreadK => ("dew-point spread, K", 1),
        Quantity::WindMS => ("wind, m/s", 1),
        Quantity::GustMS => ("gusts, m/s", 1),
        Quantity::CloudPercent => ("cloud, %", 0),
        Quantity::SkyMinusAirK => ("sky minus air, K", 1),
        Quantity::SkyBrightnessMag => ("sky, mag/arcsec²", 1),
        Quantity::SeeingArcsec => ("seeing, arcsec", 2),
    }
}

/// The quantities of rules in the order of reports.
pub(super) const QUANTITIES: [Quantity; 9] = [
    Quantity::CloudPercent,
    Quantity::SeeingArcsec,
    Quantity::WindMS,
    Quantity::GustMS,
    Quantity::HumidityPercent,
    Quantity::DewPointSpreadK,
    Quantity::RainMmH,
    Quantity::SkyMinusAirK,
    Quantity::SkyBrightnessMag,
];

/// A quantity's values over the night, in order of time; at least one.
pub(super) struct Course {
    pub(super) quantity: Quantity,
    pub(super) values: Vec<(Utc, f64)>,
    pub(super) least: f64,
    pub(super) median: f64,
    pub(super) greatest: f64,
}

/// The course of each quantity that was kept.
pub(super) fn courses(report: &NightReport) -> Vec<Course> {
    QUANTITIES
        .iter()
        .filter_map(|quantity| course(report, *quantity))
        .collect()
}

fn course(report: &NightReport, quantity: Quantity) -> Option<Course> {
    let values: Vec<(Utc, f64)> = report
        .weather
        .iter()
        .filter_map(|sample| Some((sample.at, *sample.values.get(&quantity)?)))
        .collect();
    let mut sorted: Vec<f64> = values.iter().map(|(_, value)| *value).collect();
    sorted.sort_by(f64::total_cmp);
    Some(Course {
        quantity,
        least: *sorted.first()?,
        median: *sorted.get(sorted.len() / 2)?,
        greatest: *sorted.last()?,
        values,
    })
}

/// The caution that every face ends with.
pub(super) const CAUTION: &str = "nightwright chooses observations. It does not protect people, the \
     dome or the optics: the observatory's own interlocks do, and local rules come first.";
