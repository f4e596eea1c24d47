//! A spherical clump, collapsing or not, into the spectra that a telescope would see.
//!
//! A [`Clump`] is cut into [`Shells`]; a [`Molecule`] in it gets [`Populations`], from thermal
//! equilibrium or from statistical equilibrium; [`emergent`] traces rays through it and averages
//! them over a beam. Knows no spectra and no files: velocities, densities and temperatures in,
//! brightness out.

mod balance;
mod closure;
mod clump;
mod emergent;
mod equilibrium;
mod error;
mod excitation;
mod molecule;
mod pair;
mod rays;
mod reduced;
mod shells;

pub use closure::TwoLevel;
pub use clump::Clump;
pub use emergent::{Beam, Fineness, emergent};
pub use equilibrium::{Equilibrium, EquilibriumSettings, LEAST_SHARE, solve};
pub use error::SphereError;
pub use excitation::{LineField, Populations};
pub use molecule::{Collisions, Level, Molecule, Partner, Radiative, ortho_share};
pub use pair::{LineView, Mode, PairSpectra, PairView, pair_spectra};
pub use reduced::{DEPTH_FROM, ReducedClump, ReducedLine, ReducedPair};
pub use shells::{ShellTable, Shells};

use crate::constants::PARSEC;

/// Centimetres in a parsec.
const CM_PER_PC: f64 = PARSEC.value * 100.0;

/// Integral of x^exponent from a to b, both above 0.
fn power_integral(a: f64, b: f64, exponent: f64) -> f64 {
    let power = exponent + 1.0;
    if power.abs() < 1e-9 {
        (b / a).ln()
    } else {
        (b.powf(power) - a.powf(power)) / power
    }
}

/// Most parts that anything is divided into: far more than physical clumps need.
const MOST_PARTS: f64 = 1e4;

/// Number of parts, at least 1, of which none is wider than `widest`.
#[allow(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "a whole number between 1 and MOST_PARTS"
)]
fn parts_needed(whole: f64, widest: f64) -> usize {
    (whole / widest).ceil().clamp(1.0, MOST_PARTS) as usize
}
