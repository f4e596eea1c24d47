//! What a simulated pair is made from, and the checks that it can be.

use super::correlation::Correlation;
use super::defaults;
use super::error::{PairLine, SimulateError};
use crate::constants::BACKGROUND_TEMPERATURE;
use crate::line::Line;
use crate::model::{Model, Parameter};
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// Everything that a simulated pair follows from.
#[derive(Clone, Debug, PartialEq)]
pub struct PairTruth {
    /// The thick line; any model.
    pub thick: LineTruth,
    /// The thin line; a Gaussian, two Gaussians or a layer. It shares the thick line's `v_lsr_km_s`
    /// and `sigma_km_s` unless it has its own.
    pub thin: LineTruth,
    /// Abundance ratio r that links the optical depths: the thin layer's `tau_total` is 2 tau/r, since
    /// the thick line's tau is that of one of its two halves (`tau_total`/r for a thick layer).
    pub isotope_ratio: Option<f64>,
    /// Seed of the noise, at most 2^63 - 1.
    pub seed: u64,
}

/// Everything that one line follows from.
#[derive(Clone, Debug, PartialEq)]
pub struct LineTruth {
    /// Model of its profile.
    pub model: Model,
    /// The model's parameters by name, in the units of the names.
    pub parameters: BTreeMap<String, f64>,
    /// The line.
    pub line: Line,
    /// Its channels.
    pub axis: Axis,
    /// Its noise.
    pub noise: NoiseLevel,
    /// Correlation of its noise.
    pub correlation: Correlation,
    /// Its baseline.
    pub baseline: Baseline,
}

/// Channels of equal width.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Axis {
    /// Centre of the first channel, km/s.
    pub low_km_s: f64,
    /// Centre of the last channel, km/s, or up to one width less.
    pub high_km_s: f64,
    /// Width of a channel, km/s.
    pub channel_km_s: f64,
}

/// Noise of one channel, after correlation.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", deny_unknown_fields)]
pub enum NoiseLevel {
    /// Standard deviation, K; 0 for none.
    RmsK(f64),
    /// Peak of the noiseless line over the standard deviation.
    SignalToNoise(f64),
}

/// What is added to the line, with x the velocity less the middle of the band:
/// offset + slope x + curvature x^2 + ripple sin(2 pi x/period + phase).
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct Baseline {
    /// Offset, K.
    pub offset_k: f64,
    /// Slope, K per km/s.
    pub slope_k_per_km_s: f64,
    /// Curvature, K per (km/s)^2.
    pub curvature_k_per_km2_s2: f64,
    /// Amplitude of the ripple, K.
    pub ripple_k: f64,
    /// Period of the ripple, km/s; without meaning where the amplitude is 0.
    pub ripple_period_km_s: f64,
    /// Phase of the ripple, degrees.
    pub ripple_phase_deg: f64,
}

impl Baseline {
    /// Value, K, at a velocity (km/s) from the middle of the band.
    #[must_use]
    pub fn at_k(&self, x_km_s: f64) -> f64 {
        let polynomial =
            self.offset_k + x_km_s * (self.slope_k_per_km_s + x_km_s * self.curvature_k_per_km2_s2);
        if self.ripple_k == 0.0 {
            return polynomial;
        }
        let turns = x_km_s / self.ripple_period_km_s;
        let phase = std::f64::consts::TAU * turns + self.ripple_phase_deg.to_radians();
        polynomial + self.ripple_k * phase.sin()
    }
}

/// Fewest channels of a spectrum.
const FEWEST_CHANNELS: usize = 2;

/// Most channels of a spectrum.
pub(super) const MOST_CHANNELS: usize = 1_000_000;

/// Most points at which a profile is evaluated.
const MOST_PARTS: usize = 10_000_000;

/// Velocities are whole multiples of this, km/s, so that 0.1 is written as 0.1.
const VELOCITY_STEP_PER_KM_S: f64 = 1e9;

impl Axis {
    /// Channels a default width apart over a line's components and 20 dispersions (km/s) on either
    /// side, about a velocity (km/s); the ends are whole numbers.
    #[must_use]
    pub fn around(line: &Line, v_km_s: f64, sigma_km_s: f64) -> Self {
        let offsets = line
            .components
            .iter()
            .map(|component| component.offset_km_s);
        let (low, high) = offsets.fold((0.0f64, 0.0f64), |(low, high), offset| {
            (low.min(offset), high.max(offset))
        });
        let margin = defaults::BAND_SIGMAS * sigma_km_s;
        Self {
            low_km_s: (v_km_s + low - margin).floor(),
            high_km_s: (v_km_s + high + margin).ceil(),
            channel_km_s: defaults::CHANNEL_KM_S,
        }
    }

