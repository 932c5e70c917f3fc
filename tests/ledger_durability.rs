//! What is acknowledged survives: the writer killed at any instant, a copy made meanwhile, a disk
//! that fills up.

mod keeper;

use std::collections::BTreeMap;
use std::env;
use std::fs;
use std::io::{BufRead, BufReader, Write};
use std::path::Path;
use std::process::{Child, ChildStdout, Command, Stdio};
use std::time::Duration;

use keeper::{Scratch, answer, nightwright, program};
use nightwright::catalogue::TargetId;
use nightwright::ledger::{OpenError, SqliteLedger};
use nightwright::night::Fact;
use nightwright::ports::Ledger;
use nightwright::record::{EntryKind, Exposures, Outcome, Visit, VisitId};
use nightwright::time::{NightDate, Span, Utc};
use serde_json::Value;

/// Names the ledger to the child process that writes.
const WRITE_TO: &str = "NIGHTWRIGHT_TEST_WRITE_TO";

/// Each round kills the writer once.
const ROUNDS: u64 = 50;

fn night() -> NightDate {
    NightDate::parse("2026-12-01").unwrap()
}

fn ended(number: u32) -> Fact {
    let start = Utc::from_unix_ms(1_796_160_000_000 + i64::from(number) * 1000);
    let exposures = Exposures {
        count: 1,
        seconds: 1.0,
    };
    Fact::VisitEnded {
        at: start,
        report_key: format!("report-{number}"),
        visit: Visit {
            id: VisitId::of(night(), number),
            night: night(),
            kind: EntryKind::Science,
            subject: TargetId::new("KR0016-56"),
            began: start,
            exposing: Span::new(start, start.plus_ms(1000)),
            exposed_s: 1.0,
            planned: exposures,
            outcome: Outcome::Done,
            credit: 1.0,
            airmass: None,
            snr: None,
            rv_error_m_s: None,
            predicted_rv_error_m_s: None,
            mid_bjd_tdb: None,
            note: String::new(),
        },
    }
}

/// Not a test but the writer that the tests below start and kill: it goes on where the ledger ends,
/// and says each number once it has been kept.
#[test]
#[ignore = "the child process of the tests in this file"]
fn writer() {
    let path = env::var(WRITE_TO).unwrap();
    let mut ledger = SqliteLedger::open_exclusive(Path::new(&path)).unwrap();
    let first = ledger.visits(None).unwrap().len() as u32 + 1;
    let mut out = std::io::stdout();
    for number in first.. {
        // The same report comes twice, as it does when an acknowledgement was lost.
        ledger.append(night(), &[ended(number)]).unwrap();
        ledger.append(night(), &[ended(number)]).unwrap();
        writeln!(out, "kept {number}").unwrap();
        out.flush().unwrap();
    }
}

fn start_writer(ledger: &str) -> (Child, BufReader<ChildStdout>) {
    let mut child = Command::new(env::current_exe().unwrap())
        .args(["--ignored", "--exact", "writer", "--nocapture"])
        .env(WRITE_TO, ledger)
        .stdout(Stdio::piped())
        .stderr(Stdio::null())
        .spawn()
        .unwrap();
    let out = BufReader::new(child.stdout.take().unwrap());
    (child, out)
}

fn kept_number(line: &str) -> Option<u32> {
    line.rsplit_once("kept ")?.1.trim().parse().ok()
}

/// Numbers of the visits in the ledger, each with how often it stands there.
fn numbers(ledger: &str) -> BTreeMap<u32, usize> {
    let ledger = SqliteLedger::open_read_only(Path::new(ledger))
        .unwrap()
        .unwrap();
    let mut numbers = BTreeMap::new();
    for row in ledger.history().unwrap() {
        let number = row.visit.id.0.rsplit('-').next().unwrap().parse().unwrap();
        *numbers.entry(number).or_insert(0) += 1;
    }
    numbers
}

