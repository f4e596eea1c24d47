//! What column densities and thermal widths need of each built-in species: mass, nuclear-spin weight,
//! dipole moment and partition function.
//!
//! Partition functions: the Cologne Database for Molecular Spectroscopy (CDMS; Muller et al. 2001,
//! doi:10.1051/0004-6361:20010367; 2005, doi:10.1016/j.molstruc.2005.01.027), its species table as
//! astroquery 0.4.11 (BSD-3) carries it. A rigid rotor agrees with the linear species to 0.1 % below
//! 75 K.

use crate::constants::{PLANCK, SPEED_OF_LIGHT, photon_temperature_k};
use crate::line::{Line, Transition};
use std::f64::consts::PI;

/// Temperatures of the partition functions, K.
pub const PARTITION_TEMPERATURES_K: [f64; 9] =
    [2.725, 5.0, 9.375, 18.75, 37.5, 75.0, 150.0, 225.0, 300.0];

/// A built-in species.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Molecule {
    /// Species as in [`Transition::species`].
    pub species: &'static str,
    /// Mass number: its mass in atomic mass units within 0.1 %.
    pub mass_number: u32,
    /// Nuclear-spin weight of its states that the partition function holds.
    pub spin_weight: f64,
    /// Dipole moment of a linear species where a transition has no tabulated Einstein coefficient,
    /// debye.
    pub dipole_debye: Option<f64>,
    /// Decimal logarithm of the partition function at [`PARTITION_TEMPERATURES_K`].
    pub lg_partition: [f64; 9],
}

const fn molecule(
    species: &'static str,
    mass_number: u32,
    spin_weight: u32,
    dipole_debye: Option<f64>,
    lg_partition: [f64; 9],
) -> Molecule {
    Molecule {
        species,
        mass_number,
        spin_weight: spin_weight as f64,
        dipole_debye,
        lg_partition,
    }
}

/// Every built-in species.
///
/// Dipole moments: that of H13CO+ (3.90 D), HCN (2.985 D), N2H+ (3.40 D), CS (1.958 D) and CO
/// (0.1101 D) as their tabulated Einstein coefficients have it, for isotopologues without one;
/// HNC and HN13C 3.05 D from memory. N2D+ and C34S below 9.375 K are rigid rotors, CDMS has none.
/// Ortho and para H2CO share one partition function, of both in equilibrium.
#[rustfmt::skip]
pub const MOLECULES: &[Molecule] = &[
    molecule("HCO+", 29, 1, None, [0.2225, 0.4315, 0.6748, 0.9592, 1.2519, 1.5488, 1.8481, 2.0276, 2.1638]),
    molecule("H13CO+", 30, 1, None, [0.2312, 0.4418, 0.6859, 0.9707, 1.2637, 1.5607, 1.8598, 2.0353, 2.1599]),
    molecule("HC18O+", 31, 1, Some(3.90), [0.237, 0.4487, 0.6934, 0.9785, 1.2716, 1.5687, 1.8678, 2.0433, 2.1679]),
    molecule("DCO+", 30, 1, None, [0.2919, 0.512, 0.7611, 1.0487, 1.343, 1.6407, 1.9402, 2.1158, 2.2405]),
    molecule("HCN", 27, 3, None, [0.7016, 0.9109, 1.1545, 1.4389, 1.7317, 2.0286, 2.3286, 2.5122, 2.6566]),
    molecule("H13CN", 28, 3, Some(2.985), [0.7098, 0.9207, 1.165, 1.4498, 1.7428, 2.0399, 2.34, 2.5239, 2.6688]),
    molecule("HNC", 27, 1, Some(3.05), [0.2174, 0.4254, 0.6683, 0.9523, 1.2449, 1.5419, 1.8507, 2.0585, 2.2255]),
    molecule("HN13C", 28, 1, Some(3.05), [0.2299, 0.4403, 0.6844, 0.9691, 1.262, 1.559, 1.8581, 2.0336, 2.1583]),
    molecule("N2H+", 29, 9, Some(3.40), [1.1633, 1.3696, 1.6116, 1.8952, 2.1875, 2.4842, 2.7844, 2.9692, 3.1143]),
    molecule("N2D+", 30, 9, Some(3.40), [1.2234, 1.4403, 1.6877, 1.9743, 2.2682, 2.5657, 2.865, 3.0405, 3.1652]),
    molecule("CS", 44, 1, None, [0.4286, 0.663, 0.92, 1.2119, 1.5084, 1.8072, 2.1071, 2.2831, 2.4088]),
    molecule("C34S", 46, 1, Some(1.958), [0.4346, 0.6695, 0.9267, 1.2187, 1.5153, 1.8141, 2.1141, 2.2901, 2.4158]),
    molecule("CO", 28, 1, None, [0.1478, 0.3389, 0.5733, 0.8526, 1.1429, 1.4386, 1.737, 1.9123, 2.0369]),
    molecule("13CO", 29, 2, Some(0.1101), [0.4611, 0.6558, 0.8919, 1.1722, 1.463, 1.7589, 2.0575, 2.2328, 2.3574]),
    molecule("C18O", 30, 1, None, [0.1611, 0.3561, 0.5924, 0.8728, 1.1636, 1.4595, 1.7581, 1.9334, 2.058]),
    molecule("C17O", 29, 6, Some(0.1101), [0.9329, 1.1261, 1.3614, 1.6413, 1.9319, 2.2277, 2.5262, 2.7015, 2.8261]),
    molecule("o-H2CO", 30, 3, None, [0.3046, 0.6516, 1.1399, 1.6501, 2.1094, 2.5584, 3.0086, 3.2725, 3.4598]),
    molecule("p-H2CO", 30, 1, None, [0.3046, 0.6516, 1.1399, 1.6501, 2.1094, 2.5584, 3.0086, 3.2725, 3.4598]),
    molecule("CCH", 25, 4, None, [0.8308, 1.0411, 1.2852, 1.5699, 1.8628, 2.1605, 2.4836, 2.7164, 2.9114]),
];

