//! The night keeper turned by hand: what it answers, keeps and does.

use std::collections::BTreeMap;
use std::convert::Infallible;

use super::*;
use proptest::prelude::*;

use crate::catalogue::TargetId;
use crate::record::{
    EntryKind, Exposures, HoldCause, LossCause, Outcome, PlanCause, PlanRevision, QueueEntry,
    ValueParts, VisitId,
};
use crate::time::{MonotonicMs, NightDate, Span, Utc};
use crate::weather::{Quantity, WeatherRule, WeatherRules, WeatherSample};

const HOUR_S: i64 = 3600;
const DUSK_S: i64 = 6 * HOUR_S;
const DAWN_S: i64 = 16 * HOUR_S;

fn rules() -> NightRules {
    NightRules::new(WeatherRules {
        rules: vec![WeatherRule {
            quantity: Quantity::WindMS,
            hold_at: 15.0,
            release_at: 12.0,
            dwell_s: 300.0,
            high_is_bad: true,
        }],
        stale_after_s: 1e6,
        opening_dwell_s: 0.0,
        require_safe_flag: false,
    })
}

fn noon() -> Utc {
    Utc::parse("2026-12-01T12:00:00Z").unwrap()
}

fn at(second: i64) -> Utc {
    noon().plus_ms(second * 1000)
}

fn night() -> NightDate {
    NightDate::parse("2026-12-01").unwrap()
}

/// A night keeper with a clock in seconds from noon, and the facts that were kept.
struct Bench {
    machine: Machine,
    second: i64,
    step_ms: i64,
    kept: Vec<Fact>,
    actions: Vec<Action>,
}

impl Bench {
    fn new(rules: NightRules) -> Self {
        let mut bench = Bench {
            machine: Machine::new(rules, stamp(0, 0)),
            second: 0,
            step_ms: 0,
            kept: Vec::new(),
            actions: Vec::new(),
        };
        bench
            .tell(Event::NightBegins(NightBounds {
                night: night(),
                span: Span::new(noon(), at(24 * HOUR_S)),
                darkness: Some(Span::new(at(DUSK_S), at(DAWN_S))),
                ours: true,
                mode: RunMode::Rehearsal,
            }))
            .unwrap();
        bench
    }

    /// Dark, clear, and a queue of ten half-hour visits from dusk on.
    fn observing() -> Self {
        Self::observing_by(rules())
    }

    fn observing_by(rules: NightRules) -> Self {
        let mut bench = Bench::new(rules);
        bench.wind_until_open();
        bench.plan(DUSK_S, 10);
        bench.go_to(DUSK_S);
        assert_eq!(bench.machine.state().phase(), Phase::Observing);
        bench
    }

    fn tell(&mut self, event: Event) -> Result<Reply, Refusal> {
        let keep = |_, facts: &[Fact]| {
            self.kept.extend_from_slice(facts);
            Ok::<(), Infallible>(())
        };
        let now = stamp(self.second, self.step_ms);
        let (done, _) = self.machine.turn(event, now, keep);
        self.actions = done.actions;
        done.reply
    }

    fn tell_with_full_disk(&mut self, event: Event) -> Result<Reply, Refusal> {
        let now = stamp(self.second, self.step_ms);
        let (done, fault) = self.machine.turn(event, now, |_, _| Err("disk full"));
        assert_eq!(fault, Some("disk full"));
        self.actions = done.actions;
        done.reply
    }

    fn go_to(&mut self, second: i64) {
        self.second = second;
        self.tell(Event::Tick).unwrap();
    }

    fn wind(&mut self, value: f64) {
        let sample = WeatherSample {
            at: stamp(self.second, self.step_ms).utc,
            values: BTreeMap::from([(Quantity::WindMS, value)]),
            wind_from: None,
            safe: None,
        };
        self.tell(Event::WeatherArrived(sample)).unwrap();
    }

    /// A gate in its dwell opens only after good samples have come for so long.
    fn wind_until_open(&mut self) {
        for _ in 0..6 {
            self.second += 60;
            self.wind(5.0);
        }
    }

    fn asked(&self) -> Option<&PlanRequest> {
        self.actions.iter().find_map(|action| match action {
            Action::AskForPlan(request) => Some(&**request),
            _ => None,
        })
    }

