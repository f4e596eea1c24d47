//! Level populations of the shells, given or solved for, and what they absorb and emit.

use super::CM_PER_PC;
use super::error::SphereError;
use super::molecule::{Molecule, Radiative};
use super::rays::Transfer;
use super::shells::Shells;
use crate::constants::{SPEED_OF_LIGHT, photon_temperature_k};

/// Shares of the molecules in each level, shell by shell, innermost first.
#[derive(Clone, Debug, PartialEq)]
pub struct Populations {
    levels: usize,
    shares: Vec<f64>,
}

impl Populations {
    /// Shares of `levels` levels a shell; each shell's are divided by their sum.
    ///
    /// # Errors
    ///
    /// [`SphereError::Length`] where the shares are not a whole number of shells.
    pub fn new(levels: usize, mut shares: Vec<f64>) -> Result<Self, SphereError> {
        if levels == 0 || !shares.len().is_multiple_of(levels) {
            return Err(SphereError::Length {
                quantity: "level populations",
                found: shares.len(),
                expected: shares.len().div_ceil(levels.max(1)) * levels,
            });
        }
        for shell in shares.chunks_mut(levels) {
            let sum: f64 = shell.iter().sum();
            for share in shell {
                *share /= sum;
            }
        }
        Ok(Self { levels, shares })
    }

    /// Local thermodynamic equilibrium at the shells' kinetic temperatures.
    #[must_use]
    pub fn thermal(shells: &Shells, molecule: &Molecule) -> Self {
        Self {
            levels: molecule.levels.len(),
            shares: shells
                .table
                .t_kin_k
                .iter()
                .flat_map(|t_kin_k| molecule.boltzmann(*t_kin_k))
                .collect(),
        }
    }

    /// Number of levels.
    #[must_use]
    pub fn levels(&self) -> usize {
        self.levels
    }

    /// Number of shells.
    #[must_use]
    pub fn shells(&self) -> usize {
        self.shares.len() / self.levels
    }

    /// Shares of the levels in a shell.
    #[must_use]
    pub fn shell(&self, shell: usize) -> &[f64] {
        &self.shares[shell * self.levels..(shell + 1) * self.levels]
    }

    pub(super) fn shares(&self) -> &[f64] {
        &self.shares
    }

    /// Excitation temperature of a transition in each shell, K; negative where inverted.
    ///
    /// T_ex = (h nu/k)/ln(n_l g_u/(n_u g_l)).
    #[must_use]
    pub fn excitation_temperature_k(&self, molecule: &Molecule, transition: usize) -> Vec<f64> {
        let line = &molecule.radiative[transition];
        let ratio = weight_ratio(molecule, line);
        self.shares
            .chunks(self.levels)
            .map(|shares| {
                photon_temperature_k(line.frequency_ghz)
                    / (shares[line.lower] * ratio / shares[line.upper]).ln()
            })
            .collect()
    }
}

fn weight_ratio(molecule: &Molecule, line: &Radiative) -> f64 {
    molecule.levels[line.upper].weight / molecule.levels[line.lower].weight
}

/// Coefficients of a transition: opacity = density (n_l g_u/g_l - n_u) `opacity`, emission =
/// density n_u `emission`, with n the levels' shares.
///
/// alpha = c^3 A/(8 pi nu^3) n (n_l g_u/g_l - n_u) per unit of velocity, km/s per pc and cm^-3;
/// emission in brightness units is alpha times h nu/k n_u/(n_l g_u/g_l - n_u).
#[derive(Clone, Copy, Debug)]
pub(super) struct Coefficients {
    lower: usize,
    upper: usize,
    weight_ratio: f64,
    opacity: f64,
    emission: f64,
}

impl Coefficients {
    pub(super) fn new(molecule: &Molecule, line: &Radiative) -> Self {
        let wavelength_cm = SPEED_OF_LIGHT.value * 100.0 / (line.frequency_ghz * 1e9);
        let cm_per_km = 1e5;
        let opacity = wavelength_cm.powi(3) * line.einstein_a_per_s / (8.0 * std::f64::consts::PI)
            * CM_PER_PC
            / cm_per_km;
        Self {
            lower: line.lower,
            upper: line.upper,
            weight_ratio: weight_ratio(molecule, line),
            opacity,
            emission: opacity * photon_temperature_k(line.frequency_ghz),
        }
    }

    pub(super) fn weight_ratio(&self) -> f64 {
        self.weight_ratio
    }

    pub(super) fn opacity(&self, shares: &[f64]) -> f64 {
        self.opacity * (shares[self.lower] * self.weight_ratio - shares[self.upper])
    }

    pub(super) fn emission(&self, shares: &[f64]) -> f64 {
        self.emission * shares[self.upper]
    }
}

/// What the shells absorb and emit in one transition.
#[derive(Clone, Debug, PartialEq)]
pub struct LineField {
    pub(super) frequency_ghz: f64,
    /// For one molecule a cm^3, a value an edge.
    pub(super) edges: Transfer,
    /// Molecules per cm^3, a value a shell.
    pub(super) density_cm3: Vec<f64>,
}

impl LineField {
    /// A transition of a molecule with given populations.
    #[must_use]
    pub fn new(
        shells: &Shells,
        molecule: &Molecule,
        transition: usize,
        populations: &Populations,
    ) -> Self {
        let line = &molecule.radiative[transition];
        let coefficients = Coefficients::new(molecule, line);
        let at_edges = |level: usize| -> Vec<f64> {
            let logarithms: Vec<f64> = populations
                .shares
                .chunks(populations.levels)
                .map(|shares| shares[level].max(f64::MIN_POSITIVE).ln())
                .collect();
            let mut edges = shells.at_edges(&logarithms);
            for value in &mut edges {
                *value = value.exp();
            }
            edges
        };
        let (lower, upper) = (at_edges(line.lower), at_edges(line.upper));
        let opacity = lower
            .iter()
            .zip(&upper)
            .map(|(lower, upper)| {
                coefficients.opacity * (lower * coefficients.weight_ratio - upper)
            })
            .collect();
        Self {
            frequency_ghz: line.frequency_ghz,
            edges: Transfer {
                opacity,
                emission: upper
                    .iter()
                    .map(|upper| coefficients.emission * upper)
                    .collect(),
            },
            density_cm3: molecules(shells),
        }
    }

    /// Optical depth at the line's centre along a radius, from the inner to the outer edge, as if
    /// nothing moved.
    #[must_use]
    pub fn radial_depth(&self, shells: &Shells) -> f64 {
        let table = &shells.table;
        (0..shells.count())
            .map(|shell| {
                let edges = &table.edge_pc[shell..shell + 2];
                let opacity = 0.5 * (self.edges.opacity[shell] + self.edges.opacity[shell + 1]);
                let middle = 0.5 * (edges[0] + edges[1]);
                let path = [edges[0], middle, middle, edges[1]]
                    .map(|radius| shells.relative_density(shell, radius));
                let mean = (path[0] + 4.0 * path[1] + path[3]) / 6.0;
                opacity * self.density_cm3[shell] * mean * (edges[1] - edges[0])
                    / (table.sigma_km_s[shell] * std::f64::consts::TAU.sqrt())
            })
            .sum()
    }
}

/// Molecules per cm^3 in each shell.
pub(super) fn molecules(shells: &Shells) -> Vec<f64> {
    let table = &shells.table;
    let pairs = table.n_h2_cm3.iter().zip(&table.abundance);
    pairs
        .map(|(density, abundance)| density * abundance)
        .collect()
}
