//! Posterior densities into weighted draws and their integral, by adaptive importance sampling.
//!
//! A [`Density`] of up to [`MOST_DIMENSIONS`] coordinates and starts for its peaks go in; draws with
//! weights, the logarithm of the integral with its error, and diagnostics come out. The proposal is
//! a mixture of multivariate t about the peaks, refitted to the weighted draws in rounds; draws of all
//! rounds count, each under the mixture of all proposals (Cornuet et al. 2012,
//! doi:10.1111/j.1467-9469.2011.00756.x). Everything follows from the generator handed in.

mod ensemble;
mod importance;
pub(crate) mod matrix;
mod mixture;
mod pareto;
mod peak;

pub use ensemble::{EnsembleSettings, settle};
pub use importance::{Doubt, Draws, ImportanceSettings, Quality, sample};
pub use matrix::{MOST_DIMENSIONS, Matrix, Point, padded};
pub use mixture::StudentMixture;
pub(crate) use mixture::uniform;
pub use pareto::tail_shape;
pub use peak::{Peak, ascend, climb};

/// A density that is known up to a constant.
///
/// Coordinates reach from minus to plus infinity; where one is bounded, the density is zero outside.
pub trait Density {
    /// Number of coordinates, 1 to [`MOST_DIMENSIONS`].
    fn dimensions(&self) -> usize;

    /// Natural logarithm of the density at a point, minus infinity where it is zero. Only the first
    /// [`Density::dimensions`] coordinates count. Equal points give equal values.
    fn ln(&mut self, point: &Point) -> f64;
}

impl<D: Density + ?Sized> Density for &mut D {
    fn dimensions(&self) -> usize {
        (**self).dimensions()
    }

    fn ln(&mut self, point: &Point) -> f64 {
        (**self).ln(point)
    }
}
