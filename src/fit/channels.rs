//! One line's channels in units of its noise, made white: what chi2 is a sum over.

use crate::model::{LineShape, Model, Sampling};
use crate::numeric::autoregression::Whitener;
use crate::numeric::products::products;
use crate::prepare::Prepared;
use crate::spectrum::Window;
use std::ops::Range;

/// How a model's value in a channel is formed.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Averaging {
    /// The mean over the channel, with as many quadrature points as keep the error below 1 % of
    /// the noise.
    #[default]
    Channel,
    /// The value at the channel's centre.
    Centre,
}

/// Largest error of the mean over a channel, in units of the channel's noise.
const AVERAGING_TOLERANCE: f64 = 0.01;

/// Most quadrature points a channel for which starts are ranked at channel centres.
const MOST_FOR_COARSE: usize = 2;

/// Fewest channels that a search is content with.
const FEWEST_NEAR: usize = 16;

/// Numbers in a register of the widest instructions.
const REGISTER: usize = 8;

/// Usable channels of one line inside the fitted range, whitened.
#[derive(Clone, Debug)]
pub struct Channels {
    line: LineShape,
    sampling: Sampling,
    coarse_sampling: Sampling,
    whitened_data: Vec<f64>,
    data_chi2: f64,
    segments: Vec<Range<usize>>,
    whitener: Option<Whitener>,
    noise_k: f64,
}

impl Channels {
    /// Takes the usable channels inside `range` (all where it is `None`) and outside other signal.
    ///
    /// `narrowest_km_s` is the dispersion of the sharpest feature that a model will show, for the
    /// number of quadrature points.
    #[must_use]
    pub fn new(
        prepared: &Prepared,
        line: LineShape,
        range: Option<Window>,
        averaging: Averaging,
        narrowest_km_s: f64,
    ) -> Self {
        let spectrum = &prepared.spectrum;
        let mut velocity = Vec::new();
        let mut width = Vec::new();
        let mut data = Vec::new();
        let mut segments: Vec<Range<usize>> = Vec::new();
        let mut previous = None;
        let inverse_noise = 1.0 / prepared.noise.rms_k;
        let mut brightest = 0.0f64;
        for channel in 0..spectrum.len() {
            let v = spectrum.velocity_km_s()[channel];
            let outside = range.is_some_and(|range| !range.contains(v));
            if outside || !spectrum.is_usable(channel) || prepared.is_other_signal(v) {
                continue;
            }
            let index = data.len();
            match segments.last_mut() {
                Some(segment) if previous == channel.checked_sub(1) => segment.end = index + 1,
                _ => segments.push(index..index + 1),
            }
            previous = Some(channel);
            velocity.push(v);
            width.push(spectrum.width_km_s()[channel]);
            data.push(spectrum.temperature_k()[channel] * inverse_noise);
            brightest = brightest.max(data[index].abs());
        }
        let points = match averaging {
            Averaging::Centre => 1,
            Averaging::Channel => {
                let widest = width.iter().copied().fold(0.0, f64::max);
                Sampling::points_needed(widest, narrowest_km_s, brightest, AVERAGING_TOLERANCE)
            }
        };
        let process = &prepared.noise.process;
        let whitener = (!process.is_white()).then(|| process.whitener());
        if let Some(whitener) = &whitener {
            whitener.whiten(&segments, &mut data);
        }
        let [data_chi2] = products(&data, [&data]);
        // with more points a channel's centre says little about its mean
        let coarse_points = if points > MOST_FOR_COARSE { points } else { 1 };
        Self {
            line,
            coarse_sampling: Sampling::new(velocity.clone(), width.clone(), coarse_points),
            sampling: Sampling::new(velocity, width, points),
            whitened_data: data,
            data_chi2,
            segments,
            whitener,
            noise_k: prepared.noise.rms_k,
        }
    }

