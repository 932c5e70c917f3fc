//! Bending of light in the air.

use sofars::astro::refco;

use super::Site;
use crate::units::Angle;

/// The two constants of Δz = A tan z + B tan³ z, z being the observed zenith distance, as the ERFA
/// routine `refco` gives them (model of Stone 1996, PASP 108, 1051, and Green 1985, Spherical
/// Astronomy, ch. 4).
///
/// Good to about 1″ for zenith distances up to 75°; it does not hold below an altitude of about
/// 3°. Lower than that ([`Refraction::LOWEST`]) the bending stops growing, so that the result is
/// finite and smooth but no longer true.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Refraction {
    a_rad: f64,
    b_rad: f64,
}

impl Refraction {
    /// Altitude (about 2.87°) below which the bending is that at this altitude.
    pub const LOWEST: Angle = Angle::from_rad(0.050_020_856_805_770_02);

    /// For a site's typical air, at a wavelength in micrometres. A pressure of zero is no air.
    pub fn of_site(site: &Site, wavelength_um: f64) -> Self {
        let (a_rad, b_rad) = refco(
            site.pressure_hpa,
            site.temperature_c,
            site.relative_humidity,
            wavelength_um,
        );
        Refraction { a_rad, b_rad }
    }

    /// No air.
    pub const NONE: Refraction = Refraction {
        a_rad: 0.0,
        b_rad: 0.0,
    };

    /// The constants A and B in radians.
    pub fn constants_rad(&self) -> (f64, f64) {
        (self.a_rad, self.b_rad)
    }

    /// Altitude at which a body is seen that stands at this altitude without air. One Newton step
    /// turns the observed into the true zenith distance in the formula, as in the ERFA routine
    /// `atioq`.
    pub fn apparent(&self, true_altitude: Angle) -> Angle {
        let (sin_true, cos_true) = true_altitude.rad().sin_cos();
        let cosine = cos_true.max(1e-6);
        let sine = sin_true.max(Self::LOWEST.rad().sin());
        let tan_z = cosine / sine;
        let cubic = self.b_rad * tan_z * tan_z;
        let bending =
            (self.a_rad + cubic) * tan_z / (1.0 + (self.a_rad + 3.0 * cubic) / (sine * sine));
        true_altitude + Angle::from_rad(bending)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::ephemeris::HorizonProfile;

    fn site(pressure_hpa: f64) -> Site {
        Site {
            name: "test".to_owned(),
            latitude: Angle::ZERO,
            longitude: Angle::ZERO,
            height_m: 0.0,
            pressure_hpa,
            temperature_c: 10.0,
            relative_humidity: 0.0,
            horizon: HorizonProfile::default(),
        }
    }

    #[test]
    fn agrees_with_a_published_formula() {
        // Smart, Textbook on Spherical Astronomy, §36: 58.294″ tan ζ − 0.0668″ tan³ ζ of the
        // observed zenith distance in yellow light at 760 mmHg and 10 °C (from memory). Good to
        // about 1″ down to 15°.
        let refraction = Refraction::of_site(&site(1013.25), 0.574);
        for apparent_deg in [15.0, 20.0, 30.0, 45.0, 60.0, 80.0_f64] {
            let tangent = (90.0 - apparent_deg).to_radians().tan();
            let bending_arcsec = 58.294 * tangent - 0.0668 * tangent.powi(3);
            let true_altitude = Angle::from_deg(apparent_deg - bending_arcsec / 3600.0);
            let found = refraction.apparent(true_altitude).deg();
            let off_arcsec = (found - apparent_deg) * 3600.0;
            assert!(off_arcsec.abs() < 1.0, "{apparent_deg}: {off_arcsec}");
        }
    }

    #[test]
    fn no_air_bends_nothing_and_low_altitudes_stay_finite() {
        let none = Refraction::of_site(&site(0.0), 0.8);
        assert_eq!(none.apparent(Angle::from_deg(5.0)), Angle::from_deg(5.0));
        let air = Refraction::of_site(&site(800.0), 0.8);
        let mut last = Angle::from_deg(-91.0);
        for tenth in -900..=900 {
            let seen = air.apparent(Angle::from_deg(f64::from(tenth) / 10.0));
            assert!(seen > last, "{tenth}");
            last = seen;
        }
        assert!((air.apparent(Angle::from_deg(90.0)).deg() - 90.0).abs() < 1e-7);
    }
}
