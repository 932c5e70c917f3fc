//! Small symmetric matrices: information matrices and their inverses.

/// A symmetric matrix of N rows. Both triangles are kept, which for N up to 5 costs less than the
/// bookkeeping of one.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Symmetric<const N: usize> {
    rows: [[f64; N]; N],
}

/// The lower triangle L with L·Lᵀ = M of a positive definite matrix M.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Cholesky<const N: usize> {
    lower: [[f64; N]; N],
}

impl<const N: usize> Symmetric<N> {
    /// Zero but for the diagonal given.
    pub fn diagonal(values: [f64; N]) -> Self {
        let mut rows = [[0.0; N]; N];
        for (i, value) in values.into_iter().enumerate() {
            rows[i][i] = value;
        }
        Symmetric { rows }
    }

    /// The element of row `i` and column `j`, both below N.
    pub fn at(&self, i: usize, j: usize) -> f64 {
        self.rows[i][j]
    }

    /// Adds `weight` · x xᵀ: what one measurement with design row x adds to an information matrix.
    pub fn add_outer(&mut self, weight: f64, x: &[f64; N]) {
        for (row, xi) in self.rows.iter_mut().zip(x) {
            for (element, xj) in row.iter_mut().zip(x) {
                *element += weight * xi * xj;
            }
        }
    }

    /// M x.
    pub fn times(&self, x: &[f64; N]) -> [f64; N] {
        let mut product = [0.0; N];
        for (out, row) in product.iter_mut().zip(&self.rows) {
            *out = row.iter().zip(x).map(|(m, v)| m * v).sum();
        }
        product
    }

    /// xᵀ M x.
    pub fn quadratic(&self, x: &[f64; N]) -> f64 {
        self.times(x).iter().zip(x).map(|(m, v)| m * v).sum()
    }

    /// Turns a covariance C = M⁻¹ into that after one more measurement with design row x:
    /// (M + w x xᵀ)⁻¹ = C − w C x xᵀ C / (1 + w xᵀ C x) (Sherman & Morrison 1950, Annals of
    /// Mathematical Statistics 21, 124).
    pub fn condition_on(&mut self, weight: f64, x: &[f64; N]) {
        let cx = self.times(x);
        let spread: f64 = cx.iter().zip(x).map(|(c, v)| c * v).sum();
        self.add_outer(-weight / (1.0 + weight * spread), &cx);
    }

    /// Cholesky's decomposition; `None` when the matrix is not positive definite to working
    /// precision (or holds a NaN).
    pub fn cholesky(&self) -> Option<Cholesky<N>> {
        let mut lower = [[0.0; N]; N];
        for i in 0..N {
            for j in 0..=i {
                let before: f64 = (0..j).map(|k| lower[i][k] * lower[j][k]).sum();
                let rest = self.rows[i][j] - before;
                if i == j {
                    if rest.is_nan() || rest <= self.rows[i][i] * f64::EPSILON {
                        return None;
                    }
                    lower[i][i] = rest.sqrt();
                } else {
                    lower[i][j] = rest / lower[j][j];
                }
            }
        }
        Some(Cholesky { lower })
    }
}

impl<const N: usize> Cholesky<N> {
    /// Natural logarithm of the determinant of M.
    pub fn ln_determinant(&self) -> f64 {
        (0..N).map(|i| 2.0 * self.lower[i][i].ln()).sum()
    }

    /// L⁻¹ b.
    fn forward(&self, b: &[f64; N]) -> [f64; N] {
        let mut y = [0.0; N];
        for i in 0..N {
            let before: f64 = (0..i).map(|k| self.lower[i][k] * y[k]).sum();
            y[i] = (b[i] - before) / self.lower[i][i];
        }
        y
    }

    /// The x with M x = b.
    pub fn solve(&self, b: &[f64; N]) -> [f64; N] {
        let y = self.forward(b);
        let mut x = [0.0; N];
        for i in (0..N).rev() {
            let after: f64 = (i + 1..N).map(|k| self.lower[k][i] * x[k]).sum();
            x[i] = (y[i] - after) / self.lower[i][i];
        }
        x
    }

    /// xᵀ M⁻¹ x.
    pub fn inverse_quadratic(&self, x: &[f64; N]) -> f64 {
        self.forward(x).iter().map(|v| v * v).sum()
    }

    /// M⁻¹.
    pub fn inverse(&self) -> Symmetric<N> {
        let mut rows = [[0.0; N]; N];
        for (i, row) in rows.iter_mut().enumerate() {
            let mut unit = [0.0; N];
            unit[i] = 1.0;
            *row = self.solve(&unit);
        }
        Symmetric { rows }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn row() -> impl Strategy<Value = [f64; 3]> {
        [-2.0f64..2.0, -2.0f64..2.0, -2.0f64..2.0]
    }

    fn information() -> impl Strategy<Value = Symmetric<3>> {
        proptest::collection::vec((0.1f64..3.0, row()), 0..8).prop_map(|visits| {
            let mut m = Symmetric::diagonal([0.5, 0.7, 0.9]);
            for (weight, x) in visits {
                m.add_outer(weight, &x);
            }
            m
        })
    }

    /// By Sarrus' rule, apart from the code under test.
    fn determinant(m: &Symmetric<3>) -> f64 {
        let a = |i: usize, j: usize| m.at(i, j);
        a(0, 0) * (a(1, 1) * a(2, 2) - a(1, 2) * a(2, 1))
            - a(0, 1) * (a(1, 0) * a(2, 2) - a(1, 2) * a(2, 0))
            + a(0, 2) * (a(1, 0) * a(2, 1) - a(1, 1) * a(2, 0))
    }

    proptest! {
        #[test]
        fn decomposition_agrees_with_sarrus_and_undoes_the_product(m in information(), x in row()) {
            let cholesky = m.cholesky().unwrap();
            prop_assert!((cholesky.ln_determinant() - determinant(&m).ln()).abs() < 1e-9);
            let back = cholesky.solve(&m.times(&x));
            for (a, b) in back.iter().zip(&x) {
                prop_assert!((a - b).abs() < 1e-8);
            }
            let inverse = cholesky.inverse();
            prop_assert!((inverse.quadratic(&x) - cholesky.inverse_quadratic(&x)).abs() < 1e-8);
        }

        #[test]
        fn one_more_measurement_by_update_or_afresh(m in information(), x in row(), w in 0.0f64..5.0) {
            let mut updated = m.cholesky().unwrap().inverse();
            updated.condition_on(w, &x);
            let mut afresh = m;
            afresh.add_outer(w, &x);
            let inverse = afresh.cholesky().unwrap().inverse();
            for i in 0..3 {
                for j in 0..3 {
                    prop_assert!((updated.at(i, j) - inverse.at(i, j)).abs() < 1e-9);
                }
            }
        }
    }

    #[test]
    fn refuses_what_is_not_positive_definite() {
        let mut m = Symmetric::diagonal([0.0; 2]);
        m.add_outer(1.0, &[1.0, 1.0]);
        assert!(m.cholesky().is_none());
        assert!(Symmetric::diagonal([1.0, f64::NAN]).cholesky().is_none());
    }
}
