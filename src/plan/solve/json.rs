//! Problems and plans as JSON text.
//!
//! # `nightwright-problem/1`
//! `T` slots of `slot_s` seconds. `setup0[i]`: a digit a target, its earliest first start.
//! `setup[i][j]`: a digit, slots between the end of a visit to i and the start of one to j.
//! `targets[i]`: `d` duration in slots, `n` visits wanted, `gap` least slots from one start to the
//! next, `pct2` per cent of its value that a repeat is worth (rounded down), `v` runs
//! `[first_slot, [value, …]]`. `must`: groups, of each at least one target is visited. Other keys
//! are passed over.
//!
//! # `nightwright-problem/2`
//! The same keys, with these wider meanings, so that any file of the first form with its `fmt`
//! changed means the same:
//! - `setup0`: a string of digits, or an array of slots (0 to 100000) where a digit is too small.
//! - `setup`: rows as above, each a string of digits or an array of slots (0 to 255); or, where the
//!   set-ups change through the night, an array of such tables, one for each epoch of
//!   `setup_epoch` slots (then required). The table is that of the slot in which the earlier visit
//!   *ends*; the last one holds to the end of the night.
//! - `targets[i].n`: any number; `targets[i].pct`: per cent for the first, second, … visit, whose
//!   length is then the number of visits (in place of `n` and `pct2`).
//! - `targets[i].v`: a run may be `[first_slot, [value, …], [duration, …]]` with a duration for
//!   each start, or `[first_slot, [value, …], duration]`; without, `d` holds.
//!
//! A rule on when something is done (a standard in each half of the night, a calibration every so
//! many slots, one before the first star) is a target for each occasion, with the allowed starts in
//! its runs and, where it is a duty, a must group of its own. Blocked spans are absent starts, odds
//! of bad weather are folded into the values.
//!
//! # Plans
//! `{"plan":[[target,start],…],"objective":…,"bound":…,"elapsed_ms":…,"steps":…}`; `bound` is
//! absent where none was asked for.

use super::Solution;
use super::problem::{Problem, ProblemError, Run, Setups, Task};
use serde::{Deserialize, Serialize};
use thiserror::Error;

/// The first form of the format.
pub const FORMAT_1: &str = "nightwright-problem/1";

/// The second form, which the program writes.
pub const FORMAT_2: &str = "nightwright-problem/2";

/// Why a problem's text cannot be used.
#[derive(Debug, Error)]
pub enum ReadError {
    /// Not JSON, or not of this shape.
    #[error("not a planning problem")]
    Shape(#[from] serde_json::Error),
    /// Another format.
    #[error("the format is \"{0}\", give \"{FORMAT_1}\" or \"{FORMAT_2}\"")]
    Format(String),
    /// Something in it that the format does not allow.
    #[error("{place}: {fault}")]
    Content {
        /// Where.
        place: String,
        /// What, and what would do.
        fault: &'static str,
    },
    /// The problem itself is broken.
    #[error(transparent)]
    Problem(#[from] ProblemError),
}

#[derive(Deserialize)]
struct File {
    fmt: String,
    #[serde(default)]
    name: String,
    #[serde(rename = "T")]
    slots: u32,
    slot_s: u32,
    setup0: Row,
    setup: Tables,
    setup_epoch: Option<u32>,
    targets: Vec<Target>,
    #[serde(default)]
    must: Vec<Vec<usize>>,
}

#[derive(Deserialize, Serialize)]
#[serde(untagged)]
enum Row {
    Digits(String),
    Slots(Vec<u32>),
}

#[derive(Deserialize, Serialize)]
#[serde(untagged)]
enum Tables {
    One(Vec<Row>),
    Timed(Vec<Vec<Row>>),
}

#[derive(Deserialize)]
struct Target {
    d: Option<u32>,
    n: Option<u32>,
    #[serde(default)]
    gap: u32,
    pct2: Option<u32>,
    pct: Option<Vec<u32>>,
    v: Vec<Stretch>,
}

#[derive(Deserialize, Serialize)]
#[serde(untagged)]
enum Stretch {
    Same(u32, Vec<i32>),
    Each(u32, Vec<i32>, Durations),
}

#[derive(Deserialize, Serialize)]
#[serde(untagged)]
enum Durations {
    Same(u32),
    Each(Vec<u32>),
}

#[derive(Serialize)]
struct FileOut<'a> {
    fmt: &'static str,
    name: &'a str,
    #[serde(rename = "T")]
    slots: u32,
    slot_s: u32,
    setup0: &'a [u32],
    setup_epoch: Option<u32>,
    setup: Tables,
    targets: Vec<TargetOut<'a>>,
    must: &'a [Vec<usize>],
}

#[derive(Serialize)]
struct TargetOut<'a> {
    gap: u32,
    pct: &'a [u32],
    v: Vec<Stretch>,
}

