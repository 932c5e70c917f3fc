//! What happens in a night: sunset, twilights, moonrise, transits, and when a body stands above
//! an altitude.
//!
//! Altitudes are those of centres without refraction, seen from the site. Sunset and sunrise: the
//! Sun at −50′ (34′ of refraction, 16′ of semidiameter); twilights: −6°, −12°, −18°; moonrise and
//! moonset: the Moon's upper limb under 34′ of refraction. No dip of the horizon. The night runs
//! from local mean solar noon to the next.

use super::bodies::EphemerisError;
use super::earth_rotation::RotationQuality;
use super::frame::{altitude, azimuth};
use super::observer::Observer;
use super::place::{illuminated_fraction, moon_semidiameter};
use super::scales::Tt;
use super::site::HorizonProfile;
use super::star::StarMotion;
use super::track::{SkyTrack, StarTrack};
use crate::time::{Night, Span, SpanSet, Utc};
use crate::units::vector::Vec3;
use crate::units::{Angle, Crossing, Search, crossings};

/// Altitude of the Sun's centre at sunset and sunrise.
pub const SUNSET_ALTITUDE: Angle = Angle::from_deg(-50.0 / 60.0);
/// Altitude of the Sun's centre at the edge of civil twilight.
pub const CIVIL_ALTITUDE: Angle = Angle::from_deg(-6.0);
/// Altitude of the Sun's centre at the edge of nautical twilight.
pub const NAUTICAL_ALTITUDE: Angle = Angle::from_deg(-12.0);
/// Altitude of the Sun's centre at the edge of astronomical twilight.
pub const ASTRONOMICAL_ALTITUDE: Angle = Angle::from_deg(-18.0);
/// Refraction at the horizon in moonrise and moonset.
pub const HORIZON_REFRACTION: Angle = Angle::from_deg(34.0 / 60.0);

/// Samples are this far apart. The altitude of a body turns twice a day, so that two steps never
/// hold two turning points, which is what the search for crossings asks for.
const STEP_S: f64 = 900.0;
/// Crossings are placed to the millisecond.
const TOLERANCE_S: f64 = 0.0005;
/// How far outside the night the sky is looked at.
const PAD_MS: i64 = 1_800_000;

/// Whether a body goes through an altitude in a night.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum HorizonState {
    /// It passes through it.
    Crosses,
    /// It stays above, or at it.
    Above,
    /// It stays below.
    Below,
}

/// A body's passages through an altitude in a night.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Passages {
    /// Whether there is any.
    pub state: HorizonState,
    /// First passage downwards.
    pub down: Option<Utc>,
    /// First passage upwards after the one downwards; without one downwards, or when none follows
    /// it, the first upwards at all. (Two passages of one kind fit into a night only at high
    /// latitudes, when the body all but grazes the altitude.)
    pub up: Option<Utc>,
}

/// The Sun's passages in a night.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SunEvents {
    /// Sunset (down) and sunrise (up).
    pub horizon: Passages,
    /// Civil twilight: dusk (down) and dawn (up).
    pub civil: Passages,
    /// Nautical twilight.
    pub nautical: Passages,
    /// Astronomical twilight.
    pub astronomical: Passages,
}

/// The Moon's passages in a night.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct MoonEvents {
    /// Moonset (first downwards) and moonrise (first upwards, whichever comes first).
    pub horizon: Passages,
    /// Upper transit; one night a month has none.
    pub transit: Option<Transit>,
    /// Illuminated fraction in the middle of the night (local mean solar midnight), seen from the
    /// site.
    pub illuminated_fraction: f64,
}

/// An upper transit: hour angle zero.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Transit {
    /// When.
    pub at: Utc,
    /// Altitude then, without refraction.
    pub altitude: Angle,
}

/// A star's passages in a night.
#[derive(Clone, Debug, PartialEq)]
pub struct StarEvents {
    /// First upper transit (a night of 24 h has two when one falls into its first four minutes).
    pub transit: Option<Transit>,
    /// First setting below and first rising above the altitude asked for.
    pub horizon: Passages,
    /// When it stands at that altitude or above.
    pub above: SpanSet,
}

/// A night's sky, ready to be asked for its events.
#[derive(Clone, Debug)]
pub struct NightSky {
    night: Night,
    track: SkyTrack,
}

impl NightSky {
    /// Works out the slow part of the sky over the night, some 1 ms.
    ///
    /// # Errors
    /// [`EphemerisError::OutOfRange`] outside the years 1900 to 2100.
    pub fn of(observer: &Observer, night: Night) -> Result<Self, EphemerisError> {
        let padded = Span::new(
            night.span.start.plus_ms(-PAD_MS),
            night.span.end.plus_ms(PAD_MS),
        );
        let track = SkyTrack::over(observer, padded)?;
        Ok(NightSky { night, track })
    }

