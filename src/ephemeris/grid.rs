//! A night's grid: every star at every minute, by the fast path.
//!
//! The slow part of the sky comes from a [`SkyTrack`]; each instant becomes one rotation from the
//! celestial frame to the horizon; each star, one parabola of its apparent direction as seen from
//! the centre of the Earth. What is left per star and instant is a product of a matrix with a
//! vector, the aberration by the turning of the ground, and three inverse circular functions.

use std::ops::Range;

use super::airmass::young_1994;
use super::barycentre;
use super::bodies::EphemerisError;
use super::earth_rotation::RotationQuality;
use super::frame::{Frame, Moment, altitude, azimuth};
use super::observer::{Observer, airmass_at};
use super::place::illuminated_fraction;
use super::scales::{JulianDate, Tdb};
use super::star::{Star, StarMotion};
use super::track::SkyTrack;
use super::{AirmassModel, Refraction};
use crate::time::{MINUTE_MS, Span, Utc};
use crate::units::vector::{Vec3, from_spherical, separation_rad};
use crate::units::{Angle, fast_trig};

/// Stars by minutes of a span, with Sun and Moon. The instants are the span's start and every
/// minute after it, up to its end and without it.
#[derive(Clone, Debug)]
pub struct NightGrid {
    /// Altitude of the Sun's centre at each instant, without refraction.
    pub sun_altitude_deg: Vec<f64>,
    /// Altitude of the Moon's centre at each instant, without refraction.
    pub moon_altitude_deg: Vec<f64>,
    /// Azimuth of the Moon at each instant, north 0°, east 90°.
    pub moon_azimuth_deg: Vec<f64>,
    /// Illuminated fraction of the Moon at each instant, seen from the site.
    pub moon_illuminated_fraction: Vec<f64>,
    /// Angle at the Moon between Sun and observer at each instant: 0° full.
    pub moon_phase_angle_deg: Vec<f64>,
    stars: Vec<StarCourse>,
    instants: Vec<Instant>,
    latitude: Angle,
    rotation_quality: RotationQuality,
}

/// A star's course over the grid: one value for each instant.
#[derive(Clone, Debug)]
pub struct StarCourse {
    /// Altitude without refraction.
    pub altitude_deg: Vec<f64>,
    /// Azimuth, north 0°, east 90°, below 360°.
    pub azimuth_deg: Vec<f64>,
    /// Airmass by the observer's model; infinite below the horizon.
    pub airmass: Vec<f64>,
    /// Angle to the Moon's centre.
    pub moon_separation_deg: Vec<f64>,
    motion: StarMotion,
}

/// What the grid remembers of an instant for the questions asked seldom.
#[derive(Clone, Debug)]
struct Instant {
    utc: Utc,
    tdb: Tdb,
    frame: Frame,
    sun: Vec3,
}

impl NightGrid {
    /// The grid of a span for an observer, in the order of the stars given. Runs on the calling
    /// thread alone.
    ///
    /// # Errors
    /// [`EphemerisError::OutOfRange`] outside the years 1900 to 2100.
    pub fn compute(
        observer: &Observer,
        stars: &[Star],
        span: Span,
    ) -> Result<Self, EphemerisError> {
        NightGrid::compute_every(observer, stars, span, MINUTE_MS)
    }

    /// As [`NightGrid::compute`], at the span's start and every `step_ms` (at least 1) after it.
    ///
    /// # Errors
    /// [`EphemerisError::OutOfRange`] outside the years 1900 to 2100.
    pub fn compute_every(
        observer: &Observer,
        stars: &[Star],
        span: Span,
        step_ms: i64,
    ) -> Result<Self, EphemerisError> {
        let track = SkyTrack::over(observer, span)?;
        let step_ms = step_ms.max(1);
        let count = span.length_ms().div_euclid(step_ms)
            + i64::from(span.length_ms().rem_euclid(step_ms) > 0);
        let moments: Vec<Moment> = (0..count)
            .map(|step| Moment::new(span.start.plus_ms(step * step_ms), &track.ground))
            .collect();
        let mut columns = Columns::with_capacity(moments.len());
        let mut grid = NightGrid {
            sun_altitude_deg: Vec::with_capacity(moments.len()),
            moon_altitude_deg: Vec::with_capacity(moments.len()),
            moon_azimuth_deg: Vec::with_capacity(moments.len()),
            moon_illuminated_fraction: Vec::with_capacity(moments.len()),
            moon_phase_angle_deg: Vec::with_capacity(moments.len()),
            stars: Vec::with_capacity(stars.len()),
            instants: Vec::with_capacity(moments.len()),
            latitude: observer.site.latitude,
            rotation_quality: observer.earth_rotation.quality_over(span),
        };
        for moment in &moments {
            grid.push_instant(&track, moment, &mut columns);
        }
        for star in stars {
            grid.push_star(&track, StarMotion::of(star), &columns);
        }
        Ok(grid)
    }

