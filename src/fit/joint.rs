//! Several lines fitted together: which of a line's parameters are shared, linked, held or bounded,
//! and the residuals of them all as one least-squares problem.

use super::channels::Channels;
use super::{FitError, FitSettings};
use crate::model::{Model, Parameter};
use crate::numeric::Estimate;
use crate::numeric::least_squares::{Interval, LeastSquares, MAX_PARAMETERS, RowBlock, Structure};

/// A parameter of a joint fit.
#[derive(Clone, Debug, PartialEq)]
pub struct JointParameter {
    /// Name with unit, as in the tables.
    pub name: &'static str,
    /// Unit; empty for a pure number.
    pub unit: &'static str,
    /// Where it may lie; one point where it is held.
    pub interval: Interval,
    /// A Gaussian prior given by the user.
    pub prior: Option<Estimate>,
}

/// How the thin line's parameters relate to the thick line's.
#[derive(Clone, Debug, PartialEq)]
pub struct Layout {
    parameters: Vec<JointParameter>,
    thick: (Model, Vec<usize>),
    thin: (Model, Vec<usize>),
    /// Positions of tau and of the isotope ratio where the optical depths are linked.
    link: Option<(usize, usize)>,
}

/// Thin-line names of parameters that the thick line has too.
fn thin_name(name: &str) -> &'static str {
    match name {
        "v_lsr_km_s" => "v_thin_km_s",
        "sigma_km_s" => "sigma_thin_km_s",
        "peak_k" => "peak_thin_k",
        "v_second_km_s" => "v_second_thin_km_s",
        "sigma_second_km_s" => "sigma_second_thin_km_s",
        "peak_second_k" => "peak_second_thin_k",
        "tau_total" => "tau_thin",
        _ => "t_ex_thin_k",
    }
}

const ISOTOPE_RATIO: Parameter = Parameter {
    name: "isotope_ratio",
    unit: "",
    low: 1.0,
    high: 10_000.0,
};

impl Layout {
    /// A thick line of `thick_model` and a thin line of `thin_model`, which share the velocity and the
    /// dispersion unless the settings free them.
    ///
    /// `reach` bounds the velocities: the range that is fitted.
    ///
    /// # Errors
    ///
    /// [`FitError`] where a held value or a bound names no parameter of any model, where bounds are
    /// empty, or where linked optical depths have no optical depth to link.
    pub fn new(
        thick_model: Model,
        thin_model: Model,
        settings: &FitSettings,
        reach: Interval,
    ) -> Result<Self, FitError> {
        let mut layout = Self {
            parameters: Vec::new(),
            thick: (thick_model, Vec::new()),
            thin: (thin_model, Vec::new()),
            link: None,
        };
        for parameter in thick_model.parameters() {
            let index = layout.push(*parameter, parameter.name, settings, reach)?;
            layout.thick.1.push(index);
        }
        if let Some(ratio) = settings.isotope_ratio {
            let Some(tau) = layout
                .position("tau")
                .filter(|_| thin_model == Model::Layer)
            else {
                return Err(FitError::NothingToLink {
                    model: thick_model.name(),
                });
            };
            let index = layout.push(ISOTOPE_RATIO, ISOTOPE_RATIO.name, settings, reach)?;
            let parameter = &mut layout.parameters[index];
            if ratio.err > 0.0 {
                parameter.prior = Some(ratio);
            } else {
                parameter.interval = Interval::fixed(ratio.value);
            }
            layout.link = Some((tau, index));
        }
        for parameter in thin_model.parameters() {
            let shared = match parameter.name {
                "v_lsr_km_s" | "v_second_km_s" => !settings.free_thin_velocity,
                "sigma_km_s" | "sigma_second_km_s" => !settings.free_thin_sigma,
                _ => false,
            };
            let index = match (shared, layout.position(parameter.name), layout.link) {
                (true, Some(index), _) => index,
                (_, _, Some((tau, _))) if parameter.name == "tau_total" => tau,
                _ => layout.push(*parameter, thin_name(parameter.name), settings, reach)?,
            };
            layout.thin.1.push(index);
        }
        Ok(layout)
    }

    /// The thin line alone.
    ///
    /// # Errors
    ///
    /// As for [`Layout::new`].
    pub fn thin_alone(
        thin_model: Model,
        settings: &FitSettings,
        reach: Interval,
    ) -> Result<Self, FitError> {
        let mut layout = Self {
            parameters: Vec::new(),
            thick: (thin_model, Vec::new()),
            thin: (thin_model, Vec::new()),
            link: None,
        };
        for parameter in thin_model.parameters() {
            let index = layout.push(*parameter, parameter.name, settings, reach)?;
            layout.thin.1.push(index);
        }
        Ok(layout)
    }

