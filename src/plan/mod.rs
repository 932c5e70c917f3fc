//! Floor 2: which star is observed when — the night's problem, its solution, and the reasons.
//!
//! [`SkyTable`] holds what the sky decides, [`Ask`] what is different tonight. [`plan`] turns both,
//! with each star's [`Valuer`], into a [`Planned`] queue. The solver behind it knows nothing of
//! stars: see [`mod@solve`].

mod ask;
mod build;
mod calendar;
mod calibration;
mod credits;
mod desk;
mod explain;
mod limits;
mod offer;
mod queue;
mod reach;
mod sky_table;
mod slew;
pub mod solve;

pub use ask::{Ask, Published, Urgent};
pub use build::{CALIBRATION_VALUE, Meaning, NightProblem, VALUE_UNIT, build};
pub use calendar::{Calendar, SEASON_GAP_NIGHTS, accrual_span};
pub use credits::Credits;
pub use desk::{Desk, History, PlanError, accrual_first};
pub use limits::{Limit, Limits, Wind};
pub use offer::{Narrowed, Offer, Offers, Valuer, offers};
pub use reach::Reach;
pub use sky_table::SkyTable;
pub use slew::{Pointing, setup_s};

use crate::catalogue::Survey;
use crate::record::{LeftOut, QueueEntry};

use self::queue::Reading;
use self::solve::{Prices, ProblemError, Settings, solve};
use crate::time::Utc;

/// A queue with what is known of how good it is.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Planned {
    /// Entries in order of time.
    pub entries: Vec<QueueEntry>,
    /// Targets without a visit, in the order of the survey.
    pub left_out: Vec<LeftOut>,
    /// Total value of the science in it.
    pub value: f64,
    /// No queue that keeps these calibrations can be worth more; `None` where no bound was asked.
    pub bound: Option<f64>,
    /// Steps that the solver took.
    pub steps: u64,
    /// What visits cost beyond their time, as the solver found it.
    pub prices: Prices,
}

/// What an hour of the night is worth.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct HourPrice {
    /// Its start; the last one of the night may be shorter than an hour.
    pub start: Utc,
    /// Value that the best plan would lose if nothing could be observed in it.
    pub value: f64,
}

/// Plans what is left of a night. `keep_going` is asked between steps: the caller holds the clock.
///
/// # Errors
/// [`ProblemError`] when the night is too large for the solver.
pub fn plan(
    survey: &Survey,
    sky: &SkyTable,
    ask: &Ask,
    valuers: &[Valuer],
    settings: &Settings,
    keep_going: &mut dyn FnMut() -> bool,
) -> Result<Planned, ProblemError> {
    let offers = offers_of(survey, sky, ask, valuers);
    let night = build(survey, sky, ask, &offers)?;
    let solution = solve(&night.problem, settings, None, keep_going)?;
    let reading = Reading {
        survey,
        sky,
        ask,
        offers: &offers,
        valuers,
        night: &night,
    };
    let entries = reading.entries(&solution.plan);
    let calibrations = solution
        .plan
        .iter()
        .filter(|placement| !matches!(night.meaning[placement.task], Meaning::Target(_)))
        .count();
    let calibrated = i64::from(CALIBRATION_VALUE) * calibrations as i64;
    let science = |worth: i64| (worth - calibrated) as f64 / VALUE_UNIT;
    Ok(Planned {
        left_out: explain::left_out(&reading, &entries),
        entries,
        value: science(solution.objective),
        bound: solution.bound.map(science),
        steps: solution.steps,
        prices: solution.prices,
    })
}

/// The problem that [`plan`] solves.
///
/// # Errors
/// As [`plan`].
pub fn problem_of(
    survey: &Survey,
    sky: &SkyTable,
    ask: &Ask,
    valuers: &[Valuer],
) -> Result<NightProblem, ProblemError> {
    build(survey, sky, ask, &offers_of(survey, sky, ask, valuers))
}

/// What each hour of the night is worth at the prices of a plan.
///
/// # Errors
/// As [`plan`].
pub fn hour_prices(
    sky: &SkyTable,
    night: &NightProblem,
    prices: &Prices,
) -> Result<Vec<HourPrice>, ProblemError> {
    let hours: Vec<std::ops::Range<u32>> = (night.first_slot..sky.slots)
        .step_by(60)
        .map(|slot| slot as u32..(slot + 60).min(sky.slots) as u32)
        .collect();
    let worth = solve::price_of_time(&night.problem, prices, &hours)?;
    let told = hours.iter().zip(worth).map(|(hour, worth)| HourPrice {
        start: sky.instant(hour.start as usize),
        value: worth / VALUE_UNIT,
    });
    Ok(told.collect())
}

fn offers_of(survey: &Survey, sky: &SkyTable, ask: &Ask, valuers: &[Valuer]) -> Vec<Offers> {
    valuers
        .iter()
        .enumerate()
        .map(|(star, valuer)| offers(survey, sky, ask, star, valuer))
        .collect()
}