    fn push_instant(&mut self, track: &SkyTrack, moment: &Moment, columns: &mut Columns) {
        let bodies = track.bodies(moment);
        let frame = Frame::new(&bodies, moment, &track.ground);
        let (sun, moon) = (frame.sun_horizontal(), frame.moon_horizontal());
        let phase_angle = frame.moon_phase_angle();
        self.sun_altitude_deg.push(altitude(sun).deg());
        self.moon_altitude_deg.push(altitude(moon).deg());
        self.moon_azimuth_deg.push(azimuth(moon).deg());
        self.moon_illuminated_fraction
            .push(illuminated_fraction(phase_angle));
        self.moon_phase_angle_deg.push(phase_angle.deg());
        columns.push(track.place_in_segment(moment), &frame, moon);
        self.instants.push(Instant {
            utc: moment.utc,
            tdb: Tdb(moment.tt.0.plus_s(bodies.tdb_minus_tt_s)),
            frame,
            sun,
        });
    }

    fn push_star(&mut self, track: &SkyTrack, motion: StarMotion, columns: &Columns) {
        let count = self.instants.len();
        let mut course = StarCourse {
            altitude_deg: vec![0.0; count],
            azimuth_deg: vec![0.0; count],
            airmass: vec![0.0; count],
            moon_separation_deg: vec![0.0; count],
            motion,
        };
        let path = track.star(&motion);
        for (curve, range) in path.curves.iter().zip(&columns.segments) {
            columns.fill(
                *curve,
                range.clone(),
                track.ground.east_velocity_c,
                &mut course,
            );
        }
        let ground = &track.ground;
        if ground.airmass_model != AirmassModel::Young1994 {
            course.set_airmass(ground.airmass_model, &ground.refraction);
        }
        self.stars.push(course);
    }

    /// Number of instants.
    pub fn len(&self) -> usize {
        self.instants.len()
    }

    /// Whether there is no instant.
    pub fn is_empty(&self) -> bool {
        self.instants.is_empty()
    }

    /// An instant of the grid; `None` past its end.
    pub fn instant(&self, index: usize) -> Option<Utc> {
        self.instants.get(index).map(|i| i.utc)
    }

    /// The instants.
    pub fn instants(&self) -> impl ExactSizeIterator<Item = Utc> + '_ {
        self.instants.iter().map(|i| i.utc)
    }

    /// The stars' courses, in the order given.
    pub fn stars(&self) -> &[StarCourse] {
        &self.stars
    }

    /// The worst quality of UT1 − UTC within the span: what to tell the user.
    pub fn rotation_quality(&self) -> RotationQuality {
        self.rotation_quality
    }

    /// Hour angle of a star at an instant, west positive, −180° to 180°; `None` past the grid.
    pub fn hour_angle_deg(&self, star: usize, instant: usize) -> Option<f64> {
        let [north, east, up] = self.stars.get(star)?.direction(instant)?;
        let (sin_lat, cos_lat) = self.latitude.rad().sin_cos();
        Some((-east).atan2(cos_lat * up - sin_lat * north).to_degrees())
    }

    /// Angle between a star and the Sun's centre; `None` past the grid.
    pub fn sun_separation_deg(&self, star: usize, instant: usize) -> Option<f64> {
        let direction = self.stars.get(star)?.direction(instant)?;
        Some(separation_rad(direction, self.instants.get(instant)?.sun).to_degrees())
    }

    /// Barycentric Julian date in TDB of a star at an instant; `None` past the grid.
    pub fn bjd_tdb(&self, star: usize, instant: usize) -> Option<JulianDate> {
        let (at, motion) = (self.instants.get(instant)?, &self.stars.get(star)?.motion);
        let direction = motion.barycentric(at.tdb.0.julian_years());
        Some(barycentre::bjd_tdb(
            at.tdb,
            at.frame.light_time_s(direction),
        ))
    }

    /// Barycentric velocity correction of a star at an instant in m/s, as
    /// [`super::SkyInstant::barycentric_correction_m_s`]; `None` past the grid.
    pub fn barycentric_correction_m_s(&self, star: usize, instant: usize) -> Option<f64> {
        let (at, motion) = (self.instants.get(instant)?, &self.stars.get(star)?.motion);
        let direction = motion.seen_from(at.tdb.0.julian_years(), at.frame.position_au);
        Some(at.frame.velocity_correction_m_s(direction))
    }
}

impl StarCourse {
    fn direction(&self, instant: usize) -> Option<Vec3> {
        let azimuth_deg = self.azimuth_deg.get(instant)?;
        let altitude_deg = self.altitude_deg.get(instant)?;
        Some(from_spherical(
            azimuth_deg.to_radians(),
            altitude_deg.to_radians(),
        ))
    }

    fn set_airmass(&mut self, model: AirmassModel, refraction: &Refraction) {
        for (airmass, altitude_deg) in self.airmass.iter_mut().zip(&self.altitude_deg) {
            *airmass = airmass_at(model, refraction, Angle::from_deg(*altitude_deg));
        }
    }
}

