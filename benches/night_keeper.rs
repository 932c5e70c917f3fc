//! What a simulated night costs beside its planning: `cargo bench --bench night_keeper`.

use criterion::{Criterion, criterion_group, criterion_main};
use nightwright::catalogue::TargetId;
use nightwright::night::{NightBounds, NightRules, PlanRequest, RunMode};
use nightwright::record::{EntryKind, Exposures, PlanRevision, QueueEntry, ValueParts};
use nightwright::sim::{MemoryLedger, Unwatched, World, run_night};
use nightwright::time::{Night, NightDate, Span};
use nightwright::units::Angle;
use nightwright::weather::{Climate, Quantity, WeatherRule, WeatherRules};

const HOUR_MS: i64 = 3_600_000;

fn world() -> World {
    let climate = Climate {
        clear_fraction: [0.65; 12],
        clear_spell_h: 8.0,
        night_lost: 0.05,
        seeing_median_arcsec: 1.3,
        seeing_sigma_ln: 0.3,
        faults_per_hour: 0.005,
        repair_h: 2.0,
    };
    let rules = WeatherRules {
        rules: vec![WeatherRule {
            quantity: Quantity::CloudPercent,
            hold_at: 60.0,
            release_at: 40.0,
            dwell_s: 900.0,
            high_is_bad: true,
        }],
        stale_after_s: 900.0,
        opening_dwell_s: 1200.0,
        require_safe_flag: false,
    };
    let mut world = World::new(1, 0, climate, NightRules::new(rules));
    world.poll_ms = 300_000;
    world
}

fn bounds(date: NightDate) -> NightBounds {
    let night = Night::of(date, Angle::from_deg(20.0));
    let start = night.span.start;
    NightBounds {
        night: date,
        span: night.span,
        darkness: Some(Span::new(
            start.plus_ms(6 * HOUR_MS),
            start.plus_ms(17 * HOUR_MS),
        )),
        ours: true,
        mode: RunMode::Rehearsal,
    }
}

/// Twelve-minute visits with two minutes of setup, without a gap: as cheap as a plan can be.
fn fill(request: &PlanRequest) -> PlanRevision {
    let (setup_ms, visit_ms) = (120_000, 720_000);
    let room_ms = request.darkness.end - request.from;
    let entries: Vec<QueueEntry> = (0..room_ms.max(0) / (setup_ms + visit_ms))
        .map(|i| {
            let start = request.from.plus_ms(i * (setup_ms + visit_ms) + setup_ms);
            QueueEntry {
                kind: EntryKind::Science,
                subject: TargetId::new("star"),
                start,
                end: start.plus_ms(visit_ms),
                setup_s: setup_ms as f64 / 1000.0,
                exposures: Exposures {
                    count: 1,
                    seconds: 690.0,
                },
                predicted_rv_error_m_s: Some(1.0),
                airmass: Some(1.2),
                altitude_deg: Some(56.0),
                azimuth_deg: Some(180.0),
                moon_separation_deg: Some(90.0),
                value: ValueParts::default(),
                because: "next".to_owned(),
            }
        })
        .collect();
    PlanRevision {
        night: request.night,
        number: request.number,
        made_at: request.asked,
        from: request.from,
        cause: request.cause.clone(),
        entries,
        left_out: Vec::new(),
        value: 1.0,
        bound: None,
    }
}

fn thirty_nights() {
    let (mut world, mut ledger) = (world(), MemoryLedger::default());
    let Ok(first) = NightDate::parse("2026-12-01") else {
        return;
    };
    for night in 0..30 {
        let bounds = bounds(first.plus_nights(night));
        let summary = run_night(&mut world, bounds, &mut fill, &mut ledger, &mut Unwatched);
        assert!(summary.is_ok(), "{summary:?}");
    }
}

fn night_keeper(criterion: &mut Criterion) {
    criterion.bench_function("30 simulated nights, planning apart", |bencher| {
        bencher.iter(thirty_nights);
    });
}

criterion_group!(benches, night_keeper);
criterion_main!(benches);
