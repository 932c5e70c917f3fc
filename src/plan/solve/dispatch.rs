//! The constructive start: what somebody at the telescope would do next, all night long.

use super::roster::{Night, Roster, Spot};

/// How the next visit is chosen.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Rule {
    /// The most worth for each slot that it takes.
    Density,
    /// The same, raised for what can soon no longer be done.
    Urgency,
}

/// The night as dispatched by `rule`, around one reserved visit for each must group.
pub(super) fn dispatch(night: &Night, rule: Rule) -> Roster {
    let reserved = reserve(night);
    let mut coming = reserved.iter();
    let mut next = coming.next();
    let mut roster = Roster::new();
    let mut starts: Vec<Vec<u32>> = vec![Vec::new(); night.t.tasks];
    for spot in &reserved {
        starts[spot.task as usize].push(spot.start);
    }
    let mut slot = 0;
    while (slot as usize) < night.t.slots {
        if let Some(spot) = choose(night, rule, &roster, &starts, slot, next) {
            starts[spot.task as usize].push(spot.start);
            slot = spot.end;
            roster.push(spot);
        } else if let Some(spot) = next.filter(|spot| spot.start <= slot + 1) {
            slot = spot.end;
            roster.push(*spot);
            next = coming.next();
        } else {
            slot += 1;
        }
    }
    roster
}

/// For each must group a visit by one of its tasks, the scarcest group first.
fn reserve(night: &Night) -> Roster {
    let t = night.t;
    let starts = |group: usize| -> usize {
        let nodes = t.must[group]
            .iter()
            .map(|&task| t.first_node[task as usize] as usize);
        nodes.map(|node| t.starts_of(node).len()).sum()
    };
    let mut order: Vec<usize> = (0..t.must.len()).collect();
    order.sort_by_key(|&group| (starts(group), group));
    let mut reserved = Roster::new();
    for group in order {
        if reserved
            .iter()
            .any(|spot| t.must[group].contains(&spot.task))
        {
            continue;
        }
        let mut best: Option<(i64, usize, Spot)> = None;
        for &task in &t.must[group] {
            for &start in t.starts_of(t.first_node[task as usize] as usize) {
                let start = start as usize;
                let spot = Spot {
                    task,
                    start: t.slot[start],
                    end: t.end[start],
                };
                let worth = i64::from(t.worth[start]) * 16 / i64::from(spot.end - spot.start + 3);
                if best.as_ref().is_none_or(|best| worth > best.0)
                    && let Some(at) = night.place(&reserved, &spot)
                {
                    best = Some((worth, at, spot));
                }
            }
        }
        if let Some((_, at, spot)) = best {
            reserved.insert(at, spot);
        }
    }
    reserved
}

/// The visit to make when the telescope is free from `slot` on, before the `next` reserved one.
fn choose(
    night: &Night,
    rule: Rule,
    roster: &[Spot],
    starts: &[Vec<u32>],
    slot: u32,
    next: Option<&Spot>,
) -> Option<Spot> {
    let t = night.t;
    let mut best: Option<(f64, Spot)> = None;
    for task in 0..t.tasks as u32 {
        let of_task = &starts[task as usize];
        let nodes = t.nodes_of(task);
        if of_task.len() >= nodes.len() {
            continue;
        }
        let soonest = night.earliest(roster.last(), task).max(slot);
        if soonest as usize >= t.slots {
            continue;
        }
        let Some(spot) = night.spot(task, soonest) else {
            continue;
        };
        let close = |&start: &u32| start.abs_diff(spot.start) < t.gap[task as usize];
        if of_task.iter().any(close)
            || next.is_some_and(|next| next.start < night.earliest(Some(&spot), next.task))
        {
            continue;
        }
        let source = &night.problem.tasks[task as usize];
        let Some((value, _)) = source.at(spot.start) else {
            continue;
        };
        let worth = source.worth(of_task.len(), value);
        if worth <= 0 {
            continue;
        }
        let mut merit = worth as f64 / f64::from(spot.end - slot);
        if rule == Rule::Urgency {
            let last = source
                .runs
                .last()
                .map_or(0, |run| run.first + run.value.len() as u32);
            let left = f64::from(last - spot.start);
            merit *= 1.0 + (-left / (t.slots as f64 / 8.0)).exp();
        }
        if best.as_ref().is_none_or(|best| merit > best.0) {
            best = Some((merit, spot));
        }
    }
    best.map(|(_, spot)| spot)
}
