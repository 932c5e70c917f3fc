//! The full path: one instant, everything about it, then star by star.

use sofars::astro::{IauAstrom, apco, atciq, atioq};
use sofars::coords::hd2pa;
use sofars::pnp::sp00;

use super::barycentre;
use super::bodies::{Bodies, EphemerisError, check_range};
use super::earth_rotation::RotationQuality;
use super::frame::{Frame, MOON_RADIUS_KM, Moment, altitude, azimuth};
use super::observer::{Ground, Observer, airmass_at};
use super::scales::{JulianDate, Tdb};
use super::star::StarMotion;
use crate::time::{Span, Utc};
use crate::units::Angle;
use crate::units::vector::{Vec3, from_spherical, separation_rad};

/// What the sky is like at an instant for an observer: made once, then asked about each star.
#[derive(Clone, Debug)]
pub struct SkyInstant {
    moment: Moment,
    ground: Ground,
    bodies: Bodies,
    frame: Frame,
    astrometry: IauAstrom,
    sun: Vec3,
    moon: Vec3,
}

/// Where a star stands, seen from the ground.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct StarPlace {
    /// Altitude without refraction.
    pub altitude: Angle,
    /// Altitude with refraction in the site's typical air (see [`super::Refraction`]).
    pub apparent_altitude: Angle,
    /// Azimuth, north 0°, east 90°, below 360°.
    pub azimuth: Angle,
    /// Hour angle, west positive, −180° to 180°.
    pub hour_angle: Angle,
    /// Declination that goes with the hour angle (observed place, no refraction).
    pub declination: Angle,
    /// Parallactic angle: position angle of the zenith at the star, positive west of the
    /// meridian.
    pub parallactic_angle: Angle,
    /// Airmass by the observer's model; infinite below the horizon.
    pub airmass: f64,
    /// Angle to the Moon's centre.
    pub moon_separation: Angle,
    /// Angle to the Sun's centre.
    pub sun_separation: Angle,
}

/// Where the Sun stands, seen from the ground.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SunPlace {
    /// Altitude of the centre without refraction.
    pub altitude: Angle,
    /// Azimuth, north 0°, east 90°.
    pub azimuth: Angle,
}

/// Where the Moon stands and what it looks like, seen from the ground.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct MoonPlace {
    /// Altitude of the centre without refraction.
    pub altitude: Angle,
    /// Azimuth, north 0°, east 90°.
    pub azimuth: Angle,
    /// Distance from the observer in km.
    pub distance_km: f64,
    /// Semidiameter seen by the observer.
    pub semidiameter: Angle,
    /// Angle at the Moon between Sun and observer: 0 full, 180° new.
    pub phase_angle: Angle,
    /// Illuminated fraction of the disc, 0 to 1, seen from the observer's place; from the centre
    /// of the Earth it differs by up to 0.008.
    pub illuminated_fraction: f64,
}

impl SkyInstant {
    /// The sky at an instant. Costs some 0.1 ms.
    ///
    /// # Errors
    /// [`EphemerisError::OutOfRange`] outside the years 1900 to 2100.
    pub fn at(observer: &Observer, utc: Utc) -> Result<Self, EphemerisError> {
        check_range(Span::new(utc, utc))?;
        let ground = Ground::of(observer);
        let moment = Moment::new(utc, &ground);
        let bodies = Bodies::at(moment.tt, &ground);
        let frame = Frame::new(&bodies, &moment, &ground);
        let astrometry = astrometry(&bodies, &moment, &ground);
        let (sun, moon) = (frame.sun_horizontal(), frame.moon_horizontal());
        Ok(SkyInstant {
            moment,
            ground,
            bodies,
            frame,
            astrometry,
            sun,
            moon,
        })
    }

    /// The instant.
    pub fn utc(&self) -> Utc {
        self.moment.utc
    }

    /// UT1 − UTC in seconds as used here, and where it came from.
    pub fn ut1_minus_utc_s(&self) -> (f64, RotationQuality) {
        let used = &self.moment.orientation;
        (used.ut1_minus_utc_s, used.quality)
    }

    /// The instant in TDB, the observer's place taken into account.
    pub fn tdb(&self) -> Tdb {
        Tdb(self.moment.tt.0.plus_s(self.bodies.tdb_minus_tt_s))
    }

    /// Local apparent rotation angle of the Earth (Earth rotation angle + longitude), 0 to 360°:
    /// the CIO-based right ascension on the meridian.
    pub fn local_earth_rotation_angle(&self) -> Angle {
        Angle::from_rad(self.moment.earth_rotation_angle() + self.ground.longitude_rad)
            .wrapped_positive()
    }

