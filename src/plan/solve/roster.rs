//! A plan as the search holds it: visits in order of time, with their ends.

use super::problem::{Placement, Problem};
use super::tables::Tables;

/// A visit with its end.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Spot {
    pub task: u32,
    pub start: u32,
    pub end: u32,
}

/// Visits in order of time.
pub(super) type Roster = Vec<Spot>;

/// The problem with its tables: what every part of the search asks.
#[derive(Clone, Copy)]
pub(super) struct Night<'p> {
    pub problem: &'p Problem,
    pub t: &'p Tables,
}

impl Night<'_> {
    /// Worth of the visits, minus the penalty for each group that could be served and is not.
    pub(super) fn score(&self, roster: &[Spot]) -> i64 {
        let mut ranks = vec![0usize; self.t.tasks];
        let mut total = 0;
        for spot in roster {
            let task = &self.problem.tasks[spot.task as usize];
            let rank = &mut ranks[spot.task as usize];
            total += task
                .at(spot.start)
                .map_or(0, |(value, _)| task.worth(*rank, value));
            *rank += 1;
        }
        let missed = self
            .t
            .must
            .iter()
            .filter(|group| group.iter().all(|&g| ranks[g as usize] == 0));
        total - self.t.penalty * missed.count() as i64
    }

    /// The first slot in which `task` may start after `before` (the parked telescope for `None`).
    pub(super) fn earliest(&self, before: Option<&Spot>, task: u32) -> u32 {
        match before {
            None => self.t.first[task as usize],
            Some(spot) => {
                spot.end + u32::from(self.t.setup_row(spot.task, spot.end)[task as usize])
            }
        }
    }

    /// The visit at a start, where it is allowed and ends within the night.
    pub(super) fn spot(&self, task: u32, start: u32) -> Option<Spot> {
        let (_, duration) = self.problem.tasks.get(task as usize)?.at(start)?;
        let end = start + duration;
        (end as usize <= self.t.slots).then_some(Spot { task, start, end })
    }

    /// Could `spot` be put into the roster? Returns its place.
    pub(super) fn place(&self, roster: &[Spot], spot: &Spot) -> Option<usize> {
        let at = roster.partition_point(|other| other.start < spot.start);
        let before = at.checked_sub(1).map(|at| &roster[at]);
        if spot.start < self.earliest(before, spot.task) {
            return None;
        }
        if let Some(next) = roster.get(at)
            && next.start < self.earliest(Some(spot), next.task)
        {
            return None;
        }
        let gap = self.t.gap[spot.task as usize];
        let mut count = 1;
        for other in roster.iter().filter(|other| other.task == spot.task) {
            count += 1;
            if other.start.abs_diff(spot.start) < gap {
                return None;
            }
        }
        (count <= self.t.nodes_of(spot.task).len()).then_some(at)
    }

    /// The nearest roster to an old plan: its visits in their order, at their time or as soon after
    /// as they may start, those that no longer fit left out.
    pub(super) fn repair(&self, plan: &[Placement]) -> Roster {
        let mut plan = plan.to_vec();
        plan.sort_unstable();
        let mut roster = Roster::new();
        for visit in plan {
            if visit.task >= self.t.tasks {
                continue;
            }
            let task = visit.task as u32;
            let mut soonest = visit.start.max(self.earliest(roster.last(), task));
            if let Some(other) = roster.iter().rev().find(|other| other.task == task) {
                soonest = soonest.max(other.start + self.t.gap[task as usize]);
            }
            let late = soonest + (self.t.slots as u32 / 20).max(2);
            let spot = (soonest..late.min(self.t.slots as u32))
                .find_map(|start| self.spot(task, start))
                .filter(|spot| self.place(&roster, spot).is_some());
            roster.extend(spot);
        }
        roster
    }
}

/// The roster as the caller sees it.
pub(super) fn placements(roster: &[Spot]) -> Vec<Placement> {
    roster
        .iter()
        .map(|spot| Placement {
            task: spot.task as usize,
            start: spot.start,
        })
        .collect()
}
