//! One line's channels as sums that a likelihood needs, with baseline and noise level unknown.
//!
//! All usable channels count. Those outside the fitted range hold no line: they tell of the baseline
//! (whose polynomial is integrated over with a flat prior) and of the noise level alone. No cloud has
//! exactly the profile of a family: smooth shape errors of a few percent are integrated over too.

use crate::fit::{Averaging, Channels};
use crate::model::LineShape;
use crate::numeric::marginal::Quadratic;
use crate::numeric::products::products;
use crate::prepare::Prepared;
use crate::spectrum::Window;
use std::ops::Range;

/// Channels outside the fitted range count no farther from zero than this, in units of the noise: a
/// spike is no noise level.
const FARTHEST: f64 = 4.0;

/// Smooth departures of a line from any family's profile: bumps in a row along the line, each with a
/// normal amplitude.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ShapeErrors {
    /// Standard deviation in the middle of the line, K.
    pub deviation_k: f64,
    /// Middle of the line, km/s.
    pub middle_km_s: f64,
    /// Dispersion of the envelope that lets them fade in the wings, km/s.
    pub reach_km_s: f64,
    /// Dispersion of the gas, km/s: the scale of the bumps.
    pub sigma_km_s: f64,
}

impl ShapeErrors {
    /// Dispersion of a bump and distance of neighbours, in dispersions of the gas.
    const BUMP: f64 = 0.6;
    const STEP: f64 = 0.85;
    /// Bumps reach this many dispersions of the envelope to either side.
    const ENVELOPES: f64 = 2.0;
    /// Most bumps.
    const MOST: f64 = 15.0;

    /// Each bump at the given velocities, K, scaled to its standard deviation.
    #[must_use]
    pub fn bumps(&self, velocity_km_s: &[f64]) -> Vec<Vec<f64>> {
        if self.deviation_k <= 0.0 {
            return Vec::new();
        }
        let half = Self::ENVELOPES * self.reach_km_s;
        let step = (Self::STEP * self.sigma_km_s).max(2.0 * half / Self::MOST);
        let width = Self::BUMP / Self::STEP * step;
        // neighbours overlap: their squares sum to sqrt(pi) width/step
        let scale = self.deviation_k / (std::f64::consts::PI.sqrt() * width / step).sqrt();
        #[expect(clippy::cast_possible_truncation, reason = "a few steps")]
        let count = (half / step).floor() as i32;
        (-count..=count)
            .map(|index| {
                let centre = self.middle_km_s + step * f64::from(index);
                let bump = |v: &f64| {
                    let along = (v - centre) / width;
                    let out = (v - self.middle_km_s) / self.reach_km_s;
                    scale * (-0.5 * (along * along + out * out)).exp()
                };
                velocity_km_s.iter().map(bump).collect()
            })
            .collect()
    }
}

/// A line's data.
#[derive(Clone, Debug)]
pub(in crate::fit) struct LineData {
    channels: Channels,
    /// Data in the range, white, less the baseline and shape errors that all channels together suggest.
    data: Vec<f64>,
    /// Baseline polynomials and shape errors in the range, white, orthonormal over all channels and
    /// the priors of the shape errors.
    nuisances: Vec<Vec<f64>>,
    /// Sum of the data's squares over all channels, less the nuisances' part.
    squares: f64,
    /// Independent channels less baseline terms.
    values: f64,
    /// Standard deviation of the noise, K, as likelihoods need it.
    noise_k: f64,
}