    fn stopped(&self) -> Option<(&VisitId, LossCause)> {
        self.actions.iter().find_map(|action| match action {
            Action::StopVisit { visit, cause } => Some((visit, *cause)),
            _ => None,
        })
    }

    /// Publishes a queue of half-hour visits, each with a minute of setup, from that second on.
    fn plan(&mut self, from_s: i64, visits: i64) {
        let entries = (0..visits)
            .map(|i| star(&format!("star-{i}"), from_s + 60 + i * 1860))
            .collect();
        self.publish(entries).unwrap();
    }

    fn publish(&mut self, entries: Vec<QueueEntry>) -> Result<Reply, Refusal> {
        let number = self.machine.state().next_revision();
        let made_at = stamp(self.second, self.step_ms).utc;
        self.tell(Event::Planned(PlanRevision {
            night: night(),
            number,
            made_at,
            from: made_at,
            cause: PlanCause::Evening,
            entries,
            left_out: Vec::new(),
            value: 1.0,
            bound: None,
        }))
    }

    fn claim(&mut self, key: &str) -> Result<Reply, Refusal> {
        self.tell(Event::Claim {
            key: key.to_owned(),
            holder: format!("holder of {key}"),
        })
    }

    fn leased(&mut self, key: &str) -> VisitId {
        match self.claim(key) {
            Ok(Reply::Lease(lease)) => lease.visit.clone(),
            other => panic!("no lease: {other:?}"),
        }
    }

    fn report(
        &mut self,
        visit: &VisitId,
        key: &str,
        report: VisitReport,
    ) -> Result<Reply, Refusal> {
        self.tell(Event::Report {
            visit: visit.clone(),
            key: key.to_owned(),
            report,
        })
    }

    fn visits_ended(&self) -> usize {
        let ends = |fact: &&Fact| matches!(fact, Fact::VisitEnded { .. });
        self.kept.iter().filter(ends).count()
    }
}

fn stamp(second: i64, step_ms: i64) -> Stamp {
    Stamp {
        utc: at(second).plus_ms(step_ms),
        mono: MonotonicMs(second * 1000),
    }
}

