//! Whether a map can be made, before its first ray.

use super::GridTruth;
use crate::constants::BACKGROUND_TEMPERATURE;
use crate::simulate::truth::{HIGHEST, NARROWEST_KM_S, check_noise};
use crate::simulate::{PairLine, SimulateError};

/// Most pointings of a map.
const MOST_POINTINGS: usize = 1_000_000;

/// What a number may be.
enum Allowed {
    Any,
    Positive,
    NotNegative,
    /// At least this.
    From(f64),
}

impl GridTruth {
    /// Whether the map can be made.
    ///
    /// # Errors
    ///
    /// [`SimulateError::Sample`] with the setting that stands against it, [`SimulateError::Seed`],
    /// [`SimulateError::Impossible`] for noise.
    pub fn check(&self) -> Result<(), SimulateError> {
        if i64::try_from(self.seed).is_err() {
            return Err(SimulateError::Seed { found: self.seed });
        }
        let pointings = self.columns.checked_mul(self.rows).unwrap_or(usize::MAX);
        if !(1..=MOST_POINTINGS).contains(&pointings) {
            return refuse(
                "columns and rows",
                &format!("{} by {}", self.columns, self.rows),
                &format!("1 to {MOST_POINTINGS} pointings"),
            );
        }
        if self.bad_pointings > pointings {
            return refuse(
                "bad_pointings",
                &self.bad_pointings.to_string(),
                &format!("at most the map's {pointings}"),
            );
        }
        for (name, value, allowed) in self.numbers() {
            check_number(name, value, &allowed)?;
        }
        let [major, minor] = self.beam_arcsec;
        if major < minor {
            return refuse(
                "beam_arcsec",
                &format!("{major}, {minor}"),
                "the major axis first",
            );
        }
        if !(-90.0..=90.0).contains(&self.dec_deg) {
            return refuse("dec_deg", &self.dec_deg.to_string(), "-90 to 90");
        }
        let core_arcsec = self.clump.core_arcsec;
        if core_arcsec >= self.clump.radius_arcsec {
            return refuse(
                "core_arcsec",
                &core_arcsec.to_string(),
                &format!("less than radius_arcsec, {}", self.clump.radius_arcsec),
            );
        }
        check_noise(PairLine::Thick, self.noise, self.correlation)?;
        check_noise(PairLine::Thin, self.noise_thin, self.correlation)
    }

    fn numbers(&self) -> Vec<(&'static str, f64, Allowed)> {
        use Allowed::{Any, From, NotNegative, Positive};
        let (clump, warmest) = (&self.clump, BACKGROUND_TEMPERATURE.value);
        let (infall, rotation, outflow) = (&clump.infall, &clump.rotation, &clump.outflow);
        vec![
            ("spacing_arcsec", self.spacing_arcsec, Positive),
            ("beam_arcsec", self.beam_arcsec[0], Positive),
            ("beam_arcsec", self.beam_arcsec[1], Positive),
            ("beam_angle_deg", self.beam_angle_deg, Any),
            ("ra_deg", self.ra_deg, Any),
            ("centre_arcsec", self.centre_arcsec[0], Any),
            ("centre_arcsec", self.centre_arcsec[1], Any),
            ("noise_edge_ratio", self.noise_edge_ratio, Positive),
            ("noise_fwhm_arcsec", self.noise_fwhm_arcsec, NotNegative),
            ("radius_arcsec", clump.radius_arcsec, Positive),
            ("core_arcsec", clump.core_arcsec, Positive),
            ("density_slope", clump.density_slope, NotNegative),
            ("t_centre_k", clump.t_centre_k, From(warmest)),
            ("t_edge_k", clump.t_edge_k, From(warmest)),
            ("excitation_slope", clump.excitation_slope, Positive),
            ("tau", clump.tau, Positive),
            ("isotope_ratio", clump.isotope_ratio, Positive),
            ("v_lsr_km_s", clump.v_lsr_km_s, Any),
            ("sigma_km_s", clump.sigma_km_s, From(NARROWEST_KM_S)),
            ("infall speed_km_s", infall.speed_km_s, Any),
            ("infall slope", infall.slope, Any),
            ("rotation speed_km_s", rotation.speed_km_s, Any),
            ("rotation slope", rotation.slope, Any),
            ("rotation axis_deg", rotation.axis_deg, Any),
            ("rotation tilt_deg", rotation.tilt_deg, Any),
            ("outflow speed_km_s", outflow.speed_km_s, Any),
            ("outflow angle_deg", outflow.angle_deg, Any),
            ("outflow tilt_deg", outflow.tilt_deg, Any),
            (
                "outflow distance_arcsec",
                outflow.distance_arcsec,
                NotNegative,
            ),
            ("outflow fwhm_arcsec", outflow.fwhm_arcsec, Positive),
            (
                "outflow sigma_km_s",
                outflow.sigma_km_s,
                From(NARROWEST_KM_S),
            ),
            ("outflow tau", outflow.tau, Positive),
            ("outflow t_ex_k", outflow.t_ex_k, From(warmest)),
        ]
    }
}

fn check_number(name: &'static str, value: f64, allowed: &Allowed) -> Result<(), SimulateError> {
    let (low, words) = match allowed {
        Allowed::Any => (-HIGHEST, "from -100000 to 100000".to_owned()),
        Allowed::Positive => (f64::MIN_POSITIVE, "above 0, up to 100000".to_owned()),
        Allowed::NotNegative => (0.0, "from 0 to 100000".to_owned()),
        Allowed::From(low) => (*low, format!("from {low} to 100000")),
    };
    if (low..=HIGHEST).contains(&value) {
        return Ok(());
    }
    refuse(name, &value.to_string(), &words)
}

fn refuse(quantity: &'static str, found: &str, expected: &str) -> Result<(), SimulateError> {
    Err(SimulateError::Sample {
        quantity,
        found: found.to_owned(),
        expected: expected.to_owned(),
    })
}
