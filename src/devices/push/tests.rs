//! The command with real processes: what it says, what it does not, and how it is ended.

use std::time::Instant;

use super::*;
use crate::catalogue::TargetId;
use crate::record::{Exposures, QueueEntry, ValueParts};
use crate::score::fixtures::survey;
use crate::time::Utc;

/// A variable that cargo sets for tests, in place of the one that may hold a token.
const HIDDEN: &str = "CARGO_MANIFEST_DIR";

/// One command behind the trait, with what it tells.
struct Bench {
    pushed: PushedVisits,
    told: mpsc::Receiver<Event>,
    /// Command scripts write here.
    folder: tempfile::TempDir,
}

fn bench(script: &str, margin_s: f64, grace_s: f64) -> Bench {
    let folder = tempfile::tempdir().unwrap();
    let there = folder.path().to_str().unwrap();
    let command = ["sh", "-c", script, "carry-out", there].map(str::to_owned);
    bench_of(command.to_vec(), margin_s, grace_s, folder)
}

fn bench_of(command: Vec<String>, margin_s: f64, grace_s: f64, folder: tempfile::TempDir) -> Bench {
    let push = Push {
        command,
        margin_s,
        grace_s,
    };
    let (tell, told) = mpsc::channel(8);
    Bench {
        pushed: PushedVisits::new(push, HIDDEN, Arc::new(survey()), 1.0, tell),
        told,
        folder,
    }
}

impl Bench {
    async fn event(&mut self) -> Event {
        let waited = time::timeout(Duration::from_secs(20), self.told.recv()).await;
        waited.expect("an event in time").expect("an event")
    }

    async fn report(&mut self) -> VisitReport {
        match self.event().await {
            Event::Report { report, .. } => report,
            other => panic!("no report: {other:?}"),
        }
    }

    async fn wait_for_file(&self, name: &str) -> String {
        let path = self.folder.path().join(name);
        for _ in 0..400 {
            if let Ok(text) = std::fs::read_to_string(&path)
                && text.ends_with('\n')
            {
                return text.trim().to_owned();
            }
            time::sleep(Duration::from_millis(25)).await;
        }
        panic!("{name} was not written");
    }
}

/// A visit that is planned to take no time at all, so that the margin alone bounds its command.
fn lease(number: u32, kind: EntryKind) -> Lease {
    let at = Utc::parse("2026-12-01T23:00:00Z").unwrap();
    Lease {
        visit: VisitId(format!("2026-12-01-{number:04}")),
        entry: QueueEntry {
            kind,
            subject: TargetId::new("t1"),
            start: at,
            end: at,
            setup_s: 0.0,
            exposures: Exposures {
                count: 2,
                seconds: 1.0,
            },
            predicted_rv_error_m_s: Some(1.5),
            airmass: Some(1.1),
            altitude_deg: Some(65.0),
            azimuth_deg: Some(30.0),
            moon_separation_deg: None,
            value: ValueParts::default(),
            because: "due".to_owned(),
        },
        revision: 1,
        claim_key: String::new(),
        holder: "command".to_owned(),
        granted: at,
        expires: at.plus_ms(600_000),
    }
}

fn science(number: u32) -> Lease {
    lease(number, EntryKind::Science)
}

fn lives(pid: &str) -> bool {
    std::path::Path::new("/proc")
        .join(pid)
        .join("stat")
        .exists()
        && !std::fs::read_to_string(format!("/proc/{pid}/stat"))
            .is_ok_and(|stat| stat.contains(") Z "))
}

async fn is_gone(pid: &str) -> bool {
    for _ in 0..200 {
        if !lives(pid) {
            return true;
        }
        time::sleep(Duration::from_millis(25)).await;
    }
    false
}

