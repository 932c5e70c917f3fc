//! Who looks: a site, with what is known of the Earth's rotation.

use super::airmass::AltitudeKind;
use super::refraction::Refraction;
use super::{AirmassModel, EarthRotation, Site};
use crate::units::Angle;
use crate::units::vector::Vec3;

/// Equatorial radius of the WGS 84 ellipsoid in metres (NIMA TR8350.2, table 3.1).
const WGS84_RADIUS_M: f64 = 6_378_137.0;
/// Flattening of the WGS 84 ellipsoid (NIMA TR8350.2, table 3.1).
const WGS84_FLATTENING: f64 = 1.0 / 298.257_223_563;
/// The astronomical unit in metres (IAU 2012 resolution B2).
pub(crate) const AU_M: f64 = 149_597_870_700.0;
/// Speed of light in m/s (SI).
pub(crate) const LIGHT_M_S: f64 = 299_792_458.0;
/// Rotation rate of the Earth in radians per second of UT1: 2π · 1.00273781191135448 / 86400
/// (Capitaine, Guinot & McCarthy 2000, A&A 355, 398).
pub(crate) const EARTH_SPIN_RAD_S: f64 = 1.002_737_811_911_354_5 * std::f64::consts::TAU / 86_400.0;

/// A site together with the Earth's rotation and the models chosen.
#[derive(Clone, Debug, PartialEq)]
pub struct Observer {
    /// Where.
    pub site: Site,
    /// UT1 − UTC and polar motion.
    pub earth_rotation: EarthRotation,
    /// Wavelength for refraction, micrometres.
    pub refraction_wavelength_um: f64,
    /// Model of airmass.
    pub airmass_model: AirmassModel,
}

impl Observer {
    /// Wavelength for refraction unless another is set: the red end of the visible, where cool
    /// stars are bright enough to guide on.
    pub const DEFAULT_WAVELENGTH_UM: f64 = 0.8;

    /// An observer with the default wavelength and airmass model.
    pub fn new(site: Site, earth_rotation: EarthRotation) -> Self {
        Observer {
            site,
            earth_rotation,
            refraction_wavelength_um: Self::DEFAULT_WAVELENGTH_UM,
            airmass_model: AirmassModel::default(),
        }
    }

    /// Refraction in the site's typical air.
    pub fn refraction(&self) -> Refraction {
        Refraction::of_site(&self.site, self.refraction_wavelength_um)
    }

    /// Airmass by the model chosen at an altitude without refraction.
    pub fn airmass(&self, true_altitude: Angle) -> f64 {
        airmass_at(self.airmass_model, &self.refraction(), true_altitude)
    }
}

/// Airmass at an altitude without refraction, refracted first where the model wants that.
pub(crate) fn airmass_at(
    model: AirmassModel,
    refraction: &Refraction,
    true_altitude: Angle,
) -> f64 {
    match model.altitude_kind() {
        AltitudeKind::True => model.airmass(true_altitude),
        AltitudeKind::Apparent => model.airmass(refraction.apparent(true_altitude)),
    }
}

/// What stays the same from instant to instant for an observer.
#[derive(Clone, Debug)]
pub(crate) struct Ground {
    pub latitude_rad: f64,
    pub longitude_rad: f64,
    pub height_m: f64,
    /// Rows: north, east, up, in the terrestrial frame.
    pub axes: [Vec3; 3],
    /// Place in the terrestrial frame, metres.
    pub position_m: Vec3,
    /// Speed of the ground eastwards over that of light: the constant of diurnal aberration.
    pub east_velocity_c: f64,
    pub rotation: EarthRotation,
    pub refraction: Refraction,
    pub airmass_model: AirmassModel,
}

impl Ground {
    pub fn of(observer: &Observer) -> Self {
        let site = &observer.site;
        let (sin_lat, cos_lat) = site.latitude.rad().sin_cos();
        let (sin_lon, cos_lon) = site.longitude.rad().sin_cos();
        // Geodetic to geocentric (Explanatory Supplement, 3rd ed., §4.2.7.2).
        let shrunk = (1.0 - WGS84_FLATTENING) * (1.0 - WGS84_FLATTENING);
        let normal_m = WGS84_RADIUS_M / (cos_lat * cos_lat + shrunk * sin_lat * sin_lat).sqrt();
        let from_axis_m = (normal_m + site.height_m) * cos_lat;
        Ground {
            latitude_rad: site.latitude.rad(),
            longitude_rad: site.longitude.rad(),
            height_m: site.height_m,
            axes: [
                [-sin_lat * cos_lon, -sin_lat * sin_lon, cos_lat],
                [-sin_lon, cos_lon, 0.0],
                [cos_lat * cos_lon, cos_lat * sin_lon, sin_lat],
            ],
            position_m: [
                from_axis_m * cos_lon,
                from_axis_m * sin_lon,
                (normal_m * shrunk + site.height_m) * sin_lat,
            ],
            east_velocity_c: EARTH_SPIN_RAD_S * from_axis_m / LIGHT_M_S,
            rotation: observer.earth_rotation.clone(),
            refraction: observer.refraction(),
            airmass_model: observer.airmass_model,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::ephemeris::HorizonProfile;

    #[test]
    fn geodetic_place_is_the_published_one() {
        // SOFA test value of `gd2gc` for WGS 84: longitude 3.1 rad, latitude −0.5 rad, 2500 m
        // (SOFA Validation, t_sofa_c.c, from memory; confirmed against the C routine).
        let site = Site {
            name: "test".to_owned(),
            latitude: Angle::from_rad(-0.5),
            longitude: Angle::from_rad(3.1),
            height_m: 2500.0,
            pressure_hpa: 0.0,
            temperature_c: 0.0,
            relative_humidity: 0.0,
            horizon: HorizonProfile::default(),
        };
        let ground = Ground::of(&Observer::new(site, EarthRotation::absent()));
        let published = [
            -5_599_000.557_704_994,
            233_011.672_234_797_2,
            -3_040_909.470_698_336,
        ];
        for (found, expected) in ground.position_m.iter().zip(published) {
            assert!((found - expected).abs() < 1e-6, "{found} {expected}");
        }
    }
}
