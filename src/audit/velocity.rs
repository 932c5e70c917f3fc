//! Barycentric velocities, and velocity errors foreseen and reported.

use std::collections::BTreeMap;

use super::quantile;
use crate::time::NightDate;

/// Spread of the barycentric velocity over the visits: it moves the stellar lines across those of
/// the air.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct VelocityRange {
    /// Lowest, km/s.
    pub min_km_s: f64,
    /// Highest, km/s.
    pub max_km_s: f64,
}

impl VelocityRange {
    /// Of these velocities, km/s; `None` without any.
    pub fn of(velocities_km_s: &[f64]) -> Option<Self> {
        let min_km_s = velocities_km_s.iter().copied().min_by(f64::total_cmp)?;
        let max_km_s = velocities_km_s.iter().copied().max_by(f64::total_cmp)?;
        Some(VelocityRange { min_km_s, max_km_s })
    }

    /// Highest minus lowest, km/s.
    pub fn spread_km_s(&self) -> f64 {
        self.max_km_s - self.min_km_s
    }

    /// The spread as a share of a wanted one, at most 1.
    pub fn share_of(&self, wanted_km_s: f64) -> f64 {
        (self.spread_km_s() / wanted_km_s).min(1.0)
    }
}

/// A visit's velocity errors.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ErrorPair {
    /// Its night.
    pub night: NightDate,
    /// Foreseen, m/s.
    pub predicted_m_s: f64,
    /// Reported, m/s.
    pub reported_m_s: f64,
}

/// Velocity errors of a night.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct NightErrors {
    /// The night.
    pub night: NightDate,
    /// Visits with both errors.
    pub visits: usize,
    /// Median of reported over predicted.
    pub ratio: f64,
    /// Sum of what the nights so far exceeded the usual ratio by, in usual scatters (Page's CUSUM).
    pub cusum: f64,
    /// The sum is past its limit: errors have been larger than usual for long or by much.
    pub drifting: bool,
}

/// The history of velocity errors.
#[derive(Clone, Debug, PartialEq)]
pub struct VelocityErrors {
    /// Median of reported over predicted over all visits.
    pub ratio: f64,
    /// By night, in order.
    pub nights: Vec<NightErrors>,
}

/// What counts as usual is learnt from the first nights, this many.
const LEARNING_NIGHTS: usize = 15;
/// Excess that a night may have without adding to the sum, in scatters.
const ALLOWANCE: f64 = 0.5;
/// The sum at which drift is flagged, in scatters: with the allowance above, a false flag comes
/// about once in 900 nights, a shift of one scatter is seen after about ten (Page 1954, Biometrika
/// 41, 100; run lengths as tabulated in handbooks of quality control, from memory).
const LIMIT: f64 = 5.0;
/// Median absolute deviation to standard deviation of a normal distribution (1/Φ⁻¹(¾)).
const MAD_TO_SIGMA: f64 = 1.4826;
/// Scatter of ln ratio is never taken to be smaller: a per cent is nothing to worry about.
const SMALLEST_SCATTER: f64 = 0.01;

impl VelocityErrors {
    /// Of visits in any order; those with an error that is not above 0 are left out. `None` without
    /// any.
    pub fn of(pairs: &[ErrorPair]) -> Option<Self> {
        let mut by_night: BTreeMap<NightDate, Vec<f64>> = BTreeMap::new();
        for pair in pairs {
            let ratio = pair.reported_m_s / pair.predicted_m_s;
            if ratio.is_finite() && ratio > 0.0 {
                by_night.entry(pair.night).or_default().push(ratio);
            }
        }
        let mut all: Vec<f64> = by_night.values().flatten().copied().collect();
        all.sort_by(f64::total_cmp);
        let ratio = quantile(&all, 0.5)?;
        let medians: Vec<(NightDate, usize, f64)> = by_night
            .into_iter()
            .filter_map(|(night, mut ratios)| {
                ratios.sort_by(f64::total_cmp);
                Some((night, ratios.len(), quantile(&ratios, 0.5)?))
            })
            .collect();
        Some(VelocityErrors {
            ratio,
            nights: follow(&medians),
        })
    }

