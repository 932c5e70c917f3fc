//! Many realisations of a season, in step.

use rayon::prelude::*;
use thiserror::Error;

use super::realisation::{Realisation, Shared};
use super::results::SeasonResults;
use crate::ephemeris::{EphemerisError, Observer};
use crate::plan::solve::Settings as Search;
use crate::plan::{Calendar, History, SkyTable, accrual_first};
use crate::record::Visit;
use crate::settings::Settings;
use crate::sim::RehearsalError;
use crate::time::NightDate;

/// Steps of the search for each queue of a season.
const STEPS: u64 = 24;
/// Of these, steps of the bound, which price the night for the search.
const BOUND_STEPS: u64 = 1;

/// Which season.
#[derive(Clone, Debug, PartialEq)]
pub struct SeasonAsk {
    /// First night.
    pub first: NightDate,
    /// Number of nights.
    pub nights: u32,
    /// Number of realisations.
    pub realisations: u32,
    /// Seed of all chance.
    pub seed: u64,
}

/// Why a season cannot be simulated.
#[derive(Debug, Error)]
pub enum SeasonError {
    /// The sky is not known for that time.
    #[error(transparent)]
    Sky(#[from] EphemerisError),
    /// A night broke: a fault of the program, with what shows it again.
    #[error("realisation {realisation} of seed {seed} broke in the night {night}")]
    Night {
        /// The night.
        night: NightDate,
        /// The world's seed.
        seed: u64,
        /// Which realisation.
        realisation: u32,
        /// What broke.
        #[source]
        cause: Box<RehearsalError>,
    },
    /// The threads could not be started.
    #[error("the threads cannot be started")]
    Threads(#[from] rayon::ThreadPoolBuildError),
}

/// A season's realisations, ready to run.
pub struct Ensemble<'a> {
    settings: &'a Settings,
    observer: &'a Observer,
    ask: SeasonAsk,
    calendar: Calendar,
    realisations: Vec<Realisation>,
}

impl<'a> Ensemble<'a> {
    /// From the visits before the season.
    ///
    /// # Errors
    /// [`SeasonError::Sky`] outside the years that the sky is known for.
    pub fn new(
        settings: &'a Settings,
        observer: &'a Observer,
        ask: SeasonAsk,
        visits: &[Visit],
    ) -> Result<Self, SeasonError> {
        let survey = &settings.survey;
        let history = History::new(survey, observer, visits)?;
        let first = accrual_first(survey, history.first_night(), ask.first);
        let last = ask.first.plus_nights(i64::from(ask.nights));
        let calendar = Calendar::compute(survey, observer, first, last)?;
        let realisations = (0..ask.realisations)
            .map(|number| Realisation::new(&ask, settings, history.clone(), number))
            .collect();
        Ok(Ensemble {
            settings,
            observer,
            ask,
            calendar,
            realisations,
        })
    }

    /// Lets all nights happen, on so many threads; the results do not depend on how many. `done`
    /// hears of each realisation's night.
    ///
    /// # Errors
    /// [`SeasonError`], with the realisation that shows it.
    pub fn run(
        mut self,
        threads: usize,
        done: &(dyn Fn() + Sync),
    ) -> Result<SeasonResults, SeasonError> {
        let pool = rayon::ThreadPoolBuilder::new()
            .num_threads(threads)
            .build()?;
        let search = Search {
            seed: self.settings.survey.planning.seed,
            steps: STEPS,
            bound_steps: BOUND_STEPS,
            ..Search::default()
        };
        for index in 0..i64::from(self.ask.nights) {
            let date = self.ask.first.plus_nights(index);
            let survey = &self.settings.survey;
            let sky = SkyTable::compute(survey, self.observer, date)?;
            let shared = Shared {
                survey,
                observer: self.observer,
                calendar: &self.calendar,
                sky: &sky,
                search: &search,
            };
            let nights = &mut self.realisations;
            pool.install(|| {
                nights.par_iter_mut().try_for_each(|realisation| {
                    realisation.night(&shared)?;
                    done();
                    Ok::<(), SeasonError>(())
                })
            })?;
        }
        let tallies: Vec<_> = self.realisations.iter().map(|r| r.tally()).collect();
        Ok(SeasonResults::of(
            &self.settings.survey,
            &self.calendar,
            &self.ask,
            &tallies,
        ))
    }
}