impl LineData {
    pub fn new(
        prepared: &Prepared,
        line: &LineShape,
        range: Window,
        averaging: Averaging,
        narrowest_km_s: f64,
        shape_errors: &ShapeErrors,
    ) -> Self {
        let within = |low_km_s: f64, high_km_s: f64| {
            let window = Window {
                low_km_s,
                high_km_s,
            };
            let line = line.clone();
            Channels::new(prepared, line, Some(window), averaging, narrowest_km_s)
        };
        let channels = within(range.low_km_s, range.high_km_s);
        let outside = [
            within(f64::NEG_INFINITY, range.low_km_s.next_down()),
            within(range.high_km_s.next_up(), f64::INFINITY),
        ];
        let parts = [&channels, &outside[0], &outside[1]];
        let mut data: Vec<f64> = channels.whitened_data().to_vec();
        for part in &outside {
            let whitened = part.whitened_data().iter();
            data.extend(whitened.map(|value| value.clamp(-FARTHEST, FARTHEST)));
        }
        let terms = prepared.baseline.order.map_or(0, |order| order + 1);
        let polynomials = polynomials(&parts, terms);
        let mut bumps: Vec<Vec<f64>> = shape_errors
            .bumps(channels.sampling().velocity_km_s())
            .into_iter()
            .map(|mut bump| {
                channels.whiten(&mut bump);
                bump
            })
            .collect();
        let (independent, variance) = if prepared.noise.process.is_white() {
            (1.0, 1.0)
        } else {
            let whole = within(f64::NEG_INFINITY, f64::INFINITY);
            independence(&whole, prepared.window, inflation(prepared))
        };
        let values = (data.len() - polynomials.len()) as f64 * independent;
        let per_noise = 1.0 / variance.sqrt();
        for value in data.iter_mut().chain(bumps.iter_mut().flatten()) {
            *value *= per_noise;
        }
        let nuisances = orthonormal(with_priors(polynomials, bumps, data.len()));
        data.resize(nuisances.first().map_or(data.len(), Vec::len), 0.0);
        let [mut squares] = products(&data, [&data]);
        for nuisance in &nuisances {
            let [share] = products(&data, [nuisance]);
            for (datum, value) in data.iter_mut().zip(nuisance) {
                *datum -= share * value;
            }
            squares -= share * share;
        }
        let count = channels.len();
        data.truncate(count);
        let nuisances = nuisances
            .into_iter()
            .map(|mut nuisance| {
                nuisance.truncate(count);
                nuisance
            })
            .collect();
        Self {
            channels,
            data,
            nuisances,
            squares,
            values,
            noise_k: prepared.noise.rms_k / per_noise,
        }
    }

    pub fn channels(&self) -> &Channels {
        &self.channels
    }

    /// White residuals beside a profile (K), baseline and shape errors taken out.
    pub fn residuals(&self, mut profile_k: Vec<f64>) -> Vec<f64> {
        self.channels.whiten(&mut profile_k);
        let channels = 0..profile_k.len();
        let mut along = Vec::new();
        self.along_nuisances(&profile_k, &channels, |_, one| along.push(one));
        for (nuisance, along) in self.nuisances.iter().zip(along) {
            for (value, nuisance) in profile_k.iter_mut().zip(nuisance) {
                *value -= along * nuisance;
            }
        }
        let pairs = self.data.iter().zip(profile_k);
        pairs.map(|(datum, value)| datum - value).collect()
    }

    /// chi2 as a function of the amplitudes (K) of shapes in some channels, which become white; they
    /// vanish in all other channels, and in the first ones, as many as the noise's order.
    pub fn quadratic(
        &self,
        channels: Range<usize>,
        shapes: &mut [&mut [f64]],
        mean: f64,
    ) -> Quadratic {
        let scale = 1.0 / self.noise_k;
        let mut quadratic = Quadratic {
            count: shapes.len(),
            data: self.squares,
            values: self.values,
            means: [mean; 2],
            ..Quadratic::default()
        };
        for shape in shapes.iter_mut() {
            self.channels.decorrelate_part(&channels, shape);
        }
        let data = &self.data[channels.clone()];
        match shapes {
            [] => {}
            [one] => {
                let [mut square, product] = products(one, [one, data]);
                self.along_nuisances(one, &channels, |_, along| square -= along * along);
                quadratic.products[0] = square;
                quadratic.projected[0] = product;
            }
            [one, two, ..] => {
                let [mut square, mut cross, first] = products(one, [one, two, data]);
                let [mut other, second] = products(two, [two, data]);
                let mut others = [0.0; MOST_NUISANCES];
                self.along_nuisances(two, &channels, |index, along| others[index] = along);
                self.along_nuisances(one, &channels, |index, along| {
                    square -= along * along;
                    cross -= along * others[index];
                    other -= others[index] * others[index];
                });
                quadratic.products = [square, cross, other];
                quadratic.projected = [first, second];
            }
        }
        quadratic.products = quadratic.products.map(|product| scale * scale * product);
        quadratic.projected = quadratic.projected.map(|product| scale * product);
        quadratic
    }

    /// Products of a column over some channels with every nuisance, four in a pass.
    fn along_nuisances(
        &self,
        column: &[f64],
        channels: &Range<usize>,
        mut take: impl FnMut(usize, f64),
    ) {
        let (fours, rest) = self.nuisances.as_chunks::<4>();
        let mut index = 0;
        let mut next = |along: f64| {
            take(index, along);
            index += 1;
        };
        for four in fours {
            let four: [&[f64]; 4] = std::array::from_fn(|k| &four[k][channels.clone()]);
            products(column, four).into_iter().for_each(&mut next);
        }
        for nuisance in rest {
            let [along] = products(column, [&nuisance[channels.clone()]]);
            next(along);
        }
    }
}

/// Lags over which white residuals are looked at for what correlation is left.
const LAGS: usize = 10;

