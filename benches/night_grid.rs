//! The night's grid: 600 one-minute instants × 120 stars, on one thread; and the darkness of a
//! thousand nights with 120 stars' time above an altitude.
//!
//! `benches/pyerfa_grid.py` runs this and the same work through vectorised C ERFA from Python, and
//! compares both times and every value; the grid is written to `target/night_grid.f64` for it.

use std::fs;
use std::hint::black_box;

use criterion::{Criterion, criterion_group, criterion_main};
use nightwright::ephemeris::{
    EarthOrientation, EarthRotation, HorizonProfile, NightGrid, Observer, RotationQuality, Site,
    Star, Visibility,
};
use nightwright::time::{MINUTE_MS, NightDate, Span, Utc};
use nightwright::units::Angle;

const INSTANTS: i64 = 600;
const STARS: usize = 120;

fn observer() -> Observer {
    let site = Site {
        name: "Bench".to_owned(),
        latitude: Angle::from_deg(39.4),
        longitude: Angle::from_deg(-116.3),
        height_m: 1950.0,
        pressure_hpa: 800.0,
        temperature_c: 5.0,
        relative_humidity: 0.3,
        horizon: HorizonProfile::default(),
    };
    let rotation = EarthRotation::constant(EarthOrientation {
        ut1_minus_utc_s: -0.05,
        pole_x: Angle::from_arcsec(0.15),
        pole_y: Angle::from_arcsec(0.3),
        quality: RotationQuality::Measured,
    });
    Observer::new(site, rotation)
}

/// Stars spread evenly over the sphere by the golden angle, one of them through the zenith, with
/// motions up to 5″ a year.
fn stars() -> Vec<Star> {
    (0..STARS)
        .map(|i| {
            let share = (i as f64 + 0.5) / STARS as f64;
            let dec_deg = if i == 0 {
                39.4
            } else {
                (2.0 * share - 1.0).asin().to_degrees()
            };
            Star {
                ra: Angle::from_deg((i as f64 * 137.507_764).rem_euclid(360.0)),
                dec: Angle::from_deg(dec_deg),
                epoch_jyear: 2000.0,
                pm_ra_cosdec_mas_yr: 5000.0 * (1.0 - 2.0 * share),
                pm_dec_mas_yr: 3000.0 * share,
                parallax_mas: 500.0 * share,
                radial_velocity_km_s: 100.0 * (share - 0.5),
            }
        })
        .collect()
}

fn span() -> Span {
    let start = Utc::from_unix_ms(1_796_176_800_000); // 2026-12-02T02:00:00Z
    Span::new(start, start.plus_ms(INSTANTS * MINUTE_MS))
}

fn write_grid(grid: &NightGrid) {
    let columns = grid.stars().iter().flat_map(|star| {
        [
            &star.altitude_deg,
            &star.azimuth_deg,
            &star.airmass,
            &star.moon_separation_deg,
        ]
    });
    let bytes: Vec<u8> = columns.flatten().flat_map(|v| v.to_le_bytes()).collect();
    let path = concat!(env!("CARGO_MANIFEST_DIR"), "/target/night_grid.f64");
    fs::write(path, bytes).expect("target is writable");
}

fn night_grid(criterion: &mut Criterion) {
    let (observer, stars, span) = (observer(), stars(), span());
    write_grid(&NightGrid::compute(&observer, &stars, span).expect("within 1900 to 2100"));
    criterion.bench_function("night_grid_600x120", |bencher| {
        bencher.iter(|| NightGrid::compute(black_box(&observer), black_box(&stars), span));
    });
}

fn visibility(criterion: &mut Criterion) {
    let (observer, stars) = (observer(), stars());
    let first = NightDate::parse("2026-06-01").expect("a date");
    let mut group = criterion.benchmark_group("season");
    group.sample_size(10);
    group.bench_function("visibility_1000_nights_x120", |bencher| {
        bencher.iter(|| {
            let season = Visibility::over(&observer, first, 1000, Angle::from_deg(-12.0))
                .expect("within 1900 to 2100");
            let limit = Angle::from_deg(30.0);
            stars
                .iter()
                .map(|star| season.above_ms(star, limit).iter().sum::<i64>())
                .sum::<i64>()
        });
    });
}

criterion_group!(benches, night_grid, visibility);
criterion_main!(benches);
