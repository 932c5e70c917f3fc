//! Price-guided search in large neighbourhoods.

use super::refill::{Gap, Refill};
use super::roster::{Night, Roster, Spot};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

/// Shortest and longest span that a move empties, seconds.
const SPAN_S: (u32, u32) = (3_600, 15_600);

/// The most that they may be of the night.
const SPAN_SHARE: (f64, f64) = (0.15, 0.6);

/// Share of the moves that empty a second span as well.
const SECOND: f64 = 0.7;

/// Temperature at the start of a cycle, as a share of the plan's worth for each of its visits.
const HEAT: f64 = 0.15;

/// Moves in the first cooling cycle; each later one is longer by half.
const CYCLE: u64 = 300;

/// What a plan is judged by: its worth, less a charge for churning a published order.
pub(super) struct Judge<'a> {
    pub night: Night<'a>,
    /// The published order and the charge for each of its visits that is dropped or moved in order.
    pub published: Option<(&'a [Spot], i64)>,
}

impl Judge<'_> {
    pub(super) fn score(&self, roster: &[Spot]) -> i64 {
        let worth = self.night.score(roster);
        match self.published {
            Some((old, charge)) if charge > 0 => {
                worth - charge * (old.len() - common_order(old, roster)) as i64
            }
            _ => worth,
        }
    }
}

/// The most visits of `old` that `new` has in the same order.
fn common_order(old: &[Spot], new: &[Spot]) -> usize {
    let mut row = vec![0usize; new.len() + 1];
    for a in old {
        let mut corner = 0;
        for (k, b) in new.iter().enumerate() {
            let above = row[k + 1];
            row[k + 1] = if a.task == b.task {
                corner + 1
            } else {
                above.max(row[k])
            };
            corner = above;
        }
    }
    row[new.len()]
}

/// The search: where it stands and the best plan so far.
pub(super) struct Search<'a> {
    judge: Judge<'a>,
    refill: Refill,
    rng: ChaCha8Rng,
    now: (i64, Roster),
    pub best: (i64, Roster),
    pub moves: u64,
    cycle_from: u64,
    cycle: u64,
    /// Random share of its price that each task is charged in a move.
    shares: Vec<f64>,
}

impl<'a> Search<'a> {
    pub(super) fn new(judge: Judge<'a>, start: Roster, seed: u64) -> Self {
        let score = judge.score(&start);
        Search {
            refill: Refill::new(&judge.night),
            rng: ChaCha8Rng::seed_from_u64(seed),
            now: (score, start.clone()),
            best: (score, start),
            moves: 0,
            cycle_from: 0,
            cycle: CYCLE,
            shares: vec![0.0; judge.night.t.tasks],
            judge,
        }
    }

    /// Takes a plan in if it is better than the best.
    pub(super) fn offer(&mut self, roster: Roster) {
        let score = self.judge.score(&roster);
        if score > self.best.0 {
            self.now = (score, roster.clone());
            self.best = (score, roster);
        }
    }

    /// The whole night filled anew at these prices (in units, by node).
    pub(super) fn refill_all(&mut self, prices: &[f64], share: f64) {
        let whole = [Gap {
            start: 0,
            end: self.now.1.len(),
        }];
        let charge = |node: usize| (prices[node] * share) as i64;
        let roster = self
            .refill
            .refill(&self.judge.night, &self.now.1, &whole, &charge);
        self.offer(roster);
    }

    /// One move at these prices (in units, by node).
    pub(super) fn step(&mut self, prices: &[f64]) {
        self.moves += 1;
        if self.moves - self.cycle_from > self.cycle {
            self.cycle_from = self.moves;
            self.cycle += self.cycle / 2;
            self.now = self.best.clone();
        }
        let gaps = self.gaps();
        for share in &mut self.shares {
            *share = self.rng.random_range(0.0..1.2);
        }
        let night = self.judge.night;
        let shares = &self.shares;
        let charge =
            |node: usize| (prices[node] * shares[night.t.nodes[node].task as usize]) as i64;
        let roster = self.refill.refill(&night, &self.now.1, &gaps, &charge);
        let score = self.judge.score(&roster);
        let cool = 1.0 - (self.moves - self.cycle_from) as f64 / self.cycle as f64;
        let visits = self.best.1.len().max(1) as f64;
        let heat = HEAT * self.best.0.max(1) as f64 / visits * cool * cool;
        let luck: f64 = self.rng.random_range(f64::MIN_POSITIVE..1.0);
        if score as f64 >= self.now.0 as f64 + heat * luck.ln() {
            if score > self.best.0 {
                self.best = (score, roster.clone());
            }
            self.now = (score, roster);
        }
    }

    /// One or two spans of the roster, as positions.
    fn gaps(&mut self) -> Vec<Gap> {
        let first = self.gap();
        if !self.rng.random_bool(SECOND) {
            return vec![first];
        }
        let second = self.gap();
        let (a, b) = if first.start <= second.start {
            (first, second)
        } else {
            (second, first)
        };
        if b.start <= a.end {
            let end = a.end.max(b.end);
            vec![Gap {
                start: a.start,
                end,
            }]
        } else {
            vec![a, b]
        }
    }

    fn gap(&mut self) -> Gap {
        let problem = self.judge.night.problem;
        let slots = |seconds: u32, share: f64| {
            let most = (f64::from(problem.slots) * share) as u32;
            i64::from((seconds / problem.slot_s.max(1)).min(most).max(2))
        };
        let length = self
            .rng
            .random_range(slots(SPAN_S.0, SPAN_SHARE.0)..=slots(SPAN_S.1, SPAN_SHARE.1));
        let from = self
            .rng
            .random_range(-length / 2..i64::from(problem.slots) - length / 2);
        let at = |slot: i64| {
            self.now
                .1
                .partition_point(|spot| i64::from(spot.start) < slot)
        };
        Gap {
            start: at(from),
            end: at(from + length),
        }
    }
}
