//! Opening and asking a ledger of three years: 1095 nights, 60,225 visits, 4380 plans of 120
//! stars, 65,700 weather samples.

use std::hint::black_box;
use std::path::Path;
use std::time::Instant;

use criterion::{Criterion, criterion_group, criterion_main};
use nightwright::catalogue::TargetId;
use nightwright::ledger::SqliteLedger;
use nightwright::night::{Fact, Lease, RunMode};
use nightwright::ports::Ledger;
use nightwright::record::{
    DarknessSplit, EntryKind, Exposures, HoldCause, LeftOut, NightSummary, Outcome, PlanCause,
    PlanRevision, QueueEntry, ValueParts, Visit, VisitCounts, VisitId,
};
use nightwright::time::{NightDate, Span, Utc};
use nightwright::units::Angle;
use nightwright::weather::{Quantity, WeatherSample};

const NIGHTS: i64 = 1095;
const VISITS_A_NIGHT: u32 = 55;
const PLANS_A_NIGHT: u32 = 4;
const STARS: u32 = 120;
const SAMPLES_A_NIGHT: i64 = 60;
const VISIT_MS: i64 = 600_000;
/// 2026-12-01T18:00:00Z.
const FIRST_DUSK_MS: i64 = 1_796_148_000_000;
const DAY_MS: i64 = 86_400_000;

fn first_night() -> NightDate {
    NightDate::parse("2026-12-01").expect("a date")
}

fn star(number: u32) -> TargetId {
    TargetId::new(&format!("KR{:04}", number % STARS))
}

fn entry(number: u32, dusk: Utc) -> QueueEntry {
    let start = dusk.plus_ms(i64::from(number) * VISIT_MS);
    let share = f64::from(number) / 77.0;
    QueueEntry {
        kind: EntryKind::Science,
        subject: star(number),
        start,
        end: start.plus_ms(VISIT_MS - 60_000),
        setup_s: 41.7,
        exposures: Exposures {
            count: 2,
            seconds: 255.5,
        },
        predicted_rv_error_m_s: Some(1.2 + share),
        airmass: Some(1.0 + share),
        altitude_deg: Some(80.0 - share),
        azimuth_deg: Some(100.0 + share),
        moon_separation_deg: Some(60.0 + share),
        value: ValueParts {
            total: share,
            cadence: share,
            coverage: share,
            window: 0.0,
            quality: 0.9,
            weight: 1.0,
            share: 1.0,
            season: 1.0,
        },
        because: "overdue by 1.3 times its cadence of 7 nights".to_owned(),
    }
}

fn plan(night: NightDate, number: u32, dusk: Utc) -> Fact {
    let left_out = (VISITS_A_NIGHT..STARS).map(|star_number| LeftOut {
        target: star(star_number),
        because: "outbid: its best half hour was worth 1.7, it offered 0.9".to_owned(),
    });
    Fact::PlanPublished(PlanRevision {
        night,
        number,
        made_at: dusk,
        from: dusk,
        cause: PlanCause::HoldEnded,
        entries: (0..VISITS_A_NIGHT).map(|n| entry(n, dusk)).collect(),
        left_out: left_out.collect(),
        value: 50.0,
        bound: Some(50.5),
    })
}

fn visit(night: NightDate, number: u32, dusk: Utc) -> [Fact; 2] {
    let entry = entry(number, dusk);
    let id = VisitId::of(night, number);
    let visit = Visit {
        id: id.clone(),
        night,
        kind: EntryKind::Science,
        subject: entry.subject.clone(),
        began: entry.start.plus_ms(-41_700),
        exposing: Span::new(entry.start, entry.end),
        exposed_s: 511.0,
        planned: entry.exposures,
        outcome: Outcome::Done,
        credit: 1.0,
        airmass: entry.airmass,
        snr: Some(81.0),
        rv_error_m_s: Some(1.4),
        predicted_rv_error_m_s: entry.predicted_rv_error_m_s,
        mid_bjd_tdb: Some(2_461_376.25 + f64::from(number) / 144.0),
        note: String::new(),
    };
    let lease = Fact::LeaseGranted(Lease {
        visit: id,
        revision: 1,
        claim_key: format!("claim-{number}"),
        holder: "dome".to_owned(),
        granted: entry.start.plus_ms(-41_700),
        expires: entry.end.plus_ms(VISIT_MS),
        entry,
    });
    let ended = Fact::VisitEnded {
        at: visit.exposing.end,
        report_key: format!("report-{number}"),
        visit,
    };
    [lease, ended]
}

