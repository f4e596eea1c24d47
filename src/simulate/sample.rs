//! Many pairs drawn from stated ranges: what pair k is follows from the settings and k alone.
//!
//! A pair has a stream of random numbers of its own, and every quantity its place in that stream,
//! used or not. So a pair is the same in a larger sample, and another range of one quantity leaves the
//! others as they are.

mod check;

use super::correlation::Correlation;
use super::error::SimulateError;
use super::truth::{Axis, Baseline, LineTruth, NoiseLevel, PairTruth};
use crate::line::Line;
use crate::model::{Model, RadiationTemperature};
use rand::distr::{Distribution, StandardUniform};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// What a simulated pair shows.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Kind {
    /// A slab whose halves approach each other.
    Infall,
    /// A slab whose halves move apart.
    Expansion,
    /// A slab at rest.
    Static,
    /// Two clouds on one line of sight: two Gaussians in each line, at the same two velocities.
    TwoClouds,
    /// One Gaussian in each line.
    Gaussian,
}

impl Kind {
    /// Every kind.
    pub const ALL: [Self; 5] = [
        Self::Infall,
        Self::Expansion,
        Self::Static,
        Self::TwoClouds,
        Self::Gaussian,
    ];

    /// Name in options and tables.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Infall => "infall",
            Self::Expansion => "expansion",
            Self::Static => "static",
            Self::TwoClouds => "two-clouds",
            Self::Gaussian => "gaussian",
        }
    }

    /// Whether it is made by a slab model.
    #[must_use]
    pub fn is_slab(self) -> bool {
        matches!(self, Self::Infall | Self::Expansion | Self::Static)
    }
}

/// A model of the slabs of a sample.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Slab {
    /// The hill model, its surface at the background.
    Hill,
    /// The two-layer model, the front layer the colder one.
    TwoLayer,
}

impl Slab {
    /// Every slab.
    pub const ALL: [Self; 2] = [Self::Hill, Self::TwoLayer];

    /// Name in options and tables.
    #[must_use]
    pub fn name(self) -> &'static str {
        self.model().name()
    }

    fn model(self) -> Model {
        match self {
            Self::Hill => Model::Hill,
            Self::TwoLayer => Model::TwoLayer,
        }
    }
}

/// How values lie between two ends.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Spacing {
    /// Every value as probable as any other.
    Even,
    /// Every factor as probable as any other.
    Log,
}

/// Where a quantity is drawn from; a single value where both ends are the same.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Range {
    /// Lower end.
    pub low: f64,
    /// Upper end.
    pub high: f64,
    /// How values lie between them.
    pub spacing: Spacing,
}

impl Range {
    const fn even(low: f64, high: f64) -> Self {
        Self {
            low,
            high,
            spacing: Spacing::Even,
        }
    }

    const fn log(low: f64, high: f64) -> Self {
        Self {
            low,
            high,
            spacing: Spacing::Log,
        }
    }

    /// The value of a deviate between 0 and 1.
    fn at(&self, deviate: f64) -> f64 {
        let value = match self.spacing {
            Spacing::Even => self.low + deviate * (self.high - self.low),
            Spacing::Log => self.low * (deviate * (self.high / self.low).ln()).exp(),
        };
        // rounding may step over an end
        value.clamp(self.low, self.high)
    }

    /// The part of it between two values, `None` where there is none of positive extent.
    fn part(&self, low: f64, high: f64) -> Option<Self> {
        let part = Self {
            low: self.low.max(low),
            high: self.high.min(high),
            spacing: self.spacing,
        };
        let single = self.low == self.high && part.low == part.high && part.low != 0.0;
        (part.low < part.high || single).then_some(part)
    }
}