    /// Number of channels, as far as it is one.
    fn count(&self) -> f64 {
        // a hundredth of a channel is given away to rounding
        ((self.high_km_s - self.low_km_s) / self.channel_km_s + 0.01).floor() + 1.0
    }

    /// Centres of the channels, km/s, ascending.
    #[must_use]
    pub fn velocity_km_s(&self) -> Vec<f64> {
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a checked axis has 2 to 1e6 channels; any other is cut to that"
        )]
        let channels = self.count().clamp(0.0, MOST_CHANNELS as f64) as usize;
        (0..channels)
            .map(|channel| {
                let velocity = self.low_km_s + channel as f64 * self.channel_km_s;
                (velocity * VELOCITY_STEP_PER_KM_S).round() / VELOCITY_STEP_PER_KM_S
            })
            .collect()
    }

    /// Middle of the band, km/s.
    #[must_use]
    pub fn middle_km_s(&self) -> f64 {
        0.5 * (self.low_km_s + self.high_km_s)
    }

    pub(super) fn check(&self, line: PairLine) -> Result<(), SimulateError> {
        require(line, "channel width", self.channel_km_s, " km/s", |width| {
            (width > 0.0).then_some(()).ok_or("a positive width")
        })?;
        let ordered = self.low_km_s < self.high_km_s;
        if !(ordered && self.low_km_s.is_finite() && self.high_km_s.is_finite()) {
            return Err(SimulateError::EmptyRange {
                line,
                low_km_s: self.low_km_s,
                high_km_s: self.high_km_s,
            });
        }
        let channels = self.count();
        if !(FEWEST_CHANNELS as f64..=MOST_CHANNELS as f64).contains(&channels) {
            return Err(SimulateError::ChannelCount {
                line,
                channels,
                fewest: FEWEST_CHANNELS,
                most: MOST_CHANNELS,
            });
        }
        Ok(())
    }
}

/// Parts that a channel is cut into for quadrature.
pub(super) fn parts(channel_km_s: f64, sigma_km_s: f64) -> usize {
    let parts = (super::PARTS_PER_SIGMA * channel_km_s / sigma_km_s).ceil();
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "checked to be between 1 and 1e7"
    )]
    let parts = parts.clamp(1.0, MOST_PARTS as f64) as usize;
    parts
}

impl LineTruth {
    /// A line with default parameters of a model, channels, noise and no baseline.
    #[must_use]
    pub fn of(model: Model, line: Line) -> Self {
        let values = defaults::parameters(model);
        let parameters = model
            .parameters()
            .iter()
            .zip(values)
            .map(|(parameter, value)| (parameter.name.to_owned(), *value))
            .collect();
        Self {
            model,
            parameters,
            axis: Axis::around(&line, values[0], values[1]),
            line,
            noise: NoiseLevel::SignalToNoise(defaults::SIGNAL_TO_NOISE_THICK),
            correlation: Correlation::White,
            baseline: Baseline::default(),
        }
    }

    /// Values of the model's parameters; those without one are taken from `fallback`.
    fn values(
        &self,
        which: PairLine,
        fallback: impl Fn(&str) -> Option<f64>,
    ) -> Result<Vec<f64>, SimulateError> {
        let known = self.model.parameters();
        for name in self.parameters.keys() {
            if self.model.position(name).is_none() {
                return Err(unknown(which, self.model, name));
            }
        }
        known
            .iter()
            .map(|parameter| {
                self.parameters
                    .get(parameter.name)
                    .copied()
                    .or_else(|| fallback(parameter.name))
                    .ok_or(SimulateError::MissingParameter {
                        line: which,
                        name: parameter.name,
                        model: self.model.name(),
                    })
            })
            .collect()
    }

    fn check(&self, line: PairLine, values: &[f64]) -> Result<(), SimulateError> {
        for (parameter, value) in self.model.parameters().iter().zip(values) {
            check_parameter(line, parameter, *value)?;
        }
        self.axis.check(line)?;
        self.check_band(line, values)?;
        check_noise(line, self.noise, self.correlation)?;
        self.check_baseline(line)
    }

    fn check_band(&self, line: PairLine, values: &[f64]) -> Result<(), SimulateError> {
        let (low, high) = (self.axis.low_km_s, self.axis.high_km_s);
        if !(low..=high).contains(&values[0]) {
            return Err(SimulateError::OutsideBand {
                line,
                name: self.model.parameters()[0].name,
                found_km_s: values[0],
                low_km_s: low,
                high_km_s: high,
            });
        }
        let parts = parts(self.axis.channel_km_s, values[1]) as f64 * self.axis.count();
        require(line, "sigma_km_s", values[1], " km/s", |_| {
            (parts <= MOST_PARTS as f64)
                .then_some(())
                .ok_or("a dispersion that is not negligible against the range")
        })
    }

