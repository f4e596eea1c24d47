//! Why a search ended.

use argmin::core::{TerminationReason, TerminationStatus};
use std::fmt;

/// Why a search ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Termination {
    /// The expected decrease of chi2 fell below `Settings::chi2_tolerance`.
    Chi2,
    /// The Gauss-Newton step fell below `Settings::step_tolerance`.
    Step,
    /// The gradient fell below `Settings::gradient_tolerance`, or every parameter is pressed
    /// against a bound.
    Gradient,
    /// No step lowers chi2, and the decrease still expected is lost in rounding.
    Rounding,
    /// No step lowers chi2 although the Jacobian promises a decrease.
    Stalled,
    /// `Settings::max_evaluations` calls of the model were made.
    Evaluations,
}

impl Termination {
    /// Whether the search ended at a minimum.
    #[must_use]
    pub const fn converged(self) -> bool {
        match self {
            Self::Chi2 | Self::Step | Self::Gradient | Self::Rounding => true,
            Self::Stalled | Self::Evaluations => false,
        }
    }

    /// The reason in words.
    #[must_use]
    pub const fn text(self) -> &'static str {
        match self {
            Self::Chi2 => "converged: no further decrease of chi2 is expected",
            Self::Step => "converged: the parameters no longer change",
            Self::Gradient => "converged: the gradient of chi2 vanishes",
            Self::Rounding => "converged: a further decrease of chi2 is lost in rounding",
            Self::Stalled => {
                "not converged: no step lowers chi2 although the Jacobian promises a decrease"
            }
            Self::Evaluations => "not converged: the limit of model evaluations was reached",
        }
    }
}

impl fmt::Display for Termination {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.write_str(self.text())
    }
}

impl From<Termination> for TerminationReason {
    fn from(termination: Termination) -> Self {
        match termination {
            Termination::Evaluations => Self::MaxItersReached,
            Termination::Stalled => Self::SolverExit(termination.text().to_owned()),
            Termination::Chi2
            | Termination::Step
            | Termination::Gradient
            | Termination::Rounding => Self::SolverConverged,
        }
    }
}

impl From<Termination> for TerminationStatus {
    fn from(termination: Termination) -> Self {
        Self::Terminated(termination.into())
    }
}
