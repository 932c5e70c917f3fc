//! The main job through the real binary: nights are rehearsed, accounted for and remembered.

use std::process::Output;

use assert_cmd::Command;
use serde_json::Value;

fn nightwright(args: &[&str]) -> Output {
    Command::cargo_bin("nightwright")
        .expect("the binary is built")
        .args(args)
        .output()
        .expect("the binary runs")
}

fn rehearse(ledger: &std::path::Path) -> Output {
    let ledger = ledger.to_str().expect("a path in UTF-8");
    nightwright(&[
        "rehearse",
        "--night",
        "2026-12-01",
        "--nights",
        "2",
        "--seed",
        "5",
        "--json",
        "--ledger",
        ledger,
    ])
}

/// Every part that a night may have, whether it occurred or not.
const PARTS: [&str; 12] = [
    "exposing",
    "overhead",
    "calibration",
    "held_weather",
    "held_feed_lost",
    "held_instrument",
    "held_operator",
    "held_ledger",
    "idle_nothing_to_observe",
    "idle_waiting",
    "idle_unclaimed",
    "idle_not_ours",
];

#[test]
fn every_millisecond_of_darkness_is_accounted_for_and_repeats() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let first = rehearse(&folder.path().join("a.sqlite"));
    assert!(
        first.status.success(),
        "{}",
        String::from_utf8_lossy(&first.stderr)
    );
    let second = rehearse(&folder.path().join("b.sqlite"));
    assert_eq!(first.stdout, second.stdout, "same seed, same bytes");
    let nights: Value = serde_json::from_slice(&first.stdout).expect("it prints JSON");
    let nights = nights.as_array().expect("an array of nights");
    assert_eq!(nights.len(), 2);
    for night in nights {
        let split = night["split_ms"].as_object().expect("a split");
        assert_eq!(split.keys().collect::<Vec<_>>(), PARTS);
        let sum: i64 = split.values().filter_map(Value::as_i64).sum();
        assert_eq!(Some(sum), night["darkness_ms"].as_i64(), "{night}");
    }
}

/// The pace changes when things happen to the onlooker, and nothing of what happens.
#[test]
fn a_paced_rehearsal_is_the_same_night_taking_longer() {
    let night = ["rehearse", "--night", "2026-12-01", "--seed", "5", "--json"];
    let paced: Vec<&str> = night.into_iter().chain(["--speed", "50000"]).collect();
    let began = std::time::Instant::now();
    let slow = nightwright(&paced);
    // Eleven hours of the night keeper at that pace, whatever the machine does.
    assert!(began.elapsed().as_secs_f64() > 11.0 * 3600.0 / 50_000.0);
    assert!(slow.status.success());
    assert_eq!(slow.stdout, nightwright(&night).stdout);
}

#[test]
fn a_pace_that_is_none_is_refused() {
    for speed in ["0", "-3", "NaN", "inf", "fast"] {
        let argument = format!("--speed={speed}");
        let output = nightwright(&["rehearse", "--night", "2026-12-01", &argument]);
        assert_eq!(output.status.code(), Some(2), "{speed}");
        let said = String::from_utf8_lossy(&output.stderr);
        assert!(said.contains("must be a number above 0"), "{speed}: {said}");
    }
}

#[test]
fn nights_without_darkness_alone_are_refused_and_leave_no_ledger() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let config = folder.path().join("polar");
    let config = config.to_str().expect("a path in UTF-8");
    assert!(nightwright(&["init", config]).status.success());
    let site = format!("{config}/site.toml");
    let text = std::fs::read_to_string(&site).expect("the starter has a site");
    let north: Vec<String> = text
        .lines()
        .map(|line| match line.starts_with("latitude_deg") {
            true => "latitude_deg = 78.0".to_owned(),
            false => line.to_owned(),
        })
        .collect();
    std::fs::write(&site, north.join("\n")).expect("the site can be written");
    let ledger = folder.path().join("none.sqlite");
    let ledger_text = ledger.to_str().expect("a path in UTF-8");
    let output = nightwright(&[
        "rehearse",
        "--config",
        config,
        "--night",
        "2026-06-21",
        "--nights",
        "3",
        "--ledger",
        ledger_text,
    ]);
    assert_eq!(output.status.code(), Some(2));
    let said = String::from_utf8_lossy(&output.stderr);
    assert!(
        said.contains("none of the 3 nights from 2026-06-21 has darkness"),
        "{said}"
    );
    assert!(!ledger.exists());
}

/// Seeing changes in this night while a star that is wanted once a night is being observed, and the
/// rest of the night is planned afresh: the star must not come again.
#[test]
fn a_star_under_way_is_not_planned_again() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let ledger = folder.path().join("night.sqlite");
    let ledger = ledger.to_str().expect("a path in UTF-8");
    let night = [
        "rehearse",
        "--night",
        "2026-12-01",
        "--seed",
        "3",
        "--ledger",
        ledger,
    ];
    assert!(nightwright(&night).status.success());
    let list = nightwright(&["log", "list", "--json", "--ledger", ledger]);
    let visits: Value = serde_json::from_slice(&list.stdout).expect("it prints JSON");
    let mut done = std::collections::BTreeMap::new();
    for visit in visits.as_array().expect("an array") {
        if visit["kind"] == "science" && visit["outcome"] == "done" {
            *done.entry(visit["target"].to_string()).or_insert(0) += 1;
        }
    }
    let once = [
        "\"KR0148+08\"",
        "\"KR2352-05\"",
        "\"KR0207-60\"",
        "\"KR0340-32\"",
    ];
    assert!(once.iter().any(|star| done.contains_key(*star)), "{done:?}");
    for star in once {
        assert!(
            done.get(star).is_none_or(|count| *count == 1),
            "{star}: {done:?}"
        );
    }
}
