//! Models and a prepared pair into parameters, formal errors and cautions.
//!
//! Thick and thin line are fitted together: velocity and dispersion shared (unless freed), optical
//! depths linked where an isotope ratio is given. Errors here are formal: from the curvature of chi2
//! at its minimum, with the measured noise and its correlation between channels.

mod amplitudes;
pub mod averaged;
mod cautions;
mod channels;
pub mod clump;
pub mod conflict;
pub mod hypotheses;
mod joint;
mod normal;
pub mod posterior;
pub mod priors;
mod projected;
mod race;
mod starts;
mod thin;
mod workspace;

pub use cautions::{
    Caution, Judgement, PairFacts, Unjudged, cautions, is_absorbed, sphere_cautions,
};
pub use channels::{Averaging, Channels};
pub use joint::{JointParameter, JointProblem, Layout};
pub use thin::{ThinFit, fit_thin};
pub use workspace::Workspace;

use crate::constants::FWHM_PER_SIGMA;
use crate::line::Line;
use crate::measure::ThinLine;
use crate::model::{LineShape, Model, Sampling};
use crate::numeric::Estimate;
use crate::numeric::least_squares::{
    Interval, LeastSquaresError, MAX_PARAMETERS, Minimum, Settings, Side, Termination, minimize,
};
use crate::prepare::Prepared;
use crate::spectrum::Window;
use projected::Projected;
use starts::{Kinematics, Scan};
use std::collections::BTreeMap;

/// How pairs are fitted.
#[derive(Clone, Debug, PartialEq)]
pub struct FitSettings {
    /// Models of the thick line, in the order of the results.
    pub models: Vec<Model>,
    /// Velocities whose channels count, both lines; `None` takes the line windows and as much again
    /// on either side.
    pub range: Option<FitRange>,
    /// Gives the thin line a velocity of its own.
    pub free_thin_velocity: bool,
    /// Gives the thin line a dispersion of its own.
    pub free_thin_sigma: bool,
    /// Links the optical depths, `tau_thick` = ratio `tau_thin`: the ratio and its error (0 holds it).
    pub isotope_ratio: Option<Estimate>,
    /// How the model's value in a channel is formed.
    pub averaging: Averaging,
    /// Bounds of parameters by name, in place of the defaults.
    pub bounds: BTreeMap<String, (f64, f64)>,
    /// Given parameters by name: held where the error is 0, else a Gaussian prior.
    pub given: BTreeMap<String, Estimate>,
    /// Where searches begin beside the starts that the data suggest, such as a neighbour's solution: a model
    /// with its parameters, in the order of [`ModelFit::parameters`]; those of no such model are passed over.
    pub starts: Vec<(Model, Vec<f64>)>,
}

impl Default for FitSettings {
    fn default() -> Self {
        Self {
            models: vec![Model::TwoLayer, Model::Hill],
            range: None,
            free_thin_velocity: false,
            free_thin_sigma: false,
            isotope_ratio: None,
            averaging: Averaging::Channel,
            bounds: BTreeMap::new(),
            given: BTreeMap::new(),
            starts: Vec::new(),
        }
    }
}

/// Which channels count.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum FitRange {
    /// Every usable channel of both spectra.
    All,
    /// Those in a range of velocities.
    Within(Window),
}

