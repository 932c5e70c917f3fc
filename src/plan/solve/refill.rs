//! Refills spans of a plan with the best visits that a single sweep can find.
//!
//! The sweep is a dynamic programme over (last visit, slot) as for the bound, but each path carries
//! the set of its visits and takes none twice, and one path is kept for each state: quick, always a
//! legal plan, not always the best one.

use super::roster::{Night, Roster, Spot};
use super::tables::{NONE, UNIT};

/// Paths from which every set-up is over that are kept, best first.
const BASE: usize = 6;

/// Paths kept for each end slot while set-ups from it may still run.
const RECENT: usize = 12;

/// Paths taken across the fixed visits between two spans.
const ACROSS: usize = 6;

/// What may be done with a node in a refill.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Use {
    /// Not at all.
    No,
    /// As a visit of its own rank: the task has no visit outside the spans.
    Own,
    /// As one more visit among those outside the spans.
    Among,
}

#[derive(Clone, Copy, Debug)]
struct Label {
    value: i64,
    task: u32,
    node: u32,
    start: u32,
    end: u32,
    parent: u32,
}

/// Working memory of the refill.
#[derive(Debug)]
pub(super) struct Refill {
    labels: Vec<Label>,
    /// Which nodes each label's path has visited.
    bits: Vec<u64>,
    stride: usize,
    base: Vec<u32>,
    recent: Vec<Vec<u32>>,
    uses: Vec<Use>,
    charge: Vec<i64>,
    outside: Vec<Vec<u32>>,
    served: Vec<bool>,
}

/// Positions of a roster that are to be filled anew, from `start` to before `end`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Gap {
    pub start: usize,
    pub end: usize,
}

impl Refill {
    pub(super) fn new(night: &Night) -> Self {
        let t = night.t;
        Refill {
            labels: Vec::new(),
            bits: Vec::new(),
            stride: t.nodes.len().div_ceil(64).max(1),
            base: Vec::new(),
            recent: vec![Vec::new(); t.slots + 1],
            uses: vec![Use::No; t.nodes.len()],
            charge: vec![0; t.nodes.len()],
            outside: vec![Vec::new(); t.tasks],
            served: vec![false; t.must.len()],
        }
    }

    /// The roster with its `gaps` (rising, not touching) filled anew. `charge` is what each visit
    /// must be worth beyond its time, by node, in units.
    pub(super) fn refill(
        &mut self,
        night: &Night,
        roster: &[Spot],
        gaps: &[Gap],
        charge: &dyn Fn(usize) -> i64,
    ) -> Roster {
        self.prepare(night, roster, gaps, charge);
        let mut front: Vec<u32> = Vec::new();
        for (index, gap) in gaps.iter().enumerate() {
            let before = gap.start.checked_sub(1).map(|at| roster[at]);
            if index == 0 {
                front.push(self.push(None, 0, before, NONE));
            } else if let Some(before) = before {
                for label in &mut front {
                    let value = self.labels[*label as usize].value;
                    *label = self.push(Some(*label), value, Some(before), NONE);
                }
            }
            let next = roster.get(gap.end).copied();
            let keep = if index + 1 == gaps.len() { 1 } else { ACROSS };
            self.sweep(night, &front, next);
            let first = front.first().copied().unwrap_or(0);
            front = self.best(night, first, next, keep);
            if front.is_empty() {
                return roster.to_vec();
            }
        }
        let mut kept: Roster = Vec::new();
        let mut at = 0;
        for gap in gaps {
            kept.extend(&roster[at..gap.start]);
            at = gap.end;
        }
        kept.extend(&roster[at..]);
        let mut label = front[0];
        while label != NONE {
            let Label {
                task,
                node,
                start,
                end,
                parent,
                ..
            } = self.labels[label as usize];
            if node != NONE {
                kept.push(Spot { task, start, end });
            }
            label = parent;
        }
        kept.sort_unstable_by_key(|spot| spot.start);
        kept
    }

