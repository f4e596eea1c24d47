//! When a search ends and how it begins.

use super::LeastSquaresError;

/// Limits of a search. The defaults suit residuals with noise in them.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Settings {
    /// Most calls of the model, the start included. Default 1000.
    pub max_evaluations: usize,
    /// Converged when a full Gauss-Newton step is expected to lower chi2 by no more than this times
    /// chi2 / (degrees of freedom). The ratio is the sum of squares of the remaining parameter
    /// shifts in units of their (residual-scaled) standard errors, the square of the relative
    /// offset of Bates & Watts (1981, Technometrics 23, 179). Default 1e-8: 1e-4 of a standard error.
    pub chi2_tolerance: f64,
    /// Converged when a full Gauss-Newton step is no longer than this times the parameter vector,
    /// both with each parameter multiplied by the norm of its Jacobian column. Ends fits without
    /// noise. Default 1e-12.
    pub step_tolerance: f64,
    /// Converged when the cosine of the angle between the residuals and every Jacobian column of a
    /// parameter free to move is no larger than this. Default 1e-12.
    pub gradient_tolerance: f64,
    /// Length of the first step at most, in units of the start's length (or of 0.03 of the residuals'
    /// norm where that is more), both with each parameter multiplied by the norm of its Jacobian
    /// column. Default 1; more than 0.
    pub initial_radius: f64,
}

impl Default for Settings {
    fn default() -> Self {
        Self {
            max_evaluations: 1000,
            chi2_tolerance: 1e-8,
            step_tolerance: 1e-12,
            gradient_tolerance: 1e-12,
            initial_radius: 1.0,
        }
    }
}

impl Settings {
    pub(super) fn validate(&self) -> Result<(), LeastSquaresError> {
        let settings = [
            ("chi2_tolerance", self.chi2_tolerance),
            ("step_tolerance", self.step_tolerance),
            ("gradient_tolerance", self.gradient_tolerance),
            ("initial_radius", self.initial_radius),
        ];
        for (name, found) in settings {
            let usable = found > 0.0 || (found == 0.0 && name != "initial_radius");
            if !(found.is_finite() && usable) {
                return Err(LeastSquaresError::Setting { name, found });
            }
        }
        Ok(())
    }
}