    /// Those of the channels inside a window that are close enough to be all that a search needs; all
    /// where few are inside.
    #[must_use]
    pub fn near(&self, window: Window) -> Self {
        let velocity = self.sampling.velocity_km_s();
        let offsets = || self.line.components.iter().map(|one| one.offset_km_s);
        let low_km_s = window.low_km_s + offsets().fold(0.0, f64::min);
        let high_km_s = window.high_km_s + offsets().fold(0.0, f64::max);
        let first = velocity.partition_point(|v| *v < low_km_s);
        let inside = velocity.partition_point(|v| *v <= high_km_s) - first;
        // loops over whole registers have no remainder
        let end = (first + inside.next_multiple_of(REGISTER)).min(velocity.len());
        if end - first < FEWEST_NEAR {
            return self.clone();
        }
        let data = self.whitened_data[first..end].to_vec();
        let [data_chi2] = products(&data, [&data]);
        let segments = (self.segments.iter())
            .map(|segment| segment.start.max(first)..segment.end.min(end))
            .filter(|segment| !segment.is_empty())
            .map(|segment| segment.start - first..segment.end - first)
            .collect();
        Self {
            line: self.line.clone(),
            sampling: self.sampling.part(first..end),
            coarse_sampling: self.coarse_sampling.part(first..end),
            whitened_data: data,
            data_chi2,
            segments,
            whitener: self.whitener.clone(),
            noise_k: self.noise_k,
        }
    }

    /// Number of channels.
    #[must_use]
    pub fn len(&self) -> usize {
        self.whitened_data.len()
    }

    /// Whether there is none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.whitened_data.is_empty()
    }

    /// Where models are evaluated.
    #[must_use]
    pub fn sampling(&self) -> &Sampling {
        &self.sampling
    }

    /// Where models are evaluated to rank starts: at the channels' centres, unless channels are wide.
    #[must_use]
    pub fn coarse_sampling(&self) -> &Sampling {
        &self.coarse_sampling
    }

    /// chi2 of no line at all: the sum of the whitened data's squares.
    #[must_use]
    pub fn data_chi2(&self) -> f64 {
        self.data_chi2
    }

    /// The line.
    #[must_use]
    pub fn line(&self) -> &LineShape {
        &self.line
    }

    /// The data in units of the noise, white.
    #[must_use]
    pub fn whitened_data(&self) -> &[f64] {
        &self.whitened_data
    }

    /// Standard deviation of the noise in a channel, K.
    #[must_use]
    pub fn noise_k(&self) -> f64 {
        self.noise_k
    }

    /// Turns columns of temperatures (K, one a channel, one column after the other) into units of the
    /// noise and makes them white as the data are.
    pub fn whiten(&self, columns: &mut [f64]) {
        let inverse_noise = 1.0 / self.noise_k;
        for value in columns.iter_mut() {
            *value *= inverse_noise;
        }
        self.decorrelate(columns);
    }

    /// Makes columns white as the data are, but leaves their unit.
    pub fn decorrelate(&self, columns: &mut [f64]) {
        if let Some(whitener) = &self.whitener {
            // a side of a line without a channel has no columns
            for column in columns.chunks_exact_mut(self.len().max(1)) {
                whitener.whiten(&self.segments, column);
            }
        }
    }

    /// The same of a column over some channels in a row; its first values have to vanish, as many as
    /// [`Channels::order`], where a segment goes on before them.
    pub fn decorrelate_part(&self, channels: &Range<usize>, column: &mut [f64]) {
        let Some(whitener) = &self.whitener else {
            return;
        };
        for segment in &self.segments {
            let first = segment.start.max(channels.start);
            let end = segment.end.min(channels.end);
            if first < end {
                let part = first - channels.start..end - channels.start;
                whitener.whiten(std::slice::from_ref(&part), column);
            }
        }
    }

    /// Runs of channels that follow each other.
    #[must_use]
    pub fn segments(&self) -> &[Range<usize>] {
        &self.segments
    }

    /// Order of the noise's process.
    #[must_use]
    pub fn order(&self) -> usize {
        self.whitener.as_ref().map_or(0, Whitener::order)
    }

    /// Residuals and, where wanted, their Jacobian of a model: buffers as in [`Model::evaluate`].
    pub fn residuals(
        &self,
        model: Model,
        parameters: &[f64],
        residuals: &mut [f64],
        mut jacobian: Option<&mut [f64]>,
    ) {
        model.evaluate(
            &self.line,
            &self.sampling,
            parameters,
            residuals,
            jacobian.as_deref_mut(),
        );
        self.whiten(residuals);
        for (residual, datum) in residuals.iter_mut().zip(&self.whitened_data) {
            *residual -= datum;
        }
        if let Some(jacobian) = jacobian {
            self.whiten(jacobian);
        }
    }
}
