//! Which built-in species are isotopologues, and what is known of their abundance ratio.
//!
//! Deuterated species are left out: their abundance is set by chemistry, not by an isotope ratio.

use super::Line;

/// Isotopologues, the most abundant first.
const FAMILIES: &[&[&str]] = &[
    &["HCO+", "H13CO+", "HC18O+"],
    &["HCN", "H13CN"],
    &["HNC", "HN13C"],
    &["CS", "C34S"],
    &["CO", "13CO", "C18O", "C17O"],
];

/// Species in which one carbon-13 stands for the carbon-12 of the family's first.
const CARBON_13: &[&str] = &["H13CO+", "H13CN", "HN13C", "13CO"];

/// A prior for the abundance of the thick line's species over that of the thin line's.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct AbundanceRatio {
    /// Typical ratio.
    pub ratio: f64,
    /// Its standard uncertainty: the spread from place to place.
    pub ratio_err: f64,
    /// Where it comes from and holds.
    pub source: &'static str,
}

/// 12C/13C of the local interstellar medium.
pub const CARBON_RATIO: AbundanceRatio = AbundanceRatio {
    ratio: 68.0,
    ratio_err: 15.0,
    source: "12C/13C of the local interstellar medium, Milam et al. 2005, doi:10.1086/497123 (from memory); lower toward the Galactic centre",
};

/// A thick and a thin line of two isotopologues in the same transition.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct IsotopologuePair {
    /// What is known of the abundance ratio; `None` where the user has to state it.
    pub prior: Option<AbundanceRatio>,
}

/// All isotopologues of a species, itself included; `None` for one without.
pub(super) fn family(species: &str) -> Option<&'static [&'static str]> {
    FAMILIES
        .iter()
        .copied()
        .find(|family| family.contains(&species))
}

/// Whether two lines are the same transition of two isotopologues, the thick line's the more
/// abundant one, so that their optical depths can be linked.
///
/// Lines are recognised by their names; a line of the user's own has no isotopologue.
///
/// ```
/// use inrush::line::{find, isotopologue_pair};
/// let pair = isotopologue_pair(&find("HCO+ 1-0")?, &find("H13CO+ 1-0")?);
/// assert_eq!(pair.and_then(|pair| pair.prior).map(|prior| prior.ratio), Some(68.0));
/// # Ok::<(), inrush::line::LineError>(())
/// ```
pub fn isotopologue_pair(thick: &Line, thin: &Line) -> Option<IsotopologuePair> {
    let (thick, thin) = (thick.transition()?, thin.transition()?);
    let family = family(thick.species)?;
    let position = |species| family.iter().position(|member| *member == species);
    let thick_position = position(thick.species)?;
    let related =
        thick.quantum_label == thin.quantum_label && thick_position < position(thin.species)?;
    related.then(|| IsotopologuePair {
        prior: (thick_position == 0 && CARBON_13.contains(&thin.species)).then_some(CARBON_RATIO),
    })
}