impl Molecule {
    /// The molecule of a built-in species.
    #[must_use]
    pub fn of(species: &str) -> Option<&'static Self> {
        MOLECULES
            .iter()
            .find(|molecule| molecule.species == species)
    }

    /// Partition function, nuclear-spin weights included.
    ///
    /// Q(T): cubic through the four nearest tabulated points, lg Q over lg T.
    ///
    /// T: excitation temperature, K. Source: CDMS, see the module. Valid from 2.725 to 300 K; within
    /// 0.2 % of a rigid rotor's sum between the points up to 75 K; beyond the ends the last cubic goes
    /// on.
    ///
    /// ```
    /// let q = inrush::derive::Molecule::of("H13CO+").unwrap().partition_function(11.0);
    /// assert!((q / 5.63038 - 1.0).abs() < 1e-3); // sum over J of a rigid rotor
    /// ```
    #[must_use]
    pub fn partition_function(&self, t_ex_k: f64) -> f64 {
        let points = &PARTITION_TEMPERATURES_K;
        let above = points.partition_point(|point| *point < t_ex_k);
        let first = above.saturating_sub(2).min(points.len() - 4);
        let x = t_ex_k.log10();
        let mut lg = 0.0;
        for i in first..first + 4 {
            let mut weight = 1.0;
            for j in first..first + 4 {
                if i != j {
                    let (own, other) = (LG_TEMPERATURES[i], LG_TEMPERATURES[j]);
                    weight *= (x - other) / (own - other);
                }
            }
            lg += weight * self.lg_partition[i];
        }
        10_f64.powf(lg)
    }
}

/// Decimal logarithms of [`PARTITION_TEMPERATURES_K`].
#[rustfmt::skip]
const LG_TEMPERATURES: [f64; 9] = [
    0.435_366_506_612_661_3, 0.698_970_004_336_018_9, 0.971_971_276_399_756_4, 1.273_001_272_063_737_6, 1.574_031_267_727_718_8, 1.875_061_263_391_7, 2.176_091_259_055_681_3, 2.352_182_518_111_362_7, 2.477_121_254_719_662_6,
];

/// Einstein coefficient of a linear rotor's transition J to J - 1.
///
/// A = 64 pi^4 nu^3 mu^2/(3 h c^3) J/(2 J + 1), in s-1
///
/// nu: frequency, GHz; mu: dipole moment, debye (1e-18 esu cm; Gaussian units); J: upper state.
/// Source: Mangum & Shirley 2015, doi:10.1086/680323. Valid for J >= 1.
///
/// ```
/// let a = inrush::derive::einstein_a_of_rotor_per_s(89.1885, 3.93, 1); // HCO+
/// assert!((a / 4.2512e-5 - 1.0).abs() < 1e-4); // LAMDA
/// ```
#[must_use]
pub fn einstein_a_of_rotor_per_s(frequency_ghz: f64, dipole_debye: f64, j_upper: u32) -> f64 {
    let (h_erg_s, c_cm_s) = (PLANCK.value * 1e7, SPEED_OF_LIGHT.value * 1e2);
    let j = f64::from(j_upper);
    64.0 * PI.powi(4) * (frequency_ghz * 1e9 / c_cm_s).powi(3) / (3.0 * h_erg_s)
        * (dipole_debye * 1e-18).powi(2)
        * (j / (2.0 * j + 1.0))
}

/// What a transition emits with: all that turns its optical depth into a column density.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Emitter {
    /// Its species.
    pub molecule: &'static Molecule,
    /// Rest frequency, GHz.
    pub frequency_ghz: f64,
    /// Einstein coefficient, s-1.
    pub einstein_a_per_s: f64,
    /// Energy of the upper state over k, K.
    pub upper_energy_k: f64,
    /// Statistical weight of the upper state, nuclear spin included.
    pub upper_weight: f64,
}

