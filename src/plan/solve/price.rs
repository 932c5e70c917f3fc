//! Prices: the multipliers that stand for the rules which the longest path leaves out.
//!
//! | rule | price |
//! | --- | --- |
//! | each visit of a task (first, second, …) at most once | one per visit, 0 or more |
//! | a repeat visit only after the one before it and its gap | one per cut of the night: by each cut time, repeats started are no more than visits before them started a gap earlier |
//! | of each must group at least one | one per group, 0 or more |

use super::path::Longest;
use super::tables::{NONE, Tables, UNIT};

/// Cut times for each repeat visit; the last one is the end of the night.
pub(super) const CUTS: usize = 12;

/// The multipliers, in values; they seed the next plan of the same night.
///
/// They belong to the tasks and slots of the problem that they were found for; any others are
/// sound too, only less good.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Prices {
    /// By task: what the right to each of its visits is worth beyond the time it takes.
    pub tasks: Vec<TaskPrices>,
    /// By group of the problem (those that no allowed start can serve left out).
    pub must: Vec<f64>,
}

/// The multipliers of one task.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct TaskPrices {
    /// For each of its visits.
    pub visits: Vec<f64>,
    /// For each visit, its cuts; all 0 for the first visit.
    pub repeats: Vec<[f64; CUTS]>,
}

impl Prices {
    /// The prices after `done` has been carried out, for a problem made by
    /// [`super::Problem::resume`].
    pub fn resume(&self, done: &[super::Placement]) -> Prices {
        let mut rest = self.clone();
        for visit in done {
            let Some(task) = rest.tasks.get_mut(visit.task) else {
                continue;
            };
            if !task.visits.is_empty() {
                task.visits.remove(0);
            }
            if !task.repeats.is_empty() {
                task.repeats.remove(0);
            }
            if let Some(first) = task.repeats.first_mut() {
                *first = [0.0; CUTS];
            }
        }
        rest.must.clear();
        rest
    }
}

/// The multipliers as the steps move them: in [`UNIT`]s.
#[derive(Clone, Debug)]
pub(super) struct Multipliers {
    pub node: Vec<f64>,
    /// `CUTS` for each node; used where the rank is 1 or more.
    pub cut: Vec<f64>,
    pub must: Vec<f64>,
}

impl Multipliers {
    pub(super) fn zero(t: &Tables) -> Self {
        Multipliers {
            node: vec![0.0; t.nodes.len()],
            cut: vec![0.0; t.nodes.len() * CUTS],
            must: vec![0.0; t.must.len()],
        }
    }

    /// A first guess: what the best start of a visit is worth beyond its time at the going rate.
    pub(super) fn guess(t: &Tables) -> Self {
        let rate = going_rate(t);
        let mut guess = Multipliers::zero(t);
        for start in 0..t.node.len() {
            let rent = (f64::from(t.worth[start]) - rate * span(t, start)) * UNIT as f64;
            let node = &mut guess.node[t.node[start] as usize];
            *node = node.max(rent);
        }
        guess
    }

    /// Prices from before, as far as they fit.
    pub(super) fn from_prices(t: &Tables, prices: &Prices) -> Self {
        let mut warm = Multipliers::zero(t);
        let unit = |price: f64| {
            if price.is_finite() {
                price.max(0.0) * UNIT as f64
            } else {
                0.0
            }
        };
        for (index, node) in t.nodes.iter().enumerate() {
            let Some(task) = prices.tasks.get(node.task as usize) else {
                continue;
            };
            if let Some(&price) = task.visits.get(node.rank as usize) {
                warm.node[index] = unit(price);
            }
            if let Some(cuts) = task
                .repeats
                .get(node.rank as usize)
                .filter(|_| node.rank > 0)
            {
                for (to, &price) in warm.cut[index * CUTS..].iter_mut().zip(cuts) {
                    *to = unit(price);
                }
            }
        }
        if prices.must.len() == t.must.len() {
            for (to, &price) in warm.must.iter_mut().zip(&prices.must) {
                *to = unit(price).min((t.penalty * UNIT) as f64);
            }
        }
        warm
    }

    pub(super) fn to_prices(&self, t: &Tables) -> Prices {
        let value = |price: f64| price / UNIT as f64;
        let tasks = (0..t.tasks as u32)
            .map(|task| TaskPrices {
                visits: t
                    .nodes_of(task)
                    .map(|n| value(self.node[n as usize]))
                    .collect(),
                repeats: t
                    .nodes_of(task)
                    .map(|n| std::array::from_fn(|c| value(self.cut[n as usize * CUTS + c])))
                    .collect(),
            })
            .collect();
        Prices {
            tasks,
            must: self.must.iter().map(|&price| value(price)).collect(),
        }
    }
}

/// Slots that a visit takes, set-up included.
fn span(t: &Tables, start: usize) -> f64 {
    f64::from(t.end[start] - t.slot[start]) + t.setup_min as f64 + 0.5
}