/// Why a pair cannot be fitted.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum FitError {
    /// Too few channels in the fitted range.
    #[error(
        "{channels} channels for the {parameters} parameters of the {model} model, expected more channels than parameters"
    )]
    TooFewChannels {
        /// Channels of both lines.
        channels: usize,
        /// Parameters.
        parameters: usize,
        /// Name of the model.
        model: &'static str,
    },
    /// The two lines have no velocities in common.
    #[error(
        "thick line covers {thick_low_km_s:.2} to {thick_high_km_s:.2} km/s and thin line {thin_low_km_s:.2} to {thin_high_km_s:.2} km/s, expected common velocities"
    )]
    NoCommonVelocities {
        /// First channel of the thick line.
        thick_low_km_s: f64,
        /// Last channel of the thick line.
        thick_high_km_s: f64,
        /// First channel of the thin line.
        thin_low_km_s: f64,
        /// Last channel of the thin line.
        thin_high_km_s: f64,
    },
    /// Bounds with nothing between them.
    #[error("bounds {lower} to {upper} of {name}, expected the lower below the upper")]
    EmptyBounds {
        /// Parameter.
        name: String,
        /// Lower bound.
        lower: f64,
        /// Upper bound.
        upper: f64,
    },
    /// Bounds that reach where the parameter has no meaning.
    #[error("bounds {lower} to {upper} of {name}, expected {expected}")]
    ImpossibleBounds {
        /// Parameter.
        name: String,
        /// Lower bound.
        lower: f64,
        /// Upper bound.
        upper: f64,
        /// Where bounds may lie.
        expected: &'static str,
    },
    /// A given value outside the parameter's bounds.
    #[error("{name} given as {value}, expected a value from {lower} to {upper}")]
    GivenOutside {
        /// Parameter.
        name: String,
        /// The value.
        value: f64,
        /// Lower bound.
        lower: f64,
        /// Upper bound.
        upper: f64,
    },
    /// A continuum source that nothing determines.
    #[error(
        "the two-layer-continuum model without {}, expected filling and t_continuum_k given: line profiles do not determine them",
        missing.join(" and ")
    )]
    OpenContinuum {
        /// Those that are not given.
        missing: Vec<&'static str>,
    },
    /// A name that no parameter of the chosen models has.
    #[error("parameter `{name}`, expected one of the chosen models': {known}")]
    UnknownParameter {
        /// The name.
        name: String,
        /// The known names.
        known: String,
        /// The nearest of them.
        nearest: Option<&'static str>,
    },
    /// An isotope ratio with a model that has no optical depth.
    #[error("an isotope ratio with the {model} model, expected a model with an optical depth")]
    NothingToLink {
        /// Name of the model.
        model: &'static str,
    },
    /// The least-squares problem could not be set up.
    #[error("{0}")]
    Search(String),
}

impl FitError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        match self {
            Self::TooFewChannels { .. } => {
                Some("widen the fitted range, or choose a model with fewer parameters".to_owned())
            }
            Self::NoCommonVelocities { .. } => Some(
                "check the rest frequencies and frames of both files: a wrong rest frequency shifts the velocities".to_owned(),
            ),
            Self::OpenContinuum { .. } => Some(
                "hold them, as in --given filling=0.05 --given t_continuum_k=40, or give errors too, as in filling=0.05,0.01".to_owned(),
            ),
            Self::UnknownParameter { nearest, .. } => Some(nearest.map_or_else(
                || "choose the model that it belongs to, or leave it out".to_owned(),
                |name| format!("did you mean `{name}`?"),
            )),
            Self::NothingToLink { .. } => Some(
                "leave the ratio out, or choose among two-layer, two-layer-continuum, hill, hill-surface".to_owned(),
            ),
            Self::EmptyBounds { .. } => {
                Some("give the lower bound first; a given value holds a parameter".to_owned())
            }
            Self::ImpossibleBounds { .. } => {
                Some("leave the bounds out for the default ones".to_owned())
            }
            Self::GivenOutside { name, .. } => {
                Some(format!("give a value inside, or bounds of {name} that hold it"))
            }
            Self::Search(_) => {
                Some("please report this with the input that caused it".to_owned())
            }
        }
    }
}

/// A fitted parameter.
#[derive(Clone, Debug, PartialEq)]
pub struct FittedParameter {
    /// Name with unit, as in the tables.
    pub name: &'static str,
    /// Unit; empty for a pure number.
    pub unit: &'static str,
    /// Value at the minimum.
    pub value: f64,
    /// Formal standard error; `None` at a bound, where it is held, or where the data do not
    /// determine it.
    pub err: Option<f64>,
    /// The bound it sits on; `None` for a held one.
    pub at_bound: Option<Side>,
    /// Whether it was held at a given value.
    pub held: bool,
}