    /// The first night of the drift that still lasts at the end, if one does.
    pub fn drifting_since(&self) -> Option<NightDate> {
        let lasting = self.nights.iter().rev().take_while(|n| n.drifting);
        lasting.last().map(|night| night.night)
    }
}

/// Runs the sum through the nights.
fn follow(medians: &[(NightDate, usize, f64)]) -> Vec<NightErrors> {
    let learnt: Vec<f64> = medians
        .iter()
        .take(LEARNING_NIGHTS)
        .map(|(_, _, ratio)| ratio.ln())
        .collect();
    let usual = median(&learnt);
    let deviations: Vec<f64> = learnt.iter().map(|value| (value - usual).abs()).collect();
    let scatter = (MAD_TO_SIGMA * median(&deviations)).max(SMALLEST_SCATTER);
    let mut cusum = 0.0f64;
    medians
        .iter()
        .enumerate()
        .map(|(i, (night, visits, ratio))| {
            let excess = (ratio.ln() - usual) / scatter - ALLOWANCE;
            // While it learns there is nothing to exceed.
            cusum = if i < LEARNING_NIGHTS {
                0.0
            } else {
                (cusum + excess).max(0.0)
            };
            NightErrors {
                night: *night,
                visits: *visits,
                ratio: *ratio,
                cusum,
                drifting: cusum > LIMIT,
            }
        })
        .collect()
}

fn median(values: &[f64]) -> f64 {
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    quantile(&sorted, 0.5).unwrap_or(0.0)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::score::fixtures::night;
    use rand::{RngExt, SeedableRng};
    use rand_chacha::ChaCha8Rng;

    /// Nights of eight visits with scatter, and from some night on an error larger by a factor.
    fn pairs(worse_from: i64, factor: f64) -> Vec<ErrorPair> {
        let mut rng = ChaCha8Rng::seed_from_u64(3);
        (0..60)
            .flat_map(|n| (0..8).map(move |_| n))
            .map(|n| ErrorPair {
                night: night(n),
                predicted_m_s: 2.0,
                reported_m_s: 2.2
                    * (0.2 * (rng.random::<f64>() - 0.5)).exp()
                    * if n >= worse_from { factor } else { 1.0 },
            })
            .collect()
    }

    #[test]
    fn a_worse_instrument_is_flagged_and_a_steady_one_is_not() {
        let steady = VelocityErrors::of(&pairs(1000, 1.0)).unwrap();
        assert!((steady.ratio - 1.1).abs() < 0.02);
        assert!(steady.nights.iter().all(|night| !night.drifting));
        assert_eq!(steady.drifting_since(), None);
        assert_eq!(steady.nights.len(), 60);

        let worse = VelocityErrors::of(&pairs(40, 1.15)).unwrap();
        let since = worse.drifting_since().unwrap();
        assert!(since >= night(40) && since < night(46), "{since}");
        assert!(
            worse
                .nights
                .iter()
                .all(|n| n.night >= night(40) || !n.drifting)
        );
    }

    #[test]
    fn leaves_out_what_is_no_error() {
        let bad = [0.0, -1.0, f64::NAN].map(|reported_m_s| ErrorPair {
            night: night(0),
            predicted_m_s: 2.0,
            reported_m_s,
        });
        assert_eq!(VelocityErrors::of(&bad), None);
    }

    #[test]
    fn range_of_barycentric_velocities() {
        assert_eq!(VelocityRange::of(&[]), None);
        let range = VelocityRange::of(&[-12.0, 20.0, 3.0]).unwrap();
        assert_eq!(range.spread_km_s(), 32.0);
        assert_eq!(range.share_of(64.0), 0.5);
        assert_eq!(range.share_of(16.0), 1.0);
    }
}
