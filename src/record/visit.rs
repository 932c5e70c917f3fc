//! What happened.

use std::collections::BTreeMap;
use std::fmt;

use super::EntryKind;
use crate::catalogue::TargetId;
use crate::time::{NightDate, Span, Utc};

/// Names a visit: unique in a ledger, made from night and a running number so that the same night
/// rehearsed twice gives the same names.
#[derive(Clone, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct VisitId(pub String);

impl VisitId {
    /// The n-th visit handed out in a night.
    pub fn of(night: NightDate, number: u32) -> Self {
        VisitId(format!("{night}-{number:04}"))
    }
}

impl fmt::Display for VisitId {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(&self.0)
    }
}

/// How many exposures of how long.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Exposures {
    /// Number, at least 1.
    pub count: u32,
    /// Length of each, seconds.
    pub seconds: f64,
}

impl Exposures {
    /// Open-shutter time in all, seconds.
    pub fn total_s(&self) -> f64 {
        f64::from(self.count) * self.seconds
    }
}

/// How a visit ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Outcome {
    /// As planned.
    Done,
    /// Stopped early: credited by what was gathered.
    Short,
    /// Begun and lost.
    Lost(LossCause),
    /// The observatory said no before it began.
    Refused,
    /// The lease ran out with no word; may be settled later.
    Unreported,
}

/// Why a visit was lost.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum LossCause {
    /// Cloud, wind, rain, humidity.
    Weather,
    /// Telescope, dome, spectrograph.
    Instrument,
    /// A person stopped it.
    Operator,
    /// The star was not found.
    Acquisition,
    /// None of these, or not told.
    Other,
}

/// One pointing at one subject as it was carried out.
#[derive(Clone, Debug, PartialEq)]
pub struct Visit {
    /// Its name.
    pub id: VisitId,
    /// The night it counts for.
    pub night: NightDate,
    /// What for.
    pub kind: EntryKind,
    /// The target, or the calibration's name.
    pub subject: TargetId,
    /// When the lease began: slew and acquisition included. Equals `exposing.start` where unknown.
    pub began: Utc,
    /// First shutter opening to last read-out; empty when nothing was exposed.
    pub exposing: Span,
    /// Open-shutter time gathered, seconds.
    pub exposed_s: f64,
    /// Exposures as planned.
    pub planned: Exposures,
    /// How it ended.
    pub outcome: Outcome,
    /// Share of a full visit that it counts for, 0 to 1.
    pub credit: f64,
    /// Airmass at the middle.
    pub airmass: Option<f64>,
    /// Signal-to-noise reported.
    pub snr: Option<f64>,
    /// Velocity error reported, m/s.
    pub rv_error_m_s: Option<f64>,
    /// Velocity error predicted, m/s.
    pub predicted_rv_error_m_s: Option<f64>,
    /// Barycentric mid-exposure time, BJD_TDB in days.
    pub mid_bjd_tdb: Option<f64>,
    /// Anything else worth keeping.
    pub note: String,
}

/// Why nothing could be observed.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum HoldCause {
    /// A weather rule.
    Weather,
    /// No fresh, sound word from the weather feed.
    FeedLost,
    /// Telescope, dome, spectrograph.
    Instrument,
    /// A person.
    Operator,
    /// The ledger cannot be written.
    Ledger,
}

impl HoldCause {
    /// All causes, in the order of precedence when several hold at once: the split of darkness
    /// counts a minute for the first.
    pub const ALL: [HoldCause; 5] = [
        HoldCause::Weather,
        HoldCause::FeedLost,
        HoldCause::Instrument,
        HoldCause::Operator,
        HoldCause::Ledger,
    ];

    /// The label in files and reports.
    pub const fn label(self) -> &'static str {
        match self {
            HoldCause::Weather => "weather",
            HoldCause::FeedLost => "feed_lost",
            HoldCause::Instrument => "instrument",
            HoldCause::Operator => "operator",
            HoldCause::Ledger => "ledger",
        }
    }
}

