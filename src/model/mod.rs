//! Parameters into a line profile and its Jacobian, one model a file.
//!
//! A model knows velocities, channel widths, a frequency and a multiplet: no files, no spectra, no
//! species. Values are main-beam temperatures above the background in K; each channel's value is
//! its mean over the channel.

mod gaussian;
mod ladder;
mod layer;
mod sampling;
mod separable;
mod slab;
mod slabs;
mod staged;
mod temperature;

pub use ladder::{BothSigns, Ladder};
pub use sampling::Sampling;
pub use separable::MOST_AMPLITUDES;
pub use temperature::RadiationTemperature;

use crate::line::Component;

/// A profile model.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Model {
    /// One Gaussian (a sum over the multiplet's components for a multiplet).
    Gaussian,
    /// Two Gaussians.
    TwoGaussians,
    /// One uniform layer: T = (J(T_ex) - J(T_bg)) (1 - e^-tau), tau a Gaussian or a multiplet.
    Layer,
    /// Two layers that approach each other (Myers et al. 1996, doi:10.1086/310146).
    TwoLayer,
    /// The same with a continuum source between them (Di Francesco et al. 2001,
    /// doi:10.1086/323854).
    TwoLayerContinuum,
    /// Excitation that peaks in the middle, T_0 at the background (De Vries & Myers 2005,
    /// doi:10.1086/427141, five parameters).
    Hill,
    /// The same with a free T_0 (six parameters).
    HillSurface,
}

/// A model parameter: name with unit, and where it may lie unless the user says otherwise.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Parameter {
    /// Name as in the tables, unit included.
    pub name: &'static str,
    /// Unit; empty for a pure number.
    pub unit: &'static str,
    /// Lowest value allowed by default.
    pub low: f64,
    /// Highest value allowed by default.
    pub high: f64,
}

const fn parameter(name: &'static str, unit: &'static str, low: f64, high: f64) -> Parameter {
    Parameter {
        name,
        unit,
        low,
        high,
    }
}

const V_LSR: Parameter = parameter("v_lsr_km_s", "km/s", f64::NEG_INFINITY, f64::INFINITY);
const SIGMA: Parameter = parameter("sigma_km_s", "km/s", 0.01, 30.0);
const V_IN: Parameter = parameter("v_in_km_s", "km/s", -10.0, 10.0);
const TAU: Parameter = parameter("tau", "", 0.1, 200.0);
const T_BACKGROUND: f64 = crate::constants::BACKGROUND_TEMPERATURE.value;
const HOTTEST_K: f64 = 200.0;

const GAUSSIAN: &[Parameter] = &[
    V_LSR,
    SIGMA,
    parameter("peak_k", "K", -HOTTEST_K, HOTTEST_K),
];
const TWO_GAUSSIANS: &[Parameter] = &[
    V_LSR,
    SIGMA,
    parameter("peak_k", "K", 0.0, HOTTEST_K),
    parameter("v_second_km_s", "km/s", f64::NEG_INFINITY, f64::INFINITY),
    parameter("sigma_second_km_s", "km/s", 0.01, 30.0),
    parameter("peak_second_k", "K", 0.0, HOTTEST_K),
];
const LAYER: &[Parameter] = &[
    V_LSR,
    SIGMA,
    parameter("tau_total", "", 0.001, 400.0),
    parameter("t_ex_k", "K", T_BACKGROUND, HOTTEST_K),
];
const TWO_LAYER: &[Parameter] = &[
    V_LSR,
    SIGMA,
    V_IN,
    TAU,
    parameter("t_front_k", "K", T_BACKGROUND, HOTTEST_K),
    parameter("t_rear_k", "K", T_BACKGROUND, HOTTEST_K),
];
const TWO_LAYER_CONTINUUM: &[Parameter] = &[
    V_LSR,
    SIGMA,
    V_IN,
    TAU,
    parameter("t_front_k", "K", T_BACKGROUND, HOTTEST_K),
    parameter("t_rear_k", "K", T_BACKGROUND, HOTTEST_K),
    parameter("filling", "", 0.0, 1.0),
    parameter("t_continuum_k", "K", T_BACKGROUND, 10_000.0),
];
const HILL: &[Parameter] = &[
    V_LSR,
    SIGMA,
    V_IN,
    TAU,
    parameter("t_peak_k", "K", T_BACKGROUND, HOTTEST_K),
];
const HILL_SURFACE: &[Parameter] = &[
    V_LSR,
    SIGMA,
    V_IN,
    TAU,
    parameter("t_peak_k", "K", T_BACKGROUND, HOTTEST_K),
    parameter("t_surface_k", "K", T_BACKGROUND, HOTTEST_K),
];

impl Model {
    /// Every model.
    pub const ALL: [Self; 7] = [
        Self::Gaussian,
        Self::TwoGaussians,
        Self::Layer,
        Self::TwoLayer,
        Self::TwoLayerContinuum,
        Self::Hill,
        Self::HillSurface,
    ];

    /// Most parameters that a model has.
    pub const MOST_PARAMETERS: usize = 8;