/// The instants by columns, so that the compiler can work on several instants at once.
struct Columns {
    /// Which instants fall into each segment of the track.
    segments: Vec<Range<usize>>,
    /// Place within the segment, −1 to 1.
    place: Vec<f64>,
    /// The rotation to the horizon, row by row.
    rotation: [Vec<f64>; 9],
    /// North, east, up of the Moon.
    moon: [Vec<f64>; 3],
}

/// Instants worked on at a time: their values stay in the first-level cache.
const CHUNK: usize = 64;

impl Columns {
    fn with_capacity(count: usize) -> Self {
        Columns {
            segments: Vec::new(),
            place: Vec::with_capacity(count),
            rotation: std::array::from_fn(|_| Vec::with_capacity(count)),
            moon: std::array::from_fn(|_| Vec::with_capacity(count)),
        }
    }

    fn push(&mut self, (segment, place): (usize, f64), frame: &Frame, moon: Vec3) {
        let index = self.place.len();
        while self.segments.len() <= segment {
            self.segments.push(index..index);
        }
        self.segments[segment].end = index + 1;
        self.place.push(place);
        for (column, part) in self.rotation.iter_mut().zip(frame.horizon.as_flattened()) {
            column.push(*part);
        }
        for (column, part) in self.moon.iter_mut().zip(moon) {
            column.push(part);
        }
    }

    /// Works out one star over the instants of one segment.
    fn fill(&self, curve: [Vec3; 3], range: Range<usize>, east_c: f64, into: &mut StarCourse) {
        let mut start = range.start;
        while start < range.end {
            let end = range.end.min(start + CHUNK);
            let part = start..end;
            let mut level = [[0.0; CHUNK]; 3];
            self.directions(curve, part.clone(), east_c, &mut level);
            let out = Output {
                altitude_deg: &mut into.altitude_deg[part.clone()],
                azimuth_deg: &mut into.azimuth_deg[part.clone()],
                airmass: &mut into.airmass[part.clone()],
                moon_separation_deg: &mut into.moon_separation_deg[part.clone()],
            };
            self.angles(&level, part, out);
            start = end;
        }
    }

    /// North, east, up of a star at some instants, as unit vectors.
    fn directions(
        &self,
        [middle, slope, bend]: [Vec3; 3],
        part: Range<usize>,
        east_c: f64,
        level: &mut [[f64; CHUNK]; 3],
    ) {
        let count = part.len().min(CHUNK);
        let place = &self.place[part.clone()][..count];
        let r: [&[f64]; 9] = std::array::from_fn(|i| &self.rotation[i][part.clone()][..count]);
        let [north, east, up] = level;
        for i in 0..count {
            let s = place[i];
            let x = middle[0] + s * (slope[0] + s * bend[0]);
            let y = middle[1] + s * (slope[1] + s * bend[1]);
            let z = middle[2] + s * (slope[2] + s * bend[2]);
            let n = r[0][i] * x + r[1][i] * y + r[2][i] * z;
            let e = r[3][i] * x + r[4][i] * y + r[5][i] * z;
            let u = r[6][i] * x + r[7][i] * y + r[8][i] * z;
            // The ground moves east: aberration of the first order in its speed.
            let f = 1.0 - east_c * e;
            let (n, e, u) = (f * n, f * e + east_c, f * u);
            let inverse = 1.0 / (n * n + e * e + u * u).sqrt();
            north[i] = n * inverse;
            east[i] = e * inverse;
            up[i] = u * inverse;
        }
    }

    fn angles(&self, level: &[[f64; CHUNK]; 3], part: Range<usize>, out: Output<'_>) {
        const DEG: f64 = 180.0 / std::f64::consts::PI;
        let count = part.len().min(CHUNK);
        let [north, east, up] = level.each_ref().map(|column| &column[..count]);
        for (altitude_deg, u) in out.altitude_deg.iter_mut().zip(up) {
            *altitude_deg = fast_trig::asin(*u) * DEG;
        }
        for ((azimuth_deg, n), e) in out.azimuth_deg.iter_mut().zip(north).zip(east) {
            let turned = fast_trig::atan2(*e, *n) * DEG;
            *azimuth_deg = if turned < 0.0 { turned + 360.0 } else { turned };
        }
        for (airmass, u) in out.airmass.iter_mut().zip(up) {
            let above = young_1994(u.max(0.0));
            *airmass = if *u < 0.0 { f64::INFINITY } else { above };
        }
        let moon: [&[f64]; 3] = std::array::from_fn(|i| &self.moon[i][part.clone()][..count]);
        let separation_deg = &mut out.moon_separation_deg[..count];
        for i in 0..count {
            let cosine = north[i] * moon[0][i] + east[i] * moon[1][i] + up[i] * moon[2][i];
            separation_deg[i] = fast_trig::acos(cosine) * DEG;
        }
    }
}

/// Where a part of a star's course goes.
struct Output<'a> {
    altitude_deg: &'a mut [f64],
    azimuth_deg: &'a mut [f64],
    airmass: &'a mut [f64],
    moon_separation_deg: &'a mut [f64],
}