/// Why dark, usable time was not used.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum IdleCause {
    /// No target was within its limits, or none was worth anything.
    NothingToObserve,
    /// The plan waits for the next visit's start.
    Waiting,
    /// A visit was on offer and nobody claimed it.
    Unclaimed,
    /// The night, or this span of it, is not ours.
    NotOurs,
}

impl IdleCause {
    /// All causes.
    pub const ALL: [IdleCause; 4] = [
        IdleCause::NothingToObserve,
        IdleCause::Waiting,
        IdleCause::Unclaimed,
        IdleCause::NotOurs,
    ];

    /// The label in files and reports.
    pub const fn label(self) -> &'static str {
        match self {
            IdleCause::NothingToObserve => "nothing_to_observe",
            IdleCause::Waiting => "waiting",
            IdleCause::Unclaimed => "unclaimed",
            IdleCause::NotOurs => "not_ours",
        }
    }
}

/// A span in which nothing might be observed.
#[derive(Clone, Debug, PartialEq)]
pub struct Hold {
    /// Why.
    pub cause: HoldCause,
    /// From when to when.
    pub span: Span,
    /// In words, with the values that decided.
    pub detail: String,
}

/// The whole of darkness split with no gap and no overlap, milliseconds.
#[derive(Clone, Debug, PartialEq, Eq, Default)]
pub struct DarknessSplit {
    /// Shutter open on a target (first opening to last read-out).
    pub exposing_ms: i64,
    /// Slews, settling, acquisition; and the whole of visits that gave nothing.
    pub overhead_ms: i64,
    /// Calibrations and standards.
    pub calibration_ms: i64,
    /// Held, by cause.
    pub held_ms: BTreeMap<HoldCause, i64>,
    /// Idle, by cause.
    pub idle_ms: BTreeMap<IdleCause, i64>,
}

impl DarknessSplit {
    /// The sum, which is the length of darkness.
    pub fn total_ms(&self) -> i64 {
        self.exposing_ms
            + self.overhead_ms
            + self.calibration_ms
            + self.held_ms.values().sum::<i64>()
            + self.idle_ms.values().sum::<i64>()
    }

    /// Adds another split to this one, part by part.
    pub fn add(&mut self, other: &DarknessSplit) {
        self.exposing_ms += other.exposing_ms;
        self.overhead_ms += other.overhead_ms;
        self.calibration_ms += other.calibration_ms;
        for (cause, ms) in &other.held_ms {
            *self.held_ms.entry(*cause).or_default() += ms;
        }
        for (cause, ms) in &other.idle_ms {
            *self.idle_ms.entry(*cause).or_default() += ms;
        }
    }

    /// Every part with its label, milliseconds, in the order of reports: what did not occur stands
    /// there as 0, so that a reader finds the same labels for every night.
    pub fn parts(&self) -> Vec<(String, i64)> {
        let mut parts = vec![
            ("exposing".to_owned(), self.exposing_ms),
            ("overhead".to_owned(), self.overhead_ms),
            ("calibration".to_owned(), self.calibration_ms),
        ];
        parts.extend(HoldCause::ALL.iter().map(|cause| {
            let ms = self.held_ms.get(cause).copied().unwrap_or(0);
            (format!("held_{}", cause.label()), ms)
        }));
        parts.extend(IdleCause::ALL.iter().map(|cause| {
            let ms = self.idle_ms.get(cause).copied().unwrap_or(0);
            (format!("idle_{}", cause.label()), ms)
        }));
        parts
    }
}

/// Visits by outcome (targets and standards; lamps are not counted).
#[derive(Clone, Copy, Debug, PartialEq, Eq, Default)]
pub struct VisitCounts {
    /// As planned.
    pub done: u32,
    /// Stopped early.
    pub short: u32,
    /// Lost.
    pub lost: u32,
    /// Refused.
    pub refused: u32,
    /// No word.
    pub unreported: u32,
}

/// A night at its close.
#[derive(Clone, Debug, PartialEq)]
pub struct NightSummary {
    /// The night.
    pub night: NightDate,
    /// Its darkness; `None` when there was none.
    pub darkness: Option<Span>,
    /// Where the darkness went.
    pub split: DarknessSplit,
    /// Visits by outcome.
    pub visits: VisitCounts,
}