    fn check_baseline(&self, line: PairLine) -> Result<(), SimulateError> {
        let baseline = &self.baseline;
        for (quantity, value, unit) in [
            ("baseline offset", baseline.offset_k, " K"),
            ("baseline slope", baseline.slope_k_per_km_s, " K per km/s"),
            (
                "baseline curvature",
                baseline.curvature_k_per_km2_s2,
                " K per (km/s)^2",
            ),
            ("ripple amplitude", baseline.ripple_k, " K"),
            ("ripple phase", baseline.ripple_phase_deg, " degrees"),
            ("ripple period", baseline.ripple_period_km_s, " km/s"),
        ] {
            require(line, quantity, value, unit, |_| Ok(()))?;
        }
        let without = baseline.ripple_k == 0.0;
        require(
            line,
            "ripple period",
            baseline.ripple_period_km_s,
            " km/s",
            |period| {
                (without || period > 0.0)
                    .then_some(())
                    .ok_or("a positive period")
            },
        )
    }
}

/// Whether noise of a level and a correlation can be made.
pub(super) fn check_noise(
    line: PairLine,
    noise: NoiseLevel,
    correlation: Correlation,
) -> Result<(), SimulateError> {
    match noise {
        NoiseLevel::RmsK(rms_k) => require(line, "noise", rms_k, " K", |rms| {
            (rms >= 0.0).then_some(()).ok_or("0 or a positive noise")
        }),
        NoiseLevel::SignalToNoise(ratio) => {
            require(line, "signal-to-noise ratio", ratio, "", |ratio| {
                (ratio > 0.0).then_some(()).ok_or("a positive ratio")
            })
        }
    }?;
    match correlation {
        Correlation::Boxcar { channels } => {
            require(line, "boxcar of", channels as f64, " channels", |_| {
                (1..=Correlation::WIDEST_BOXCAR)
                    .contains(&channels)
                    .then_some(())
                    .ok_or("1 to 1000")
            })
        }
        Correlation::Autoregressive { coefficient } => {
            require(line, "autoregressive coefficient", coefficient, "", |a| {
                (a.abs() < 1.0)
                    .then_some(())
                    .ok_or("a number between -1 and 1")
            })
        }
        _ => Ok(()),
    }
}

/// A finite value that a condition holds for.
fn require(
    line: PairLine,
    quantity: &'static str,
    found: f64,
    unit: &'static str,
    condition: impl Fn(f64) -> Result<(), &'static str>,
) -> Result<(), SimulateError> {
    let verdict = if found.is_finite() {
        condition(found)
    } else {
        Err("a finite number")
    };
    verdict.map_err(|expected| SimulateError::Impossible {
        line,
        quantity,
        found,
        unit,
        expected: expected.to_owned(),
    })
}

/// Narrowest dispersion, km/s: thermal ones are above 0.01 km/s.
pub(super) const NARROWEST_KM_S: f64 = 1e-3;

/// Highest temperature, K, optical depth and speed, km/s, that are taken for meant.
pub(super) const HIGHEST: f64 = 1e5;

/// What a parameter of a name can be; wider than what a fit looks through by default.
fn possible(name: &str) -> (f64, f64) {
    if name.starts_with("sigma") {
        (NARROWEST_KM_S, HIGHEST)
    } else if name.starts_with("tau") {
        (0.0, HIGHEST)
    } else if name.starts_with("t_") {
        (BACKGROUND_TEMPERATURE.value, HIGHEST)
    } else if name == "filling" {
        (0.0, 1.0)
    } else {
        (-HIGHEST, HIGHEST)
    }
}

fn check_parameter(line: PairLine, parameter: &Parameter, found: f64) -> Result<(), SimulateError> {
    let (low, high) = possible(parameter.name);
    if (low..=high).contains(&found) {
        return Ok(());
    }
    let below_background = low == BACKGROUND_TEMPERATURE.value && found < low;
    Err(SimulateError::Impossible {
        line,
        quantity: parameter.name,
        found,
        unit: match parameter.unit {
            "K" => " K",
            "km/s" => " km/s",
            _ => "",
        },
        expected: if below_background {
            format!("at least the background's {low} K")
        } else {
            format!("{low} to {high}")
        },
    })
}

