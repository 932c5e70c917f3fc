//! When each star could have been observed in a night that is over: the planner's own limits on a
//! coarse grid, for many nights.

use crate::catalogue::{Mount, Survey};
use crate::ephemeris::{EphemerisError, NightGrid, Observer};
use crate::time::{Span, Utc};

use super::limits::{Limit, Limits, broken};
use super::sky_table::{declination_deg, view};

/// Limits broken by each star through a darkness, at even steps.
#[derive(Clone, Debug)]
pub struct Reach {
    instants: Vec<Utc>,
    /// Star by star.
    limits: Vec<Vec<Limits>>,
}

impl Reach {
    /// For every target of the survey, at the start of darkness and every `step_ms` after it.
    ///
    /// # Errors
    /// [`EphemerisError`] outside the years that the sky is known for.
    pub fn compute(
        survey: &Survey,
        observer: &Observer,
        darkness: Span,
        step_ms: i64,
    ) -> Result<Self, EphemerisError> {
        let stars: Vec<_> = survey.targets.iter().map(|t| t.star.clone()).collect();
        let grid = NightGrid::compute_every(observer, &stars, darkness, step_ms)?;
        let limits = (0..stars.len())
            .map(|star| limits_of(survey, &grid, star))
            .collect();
        Ok(Reach {
            instants: grid.instants().collect(),
            limits,
        })
    }

    /// The instants.
    pub fn instants(&self) -> &[Utc] {
        &self.instants
    }

    /// A star at each instant: within its limits but for the moon's, and within the moon's.
    pub fn of(&self, star: usize) -> impl Iterator<Item = (bool, bool)> + '_ {
        let limits = self.limits.get(star).map_or(&[][..], Vec::as_slice);
        limits.iter().map(|broken| {
            let moon = broken.has(Limit::Moon);
            let alone = *broken == Limits::NONE.with_if(Limit::Moon, moon);
            (alone, !moon)
        })
    }
}

fn limits_of(survey: &Survey, grid: &NightGrid, star: usize) -> Vec<Limits> {
    let target = &survey.targets[star];
    let middle = grid.len() / 2;
    let sun_deg = grid.sun_separation_deg(star, middle).unwrap_or(180.0);
    let declination = declination_deg(survey, &grid.stars()[star], middle);
    let lowest = target.limits.min_altitude.map_or(f64::MIN, |a| a.deg());
    let lowest_deg = lowest.max(survey.telescope.min_altitude.deg());
    (0..grid.len())
        .map(|instant| {
            // Most of the sky is too low most of the time, and then nothing else matters.
            if grid.stars()[star].altitude_deg[instant] < lowest_deg {
                return Limits::NONE.with(Limit::Altitude);
            }
            // Only some mounts ask for it, and it costs more than all the rest.
            let hour_angle_deg = match survey.telescope.mount {
                Mount::AltAzimuth { .. } => 0.0,
                Mount::Equatorial { .. } => grid.hour_angle_deg(star, instant).unwrap_or(0.0),
            };
            let place = (star, instant);
            let view = view(grid, place, hour_angle_deg, (declination, sun_deg));
            broken(&survey.telescope, &survey.site.horizon, target, &view)
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::ephemeris::EarthRotation;
    use crate::plan::SkyTable;
    use crate::score::fixtures;
    use crate::time::{MINUTE_MS, NightDate};

    #[test]
    fn it_agrees_with_the_planners_own_night() {
        let survey = fixtures::survey();
        let observer = Observer::new(survey.site.clone(), EarthRotation::absent());
        let night = NightDate::parse("2026-12-20").unwrap();
        let sky = SkyTable::compute(&survey, &observer, night).unwrap();
        let darkness = sky.darkness.unwrap();
        let reach = Reach::compute(&survey, &observer, darkness, 5 * MINUTE_MS).unwrap();
        let mut open = 0;
        for star in 0..survey.targets.len() {
            for (step, (within, moonless)) in reach.of(star).enumerate() {
                let Some(limits) = sky.stars[star].limits.get(5 * step) else {
                    continue;
                };
                assert_eq!(within && moonless, limits.is_empty(), "{star} {step}");
                open += usize::from(within);
            }
        }
        assert!(open > 5, "{open}");
    }
}