/// A second minimum of chi2 with the other sign of the inward speed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Rival {
    /// Inward speed there, km/s.
    pub v_in_km_s: f64,
    /// chi2 there less chi2 at the best minimum.
    pub delta_chi2: f64,
}

/// The fit of one model to a pair.
#[derive(Clone, Debug, PartialEq)]
pub struct ModelFit {
    /// Model of the thick line.
    pub model: Model,
    /// Parameters at the best minimum.
    pub parameters: Vec<FittedParameter>,
    /// chi2 over both lines, whitened, priors included.
    pub chi2: f64,
    /// Channels of both lines that count.
    pub channels: usize,
    /// Channels and priors less free parameters.
    pub degrees_of_freedom: usize,
    /// Why the search of the best minimum ended.
    pub termination: Termination,
    /// Starts that were followed to a minimum.
    pub starts: usize,
    /// Model evaluations over all starts.
    pub evaluations: usize,
    /// A minimum with the other sign of `v_in`, where one was found.
    pub rival: Option<Rival>,
    layout: Layout,
    thick_shape: LineShape,
    thin_shape: LineShape,
}

impl ModelFit {
    /// A parameter by name.
    #[must_use]
    pub fn parameter(&self, name: &str) -> Option<&FittedParameter> {
        self.parameters
            .iter()
            .find(|parameter| parameter.name == name)
    }

    /// A parameter's value and formal error; `None` where it has no error.
    #[must_use]
    pub fn estimate(&self, name: &str) -> Option<Estimate> {
        let parameter = self.parameter(name)?;
        Some(Estimate {
            value: parameter.value,
            err: parameter.err?,
        })
    }

    /// chi2 over the degrees of freedom.
    #[must_use]
    pub fn chi2_reduced(&self) -> f64 {
        self.chi2 / self.degrees_of_freedom.max(1) as f64
    }

    /// Whether the search ended at a minimum.
    #[must_use]
    pub fn converged(&self) -> bool {
        self.termination.converged()
    }

    /// Whether the data determine the parameters: there are formal errors, or nothing was left free.
    #[must_use]
    pub fn determined(&self) -> bool {
        self.parameters
            .iter()
            .any(|parameter| parameter.err.is_some())
            || self.parameters.iter().all(|parameter| parameter.held)
    }

    fn values(&self) -> Vec<f64> {
        self.parameters
            .iter()
            .map(|parameter| parameter.value)
            .collect()
    }

    /// The thick line's profile, K, on a sampling.
    #[must_use]
    pub fn thick_profile_k(&self, sampling: &Sampling) -> Vec<f64> {
        let (model, parameters) = self.layout.thick(&self.values());
        let mut value = vec![0.0; sampling.len()];
        model.evaluate(&self.thick_shape, sampling, &parameters, &mut value, None);
        value
    }

    /// The thin line's profile, K, on a sampling.
    #[must_use]
    pub fn thin_profile_k(&self, sampling: &Sampling) -> Vec<f64> {
        let (model, parameters) = self.layout.thin(&self.values());
        let mut value = vec![0.0; sampling.len()];
        model.evaluate(&self.thin_shape, sampling, &parameters, &mut value, None);
        value
    }
}

/// The fits of a pair.
#[derive(Clone, Debug, PartialEq)]
pub struct PairFit {
    /// One fit a model, in the order of [`FitSettings::models`].
    pub models: Vec<ModelFit>,
    /// Position of the model whose inward speed is adopted.
    pub adopted: Option<usize>,
    /// Velocities whose channels counted.
    pub range: Option<Window>,
    /// Quadrature points a channel, thick and thin line.
    pub points: (usize, usize),
}