/// Everything that a sample follows from. Ranges are of independent quantities.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct SampleSettings {
    /// Number of pairs.
    pub pairs: u64,
    /// Seed of all pairs, at most 2^63 - 1.
    pub seed: u64,
    /// Number of channels of each line.
    pub channels: usize,
    /// Correlation of the noise, both lines.
    pub correlation: Correlation,
    /// Weights of the kinds; one without a weight is not drawn.
    pub kinds: BTreeMap<Kind, f64>,
    /// Weights of the models of slabs.
    pub models: BTreeMap<Slab, f64>,
    /// Peak over noise of the thick line.
    pub signal_to_noise: Range,
    /// Peak over noise of the thin line.
    pub signal_to_noise_thin: Range,
    /// Inward speed over dispersion: infall has the positive part, expansion the negative one.
    pub v_in_sigmas: Range,
    /// Optical depth of a slab's half or layer.
    pub tau: Range,
    /// Temperatures, K: of the hill's peak; of two layers, drawn each and the colder put in front; J(T)
    /// less the background's is the height of a thick line's Gaussian.
    pub temperature_k: Range,
    /// Dispersion, km/s; both lines.
    pub sigma_km_s: Range,
    /// Systemic velocity, km/s.
    pub v_lsr_km_s: Range,
    /// Peak of the thin line's Gaussian, K.
    pub peak_thin_k: Range,
    /// Distance of two clouds over the first one's dispersion; either side is as probable.
    pub separation_sigmas: Range,
    /// Peak of the second cloud over the first one's, drawn for each line.
    pub second_over_first: Range,
    /// Middle of the band less systemic velocity, over dispersion.
    pub band_offset_sigmas: Range,
    /// Channel width over dispersion, where the width is not given in km/s.
    pub channel_sigmas: Range,
    /// Channel width, km/s, in place of that in dispersions.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub channel_km_s: Option<Range>,
}

impl Default for SampleSettings {
    fn default() -> Self {
        Self {
            pairs: 100,
            seed: 1,
            channels: 200,
            correlation: Correlation::White,
            kinds: Kind::ALL.into_iter().map(|kind| (kind, 1.0)).collect(),
            models: Slab::ALL.into_iter().map(|slab| (slab, 1.0)).collect(),
            signal_to_noise: Range::log(5.0, 100.0),
            signal_to_noise_thin: Range::log(5.0, 100.0),
            v_in_sigmas: Range::even(-1.0, 1.0),
            tau: Range::log(0.5, 30.0),
            temperature_k: Range::even(5.0, 40.0),
            sigma_km_s: Range::log(0.15, 1.0),
            v_lsr_km_s: Range::even(-20.0, 20.0),
            peak_thin_k: Range::log(0.1, 3.0),
            separation_sigmas: Range::even(1.5, 4.0),
            second_over_first: Range::even(0.3, 1.0),
            band_offset_sigmas: Range::even(-1.0, 1.0),
            channel_sigmas: Range::log(0.1, 0.3),
            channel_km_s: None,
        }
    }
}

/// One pair of a sample: what it is, not yet its spectra.
#[derive(Clone, Debug, PartialEq)]
pub struct SampleTruth {
    /// What it shows.
    pub kind: Kind,
    /// What its spectra follow from.
    pub truth: PairTruth,
}

/// Stream of the first pair; the first ones are those of noise.
const FIRST_STREAM: u64 = 16;

/// Velocities and widths are whole multiples of this, km/s, so that tables stay readable.
const STEPS_PER_KM_S: f64 = 1e6;

/// Deviates of one pair, uniform between 0 and 1, in the order in which they are drawn.
struct Deviates {
    noise_seed: u64,
    kind: f64,
    model: f64,
    signal_to_noise: f64,
    signal_to_noise_thin: f64,
    v_in: f64,
    tau: f64,
    temperatures: [f64; 2],
    sigmas: [f64; 2],
    v_lsr: f64,
    peak_thin: f64,
    separation: f64,
    side: f64,
    seconds_over_first: [f64; 2],
    band_offset: f64,
    channel: f64,
}

