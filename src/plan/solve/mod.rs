//! The solver of a night's exact problem: a plan, and a proof of how good it is.
//!
//! Nothing here knows about the sky. A [`Problem`] has slots, tasks that may start in some of them
//! for a value, set-ups between tasks, and groups; [`solve`] returns a plan, a bound that no plan
//! can exceed, and the prices behind both.

mod dispatch;
pub mod json;
mod path;
mod price;
mod problem;
mod refill;
mod roster;
mod search;
mod tables;
mod verify;

pub use price::{Prices, TaskPrices};
pub use problem::{
    Placement, Problem, ProblemError, Run, SLOTS_MAX, Setups, TASKS_MAX, Task, VALUE_MAX,
    VISITS_MAX,
};
pub use verify::{Violation, unserved, verify};

use dispatch::{Rule, dispatch};
use price::{Multipliers, Relaxation};
use roster::{Night, placements};
use search::{Judge, Search};
use tables::{Tables, UNIT};

/// A step of the bound is taken for so many steps in all while the bound has not settled: about
/// half of the time for each, so that a short budget gives both a plan and a proof.
const SEARCH_PER_BOUND: u64 = 8;

/// What spans of slots are worth: what the bound at these prices would lose if nothing could be done
/// in them. Values, 0 or more.
///
/// # Errors
/// A fault of the problem.
pub fn price_of_time(
    problem: &Problem,
    prices: &Prices,
    spans: &[std::ops::Range<u32>],
) -> Result<Vec<f64>, ProblemError> {
    let tables = Tables::new(problem)?;
    let multipliers = Multipliers::from_prices(&tables, prices);
    let mut relaxation = Relaxation::new(&tables, multipliers);
    let whole = relaxation.value_without(&(0..0));
    Ok(spans
        .iter()
        .map(|span| (whole - relaxation.value_without(span)).max(0) as f64 / UNIT as f64)
        .collect())
}

/// How long and how to search.
#[derive(Clone, Debug, PartialEq)]
pub struct Settings {
    /// Seed of the random choices.
    pub seed: u64,
    /// The most steps, moves of the search and steps of the bound counted together.
    pub steps: u64,
    /// The most steps of the bound; 0 for no bound.
    pub bound_steps: u64,
    /// The search ends when the bound proves the plan to within this share of the bound.
    pub gap_wanted: f64,
}

impl Default for Settings {
    fn default() -> Self {
        Settings {
            seed: 0,
            steps: 20_000,
            bound_steps: 300,
            gap_wanted: 0.0,
        }
    }
}

/// What is known from a plan made before.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Warm {
    /// The visits still to come of the plan that is published.
    pub plan: Vec<Placement>,
    /// Its prices.
    pub prices: Option<Prices>,
    /// What a change must gain for each published visit that it drops or moves in the order.
    pub churn: i64,
}

/// A plan and how good it is.
#[derive(Clone, Debug, PartialEq)]
pub struct Solution {
    /// The visits in order of time.
    pub plan: Vec<Placement>,
    /// What they are worth together.
    pub objective: i64,
    /// No plan that serves as many groups as this one is worth more; `None` where no bound was
    /// asked for.
    pub bound: Option<i64>,
    /// The must groups that the plan doesn't serve.
    pub unserved: Vec<usize>,
    /// What the better dispatcher reaches.
    pub dispatcher: i64,
    /// Steps taken by the bound.
    pub bound_steps: u64,
    /// Steps taken together.
    pub steps: u64,
    /// The prices of the bound.
    pub prices: Prices,
}

/// Solves a problem. `keep_going` is asked between steps and ends the search when it says no.
///
/// # Errors
/// A fault of the problem.
pub fn solve(
    problem: &Problem,
    settings: &Settings,
    warm: Option<&Warm>,
    keep_going: &mut dyn FnMut() -> bool,
) -> Result<Solution, ProblemError> {
    let tables = Tables::new(problem)?;
    let t = &tables;
    let night = Night { problem, t };
    let starts = [
        dispatch(&night, Rule::Density),
        dispatch(&night, Rule::Urgency),
    ];
    let [density, urgency] = starts;
    let (a, b) = (night.score(&density), night.score(&urgency));
    let (dispatched, start) = if a >= b { (a, density) } else { (b, urgency) };
    let repaired = warm.map(|warm| night.repair(&warm.plan));
    let published = repaired.as_deref().zip(warm.map(|warm| warm.churn));
    let judge = Judge { night, published };
    let first = repaired.clone().unwrap_or_else(|| start.clone());
    let mut search = Search::new(judge, first, settings.seed);
    search.offer(start);
    let guess = match warm.and_then(|warm| warm.prices.as_ref()) {
        Some(prices) => Multipliers::from_prices(t, prices),
        None => Multipliers::guess(t),
    };
    search.refill_all(&guess.node, 0.5);
    let mut relaxation = Relaxation::new(t, guess);
    let mut steps = 0;
    while steps < settings.steps && keep_going() {
        steps += 1;
        let wants_bound = relaxation.steps < settings.bound_steps && !relaxation.settled();
        if wants_bound && (steps - 1).is_multiple_of(SEARCH_PER_BOUND) {
            relaxation.step(search.best.0.max(0) * UNIT);
        } else {
            search.step(&relaxation.best.node);
        }
    }
    let roster = &search.best.1;
    let plan = placements(roster);
    let missed = t
        .must
        .iter()
        .filter(|g| !roster.iter().any(|spot| g.contains(&spot.task)));
    let unserved_cost = t.penalty * missed.count() as i64;
    let objective = night.score(roster) + unserved_cost;
    let bound = (relaxation.steps > 0).then(|| relaxation.bound.div_euclid(UNIT) + unserved_cost);
    Ok(Solution {
        unserved: unserved(problem, &plan),
        plan,
        objective,
        bound,
        dispatcher: dispatched,
        bound_steps: relaxation.steps,
        steps,
        prices: relaxation.best.to_prices(t),
    })
}
