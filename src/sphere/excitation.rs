//! Level populations of the shells, given or solved for, and what they absorb and emit.

use super::CM_PER_PC;
use super::error::SphereError;
use super::molecule::{Molecule, Radiative};
use super::rays::Transfer;
use super::shells::Shells;
use crate::constants::{SPEED_OF_LIGHT, photon_temperature_k};
use crate::numeric::exponential::exp_in_place;

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

/// Largest part of a shell's source that its slope may take away at one end.
const STEEPEST: f64 = 0.8;

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

    pub(super) fn opacity(&self, lower: f64, upper: f64) -> f64 {
        self.opacity * (lower * self.weight_ratio - upper)
    }

    /// Photons a mode that the molecules' own source amounts to; `None` where it is inverted.
    pub(super) fn source(&self, shares: &[f64]) -> Option<f64> {
        let upper = shares[self.upper];
        let difference = shares[self.lower] * self.weight_ratio - upper;
        (difference > 0.0).then(|| upper / difference)
    }

    /// Opacity and emission that are continuous at the edges.
    pub(super) fn continuous(&self, edges: &EdgeShares, transfer: &mut Transfer) {
        transfer.clear();
        for (inner, outer) in edges.pairs() {
            let ends = [inner, outer].map(|shares| (shares[self.lower], shares[self.upper]));
            transfer
                .opacity
                .push(ends.map(|(lower, upper)| self.opacity(lower, upper)));
            transfer
                .emission
                .push(ends.map(|(_, upper)| self.emission * upper));
        }
    }

    /// Opacity that is constant in each shell, and a source that is linear with the right mean.
    ///
    /// Where a shell is thick its mean intensity has to be its source, whatever the slope: a mean
    /// that is off is as good as a leak. `middles` as of [`super::rays::RayTable::middles`].
    pub(super) fn conservative(
        &self,
        shares: &[f64],
        edges: &EdgeShares,
        middles: &[f64],
        transfer: &mut Transfer,
    ) {
        transfer.clear();
        let shells = shares.chunks(edges.levels).zip(edges.pairs()).zip(middles);
        for ((own, (inner, outer)), middle) in shells {
            let opacity = self.opacity(own[self.lower], own[self.upper]);
            let emission = self.emission * own[self.upper];
            let rise = match (self.source(inner), self.source(outer), self.source(own)) {
                (Some(inner), Some(outer), Some(own)) => {
                    // within what leaves both ends positive
                    let (least, most) = (-STEEPEST / (1.0 - middle), STEEPEST / middle);
                    emission * ((outer - inner) / own).clamp(least, most)
                }
                _ => 0.0,
            };
            transfer.opacity.push([opacity; 2]);
            transfer
                .emission
                .push([emission - rise * middle, emission + rise * (1.0 - middle)]);
        }
    }

    pub(super) fn weight_ratio(&self) -> f64 {
        self.weight_ratio
    }
}

/// Shares of the levels at the edges of the shells.
#[derive(Clone, Debug, Default)]
pub(super) struct EdgeShares {
    levels: usize,
    shares: Vec<f64>,
    logarithms: Vec<f64>,
}

impl EdgeShares {
    /// Shares at the inner and the outer edge of each shell.
    fn pairs(&self) -> impl Iterator<Item = (&[f64], &[f64])> {
        let inner = self.shares.chunks(self.levels);
        inner.clone().zip(inner.skip(1))
    }

    /// Logarithms of shares are linear in the logarithm of the radius.
    pub(super) fn update(&mut self, shells: &Shells, levels: usize, shares: &[f64]) {
        self.levels = levels;
        self.logarithms.clear();
        self.logarithms
            .extend(shares.iter().map(|share| share.max(f64::MIN_POSITIVE).ln()));
        self.shares.clear();
        for between in shells.edges() {
            let inner = &self.logarithms[between.shell * levels..][..levels];
            let outer = &self.logarithms[between.next * levels..][..levels];
            let mixed = inner
                .iter()
                .zip(outer)
                .map(|(inner, outer)| (inner + between.fraction * (outer - inner)).min(0.0));
            self.shares.extend(mixed);
        }
        exp_in_place(&mut self.shares);
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
        let mut shares = EdgeShares::default();
        shares.update(shells, populations.levels, &populations.shares);
        let mut edges = Transfer::default();
        Coefficients::new(molecule, line).continuous(&shares, &mut edges);
        Self {
            frequency_ghz: line.frequency_ghz,
            edges,
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
                let [inner, outer] = self.edges.opacity[shell];
                let opacity = 0.5 * (inner + outer);
                let middle = 0.5 * (edges[0] + edges[1]);
                let path = [edges[0], middle, middle, edges[1]]
                    .map(|radius| shells.inside(shell, radius)[0]);
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
