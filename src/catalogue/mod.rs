//! Floor 1: what the survey is — telescope, instrument, programmes, targets — as checked values.
//!
//! Nothing here reads a file: `settings` makes these values from TOML and CSV and has checked them.

mod equipment;
mod target;

pub use equipment::{
    Calibration, CalibrationWhen, Instrument, Mount, Telescope, VelocityModel, WindAvoidance,
};
pub use target::{
    Cadence, Candidate, ExposureRule, Measured, Programme, SpecialWindow, Target, TargetId,
    TargetLimits, WindowPurpose, WindowShape,
};

use crate::ephemeris::Site;
use crate::time::{NightDate, SpanSet};
use crate::units::Angle;

/// Everything that decides what may and should be observed.
#[derive(Clone, Debug, PartialEq)]
pub struct Survey {
    /// Name of the survey, for reports.
    pub name: String,
    /// First night of the survey: cadence accrues from here unless a target starts later. `None`:
    /// from the first night in the ledger, or tonight when it is empty.
    pub first_night: Option<NightDate>,
    /// Where.
    pub site: Site,
    /// With what telescope.
    pub telescope: Telescope,
    /// With what spectrograph.
    pub instrument: Instrument,
    /// The programmes, in the order of the file.
    pub programmes: Vec<Programme>,
    /// The targets, in the order of the file. [`Target::programme`] indexes `programmes`.
    pub targets: Vec<Target>,
    /// Which nights and spans are ours.
    pub allocation: Allocation,
    /// How the night is planned.
    pub planning: Planning,
}

/// Which nights are ours.
#[derive(Clone, Debug, PartialEq, Default)]
pub struct Allocation {
    /// First and last night of each run of ours, both included; empty: every night is ours.
    pub nights: Vec<(NightDate, NightDate)>,
    /// Spans within nights in which nothing may be planned.
    pub blocked: SpanSet,
}

impl Allocation {
    /// Whether that night is ours.
    pub fn is_ours(&self, night: NightDate) -> bool {
        self.nights.is_empty() || self.nights.iter().any(|(a, b)| *a <= night && night <= *b)
    }
}

/// How a night is planned.
#[derive(Clone, Debug, PartialEq)]
pub struct Planning {
    /// Darkness is the part of the night in which the sun's centre stands below this altitude.
    pub darkness_sun_altitude: Angle,
    /// Share of a visit's value that depends on orbital coverage, 0 to 1; the rest is cadence alone.
    pub coverage_share: f64,
    /// Most that the season term adds as a star's observable nights run out, as a factor above 1.
    pub season_boost: f64,
    /// How strongly a programme below its wanted share is pulled up (0: not at all).
    pub share_pull: f64,
    /// Worth of each further visit to a star in the same night, relative to the first.
    pub repeat_worth: f64,
    /// Spread of the barycentric velocity wanted of a star's visits, km/s, so that the lines of star
    /// and air separate.
    pub barycentric_spread_km_s: f64,
    /// Typical zenith seeing (full width at half maximum) in arcseconds at the instrument's band.
    pub typical_seeing_arcsec: f64,
    /// Longest wall time in milliseconds that a plan may take.
    pub budget_ms: u64,
    /// Seed of the planner's search.
    pub seed: u64,
}
