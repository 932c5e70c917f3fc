//! A night's sky as the planner reads it: a one-minute grid of darkness with every star's place,
//! broken limits and background. It depends on nothing that happens in the night, so a season
//! computes it once and shares it between all its realisations.

use crate::catalogue::Survey;
use crate::ephemeris::{
    EphemerisError, MoonGeometry, NightGrid, Observer, SkyBrightness, StarCourse, darkness,
};
use crate::score::Conditions;
use crate::time::{MINUTE_MS, Night, NightDate, Span, Utc};
use crate::units::Angle;

use super::limits::{Limits, View, broken};
use super::slew::{Pointing, setup_s, setup_without_slew_s};

/// Minutes for which one table of set-ups is used. An alt-azimuth mount's change through the night;
/// each table holds the larger of its two ends.
pub const SETUP_EPOCH_SLOTS: usize = 15;

/// Colour V − band of scattered moonlight for a red band, magnitudes: sunlight has about 0.7 in I.
const MOONLIGHT_V_MINUS_BAND_MAG: f64 = 0.7;

/// The sky of one night.
#[derive(Clone, Debug)]
pub struct SkyTable {
    /// The night.
    pub night: Night,
    /// Its darkness; `None` when the sun stays too high.
    pub darkness: Option<Span>,
    /// The night is ours.
    pub ours: bool,
    /// Whole minutes of darkness.
    pub slots: usize,
    /// The survey's targets, in its order.
    pub stars: Vec<StarNight>,
    /// Minutes at which nothing may be planned.
    unusable: Vec<bool>,
    /// Whole minutes from star to star: epoch by epoch, row by row.
    star_setups: Vec<u8>,
}

/// One star's night, a value a minute.
#[derive(Clone, Debug)]
pub struct StarNight {
    /// Limits broken by geometry and moon.
    pub limits: Vec<Limits>,
    altitude_deg: Vec<f32>,
    azimuth_deg: Vec<f32>,
    hour_angle_deg: Vec<f32>,
    airmass: Vec<f32>,
    moon_separation_deg: Vec<f32>,
    sky_mag_arcsec2: Vec<f32>,
    declination_deg: f64,
    first_bjd_tdb: f64,
    bjd_tdb_per_slot: f64,
}

impl StarNight {
    /// Where it stands.
    pub fn pointing(&self, slot: usize) -> Pointing {
        Pointing {
            altitude_deg: f64::from(self.altitude_deg[slot]),
            azimuth_deg: f64::from(self.azimuth_deg[slot]),
            hour_angle_deg: f64::from(self.hour_angle_deg[slot]),
            declination_deg: self.declination_deg,
        }
    }

    /// Airmass.
    pub fn airmass(&self, slot: usize) -> f64 {
        f64::from(self.airmass[slot])
    }

    /// Distance to the moon, degrees.
    pub fn moon_separation_deg(&self, slot: usize) -> f64 {
        f64::from(self.moon_separation_deg[slot])
    }

    /// The minute at the solar system's barycentre, BJD_TDB in days. A straight line through the
    /// night: its bend stays below a tenth of a second.
    pub fn bjd_tdb(&self, slot: usize) -> f64 {
        self.first_bjd_tdb + self.bjd_tdb_per_slot * slot as f64
    }
}

impl SkyTable {
    /// Computes the sky of a night.
    ///
    /// # Errors
    /// [`EphemerisError`] outside the years that the sky is known for.
    pub fn compute(
        survey: &Survey,
        observer: &Observer,
        date: NightDate,
    ) -> Result<Self, EphemerisError> {
        let night = Night::of(date, survey.site.longitude);
        let dark = darkness(observer, night, survey.planning.darkness_sun_altitude)?;
        let slots = dark.map_or(0, |span| (span.length_ms() / MINUTE_MS) as usize);
        let mut sky = SkyTable {
            night,
            darkness: dark,
            ours: survey.allocation.is_ours(date),
            slots,
            stars: Vec::new(),
            unusable: Vec::new(),
            star_setups: Vec::new(),
        };
        let Some(span) = dark else {
            return Ok(sky);
        };
        sky.unusable = (0..slots)
            .map(|slot| !sky.ours || survey.allocation.blocked.contains(sky.instant(slot)))
            .collect();
        let stars: Vec<_> = survey.targets.iter().map(|t| t.star.clone()).collect();
        let grid = NightGrid::compute(observer, &stars, span)?;
        sky.stars = (0..stars.len())
            .map(|index| star_night(survey, &grid, index, slots))
            .collect();
        sky.star_setups = star_setups(survey, &sky.stars, slots);
        Ok(sky)
    }

