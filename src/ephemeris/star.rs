//! What a catalogue says of a star's place and motion.

use crate::units::Angle;

/// A star's ICRS place at its catalogue's epoch, with its space motion.
#[derive(Clone, Debug, PartialEq)]
pub struct Star {
    /// Right ascension at the epoch.
    pub ra: Angle,
    /// Declination at the epoch.
    pub dec: Angle,
    /// Epoch of place and motion, Julian year (TDB).
    pub epoch_jyear: f64,
    /// Proper motion in right ascension with the cos δ factor, milliarcseconds a year.
    pub pm_ra_cosdec_mas_yr: f64,
    /// Proper motion in declination, milliarcseconds a year.
    pub pm_dec_mas_yr: f64,
    /// Parallax in milliarcseconds; zero where unknown, which is taken as "very far".
    pub parallax_mas: f64,
    /// Systemic radial velocity in km/s, receding positive.
    pub radial_velocity_km_s: f64,
}
