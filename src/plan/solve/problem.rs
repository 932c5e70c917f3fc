//! A night as an exact problem: slots, tasks with their allowed starts, set-ups and groups.

use thiserror::Error;

/// The most slots a problem may have; a night of one-second slots fits.
pub const SLOTS_MAX: u32 = 100_000;

/// The most tasks a problem may have.
pub const TASKS_MAX: usize = 10_000;

/// The most visits (all tasks' [`Task::visits`] together) that a problem may ask for.
pub const VISITS_MAX: usize = 30_000;

/// The largest value of one visit, either sign; sums of a night's visits then stay exact.
pub const VALUE_MAX: i32 = 100_000_000;

/// A stretch of neighbouring slots, each of which is an allowed start.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Run {
    /// The first allowed slot.
    pub first: u32,
    /// What a first visit started at `first + k` is worth, before [`Task::worth_pct`].
    pub value: Vec<i32>,
    /// How many slots such a visit takes, 1 or more; as long as `value`.
    pub duration: Vec<u32>,
}

/// Something that can be visited: a star, a standard, a calibration.
///
/// A rule about *when* ("once in each half of the night", "every three hours", "before the first
/// star") is a task for each occasion whose runs hold just the starts that the rule allows; a rule
/// that it *must* be done is a group in [`Problem::must`] with that task alone.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Task {
    /// Per cent of its value that the first, second, … visit is worth, rounded down to a whole
    /// value. Its length is the most visits that are allowed.
    pub worth_pct: Vec<u32>,
    /// Least slots between the starts of one visit and the next.
    pub gap: u32,
    /// Where visits may start, in rising order and apart. A start that is absent is not allowed:
    /// horizon, moon, wind and blocked spans all end up here.
    pub runs: Vec<Run>,
}

impl Task {
    /// The most visits in the night.
    pub fn visits(&self) -> usize {
        self.worth_pct.len()
    }

    /// Value and duration of a first visit started at `slot`; `None` where that is not allowed.
    pub fn at(&self, slot: u32) -> Option<(i32, u32)> {
        let after = self.runs.partition_point(|run| run.first <= slot);
        let run = self.runs.get(after.checked_sub(1)?)?;
        let offset = (slot - run.first) as usize;
        Some((*run.value.get(offset)?, *run.duration.get(offset)?))
    }

    /// What the visit of the given rank (0 for the first of the night) is worth, started where a
    /// first visit would be worth `value`.
    pub fn worth(&self, rank: usize, value: i32) -> i64 {
        let pct = self.worth_pct.get(rank).copied().unwrap_or(0);
        (i64::from(value) * i64::from(pct)).div_euclid(100)
    }
}

/// Slots needed between the end of one visit and the start of the next: slew and acquisition.
///
/// They may change through the night (an alt-azimuth mount's do): the table is chosen by the slot
/// in which the earlier visit *ends*, and waiting after that neither shortens nor lengthens it.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Setups {
    tasks: usize,
    /// Slots per epoch.
    epoch_slots: u32,
    /// Epoch by epoch, from-task by from-task, to-task by to-task.
    slots: Vec<u8>,
}

impl Setups {
    /// One table for the whole night, row by row: `slots[from * tasks + to]`.
    ///
    /// # Errors
    /// [`ProblemError::SetupShape`] when the table is not square.
    pub fn constant(tasks: usize, slots: Vec<u8>) -> Result<Self, ProblemError> {
        Setups::timed(tasks, u32::MAX, slots)
    }

    /// A table for each epoch of `epoch_slots` slots of departure, one after the other; the last
    /// one holds to the end.
    ///
    /// # Errors
    /// [`ProblemError::SetupShape`] when they are not whole square tables or an epoch is empty.
    pub fn timed(tasks: usize, epoch_slots: u32, slots: Vec<u8>) -> Result<Self, ProblemError> {
        let table = tasks * tasks;
        let whole = slots.len() >= table && (table == 0 || slots.len().is_multiple_of(table));
        if !whole || epoch_slots == 0 {
            return Err(ProblemError::SetupShape {
                tasks,
                entries: slots.len(),
                epoch_slots,
            });
        }
        Ok(Setups {
            tasks,
            epoch_slots,
            slots,
        })
    }

