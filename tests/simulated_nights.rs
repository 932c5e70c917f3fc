//! Whole nights through the real night keeper in an invented world, with a planner that fills the
//! dark with equal visits.

use std::collections::{BTreeMap, BTreeSet};

use nightwright::catalogue::TargetId;
use nightwright::ledger::SqliteLedger;
use nightwright::night::{
    Event, Fact, HandOut, MOVES, NightBounds, NightReport, NightRules, Phase, PlanRequest, RunMode,
    State,
};
use nightwright::ports::Ledger;
use nightwright::record::{
    EntryKind, Exposures, HoldCause, NightSummary, Outcome, PlanRevision, QueueEntry, ValueParts,
};
use nightwright::sim::{
    Habits, MemoryLedger, NightRun, SimFault, Unwatched, Watch, World, run_night,
};
use nightwright::time::{Night, NightDate, Span, SpanSet, Utc};
use nightwright::units::Angle;
use nightwright::weather::{Climate, Quantity, WeatherRule, WeatherRules};

const SETUP_MS: i64 = 60_000;
const VISIT_MS: i64 = 1_140_000;

fn rules() -> NightRules {
    NightRules::new(WeatherRules {
        rules: vec![
            WeatherRule {
                quantity: Quantity::HumidityPercent,
                hold_at: 85.0,
                release_at: 80.0,
                dwell_s: 600.0,
                high_is_bad: true,
            },
            WeatherRule {
                quantity: Quantity::CloudPercent,
                hold_at: 60.0,
                release_at: 40.0,
                dwell_s: 900.0,
                high_is_bad: true,
            },
        ],
        stale_after_s: 240.0,
        opening_dwell_s: 1200.0,
        require_safe_flag: false,
    })
}

fn climate() -> Climate {
    Climate {
        clear_fraction: [0.65; 12],
        clear_spell_h: 6.0,
        night_lost: 0.05,
        seeing_median_arcsec: 1.3,
        seeing_sigma_ln: 0.3,
        faults_per_hour: 0.02,
        repair_h: 1.0,
    }
}

/// An observatory in which everything that can go wrong often does.
fn clumsy() -> Habits {
    Habits {
        late_start_odds: 0.3,
        overrun_odds: 0.3,
        overrun_s: 300.0,
        short_odds: 0.1,
        lost_odds: 0.1,
        refused_odds: 0.1,
        unreported_odds: 0.05,
        late_report_odds: 0.1,
        duplicate_odds: 0.3,
        feed_outages_per_hour: 0.2,
        ..Habits::default()
    }
}

fn world(seed: u64) -> World {
    World::new(seed, 0, climate(), rules())
}

fn bounds(first: &str, index: i64) -> NightBounds {
    let date = NightDate::parse(first).unwrap().plus_nights(index);
    let night = Night::of(date, Angle::from_deg(20.0));
    NightBounds {
        night: date,
        span: night.span,
        darkness: Some(Span::new(
            night.span.start.plus_ms(6 * 3_600_000 + 123),
            night.span.start.plus_ms(18 * 3_600_000 + 45_678),
        )),
        ours: true,
        mode: RunMode::Rehearsal,
    }
}

fn entry(kind: EntryKind, name: &str, start: Utc, end: Utc, setup_ms: i64) -> QueueEntry {
    QueueEntry {
        kind,
        subject: TargetId::new(name),
        start,
        end,
        setup_s: setup_ms as f64 / 1000.0,
        exposures: Exposures {
            count: 2,
            seconds: (end - start) as f64 / 2000.0 - 20.0,
        },
        predicted_rv_error_m_s: Some(1.0),
        airmass: Some(1.2),
        altitude_deg: Some(56.0),
        azimuth_deg: Some(180.0),
        moon_separation_deg: Some(90.0),
        value: ValueParts::default(),
        because: "next".to_owned(),
    }
}

