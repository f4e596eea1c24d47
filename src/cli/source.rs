//! Options about the source, the same for every command that derives something.

use super::values::given;
use clap::Args;
use inrush::run::{Given, SourceSection};

/// What is given of the source.
#[derive(Clone, Debug, Args)]
#[command(next_help_heading = "Source")]
pub struct SourceArguments {
    /// Distance, kpc, optionally with its error.
    #[arg(long, value_name = "KPC[,ERR]", value_parser = given, allow_hyphen_values = true)]
    distance_kpc: Option<Given>,
    /// Radius, pc, at that distance, optionally with its error.
    #[arg(long, value_name = "PC[,ERR]", value_parser = given, allow_hyphen_values = true)]
    radius_pc: Option<Given>,
    /// Mass within the radius, solar masses, at that distance, optionally with its error.
    #[arg(long, value_name = "MSUN[,ERR]", value_parser = given, allow_hyphen_values = true)]
    mass_msun: Option<Given>,
    /// Number density of H2 at the radius, cm-3, at that distance, optionally with its error.
    #[arg(long, value_name = "CM3[,ERR]", value_parser = given, allow_hyphen_values = true)]
    n_h2_cm3: Option<Given>,
    /// Slope p of the density, rho ~ r^-p, optionally with its error.
    #[arg(long, value_name = "P[,ERR]", value_parser = given, allow_hyphen_values = true)]
    density_slope: Option<Given>,
    /// Kinetic temperature, K, optionally with its error.
    #[arg(long, value_name = "K[,ERR]", value_parser = given, allow_hyphen_values = true)]
    t_kin_k: Option<Given>,
    /// Flux of the dust, Jy, optionally with its error.
    #[arg(long, value_name = "JY[,ERR]", value_parser = given, allow_hyphen_values = true)]
    dust_flux_jy: Option<Given>,
    /// Frequency of that flux, GHz, optionally with its error.
    #[arg(long, value_name = "GHZ[,ERR]", value_parser = given, allow_hyphen_values = true)]
    dust_freq_ghz: Option<Given>,
    /// Temperature of the dust, K, optionally with its error.
    #[arg(long, value_name = "K[,ERR]", value_parser = given, allow_hyphen_values = true)]
    dust_temperature_k: Option<Given>,
    /// Opacity of the dust per gram of gas and dust at that frequency, cm2/g, optionally with its error.
    #[arg(long, value_name = "CM2_G[,ERR]", value_parser = given, allow_hyphen_values = true)]
    dust_kappa_cm2_g: Option<Given>,
    /// Magnetic field strength, microgauss, optionally with its error.
    #[arg(long, value_name = "UG[,ERR]", value_parser = given, allow_hyphen_values = true)]
    field_ug: Option<Given>,
    /// Dispersion of the field's angles, degrees, optionally with its error.
    #[arg(long, value_name = "DEG[,ERR]", value_parser = given, allow_hyphen_values = true)]
    angle_dispersion_deg: Option<Given>,
    /// Excitation temperature of the thin line where its model has none, K, optionally with its error.
    #[arg(long, value_name = "K[,ERR]", value_parser = given, allow_hyphen_values = true)]
    thin_t_ex_k: Option<Given>,
}

impl SourceArguments {
    /// Options stand above the sheet.
    pub fn set(&self, section: &mut SourceSection) {
        for (target, option) in [
            (&mut section.distance_kpc, self.distance_kpc),
            (&mut section.radius_pc, self.radius_pc),
            (&mut section.mass_msun, self.mass_msun),
            (&mut section.n_h2_cm3, self.n_h2_cm3),
            (&mut section.density_slope, self.density_slope),
            (&mut section.t_kin_k, self.t_kin_k),
            (&mut section.dust_flux_jy, self.dust_flux_jy),
            (&mut section.dust_freq_ghz, self.dust_freq_ghz),
            (&mut section.dust_temperature_k, self.dust_temperature_k),
            (&mut section.dust_kappa_cm2_g, self.dust_kappa_cm2_g),
            (&mut section.field_ug, self.field_ug),
            (&mut section.angle_dispersion_deg, self.angle_dispersion_deg),
            (&mut section.thin_t_ex_k, self.thin_t_ex_k),
        ] {
            *target = option.or(*target);
        }
    }
}