    fn prepare(
        &mut self,
        night: &Night,
        roster: &[Spot],
        gaps: &[Gap],
        charge: &dyn Fn(usize) -> i64,
    ) {
        let t = night.t;
        self.labels.clear();
        self.bits.clear();
        self.outside.iter_mut().for_each(Vec::clear);
        for (at, spot) in roster.iter().enumerate() {
            if !gaps.iter().any(|gap| (gap.start..gap.end).contains(&at)) {
                self.outside[spot.task as usize].push(spot.start);
            }
        }
        for (index, node) in t.nodes.iter().enumerate() {
            let outside = self.outside[node.task as usize].len();
            let most = t.nodes_of(node.task).len();
            self.uses[index] = match (outside, node.rank) {
                (0, _) => Use::Own,
                (n, 0) if n < most => Use::Among,
                _ => Use::No,
            };
            let paid = if self.uses[index] == Use::Among {
                index + outside
            } else {
                index
            };
            self.charge[index] = charge(paid);
        }
        for (served, group) in self.served.iter_mut().zip(&t.must) {
            *served = group
                .iter()
                .any(|&task| !self.outside[task as usize].is_empty());
        }
    }

    /// A new label whose path is `parent`'s, with this spot at its end.
    fn push(&mut self, parent: Option<u32>, value: i64, spot: Option<Spot>, node: u32) -> u32 {
        let label = self.labels.len() as u32;
        let at = self.bits.len();
        match parent {
            Some(parent) => {
                let from = parent as usize * self.stride;
                self.bits.extend_from_within(from..from + self.stride);
            }
            None => self.bits.resize(at + self.stride, 0),
        }
        if node != NONE {
            self.bits[at + node as usize / 64] |= 1 << (node % 64);
        }
        let (task, start, end) = spot.map_or((NONE, 0, 0), |s| (s.task, s.start, s.end));
        self.labels.push(Label {
            value,
            task,
            node,
            start,
            end,
            parent: parent.unwrap_or(NONE),
        });
        label
    }

    #[inline]
    fn has(&self, label: u32, node: u32) -> bool {
        let at = label as usize * self.stride + node as usize / 64;
        self.bits[at] >> (node % 64) & 1 == 1
    }

    /// Runs through the slots up to the next fixed visit, from the paths of `front`.
    fn sweep(&mut self, night: &Night, front: &[u32], next: Option<Spot>) {
        let t = night.t;
        let from = front
            .first()
            .map_or(0, |&label| self.labels[label as usize].end as usize);
        let to = next.map_or(t.slots, |next| next.start as usize);
        self.base.clear();
        self.recent[from..=to].iter_mut().for_each(Vec::clear);
        for &label in front {
            keep(&self.labels, &mut self.recent[from], label, RECENT);
        }
        let parked = front.len() == 1 && self.labels[front[0] as usize].task == NONE;
        for slot in from..to {
            if let Some(end) = slot.checked_sub(t.setup_max).filter(|&end| end >= from) {
                for at in 0..self.recent[end].len() {
                    let label = self.recent[end][at];
                    if !(parked && label == front[0]) {
                        keep(&self.labels, &mut self.base, label, BASE);
                    }
                }
            }
            let floor = if self.base.len() == BASE {
                self.labels[self.base[BASE - 1] as usize].value
            } else {
                i64::MIN
            };
            let recent = from.max((slot + 1).saturating_sub(t.setup_max))
                ..(slot + 1).saturating_sub(t.setup_min);
            for start in t.starts_at(slot) {
                let node = t.node[start];
                let end = t.end[start];
                if self.uses[node as usize] == Use::No || end as usize > to {
                    continue;
                }
                let spot = Spot {
                    task: t.nodes[node as usize].task,
                    start: slot as u32,
                    end,
                };
                let mut parent = self.parent(night, node, &spot, recent.clone());
                if parked && slot as u32 >= t.first[spot.task as usize] {
                    let better = parent.is_none_or(|p| self.labels[p as usize].value < 0);
                    if better && self.allows(night, front[0], node, &spot) {
                        parent = Some(front[0]);
                    }
                }
                let Some(parent) = parent else { continue };
                let Some(gain) = self.gain(night, parent, start, node, &spot) else {
                    continue;
                };
                let value = self.labels[parent as usize].value + gain;
                if value <= floor {
                    continue;
                }
                let list = &self.recent[end as usize];
                if list.len() == RECENT && self.labels[list[RECENT - 1] as usize].value >= value {
                    continue;
                }
                let label = self.push(Some(parent), value, Some(spot), node);
                keep(&self.labels, &mut self.recent[end as usize], label, RECENT);
            }
        }
    }

