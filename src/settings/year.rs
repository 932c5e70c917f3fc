//! A year of nights at a site: who is up in the dark, within all limits, and for how long.
//!
//! Darkness is the real one. A star's altitude is simple geometry (no precession, no refraction): a
//! year of 300 stars must take a moment, and a question like "does it ever rise?" needs no more than
//! a tenth of a degree. What decides a real night is computed with the full routines elsewhere.

use crate::catalogue::{Mount, Target, Telescope};
use crate::ephemeris::{AirmassModel, EphemerisError, Observer, Visibility, altitude_of_airmass};
use crate::time::{MINUTE_MS, NightDate, Span, Utc};
use crate::units::Angle;

/// Every so many nights one is looked at.
const NIGHT_STEP: usize = 5;
/// Length of the year that repeats, in nights: a multiple of the step.
const YEAR_NIGHTS: usize = 365;
/// Grid within a night, minutes.
const STEP_MIN: i64 = 10;

/// Julian date of J2000.0.
const J2000_JD: f64 = 2_451_545.0;

/// The sampled nights of a year.
pub(super) struct Year<'a> {
    observer: &'a Observer,
    telescope: &'a Telescope,
    first: NightDate,
    /// Per night looked at, the local sidereal time of each dark grid point, radians.
    dark: Vec<Vec<f64>>,
}

/// Where and how long a star can be observed in one night, in minutes.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Chance {
    /// Longest unbroken stretch.
    pub(super) longest_min: f64,
    /// From the first to the last minute.
    pub(super) span_min: f64,
}

/// The conditions that a star must meet.
struct Limits<'a> {
    observer: &'a Observer,
    telescope: &'a Telescope,
    low_deg: f64,
    dec: Angle,
    ra: Angle,
}

impl<'a> Year<'a> {
    /// The year from that night on; darkness is the sun's centre below the altitude.
    pub(super) fn new(
        observer: &'a Observer,
        telescope: &'a Telescope,
        darkness_sun_altitude: Angle,
        first: NightDate,
    ) -> Result<Self, EphemerisError> {
        let nights = Visibility::over(observer, first, YEAR_NIGHTS, darkness_sun_altitude)?;
        let dark = nights
            .darkness()
            .step_by(NIGHT_STEP)
            .map(|(_, darkness)| {
                darkness.map_or_else(Vec::new, |d| sidereal_times(d, observer.site.longitude))
            })
            .collect();
        Ok(Year {
            observer,
            telescope,
            first,
            dark,
        })
    }

    /// The longest darkness of the year in minutes.
    pub(super) fn longest_dark_min(&self) -> f64 {
        let longest = self.dark.iter().map(Vec::len).max().unwrap_or(0);
        minutes(longest)
    }

    /// A star's chance in each night looked at.
    pub(super) fn chances(&self, target: &Target, place: (Angle, Angle)) -> Vec<Chance> {
        let limits = Limits {
            observer: self.observer,
            telescope: self.telescope,
            low_deg: lowest_altitude_deg(self.telescope, target),
            ra: place.0,
            dec: place.1,
        };
        self.dark.iter().map(|night| limits.chance(night)).collect()
    }

    /// Index into the result of [`Year::chances`] for any night.
    pub(super) fn index_of(&self, night: NightDate) -> usize {
        let in_year = night
            .nights_since(self.first)
            .rem_euclid(YEAR_NIGHTS as i64);
        in_year as usize / NIGHT_STEP
    }
}

impl Limits<'_> {
    fn chance(&self, dark: &[f64]) -> Chance {
        let mut chance = Chance::default();
        let mut run = 0usize;
        let mut first = None;
        for (index, sidereal) in dark.iter().enumerate() {
            if !self.is_free(*sidereal) {
                run = 0;
                continue;
            }
            run += 1;
            let begun = *first.get_or_insert(index);
            chance.longest_min = chance.longest_min.max(minutes(run));
            chance.span_min = minutes(index + 1 - begun);
        }
        chance
    }

    fn is_free(&self, sidereal_rad: f64) -> bool {
        let hour_angle = Angle::from_rad(sidereal_rad - self.ra.rad()).wrapped_signed();
        let site = &self.observer.site;
        let (sin_lat, cos_lat) = site.latitude.rad().sin_cos();
        let (sin_dec, cos_dec) = self.dec.rad().sin_cos();
        let (sin_ha, cos_ha) = hour_angle.rad().sin_cos();
        let up = sin_lat * sin_dec + cos_lat * cos_dec * cos_ha;
        let altitude_deg = up.clamp(-1.0, 1.0).asin().to_degrees();
        if altitude_deg < self.low_deg || altitude_deg > self.telescope.max_altitude.deg() {
            return false;
        }
        let mount_allows = match self.telescope.mount {
            Mount::AltAzimuth { zenith_hole } => 90.0 - altitude_deg >= zenith_hole.deg(),
            Mount::Equatorial {
                min_hour_angle,
                max_hour_angle,
                ..
            } => min_hour_angle <= hour_angle && hour_angle <= max_hour_angle,
        };
        let north = cos_lat * sin_dec - sin_lat * cos_dec * cos_ha;
        let east = -cos_dec * sin_ha;
        let azimuth_deg = east.atan2(north).to_degrees();
        mount_allows && altitude_deg >= site.horizon.altitude_deg(azimuth_deg)
    }
}

/// The lowest altitude allowed to a target by telescope and own limits, degrees.
pub(super) fn lowest_altitude_deg(telescope: &Telescope, target: &Target) -> f64 {
    let own = target.limits.min_altitude.map_or(0.0, Angle::deg);
    let by_airmass = target.limits.max_airmass.map_or(0.0, |airmass| {
        altitude_of_airmass(AirmassModel::default(), airmass).deg()
    });
    telescope.min_altitude.deg().max(own).max(by_airmass)
}

fn minutes(steps: usize) -> f64 {
    steps as f64 * STEP_MIN as f64
}

/// Local mean sidereal time at the grid points of a span, radians.
fn sidereal_times(span: Span, longitude: Angle) -> Vec<f64> {
    let step_ms = STEP_MIN * MINUTE_MS;
    (0..span.length_ms() / step_ms)
        .map(|n| sidereal_rad(span.start.plus_ms(n * step_ms), longitude))
        .collect()
}

fn days_since_j2000(at: Utc) -> f64 {
    let (whole, fraction) = at.julian_date();
    whole - J2000_JD + fraction
}

/// Local mean sidereal time with UT1 taken as UTC (Astronomical Almanac, section B: GMST at linear
/// precision).
fn sidereal_rad(at: Utc, longitude: Angle) -> f64 {
    let gmst_deg = 280.460_618_37 + 360.985_647_366_29 * days_since_j2000(at);
    (gmst_deg.rem_euclid(360.0) + longitude.deg()).to_radians()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sidereal_time_is_that_of_the_worked_example() {
        // Meeus, Astronomical Algorithms, example 12.b: 1987 April 10, 19h21m00s UT, mean sidereal
        // time at Greenwich 128.7378734 degrees. UT1 - UTC, below a second here, is 0.004 degrees.
        let at = Utc::parse("1987-04-10T19:21:00Z").unwrap();
        let deg = sidereal_rad(at, Angle::ZERO).to_degrees();
        assert!((deg - 128.737_873_4).abs() < 1e-4, "{deg}");
    }
}
