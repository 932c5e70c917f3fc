//! The pull towards each programme's share, and the pull of a season that ends.

use super::{Standing, owed};
use crate::catalogue::{Programme, Target};

/// The share term stays within these bounds, so that no programme is ever shut out.
pub const SHARE_BOUNDS: (f64, f64) = (0.5, 2.0);

/// Used time is taken to have begun with so many seconds split exactly as wanted: the first visits
/// of a survey say nothing about its shares.
const SHARE_START_S: f64 = 36_000.0;

/// The share term of each programme: (wanted fraction / used fraction) to the power of `pull`,
/// within [`SHARE_BOUNDS`]. `used_s` is the time that each has used so far, seconds. All are 1 at
/// the start, or when no programme claims a share.
pub fn share_factors(programmes: &[Programme], used_s: &[f64], pull: f64) -> Vec<f64> {
    let claimed: f64 = programmes.iter().map(|p| p.share).sum();
    let used = |i: usize| used_s.get(i).copied().unwrap_or(0.0);
    let used_total: f64 = (0..programmes.len()).map(used).sum();
    let factor = |(i, programme): (usize, &Programme)| {
        if claimed <= 0.0 {
            return 1.0;
        }
        let wanted = programme.share / claimed;
        let fraction = (used(i) + wanted * SHARE_START_S) / (used_total + SHARE_START_S);
        // A programme without a share that has used nothing is where it should be.
        let ratio = if fraction > 0.0 {
            wanted / fraction
        } else {
            1.0
        };
        ratio.powf(pull).clamp(SHARE_BOUNDS.0, SHARE_BOUNDS.1)
    };
    programmes.iter().enumerate().map(factor).collect()
}

/// The season term: 1 + `boost` × (nights' visits still owed, tonight's included, over the nights
/// left to give them), the fraction at most 1.
pub fn season_factor(target: &Target, standing: &Standing, boost: f64) -> f64 {
    let visits_per_night = f64::from(target.cadence.visits_per_night);
    let nights_owed = owed(target, standing) / visits_per_night + 1.0 / target.cadence.every_nights;
    let nights_left = f64::from(standing.remaining_nights.max(1));
    1.0 + boost * (nights_owed / nights_left).clamp(0.0, 1.0)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn programme(share: f64) -> Programme {
        Programme {
            id: "p".to_owned(),
            label: "P".to_owned(),
            weight: 1.0,
            share,
            min_period_d: 1.0,
            max_period_d: 100.0,
        }
    }

    proptest! {
        #[test]
        fn shares_are_bounded_and_pull_the_right_way(
            shares in proptest::collection::vec(0.0f64..1.0, 1..5),
            used in proptest::collection::vec(0.0f64..1e7, 5),
            pull in 0.0f64..3.0,
        ) {
            let programmes: Vec<Programme> = shares.iter().map(|s| programme(*s)).collect();
            let factors = share_factors(&programmes, &used, pull);
            prop_assert_eq!(factors.len(), programmes.len());
            for (i, factor) in factors.iter().enumerate() {
                prop_assert!((SHARE_BOUNDS.0..=SHARE_BOUNDS.1).contains(factor));
                let mut more = used.clone();
                more[i] += 36_000.0;
                prop_assert!(share_factors(&programmes, &more, pull)[i] <= factor + 1e-12);
            }
        }
    }

    #[test]
    fn shares_are_neutral_at_the_start_and_when_met() {
        let programmes = [programme(0.6), programme(0.2), programme(0.0)];
        for used in [[0.0, 0.0, 0.0], [6e6, 2e6, 0.0]] {
            for factor in share_factors(&programmes, &used, 1.5) {
                assert!((factor - 1.0).abs() < 1e-9);
            }
        }
        // Half of what it should have of much time: pulled up by nearly 2 with a pull of 1.
        let factors = share_factors(&[programme(0.5), programme(0.5)], &[1e9, 3e9], 1.0);
        assert!((factors[0] - 2.0).abs() < 1e-3 && (factors[1] - 2.0 / 3.0).abs() < 1e-3);
    }
}
