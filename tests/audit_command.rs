//! `audit` through the real binary, on a real ledger.

use std::path::Path;
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

fn said(output: &Output) -> String {
    String::from_utf8_lossy(&output.stderr).into_owned()
}

fn audit(ledger: &Path, more: &[&str]) -> Output {
    let ledger = ledger.to_str().expect("a path in UTF-8");
    let args: Vec<&str> = ["audit", "--ledger", ledger]
        .into_iter()
        .chain(more.iter().copied())
        .collect();
    nightwright(&args)
}

/// A ledger with a week of rehearsed nights.
fn rehearsed(folder: &Path) -> std::path::PathBuf {
    let ledger = folder.join("week.sqlite");
    let output = nightwright(&[
        "rehearse",
        "--night",
        "2026-12-01",
        "--nights",
        "3",
        "--seed",
        "2",
        "--ledger",
        ledger.to_str().expect("a path in UTF-8"),
    ]);
    assert!(output.status.success(), "{}", said(&output));
    ledger
}

#[test]
fn a_rehearsed_ledger_is_audited() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let ledger = rehearsed(folder.path());
    let output = audit(&ledger, &["--json"]);
    assert!(output.status.success(), "{}", said(&output));
    let told: Value = serde_json::from_slice(&output.stdout).expect("it prints JSON");
    assert_eq!(told["until"], "2026-12-03");
    let targets = told["targets"].as_array().expect("targets");
    assert_eq!(targets.len(), 78);
    let mut visits = 0;
    for target in targets {
        let number = |key: &str| target[key].as_f64().expect("a number");
        let owed = (number("wanted") - number("credited")).max(0.0);
        assert!((number("owed") - owed).abs() < 1e-3, "{target}");
        visits += target["visits"].as_u64().expect("a count");
        for candidate in target["candidates"].as_array().expect("candidates") {
            let gap = candidate["largest_phase_gap"].as_f64().expect("a gap");
            assert!((0.0..=1.0).contains(&gap));
        }
    }
    let list = nightwright(&[
        "log",
        "list",
        "--json",
        "--ledger",
        ledger.to_str().unwrap(),
    ]);
    let listed: Value = serde_json::from_slice(&list.stdout).expect("it prints JSON");
    let credited = listed
        .as_array()
        .expect("an array")
        .iter()
        .filter(|v| v["kind"] == "science" && v["credit"].as_f64().is_some_and(|c| c > 0.0))
        .count() as u64;
    assert!(credited > 20, "{credited}");
    assert_eq!(visits, credited);
}

#[test]
fn the_table_fits_a_terminal_and_one_star_can_be_asked_for() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let ledger = rehearsed(folder.path());
    let output = audit(&ledger, &["--target", "KR0512-21"]);
    assert!(output.status.success(), "{}", said(&output));
    let text = String::from_utf8_lossy(&output.stdout);
    assert!(
        text.lines().all(|line| line.chars().count() <= 100),
        "{text}"
    );
    // One star with two candidates: two lines in its table.
    assert_eq!(text.matches("KR").count(), 1, "{text}");
    assert!(text.contains("21.2157"), "{text}");
}

#[test]
fn what_cannot_be_audited_is_refused_and_left_alone() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let absent = folder.path().join("absent.sqlite");
    let output = audit(&absent, &[]);
    assert_eq!(output.status.code(), Some(2));
    assert!(
        said(&output).contains("there is no ledger"),
        "{}",
        said(&output)
    );
    assert!(!absent.exists());

    let noise = folder.path().join("noise.sqlite");
    std::fs::write(&noise, vec![0x5a; 5000]).expect("a scratch file");
    let output = audit(&noise, &[]);
    assert!(matches!(output.status.code(), Some(2 | 3)), "{output:?}");
    assert_eq!(
        std::fs::read(&noise).expect("still there"),
        vec![0x5a; 5000]
    );

    let ledger = rehearsed(folder.path());
    let output = audit(&ledger, &["--target", "Nowhere"]);
    assert_eq!(output.status.code(), Some(2));
    assert!(said(&output).contains("no target is called Nowhere"));
    let output = audit(&ledger, &["--until", "next week"]);
    assert_eq!(output.status.code(), Some(2));
}