impl PairFit {
    /// The fit whose inward speed is adopted.
    #[must_use]
    pub fn adopted(&self) -> Option<&ModelFit> {
        self.adopted.map(|index| &self.models[index])
    }
}

/// The order in which a model's inward speed is adopted: on simulated spheres the hill's is nearer the
/// truth than the two-layer's, whatever their chi2 (docs/validation.md).
const ADOPTION: [Model; 4] = [
    Model::Hill,
    Model::HillSurface,
    Model::TwoLayer,
    Model::TwoLayerContinuum,
];

/// Fits every model of the settings to a pair.
///
/// `thin_line` is the thin line's fit where it is detected: it gives the starts.
///
/// # Errors
///
/// [`FitError`] where there are too few channels, no common velocities, or settings that name no
/// parameter. A search that does not converge is not an error: see [`ModelFit::termination`].
pub fn fit_pair(
    thick: &Prepared,
    thin: &Prepared,
    lines: (&Line, &Line),
    thin_line: Option<&ThinLine>,
    settings: &FitSettings,
    workspace: &mut Workspace,
) -> Result<PairFit, FitError> {
    let range = match settings.range {
        Some(FitRange::All) => None,
        Some(FitRange::Within(window)) => Some(window),
        None => Some(default_range(thick, thin)),
    };
    let overlap = common_velocities(thick, thin)?;
    let thick_shape = LineShape::new(lines.0.rest_frequency_ghz, lines.0.components.clone());
    let thin_shape = LineShape::new(lines.1.rest_frequency_ghz, lines.1.components.clone());
    let intensity = starts::intensity_moments(
        &Sampling::new(
            thick.spectrum.velocity_km_s().to_vec(),
            thick.spectrum.width_km_s().to_vec(),
            1,
        ),
        thick.spectrum.temperature_k(),
        thick.window.low_km_s,
        thick.window.high_km_s,
    );
    let kinematics = starts::kinematics(thin_line, intensity);
    let narrowest = narrowest_feature_km_s(thin_line, intensity);
    let thick_channels = Channels::new(thick, thick_shape, range, settings.averaging, narrowest);
    let thin_channels = Channels::new(thin, thin_shape, range, settings.averaging, narrowest);
    let reach = range.unwrap_or(overlap);
    let reach = Interval::new(reach.low_km_s, reach.high_km_s);

    let layouts = settings
        .models
        .iter()
        .map(|model| {
            let thin_model = thin_model(*model, lines.1, settings);
            Layout::new(*model, thin_model, settings, reach)
        })
        .collect::<Result<Vec<Layout>, FitError>>()?;
    check_names(settings, &layouts)?;
    check_continuum(settings)?;
    for layout in &layouts {
        check_channels(layout, &thick_channels, &thin_channels)?;
    }

    let (thick_about, thin_about) = starts::about(&kinematics);
    let thick_near = thick_channels.near(thick_about, 0.0);
    let thin_near = thin_channels.near(thin_about, 0.0);
    let channels = (&thick_channels, &thin_channels);
    let near = (&thick_near, &thin_near);
    let mut scan = Scan::new(
        near,
        &kinematics,
        intensity,
        &settings.models,
        std::mem::take(&mut workspace.columns),
    );
    let models = layouts
        .into_iter()
        .map(|layout| {
            let further = further_starts(&settings.starts, &layout);
            fit_model(layout, channels, near, (&mut scan, further), workspace)
        })
        .collect::<Result<Vec<ModelFit>, FitError>>()?;
    workspace.columns = scan.into_columns();
    let adopted = ADOPTION
        .iter()
        .filter_map(|model| models.iter().position(|fit| fit.model == *model))
        .find(|index| models[*index].converged() && models[*index].determined());
    let points = (
        thick_channels.sampling().nodes().len(),
        thin_channels.sampling().nodes().len(),
    );
    Ok(PairFit {
        models,
        adopted,
        range,
        points,
    })
}