impl Deviates {
    fn new(seed: u64, index: u64) -> Self {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        generator.set_stream(FIRST_STREAM.wrapping_add(index));
        // half of all seeds: a truth file holds no others
        let noise_seed = generator.next_u64() >> 1;
        let mut next = || StandardUniform.sample(&mut generator);
        Self {
            noise_seed,
            kind: next(),
            model: next(),
            signal_to_noise: next(),
            signal_to_noise_thin: next(),
            v_in: next(),
            tau: next(),
            temperatures: [next(), next()],
            sigmas: [next(), next()],
            v_lsr: next(),
            peak_thin: next(),
            separation: next(),
            side: next(),
            seconds_over_first: [next(), next()],
            band_offset: next(),
            channel: next(),
        }
    }
}

impl SampleSettings {
    /// Pair `index`, counted from 0; the same whatever [`SampleSettings::pairs`] is.
    ///
    /// `lines` are the thick and the thin one.
    ///
    /// ```
    /// use inrush::{line::find, simulate::{SampleSettings, simulate_pair}};
    ///
    /// let lines = (find("HCO+ 1-0")?, find("H13CO+ 1-0")?);
    /// let settings = SampleSettings::default();
    /// let drawn = settings.pair((&lines.0, &lines.1), 41)?;
    /// assert_eq!(drawn, SampleSettings { pairs: 42, ..settings }.pair((&lines.0, &lines.1), 41)?);
    /// let pair = simulate_pair(&drawn.truth)?;
    /// assert_eq!(pair.thick.spectrum.len(), 200);
    /// # Ok::<(), Box<dyn std::error::Error>>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`SimulateError`] as for [`SampleSettings::check`].
    pub fn pair(&self, lines: (&Line, &Line), index: u64) -> Result<SampleTruth, SimulateError> {
        self.check()?;
        let deviates = Deviates::new(self.seed, index);
        let kind = chosen(&self.kinds, deviates.kind);
        let slab = chosen(&self.models, deviates.model);
        let v_lsr_km_s = rounded(self.v_lsr_km_s.at(deviates.v_lsr));
        let sigma_km_s = self.sigma_km_s.at(deviates.sigmas[0]);
        let axis = self.axis(v_lsr_km_s, sigma_km_s, &deviates);
        let clouds = self.clouds((v_lsr_km_s, sigma_km_s), &deviates);
        let peak_thin_k = self.peak_thin_k.at(deviates.peak_thin);

        let (thick_model, mut thick) = if kind.is_slab() {
            let v_in_km_s = sigma_km_s * self.v_in_sigmas_of(kind).at(deviates.v_in);
            (slab.model(), self.slab(slab, v_in_km_s, &deviates))
        } else {
            let radiation = RadiationTemperature::new(lines.0.rest_frequency_ghz);
            let temperature_k = self.temperature_k.at(deviates.temperatures[0]);
            let peak_k = radiation.at(temperature_k) - radiation.background();
            gaussians(kind, peak_k, &clouds, deviates.seconds_over_first[0], self)
        };
        thick.extend(named([
            ("v_lsr_km_s", v_lsr_km_s),
            ("sigma_km_s", sigma_km_s),
        ]));
        let (thin_model, thin) = gaussians(
            kind,
            peak_thin_k,
            &clouds,
            deviates.seconds_over_first[1],
            self,
        );
        let line_truth = |model, parameters, line: &Line, noise| LineTruth {
            model,
            parameters,
            line: line.clone(),
            axis,
            noise: NoiseLevel::SignalToNoise(noise),
            correlation: self.correlation,
            baseline: Baseline::default(),
        };
        let ratio = self.signal_to_noise.at(deviates.signal_to_noise);
        let ratio_thin = self.signal_to_noise_thin.at(deviates.signal_to_noise_thin);
        Ok(SampleTruth {
            kind,
            truth: PairTruth {
                thick: line_truth(thick_model, thick, lines.0, ratio),
                thin: line_truth(thin_model, thin, lines.1, ratio_thin),
                isotope_ratio: None,
                seed: deviates.noise_seed,
            },
        })
    }

    /// Inward speeds over dispersion of a kind; 0 where there is none.
    fn v_in_sigmas_of(&self, kind: Kind) -> Range {
        let part = match kind {
            Kind::Infall => self.v_in_sigmas.part(0.0, f64::INFINITY),
            Kind::Expansion => self.v_in_sigmas.part(f64::NEG_INFINITY, 0.0),
            Kind::Static | Kind::TwoClouds | Kind::Gaussian => None,
        };
        part.unwrap_or(Range::even(0.0, 0.0))
    }

