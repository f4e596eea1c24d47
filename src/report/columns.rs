//! Every result column: name, unit, meaning, and its place in the order of the outputs.
//!
//! A [`Quantity`] makes its own column and those of its uncertainty: `NAME_err` for a standard
//! error, `NAME_lo68`, `NAME_hi68`, `NAME_lo95`, `NAME_hi95` for intervals, all in the unit of `NAME`.
//! Units are written so that FITS, `VOUnit` and ECSV readers all take them; `VOUnit` deprecates the
//! gauss, which fields are in.

use std::sync::OnceLock;

use super::{Column, Kind, Schema};

/// The kind of statement that a quantity makes; quantities of one group stand together.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Group {
    /// Which pair this is.
    Identity,
    /// Noise, peaks and integrals of both lines.
    Lines,
    /// Velocities and widths of the lines.
    Kinematics,
    /// Measures of the thick line's asymmetry, without a model.
    Asymmetry,
    /// Parameters of a Gaussian.
    Gaussian,
    /// Parameters of two Gaussians.
    TwoGaussians,
    /// Parameters of one uniform layer.
    Layer,
    /// Parameters of the two-layer model.
    TwoLayer,
    /// Parameters of the two-layer model with a continuum source.
    TwoLayerContinuum,
    /// Parameters of the hill model with its surface at the background temperature.
    Hill,
    /// Parameters of the hill model with a free surface temperature.
    HillSurface,
    /// Parameters of the collapsing sphere.
    Sphere,
    /// The adopted speed.
    Infall,
    /// Probabilities of the hypotheses.
    Hypotheses,
    /// What follows from speed, mass and size.
    Collapse,
    /// What holds the gas up: heat, turbulence, field.
    Support,
    /// Column densities of the lines' species.
    ColumnDensity,
    /// What would fill empty columns.
    Missing,
    /// What limits the result.
    Cautions,
}

impl Group {
    /// Whether its errors are formal: from the curvature of chi2 at the minimum of a model's fit.
    pub fn is_fitted(self) -> bool {
        matches!(
            self,
            Self::Gaussian
                | Self::TwoGaussians
                | Self::Layer
                | Self::TwoLayer
                | Self::TwoLayerContinuum
                | Self::Hill
                | Self::HillSurface
        )
    }

    /// Whether its intervals come from sampling what is given of the source and what a fit says.
    pub fn is_derived(self) -> bool {
        matches!(self, Self::Collapse | Self::Support | Self::ColumnDensity)
    }

    /// The group's heading.
    pub fn heading(self) -> &'static str {
        match self {
            Self::Identity => "The pair",
            Self::Lines => "Noise and strength of the lines",
            Self::Kinematics => "Velocities and widths",
            Self::Asymmetry => "Asymmetry of the thick line, without a model",
            Self::Gaussian => "Gaussian",
            Self::TwoGaussians => "Two Gaussians",
            Self::Layer => "One uniform layer",
            Self::TwoLayer => "Two-layer model",
            Self::TwoLayerContinuum => "Two-layer model with a continuum source",
            Self::Hill => "Hill model, surface at the background",
            Self::HillSurface => "Hill model, surface temperature free",
            Self::Sphere => "Collapsing sphere",
            Self::Infall => "Inward speed",
            Self::Hypotheses => "Probabilities",
            Self::Collapse => "Collapse",
            Self::Support => "Support",
            Self::ColumnDensity => "Column densities",
            Self::Missing => "Not derived",
            Self::Cautions => "Cautions",
        }
    }
}

/// How a quantity's uncertainty is stated.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Uncertainty {
    /// Not at all.
    None,
    /// Standard error.
    Error,
    /// Central intervals of 68 and 95 %.
    Intervals,
    /// Both.
    ErrorAndIntervals,
}

/// One result with everything that is said about it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Quantity {
    /// Name of its column.
    pub name: &'static str,
    /// Unit, in FITS spelling.
    pub unit: Option<&'static str>,
    /// What its column holds.
    pub kind: Kind,
    /// Where it belongs.
    pub group: Group,
    /// Few words for the readable summary.
    pub label: &'static str,
    /// One sentence without a full stop.
    pub description: &'static str,
    /// Which further columns it has.
    pub uncertainty: Uncertainty,
}