    /// The Sun.
    pub fn sun(&self) -> SunPlace {
        SunPlace {
            altitude: altitude(self.sun),
            azimuth: azimuth(self.sun),
        }
    }

    /// The Moon.
    pub fn moon(&self) -> MoonPlace {
        let distance_km = self.frame.moon_distance_km();
        let phase_angle = self.frame.moon_phase_angle();
        MoonPlace {
            altitude: altitude(self.moon),
            azimuth: azimuth(self.moon),
            distance_km,
            semidiameter: moon_semidiameter(distance_km),
            phase_angle,
            illuminated_fraction: illuminated_fraction(phase_angle),
        }
    }

    /// Angle between Sun and Moon.
    pub fn sun_moon_separation(&self) -> Angle {
        Angle::from_rad(separation_rad(self.sun, self.moon))
    }

    /// A star's place, by the ERFA routines `atciq` and `atioq`.
    pub fn star(&self, star: &StarMotion) -> StarPlace {
        let mut astrometry = self.astrometry;
        let (ra, dec) = atciq(
            star.ra_rad,
            star.dec_rad,
            star.ra_rate_rad_yr,
            star.dec_rate_rad_yr,
            star.parallax_arcsec,
            star.radial_velocity_km_s,
            &mut astrometry,
        );
        let (azimuth, zenith_distance, hour_angle, declination, _) = atioq(ra, dec, &astrometry);
        let altitude = Angle::from_rad(std::f64::consts::FRAC_PI_2 - zenith_distance);
        // The routine counts azimuth north 0°, east 90°; the frame's first axis is north.
        let direction = from_spherical(azimuth, altitude.rad());
        let refraction = &self.ground.refraction;
        StarPlace {
            altitude,
            apparent_altitude: refraction.apparent(altitude),
            azimuth: Angle::from_rad(azimuth).wrapped_positive(),
            hour_angle: Angle::from_rad(hour_angle).wrapped_signed(),
            declination: Angle::from_rad(declination),
            parallactic_angle: Angle::from_rad(hd2pa(
                hour_angle,
                declination,
                self.ground.latitude_rad,
            )),
            airmass: airmass_at(self.ground.airmass_model, refraction, altitude),
            moon_separation: Angle::from_rad(separation_rad(direction, self.moon)),
            sun_separation: Angle::from_rad(separation_rad(direction, self.sun)),
        }
    }

    /// Barycentric velocity correction in m/s to be added to a measured velocity: the true one is
    /// measured + correction + measured · correction / c. With time dilation and the potential of
    /// Sun and Earth; the direction is that seen from the observer, parallax applied.
    pub fn barycentric_correction_m_s(&self, star: &StarMotion) -> f64 {
        let years = self.moment.tt.0.julian_years();
        self.frame
            .velocity_correction_m_s(star.seen_from(years, self.frame.position_au))
    }

    /// Light-time from the observer to the barycentre along the star's direction, in seconds.
    pub fn light_time_s(&self, star: &StarMotion) -> f64 {
        let years = self.moment.tt.0.julian_years();
        self.frame.light_time_s(star.barycentric(years))
    }

    /// Barycentric Julian date in TDB at which the light seen now passes the barycentre.
    pub fn bjd_tdb(&self, star: &StarMotion) -> JulianDate {
        barycentre::bjd_tdb(self.tdb(), self.light_time_s(star))
    }
}

/// Semidiameter of the Moon seen from a distance.
pub(crate) fn moon_semidiameter(distance_km: f64) -> Angle {
    Angle::from_rad((MOON_RADIUS_KM / distance_km).clamp(-1.0, 1.0).asin())
}

/// Illuminated fraction of a sphere's disc (Meeus, Astronomical Algorithms, 48.1).
pub(crate) fn illuminated_fraction(phase_angle: Angle) -> f64 {
    0.5 * (1.0 + phase_angle.rad().cos())
}

fn astrometry(bodies: &Bodies, moment: &Moment, ground: &Ground) -> IauAstrom {
    let mut astrometry = IauAstrom::default();
    let JulianDate { day, fraction } = moment.tt.0;
    let [x, y, s] = bodies.pole;
    // No air: refraction is put on afterwards, since both altitudes are wanted.
    apco(
        day,
        fraction,
        &[bodies.earth_au, bodies.earth_au_d],
        &bodies.sun_au.map(|part| -part),
        x,
        y,
        s,
        moment.earth_rotation_angle(),
        ground.longitude_rad,
        ground.latitude_rad,
        ground.height_m,
        moment.orientation.pole_x.rad(),
        moment.orientation.pole_y.rad(),
        sp00(day, fraction),
        0.0,
        0.0,
        &mut astrometry,
    );
    astrometry
}
