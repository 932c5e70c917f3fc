//! Quantities that run round a circle of circumference 1: orbital phases.

/// The same phase in 0 ≤ φ < 1.
pub fn wrap_phase(phase: f64) -> f64 {
    let wrapped = phase.rem_euclid(1.0);
    // A tiny negative phase rounds up to a whole turn, which is the same phase as zero.
    if wrapped >= 1.0 { 0.0 } else { wrapped }
}

/// The widest stretch of the circle without a phase, as a share of the circle; the stretch through
/// 1 counts. None or one phase leave the whole circle empty: 1.
pub fn largest_gap(phases: &[f64]) -> f64 {
    let mut sorted: Vec<f64> = phases.iter().map(|p| wrap_phase(*p)).collect();
    sorted.sort_by(f64::total_cmp);
    let (Some(first), Some(last)) = (sorted.first(), sorted.last()) else {
        return 1.0;
    };
    let through_one = first + 1.0 - last;
    sorted
        .windows(2)
        .map(|pair| pair[1] - pair[0])
        .fold(through_one, f64::max)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn gap_of_a_few_phases() {
        let check = |phases: &[f64], gap: f64| {
            assert!((largest_gap(phases) - gap).abs() < 1e-12, "{phases:?}");
        };
        check(&[], 1.0);
        check(&[0.3], 1.0);
        check(&[0.0, 0.5], 0.5);
        check(&[0.9, 0.1, 0.5], 0.4);
        check(&[0.95, 0.05], 0.9);
        check(&[1.25, -0.25], 0.5);
        assert_eq!(wrap_phase(-1e-20), 0.0);
    }

    proptest! {
        #[test]
        fn gap_does_not_depend_on_where_the_circle_begins(
            phases in proptest::collection::vec(0.0f64..1.0, 2..20),
            turn in -3.0f64..3.0,
        ) {
            let turned: Vec<f64> = phases.iter().map(|p| p + turn).collect();
            prop_assert!((largest_gap(&phases) - largest_gap(&turned)).abs() < 1e-9);
            prop_assert!(largest_gap(&phases) >= 1.0 / phases.len() as f64 - 1e-12);
        }
    }
}
