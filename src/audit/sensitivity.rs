//! What the visits so far would find.

use super::{Measurement, OrbitErrors, msini_earth};

/// The smallest planet that would be found at a period.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Sensitivity {
    /// Orbital period, days.
    pub period_d: f64,
    /// Smallest semi-amplitude, m/s.
    pub k_m_s: f64,
    /// Smallest minimum mass, Earth masses; `None` without a stellar mass.
    pub msini_earth: Option<f64>,
}

/// So many periods from `min_d` to `max_d` inclusive, even in the logarithm.
pub fn log_spaced_periods(min_d: f64, max_d: f64, count: usize) -> Vec<f64> {
    let steps = count.saturating_sub(1).max(1) as f64;
    let ratio = (max_d / min_d).ln();
    (0..count)
        .map(|i| min_d * (ratio * i as f64 / steps).exp())
        .collect()
}

/// At each period the semi-amplitude that is `snr` times its Cramér–Rao error (circular orbit, zero
/// point, amplitude and phase free, root mean square over the phase), and the minimum mass that it
/// stands for. Periods at which the visits determine no orbit are left out.
pub fn sensitivity(
    visits: &[Measurement],
    periods_d: &[f64],
    snr: f64,
    star_msun: Option<f64>,
) -> Vec<Sensitivity> {
    let found = |period_d: &f64| {
        let k_m_s = snr * OrbitErrors::mean_sigma_k_m_s(*period_d, visits)?;
        Some(Sensitivity {
            period_d: *period_d,
            k_m_s,
            msini_earth: star_msun.map(|mass| msini_earth(k_m_s, mass, *period_d, 0.0)),
        })
    };
    periods_d.iter().filter_map(found).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn grows_with_the_signal_to_noise_and_sees_the_alias_of_the_day() {
        let visits: Vec<Measurement> = (0..60)
            .map(|i| Measurement {
                bjd_tdb: 2_461_000.5 + 1.37 * f64::from(i),
                rv_error_m_s: 2.0,
            })
            .collect();
        let periods = log_spaced_periods(1.0, 100.0, 50);
        assert!((periods[0] - 1.0).abs() < 1e-12 && (periods[49] - 100.0).abs() < 1e-9);
        let at_five = sensitivity(&visits, &periods, 5.0, Some(0.3));
        let at_ten = sensitivity(&visits, &periods, 10.0, None);
        assert_eq!(at_five.len(), 50);
        for (five, ten) in at_five.iter().zip(&at_ten) {
            assert!((ten.k_m_s / five.k_m_s - 2.0).abs() < 1e-9);
            // Never below the limit of perfectly even phases, σ √(2/N).
            assert!(five.k_m_s >= 5.0 * 2.0 * (2.0f64 / 60.0).sqrt() * 0.999_999);
        }
        // A period that the sampling steps through as 1.37 d steps through itself is not determined.
        assert!(sensitivity(&visits, &[1.37], 5.0, None).is_empty());
        assert!(sensitivity(&visits[..2], &periods, 5.0, None).is_empty());
    }
}
