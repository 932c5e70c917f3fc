//! Where a function of one variable changes sign.

use thiserror::Error;

/// Why a root could not be found.
#[derive(Clone, Copy, Debug, PartialEq, Error)]
pub enum RootError {
    /// Both ends have the same sign.
    #[error(
        "no sign change between {from} and {to}: the function is {at_from} and {at_to} there; \
         give an interval whose ends have opposite signs"
    )]
    NotBracketed {
        /// First end.
        from: f64,
        /// Second end.
        to: f64,
        /// Value at the first end.
        at_from: f64,
        /// Value at the second end.
        at_to: f64,
    },
    /// A value is not a number or infinite.
    #[error("the function has no finite value at {at}")]
    NotFinite {
        /// Where.
        at: f64,
    },
}

/// A root between `from` and `to`, to within `tolerance` in the variable (Chandrupatla 1997,
/// Advances in Engineering Software 28, 145: inverse quadratic interpolation where it is safe,
/// bisection elsewhere). The bracket never opens, so the answer always lies inside.
///
/// # Errors
/// [`RootError`] when the ends do not bracket a root or a value is not finite.
pub fn bracketed_root(
    f: impl Fn(f64) -> f64,
    from: f64,
    to: f64,
    tolerance: f64,
) -> Result<f64, RootError> {
    let checked = |x: f64| {
        let value = f(x);
        if value.is_finite() {
            Ok(value)
        } else {
            Err(RootError::NotFinite { at: x })
        }
    };
    let (mut x1, mut x2) = (to, from);
    let (mut f1, mut f2) = (checked(to)?, checked(from)?);
    if f1 != 0.0 && f2 != 0.0 && (f1 > 0.0) == (f2 > 0.0) {
        return Err(RootError::NotBracketed {
            from,
            to,
            at_from: f2,
            at_to: f1,
        });
    }
    let mut share: f64 = 0.5;
    loop {
        let (best, best_value) = if f2.abs() < f1.abs() {
            (x2, f2)
        } else {
            (x1, f1)
        };
        let width = (x2 - x1).abs();
        let least = 0.5 * tolerance + 2.0 * f64::EPSILON * best.abs();
        if best_value == 0.0 || width <= 2.0 * least {
            return Ok(best);
        }
        let lowest_share = least / width;
        let x = x1 + share.clamp(lowest_share, 1.0 - lowest_share) * (x2 - x1);
        let value = checked(x)?;
        let (x3, f3);
        if (value > 0.0) == (f1 > 0.0) {
            (x3, f3) = (x1, f1);
        } else {
            (x3, f3) = (x2, f2);
            (x2, f2) = (x1, f1);
        }
        (x1, f1) = (x, value);
        let xi = (x1 - x2) / (x3 - x2);
        let phi = (f1 - f2) / (f3 - f2);
        let interpolate = phi * phi < xi && (1.0 - phi) * (1.0 - phi) < 1.0 - xi;
        share = if interpolate {
            f1 / (f2 - f1) * f3 / (f2 - f3)
                + (x3 - x1) / (x2 - x1) * f1 / (f3 - f1) * f2 / (f3 - f2)
        } else {
            0.5
        };
    }
}

/// A change of sign. Zero counts as positive.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Crossing {
    /// Where.
    pub at: f64,
    /// From negative to positive.
    pub rising: bool,
}

/// Where to look for crossings.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Search {
    /// Start of the interval, inside it.
    pub from: f64,
    /// End of the interval, outside it.
    pub to: f64,
    /// Largest distance between samples. The function must have at most one turning point within
    /// any two neighbouring steps; then no crossing is missed, however close to the next it lies.
    pub step: f64,
    /// How sharply a crossing is placed.
    pub tolerance: f64,
}

/// Every change of sign in `from ≤ x < to`, in order.
///
/// Samples whose neighbours show a turning point towards zero without reaching it are searched
/// for the hidden pair of crossings. The function is sampled up to one step beyond both ends, so
/// that a turning point near an end is seen too; it must be finite everywhere there.
///
/// # Errors
/// [`RootError::NotFinite`] where the function has no value.
pub fn crossings(f: impl Fn(f64) -> f64, search: Search) -> Result<Vec<Crossing>, RootError> {
    let steps = ((search.to - search.from) / search.step).ceil().max(1.0);
    let step = (search.to - search.from) / steps;
    let samples: Vec<(f64, f64)> = (-1..=steps as i64 + 1)
        .map(|i| search.from + step * i as f64)
        .map(|x| (x, f(x)))
        .collect();
    if let Some(&(at, _)) = samples.iter().find(|(_, value)| !value.is_finite()) {
        return Err(RootError::NotFinite { at });
    }
    let mut points = vec![samples[0]];
    for three in samples.windows(3) {
        points.extend(hidden_excursion(&f, three, search.tolerance));
        points.push(three[1]);
    }
    points.extend(samples.last());
    points.sort_by(|a, b| a.0.total_cmp(&b.0));
    let mut found = Vec::new();
    for pair in points.windows(2) {
        let (before, after) = (pair[0], pair[1]);
        let (was, is) = (before.1 >= 0.0, after.1 >= 0.0);
        if was == is {
            continue;
        }
        let at = bracketed_root(&f, before.0, after.0, search.tolerance)?;
        if at >= search.from && at < search.to {
            found.push(Crossing { at, rising: is });
        }
    }
    Ok(found)
}

