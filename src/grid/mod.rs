//! Pointings into maps: two cubes on one grid, and what a map adds to the cautions of its pointings.

mod caution;
pub mod cubes;

pub use caution::{GridCaution, ThinMean};