    /// The instant at which a minute begins; minute 0 is the start of darkness.
    pub fn instant(&self, slot: usize) -> Utc {
        let start = self
            .darkness
            .map_or(self.night.span.start, |span| span.start);
        start.plus_ms(slot as i64 * MINUTE_MS)
    }

    /// The first minute that begins at or after an instant, at most [`SkyTable::slots`].
    pub fn first_slot_from(&self, at: Utc) -> usize {
        let after_ms = (at - self.instant(0)).max(0) as usize;
        after_ms.div_ceil(MINUTE_MS as usize).min(self.slots)
    }

    /// Whether anything may be planned at that minute.
    pub fn is_usable(&self, slot: usize) -> bool {
        self.unusable.get(slot) == Some(&false)
    }

    /// What the photon model needs to know of a star's minute.
    pub fn conditions(&self, star: usize, slot: usize, zenith_seeing_arcsec: f64) -> Conditions {
        let track = &self.stars[star];
        Conditions {
            utc: self.instant(slot),
            bjd_tdb: track.bjd_tdb(slot),
            airmass: track.airmass(slot),
            zenith_seeing_arcsec,
            sky_mag_arcsec2: f64::from(track.sky_mag_arcsec2[slot]),
        }
    }

    /// Tables of set-ups in the night, at least one.
    pub fn setup_epochs(&self) -> usize {
        self.slots.div_ceil(SETUP_EPOCH_SLOTS).max(1)
    }

    /// Whole minutes from star to star for a departure in an epoch.
    pub fn star_setup_slots(&self, epoch: usize, from: usize, to: usize) -> usize {
        let n = self.stars.len();
        let index = (epoch * n + from) * n + to;
        usize::from(self.star_setups.get(index).copied().unwrap_or(u8::MAX))
    }

    /// Seconds from star to star as they stand at a minute.
    pub fn star_setup_s(&self, survey: &Survey, from: usize, to: usize, slot: usize) -> f64 {
        setup_s(
            &survey.telescope,
            &self.stars[from].pointing(slot),
            &self.stars[to].pointing(slot),
        )
    }

    /// Whole minutes from where the telescope points (`None`: parked, slewing before it is free)
    /// to a star (`None`: no pointing needed).
    pub fn setup_slots(
        &self,
        survey: &Survey,
        from: Option<usize>,
        to: Option<usize>,
        slot: usize,
    ) -> usize {
        match (from, to) {
            (_, None) => 0,
            (None, Some(_)) => whole_minutes(setup_without_slew_s(&survey.telescope)),
            (Some(from), Some(to)) => self.star_setup_slots(slot / SETUP_EPOCH_SLOTS, from, to),
        }
    }
}

/// Whole minutes that hold so many seconds.
pub(super) fn whole_minutes(seconds: f64) -> usize {
    (seconds / 60.0).ceil() as usize
}

