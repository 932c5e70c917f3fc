use super::*;
use crate::score::fixtures::{START_BJD, candidate, survey, target};
use proptest::prelude::*;

const ERROR_M_S: f64 = 1.5;

fn of_one(candidate: Candidate) -> Coverage {
    Coverage::of_candidates(&[candidate], ERROR_M_S)
}

fn row(period_d: f64, bjd: f64) -> [f64; 5] {
    let angle = TAU * (bjd / period_d).fract();
    let (s, c) = angle.sin_cos();
    [1.0, c, s, (2.0 * angle).cos(), (2.0 * angle).sin()]
}

/// The information matrix from scratch, of the first N terms of the row.
fn information<const N: usize>(
    period_d: f64,
    amplitude_errors: f64,
    visits: &[(f64, f64)],
) -> Symmetric<N> {
    let mut prior = [(amplitude_errors * ERROR_M_S).powi(-2); N];
    prior[0] = (PRIOR_OFFSET_ERRORS * ERROR_M_S).powi(-2);
    let mut m = Symmetric::diagonal(prior);
    for (bjd, error) in visits {
        add(&mut m, period_d, *bjd, *error);
    }
    m
}

fn add<const N: usize>(m: &mut Symmetric<N>, period_d: f64, bjd: f64, error: f64) {
    let mut x = [0.0; N];
    x.copy_from_slice(&row(period_d, bjd)[..N]);
    m.add_outer(error.powi(-2), &x);
}

fn ln_det<const N: usize>(m: &Symmetric<N>) -> f64 {
    m.cholesky().unwrap().ln_determinant()
}

/// ln det after minus ln det before, by two decompositions.
fn brute_gain<const N: usize>(period_d: f64, visits: &[(f64, f64)], bjd: f64) -> f64 {
    let before: Symmetric<N> = information(period_d, PRIOR_AMPLITUDE_ERRORS, visits);
    let mut after = before;
    add(&mut after, period_d, bjd, ERROR_M_S);
    ln_det(&after) - ln_det(&before)
}

fn visits() -> impl Strategy<Value = Vec<(f64, f64)>> {
    proptest::collection::vec((0.0f64..1000.0, 0.5f64..5.0), 0..30)
        .prop_map(|v| v.into_iter().map(|(d, e)| (START_BJD + d, e)).collect())
}

proptest! {
    #[test]
    fn determinant_lemma_agrees_with_brute_force(
        visits in visits(),
        period_d in 0.6f64..200.0,
        days in 0.0f64..1200.0,
        eccentric in any::<bool>(),
    ) {
        let bjd = START_BJD + days;
        let mut coverage = of_one(Candidate { eccentric_terms: eccentric, ..candidate(period_d, 0.0) });
        coverage.add_visits(visits.iter().copied());
        let brute = if eccentric {
            brute_gain::<5>(period_d, &visits, bjd)
        } else {
            brute_gain::<3>(period_d, &visits, bjd)
        };
        let gain = coverage.value_at(bjd) * coverage.best_gain;
        // A gain above the best of the phases tried is cut to it, by less than half a per cent.
        prop_assert!(gain <= brute + 1e-7 && gain >= brute * 0.995 - 1e-7, "{gain} {brute}");
    }

    #[test]
    fn values_are_bounded_and_the_grid_agrees_with_single_values(
        visits in visits(),
        days in 0.0f64..1200.0,
        error_d in 0.0f64..0.5,
    ) {
        let star = Coverage::new(&survey(), &target());
        let mut both = Coverage::of_candidates(
            &[candidate(3.3, error_d), Candidate { eccentric_terms: true, ..candidate(17.0, 0.0) }],
            ERROR_M_S,
        );
        for coverage in [star, both.clone()] {
            let mut coverage = coverage;
            coverage.add_visits(visits.iter().copied());
            let start = START_BJD + days;
            let grid = coverage.values_on_grid(start, 1.0 / 1440.0, 600);
            let table = coverage.table(start, start + 600.0 / 1440.0);
            for (i, value) in grid.iter().enumerate() {
                let bjd = start + i as f64 / 1440.0;
                prop_assert!((0.0..=1.0).contains(value));
                prop_assert!((value - coverage.value_at(bjd)).abs() < 1e-6);
                prop_assert!((value - table.at(bjd)).abs() < 0.01);
            }
        }
        // One by one is the same as all at once.
        let mut one_by_one = both.clone();
        both.add_visits(visits.iter().copied());
        for (bjd, error) in &visits {
            one_by_one.add_visit(*bjd, *error);
        }
        prop_assert_eq!(both, one_by_one);
    }

    #[test]
    fn more_visits_never_raise_the_gain_of_the_next(visits in visits(), days in 0.0f64..1200.0) {
        let mut coverage = of_one(candidate(7.7, 0.02));
        let bjd = START_BJD + days;
        let mut before = f64::INFINITY;
        for (at, error) in visits {
            let gain = coverage.value_at(bjd) * coverage.best_gain;
            // Within what the cut to the best of the phases tried may hide.
            prop_assert!(gain <= before * 1.005 + 1e-9);
            before = gain;
            coverage.add_visit(at, error);
        }
    }
}

