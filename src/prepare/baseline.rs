//! Polynomial baselines: a start that no line can pull, and clipped least squares on line-free channels.

use crate::numeric::polynomial::{Basis, Polynomial, ScaledAxis};
use crate::numeric::robust::{clipped_scale, core_scale, limit_of_smallest, squares_within};

/// Per cent of the channels that the robust start rests on: less than what the widest line that is to
/// be survived leaves free.
const CORE_PERCENT: usize = 35;

/// The band is cut into this many blocks; every pair of them gives a start.
const BLOCKS: usize = 6;

/// The starts are tried on about this many channels, evenly taken from the band.
const START_CHANNELS: usize = 120;

/// Clip of the core scale, in standard deviations.
pub(super) const CORE_CLIP: f64 = 3.0;

/// Clip of the noise on line-free channels, in standard deviations: wider, so that few channels bias
/// it less.
pub(super) const NOISE_CLIP: f64 = 3.5;

/// Channels of one spectrum that hold a number, in order.
pub(super) struct Channels {
    /// Velocities, km/s.
    pub velocity: Vec<f64>,
    /// Values, K.
    pub value: Vec<f64>,
    /// Index of each in the spectrum.
    pub index: Vec<usize>,
    /// Polynomials in each.
    basis: Basis,
}

impl Channels {
    /// The usable channels of a spectrum.
    pub fn of(spectrum: &crate::spectrum::Spectrum) -> Self {
        let index: Vec<usize> = (0..spectrum.len())
            .filter(|&channel| spectrum.is_usable(channel))
            .collect();
        let velocity: Vec<f64> = index.iter().map(|&i| spectrum.velocity_km_s()[i]).collect();
        let value: Vec<f64> = index.iter().map(|&i| spectrum.temperature_k()[i]).collect();
        let axis = ScaledAxis::new(
            velocity.first().copied().unwrap_or(0.0),
            velocity.last().copied().unwrap_or(1.0),
        );
        Self {
            basis: Basis::new(axis, &velocity),
            velocity,
            value,
            index,
        }
    }

    /// Every `stride`-th channel.
    fn every(&self, stride: usize) -> Self {
        let take = |values: &[f64]| values.iter().copied().step_by(stride).collect();
        Self {
            velocity: take(&self.velocity),
            value: take(&self.value),
            index: self.index.iter().copied().step_by(stride).collect(),
            basis: self.basis.every(stride),
        }
    }

    pub fn len(&self) -> usize {
        self.velocity.len()
    }

    /// Values minus a baseline.
    pub fn residuals(&self, baseline: &Polynomial) -> Vec<f64> {
        let mut residuals = Vec::with_capacity(self.len());
        self.basis.subtract(baseline, &self.value, &mut residuals);
        residuals
    }

    /// Least squares on chosen channels; `None` where they do not determine the order.
    fn fit(&self, order: usize, chosen: &[usize]) -> Option<Polynomial> {
        self.basis.fit(order, chosen, &self.value)
    }

    /// Variance in each channel of a baseline fitted on chosen channels of unit variance.
    pub fn leverage(&self, order: usize, chosen: &[usize]) -> Vec<f64> {
        self.basis
            .leverages(order, chosen)
            .unwrap_or_else(|| vec![0.0; self.len()])
    }

    /// Indices of runs of channels that neighbour each other in the spectrum and are all kept.
    pub fn segments(&self, keep: impl Fn(usize) -> bool) -> Vec<std::ops::Range<usize>> {
        let mut segments = Vec::new();
        let mut start = None;
        for i in 0..self.len() {
            let follows = i > 0 && self.index[i] == self.index[i - 1] + 1;
            if let Some(first) = start
                && (!keep(i) || !follows)
            {
                segments.push(first..i);
                start = None;
            }
            if keep(i) && start.is_none() {
                start = Some(i);
            }
        }
        if let Some(first) = start {
            segments.push(first..self.len());
        }
        segments
    }
}

