//! From velocities to masses.

use std::f64::consts::TAU;

use crate::catalogue::{Candidate, Measured, Target};

/// Solar masses in Jupiter masses: (GM)☉ = 1.3271244e20 over (GM)♃ = 1.2668653e17 m³ s⁻² (IAU 2015
/// resolution B3, nominal values).
pub const JUPITERS_PER_SUN: f64 = SUN_GM_M3_S2 / 1.266_865_3e17;
/// A Jupiter mass in Earth masses: (GM)♃ over (GM)⊕ = 3.986004e14 m³ s⁻² (IAU 2015 resolution B3).
pub const EARTHS_PER_JUPITER: f64 = 1.266_865_3e17 / 3.986_004e14;
/// Semi-amplitude of a Jupiter mass at one year about one solar mass, m/s (Lovis & Fischer 2010, in
/// Exoplanets, ed. Seager, equation 14).
const JUPITER_YEAR_M_S: f64 = 28.4329;
/// Days in a Julian year.
const YEAR_D: f64 = 365.25;
/// Effective temperature of the Sun, K (IAU 2015 resolution B3, nominal value).
const SUN_K: f64 = 5772.0;
/// Astronomical unit, m (IAU 2012 resolution B2).
const AU_M: f64 = 1.495_978_707e11;
/// (GM)☉, m³ s⁻² (IAU 2015 resolution B3, nominal value).
const SUN_GM_M3_S2: f64 = 1.327_124_4e20;
/// Fixed-point steps for the planet's own mass; each gains three digits even at a tenth of the
/// star's mass.
const MASS_STEPS: usize = 8;

/// Semi-amplitude in m/s of a planet of that minimum mass (Earth masses) at that period about a star
/// of that mass: K = 28.4329 m/s (1 − e²)^−½ (m sin i / M♃) ((M★ + m)/M☉)^−⅔ (P / yr)^−⅓ (Lovis &
/// Fischer 2010). In the sum of masses, m sin i stands for m.
pub fn semi_amplitude_m_s(
    msini_earth: f64,
    star_msun: f64,
    period_d: f64,
    eccentricity: f64,
) -> f64 {
    let together_msun = star_msun + earths_in_msun(msini_earth);
    msini_earth * m_s_per_earth(together_msun, period_d, eccentricity)
}

/// K of an Earth mass where star and planet weigh so much together.
fn m_s_per_earth(together_msun: f64, period_d: f64, eccentricity: f64) -> f64 {
    JUPITER_YEAR_M_S
        / EARTHS_PER_JUPITER
        / (1.0 - eccentricity * eccentricity).sqrt()
        / together_msun.powf(2.0 / 3.0)
        / (period_d / YEAR_D).cbrt()
}

fn earths_in_msun(earths: f64) -> f64 {
    earths / EARTHS_PER_JUPITER / JUPITERS_PER_SUN
}

/// The minimum mass in Earth masses that gives that semi-amplitude: the inverse of
/// [`semi_amplitude_m_s`].
pub fn msini_earth(k_m_s: f64, star_msun: f64, period_d: f64, eccentricity: f64) -> f64 {
    let mut mass = 0.0;
    for _ in 0..MASS_STEPS {
        let together_msun = star_msun + earths_in_msun(mass);
        mass = k_m_s / m_s_per_earth(together_msun, period_d, eccentricity);
    }
    mass
}

/// The error of a candidate's minimum mass.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct MassError {
    /// Minimum mass that the guessed semi-amplitude stands for, Earth masses.
    pub msini_earth: Option<f64>,
    /// From velocities and stellar mass together, Earth masses; without a guessed semi-amplitude
    /// from velocities alone.
    pub sigma_earth: f64,
}

/// The error of a candidate's minimum mass from that of K: σ² = (∂m/∂K σ_K)² + (⅔ m σ_M/M)², since
/// m sin i goes as K M^⅔. `None` where the star's mass is not given.
pub fn msini_error(target: &Target, candidate: &Candidate, sigma_k_m_s: f64) -> Option<MassError> {
    let star: Measured = target.mass_msun?;
    let mass_of = |k: f64| {
        msini_earth(
            k,
            star.value,
            candidate.period_d.value,
            candidate.eccentricity,
        )
    };
    let guess = candidate.semi_amplitude_m_s.map(mass_of);
    let from_velocities = mass_of(sigma_k_m_s);
    let from_star = guess.unwrap_or(0.0) * (2.0 / 3.0) * star.error / star.value;
    Some(MassError {
        msini_earth: guess,
        sigma_earth: from_velocities.hypot(from_star),
    })
}

/// Period in days at which a planet gets as much light from the star as the Earth from the Sun:
/// a = R (T / T☉)² in astronomical units and solar radii (Stefan and Boltzmann), P from Kepler's
/// third law. `None` without mass or radius.
pub fn earth_irradiation_period_d(target: &Target) -> Option<f64> {
    let (mass, radius) = (target.mass_msun?.value, target.radius_rsun?.value);
    let axis_au = radius * (target.temperature_k / SUN_K).powi(2);
    Some(orbital_period_d(axis_au, mass))
}

