//! Seasons held against what is known without simulating them.

use std::path::Path;

use nightwright::catalogue::{Candidate, Measured, Target, TargetId};
use nightwright::cli::load;
use nightwright::season::{Effort, Ensemble, Frame, Realised, SeasonAsk, SeasonResults};
use nightwright::settings::{self, Settings};
use nightwright::time::NightDate;
use nightwright::units::Angle;

/// The shipped survey with one star that stands high all night in December, under an endlessly clear
/// sky and with an instrument that does not fail.
fn clear_sky() -> Settings {
    let sources = load::sources(Path::new("config")).expect("the folder is there");
    let mut settings = settings::check(&sources).expect("the shipped settings are sound");
    settings.climate.clear_fraction = [1.0; 12];
    settings.climate.night_lost = 0.0;
    settings.climate.faults_per_hour = 0.0;
    let site_latitude_deg = settings.survey.site.latitude.deg();
    let mut star: Target = settings.survey.targets[0].clone();
    star.id = TargetId::new("ONE");
    star.star.ra = Angle::from_deg(75.0);
    star.star.dec = Angle::from_deg(site_latitude_deg * 0.7);
    star.magnitude = 7.0;
    star.candidates.clear();
    star.windows.clear();
    star.limits = Default::default();
    star.cadence.every_nights = 1.0;
    star.cadence.visits_per_night = 1;
    star.cadence.total_visits = None;
    star.cadence.first_night = None;
    star.cadence.last_night = None;
    star.weight = 1.0;
    star.paused = false;
    settings.survey.targets = vec![star];
    settings.survey.instrument.calibrations.clear();
    settings.survey.first_night = None;
    settings
}

fn run(settings: &Settings, nights: u32, realisations: u32) -> (Frame, Vec<Realised>) {
    let observer = settings.observer();
    let ask = SeasonAsk {
        first: NightDate::parse("2026-12-01").expect("a date"),
        nights,
        seed: 3,
    };
    let ensemble = Ensemble::new((settings, &observer), ask, &[], None).expect("a known year");
    let effort = Effort {
        numbers: (0..realisations).collect(),
        threads: 2,
        until_error: None,
    };
    let all = ensemble
        .run(&effort, None, &|_| ())
        .expect("nothing breaks");
    (ensemble.frame().clone(), all)
}

#[test]
fn one_star_under_a_clear_sky_gets_what_its_cadence_allows() {
    let mut settings = clear_sky();
    let (frame, all) = run(&settings, 12, 4);
    assert_eq!(frame.targets[0].wanted, 12.0);
    for realised in &all {
        // One a night; a visit that the observatory loses is tried again in the same night.
        let credited = realised.stars[0].credited;
        assert!((11.5..=12.0).contains(&credited), "{credited}");
    }
    settings.survey.targets[0].cadence.total_visits = Some(5);
    let (frame, all) = run(&settings, 12, 4);
    assert_eq!(frame.targets[0].wanted, 5.0);
    for realised in &all {
        let credited = realised.stars[0].credited;
        // The last one may complete what a short one began.
        assert!((5.0 - 1e-6..6.0).contains(&credited), "{credited}");
    }
    assert_eq!(SeasonResults::of(&frame, &all).targets[0].odds.value, 1.0);
}

#[test]
fn equal_stars_get_equal_shares() {
    let mut settings = clear_sky();
    let one = settings.survey.targets[0].clone();
    // An hour and a half each, seven stars close together: more than a night holds within the limits.
    let stars = (0..7).map(|n| {
        let mut star = one.clone();
        star.id = TargetId::new(&format!("STAR{n}"));
        star.star.ra = Angle::from_deg(75.0 + 0.05 * f64::from(n));
        star.exposure = nightwright::catalogue::ExposureRule::FixedSeconds(5400.0);
        star
    });
    settings.survey.targets = stars.collect();
    let (_, all) = run(&settings, 10, 3);
    let count = all.len() as f64;
    let mean = |star: usize| all.iter().map(|r| r.stars[star].credited).sum::<f64>() / count;
    let means: Vec<f64> = (0..7).map(mean).collect();
    let fair = means.iter().sum::<f64>() / 7.0;
    assert!(fair < 9.0, "they do compete: {means:?}");
    for mean in &means {
        // Whose turn it is when the season ends, and a visit lost to the observatory, make about a
        // visit in a realisation; over three of them less.
        assert!((mean - fair).abs() < 1.0, "{means:?}");
    }
}

/// With even phases and N velocities of error σ, K has the error σ √(2/N) (the information matrix of
/// a circular orbit is diagonal then: Cramér–Rao).
#[test]
fn the_error_of_k_falls_with_the_square_root_of_the_visits() {
    let mut settings = clear_sky();
    let exact = |value| Measured { value, error: 0.0 };
    settings.survey.targets[0].candidates = vec![Candidate {
        period_d: exact(7.3),
        conjunction_bjd_tdb: exact(2_461_376.5),
        semi_amplitude_m_s: Some(3.0),
        eccentricity: 0.0,
        argument: Angle::ZERO,
        eccentric_terms: false,
    }];
    for nights in [15, 60] {
        let (frame, all) = run(&settings, nights, 2);
        for realised in &all {
            let weights = realised.visits.iter().filter(|v| v.credit > 0.0);
            let weight: f64 = weights
                .map(|v| v.rv_error_m_s.expect("an error").powi(-2))
                .sum();
            let expected = (2.0 / weight).sqrt();
            let sigma = realised.stars[0].sigma_k_m_s[0].expect("an orbit");
            // Phases of a few weeks of one visit a night are even to about a tenth.
            assert!((sigma / expected - 1.0).abs() < 0.15, "{sigma} {expected}");
        }
        let results = SeasonResults::of(&frame, &all);
        assert!(results.targets[0].sigma_k_m_s[0].is_some());
    }
}

#[test]
fn what_the_sky_takes_is_held_and_nothing_else() {
    let mut settings = clear_sky();
    let share = |results: &SeasonResults, wanted: &str| {
        let found = results.darkness.iter().find(|(label, _)| label == wanted);
        found.expect("a part of darkness").1
    };
    let (frame, all) = run(&settings, 6, 2);
    let clear = SeasonResults::of(&frame, &all);
    assert!(share(&clear, "held_weather") < 0.01, "{:?}", clear.darkness);
    settings.climate.clear_fraction = [0.0; 12];
    let (frame, all) = run(&settings, 6, 2);
    let cloudy = SeasonResults::of(&frame, &all);
    assert!(
        share(&cloudy, "held_weather") > 0.999,
        "{:?}",
        cloudy.darkness
    );
    assert!(all.iter().all(|r| r.stars[0].credited == 0.0));
    // Everything owed is put down to the weather.
    let owed = &cloudy.targets[0].owed_by_cause;
    assert_eq!(owed.keys().collect::<Vec<_>>(), ["weather"], "{owed:?}");
}
