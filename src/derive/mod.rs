//! Inward speed, dispersion and optical depth into what they mean for a clump: mass infall rate, time
//! scales, support, field and column densities.
//!
//! Each quantity is one documented function of plain numbers. [`SourceProperties`] holds what is given
//! of the source, [`FitDraws`] what a fit says; [`sample`] strings everything together and finds
//! intervals by sampling both. What lacks an input is empty and says which input would fill it.

mod collapse;
mod column;
mod dust;
mod field;
mod gas;
mod molecules;
mod support;

pub use collapse::{
    doubling_time_yr, free_fall_speed_km_s, free_fall_time_yr, isothermal_rate_msun_yr,
    mass_rate_from_density_msun_yr, mass_rate_from_mass_msun_yr,
};
pub use column::{column_density_cm2, depth_from_brightness};
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
pub use support::{
    mach_number, non_thermal_dispersion_km_s, sound_speed_km_s, thermal_dispersion_km_s,
    total_dispersion_km_s, virial_parameter,
};
