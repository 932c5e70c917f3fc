//! From offers and occasions to the exact problem that the solver takes.

use std::collections::BTreeMap;

use crate::catalogue::Survey;
use crate::record::EntryKind;

use super::ask::Ask;
use super::calibration::{Occasion, occasions, slots_of};
use super::offer::{Offer, Offers};
use super::sky_table::{SETUP_EPOCH_SLOTS, SkyTable};
use super::slew::setup_without_slew_s;
use super::solve::{Problem, ProblemError, Run, Setups, Task};

/// Solver's whole numbers in one unit of value: a visit that is due is worth about 1.
pub const VALUE_UNIT: f64 = 1000.0;

/// Value of a calibration on time: more than any science that it could displace, since a night's
/// velocities hang on it, yet not a rule without exception, as a plan must exist whatever happens.
pub const CALIBRATION_VALUE: i32 = 60_000;

/// What a task of the problem stands for.
#[derive(Clone, Debug, PartialEq)]
pub enum Meaning {
    /// Visits to a target: index in the list of offers.
    Target(usize),
    /// A standard star: which occasion, and the star's index in the survey.
    Standard(Occasion, usize),
    /// Lamps.
    Lamps(Occasion),
}

/// A problem with what its tasks stand for.
#[derive(Clone, Debug)]
pub struct NightProblem {
    /// For the solver.
    pub problem: Problem,
    /// One a task.
    pub meaning: Vec<Meaning>,
    /// Minute at which the telescope is free.
    pub first_slot: usize,
}

/// Builds the problem of what is left of the night.
///
/// # Errors
/// [`ProblemError`] when the night is too large for the solver (thousands of targets).
pub fn build(
    survey: &Survey,
    sky: &SkyTable,
    ask: &Ask,
    offers: &[Offers],
) -> Result<NightProblem, ProblemError> {
    let mut tasks = Vec::new();
    let mut meaning = Vec::new();
    for (index, offers) in offers.iter().enumerate() {
        if !offers.starts.is_empty() {
            tasks.push(target_task(offers, survey.planning.repeat_worth));
            meaning.push(Meaning::Target(index));
        }
    }
    for occasion in occasions(&survey.instrument.calibrations, sky, ask) {
        let calibration = &survey.instrument.calibrations[occasion.calibration];
        let slots = slots_of(calibration);
        if Occasion::kind(calibration) == EntryKind::Calibration {
            let starts = (occasion.first..occasion.until).filter(|slot| sky.is_usable(*slot));
            push_calibration(&mut tasks, starts, slots);
            meaning.push(Meaning::Lamps(occasion));
        } else if let Some((star, starts)) = best_standard(survey, sky, &occasion, slots) {
            push_calibration(&mut tasks, starts.into_iter(), slots);
            meaning.push(Meaning::Standard(occasion, star));
        }
    }
    let first_slot = sky.first_slot_from(ask.from);
    let targets: Vec<Option<usize>> = meaning
        .iter()
        .map(|meaning| match meaning {
            Meaning::Target(index) => Some(offers[*index].target),
            Meaning::Standard(_, star) => Some(*star),
            Meaning::Lamps(_) => None,
        })
        .collect();
    let problem = Problem {
        name: format!("night {}", sky.night.date),
        slots: sky.slots as u32,
        slot_s: 60,
        first: first_starts(survey, sky, ask, first_slot, &targets),
        setups: setups(survey, sky, &targets)?,
        tasks,
        must: Vec::new(),
    };
    problem.check()?;
    Ok(NightProblem {
        problem,
        meaning,
        first_slot,
    })
}

fn target_task(offers: &Offers, repeat_worth: f64) -> Task {
    let repeat_pct = (repeat_worth * 100.0).round() as u32;
    let worth_pct = (0..offers.visits)
        .map(|rank| if rank == 0 { 100 } else { repeat_pct })
        .collect();
    Task {
        worth_pct,
        gap: offers.gap_slots as u32,
        runs: runs(offers.starts.iter().map(|offer| {
            let value = (offer.value.total * VALUE_UNIT).round() as i32;
            (offer.slot, value, offer.slots)
        })),
    }
}

