//! Where a search ended, and how well the residuals determine it.

use super::dense::{self, MAX_PARAMETERS};
use super::{Side, Termination};

/// Smallest part of a Jacobian column, relative to its norm, independent of the columns before it for
/// which there are standard errors: rounding (2e-16) leaves them about four digits there.
const DEPENDENCE: f64 = 1e-12;

/// The end of a search.
#[derive(Clone, Debug, PartialEq)]
pub struct Minimum {
    /// The best parameters found, in the units of the problem.
    pub parameters: Vec<f64>,
    /// chi2 there, the sum of squares of the residuals.
    pub chi2: f64,
    /// Calls of the model.
    pub evaluations: usize,
    /// Steps tried.
    pub iterations: usize,
    /// Why the search ended.
    pub termination: Termination,
    /// The bound each parameter sits on, if any.
    pub at_bound: Vec<Option<Side>>,
    /// Number of residuals.
    pub residuals: usize,
    pub(super) curvature: Curvature,
}

/// The triangle R of the Jacobian's free columns, R^T R = J^T J.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Curvature {
    /// Indices of the parameters that sit on no bound.
    pub free: Vec<usize>,
    /// R, column by column, `free.len()` rows.
    pub triangle: Vec<f64>,
}

impl Minimum {
    /// Residuals less the parameters that sit on no bound.
    #[must_use]
    pub fn degrees_of_freedom(&self) -> usize {
        self.residuals.saturating_sub(self.curvature.free.len())
    }

    /// (J^T J)^-1 over the parameters that sit on no bound: their covariance for residuals in units of
    /// the noise. Multiply by chi2 / degrees of freedom where the noise is known only up to a factor.
    ///
    /// # Errors
    /// [`CovarianceError`] naming the first parameter that the residuals do not determine.
    pub fn covariance(&self) -> Result<Covariance, CovarianceError> {
        let Curvature { free, triangle } = &self.curvature;
        let size = free.len();
        // R^-1, column by column, by back substitution on the columns of the identity.
        let mut inverse = [[0.0; MAX_PARAMETERS]; MAX_PARAMETERS];
        for k in 0..size {
            let column = &triangle[k * size..=k * size + k];
            let norm = dense::sum_of_squares(column).sqrt();
            let independent = column[k].abs();
            if norm == 0.0 {
                return Err(CovarianceError::NoInfluence { parameter: free[k] });
            }
            if independent.is_nan() || independent <= DEPENDENCE * norm {
                return Err(CovarianceError::Dependent {
                    parameter: free[k],
                    independent_fraction: independent / norm,
                });
            }
            inverse[k][k] = 1.0 / column[k];
            for row in (0..k).rev() {
                let sum: f64 = (row + 1..=k)
                    .map(|i| triangle[i * size + row] * inverse[i][k])
                    .sum();
                inverse[row][k] = -sum / triangle[row * size + row];
            }
        }
        let parameters = self.parameters.len();
        let mut matrix = vec![None; parameters * parameters];
        for i in 0..size {
            for j in 0..size {
                let element = (i.max(j)..size)
                    .map(|k| inverse[i][k] * inverse[j][k])
                    .sum();
                matrix[free[i] * parameters + free[j]] = Some(element);
            }
        }
        Ok(Covariance { parameters, matrix })
    }
}

/// A covariance matrix with gaps where a parameter sits on a bound.
#[derive(Clone, Debug, PartialEq)]
pub struct Covariance {
    parameters: usize,
    matrix: Vec<Option<f64>>,
}

impl Covariance {
    /// Covariance of parameters `i` and `j`; `None` where either sits on a bound.
    #[must_use]
    pub fn get(&self, i: usize, j: usize) -> Option<f64> {
        self.matrix[i * self.parameters + j]
    }

    /// Standard error of parameter `i`; `None` where it sits on a bound.
    #[must_use]
    pub fn standard_error(&self, i: usize) -> Option<f64> {
        self.get(i, i).map(f64::sqrt)
    }

    /// Correlation of parameters `i` and `j`, from -1 to 1; `None` where either sits on a bound.
    #[must_use]
    pub fn correlation(&self, i: usize, j: usize) -> Option<f64> {
        Some(self.get(i, j)? / (self.standard_error(i)? * self.standard_error(j)?))
    }
}

/// Why there is no covariance.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
pub enum CovarianceError {
    /// No residual changes with the parameter.
    #[error("no residual depends on parameter {parameter}, expected at least one that does")]
    NoInfluence {
        /// Index of the parameter.
        parameter: usize,
    },
    /// A change of the parameter can be undone by changes of those before it.
    #[error(
        "the effect of parameter {parameter} is independent of the parameters before it to a fraction of {independent_fraction:.1e}, expected more than {DEPENDENCE:e}"
    )]
    Dependent {
        /// Index of the parameter.
        parameter: usize,
        /// Norm of the independent part of its Jacobian column over the norm of the column.
        independent_fraction: f64,
    },
}

impl CovarianceError {
    /// Index of the parameter that is not determined.
    #[must_use]
    pub const fn parameter(&self) -> usize {
        match self {
            Self::NoInfluence { parameter } | Self::Dependent { parameter, .. } => *parameter,
        }
    }

    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        Some("hold the parameter fixed, or use a model with fewer parameters".to_owned())
    }
}
