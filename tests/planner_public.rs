//! The six public planning problems in `tests/planning/` (see `tests/planning/README.md`).

use nightwright::plan::solve::{Placement, Problem, Settings, json, solve, verify};
use std::path::PathBuf;

const PROBLEMS: [&str; 6] = [
    "n50_T600",
    "n50_T840",
    "n120_T600",
    "n120_T840",
    "n300_T600",
    "n300_T840",
];

fn read(name: &str) -> (Problem, serde_json::Value) {
    let path =
        PathBuf::from(env!("CARGO_MANIFEST_DIR")).join(format!("tests/planning/{name}.json"));
    let text = std::fs::read_to_string(path).expect("the problem is in the tree");
    let raw = serde_json::from_str(&text).expect("it is JSON");
    (json::read_problem(&text).expect("it is a problem"), raw)
}

/// Checks a plan against the raw file, by the rules as the format states them.
fn check(raw: &serde_json::Value, plan: &[Placement]) -> i64 {
    let digit = |text: &serde_json::Value, at: usize| {
        i64::from(text.as_str().unwrap().as_bytes()[at] - b'0')
    };
    let targets = raw["targets"].as_array().unwrap();
    let value = |i: usize, start: i64| {
        targets[i]["v"].as_array().unwrap().iter().find_map(|run| {
            run[1]
                .get((start - run[0].as_i64().unwrap()) as usize)
                .and_then(|v| v.as_i64())
        })
    };
    let (mut total, mut free, mut last) = (0, 0, None);
    let mut before: std::collections::BTreeMap<usize, Vec<i64>> = Default::default();
    for visit in plan {
        let (i, start) = (visit.task, i64::from(visit.start));
        let of = |key: &str| targets[i][key].as_i64().unwrap();
        let setup = match last {
            None => digit(&raw["setup0"], i),
            Some(j) => digit(&raw["setup"][j], i),
        };
        assert!(start >= free + setup, "{visit:?} is too soon");
        let worth = value(i, start).unwrap_or_else(|| panic!("{visit:?} is not allowed"));
        let earlier = before.entry(i).or_default();
        total += if earlier.is_empty() {
            worth
        } else {
            worth * of("pct2") / 100
        };
        assert!(
            (earlier.len() as i64) < of("n"),
            "{visit:?} is one too many"
        );
        assert!(
            earlier.iter().all(|s| start - s >= of("gap")),
            "{visit:?} breaks the gap"
        );
        earlier.push(start);
        (free, last) = (start + of("d"), Some(i));
    }
    assert!(free <= raw["T"].as_i64().unwrap());
    for group in raw["must"].as_array().unwrap() {
        let mut members = group
            .as_array()
            .unwrap()
            .iter()
            .map(|i| i.as_u64().unwrap() as usize);
        assert!(
            members.any(|i| before.contains_key(&i)),
            "group {group} is not served"
        );
    }
    total
}

#[test]
fn public_problems_are_planned_legally_between_dispatcher_and_bound() {
    for name in PROBLEMS {
        let (problem, raw) = read(name);
        let settings = Settings {
            steps: 60,
            bound_steps: 40,
            ..Settings::default()
        };
        let found = solve(&problem, &settings, None, &mut || true).unwrap();
        assert_eq!(check(&raw, &found.plan), found.objective, "{name}");
        assert_eq!(verify(&problem, &found.plan), Ok(found.objective), "{name}");
        assert!(found.objective >= found.dispatcher, "{name}");
        let known = raw["best"]["obj"].as_i64().unwrap();
        assert!(
            found.bound.unwrap() >= known,
            "{name}: a plan of {known} is known"
        );
    }
}

#[test]
fn same_seed_and_steps_give_the_same_plan() {
    let (problem, _) = read("n50_T600");
    let settings = Settings {
        seed: 7,
        steps: 80,
        bound_steps: 30,
        ..Settings::default()
    };
    let first = solve(&problem, &settings, None, &mut || true).unwrap();
    let second = solve(&problem, &settings, None, &mut || true).unwrap();
    assert_eq!(first, second);
}

#[test]
fn a_problem_written_and_read_again_is_the_same() {
    for name in PROBLEMS {
        let (problem, _) = read(name);
        assert_eq!(
            json::read_problem(&json::write_problem(&problem)).unwrap(),
            problem,
            "{name}"
        );
    }
}