/// What a slot is worth at the margin: visits fill the night in the order of what they give a slot,
/// and the one with which it is full sets the rate (the linear knapsack, Dantzig 1957). An average
/// would let a few calibrations of great value speak for all.
fn going_rate(t: &Tables) -> f64 {
    let mut best = vec![(0.0, 0.0); t.nodes.len()];
    for start in 0..t.node.len() {
        let span = span(t, start);
        let rate = f64::from(t.worth[start]) / span;
        let of = &mut best[t.node[start] as usize];
        if rate > of.0 {
            *of = (rate, span);
        }
    }
    best.sort_by(|a, b| b.0.total_cmp(&a.0));
    let mut left = t.slots as f64;
    for (rate, span) in best {
        left -= span;
        if left <= 0.0 {
            return rate;
        }
    }
    0.0
}

/// The relaxed problem with its prices, and the best bound so far.
pub(super) struct Relaxation<'t> {
    t: &'t Tables,
    longest: Longest,
    now: Multipliers,
    /// The prices of the best bound.
    pub best: Multipliers,
    /// The best bound, in [`UNIT`]s, unserved groups counted at their penalty.
    pub bound: i64,
    /// Steps taken.
    pub steps: u64,
    direction: Multipliers,
    length: f64,
    stalled: u32,
    /// For each node of rank 1 or more: cut times, and the credit by slot at the prices of now.
    cut_times: Vec<[u32; CUTS]>,
    credit: Vec<i64>,
    credit_of: Vec<u32>,
    priced: Vec<i64>,
    path: Vec<u32>,
}

/// How much of the last direction is kept: damps the zigzag of plain subgradient steps.
const MOMENTUM: f64 = 0.6;

/// Steps without a better bound after which the step length is cut.
const PATIENCE: u32 = 6;

impl<'t> Relaxation<'t> {
    pub(super) fn new(t: &'t Tables, prices: Multipliers) -> Self {
        let mut credit_of = vec![NONE; t.nodes.len()];
        let mut repeats = 0;
        for (of, node) in credit_of.iter_mut().zip(&t.nodes) {
            if node.rank > 0 {
                *of = repeats * t.slots as u32;
                repeats += 1;
            }
        }
        Relaxation {
            t,
            longest: Longest::new(t),
            best: prices.clone(),
            now: prices,
            bound: i64::MAX,
            steps: 0,
            direction: Multipliers::zero(t),
            length: 1.0,
            stalled: 0,
            cut_times: cut_times(t),
            credit: vec![0; repeats as usize * t.slots],
            credit_of,
            priced: vec![0; t.node.len()],
            path: Vec::new(),
        }
    }

    /// One step: solves the relaxed problem at the prices of now, and moves them towards a bound of
    /// `target` (the value of the best plan known, in [`UNIT`]s). Returns the path found.
    pub(super) fn step(&mut self, target: i64) -> &[u32] {
        self.reprice();
        let value = self.longest.solve(self.t, &self.priced, &mut self.path);
        let bound = value + self.constant();
        self.steps += 1;
        if bound < self.bound {
            self.bound = bound;
            self.best = self.now.clone();
            self.stalled = 0;
        } else {
            self.stalled += 1;
            if self.stalled >= PATIENCE {
                self.stalled = 0;
                self.length *= 0.7;
                self.now = self.best.clone();
            }
        }
        self.descend(bound - target);
        &self.path
    }

    /// Value of the relaxed problem at the prices of now without the visits that touch a span of
    /// slots, prices' constant left out, in [`UNIT`]s.
    pub(super) fn value_without(&mut self, span: &std::ops::Range<u32>) -> i64 {
        self.reprice();
        for (start, priced) in self.priced.iter_mut().enumerate() {
            if self.t.slot[start] < span.end && self.t.end[start] > span.start {
                *priced = -(self.t.penalty * UNIT);
            }
        }
        self.longest.solve(self.t, &self.priced, &mut self.path)
    }

    /// Nothing is left to gain: the steps have become too short.
    pub(super) fn settled(&self) -> bool {
        self.length < 0.004
    }

    fn constant(&self) -> i64 {
        let visits: i64 = self
            .now
            .node
            .iter()
            .map(|&price| price.round() as i64)
            .sum();
        let must: i64 = self
            .now
            .must
            .iter()
            .map(|&price| price.round() as i64)
            .sum();
        visits - must
    }

