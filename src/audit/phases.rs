//! How the visits lie round the orbit of a candidate.

use std::f64::consts::PI;

use crate::catalogue::Candidate;
use crate::score::Phase;
use crate::units::{largest_gap, wrap_phase};

/// The visits' places in a candidate's orbit.
#[derive(Clone, Debug, PartialEq)]
pub struct PhaseCoverage {
    /// Phase of each visit with its error, in the order given.
    pub phases: Vec<Phase>,
    /// Widest stretch without a visit, as a share of the orbit, the stretch through phase 1
    /// included; 1 with none or one visit.
    pub largest_gap: f64,
    /// Whether even phases would look like this.
    pub evenness: Evenness,
}

/// Kuiper's test of the phases against evenness (Kuiper 1960, Proc. Kon. Ned. Akad. Wet. A 63, 38):
/// it does not depend on where phase 0 lies.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Evenness {
    /// V = D⁺ + D⁻, the sum of the largest differences above and below; 1 without visits.
    pub statistic: f64,
    /// Odds that even phases drawn at random give a V as large or larger; small: not even. It says
    /// nothing below about four visits, and phases that lie more evenly than chance have it near 1.
    pub p: f64,
}

impl PhaseCoverage {
    /// Of visits at these times, BJD_TDB.
    pub fn of(candidate: &Candidate, mids_bjd_tdb: &[f64]) -> Self {
        let phases: Vec<Phase> = mids_bjd_tdb
            .iter()
            .map(|mid| Phase::of(candidate, *mid))
            .collect();
        let values: Vec<f64> = phases.iter().map(|phase| phase.value).collect();
        PhaseCoverage {
            largest_gap: largest_gap(&values),
            evenness: kuiper(&values),
            phases,
        }
    }
}

/// Kuiper's test of phases against evenness. The small-sample form V* = V (√N + 0.155 + 0.24/√N)
/// is that of Stephens (1970, J. Roy. Stat. Soc. B 32, 115), good from N = 4 or so.
pub fn kuiper(phases: &[f64]) -> Evenness {
    if phases.is_empty() {
        return Evenness {
            statistic: 1.0,
            p: 1.0,
        };
    }
    let mut sorted: Vec<f64> = phases.iter().map(|p| wrap_phase(*p)).collect();
    sorted.sort_by(f64::total_cmp);
    let n = sorted.len() as f64;
    let (mut above, mut below) = (0.0f64, 0.0f64);
    for (i, phase) in sorted.iter().enumerate() {
        above = above.max((i as f64 + 1.0) / n - phase);
        below = below.max(phase - i as f64 / n);
    }
    let statistic = above + below;
    let root = n.sqrt();
    Evenness {
        statistic,
        p: kuiper_tail(statistic * (root + 0.155 + 0.24 / root)),
    }
}

/// Asymptotic tail of Kuiper's statistic: 2 Σ (4 j² λ² − 1) exp(−2 j² λ²) (Kuiper 1960).
fn kuiper_tail(lambda: f64) -> f64 {
    // Below, the sum is 1 to more than seven digits and its terms no longer fall quickly.
    if lambda < 0.4 {
        return 1.0;
    }
    let term = |j: i32| {
        let squared = f64::from(j * j) * lambda * lambda;
        2.0 * (4.0 * squared - 1.0) * (-2.0 * squared).exp()
    };
    // At λ = 0.4 the twentieth term is exp(−128).
    (1..=20).map(term).sum::<f64>().clamp(0.0, 1.0)
}

/// A phase in radians.
pub(super) fn radians(phase: f64) -> f64 {
    2.0 * PI * phase
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::{RngExt, SeedableRng};
    use rand_chacha::ChaCha8Rng;

    #[test]
    fn critical_values_of_stephens() {
        // Stephens 1970, table 1, upper tail of V*: 10 % 1.620, 5 % 1.747, 1 % 2.001 (from memory);
        // to the last digit printed the tail moves by less than 0.5 %.
        for (critical, p) in [(1.620, 0.10), (1.747, 0.05), (2.001, 0.01)] {
            let tail = kuiper_tail(critical);
            assert!((tail / p - 1.0).abs() < 0.01, "{critical}: {tail}");
        }
    }

    #[test]
    fn random_phases_are_rejected_as_often_as_stated() {
        let mut rng = ChaCha8Rng::seed_from_u64(7);
        for n in [5, 12, 60] {
            let trials = 4000;
            let rejected = (0..trials)
                .filter(|_| {
                    let phases: Vec<f64> = (0..n).map(|_| rng.random::<f64>()).collect();
                    kuiper(&phases).p < 0.1
                })
                .count();
            // 0.1 ± 0.005 by chance; Stephens' form is good to a few per cent of p.
            let share = rejected as f64 / f64::from(trials);
            assert!((0.08..0.12).contains(&share), "{n}: {share}");
        }
    }

    #[test]
    fn turning_the_circle_changes_nothing_and_clustering_shows() {
        let even: Vec<f64> = (0..20).map(|i| f64::from(i) / 20.0).collect();
        let clustered: Vec<f64> = even.iter().map(|p| 0.3 * p).collect();
        assert!(kuiper(&even).p > 0.99);
        assert!(kuiper(&clustered).p < 1e-4);
        let turned: Vec<f64> = clustered.iter().map(|p| p + 0.81).collect();
        let difference = kuiper(&turned).statistic - kuiper(&clustered).statistic;
        assert!(difference.abs() < 1e-12);
        assert_eq!(kuiper(&[]).p, 1.0);
        assert!((kuiper(&[0.4]).statistic - 1.0).abs() < 1e-12);
    }
}