/// Refuses a model with as many free parameters as there are channels, or more.
fn check_channels(layout: &Layout, thick: &Channels, thin: &Channels) -> Result<(), FitError> {
    let channels = thick.len() + thin.len();
    let free = layout
        .parameters()
        .iter()
        .filter(|parameter| !parameter.interval.is_fixed())
        .count();
    if thick.len() <= free || channels <= free || thin.is_empty() {
        return Err(FitError::TooFewChannels {
            channels: thick.len().min(channels),
            parameters: free,
            model: layout.thick_line().0.name(),
        });
    }
    Ok(())
}

/// The thin line's model beside a model of the thick line.
fn thin_model(thick: Model, thin_line: &Line, settings: &FitSettings) -> Model {
    if thick == Model::TwoGaussians {
        Model::TwoGaussians
    } else if settings.isotope_ratio.is_some() || thin_line.components.len() > 1 {
        Model::Layer
    } else {
        Model::Gaussian
    }
}

/// Both windows together and as much again on either side.
fn default_range(thick: &Prepared, thin: &Prepared) -> Window {
    let low = thick.window.low_km_s.min(thin.window.low_km_s);
    let high = thick.window.high_km_s.max(thin.window.high_km_s);
    let margin = high - low;
    Window {
        low_km_s: low - margin,
        high_km_s: high + margin,
    }
}

/// Width of the sharpest features of a slab, in dispersions: the edges of an opaque line. With it the
/// mean over a channel is within 1 % of the noise for tau up to 30, channels up to one dispersion wide
/// and a signal-to-noise ratio up to 100 (tests/evaluates_models.rs).
const SHARPEST: f64 = 0.3;

/// Width over which the search of the thin line alone averages neighbouring channels, in its dispersion.
/// Beside a thick line that loses minima: 11 of 2000 pairs instead of 6 with 0.35, 28 with 0.5.
const MERGED: f64 = 0.35;

/// The dispersion of the gas in that of a self-absorbed thick line's intensity, at least.
const SHARE_OF_INTENSITY: f64 = 0.5;

fn narrowest_feature_km_s(thin_line: Option<&ThinLine>, intensity: Kinematics) -> f64 {
    let sigma_km_s = thin_line.map_or(SHARE_OF_INTENSITY * intensity.sigma_km_s, |thin| {
        thin.fwhm_km_s.value / FWHM_PER_SIGMA
    });
    SHARPEST * sigma_km_s
}

fn common_velocities(thick: &Prepared, thin: &Prepared) -> Result<Window, FitError> {
    let ends = |prepared: &Prepared| {
        let velocity = prepared.spectrum.velocity_km_s();
        (velocity[0], velocity[velocity.len() - 1])
    };
    let ((thick_low, thick_high), (thin_low, thin_high)) = (ends(thick), ends(thin));
    let (low, high) = (thick_low.max(thin_low), thick_high.min(thin_high));
    if low >= high {
        return Err(FitError::NoCommonVelocities {
            thick_low_km_s: thick_low,
            thick_high_km_s: thick_high,
            thin_low_km_s: thin_low,
            thin_high_km_s: thin_high,
        });
    }
    Ok(Window {
        low_km_s: low,
        high_km_s: high,
    })
}

/// Every parameter name that bounds may use.
pub fn parameter_names() -> Vec<&'static str> {
    let mut names: Vec<&'static str> = Model::ALL
        .iter()
        .flat_map(|model| model.parameters().iter().map(|parameter| parameter.name))
        .chain([
            "v_thin_km_s",
            "sigma_thin_km_s",
            "peak_thin_k",
            "v_second_thin_km_s",
            "sigma_second_thin_km_s",
            "peak_second_thin_k",
            "tau_thin",
            "t_ex_thin_k",
            "isotope_ratio",
        ])
        .collect();
    names.sort_unstable();
    names.dedup();
    names
}

