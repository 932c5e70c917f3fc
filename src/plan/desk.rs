//! Where a night's plans are made: the survey, the sky and what has been credited, put together
//! once a night and asked as often as the night changes.

use thiserror::Error;

use crate::catalogue::Survey;
use crate::ephemeris::{EphemerisError, Observer};
use crate::record::Visit;
use crate::score::{Coverage, CreditedVisit, Photometer, Scorer, Standing, Tonight, share_factors};
use crate::time::{NightDate, Span, Utc};

use super::calendar::Calendar;
use super::credits::Credits;
use super::solve::{ProblemError, Settings};
use super::{
    Ask, HourPrice, NightProblem, Planned, SkyTable, Valuer, hour_prices, plan, problem_of,
};

/// The survey's visits so far, as far as scoring needs them: kept up to date visit by visit, so that
/// a long history is read once.
#[derive(Clone, Debug)]
pub struct History {
    credits: Credits,
    coverages: Vec<Coverage>,
    photometers: Vec<Photometer>,
}

impl History {
    /// From the ledger's visits, in order of time. Visits to stars that are no longer on the list
    /// are passed over.
    ///
    /// # Errors
    /// [`EphemerisError`] for a visit outside the years that the sky is known for.
    pub fn new(
        survey: &Survey,
        observer: &Observer,
        visits: &[Visit],
    ) -> Result<Self, EphemerisError> {
        let targets = || survey.targets.iter();
        let mut history = History {
            credits: Credits::none(survey),
            coverages: targets().map(|t| Coverage::new(survey, t)).collect(),
            photometers: targets().map(|t| Photometer::new(survey, t)).collect(),
        };
        for visit in visits {
            history.add(survey, observer, visit)?;
        }
        Ok(history)
    }

    /// Adds a visit that ended.
    ///
    /// # Errors
    /// [`EphemerisError`] for a visit outside the years that the sky is known for.
    pub fn add(
        &mut self,
        survey: &Survey,
        observer: &Observer,
        visit: &Visit,
    ) -> Result<(), EphemerisError> {
        if let Some((star, credited)) = self.credits.add(survey, observer, visit)? {
            self.coverages[star].add_visit(credited.mid_bjd_tdb, credited.rv_error_m_s);
        }
        Ok(())
    }

    /// Credited visits of a target, by its index in the survey.
    pub fn credited(&self, star: usize) -> &[CreditedVisit] {
        self.credits.credited(star)
    }

    /// Open time used by each programme so far, seconds.
    pub fn used_s(&self) -> &[f64] {
        self.credits.used_s()
    }

    /// The night of the earliest visit.
    pub fn first_night(&self) -> Option<NightDate> {
        self.credits.first_night()
    }

    /// Each target's standing at the start of `tonight`, with debts accrued from `accrual_first`.
    pub fn standings(
        &self,
        survey: &Survey,
        calendar: &Calendar,
        accrual_first: NightDate,
        tonight: NightDate,
    ) -> Vec<Standing> {
        self.credits
            .standings(survey, calendar, accrual_first, tonight)
    }
}

/// First night from which debts accrue: the survey's, else the ledger's first, else tonight.
pub fn accrual_first(
    survey: &Survey,
    history_first: Option<NightDate>,
    tonight: NightDate,
) -> NightDate {
    survey
        .first_night
        .or(history_first)
        .unwrap_or(tonight)
        .min(tonight)
}

/// Why no plan could be made.
#[derive(Debug, Error)]
pub enum PlanError {
    /// The night is too large for the solver.
    #[error("the night cannot be solved")]
    Problem(#[from] ProblemError),
    /// The sky is not known for a visit's year.
    #[error("the sky cannot be worked out")]
    Sky(#[from] EphemerisError),
}

/// A night at the desk.
pub struct Desk<'a> {
    survey: &'a Survey,
    observer: &'a Observer,
    calendar: &'a Calendar,
    sky: &'a SkyTable,
    history: History,
    accrual_first: NightDate,
}

impl<'a> Desk<'a> {
    /// For the night of `sky`, with the history before it.
    pub fn new(
        survey: &'a Survey,
        observer: &'a Observer,
        calendar: &'a Calendar,
        sky: &'a SkyTable,
        history: History,
    ) -> Self {
        let accrual_first = accrual_first(survey, history.first_night(), sky.night.date);
        Desk {
            survey,
            observer,
            calendar,
            sky,
            history,
            accrual_first,
        }
    }

    /// Standings as they are now, tonight's visits included.
    ///
    /// # Errors
    /// [`EphemerisError`] for a visit outside the years that the sky is known for.
    pub fn standings(&self, tonight: &[Visit]) -> Result<Vec<Standing>, EphemerisError> {
        let history = self.with_tonight(tonight)?;
        Ok(self.standings_of(&history))
    }

    fn standings_of(&self, history: &History) -> Vec<Standing> {
        history.standings(
            self.survey,
            self.calendar,
            self.accrual_first,
            self.sky.night.date,
        )
    }

    /// Plans what is asked for.
    ///
    /// # Errors
    /// [`PlanError`].
    pub fn plan(
        &self,
        ask: &Ask,
        settings: &Settings,
        keep_going: &mut dyn FnMut() -> bool,
    ) -> Result<Planned, PlanError> {
        if self.sky.slots == 0 {
            return Ok(Planned::default());
        }
        let valuers = self.valuers(ask)?;
        let planned = plan(self.survey, self.sky, ask, &valuers, settings, keep_going)?;
        Ok(planned)
    }

    /// The exact problem of what is asked for.
    ///
    /// # Errors
    /// [`PlanError`].
    pub fn problem(&self, ask: &Ask) -> Result<NightProblem, PlanError> {
        let valuers = self.valuers(ask)?;
        Ok(problem_of(self.survey, self.sky, ask, &valuers)?)
    }

    /// What each hour of a plan is worth.
    ///
    /// # Errors
    /// [`PlanError`].
    pub fn hour_prices(&self, ask: &Ask, planned: &Planned) -> Result<Vec<HourPrice>, PlanError> {
        Ok(hour_prices(self.sky, &self.problem(ask)?, &planned.prices)?)
    }

    /// What values each target in the part of the night that is asked for.
    ///
    /// # Errors
    /// [`EphemerisError`] for a visit outside the years that the sky is known for.
    pub fn valuers(&self, ask: &Ask) -> Result<Vec<Valuer>, EphemerisError> {
        let history = self.with_tonight(&ask.tonight)?;
        let standings = self.standings_of(&history);
        let tonight = Tonight {
            night: self.sky.night.date,
            span: left_of(self.sky, ask.from),
            share_factors: share_factors(
                &self.survey.programmes,
                history.used_s(),
                self.survey.planning.share_pull,
            ),
        };
        let valuers = standings
            .iter()
            .enumerate()
            .map(|(star, standing)| Valuer {
                photometer: history.photometers[star].clone(),
                scorer: Scorer::with_coverage(
                    self.survey,
                    &self.survey.targets[star],
                    standing,
                    &tonight,
                    &history.coverages[star],
                ),
            })
            .collect();
        Ok(valuers)
    }

    fn with_tonight(&self, tonight: &[Visit]) -> Result<History, EphemerisError> {
        let mut history = self.history.clone();
        for visit in tonight {
            history.add(self.survey, self.observer, visit)?;
        }
        Ok(history)
    }
}

fn left_of(sky: &SkyTable, from: Utc) -> Span {
    let darkness = sky.darkness.unwrap_or(sky.night.span);
    Span::new(from.max(darkness.start), darkness.end)
}
