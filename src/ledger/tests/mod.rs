//! The ledger against arbitrary facts, and against files that are none.

mod facts;
mod files;

use std::path::PathBuf;

use super::SqliteLedger;
use crate::catalogue::{Survey, TargetId};
use crate::night::{Fact, Lease, RunMode};
use crate::ports::{Ledger, LedgerFault};
use crate::record::{
    DarknessSplit, EntryKind, Exposures, HoldCause, LossCause, NightSummary, Outcome, QueueEntry,
    ValueParts, Visit, VisitCounts, VisitId,
};
use crate::settings::{Sources, check};
use crate::time::{NightDate, Span, Utc};

fn at(text: &str) -> Utc {
    Utc::parse(text).unwrap()
}

fn night() -> NightDate {
    NightDate::parse("2026-12-01").unwrap()
}

fn darkness() -> Span {
    Span::new(at("2026-12-01T19:00:00Z"), at("2026-12-02T05:00:00Z"))
}

fn opened(night: NightDate) -> Fact {
    Fact::NightOpened {
        night,
        span: Span::new(at("2026-12-01T12:00:00Z"), at("2026-12-02T12:00:00Z")),
        darkness: Some(darkness()),
        ours: true,
        mode: RunMode::Real,
    }
}

fn closed(night: NightDate) -> Fact {
    Fact::NightClosed(NightSummary {
        night,
        darkness: Some(darkness()),
        split: DarknessSplit {
            exposing_ms: 1_000_000,
            overhead_ms: 5_000_000,
            held_ms: [(HoldCause::Weather, 30_000_000)].into(),
            ..DarknessSplit::default()
        },
        visits: VisitCounts::default(),
    })
}

fn visit(number: u32, outcome: Outcome) -> Visit {
    let start = darkness().start.plus_ms(i64::from(number) * 1_200_000);
    Visit {
        id: VisitId::of(night(), number),
        night: night(),
        kind: EntryKind::Science,
        subject: TargetId::new("ALPHA-1"),
        began: start,
        exposing: Span::new(start.plus_ms(60_000), start.plus_ms(960_000)),
        exposed_s: 900.0,
        planned: Exposures {
            count: 3,
            seconds: 300.0,
        },
        outcome,
        credit: 1.0,
        airmass: Some(1.2),
        snr: None,
        rv_error_m_s: None,
        predicted_rv_error_m_s: Some(1.1),
        mid_bjd_tdb: Some(2_461_376.337_412_908_5),
        note: String::new(),
    }
}

fn ended(number: u32, key: &str, outcome: Outcome) -> Fact {
    Fact::VisitEnded {
        at: darkness().end,
        report_key: key.to_owned(),
        visit: visit(number, outcome),
    }
}

fn entry() -> QueueEntry {
    QueueEntry {
        kind: EntryKind::Science,
        subject: TargetId::new("ALPHA-1"),
        start: darkness().start,
        end: darkness().start.plus_ms(900_000),
        setup_s: 60.0,
        exposures: Exposures {
            count: 3,
            seconds: 300.0,
        },
        predicted_rv_error_m_s: Some(1.0),
        airmass: Some(1.2),
        altitude_deg: Some(56.0),
        azimuth_deg: Some(120.0),
        moon_separation_deg: None,
        value: ValueParts::default(),
        because: "due".to_owned(),
    }
}

fn lease(number: u32) -> Fact {
    Fact::LeaseGranted(Lease {
        visit: VisitId::of(night(), number),
        entry: entry(),
        revision: 1,
        claim_key: format!("claim-{number}"),
        holder: "dome".to_owned(),
        granted: darkness().start,
        expires: darkness().start.plus_ms(1_800_000),
    })
}

/// A ledger file in a folder that is removed when the test ends.
fn scratch() -> (tempfile::TempDir, PathBuf) {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("ledger.sqlite");
    (folder, path)
}

