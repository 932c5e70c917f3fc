//! A year of nights at a site by simple geometry: who is up in the dark, and for how long.
//!
//! A year of 300 stars must take a moment and a question like "does it ever rise?" needs no more than
//! a tenth of a degree, so that neither precession nor refraction nor the equation of the equinoxes
//! is looked at. What decides a real night is computed with the full routines elsewhere.

use crate::catalogue::{Mount, Target, Telescope};
use crate::ephemeris::Site;
use crate::time::{DAY_MS, MINUTE_MS, Night, NightDate, Utc};
use crate::units::Angle;

/// Every so many nights one is looked at.
const NIGHT_STEP: usize = 5;
/// Length of the year that repeats, in nights: a multiple of the step.
const YEAR_NIGHTS: usize = 365;
/// Grid within a night, minutes.
const STEP_MIN: usize = 10;

/// Julian date of J2000.0.
const J2000_JD: f64 = 2_451_545.0;

/// The sampled nights of a year.
pub(super) struct Year<'a> {
    site: &'a Site,
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
    site: &'a Site,
    telescope: &'a Telescope,
    low_deg: f64,
    dec: Angle,
    ra: Angle,
}

impl<'a> Year<'a> {
    /// The year from that night on; darkness is the sun's centre below the altitude.
    pub(super) fn new(
        site: &'a Site,
        telescope: &'a Telescope,
        darkness_sun_altitude: Angle,
        first: NightDate,
    ) -> Self {
        let dark = (0..YEAR_NIGHTS)
            .step_by(NIGHT_STEP)
            .map(|n| dark_sidereal_times(site, darkness_sun_altitude, first.plus_nights(n as i64)))
            .collect();
        Year {
            site,
            telescope,
            first,
            dark,
        }
    }

    /// The longest darkness of the year in minutes.
    pub(super) fn longest_dark_min(&self) -> f64 {
        let longest = self.dark.iter().map(Vec::len).max().unwrap_or(0);
        (longest * STEP_MIN) as f64
    }

    /// A star's chance in each night looked at.
    pub(super) fn chances(&self, target: &Target, place: (Angle, Angle)) -> Vec<Chance> {
        let limits = Limits {
            site: self.site,
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
            chance.longest_min = chance.longest_min.max((run * STEP_MIN) as f64);
            chance.span_min = ((index + 1 - begun) * STEP_MIN) as f64;
        }
        chance
    }

    fn is_free(&self, sidereal_rad: f64) -> bool {
        let hour_angle = Angle::from_rad(sidereal_rad - self.ra.rad()).wrapped_signed();
        let (sin_lat, cos_lat) = self.site.latitude.rad().sin_cos();
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
        mount_allows && altitude_deg >= self.site.horizon.altitude_deg(azimuth_deg)
    }
}

/// The lowest altitude allowed to a target by telescope and own limits, degrees.
pub(super) fn lowest_altitude_deg(telescope: &Telescope, target: &Target) -> f64 {
    let own = target.limits.min_altitude.map_or(0.0, Angle::deg);
    // Plane-parallel air; the difference to better models is below 0.3 degrees down to airmass 5.
    let by_airmass = target
        .limits
        .max_airmass
        .map_or(0.0, |airmass| (1.0 / airmass).asin().to_degrees());
    telescope.min_altitude.deg().max(own).max(by_airmass)
}

/// Local mean sidereal time at the dark grid points of a night, radians.
fn dark_sidereal_times(site: &Site, sun_altitude: Angle, date: NightDate) -> Vec<f64> {
    let night = Night::of(date, site.longitude);
    let steps = DAY_MS / (STEP_MIN as i64 * MINUTE_MS);
    (0..steps)
        .map(|n| night.span.start.plus_ms(n * STEP_MIN as i64 * MINUTE_MS))
        .filter_map(|at| {
            let sidereal = sidereal_rad(at, site.longitude);
            let (ra, dec) = sun(at);
            let (sin_lat, cos_lat) = site.latitude.rad().sin_cos();
            let up = sin_lat * dec.sin() + cos_lat * dec.cos() * (sidereal - ra).cos();
            (up < sun_altitude.rad().sin()).then_some(sidereal)
        })
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

/// Right ascension and declination of the sun in radians, to 0.01 degrees (Astronomical Almanac,
/// section C: low-precision formulas for the sun).
fn sun(at: Utc) -> (f64, f64) {
    let days = days_since_j2000(at);
    let mean_longitude = 280.460 + 0.985_647_4 * days;
    let anomaly = (357.528 + 0.985_600_3 * days).to_radians();
    let longitude = mean_longitude + 1.915 * anomaly.sin() + 0.020 * (2.0 * anomaly).sin();
    let longitude = longitude.rem_euclid(360.0).to_radians();
    let obliquity = (23.439 - 0.000_000_4 * days).to_radians();
    let ra = (obliquity.cos() * longitude.sin()).atan2(longitude.cos());
    (ra, (obliquity.sin() * longitude.sin()).asin())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sun_stands_where_the_almanac_has_it() {
        // Public almanac data from memory: March equinox 2026-03-20 14:46 UT, June solstice
        // 2026-06-21 08:25 UT. The formula is good to 0.01 degrees.
        let (ra, dec) = sun(Utc::parse("2026-03-20T14:46:00Z").unwrap());
        assert!(dec.to_degrees().abs() < 0.01, "{dec}");
        assert!(ra.to_degrees().abs() < 0.02, "{ra}");
        let (_, dec) = sun(Utc::parse("2026-06-21T08:25:00Z").unwrap());
        assert!((dec.to_degrees() - 23.436).abs() < 0.01, "{dec}");
    }
}
