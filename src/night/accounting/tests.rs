//! The split against set algebra, which shares no code with the sweep.

use std::sync::Arc;

use proptest::prelude::*;

use super::*;
use crate::catalogue::TargetId;
use crate::night::{HoldSpan, Lease, LeaseRecord, NightBounds, RunMode};
use crate::record::{Exposures, PlanCause, PlanRevision, ValueParts, Visit, VisitId};
use crate::time::NightDate;

/// Length of the trial's darkness, milliseconds.
const DARK_MS: i64 = 1000;

fn at(ms: i64) -> Utc {
    Utc::from_unix_ms(ms)
}

fn span((start, length): (i64, i64)) -> Span {
    Span::new(at(start), at(start + length))
}

fn darkness() -> Span {
    span((0, DARK_MS))
}

fn night() -> NightDate {
    NightDate::parse("2026-12-01").unwrap()
}

fn entry(kind: EntryKind, start: i64, setup_ms: i64) -> QueueEntry {
    QueueEntry {
        kind,
        subject: TargetId::new("star"),
        start: at(start),
        end: at(start + 50),
        setup_s: setup_ms as f64 / 1000.0,
        exposures: Exposures {
            count: 1,
            seconds: 0.05,
        },
        predicted_rv_error_m_s: None,
        airmass: None,
        altitude_deg: None,
        azimuth_deg: None,
        moon_separation_deg: None,
        value: ValueParts::default(),
        because: String::new(),
    }
}

fn kind_of(number: u8) -> EntryKind {
    match number % 3 {
        0 => EntryKind::Calibration,
        1 => EntryKind::Standard,
        _ => EntryKind::Science,
    }
}

/// A lease in random times: its whole span, its exposing span, whether it is still running, its
/// kind, and whether it was credited.
type Lived = ((i64, i64), (i64, i64), u8, bool, bool);

fn record(number: u32, lived: &Lived) -> LeaseRecord {
    let (whole, exposing, kind, running, credited) = *lived;
    let entry = entry(kind_of(kind), whole.0, 0);
    let lease = Lease {
        visit: VisitId::of(night(), number),
        revision: 1,
        claim_key: String::new(),
        holder: String::new(),
        granted: at(whole.0),
        expires: at(whole.0 + whole.1),
        entry: entry.clone(),
    };
    let visit = Visit {
        id: lease.visit.clone(),
        night: night(),
        kind: entry.kind,
        subject: entry.subject,
        began: lease.granted,
        exposing: span(exposing),
        exposed_s: 0.0,
        planned: entry.exposures,
        outcome: if credited {
            Outcome::Done
        } else {
            Outcome::Refused
        },
        credit: f64::from(u8::from(credited)),
        airmass: None,
        snr: None,
        rv_error_m_s: None,
        predicted_rv_error_m_s: None,
        mid_bjd_tdb: None,
        note: String::new(),
    };
    LeaseRecord {
        lease: Arc::new(lease),
        ended: (!running).then(|| at(whole.0 + whole.1)),
        visit: (!running).then(|| Arc::new(visit)),
    }
}

fn log(
    ours: bool,
    holds: &[(usize, (i64, i64), bool)],
    leases: &[Lived],
    plans: &[(i64, Vec<(i64, i64)>)],
) -> NightLog {
    let mut log = NightLog::new(NightBounds {
        night: night(),
        span: span((-5000, 10_000)),
        darkness: Some(darkness()),
        ours,
        mode: RunMode::Rehearsal,
    });
    log.holds = holds
        .iter()
        .map(|(cause, times, open)| HoldSpan {
            cause: HoldCause::ALL[*cause],
            began: at(times.0),
            ended: (!open).then(|| at(times.0 + times.1)),
            detail: Arc::from(""),
        })
        .collect();
    for (index, lived) in leases.iter().enumerate() {
        let record = record(index as u32 + 1, lived);
        log.leases.insert(record.lease.visit.clone(), record);
    }
    let mut plans = plans.to_vec();
    plans.sort();
    for (index, (made, entries)) in plans.iter().enumerate() {
        let revision = PlanRevision {
            night: night(),
            number: index as u32 + 2,
            made_at: at(*made),
            from: at(*made),
            cause: PlanCause::Evening,
            entries: entries
                .iter()
                .map(|(start, setup)| entry(EntryKind::Science, *start, *setup))
                .collect(),
            left_out: Vec::new(),
            value: 0.0,
            bound: None,
        };
        log.revisions.push((at(*made), Arc::new(revision)));
    }
    log
}

fn times() -> impl Strategy<Value = (i64, i64)> {
    (-200i64..1200, 0i64..400)
}

/// What is left of `free`, and how much of it `taken` took.
fn take(free: &mut SpanSet, taken: &SpanSet) -> i64 {
    let common = free.intersect(taken);
    *free = free.subtract(taken);
    common.total_ms()
}

