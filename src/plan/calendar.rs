//! On which nights each star can be observed at all, as far as geometry and allocation say.

use rayon::prelude::*;

use crate::catalogue::{Survey, Target};
use crate::ephemeris::{EphemerisError, Observer, Visibility};
use crate::score::{Photometer, Standing};
use crate::time::NightDate;

/// A run of so many nights without a chance ends a star's season.
pub const SEASON_GAP_NIGHTS: i64 = 30;

/// How far ahead the calendar looks from its last night, so that seasons' ends come into sight.
pub const LOOK_AHEAD_NIGHTS: i64 = 370;

/// Seconds that a visit is taken to need where its exposure cannot be worked out.
const FALLBACK_S: f64 = 1200.0;

/// Nights on which each target can be observed.
#[derive(Clone, Debug, PartialEq)]
pub struct Calendar {
    first: NightDate,
    /// By target, then by night from `first`.
    observable: Vec<Vec<bool>>,
}

impl Calendar {
    /// Works out the nights from `first` to `last`, and as many beyond as seasons need.
    ///
    /// A star can be observed on a night when the night is ours and the star stands above its
    /// lowest altitude for as long as its best visit takes, in darkness. Moon, horizon profile and
    /// weather do not count: debt accrues on nights that they take.
    ///
    /// # Errors
    /// [`EphemerisError`] outside the years that the sky is known for.
    pub fn compute(
        survey: &Survey,
        observer: &Observer,
        first: NightDate,
        last: NightDate,
    ) -> Result<Self, EphemerisError> {
        let count = last.nights_since(first).max(0) + 1 + LOOK_AHEAD_NIGHTS;
        let darkness_altitude = survey.planning.darkness_sun_altitude;
        let nights = Visibility::over(observer, first, count as usize, darkness_altitude)?;
        let observable = survey
            .targets
            .par_iter()
            .map(|target| {
                let needed_ms = ms_needed(survey, target);
                let own = target.limits.min_altitude;
                let mount = survey.telescope.min_altitude;
                let lowest = own.filter(|own| *own > mount).unwrap_or(mount);
                let above = nights.above_ms(&target.star, lowest);
                let ours = |index: usize| {
                    let night = first.plus_nights(index as i64);
                    survey.allocation.is_ours(night)
                };
                above
                    .iter()
                    .enumerate()
                    .map(|(index, ms)| *ms >= needed_ms && ours(index))
                    .collect()
            })
            .collect();
        Ok(Calendar { first, observable })
    }

    /// Whether the target can be observed on that night; false outside the calendar.
    pub fn is_observable(&self, target: usize, night: NightDate) -> bool {
        let index = night.nights_since(self.first);
        usize::try_from(index)
            .ok()
            .and_then(|index| self.observable.get(target)?.get(index))
            .copied()
            .unwrap_or(false)
    }

    /// Nights in `from ≤ night < until` on which the target can be observed.
    pub fn observable_nights(&self, target: usize, from: NightDate, until: NightDate) -> u32 {
        let index = |night: NightDate| night.nights_since(self.first).max(0) as usize;
        let Some(nights) = self.observable.get(target) else {
            return 0;
        };
        let until = index(until).min(nights.len());
        let from = index(from).min(until);
        nights[from..until].iter().filter(|up| **up).count() as u32
    }

    /// Nights from `tonight` on, until the season ends or `last`, on which it can be observed.
    fn remaining(&self, target: usize, tonight: NightDate, last: Option<NightDate>) -> u32 {
        let Some(nights) = self.observable.get(target) else {
            return 0;
        };
        let start = tonight.nights_since(self.first).max(0);
        let end = last.map_or(nights.len() as i64, |last| {
            last.nights_since(self.first) + 1
        });
        let mut count = 0;
        let mut without = 0;
        for index in start..end.min(nights.len() as i64) {
            if nights[index as usize] {
                count += 1;
                without = 0;
            } else {
                without += 1;
            }
            if without >= SEASON_GAP_NIGHTS {
                break;
            }
        }
        count
    }

    /// Fills in what geometry decides of a standing: the nights accrued and those that remain.
    pub fn complete(
        &self,
        standing: &mut Standing,
        target: (usize, &Target),
        accrual_first: NightDate,
        tonight: NightDate,
    ) {
        let (index, target) = target;
        let (from, until) = accrual_span(target, accrual_first, tonight);
        standing.accrued_nights = self.observable_nights(index, from, until);
        standing.remaining_nights = self.remaining(index, tonight, target.cadence.last_night);
    }
}

/// The nights `from ≤ night < until` that count for a target's cadence, for an accrual from
/// `accrual_first` and a night `tonight` that is left out.
pub fn accrual_span(
    target: &Target,
    accrual_first: NightDate,
    tonight: NightDate,
) -> (NightDate, NightDate) {
    let cadence = &target.cadence;
    let from = cadence
        .first_night
        .map_or(accrual_first, |own| own.max(accrual_first));
    let until = cadence
        .last_night
        .map_or(tonight, |last| tonight.min(last.plus_nights(1)));
    (from, until)
}

fn ms_needed(survey: &Survey, target: &Target) -> i64 {
    let best = Photometer::new(survey, target).best();
    let needed_s = best.map_or(FALLBACK_S, |exposing| exposing.duration_s);
    (needed_s * 1000.0) as i64
}