/// Lamps half an hour before dusk and at dawn, a standard star every ninth visit, stars between;
/// a gap before each fifth visit.
fn fill(request: &PlanRequest) -> PlanRevision {
    let names: Vec<TargetId> = (0..40)
        .map(|i| TargetId::new(&format!("star-{i:02}")))
        .filter(|id| !request.paused.contains(id) && !request.avoid.contains(id))
        .collect();
    let mut entries = Vec::new();
    let lamps_at = request.darkness.start.plus_ms(-1_800_000);
    if request.asked < lamps_at {
        let end = lamps_at.plus_ms(600_000);
        entries.push(entry(EntryKind::Calibration, "lamps", lamps_at, end, 0));
    }
    let urgent = request.urgent.iter().map(|(id, _)| id);
    let mut queue = urgent.chain(names.iter().cycle().skip(request.tonight.len()));
    let mut at = request.from;
    loop {
        let number = request.tonight.len() + entries.len();
        let gap_ms = if number % 5 == 4 { 400_000 } else { 0 };
        let start = at.plus_ms(SETUP_MS + gap_ms);
        let end = start.plus_ms(VISIT_MS);
        if end > request.darkness.end {
            break;
        }
        let kind = match number % 9 {
            8 => EntryKind::Standard,
            _ => EntryKind::Science,
        };
        let name = queue.next().unwrap();
        entries.push(entry(kind, name.as_str(), start, end, SETUP_MS));
        at = end;
    }
    let dawn = request.darkness.end;
    let end = dawn.plus_ms(600_000);
    entries.push(entry(EntryKind::Calibration, "lamps", dawn, end, 0));
    PlanRevision {
        night: request.night,
        number: request.number,
        made_at: request.asked,
        from: request.from,
        cause: request.cause.clone(),
        value: entries.len() as f64,
        entries,
        left_out: Vec::new(),
        bound: None,
    }
}

fn keep_books(facts: &[Fact], blocked: &SpanSet) -> NightReport {
    let report = NightReport::from_facts(facts, blocked).expect("begins with its opening");
    let darkness_ms = report.bounds.darkness.map_or(0, |d| d.length_ms());
    assert_eq!(report.summary.split.total_ms(), darkness_ms);
    let split = &report.summary.split;
    let parts = [split.exposing_ms, split.overhead_ms, split.calibration_ms];
    let causes = split.held_ms.values().chain(split.idle_ms.values());
    assert!(parts.iter().chain(causes).all(|ms| *ms >= 0));
    report
}

fn no_lease_is_doubled(facts: &[Fact]) {
    let (mut seen, mut keys, mut live) = (BTreeSet::new(), BTreeSet::new(), None);
    for fact in facts {
        match fact {
            Fact::LeaseGranted(lease) => {
                assert!(seen.insert(lease.visit.clone()), "{} twice", lease.visit);
                assert!(keys.insert(lease.claim_key.clone()), "one lease a claim");
                assert_eq!(live.replace(lease.visit.clone()), None, "two at once");
            }
            Fact::VisitEnded { visit, .. } if live.as_ref() == Some(&visit.id) => live = None,
            _ => {}
        }
    }
    assert_eq!(live, None, "a lease outlived the night");
}

fn nothing_is_exposed_during_a_hold(report: &NightReport) {
    for visit in &report.visits {
        for hold in &report.holds {
            let common = visit.exposing.intersect(&hold.span);
            assert!(common.is_empty(), "{} in {hold:?}", visit.id);
        }
    }
}

fn visits_do_not_overlap(report: &NightReport) {
    let exposing: Vec<Span> = report.visits.iter().map(|v| v.exposing).collect();
    let set = SpanSet::from_spans(exposing.iter().copied());
    let sum: i64 = exposing.iter().map(Span::length_ms).sum();
    assert_eq!(set.total_ms(), sum);
}

