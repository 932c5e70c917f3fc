//! For how long stars stand high enough in the dark, over whole seasons, by geometry alone.
//!
//! Only an altitude limit and darkness count here: no horizon profile, Moon or mount. The Sun and
//! the pole are followed over eight days at a time; a star's arc above the limit comes from its
//! place of date by the hour-angle formula. Aberration and deflection (20″) and polar motion are left
//! out of it, which moves rise and set by a few seconds at most away from grazing stars.

use sofars::consts::{AULT, DAYSEC};
use sofars::eph::epv00;
use sofars::pnp::{c2ixys, xys06a};

use super::bodies::{EphemerisError, check_range};
use super::events::Course;
use super::frame::Moment;
use super::observer::{AU_M, Ground, Observer};
use super::scales::{JulianDate, Tt};
use super::star::{Star, StarMotion};
use crate::time::{DAY_MS, Night, NightDate, Span, Utc};
use crate::units::vector::{Vec3, add_scaled, norm, rotate, scaled, sub, unit};
use crate::units::{Angle, Chebyshev};

/// Days followed by one polynomial, and its points: the Sun stays within 0.01″.
const SEGMENT_DAYS: f64 = 8.0;
const NODES: usize = 10;
/// Turns of the Earth in a day of UT1 (Capitaine, Guinot & McCarthy 2000, A&A 355, 398).
const TURNS_PER_DAY: f64 = 1.002_737_811_911_354_5;

/// Nights in a row with their darkness, ready to be asked about stars.
#[derive(Clone, Debug)]
pub struct Visibility {
    nights: Vec<DarkNight>,
    latitude: Angle,
}

/// A night with its darkness.
#[derive(Clone, Copy, Debug)]
struct DarkNight {
    night: Night,
    darkness: Option<Span>,
    /// Local Earth rotation angle at the start of darkness.
    start_angle_rad: f64,
    /// From the celestial frame to the pole and origin of date.
    to_intermediate: [Vec3; 3],
    years: f64,
}

impl Visibility {
    /// A number of nights from the first, dark when the Sun stands below an altitude.
    ///
    /// # Errors
    /// [`EphemerisError::OutOfRange`] outside the years 1900 to 2100.
    pub fn over(
        observer: &Observer,
        first: NightDate,
        nights: usize,
        sun_altitude: Angle,
    ) -> Result<Self, EphemerisError> {
        let longitude = observer.site.longitude;
        let dates = (0..i64::try_from(nights).unwrap_or(i64::MAX)).map(|n| first.plus_nights(n));
        let nights: Vec<Night> = dates.map(|date| Night::of(date, longitude)).collect();
        let (Some(start), Some(end)) = (nights.first(), nights.last()) else {
            return Ok(Visibility {
                nights: Vec::new(),
                latitude: observer.site.latitude,
            });
        };
        let sun = SunTrack::over(observer, Span::new(start.span.start, end.span.end))?;
        Ok(Visibility {
            nights: nights
                .into_iter()
                .map(|night| sun.dark_night(night, sun_altitude))
                .collect(),
            latitude: observer.site.latitude,
        })
    }

    /// Each night with the longest span of darkness in it; `None` where it never gets dark.
    pub fn darkness(&self) -> impl ExactSizeIterator<Item = (NightDate, Option<Span>)> + '_ {
        self.nights.iter().map(|n| (n.night.date, n.darkness))
    }

    /// For each night, for how many milliseconds of its darkness a star stands at an altitude
    /// (without refraction) or above.
    pub fn above_ms(&self, star: &Star, limit: Angle) -> Vec<i64> {
        let motion = StarMotion::of(star);
        self.nights
            .iter()
            .map(|night| night.above_ms(&motion, limit, self.latitude))
            .collect()
    }
}

impl DarkNight {
    fn above_ms(&self, star: &StarMotion, limit: Angle, latitude: Angle) -> i64 {
        let Some(darkness) = self.darkness else {
            return 0;
        };
        let place = rotate(&self.to_intermediate, star.barycentric(self.years));
        let half_arc = half_arc_rad(place, limit, latitude);
        let rate = std::f64::consts::TAU * TURNS_PER_DAY / DAY_MS as f64;
        let from = Angle::from_rad(self.start_angle_rad - place[1].atan2(place[0]))
            .wrapped_signed()
            .rad();
        let to = from + rate * darkness.length_ms() as f64;
        // A night is at most a turn and a little long: the arc about hour angle 0, and the next.
        let common = [-1.0, 0.0, 1.0, 2.0].map(|turn| {
            let middle = turn * std::f64::consts::TAU;
            (to.min(middle + half_arc) - from.max(middle - half_arc)).max(0.0)
        });
        let total = (common.iter().sum::<f64>() / rate).round() as i64;
        total.min(darkness.length_ms())
    }
}