#[tokio::test]
async fn the_command_gets_the_visit_and_its_word_counts() {
    let script = r#"read -r visit; printf '%s\n' "$visit" > "$1/in"; env > "$1/env"; echo x >> "$1/env"
        echo looking >&2
        echo '{"outcome":"short","exposing_start":"2026-12-01T23:01:00Z",
               "exposing_end":"2026-12-01T23:05:00Z","exposed_s":200,"snr":80.5,"note":"cloud"}'"#;
    let mut bench = bench(script, 20.0, 5.0);
    bench.pushed.start(&science(1)).unwrap();
    let report = bench.report().await;
    assert_eq!(report.outcome, Outcome::Short);
    assert_eq!(report.exposing.unwrap().length_ms(), 240_000);
    assert_eq!((report.exposed_s, report.snr), (Some(200.0), Some(80.5)));
    assert_eq!(report.note, "cloud");
    let visit: serde_json::Value = serde_json::from_str(&bench.wait_for_file("in").await).unwrap();
    assert_eq!(visit["visit"], "2026-12-01-0001");
    assert_eq!(visit["star"]["ra_deg"], 60.0);
    assert_eq!(visit["exposure_count"], 2);
    let environment = bench.wait_for_file("env").await;
    assert!(environment.contains("CARGO_PKG_NAME="));
    assert!(!environment.contains(&format!("{HIDDEN}=")));
}

#[tokio::test]
async fn a_calibration_names_no_star_and_an_unknown_star_is_not_started() {
    let mut bench = bench(
        "read -r v; echo \"$v\" > \"$1/in\"; echo '{\"outcome\":\"done\"}'",
        20.0,
        5.0,
    );
    bench
        .pushed
        .start(&lease(1, EntryKind::Calibration))
        .unwrap();
    assert_eq!(bench.report().await.outcome, Outcome::Done);
    assert!(bench.wait_for_file("in").await.contains("\"star\":null"));
    let mut gone = science(2);
    gone.entry.subject = TargetId::new("gone");
    assert!(
        bench
            .pushed
            .start(&gone)
            .unwrap_err()
            .detail
            .contains("gone")
    );
}

#[tokio::test]
async fn what_is_no_outcome_loses_the_visit_and_says_why() {
    let cases = [
        ("echo hello", "no outcome"),
        ("true", "told no outcome"),
        ("exit 3", "exit status: 3"),
        ("kill -9 $$", "signal: 9"),
        ("echo '{\"outcome\":\"splendid\"}'", "no outcome"),
        ("echo '{\"outcome\":\"done\",\"snr\":-1}'", "below 0"),
        (
            "echo '{\"outcome\":\"done\",\"colour\":\"red\"}'",
            "no outcome",
        ),
        (
            "echo '{\"outcome\":\"done\",\"exposing_start\":\"2026-12-01T23:00:00Z\"}'",
            "alone",
        ),
        ("echo '{\"outcome\":\"done\"}'; exit 1", "told of light"),
        ("head -c 300000 /dev/zero", "too long"),
        ("printf '\\377\\376'", "no outcome"),
    ];
    for (script, said) in cases {
        let mut bench = bench(script, 20.0, 5.0);
        bench.pushed.start(&science(1)).unwrap();
        let report = bench.report().await;
        assert_eq!(report.outcome, Outcome::Lost(LossCause::Other), "{script}");
        assert!(report.note.contains(said), "{script}: {}", report.note);
    }
}

#[tokio::test]
async fn a_program_that_is_not_there_refuses_and_then_holds_the_night() {
    let nowhere = vec!["/nowhere/carry-out".to_owned()];
    let mut bench = bench_of(nowhere, 20.0, 5.0, tempfile::tempdir().unwrap());
    for number in 1..FAILURES_TO_HOLD {
        bench.pushed.start(&science(number)).unwrap();
        let report = bench.report().await;
        assert_eq!(report.outcome, Outcome::Refused);
        assert!(
            report.note.contains("/nowhere/carry-out"),
            "{}",
            report.note
        );
    }
    bench.pushed.start(&science(9)).unwrap();
    let fault = bench.event().await;
    assert!(matches!(fault, Event::InstrumentFault { .. }), "{fault:?}");
    assert_eq!(bench.report().await.outcome, Outcome::Refused);
}

