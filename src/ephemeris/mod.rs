//! Floor 1: where things stand in the sky. A face over the IAU standard routines (ERFA).
//!
//! Two paths lead to a star's place. The full path, [`SkyInstant`], works an instant out by the
//! routines themselves and is the measure of accuracy. The fast path, behind [`NightGrid`] and
//! [`NightSky`], works the slow part of the sky out at a few instants of the night and interpolates;
//! it stays within 0.001″ of the full one (0.1″ within 10° of the Sun, where light bends more).
//!
//! This part uses computations by routines derived from software provided by SOFA under licence
//! (crate `sofars`); it is not software provided or endorsed by SOFA.

mod airmass;
mod barycentre;
mod bodies;
mod earth_rotation;
mod events;
mod frame;
mod grid;
mod moonlight;
mod observer;
mod place;
mod refraction;
mod scales;
mod site;
mod star;
mod track;
mod visibility;

pub use airmass::{AirmassModel, AltitudeKind, altitude_of_airmass};
pub use bodies::EphemerisError;
pub use earth_rotation::{EarthOrientation, EarthRotation, EarthRotationError, RotationQuality};
pub use events::{
    ASTRONOMICAL_ALTITUDE, CIVIL_ALTITUDE, HORIZON_REFRACTION, HorizonState, MoonEvents,
    NAUTICAL_ALTITUDE, NightSky, Passages, SUNSET_ALTITUDE, StarEvents, SunEvents, Transit,
    darkness,
};
pub use frame::MOON_RADIUS_KM;
pub use grid::{NightGrid, StarCourse};
pub use moonlight::{MoonGeometry, SkyBrightness};
pub use observer::Observer;
pub use place::{MoonPlace, SkyInstant, StarPlace, SunPlace};
pub use refraction::Refraction;
pub use scales::{JulianDate, LeapSecondError, Tai, Tdb, Tt, tai_minus_utc_s};
pub use site::{HorizonProfile, Site};
pub use star::{Star, StarMotion};
pub use visibility::Visibility;
