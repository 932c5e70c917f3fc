//! `audit` through the binary on a ledger of three years: 300 stars, 1095 nights, 60,225 visits.

use std::fmt::Write;
use std::path::Path;
use std::process::Command;
use std::time::Instant;

use criterion::{Criterion, criterion_group, criterion_main};
use nightwright::catalogue::TargetId;
use nightwright::ledger::SqliteLedger;
use nightwright::night::{Fact, RunMode};
use nightwright::ports::Ledger;
use nightwright::record::{
    DarknessSplit, EntryKind, Exposures, HoldCause, NightSummary, Outcome, PlanCause, PlanRevision,
    QueueEntry, ValueParts, Visit, VisitCounts, VisitId,
};
use nightwright::time::{NightDate, Span, Utc};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

const STARS: usize = 300;
const NIGHTS: i64 = 1095;
const VISITS_A_NIGHT: u32 = 55;
const PLANS_A_NIGHT: u32 = 3;
const VISIT_MS: i64 = 600_000;
const DAY_MS: i64 = 86_400_000;
/// 2023-12-02T01:00:00Z, in the dark of the shipped site.
const FIRST_DUSK_MS: i64 = 1_701_478_800_000;

fn star(number: usize) -> String {
    format!("S{number:03}")
}

/// The shipped configuration with stars of our own.
fn configure(folder: &Path) {
    let made = Command::new(env!("CARGO_BIN_EXE_nightwright"))
        .args(["init", &folder.display().to_string()])
        .output()
        .expect("the binary runs");
    assert!(made.status.success(), "{made:?}");
    std::fs::remove_file(folder.join("targets.toml")).expect("init writes targets");
    let mut rng = ChaCha8Rng::seed_from_u64(3);
    let mut csv = String::from(
        "id,ra_deg,dec_deg,epoch,pm_ra_mas_yr,pm_dec_mas_yr,parallax_mas,radial_velocity_km_s,\
         magnitude,mass_msun,radius_rsun,candidate_period_d,candidate_conjunction_bjd_tdb,\
         candidate_conjunction_error_d,candidate_semi_amplitude_m_s\n",
    );
    for number in 0..STARS {
        let (ra, dec) = (
            360.0 * rng.random::<f64>(),
            -80.0 + 90.0 * rng.random::<f64>(),
        );
        let period = 2.0 + 30.0 * rng.random::<f64>();
        let candidate = if number % 3 == 0 {
            format!("{period:.4},2460300.5,0.05,2.5")
        } else {
            ",,,".to_owned()
        };
        writeln!(
            csv,
            "{},{ra:.5},{dec:.5},2016,100,-200,80,10,9.5,0.3,0.3,{candidate}",
            star(number)
        )
        .expect("a string takes it");
    }
    std::fs::write(folder.join("targets.csv"), csv).expect("a scratch file");
}

fn entry(subject: &str, start: Utc) -> QueueEntry {
    QueueEntry {
        kind: EntryKind::Science,
        subject: TargetId::new(subject),
        start,
        end: start.plus_ms(VISIT_MS - 60_000),
        setup_s: 41.7,
        exposures: Exposures {
            count: 1,
            seconds: 500.0,
        },
        predicted_rv_error_m_s: Some(1.4),
        airmass: Some(1.2),
        altitude_deg: Some(55.0),
        azimuth_deg: Some(100.0),
        moon_separation_deg: Some(60.0),
        value: ValueParts::default(),
        because: "overdue".to_owned(),
    }
}

