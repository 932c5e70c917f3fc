//! `log` and `ledger` through the real program: what is added, amended, listed, copied and
//! exported, and what is refused when something else stands where the ledger should.

mod keeper;

use std::fs;
use std::path::Path;

use keeper::{Answer, Scratch, nightwright};
use rusqlite::Connection;
use serde_json::Value;

/// A star of the shipped configuration.
const STAR: &str = "KR0016-56";

fn on(scratch: &Scratch, args: &[&str]) -> Answer {
    let mut all = args.to_vec();
    all.extend(["--ledger", scratch.ledger()]);
    nightwright(&all)
}

fn fine(scratch: &Scratch, args: &[&str]) -> String {
    let answer = on(scratch, args);
    assert_eq!(answer.code, 0, "{args:?}: {}", answer.err);
    answer.out
}

fn list(scratch: &Scratch, more: &[&str]) -> Vec<Value> {
    let args = [&["log", "list", "--json"], more].concat();
    serde_json::from_str(&fine(scratch, &args)).unwrap()
}

fn add(scratch: &Scratch, at: &str) -> String {
    let args = [
        "log",
        "add",
        STAR,
        "--at",
        at,
        "--exposure-s",
        "900",
        "--json",
        "--by",
        "ada",
    ];
    let added: Value = serde_json::from_str(&fine(scratch, &args)).unwrap();
    added["visit"]["visit"].as_str().unwrap().to_owned()
}

/// Some visits, so that the file has several pages of rows.
fn filled() -> Scratch {
    let scratch = Scratch::new();
    let mut csv = "target,utc_mid,exposure_s\n".to_owned();
    for day in 1..=28 {
        for hour in 18..24 {
            csv += &format!("{STAR},2026-11-{day:02}T{hour}:30:00Z,900\n");
        }
    }
    let file = scratch.file("filling.csv", &csv);
    fine(&scratch, &["log", "import", file.to_str().unwrap()]);
    scratch
}

#[test]
fn an_amendment_leaves_what_stood() {
    let scratch = Scratch::new();
    let id = add(&scratch, "2026-11-05T22:00:00Z");
    let other = add(&scratch, "2026-11-05T23:00:00Z");
    assert_ne!(id, other);
    let why = "cloud in the spectrum";
    let amend = [
        "log",
        "amend",
        &id,
        "--outcome",
        "lost",
        "--cause",
        "weather",
        "--snr",
        "12",
    ];
    fine(
        &scratch,
        &[&amend[..], &["--why", why, "--by", "grace"]].concat(),
    );

    let standing = list(&scratch, &[]);
    assert_eq!(standing.len(), 2);
    let amended = &standing[0];
    assert_eq!(amended["outcome"], "lost");
    assert_eq!(
        (amended["cause"].as_str(), amended["credit"].as_f64()),
        (Some("weather"), Some(0.0))
    );
    assert_eq!(
        (amended["by"].as_str(), amended["why"].as_str()),
        (Some("grace"), Some(why))
    );
    let all = list(&scratch, &["--all"]);
    let words: Vec<(&str, &str, bool)> = all
        .iter()
        .filter(|row| row["visit"] == id.as_str())
        .map(|row| {
            let text = |key: &str| row[key].as_str().unwrap();
            (
                text("outcome"),
                text("by"),
                row["stands"].as_bool().unwrap(),
            )
        })
        .collect();
    assert_eq!(words, [("done", "ada", false), ("lost", "grace", true)]);
    fine(&scratch, &["ledger", "check"]);
}

#[test]
fn an_amended_time_moves_all_that_follows_from_it() {
    let scratch = Scratch::new();
    let id = add(&scratch, "2026-11-05T22:00:00Z");
    let before = list(&scratch, &[])[0].clone();
    let at = "2026-11-07T22:00:00Z";
    fine(
        &scratch,
        &[
            "log",
            "amend",
            &id,
            "--at",
            at,
            "--exposure-s",
            "600",
            "--why",
            "clock",
        ],
    );
    let after = list(&scratch, &[])[0].clone();
    assert_eq!(after["night"], "2026-11-07");
    assert_eq!(after["start"], "2026-11-07T21:55:00.000Z");
    assert_eq!(after["end"], "2026-11-07T22:05:00.000Z");
    let bjd = |row: &Value| row["bjd_tdb"].as_str().unwrap().parse::<f64>().unwrap();
    // Two days later, but for the change of the light-time (below 20 s in two days).
    assert!((bjd(&after) - bjd(&before) - 2.0).abs() < 20.0 / 86_400.0);
}