    /// The priced worth of every start at the prices of now.
    fn reprice(&mut self) {
        let t = self.t;
        for (node, &of) in self
            .credit_of
            .iter()
            .enumerate()
            .filter(|(_, of)| **of != NONE)
        {
            let credit = &mut self.credit[of as usize..of as usize + t.slots];
            credit.fill(0);
            for (c, &time) in self.cut_times[node].iter().enumerate() {
                let price = self.now.cut[node * CUTS + c].round() as i64;
                if price > 0 {
                    credit[..(time as usize).min(t.slots)]
                        .iter_mut()
                        .for_each(|m| *m += price);
                }
            }
        }
        let mut rent: Vec<i64> = self
            .now
            .node
            .iter()
            .map(|&price| price.round() as i64)
            .collect();
        for (group, members) in t.must.iter().enumerate() {
            for &task in members {
                rent[t.first_node[task as usize] as usize] -= self.now.must[group].round() as i64;
            }
        }
        for (start, priced) in self.priced.iter_mut().enumerate() {
            let node = t.node[start] as usize;
            *priced = i64::from(t.worth[start]) * UNIT - rent[node];
        }
        for node in 0..t.nodes.len() {
            if self.credit_of[node] != NONE {
                self.price_repeat(node);
            }
        }
    }

    /// A repeat visit pays for being early; the visit before it is credited with as much.
    fn price_repeat(&mut self, node: usize) {
        let t = self.t;
        let of = self.credit_of[node] as usize;
        let credit = &self.credit[of..of + t.slots];
        let gap = t.gap[t.nodes[node].task as usize] as usize;
        for &start in t.starts_of(node) {
            self.priced[start as usize] -= credit[t.slot[start as usize] as usize];
        }
        for &start in t.starts_of(node - 1) {
            let open = t.slot[start as usize] as usize + gap;
            self.priced[start as usize] += credit.get(open).copied().unwrap_or(0);
        }
    }

    /// Moves the prices along the (damped) subgradient by a Polyak step towards the target.
    fn descend(&mut self, gap: i64) {
        let slope = self.slope();
        let mut norm = 0.0;
        let mut blend = |to: &mut f64, g: f64, price: f64| {
            let kept = MOMENTUM * *to + g;
            *to = if price <= 0.0 && kept < 0.0 {
                0.0
            } else {
                kept
            };
            norm += *to * *to;
        };
        let (d, now) = (&mut self.direction, &self.now);
        d.node
            .iter_mut()
            .zip(&slope.node)
            .zip(&now.node)
            .for_each(|((d, g), p)| blend(d, *g, *p));
        d.cut
            .iter_mut()
            .zip(&slope.cut)
            .zip(&now.cut)
            .for_each(|((d, g), p)| blend(d, *g, *p));
        d.must
            .iter_mut()
            .zip(&slope.must)
            .zip(&now.must)
            .for_each(|((d, g), p)| blend(d, *g, *p));
        if norm <= 0.0 {
            return;
        }
        let step = self.length * gap.max(UNIT / 4) as f64 / norm;
        let most = (self.t.penalty * UNIT) as f64;
        let shift = |price: &mut f64, d: &f64| *price = (*price + step * d).clamp(0.0, most);
        self.now
            .node
            .iter_mut()
            .zip(&self.direction.node)
            .for_each(|(p, d)| shift(p, d));
        self.now
            .cut
            .iter_mut()
            .zip(&self.direction.cut)
            .for_each(|(p, d)| shift(p, d));
        self.now
            .must
            .iter_mut()
            .zip(&self.direction.must)
            .for_each(|(p, d)| shift(p, d));
    }

    /// By how much the path breaks each rule: the way in which its price should go.
    fn slope(&self) -> Multipliers {
        let t = self.t;
        let mut slope = Multipliers::zero(t);
        slope.node.fill(-1.0);
        slope.must.fill(1.0);
        for &start in &self.path {
            let node = t.node[start as usize] as usize;
            let slot = t.slot[start as usize];
            let task = t.nodes[node].task;
            slope.node[node] += 1.0;
            if t.nodes[node].rank == 0 {
                for &group in &t.groups_of[task as usize] {
                    slope.must[group as usize] -= 1.0;
                }
            } else {
                for (c, &time) in self.cut_times[node].iter().enumerate() {
                    slope.cut[node * CUTS + c] += f64::from(u8::from(slot < time));
                }
            }
            if node as u32 + 1 < t.first_node[task as usize + 1] {
                let open = slot + t.gap[task as usize];
                for (c, &time) in self.cut_times[node + 1].iter().enumerate() {
                    slope.cut[(node + 1) * CUTS + c] -= f64::from(u8::from(open < time));
                }
            }
        }
        slope
    }
}

/// Cut times of each node, spread from its earliest start to the end, where the last one lies.
fn cut_times(t: &Tables) -> Vec<[u32; CUTS]> {
    let mut soonest = vec![t.slots as u32; t.nodes.len()];
    for (&node, &slot) in t.node.iter().zip(&t.slot) {
        let first = &mut soonest[node as usize];
        *first = (*first).min(slot);
    }
    let spread = |soonest: u32, c: usize| {
        let span = t.slots as u32 - soonest;
        soonest + span * (c as u32 + 1) / CUTS as u32
    };
    soonest
        .iter()
        .map(|&soonest| std::array::from_fn(|c| spread(soonest, c)))
        .collect()
}