#[test]
fn a_killed_writer_loses_nothing_acknowledged_and_keeps_nothing_twice() {
    let scratch = Scratch::new();
    let mut acknowledged = 0;
    for round in 0..ROUNDS {
        let (mut child, out) = start_writer(scratch.ledger());
        let mut lines = out.lines();
        // At least one acknowledgement, then death after a time that differs from round to round.
        let first = lines.find_map(|line| kept_number(&line.unwrap()));
        acknowledged = acknowledged.max(first.expect("the writer wrote"));
        std::thread::sleep(Duration::from_micros(round * 397 % 9000));
        child.kill().unwrap();
        child.wait().unwrap();
        for line in lines.map_while(Result::ok) {
            acknowledged = acknowledged.max(kept_number(&line).unwrap_or(0));
        }
        let numbers = numbers(scratch.ledger());
        let last = *numbers.keys().next_back().unwrap();
        // One more than was acknowledged may be there: its acknowledgement was on the way.
        assert!(
            (acknowledged..=acknowledged + 1).contains(&last),
            "round {round}"
        );
        assert_eq!(
            numbers.len(),
            last as usize,
            "round {round}: a number is missing"
        );
        assert!(numbers.values().all(|count| *count == 1), "round {round}");
    }
    let check = nightwright(&["ledger", "check", "--ledger", scratch.ledger()]);
    assert_eq!(check.code, 0, "{}{}", check.out, check.err);
}

#[test]
fn a_copy_can_be_made_while_another_process_writes() {
    let scratch = Scratch::new();
    let (mut child, out) = start_writer(scratch.ledger());
    let mut lines = out.lines();
    let mut last = 0;
    for copy in 0..5 {
        let acknowledged = lines.find_map(|line| kept_number(&line.unwrap())).unwrap();
        let second = SqliteLedger::open_exclusive(Path::new(scratch.ledger()));
        assert!(matches!(second, Err(OpenError::InUse { .. })));
        let path = scratch.path(&format!("copy-{copy}.sqlite"));
        let path = path.to_str().unwrap();
        let made = nightwright(&["ledger", "backup", path, "--ledger", scratch.ledger()]);
        assert_eq!(made.code, 0, "{}", made.err);
        let check = nightwright(&["ledger", "check", "--ledger", path]);
        assert_eq!(check.code, 0, "{}{}", check.out, check.err);
        let copied = numbers(path).len();
        assert!(
            copied >= acknowledged as usize && copied >= last,
            "copy {copy}"
        );
        last = copied;
    }
    child.kill().unwrap();
    child.wait().unwrap();
}

#[test]
fn a_full_disk_keeps_nothing_of_a_batch_and_recovers() {
    let scratch = Scratch::new();
    let mut csv = "target,utc_mid,exposure_s\n".to_owned();
    for number in 0..5000 {
        let at = Utc::from_unix_ms(1_796_160_000_000 + number * 1_000_000);
        csv += &format!("KR0016-56,{at},900\n");
    }
    let file = scratch.file("many.csv", &csv);
    let add = |at: &str| {
        [
            "log",
            "add",
            "KR0016-56",
            "--at",
            at,
            "--exposure-s",
            "9",
            "--ledger",
            scratch.ledger(),
        ]
        .map(str::to_owned)
    };
    let before = add("2026-11-01T22:00:00Z");
    assert_eq!(answer(program().args(&before)).code, 0);
    let size = fs::metadata(scratch.ledger()).unwrap().len();

    // A limit on the size of files stands for a full disk: it can be set without being root.
    let limited = |bytes: u64, args: &[String]| {
        let binary = assert_cmd::cargo::cargo_bin("nightwright");
        let blocks = bytes / 512;
        let mut command = assert_cmd::Command::new("sh");
        command
            .env(
                "NIGHTWRIGHT_CONFIG",
                Path::new(env!("CARGO_MANIFEST_DIR")).join("config"),
            )
            .args(["-c", &format!("ulimit -f {blocks} && exec \"$0\" \"$@\"")])
            .arg(binary)
            .args(args);
        answer(&mut command)
    };
    let import = [
        "log",
        "import",
        file.to_str().unwrap(),
        "--ledger",
        scratch.ledger(),
    ];
    let import = import.map(str::to_owned);
    let full = limited(size + 200_000, &import);
    assert_eq!(full.code, 3, "{}{}", full.out, full.err);
    assert!(full.err.contains("cannot be written"), "{}", full.err);
    let none = limited(0, &add("2026-11-02T22:00:00Z"));
    assert_eq!(none.code, 3, "{}{}", none.out, none.err);

    let visits = || -> Vec<Value> {
        let listed = nightwright(&["log", "list", "--json", "--ledger", scratch.ledger()]);
        serde_json::from_str(&listed.out).unwrap()
    };
    assert_eq!(visits().len(), 1);
    assert_eq!(
        nightwright(&["ledger", "check", "--ledger", scratch.ledger()]).code,
        0
    );
    assert_eq!(answer(program().args(&import)).code, 0);
    assert_eq!(visits().len(), 5001);
}