fn unknown(line: PairLine, model: Model, name: &str) -> SimulateError {
    let names: Vec<&'static str> = model
        .parameters()
        .iter()
        .map(|parameter| parameter.name)
        .collect();
    let likeness = |known: &str| strsim::jaro_winkler(known, name);
    let nearest = names
        .iter()
        .copied()
        .max_by(|a, b| likeness(a).total_cmp(&likeness(b)))
        .unwrap_or_default();
    SimulateError::UnknownParameter {
        line,
        name: name.to_owned(),
        model: model.name(),
        known: names.join(", "),
        nearest,
    }
}

/// Parameters that the thin line takes from the thick one where it has none of its own.
const SHARED: [&str; 2] = ["v_lsr_km_s", "sigma_km_s"];

impl PairTruth {
    /// Default parameters of a thick and a thin line's model, default channels, signal-to-noise
    /// ratios of 60 and 30, white noise and no baseline; velocity and dispersion are shared.
    #[must_use]
    pub fn new(models: (Model, Model), lines: (Line, Line), seed: u64) -> Self {
        let thick = LineTruth::of(models.0, lines.0);
        let mut thin = LineTruth::of(models.1, lines.1);
        thin.noise = NoiseLevel::SignalToNoise(defaults::SIGNAL_TO_NOISE_THIN);
        for name in SHARED {
            thin.parameters.remove(name);
        }
        let mut truth = Self {
            thick,
            thin,
            isotope_ratio: None,
            seed,
        };
        truth.centre_axes();
        truth
    }

    /// Lays default channels about each line's velocity, as far as it has one.
    pub fn centre_axes(&mut self) {
        let value = |line: &LineTruth, name: &str| line.parameters.get(name).copied();
        let [v_km_s, sigma_km_s] = SHARED.map(|name| value(&self.thick, name).unwrap_or_default());
        let v_thin_km_s = value(&self.thin, SHARED[0]).unwrap_or(v_km_s);
        let sigma_thin_km_s = value(&self.thin, SHARED[1]).unwrap_or(sigma_km_s);
        self.thick.axis = Axis::around(&self.thick.line, v_km_s, sigma_km_s);
        self.thin.axis = Axis::around(&self.thin.line, v_thin_km_s, sigma_thin_km_s);
    }

    /// Links the optical depths by an abundance ratio; the thin layer's own optical depth is dropped.
    pub fn link(&mut self, isotope_ratio: f64) {
        self.thin.parameters.remove("tau_total");
        self.isotope_ratio = Some(isotope_ratio);
    }

    /// Values of all parameters of the thick and of the thin line's model.
    pub(super) fn parameters(&self) -> Result<(Vec<f64>, Vec<f64>), SimulateError> {
        let thick = self.thick.values(PairLine::Thick, |_| None)?;
        let linked = self.linked_tau(&thick)?;
        let thin = self.thin.values(PairLine::Thin, |name| match name {
            "tau_total" => linked,
            _ if SHARED.contains(&name) => self.thick.model.position(name).map(|i| thick[i]),
            _ => None,
        })?;
        Ok((thick, thin))
    }

    /// The thin layer's optical depth by the isotope ratio.
    fn linked_tau(&self, thick: &[f64]) -> Result<Option<f64>, SimulateError> {
        let Some(ratio) = self.isotope_ratio else {
            return Ok(None);
        };
        let refuse = |found: String, expected| Err(SimulateError::IsotopeRatio { found, expected });
        if !(ratio > 0.0 && ratio.is_finite()) {
            return refuse(ratio.to_string(), "a positive number");
        }
        if self.thin.model != Model::Layer {
            return refuse(
                format!("a thin line of model {}", self.thin.model.name()),
                "the layer model, which has an optical depth",
            );
        }
        if self.thin.parameters.contains_key("tau_total") {
            return refuse(
                "a thin line with its own `tau_total`".to_owned(),
                "the one or the other",
            );
        }
        let model = self.thick.model;
        if let Some(index) = model.position("tau") {
            // tau is that of one half
            return Ok(Some(2.0 * thick[index] / ratio));
        }
        match model.position("tau_total") {
            Some(index) => Ok(Some(thick[index] / ratio)),
            None => refuse(
                format!("a thick line of model {}", model.name()),
                "a model with an optical depth",
            ),
        }
    }

    pub(super) fn check(&self, thick: &[f64], thin: &[f64]) -> Result<(), SimulateError> {
        if !matches!(
            self.thin.model,
            Model::Gaussian | Model::TwoGaussians | Model::Layer
        ) {
            return Err(SimulateError::ThinModel {
                model: self.thin.model.name(),
            });
        }
        if i64::try_from(self.seed).is_err() {
            return Err(SimulateError::Seed { found: self.seed });
        }
        self.thick.check(PairLine::Thick, thick)?;
        self.thin.check(PairLine::Thin, thin)
    }
}