const fn text(
    group: Group,
    name: &'static str,
    label: &'static str,
    description: &'static str,
) -> Quantity {
    Quantity {
        name,
        unit: None,
        kind: Kind::Text,
        group,
        label,
        description,
        uncertainty: Uncertainty::None,
    }
}

const fn real(
    group: Group,
    name: &'static str,
    unit: Option<&'static str>,
    label: &'static str,
    description: &'static str,
) -> Quantity {
    Quantity {
        name,
        unit,
        kind: Kind::Real,
        group,
        label,
        description,
        uncertainty: Uncertainty::None,
    }
}

const fn with(quantity: Quantity, uncertainty: Uncertainty) -> Quantity {
    Quantity {
        uncertainty,
        ..quantity
    }
}

const KM_S: Option<&str> = Some("km/s");
const KELVIN: Option<&str> = Some("K");
const K_KM_S: Option<&str> = Some("K.km/s");
const ARCSEC: Option<&str> = Some("arcsec");
const YEAR: Option<&str> = Some("yr");
const MASS: Option<&str> = Some("solMass");
const PER_CM3: Option<&str> = Some("cm-3");
const PER_CM2: Option<&str> = Some("cm-2");
const MICROGAUSS: Option<&str> = Some("uG");
const MASS_RATE: Option<&str> = Some("solMass/yr");

use Group::{
    Asymmetry, Cautions, Collapse, ColumnDensity, Gaussian, Hill, HillSurface, Hypotheses,
    Identity, Infall, Kinematics, Layer, Lines, Missing, Sphere, Support, TwoGaussians, TwoLayer,
    TwoLayerContinuum,
};
use Uncertainty::{Error, ErrorAndIntervals, Intervals};

