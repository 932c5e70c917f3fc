//! What a catalogue says of a star's place and motion, and how it moves from there.

use sofars::astro::pmsafe;
use sofars::cal::epj2jd;
use sofars::consts::{DAS2R, DAU, DAYSEC, DJM};

use super::scales::J2000_JD;
use crate::units::Angle;
use crate::units::vector::{Vec3, add_scaled, from_spherical, scaled, unit};

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

/// A star's place and motion brought to J2000.0, ready for use at any instant.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct StarMotion {
    pub(crate) ra_rad: f64,
    pub(crate) dec_rad: f64,
    /// dα/dt, radians a year, without the cos δ factor.
    pub(crate) ra_rate_rad_yr: f64,
    pub(crate) dec_rate_rad_yr: f64,
    pub(crate) parallax_arcsec: f64,
    pub(crate) radial_velocity_km_s: f64,
    /// Direction at J2000.0 from the barycentre.
    place: Vec3,
    /// Space motion in units of the star's distance, a year.
    motion_yr: Vec3,
}

impl StarMotion {
    /// Brings the star from its catalogue's epoch to J2000.0 by rigorous space motion (ERFA routine
    /// `pmsafe`, which also sees to stars without parallax).
    pub fn of(star: &Star) -> Self {
        // At the pole itself dα/dt has no meaning: a declination is kept 0.2 mas away from it.
        const LARGEST_DEC_RAD: f64 = std::f64::consts::FRAC_PI_2 - 1e-9;
        let dec = star.dec.rad().clamp(-LARGEST_DEC_RAD, LARGEST_DEC_RAD);
        let mas_rad = DAS2R / 1000.0;
        let at_epoch = [
            star.ra.rad(),
            dec,
            star.pm_ra_cosdec_mas_yr * mas_rad / dec.cos(),
            star.pm_dec_mas_yr * mas_rad,
            star.parallax_mas / 1000.0,
            star.radial_velocity_km_s,
        ];
        if star.epoch_jyear == 2000.0 {
            return Self::from_j2000(at_epoch);
        }
        let (day, fraction) = epj2jd(star.epoch_jyear);
        let [ra, dec, ra_rate, dec_rate, parallax, mut velocity] = at_epoch;
        if parallax <= 0.0 {
            // Very far: its motion along the line of sight changes no perspective.
            velocity = 0.0;
        }
        let moved = pmsafe(
            ra, dec, ra_rate, dec_rate, parallax, velocity, day, fraction, J2000_JD, 0.0,
        );
        match moved {
            Ok((mut at_2000, _)) => {
                // The routine lends a star without parallax a small one; it goes back here.
                if at_epoch[4] <= 0.0 || at_2000[4] > 2.0 * at_epoch[4] {
                    at_2000[4] = at_epoch[4];
                    at_2000[5] = at_epoch[5];
                }
                Self::from_j2000(at_2000)
            }
            // Only a star faster than light is refused, and one with the parallax lent is not; the
            // place at the epoch is the best left for such a catalogue entry.
            Err(_) => Self::from_j2000(at_epoch),
        }
    }

    fn from_j2000(values: [f64; 6]) -> Self {
        let [ra, dec, ra_rate, dec_rate, parallax, velocity] = values;
        let place = from_spherical(ra, dec);
        let (sin_ra, cos_ra) = ra.sin_cos();
        let (sin_dec, cos_dec) = dec.sin_cos();
        let east = [-sin_ra, cos_ra, 0.0];
        let north = [-sin_dec * cos_ra, -sin_dec * sin_ra, cos_dec];
        // km/s to au a year, then to the star's distance.
        let outwards = velocity * (DAYSEC * DJM / DAU) * parallax * DAS2R;
        let across = add_scaled(scaled(ra_rate * cos_dec, east), dec_rate, north);
        StarMotion {
            ra_rad: ra,
            dec_rad: dec,
            ra_rate_rad_yr: ra_rate,
            dec_rate_rad_yr: dec_rate,
            parallax_arcsec: parallax,
            radial_velocity_km_s: velocity,
            place,
            motion_yr: add_scaled(across, outwards, place),
        }
    }

    /// ICRS place at J2000.0.
    pub fn j2000(&self) -> (Angle, Angle) {
        (Angle::from_rad(self.ra_rad), Angle::from_rad(self.dec_rad))
    }

    /// Direction from the barycentre, so many Julian years after J2000.0.
    pub(crate) fn barycentric(&self, years: f64) -> Vec3 {
        unit(add_scaled(self.place, years, self.motion_yr))
    }

    /// Direction from a place near the Earth (parallax applied), so many Julian years after
    /// J2000.0.
    pub(crate) fn seen_from(&self, years: f64, position_au: Vec3) -> Vec3 {
        let moved = add_scaled(self.place, years, self.motion_yr);
        unit(add_scaled(
            moved,
            -self.parallax_arcsec * DAS2R,
            position_au,
        ))
    }
}

impl From<&Star> for StarMotion {
    fn from(star: &Star) -> Self {
        StarMotion::of(star)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn star(ra_deg: f64, dec_deg: f64, epoch_jyear: f64) -> Star {
        Star {
            ra: Angle::from_deg(ra_deg),
            dec: Angle::from_deg(dec_deg),
            epoch_jyear,
            pm_ra_cosdec_mas_yr: 0.0,
            pm_dec_mas_yr: 0.0,
            parallax_mas: 0.0,
            radial_velocity_km_s: 0.0,
        }
    }

    #[test]
    fn moves_as_the_published_example() {
        // Meeus, Astronomical Algorithms, example 21.b: θ Persei, +0.03425s and −0.0895″ a year
        // (FK5, J2000.0), at 2028 November 13.19 (28.86705 years on): α₀ + 28.86705 × 0.03425s and
        // δ₀ − 28.86705 × 0.0895″ (from memory).
        let mut theta = star(41.054_063, 49.227_750, 2000.0);
        theta.pm_ra_cosdec_mas_yr = 34.25 * 15.0 * theta.dec.rad().cos();
        theta.pm_dec_mas_yr = -89.5;
        let direction = StarMotion::of(&theta).barycentric(28.867_05);
        let ra = direction[1].atan2(direction[0]).to_degrees();
        let dec = direction[2].asin().to_degrees();
        assert!((ra - 41.058_182).abs() < 2e-6, "{ra}");
        assert!((dec - 49.227_032).abs() < 1e-6, "{dec}");
    }

    #[test]
    fn a_resting_star_rests() {
        for dec_deg in [-90.0, -89.0, 0.0, 45.0, 90.0] {
            let there = StarMotion::of(&star(359.99, dec_deg, 2016.0)).barycentric(40.0);
            let here = StarMotion::of(&star(359.99, dec_deg, 2000.0)).barycentric(0.0);
            assert!(crate::units::vector::separation_rad(there, here) < 1e-9);
        }
    }

    #[test]
    fn a_star_without_parallax_keeps_none() {
        let mut quick = star(10.0, 20.0, 2016.0);
        quick.pm_dec_mas_yr = 9000.0;
        quick.radial_velocity_km_s = 200.0;
        let motion = StarMotion::of(&quick);
        assert_eq!(motion.parallax_arcsec, 0.0);
        assert!((motion.j2000().1.deg() - (20.0 - 16.0 * 9.0 / 3600.0)).abs() < 1e-6);
    }
}
