//! Problems that cannot be started on.

use super::MAX_PARAMETERS;

/// Why a search could not begin.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum LeastSquaresError {
    /// No parameters, or more than the fixed-size linear algebra holds.
    #[error("found {found} parameters, expected 1 to {MAX_PARAMETERS}")]
    ParameterCount {
        /// Number of parameters of the problem.
        found: usize,
    },
    /// Fewer residuals than parameters to fit.
    #[error(
        "found {residuals} residuals for {parameters} free parameters, expected at least as many"
    )]
    TooFewResiduals {
        /// Number of residuals of the problem.
        residuals: usize,
        /// Number of parameters whose interval is more than a single value.
        parameters: usize,
    },
    /// Start or bounds of another length than the problem's parameters.
    #[error("found {found} values in {name}, expected {expected}, one a parameter")]
    Length {
        /// `start` or `bounds`.
        name: &'static str,
        /// Its length.
        found: usize,
        /// Number of parameters of the problem.
        expected: usize,
    },
    /// An interval that is empty or not a number.
    #[error("found bounds {lower} to {upper} for parameter {parameter}, expected lower <= upper")]
    Bounds {
        /// Index of the parameter.
        parameter: usize,
        /// Its lower bound.
        lower: f64,
        /// Its upper bound.
        upper: f64,
    },
    /// A start that is not finite or outside its interval.
    #[error(
        "found start {found} for parameter {parameter}, expected a number from {lower} to {upper}"
    )]
    Start {
        /// Index of the parameter.
        parameter: usize,
        /// Its start.
        found: f64,
        /// Its lower bound.
        lower: f64,
        /// Its upper bound.
        upper: f64,
    },
    /// A residual that is not finite, or too large to square, at the start.
    #[error(
        "found residual {found} at index {residual} at the start, expected a number whose square is finite"
    )]
    StartResidual {
        /// Index of the residual.
        residual: usize,
        /// Its value.
        found: f64,
    },
    /// A derivative that is not finite, or too large to square, at the start.
    #[error(
        "found derivative {found} of residual {residual} by parameter {parameter} at the start, expected a number whose square is finite"
    )]
    StartJacobian {
        /// Index of the residual.
        residual: usize,
        /// Index of the parameter.
        parameter: usize,
        /// The derivative.
        found: f64,
    },
    /// A setting that is negative or not finite.
    #[error(
        "found {name} = {found}, expected a finite number of at least 0, the radius more than 0"
    )]
    Setting {
        /// Field of `Settings`.
        name: &'static str,
        /// Its value.
        found: f64,
    },
}

impl LeastSquaresError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        let hint = match self {
            Self::TooFewResiduals { .. } => "widen the window, or hold parameters fixed",
            Self::Start { .. } => "move the start to the nearest value inside its bounds",
            Self::StartResidual { .. } | Self::StartJacobian { .. } => {
                "start where the model is defined, and mask channels that are not finite"
            }
            Self::Bounds { .. } => "swap or correct the bounds",
            Self::ParameterCount { .. } | Self::Length { .. } | Self::Setting { .. } => {
                return None;
            }
        };
        Some(hint.to_owned())
    }
}
