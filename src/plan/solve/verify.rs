//! Does a plan keep the rules, and what is it worth?

use super::problem::{Placement, Problem};
use thiserror::Error;

/// A rule that a plan breaks.
#[derive(Clone, Debug, Error, PartialEq, Eq)]
pub enum Violation {
    /// No such task.
    #[error("there is no task {0}")]
    NoTask(usize),
    /// Not an allowed start.
    #[error("task {} may not start at slot {}", .0.task, .0.start)]
    NotAllowed(Placement),
    /// Ends after the last slot.
    #[error("task {} at slot {} runs past the end", .0.task, .0.start)]
    PastEnd(Placement),
    /// Starts before the visit before has ended and the set-up is over.
    #[error("task {} at slot {} starts before slot {earliest}", .visit.task, .visit.start)]
    TooSoon {
        /// The visit.
        visit: Placement,
        /// The first slot in which it could start.
        earliest: u32,
    },
    /// More visits than allowed.
    #[error("task {task} has more than {most} visits")]
    TooMany {
        /// The task.
        task: usize,
        /// How many are allowed.
        most: usize,
    },
    /// Two visits closer than the task's gap.
    #[error("task {} at slot {} comes {found} slots after its visit before, at least {least} are wanted", .visit.task, .visit.start)]
    Gap {
        /// The later visit.
        visit: Placement,
        /// Slots from start to start.
        found: u32,
        /// Slots wanted.
        least: u32,
    },
    /// No task of the group is visited.
    #[error("no task of must group {0} is visited")]
    Unserved(usize),
}

/// Checks a plan (in any order) against every rule and counts its worth.
///
/// This is written apart from the search and shares none of its tables, so that it can be run on
/// every plan before it is published.
///
/// # Errors
/// Every rule that is broken.
pub fn verify(problem: &Problem, plan: &[Placement]) -> Result<i64, Vec<Violation>> {
    let mut plan = plan.to_vec();
    plan.sort_unstable();
    let mut faults = Vec::new();
    let mut total = 0;
    let mut counts = vec![0usize; problem.tasks.len()];
    let mut last_start = vec![0u32; problem.tasks.len()];
    let mut before: Option<(usize, u32)> = None;
    for &visit in &plan {
        let Some(task) = problem.tasks.get(visit.task) else {
            faults.push(Violation::NoTask(visit.task));
            continue;
        };
        let Some((value, duration)) = task.at(visit.start) else {
            faults.push(Violation::NotAllowed(visit));
            continue;
        };
        let end = visit.start + duration;
        if end > problem.slots {
            faults.push(Violation::PastEnd(visit));
        }
        let earliest = match before {
            None => problem.first.get(visit.task).copied().unwrap_or(0),
            Some((from, ended)) => ended + problem.setups.between(from, visit.task, ended),
        };
        if visit.start < earliest {
            faults.push(Violation::TooSoon { visit, earliest });
        }
        let rank = counts[visit.task];
        if rank >= task.visits() {
            faults.push(Violation::TooMany {
                task: visit.task,
                most: task.visits(),
            });
        }
        if rank > 0 {
            let found = visit.start - last_start[visit.task];
            if found < task.gap {
                faults.push(Violation::Gap {
                    visit,
                    found,
                    least: task.gap,
                });
            }
        }
        total += task.worth(rank, value);
        counts[visit.task] = rank + 1;
        last_start[visit.task] = visit.start;
        before = Some((visit.task, end));
    }
    faults.extend(
        unserved(problem, &plan)
            .into_iter()
            .map(Violation::Unserved),
    );
    if faults.is_empty() {
        Ok(total)
    } else {
        Err(faults)
    }
}

/// The must groups of which the plan visits no task.
pub fn unserved(problem: &Problem, plan: &[Placement]) -> Vec<usize> {
    let served = |group: &Vec<usize>| plan.iter().any(|visit| group.contains(&visit.task));
    (0..problem.must.len())
        .filter(|&g| !served(&problem.must[g]))
        .collect()
}
