//! Statistical equilibrium of a molecule in shells: populations and the radiation they make agree.
//!
//! Accelerated lambda iteration with the local operator of each passage of a ray through a shell
//! (Rybicki & Hummer 1991, A&A 245, 171: preconditioned rates), and Ng's (1974, J. Chem. Phys. 61,
//! 2680) extrapolation over the last four iterates. It ends by the estimated error of the
//! populations, not by their change in one iteration: where changes fall by a factor f each time,
//! what is still to come is change f/(1 - f) (Auer, Fabiani Bendicho & Trujillo Bueno 1994, A&A 292,
//! 599).

use super::balance;
use super::error::{SphereError, checked};
use super::excitation::{Coefficients, EdgeShares, Populations, molecules};
use super::molecule::Molecule;
use super::parts_needed;
use super::rays::{Division, LANES, MeanIntensity, Ray, RayTable, Transfer, annulus};
use super::shells::Shells;
use crate::constants::{BACKGROUND_TEMPERATURE, photon_temperature_k};
use crate::line::Component;
use crate::model::RadiationTemperature;

/// How statistical equilibrium is solved for.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EquilibriumSettings {
    /// Lowest levels that are kept; all where there are fewer.
    pub levels: usize,
    /// Optical depth from the inner to the outer radius below which a transition's own photons are
    /// left out.
    pub least_depth: f64,
    /// Largest estimated relative error of any population above [`LEAST_SHARE`].
    pub tolerance: f64,
    /// Most iterations.
    pub max_iterations: usize,
    /// Rays in an annulus, 1 to 4; the edges of the shells divide the disc into annuli.
    pub rays: usize,
    /// Distance of the velocities at which radiation is followed, in dispersions.
    pub velocity_step: f64,
    /// Largest change of the line-of-sight speed between two points where the source is
    /// evaluated, in dispersions.
    pub source_step: f64,
    /// Largest change of the line-of-sight speed between two points where the line profile is, in
    /// dispersions.
    pub profile_step: f64,
}

impl Default for EquilibriumSettings {
    fn default() -> Self {
        Self {
            levels: 16,
            least_depth: 1e-6,
            tolerance: 1e-4,
            max_iterations: 1000,
            rays: 3,
            velocity_step: 0.5,
            source_step: 0.25,
            profile_step: 0.25,
        }
    }
}

/// Levels with a smaller share do not count in the estimated error.
pub const LEAST_SHARE: f64 = 1e-8;

/// Dispersions beyond the fastest gas within which radiation is followed.
const PROFILE_REACH: f64 = 4.0;

/// Largest share of the mean intensity that the local operator may account for: what is left stays
/// positive. The solution does not depend on it.
const MOST_LOCAL: f64 = 0.99;

/// Changes that do not fall count as falling by this.
const FACTOR_CAP: f64 = 0.995;

/// Iterations between extrapolations.
const EXTRAPOLATE_EVERY: usize = 4;

/// A solution of statistical equilibrium.
#[derive(Clone, Debug, PartialEq)]
pub struct Equilibrium {
    /// Level populations of the shells.
    pub populations: Populations,
    /// Iterations made.
    pub iterations: usize,
    /// Largest relative change in the last of them.
    pub change: f64,
    /// Estimated largest relative error.
    pub error: f64,
}

/// Solves statistical equilibrium of a molecule in shells, under the cosmic background.
///
/// `start` is where the iteration starts: thermal equilibrium where it is `None` or has another
/// number of levels or shells.
///
/// # Errors
///
/// [`SphereError::NotConverged`] after too many iterations, [`SphereError::NoPartner`],
/// [`SphereError::LevelUnconnected`], or [`SphereError::Impossible`] for settings.
pub fn solve(
    shells: &Shells,
    molecule: &Molecule,
    settings: &EquilibriumSettings,
    start: Option<&Populations>,
) -> Result<Equilibrium, SphereError> {
    checked_settings(settings)?;
    let molecule = molecule.lowest_levels(settings.levels);
    let problem = Problem::new(shells, &molecule, settings)?;
    let levels = molecule.levels.len();
    let mut shares = match start {
        Some(start) if start.levels() == levels && start.shells() == shells.count() => {
            start.shares().to_vec()
        }
        _ => Populations::thermal(shells, &molecule).shares().to_vec(),
    };
    let mut history = History::default();
    let mut work = Work::default();
    for iteration in 1..=settings.max_iterations {
        let before = shares.clone();
        problem.iterate(&mut shares, &mut work)?;
        let (change, error) = history.judge(&before, &shares);
        if error < settings.tolerance {
            return Ok(Equilibrium {
                populations: Populations::new(levels, shares)?,
                iterations: iteration,
                change,
                error,
            });
        }
        if iteration == settings.max_iterations {
            return Err(SphereError::NotConverged {
                found: error,
                tolerance: settings.tolerance,
                iterations: iteration,
            });
        }
        history.extrapolate(&mut shares);
    }
    unreachable!("at least one iteration is made, and the last returns")
}

