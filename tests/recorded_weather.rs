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

/// The shipped configuration, with the direction of the wind and the seeing read from the file too.
fn with_wind_and_seeing(scratch: &Scratch) -> String {
    let shipped = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("config");
    let folder = scratch.path("config");
    std::fs::create_dir(&folder).expect("a new folder");
    for file in std::fs::read_dir(shipped).expect("the shipped folder") {
        let file = file.expect("a file");
        std::fs::copy(file.path(), folder.join(file.file_name())).expect("a copy");
    }
    let night = folder.join("night.toml");
    let mut text = std::fs::read_to_string(&night).expect("night.toml");
    for (quantity, unit) in [("wind_from", "deg"), ("seeing", "arcsec")] {
        write!(
            text,
            "\n[[recorded_weather.value]]\nquantity = \"{quantity}\"\nfrom = \"{quantity}\"\nunit = \"{unit}\"\n"
        )
        .expect("a string");
    }
    std::fs::write(&night, text).expect("night.toml");
    folder.to_str().expect("UTF-8").to_owned()
}

/// A night whose wind and seeing change at 21:00 UTC, about the middle of its darkness.
fn changing_night(early: (f64, f64), late: (f64, f64)) -> String {
    let header = HEADER.trim_end();
    let mut text = format!("{header},wind_from,seeing\n");
    for line in 0..288 {
        let minutes = (line * 5 + 12 * 60) % (24 * 60);
        let day = if line < 144 {
            "2026-12-01"
        } else {
            "2026-12-02"
        };
        let (wind, seeing) = if line < 108 { early } else { late };
        let (hour, minute) = (minutes / 60, minutes % 60);
        writeln!(
            text,
            "{day}T{hour:02}:{minute:02}:00Z,0,40,9,{wind},{wind},5,180,{seeing}"
        )
        .expect("a string");
    }
    text
}

/// Rehearses the night; the causes of its revisions, and its visits as (minutes after 18:00 UTC of
/// the first exposure, azimuth in degrees, length in seconds), lamps apart.
fn observed(scratch: &Scratch, config: &str, weather: &str) -> (Vec<String>, Vec<(f64, f64, f64)>) {
    let file = scratch.file("weather.csv", weather);
    let ledger = scratch.path(&format!("{}.sqlite", weather.len()));
    let (file, ledger) = (
        file.to_str().expect("UTF-8"),
        ledger.to_str().expect("UTF-8"),
    );
    let night = "2026-12-01";
    let done = nightwright(&[
        "--config",
        config,
        "rehearse",
        "--night",
        night,
        "--weather",
        file,
        "--ledger",
        ledger,
    ]);
    assert_eq!(done.code, 0, "{}", done.err);
    let record = rusqlite::Connection::open(ledger).expect("the ledger");
    let mut causes = record
        .prepare("SELECT cause FROM plan_revisions ORDER BY number")
        .expect("SQL");
    let causes = causes.query_map([], |row| row.get(0)).expect("rows");
    let causes = causes.map(|cause| cause.expect("a cause")).collect();
    let mut visits = record
        .prepare(
            "SELECT (l.start_unix_ms - unixepoch('2026-12-01T18:00:00Z') * 1000) / 60000.0,
               p.azimuth_deg, (l.end_unix_ms - l.start_unix_ms) / 1000.0
             FROM leases AS l
             JOIN plan_revisions AS r ON r.number = l.revision
             JOIN planned_visits AS p
               ON p.revision = r.seq AND p.subject = l.subject AND p.start_unix_ms = l.start_unix_ms
             WHERE l.kind = 'science' ORDER BY l.seq",
        )
        .expect("SQL");
    let visits = visits
        .query_map([], |row| Ok((row.get(0)?, row.get(1)?, row.get(2)?)))
        .expect("rows");
    (
        causes,
        visits.map(|visit| visit.expect("a visit")).collect(),
    )
}

#[test]
fn a_wind_that_rises_shields_its_part_of_the_sky_from_the_next_queue_on() {
    let scratch = Scratch::new();
    let config = with_wind_and_seeing(&scratch);
    // The shipped telescope does not look within 60° of a wind above 9 m/s; this one is southerly.
    let towards = |visits: &[(f64, f64, f64)], after_min: f64| {
        let late = visits.iter().filter(|(minute, ..)| *minute > after_min);
        late.filter(|(_, azimuth, _)| (azimuth - 180.0).abs() < 60.0)
            .count()
    };
    let (causes, calm) = observed(&scratch, &config, &changing_night((4.0, 1.2), (4.0, 1.2)));
    assert!(
        !causes.contains(&"weather_changed".to_owned()),
        "{causes:?}"
    );
    let (causes, windy) = observed(&scratch, &config, &changing_night((4.0, 1.2), (12.0, 1.2)));
    assert!(causes.contains(&"weather_changed".to_owned()), "{causes:?}");
    // The visit under way goes on; an hour later there is no doubt.
    assert!(towards(&calm, 240.0) > 0, "{calm:?}");
    assert_eq!(towards(&windy, 240.0), 0, "{windy:?}");
    assert!(
        windy.iter().filter(|(minute, ..)| *minute > 240.0).count() > 2,
        "{windy:?}"
    );
}

#[test]
fn seeing_that_gets_worse_lengthens_the_exposures_that_follow() {
    let scratch = Scratch::new();
    let config = with_wind_and_seeing(&scratch);
    let mean_late_s = |visits: &[(f64, f64, f64)]| {
        let late: Vec<f64> = visits
            .iter()
            .filter(|(minute, ..)| *minute > 240.0)
            .map(|(.., seconds)| *seconds)
            .collect();
        late.iter().sum::<f64>() / late.len() as f64
    };
    let (_, good) = observed(&scratch, &config, &changing_night((4.0, 1.0), (4.0, 1.0)));
    let (causes, worse) = observed(&scratch, &config, &changing_night((4.0, 1.0), (4.0, 2.25)));
    assert!(causes.contains(&"weather_changed".to_owned()), "{causes:?}");
    let (good_s, worse_s) = (mean_late_s(&good), mean_late_s(&worse));
    assert!(worse_s > 1.15 * good_s, "{good_s} {worse_s}");
}
