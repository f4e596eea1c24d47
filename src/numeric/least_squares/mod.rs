//! Bounded nonlinear least squares for small dense problems.
//!
//! A [`LeastSquares`] problem (1 to [`MAX_PARAMETERS`] parameters, any number of residuals), a start
//! and a box go in; the [`Minimum`] of chi2 = `sum_i r_i^2` inside the box comes out, with the curvature
//! from which [`Minimum::covariance`] follows. Damped Gauss-Newton steps after Levenberg (1944,
//! Quart. Appl. Math. 2, 164) and Marquardt (1963, J. SIAM 11, 431), the damping set by a trusted radius
//! and the parameters scaled by column norms after Moré (1978, Lecture Notes in Mathematics 630, 105).
//! [`minimize`] is the direct call; [`LevenbergMarquardt`] is the same steps as an argmin `Solver`. No
//! multi-start, no robust loss, no numerical derivatives.

mod bounds;
mod check;
mod dense;
mod descent;
mod error;
mod minimum;
mod settings;
mod solver;
mod structure;
mod termination;

pub use bounds::{Interval, Side, unbounded};
pub use check::check_jacobian;
pub use dense::{MAX_PARAMETERS, NormalEquations};
pub use descent::{Descent, Workspace};
pub use error::LeastSquaresError;
pub use minimum::{Covariance, CovarianceError, Minimum};
pub use settings::Settings;
pub use solver::LevenbergMarquardt;
pub use structure::{MAX_BLOCKS, RowBlock, Structure};
pub use termination::Termination;

/// Residuals and their derivatives.
///
/// `evaluate` takes `&mut self` so that a model can hold scratch buffers; for equal parameters it
/// must give equal results. A model that is undefined at some parameters writes a non-finite
/// residual there: the step is then rejected like one that raises chi2.
pub trait LeastSquares {
    /// Number of parameters n.
    fn parameters(&self) -> usize;

    /// Number of residuals m.
    fn residuals(&self) -> usize;

    /// Which residuals depend on which parameters: all on all, unless a problem says otherwise.
    fn structure(&self) -> Structure {
        Structure::dense(self.residuals(), self.parameters())
    }

    /// The residuals into `residuals` (length m) and, when asked for, their derivatives into
    /// `jacobian`, stored as [`LeastSquares::structure`] says: where all depend on all, column by
    /// column, that of residual i by parameter j at `jacobian[j * m + i]`.
    ///
    /// Every element must be written; the buffers hold old numbers.
    fn evaluate(&mut self, parameters: &[f64], residuals: &mut [f64], jacobian: Option<&mut [f64]>);
}

impl<P: LeastSquares + ?Sized> LeastSquares for &mut P {
    fn parameters(&self) -> usize {
        (**self).parameters()
    }

    fn residuals(&self) -> usize {
        (**self).residuals()
    }

    fn structure(&self) -> Structure {
        (**self).structure()
    }

    fn evaluate(
        &mut self,
        parameters: &[f64],
        residuals: &mut [f64],
        jacobian: Option<&mut [f64]>,
    ) {
        (**self).evaluate(parameters, residuals, jacobian);
    }
}

/// What a [`Descent`] asks of a problem. Every [`LeastSquares`] problem answers with residuals and a
/// Jacobian; one that has chi2 and its derivatives cheaper answers with those sums.
pub trait Linearise {
    /// Numbers of residuals m, which chi2 is a sum over, and of parameters n.
    fn sizes(&self) -> (usize, usize);

    /// How residuals and Jacobian are stored; empty where sums take their place.
    fn storage(&self) -> Structure;

    /// The sums at some parameters; or `None`, with residuals and Jacobian in the buffers, stored as
    /// [`Linearise::storage`] says. Where sums lose too many digits for a step, it is damped.
    fn linearise(
        &mut self,
        parameters: &[f64],
        residuals: &mut [f64],
        jacobian: &mut [f64],
    ) -> Option<&NormalEquations>;
}

impl<P: LeastSquares + ?Sized> Linearise for P {
    fn sizes(&self) -> (usize, usize) {
        (self.residuals(), self.parameters())
    }

    fn storage(&self) -> Structure {
        self.structure()
    }

    fn linearise(
        &mut self,
        parameters: &[f64],
        residuals: &mut [f64],
        jacobian: &mut [f64],
    ) -> Option<&NormalEquations> {
        self.evaluate(parameters, residuals, Some(jacobian));
        None
    }
}

/// The minimum of chi2 = `sum_i r_i^2` reached from `start` inside `bounds` (one interval a parameter).
///
/// Allocates only the returned value, and buffers where `workspace` is too small. Whether the
/// search converged stands in [`Minimum::termination`].
///
/// # Errors
/// [`LeastSquaresError`] for sizes, bounds, settings or a start that cannot be used; a search that
/// ends without convergence is not an error.
///
/// # Examples
/// The straight line through (0, 1), (1, 3), (2, 5) with the slope held below 1.5:
/// ```
/// use inrush::numeric::least_squares::{minimize, Interval, LeastSquares, Settings, Side, Workspace};
///
/// struct Line;
/// impl LeastSquares for Line {
///     fn parameters(&self) -> usize { 2 }
///     fn residuals(&self) -> usize { 3 }
///     fn evaluate(&mut self, p: &[f64], residuals: &mut [f64], jacobian: Option<&mut [f64]>) {
///         for (i, y) in [1.0, 3.0, 5.0].into_iter().enumerate() {
///             residuals[i] = p[0] + p[1] * i as f64 - y;
///         }
///         if let Some(jacobian) = jacobian {
///             jacobian.copy_from_slice(&[1.0, 1.0, 1.0, 0.0, 1.0, 2.0]);
///         }
///     }
/// }
///
/// let bounds = [Interval::UNBOUNDED, Interval::at_most(1.5)];
/// let minimum = minimize(&mut Line, &[0.0, 0.0], &bounds, &Settings::default(), &mut Workspace::new())?;
/// assert!(minimum.termination.converged());
/// assert!((minimum.parameters[0] - 1.5).abs() < 1e-9);
/// assert_eq!(minimum.at_bound, [None, Some(Side::Upper)]);
/// # Ok::<(), inrush::numeric::least_squares::LeastSquaresError>(())
/// ```
pub fn minimize<P: Linearise + ?Sized>(
    problem: &mut P,
    start: &[f64],
    bounds: &[Interval],
    settings: &Settings,
    workspace: &mut Workspace,
) -> Result<Minimum, LeastSquaresError> {
    let mut descent = Descent::begin(problem, start, bounds, settings, workspace)?;
    loop {
        if let Some(termination) = descent.step(problem, bounds, settings, workspace) {
            return Ok(descent.finish(termination, bounds, workspace));
        }
    }
}

#[cfg(test)]
mod tests;
