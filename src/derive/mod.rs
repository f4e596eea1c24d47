//! Inward speed, dispersion and optical depth into what they mean for a clump: mass infall rate, time
//! scales, support, field and column densities.
//!
//! Each quantity is one documented function of plain numbers. [`SourceProperties`] holds what is given
//! of the source, [`FitDraws`] what a fit says; [`sample`] strings everything together and finds
//! intervals by sampling both. What lacks an input is empty and says which input would fill it.

mod cautions;
mod chain;
mod collapse;
mod column;
mod draws;
mod dust;
mod field;
mod gas;
mod molecules;
mod source;
mod support;

pub use cautions::DeriveCaution;
pub use chain::{
    Derived, DrawnQuantity, Lack, MassSource, Quantity, RateFormula, Sampled, Spread, Tracers,
    sample,
};
pub use collapse::{
    doubling_time_yr, free_fall_speed_km_s, free_fall_time_yr, isothermal_rate_msun_yr,
    mass_rate_from_density_msun_yr, mass_rate_from_mass_msun_yr,
};
pub use column::{column_density_cm2, depth_from_brightness};
pub use draws::{DEFAULT_DRAWS, DRAWS_LIMITS, DeriveSettings, FitDraws};
pub use dust::{dust_mass_msun, planck_w_m2_hz_sr};
pub use field::{
    FIELD_CORRECTION, LARGEST_ANGLE_DISPERSION_DEG, alfven_speed_km_s, field_from_angles_ug,
    mass_to_flux,
};
pub use gas::{
    MASS_PER_H2, MASS_PER_PARTICLE, h2_density_at_radius_cm3, mass_density_g_cm3,
    mass_from_density_msun, mean_h2_density_cm3,
};
pub use molecules::{
    Emitter, MOLECULES, Molecule, PARTITION_TEMPERATURES_K, einstein_a_of_rotor_per_s,
};
pub use source::{Input, SourceProperties};
pub use support::{
    mach_number, non_thermal_dispersion_km_s, sound_speed_km_s, thermal_dispersion_km_s,
    total_dispersion_km_s, virial_parameter,
};

/// Why nothing can be derived.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum DeriveError {
    /// A value that no source has.
    #[error("{key}: {}, expected {low} to {high}{}: {reason}", with_unit(*found, unit), spaced(unit))]
    Impossible {
        /// Key of the input.
        key: &'static str,
        /// What was given.
        found: f64,
        /// Its unit.
        unit: &'static str,
        /// Lowest possible value.
        low: f64,
        /// Highest possible value.
        high: f64,
        /// Why nothing lies there.
        reason: &'static str,
    },
    /// An error that is none.
    #[error("{key}: {value} with an error of {err}, expected an error of 0 to {widest}")]
    Error {
        /// Key of the input.
        key: &'static str,
        /// The value.
        value: f64,
        /// Its error.
        err: f64,
        /// Largest error taken beside this value.
        widest: f64,
    },
    /// Too few or too many draws.
    #[error("{found} draws, expected {} to {}", DRAWS_LIMITS.0, DRAWS_LIMITS.1)]
    Draws {
        /// How many.
        found: usize,
    },
    /// A column of draws of another length.
    #[error("{found} draws of {name}, expected {expected}")]
    Ragged {
        /// Name of the parameter.
        name: String,
        /// Its draws.
        found: usize,
        /// Those of the others.
        expected: usize,
    },
}

impl DeriveError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        Some(match self {
            Self::Impossible { key, unit: "", .. } => {
                format!("check {key}, or leave it out: what needs it stays empty")
            }
            Self::Impossible { key, unit, .. } => {
                format!("give {key} in {unit}, or leave it out: what needs it stays empty")
            }
            Self::Error { key, .. } => {
                format!(
                    "give {key} as a number, or as [value, error]; leave it out where it is unknown"
                )
            }
            Self::Draws { .. } => {
                format!("leave the number out for the default, {DEFAULT_DRAWS}")
            }
            Self::Ragged { .. } => "give every parameter one value a draw".to_owned(),
        })
    }
}

/// A number with its unit, plain where that is short.
fn with_unit(number: f64, unit: &str) -> String {
    format!("{number}{}", spaced(unit))
}

fn spaced(unit: &str) -> String {
    if unit.is_empty() {
        String::new()
    } else {
        format!(" {unit}")
    }
}
