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
    let first = &targets[0];
    for key in ["longest_gap_p50", "owed_by_cause", "sigma_k_m_s", "windows"] {
        assert!(first.get(key).is_some(), "{key}: {first}");
    }
    let used: f64 = told["programmes"]
        .as_array()
        .expect("programmes")
        .iter()
        .filter_map(|programme| programme["share_used"].as_f64())
        .sum();
    assert!((used - 1.0).abs() < 1e-4, "{used}");
    let prices = told["price_by_month_and_ra"].as_array().expect("prices");
    assert!(!prices.is_empty(), "the first realisation looks at prices");
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

/// A run with these arguments that must succeed.
fn told(more: &[&str]) -> Vec<u8> {
    let output = season(more);
    let complaint = String::from_utf8_lossy(&output.stderr).into_owned();
    assert!(output.status.success(), "{more:?}: {complaint}");
    output.stdout
}

fn text(path: &std::path::Path) -> &str {
    path.to_str().expect("the path is text")
}

#[test]
fn shards_put_together_are_the_season_in_one_piece_and_an_interruption_costs_nothing() {
    let folder = tempfile::tempdir().expect("a folder");
    let (one, two) = (folder.path().join("one"), folder.path().join("two"));
    let size = ["--nights", "2", "--realisations", "3"];
    let whole = told(&size);
    for (shard, out) in [("1/2", &one), ("2/2", &two)] {
        told(&[&size[..], &["--shard", shard, "--out", text(out)]].concat());
    }
    let merged = Command::cargo_bin("nightwright")
        .expect("the binary is built")
        .args(["season", "merge", text(&one), text(&two), "--json"])
        .output()
        .expect("the binary runs");
    assert_eq!(merged.stdout, whole, "merged shards, to the byte");
    // One realisation is lost, as if the run had been stopped before it; the rest is kept.
    let kept = one.join("realisation-000000.json");
    let written = std::fs::metadata(&kept).and_then(|m| m.modified());
    let resumed = told(&[&size[..], &["--out", text(&one)]].concat());
    assert_eq!(resumed, whole);
    let again = std::fs::metadata(&kept).and_then(|m| m.modified());
    assert_eq!(
        written.expect("kept"),
        again.expect("kept"),
        "not run again"
    );
    // Another season does not mix with it.
    let other = season(&["--nights", "3", "--out", text(&one)]);
    assert_eq!(other.status.code(), Some(2));
    let complaint = String::from_utf8_lossy(&other.stderr).into_owned();
    assert!(complaint.contains("number of nights"), "{complaint}");
    std::fs::write(&kept, "{").expect("the file can be damaged");
    let damaged = season(&[&size[..], &["--out", text(&one)]].concat());
    assert_eq!(damaged.status.code(), Some(2));
    let complaint = String::from_utf8_lossy(&damaged.stderr).into_owned();
    assert!(complaint.contains("realisation-000000.json"), "{complaint}");
}

#[test]
fn an_edit_is_compared_with_the_survey_as_it_stands_under_the_same_weather() {
    let size = ["--nights", "2", "--realisations", "2"];
    let same = told(&[&size[..], &["--against", "config"]].concat());
    let same: Value = serde_json::from_slice(&same).expect("JSON");
    for target in same["comparison"]["targets"].as_array().expect("targets") {
        assert_eq!(target["difference"], 0.0, "{target}");
        assert_eq!(target["difference_error"], 0.0, "{target}");
    }
    let edits = [
        "--without",
        "KR0016-56",
        "--set",
        "target.KR0159-38.weight=0",
    ];
    let edited = told(&[&size[..], &edits].concat());
    let edited: Value = serde_json::from_slice(&edited).expect("JSON");
    let ids: Vec<&Value> = edited["targets"]
        .as_array()
        .expect("targets")
        .iter()
        .map(|target| &target["target"])
        .collect();
    assert_eq!(ids.len(), 77);
    let rows = edited["comparison"]["targets"].as_array().expect("rows");
    let row = |id: &str| rows.iter().find(|row| row["target"] == id).expect("a row");
    assert_eq!(row("KR0016-56")["visits"], Value::Null);
    assert_eq!(
        row("KR0159-38")["visits"],
        0.0,
        "what weighs nothing gets nothing"
    );
    assert!(row("KR0159-38")["visits_against"].as_f64().expect("visits") > 0.0);
    for wrong in [
        ["--without", "KR9999+99"],
        ["--set", "target.KR0016-56"],
        ["--set", "target.KR0016-56.wait=2"],
        ["--set", "dome.x.y=2"],
        ["--add", "no-such-file.toml"],
    ] {
        let output = season(&[&size[..], &wrong].concat());
        assert_eq!(output.status.code(), Some(2), "{wrong:?}");
    }
}

#[test]
fn an_added_star_is_simulated_with_the_others() {
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("more.toml");
    let star = "[[target]]\nid = \"KR0500-30x\"\nra_deg = 75.0\ndec_deg = -30.0\nepoch = 2016.0\n\
                magnitude = 8.0\npm_ra_mas_yr = 0.0\npm_dec_mas_yr = 0.0\nparallax_mas = 100.0\nweight = 50.0\nevery_nights = 1\n";
    std::fs::write(&file, star).expect("the file is written");
    let added = told(&["--nights", "2", "--realisations", "2", "--add", text(&file)]);
    let added: Value = serde_json::from_slice(&added).expect("JSON");
    let targets = added["targets"].as_array().expect("targets");
    let new = targets.last().expect("a target");
    assert_eq!(new["target"], "KR0500-30x");
    assert!(new["visits_p90"].as_f64().expect("visits") > 0.0, "{new}");
}