fn leases_where(
    log: &NightLog,
    pick: impl Fn(&LeaseRecord) -> bool,
    span_of: impl Fn(&LeaseRecord) -> Span,
) -> SpanSet {
    SpanSet::from_spans(log.leases.values().filter(|r| pick(r)).map(span_of))
}

fn gave(record: &LeaseRecord) -> bool {
    record.visit.as_ref().is_some_and(|v| v.credit > 0.0)
}

fn exposing(record: &LeaseRecord) -> Span {
    record
        .visit
        .as_ref()
        .map_or(span((0, 0)), |visit| visit.exposing)
}

proptest! {
    #[test]
    fn the_split_agrees_with_set_algebra(
        ours in proptest::bool::weighted(0.9),
        holds in proptest::collection::vec((0usize..5, times(), proptest::bool::weighted(0.1)), 0..6),
        leases in proptest::collection::vec(
            (times(), times(), any::<u8>(), proptest::bool::weighted(0.1), any::<bool>()), 0..6),
        plans in proptest::collection::vec(
            (-100i64..1000, proptest::collection::vec((0i64..1100, 0i64..60), 0..5)), 0..4),
        blocked in proptest::collection::vec(times(), 0..3),
    ) {
        let log = log(ours, &holds, &leases, &plans);
        let blocked = SpanSet::from_spans(blocked.into_iter().map(span));
        let split = split(&log, &blocked);
        prop_assert_eq!(split.total_ms(), DARK_MS);
        let mut free = SpanSet::from(darkness());

        // Overlapping leases cannot happen; where they do here, the split may give a moment to
        // either, so kinds are compared together.
        let shutter = leases_where(&log, gave, exposing);
        let open_ms = take(&mut free, &shutter);
        let not_ours = if ours { blocked } else { SpanSet::from(darkness()) };
        let not_ours_ms = take(&mut free, &not_ours);
        prop_assert_eq!(split.idle_ms[&IdleCause::NotOurs], not_ours_ms);
        for cause in HoldCause::ALL {
            let on = log.holds.iter().filter(|h| h.cause == cause);
            let spans = on.map(|h| Span::new(h.began, h.ended.unwrap_or(at(DARK_MS))));
            let held_ms = take(&mut free, &SpanSet::from_spans(spans));
            prop_assert_eq!(split.held_ms[&cause], held_ms);
        }
        let whole = |r: &LeaseRecord| Span::new(r.lease.granted, r.ended.unwrap_or(at(DARK_MS)));
        let leased_ms = take(&mut free, &leases_where(&log, |_| true, whole));
        let busy_ms = split.exposing_ms + split.calibration_ms + split.overhead_ms;
        prop_assert_eq!(busy_ms, open_ms + leased_ms);

        let first_plan = log.revisions.first().map_or(at(DARK_MS), |(since, _)| *since);
        let planless = Span::new(at(-1), first_plan);
        let waiting_ms = free.intersect(&planless.into()).total_ms();
        prop_assert!(split.idle_ms[&IdleCause::Waiting] >= waiting_ms);
        let idle_ms: i64 = split.idle_ms.values().sum();
        prop_assert_eq!(idle_ms - not_ours_ms, free.total_ms());
        prop_assert!(split.idle_ms.values().all(|ms| *ms >= 0));
    }
}

#[test]
fn each_moment_counts_for_what_comes_first() {
    // One visit: slew 0–100, shutter 100–200, read out and reported at 210. A standard: 300–400,
    // shutter 320–390. A hold 180–260. The queue: one entry opens at 500, taken by nobody.
    let science = ((0, 210), (100, 100), 2, false, true);
    let standard = ((300, 100), (320, 70), 1, false, true);
    let holds = [(0, (180, 80), false), (1, (190, 30), false)];
    let log = log(
        true,
        &holds,
        &[science, standard],
        &[(250, vec![(520, 20)])],
    );
    let blocked = SpanSet::from(span((900, 500)));
    let split = split(&log, &blocked);
    assert_eq!(split.exposing_ms, 100);
    assert_eq!(split.overhead_ms, 100);
    assert_eq!(split.calibration_ms, 100);
    assert_eq!(split.held_ms[&HoldCause::Weather], 60);
    assert_eq!(split.held_ms[&HoldCause::FeedLost], 0);
    assert_eq!(split.idle_ms[&IdleCause::Waiting], 40 + 100);
    assert_eq!(split.idle_ms[&IdleCause::Unclaimed], 400);
    assert_eq!(split.idle_ms[&IdleCause::NothingToObserve], 0);
    assert_eq!(split.idle_ms[&IdleCause::NotOurs], 100);
    assert_eq!(count(&log).done, 2);
}

#[test]
fn an_empty_queue_leaves_nothing_to_observe() {
    let split = split(
        &log(true, &[], &[], &[(-10, Vec::new())]),
        &SpanSet::default(),
    );
    assert_eq!(split.idle_ms[&IdleCause::NothingToObserve], DARK_MS);
}