fn push_calibration(tasks: &mut Vec<Task>, starts: impl Iterator<Item = usize>, slots: usize) {
    tasks.push(Task {
        worth_pct: vec![100],
        gap: 1,
        runs: runs(starts.map(|slot| (slot, CALIBRATION_VALUE, slots))),
    });
}

/// Runs of neighbouring starts from (slot, value, duration) by rising slot.
fn runs(starts: impl Iterator<Item = (usize, i32, usize)>) -> Vec<Run> {
    let mut runs: Vec<Run> = Vec::new();
    for (slot, value, duration) in starts {
        let next = runs.last().map(|run| run.first as usize + run.value.len());
        if next != Some(slot) {
            runs.push(Run {
                first: slot as u32,
                value: Vec::new(),
                duration: Vec::new(),
            });
        }
        if let Some(run) = runs.last_mut() {
            run.value.push(value);
            run.duration.push(duration as u32);
        }
    }
    runs
}

/// The standard that stands highest at its best within the occasion, with its free starts.
fn best_standard(
    survey: &Survey,
    sky: &SkyTable,
    occasion: &Occasion,
    slots: usize,
) -> Option<(usize, Vec<usize>)> {
    let calibration = &survey.instrument.calibrations[occasion.calibration];
    let by_id: BTreeMap<&str, usize> = survey
        .targets
        .iter()
        .enumerate()
        .map(|(index, target)| (target.id.as_str(), index))
        .collect();
    let candidates = calibration.standards.iter().filter_map(|id| {
        let star = *by_id.get(id.as_str())?;
        let starts = free_starts(sky, star, occasion, slots);
        let highest = starts
            .iter()
            .map(|slot| sky.stars[star].pointing(*slot).altitude_deg)
            .max_by(f64::total_cmp)?;
        Some((highest, star, starts))
    });
    candidates
        .max_by(|a, b| a.0.total_cmp(&b.0).then(b.1.cmp(&a.1)))
        .map(|(_, star, starts)| (star, starts))
}

fn free_starts(sky: &SkyTable, star: usize, occasion: &Occasion, slots: usize) -> Vec<usize> {
    let free = |slot: usize| sky.is_usable(slot) && sky.stars[star].limits[slot].is_empty();
    (occasion.first..occasion.until)
        .filter(|start| start + slots <= sky.slots && (*start..start + slots).all(free))
        .collect()
}

/// Earliest first start of each task, from where the telescope points now.
fn first_starts(
    survey: &Survey,
    sky: &SkyTable,
    ask: &Ask,
    first_slot: usize,
    targets: &[Option<usize>],
) -> Vec<u32> {
    let pointing_at = ask
        .pointing_at
        .as_ref()
        .and_then(|id| survey.targets.iter().position(|target| target.id == *id));
    let at = first_slot.min(sky.slots.saturating_sub(1));
    targets
        .iter()
        .map(|to| (first_slot + sky.setup_slots(survey, pointing_at, *to, at)) as u32)
        .collect()
}

/// Set-ups between all tasks, an epoch at a time, rounded up to whole minutes.
fn setups(
    survey: &Survey,
    sky: &SkyTable,
    targets: &[Option<usize>],
) -> Result<Setups, ProblemError> {
    let n = targets.len();
    let epochs = sky.setup_epochs();
    let mut table = Vec::with_capacity(epochs * n * n);
    for epoch in 0..epochs {
        for from in targets {
            for to in targets {
                let slots = match (from, to) {
                    // Lamps need no pointing, and the telescope can slew while they burn.
                    (_, None) => 0,
                    (None, Some(_)) => whole_minutes(setup_without_slew_s(&survey.telescope)),
                    (Some(from), Some(to)) => sky.star_setup_slots(epoch, *from, *to),
                };
                table.push(u8::try_from(slots).unwrap_or(u8::MAX));
            }
        }
    }
    Setups::timed(n, SETUP_EPOCH_SLOTS as u32, table)
}

fn whole_minutes(seconds: f64) -> usize {
    (seconds / 60.0).ceil() as usize
}

/// The offer of a target that starts at this minute.
pub fn offer_at(offers: &Offers, slot: usize) -> Option<&Offer> {
    let index = offers
        .starts
        .binary_search_by_key(&slot, |offer| offer.slot);
    offers.starts.get(index.ok()?)
}