    fn push(
        &mut self,
        parameter: Parameter,
        name: &'static str,
        settings: &FitSettings,
        reach: Interval,
    ) -> Result<usize, FitError> {
        let (mut low, mut high) = (parameter.low, parameter.high);
        if name.starts_with("v_") && name != "v_in_km_s" {
            (low, high) = (reach.lower, reach.upper);
        }
        if let Some((lower, upper)) = settings.bounds.get(name) {
            if lower.is_nan() || upper.is_nan() || lower >= upper {
                return Err(FitError::EmptyBounds {
                    name: name.to_owned(),
                    lower: *lower,
                    upper: *upper,
                });
            }
            if let Some(expected) = impossible(&parameter, *lower, *upper) {
                return Err(FitError::ImpossibleBounds {
                    name: name.to_owned(),
                    lower: *lower,
                    upper: *upper,
                    expected,
                });
            }
            (low, high) = (*lower, *upper);
        }
        let mut joint = JointParameter {
            name,
            unit: parameter.unit,
            interval: Interval::new(low, high),
            prior: None,
        };
        if let Some(given) = settings.given.get(name) {
            if !(given.value >= low && given.value <= high) {
                return Err(FitError::GivenOutside {
                    name: name.to_owned(),
                    value: given.value,
                    lower: low,
                    upper: high,
                });
            }
            if given.err > 0.0 {
                joint.prior = Some(*given);
            } else {
                joint.interval = Interval::fixed(given.value);
            }
        }
        self.parameters.push(joint);
        Ok(self.parameters.len() - 1)
    }

    /// The parameters, in the order of every joint parameter slice.
    #[must_use]
    pub fn parameters(&self) -> &[JointParameter] {
        &self.parameters
    }

    /// Position of a parameter by name.
    #[must_use]
    pub fn position(&self, name: &str) -> Option<usize> {
        self.parameters
            .iter()
            .position(|parameter| parameter.name == name)
    }

    /// The model and local parameters of the thick line.
    #[must_use]
    pub fn thick(&self, joint: &[f64]) -> (Model, Vec<f64>) {
        (
            self.thick.0,
            self.thick.1.iter().map(|index| joint[*index]).collect(),
        )
    }

    /// The model and local parameters of the thin line.
    #[must_use]
    pub fn thin(&self, joint: &[f64]) -> (Model, Vec<f64>) {
        let mut local = vec![0.0; self.thin.1.len()];
        self.thin_local(joint, &mut local);
        (self.thin.0, local)
    }

    /// Model of the thick line and the joint positions of its parameters.
    pub(super) fn thick_line(&self) -> (Model, &[usize]) {
        (self.thick.0, &self.thick.1)
    }

    /// Model of the thin line and the joint positions of its parameters.
    pub(super) fn thin_line(&self) -> (Model, &[usize]) {
        (self.thin.0, &self.thin.1)
    }

    /// Positions of tau and of the isotope ratio where the optical depths are linked.
    pub(super) fn link(&self) -> Option<(usize, usize)> {
        self.link
    }

    /// Where optical depths are linked: the thin line's column by its own optical depth, the third of
    /// `columns`, becomes that by the thick line's, and that by the isotope ratio is written last.
    pub(super) fn chain_link(&self, joint: &[f64], columns: &mut [f64], channels: usize) {
        let Some((by_tau, by_ratio)) = self.link_slopes(joint) else {
            return;
        };
        let (columns, ratio_column) = columns.split_at_mut(columns.len() - channels);
        let depth_column = &mut columns[2 * channels..3 * channels];
        for (by_depth, target) in depth_column.iter_mut().zip(ratio_column) {
            *target = by_ratio * *by_depth;
            *by_depth *= by_tau;
        }
    }

    /// Slopes of the thin line's optical depth, 2 tau / ratio, by tau and by the isotope ratio, where it is
    /// linked.
    pub(super) fn link_slopes(&self, joint: &[f64]) -> Option<(f64, f64)> {
        let (tau, ratio) = self.link?;
        let by_tau = 2.0 / joint[ratio];
        Some((by_tau, -by_tau * joint[tau] / joint[ratio]))
    }

    /// The thin line's own parameters.
    pub(super) fn thin_local(&self, joint: &[f64], local: &mut [f64]) {
        for (value, index) in local.iter_mut().zip(&self.thin.1) {
            *value = joint[*index];
        }
        if let Some((tau, ratio)) = self.link {
            // both halves of the thick line together have twice tau
            local[2] = 2.0 * joint[tau] / joint[ratio];
        }
    }
}

