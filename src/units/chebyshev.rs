//! Interpolation of smooth vector functions between Chebyshev points.

use std::f64::consts::PI;

/// A polynomial through the values of a smooth function of `K` components at `N` Chebyshev points
/// of an interval (Press et al., Numerical Recipes, §5.8).
#[derive(Clone, Debug)]
pub struct Chebyshev<const K: usize, const N: usize> {
    middle: f64,
    half_width: f64,
    coefficients: [[f64; K]; N],
}

impl<const K: usize, const N: usize> Chebyshev<K, N> {
    /// Through `f` on `from ≤ x ≤ to`, with `from < to`. `f` is called `N` times.
    pub fn through(from: f64, to: f64, f: impl Fn(f64) -> [f64; K]) -> Self {
        let (middle, half_width) = (0.5 * (from + to), 0.5 * (to - from));
        let mut coefficients = [[0.0; K]; N];
        for node in 0..N {
            let turn = PI * (node as f64 + 0.5) / N as f64;
            let values = f(middle + half_width * turn.cos());
            for (order, sums) in coefficients.iter_mut().enumerate() {
                let share = if order == 0 { 1.0 } else { 2.0 };
                let weight = share / N as f64 * (turn * order as f64).cos();
                for (sum, value) in sums.iter_mut().zip(values) {
                    *sum += weight * value;
                }
            }
        }
        Chebyshev {
            middle,
            half_width,
            coefficients,
        }
    }

    /// The value at `x`, by Clenshaw's recurrence. Outside the interval it runs away quickly.
    pub fn at(&self, x: f64) -> [f64; K] {
        let x = (x - self.middle) / self.half_width;
        let (mut later, mut next) = ([0.0; K], [0.0; K]);
        for order in (1..N).rev() {
            for k in 0..K {
                let this = 2.0 * x * next[k] - later[k] + self.coefficients[order][k];
                later[k] = next[k];
                next[k] = this;
            }
        }
        let mut value = [0.0; K];
        for k in 0..K {
            value[k] = x * next[k] - later[k] + self.coefficients[0][k];
        }
        value
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reproduces_polynomials_exactly_and_smooth_functions_closely() {
        let curve =
            Chebyshev::<2, 7>::through(-3.0, 5.0, |x| [x.powi(6) - 2.0 * x, (0.2 * x).sin()]);
        for x in [-3.0, -1.7, 0.0, 2.2, 5.0_f64] {
            let [polynomial, sine] = curve.at(x);
            assert!((polynomial - (x.powi(6) - 2.0 * x)).abs() < 1e-9, "{x}");
            assert!((sine - (0.2 * x).sin()).abs() < 1e-6, "{x}");
        }
    }
}
