//! Special windows: transits to catch or to avoid, ranges of phase.

use super::Phase;
use crate::catalogue::{Candidate, SpecialWindow, WindowPurpose, WindowShape};

/// The edges move by so many standard errors of the propagated ephemeris.
pub const EDGE_SIGMAS: f64 = 1.0;

/// What a window says of a visit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum WindowVerdict {
    /// Nothing.
    Indifferent,
    /// The visit lies within a window to catch: this much is added.
    Caught(f64),
    /// The visit touches a window to avoid.
    Forbidden,
}

/// Judges a visit from `start_bjd` to `end_bjd` (BJD_TDB) by a window of a candidate.
///
/// To catch, the *whole* visit must lie within the window after both its edges have moved inwards
/// by [`EDGE_SIGMAS`] ephemeris errors: an observation that may have missed the transit is worth no
/// more than any other, and when the error exceeds half the window nothing is. To avoid, no part of
/// the visit may lie within the window after its edges have moved outwards by as much; when that
/// fills the orbit, no visit is allowed.
pub fn judge(
    window: &SpecialWindow,
    candidate: &Candidate,
    start_bjd: f64,
    end_bjd: f64,
) -> WindowVerdict {
    let (centre, half_width) = extent(window.shape, candidate.period_d.value);
    let middle = Phase::of(candidate, (start_bjd + end_bjd) / 2.0);
    let half_visit = (end_bjd - start_bjd) / 2.0 / candidate.period_d.value;
    // Distance of the visit's middle from the window's, the short way round.
    let turned = (middle.value - centre + 0.5).rem_euclid(1.0) - 0.5;
    let margin = EDGE_SIGMAS * middle.error;
    match window.purpose {
        WindowPurpose::Catch { worth } => {
            if turned.abs() + half_visit <= half_width - margin {
                WindowVerdict::Caught(worth)
            } else {
                WindowVerdict::Indifferent
            }
        }
        WindowPurpose::Avoid => {
            if turned.abs() - half_visit < half_width + margin {
                WindowVerdict::Forbidden
            } else {
                WindowVerdict::Indifferent
            }
        }
    }
}

/// Middle and half-width of a window in phase.
fn extent(shape: WindowShape, period_d: f64) -> (f64, f64) {
    match shape {
        WindowShape::Transit { duration_h } => (0.0, duration_h / 48.0 / period_d),
        WindowShape::Phases { from, to } => {
            let width = (to - from).rem_euclid(1.0);
            (from + width / 2.0, width / 2.0)
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::catalogue::Measured;
    use crate::units::Angle;

    const T0: f64 = 2_460_000.0;

    fn candidate(period_error_d: f64) -> Candidate {
        Candidate {
            period_d: Measured {
                value: 4.0,
                error: period_error_d,
            },
            conjunction_bjd_tdb: Measured {
                value: T0,
                error: 0.0,
            },
            semi_amplitude_m_s: None,
            eccentricity: 0.0,
            argument: Angle::ZERO,
            eccentric_terms: false,
        }
    }

    fn window(shape: WindowShape, purpose: WindowPurpose) -> SpecialWindow {
        SpecialWindow {
            label: "test".to_owned(),
            candidate: 0,
            shape,
            purpose,
        }
    }

    const TRANSIT: WindowShape = WindowShape::Transit { duration_h: 2.4 };
    const CATCH: WindowPurpose = WindowPurpose::Catch { worth: 2.0 };

    #[test]
    fn a_transit_is_caught_only_when_the_visit_lies_within_it() {
        let exact = candidate(0.0);
        let check = |from_h: f64, to_h: f64, expected: WindowVerdict| {
            let start = T0 + 10.0 * 4.0;
            let verdict = judge(
                &window(TRANSIT, CATCH),
                &exact,
                start + from_h / 24.0,
                start + to_h / 24.0,
            );
            assert_eq!(verdict, expected, "{from_h} to {to_h}");
        };
        check(-1.1, -0.7, WindowVerdict::Caught(2.0));
        check(0.0, 1.1, WindowVerdict::Caught(2.0));
        check(-1.3, -0.9, WindowVerdict::Indifferent);
        check(1.0, 1.3, WindowVerdict::Indifferent);
        check(48.0, 48.2, WindowVerdict::Indifferent);
    }

    #[test]
    fn the_ephemeris_error_narrows_what_is_caught_and_widens_what_is_avoided() {
        // After 100 periods an error of 0.0003 d a period is 0.03 d = 0.72 h.
        let (old, at) = (candidate(0.000_3), T0 + 400.0);
        let verdict = |purpose, from_h: f64, to_h: f64| {
            judge(
                &window(TRANSIT, purpose),
                &old,
                at + from_h / 24.0,
                at + to_h / 24.0,
            )
        };
        assert_eq!(verdict(CATCH, -0.4, 0.4), WindowVerdict::Caught(2.0));
        assert_eq!(verdict(CATCH, 0.2, 0.6), WindowVerdict::Indifferent);
        let avoid = WindowPurpose::Avoid;
        assert_eq!(verdict(avoid, 1.8, 2.4), WindowVerdict::Forbidden);
        assert_eq!(verdict(avoid, 2.0, 2.4), WindowVerdict::Indifferent);
        // Lost ephemeris: nothing is surely caught, nothing is surely outside.
        let lost = candidate(0.1);
        let judged = |purpose| judge(&window(TRANSIT, purpose), &lost, at, at + 0.01);
        assert_eq!(judged(CATCH), WindowVerdict::Indifferent);
        assert_eq!(judged(avoid), WindowVerdict::Forbidden);
    }

    #[test]
    fn a_range_of_phases_may_run_through_one() {
        let exact = candidate(0.0);
        let range = WindowShape::Phases { from: 0.9, to: 0.1 };
        let caught = |phase: f64| {
            let at = T0 + 4.0 * phase;
            judge(&window(range, CATCH), &exact, at, at + 0.001) == WindowVerdict::Caught(2.0)
        };
        assert!(caught(0.95) && caught(0.0) && caught(0.09));
        assert!(!caught(0.11) && !caught(0.5) && !caught(0.89));
    }
}
