//! The main job through the real binary: nights are rehearsed, accounted for and remembered.

use std::process::Output;

use assert_cmd::Command;
use serde_json::Value;

fn rehearse(ledger: &std::path::Path) -> Output {
    Command::cargo_bin("nightwright")
        .expect("the binary is built")
        .args([
            "rehearse",
            "--night",
            "2026-12-01",
            "--nights",
            "2",
            "--seed",
            "5",
            "--json",
        ])
        .arg("--ledger")
        .arg(ledger)
        .output()
        .expect("the binary runs")
}

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
        let sum: i64 = split.values().filter_map(Value::as_i64).sum();
        assert_eq!(Some(sum), night["darkness_ms"].as_i64(), "{night}");
    }
}
