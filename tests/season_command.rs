//! `season` through the real binary.

use std::process::Output;

use assert_cmd::Command;
use serde_json::Value;

fn season(more: &[&str]) -> Output {
    let args = ["season", "--night", "2026-12-01", "--seed", "4", "--json"];
    Command::cargo_bin("nightwright")
        .expect("the binary is built")
        .args(args)
        .args(more)
        .output()
        .expect("the binary runs")
}

#[test]
fn the_answer_depends_on_the_seed_and_not_on_the_threads() {
    let run = |threads: &str, seed: &str| {
        let args = [
            "--nights",
            "2",
            "--realisations",
            "3",
            "--threads",
            threads,
            "--seed",
            seed,
        ];
        let output = Command::cargo_bin("nightwright")
            .expect("the binary is built")
            .args(["season", "--night", "2026-12-01", "--json"])
            .args(args)
            .output()
            .expect("the binary runs");
        assert!(
            output.status.success(),
            "{}",
            String::from_utf8_lossy(&output.stderr)
        );
        output.stdout
    };
    let one = run("1", "4");
    assert_eq!(one, run("3", "4"), "same seed, same bytes");
    assert_ne!(one, run("2", "5"));
    let told: Value = serde_json::from_slice(&one).expect("it prints JSON");
    assert_eq!(
        (&told["nights"], &told["realisations"]),
        (&2.into(), &3.into())
    );
    let share: f64 = told["darkness"]
        .as_object()
        .expect("shares")
        .values()
        .filter_map(Value::as_f64)
        .sum();
    assert!((share - 1.0).abs() < 1e-4, "{share}");
    let targets = told["targets"].as_array().expect("targets");
    assert_eq!(targets.len(), 78);
    let mut visits = 0.0;
    for target in targets {
        let number = |key: &str| target[key].as_f64().expect("a number");
        assert!(number("visits_p10") <= number("visits_p50"), "{target}");
        assert!(number("visits_p50") <= number("visits_p90"), "{target}");
        assert!((0.0..=1.0).contains(&number("odds")), "{target}");
        visits += number("visits_p50");
    }
    // Two winter nights of eight hours, some of it cloudy, hold tens of visits of twenty minutes.
    assert!((5.0..50.0).contains(&visits), "{visits}");
}

#[test]
fn a_season_of_nothing_is_refused() {
    for arguments in [
        ["--nights", "0"],
        ["--realisations", "0"],
        ["--threads", "0"],
    ] {
        let output = season(&arguments);
        assert_eq!(output.status.code(), Some(2), "{arguments:?}");
    }
}