/// Refuses bounds of no model's parameter, and given values that no chosen model would use: they
/// would be lost without a word.
fn check_names(settings: &FitSettings, layouts: &[Layout]) -> Result<(), FitError> {
    let mut chosen: Vec<&'static str> = Vec::new();
    for parameter in layouts.iter().flat_map(Layout::parameters) {
        if !chosen.contains(&parameter.name) {
            chosen.push(parameter.name);
        }
    }
    let every = parameter_names();
    let unused = settings
        .given
        .keys()
        .find(|name| !chosen.contains(&name.as_str()));
    let unknown = settings
        .bounds
        .keys()
        .find(|name| !every.contains(&name.as_str()));
    let Some(name) = unused.or(unknown) else {
        return Ok(());
    };
    let likeness = |known: &str| strsim::normalized_damerau_levenshtein(known, name);
    Err(FitError::UnknownParameter {
        name: name.clone(),
        known: chosen.join(", "),
        nearest: chosen
            .iter()
            .copied()
            .max_by(|a, b| likeness(a).total_cmp(&likeness(b)))
            .filter(|nearest| likeness(nearest) >= ALIKE),
    })
}

/// Likeness from which a name is offered for an unknown one.
const ALIKE: f64 = 0.5;

/// Refuses the continuum model with an open source: the profile has two amplitudes, which the two
/// layers' temperatures take; filling and temperature of the source change nothing else.
fn check_continuum(settings: &FitSettings) -> Result<(), FitError> {
    if !settings.models.contains(&Model::TwoLayerContinuum) {
        return Ok(());
    }
    let missing: Vec<&'static str> = ["filling", "t_continuum_k"]
        .into_iter()
        .filter(|name| !settings.given.contains_key(*name))
        .collect();
    if missing.is_empty() {
        Ok(())
    } else {
        Err(FitError::OpenContinuum { missing })
    }
}

/// Where a search ends: within a thousandth of a standard error of its minimum.
const SEARCH: Settings = Settings {
    max_evaluations: 1000,
    chi2_tolerance: 1e-6,
    step_tolerance: 1e-12,
    gradient_tolerance: 1e-12,
    initial_radius: 1.0,
};

/// A minimum that is so much shallower in chi2 is none worth a second look.
const NO_RIVAL: f64 = 25.0;

/// A line's pair of channel sets, or the thin line's alone.
type Lines<'a> = (Option<&'a Channels>, &'a Channels);

/// The lowest minima near a layout's starts, the deepest first, and how many evaluations they took.
///
/// The starts compete ([`race`]) on the `near` channels, those about the line, with the amplitudes
/// solved for; the deepest minima on either side of zero speed are then followed to their end on `all`
/// channels, first so, then with all parameters free.
fn minima(
    layout: &Layout,
    near: Lines<'_>,
    all: Lines<'_>,
    starts: &[Vec<f64>],
    workspace: &mut Workspace,
) -> Result<(Vec<Minimum>, usize), FitError> {
    let Some(reference) = starts.first() else {
        return Err(FitError::Search("no start".to_owned()));
    };
    let mut projected = Projected::new(layout, near, reference, &mut workspace.lines);
    let (finalists, mut evaluations) =
        race::finalists(&mut projected, starts, &mut workspace.runners)?;
    let deepest = finalists.first().map_or(0.0, |(chi2, _)| *chi2);
    let places: Vec<Vec<f64>> = (finalists.iter())
        .filter(|(chi2, _)| chi2 - deepest <= NO_RIVAL)
        .map(|(_, place)| projected.settled(place))
        .collect();
    workspace.lines = projected.into_buffers();
    let mut projected = Projected::new(layout, all, reference, &mut workspace.lines);
    let bounds: Vec<Interval> = layout
        .parameters()
        .iter()
        .map(|parameter| parameter.interval)
        .collect();
    let mut problem = JointProblem::new(layout, all.0, all.1);
    let mut minima = Vec::with_capacity(places.len());
    for place in places {
        let start = projected.parameters_of(&place);
        let own_bounds = projected.bounds();
        let search = &mut workspace.search;
        let end = minimize(&mut projected, &start, &own_bounds, &SEARCH, search)?;
        // almost always there already: this adds the curvature in all parameters
        let start = projected.settled(&end.parameters);
        let minimum = minimize(&mut problem, &start, &bounds, &SEARCH, search)?;
        evaluations += 1 + end.evaluations + minimum.evaluations;
        minima.push(minimum);
    }
    workspace.lines = projected.into_buffers();
    minima.sort_by(|a, b| a.chi2.total_cmp(&b.chi2));
    Ok((minima, evaluations))
}

