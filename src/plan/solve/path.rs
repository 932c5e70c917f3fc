//! The exact longest path of the relaxed problem.
//!
//! With prices on visits, the rules that tie far-apart visits together (at most so many, gaps,
//! groups) are gone from the constraints, and the best "plan" is a longest path over states (last
//! visit, slot). Starts, durations, set-ups with their change through the night and blocked spans
//! are kept exactly. Two-cycles (i, j, i again) are eliminated by keeping two paths for each state
//! that come from different visits.
//!
//! What makes this sound with repeat visits: a path's last-but-one visit forbids only *the very
//! same visit* (same task, same rank). A second-rank visit after a first-rank one of the same task
//! stays allowed, at once where the gap allows, and after any other visit without looking at the
//! gap: that rule is left to the prices. Forbidding more would need more than two paths a state.

use super::tables::{NONE, Tables};

/// A path's end as the next visit sees it.
#[derive(Clone, Copy, Debug)]
struct Entry {
    value: i64,
    label: u32,
    node: u32,
    task: u32,
    pred: u32,
    pred_task: u32,
    start: u32,
}

impl Entry {
    /// Does a path exist that both of these would refuse to be continued by?
    fn apart(&self, other: &Entry) -> bool {
        let hits = |task: u32| task != NONE && (task == other.task || task == other.pred_task);
        !hits(self.task) && !hits(self.pred_task)
    }
}

/// The two best ways found so far to come to a start, over different last visits.
#[derive(Clone, Copy, Debug)]
struct TopTwo {
    value: [i64; 2],
    from: [u32; 2],
    pred: [u32; 2],
}

const NEVER: i64 = i64::MIN / 4;

impl TopTwo {
    const EMPTY: TopTwo = TopTwo {
        value: [NEVER; 2],
        from: [NONE; 2],
        pred: [NONE - 1; 2],
    };

    #[inline]
    fn offer(&mut self, value: i64, from: u32, pred: u32) {
        if value > self.value[0] {
            if pred != self.pred[0] {
                self.value[1] = self.value[0];
                self.from[1] = self.from[0];
                self.pred[1] = self.pred[0];
            }
            self.value[0] = value;
            self.from[0] = from;
            self.pred[0] = pred;
        } else if value > self.value[1] && pred != self.pred[0] {
            self.value[1] = value;
            self.from[1] = from;
            self.pred[1] = pred;
        }
    }
}

/// Working memory of the longest path, used again at each step.
#[derive(Debug)]
pub(super) struct Longest {
    /// Best value of a path that ends with each start, two per start, this start's own included.
    value: Vec<i64>,
    /// Where that path comes from.
    from: Vec<u32>,
    pred: Vec<u32>,
    /// Ends of the last few slots that could beat the base, best first, by end slot.
    fresh: Vec<Entry>,
    fresh_at: Vec<u32>,
    /// Paths from which every set-up is over, best first.
    base: Vec<Entry>,
    /// What a path must beat to enter the base.
    floor: i64,
    /// Ways to come to the starts of the slot in hand; each node's place among them; who wants more.
    tops: Vec<TopTwo>,
    place_of: Vec<u32>,
    wanting: Vec<u64>,
}

impl Longest {
    pub(super) fn new(tables: &Tables) -> Self {
        let labels = 2 * tables.node.len();
        Longest {
            value: vec![NEVER; labels],
            from: vec![NONE; labels],
            pred: vec![NONE; labels],
            fresh: Vec::new(),
            fresh_at: Vec::new(),
            base: Vec::new(),
            floor: NEVER / 2,
            tops: Vec::new(),
            place_of: vec![0; tables.nodes.len()],
            wanting: Vec::new(),
        }
    }

    /// The best path for the priced worth of each start; its value, and its starts in `path`.
    pub(super) fn solve(&mut self, t: &Tables, priced: &[i64], path: &mut Vec<u32>) -> i64 {
        self.fresh.clear();
        self.fresh_at.clear();
        self.fresh_at.push(0);
        self.base.clear();
        self.floor = NEVER / 2;
        let mut best = (0, NONE);
        for slot in 0..t.slots {
            if let Some(end) = slot.checked_sub(t.setup_min) {
                self.finish_end(t, end);
            }
            if let Some(end) = slot.checked_sub(t.setup_max) {
                self.absorb(end);
            }
            self.arrive(t, slot);
            for (start, top) in t.starts_at(slot).zip(&self.tops) {
                let own = priced[start];
                let at = 2 * start;
                for k in 0..2 {
                    self.value[at + k] = top.value[k] + own;
                    self.from[at + k] = top.from[k];
                    self.pred[at + k] = top.pred[k];
                }
                if self.value[at] > best.0 {
                    best = (self.value[at], at as u32);
                }
            }
        }
        path.clear();
        let mut label = best.1;
        while label != NONE {
            path.push(label / 2);
            label = self.from[label as usize];
        }
        path.reverse();
        best.0
    }

