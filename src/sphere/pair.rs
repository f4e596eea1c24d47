//! A clump into the spectra of a thick and a thin line, in one of two modes.

use super::clump::Clump;
use super::emergent::{Beam, Fineness, emergent};
use super::equilibrium::{Equilibrium, EquilibriumSettings, solve};
use super::error::{SphereError, checked};
use super::excitation::{LineField, Populations};
use super::molecule::Molecule;
use super::shells::Shells;
use crate::line::Component;

/// How finely a clump is solved and traced.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Mode {
    /// Number of shells.
    pub shells: usize,
    /// How statistical equilibrium is solved for.
    pub equilibrium: EquilibriumSettings,
    /// How spectra are computed.
    pub fineness: Fineness,
}

impl Mode {
    /// Statistical equilibrium to better than a part in a thousand of a line's peak.
    #[must_use]
    pub fn full() -> Self {
        Self {
            shells: 48,
            equilibrium: EquilibriumSettings::default(),
            fineness: Fineness::default(),
        }
    }

    /// The same equations on few shells, rays and velocities, for fitting. What it differs by is
    /// in docs/methods.md.
    #[must_use]
    pub fn fast() -> Self {
        Self {
            shells: 24,
            equilibrium: EquilibriumSettings {
                levels: 8,
                least_depth: 0.02,
                tolerance: 0.02,
                max_iterations: 200,
                rays: 1,
                velocity_step: 0.9,
                source_step: 1.0,
                profile_step: 1.0,
            },
            fineness: Fineness {
                rays: 2,
                annulus: 1.0,
                source_step: 1.0,
                profile_step: 1.0,
            },
        }
    }
}

/// One line of a pair as a telescope sees it.
#[derive(Clone, Debug, PartialEq)]
pub struct LineView {
    /// Index of the transition in the molecule's radiative ones.
    pub transition: usize,
    /// Components of the line.
    pub components: Vec<Component>,
    /// The beam at the line's frequency.
    pub beam: Beam,
    /// Velocities relative to the clump, km/s.
    pub velocity_km_s: Vec<f64>,
}

/// Molecules and views of a thick and a thin line.
#[derive(Clone, Debug, PartialEq)]
pub struct PairView {
    /// The thick line's molecule.
    pub thick_molecule: Molecule,
    /// The thin line's, such as [`Molecule::isotopologue`] of the other.
    pub thin_molecule: Molecule,
    /// The thick line.
    pub thick: LineView,
    /// The thin line.
    pub thin: LineView,
}

/// Spectra of a pair, brightness above the background in K, and the populations behind them.
#[derive(Clone, Debug, PartialEq)]
pub struct PairSpectra {
    /// The thick line.
    pub thick_k: Vec<f64>,
    /// The thin line.
    pub thin_k: Vec<f64>,
    /// Solution for the thick line's molecule.
    pub thick: Equilibrium,
    /// Solution for the thin line's molecule.
    pub thin: Equilibrium,
    /// Radial optical depth of the thick line, as of [`LineField::radial_depth`].
    pub thick_depth: f64,
}

/// Spectra of a thick and a thin line of a clump; the thin molecule is rarer by `isotope_ratio`.
///
/// `start` holds the populations of a similar clump in the same mode, which save iterations.
///
/// # Errors
///
/// [`SphereError`] as of [`Clump::checked`], [`solve`] and [`emergent`], and
/// [`SphereError::Impossible`] for a ratio that is not above 0.
pub fn pair_spectra(
    clump: &Clump,
    isotope_ratio: f64,
    view: &PairView,
    mode: &Mode,
    start: Option<(&Populations, &Populations)>,
) -> Result<PairSpectra, SphereError> {
    let ratio = isotope_ratio;
    checked("isotope_ratio", ratio, ratio > 0.0, "more than 0")?;
    let rarer = Clump {
        abundance: clump.abundance / ratio,
        ..*clump
    };
    let shells = Shells::of_clump(clump, mode.shells)?;
    let (start, thin_start) = start.unzip();
    let thick = solve(&shells, &view.thick_molecule, &mode.equilibrium, start)?;
    let field = |shells: &Shells, molecule: &Molecule, line: &LineView, solution: &Equilibrium| {
        LineField::new(shells, molecule, line.transition, &solution.populations)
    };
    let traced = |shells: &Shells, field: &LineField, line: &LineView| {
        let (components, velocities) = (&line.components, &line.velocity_km_s);
        emergent(
            shells,
            field,
            components,
            line.beam,
            velocities,
            &mode.fineness,
        )
    };
    let thick_field = field(&shells, &view.thick_molecule, &view.thick, &thick);
    let thick_k = traced(&shells, &thick_field, &view.thick)?;
    let rare_shells = Shells::of_clump(&rarer, mode.shells)?;
    let thin_start = thin_start.or(Some(&thick.populations));
    let thin = solve(
        &rare_shells,
        &view.thin_molecule,
        &mode.equilibrium,
        thin_start,
    )?;
    let thin_field = field(&rare_shells, &view.thin_molecule, &view.thin, &thin);
    let thin_k = traced(&rare_shells, &thin_field, &view.thin)?;
    Ok(PairSpectra {
        thick_k,
        thin_k,
        thick_depth: thick_field.radial_depth(&shells),
        thick,
        thin,
    })
}
