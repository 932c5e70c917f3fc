//! What a queue looks like outside: JSON and CSV rows, told apart from the values inside so that
//! neither changes with the other unnoticed.

use serde::Serialize;

use crate::record::{EntryKind, LeftOut, QueueEntry};

/// A visit of the queue.
#[derive(Clone, Debug, Serialize)]
pub struct VisitView {
    target: String,
    kind: &'static str,
    start: String,
    end: String,
    setup_s: f64,
    exposures: ExposuresView,
    predicted_rv_error_m_s: Option<f64>,
    airmass: Option<f64>,
    altitude_deg: Option<f64>,
    azimuth_deg: Option<f64>,
    moon_separation_deg: Option<f64>,
    value: ValueView,
    because: String,
}

#[derive(Clone, Copy, Debug, Serialize)]
struct ExposuresView {
    count: u32,
    seconds: f64,
}

#[derive(Clone, Copy, Debug, Serialize)]
struct ValueView {
    total: f64,
    cadence: f64,
    coverage: f64,
    window: f64,
    quality: f64,
    weight: f64,
    share: f64,
    season: f64,
}

impl From<&QueueEntry> for VisitView {
    fn from(entry: &QueueEntry) -> Self {
        let value = &entry.value;
        VisitView {
            target: entry.subject.to_string(),
            kind: kind_label(entry.kind),
            start: entry.start.to_string(),
            end: entry.end.to_string(),
            setup_s: round(entry.setup_s, 1),
            exposures: ExposuresView {
                count: entry.exposures.count,
                seconds: round(entry.exposures.seconds, 1),
            },
            predicted_rv_error_m_s: entry.predicted_rv_error_m_s.map(|v| round(v, 3)),
            airmass: entry.airmass.map(|v| round(v, 4)),
            altitude_deg: entry.altitude_deg.map(|v| round(v, 4)),
            azimuth_deg: entry.azimuth_deg.map(|v| round(v, 4)),
            moon_separation_deg: entry.moon_separation_deg.map(|v| round(v, 3)),
            value: ValueView {
                total: round(value.total, 4),
                cadence: round(value.cadence, 4),
                coverage: round(value.coverage, 4),
                window: round(value.window, 4),
                quality: round(value.quality, 4),
                weight: round(value.weight, 4),
                share: round(value.share, 4),
                season: round(value.season, 4),
            },
            because: entry.because.clone(),
        }
    }
}

/// A target without a visit.
#[derive(Clone, Debug, Serialize)]
pub struct LeftOutView {
    target: String,
    because: String,
}

impl From<&LeftOut> for LeftOutView {
    fn from(left_out: &LeftOut) -> Self {
        LeftOutView {
            target: left_out.target.to_string(),
            because: left_out.because.clone(),
        }
    }
}

/// The header of [`csv_row`].
pub const CSV_HEADER: [&str; 17] = [
    "target",
    "kind",
    "start",
    "end",
    "setup_s",
    "exposures",
    "exposure_s",
    "predicted_rv_error_m_s",
    "airmass",
    "altitude_deg",
    "azimuth_deg",
    "moon_separation_deg",
    "value",
    "cadence",
    "coverage",
    "quality",
    "because",
];

/// A visit as a CSV row.
pub fn csv_row(entry: &QueueEntry) -> Vec<String> {
    let view = VisitView::from(entry);
    let optional = |value: Option<f64>| value.map_or(String::new(), |v| v.to_string());
    vec![
        view.target,
        view.kind.to_owned(),
        view.start,
        view.end,
        view.setup_s.to_string(),
        view.exposures.count.to_string(),
        view.exposures.seconds.to_string(),
        optional(view.predicted_rv_error_m_s),
        optional(view.airmass),
        optional(view.altitude_deg),
        optional(view.azimuth_deg),
        optional(view.moon_separation_deg),
        view.value.total.to_string(),
        view.value.cadence.to_string(),
        view.value.coverage.to_string(),
        view.value.quality.to_string(),
        view.because,
    ]
}

/// The label of a kind of entry in files and replies.
pub fn kind_label(kind: EntryKind) -> &'static str {
    match kind {
        EntryKind::Science => "science",
        EntryKind::Standard => "standard",
        EntryKind::Calibration => "calibration",
    }
}

/// Rounded to so many decimals: what a reader can use, and the same text on every machine.
pub fn round(value: f64, decimals: i32) -> f64 {
    let scale = 10f64.powi(decimals);
    (value * scale).round() / scale
}
