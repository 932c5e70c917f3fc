//! One way in which the season could go.

use crate::catalogue::Survey;
use crate::ephemeris::Observer;
use crate::night::NightRules;
use crate::plan::solve::Settings as Search;
use crate::plan::{Calendar, Desk, History, SkyTable};
use crate::ports::Ledger;
use crate::record::DarknessSplit;
use crate::settings::Settings;
use crate::sim::{MemoryLedger, RehearsalError, Unwatched, World, rehearse_night};

use super::ensemble::{SeasonAsk, SeasonError};

/// What a realisation has gathered so far.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Tally {
    /// Credit of the season's visits, by target.
    pub credited: Vec<f64>,
    /// Where the darkness went.
    pub split: DarknessSplit,
    /// The darkness, milliseconds.
    pub darkness_ms: i64,
}

/// A season under way.
pub struct Realisation {
    number: u32,
    world: World,
    history: History,
    tally: Tally,
}

/// What all realisations share in a night.
pub(super) struct Shared<'a> {
    pub survey: &'a Survey,
    pub observer: &'a Observer,
    pub calendar: &'a Calendar,
    pub sky: &'a SkyTable,
    pub search: &'a Search,
}

impl Realisation {
    /// At the season's beginning, with the history that it starts from.
    pub(super) fn new(ask: &SeasonAsk, settings: &Settings, history: History, number: u32) -> Self {
        let mut rules = NightRules::new(settings.weather.clone());
        rules.blocked = settings.survey.allocation.blocked.clone();
        let world = World::new(ask.seed, number, settings.climate.clone(), rules);
        let tally = Tally {
            credited: vec![0.0; settings.survey.targets.len()],
            ..Tally::default()
        };
        Realisation {
            number,
            world,
            history,
            tally,
        }
    }

    /// What it has gathered.
    pub fn tally(&self) -> &Tally {
        &self.tally
    }

    /// Lets a night happen and remembers it.
    pub(super) fn night(&mut self, shared: &Shared<'_>) -> Result<(), SeasonError> {
        let night = shared.sky.night.date;
        let broken = |cause: RehearsalError| SeasonError::Night {
            night,
            seed: self.world.seed,
            realisation: self.number,
            cause: Box::new(cause),
        };
        let mut ledger = MemoryLedger::default();
        let desk = Desk::new(
            shared.survey,
            shared.observer,
            shared.calendar,
            shared.sky,
            self.history.clone(),
        );
        let mut world = self.world.clone();
        let here = (&desk, shared.sky);
        let summary = rehearse_night(&mut world, here, shared.search, &mut ledger, &mut Unwatched)
            .map_err(broken)?;
        let visits = ledger
            .visits(None)
            .map_err(|fault| broken(RehearsalError::Night(fault.into())))?;
        self.world = world;
        for visit in &visits {
            self.history.add(shared.survey, shared.observer, visit)?;
        }
        self.tally.darkness_ms += summary.darkness.map_or(0, |span| span.length_ms());
        self.tally.split.add(&summary.split);
        for (star, total) in self.tally.credited.iter_mut().enumerate() {
            let tonight = self.history.credited(star).iter().rev();
            let tonight = tonight.take_while(|visit| visit.night == night);
            *total += tonight.map(|visit| visit.credit).sum::<f64>();
        }
        Ok(())
    }
}
