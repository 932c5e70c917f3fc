//! The words that stand on disk for the alternatives of the record. They are written out here and
//! nowhere derived from names in the code, so that renaming those changes no ledger.

use thiserror::Error;

use crate::night::RunMode;
use crate::record::{EntryKind, HoldCause, IdleCause, LossCause, Outcome, PlanCause};
use crate::weather::Quantity;

/// A word on disk that means nothing here.
#[derive(Debug, Error, PartialEq, Eq)]
#[error("'{found}' is no {what}")]
pub(super) struct UnknownLabel {
    what: &'static str,
    found: String,
}

impl UnknownLabel {
    pub(super) fn new(what: &'static str, found: &str) -> Self {
        UnknownLabel {
            what,
            found: found.to_owned(),
        }
    }
}

/// Both directions of one table of words.
macro_rules! labels {
    ($what:literal: $to:ident / $from:ident for $type:ty { $($variant:path => $label:literal,)+ }) => {
        pub(super) const fn $to(value: $type) -> &'static str {
            match value { $($variant => $label,)+ }
        }
        pub(super) fn $from(label: &str) -> Result<$type, UnknownLabel> {
            match label {
                $($label => Ok($variant),)+
                other => Err(UnknownLabel::new($what, other)),
            }
        }
    };
}

labels!("kind of entry": entry_kind / to_entry_kind for EntryKind {
    EntryKind::Science => "science",
    EntryKind::Standard => "standard",
    EntryKind::Calibration => "calibration",
});

labels!("cause of a loss": loss_cause / to_loss_cause for LossCause {
    LossCause::Weather => "weather",
    LossCause::Instrument => "instrument",
    LossCause::Operator => "operator",
    LossCause::Acquisition => "acquisition",
    LossCause::Other => "other",
});

labels!("cause of a hold": hold_cause / to_hold_cause for HoldCause {
    HoldCause::Weather => "weather",
    HoldCause::FeedLost => "feed_lost",
    HoldCause::Instrument => "instrument",
    HoldCause::Operator => "operator",
    HoldCause::Ledger => "ledger",
});

labels!("cause of idleness": idle_cause / to_idle_cause for IdleCause {
    IdleCause::NothingToObserve => "nothing_to_observe",
    IdleCause::Waiting => "waiting",
    IdleCause::Unclaimed => "unclaimed",
    IdleCause::NotOurs => "not_ours",
});

labels!("mode": run_mode / to_run_mode for RunMode {
    RunMode::Real => "real",
    RunMode::Rehearsal => "rehearsal",
    RunMode::InventedClock => "invented_clock",
});

labels!("quantity": quantity / to_quantity for Quantity {
    Quantity::RainMmH => "rain_mm_h",
    Quantity::HumidityPercent => "humidity_percent",
    Quantity::DewPointSpreadK => "dew_point_spread_k",
    Quantity::WindMS => "wind_m_s",
    Quantity::GustMS => "gust_m_s",
    Quantity::CloudPercent => "cloud_percent",
    Quantity::SkyMinusAirK => "sky_minus_air_k",
    Quantity::SkyBrightnessMag => "sky_brightness_mag",
    Quantity::SeeingArcsec => "seeing_arcsec",
});

/// An outcome as its word and, for a loss, the word for its cause.
pub(super) const fn outcome(value: Outcome) -> (&'static str, Option<&'static str>) {
    match value {
        Outcome::Done => ("done", None),
        Outcome::Short => ("short", None),
        Outcome::Lost(cause) => ("lost", Some(loss_cause(cause))),
        Outcome::Refused => ("refused", None),
        Outcome::Unreported => ("unreported", None),
    }
}

/// The outcome of those words.
pub(super) fn to_outcome(label: &str, cause: Option<&str>) -> Result<Outcome, UnknownLabel> {
    match (label, cause) {
        ("done", None) => Ok(Outcome::Done),
        ("short", None) => Ok(Outcome::Short),
        ("lost", Some(cause)) => Ok(Outcome::Lost(to_loss_cause(cause)?)),
        ("refused", None) => Ok(Outcome::Refused),
        ("unreported", None) => Ok(Outcome::Unreported),
        _ => Err(UnknownLabel::new("outcome", label)),
    }
}

/// A plan's cause as its word and, for a request, what was asked.
pub(super) fn plan_cause(value: &PlanCause) -> (&'static str, Option<&str>) {
    match value {
        PlanCause::Evening => ("evening", None),
        PlanCause::HoldEnded => ("hold_ended", None),
        PlanCause::VisitDeviated => ("visit_deviated", None),
        PlanCause::Request(words) => ("request", Some(words)),
        PlanCause::WeatherChanged => ("weather_changed", None),
        PlanCause::SettingsChanged => ("settings_changed", None),
        PlanCause::Recovered => ("recovered", None),
    }
}

/// The plan's cause of those words.
pub(super) fn to_plan_cause(label: &str, words: Option<&str>) -> Result<PlanCause, UnknownLabel> {
    match (label, words) {
        ("evening", None) => Ok(PlanCause::Evening),
        ("hold_ended", None) => Ok(PlanCause::HoldEnded),
        ("visit_deviated", None) => Ok(PlanCause::VisitDeviated),
        ("request", Some(words)) => Ok(PlanCause::Request(words.to_owned())),
        ("weather_changed", None) => Ok(PlanCause::WeatherChanged),
        ("settings_changed", None) => Ok(PlanCause::SettingsChanged),
        ("recovered", None) => Ok(PlanCause::Recovered),
        _ => Err(UnknownLabel::new("cause of a plan", label)),
    }
}