fn checked_settings(settings: &EquilibriumSettings) -> Result<(), SphereError> {
    let levels = settings.levels as f64;
    checked("levels", levels, levels >= 2.0, "2 or more")?;
    let tolerance = settings.tolerance;
    checked("tolerance", tolerance, tolerance > 0.0, "more than 0")?;
    let iterations = settings.max_iterations as f64;
    checked("max_iterations", iterations, iterations >= 1.0, "1 or more")?;
    for (quantity, step) in [
        ("velocity_step", settings.velocity_step),
        ("source_step", settings.source_step),
        ("profile_step", settings.profile_step),
    ] {
        checked(quantity, step, step > 0.0, "more than 0")?;
    }
    Ok(())
}

/// What does not change from iteration to iteration.
struct Problem<'a> {
    least_depth: f64,
    shells: &'a Shells,
    molecule: &'a Molecule,
    density: Vec<f64>,
    collisions: Vec<Vec<f64>>,
    table: RayTable,
    middles: Vec<f64>,
    lines: Vec<LineConstants>,
}

struct LineConstants {
    coefficients: Coefficients,
    photon_k: f64,
    background_k: f64,
}

/// Space that iterations use again.
#[derive(Default)]
struct Work {
    edges: EdgeShares,
    transfer: Transfer,
    mean: MeanIntensity,
    rates: Vec<Vec<f64>>,
}

impl<'a> Problem<'a> {
    fn new(
        shells: &'a Shells,
        molecule: &'a Molecule,
        settings: &EquilibriumSettings,
    ) -> Result<Self, SphereError> {
        let collisions = (0..shells.count())
            .map(|shell| {
                let temperature_k = shells.table.t_kin_k[shell];
                molecule.collision_rates(shells.collider_cm3(shell), temperature_k)
            })
            .collect::<Result<_, _>>()?;
        let lines = molecule.radiative.iter().map(|line| LineConstants {
            coefficients: Coefficients::new(molecule, line),
            photon_k: photon_temperature_k(line.frequency_ghz),
            background_k: RadiationTemperature::new(line.frequency_ghz)
                .at(BACKGROUND_TEMPERATURE.value),
        });
        let division = Division {
            passage: settings.source_step,
            part: settings.profile_step,
        };
        let table = RayTable::new(
            shells,
            &disc(&shells.table.edge_pc, settings.rays),
            &velocities(shells, settings.velocity_step),
            &[Component::SINGLE],
            division,
        );
        Ok(Self {
            least_depth: settings.least_depth,
            shells,
            molecule,
            density: molecules(shells),
            collisions,
            middles: table.middles(),
            table,
            lines: lines.collect(),
        })
    }

    /// Populations into the radiation that they make, and that into populations.
    fn iterate(&self, shares: &mut [f64], work: &mut Work) -> Result<(), SphereError> {
        let levels = self.molecule.levels.len();
        work.rates.clone_from(&self.collisions);
        work.edges.update(self.shells, levels, shares);
        for (line, constants) in self.molecule.radiative.iter().zip(&self.lines) {
            let coefficients = &constants.coefficients;
            coefficients.conservative(shares, &work.edges, &self.middles, &mut work.transfer);
            if self.depth(&work.transfer) < self.least_depth {
                work.mean
                    .transparent(self.density.len(), constants.background_k);
            } else {
                self.table.mean_intensity(
                    &work.transfer,
                    &self.density,
                    constants.background_k,
                    &mut work.mean,
                );
            }
            let weights = coefficients.weight_ratio();
            for (shell, rates) in work.rates.iter_mut().enumerate() {
                // photons a mode: all of them, and those that the shell's own source accounts for
                let photons = work.mean.intensity_k[shell] / constants.photon_k;
                let own = &shares[shell * levels..(shell + 1) * levels];
                let source = coefficients.source(own).unwrap_or(0.0);
                let kept = (1.0 - work.mean.escape[shell]).clamp(0.0, 1.0);
                let kept = kept.min(MOST_LOCAL * photons / source.max(f64::MIN_POSITIVE));
                let induced = line.einstein_a_per_s * (photons - kept * source);
                let escaping = line.einstein_a_per_s * (1.0 - kept);
                rates[line.upper * levels + line.lower] += escaping + induced;
                rates[line.lower * levels + line.upper] += weights * induced;
            }
        }
        for (shares, rates) in shares.chunks_mut(levels).zip(&mut work.rates) {
            balance::shares(rates, shares).map_err(|level| SphereError::LevelUnconnected {
                molecule: self.molecule.name.clone(),
                level: level + 1,
            })?;
        }
        Ok(())
    }
}