/// Folds fact by fact, and sees that every move of the phase is in the table.
fn moves_taken(facts: &[Fact]) -> BTreeSet<(Phase, Phase)> {
    let (mut state, mut moves) = (State::default(), BTreeSet::new());
    for fact in facts {
        let before = state.phase();
        state.fold(fact).expect("a kept fact folds");
        if before != state.phase() {
            moves.insert((before, state.phase()));
        }
    }
    moves
}

struct Season {
    ledger: MemoryLedger,
    summaries: Vec<NightSummary>,
}

fn season(mut world: World, nights: i64) -> Season {
    let mut ledger = MemoryLedger::default();
    let summaries = (0..nights)
        .map(|i| {
            let bounds = bounds("2026-12-01", i);
            run_night(&mut world, bounds, &mut fill, &mut ledger, &mut Unwatched).unwrap()
        })
        .collect();
    Season { ledger, summaries }
}

fn facts_of(season: &Season) -> impl Iterator<Item = Vec<Fact>> {
    (0..season.summaries.len()).map(|i| {
        let night = bounds("2026-12-01", i as i64).night;
        season.ledger.facts(night).unwrap()
    })
}

#[test]
fn thirty_nights_are_exact_whatever_goes_wrong() {
    for hand_out in [HandOut::Pull, HandOut::Push] {
        let mut world = world(3);
        world.habits = clumsy();
        world.rules.hand_out = hand_out;
        let season = season(world, 30);
        let mut moves = BTreeSet::new();
        for facts in facts_of(&season) {
            let report = keep_books(&facts, &SpanSet::default());
            assert!(report.closed);
            no_lease_is_doubled(&facts);
            nothing_is_exposed_during_a_hold(&report);
            visits_do_not_overlap(&report);
            moves.extend(moves_taken(&facts));
        }
        // The trial is only worth something if it saw every kind of thing happen.
        let total = |pick: fn(&NightSummary) -> i64| season.summaries.iter().map(pick).sum::<i64>();
        assert!(total(|s| i64::from(s.visits.done)) > 300);
        assert!(total(|s| i64::from(s.visits.short)) > 10);
        assert!(total(|s| i64::from(s.visits.lost)) > 10);
        assert!(total(|s| i64::from(s.visits.refused)) > 10);
        assert!(total(|s| i64::from(s.visits.unreported)) > 3);
        for cause in [
            HoldCause::Weather,
            HoldCause::FeedLost,
            HoldCause::Instrument,
        ] {
            assert!(season.summaries.iter().any(|s| s.split.held_ms[&cause] > 0));
        }
        assert!(total(|s| s.split.exposing_ms) > total(|s| s.split.overhead_ms));
        assert!(moves.contains(&(Phase::Observing, Phase::Held)));
        assert!(moves.contains(&(Phase::Held, Phase::Closing)));
        let table = |m: &(Phase, Phase)| MOVES.contains(m) || *m == nightwright::night::CLOSE;
        assert!(moves.iter().all(table), "{moves:?}");
    }
}

#[test]
fn same_seed_same_facts_and_another_seed_others() {
    let run = |seed| season(world(seed), 6);
    let (first, again, other) = (run(5), run(5), run(6));
    assert_eq!(first.ledger, again.ledger);
    assert_ne!(first.ledger, other.ledger);
}

#[test]
fn two_plans_see_the_same_weather() {
    struct Holds(Vec<(Utc, HoldCause)>);
    impl Watch for Holds {
        fn kept(&mut self, facts: &[Fact]) {
            self.0.extend(facts.iter().filter_map(|fact| match fact {
                Fact::HoldBegan { at, cause, .. } => Some((*at, *cause)),
                _ => None,
            }));
        }
    }
    let idle = |request: &PlanRequest| PlanRevision {
        entries: Vec::new(),
        ..fill(request)
    };
    let mut holds = Vec::new();
    for busy in [true, false] {
        let (mut world, mut ledger) = (world(8), MemoryLedger::default());
        let mut seen = Holds(Vec::new());
        for i in 0..10 {
            let bounds = bounds("2026-12-01", i);
            let mut plan = |r: &PlanRequest| if busy { fill(r) } else { idle(r) };
            run_night(&mut world, bounds, &mut plan, &mut ledger, &mut seen).unwrap();
        }
        holds.push(seen.0);
    }
    assert!(holds[0].len() > 10);
    assert_eq!(holds[0], holds[1]);
}

