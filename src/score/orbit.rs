//! Where in its orbit a candidate planet is, and how well that is known.

use crate::catalogue::Candidate;
use crate::units::wrap_phase;

/// An orbital phase with the error that the ephemeris has gathered by then.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Phase {
    /// Share of the period since inferior conjunction, 0 ≤ φ < 1.
    pub value: f64,
    /// One standard error, in periods; above about 0.3 the phase is as good as unknown.
    pub error: f64,
}

impl Phase {
    /// Of a candidate at an instant, BJD_TDB. The errors of period and conjunction are taken as
    /// independent: σφ² = (σ_T² + (E σ_P)²) / P² after E periods.
    pub fn of(candidate: &Candidate, bjd_tdb: f64) -> Self {
        let cycles = (bjd_tdb - candidate.conjunction_bjd_tdb.value) / candidate.period_d.value;
        Phase {
            value: wrap_phase(cycles),
            error: (candidate.conjunction_bjd_tdb.error).hypot(cycles * candidate.period_d.error)
                / candidate.period_d.value,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::catalogue::Measured;
    use crate::units::Angle;

    #[test]
    fn the_error_grows_with_every_period() {
        let candidate = Candidate {
            period_d: Measured {
                value: 10.0,
                error: 0.01,
            },
            conjunction_bjd_tdb: Measured {
                value: 2_460_000.0,
                error: 0.3,
            },
            semi_amplitude_m_s: None,
            eccentricity: 0.0,
            argument: Angle::ZERO,
            eccentric_terms: false,
        };
        let check = |bjd: f64, value: f64, error: f64| {
            let phase = Phase::of(&candidate, bjd);
            assert!((phase.value - value).abs() < 1e-9, "{bjd}: {phase:?}");
            assert!((phase.error - error).abs() < 1e-12, "{bjd}: {phase:?}");
        };
        check(2_460_000.0, 0.0, 0.03);
        check(2_460_002.5, 0.25, 0.03f64.hypot(0.000_25));
        // Forty periods on, 40 × 0.01 d = 0.4 d: with 0.3 d it makes 0.5 d (a 3-4-5 triangle).
        check(2_460_400.0, 0.0, 0.05);
        check(2_459_597.5, 0.75, 0.3f64.hypot(40.25 * 0.01) / 10.0);
    }
}