fn weather(number: i64, dusk: Utc) -> Fact {
    let values = [
        (Quantity::HumidityPercent, 41.5),
        (Quantity::WindMS, 6.2),
        (Quantity::GustMS, 9.1),
        (Quantity::CloudPercent, 3.0),
        (Quantity::SeeingArcsec, 1.3),
    ];
    Fact::WeatherNoted(WeatherSample {
        at: dusk.plus_ms(number * 560_000),
        values: values.into(),
        wind_from: Some(Angle::from_deg(211.0)),
        safe: Some(true),
    })
}

fn facts(night: NightDate, dusk: Utc) -> Vec<Fact> {
    let darkness = Span::new(dusk, dusk.plus_ms(i64::from(VISITS_A_NIGHT) * VISIT_MS));
    let mut facts = vec![Fact::NightOpened {
        night,
        span: Span::new(dusk.plus_ms(-DAY_MS / 4), dusk.plus_ms(DAY_MS * 3 / 4)),
        darkness: Some(darkness),
        ours: true,
        mode: RunMode::Rehearsal,
    }];
    facts.extend((1..=PLANS_A_NIGHT).map(|number| plan(night, number, dusk)));
    for number in 0..6 {
        let at = dusk.plus_ms(number * 5_000_000);
        facts.push(Fact::HoldBegan {
            at,
            cause: HoldCause::Weather,
            detail: "gust 17.2 m/s at 15.0".to_owned(),
        });
        facts.push(Fact::HoldEnded {
            at: at.plus_ms(1_000_000),
            cause: HoldCause::Weather,
        });
    }
    facts.extend((0..VISITS_A_NIGHT).flat_map(|number| visit(night, number, dusk)));
    facts.extend((0..SAMPLES_A_NIGHT).map(|number| weather(number, dusk)));
    facts.push(Fact::NightClosed(NightSummary {
        night,
        darkness: Some(darkness),
        split: DarknessSplit {
            exposing_ms: darkness.length_ms(),
            ..DarknessSplit::default()
        },
        visits: VisitCounts {
            done: VISITS_A_NIGHT,
            ..VisitCounts::default()
        },
    }));
    facts
}

fn build(path: &Path) {
    let started = Instant::now();
    let mut ledger = SqliteLedger::open(path).expect("a new ledger");
    for index in 0..NIGHTS {
        let night = first_night().plus_nights(index);
        let dusk = Utc::from_unix_ms(FIRST_DUSK_MS + index * DAY_MS);
        ledger.append(night, &facts(night, dusk)).expect("kept");
    }
    drop(ledger);
    let size = std::fs::metadata(path).map_or(0, |m| m.len());
    println!(
        "three years: {} MB, built in {:.1} s",
        size >> 20,
        started.elapsed().as_secs_f64()
    );
}

fn three_years(criterion: &mut Criterion) {
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("ledger.sqlite");
    build(&path);
    let ledger = SqliteLedger::open(&path).expect("the ledger");
    let night = first_night().plus_nights(NIGHTS / 2);
    let last = first_night().plus_nights(NIGHTS);
    let dusk = Utc::from_unix_ms(FIRST_DUSK_MS + NIGHTS / 2 * DAY_MS);
    let month = Span::new(dusk, dusk.plus_ms(30 * DAY_MS));
    let mut group = criterion.benchmark_group("ledger_three_years");
    group.sample_size(10);
    group.bench_function("open", |b| b.iter(|| SqliteLedger::open(&path).is_ok()));
    group.bench_function("open_read_only", |b| {
        b.iter(|| SqliteLedger::open_read_only(&path).is_ok());
    });
    group.bench_function("visits", |b| {
        b.iter(|| black_box(ledger.visits(None)).is_ok())
    });
    group.bench_function("facts_of_a_night", |b| {
        b.iter(|| black_box(ledger.facts(night)).is_ok());
    });
    group.bench_function("open_night", |b| {
        b.iter(|| black_box(ledger.open_night()).is_ok())
    });
    group.bench_function("nights", |b| {
        b.iter(|| black_box(ledger.nights(first_night(), last)).is_ok());
    });
    group.bench_function("latest_plan", |b| {
        b.iter(|| black_box(ledger.latest_plan(night)).is_ok());
    });
    group.bench_function("planned_for", |b| {
        b.iter(|| black_box(ledger.planned_for(&star(7), night)).is_ok());
    });
    group.bench_function("holds_of_a_month", |b| {
        b.iter(|| black_box(ledger.holds(month)).is_ok());
    });
    group.bench_function("weather_of_a_month", |b| {
        b.iter(|| black_box(ledger.weather(month)).is_ok());
    });
    group.bench_function("check", |b| b.iter(|| black_box(ledger.check()).is_ok()));
    group.finish();
}

criterion_group!(benches, three_years);
criterion_main!(benches);