/// The tip of a turning point that reaches past zero between three samples of one sign, by golden
/// section; it stops at the first point past zero.
fn hidden_excursion(
    f: impl Fn(f64) -> f64,
    three: &[(f64, f64)],
    tolerance: f64,
) -> Option<(f64, f64)> {
    const GOLDEN: f64 = 0.618_033_988_749_894_9;
    let (left, middle, right) = (three[0], three[1], three[2]);
    let positive = middle.1 >= 0.0;
    if (left.1 >= 0.0) != positive || (right.1 >= 0.0) != positive {
        return None;
    }
    let nearer = |a: f64, b: f64| if positive { a < b } else { a > b };
    if nearer(left.1, middle.1) || nearer(right.1, middle.1) {
        return None;
    }
    let (mut low, mut high) = (left.0, right.0);
    let mut inner = [high - GOLDEN * (high - low), low + GOLDEN * (high - low)];
    let mut values = [f(inner[0]), f(inner[1])];
    while high - low > tolerance {
        for (x, value) in inner.iter().zip(values) {
            if (value >= 0.0) != positive {
                return Some((*x, value));
            }
        }
        if nearer(values[0], values[1]) {
            high = inner[1];
            inner = [high - GOLDEN * (high - low), inner[0]];
            values = [f(inner[0]), values[0]];
        } else {
            low = inner[0];
            inner = [inner[1], low + GOLDEN * (high - low)];
            values = [values[1], f(inner[1])];
        }
    }
    None
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn search(from: f64, to: f64) -> Search {
        Search {
            from,
            to,
            step: 0.3,
            tolerance: 1e-10,
        }
    }

    #[test]
    fn finds_known_roots() {
        let check = |f: fn(f64) -> f64, from: f64, to: f64, root: f64| {
            let found = bracketed_root(f, from, to, 1e-12).unwrap();
            assert!((found - root).abs() < 1e-11, "{found} {root}");
        };
        check(|x| x.cos(), 0.0, 3.0, std::f64::consts::FRAC_PI_2);
        check(|x| x * x * x - 2.0, 0.0, 5.0, 2f64.cbrt());
        check(|x| (x - 1.0).powi(9), 0.0, 2.7, 1.0);
        check(|x| x, 0.0, 1.0, 0.0);
        // Dottie's number, the root of cos x = x (OEIS A003957).
        check(|x| x.cos() - x, 0.0, 1.0, 0.739_085_133_215_160_6);
    }

    #[test]
    fn says_why_there_is_no_root() {
        assert!(matches!(
            bracketed_root(|x| x * x + 1.0, -1.0, 1.0, 1e-9),
            Err(RootError::NotBracketed { .. })
        ));
        assert!(matches!(
            bracketed_root(|_| f64::NAN, -1.0, 1.0, 1e-9),
            Err(RootError::NotFinite { .. })
        ));
    }

    #[test]
    fn sees_pairs_far_closer_than_the_step() {
        for height in [1.0 - 1e-9, 1.0 - 1e-6, -1.0 + 1e-9, 0.0, 0.99] {
            let found = crossings(|x| x.sin() - height, search(0.0, 12.0)).unwrap();
            assert_eq!(found.len(), 4, "{height}");
            assert!(found.windows(2).all(|p| p[0].rising != p[1].rising));
        }
        assert!(
            crossings(|x| x.sin() - 1.000001, search(0.0, 12.0))
                .unwrap()
                .is_empty()
        );
    }

    proptest! {
        #[test]
        fn misses_no_crossing_of_a_wave(phase in 0.0f64..6.2, height in -0.999f64..0.999, from in -3.0f64..3.0) {
            let to = from + 6.0;
            let found = crossings(|x| (x + phase).sin() - height, search(from, to)).unwrap();
            let base = height.asin() - phase;
            let mut expected: Vec<f64> = (-3..=3)
                .flat_map(|k| {
                    let turn = std::f64::consts::TAU * f64::from(k);
                    [base + turn, std::f64::consts::PI - height.asin() - phase + turn]
                })
                .filter(|x| *x >= from && *x < to)
                .collect();
            expected.sort_by(f64::total_cmp);
            prop_assert_eq!(found.len(), expected.len());
            for (f, e) in found.iter().zip(expected) {
                prop_assert!((f.at - e).abs() < 1e-8);
            }
        }
    }
}
