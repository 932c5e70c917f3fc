//! The planner against an exact dynamic programme that shares no code with it.
//!
//! Random micro nights are written as problem files (so that the reader is tested too), solved by
//! the planner from the text, and by a search over (visits so far, last, time) that knows only the
//! raw figures. Always: bound ≥ optimum ≥ plan, and the plan passes an independent check.

use nightwright::plan::solve::{Settings, Solution, json, solve};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use serde_json::json;
use std::collections::HashMap;

/// A micro night in raw figures.
#[derive(Debug, Clone)]
struct Micro {
    slots: i64,
    epoch: i64,
    /// By epoch, from, to.
    setup: Vec<Vec<Vec<i64>>>,
    setup0: Vec<i64>,
    targets: Vec<MicroTarget>,
    must: Vec<Vec<usize>>,
}

#[derive(Debug, Clone)]
struct MicroTarget {
    pct: Vec<i64>,
    gap: i64,
    /// Value and duration by start slot.
    starts: HashMap<i64, (i64, i64)>,
}

impl Micro {
    fn random(rng: &mut ChaCha8Rng) -> Micro {
        let n = rng.random_range(2..=6usize);
        let slots = rng.random_range(12..=34);
        let timed = rng.random_bool(0.5);
        let epochs = if timed { rng.random_range(2..=4) } else { 1 };
        let most = rng.random_range(1..=5);
        let setup = (0..epochs)
            .map(|_| {
                (0..n)
                    .map(|_| (0..n).map(|_| rng.random_range(0..=most)).collect())
                    .collect()
            })
            .collect();
        let targets = (0..n).map(|_| MicroTarget::random(rng, slots)).collect();
        let groups = rng.random_range(0..=2usize);
        let must = (0..groups)
            .map(|_| {
                (0..rng.random_range(1..=2))
                    .map(|_| rng.random_range(0..n))
                    .collect()
            })
            .collect();
        Micro {
            slots,
            epoch: slots / epochs + 1,
            setup,
            setup0: (0..n).map(|_| rng.random_range(0..=4)).collect(),
            targets,
            must,
        }
    }

    fn text(&self) -> String {
        let timed = self.setup.len() > 1;
        let targets: Vec<_> = self
            .targets
            .iter()
            .map(|target| {
                let mut starts: Vec<_> = target.starts.iter().collect();
                starts.sort();
                let runs: Vec<_> = starts
                    .iter()
                    .map(|(s, (v, d))| json!([s, [v], [d]]))
                    .collect();
                json!({"gap": target.gap, "pct": target.pct, "v": runs})
            })
            .collect();
        json!({
            "fmt": "nightwright-problem/2",
            "T": self.slots,
            "slot_s": 60,
            "setup0": self.setup0,
            "setup": if timed { json!(self.setup) } else { json!(self.setup[0]) },
            "setup_epoch": self.epoch,
            "targets": targets,
            "must": self.must,
        })
        .to_string()
    }

    fn setup(&self, from: usize, to: usize, end: i64) -> i64 {
        let epoch = ((end / self.epoch) as usize).min(self.setup.len() - 1);
        self.setup[epoch][from][to]
    }

    /// The best value from a state on: (free from, last task, starts so far by task). `None` where
    /// the groups can't be served any more.
    fn best(&self, state: &State, memo: &mut HashMap<State, Option<i64>>) -> Option<i64> {
        if let Some(known) = memo.get(state) {
            return *known;
        }
        let served = |group: &Vec<usize>| group.iter().any(|&i| state.counts[i] > 0);
        let mut best = self.must.iter().all(served).then_some(0);
        for (i, target) in self.targets.iter().enumerate() {
            let Some(&pct) = target.pct.get(state.counts[i] as usize) else {
                continue;
            };
            for (&start, &(value, duration)) in &target.starts {
                let earliest = match state.last {
                    None => self.setup0[i],
                    Some(last) => state.end + self.setup(last, i, state.end),
                };
                let apart = state.counts[i] == 0 || start >= state.starts[i] + target.gap;
                if start < earliest || start + duration > self.slots || !apart {
                    continue;
                }
                let mut next = state.clone();
                next.end = start + duration;
                next.last = Some(i);
                next.counts[i] += 1;
                // Where nothing of the task is left to place, its last start no longer matters.
                let more = (next.counts[i] as usize) < target.pct.len();
                next.starts[i] = if more { start } else { 0 };
                let worth = (value * pct).div_euclid(100);
                if let Some(rest) = self.best(&next, memo) {
                    best = Some(best.map_or(worth + rest, |b| b.max(worth + rest)));
                }
            }
        }
        memo.insert(state.clone(), best);
        best
    }