impl From<LeastSquaresError> for FitError {
    fn from(error: LeastSquaresError) -> Self {
        Self::Search(error.to_string())
    }
}

/// Those of the settings' starts that are of a layout's model, inside its bounds.
fn further_starts(starts: &[(Model, Vec<f64>)], layout: &Layout) -> Vec<Vec<f64>> {
    let parameters = layout.parameters();
    starts
        .iter()
        .filter(|(model, start)| *model == layout.thick_line().0 && start.len() == parameters.len())
        .map(|(_, start)| {
            (start.iter().zip(parameters))
                .map(|(value, parameter)| parameter.interval.nearest(*value))
                .collect()
        })
        .collect()
}

/// Follows the starts and keeps the best minimum.
fn fit_model(
    layout: Layout,
    (thick, thin): (&Channels, &Channels),
    near: (&Channels, &Channels),
    (scan, further): (&mut Scan<'_>, Vec<Vec<f64>>),
    workspace: &mut Workspace,
) -> Result<ModelFit, FitError> {
    let channels = thick.len() + thin.len();
    let (model, _) = layout.thick_line();
    let mut starts = scan.starts(&layout);
    starts.extend(further);
    let near = (Some(near.0), near.1);
    let (minima, evaluations) = minima(&layout, near, (Some(thick), thin), &starts, workspace)?;
    let best = &minima[0];
    let rival = layout.position("v_in_km_s").and_then(|index| {
        let sign = best.parameters[index].signum();
        minima
            .iter()
            .filter(|minimum| {
                minimum.parameters[index].signum() != sign && minimum.termination.converged()
            })
            .map(|minimum| Rival {
                v_in_km_s: minimum.parameters[index],
                delta_chi2: minimum.chi2 - best.chi2,
            })
            .min_by(|a, b| a.delta_chi2.total_cmp(&b.delta_chi2))
    });
    Ok(ModelFit {
        model,
        parameters: fitted(&layout, best),
        chi2: best.chi2,
        channels,
        degrees_of_freedom: best.degrees_of_freedom(),
        termination: best.termination,
        starts: starts.len(),
        evaluations,
        rival,
        thick_shape: thick.line().clone(),
        thin_shape: thin.line().clone(),
        layout,
    })
}

fn fitted(layout: &Layout, minimum: &Minimum) -> Vec<FittedParameter> {
    let errors = standard_errors(minimum);
    layout
        .parameters()
        .iter()
        .enumerate()
        .map(|(index, parameter)| {
            let held = parameter.interval.is_fixed();
            FittedParameter {
                name: parameter.name,
                unit: parameter.unit,
                value: minimum.parameters[index],
                err: errors[index],
                at_bound: minimum.at_bound[index].filter(|_| !held),
                held,
            }
        })
        .collect()
}

/// Formal errors; all missing where a parameter is not determined at all.
fn standard_errors(minimum: &Minimum) -> [Option<f64>; MAX_PARAMETERS] {
    let mut errors = [None; MAX_PARAMETERS];
    if let Ok(covariance) = minimum.covariance() {
        for (index, error) in errors.iter_mut().enumerate().take(minimum.parameters.len()) {
            *error = covariance.standard_error(index);
        }
    }
    errors
}
