use super::*;
use crate::catalogue::{SpecialWindow, WindowPurpose, WindowShape};
use crate::score::fixtures::{START_BJD, at, candidate, night, survey, target, visit};
use crate::score::{CADENCE_CAP, Photometer, SHARE_BOUNDS};
use proptest::prelude::*;

fn tonight(days: f64, share: f64) -> Tonight {
    Tonight {
        night: night(days.floor() as i64),
        span: Span::new(at(days.floor()), at(days.floor() + 1.0)),
        share_factors: vec![share],
    }
}

fn conditions(days: f64) -> Conditions {
    Conditions {
        utc: at(days),
        bjd_tdb: START_BJD + days + 0.003,
        airmass: 1.3,
        zenith_seeing_arcsec: 1.8,
        sky_mag_arcsec2: 19.0,
    }
}

fn value(target: &Target, standing: &Standing, days: f64) -> (Scorer, ValueParts) {
    let survey = survey();
    let scorer = Scorer::new(&survey, target, standing, &tonight(days, 1.2));
    let exposing = Photometer::new(&survey, target)
        .expose(&conditions(days))
        .unwrap();
    let end = at(days).plus_ms((exposing.duration_s * 1000.0) as i64);
    let parts = scorer.value(&conditions(days), &exposing, end);
    (scorer, parts)
}

fn standing(days: &[f64], accrued_nights: u32, remaining_nights: u32) -> Standing {
    Standing {
        credited: days.iter().map(|d| visit(*d, 1.0)).collect(),
        accrued_nights,
        remaining_nights,
    }
}

proptest! {
    #[test]
    fn the_total_is_the_documented_product_and_bounded(
        steps in proptest::collection::vec(0.3f64..6.0, 0..12),
        accrued in 0u32..60,
        remaining in 0u32..60,
        later in 0.0f64..20.0,
    ) {
        let days: Vec<f64> = steps.iter().scan(0.0, |d, s| { *d += s; Some(*d) }).collect();
        let when = days.last().copied().unwrap_or(0.0) + later;
        let (scorer, p) = value(&target(), &standing(&days, accrued, remaining), when);
        let s = survey().planning.coverage_share;
        let product = p.weight * p.share * p.season * p.quality
            * (p.cadence * ((1.0 - s) + s * p.coverage) + p.window);
        prop_assert!((p.total - product).abs() < 1e-12);
        prop_assert_eq!(p.weight, 2.0);
        prop_assert!((0.0..=1.0).contains(&p.coverage) && (0.0..=1.0).contains(&p.quality));
        prop_assert!((0.0..=CADENCE_CAP).contains(&p.cadence));
        prop_assert!((1.0..=2.0).contains(&p.season));
        prop_assert!((SHARE_BOUNDS.0..=SHARE_BOUNDS.1).contains(&p.share));
        if scorer.not_wanted(at(when)).is_some() {
            prop_assert_eq!(p.total, 0.0);
        }
    }
}

#[test]
fn nothing_right_after_a_visit() {
    let (scorer, parts) = value(&target(), &standing(&[0.5], 40, 10), 0.52);
    assert_eq!(parts.total, 0.0);
    assert_eq!(
        scorer.refused(),
        Some(NotWanted::ServedTonight { wanted: 1 })
    );
}

#[test]
fn the_season_term_rises_as_nights_run_out() {
    let season = |owed_nights: u32, remaining| {
        value(&target(), &standing(&[0.5], owed_nights, remaining), 40.5)
            .1
            .season
    };
    assert!(season(12, 60) < season(12, 20));
    assert!(season(12, 20) < season(24, 20));
    assert_eq!(season(24, 3), 2.0);
    assert_eq!(season(24, 0), 2.0);
}

#[test]
fn windows_add_or_forbid() {
    let mut star = target();
    star.candidates = vec![candidate(5.0, 0.0)];
    let window = |purpose| SpecialWindow {
        label: "transit of b".to_owned(),
        candidate: 0,
        shape: WindowShape::Transit { duration_h: 6.0 },
        purpose,
    };
    let none = standing(&[], 0, 50);
    star.windows = vec![window(WindowPurpose::Catch { worth: 3.0 })];
    let (scorer, within) = value(&star, &none, 10.0);
    assert_eq!(within.window, 3.0);
    assert!(
        scorer
            .because(&conditions(10.0), &within)
            .contains("catches transit of b")
    );
    let (_, outside) = value(&star, &none, 11.0);
    assert_eq!(outside.window, 0.0);
    assert!(outside.total > 0.0 && within.total > 3.0 * outside.total);

    star.windows = vec![window(WindowPurpose::Avoid)];
    let (scorer, within) = value(&star, &none, 10.0);
    assert_eq!(within.total, 0.0);
    assert_eq!(
        scorer.forbidden_by(START_BJD + 10.0, START_BJD + 10.01),
        Some("transit of b")
    );
    assert_eq!(value(&star, &none, 11.0).1.total, outside.total);
}

#[test]
fn reasons_are_plain() {
    let (scorer, parts) = value(&target(), &standing(&[0.5], 20, 100), 8.5);
    let text = scorer.because(&conditions(8.5), &parts);
    assert!(
        text.starts_with("overdue at 2.7 intervals, owed 5.7, "),
        "{text}"
    );
    assert!(text.contains("programme below its share (×1.20)"), "{text}");
}