#[test]
fn lists_by_target_and_night() {
    let scratch = filled();
    add(&scratch, "2026-12-05T22:00:00Z");
    assert_eq!(list(&scratch, &[]).len(), 169);
    assert_eq!(list(&scratch, &["--since", "2026-12-01"]).len(), 1);
    assert_eq!(list(&scratch, &["--until", "2026-11-30"]).len(), 168);
    assert_eq!(list(&scratch, &["--target", "KR0030-02"]).len(), 0);
    let csv = fine(&scratch, &["log", "list", "--csv"]);
    assert_eq!(csv.lines().count(), 170);
    assert!(csv.starts_with("visit,night,kind,target,"));
}

#[test]
fn refuses_what_makes_no_visit() {
    let scratch = Scratch::new();
    let check = |args: &[&str], word: &str| {
        let answer = on(&scratch, args);
        assert_eq!(answer.code, 2, "{args:?}: {}", answer.err);
        assert!(answer.err.contains(word), "{args:?}: {}", answer.err);
        assert!(!Path::new(scratch.ledger()).exists(), "{args:?}");
    };
    let at = ["--at", "2026-11-05T22:00:00Z"];
    let visit = ["log", "add", STAR, at[0], at[1], "--exposure-s"];
    check(
        &["log", "add", "NOBODY", at[0], at[1], "--exposure-s", "9"],
        "NOBODY",
    );
    check(
        &["log", "add", STAR, "--at", "today", "--exposure-s", "9"],
        "UTC instant",
    );
    check(&[&visit[..], &["NaN"]].concat(), "above 0");
    check(&[&visit[..], &["0"]].concat(), "above 0");
    check(&[&visit[..], &["9", "--snr", "inf"]].concat(), "above 0");
    check(
        &[&visit[..], &["9", "--credit", "2"]].concat(),
        "from 0 to 1",
    );
    check(
        &[&visit[..], &["9", "--cause", "weather"]].concat(),
        "--outcome lost",
    );
    check(
        &[&visit[..], &["9", "--outcome", "short"]].concat(),
        "--credit",
    );
    check(
        &[
            "log",
            "amend",
            "2026-11-05-0001",
            "--snr",
            "9",
            "--why",
            "x",
        ],
        "no ledger",
    );
    check(
        &["log", "amend", "2026-11-05-0001", "--why", "x"],
        "nothing to amend",
    );
    check(
        &[
            "log",
            "amend",
            "2026-11-05-0001",
            "--snr",
            "9",
            "--why",
            " ",
        ],
        "--why",
    );
    check(&["ledger", "check"], "no ledger");
    check(&["ledger", "backup", "copy.sqlite"], "no ledger");
    assert_eq!(list(&scratch, &[]).len(), 0);
}

/// Every command that takes a ledger says what is wrong and leaves the file's bytes alone.
fn check_refused(scratch: &Scratch, word: &str) {
    let copy = scratch.path("copy.sqlite");
    let folder = scratch.path("tables");
    let (copy, folder) = (copy.to_str().unwrap(), folder.to_str().unwrap());
    let before = fs::read(scratch.ledger()).unwrap();
    for args in [
        &["log", "list"][..],
        &[
            "log",
            "add",
            STAR,
            "--at",
            "2026-11-05T22:00:00Z",
            "--exposure-s",
            "9",
        ],
        &["log", "amend", "x", "--snr", "9", "--why", "x"],
        &[
            "log",
            "import",
            scratch.file("one.csv", ONE).to_str().unwrap(),
        ],
        &["ledger", "check"],
        &["ledger", "backup", copy],
        &["ledger", "export", folder],
        &["plan", "--night", "2026-12-01"],
        &["rehearse", "--night", "2026-12-01"],
    ] {
        let answer = on(scratch, args);
        assert!(
            [2, 3].contains(&answer.code),
            "{args:?}: {} {}",
            answer.code,
            answer.err
        );
        assert!(answer.err.contains(word), "{args:?}: {}", answer.err);
        assert!(
            answer.err.contains(scratch.ledger()),
            "{args:?}: {}",
            answer.err
        );
        assert_eq!(fs::read(scratch.ledger()).unwrap(), before, "{args:?}");
        assert!(!Path::new(copy).exists() && !Path::new(folder).exists());
    }
}

const ONE: &str = "target,utc_mid,exposure_s\nKR0016-56,2026-11-05T22:00:00Z,9\n";

#[test]
fn refuses_a_truncated_ledger() {
    let scratch = filled();
    let bytes = fs::read(scratch.ledger()).unwrap();
    fs::write(scratch.ledger(), &bytes[..bytes.len() / 2 + 100]).unwrap();
    check_refused(&scratch, "damaged");
}