/// Kepler's third law, days.
fn orbital_period_d(axis_au: f64, star_msun: f64) -> f64 {
    let axis_m = axis_au * AU_M;
    TAU * (axis_m.powi(3) / (SUN_GM_M3_S2 * star_msun)).sqrt() / 86_400.0
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::score::fixtures::{candidate, target};
    use proptest::prelude::*;

    const JUPITER: f64 = EARTHS_PER_JUPITER;

    #[test]
    fn published_semi_amplitudes() {
        // Lovis & Fischer 2010, table 1 (from memory): planets about a star of one solar mass, axis
        // in AU; printed to two or three digits, hence the tolerance of one in the last.
        for (mass, axis_au, k, tolerance) in [
            (JUPITER, 0.1, 89.8, 0.2),
            (JUPITER, 1.0, 28.4, 0.1),
            (JUPITER, 5.0, 12.7, 0.1),
            (17.15, 0.1, 4.8, 0.1),
            (17.15, 1.0, 1.5, 0.1),
            (5.0, 0.1, 1.4, 0.1),
            (5.0, 1.0, 0.45, 0.01),
            (1.0, 0.1, 0.28, 0.01),
            (1.0, 1.0, 0.09, 0.01),
        ] {
            let found = semi_amplitude_m_s(mass, 1.0, orbital_period_d(axis_au, 1.0), 0.0);
            assert!(
                (found - k).abs() < tolerance,
                "{mass} at {axis_au}: {found}"
            );
        }
        // Common practice, no source: Jupiter moves the Sun by about 12.5 m/s (period 11.862 yr,
        // e = 0.049), the Earth by about 0.09 m/s.
        let jupiter = semi_amplitude_m_s(JUPITER, 1.0, 11.862 * 365.25, 0.049);
        assert!((jupiter - 12.5).abs() < 0.1, "{jupiter}");
        let earth = semi_amplitude_m_s(1.0, 1.0, 365.256, 0.0167);
        assert!((earth - 0.09).abs() < 0.002, "{earth}");
    }

    #[test]
    fn an_earth_in_the_temperate_zone_of_one_of_the_smallest_stars() {
        // Common practice, no source: about 1 m/s. A star of 0.09 M☉, 0.12 R☉, 2550 K.
        let mut star = target();
        star.mass_msun = Some(Measured {
            value: 0.09,
            error: 0.0,
        });
        star.radius_rsun = Some(Measured {
            value: 0.12,
            error: 0.0,
        });
        star.temperature_k = 2550.0;
        let period = earth_irradiation_period_d(&star).unwrap();
        let k = semi_amplitude_m_s(1.0, 0.09, period, 0.0);
        assert!((3.0..6.0).contains(&period), "{period}");
        assert!((0.7..2.5).contains(&k), "{k}");
    }

    #[test]
    fn the_earths_own_irradiation_is_at_one_year() {
        let mut sun = target();
        let one = Measured {
            value: 1.0,
            error: 0.0,
        };
        sun.mass_msun = Some(one);
        sun.radius_rsun = Some(one);
        sun.temperature_k = 5772.0;
        // Gaussian year, 365.2569 d (Explanatory Supplement to the Astronomical Almanac).
        let period = earth_irradiation_period_d(&sun).unwrap();
        assert!((period - 365.2569).abs() < 0.001, "{period}");
        sun.radius_rsun = None;
        assert_eq!(earth_irradiation_period_d(&sun), None);
    }

    #[test]
    fn the_stars_mass_error_is_carried() {
        let mut star = target();
        let mut planet = candidate(11.2, 0.0);
        assert_eq!(msini_error(&star, &planet, 0.5), None);
        star.mass_msun = Some(Measured {
            value: 0.3,
            error: 0.03,
        });
        let alone = msini_error(&star, &planet, 0.5).unwrap();
        assert_eq!(alone.msini_earth, None);
        planet.semi_amplitude_m_s = Some(3.0);
        let both = msini_error(&star, &planet, 0.5).unwrap();
        let mass = both.msini_earth.unwrap();
        // m ∝ K M^(2/3): (σ/m)² = (0.5/3)² + (2/3 · 0.1)².
        let expected = mass * (0.5f64 / 3.0).hypot(2.0 / 30.0);
        assert!((both.sigma_earth / expected - 1.0).abs() < 1e-3);
        assert!((alone.sigma_earth / (mass * 0.5 / 3.0) - 1.0).abs() < 1e-3);
    }

    proptest! {
        #[test]
        fn mass_and_semi_amplitude_are_inverse(
            mass in 0.1f64..5000.0, star in 0.08f64..1.5, period in 0.5f64..5000.0, e in 0.0f64..0.9,
        ) {
            let k = semi_amplitude_m_s(mass, star, period, e);
            prop_assert!((msini_earth(k, star, period, e) / mass - 1.0).abs() < 1e-6);
        }
    }
}