/// A baseline that holds although up to about 60 % of the band is line, and the noise about it.
///
/// Least trimmed squares (Rousseeuw 1984, doi:10.1080/01621459.1984.10477105): from lines through
/// every pair of blocks of the band, refit to the channels nearest, keep the best.
pub(super) fn robust_start(channels: &Channels, order: usize) -> Option<Clipped> {
    let coarse = channels.every(channels.len() / START_CHANNELS + 1);
    let count = coarse.len();
    let core = |count: usize| (count * CORE_PERCENT / 100).max(order + 3).min(count);
    let block = |b: usize| (b * count / BLOCKS)..((b + 1) * count / BLOCKS);
    let mut starts: Vec<(f64, Polynomial)> = Vec::new();
    let mut scratch = Vec::with_capacity(channels.len());
    for first in 0..BLOCKS {
        for second in first..BLOCKS {
            let chosen: Vec<usize> = block(first).chain(block(second)).collect();
            let degree = if first == second { 0 } else { order.min(1) };
            let Some(line) = coarse.fit(degree, &chosen) else {
                continue;
            };
            starts.extend(concentrate(
                &coarse,
                line,
                order.min(1),
                (core(count), 3),
                &mut scratch,
            ));
        }
    }
    starts.sort_by(|a, b| a.0.total_cmp(&b.0));
    let best = starts
        .into_iter()
        .take(3)
        .filter_map(|(_, line)| concentrate(&coarse, line, order, (core(count), 12), &mut scratch))
        .min_by(|a, b| a.0.total_cmp(&b.0))?
        .1;
    let best = concentrate(
        channels,
        best,
        order,
        (core(channels.len()), 6),
        &mut scratch,
    )?
    .1;
    // The usual last step: least squares on all that the start does not call outliers.
    let residuals = channels.residuals(&best);
    let scale = core_scale(&residuals, CORE_CLIP);
    let near: Vec<usize> = (0..channels.len())
        .filter(|&i| residuals[i].abs() <= CORE_CLIP * scale)
        .collect();
    let baseline = channels.fit(order, &near)?;
    let residuals = channels.residuals(&baseline);
    let scale = core_scale(&residuals, CORE_CLIP).min(difference_scale(&residuals));
    Some(Clipped {
        baseline,
        scale,
        kept: near,
    })
}

/// Noise from differences of channels 1 to 4 apart, the largest: broad lines hardly enter, and noise
/// that is smoothed over a few channels is not taken for smaller than it is.
fn difference_scale(residuals: &[f64]) -> f64 {
    (1..=4)
        .filter(|&lag| lag < residuals.len())
        .map(|lag| {
            let differences: Vec<f64> = residuals
                .iter()
                .zip(&residuals[lag..])
                .map(|(a, b)| (b - a) / std::f64::consts::SQRT_2)
                .collect();
            clipped_scale(&differences, CORE_CLIP)
        })
        .fold(0.0, f64::max)
}

/// Refits to the `core` channels nearest to the baseline, `steps` times; the sum of their squared
/// residuals with it. `magnitude` is overwritten.
fn concentrate(
    channels: &Channels,
    mut baseline: Polynomial,
    order: usize,
    (core, steps): (usize, usize),
    magnitude: &mut Vec<f64>,
) -> Option<(f64, Polynomial)> {
    let (basis, value) = (&channels.basis, &channels.value);
    let mut last = f64::INFINITY;
    for _ in 0..steps {
        basis.subtract(&baseline, value, magnitude);
        for residual in magnitude.iter_mut() {
            *residual = residual.abs();
        }
        let limit = limit_of_smallest(magnitude, core);
        let (sum, _) = squares_within(magnitude, limit);
        if sum >= last {
            break;
        }
        last = sum;
        baseline = basis.fit_within(order, magnitude, limit, value)?;
    }
    Some((last, baseline))
}

/// A baseline fitted on line-free channels with outliers left out.
pub(super) struct Clipped {
    pub baseline: Polynomial,
    /// Core scale of the residuals on line-free channels, not yet corrected for what the fit took.
    pub scale: f64,
    /// Line-free channels within the clip.
    pub kept: Vec<usize>,
}

/// Least squares on `free` channels, leaving out those beyond `clip` standard deviations until the
/// set no longer changes.
pub(super) fn clipped_fit(
    channels: &Channels,
    order: usize,
    free: &[usize],
    clip: f64,
) -> Option<Clipped> {
    let mut kept = free.to_vec();
    for _ in 0..30 {
        let baseline = channels.fit(order, &kept)?;
        let residuals = channels.residuals(&baseline);
        let on_free: Vec<f64> = free.iter().map(|&i| residuals[i]).collect();
        let scale = clipped_scale(&on_free, NOISE_CLIP);
        let mut next = Vec::with_capacity(free.len());
        next.extend(
            free.iter()
                .copied()
                .filter(|&i| residuals[i].abs() <= clip * scale),
        );
        if next == kept || next.len() <= order + 1 {
            return Some(Clipped {
                baseline,
                scale,
                kept,
            });
        }
        kept = next;
    }
    let baseline = channels.fit(order, &kept)?;
    let residuals = channels.residuals(&baseline);
    let on_free: Vec<f64> = free.iter().map(|&i| residuals[i]).collect();
    Some(Clipped {
        scale: clipped_scale(&on_free, NOISE_CLIP),
        baseline,
        kept,
    })
}
