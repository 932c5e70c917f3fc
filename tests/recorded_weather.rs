//! `rehearse --weather FILE`: recorded weather holds and releases a night by the same rules.

mod keeper;

use std::fmt::Write as _;

use keeper::{Answer, Scratch, nightwright};
use serde_json::Value;

const HEADER: &str = "time,rain_mm_h,humidity_percent,dew_point_spread_k,wind_m_s,gust_m_s,\
                      cloud_percent\n";

/// Five-minute lines from noon to noon UTC, wet for two hours from midnight UTC on.
fn night(first_day: &str, next_day: &str) -> String {
    let mut text = HEADER.to_owned();
    for line in 0..288 {
        let minutes = (line * 5 + 12 * 60) % (24 * 60);
        let day = if line < 144 { first_day } else { next_day };
        let rain = if (144..168).contains(&line) { 2.0 } else { 0.0 };
        let (hour, minute) = (minutes / 60, minutes % 60);
        writeln!(text, "{day}T{hour:02}:{minute:02}:00Z,{rain},40,9,4,6,5").expect("a string");
    }
    text
}

fn rehearse(scratch: &Scratch, date: &str, file: &str) -> Answer {
    let ledger = ["--ledger", scratch.ledger()];
    let args = ["rehearse", "--night", date, "--json", "--weather", file];
    nightwright(&[&args[..], &ledger].concat())
}

#[test]
fn recorded_rain_holds_the_night_for_as_long_as_it_lasted_and_its_dwell() {
    let scratch = Scratch::new();
    let file = scratch.file("night.csv", &night("2024-12-01", "2024-12-02"));
    // The file's own year is another one: the same evening is replayed, and said.
    let done = rehearse(&scratch, "2026-12-01", file.to_str().expect("UTF-8"));
    assert_eq!(done.code, 0, "{}", done.err);
    assert!(
        done.err
            .contains("the weather of the night 2024-12-01 is replayed"),
        "{}",
        done.err
    );
    let nights: Value = serde_json::from_str(&done.out).expect("JSON");
    let split = &nights[0]["split_ms"];
    // Two hours of rain; 30 minutes of dwell in the shipped rules; polls a minute apart.
    let held_min = split["held_weather"].as_i64().expect("a number") as f64 / 60_000.0;
    assert!(
        (149.0..=153.0).contains(&held_min),
        "{held_min} min: {split}"
    );
}

#[test]
fn faults_of_a_recorded_file_name_file_line_and_column() {
    let scratch = Scratch::new();
    let good = night("2026-12-01", "2026-12-02");
    let bad = good.replacen(",40,", ",damp,", 1);
    let file = scratch.file("bad.csv", &bad);
    let file = file.to_str().expect("UTF-8");
    let told = rehearse(&scratch, "2026-12-01", file);
    assert_eq!(told.code, 2);
    let wanted = format!("{file}:2: humidity_percent: found \"damp\"");
    assert!(told.err.contains(&wanted), "{}", told.err);

    let file = scratch.file("good.csv", &good);
    let told = rehearse(&scratch, "2026-06-01", file.to_str().expect("UTF-8"));
    assert_eq!(told.code, 2);
    assert!(
        told.err.contains("it runs from 2026-12-01T12:00:00"),
        "{}",
        told.err
    );
    let told = rehearse(&scratch, "2026-12-01", "/nowhere/at/all.csv");
    assert_eq!(told.code, 2);
    assert!(told.err.contains("cannot be read"), "{}", told.err);
}