fn night_facts(rng: &mut ChaCha8Rng, night: NightDate, dusk: Utc) -> Vec<Fact> {
    let darkness = Span::new(dusk, dusk.plus_ms(i64::from(VISITS_A_NIGHT) * VISIT_MS));
    let mut facts = vec![Fact::NightOpened {
        night,
        span: Span::new(dusk.plus_ms(-DAY_MS / 4), dusk.plus_ms(DAY_MS * 3 / 4)),
        darkness: Some(darkness),
        ours: true,
        mode: RunMode::Rehearsal,
    }];
    let subjects: Vec<String> = (0..VISITS_A_NIGHT)
        .map(|_| star((STARS as f64 * rng.random::<f64>()) as usize))
        .collect();
    let starts = |n: u32| dusk.plus_ms(i64::from(n) * VISIT_MS);
    for number in 1..=PLANS_A_NIGHT {
        let entries = subjects.iter().zip(0..).map(|(s, n)| entry(s, starts(n)));
        facts.push(Fact::PlanPublished(PlanRevision {
            night,
            number,
            made_at: dusk,
            from: dusk,
            cause: PlanCause::HoldEnded,
            entries: entries.collect(),
            left_out: Vec::new(),
            value: 50.0,
            bound: Some(50.5),
        }));
    }
    for number in 0..6 {
        let at = dusk.plus_ms(number * 5_000_000);
        let cause = HoldCause::Weather;
        facts.push(Fact::HoldBegan {
            at,
            cause,
            detail: "gust 17.2 m/s at 15.0".to_owned(),
        });
        facts.push(Fact::HoldEnded {
            at: at.plus_ms(1_000_000),
            cause,
        });
    }
    for (subject, number) in subjects.iter().zip(0..) {
        let planned = entry(subject, starts(number));
        let visit = Visit {
            id: VisitId::of(night, number),
            night,
            kind: EntryKind::Science,
            subject: planned.subject,
            began: planned.start.plus_ms(-41_700),
            exposing: Span::new(planned.start, planned.end),
            exposed_s: 500.0,
            planned: planned.exposures,
            outcome: Outcome::Done,
            credit: 1.0,
            airmass: planned.airmass,
            snr: Some(81.0),
            rv_error_m_s: Some(1.2 + 0.4 * rng.random::<f64>()),
            predicted_rv_error_m_s: planned.predicted_rv_error_m_s,
            mid_bjd_tdb: Some(2_440_587.5 + (planned.start.unix_ms() + 270_000) as f64 / 86.4e6),
            note: String::new(),
        };
        facts.push(Fact::VisitEnded {
            at: visit.exposing.end,
            report_key: format!("report-{number}"),
            visit,
        });
    }
    facts.push(Fact::NightClosed(NightSummary {
        night,
        darkness: Some(darkness),
        split: DarknessSplit {
            exposing_ms: darkness.length_ms(),
            ..DarknessSplit::default()
        },
        visits: VisitCounts::default(),
    }));
    facts
}

fn build(path: &Path) {
    let mut rng = ChaCha8Rng::seed_from_u64(4);
    let mut ledger = SqliteLedger::open(path).expect("a new ledger");
    let first = NightDate::parse("2023-12-01").expect("a date");
    for index in 0..NIGHTS {
        let night = first.plus_nights(index);
        let dusk = Utc::from_unix_ms(FIRST_DUSK_MS + index * DAY_MS);
        let facts = night_facts(&mut rng, night, dusk);
        ledger.append(night, &facts).expect("kept");
    }
}

fn whole_audit(criterion: &mut Criterion) {
    let folder = tempfile::tempdir().expect("a folder");
    let config = folder.path().join("config");
    configure(&config);
    let ledger = folder.path().join("ledger.sqlite");
    let begun = Instant::now();
    build(&ledger);
    println!("ledger built in {:.1} s", begun.elapsed().as_secs_f64());
    let page = folder.path().join("audit.html");
    let audit = |more: &[&str]| {
        let output = Command::new(env!("CARGO_BIN_EXE_nightwright"))
            .args(["audit", "--until", "2026-11-29", "--config"])
            .arg(&config)
            .arg("--ledger")
            .arg(&ledger)
            .args(more)
            .output()
            .expect("the binary runs");
        assert!(output.status.success(), "{output:?}");
    };
    let mut group = criterion.benchmark_group("audit, 300 stars, three years");
    group.sample_size(10);
    group.bench_function("json", |bench| bench.iter(|| audit(&["--json"])));
    let html = page.display().to_string();
    group.bench_function("page", |bench| bench.iter(|| audit(&["--html", &html])));
    group.finish();
    println!(
        "page: {} MB",
        std::fs::metadata(&page).map_or(0, |m| m.len() >> 20)
    );
}

criterion_group!(benches, whole_audit);
criterion_main!(benches);