fn star(name: &str, start_s: i64) -> QueueEntry {
    QueueEntry {
        kind: EntryKind::Science,
        subject: TargetId::new(name),
        start: at(start_s),
        end: at(start_s + 1800),
        setup_s: 60.0,
        exposures: Exposures {
            count: 2,
            seconds: 800.0,
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

fn lamps(start_s: i64) -> QueueEntry {
    QueueEntry {
        kind: EntryKind::Calibration,
        setup_s: 0.0,
        ..star("lamps", start_s)
    }
}

fn done() -> VisitReport {
    VisitReport {
        outcome: Outcome::Done,
        exposing: None,
        exposed_s: None,
        snr: Some(80.0),
        rv_error_m_s: Some(1.5),
        note: String::new(),
    }
}

fn short(exposing: (i64, i64), exposed_s: f64) -> VisitReport {
    VisitReport {
        outcome: Outcome::Short,
        exposing: Some(Span::new(at(exposing.0), at(exposing.1))),
        exposed_s: Some(exposed_s),
        ..done()
    }
}

#[test]
fn a_claim_gets_the_same_lease_again_and_others_learn_who_holds_it() {
    let mut bench = Bench::observing();
    let visit = bench.leased("a");
    assert_eq!(bench.leased("a"), visit);
    match bench.claim("b") {
        Err(Refusal::Leased { holder, .. }) => assert_eq!(holder, "holder of a"),
        other => panic!("{other:?}"),
    }
    bench.second += 1860;
    bench.report(&visit, "r", done()).unwrap();
    assert_eq!(
        bench.claim("a"),
        Err(Refusal::ClaimSpent {
            visit: visit.clone()
        })
    );
    assert_ne!(bench.leased("b"), visit);
    let grants = |fact: &&Fact| matches!(fact, Fact::LeaseGranted(_));
    assert_eq!(bench.kept.iter().filter(grants).count(), 2);
}

#[test]
fn a_report_counts_once_however_often_it_comes() {
    let mut bench = Bench::observing();
    let visit = bench.leased("a");
    bench.second += 1860;
    let first = bench.report(&visit, "r", done()).unwrap();
    assert!(matches!(first, Reply::Reported { again: false, .. }));
    for key in ["r", "another key, the same word"] {
        let again = bench.report(&visit, key, done()).unwrap();
        assert!(matches!(again, Reply::Reported { again: true, .. }));
    }
    let other = short((DUSK_S + 60, DUSK_S + 90), 30.0);
    assert!(matches!(
        bench.report(&visit, "s", other),
        Err(Refusal::AlreadyReported { .. })
    ));
    let next = bench.leased("b");
    assert!(matches!(
        bench.report(&next, "r", done()),
        Err(Refusal::KeyReused { .. })
    ));
    let unknown = VisitId("2026-12-01-9999".to_owned());
    assert_eq!(
        bench.report(&unknown, "t", done()),
        Err(Refusal::UnknownVisit(unknown.clone()))
    );
    assert_eq!(bench.visits_ended(), 1);
}

#[test]
fn nothing_is_handed_out_before_its_setup_may_begin() {
    let mut bench = Bench::observing();
    let visit = bench.leased("a");
    bench.second += 1200;
    bench.report(&visit, "r", done()).unwrap();
    // The visit ended long before its planned end: the rest is planned afresh.
    assert_eq!(bench.asked().unwrap().cause, PlanCause::VisitDeviated);
    assert_eq!(bench.claim("b"), Err(Refusal::Replanning));
    bench.plan(DUSK_S + 2000, 3);
    let opens = at(DUSK_S + 2000);
    assert_eq!(bench.claim("b"), Err(Refusal::NotYet { opens }));
    bench.second = DUSK_S + 1999;
    assert_eq!(bench.claim("b"), Err(Refusal::NotYet { opens }));
    bench.second = DUSK_S + 2000;
    bench.leased("b");
}

#[test]
fn a_queue_that_slipped_is_planned_afresh_and_not_handed_out() {
    let mut bench = Bench::observing();
    bench.second += SLIP_TOLERANCE_S as i64;
    bench.leased("just in time");
    let mut bench = Bench::observing();
    bench.second += SLIP_TOLERANCE_S as i64 + 1;
    assert_eq!(bench.claim("a"), Err(Refusal::Replanning));
    let request = bench.asked().unwrap();
    assert_eq!(request.from, at(bench.second));
    assert_eq!(request.number, 2);
}

#[test]
fn a_lease_runs_out_as_unreported_and_is_settled_later() {
    let mut bench = Bench::observing();
    let visit = bench.leased("a");
    let expires = DUSK_S + 1860 + LEASE_MARGIN_S as i64;
    bench.go_to(expires - 1);
    assert!(bench.machine.state().lease().is_some());
    bench.go_to(expires);
    let ended = bench.machine.state().ended(&visit).unwrap();
    assert_eq!((ended.outcome, ended.credit), (Outcome::Unreported, 0.0));
    assert_eq!(bench.stopped().unwrap().0, &visit);
    bench.plan(expires, 3);
    bench.leased("b");
    bench.second += 600;
    let late = VisitReport {
        exposing: Some(Span::new(at(DUSK_S + 60), at(DUSK_S + 1860))),
        ..done()
    };
    bench.report(&visit, "late", late).unwrap();
    let settled = bench.machine.state().ended(&visit).unwrap();
    assert_eq!((settled.outcome, settled.credit), (Outcome::Done, 1.0));
    assert!(bench.machine.state().lease().is_some(), "the other runs on");
    assert_eq!(bench.visits_ended(), 2);
}

#[test]
fn a_report_after_the_close_changes_the_account() {
    let mut bench = Bench::observing();
    let visit = bench.leased("a");
    bench.go_to(DUSK_S + 2 * HOUR_S);
    bench.go_to(DAWN_S);
    let before = bench.machine.state().closed().unwrap().clone();
    assert_eq!((before.visits.done, before.visits.unreported), (0, 1));
    bench.second = DAWN_S + HOUR_S;
    let late = VisitReport {
        exposing: Some(Span::new(at(DUSK_S + 60), at(DUSK_S + 1860))),
        ..done()
    };
    bench.report(&visit, "late", late).unwrap();
    let after = bench.machine.state().closed().unwrap();
    assert_eq!((after.visits.done, after.visits.unreported), (1, 0));
    assert_eq!(after.split.exposing_ms, 1_800_000);
    assert_eq!(after.split.total_ms(), before.split.total_ms());
}

#[test]
fn impossible_times_are_cut_to_the_lease() {
    let mut bench = Bench::observing();
    let visit = bench.leased("a");
    bench.second += 600;
    bench
        .report(&visit, "r", short((0, 20 * HOUR_S), 1e9))
        .unwrap();
    let ended = bench.machine.state().ended(&visit).unwrap();
    assert_eq!(ended.exposing, Span::new(at(DUSK_S), at(DUSK_S + 600)));
    assert_eq!(ended.exposed_s, 600.0);
    assert_eq!(ended.credit, 600.0 / 1600.0);
    assert!(ended.note.contains("cut to the lease"));
    for broken in [f64::NAN, f64::INFINITY, -1.0] {
        let report = VisitReport {
            snr: Some(broken),
            ..done()
        };
        let visit = VisitId::of(night(), 1);
        assert!(matches!(
            bench.report(&visit, "n", report),
            Err(Refusal::BadRequest(_))
        ));
    }
}

#[test]
fn extensions_have_an_end_and_a_visit_that_must_stop_gets_none() {
    let mut bench = Bench::observing();
    let visit = bench.leased("a");
    let extend = |seconds| Event::Extend {
        visit: VisitId::of(night(), 1),
        seconds,
    };
    bench.second = DUSK_S + 1900;
    let expires = at(DUSK_S + 1900 + 900);
    assert_eq!(bench.tell(extend(900.0)), Ok(Reply::Extended(expires)));
    for seconds in [f64::NAN, -1.0, 1e9] {
        assert!(matches!(
            bench.tell(extend(seconds)),
            Err(Refusal::BadRequest(_))
        ));
    }
    bench.go_to(DUSK_S + 1860 + 900 + 30);
    let latest = at(DUSK_S + 1860 + EXTENSION_LIMIT_S as i64);
    assert_eq!(bench.tell(extend(1800.0)), Ok(Reply::Extended(latest)));
    assert_eq!(
        bench.tell(extend(1800.0)),
        Err(Refusal::ExtensionLimit(latest))
    );
    bench.wind(20.0);
    assert_eq!(bench.stopped(), Some((&visit, LossCause::Weather)));
    assert!(matches!(
        bench.tell(extend(60.0)),
        Err(Refusal::MustStop {
            cause: LossCause::Weather,
            ..
        })
    ));
}

#[test]
fn a_hold_stops_the_visit_and_its_end_plans_afresh() {
    let mut bench = Bench::observing();
    let visit = bench.leased("a");
    bench.second += 700;
    bench.wind(20.0);
    assert_eq!(bench.machine.state().phase(), Phase::Held);
    let lost = VisitReport {
        outcome: Outcome::Lost(LossCause::Other),
        ..done()
    };
    bench.report(&visit, "r", lost).unwrap();
    let ended = bench.machine.state().ended(&visit).unwrap();
    assert_eq!(ended.outcome, Outcome::Lost(LossCause::Weather));
    assert!(bench.asked().is_none(), "nobody needs a queue while held");
    assert!(matches!(bench.claim("b"), Err(Refusal::Held { .. })));
    bench.wind_until_open();
    assert_eq!(bench.machine.state().phase(), Phase::Observing);
    assert_eq!(bench.asked().unwrap().cause, PlanCause::HoldEnded);
    assert_eq!(bench.claim("b"), Err(Refusal::Replanning));
    bench.plan(bench.second, 2);
    bench.leased("b");
}

#[test]
fn a_release_never_passes_an_unsafe_feed() {
    let mut bench = Bench::observing();
    let by = || "keeper".to_owned();
    bench
        .tell(Event::Hold {
            by: by(),
            reason: "dew on the glass".to_owned(),
        })
        .unwrap();
    bench.wind(20.0);
    let still = bench.tell(Event::Release { by: by() });
    assert_eq!(still, Ok(Reply::Released(vec![HoldCause::Weather])));
    assert_eq!(bench.machine.state().phase(), Phase::Held);
    let again = bench.tell(Event::Release { by: by() });
    assert_eq!(again, Err(Refusal::NotHeld(vec![HoldCause::Weather])));
}

#[test]
fn with_a_full_disk_nothing_is_handed_out_and_what_is_unsafe_still_stops() {
    let mut bench = Bench::observing();
    let claim = Event::Claim {
        key: "a".to_owned(),
        holder: "x".to_owned(),
    };
    assert_eq!(bench.tell_with_full_disk(claim), Err(Refusal::LedgerDown));
    assert_eq!(bench.machine.state().lease(), None);
    assert!(bench.machine.state().is_held_by(HoldCause::Ledger));
    let kept_before = bench.kept.len();
    bench.second += LEDGER_RETRY_S as i64;
    assert_eq!(
        bench.tell_with_full_disk(Event::Tick),
        Err(Refusal::LedgerDown)
    );
    bench.second += LEDGER_RETRY_S as i64;
    bench.tell(Event::Tick).unwrap();
    // The hold that could not be kept when it began is in the record now, and its end.
    let is_ledger_hold = |fact: &Fact| {
        matches!(
            fact,
            Fact::HoldBegan {
                cause: HoldCause::Ledger,
                ..
            }
        )
    };
    assert!(is_ledger_hold(&bench.kept[kept_before]));
    assert_eq!(bench.machine.state().phase(), Phase::Observing);
    assert_eq!(&State::replay(&bench.kept).unwrap(), bench.machine.state());

    bench.plan(bench.second, 3);
    let visit = bench.leased("b");
    bench.second += 100;
    let report = Event::Report {
        visit: visit.clone(),
        key: "r".to_owned(),
        report: done(),
    };
    assert_eq!(bench.tell_with_full_disk(report), Err(Refusal::LedgerDown));
    assert!(
        bench.machine.state().lease().is_some(),
        "not acknowledged, so not ended"
    );
    assert_eq!(bench.stopped(), None, "a full disk is no danger to a visit");
    let gust = WeatherSample {
        at: at(bench.second),
        values: BTreeMap::from([(Quantity::WindMS, 30.0)]),
        wind_from: None,
        safe: None,
    };
    let reply = bench.tell_with_full_disk(Event::WeatherArrived(gust));
    assert_eq!(reply, Err(Refusal::LedgerDown));
    assert!(bench.machine.state().is_held_by(HoldCause::Weather));
    assert_eq!(bench.stopped(), Some((&visit, LossCause::Weather)));
    assert!(bench.machine.next_deadline() > Some(MonotonicMs(bench.second * 1000)));
}

#[test]
fn lamps_need_no_darkness() {
    let mut bench = Bench::new(rules());
    bench.wind_until_open();
    let evening = DUSK_S - HOUR_S;
    let mut entries = vec![lamps(evening)];
    entries.push(star("star", DUSK_S + 60));
    entries.push(lamps(DAWN_S + 60));
    bench.publish(entries).unwrap();
    assert_eq!(bench.machine.state().phase(), Phase::Ready);
    bench.go_to(evening - 1);
    assert_eq!(
        bench.claim("a"),
        Err(Refusal::NotYet { opens: at(evening) })
    );
    bench.go_to(evening);
    let visit = bench.leased("a");
    bench.second += 1800;
    bench.report(&visit, "r", done()).unwrap();
    assert_eq!(bench.claim("b"), Err(Refusal::NotYet { opens: at(DUSK_S) }));
    bench.go_to(DAWN_S);
    assert_eq!(bench.machine.state().phase(), Phase::Closing);
    bench.go_to(DAWN_S + 60);
    let visit = bench.leased("c");
    bench.second += 1800;
    bench.report(&visit, "s", done()).unwrap();
    assert!(bench.machine.state().closed().is_some());
    assert_eq!(bench.machine.state().phase(), Phase::Daylight);
}

#[test]
fn pushed_visits_start_by_themselves_when_their_time_comes() {
    let mut rules = rules();
    rules.hand_out = HandOut::Push;
    let mut bench = Bench::observing_by(rules);
    let started = |bench: &Bench| {
        bench.actions.iter().find_map(|action| match action {
            Action::StartVisit(lease) => Some(lease.visit.clone()),
            _ => None,
        })
    };
    let visit = started(&bench).expect("the first starts at dusk");
    assert_eq!(bench.claim("a"), Err(Refusal::Pushing));
    bench.second = DUSK_S + 1850;
    bench.report(&visit, "r", done()).unwrap();
    assert_eq!(started(&bench), None);
    assert_eq!(
        bench.machine.next_deadline(),
        Some(MonotonicMs((DUSK_S + 1860) * 1000))
    );
    bench.go_to(DUSK_S + 1860);
    assert!(started(&bench).is_some());
}

#[test]
fn a_step_of_the_wall_clock_fires_no_time_out() {
    for step_ms in [3_600_000, -3_600_000] {
        let mut bench = Bench::observing();
        let visit = bench.leased("a");
        bench.second += 10;
        bench.step_ms = step_ms;
        bench.tell(Event::Tick).unwrap();
        let stepped =
            |f: &&Fact| matches!(f, Fact::ClockStepped { by_ms, .. } if *by_ms == step_ms);
        assert_eq!(bench.kept.iter().filter(stepped).count(), 1);
        assert_eq!(bench.machine.state().lease().unwrap().visit, visit);
        bench.go_to(DUSK_S + 1860 + LEASE_MARGIN_S as i64 - 1);
        assert!(bench.machine.state().lease().is_some(), "{step_ms}");
        bench.go_to(DUSK_S + 1860 + LEASE_MARGIN_S as i64);
        assert!(bench.machine.state().lease().is_none(), "{step_ms}");
        // Dawn follows the sky, so it comes earlier or later by the step.
        bench.go_to(DAWN_S - step_ms / 1000 - 1);
        assert!(bench.machine.state().closed().is_none());
        bench.go_to(DAWN_S - step_ms / 1000);
        let account = bench.machine.state().closed().expect("closed at dawn");
        assert_eq!(account.split.total_ms(), (DAWN_S - DUSK_S) * 1000);
    }
    let mut bench = Bench::observing();
    bench.step_ms = -1000;
    bench.tell(Event::Tick).unwrap();
    let stepped = |f: &&Fact| matches!(f, Fact::ClockStepped { .. });
    assert_eq!(
        bench.kept.iter().filter(stepped).count(),
        0,
        "a leap second is no step"
    );
}

#[test]
fn what_persons_began_outlives_the_night_and_its_facts_tell_it_alone() {
    let mut bench = Bench::observing();
    let (by, reason) = (|| "keeper".to_owned(), || "clouded optics".to_owned());
    let target = TargetId::new("star-5");
    bench
        .tell(Event::Pause {
            target: target.clone(),
            by: by(),
            reason: reason(),
        })
        .unwrap();
    assert!(bench.asked().unwrap().paused.contains(&target));
    bench
        .tell(Event::Hold {
            by: by(),
            reason: reason(),
        })
        .unwrap();
    bench.go_to(DAWN_S);
    assert!(bench.machine.state().closed().is_some());
    bench.kept.clear();
    bench.second = 24 * HOUR_S;
    let bounds = NightBounds {
        night: night().plus_nights(1),
        span: Span::new(at(24 * HOUR_S), at(48 * HOUR_S)),
        darkness: Some(Span::new(at(30 * HOUR_S), at(40 * HOUR_S))),
        ours: true,
        mode: RunMode::Real,
    };
    bench.tell(Event::NightBegins(bounds)).unwrap();
    let alone = State::replay(&bench.kept).unwrap();
    assert_eq!(&alone, bench.machine.state());
    assert!(alone.paused().contains_key(&target));
    assert!(alone.is_held_by(HoldCause::Operator));
    assert_eq!(
        bench.tell(Event::NightBegins(bounds)),
        Err(Refusal::NightStillOpen(bounds.night))
    );
}

#[test]
fn a_subject_that_failed_twice_is_left_alone() {
    let mut bench = Bench::observing();
    for round in 0..2 {
        let visit = bench.leased(&format!("claim {round}"));
        let refused = VisitReport {
            outcome: Outcome::Refused,
            ..done()
        };
        bench
            .report(&visit, &format!("report {round}"), refused)
            .unwrap();
        let avoid = bench.asked().unwrap().avoid.len();
        assert_eq!(avoid, round);
        bench.plan(DUSK_S, 10);
    }
}

#[test]
fn a_bad_plan_is_refused_and_asked_for_again_later() {
    let mut bench = Bench::observing();
    assert!(
        matches!(bench.publish(Vec::new()), Err(Refusal::BadPlan(_))),
        "not asked for"
    );
    bench
        .tell(Event::SettingsChanged(Box::new(rules())))
        .unwrap();
    assert_eq!(bench.asked().unwrap().cause, PlanCause::SettingsChanged);
    let overlap = vec![star("a", DUSK_S + 60), star("b", DUSK_S + 600)];
    assert!(matches!(bench.publish(overlap), Err(Refusal::BadPlan(_))));
    assert_eq!(
        bench.machine.state().queue().unwrap().number,
        1,
        "the old one stands"
    );
    bench.go_to(DUSK_S + PLAN_RETRY_S as i64);
    assert_eq!(bench.asked().unwrap().number, 2);
}

#[test]
fn the_first_queue_may_come_after_dusk() {
    let mut bench = Bench::new(rules());
    bench.wind_until_open();
    bench.go_to(DUSK_S);
    assert_eq!(bench.machine.state().phase(), Phase::Observing);
    assert_eq!(bench.claim("a"), Err(Refusal::Replanning));
    bench.plan(DUSK_S, 1);
    bench.leased("a");
}

/// Facts that cannot follow each other are error values with their cause.
#[test]
fn an_illegal_fact_is_an_error() {
    let bench = Bench::observing();
    let facts = bench.kept;
    let check = |fact: Fact, expected: FoldError| {
        let mut state = State::replay(&facts).unwrap();
        assert_eq!(state.fold(&fact), Err(expected));
    };
    let (when, cause) = (at(DUSK_S), HoldCause::Operator);
    check(
        Fact::HoldEnded { at: when, cause },
        FoldError::NoHold(cause),
    );
    check(
        Fact::VisitSkipped {
            at: when,
            visit: VisitId::of(night(), 1),
            cause: LossCause::Operator,
            by: String::new(),
        },
        FoldError::NoLease(VisitId::of(night(), 1)),
    );
    check(facts[0].clone(), FoldError::NightWithinNight);
    let mut state = State::default();
    let early = state.fold(&Fact::Resumed { at: when });
    assert_eq!(early, Err(FoldError::NoNight { fact: "a restart" }));
    let summary = {
        let log = NightLog::gather(&facts).unwrap();
        super::summary(&log, &crate::time::SpanSet::default())
    };
    check(
        Fact::NightClosed(summary),
        FoldError::IllegalMove {
            from: Phase::Observing,
            to: Phase::Daylight,
        },
    );
}

#[test]
fn the_table_of_moves_is_all_there_is() {
    let all = [
        Phase::Daylight,
        Phase::Ready,
        Phase::Observing,
        Phase::Held,
        Phase::Closing,
    ];
    let legal = all
        .iter()
        .flat_map(|from| all.iter().map(move |to| (*from, *to)))
        .filter(|(from, to)| from != to && from.may_become(*to));
    assert_eq!(legal.count(), MOVES.len() + 1);
    assert!(!Phase::Closing.may_become(Phase::Observing));
    assert!(!Phase::Ready.may_become(Phase::Closing));
}

/// Any event that may come in, sensible or not.
fn any_event() -> impl Strategy<Value = Event> {
    let key = || (0u8..6).prop_map(|n| format!("key {n}"));
    let visit = || (1u32..8).prop_map(|n| VisitId::of(night(), n));
    let target = || (0u8..10).prop_map(|n| TargetId::new(&format!("star-{n}")));
    let by = || Just("keeper".to_owned());
    let outcome = prop_oneof![
        Just(Outcome::Done),
        Just(Outcome::Short),
        Just(Outcome::Lost(LossCause::Acquisition)),
        Just(Outcome::Refused),
        Just(Outcome::Unreported),
    ];
    let report = (
        outcome,
        proptest::option::of(-10.0..4000.0),
        -9000i64..90_000,
        0i64..9000,
    );
    let report = report.prop_map(|(outcome, exposed_s, from, length)| VisitReport {
        outcome,
        exposing: Some(Span::new(at(from), at(from + length))),
        exposed_s,
        ..done()
    });
    prop_oneof![
        6 => Just(Event::Tick),
        8 => prop_oneof![Just(5.0), Just(13.0), Just(20.0), Just(f64::NAN)].prop_map(wind_now),
        1 => Just(Event::FeedFailed(FeedFault::Malformed(String::new()))),
        2 => Just(Event::FeedFailed(FeedFault::Unreachable(String::new()))),
        1 => Just(Event::PlanFailed { detail: String::new() }),
        1 => Just(Event::Restarted),
        8 => key().prop_map(|key| Event::Claim { key, holder: String::new() }),
        2 => (visit(), -10.0..3000.0).prop_map(|(visit, seconds)| Event::Extend { visit, seconds }),
        8 => (visit(), key(), report)
            .prop_map(|(visit, key, report)| Event::Report { visit, key, report }),
        1 => by().prop_map(|by| Event::Hold { by, reason: String::new() }),
        2 => by().prop_map(|by| Event::Release { by }),
        1 => (target(), by())
            .prop_map(|(target, by)| Event::Pause { target, by, reason: String::new() }),
        1 => (target(), by()).prop_map(|(target, by)| Event::Resume { target, by }),
        1 => (target(), by(), 0i64..90_000).prop_map(|(target, by, until)| Event::Urgent {
            target,
            until: at(until),
            by,
            reason: String::new(),
        }),
        1 => by().prop_map(|by| Event::Skip { by }),
        1 => Just(Event::InstrumentFault { detail: String::new() }),
        1 => Just(Event::InstrumentMended),
        1 => Just(Event::LedgerTrouble { detail: String::new() }),
        1 => Just(Event::LedgerBack),
        1 => Just(Event::SettingsChanged(Box::new(rules()))),
    ]
}

/// A sample whose time stamp is filled in when it is sent.
fn wind_now(value: f64) -> Event {
    Event::WeatherArrived(WeatherSample {
        at: noon(),
        values: BTreeMap::from([(Quantity::WindMS, value)]),
        wind_from: None,
        safe: None,
    })
}

/// A turn by chance: how long after the one before (seconds), what happens, whether the disk is
/// full, whether the plan that is asked for comes at once, and whether the night keeper dies after.
type Chance = (i64, Event, bool, bool, bool);

fn any_turn() -> impl Strategy<Value = Chance> {
    let wait = prop_oneof![3 => 0i64..5, 3 => 0i64..400, 1 => 0i64..4000];
    let rarely = || proptest::bool::weighted(0.05);
    (
        wait,
        any_event(),
        rarely(),
        proptest::bool::weighted(0.9),
        rarely(),
    )
}

/// Takes one turn and answers a plan that is asked for; what was kept goes to `bench.kept`.
fn take_turn(bench: &mut Bench, event: Event, disk_full: bool, plans: bool) {
    let event = match event {
        Event::WeatherArrived(sample) => Event::WeatherArrived(WeatherSample {
            at: at(bench.second),
            ..sample
        }),
        other => other,
    };
    let now = stamp(bench.second, 0);
    let kept = &mut bench.kept;
    let (done, _) = bench.machine.turn(event, now, |_, facts: &[Fact]| {
        if disk_full {
            return Err("disk full");
        }
        kept.extend_from_slice(facts);
        Ok(())
    });
    assert!(
        !matches!(done.reply, Err(Refusal::Broken(_))),
        "{:?}",
        done.reply
    );
    bench.actions = done.actions;
    if plans && bench.asked().is_some() {
        bench.plan(bench.second.max(DUSK_S), 6);
    }
}

proptest! {
    /// Whatever comes in, the record folds to the living state, nothing is handed out in a hold,
    /// deadlines that were met do not come again at once, and the night closes with an exact account.
    #[test]
    fn no_sequence_of_events_breaks_a_night(
        push in any::<bool>(),
        turns in proptest::collection::vec(any_turn(), 1..120),
    ) {
        let mut rules = rules();
        rules.weather.stale_after_s = 900.0;
        rules.hand_out = if push { HandOut::Push } else { HandOut::Pull };
        let mut bench = Bench::new(rules.clone());
        bench.go_to(DUSK_S - 1000);
        for (wait_s, event, disk_full, plans, dies) in turns {
            bench.second += wait_s;
            take_turn(&mut bench, event, disk_full, plans);
            let facts: Vec<Fact> =
                bench.kept.iter().chain(bench.machine.arrears()).cloned().collect();
            prop_assert_eq!(&State::replay(&facts).unwrap(), bench.machine.state());
            if dies {
                let now = stamp(bench.second, 0);
                bench.machine = Machine::recover(rules.clone(), &bench.kept, now).unwrap();
                take_turn(&mut bench, Event::Restarted, false, plans);
            }
        }
        let mut ticks = 0;
        while let (Some(next), None) =
            (bench.machine.next_deadline(), bench.machine.state().closed())
        {
            bench.second = bench.second.max((next.0 + 999) / 1000);
            take_turn(&mut bench, Event::Tick, false, true);
            ticks += 1;
            prop_assert!(ticks < 2000, "deadlines that were met come again");
        }
        let account = bench.machine.state().closed().expect("the night closes");
        prop_assert_eq!(account.split.total_ms(), (DAWN_S - DUSK_S) * 1000);
    }
}