impl Problem<'_> {
    /// Optical depth at a line's centre along a radius, as if nothing moved.
    fn depth(&self, transfer: &Transfer) -> f64 {
        let table = &self.shells.table;
        let shells = transfer.opacity.iter().zip(&self.density);
        shells
            .zip(table.edge_pc.windows(2).zip(&table.sigma_km_s))
            .map(|(([opacity, _], density), (edges, sigma))| {
                opacity.abs() * density * (edges[1] - edges[0]) / sigma
            })
            .sum::<f64>()
            / std::f64::consts::TAU.sqrt()
    }
}

/// Rays over the whole disc.
fn disc(edges: &[f64], rays: usize) -> Vec<Ray> {
    let inner = std::iter::once(&0.0).chain(edges);
    inner
        .zip(edges)
        .flat_map(|(a, b)| annulus(*a, *b, rays))
        .collect()
}

/// Velocities symmetric about 0 that reach beyond every line, whole lanes of them.
fn velocities(shells: &Shells, step: f64) -> Vec<f64> {
    let sigmas = &shells.table.sigma_km_s;
    let widest = sigmas.iter().copied().fold(0.0, f64::max);
    let narrowest = sigmas.iter().copied().fold(f64::INFINITY, f64::min);
    let half = shells.fastest_km_s() + PROFILE_REACH * widest;
    let count = (parts_needed(2.0 * half, step * narrowest) + 1).next_multiple_of(LANES);
    let step = 2.0 * half / (count - 1) as f64;
    (0..count).map(|index| step * index as f64 - half).collect()
}

/// The last iterates and how much they changed.
#[derive(Default)]
struct History {
    iterates: Vec<Vec<f64>>,
    changes: Vec<f64>,
    /// By what changes fell last before the last extrapolation. It removes what falls slowest from
    /// sight, not from the solution: right after it, changes fall faster than they will.
    slowest: f64,
}

impl History {
    /// Largest relative change of the last iteration, and the error estimated from it and the
    /// changes before.
    fn judge(&mut self, before: &[f64], after: &[f64]) -> (f64, f64) {
        let change = before
            .iter()
            .zip(after)
            .filter(|(_, after)| **after > LEAST_SHARE)
            .map(|(before, after)| (after / before - 1.0).abs())
            .fold(0.0, f64::max);
        self.iterates.push(after.to_vec());
        self.changes.push(change);
        let error = match self.changes[..] {
            [.., a, b, c] => {
                let factor = (b / a).max(c / b).max(self.slowest);
                if factor < 1.0 {
                    c * factor / (1.0 - factor)
                } else {
                    f64::INFINITY
                }
            }
            _ => f64::INFINITY,
        };
        (change, if change == 0.0 { 0.0 } else { error })
    }

    /// Replaces the last iterate by the mixture of the last three that changes least, once enough
    /// iterations have passed since the last time.
    fn extrapolate(&mut self, shares: &mut [f64]) {
        if self.iterates.len() < EXTRAPOLATE_EVERY {
            return;
        }
        let [.., x3, x2, x1, x0] = &self.iterates[..] else {
            return;
        };
        // Ng's normal equations, weighted by the relative size
        let mut sums = [0.0; 5];
        for index in 0..x0.len() {
            if x0[index] <= LEAST_SHARE {
                continue;
            }
            let weight = 1.0 / (x0[index] * x0[index]);
            let last = x0[index] - x1[index];
            let p = last - (x1[index] - x2[index]);
            let q = last - (x2[index] - x3[index]);
            sums[0] += weight * p * p;
            sums[1] += weight * p * q;
            sums[2] += weight * q * q;
            sums[3] += weight * p * last;
            sums[4] += weight * q * last;
        }
        let determinant = sums[0] * sums[2] - sums[1] * sums[1];
        let a = (sums[3] * sums[2] - sums[4] * sums[1]) / determinant;
        let b = (sums[4] * sums[0] - sums[3] * sums[1]) / determinant;
        if a.is_finite() && b.is_finite() {
            let mixed = |i: usize| (1.0 - a - b) * x0[i] + a * x1[i] + b * x2[i];
            // shares stay positive: keep the iterate of a level where the mixture is not
            for (index, share) in shares.iter_mut().enumerate() {
                let value = mixed(index);
                if value > 0.1 * x0[index] && value < 10.0 * x0[index] {
                    *share = value;
                }
            }
        }
        if let [.., before, last] = self.changes[..] {
            self.slowest = (last / before).min(FACTOR_CAP);
        }
        self.iterates.clear();
        self.changes.clear();
    }
}
