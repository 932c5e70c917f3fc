//! The problem as flat arrays, in the order in which the dynamic programmes walk them.

use super::problem::{Problem, ProblemError};

/// No node, no label, no task.
pub(super) const NONE: u32 = u32::MAX;

/// Fixed-point unit of priced values: a whole value is this many.
///
/// Prices are whole multiples of 1/1024 and all sums are integers, so that a bound is exact for
/// the prices it was made with and needs no margin for rounding.
pub(super) const UNIT: i64 = 1024;

/// A visit of a given rank to a task: the first visit of the night is one node, the second another.
#[derive(Clone, Copy, Debug)]
pub(super) struct Node {
    pub task: u32,
    pub rank: u32,
}

/// Everything the search reads, flat.
#[derive(Debug)]
pub(super) struct Tables {
    pub slots: usize,
    /// Nodes of one task stand side by side, in order of rank.
    pub nodes: Vec<Node>,
    /// First node of each task, and one past the last task's.
    pub first_node: Vec<u32>,
    /// Least slots between starts, by task.
    pub gap: Vec<u32>,
    /// Earliest first start, by task.
    pub first: Vec<u32>,
    /// Allowed starts in order of slot: node, worth and end of each.
    pub node: Vec<u32>,
    pub worth: Vec<i32>,
    pub end: Vec<u32>,
    pub slot: Vec<u32>,
    /// Where each slot's starts begin, and one past the last.
    pub by_slot: Vec<u32>,
    /// Starts in order of end, and where each end's begin.
    pub ends: Vec<u32>,
    pub by_end: Vec<u32>,
    /// Starts in order of node and slot, and where each node's begin.
    of_node: Vec<u32>,
    by_node: Vec<u32>,
    /// Set-up tables by epoch, from, to.
    setup: Vec<u8>,
    /// The table that holds for a departure slot.
    epoch_of: Vec<u32>,
    /// Words of a set of nodes.
    pub words: usize,
    /// By slot: the nodes that may start.
    active: Vec<u64>,
    /// By epoch, wait beyond the shortest set-up, and task: the nodes whose set-up is then over.
    ready: Vec<u64>,
    pub tasks: usize,
    pub setup_min: usize,
    pub setup_max: usize,
    /// Must groups that can be served at all, by task; and the groups of each task.
    pub must: Vec<Vec<u32>>,
    pub groups_of: Vec<Vec<u32>>,
    /// More than any plan can be worth: what an unserved group costs inside the search.
    pub penalty: i64,
}

impl Tables {
    pub(super) fn new(problem: &Problem) -> Result<Self, ProblemError> {
        problem.check()?;
        let mut nodes = Vec::new();
        let mut first_node = Vec::new();
        for (task, t) in problem.tasks.iter().enumerate() {
            first_node.push(nodes.len() as u32);
            for rank in 0..useful_visits(problem, task).min(t.visits()) {
                nodes.push(Node {
                    task: task as u32,
                    rank: rank as u32,
                });
            }
        }
        first_node.push(nodes.len() as u32);
        let mut tables = Tables {
            slots: problem.slots as usize,
            nodes,
            first_node,
            gap: problem.tasks.iter().map(|task| task.gap).collect(),
            first: problem.first.clone(),
            node: Vec::new(),
            worth: Vec::new(),
            end: Vec::new(),
            slot: Vec::new(),
            by_slot: Vec::new(),
            ends: Vec::new(),
            by_end: Vec::new(),
            of_node: Vec::new(),
            by_node: Vec::new(),
            setup: Vec::new(),
            epoch_of: Vec::new(),
            words: 0,
            active: Vec::new(),
            ready: Vec::new(),
            tasks: problem.tasks.len(),
            setup_min: 0,
            setup_max: 0,
            must: Vec::new(),
            groups_of: vec![Vec::new(); problem.tasks.len()],
            penalty: 0,
        };
        tables.fill_starts(problem);
        tables.fill_setups(problem);
        tables.fill_groups(problem);
        Ok(tables)
    }

    /// The set-ups from a task for a visit that ended at `departure`.
    #[inline]
    pub(super) fn setup_row(&self, from: u32, departure: u32) -> &[u8] {
        let epoch = self.epoch_of[departure as usize] as usize;
        let at = (epoch * self.tasks + from as usize) * self.tasks;
        &self.setup[at..at + self.tasks]
    }

    /// The nodes that may start in a slot, as a set of bits.
    #[inline]
    pub(super) fn active(&self, slot: usize) -> &[u64] {
        &self.active[slot * self.words..(slot + 1) * self.words]
    }

    /// The nodes whose set-up is over `wait` slots after a visit to `from` ended at `departure`;
    /// only for waits from the shortest to below the longest set-up.
    #[inline]
    pub(super) fn ready(&self, from: u32, departure: usize, wait: usize) -> &[u64] {
        let waits = self.setup_max - self.setup_min;
        let row = self.epoch_of[departure] as usize * waits + wait - self.setup_min;
        let at = (row * self.tasks + from as usize) * self.words;
        &self.ready[at..at + self.words]
    }

    /// The nodes of a task.
    pub(super) fn nodes_of(&self, task: u32) -> std::ops::Range<u32> {
        self.first_node[task as usize]..self.first_node[task as usize + 1]
    }

    /// The starts of a slot.
    #[inline]
    pub(super) fn starts_at(&self, slot: usize) -> std::ops::Range<usize> {
        self.by_slot[slot] as usize..self.by_slot[slot + 1] as usize
    }

    /// The starts that end at a slot.
    #[inline]
    pub(super) fn starts_ending(&self, end: usize) -> &[u32] {
        &self.ends[self.by_end[end] as usize..self.by_end[end + 1] as usize]
    }