    /// Parameters of a slab but those it shares with the thin line.
    fn slab(&self, slab: Slab, v_in_km_s: f64, deviates: &Deviates) -> BTreeMap<String, f64> {
        let tau = self.tau.at(deviates.tau);
        let [first_k, second_k] = deviates
            .temperatures
            .map(|deviate| self.temperature_k.at(deviate));
        let kinematic = [("v_in_km_s", v_in_km_s), ("tau", tau)];
        let mut parameters = named(kinematic);
        match slab {
            Slab::Hill => parameters.extend(named([("t_peak_k", first_k)])),
            Slab::TwoLayer => parameters.extend(named([
                ("t_front_k", first_k.min(second_k)),
                ("t_rear_k", first_k.max(second_k)),
            ])),
        }
        parameters
    }

    /// Velocity and dispersion of the second cloud, km/s.
    fn clouds(&self, (v_km_s, sigma_km_s): (f64, f64), deviates: &Deviates) -> [f64; 2] {
        let separation_km_s = sigma_km_s * self.separation_sigmas.at(deviates.separation);
        let side = if deviates.side < 0.5 { -1.0 } else { 1.0 };
        [
            rounded(v_km_s + side * separation_km_s),
            self.sigma_km_s.at(deviates.sigmas[1]),
        ]
    }

    fn axis(&self, v_lsr_km_s: f64, sigma_km_s: f64, deviates: &Deviates) -> Axis {
        let width_km_s = match self.channel_km_s {
            Some(range) => range.at(deviates.channel),
            None => sigma_km_s * self.channel_sigmas.at(deviates.channel),
        };
        let channel_km_s = rounded(width_km_s).max(STEPS_PER_KM_S.recip());
        let middle_km_s =
            v_lsr_km_s + sigma_km_s * self.band_offset_sigmas.at(deviates.band_offset);
        let band_km_s = (self.channels as f64 - 1.0) * channel_km_s;
        let low_km_s = rounded(middle_km_s - 0.5 * band_km_s);
        Axis {
            low_km_s,
            high_km_s: rounded(low_km_s + band_km_s),
            channel_km_s,
        }
    }
}

/// Model and parameters of a line of one Gaussian or of two clouds.
fn gaussians(
    kind: Kind,
    peak_k: f64,
    [v_second_km_s, sigma_second_km_s]: &[f64; 2],
    second: f64,
    settings: &SampleSettings,
) -> (Model, BTreeMap<String, f64>) {
    let mut parameters = named([("peak_k", peak_k)]);
    if kind != Kind::TwoClouds {
        return (Model::Gaussian, parameters);
    }
    parameters.extend(named([
        ("v_second_km_s", *v_second_km_s),
        ("sigma_second_km_s", *sigma_second_km_s),
        (
            "peak_second_k",
            peak_k * settings.second_over_first.at(second),
        ),
    ]));
    (Model::TwoGaussians, parameters)
}

fn named<const N: usize>(values: [(&str, f64); N]) -> BTreeMap<String, f64> {
    values
        .into_iter()
        .map(|(name, value)| (name.to_owned(), value))
        .collect()
}

fn rounded(km_s: f64) -> f64 {
    (km_s * STEPS_PER_KM_S).round() / STEPS_PER_KM_S
}

/// The key in whose share of the summed weights a deviate between 0 and 1 falls.
fn chosen<K: Copy>(weights: &BTreeMap<K, f64>, deviate: f64) -> K {
    let mut left = deviate * weights.values().sum::<f64>();
    let mut drawn = weights.iter().filter(|(_, weight)| **weight > 0.0);
    let last = drawn.clone().next_back();
    drawn
        .find(|(_, weight)| {
            left -= **weight;
            left < 0.0
        })
        .or(last)
        .map(|(key, _)| *key)
        .expect("checked: a weight is positive")
}