/// An endlessly clear sky and a faultless observatory: the plan is carried out to the letter.
#[test]
fn a_perfect_night_is_the_plan() {
    let mut world = world(1);
    world.habits = Habits::perfect();
    world.climate.clear_fraction = [1.0; 12];
    world.climate.night_lost = 0.0;
    world.climate.faults_per_hour = 0.0;
    let season = season(world, 1);
    let facts = facts_of(&season).next().unwrap();
    let plans: Vec<&PlanRevision> = facts
        .iter()
        .filter_map(|fact| match fact {
            Fact::PlanPublished(revision) => Some(revision),
            _ => None,
        })
        .collect();
    assert_eq!(plans.len(), 1, "nothing wanted a second plan");
    let report = keep_books(&facts, &SpanSet::default());
    let planned: Vec<(Utc, Utc)> = plans[0].entries.iter().map(|e| (e.start, e.end)).collect();
    let done: Vec<(Utc, Utc)> = report
        .visits
        .iter()
        .map(|v| (v.exposing.start, v.exposing.end))
        .collect();
    assert_eq!(planned, done);
    assert!(
        report
            .visits
            .iter()
            .all(|v| v.outcome == Outcome::Done && v.credit == 1.0)
    );
    let count = |kind| plans[0].entries.iter().filter(|e| e.kind == kind).count() as i64;
    let (science, standards) = (count(EntryKind::Science), count(EntryKind::Standard));
    let split = &report.summary.split;
    assert_eq!(split.exposing_ms, science * VISIT_MS);
    assert_eq!(split.overhead_ms, science * SETUP_MS);
    assert_eq!(split.calibration_ms, standards * (SETUP_MS + VISIT_MS));
}

#[test]
fn a_night_that_is_not_ours_or_not_dark_closes_too() {
    for (ours, dark) in [(false, true), (true, false), (false, false)] {
        let (mut world, mut ledger) = (world(2), MemoryLedger::default());
        let mut bounds = bounds("2026-12-01", 0);
        bounds.ours = ours;
        bounds.darkness = bounds.darkness.filter(|_| dark);
        let summary =
            run_night(&mut world, bounds, &mut fill, &mut ledger, &mut Unwatched).unwrap();
        let length = bounds.darkness.map_or(0, |d| d.length_ms());
        assert_eq!(summary.split.total_ms(), length);
        let idle: BTreeMap<_, _> = summary.split.idle_ms;
        assert_eq!(idle[&nightwright::record::IdleCause::NotOurs], length);
        let again = run_night(&mut world, bounds, &mut fill, &mut ledger, &mut Unwatched);
        assert!(matches!(again, Err(SimFault::NightDone(_))));
    }
}

/// Endless darkness: the whole night from noon to noon is dark, night after night.
#[test]
fn the_polar_night_has_no_seam() {
    let (mut world, mut ledger) = (world(4), MemoryLedger::default());
    for i in 0..5 {
        let mut bounds = bounds("2026-12-29", i);
        bounds.darkness = Some(bounds.span);
        let summary =
            run_night(&mut world, bounds, &mut fill, &mut ledger, &mut Unwatched).unwrap();
        assert_eq!(summary.split.total_ms(), 86_400_000);
    }
}