    /// The starts of a node, in order of slot.
    #[inline]
    pub(super) fn starts_of(&self, node: usize) -> &[u32] {
        &self.of_node[self.by_node[node] as usize..self.by_node[node + 1] as usize]
    }

    fn fill_starts(&mut self, problem: &Problem) {
        let mut cells = Vec::new();
        for (index, node) in self.nodes.iter().enumerate() {
            let task = &problem.tasks[node.task as usize];
            let soonest = task.runs.first().map_or(0, |run| u64::from(run.first))
                + u64::from(node.rank) * u64::from(task.gap);
            for run in &task.runs {
                for (k, (&value, &duration)) in run.value.iter().zip(&run.duration).enumerate() {
                    let slot = run.first + k as u32;
                    let fits = u64::from(slot) + u64::from(duration) <= u64::from(problem.slots);
                    if fits && u64::from(slot) >= soonest {
                        let worth = task.worth(node.rank as usize, value) as i32;
                        cells.push((slot, index as u32, worth, slot + duration));
                    }
                }
            }
        }
        cells.sort_unstable();
        self.by_slot = offsets(self.slots, cells.iter().map(|cell| cell.0));
        for (slot, node, worth, end) in cells {
            self.slot.push(slot);
            self.node.push(node);
            self.worth.push(worth);
            self.end.push(end);
        }
        self.by_end = offsets(self.slots + 1, self.end.iter().copied());
        self.ends = (0..self.end.len() as u32).collect();
        self.ends.sort_by_key(|&start| self.end[start as usize]);
        self.of_node = (0..self.node.len() as u32).collect();
        self.of_node.sort_by_key(|&start| self.node[start as usize]);
        let sorted = self.of_node.iter().map(|&start| self.node[start as usize]);
        self.by_node = offsets(self.nodes.len(), sorted);
    }

    fn fill_setups(&mut self, problem: &Problem) {
        let (setups, n) = (&problem.setups, self.tasks);
        let used: Vec<usize> = (0..n)
            .filter(|&t| !self.nodes_of(t as u32).is_empty())
            .collect();
        let (mut least, mut most) = (usize::MAX, 0);
        for epoch in 0..setups.epochs() {
            let departure = epoch as u32 * setups.epoch_slots();
            for from in 0..n {
                self.setup.extend_from_slice(setups.row(from, departure));
            }
            for &from in &used {
                let row = setups.row(from, departure);
                for &to in &used {
                    let repeats = self.nodes_of(to as u32).len() > 1;
                    if from != to || repeats {
                        least = least.min(usize::from(row[to]));
                        most = most.max(usize::from(row[to]));
                    }
                }
            }
        }
        self.setup_max = most;
        self.setup_min = least.min(most);
        let last = setups.epochs() - 1;
        self.epoch_of = (0..=self.slots)
            .map(|slot| (slot / setups.epoch_slots() as usize).min(last) as u32)
            .collect();
        self.fill_sets(setups.epochs());
    }

    fn fill_sets(&mut self, epochs: usize) {
        let words = self.nodes.len().div_ceil(64).max(1);
        self.words = words;
        self.active = vec![0; self.slots * words];
        for (&node, &slot) in self.node.iter().zip(&self.slot) {
            let at = slot as usize * words + node as usize / 64;
            self.active[at] |= 1 << (node % 64);
        }
        for epoch in 0..epochs {
            for wait in self.setup_min..self.setup_max {
                for from in 0..self.tasks {
                    let row = &self.setup[(epoch * self.tasks + from) * self.tasks..];
                    let mut set = vec![0u64; words];
                    for (at, node) in self.nodes.iter().enumerate() {
                        if usize::from(row[node.task as usize]) <= wait {
                            set[at / 64] |= 1 << (at % 64);
                        }
                    }
                    self.ready.extend(set);
                }
            }
        }
    }

    fn fill_groups(&mut self, problem: &Problem) {
        let mut startable = vec![false; self.tasks];
        for &node in &self.node {
            startable[self.nodes[node as usize].task as usize] = true;
        }
        for group in &problem.must {
            let members: Vec<u32> = (0..self.tasks as u32)
                .filter(|&task| group.contains(&(task as usize)))
                .filter(|&task| startable[task as usize])
                .collect();
            if members.is_empty() {
                continue;
            }
            for &task in &members {
                self.groups_of[task as usize].push(self.must.len() as u32);
            }
            self.must.push(members);
        }
        let mut best = vec![0i64; self.nodes.len()];
        for (&node, &worth) in self.node.iter().zip(&self.worth) {
            best[node as usize] = best[node as usize].max(i64::from(worth));
        }
        let worst = self.worth.iter().copied().min().unwrap_or(0).min(0);
        self.penalty = 1 + best.iter().sum::<i64>() - i64::from(worst) * self.slots as i64;
    }
}

/// No more visits than fit between the first and the last allowed start.
fn useful_visits(problem: &Problem, task: usize) -> usize {
    let task = &problem.tasks[task];
    let (Some(first), Some(last)) = (task.runs.first(), task.runs.last()) else {
        return 0;
    };
    let span = (last.first + last.value.len() as u32).saturating_sub(first.first);
    span.div_ceil(task.gap.max(1)) as usize
}

/// Where each key's entries begin in a list sorted by key, and one past the last.
fn offsets(keys: usize, sorted: impl Iterator<Item = u32>) -> Vec<u32> {
    let mut at = vec![0u32; keys + 1];
    for key in sorted {
        at[key as usize + 1] += 1;
    }
    for key in 0..keys {
        at[key + 1] += at[key];
    }
    at
}
