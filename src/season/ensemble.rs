//! Many realisations of a season, in step.

use rayon::prelude::*;
use thiserror::Error;

use super::frame::{Frame, fingerprint};
use super::realisation::{Realisation, Shared};
use super::realised::Realised;
use super::replay::Blocks;
use super::results::SeasonResults;
use super::store::{Store, StoreError};
use crate::ephemeris::{EphemerisError, Observer};
use crate::plan::solve::Settings as Search;
use crate::plan::{Calendar, History, SkyTable, accrual_first};
use crate::record::Visit;
use crate::settings::Settings;
use crate::sim::{Record, RehearsalError};
use crate::time::NightDate;

/// Steps of the search for each queue of a season.
const STEPS: u64 = 24;
/// Of these, steps of the bound, which price the night for the search.
const BOUND_STEPS: u64 = 1;
/// Realisations that go through the season together: what the sky decides is worked out once for
/// all of them, and they are kept when all have ended. More would cost memory, and more to an
/// interruption.
const TOGETHER: usize = 24;

/// Which season.
#[derive(Clone, Debug, PartialEq)]
pub struct SeasonAsk {
    /// First night.
    pub first: NightDate,
    /// Number of nights.
    pub nights: u32,
    /// Seed of all chance.
    pub seed: u64,
}

impl SeasonAsk {
    /// The night after the last.
    pub fn end(&self) -> NightDate {
        self.first.plus_nights(i64::from(self.nights))
    }

    /// The nights in order.
    pub fn dates(&self) -> impl Iterator<Item = NightDate> + '_ {
        (0..i64::from(self.nights)).map(|index| self.first.plus_nights(index))
    }
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
    /// A rule was not kept: a fault of the program, with what shows it again.
    #[error("realisation {realisation} of seed {seed} broke a rule, {night}: {detail}")]
    Violated {
        /// The night, or the season's end.
        night: String,
        /// The world's seed.
        seed: u64,
        /// Which realisation.
        realisation: u32,
        /// What was broken.
        detail: String,
    },
    /// The weather record has nothing for that time of the year.
    #[error("the weather record has nothing for evenings about that of {night}, in any year")]
    NoWeather {
        /// The night.
        night: NightDate,
    },
    /// The threads could not be started.
    #[error("the threads cannot be started")]
    Threads(#[from] rayon::ThreadPoolBuildError),
    /// Realisations could not be kept or read.
    #[error(transparent)]
    Store(#[from] StoreError),
}

/// Which realisations to run, and how.
#[derive(Clone, Debug, PartialEq)]
pub struct Effort {
    /// Numbers of the realisations, rising.
    pub numbers: Vec<u32>,
    /// Threads; 0: one a core.
    pub threads: usize,
    /// End as soon as no odds are less certain than this (see [`SeasonResults::worst_error`]).
    pub until_error: Option<f64>,
}

/// A season, ready to run.
pub struct Ensemble<'a> {
    settings: &'a Settings,
    observer: &'a Observer,
    ask: SeasonAsk,
    calendar: Calendar,
    history: History,
    before: &'a [Visit],
    record: Option<&'a Record>,
    frame: Frame,
}

impl<'a> Ensemble<'a> {
    /// From the visits before the season; the weather is drawn, or taken from a record.
    ///
    /// # Errors
    /// [`SeasonError::Sky`] outside the years that the sky is known for.
    pub fn new(
        (settings, observer): (&'a Settings, &'a Observer),
        ask: SeasonAsk,
        before: &'a [Visit],
        record: Option<&'a Record>,
    ) -> Result<Self, SeasonError> {
        let survey = &settings.survey;
        let history = History::new(survey, observer, before)?;
        let first = accrual_first(survey, history.first_night(), ask.first);
        let calendar = Calendar::compute(survey, observer, first, ask.end())?;
        let weather = record.map(|record| (record.span(), record.samples().len()));
        let print = fingerprint(&[
            &format!("{survey:?}"),
            &format!("{:?}{:?}", settings.weather, settings.climate),
            &format!("{before:?}"),
            &format!("{weather:?}"),
        ]);
        let frame = Frame::of(settings, &calendar, &history, &ask, print);
        Ok(Ensemble {
            settings,
            observer,
            ask,
            calendar,
            history,
            before,
            record,
            frame,
        })
    }

    /// What all realisations have in common.
    pub fn frame(&self) -> &Frame {
        &self.frame
    }

    /// Lets all realisations happen that are not in the store yet, and keeps each. The answer does
    /// not depend on threads, nor on what was kept before. `done` hears of so many nights more.
    ///
    /// # Errors
    /// [`SeasonError`], with the realisation that shows it.
    pub fn run(
        &self,
        effort: &Effort,
        store: Option<&Store>,
        done: &(dyn Fn(u64) + Sync),
    ) -> Result<Vec<Realised>, SeasonError> {
        let pool = rayon::ThreadPoolBuilder::new()
            .num_threads(effort.threads)
            .build()?;
        let mut all = Vec::new();
        for numbers in effort.numbers.chunks(TOGETHER) {
            let mut missing = Vec::new();
            for number in numbers {
                match store.map_or(Ok(None), |store| store.read(*number))? {
                    Some(realised) => {
                        done(u64::from(self.ask.nights));
                        all.push(realised);
                    }
                    None => missing.push(*number),
                }
            }
            if !missing.is_empty() {
                let ended = pool.install(|| self.together(&missing, done))?;
                for realised in &ended {
                    if let Some(store) = store {
                        store.write(realised)?;
                    }
                }
                all.extend(ended);
            }
            let so_far = SeasonResults::of(&self.frame, &all);
            if effort
                .until_error
                .is_some_and(|wanted| so_far.worst_error() <= wanted)
            {
                break;
            }
        }
        all.sort_by_key(|realised| realised.number);
        Ok(all)
    }

    /// Some realisations side by side, night by night.
    fn together(
        &self,
        numbers: &[u32],
        done: &(dyn Fn(u64) + Sync),
    ) -> Result<Vec<Realised>, SeasonError> {
        let survey = &self.settings.survey;
        let search = Search {
            seed: survey.planning.seed,
            steps: STEPS,
            bound_steps: BOUND_STEPS,
            ..Search::default()
        };
        let blocks = self.record.map(|record| Blocks {
            record,
            longitude: survey.site.longitude,
            first: self.ask.first,
            seed: self.ask.seed,
        });
        let shared = Shared {
            survey,
            observer: self.observer,
            calendar: &self.calendar,
            frame: &self.frame,
            ask: &self.ask,
            search: &search,
            blocks: blocks.as_ref(),
            before: self.before,
        };
        let mut realisations: Vec<Realisation> = numbers
            .iter()
            .map(|number| Realisation::new(&self.ask, self.settings, self.history.clone(), *number))
            .collect();
        let sky_of = |date| SkyTable::compute(survey, self.observer, date);
        let mut next = sky_of(self.ask.first)?;
        for index in 0..self.ask.nights {
            let sky = next;
            let night = || {
                realisations.par_iter_mut().try_for_each(|realisation| {
                    realisation.night(&shared, (index, &sky))?;
                    done(1);
                    Ok::<(), SeasonError>(())
                })
            };
            // The next night's sky is worked out beside this night, so that no core waits for it.
            let after = sky.night.date.plus_nights(1);
            let (happened, sky) = rayon::join(night, || sky_of(after));
            happened?;
            next = sky?;
        }
        realisations
            .into_par_iter()
            .map(|realisation| realisation.end(&shared))
            .collect()
    }
}