#[derive(Serialize)]
struct PlanOut {
    plan: Vec<(usize, u32)>,
    objective: i64,
    #[serde(skip_serializing_if = "Option::is_none")]
    bound: Option<i64>,
    elapsed_ms: u64,
    steps: u64,
}

/// Reads a problem in either form.
///
/// # Errors
/// What is wrong with the text or the problem.
pub fn read_problem(text: &str) -> Result<Problem, ReadError> {
    let file: File = serde_json::from_str(text)?;
    if file.fmt != FORMAT_1 && file.fmt != FORMAT_2 {
        return Err(ReadError::Format(file.fmt));
    }
    let n = file.targets.len();
    let first = row(&file.setup0, "setup0", n)?;
    let setups = setups(&file.setup, file.setup_epoch, n)?;
    let tasks = file
        .targets
        .into_iter()
        .enumerate()
        .map(|(index, target)| task(index, target));
    let problem = Problem {
        name: file.name,
        slots: file.slots,
        slot_s: file.slot_s,
        tasks: tasks.collect::<Result<_, _>>()?,
        first,
        setups,
        must: file.must,
    };
    problem.check()?;
    Ok(problem)
}

/// Writes a problem in the second form.
pub fn write_problem(problem: &Problem) -> String {
    let tables: Vec<Vec<Row>> = (0..problem.setups.epochs())
        .map(|epoch| {
            let departure = epoch as u32 * problem.setups.epoch_slots();
            (0..problem.tasks.len())
                .map(|from| row_out(problem.setups.row(from, departure)))
                .collect()
        })
        .collect();
    let mut tables = tables;
    let timed = tables.len() > 1;
    let setup = match tables.pop() {
        Some(only) if !timed => Tables::One(only),
        Some(last) => {
            tables.push(last);
            Tables::Timed(tables)
        }
        None => Tables::One(Vec::new()),
    };
    let out = FileOut {
        fmt: FORMAT_2,
        name: &problem.name,
        slots: problem.slots,
        slot_s: problem.slot_s,
        setup0: &problem.first,
        setup_epoch: timed.then(|| problem.setups.epoch_slots()),
        setup,
        targets: problem.tasks.iter().map(target_out).collect(),
        must: &problem.must,
    };
    text(&out)
}

/// Writes a plan as the checkers read it. `elapsed_ms` is the caller's to measure.
pub fn write_solution(solution: &Solution, elapsed_ms: u64) -> String {
    text(&PlanOut {
        plan: solution
            .plan
            .iter()
            .map(|visit| (visit.task, visit.start))
            .collect(),
        objective: solution.objective,
        bound: solution.bound,
        elapsed_ms,
        steps: solution.steps,
    })
}

/// Plain structures of numbers and strings always have a JSON form, so that the error case is an
/// empty text that no reader takes for a problem.
fn text(value: &impl Serialize) -> String {
    serde_json::to_string(value).unwrap_or_default()
}

fn content(place: impl Into<String>, fault: &'static str) -> ReadError {
    ReadError::Content {
        place: place.into(),
        fault,
    }
}

