//! Which limits keep a star from being observed at an instant.

use crate::catalogue::{Mount, Target, Telescope, WindAvoidance};
use crate::ephemeris::HorizonProfile;
use crate::units::Angle;

use super::slew::Pointing;

/// One limit. The order is that in which reasons are told: what lasts longest first.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
#[repr(u16)]
pub enum Limit {
    /// Below the lowest altitude of mount or target.
    Altitude = 1,
    /// Behind the local horizon.
    Horizon = 1 << 1,
    /// Above the target's highest airmass.
    Airmass = 1 << 2,
    /// Above the highest altitude of the mount, or in its zenith hole.
    Zenith = 1 << 3,
    /// Outside the hour angles of the mount.
    HourAngle = 1 << 4,
    /// Too close to the sun.
    Sun = 1 << 5,
    /// Too close to the moon.
    Moon = 1 << 6,
    /// Too near the direction of a strong wind.
    Wind = 1 << 7,
    /// In a span that is blocked or not ours.
    Blocked = 1 << 8,
    /// Within a special window to avoid.
    Avoided = 1 << 9,
    /// The exposure saturates or cannot reach its goal in these conditions.
    Exposure = 1 << 10,
    /// Too soon after the last visit of this night.
    Separation = 1 << 11,
}

impl Limit {
    /// All limits in the order of telling.
    pub const ALL: [Limit; 12] = [
        Limit::Altitude,
        Limit::Horizon,
        Limit::Airmass,
        Limit::Zenith,
        Limit::HourAngle,
        Limit::Sun,
        Limit::Moon,
        Limit::Wind,
        Limit::Blocked,
        Limit::Avoided,
        Limit::Exposure,
        Limit::Separation,
    ];

    /// In plain words, to follow "kept out by".
    pub const fn words(self) -> &'static str {
        match self {
            Limit::Altitude => "its lowest altitude",
            Limit::Horizon => "the local horizon",
            Limit::Airmass => "its highest airmass",
            Limit::Zenith => "the mount's limit near the zenith",
            Limit::HourAngle => "the mount's hour-angle limits",
            Limit::Sun => "the sun's distance",
            Limit::Moon => "the moon's distance",
            Limit::Wind => "the wind's direction",
            Limit::Blocked => "a blocked span",
            Limit::Avoided => "a window to avoid",
            Limit::Exposure => "an exposure that cannot be made",
            Limit::Separation => "the separation from its last visit",
        }
    }
}

/// A set of limits that are broken; empty: may be observed.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Default)]
pub struct Limits(u16);

impl Limits {
    /// None broken.
    pub const NONE: Limits = Limits(0);

    /// This set and one more.
    #[must_use]
    pub const fn with(self, limit: Limit) -> Limits {
        Limits(self.0 | limit as u16)
    }

    /// This set, and one more if the condition holds.
    #[must_use]
    pub const fn with_if(self, limit: Limit, broken: bool) -> Limits {
        if broken { self.with(limit) } else { self }
    }

    /// Both sets together.
    #[must_use]
    pub const fn union(self, other: Limits) -> Limits {
        Limits(self.0 | other.0)
    }

    /// Nothing is broken.
    pub const fn is_empty(self) -> bool {
        self.0 == 0
    }

    /// Whether this limit is broken.
    pub const fn has(self, limit: Limit) -> bool {
        self.0 & limit as u16 != 0
    }
}

/// What the sky offers at one instant in the direction of one star.
#[derive(Clone, Copy, Debug)]
pub struct View {
    /// Where.
    pub pointing: Pointing,
    /// Airmass.
    pub airmass: f64,
    /// Distance to the moon, degrees.
    pub moon_separation_deg: f64,
    /// Altitude of the moon, degrees: below the horizon it forbids nothing.
    pub moon_altitude_deg: f64,
    /// Distance to the sun, degrees.
    pub sun_separation_deg: f64,
}

/// The limits of mount, site and target that geometry and the moon decide.
pub fn broken(
    telescope: &Telescope,
    horizon: &HorizonProfile,
    target: &Target,
    view: &View,
) -> Limits {
    let altitude_deg = view.pointing.altitude_deg;
    let own = &target.limits;
    let lowest_deg = strictest(telescope.min_altitude, own.min_altitude).deg();
    let moon_deg = strictest(telescope.min_moon_separation, own.min_moon_separation).deg();
    let sky = Limits::NONE
        .with_if(Limit::Altitude, altitude_deg < lowest_deg)
        .with_if(
            Limit::Horizon,
            altitude_deg < horizon.altitude_deg(view.pointing.azimuth_deg),
        )
        .with_if(
            Limit::Airmass,
            own.max_airmass.is_some_and(|most| view.airmass > most),
        )
        .with_if(
            Limit::Sun,
            view.sun_separation_deg < telescope.min_sun_separation.deg(),
        )
        .with_if(
            Limit::Moon,
            view.moon_altitude_deg > 0.0 && view.moon_separation_deg < moon_deg,
        );
    sky.union(mount_limits(telescope, &view.pointing))
}

fn mount_limits(telescope: &Telescope, pointing: &Pointing) -> Limits {
    let too_high = pointing.altitude_deg > telescope.max_altitude.deg();
    let limits = Limits::NONE.with_if(Limit::Zenith, too_high);
    match telescope.mount {
        Mount::AltAzimuth { zenith_hole } => limits.with_if(
            Limit::Zenith,
            90.0 - pointing.altitude_deg < zenith_hole.deg(),
        ),
        Mount::Equatorial {
            min_hour_angle,
            max_hour_angle,
            ..
        } => {
            let hour_angle_deg = pointing.hour_angle_deg;
            let outside =
                hour_angle_deg < min_hour_angle.deg() || hour_angle_deg > max_hour_angle.deg();
            limits.with_if(Limit::HourAngle, outside)
        }
    }
}

/// A wind as the planner needs to know it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Wind {
    /// Mean speed, m/s.
    pub speed_m_s: f64,
    /// Azimuth that it comes from.
    pub from: Angle,
}

/// Whether this wind forbids this azimuth.
pub fn wind_forbids(
    avoidance: Option<&WindAvoidance>,
    wind: Option<&Wind>,
    azimuth_deg: f64,
) -> bool {
    let (Some(avoidance), Some(wind)) = (avoidance, wind) else {
        return false;
    };
    let off = (Angle::from_deg(azimuth_deg) - wind.from).wrapped_signed();
    wind.speed_m_s > avoidance.above_m_s && off.deg().abs() < avoidance.half_width.deg()
}

fn strictest(mount: Angle, own: Option<Angle>) -> Angle {
    match own {
        Some(own) if own > mount => own,
        _ => mount,
    }
}