fn star_night(survey: &Survey, grid: &NightGrid, index: usize, slots: usize) -> StarNight {
    let course = &grid.stars()[index];
    let sky = SkyBrightness {
        dark_zenith_mag_arcsec2: survey.instrument.dark_sky_mag_arcsec2,
        extinction_mag_airmass: survey.instrument.extinction_mag_airmass,
        moonlight_v_minus_band_mag: MOONLIGHT_V_MINUS_BAND_MAG,
    };
    let bjd_tdb = |slot: usize| grid.bjd_tdb(index, slot).map_or(f64::NAN, |jd| jd.single());
    let first_bjd_tdb = bjd_tdb(0);
    let spread = slots.saturating_sub(1).max(1);
    let mut star = StarNight {
        limits: Vec::with_capacity(slots),
        altitude_deg: Vec::with_capacity(slots),
        azimuth_deg: Vec::with_capacity(slots),
        hour_angle_deg: Vec::with_capacity(slots),
        airmass: Vec::with_capacity(slots),
        moon_separation_deg: Vec::with_capacity(slots),
        sky_mag_arcsec2: Vec::with_capacity(slots),
        declination_deg: declination_deg(survey, course, slots / 2),
        first_bjd_tdb,
        bjd_tdb_per_slot: (bjd_tdb(slots.saturating_sub(1)) - first_bjd_tdb) / spread as f64,
    };
    // The sun moves a degree a day: one look at it serves the night.
    let sun_separation_deg = grid.sun_separation_deg(index, slots / 2).unwrap_or(180.0);
    for slot in 0..slots {
        let hour_angle_deg = grid.hour_angle_deg(index, slot).unwrap_or(0.0);
        let slow = (star.declination_deg, sun_separation_deg);
        let view = view(grid, (index, slot), hour_angle_deg, slow);
        let sky_mag = sky.with_moon(&MoonGeometry {
            phase_angle: Angle::from_deg(grid.moon_phase_angle_deg[slot]),
            moon_altitude: Angle::from_deg(view.moon_altitude_deg),
            target_altitude: Angle::from_deg(view.pointing.altitude_deg),
            separation: Angle::from_deg(view.moon_separation_deg),
        });
        let target = &survey.targets[index];
        star.limits.push(broken(
            &survey.telescope,
            &survey.site.horizon,
            target,
            &view,
        ));
        star.altitude_deg.push(view.pointing.altitude_deg as f32);
        star.azimuth_deg.push(view.pointing.azimuth_deg as f32);
        star.hour_angle_deg
            .push(view.pointing.hour_angle_deg as f32);
        star.airmass.push(view.airmass as f32);
        star.moon_separation_deg
            .push(view.moon_separation_deg as f32);
        star.sky_mag_arcsec2.push(sky_mag as f32);
    }
    star
}

/// What a star offers at an instant of the grid, (star, instant), with what changes little in a
/// night: its declination of date and its distance to the sun, degrees.
pub(super) fn view(
    grid: &NightGrid,
    (index, slot): (usize, usize),
    hour_angle_deg: f64,
    (declination_deg, sun_separation_deg): (f64, f64),
) -> View {
    let course = &grid.stars()[index];
    View {
        pointing: Pointing {
            altitude_deg: course.altitude_deg[slot],
            azimuth_deg: course.azimuth_deg[slot],
            hour_angle_deg,
            declination_deg,
        },
        airmass: course.airmass[slot],
        moon_separation_deg: course.moon_separation_deg[slot],
        moon_altitude_deg: grid.moon_altitude_deg[slot],
        sun_separation_deg,
    }
}

/// Declination of date from a place in the horizon frame (spherical triangle pole–zenith–star).
pub(super) fn declination_deg(survey: &Survey, course: &StarCourse, slot: usize) -> f64 {
    let (Some(altitude), Some(azimuth)) =
        (course.altitude_deg.get(slot), course.azimuth_deg.get(slot))
    else {
        return 0.0;
    };
    let (sin_lat, cos_lat) = survey.site.latitude.rad().sin_cos();
    let (sin_alt, cos_alt) = altitude.to_radians().sin_cos();
    let sine = sin_alt * sin_lat + cos_alt * cos_lat * azimuth.to_radians().cos();
    sine.clamp(-1.0, 1.0).asin().to_degrees()
}

fn star_setups(survey: &Survey, stars: &[StarNight], slots: usize) -> Vec<u8> {
    let epochs = slots.div_ceil(SETUP_EPOCH_SLOTS).max(1);
    let n = stars.len();
    let mut table = vec![0u8; epochs * n * n];
    let last = slots.saturating_sub(1);
    for slot in (0..=epochs).map(|epoch| (epoch * SETUP_EPOCH_SLOTS).min(last)) {
        let at: Vec<Pointing> = stars.iter().map(|star| star.pointing(slot)).collect();
        let edge = slot.div_ceil(SETUP_EPOCH_SLOTS);
        for (from, from_at) in at.iter().enumerate() {
            for (to, to_at) in at.iter().enumerate() {
                let minutes = whole_minutes(setup_s(&survey.telescope, from_at, to_at));
                let minutes = u8::try_from(minutes).unwrap_or(u8::MAX);
                // An edge between two epochs counts for both.
                for epoch in [edge.checked_sub(1), Some(edge)].into_iter().flatten() {
                    if epoch < epochs {
                        let cell = &mut table[(epoch * n + from) * n + to];
                        *cell = (*cell).max(minutes);
                    }
                }
            }
        }
    }
    table
}