    fn optimum(&self) -> Option<i64> {
        let n = self.targets.len();
        let state = State {
            end: 0,
            last: None,
            counts: vec![0; n],
            starts: vec![0; n],
        };
        self.best(&state, &mut HashMap::new())
    }

    /// The worth of a plan, checked rule by rule.
    fn check(&self, plan: &[(usize, i64)]) -> i64 {
        let mut total = 0;
        for (k, &(i, start)) in plan.iter().enumerate() {
            let target = &self.targets[i];
            let (value, duration) = target.starts[&start];
            assert!(start + duration <= self.slots, "{plan:?} runs past the end");
            let before: Vec<i64> = plan[..k]
                .iter()
                .filter(|visit| visit.0 == i)
                .map(|visit| visit.1)
                .collect();
            total += (value * target.pct[before.len()]).div_euclid(100);
            if let Some(last) = before.last() {
                assert!(start - last >= target.gap, "{plan:?} breaks the gap of {i}");
            }
            let earliest = match k.checked_sub(1).map(|k| plan[k]) {
                None => self.setup0[i],
                Some((last, s)) => {
                    let end = s + self.targets[last].starts[&s].1;
                    end + self.setup(last, i, end)
                }
            };
            assert!(
                start >= earliest,
                "{plan:?} leaves no set-up before {start}"
            );
        }
        total
    }

    fn solved(&self, settings: &Settings) -> Solution {
        let problem = json::read_problem(&self.text()).expect("a micro night is well formed");
        solve(&problem, settings, None, &mut || true).expect("a micro night can be solved")
    }
}

impl MicroTarget {
    fn random(rng: &mut ChaCha8Rng, slots: i64) -> MicroTarget {
        let visits = [1, 1, 2, 2, 3][rng.random_range(0..5usize)];
        let pct = (0..visits).map(|k| {
            if k == 0 {
                100
            } else {
                rng.random_range(10..=120)
            }
        });
        let pct = pct.collect();
        let (length, varies) = (rng.random_range(1..=6), rng.random_bool(0.5));
        let peak = rng.random_range(1..=99);
        let mut starts = HashMap::new();
        for _ in 0..rng.random_range(1..=2) {
            let from = rng.random_range(0..slots);
            let to = rng.random_range(from..slots);
            for start in from..=to {
                let value = if rng.random_bool(0.1) {
                    0
                } else {
                    rng.random_range(peak / 2..=peak)
                };
                let extra = if varies { rng.random_range(0..=3) } else { 0 };
                starts.insert(start, (value, length + extra));
            }
        }
        MicroTarget {
            pct,
            gap: rng.random_range(0..=12),
            starts,
        }
    }
}

#[derive(Clone, Debug, PartialEq, Eq, Hash)]
struct State {
    end: i64,
    last: Option<usize>,
    counts: Vec<u8>,
    starts: Vec<i64>,
}

#[test]
fn bound_optimum_and_plan_stand_in_order_on_micro_nights() {
    let mut rng = ChaCha8Rng::seed_from_u64(20_260_401);
    let (mut feasible, mut reached) = (0, 0);
    for case in 0..800 {
        let micro = Micro::random(&mut rng);
        let settings = Settings {
            seed: case,
            steps: 300,
            bound_steps: 120,
            ..Settings::default()
        };
        let found = micro.solved(&settings);
        let plan: Vec<_> = found
            .plan
            .iter()
            .map(|v| (v.task, i64::from(v.start)))
            .collect();
        let counted = micro.check(&plan);
        assert_eq!(counted, found.objective, "case {case}");
        let Some(optimum) = micro.optimum() else {
            assert!(
                !found.unserved.is_empty(),
                "case {case} cannot be served, yet it is said to be"
            );
            continue;
        };
        feasible += 1;
        let bound = found.bound.expect("a bound was asked for");
        if found.unserved.is_empty() {
            assert!(
                optimum >= counted,
                "case {case}: optimum {optimum}, plan {counted}: {micro:?}"
            );
            reached += u32::from(counted == optimum);
        }
        assert!(
            bound >= optimum,
            "case {case}: bound {bound}, optimum {optimum}: {micro:?}"
        );
    }

    assert!(
        feasible >= 500,
        "only {feasible} nights could be served at all"
    );
    assert!(
        reached * 100 >= feasible * 97,
        "{reached} of {feasible} optima reached"
    );
}