#[test]
fn long_histories_stay_exact() {
    let visits: Vec<(f64, f64)> = (0..3000)
        .map(|i| (START_BJD + 0.731 * f64::from(i), 0.5 + f64::from(i % 7)))
        .collect();
    let mut coverage = of_one(candidate(11.3, 0.0));
    coverage.add_visits(visits.iter().copied());
    let bjd = START_BJD + 2500.0;
    let gain = coverage.value_at(bjd) * coverage.best_gain;
    let brute = brute_gain::<3>(11.3, &visits, bjd);
    assert!((gain / brute - 1.0).abs() < 1e-6, "{gain} {brute}");
}

#[test]
fn even_phases_beat_clustered_ones() {
    let period = 10.0;
    let ln_det_of = |phases: &[f64]| {
        let visits: Vec<(f64, f64)> = phases
            .iter()
            .map(|phase| (START_BJD + period * phase, ERROR_M_S))
            .collect();
        ln_det(&information::<3>(period, PRIOR_AMPLITUDE_ERRORS, &visits))
    };
    let even: Vec<f64> = (0..12).map(|i| f64::from(i) / 12.0).collect();
    let clustered: Vec<f64> = even.iter().map(|phase| phase * 0.2).collect();
    assert!(ln_det_of(&even) > ln_det_of(&clustered) + 1.0);

    // And the value says so beforehand: it sends the next visit to the empty side.
    let mut coverage = of_one(candidate(period, 0.0));
    coverage.add_visits(
        clustered
            .iter()
            .map(|p| (START_BJD + period * p, ERROR_M_S)),
    );
    let empty_side = coverage.value_at(START_BJD + 6.0);
    let crowded = coverage.value_at(START_BJD + 1.0);
    assert!(empty_side > 0.9 && crowded < 0.25, "{empty_side} {crowded}");
}

#[test]
fn an_old_ephemeris_loses_its_phase() {
    // Visits at one phase only: right after them, the opposite phase is worth far more. The period
    // is known to 1 %, so that after a hundred periods the phase is known to one whole turn.
    let period = 10.0;
    let contrast = |periods_later: f64| {
        let mut coverage = of_one(candidate(period, 0.1));
        coverage.add_visits((0..8).map(|i| (START_BJD + 0.05 * f64::from(i), ERROR_M_S)));
        let at = START_BJD + period * periods_later;
        let values = coverage.values_on_grid(at, period / 40.0, 40);
        let most = values.iter().copied().fold(0.0, f64::max);
        most - values.iter().copied().fold(1.0, f64::min)
    };
    let (fresh, worn, lost) = (contrast(1.0), contrast(30.0), contrast(300.0));
    assert!(fresh > 0.6, "{fresh}");
    assert!(worn < 0.6 * fresh, "{worn} of {fresh}");
    assert!(lost < 0.2 * fresh, "{lost} of {fresh}");
}

#[test]
fn without_candidates_daily_sampling_leaves_the_one_day_alias_to_fill() {
    // Forty visits at the same hour: another at that hour tells less than one six hours later.
    let mut coverage = Coverage::of_grid((0.9, 1.1), ERROR_M_S);
    coverage.add_visits((0..40).map(|i| (START_BJD + f64::from(i), ERROR_M_S)));
    let same_hour = coverage.value_at(START_BJD + 40.0);
    let other_hour = coverage.value_at(START_BJD + 40.25);
    assert!(other_hour > same_hour, "{same_hour} {other_hour}");
}

#[test]
fn quantiles_of_the_normal_distribution() {
    // Tabulated in any statistics handbook: 0.975 → 1.959964, 0.841345 → 1.
    for (p, z) in [
        (0.5, 0.0),
        (0.975, 1.959_964),
        (0.841_345, 1.0),
        (0.025, -1.959_964),
    ] {
        assert!((normal_quantile(p) - z).abs() < 4.5e-4, "{p}");
    }
}