    /// Slots between a visit to `from` that ended at `departure` and the start of one to `to`.
    pub fn between(&self, from: usize, to: usize, departure: u32) -> u32 {
        u32::from(
            self.row(from, departure)
                .get(to)
                .copied()
                .unwrap_or(u8::MAX),
        )
    }

    /// The set-ups from `from` to every task, for a visit that ended at `departure`.
    pub fn row(&self, from: usize, departure: u32) -> &[u8] {
        let first = (self.epoch(departure) * self.tasks + from) * self.tasks;
        self.slots.get(first..first + self.tasks).unwrap_or(&[])
    }

    /// How many tables there are.
    pub fn epochs(&self) -> usize {
        if self.tasks == 0 {
            1
        } else {
            self.slots.len() / (self.tasks * self.tasks)
        }
    }

    /// Slots that an epoch lasts.
    pub fn epoch_slots(&self) -> u32 {
        self.epoch_slots
    }

    /// The number of tasks that the tables are for.
    pub fn tasks(&self) -> usize {
        self.tasks
    }

    fn epoch(&self, departure: u32) -> usize {
        ((departure / self.epoch_slots) as usize).min(self.epochs() - 1)
    }
}

/// A night's problem: choose visits and their starts so that the sum of their worth is as high as
/// can be.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Problem {
    /// What to call it.
    pub name: String,
    /// The number of slots, numbered from 0.
    pub slots: u32,
    /// Seconds that a slot lasts.
    pub slot_s: u32,
    /// What can be visited.
    pub tasks: Vec<Task>,
    /// The earliest slot in which each task may start when it is the first of the plan: the set-up
    /// from the parked telescope, or, in the middle of a night, the end of what is under way plus
    /// the set-up from there (see [`Problem::resume`]).
    pub first: Vec<u32>,
    /// Set-ups between visits.
    pub setups: Setups,
    /// Groups of tasks: of each, at least one task must be visited.
    pub must: Vec<Vec<usize>>,
}

/// A visit in a plan.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Placement {
    /// The slot in which it starts.
    pub start: u32,
    /// Which task, by its place in [`Problem::tasks`].
    pub task: usize,
}

/// What is wrong with a problem.
#[derive(Debug, Error, PartialEq, Eq)]
pub enum ProblemError {
    /// A count or size is beyond what the solver takes.
    #[error("{what} is {found}, give {least} to {most}")]
    Size {
        /// What was counted.
        what: &'static str,
        /// How many there are.
        found: u64,
        /// The least allowed.
        least: u64,
        /// The most allowed.
        most: u64,
    },
    /// The set-ups are not whole square tables.
    #[error(
        "set-ups hold {entries} entries with {epoch_slots} slots an epoch, give {tasks} × {tasks} for each epoch of at least one slot"
    )]
    SetupShape {
        /// Tasks of the problem.
        tasks: usize,
        /// Entries found.
        entries: usize,
        /// Slots per epoch found.
        epoch_slots: u32,
    },
    /// A task's run is broken.
    #[error("task {task}, run at slot {first}: {fault}")]
    Run {
        /// The task.
        task: usize,
        /// The run's first slot.
        first: u32,
        /// What is wrong and what would do.
        fault: &'static str,
    },
    /// A group names a task that is not there.
    #[error("must group {group} names task {task}, there are {tasks} counted from 0")]
    Group {
        /// The group.
        group: usize,
        /// The task it names.
        task: usize,
        /// How many there are.
        tasks: usize,
    },
}