fn row(row: &Row, place: &str, n: usize) -> Result<Vec<u32>, ReadError> {
    let slots = match row {
        Row::Slots(slots) => slots.clone(),
        Row::Digits(digits) => digits
            .chars()
            .map(|c| c.to_digit(10))
            .collect::<Option<_>>()
            .ok_or_else(|| content(place, "give digits alone, or an array of numbers"))?,
    };
    if slots.len() != n {
        return Err(content(place, "give one entry for each target"));
    }
    if slots.iter().any(|&slots| slots > super::SLOTS_MAX) {
        return Err(content(place, "give at most 100000 slots"));
    }
    Ok(slots)
}

fn setups(tables: &Tables, epoch: Option<u32>, n: usize) -> Result<Setups, ReadError> {
    let mut flat = Vec::new();
    let mut add = |table: &[Row]| -> Result<(), ReadError> {
        if table.len() != n {
            return Err(content("setup", "give one row for each target"));
        }
        for (from, line) in table.iter().enumerate() {
            let place = format!("setup, row {from}");
            for slots in row(line, &place, n)? {
                let slots = u8::try_from(slots);
                flat.push(slots.map_err(|_| content(&*place, "give at most 255 slots"))?);
            }
        }
        Ok(())
    };
    match tables {
        Tables::One(table) => {
            add(table)?;
            Ok(Setups::constant(n, flat)?)
        }
        Tables::Timed(tables) => {
            tables.iter().try_for_each(|table| add(table))?;
            let epoch = epoch.ok_or_else(|| content("setup_epoch", "give the slots per epoch"))?;
            Ok(Setups::timed(n, epoch, flat)?)
        }
    }
}

fn task(index: usize, target: Target) -> Result<Task, ReadError> {
    let place = || format!("target {index}");
    let worth_pct = match (target.pct, target.n) {
        (Some(pct), _) => pct,
        (None, Some(n)) if n as usize <= super::VISITS_MAX => {
            let repeat = target.pct2.unwrap_or(0);
            (0..n)
                .map(|rank| if rank == 0 { 100 } else { repeat })
                .collect()
        }
        (None, Some(_)) => return Err(content(place(), "n is beyond 30000")),
        (None, None) => return Err(content(place(), "give n, or pct for each visit")),
    };
    let run = |stretch| {
        let (first, value, durations) = match stretch {
            Stretch::Same(first, value) => (first, value, None),
            Stretch::Each(first, value, durations) => (first, value, Some(durations)),
        };
        let each = |d| vec![d; value.len()];
        let duration = match (durations, target.d) {
            (Some(Durations::Each(each)), _) => each,
            (Some(Durations::Same(d)), _) | (None, Some(d)) => each(d),
            (None, None) => return Err(content(place(), "give d, or a duration in each run")),
        };
        Ok(Run {
            first,
            value,
            duration,
        })
    };
    let runs = target.v.into_iter().map(run).collect::<Result<_, _>>()?;
    Ok(Task {
        worth_pct,
        gap: target.gap,
        runs,
    })
}

fn row_out(slots: &[u8]) -> Row {
    if slots.iter().all(|&slots| slots < 10) {
        Row::Digits(
            slots
                .iter()
                .map(|&slots| char::from(b'0' + slots))
                .collect(),
        )
    } else {
        Row::Slots(slots.iter().map(|&slots| u32::from(slots)).collect())
    }
}

fn target_out(task: &Task) -> TargetOut<'_> {
    let stretch = |run: &Run| {
        let one = run
            .duration
            .first()
            .copied()
            .filter(|d| run.duration.iter().all(|e| e == d));
        let durations = match one {
            Some(d) => Durations::Same(d),
            None => Durations::Each(run.duration.clone()),
        };
        Stretch::Each(run.first, run.value.clone(), durations)
    };
    TargetOut {
        gap: task.gap,
        pct: &task.worth_pct,
        v: task.runs.iter().map(stretch).collect(),
    }
}
