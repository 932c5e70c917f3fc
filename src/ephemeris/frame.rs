//! From the celestial frame to the horizon, and where Sun and Moon stand in it.

use sofars::astro::ab;
use sofars::consts::{DC, SRS};
use sofars::erst::era00;
use sofars::pnp::{c2ixys, pom00, sp00};

use super::bodies::Bodies;
use super::earth_rotation::EarthOrientation;
use super::observer::{AU_M, EARTH_SPIN_RAD_S, Ground, LIGHT_M_S};
use super::scales::{JulianDate, Tai, Tt};
use crate::time::Utc;
use crate::units::Angle;
use crate::units::vector::{
    Mat3, Vec3, add_scaled, cross, dot, norm, product, rotate, rotate_back, scaled, sub, unit,
};

/// Mean radius of the Moon in km, as used for its semidiameter (IAU/IAG 2015 report: 1737.4 km).
pub const MOON_RADIUS_KM: f64 = 1737.4;
/// Light travels so many au in a day.
const LIGHT_AU_D: f64 = DC;

/// An instant in the scales that the frame needs.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Moment {
    pub utc: Utc,
    pub tt: Tt,
    pub ut1: JulianDate,
    pub orientation: EarthOrientation,
}

impl Moment {
    pub fn new(utc: Utc, ground: &Ground) -> Self {
        let orientation = ground.rotation.at(utc);
        let (day, fraction) = utc.julian_date();
        let date = JulianDate { day, fraction };
        Moment {
            utc,
            tt: Tai::from_utc(utc).tt(),
            ut1: date.plus_s(orientation.ut1_minus_utc_s),
            orientation,
        }
    }

    pub fn earth_rotation_angle(&self) -> f64 {
        era00(self.ut1.day, self.ut1.fraction)
    }
}

/// The observer's frame at an instant.
#[derive(Clone, Debug)]
pub(crate) struct Frame {
    /// Rows: north, east, up, in the GCRS.
    pub horizon: Mat3,
    /// Observer from the centre of the Earth, au, GCRS.
    pub from_earth_au: Vec3,
    /// Observer from the barycentre, au.
    pub position_au: Vec3,
    /// The observer's barycentric velocity over that of light.
    pub velocity_c: Vec3,
    /// √(1 − v²/c²) for it.
    pub inverse_lorentz: f64,
    /// Sun from the observer, geometric, au.
    pub sun_au: Vec3,
    /// Moon from the observer, where it was when the light left it, au.
    pub moon_au: Vec3,
}

impl Frame {
    pub fn new(bodies: &Bodies, moment: &Moment, ground: &Ground) -> Self {
        let [x, y, s] = bodies.pole;
        let to_intermediate = c2ixys(x, y, s);
        let (sin, cos) = moment.earth_rotation_angle().sin_cos();
        let turn = [[cos, sin, 0.0], [-sin, cos, 0.0], [0.0, 0.0, 1.0]];
        let pole = pom00(
            moment.orientation.pole_x.rad(),
            moment.orientation.pole_y.rad(),
            sp00(moment.tt.0.day, moment.tt.0.fraction),
        );
        let to_earth_fixed = product(&pole, &product(&turn, &to_intermediate));
        let from_earth_m = rotate_back(&to_earth_fixed, ground.position_m);
        // The Earth turns about the intermediate pole, the third axis before polar motion.
        let axis = to_intermediate[2];
        let spin_m_s = scaled(EARTH_SPIN_RAD_S, cross(axis, from_earth_m));
        let from_earth_au = scaled(1.0 / AU_M, from_earth_m);
        let velocity_c = add_scaled(
            scaled(1.0 / LIGHT_AU_D, bodies.earth_au_d),
            1.0 / LIGHT_M_S,
            spin_m_s,
        );
        Frame {
            horizon: product(&ground.axes, &to_earth_fixed),
            from_earth_au,
            position_au: add_scaled(from_earth_au, 1.0, bodies.earth_au),
            velocity_c,
            inverse_lorentz: (1.0 - dot(velocity_c, velocity_c)).sqrt(),
            sun_au: sub(bodies.sun_au, from_earth_au),
            moon_au: retarded_moon_au(bodies, from_earth_au),
        }
    }