#[test]
fn a_report_counts_once() {
    let mut ledger = SqliteLedger::in_memory().unwrap();
    let facts = [lease(1), ended(1, "k", Outcome::Done)];
    ledger.append(night(), &facts).unwrap();
    ledger
        .append(night(), &[ended(1, "k", Outcome::Done)])
        .unwrap();
    assert_eq!(ledger.facts(night()).unwrap(), facts);
    assert_eq!(ledger.visits(None).unwrap(), [visit(1, Outcome::Done)]);
}

#[test]
fn the_same_key_for_another_visit_is_another_report() {
    let mut ledger = SqliteLedger::in_memory().unwrap();
    let facts = [ended(1, "k", Outcome::Done), ended(2, "k", Outcome::Done)];
    ledger.append(night(), &facts).unwrap();
    assert_eq!(ledger.visits(None).unwrap().len(), 2);
}

#[test]
fn a_late_report_supersedes_and_leaves_the_earlier_word() {
    let mut ledger = SqliteLedger::in_memory().unwrap();
    let facts = [
        ended(1, "expiry", Outcome::Unreported),
        ended(1, "late", Outcome::Lost(LossCause::Acquisition)),
    ];
    ledger.append(night(), &facts).unwrap();
    let standing = ledger.visits(None).unwrap();
    assert_eq!(standing, [visit(1, Outcome::Lost(LossCause::Acquisition))]);
    let history = ledger.history().unwrap();
    let stands: Vec<bool> = history.iter().map(|row| row.stands).collect();
    assert_eq!(stands, [false, true]);
    assert_eq!(history[0].visit.outcome, Outcome::Unreported);
}

#[test]
fn a_batch_is_kept_whole_or_not_at_all() {
    let mut ledger = SqliteLedger::in_memory().unwrap();
    ledger.append(night(), &[lease(1)]).unwrap();
    let refused = ledger.append(night(), &[ended(1, "k", Outcome::Done), lease(1)]);
    assert!(
        matches!(refused, Err(LedgerFault::Contradicted { .. })),
        "{refused:?}"
    );
    assert_eq!(ledger.facts(night()).unwrap(), [lease(1)]);
    assert_eq!(ledger.visits(None).unwrap(), []);
}

#[test]
fn the_open_night_is_the_last_one_not_closed() {
    let mut ledger = SqliteLedger::in_memory().unwrap();
    assert_eq!(ledger.open_night().unwrap(), None);
    let next = night().plus_nights(1);
    ledger.append(night(), &[opened(night())]).unwrap();
    assert_eq!(ledger.open_night().unwrap(), Some(night()));
    ledger.append(night(), &[closed(night())]).unwrap();
    assert_eq!(ledger.open_night().unwrap(), None);
    ledger.append(next, &[opened(next)]).unwrap();
    assert_eq!(ledger.open_night().unwrap(), Some(next));
    let nights = ledger.nights(night(), next).unwrap();
    assert_eq!(nights.len(), 2);
    assert!(nights[0].summary.is_some() && nights[1].summary.is_none());
    assert_eq!(ledger.first_night().unwrap(), Some(night()));
}

#[test]
fn holds_are_cut_to_the_span_and_end_with_the_night() {
    let mut ledger = SqliteLedger::in_memory().unwrap();
    let began = |at: Utc, cause| Fact::HoldBegan {
        at,
        cause,
        detail: "wind 17 m/s".to_owned(),
    };
    let dusk = darkness().start;
    let facts = [
        opened(night()),
        began(dusk, HoldCause::Weather),
        began(dusk.plus_ms(1000), HoldCause::Operator),
        Fact::HoldEnded {
            at: dusk.plus_ms(5000),
            cause: HoldCause::Weather,
        },
        began(dusk.plus_ms(9000), HoldCause::Weather),
    ];
    ledger.append(night(), &facts).unwrap();
    let within = Span::new(dusk.plus_ms(2000), dusk.plus_ms(9500));
    let found: Vec<(HoldCause, i64)> = ledger
        .holds(within)
        .unwrap()
        .iter()
        .map(|hold| (hold.cause, hold.span.length_ms()))
        .collect();
    assert_eq!(
        found,
        [
            (HoldCause::Weather, 3000),
            (HoldCause::Operator, 7500),
            (HoldCause::Weather, 500)
        ]
    );
}