    /// Finds the two best ways to come to each start of the slot.
    ///
    /// Paths are taken one by one, best first, and offered to all starts at once that they may be
    /// continued by: a set of bits holds the starts that still want one. A start drops out when its
    /// second best way is as good.
    fn arrive(&mut self, t: &Tables, slot: usize) {
        let starts = t.starts_at(slot);
        self.tops.clear();
        self.tops.resize(starts.len(), TopTwo::EMPTY);
        for (place, start) in starts.enumerate() {
            let node = t.node[start];
            self.place_of[node as usize] = place as u32;
            if slot as u32 >= t.first[t.nodes[node as usize].task as usize] {
                self.tops[place].offer(0, NONE, NONE);
            }
        }
        let mut wanting = std::mem::take(&mut self.wanting);
        wanting.clear();
        wanting.extend_from_slice(t.active(slot));
        for at in 0..self.base.len() {
            let entry = self.base[at];
            self.offer(t, &entry, slot, &mut wanting, None);
        }
        for end in (slot + 1).saturating_sub(t.setup_max)..(slot + 1).saturating_sub(t.setup_min) {
            wanting.clear();
            wanting.extend_from_slice(t.active(slot));
            for at in self.fresh_at[end] as usize..self.fresh_at[end + 1] as usize {
                let entry = self.fresh[at];
                let ready = t.ready(entry.task, end, slot - end);
                self.offer(t, &entry, slot, &mut wanting, Some(ready));
            }
        }
        self.wanting = wanting;
    }

    #[inline]
    fn offer(
        &mut self,
        t: &Tables,
        entry: &Entry,
        slot: usize,
        wanting: &mut [u64],
        ready: Option<&[u64]>,
    ) {
        for (word, wanting) in wanting.iter_mut().enumerate() {
            let mut nodes = *wanting & ready.map_or(u64::MAX, |ready| ready[word]);
            while nodes != 0 {
                let bit = nodes.trailing_zeros();
                nodes &= nodes - 1;
                let node = word as u32 * 64 + bit;
                let top = &mut self.tops[self.place_of[node as usize] as usize];
                if entry.value <= top.value[1] {
                    *wanting &= !(1 << bit);
                } else if follows(t, entry, node, slot as u32) {
                    top.offer(entry.value, entry.label, entry.node);
                }
            }
        }
    }

    /// Lists the paths that end at `end` and could beat the base, best first.
    fn finish_end(&mut self, t: &Tables, end: usize) {
        let floor = self.floor;
        let from = self.fresh.len();
        for &start in t.starts_ending(end) {
            for label in [2 * start, 2 * start + 1] {
                let value = self.value[label as usize];
                if value > floor {
                    self.fresh
                        .push(entry(t, start, label, value, self.pred[label as usize]));
                }
            }
        }
        self.fresh[from..].sort_unstable_by_key(|entry| (-entry.value, entry.label));
        self.fresh_at.push(self.fresh.len() as u32);
    }

    /// Takes the paths that ended at `end` into the base: every set-up from there is over.
    fn absorb(&mut self, end: usize) {
        let list = self.fresh_at[end] as usize..self.fresh_at[end + 1] as usize;
        for entry in &self.fresh[list] {
            if entry.value <= self.floor {
                break;
            }
            let at = self.base.partition_point(|kept| kept.value >= entry.value);
            self.base.insert(at, *entry);
            self.floor = cut(&mut self.base);
        }
    }
}

fn entry(t: &Tables, start: u32, label: u32, value: i64, pred: u32) -> Entry {
    let node = t.node[start as usize];
    let pred_task = t.nodes.get(pred as usize).map_or(NONE, |pred| pred.task);
    Entry {
        value,
        label,
        node,
        task: t.nodes[node as usize].task,
        pred,
        pred_task,
        start: t.slot[start as usize],
    }
}

/// May a path that ends so be continued by this visit? (The set-up is looked at elsewhere.)
#[inline]
fn follows(t: &Tables, entry: &Entry, node: u32, slot: u32) -> bool {
    if entry.pred == node {
        return false;
    }
    let task = entry.task;
    !t.nodes_of(task).contains(&node)
        || (node == entry.node + 1 && slot >= entry.start + t.gap[task as usize])
}

/// Drops from the base what no next visit can want, and returns the value that a path must beat to
/// be of use to anyone.
///
/// Kept is the shortest beginning with three paths whose last two tasks are all different: any next
/// visit is refused by one of these three at the most, so that it has two to choose from.
fn cut(base: &mut Vec<Entry>) -> i64 {
    let mut chosen: [usize; 2] = [0; 2];
    let mut count = 0;
    for (at, entry) in base.iter().enumerate() {
        if chosen[..count]
            .iter()
            .all(|&other| base[other].apart(entry))
        {
            if count == 2 {
                let floor = entry.value;
                base.truncate(at + 1);
                return floor;
            }
            chosen[count] = at;
            count += 1;
        }
    }
    NEVER / 2
}
