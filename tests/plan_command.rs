//! `plan` through the real binary: the queue is held against the sky and the mount by a checker that
//! shares no code with the planner.

use std::collections::HashMap;
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

fn json(output: &Output) -> Value {
    let said = String::from_utf8_lossy(&output.stderr);
    assert!(output.status.success(), "{said}");
    serde_json::from_slice(&output.stdout).expect("it prints JSON")
}

fn instant(text: &Value) -> chrono::DateTime<chrono::Utc> {
    text.as_str().expect("a text").parse().expect("an instant")
}

fn seconds(from: &Value, to: &Value) -> f64 {
    (instant(to) - instant(from)).num_milliseconds() as f64 / 1000.0
}

// Of the shipped observatory: alt-azimuth, its rates, what each pointing costs at the least.
const SLEW_RATE_DEG_S: [f64; 2] = [4.0, 3.0];
const SETTLE_S: f64 = 8.0;
const MIN_ALTITUDE_DEG: f64 = 28.0;

/// Altitude and azimuth from `sky`, which is held to outside truth elsewhere.
fn places(folder: &Path, visits: &[Value]) -> HashMap<(String, String), (f64, f64, f64)> {
    let mut times: Vec<&str> = visits
        .iter()
        .flat_map(|v| [v["start"].as_str(), v["end"].as_str()])
        .flatten()
        .collect();
    times.sort_unstable();
    times.dedup();
    let file = folder.join("times.txt");
    std::fs::write(&file, times.join("\n")).expect("a scratch file");
    let file = file.to_str().expect("a path in UTF-8");
    let rows = json(&nightwright(&["sky", "--times", file, "--json"]));
    let number = |row: &Value, key: &str| row[key].as_f64().expect("a number");
    let text = |row: &Value, key: &str| row[key].as_str().expect("a text").to_owned();
    rows.as_array()
        .expect("rows")
        .iter()
        .map(|row| {
            let place = (
                number(row, "altitude_deg"),
                number(row, "azimuth_deg"),
                number(row, "moon_separation_deg"),
            );
            ((text(row, "target"), text(row, "at")), place)
        })
        .collect()
}

#[test]
fn the_queue_obeys_the_sky_and_the_mount() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let night = [
        "plan",
        "--night",
        "2026-12-01",
        "--budget-steps",
        "60",
        "--budget-ms",
        "60000",
    ];
    let planned = json(&nightwright(&[&night[..], &["--json"]].concat()));
    let sky = json(&nightwright(&["sky", "--night", "2026-12-01", "--json"]));
    let visits = planned["visits"].as_array().expect("visits");
    assert!(visits.len() > 15, "{} visits", visits.len());
    let dark = &sky["darkness"];
    assert!(seconds(&dark["start"], &visits[0]["start"]) >= 0.0);
    assert!(seconds(&visits[visits.len() - 1]["end"], &dark["end"]) >= 0.0);

    let places = places(folder.path(), visits);
    let place = |visit: &Value, when: &str| {
        let at = |key: &str| visit[key].as_str().expect("a text").to_owned();
        places.get(&(at("target"), at(when))).copied()
    };
    let mut science: HashMap<&str, u32> = HashMap::new();
    let mut value = 0.0;
    for visit in visits {
        let exposures = &visit["exposures"];
        let open_s = exposures["count"].as_f64().unwrap() * exposures["seconds"].as_f64().unwrap();
        assert!(
            seconds(&visit["start"], &visit["end"]) >= open_s - 1.0,
            "{visit}"
        );
        if visit["kind"] == "calibration" {
            continue;
        }
        for when in ["start", "end"] {
            let (altitude, _, moon) = place(visit, when).expect("a place");
            // A minute's rounding of the plan, at 15° an hour, is a quarter of a degree.
            assert!(altitude > MIN_ALTITUDE_DEG - 0.3, "{visit}: {altitude}");
            assert!(moon > 20.0 - 0.1, "{visit}: {moon}");
        }
        if visit["kind"] == "science" {
            *science
                .entry(visit["target"].as_str().unwrap())
                .or_default() += 1;
            value += visit["value"]["total"].as_f64().unwrap();
        }
    }
    let pointed: Vec<&Value> = visits
        .iter()
        .filter(|v| v["kind"] != "calibration")
        .collect();
    for pair in pointed.windows(2) {
        let (from, to) = (place(pair[0], "end"), place(pair[1], "start"));
        let ((alt_a, az_a, _), (alt_b, az_b, _)) = from.zip(to).expect("places");
        let turn = (az_b - az_a).rem_euclid(360.0);
        let axes = [turn.min(360.0 - turn), (alt_b - alt_a).abs()];
        let slew_s = (axes[0] / SLEW_RATE_DEG_S[0]).max(axes[1] / SLEW_RATE_DEG_S[1]);
        let left_s = seconds(&pair[0]["end"], &pair[1]["start"]);
        let same = pair[0]["target"] == pair[1]["target"];
        assert!(
            same || left_s >= slew_s + SETTLE_S,
            "{pair:?}: {left_s} s for {slew_s} s"
        );
    }
    for pair in visits.windows(2) {
        assert!(
            seconds(&pair[0]["end"], &pair[1]["start"]) >= 0.0,
            "{pair:?} overlap"
        );
    }

    let planner = &planned["planner"];
    assert!(
        (planner["value"].as_f64().unwrap() - value).abs() < 0.05,
        "{value}: {planner}"
    );
    assert!(planner["bound"].as_f64().unwrap() >= planner["value"].as_f64().unwrap());
    let out = planned["left_out"].as_array().expect("left out");
    assert!(
        out.iter()
            .all(|l| !l["because"].as_str().unwrap().is_empty())
    );
    assert!(
        out.iter()
            .all(|l| !science.contains_key(l["target"].as_str().unwrap()))
    );
    assert_eq!(out.len() + science.len(), 78);
    assert!(planned["price_by_hour"].as_array().expect("hours").len() >= 8);

    let again = json(&nightwright(&[&night[..], &["--json"]].concat()));
    assert_eq!(planned["visits"], again["visits"], "same steps, same plan");
}

