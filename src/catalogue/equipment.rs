//! Telescope and spectrograph.

use crate::units::Angle;

/// The telescope as the planner needs to know it.
#[derive(Clone, Debug, PartialEq)]
pub struct Telescope {
    /// Diameter of the entrance pupil in metres.
    pub aperture_m: f64,
    /// Share of the pupil that the secondary hides, 0 to 1 of the area.
    pub obstruction: f64,
    /// Kind of mount, with what only that kind has.
    pub mount: Mount,
    /// Highest slew rate of each axis (azimuth or hour angle, altitude or declination), degrees/s.
    pub slew_rate_deg_s: (f64, f64),
    /// Acceleration of each axis, degrees/s²; infinite where not given.
    pub acceleration_deg_s2: (f64, f64),
    /// Time to settle after a slew, seconds.
    pub settle_s: f64,
    /// Time to find the star and put it on the fibre, seconds.
    pub acquisition_s: f64,
    /// Lowest altitude of the mount.
    pub min_altitude: Angle,
    /// Highest altitude of the mount (90° where nothing forbids).
    pub max_altitude: Angle,
    /// Closest approach to the moon when it is above the horizon.
    pub min_moon_separation: Angle,
    /// Closest approach to the sun, always.
    pub min_sun_separation: Angle,
    /// Where not to point in wind.
    pub wind: Option<WindAvoidance>,
}

/// The mount.
#[derive(Clone, Debug, PartialEq)]
pub enum Mount {
    /// Turns in azimuth and altitude.
    AltAzimuth {
        /// Zenith distance below which it cannot follow a star.
        zenith_hole: Angle,
    },
    /// Turns in hour angle and declination.
    Equatorial {
        /// Lowest hour angle (east, negative).
        min_hour_angle: Angle,
        /// Highest hour angle (west, positive).
        max_hour_angle: Angle,
        /// Time lost when the tube changes side of the pier, seconds; zero for a mount that need not.
        flip_s: f64,
    },
}

/// No pointing within an angle of a wind above a speed.
#[derive(Clone, Debug, PartialEq)]
pub struct WindAvoidance {
    /// Mean wind above which this holds, m/s.
    pub above_m_s: f64,
    /// Half-width in azimuth about the direction that the wind comes from.
    pub half_width: Angle,
}

/// The spectrograph.
#[derive(Clone, Debug, PartialEq)]
pub struct Instrument {
    /// Short end of the band that gives the velocity, nanometres.
    pub band_min_nm: f64,
    /// Long end of that band, nanometres.
    pub band_max_nm: f64,
    /// Photons per second, square metre and nanometre from a star of magnitude zero in the band,
    /// above the air.
    pub zero_point_photons_s_m2_nm: f64,
    /// Share of the photons entering the pupil that is detected (mirrors, fibre, optics, detector),
    /// at the reference seeing.
    pub throughput: f64,
    /// Seeing at which `throughput` holds, arcseconds.
    pub reference_seeing_arcsec: f64,
    /// Diameter of the fibre on the sky, arcseconds.
    pub fibre_arcsec: f64,
    /// Extinction in the band, magnitudes per airmass.
    pub extinction_mag_airmass: f64,
    /// Dark sky in the band, magnitudes per square arcsecond.
    pub dark_sky_mag_arcsec2: f64,
    /// Spectral pixels in the band across which photons are counted for signal-to-noise.
    pub spectral_pixels: f64,
    /// Read noise in electrons per spectral pixel and exposure (all rows summed).
    pub read_noise_e: f64,
    /// Read-out time after each exposure, seconds.
    pub readout_s: f64,
    /// Photons in a spectral pixel of one exposure at which it saturates.
    pub saturation_e: f64,
    /// Shortest exposure, seconds.
    pub min_exposure_s: f64,
    /// Longest exposure, seconds; a visit that needs more is split.
    pub max_exposure_s: f64,
    /// Velocity model.
    pub velocity: VelocityModel,
    /// Calibrations wanted each night.
    pub calibrations: Vec<Calibration>,
}

/// How well the spectrograph measures a velocity.
#[derive(Clone, Debug, PartialEq)]
pub struct VelocityModel {
    /// Error that no light removes, m/s.
    pub floor_m_s: f64,
    /// (effective temperature in kelvin, quality factor Q) of a slow rotator in this band, by rising
    /// temperature; straight lines between. Bouchy, Pepe & Queloz 2001, A&A 374, 733 define Q.
    pub quality_factor: Vec<(f64, f64)>,
}

/// A calibration of the spectrograph, or a standard star.
#[derive(Clone, Debug, PartialEq)]
pub struct Calibration {
    /// Name.
    pub id: String,
    /// How long the spectrograph is taken up, seconds.
    pub duration_s: f64,
    /// When.
    pub when: CalibrationWhen,
    /// Standard stars of which one is observed; empty when the telescope need not point (lamps).
    pub standards: Vec<super::TargetId>,
}

/// When a calibration is wanted.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum CalibrationWhen {
    /// As darkness begins.
    NightStart,
    /// As darkness ends.
    NightEnd,
    /// So often through the night, hours from the one before.
    EveryHours(f64),
    /// Once in each half of the night.
    EachHalf,
}
