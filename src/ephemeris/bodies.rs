//! What moves smoothly: Earth, Sun, Moon, the pole of the sky, and TDB − TT.

use sofars::eph::{epv00, moon98};
use sofars::pnp::xys06a;
use sofars::ts::dtdb;
use thiserror::Error;

use super::observer::Ground;
use super::scales::{JulianDate, Tt};
use crate::time::{Span, Utc};
use crate::units::vector::Vec3;

/// Number of values in [`Bodies`].
pub(crate) const BODIES_VALUES: usize = 19;

/// The state of all that moves smoothly at an instant, GCRS axes; positions in au, velocities in
/// au/day. TT is taken for TDB in the ephemerides, as in the ERFA routine `apco13` (its note 2:
/// without effect on the places).
#[derive(Clone, Copy, Debug)]
pub(crate) struct Bodies {
    /// Earth from the barycentre.
    pub earth_au: Vec3,
    /// Its velocity.
    pub earth_au_d: Vec3,
    /// Sun from the centre of the Earth, geometric.
    pub sun_au: Vec3,
    /// Moon from the centre of the Earth, geometric.
    pub moon_au: Vec3,
    /// Its velocity about the Earth.
    pub moon_au_d: Vec3,
    /// Celestial intermediate pole X, Y and the locator s (IAU 2006/2000A).
    pub pole: Vec3,
    /// TDB − TT in seconds, seen from the ground.
    pub tdb_minus_tt_s: f64,
}

/// No place at all: not-a-number runs through whatever is made of it.
const NOWHERE: ([Vec3; 2], [Vec3; 2]) = ([[f64::NAN; 3]; 2], [[f64::NAN; 3]; 2]);

/// Why there is no sky to be had.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum EphemerisError {
    /// The instant lies outside the years of the Earth's ephemeris.
    #[error("{at} lies outside the years that the Earth's ephemeris covers (1900 to 2100)")]
    OutOfRange {
        /// The instant.
        at: Utc,
    },
}

/// Lets through spans within the years 1900 to 2100 (100 Julian years either side of J2000.0, less
/// two days for what is looked up around a night), the range of the routine `epv00`.
pub(crate) fn check_range(span: Span) -> Result<(), EphemerisError> {
    const FIRST: Utc = Utc::from_unix_ms(-2_208_859_200_000);
    const LAST: Utc = Utc::from_unix_ms(4_102_228_800_000);
    for at in [span.start, span.end] {
        if at < FIRST || at > LAST {
            return Err(EphemerisError::OutOfRange { at });
        }
    }
    Ok(())
}

impl Bodies {
    /// From the routines themselves: some 0.1 ms.
    pub fn at(tt: Tt, ground: &Ground) -> Self {
        let JulianDate { day, fraction } = tt.0;
        // `None` only outside the years that `check_range` lets through.
        let (heliocentric, barycentric) = epv00(day, fraction).unwrap_or(NOWHERE);
        let moon = moon98(day, fraction);
        let (x, y, s) = xys06a(day, fraction);
        Bodies {
            earth_au: barycentric[0],
            earth_au_d: barycentric[1],
            sun_au: heliocentric[0].map(|part| -part),
            moon_au: moon[0],
            moon_au_d: moon[1],
            pole: [x, y, s],
            tdb_minus_tt_s: tdb_minus_tt_s(tt, ground),
        }
    }

    pub fn to_values(self) -> [f64; BODIES_VALUES] {
        let mut values = [0.0; BODIES_VALUES];
        let vectors = [
            self.earth_au,
            self.earth_au_d,
            self.sun_au,
            self.moon_au,
            self.moon_au_d,
            self.pole,
        ];
        for (into, part) in values.iter_mut().zip(vectors.as_flattened()) {
            *into = *part;
        }
        values[BODIES_VALUES - 1] = self.tdb_minus_tt_s;
        values
    }

