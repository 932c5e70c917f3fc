//! A night's queue as it was published.

use super::Exposures;
use crate::catalogue::TargetId;
use crate::time::{NightDate, Utc};

/// What an entry of the queue is for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum EntryKind {
    /// A visit to a target for its programme.
    Science,
    /// A visit to a star for the calibration of the spectrograph.
    Standard,
    /// A calibration without a star.
    Calibration,
}

/// The parts of a visit's value. `total` = weight × share × season × quality ×
/// (cadence × ((1 − s) + s × coverage) + window), s being [`crate::catalogue::Planning::coverage_share`].
#[derive(Clone, Copy, Debug, PartialEq, Default)]
pub struct ValueParts {
    /// All parts together.
    pub total: f64,
    /// From owed and overdue.
    pub cadence: f64,
    /// Information gained on the orbits, 0 to 1.
    pub coverage: f64,
    /// Added by a special window.
    pub window: f64,
    /// Exposure time of the best case over that of this instant, 0 to 1.
    pub quality: f64,
    /// Target's weight × programme's.
    pub weight: f64,
    /// Pull towards the programme's share.
    pub share: f64,
    /// Rises as the star's season runs out, 1 or more.
    pub season: f64,
}

/// One entry of the queue.
#[derive(Clone, Debug, PartialEq)]
pub struct QueueEntry {
    /// What for.
    pub kind: EntryKind,
    /// The target, or the calibration's name.
    pub subject: TargetId,
    /// When the first exposure starts: slew, settling and acquisition come before.
    pub start: Utc,
    /// When the last read-out ends.
    pub end: Utc,
    /// Time from the end of the entry before that slew, settling and acquisition need, seconds.
    pub setup_s: f64,
    /// Exposures.
    pub exposures: Exposures,
    /// Velocity error expected, m/s (photons, floor and jitter); `None` for calibrations.
    pub predicted_rv_error_m_s: Option<f64>,
    /// Airmass at the middle; `None` where no star is looked at.
    pub airmass: Option<f64>,
    /// Altitude at the middle, degrees.
    pub altitude_deg: Option<f64>,
    /// Azimuth at the middle, degrees.
    pub azimuth_deg: Option<f64>,
    /// Distance to the moon at the middle, degrees.
    pub moon_separation_deg: Option<f64>,
    /// Why it is worth its time.
    pub value: ValueParts,
    /// The reason in plain words.
    pub because: String,
}

/// A target that got no visit, and why.
#[derive(Clone, Debug, PartialEq)]
pub struct LeftOut {
    /// The target.
    pub target: TargetId,
    /// The constraint or the price that kept it out, in plain words.
    pub because: String,
}

/// Why a plan was made.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum PlanCause {
    /// The first of the night.
    Evening,
    /// A hold has ended.
    HoldEnded,
    /// A visit took longer or shorter than planned, or was lost or refused.
    VisitDeviated,
    /// Somebody asked: urgent target, pause, skip, limits; in their words.
    Request(String),
    /// Wind or seeing are no longer those that the queue was planned for.
    WeatherChanged,
    /// The settings changed on disk.
    SettingsChanged,
    /// The daemon came back in the middle of a night.
    Recovered,
}

/// A queue as published, with what it replaces.
#[derive(Clone, Debug, PartialEq)]
pub struct PlanRevision {
    /// The night.
    pub night: NightDate,
    /// 1 for the first of the night.
    pub number: u32,
    /// When it was made.
    pub made_at: Utc,
    /// From when on it plans.
    pub from: Utc,
    /// Why.
    pub cause: PlanCause,
    /// The entries in order of time.
    pub entries: Vec<QueueEntry>,
    /// Who is not in it.
    pub left_out: Vec<LeftOut>,
    /// Total value.
    pub value: f64,
    /// No plan of this night can be worth more, where the planner proved one.
    pub bound: Option<f64>,
}