    /// Name on the command line and in run sheets.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Gaussian => "gaussian",
            Self::TwoGaussians => "two-gaussians",
            Self::Layer => "layer",
            Self::TwoLayer => "two-layer",
            Self::TwoLayerContinuum => "two-layer-continuum",
            Self::Hill => "hill",
            Self::HillSurface => "hill-surface",
        }
    }

    /// Prefix of its result columns.
    #[must_use]
    pub fn column_prefix(self) -> &'static str {
        match self {
            Self::Gaussian => "gaussian",
            Self::TwoGaussians => "two_gaussians",
            Self::Layer => "layer",
            Self::TwoLayer => "two_layer",
            Self::TwoLayerContinuum => "two_layer_continuum",
            Self::Hill => "hill",
            Self::HillSurface => "hill_surface",
        }
    }

    /// The model of a name, `None` where there is none.
    #[must_use]
    pub fn from_name(name: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|model| model.name() == name)
    }

    /// Its parameters, in the order of every parameter slice and Jacobian. The first two are
    /// always the velocity and the dispersion.
    #[must_use]
    pub fn parameters(self) -> &'static [Parameter] {
        match self {
            Self::Gaussian => GAUSSIAN,
            Self::TwoGaussians => TWO_GAUSSIANS,
            Self::Layer => LAYER,
            Self::TwoLayer => TWO_LAYER,
            Self::TwoLayerContinuum => TWO_LAYER_CONTINUUM,
            Self::Hill => HILL,
            Self::HillSurface => HILL_SURFACE,
        }
    }

    /// Position of a parameter, `None` where the model has none of that name.
    #[must_use]
    pub fn position(self, name: &str) -> Option<usize> {
        self.parameters()
            .iter()
            .position(|parameter| parameter.name == name)
    }

    /// Whether it has an inward speed.
    #[must_use]
    pub fn has_infall(self) -> bool {
        matches!(
            self,
            Self::TwoLayer | Self::TwoLayerContinuum | Self::Hill | Self::HillSurface
        )
    }

    /// Its profile and, where wanted, its Jacobian.
    ///
    /// `parameters` as in [`Model::parameters`]; `value` one number a channel, K; `jacobian`
    /// column-major, one column of `value`'s length a parameter, K per unit of the parameter.
    ///
    /// ```
    /// use inrush::{line::Component, model::{LineShape, Model, Sampling}};
    ///
    /// let line = LineShape::new(89.18852, vec![Component { offset_km_s: 0.0, weight: 1.0 }]);
    /// let sampling = Sampling::at(vec![-0.5, 0.0, 0.5]);
    /// let mut value = [0.0; 3];
    /// // v_lsr, sigma, v_in, tau, T_front, T_rear: infall toward a warmer rear is brighter in the blue
    /// Model::TwoLayer.evaluate(&line, &sampling, &[0.0, 0.4, 0.1, 3.0, 8.0, 15.0], &mut value, None);
    /// assert!(value[0] > value[2]);
    /// ```
    ///
    /// # Panics
    ///
    /// Where a slice has not the length stated.
    pub fn evaluate(
        self,
        line: &LineShape,
        sampling: &Sampling,
        parameters: &[f64],
        value: &mut [f64],
        jacobian: Option<&mut [f64]>,
    ) {
        assert_eq!(
            parameters.len(),
            self.parameters().len(),
            "parameters of {}",
            self.name()
        );
        assert_eq!(value.len(), sampling.len(), "a value for each channel");
        if let Some(jacobian) = &jacobian {
            assert_eq!(
                jacobian.len(),
                parameters.len() * value.len(),
                "a column for each parameter"
            );
        }
        match self {
            Self::Gaussian => gaussian::evaluate(line, sampling, parameters, value, jacobian),
            Self::TwoGaussians => {
                gaussian::evaluate_two(line, sampling, parameters, value, jacobian);
            }
            Self::Layer => layer::evaluate(line, sampling, parameters, value, jacobian),
            Self::TwoLayer => slabs::two_layer(line, sampling, parameters, value, jacobian),
            Self::TwoLayerContinuum => {
                slabs::two_layer_continuum(line, sampling, parameters, value, jacobian);
            }
            Self::Hill => slabs::hill(line, sampling, parameters, value, jacobian),
            Self::HillSurface => slabs::hill_surface(line, sampling, parameters, value, jacobian),
        }
    }
}

/// What a model has to know of a line.
#[derive(Clone, Debug, PartialEq)]
pub struct LineShape {
    /// J(T) at its frequency.
    pub radiation: RadiationTemperature,
    /// Its components; weights sum to 1.
    pub components: Vec<Component>,
}

impl LineShape {
    /// A line at a frequency (GHz) with components (at least one).
    #[must_use]
    pub fn new(frequency_ghz: f64, components: Vec<Component>) -> Self {
        assert!(!components.is_empty(), "a line has at least one component");
        Self {
            radiation: RadiationTemperature::new(frequency_ghz),
            components,
        }
    }
}

/// The columns of a column-major Jacobian, `channels` long each.
fn columns<const N: usize>(jacobian: &mut [f64], channels: usize) -> [&mut [f64]; N] {
    let mut rest = jacobian;
    std::array::from_fn(|_| {
        let (column, tail) = std::mem::take(&mut rest).split_at_mut(channels);
        rest = tail;
        column
    })
}