#[tokio::test]
async fn a_stop_is_heard_and_the_last_word_counts() {
    let script = r#"trap 'echo "{\"outcome\":\"short\",\"exposed_s\":5}"; exit 0' TERM
        echo on > "$1/on"; while :; do sleep 0.05; done"#;
    let mut bench = bench(script, 60.0, 10.0);
    bench.pushed.start(&science(1)).unwrap();
    bench.wait_for_file("on").await;
    bench.pushed.stop(&science(1).visit, LossCause::Weather);
    let report = bench.report().await;
    assert_eq!(
        (report.outcome, report.exposed_s),
        (Outcome::Short, Some(5.0))
    );
}

#[tokio::test]
async fn a_command_that_will_not_stop_is_killed_with_all_it_started() {
    let script = r#"trap '' TERM; sh -c 'trap "" TERM; echo $$ > "$1/child"; sleep 600' x "$1" &
        sleep 600 & wait; wait; sleep 600"#;
    let mut bench = bench(script, 60.0, 0.3);
    bench.pushed.start(&science(1)).unwrap();
    let child = bench.wait_for_file("child").await;
    let began = Instant::now();
    bench.pushed.stop(&science(1).visit, LossCause::Weather);
    let report = bench.report().await;
    assert_eq!(report.outcome, Outcome::Lost(LossCause::Weather));
    assert!(began.elapsed() < Duration::from_secs(8));
    assert!(is_gone(&child).await, "{child} lives");
}

#[tokio::test]
async fn a_command_that_hangs_is_ended_when_its_time_is_up() {
    let mut bench = bench("exec sleep 600", 0.3, 5.0);
    bench.pushed.start(&science(1)).unwrap();
    let report = bench.report().await;
    assert_eq!(report.outcome, Outcome::Lost(LossCause::Other));
    assert!(report.note.contains("too long"), "{}", report.note);
}

#[tokio::test]
async fn what_forks_and_stays_neither_delays_the_report_nor_stays() {
    // The child holds on to standard output, which therefore never ends by itself.
    let script = r#"(trap "" HUP; echo start >&2; sleep 600) & echo $! > "$1/child"
        echo '{"outcome":"done"}'"#;
    let mut bench = bench(script, 60.0, 5.0);
    let began = Instant::now();
    bench.pushed.start(&science(1)).unwrap();
    assert_eq!(bench.report().await.outcome, Outcome::Done);
    assert!(began.elapsed() < Duration::from_secs(8));
    let child = bench.wait_for_file("child").await;
    assert!(is_gone(&child).await, "{child} lives");
}

#[tokio::test]
async fn the_next_command_waits_until_the_last_is_gone() {
    let script = r#"trap 'sleep 0.5; echo end >> "$1/log"; exit 0' TERM
        echo start >> "$1/log"; while :; do sleep 0.05; done"#;
    let mut bench = bench(script, 60.0, 10.0);
    bench.pushed.start(&science(1)).unwrap();
    bench.wait_for_file("log").await;
    bench.pushed.stop(&science(1).visit, LossCause::Operator);
    bench.pushed.start(&science(2)).unwrap();
    assert_eq!(
        bench.report().await.outcome,
        Outcome::Lost(LossCause::Operator)
    );
    time::sleep(Duration::from_millis(300)).await;
    bench.pushed.stop(&science(2).visit, LossCause::Operator);
    bench.report().await;
    let log = bench.wait_for_file("log").await;
    assert_eq!(
        log.lines().collect::<Vec<_>>(),
        ["start", "end", "start", "end"]
    );
}

#[tokio::test]
async fn the_shipped_example_refuses_until_it_is_filled_in_and_can_pretend() {
    let example = concat!(env!("CARGO_MANIFEST_DIR"), "/config/carry-out.sh");
    let check = async |arguments: &[&str], outcome| {
        let command = std::iter::once(&example).chain(arguments);
        let command = command.map(|&word| word.to_owned()).collect();
        let mut bench = bench_of(command, 20.0, 5.0, tempfile::tempdir().unwrap());
        bench.pushed.start(&science(1)).unwrap();
        let report = bench.report().await;
        assert_eq!(report.outcome, outcome, "{report:?}");
        (bench, report)
    };
    check(&[], Outcome::Refused).await;
    let (_, report) = check(&["--pretend"], Outcome::Done).await;
    assert_eq!(report.exposed_s, Some(2.0));
}
