//! Polynomials of low order over a scaled axis, fitted by orthogonal decomposition.

/// A polynomial as a sum of Legendre polynomials over an axis scaled to [-1, 1].
#[derive(Clone, Debug, PartialEq)]
pub struct Polynomial {
    axis: ScaledAxis,
    coefficients: Vec<f64>,
}

/// x to (x - `centre`)/`half_range`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ScaledAxis {
    centre: f64,
    half_range: f64,
}

impl ScaledAxis {
    /// The scale that takes `low` to -1 and `high` to 1.
    #[must_use]
    pub fn new(low: f64, high: f64) -> Self {
        let half_range = 0.5 * (high - low);
        Self {
            centre: 0.5 * (low + high),
            half_range: if half_range > 0.0 { half_range } else { 1.0 },
        }
    }

    /// The Legendre polynomials 0 to 3 at x.
    #[must_use]
    pub fn basis(&self, x: f64) -> [f64; 4] {
        let t = (x - self.centre) / self.half_range;
        [1.0, t, 1.5 * t * t - 0.5, (2.5 * t * t - 1.5) * t]
    }
}

/// The triangular factor of the basis over a set of points: what a fit on them needs.
#[derive(Clone, Debug)]
pub struct Factor {
    axis: ScaledAxis,
    terms: usize,
    /// Lower triangle of the Cholesky factor of the normal matrix, row by row.
    lower: [[f64; 4]; 4],
}

impl Factor {
    /// Factorises the polynomial basis of an order (0 to 3) over the points `x`.
    ///
    /// `None` where the order is above 3 or the points cannot determine it.
    #[must_use]
    pub fn new(axis: ScaledAxis, order: usize, x: impl Iterator<Item = f64>) -> Option<Self> {
        if order > 3 {
            return None;
        }
        let terms = order + 1;
        let mut normal = [[0.0; 4]; 4];
        for point in x {
            let basis = axis.basis(point);
            for row in 0..terms {
                for column in 0..=row {
                    normal[row][column] += basis[row] * basis[column];
                }
            }
        }
        let mut lower = [[0.0_f64; 4]; 4];
        for row in 0..terms {
            for column in 0..=row {
                let inner: f64 = (0..column).map(|k| lower[row][k] * lower[column][k]).sum();
                let rest = normal[row][column] - inner;
                if row == column {
                    // A pivot this far below its diagonal holds rounding only.
                    if rest.is_nan() || rest <= 1e-12 * normal[row][row] {
                        return None;
                    }
                    lower[row][row] = rest.sqrt();
                } else {
                    lower[row][column] = rest / lower[column][column];
                }
            }
        }
        Some(Self { axis, terms, lower })
    }

    /// Solves the normal equations for a right-hand side (entries beyond the order are ignored).
    #[must_use]
    pub fn solve(&self, right: [f64; 4]) -> [f64; 4] {
        let mut solution = [0.0; 4];
        for row in 0..self.terms {
            let inner: f64 = (0..row).map(|k| self.lower[row][k] * solution[k]).sum();
            solution[row] = (right[row] - inner) / self.lower[row][row];
        }
        for row in (0..self.terms).rev() {
            let inner: f64 = (row + 1..self.terms)
                .map(|k| self.lower[k][row] * solution[k])
                .sum();
            solution[row] = (solution[row] - inner) / self.lower[row][row];
        }
        solution
    }

    /// Variance of the fitted polynomial at x for values of unit variance, b^T (B^T B)^-1 b.
    #[must_use]
    pub fn leverage(&self, x: f64) -> f64 {
        let basis = self.axis.basis(x);
        let solution = self.solve(basis);
        (0..self.terms).map(|k| basis[k] * solution[k]).sum()
    }

    /// The axis scale.
    #[must_use]
    pub fn axis(&self) -> ScaledAxis {
        self.axis
    }

    /// Number of terms, order + 1.
    #[must_use]
    pub fn terms(&self) -> usize {
        self.terms
    }

    /// Least-squares polynomial through points, which must be those of the factor.
    pub fn fit(&self, points: impl Iterator<Item = (f64, f64)>) -> Polynomial {
        let mut right = [0.0; 4];
        for (x, y) in points {
            let basis = self.axis.basis(x);
            for (sum, value) in right.iter_mut().zip(basis) {
                *sum += value * y;
            }
        }
        Polynomial {
            axis: self.axis,
            coefficients: self.solve(right)[..self.terms].to_vec(),
        }
    }
}

impl Polynomial {
    /// Its value at x.
    #[must_use]
    pub fn evaluate(&self, x: f64) -> f64 {
        self.axis
            .basis(x)
            .iter()
            .zip(&self.coefficients)
            .map(|(basis, coefficient)| basis * coefficient)
            .sum()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn recovers_a_cubic_far_from_the_origin() {
        let x: Vec<f64> = (0..60).map(|i| 1.0e5 + 0.1 * f64::from(i)).collect();
        let cubic = |x: f64| {
            let t = x - 1.0e5 - 3.0;
            1.0 - 0.3 * t + 0.07 * t * t + 0.01 * t * t * t
        };
        // Points at the two ends only, as beside a line.
        let chosen = || x.iter().copied().filter(|v| (v - 1.0e5 - 3.0).abs() > 1.5);
        let axis = ScaledAxis::new(x[0], x[59]);
        let factor = Factor::new(axis, 3, chosen()).unwrap();
        let fitted = factor.fit(chosen().map(|v| (v, cubic(v))));
        for v in x {
            assert!((fitted.evaluate(v) - cubic(v)).abs() < 1e-9);
        }
    }

    #[test]
    fn refuses_what_the_points_cannot_determine() {
        let axis = ScaledAxis::new(0.0, 1.0);
        assert!(Factor::new(axis, 2, [0.1, 0.9, 0.9].into_iter()).is_none());
        assert!(Factor::new(axis, 4, (0..9).map(f64::from)).is_none());
    }
}
