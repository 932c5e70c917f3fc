//! The audit's statistics of a survey of three years: 300 stars, 60 000 visits.

use std::hint::black_box;

use criterion::{Criterion, criterion_group, criterion_main};
use nightwright::audit::{Measurement, SpectralWindow, aliases, log_spaced_periods, sensitivity};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

const STARS: usize = 300;
const VISITS_EACH: usize = 200;
const NIGHTS: f64 = 1095.0;

fn surveys() -> Vec<Vec<f64>> {
    let mut rng = ChaCha8Rng::seed_from_u64(1);
    (0..STARS)
        .map(|_| {
            (0..VISITS_EACH)
                .map(|_| {
                    let night = (NIGHTS * rng.random::<f64>()).floor();
                    2_461_000.0 + night + 0.3 * rng.random::<f64>()
                })
                .collect()
        })
        .collect()
}

fn windows(criterion: &mut Criterion) {
    let stars = surveys();
    criterion.bench_function("windows and aliases, 60 000 visits to 3.1 a day", |bench| {
        bench.iter(|| {
            for times in &stars {
                let window = SpectralWindow::of(black_box(times), 3.1);
                let peaks = window.iter().flat_map(|w| w.peaks(10)).collect::<Vec<_>>();
                black_box(aliases(10.0, &peaks, 1.0 / NIGHTS));
            }
        });
    });
}

fn grids(criterion: &mut Criterion) {
    let stars: Vec<Vec<Measurement>> = surveys()
        .into_iter()
        .map(|times| {
            times
                .into_iter()
                .map(|bjd_tdb| Measurement {
                    bjd_tdb,
                    rv_error_m_s: 1.5,
                })
                .collect()
        })
        .collect();
    let periods = log_spaced_periods(1.0, 1000.0, 200);
    criterion.bench_function("sensitivity, 60 000 visits at 200 periods", |bench| {
        bench.iter(|| {
            for visits in &stars {
                black_box(sensitivity(black_box(visits), &periods, 5.0, Some(0.3)));
            }
        });
    });
}

criterion_group! {
    name = statistics;
    config = Criterion::default().sample_size(10);
    targets = windows, grids
}
criterion_main!(statistics);
