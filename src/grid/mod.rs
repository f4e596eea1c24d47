//! Pointings into maps: two cubes on one grid, and what a map says of a clump's motions.
//!
//! The diagnosis takes plain values with errors and places ([`Field`]); no spectra and no files. Everything in
//! it is a weighted linear fit whose errors follow the full covariance of the readings, since neighbouring
//! pointings of a gridded map share noise: a velocity gradient, parts even and odd about the centre, the
//! first moment and the inward speed against radius, and a verdict on infall, rotation and outflow.

mod caution;
mod centre;
pub mod cubes;
mod error;
mod field;
mod gradient;
mod linear;
mod motions;
mod parity;
mod speed;
mod spot;
mod verdict;

pub use caution::{GridCaution, ThinMean};
pub use centre::{Centre, centre};
pub use error::GridError;
pub use field::{Field, Reading};
pub use gradient::{Gradient, gradient};
pub use motions::{PointingMotions, clump_maps, common_range, noise_width_arcsec};
pub use parity::{Parity, parity};
pub use speed::{SpeedProfile, SpeedTrend, speed_profile};
pub use spot::{CentralSpot, central_spot};
pub use verdict::{ClumpMaps, Diagnosis, Even, Odd, SpatialVerdict, diagnose};