#[test]
fn what_is_kept_cannot_be_edited() {
    let mut ledger = SqliteLedger::in_memory().unwrap();
    ledger
        .append(night(), &[ended(1, "k", Outcome::Done)])
        .unwrap();
    for sql in [
        "UPDATE visits SET credit = 0",
        "DELETE FROM visits",
        "UPDATE journal SET body = ''",
        "DELETE FROM journal",
    ] {
        assert!(ledger.connection.execute(sql, []).is_err(), "{sql}");
    }
}

#[test]
fn the_check_finds_what_was_tampered_with() {
    let check = |sql: &str, word: &str| {
        let mut ledger = SqliteLedger::in_memory().unwrap();
        let facts = [
            opened(night()),
            lease(1),
            ended(1, "k", Outcome::Done),
            closed(night()),
        ];
        ledger.append(night(), &facts).unwrap();
        assert_eq!(ledger.check().unwrap().faults, Vec::<String>::new());
        ledger.connection.execute_batch(sql).unwrap();
        let faults = ledger.check().unwrap().faults.join("; ");
        assert!(faults.contains(word), "{sql}: {faults}");
    };
    check("UPDATE leases SET holder = 'x'", "table leases differs");
    check(
        "UPDATE darkness_parts SET ms = 1 WHERE part = 'exposing'",
        "add up to",
    );
    check(
        "DROP TRIGGER visits_never_edited; UPDATE visits SET credit = 0.5",
        "table visits differs",
    );
    check(
        "DROP TRIGGER journal_never_edited; UPDATE journal SET body = '{}' WHERE kind = 'night_opened'",
        "journal row 1 (night_opened)",
    );
}

#[test]
fn migrations_number_the_layout() {
    let ledger = SqliteLedger::in_memory().unwrap();
    let version: i64 = ledger
        .connection
        .pragma_query_value(None, "user_version", |row| row.get(0))
        .unwrap();
    assert_eq!(version, super::LAYOUT);
}

#[test]
fn a_target_is_kept_when_its_settings_change() {
    let mut ledger = SqliteLedger::in_memory().unwrap();
    let mut survey = survey();
    let target = survey.targets[0].id.clone();
    let magnitude = |ledger: &SqliteLedger, nights: i64| {
        let kept = ledger.target_as_of(&target, night().plus_nights(nights));
        kept.unwrap()
            .map(|body| body["magnitude"].as_f64().unwrap())
    };
    let first = survey.targets[0].magnitude;
    ledger.keep_targets(night(), &survey).unwrap();
    ledger
        .keep_targets(night().plus_nights(1), &survey)
        .unwrap();
    survey.targets[0].magnitude = first + 1.0;
    ledger
        .keep_targets(night().plus_nights(2), &survey)
        .unwrap();
    assert_eq!(magnitude(&ledger, -1), None);
    assert_eq!(magnitude(&ledger, 1), Some(first));
    assert_eq!(magnitude(&ledger, 2), Some(first + 1.0));
    let rows: usize = ledger
        .connection
        .query_row("SELECT count(*) FROM target_snapshots", [], |row| {
            row.get(0)
        })
        .map(|rows: i64| usize::try_from(rows).unwrap())
        .unwrap();
    assert_eq!(rows, survey.targets.len() + 1);
}

/// The shipped survey.
fn survey() -> Survey {
    let folder = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("config");
    let files = std::fs::read_dir(folder).unwrap().map(|entry| {
        let path = entry.unwrap().path();
        let name = path.file_name().unwrap().to_str().unwrap().to_owned();
        (name, Ok(std::fs::read(path).unwrap()))
    });
    let sources = Sources {
        files: files.collect(),
        ..Sources::default()
    };
    check(&sources).unwrap().survey
}