impl Problem {
    /// Checks sizes, runs and groups.
    ///
    /// # Errors
    /// The first fault found.
    pub fn check(&self) -> Result<(), ProblemError> {
        let tasks = self.tasks.len();
        size(
            "the number of slots",
            u64::from(self.slots),
            1,
            u64::from(SLOTS_MAX),
        )?;
        size("the number of tasks", tasks as u64, 0, TASKS_MAX as u64)?;
        size(
            "the number of first set-ups",
            self.first.len() as u64,
            tasks as u64,
            tasks as u64,
        )?;
        let visits: usize = self.tasks.iter().map(Task::visits).sum();
        size(
            "the number of visits allowed",
            visits as u64,
            0,
            VISITS_MAX as u64,
        )?;
        if self.setups.tasks != tasks {
            return Err(ProblemError::SetupShape {
                tasks,
                entries: self.setups.slots.len(),
                epoch_slots: self.setups.epoch_slots,
            });
        }
        for (index, task) in self.tasks.iter().enumerate() {
            check_task(index, task, self.slots)?;
        }
        for (group, members) in self.must.iter().enumerate() {
            if let Some(&task) = members.iter().find(|&&task| task >= tasks) {
                return Err(ProblemError::Group { group, task, tasks });
            }
        }
        Ok(())
    }

    /// What is left of the night once `done` has been carried out (or is under way), in the same
    /// slot and task numbers: nothing starts before `earliest` nor before the last of `done` has
    /// ended and the set-up from it is over; repeat visits keep their rank and their gap; groups
    /// that are served are dropped. The worth of `done` is not counted again.
    pub fn resume(&self, done: &[Placement], earliest: u32) -> Problem {
        let mut rest = self.clone();
        let mut done = done.to_vec();
        done.sort_unstable();
        for first in &mut rest.first {
            *first = (*first).max(earliest);
        }
        let mut soonest = vec![earliest; self.tasks.len()];
        for visit in &done {
            let Some(task) = rest.tasks.get_mut(visit.task) else {
                continue;
            };
            if !task.worth_pct.is_empty() {
                task.worth_pct.remove(0);
            }
            soonest[visit.task] = soonest[visit.task].max(visit.start.saturating_add(task.gap));
        }
        for (task, &soonest) in rest.tasks.iter_mut().zip(&soonest) {
            task.runs = task
                .runs
                .iter()
                .filter_map(|run| run_from(run, soonest))
                .collect();
        }
        if let Some(last) = done.last()
            && let Some((_, duration)) = self.tasks.get(last.task).and_then(|t| t.at(last.start))
        {
            let end = last.start + duration;
            for (to, first) in rest.first.iter_mut().enumerate() {
                *first = earliest.max(end + self.setups.between(last.task, to, end));
            }
        }
        rest.must
            .retain(|group| !done.iter().any(|visit| group.contains(&visit.task)));
        rest
    }
}

fn run_from(run: &Run, soonest: u32) -> Option<Run> {
    let skip = soonest.saturating_sub(run.first) as usize;
    let value = run
        .value
        .get(skip..)
        .filter(|left| !left.is_empty())?
        .to_vec();
    Some(Run {
        first: run.first + skip as u32,
        value,
        duration: run.duration.get(skip..)?.to_vec(),
    })
}

fn size(what: &'static str, found: u64, least: u64, most: u64) -> Result<(), ProblemError> {
    if (least..=most).contains(&found) {
        return Ok(());
    }
    Err(ProblemError::Size {
        what,
        found,
        least,
        most,
    })
}

fn check_task(index: usize, task: &Task, slots: u32) -> Result<(), ProblemError> {
    let mut free_from = 0u64;
    for run in &task.runs {
        let fault = |fault| {
            Err(ProblemError::Run {
                task: index,
                first: run.first,
                fault,
            })
        };
        if run.value.len() != run.duration.len() {
            return fault("give as many durations as values");
        }
        if u64::from(run.first) < free_from {
            return fault("give runs in rising order that do not overlap");
        }
        free_from = u64::from(run.first) + run.value.len() as u64;
        if free_from > u64::from(slots) {
            return fault("it ends beyond the last slot");
        }
        if run
            .value
            .iter()
            .any(|value| value.unsigned_abs() > VALUE_MAX.unsigned_abs())
        {
            return fault("a value is beyond 100000000");
        }
        if run.duration.contains(&0) {
            return fault("a duration is 0, give 1 slot or more");
        }
    }
    if task.worth_pct.iter().any(|&pct| pct > 1000) {
        let fault = "a repeat is worth more than 1000 per cent";
        return Err(ProblemError::Run {
            task: index,
            first: 0,
            fault,
        });
    }
    Ok(())
}