#[test]
fn refuses_random_bytes_and_nothing_at_all() {
    let scratch = Scratch::new();
    let mut state = 1u32;
    let noise = (0..20_000).map(|_| {
        // Numerical Recipes' "quick and dirty" generator: any noise will do.
        state = state.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
        (state >> 24) as u8
    });
    fs::write(scratch.ledger(), noise.collect::<Vec<u8>>()).unwrap();
    check_refused(&scratch, "no ledger");
    fs::write(scratch.ledger(), "").unwrap();
    check_refused(&scratch, "empty");
}

#[test]
fn refuses_a_newer_ledger_and_a_strange_database() {
    let scratch = filled();
    let connection = Connection::open(scratch.ledger()).unwrap();
    connection.pragma_update(None, "user_version", 99).unwrap();
    connection.close().unwrap();
    check_refused(&scratch, "newer");
    fs::remove_file(scratch.ledger()).unwrap();
    let connection = Connection::open(scratch.ledger()).unwrap();
    connection.execute_batch("CREATE TABLE t (x)").unwrap();
    connection.close().unwrap();
    check_refused(&scratch, "another program");
}

#[test]
fn says_that_a_ledger_cannot_be_written() {
    let scratch = Scratch::new();
    let file = scratch.file("file", "");
    let below_a_file = file.join("ledger.sqlite");
    let nowhere = scratch.path("missing/ledger.sqlite");
    for ledger in [below_a_file, nowhere] {
        let ledger = ledger.to_str().unwrap();
        let at = "2026-11-05T22:00:00Z";
        let answer = nightwright(&[
            "log",
            "add",
            STAR,
            "--at",
            at,
            "--exposure-s",
            "9",
            "--ledger",
            ledger,
        ]);
        assert_eq!(answer.code, 3, "{}", answer.err);
        assert!(answer.err.contains(ledger), "{}", answer.err);
    }
    fs::create_dir(scratch.ledger()).unwrap();
    let answer = on(&scratch, &["log", "list"]);
    assert_eq!(answer.code, 2);
    assert!(answer.err.contains("folder"), "{}", answer.err);
}

#[test]
fn a_check_tells_of_tampering() {
    let scratch = filled();
    let connection = Connection::open(scratch.ledger()).unwrap();
    connection
        .execute_batch(
            "PRAGMA foreign_keys = OFF; DROP TRIGGER visits_never_edited;
             UPDATE visits SET credit = 7 WHERE id = 3",
        )
        .unwrap();
    connection.close().unwrap();
    let answer = on(&scratch, &["ledger", "check", "--json"]);
    assert_eq!(answer.code, 1);
    let report: Value = serde_json::from_str(&answer.out).unwrap();
    assert_eq!(report["sound"], false);
    assert!(
        report["faults"][0]
            .as_str()
            .unwrap()
            .contains("credit is 7")
    );
}

#[test]
fn a_copy_is_whole_and_nothing_is_overwritten() {
    let scratch = filled();
    let copy = scratch.path("copy.sqlite");
    let to = copy.to_str().unwrap();
    fine(&scratch, &["ledger", "backup", to]);
    let again = on(&scratch, &["ledger", "backup", to]);
    assert_eq!(again.code, 2);
    assert!(again.err.contains("exists"), "{}", again.err);
    let listed = nightwright(&["log", "list", "--json", "--ledger", to]);
    assert_eq!(listed.out, fine(&scratch, &["log", "list", "--json"]));
}

#[test]
fn tables_are_exported_whole() {
    let scratch = filled();
    for (format, extension) in [("csv", "csv"), ("json", "json"), ("votable", "vot")] {
        let folder = scratch.path(format);
        let to = folder.to_str().unwrap();
        fine(&scratch, &["ledger", "export", to, "--format", format]);
        let table = fs::read_to_string(folder.join(format!("visits_now.{extension}"))).unwrap();
        let rows = match format {
            "csv" => table.lines().count() - 1,
            "json" => serde_json::from_str::<Vec<Value>>(&table).unwrap().len(),
            _ => table.matches("<TR>").count(),
        };
        assert_eq!(rows, 168, "{format}");
        assert!(table.contains("2026-11-01T18:22:30.000Z"), "{format}");
        let again = on(&scratch, &["ledger", "export", to, "--format", format]);
        assert_eq!(again.code, 2);
        let left = fs::read_dir(scratch.path("")).unwrap();
        let drafts = left.filter(|e| {
            e.as_ref()
                .unwrap()
                .file_name()
                .to_string_lossy()
                .starts_with('.')
        });
        assert_eq!(drafts.count(), 0);
    }
}