    /// The night.
    pub fn night(&self) -> Night {
        self.night
    }

    /// The worst quality of UT1 − UTC within the night.
    pub fn rotation_quality(&self) -> RotationQuality {
        self.track.ground.rotation.quality_over(self.night.span)
    }

    /// Sunset, twilights, sunrise.
    pub fn sun(&self) -> SunEvents {
        SunEvents {
            horizon: self.sun_passages(SUNSET_ALTITUDE),
            civil: self.sun_passages(CIVIL_ALTITUDE),
            nautical: self.sun_passages(NAUTICAL_ALTITUDE),
            astronomical: self.sun_passages(ASTRONOMICAL_ALTITUDE),
        }
    }

    /// The Sun's passages through any altitude.
    pub fn sun_passages(&self, limit: Angle) -> Passages {
        self.sun_course(limit).night_passages()
    }

    /// When the Sun stands below an altitude: one span on most nights; two where it rises above
    /// for a while about noon at the ends of the polar night; none in the polar day.
    pub fn sun_below(&self, limit: Angle) -> SpanSet {
        self.sun_course(limit).below()
    }

    /// The longest span with the Sun below an altitude; `None` when it never is.
    pub fn darkness(&self, limit: Angle) -> Option<Span> {
        longest(&self.sun_below(limit))
    }

    /// Moonrise, moonset, transit.
    pub fn moon(&self) -> MoonEvents {
        let limb = self.course(|utc| {
            let frame = self.track.frame(utc);
            let semidiameter = moon_semidiameter(frame.moon_distance_km());
            let limit = -(HORIZON_REFRACTION + semidiameter);
            (altitude(frame.moon_horizontal()) - limit).rad()
        });
        let middle = self
            .night
            .span
            .start
            .plus_ms(self.night.span.length_ms() / 2);
        MoonEvents {
            horizon: limb.first_passages(),
            transit: self.transit(|utc| self.track.frame(utc).moon_horizontal()),
            illuminated_fraction: illuminated_fraction(self.track.frame(middle).moon_phase_angle()),
        }
    }

    /// When the Moon's upper limb stands above the horizon, 34′ of refraction included.
    pub fn moon_up(&self) -> SpanSet {
        self.course(|utc| {
            let frame = self.track.frame(utc);
            let semidiameter = moon_semidiameter(frame.moon_distance_km());
            (altitude(frame.moon_horizontal()) + HORIZON_REFRACTION + semidiameter).rad()
        })
        .above()
    }

    /// Barycentric velocity correction of a star in m/s at an instant of the night, as
    /// [`super::SkyInstant::barycentric_correction_m_s`]: many visits of one night share its sky.
    pub fn barycentric_correction_m_s(&self, star: &StarMotion, utc: Utc) -> f64 {
        let years = Tt::from_utc(utc).0.julian_years();
        let frame = self.track.frame(utc);
        frame.velocity_correction_m_s(star.seen_from(years, frame.position_au))
    }

    /// A star's transit and its passages through an altitude (without refraction).
    pub fn star(&self, star: &StarMotion, limit: Angle) -> StarEvents {
        let path = self.track.star(star);
        let course = self.course(|utc| (altitude(self.star_at(&path, utc)) - limit).rad());
        StarEvents {
            transit: self.transit(|utc| self.star_at(&path, utc)),
            horizon: course.first_passages(),
            above: course.above(),
        }
    }

    /// When a star stands at an altitude or above and free of the horizon profile. The profile may
    /// turn sharply, so that it is followed minute by minute.
    pub fn star_clear(&self, star: &StarMotion, limit: Angle, horizon: &HorizonProfile) -> SpanSet {
        const PROFILE_STEP_S: f64 = 60.0;
        let path = self.track.star(star);
        let step_s = if horizon.points_deg().is_empty() {
            STEP_S
        } else {
            PROFILE_STEP_S
        };
        Course::sampled(self.night.span, step_s, |utc| {
            let direction = self.star_at(&path, utc);
            let free_deg = if horizon.points_deg().is_empty() {
                limit.deg()
            } else {
                horizon
                    .altitude_deg(azimuth(direction).deg())
                    .max(limit.deg())
            };
            altitude(direction).deg() - free_deg
        })
        .above()
    }

    /// The star's highest altitude without refraction within a span of the night; `None` for an
    /// empty span.
    pub fn highest(&self, star: &StarMotion, within: Span) -> Option<(Utc, Angle)> {
        if within.is_empty() {
            return None;
        }
        let path = self.track.star(star);
        let at = |utc: Utc| (utc, altitude(self.star_at(&path, utc)));
        let transit = self
            .transit(|utc| self.star_at(&path, utc))
            .filter(|t| within.contains(t.at))
            .map(|t| (t.at, t.altitude));
        let ends = [at(within.start), at(within.end.plus_ms(-1))];
        ends.into_iter()
            .chain(transit)
            .max_by(|a, b| a.1.rad().total_cmp(&b.1.rad()))
    }

