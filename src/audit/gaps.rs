//! How regularly the visits came.

/// Gaps between consecutive visits, days.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct GapStatistics {
    /// Half of the gaps are shorter.
    pub median_d: f64,
    /// Nine tenths are shorter.
    pub p90_d: f64,
    /// The longest.
    pub longest_d: f64,
}

impl GapStatistics {
    /// Of visits at these times in days, in any order; `None` with fewer than two.
    pub fn of(times_d: &[f64]) -> Option<Self> {
        let mut sorted = times_d.to_vec();
        sorted.sort_by(f64::total_cmp);
        let mut gaps: Vec<f64> = sorted.windows(2).map(|pair| pair[1] - pair[0]).collect();
        gaps.sort_by(f64::total_cmp);
        Some(GapStatistics {
            median_d: quantile(&gaps, 0.5)?,
            p90_d: quantile(&gaps, 0.9)?,
            longest_d: *gaps.last()?,
        })
    }
}

/// Quantile of sorted values, 0 ≤ q ≤ 1, by straight lines between them (definition 7 of Hyndman &
/// Fan 1996, The American Statistician 50, 361); `None` without values.
pub fn quantile(sorted: &[f64], q: f64) -> Option<f64> {
    let last = sorted.len().checked_sub(1)?;
    let position = q.clamp(0.0, 1.0) * last as f64;
    let before = (position as usize).min(last);
    let after = (before + 1).min(last);
    let share = position - before as f64;
    Some(sorted[before] * (1.0 - share) + sorted[after] * share)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn gaps_of_a_few_visits() {
        assert_eq!(GapStatistics::of(&[]), None);
        assert_eq!(GapStatistics::of(&[5.0]), None);
        let gaps = GapStatistics::of(&[10.0, 0.0, 1.0, 4.0, 6.0]).unwrap();
        // Gaps 1, 2, 3, 4: median 2.5; 0.9 × 3 = 2.7, hence 3.7.
        assert_eq!((gaps.median_d, gaps.longest_d), (2.5, 4.0));
        assert!((gaps.p90_d - 3.7).abs() < 1e-12);
    }
}
