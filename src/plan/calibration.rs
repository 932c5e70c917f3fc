//! Which calibrations are still wanted tonight, and when each may be made.

use crate::catalogue::{Calibration, CalibrationWhen};
use crate::record::{EntryKind, Outcome, Visit};
use crate::time::{MINUTE_MS, Utc};

use super::ask::Ask;
use super::sky_table::SkyTable;

/// Minutes within which a calibration "at the start" or "at the end" of darkness may begin.
const EDGE_SLOTS: usize = 30;

/// Share of the interval by which a calibration "every so many hours" may come early or late.
const INTERVAL_SLACK: f64 = 0.25;

/// One calibration that is wanted, and the minutes at which it may start.
#[derive(Clone, Debug, PartialEq)]
pub struct Occasion {
    /// Index in the instrument's calibrations.
    pub calibration: usize,
    /// First minute at which it may start.
    pub first: usize,
    /// First minute at which it may not start any more.
    pub until: usize,
}

impl Occasion {
    /// What it is for.
    pub fn kind(calibration: &Calibration) -> EntryKind {
        if calibration.standards.is_empty() {
            EntryKind::Calibration
        } else {
            EntryKind::Standard
        }
    }
}

/// Whole minutes that a calibration takes.
pub fn slots_of(calibration: &Calibration) -> usize {
    ((calibration.duration_s / 60.0).ceil() as usize).max(1)
}

/// The occasions left from the asked instant on, in the order of the configuration.
pub fn occasions(calibrations: &[Calibration], sky: &SkyTable, ask: &Ask) -> Vec<Occasion> {
    let first = sky.first_slot_from(ask.from);
    let mut wanted = Vec::new();
    for (index, calibration) in calibrations.iter().enumerate() {
        let last_start = (sky.slots + 1).saturating_sub(slots_of(calibration));
        let done = made(calibration, &ask.tonight);
        for (from, until) in windows(calibration, sky, &done) {
            let (from, until) = (from.max(first), until.min(last_start));
            if from < until {
                wanted.push(Occasion {
                    calibration: index,
                    first: from,
                    until,
                });
            }
        }
    }
    wanted
}

/// Starts of this calibration tonight that were carried through.
fn made(calibration: &Calibration, tonight: &[Visit]) -> Vec<Utc> {
    let kind = Occasion::kind(calibration);
    let ours = |visit: &&Visit| {
        visit.kind == kind
            && visit.outcome == Outcome::Done
            && (visit.subject.as_str() == calibration.id
                || calibration.standards.contains(&visit.subject))
    };
    let mut starts: Vec<Utc> = tonight.iter().filter(ours).map(|v| v.began).collect();
    starts.sort();
    starts
}

/// Spans of minutes in each of which one is wanted.
fn windows(calibration: &Calibration, sky: &SkyTable, done: &[Utc]) -> Vec<(usize, usize)> {
    let slots = sky.slots;
    let half = slots / 2;
    let length = slots_of(calibration);
    match calibration.when {
        CalibrationWhen::NightStart if done.is_empty() => vec![(0, EDGE_SLOTS.min(slots))],
        CalibrationWhen::NightEnd => {
            let first = slots.saturating_sub(length + EDGE_SLOTS);
            let edge = sky.instant(first);
            if done.iter().any(|at| *at >= edge) {
                Vec::new()
            } else {
                vec![(first, slots)]
            }
        }
        CalibrationWhen::EachHalf => [(0, half), (half, slots)]
            .into_iter()
            .filter(|(from, until)| {
                let (from, until) = (sky.instant(*from), sky.instant(*until));
                !done.iter().any(|at| from <= *at && *at < until)
            })
            .collect(),
        CalibrationWhen::EveryHours(hours) => every(hours, sky, done.last().copied()),
        CalibrationWhen::NightStart => Vec::new(),
    }
}

/// Windows around multiples of the interval, counted from the last one made or the start.
fn every(hours: f64, sky: &SkyTable, last: Option<Utc>) -> Vec<(usize, usize)> {
    let step = (hours * 60.0).max(1.0);
    let slack = step * INTERVAL_SLACK;
    let origin = last.map_or(0.0, |at| (at - sky.instant(0)) as f64 / MINUTE_MS as f64);
    let mut windows = Vec::new();
    let mut due = origin + step;
    while due < sky.slots as f64 {
        let first = (due - slack).max(0.0) as usize;
        let until = (due + slack) as usize + 1;
        windows.push((first, until.min(sky.slots)));
        due += step;
    }
    windows
}
