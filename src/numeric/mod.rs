//! Numbers into numbers: exponentials over slices, least squares, noise processes, robust
//! statistics. No astronomy here.

pub mod autoregression;
pub mod dispatch;
pub mod exponential;
pub mod least_squares;
pub mod marginal;
pub mod polynomial;
pub mod products;
pub mod robust;
pub mod samples;
pub mod sampling;

pub use autoregression::Autoregression;

use serde::{Deserialize, Serialize};

/// A value with its standard error, in the same unit.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Estimate {
    /// The value.
    pub value: f64,
    /// Its standard error.
    pub err: f64,
}