    pub fn from_values(v: &[f64; BODIES_VALUES]) -> Self {
        let vector = |i: usize| [v[i], v[i + 1], v[i + 2]];
        Bodies {
            earth_au: vector(0),
            earth_au_d: vector(3),
            sun_au: vector(6),
            moon_au: vector(9),
            moon_au_d: vector(12),
            pole: vector(15),
            tdb_minus_tt_s: v[BODIES_VALUES - 1],
        }
    }
}

/// TDB − TT with the term of the place on the ground (up to 2.1 µs), for which the fraction of
/// the day need be known to a minute only: TT less its 69 s from UT1 stands for it.
fn tdb_minus_tt_s(tt: Tt, ground: &Ground) -> f64 {
    let JulianDate { day, fraction } = tt.0;
    let ut_fraction = (tt.0.single() - 0.5).rem_euclid(1.0) - 69.0 / 86_400.0;
    let [x, y, z] = ground.position_m;
    let from_axis_km = x.hypot(y) / 1000.0;
    dtdb(
        day,
        fraction,
        ut_fraction,
        ground.longitude_rad,
        from_axis_km,
        z / 1000.0,
    )
}

#[cfg(test)]
mod tests {
    use super::*;

    fn bodies_at(tt_jd: f64) -> Bodies {
        use crate::ephemeris::{EarthRotation, HorizonProfile, Observer, Site};
        use crate::units::Angle;
        let site = Site {
            name: "test".to_owned(),
            latitude: Angle::ZERO,
            longitude: Angle::ZERO,
            height_m: 0.0,
            pressure_hpa: 0.0,
            temperature_c: 0.0,
            relative_humidity: 0.0,
            horizon: HorizonProfile::default(),
        };
        let ground = Ground::of(&Observer::new(site, EarthRotation::absent()));
        let date = JulianDate {
            day: tt_jd,
            fraction: 0.0,
        };
        Bodies::at(Tt(date), &ground)
    }

    #[test]
    fn sun_and_moon_of_published_examples() {
        use crate::units::vector::{dot, norm, sub};
        // Meeus, Astronomical Algorithms, from memory. Example 25.b: 1992 October 13.0 TD, distance
        // of the Sun 0.99760853 au by the complete VSOP87.
        let october = bodies_at(2_448_908.5);
        assert!((norm(october.sun_au) - 0.997_608_53).abs() < 3e-8);
        // Examples 47.a and 48.a: 1992 April 12.0 TD, Moon at 368 409.7 km; phase angle 69.0756°
        // and illuminated fraction 0.6786 from the centre of the Earth. The book puts in light-time
        // where the geometric places here have none: 20″ (0.006°) of the Sun, 0.7″ of the Moon.
        let april = bodies_at(2_448_724.5);
        let distance_km = norm(april.moon_au) * 149_597_870.7;
        assert!((distance_km - 368_409.7).abs() < 3.0, "{distance_km}");
        let to_sun = sub(april.sun_au, april.moon_au);
        let cosine = -dot(to_sun, april.moon_au) / (norm(to_sun) * norm(april.moon_au));
        assert!((cosine.acos().to_degrees() - 69.0756).abs() < 0.008);
        assert!((0.5 * (1.0 + cosine) - 0.6786).abs() < 1e-4);
    }

    #[test]
    fn range_ends_with_the_ephemeris() {
        let check = |text: &str, inside: bool| {
            let at = Utc::parse(text).unwrap();
            assert_eq!(check_range(Span::new(at, at)).is_ok(), inside, "{text}");
            if inside {
                for days in [-2, 2] {
                    let near = Tt::from_utc(at.plus_ms(days * crate::time::DAY_MS));
                    assert!(epv00(near.0.day, near.0.fraction).is_some(), "{text}");
                }
            }
        };
        check("1900-01-01T00:00:00Z", false);
        check("1900-01-03T00:00:00Z", true);
        check("2099-12-29T12:00:00Z", true);
        check("2100-01-01T12:00:00Z", false);
    }
}