impl Emitter {
    /// That of a built-in line; `None` for a line of the user's own and where neither Einstein
    /// coefficient nor dipole moment is known (CCH).
    ///
    /// Tabulated values stand first; else those of a rigid rotor, A by
    /// [`einstein_a_of_rotor_per_s`], E_u = h nu (J + 1)/(2 k).
    #[must_use]
    pub fn of(line: &Line) -> Option<Self> {
        let transition = line.transition()?;
        let molecule = Molecule::of(transition.species)?;
        let j = upper_j(transition)?;
        let nu = transition.rest_frequency_ghz;
        let rotor = |dipole| einstein_a_of_rotor_per_s(nu, dipole, j);
        Some(Self {
            molecule,
            frequency_ghz: nu,
            einstein_a_per_s: transition
                .einstein_a_per_s
                .or(molecule.dipole_debye.map(rotor))?,
            upper_energy_k: transition
                .upper_energy_k
                .unwrap_or(photon_temperature_k(nu) * f64::from(j + 1) / 2.0),
            upper_weight: molecule.spin_weight * f64::from(2 * j + 1),
        })
    }
}

/// The rotational quantum number that a transition's label begins with: `3-2`, `3(0,3)-2(0,2)`.
fn upper_j(transition: &Transition) -> Option<u32> {
    let label = transition.quantum_label;
    let digits = label.find(|character: char| !character.is_ascii_digit())?;
    label[..digits].parse().ok()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::line::TRANSITIONS;

    fn rotor_sum(rotational_ghz: f64, temperature_k: f64) -> f64 {
        let x = photon_temperature_k(rotational_ghz) / temperature_k;
        (0..200_u32)
            .map(|j| f64::from(2 * j + 1) * (-x * f64::from(j * (j + 1))).exp())
            .sum()
    }

    #[test]
    fn logarithms_are_those_of_the_temperatures() {
        for (lg, temperature) in LG_TEMPERATURES.iter().zip(PARTITION_TEMPERATURES_K) {
            assert!((lg - temperature.log10()).abs() < 1e-15);
        }
    }

    /// Rigid rotor: textbook sum over J with B = nu/(2 J).
    #[test]
    fn partition_functions_of_linear_species_are_a_rigid_rotors() {
        let mut checked = 0;
        for molecule in MOLECULES {
            if molecule.species.ends_with("H2CO") || molecule.species == "CCH" {
                continue;
            }
            let own = |transition: &&Transition| transition.species == molecule.species;
            let first = TRANSITIONS.iter().find(own).unwrap();
            let j = f64::from(upper_j(first).unwrap());
            let rotational_ghz = first.rest_frequency_ghz / (2.0 * j);
            for step in 0..=40 {
                let t = 2.725 * (75.0_f64 / 2.725).powf(f64::from(step) / 40.0);
                let expected = molecule.spin_weight * rotor_sum(rotational_ghz, t);
                let found = molecule.partition_function(t);
                let off = (found / expected - 1.0).abs();
                assert!(off < 2e-3, "{} at {t} K: {off}", molecule.species);
                checked += 1;
            }
        }
        assert!(checked > 600, "{checked}");
    }

    #[test]
    fn partition_functions_go_through_the_table() {
        for molecule in MOLECULES {
            for (t, lg) in PARTITION_TEMPERATURES_K.iter().zip(molecule.lg_partition) {
                let found = molecule.partition_function(*t);
                assert!(
                    (found.log10() - lg).abs() < 1e-12,
                    "{} {t}",
                    molecule.species
                );
            }
        }
    }

    #[test]
    fn every_species_of_the_transitions_is_here() {
        let mut without = Vec::new();
        for transition in TRANSITIONS {
            assert!(
                Molecule::of(transition.species).is_some(),
                "{}",
                transition.species
            );
            if Emitter::of(&transition.line()).is_none() {
                without.push(transition.name());
            }
        }
        assert_eq!(without, ["CCH 1-0"]);
    }

    /// Einstein coefficients and energies: LAMDA and CDMS, as in the table of transitions.
    #[test]
    fn rotors_have_the_tabulated_coefficients_and_energies() {
        for (species, dipole) in [
            ("HCO+", 3.93),
            ("H13CO+", 3.90),
            ("HCN", 2.985),
            ("N2H+", 3.40),
            ("CS", 1.958),
            ("CO", 0.1101),
        ] {
            for transition in TRANSITIONS.iter().filter(|one| one.species == species) {
                let j = upper_j(transition).unwrap();
                let rotor = einstein_a_of_rotor_per_s(transition.rest_frequency_ghz, dipole, j);
                if let Some(tabulated) = transition.einstein_a_per_s {
                    // centrifugal effects on the dipole: largest in CO 3-2
                    let off = (rotor / tabulated - 1.0).abs();
                    assert!(off < 2e-3, "{}: {off}", transition.name());
                }
                if let Some(tabulated) = transition.upper_energy_k {
                    let rotor = photon_temperature_k(transition.rest_frequency_ghz)
                        * f64::from(j + 1)
                        / 2.0;
                    // LAMDA gives E_u of CS to 0.1 K
                    let off = (rotor - tabulated).abs();
                    assert!(off < 0.06, "{}: {off}", transition.name());
                }
            }
        }
    }
}
