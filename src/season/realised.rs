//! What one realisation came to, as it is kept on disk.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

/// A realisation that has come to its end.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Realised {
    /// Which one.
    pub number: u32,
    /// By target, in the order of the frame.
    pub stars: Vec<StarRealised>,
    /// Open time used by each programme within the season, seconds.
    pub used_s: Vec<f64>,
    /// By night.
    pub nights: Vec<NightRealised>,
    /// Prices of time, on the nights on which they were worked out.
    pub prices: Vec<PriceSample>,
    /// Every visit to a target.
    pub visits: Vec<VisitRow>,
}

/// One target at the season's end.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct StarRealised {
    /// Credit of the season's visits.
    pub credited: f64,
    /// Days, over the season's credited visits; `None` with fewer than two.
    pub longest_gap_d: Option<f64>,
    /// Visits owed at the end, those from before the season with them.
    pub owed: f64,
    /// The same by cause, labels of [`crate::audit::OwedCause`].
    pub owed_by_cause: BTreeMap<String, f64>,
    /// Error of K for each candidate, m/s; `None` where the visits determine no orbit.
    pub sigma_k_m_s: Vec<Option<f64>>,
    /// Semi-amplitude of the smallest planet found at the programme's periods, m/s.
    pub smallest_k_m_s: Vec<Option<f64>>,
    /// For each window to catch, whether a visit of the season caught it.
    pub caught: Vec<bool>,
}

/// One night's darkness.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct NightRealised {
    /// Its length, milliseconds.
    pub darkness_ms: i64,
    /// Its parts in the order of [`crate::record::DarknessSplit::parts`], milliseconds.
    pub parts_ms: Vec<i64>,
}

/// What an hour of a night was worth.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PriceSample {
    /// Index of the night within the season.
    pub night: u32,
    /// Right ascension on the meridian in the middle of that hour, whole hours, 0 to 23.
    pub ra_h: u32,
    /// Hours that the value stands for; the last of a night is shorter.
    pub hours: f64,
    /// Value that the best queue would lose without them.
    pub value: f64,
}

/// One visit to a target.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct VisitRow {
    /// Index of the target.
    pub star: u32,
    /// Index of the night within the season.
    pub night: u32,
    /// First shutter opening, milliseconds of Unix time.
    pub start_unix_ms: i64,
    /// Last read-out.
    pub end_unix_ms: i64,
    /// Open-shutter time, seconds.
    pub exposed_s: f64,
    /// Share of a full visit.
    pub credit: f64,
    /// `done`, `short`, `lost`, `refused` or `unreported`.
    pub outcome: String,
    /// Airmass at the middle.
    pub airmass: Option<f64>,
    /// Velocity error, m/s.
    pub rv_error_m_s: Option<f64>,
}