/// All quantities, in the order of the outputs.
#[rustfmt::skip]
pub const QUANTITIES: &[Quantity] = &[
    text(Identity, "id", "source", "Name of the source or pointing"),
    real(Identity, "dx_arcsec", ARCSEC, "offset east", "Offset of the pointing from the reference position toward the east"),
    real(Identity, "dy_arcsec", ARCSEC, "offset north", "Offset of the pointing from the reference position toward the north"),
    text(Identity, "thick_line", "thick line", "The optically thick line"),
    text(Identity, "thin_line", "thin line", "The optically thin line"),

    real(Lines, "noise_thick_k", KELVIN, "noise, thick line", "Standard deviation of one channel of the thick line"),
    real(Lines, "noise_thin_k", KELVIN, "noise, thin line", "Standard deviation of one channel of the thin line"),
    with(real(Lines, "peak_thick_k", KELVIN, "peak, thick line", "Peak main-beam temperature of the thick line"), Error),
    with(real(Lines, "peak_thin_k", KELVIN, "peak, thin line", "Peak main-beam temperature of the thin line"), Error),
    with(real(Lines, "integral_thick_k_km_s", K_KM_S, "integral, thick line", "Integrated intensity of the thick line in its window"), Error),
    with(real(Lines, "integral_thin_k_km_s", K_KM_S, "integral, thin line", "Integrated intensity of the thin line in its window"), Error),

    with(real(Kinematics, "v_thin_km_s", KM_S, "velocity, thin line", "Velocity of the thin line from its own fit"), Error),
    with(real(Kinematics, "fwhm_thin_km_s", KM_S, "width, thin line", "Full width at half maximum of the thin line"), Error),
    with(real(Kinematics, "v_thick_km_s", KM_S, "velocity, thick line's peak", "Velocity of the thick line's peak"), Error),

    with(real(Asymmetry, "delta_v", None, "velocity difference", "Normalised velocity difference (v_thick - v_thin)/fwhm_thin"), Error),
    real(Asymmetry, "delta_v_systematic", None, "of which rest frequencies", "Systematic error of delta_v from the rest frequencies"),
    with(real(Asymmetry, "peak_ratio", None, "blue over red peak", "Temperature of the blue peak over that of the red peak"), Error),
    with(real(Asymmetry, "asymmetry", None, "intensity asymmetry", "(I_blue - I_red)/(I_blue + I_red) about v_thin"), Error),
    with(real(Asymmetry, "skewness", None, "skewness", "Skewness of the thick line about v_thin"), Error),
    text(Asymmetry, "profile", "profile", "Sense of the asymmetry: blue, red, neither or undetected"),
    with(real(Asymmetry, "v_closed_form_km_s", KM_S, "inward speed, closed form", "Inward speed from the closed form for two-peak lines"), Error),

    with(real(Gaussian, "gaussian_v_lsr_km_s", KM_S, "velocity", "Velocity of both lines, one Gaussian each"), Error),
    with(real(Gaussian, "gaussian_sigma_km_s", KM_S, "dispersion", "Dispersion of both lines, one Gaussian each"), Error),
    with(real(Gaussian, "gaussian_peak_k", KELVIN, "peak, thick line", "Peak of the thick line's Gaussian"), Error),
    real(Gaussian, "gaussian_chi2_red", None, "reduced chi2", "Reduced chi-squared of one Gaussian a line"),

    with(real(TwoGaussians, "two_gaussians_v_lsr_km_s", KM_S, "velocity, first", "Velocity of the first of two Gaussians, both lines"), Error),
    with(real(TwoGaussians, "two_gaussians_sigma_km_s", KM_S, "dispersion, first", "Dispersion of the first of two Gaussians"), Error),
    with(real(TwoGaussians, "two_gaussians_peak_k", KELVIN, "peak, first", "Peak of the thick line's first Gaussian"), Error),
    with(real(TwoGaussians, "two_gaussians_v_second_km_s", KM_S, "velocity, second", "Velocity of the second of two Gaussians, both lines"), Error),
    with(real(TwoGaussians, "two_gaussians_sigma_second_km_s", KM_S, "dispersion, second", "Dispersion of the second of two Gaussians"), Error),
    with(real(TwoGaussians, "two_gaussians_peak_second_k", KELVIN, "peak, second", "Peak of the thick line's second Gaussian"), Error),
    real(TwoGaussians, "two_gaussians_chi2_red", None, "reduced chi2", "Reduced chi-squared of two Gaussians a line"),

    with(real(Layer, "layer_v_lsr_km_s", KM_S, "velocity", "Velocity of both lines, thick line one uniform layer"), Error),
    with(real(Layer, "layer_sigma_km_s", KM_S, "dispersion", "Dispersion of both lines, thick line one uniform layer"), Error),
    with(real(Layer, "layer_tau_total", None, "optical depth", "Optical depth of the thick line's layer, summed over its components"), Error),
    with(real(Layer, "layer_t_ex_k", KELVIN, "excitation", "Excitation temperature of the thick line's layer"), Error),
    real(Layer, "layer_chi2_red", None, "reduced chi2", "Reduced chi-squared of the thick line as one uniform layer"),

    with(real(TwoLayer, "two_layer_v_in_km_s", KM_S, "inward speed", "Inward speed of the two-layer model"), ErrorAndIntervals),
    with(real(TwoLayer, "two_layer_tau", None, "optical depth of a layer", "Peak optical depth of one layer"), Error),
    with(real(TwoLayer, "two_layer_t_front_k", KELVIN, "front layer", "Excitation temperature of the front layer"), Error),
    with(real(TwoLayer, "two_layer_t_rear_k", KELVIN, "rear layer", "Excitation temperature of the rear layer"), Error),
    real(TwoLayer, "two_layer_chi2_red", None, "reduced chi2", "Reduced chi-squared of the two-layer fit to the pair"),
    real(TwoLayer, "two_layer_share", None, "share of the evidence", "Share of the model's evidence in the averaged speed"),

    with(real(TwoLayerContinuum, "two_layer_continuum_v_in_km_s", KM_S, "inward speed", "Inward speed, two layers and a continuum source"), Error),
    with(real(TwoLayerContinuum, "two_layer_continuum_tau", None, "optical depth of a layer", "Peak optical depth of one layer"), Error),
    with(real(TwoLayerContinuum, "two_layer_continuum_t_front_k", KELVIN, "front layer", "Excitation temperature of the front layer"), Error),
    with(real(TwoLayerContinuum, "two_layer_continuum_t_rear_k", KELVIN, "rear layer", "Excitation temperature of the rear layer"), Error),
    with(real(TwoLayerContinuum, "two_layer_continuum_filling", None, "beam filling", "Beam filling of the continuum source"), Error),
    with(real(TwoLayerContinuum, "two_layer_continuum_t_continuum_k", KELVIN, "continuum source", "Temperature of the continuum source"), Error),
    real(TwoLayerContinuum, "two_layer_continuum_chi2_red", None, "reduced chi2", "Reduced chi-squared of this fit to the pair"),

    with(real(Hill, "hill_v_in_km_s", KM_S, "inward speed", "Inward speed of the hill model"), ErrorAndIntervals),
    with(real(Hill, "hill_tau", None, "optical depth of a half", "Peak optical depth of one half of the hill"), Error),
    with(real(Hill, "hill_t_peak_k", KELVIN, "peak of the hill", "Excitation temperature in the middle of the hill"), Error),
    real(Hill, "hill_chi2_red", None, "reduced chi2", "Reduced chi-squared of the hill fit to the pair"),
    real(Hill, "hill_share", None, "share of the evidence", "Share of the model's evidence in the averaged speed"),

    with(real(HillSurface, "hill_surface_v_in_km_s", KM_S, "inward speed", "Inward speed, hill with a free surface temperature"), ErrorAndIntervals),
    with(real(HillSurface, "hill_surface_tau", None, "optical depth of a half", "Peak optical depth of one half of the hill"), Error),
    with(real(HillSurface, "hill_surface_t_peak_k", KELVIN, "peak of the hill", "Excitation temperature in the middle of the hill"), Error),
    with(real(HillSurface, "hill_surface_t_surface_k", KELVIN, "surface of the hill", "Excitation temperature at both surfaces of the hill"), Error),
    real(HillSurface, "hill_surface_chi2_red", None, "reduced chi2", "Reduced chi-squared of this fit to the pair"),
    real(HillSurface, "hill_surface_share", None, "share of the evidence", "Share of the model's evidence in the averaged speed"),

    with(real(Sphere, "sphere_v_in_km_s", KM_S, "inward speed", "Inward speed of the collapsing sphere at its outer radius"), ErrorAndIntervals),
    text(Sphere, "sphere_law", "speed against radius", "How the sphere's speed depends on the radius: constant, or free fall (as r^-1/2)"),
    real(Sphere, "sphere_chi2_red", None, "reduced chi2", "chi2 of the best sphere over the channels of both lines, baselines and shape errors taken out"),

    with(real(Infall, "v_lsr_km_s", KM_S, "systemic velocity", "Systemic velocity: of the posterior, or from the joint fit of v_in_model"), Error),
    with(real(Infall, "sigma_km_s", KM_S, "velocity dispersion", "Velocity dispersion: of the posterior, or from the joint fit of v_in_model"), Error),
    with(real(Infall, "v_in_km_s", KM_S, "adopted inward speed", "Adopted inward speed; positive is infall"), ErrorAndIntervals),
    real(Infall, "v_in_systematic_km_s", KM_S, "systematic, between models", "Half the difference of the models' median speeds: a systematic beside the interval"),
    real(Infall, "v_in_limit_km_s", KM_S, "limit in either direction", "Speed that |v_in| is below with 95 % probability, where the interval of v_in holds zero"),
    text(Infall, "v_in_model", "adopted from", "Where the adopted speed is from: sphere, or the slab models that it is averaged over, joined by +; the one model of a formal fit"),
    text(Infall, "v_in_errors", "errors", "Where speed and errors come from: posterior, or formal (least squares)"),

    real(Hypotheses, "p_infall", None, "infall", "Probability of infall"),
    real(Hypotheses, "p_expansion", None, "expansion", "Probability of expansion"),
    real(Hypotheses, "p_static", None, "static", "Probability of neither infall nor expansion"),
    real(Hypotheses, "p_two_clouds", None, "two clouds", "Probability of two clouds on one line of sight"),
    text(Hypotheses, "verdict", "verdict", "What the data exclude and at what odds, what they cannot, in sentences"),

    with(real(Collapse, "mass_dust_msun", MASS, "mass from dust", "Mass of gas from the dust's flux, S d^2/(kappa B(T_d))"), Intervals),
    with(real(Collapse, "mass_msun", MASS, "mass", "Mass within the source's radius"), Intervals),
    text(Collapse, "mass_from", "mass from", "Where mass_msun comes from: given, or its formula"),
    with(real(Collapse, "n_h2_mean_cm3", PER_CM3, "mean density of H2", "Mean number density of H2, M/((4/3) pi R^3 2.8 m_H)"), Intervals),
    with(real(Collapse, "mass_rate_msun_yr", MASS_RATE, "mass infall rate", "Mass infall rate through the source's radius"), Intervals),
    text(Collapse, "mass_rate_from", "mass infall rate from", "Formula of mass_rate_msun_yr"),
    with(real(Collapse, "v_ff_km_s", KM_S, "free-fall speed", "Free-fall speed at the source's radius, sqrt(2 G M/R)"), Intervals),
    with(real(Collapse, "v_in_over_v_ff", None, "inward over free fall", "Inward speed over free-fall speed"), Intervals),
    with(real(Collapse, "t_ff_yr", YEAR, "free-fall time", "Free-fall time at the mean density, sqrt(3 pi/(32 G rho))"), Intervals),
    with(real(Collapse, "doubling_time_yr", YEAR, "mass doubling time", "Mass over mass infall rate"), Intervals),

    with(real(Support, "sound_speed_km_s", KM_S, "sound speed", "Isothermal sound speed, sqrt(k T/(2.33 m_H))"), Intervals),
    with(real(Support, "sigma_nonthermal_km_s", KM_S, "non-thermal dispersion", "Dispersion without the thin line's thermal part, sqrt(sigma^2 - k T/m)"), Intervals),
    with(real(Support, "sigma_total_km_s", KM_S, "total dispersion", "Dispersion of the mean particle, non-thermal and sound speed in quadrature"), Intervals),
    with(real(Support, "mach_number", None, "sonic Mach number", "Non-thermal dispersion over sound speed, one-dimensional"), Intervals),
    with(real(Support, "virial_parameter", None, "virial parameter", "5 sigma^2 R/(G M) with the total dispersion"), Intervals),
    with(real(Support, "virial_thermal", None, "thermal part", "5 sigma^2 R/(G M) with the sound speed"), Intervals),
    with(real(Support, "virial_nonthermal", None, "non-thermal part", "5 sigma^2 R/(G M) with the non-thermal dispersion"), Intervals),
    with(real(Support, "isothermal_rate_msun_yr", MASS_RATE, "isothermal sphere's rate", "0.975 a^3/G with a the total dispersion"), Intervals),
    with(real(Support, "field_ug", MICROGAUSS, "field strength", "Given field, or 0.5 sqrt(4 pi rho) sigma_nt/sigma_phi from the dispersion of its angles"), Intervals),
    with(real(Support, "mass_to_flux", None, "mass to flux over critical", "Mass-to-flux ratio in units of 1/(2 pi sqrt(G))"), Intervals),
    with(real(Support, "v_alfven_km_s", KM_S, "Alfven speed", "Alfven speed at the mean density, B/sqrt(4 pi rho)"), Intervals),
    with(real(Support, "v_in_over_v_alfven", None, "inward over Alfven speed", "Inward speed over Alfven speed"), Intervals),

    with(real(ColumnDensity, "column_thick_cm2", PER_CM2, "thick line's species", "Column density from tau, sigma and T_ex of the adopted model, Mangum & Shirley 2015"), Intervals),
    with(real(ColumnDensity, "column_thin_cm2", PER_CM2, "thin line's species", "Column density from the fit or from the peak and thin_t_ex_k, Mangum & Shirley 2015"), Intervals),

    text(Missing, "missing_inputs", "missing", "Which inputs would fill which empty columns, separated by ;"),

    text(Cautions, "cautions", "cautions", "Short codes of what limits the result, separated by ;"),
];

