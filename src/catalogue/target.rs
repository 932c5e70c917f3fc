//! What is to be observed, how often, and what for.

use std::borrow::Borrow;
use std::fmt;
use std::sync::Arc;

use crate::ephemeris::Star;
use crate::time::NightDate;
use crate::units::Angle;

/// A target's name in files, reports and the ledger: letters, digits, `-`, `_`, `.`, `+`.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct TargetId(Arc<str>);

impl TargetId {
    /// Takes the text as it is; `settings` has checked it.
    pub fn new(id: &str) -> Self {
        TargetId(Arc::from(id))
    }

    /// The text.
    pub fn as_str(&self) -> &str {
        &self.0
    }
}

impl fmt::Display for TargetId {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(&self.0)
    }
}

impl Borrow<str> for TargetId {
    fn borrow(&self) -> &str {
        &self.0
    }
}

/// Targets that are observed for one purpose and share a claim on the time.
#[derive(Clone, Debug, PartialEq)]
pub struct Programme {
    /// Short name that targets refer to.
    pub id: String,
    /// For reports.
    pub label: String,
    /// Factor on the value of all its visits.
    pub weight: f64,
    /// Share of the used time that it should get, 0 to 1; the shares need not add to 1.
    pub share: f64,
    /// Shortest period in days over which coverage is sought for a star without candidates.
    pub min_period_d: f64,
    /// Longest such period in days.
    pub max_period_d: f64,
}

/// A value with its standard error.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Measured {
    /// Best estimate.
    pub value: f64,
    /// One standard error; zero: taken as exact.
    pub error: f64,
}

/// A star on the list.
#[derive(Clone, Debug, PartialEq)]
pub struct Target {
    /// Its name.
    pub id: TargetId,
    /// Index of its programme in [`super::Survey::programmes`].
    pub programme: usize,
    /// Place and motion.
    pub star: Star,
    /// Magnitude in the instrument's band.
    pub magnitude: f64,
    /// Effective temperature in kelvin.
    pub temperature_k: f64,
    /// Mass in solar masses.
    pub mass_msun: Option<Measured>,
    /// Radius in solar radii.
    pub radius_rsun: Option<Measured>,
    /// Velocity jitter of the star itself, m/s.
    pub jitter_m_s: f64,
    /// How often.
    pub cadence: Cadence,
    /// How long.
    pub exposure: ExposureRule,
    /// Planets hoped for.
    pub candidates: Vec<Candidate>,
    /// Instants of special worth or of none.
    pub windows: Vec<SpecialWindow>,
    /// Limits of its own, stricter than the telescope's.
    pub limits: TargetLimits,
    /// Factor on the value of its visits.
    pub weight: f64,
    /// Not to be observed for now.
    pub paused: bool,
}

/// How often a star is wanted.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Cadence {
    /// One observed night every so many nights, at least 1.
    pub every_nights: f64,
    /// Visits wanted on such a night, at least 1.
    pub visits_per_night: u32,
    /// Least time from the start of one visit to the start of the next in the same night, minutes.
    pub separation_min: f64,
    /// Visits after which the star is complete.
    pub total_visits: Option<u32>,
    /// First night on which it is wanted.
    pub first_night: Option<NightDate>,
    /// Last night on which it is wanted.
    pub last_night: Option<NightDate>,
}

/// What decides the exposure of a visit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum ExposureRule {
    /// So many seconds in all, whatever the conditions.
    FixedSeconds(f64),
    /// To this signal-to-noise per spectral pixel.
    SignalToNoise(f64),
    /// To this photon-noise velocity error, m/s.
    VelocityError(f64),
}

/// A planet hoped for.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Candidate {
    /// Orbital period in days.
    pub period_d: Measured,
    /// Time of inferior conjunction (mid-transit), BJD_TDB in days.
    pub conjunction_bjd_tdb: Measured,
    /// Guessed velocity semi-amplitude, m/s.
    pub semi_amplitude_m_s: Option<f64>,
    /// Eccentricity, 0 ≤ e < 1.
    pub eccentricity: f64,
    /// Argument of periastron of the star's orbit.
    pub argument: Angle,
    /// Count the first eccentric harmonics in the coverage.
    pub eccentric_terms: bool,
}

/// Instants at which a visit is worth more, or nothing.
#[derive(Clone, Debug, PartialEq)]
pub struct SpecialWindow {
    /// For reports.
    pub label: String,
    /// Index of the candidate whose ephemeris times it, in [`Target::candidates`].
    pub candidate: usize,
    /// Where in the orbit.
    pub shape: WindowShape,
    /// What for.
    pub purpose: WindowPurpose,
}

/// The part of an orbit that a window covers. Its edges are widened (to avoid) or narrowed (to
/// catch) by the propagated ephemeris error.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum WindowShape {
    /// A transit: so many hours centred on conjunction.
    Transit {
        /// First to last contact, hours.
        duration_h: f64,
    },
    /// Phases from `from` to `to` (through 1 when `to < from`), phase 0 at conjunction.
    Phases {
        /// Start, 0 ≤ φ < 1.
        from: f64,
        /// End, 0 ≤ φ < 1.
        to: f64,
    },
}

/// What a window is for.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum WindowPurpose {
    /// Worth this much on top of the cadence's value when a visit lies within.
    Catch {
        /// Value added, on the scale on which a visit that is due is worth 1.
        worth: f64,
    },
    /// Worth nothing within.
    Avoid,
}

/// Limits of a target, stricter than the telescope's; `None`: the telescope's hold.
#[derive(Clone, Copy, Debug, PartialEq, Default)]
pub struct TargetLimits {
    /// Lowest altitude.
    pub min_altitude: Option<Angle>,
    /// Highest airmass.
    pub max_airmass: Option<f64>,
    /// Closest to the moon.
    pub min_moon_separation: Option<Angle>,
}