#[test]
fn a_problem_goes_out_and_its_plan_comes_back() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let file = folder.path().join("night.json");
    let file = file.to_str().expect("a path in UTF-8");
    let output = nightwright(&["plan", "--night", "2026-12-01", "--problem", file]);
    assert!(output.status.success());
    let solved = json(&nightwright(&[
        "plan",
        "--solve",
        file,
        "--budget-steps",
        "40",
    ]));
    let problem: Value =
        serde_json::from_str(&std::fs::read_to_string(file).unwrap()).expect("JSON");
    assert_eq!(problem["fmt"], "nightwright-problem/2");
    let tasks = problem["targets"].as_array().expect("targets").len() as u64;
    let plan = solved["plan"].as_array().expect("a plan");
    assert!(plan.len() > 15);
    assert!(plan.iter().all(|visit| visit[0].as_u64().unwrap() < tasks));
    assert!(solved["bound"].as_i64() >= solved["objective"].as_i64());
    assert_eq!(solved["steps"], 40);
}

#[test]
fn the_text_fits_a_terminal_and_a_file_is_written_whole() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let file = folder.path().join("queue.txt");
    let path = file.to_str().expect("a path in UTF-8");
    let short = [
        "plan",
        "--night",
        "2026-12-01",
        "--budget-steps",
        "1",
        "--out",
        path,
    ];
    assert!(nightwright(&short).status.success());
    let text = std::fs::read_to_string(&file).expect("the file is there");
    assert!(
        text.lines().all(|line| line.chars().count() <= 100),
        "{text}"
    );
    assert!(text.contains("Price of telescope time") && text.contains("Not in the queue"));
    assert!(
        nightwright(&[&short[..], &["--csv"]].concat())
            .status
            .success()
    );
    let csv = std::fs::read_to_string(&file).expect("the file is there");
    assert!(csv.starts_with("target,"), "{csv}");
    let none = folder.path().join("no/such/folder");
    let output = nightwright(&[
        "plan",
        "--budget-steps",
        "1",
        "--out",
        none.to_str().unwrap(),
    ]);
    assert_eq!(output.status.code(), Some(3));
}

#[test]
fn what_cannot_be_planned_is_refused() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let polar = folder.path().join("polar");
    let polar = polar.to_str().expect("a path in UTF-8");
    assert!(nightwright(&["init", polar]).status.success());
    let site = format!("{polar}/site.toml");
    let text = std::fs::read_to_string(&site).expect("a site");
    let line = text
        .lines()
        .find(|line| line.starts_with("latitude_deg"))
        .expect("a latitude");
    std::fs::write(&site, text.replace(line, "latitude_deg = 78.0")).expect("written");
    let check = |args: &[&str], said: &str| {
        let output = nightwright(args);
        assert_eq!(output.status.code(), Some(2), "{args:?}");
        let told = String::from_utf8_lossy(&output.stderr);
        assert!(told.contains(said), "{args:?}: {told}");
    };
    let bright = ["plan", "--config", polar, "--night", "2026-06-21"];
    check(&bright, "the night 2026-06-21 has no darkness");
    check(&["plan", "--night", "2026-13-41"], "2026-13-41");
    let broken = folder.path().join("broken.json");
    std::fs::write(&broken, "{\"fmt\":\"nightwright-problem/9\"").expect("written");
    check(
        &["plan", "--solve", broken.to_str().unwrap()],
        "cannot be solved",
    );
    check(&["plan", "--solve", "/no/such/file"], "cannot be read");
}