impl Quantity {
    /// Its own column and those of its uncertainty, in order.
    pub fn columns(&self) -> Vec<Column> {
        let mut columns = vec![self.column("", self.description.to_owned())];
        if matches!(self.uncertainty, Error | ErrorAndIntervals) {
            let kind = if self.group.is_fitted() {
                "Formal standard error"
            } else {
                "Standard error"
            };
            columns.push(self.column("_err", format!("{kind} of {}", self.name)));
        }
        if matches!(self.uncertainty, Intervals | ErrorAndIntervals) {
            let of = if self.group.is_fitted() {
                "the posterior's"
            } else {
                "the"
            };
            for percent in [68, 95] {
                for (suffix, end) in [("lo", "Lower"), ("hi", "Upper")] {
                    columns.push(self.column(
                        &format!("_{suffix}{percent}"),
                        format!(
                            "{end} end of {of} central {percent} % interval of {}",
                            self.name
                        ),
                    ));
                }
            }
        }
        columns
    }

    fn column(&self, suffix: &str, description: String) -> Column {
        Column {
            name: format!("{}{suffix}", self.name),
            unit: self.unit.map(str::to_owned),
            description,
            kind: self.kind,
        }
    }
}

/// All result columns; the same object each time.
pub fn results() -> Schema {
    static ALL: OnceLock<Schema> = OnceLock::new();
    ALL.get_or_init(|| of_groups(|_| true)).clone()
}

