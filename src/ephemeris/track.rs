//! The slow part of the sky over a span, worked out at a few instants and interpolated between.

use super::bodies::{BODIES_VALUES, Bodies, EphemerisError, check_range};
use super::frame::{Frame, Moment};
use super::observer::{Ground, Observer};
use super::scales::{JulianDate, Tt};
use super::star::StarMotion;
use crate::time::{DAY_MS, Span, Utc};
use crate::units::Chebyshev;
use crate::units::vector::{Vec3, add_scaled, norm, rotate, scaled, sub, unit};
use sofars::astro::{ab, ldsun};
use sofars::consts::DC;

/// Interpolation points in a segment. With a segment of up to 26 h the polynomial leaves below
/// 0.001″ of the Moon and 0.0001″ of all else (a test says so).
const NODES: usize = 7;
/// Longest segment. One holds a whole night with what is looked up around it.
const LONGEST_SEGMENT_MS: i64 = DAY_MS + 2 * 3_600_000;

/// The moving bodies and the pole over a span.
#[derive(Clone, Debug)]
pub(crate) struct SkyTrack {
    pub ground: Ground,
    epoch: JulianDate,
    segments: Vec<Segment>,
}

#[derive(Clone, Debug)]
pub(crate) struct Segment {
    /// Ends in days of TT from the track's epoch.
    from_days: f64,
    to_days: f64,
    curve: Chebyshev<BODIES_VALUES, NODES>,
}

impl SkyTrack {
    pub fn over(observer: &Observer, span: Span) -> Result<Self, EphemerisError> {
        check_range(span)?;
        let ground = Ground::of(observer);
        let epoch = Tt::from_utc(span.start).0;
        let length_days = Tt::from_utc(span.end).0.days_since(epoch).max(1e-3);
        let count = (length_days * DAY_MS as f64 / LONGEST_SEGMENT_MS as f64)
            .ceil()
            .max(1.0);
        let width = length_days / count;
        let segments = (0..count as usize)
            .map(|i| {
                let from_days = width * i as f64;
                let to_days = from_days + width;
                Segment {
                    from_days,
                    to_days,
                    curve: Chebyshev::through(from_days, to_days, |days| {
                        Bodies::at(Tt(later(epoch, days)), &ground).to_values()
                    }),
                }
            })
            .collect();
        Ok(SkyTrack {
            ground,
            epoch,
            segments,
        })
    }

    fn days(&self, moment: &Moment) -> f64 {
        moment.tt.0.days_since(self.epoch)
    }

    fn segment(&self, days: f64) -> (usize, &Segment) {
        let after = self.segments.partition_point(|s| s.from_days <= days);
        let index = after.clamp(1, self.segments.len()) - 1;
        (index, &self.segments[index])
    }

    pub fn bodies(&self, moment: &Moment) -> Bodies {
        let days = self.days(moment);
        Bodies::from_values(&self.segment(days).1.curve.at(days))
    }

    pub fn frame(&self, utc: Utc) -> Frame {
        let moment = Moment::new(utc, &self.ground);
        Frame::new(&self.bodies(&moment), &moment, &self.ground)
    }

    /// Which segment an instant falls into, and where within it from −1 to 1.
    pub fn place_in_segment(&self, moment: &Moment) -> (usize, f64) {
        let days = self.days(moment);
        let (index, segment) = self.segment(days);
        (index, segment.scaled(days))
    }

    pub fn star(&self, motion: &StarMotion) -> StarTrack {
        let at = |days: f64, segment: &Segment| {
            let tt = later(self.epoch, days);
            let bodies = Bodies::from_values(&segment.curve.at(days));
            geocentric_apparent(motion, &bodies, tt.julian_years())
        };
        let curves = self
            .segments
            .iter()
            .map(|segment| {
                let middle_days = 0.5 * (segment.from_days + segment.to_days);
                let start = at(segment.from_days, segment);
                let middle = at(middle_days, segment);
                let end = at(segment.to_days, segment);
                let slope = scaled(0.5, sub(end, start));
                let bend = add_scaled(scaled(0.5, add_scaled(start, 1.0, end)), -1.0, middle);
                [middle, slope, bend]
            })
            .collect();
        StarTrack { curves }
    }

    /// North, east, up of a star at an instant, as it appears without air.
    pub fn star_horizontal(&self, star: &StarTrack, utc: Utc) -> Vec3 {
        let moment = Moment::new(utc, &self.ground);
        let (segment, place) = self.place_in_segment(&moment);
        let frame = Frame::new(&self.bodies(&moment), &moment, &self.ground);
        let level = rotate(&frame.horizon, star.direction(segment, place));
        let k = self.ground.east_velocity_c;
        unit(add_scaled(
            level,
            k,
            sub([0.0, 1.0, 0.0], scaled(level[1], level)),
        ))
    }
}

impl Segment {
    fn scaled(&self, days: f64) -> f64 {
        (2.0 * days - self.from_days - self.to_days) / (self.to_days - self.from_days)
    }
}

fn later(epoch: JulianDate, days: f64) -> JulianDate {
    JulianDate {
        day: epoch.day,
        fraction: epoch.fraction + days,
    }
}

/// A star's GCRS direction as it appears from the centre of the Earth (space motion, parallax,
/// deflection by the Sun, annual aberration): a parabola in each segment. What it leaves out over
/// a day is 20.5″ · (2π · 0.5/365)³/(9√3), below 1e-5″; within 10° of the Sun deflection bends more
/// than that, by up to 0.1″ outside a degree of it.
#[derive(Clone, Debug)]
pub(crate) struct StarTrack {
    pub curves: Vec<[Vec3; 3]>,
}

impl StarTrack {
    pub fn direction(&self, segment: usize, place: f64) -> Vec3 {
        let [middle, slope, bend] = self.curves[segment];
        add_scaled(middle, place, add_scaled(slope, place, bend))
    }
}

fn geocentric_apparent(motion: &StarMotion, bodies: &Bodies, years: f64) -> Vec3 {
    let coordinate = motion.seen_from(years, bodies.earth_au);
    let sun_distance_au = norm(bodies.sun_au);
    let from_sun = scaled(-1.0 / sun_distance_au, bodies.sun_au);
    let natural = ldsun(coordinate, from_sun, sun_distance_au);
    let velocity_c = scaled(1.0 / DC, bodies.earth_au_d);
    let speed = norm(velocity_c);
    ab(
        &natural,
        &velocity_c,
        sun_distance_au,
        (1.0 - speed * speed).sqrt(),
    )
}