/// At every so many turns the night keeper dies, the wall clock steps, or the disk fills up, while
/// an operator interferes; at every turn the ledger folds to the living state.
#[test]
fn replay_is_the_living_state_at_every_turn() {
    for seed in 0..12 {
        let mut world = world(seed);
        world.habits = clumsy();
        let bounds = bounds("2026-12-31", seed as i64);
        let mut ledger = MemoryLedger::default();
        let mut run = NightRun::begin(&mut world, bounds, &ledger).unwrap();
        run.bear_ledger_faults();
        let mut turn = 0_u64;
        loop {
            let goes_on = run.step(&mut fill, &mut ledger, &mut Unwatched).unwrap();
            if !goes_on {
                break;
            }
            turn += 1;
            let mut facts = ledger.facts(bounds.night).unwrap();
            facts.extend_from_slice(run.machine().arrears());
            assert_eq!(
                &State::replay(&facts).unwrap(),
                run.machine().state(),
                "seed {seed} turn {turn}"
            );
            interfere(turn + 7 * seed, seed, &mut run, &mut ledger);
        }
        let summary = run.account().unwrap().expect("the night was closed");
        let facts = ledger.facts(bounds.night).unwrap();
        let report = keep_books(&facts, &SpanSet::default());
        assert_eq!(report.summary, summary);
        no_lease_is_doubled(&facts);
    }
}

fn interfere(turn: u64, seed: u64, run: &mut NightRun, ledger: &mut MemoryLedger) {
    let by = || "keeper".to_owned();
    let reason = || "because".to_owned();
    match turn % 97 {
        11 => run.crash(ledger).unwrap(),
        23 => run.hand_in(Event::Hold {
            by: by(),
            reason: reason(),
        }),
        29 => run.hand_in(Event::Release { by: by() }),
        37 => run.hand_in(Event::Pause {
            target: TargetId::new("star-03"),
            by: by(),
            reason: reason(),
        }),
        41 => run.hand_in(Event::Urgent {
            target: TargetId::new("star-30"),
            until: run
                .clock()
                .utc_at(run.clock().mono_at(bounds("2027-02-01", 0).span.end)),
            by: by(),
            reason: reason(),
        }),
        43 => run.hand_in(Event::Resume {
            target: TargetId::new("star-03"),
            by: by(),
        }),
        53 => run.hand_in(Event::Skip { by: by() }),
        61 => ledger.set_broken(true),
        67 => ledger.set_broken(false),
        71 if seed % 3 == 1 => run.step_wall_clock(if turn.is_multiple_of(2) {
            3_600_000
        } else {
            -3_600_000
        }),
        _ => {}
    }
}

/// The real ledger keeps a clumsy night through crashes just as the one in memory does.
#[test]
fn the_ledger_on_disk_gives_back_what_was_kept() {
    let folder = tempfile::tempdir().unwrap();
    let mut on_disk = SqliteLedger::open(&folder.path().join("nights.sqlite")).unwrap();
    let mut in_memory = MemoryLedger::default();
    let night = bounds("2026-12-01", 0);
    let mut summaries = Vec::new();
    for ledger in [&mut on_disk as &mut dyn Ledger, &mut in_memory] {
        let mut world = world(21);
        world.habits = clumsy();
        let mut run = NightRun::begin(&mut world, night, ledger).unwrap();
        let mut turn = 0;
        while run.step(&mut fill, ledger, &mut Unwatched).unwrap() {
            turn += 1;
            if turn % 211 == 0 {
                run.crash(ledger).unwrap();
            }
        }
        summaries.push(run.account().unwrap().unwrap());
    }
    assert_eq!(summaries[0], summaries[1]);
    let facts = on_disk.facts(night.night).unwrap();
    assert_eq!(facts, in_memory.facts(night.night).unwrap());
    assert!(facts.iter().any(|f| matches!(f, Fact::Resumed { .. })));
    assert_eq!(
        on_disk.visits(None).unwrap(),
        in_memory.visits(None).unwrap()
    );
    assert_eq!(on_disk.open_night().unwrap(), None);
}
