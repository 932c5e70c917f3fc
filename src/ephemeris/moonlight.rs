//! How bright the sky is with the Moon in it.

use crate::units::Angle;

/// A site's dark sky in a band, with what moonlight needs to be scaled to the band.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SkyBrightness {
    /// Moonless sky at the zenith, magnitudes per square arcsecond in the band.
    pub dark_zenith_mag_arcsec2: f64,
    /// Extinction in the band, magnitudes per airmass.
    pub extinction_mag_airmass: f64,
    /// V − band colour of scattered moonlight, magnitudes. The model gives moonlight in V; in the
    /// band it is this much brighter (in magnitudes) than that, extinction apart. Zero in V;
    /// about 0.7 in I for the colour of the Sun.
    pub moonlight_v_minus_band_mag: f64,
}

/// Where the Moon and the target stand to each other.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct MoonGeometry {
    /// Angle at the Moon between Sun and observer: 0 full.
    pub phase_angle: Angle,
    /// Altitude of the Moon. Below the horizon it gives no light.
    pub moon_altitude: Angle,
    /// Altitude of the target.
    pub target_altitude: Angle,
    /// Angle between both.
    pub separation: Angle,
}

impl SkyBrightness {
    /// Sky at the target in magnitudes per square arcsecond in the band, by Krisciunas & Schaefer
    /// 1991, PASP 103, 1033 (good to 8–23 % by their account; the opposition effect within 7° of
    /// full, up to 35 %, is left out). A target below the horizon is taken at the horizon.
    pub fn with_moon(&self, geometry: &MoonGeometry) -> f64 {
        let dark = self.dark_nanolamberts(geometry.target_altitude);
        magnitude(dark + self.moon_nanolamberts(geometry))
    }

    /// Moonless sky at an altitude (their eq. 2).
    pub fn without_moon(&self, target_altitude: Angle) -> f64 {
        magnitude(self.dark_nanolamberts(target_altitude))
    }

    fn dark_nanolamberts(&self, altitude: Angle) -> f64 {
        let depth = scattering_airmass(altitude);
        let dimming = 10f64.powf(-0.4 * self.extinction_mag_airmass * (depth - 1.0));
        nanolamberts(self.dark_zenith_mag_arcsec2) * dimming * depth
    }

    /// Their eq. 15, brought to the band.
    fn moon_nanolamberts(&self, geometry: &MoonGeometry) -> f64 {
        if geometry.moon_altitude.rad() <= 0.0 {
            return 0.0;
        }
        let transmission = |altitude: Angle| {
            10f64.powf(-0.4 * self.extinction_mag_airmass * scattering_airmass(altitude))
        };
        scattering(geometry.separation)
            * moon_illuminance(geometry.phase_angle)
            * transmission(geometry.moon_altitude)
            * (1.0 - transmission(geometry.target_altitude))
            * 10f64.powf(0.4 * self.moonlight_v_minus_band_mag)
    }
}

/// V magnitudes per square arcsecond to nanolamberts (their eq. 1).
fn nanolamberts(mag_arcsec2: f64) -> f64 {
    34.08 * (20.7233 - 0.921_04 * mag_arcsec2).exp()
}

/// The way back.
fn magnitude(nanolamberts: f64) -> f64 {
    (20.7233 - (nanolamberts / 34.08).ln()) / 0.921_04
}

/// Optical path for scattered light (their eq. 3).
fn scattering_airmass(altitude: Angle) -> f64 {
    let sin_z = altitude.rad().max(0.0).cos();
    1.0 / (1.0 - 0.96 * sin_z * sin_z).sqrt()
}

/// Illuminance of the Moon outside the air in foot-candles (their eq. 20).
fn moon_illuminance(phase_angle: Angle) -> f64 {
    let alpha = phase_angle.deg().abs();
    10f64.powf(-0.4 * (3.84 + 0.026 * alpha + 4e-9 * alpha.powi(4)))
}

/// Scattering function: Rayleigh and aerosol (their eq. 16–19). Within 10° of the Moon eq. 19
/// stands for the aerosol part; closer than 0.25°, its disc, nothing grows any more.
fn scattering(separation: Angle) -> f64 {
    let rho = separation.deg().max(0.25);
    let cosine = rho.to_radians().cos();
    let rayleigh = 10f64.powf(5.36) * (1.06 + cosine * cosine);
    let aerosol = if rho < 10.0 {
        6.2e7 / (rho * rho)
    } else {
        10f64.powf(6.15 - rho / 40.0)
    };
    rayleigh + aerosol
}

#[cfg(test)]
mod tests {
    use super::*;

    const V: SkyBrightness = SkyBrightness {
        dark_zenith_mag_arcsec2: 21.587,
        extinction_mag_airmass: 0.172,
        moonlight_v_minus_band_mag: 0.0,
    };

    fn geometry(phase: f64, moon: f64, target: f64, separation: f64) -> MoonGeometry {
        MoonGeometry {
            phase_angle: Angle::from_deg(phase),
            moon_altitude: Angle::from_deg(moon),
            target_altitude: Angle::from_deg(target),
            separation: Angle::from_deg(separation),
        }
    }

    #[test]
    fn units_are_the_published_ones() {
        // The paper's dark zenith of Mauna Kea: 79.0 nL, 21.587 mag/arcsec² (from memory).
        assert!((nanolamberts(21.587) - 79.0).abs() < 0.1);
        assert!((magnitude(79.0) - 21.587).abs() < 0.001);
        // The full Moon's 0.267 lux (V = −12.73; Allen's Astrophysical Quantities, from memory)
        // is 0.0248 foot-candles; the paper's constant carries the opposition effect (+35 % at
        // most).
        let full = moon_illuminance(Angle::ZERO);
        assert!(full > 0.0248 && full < 0.0248 * 1.35, "{full}");
    }

    #[test]
    fn full_moon_turns_a_dark_sky_grey() {
        // Common practice, no source: with a full Moon high up, the V sky 60° away has 18 to 18.8.
        let sky = V.with_moon(&geometry(0.0, 60.0, 60.0, 60.0));
        assert!((17.8..18.8).contains(&sky), "{sky}");
    }

    #[test]
    fn moonlight_follows_phase_height_and_distance() {
        let bright =
            |phase, moon, separation| V.with_moon(&geometry(phase, moon, 50.0, separation));
        assert_eq!(
            bright(20.0, -1.0, 60.0),
            V.without_moon(Angle::from_deg(50.0))
        );
        for phase in [0.0, 30.0, 60.0, 90.0, 120.0] {
            assert!(bright(phase, 40.0, 60.0) < bright(phase + 10.0, 40.0, 60.0));
            assert!(bright(phase, 40.0, 20.0) < bright(phase, 40.0, 40.0));
        }
        let red = SkyBrightness {
            moonlight_v_minus_band_mag: 0.7,
            ..V
        };
        let place = geometry(0.0, 60.0, 60.0, 60.0);
        assert!(red.with_moon(&place) < V.with_moon(&place));
        assert!(bright(0.0, 40.0, 0.0).is_finite());
        assert!((V.without_moon(Angle::from_deg(90.0)) - 21.587).abs() < 1e-6);
    }
}