/// Share of channels that are independent values where data of correlated noise were made white, and
/// the variance of those values.
///
/// chi2 of n values whose power is P over frequency, 1 where they are white, has the mean n <P> and the
/// variance 2 n <P^2>: that of n <P>^2/<P^2> independent values of variance <P^2>/<P> (Satterthwaite
/// 1946, doi:10.2307/3002019). Noise that is oversampled keeps no power in part of the band, whatever
/// process of finite order describes it: counted as independent, its empty part would lower the noise
/// level of the rest. <P^2>/<P>^2 is the sum over lags of the squared autocorrelation in the line-free
/// channels. `inflation` is what the process's uncertainty does: it raises the variance and lowers the
/// number.
fn independence(whole: &Channels, window: Window, inflation: f64) -> (f64, f64) {
    let velocity = whole.sampling().velocity_km_s();
    let data: Vec<f64> = whole
        .whitened_data()
        .iter()
        .zip(velocity)
        .map(|(value, v)| {
            if window.contains(*v) {
                0.0
            } else {
                value.clamp(-FARTHEST, FARTHEST)
            }
        })
        .collect();
    let free = velocity.iter().filter(|v| !window.contains(**v)).count();
    let [square] = products(&data, [&data]);
    if free == 0 || square <= 0.0 {
        return (1.0 / inflation, inflation);
    }
    let mut sum = 1.0;
    for lag in 1..=LAGS {
        let mut product = 0.0;
        for segment in whole.segments() {
            let values = &data[segment.clone()];
            if let Some(later) = values.get(lag..) {
                let [along] = products(later, [values]);
                product += along;
            }
        }
        // less what noise alone gives
        sum += 2.0 * ((product / square).powi(2) - 1.0 / free as f64);
    }
    let sum = sum.max(1.0);
    let level = square / free as f64;
    (1.0 / (sum * inflation), level * sum * inflation)
}

/// What an uncertain correlation of the noise does to variances: 1 + 6 p/N for a process of order p
/// measured on N channels.
///
/// White residuals of new channels have a variance 1 + 2 p/N of that of the channels that the process
/// was fitted to, and the mean of true over measured power at one frequency is about as high: 4 p/N
/// together. The rest is measured, on amplitudes, shifts and widths of Gaussians in simulated smoothed
/// noise: that is no process of finite order.
fn inflation(prepared: &Prepared) -> f64 {
    const PER_COEFFICIENT: f64 = 6.0;
    let noise = &prepared.noise;
    1.0 + PER_COEFFICIENT * noise.process.order() as f64 / noise.channels.max(1) as f64
}

/// Most baseline terms and shape errors together.
const MOST_NUISANCES: usize = 24;

/// Powers of velocity in all channels of the parts, white.
fn polynomials(parts: &[&Channels], terms: usize) -> Vec<Vec<f64>> {
    let ends = parts
        .iter()
        .flat_map(|part| part.sampling().velocity_km_s());
    let (low, high) = ends.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), v| {
        (low.min(*v), high.max(*v))
    });
    (0..i32::try_from(terms).unwrap_or(0))
        .map(|power| {
            parts
                .iter()
                .flat_map(|part| {
                    let scaled = |v: &f64| (2.0 * v - low - high) / (high - low);
                    let velocities = part.sampling().velocity_km_s().iter();
                    let mut column: Vec<f64> = velocities.map(|v| scaled(v).powi(power)).collect();
                    part.whiten(&mut column);
                    column
                })
                .collect()
        })
        .collect()
}

/// Nuisance columns over all channels and one more value for each column with a prior: there its
/// amplitude, in units of its standard deviation, is "measured" as zero with unit error.
fn with_priors(flat: Vec<Vec<f64>>, normal: Vec<Vec<f64>>, channels: usize) -> Vec<Vec<f64>> {
    let length = channels + normal.len();
    let extended = |mut column: Vec<f64>| {
        column.resize(length, 0.0);
        column
    };
    let flat = flat.into_iter().map(extended);
    let normal = normal.into_iter().enumerate().map(|(index, column)| {
        let mut column = extended(column);
        column[channels + index] = 1.0;
        column
    });
    flat.chain(normal).collect()
}

/// Columns made orthonormal one after the other.
fn orthonormal(mut columns: Vec<Vec<f64>>) -> Vec<Vec<f64>> {
    for index in 0..columns.len() {
        let (before, rest) = columns.split_at_mut(index);
        let column = &mut rest[0];
        for other in before.iter() {
            let [along] = products(column, [other]);
            for (value, other) in column.iter_mut().zip(other) {
                *value -= along * other;
            }
        }
        let [square] = products(column, [&*column]);
        let norm = square.sqrt();
        for value in column.iter_mut() {
            *value /= norm;
        }
    }
    columns
}