    /// Apparent direction from a natural one: aberration with the observer's whole velocity
    /// (ERFA routine `ab`; Klioner 2003, AJ 125, 1580).
    pub fn aberrated(&self, natural: Vec3) -> Vec3 {
        ab(
            &natural,
            &self.velocity_c,
            norm(self.sun_au),
            self.inverse_lorentz,
        )
    }

    /// North, east, up of the Sun's centre as it appears without air. The Sun's own motion during
    /// the light's journey (0.01″) is left out.
    pub fn sun_horizontal(&self) -> Vec3 {
        rotate(&self.horizon, self.aberrated(unit(self.sun_au)))
    }

    /// North, east, up of the Moon's centre as it appears without air.
    pub fn moon_horizontal(&self) -> Vec3 {
        rotate(&self.horizon, self.aberrated(unit(self.moon_au)))
    }

    /// Angle at the Moon between Sun and observer: 0 full, π new.
    pub fn moon_phase_angle(&self) -> Angle {
        let to_sun = unit(sub(self.sun_au, self.moon_au));
        let cosine = -dot(to_sun, unit(self.moon_au));
        Angle::from_rad(cosine.clamp(-1.0, 1.0).acos())
    }

    pub fn moon_distance_km(&self) -> f64 {
        norm(self.moon_au) * AU_M / 1000.0
    }

    /// Light-time from the observer's place to the barycentre along a direction, in seconds: what
    /// to add to the time of observation (plane wave; Eastman, Siverd & Gaudi 2010, PASP 122, 935).
    pub fn light_time_s(&self, direction: Vec3) -> f64 {
        dot(self.position_au, direction) * AU_M / LIGHT_M_S
    }

    /// Barycentric velocity correction in m/s for a direction seen from the observer:
    /// c [γ (1 + β·n) / (1 + φ/c²) − 1], φ the potential of Sun and Earth (Wright & Eastman 2014,
    /// PASP 126, 838, eq. 28 without Shapiro delay and the star's own motion).
    pub fn velocity_correction_m_s(&self, direction: Vec3) -> f64 {
        /// G·M of the Earth over c², metres (IAU 2015 resolution B3: GM = 3.986004e14 m³/s²).
        const EARTH_MASS_M: f64 = 3.986_004e14 / (LIGHT_M_S * LIGHT_M_S);
        let sun = 0.5 * SRS / norm(self.sun_au);
        let earth = EARTH_MASS_M / (norm(self.from_earth_au) * AU_M);
        let doppler = (1.0 + dot(self.velocity_c, direction)) / self.inverse_lorentz;
        LIGHT_M_S * (doppler / (1.0 - sun - earth) - 1.0)
    }
}

/// Moon from the observer when its light left it. Both Earth and Moon move on meanwhile; the
/// aberration put on later then leaves what an observer sees.
fn retarded_moon_au(bodies: &Bodies, from_earth_au: Vec3) -> Vec3 {
    let geometric = sub(bodies.moon_au, from_earth_au);
    let days = norm(geometric) / LIGHT_AU_D;
    let velocity = add_scaled(bodies.earth_au_d, 1.0, bodies.moon_au_d);
    add_scaled(geometric, -days, velocity)
}

/// Altitude of a direction given as north, east, up.
pub(crate) fn altitude(horizontal: Vec3) -> Angle {
    let level = horizontal[0].hypot(horizontal[1]);
    Angle::from_rad(horizontal[2].atan2(level))
}

/// Azimuth of a direction given as north, east, up: north 0°, east 90°, below 360°.
pub(crate) fn azimuth(horizontal: Vec3) -> Angle {
    Angle::from_rad(horizontal[1].atan2(horizontal[0])).wrapped_positive()
}