/// Where bounds of a parameter may lie, if these lie elsewhere.
fn impossible(parameter: &Parameter, lower: f64, upper: f64) -> Option<&'static str> {
    if !(lower.is_finite() && upper.is_finite()) {
        return Some("two finite numbers");
    }
    if parameter.name == "filling" && (lower < 0.0 || upper > 1.0) {
        return Some("fractions from 0 to 1");
    }
    if parameter.low > 0.0 && lower <= 0.0 {
        return Some("positive numbers");
    }
    None
}

/// The joint residuals of a pair, or of the thin line alone.
#[derive(Debug)]
pub struct JointProblem<'a> {
    layout: &'a Layout,
    thick: Option<&'a Channels>,
    thin: &'a Channels,
    priors: Vec<(usize, Estimate)>,
}

impl<'a> JointProblem<'a> {
    /// The residuals of a pair under a layout; of the thin line alone where `thick` is `None`.
    #[must_use]
    pub fn new(layout: &'a Layout, thick: Option<&'a Channels>, thin: &'a Channels) -> Self {
        let priors = layout
            .parameters
            .iter()
            .enumerate()
            .filter_map(|(index, parameter)| Some((index, parameter.prior?)))
            .collect();
        Self {
            layout,
            thick,
            thin,
            priors,
        }
    }
}

impl LeastSquares for JointProblem<'_> {
    fn parameters(&self) -> usize {
        self.layout.parameters.len()
    }

    fn residuals(&self) -> usize {
        self.thin.len() + self.thick.map_or(0, Channels::len) + self.priors.len()
    }

    /// The thick line's channels, the thin line's, and the priors.
    fn structure(&self) -> Structure {
        let layout = self.layout;
        let thick = RowBlock::new(self.thick.map_or(0, Channels::len), &layout.thick.1);
        let mut thin = layout.thin.1.clone();
        if let Some((_, ratio)) = layout.link {
            thin.push(ratio);
        }
        let thin = RowBlock::new(self.thin.len(), &thin);
        let priors: Vec<usize> = self.priors.iter().map(|(index, _)| *index).collect();
        Structure::new(&[thick, thin, RowBlock::new(priors.len(), &priors)])
    }

    fn evaluate(
        &mut self,
        parameters: &[f64],
        residuals: &mut [f64],
        jacobian: Option<&mut [f64]>,
    ) {
        let layout = self.layout;
        let mut rest_residuals = residuals;
        let mut rest_jacobian = jacobian;
        let mut local = [0.0; MAX_PARAMETERS];
        if let Some(thick) = self.thick {
            let (model, map) = (layout.thick.0, &layout.thick.1);
            for (value, index) in local.iter_mut().zip(map) {
                *value = parameters[*index];
            }
            let own = rest_residuals
                .split_off_mut(..thick.len())
                .unwrap_or_default();
            let columns = take_columns(&mut rest_jacobian, thick.len() * map.len());
            thick.residuals(model, &local[..map.len()], own, columns);
        }
        let (model, map) = (layout.thin.0, &layout.thin.1);
        layout.thin_local(parameters, &mut local[..map.len()]);
        let channels = self.thin.len();
        let own = rest_residuals.split_off_mut(..channels).unwrap_or_default();
        let linked = usize::from(layout.link.is_some());
        let mut columns = take_columns(&mut rest_jacobian, channels * (map.len() + linked));
        let direct = columns
            .as_deref_mut()
            .map(|columns| &mut columns[..channels * map.len()]);
        self.thin.residuals(model, &local[..map.len()], own, direct);
        if let Some(columns) = columns {
            layout.chain_link(parameters, columns, channels);
        }
        let count = self.priors.len();
        for (row, (index, prior)) in self.priors.iter().enumerate() {
            rest_residuals[row] = (parameters[*index] - prior.value) / prior.err;
            if let Some(jacobian) = rest_jacobian.as_deref_mut() {
                for column in 0..count {
                    let own = if column == row { 1.0 / prior.err } else { 0.0 };
                    jacobian[column * count + row] = own;
                }
            }
        }
    }
}

/// The first `count` of the columns that are wanted, if any; the rest begins behind them.
fn take_columns<'a>(rest: &mut Option<&'a mut [f64]>, count: usize) -> Option<&'a mut [f64]> {
    rest.as_mut()?.split_off_mut(..count)
}