    /// The best path that this visit may follow.
    #[inline]
    fn parent(
        &self,
        night: &Night,
        node: u32,
        spot: &Spot,
        recent: std::ops::Range<usize>,
    ) -> Option<u32> {
        let mut best = None;
        let mut value = i64::MIN;
        for &label in &self.base {
            if self.allows(night, label, node, spot) {
                best = Some(label);
                value = self.labels[label as usize].value;
                break;
            }
        }
        for end in recent {
            for &label in &self.recent[end] {
                let at = &self.labels[label as usize];
                if at.value <= value {
                    break;
                }
                if at.task == NONE {
                    continue;
                }
                let setup = u32::from(night.t.setup_row(at.task, at.end)[spot.task as usize]);
                if at.end + setup <= spot.start && self.allows(night, label, node, spot) {
                    best = Some(label);
                    value = at.value;
                    break;
                }
            }
        }
        best
    }

    /// May the path take this visit, as far as its own visits go?
    #[inline]
    fn allows(&self, night: &Night, label: u32, node: u32, spot: &Spot) -> bool {
        if self.has(label, node) {
            return false;
        }
        let rank = night.t.nodes[node as usize].rank;
        rank == 0
            || (self.has(label, node - 1)
                && self.start_of(label, node - 1) + night.t.gap[spot.task as usize] <= spot.start)
    }

    fn start_of(&self, mut label: u32, node: u32) -> u32 {
        while label != NONE {
            let at = &self.labels[label as usize];
            if at.node == node {
                return at.start;
            }
            label = at.parent;
        }
        0
    }

    /// What the visit adds to the path, its charge taken off.
    #[inline]
    fn gain(
        &self,
        night: &Night,
        parent: u32,
        start: usize,
        node: u32,
        spot: &Spot,
    ) -> Option<i64> {
        let t = night.t;
        let mut worth = match self.uses[node as usize] {
            Use::Own => i64::from(t.worth[start]),
            _ => self.gain_among(night, spot)?,
        };
        for &group in &t.groups_of[spot.task as usize] {
            let serves = |&task: &u32| self.has(parent, t.first_node[task as usize]);
            if !self.served[group as usize] && !t.must[group as usize].iter().any(serves) {
                worth += t.penalty;
            }
        }
        Some(worth * UNIT - self.charge[node as usize])
    }

    /// What one more visit adds to a task that has visits outside the spans.
    fn gain_among(&self, night: &Night, spot: &Spot) -> Option<i64> {
        let task = &night.problem.tasks[spot.task as usize];
        let outside = &self.outside[spot.task as usize];
        if outside
            .iter()
            .any(|&start| start.abs_diff(spot.start) < task.gap)
        {
            return None;
        }
        let rank = outside.partition_point(|&start| start < spot.start);
        let mut gain = task.worth(rank, task.at(spot.start)?.0);
        for (k, &later) in outside.iter().enumerate().skip(rank) {
            let value = task.at(later)?.0;
            gain += task.worth(k + 1, value) - task.worth(k, value);
        }
        Some(gain)
    }

    /// The best paths that leave time for the next fixed visit.
    fn best(&self, night: &Night, first: u32, next: Option<Spot>, most: usize) -> Vec<u32> {
        let mut best = Vec::new();
        for label in first..self.labels.len() as u32 {
            let at = &self.labels[label as usize];
            let earliest = |next: Spot| {
                let spot = Spot {
                    task: at.task,
                    start: at.start,
                    end: at.end,
                };
                night.earliest((at.task != NONE).then_some(&spot), next.task)
            };
            if next.is_none_or(|next| earliest(next) <= next.start) {
                keep(&self.labels, &mut best, label, most);
            }
        }
        best
    }
}

/// Puts a label into a list of the best.
#[inline]
fn keep(labels: &[Label], list: &mut Vec<u32>, label: u32, most: usize) {
    let value = labels[label as usize].value;
    if list.len() == most {
        if labels[list[most - 1] as usize].value >= value {
            return;
        }
        list.pop();
    }
    let at = list.partition_point(|&other| labels[other as usize].value >= value);
    list.insert(at, label);
}