    fn star_at(&self, path: &StarTrack, utc: Utc) -> Vec3 {
        self.track.star_horizontal(path, utc)
    }

    fn sun_course(&self, limit: Angle) -> Course {
        self.course(|utc| (altitude(self.track.frame(utc).sun_horizontal()) - limit).rad())
    }

    fn course(&self, height: impl Fn(Utc) -> f64) -> Course {
        Course::over(self.night.span, height)
    }

    /// First instant of hour angle zero.
    fn transit(&self, horizontal: impl Fn(Utc) -> Vec3) -> Option<Transit> {
        let (sin_lat, cos_lat) = self.track.ground.latitude_rad.sin_cos();
        // West component: zero on the whole meridian, rising through it at the upper transit.
        let west = |utc: Utc| -horizontal(utc)[1];
        let upper = |utc: Utc| {
            let [north, _, up] = horizontal(utc);
            cos_lat * up - sin_lat * north > 0.0
        };
        let course = Course::over(self.night.span, west);
        let at = course
            .crossings
            .iter()
            .filter(|(_, rising)| *rising)
            .map(|(at, _)| *at)
            .find(|at| upper(*at))?;
        Some(Transit {
            at,
            altitude: altitude(horizontal(at)),
        })
    }
}

/// The span of a night in which the Sun stands below an altitude, the longest where there are
/// two; `None` when it never does.
///
/// # Errors
/// [`EphemerisError::OutOfRange`] outside the years 1900 to 2100.
pub fn darkness(
    observer: &Observer,
    night: Night,
    sun_altitude: Angle,
) -> Result<Option<Span>, EphemerisError> {
    Ok(NightSky::of(observer, night)?.darkness(sun_altitude))
}

/// The longest of some spans, the first of equals.
pub(crate) fn longest(spans: &SpanSet) -> Option<Span> {
    // The first of equals: `max_by_key` alone would take the last.
    spans
        .spans()
        .iter()
        .rev()
        .max_by_key(|s| s.length_ms())
        .copied()
}

/// How a quantity goes above and below zero over a span.
pub(crate) struct Course {
    span: Span,
    starts_above: bool,
    crossings: Vec<(Utc, bool)>,
}

impl Course {
    /// A course whose turning points lie at least two samples of [`STEP_S`] apart.
    pub fn over(span: Span, height: impl Fn(Utc) -> f64) -> Self {
        Self::sampled(span, STEP_S, height)
    }

    fn sampled(span: Span, step_s: f64, height: impl Fn(Utc) -> f64) -> Self {
        let at = |seconds: f64| span.start.plus_ms((seconds * 1000.0).round() as i64);
        let found = crossings(
            |seconds| height(at(seconds)),
            Search {
                from: 0.0,
                to: span.length_ms() as f64 / 1000.0,
                step: step_s,
                tolerance: TOLERANCE_S,
            },
        );
        // The sky is finite within the range checked when the track was made, so that an error
        // cannot come; without crossings the course is told by its start.
        let crossings = found
            .unwrap_or_default()
            .into_iter()
            .map(
                |Crossing {
                     at: seconds,
                     rising,
                 }| (at(seconds), rising),
            )
            .collect();
        Course {
            span,
            starts_above: height(span.start) >= 0.0,
            crossings,
        }
    }

    fn state(&self) -> HorizonState {
        match (self.crossings.is_empty(), self.starts_above) {
            (false, _) => HorizonState::Crosses,
            (true, true) => HorizonState::Above,
            (true, false) => HorizonState::Below,
        }
    }

    fn first(&self, rising: bool) -> Option<Utc> {
        let of_kind = |c: &&(Utc, bool)| c.1 == rising;
        self.crossings.iter().find(of_kind).map(|c| c.0)
    }

    fn first_passages(&self) -> Passages {
        Passages {
            state: self.state(),
            down: self.first(false),
            up: self.first(true),
        }
    }

    fn night_passages(&self) -> Passages {
        let down = self.first(false);
        let following = self
            .crossings
            .iter()
            .find(|c| c.1 && down.is_some_and(|d| c.0 > d))
            .map(|c| c.0);
        Passages {
            state: self.state(),
            down,
            up: following.or_else(|| self.first(true)),
        }
    }

    pub fn above(&self) -> SpanSet {
        let mut spans = Vec::new();
        let mut since = self.starts_above.then_some(self.span.start);
        for &(at, rising) in &self.crossings {
            if rising {
                since = Some(at);
            } else if let Some(start) = since.take() {
                spans.push(Span::new(start, at));
            }
        }
        spans.extend(since.map(|start| Span::new(start, self.span.end)));
        SpanSet::from_spans(spans)
    }

    pub fn below(&self) -> SpanSet {
        SpanSet::from(self.span).subtract(&self.above())
    }
}