/// The result columns of those groups that `wanted` keeps, in the same order.
///
/// # Panics
///
/// Never: the names of [`QUANTITIES`] differ, which a test holds.
pub fn of_groups(wanted: impl Fn(Group) -> bool) -> Schema {
    let columns = QUANTITIES
        .iter()
        .filter(|quantity| wanted(quantity.group))
        .flat_map(Quantity::columns)
        .collect();
    Schema::new(columns).expect("result columns have different names")
}

/// All result columns as the rows of a Markdown table: name, unit, kind, meaning.
pub fn markdown() -> String {
    use std::fmt::Write as _;
    let mut text = String::from("| column | unit | kind | meaning |\n| --- | --- | --- | --- |\n");
    for column in results().columns() {
        let unit = column.unit.as_deref().unwrap_or("");
        let kind = match column.kind {
            Kind::Text => "text",
            Kind::Real => "real",
            Kind::Integer => "integer",
        };
        // Writing to a string cannot fail.
        let _ = writeln!(
            text,
            "| `{}` | {unit} | {kind} | {} |",
            column.name, column.description
        );
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_differ_and_state_their_units() {
        let schema = results();
        for column in schema.columns() {
            let suffix = match column.unit.as_deref() {
                Some("km/s") => "_km_s",
                Some("K.km/s") => "_k_km_s",
                Some("K") => "_k",
                Some("arcsec") => "_arcsec",
                Some("yr") => "_yr",
                Some("solMass") => "_msun",
                Some("cm-3") => "_cm3",
                Some("cm-2") => "_cm2",
                Some("uG") => "_ug",
                Some("solMass/yr") => "_msun_yr",
                Some(other) => panic!("{other} has no suffix"),
                None => continue,
            };
            assert!(column.name.contains(suffix), "{}", column.name);
        }
    }

    #[test]
    fn groups_are_contiguous() {
        let mut seen = Vec::new();
        for quantity in QUANTITIES {
            if seen.last() != Some(&quantity.group) {
                assert!(!seen.contains(&quantity.group), "{}", quantity.name);
                seen.push(quantity.group);
            }
        }
    }
}