/// Hour angle at which a direction passes an altitude: 0 when it never rises to it, π when it never
/// falls below it (Meeus, Astronomical Algorithms, 15.1).
fn half_arc_rad(place: Vec3, limit: Angle, latitude: Angle) -> f64 {
    let (sin_lat, cos_lat) = latitude.rad().sin_cos();
    let (sin_dec, cos_dec) = (place[2], place[0].hypot(place[1]));
    let needed = limit.rad().sin() - sin_lat * sin_dec;
    let swing = cos_lat * cos_dec;
    if needed > swing {
        0.0
    } else if needed <= -swing {
        std::f64::consts::PI
    } else {
        (needed / swing).clamp(-1.0, 1.0).acos()
    }
}

/// The Sun seen from the centre of the Earth, and the pole, over a season.
struct SunTrack {
    ground: Ground,
    epoch: JulianDate,
    segments: Vec<Chebyshev<6, NODES>>,
}

impl SunTrack {
    fn over(observer: &Observer, span: Span) -> Result<Self, EphemerisError> {
        const PAD_MS: i64 = 3_600_000;
        let padded = Span::new(span.start.plus_ms(-PAD_MS), span.end.plus_ms(PAD_MS));
        check_range(padded)?;
        let epoch = Tt::from_utc(padded.start).0;
        let days = Tt::from_utc(padded.end).0.days_since(epoch);
        let count = (days / SEGMENT_DAYS).ceil() as usize;
        let segments = (0..count.max(1))
            .map(|i| {
                let from = SEGMENT_DAYS * i as f64;
                // The last one may end early: the ephemeris may not reach further.
                let to = (from + SEGMENT_DAYS).min(days.max(from + 0.1));
                Chebyshev::through(from, to, |day| sun_and_pole(epoch, day))
            })
            .collect();
        Ok(SunTrack {
            ground: Ground::of(observer),
            epoch,
            segments,
        })
    }

    fn at(&self, moment: &Moment) -> (Vec3, [Vec3; 3]) {
        let days = moment.tt.0.days_since(self.epoch);
        let index = ((days / SEGMENT_DAYS) as usize).min(self.segments.len() - 1);
        let [a, b, c, x, y, s] = self.segments[index].at(days);
        ([a, b, c], c2ixys(x, y, s))
    }

    fn sun_altitude_rad(&self, utc: Utc) -> f64 {
        let moment = Moment::new(utc, &self.ground);
        let (sun_au, to_intermediate) = self.at(&moment);
        let (sin, cos) = moment.earth_rotation_angle().sin_cos();
        let [x, y, z] = rotate(&to_intermediate, sun_au);
        let fixed = [cos * x + sin * y, cos * y - sin * x, z];
        let seen = unit(sub(fixed, scaled(1.0 / AU_M, self.ground.position_m)));
        rotate(&self.ground.axes, seen)[2].clamp(-1.0, 1.0).asin()
    }

    fn dark_night(&self, night: Night, sun_altitude: Angle) -> DarkNight {
        let limit = sun_altitude.rad();
        let dark = Course::over(night.span, |utc| self.sun_altitude_rad(utc) - limit).below();
        let darkness = super::events::longest(&dark);
        let start = darkness.map_or(night.span.start, |d| d.start);
        let moment = Moment::new(start, &self.ground);
        DarkNight {
            night,
            darkness,
            start_angle_rad: moment.earth_rotation_angle() + self.ground.longitude_rad,
            to_intermediate: self.at(&moment).1,
            years: moment.tt.0.julian_years(),
        }
    }
}

/// The Sun's apparent place from the centre of the Earth (au), and the pole X, Y with s. The
/// Sun's aberration is its light-time's worth of the Earth's motion.
fn sun_and_pole(epoch: JulianDate, days: f64) -> [f64; 6] {
    let (day, fraction) = (epoch.day, epoch.fraction + days);
    // `None` only outside the years that `check_range` lets through.
    let (heliocentric, barycentric) =
        epv00(day, fraction).unwrap_or(([[f64::NAN; 3]; 2], [[f64::NAN; 3]; 2]));
    let geometric = scaled(-1.0, heliocentric[0]);
    let light_days = norm(geometric) * AULT / DAYSEC;
    let [a, b, c] = add_scaled(geometric, light_days, barycentric[1]);
    let (x, y, s) = xys06a(day, fraction);
    [a, b, c, x, y, s]
}
