//! Stationary noise with correlation between neighbours, as an autoregressive process.
//!
//! Measured by Burg's recursion pooled over segments (Burg 1975, `PhD` thesis, Stanford): every
//! reflection coefficient lies within -1 and 1, so the covariance is positive definite whatever the
//! data. The same coefficients give the filters that make noise white.

use super::dispatch::{Arithmetic, Kernel, dispatch};
use rand::Rng;
use rand_distr::{Distribution, StandardNormal};
use std::ops::Range;

/// `x_i` = `sum_k` `a_k` `x_(i-k)` + `e_i` with unit variance of x; order 0 is white noise.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Autoregression {
    /// `a_1`, `a_2`, ... ; empty for white noise.
    pub coefficients: Vec<f64>,
}

/// Values beyond this many standard deviations are pulled in to it before correlation is measured.
const WINSORISE_AT: f64 = 3.5;

/// Improvement of -2 ln(likelihood) that an order must bring, each, before noise counts as
/// correlated, where the logarithm of the number of values is not more (chi-square with m degrees of
/// freedom above 6 m for some m: 1.7 % of white noise, and line wings add to it).
const WHITE_PENALTY: f64 = 6.0;

/// Improvement that each order must bring once noise counts as correlated (between Akaike's 2 and
/// the logarithm of the number of values).
const ORDER_PENALTY: f64 = 4.0;

/// From this order on the last reflection coefficient is halved. Smoothed noise has reflections that
/// alternate and fall slowly, and the power at low frequency swings with the order where the
/// sequence is cut; half of the last term takes the middle (as in Euler's summation).
const HALVE_LAST_FROM: usize = 3;

/// Largest reflection coefficient that is kept: beyond it the process is singular in double
/// precision.
const LARGEST_REFLECTION: f64 = 0.999;

/// Autocorrelation below this is taken as zero in sums.
const NEGLIGIBLE: f64 = 1e-6;

/// Where as many values in a row as the process has coefficients are below this, all that follow are
/// zero to double precision.
const VANISHED: f64 = 1e-18;

impl Autoregression {
    /// White noise.
    #[must_use]
    pub fn white() -> Self {
        Self::default()
    }

    /// Number of coefficients.
    #[must_use]
    pub fn order(&self) -> usize {
        self.coefficients.len()
    }

    /// Whether neighbours are uncorrelated.
    #[must_use]
    pub fn is_white(&self) -> bool {
        self.coefficients.is_empty()
    }

    /// Measures the process on segments of consecutive values around zero.
    ///
    /// `scale` is the standard deviation of the values: those beyond 3.5 of it are pulled in, so
    /// outliers do not dominate. The order, at most `max_order`, is 0 in at least 95 % of white data.
    /// Each reflection coefficient is shrunk by its sampling variance, which cancels the bias of
    /// x^T R^-1 x that estimated coefficients bring.
    #[must_use]
    pub fn fit(segments: &[&[f64]], max_order: usize, scale: f64) -> Self {
        if scale.is_nan() || scale <= 0.0 {
            return Self::white();
        }
        let limit = WINSORISE_AT * scale;
        let mut forward: Vec<Vec<f64>> = segments
            .iter()
            .map(|segment| segment.iter().map(|x| x.clamp(-limit, limit)).collect())
            .collect();
        let mut backward = forward.clone();
        let mut reflections = Vec::with_capacity(max_order);
        let (mut gain, mut best_white, mut best_order) = (0.0_f64, 0.0_f64, (0.0_f64, 0));
        for order in 1..=max_order {
            let Some((reflection, pairs)) = burg_step(&mut forward, &mut backward, order) else {
                break;
            };
            let count = pairs as f64;
            gain -= count * (1.0 - reflection * reflection).ln();
            let order_f = order as f64;
            best_white = best_white.max(gain - WHITE_PENALTY.max(count.ln()) * order_f);
            let net = gain - ORDER_PENALTY * order_f;
            if net > best_order.0 {
                best_order = (net, order);
            }
            reflections.push(shrink(reflection, count));
        }
        if best_white <= 0.0 {
            return Self::white();
        }
        reflections.truncate(best_order.1);
        if reflections.len() >= HALVE_LAST_FROM
            && let Some(last) = reflections.last_mut()
        {
            *last *= 0.5;
        }
        Self::from_reflections(&reflections)
    }

    /// The process whose reflection coefficients (partial autocorrelations) are given.
    #[must_use]
    pub fn from_reflections(reflections: &[f64]) -> Self {
        let mut coefficients: Vec<f64> = Vec::with_capacity(reflections.len());
        for &reflection in reflections {
            step_up(&mut coefficients, reflection);
        }
        Self { coefficients }
    }

    /// The process of lowest order with a given autocorrelation at lags 1, 2, ... (Levinson-Durbin).
    ///
    /// `None` where the sequence is not one of a process (not positive definite).
    #[must_use]
    pub fn from_autocorrelation(correlation: &[f64]) -> Option<Self> {
        let mut coefficients: Vec<f64> = Vec::with_capacity(correlation.len());
        let mut innovation = 1.0;
        for (order, &target) in correlation.iter().enumerate() {
            let predicted: f64 = (0..order)
                .map(|k| coefficients[k] * correlation[order - 1 - k])
                .sum();
            let reflection: f64 = (target - predicted) / innovation;
            if reflection.is_nan() || reflection.abs() >= 1.0 {
                return None;
            }
            step_up(&mut coefficients, reflection);
            innovation *= 1.0 - reflection * reflection;
        }
        Some(Self { coefficients })
    }

    /// The process as it was before `terms` smooth components were fitted and subtracted over
    /// `count` values.
    ///
    /// A subtraction takes the noise at frequency zero with it, which lowers every autocovariance
    /// by about `terms` S(0)/`count`; that constant is added back. A constant added to the
    /// autocovariance keeps it positive definite. White noise stays white.
    #[must_use]
    pub fn before_subtraction(&self, terms: usize, count: usize) -> Self {
        if self.is_white() || count == 0 {
            return self.clone();
        }
        let lost = (terms as f64 * self.power_at_zero() / count as f64).min(0.2);
        let correlation: Vec<f64> = self.autocorrelation(self.order() + 1)[1..]
            .iter()
            .map(|value| (value * (1.0 - lost) + lost).min(LARGEST_REFLECTION))
            .collect();
        Self::from_autocorrelation(&correlation).unwrap_or_else(|| self.clone())
    }

    /// Values of the process with unit variance, from the stationary distribution on.
    ///
    /// The first ones are predicted by the processes of lower order that the reflection coefficients
    /// describe.
    pub fn unit_noise(&self, generator: &mut impl Rng, count: usize) -> Vec<f64> {
        let reflections = self.reflections();
        let mut predictor: Vec<f64> = Vec::with_capacity(reflections.len());
        let mut variance: f64 = 1.0;
        let mut noise: Vec<f64> = Vec::with_capacity(count);
        for index in 0..count {
            let before = noise.iter().rev();
            let predicted: f64 = predictor.iter().zip(before).map(|(a, x)| a * x).sum();
            let deviate: f64 = StandardNormal.sample(generator);
            noise.push(predicted + variance.sqrt() * deviate);
            if let Some(reflection) = reflections.get(index) {
                step_up(&mut predictor, *reflection);
                variance *= 1.0 - reflection * reflection;
            }
        }
        noise
    }

    /// Power at frequency zero over that of white noise of the same variance: the sum of the
    /// autocorrelation over all lags.
    #[must_use]
    pub fn power_at_zero(&self) -> f64 {
        let sum: f64 = self.coefficients.iter().sum();
        self.innovation_variance() / ((1.0 - sum) * (1.0 - sum))
    }

    /// Variance of `e_i` for unit variance of x.
    #[must_use]
    pub fn innovation_variance(&self) -> f64 {
        self.reflections()
            .iter()
            .map(|reflection| 1.0 - reflection * reflection)
            .product()
    }

    /// Reflection coefficients (partial autocorrelations) of orders 1, 2, ...
    #[must_use]
    pub fn reflections(&self) -> Vec<f64> {
        let mut current = self.coefficients.clone();
        let mut reflections = vec![0.0; current.len()];
        while let Some(reflection) = current.pop() {
            let order = current.len();
            reflections[order] = reflection;
            let rest = 1.0 - reflection * reflection;
            let lower: Vec<f64> = (0..order)
                .map(|k| (current[k] + reflection * current[order - 1 - k]) / rest)
                .collect();
            current = lower;
        }
        reflections
    }

    /// Correlation of adjacent channels: the autocorrelation at lag 1, 0 for white noise.
    #[must_use]
    pub fn adjacent_correlation(&self) -> f64 {
        self.autocorrelation(2)[1]
    }

    /// Autocorrelation at lags 0 to `n_lags` - 1; 1 at lag 0.
    #[must_use]
    pub fn autocorrelation(&self, n_lags: usize) -> Vec<f64> {
        let mut correlation = vec![1.0];
        let mut lower: Vec<f64> = Vec::with_capacity(self.order());
        let mut innovation = 1.0;
        for reflection in self.reflections() {
            let lag = correlation.len();
            let predicted: f64 = (0..lower.len())
                .map(|k| lower[k] * correlation[lag - 1 - k])
                .sum();
            correlation.push(predicted + reflection * innovation);
            step_up(&mut lower, reflection);
            innovation *= 1.0 - reflection * reflection;
        }
        let mut vanished = 0;
        while correlation.len() < n_lags && vanished < self.order() {
            let lag = correlation.len();
            let next: f64 = self
                .coefficients
                .iter()
                .enumerate()
                .map(|(k, a)| a * correlation[lag - 1 - k])
                .sum();
            vanished = if next.abs() < VANISHED {
                vanished + 1
            } else {
                0
            };
            correlation.push(next);
        }
        correlation.resize(n_lags, 0.0);
        correlation
    }

    /// Variance of `sum_i` `w_i` `x_i` over consecutive channels, w^T R w, for unit variance of x.
    #[must_use]
    pub fn variance_of_sum(&self, weights: &[f64]) -> f64 {
        self.covariance_of_sums(weights, weights)
    }

    /// Covariance of `sum_i` `v_i` `x_i` and `sum_i` `w_i` `x_i` over the same channels, v^T R w.
    #[must_use]
    pub fn covariance_of_sums(&self, first: &[f64], second: &[f64]) -> f64 {
        let dot = |a: &[f64], b: &[f64]| -> f64 { a.iter().zip(b).map(|(x, y)| x * y).sum() };
        let mut sum = dot(first, second);
        if self.is_white() {
            return sum;
        }
        let correlation = self.significant_autocorrelation(first.len());
        for (lag, value) in correlation.iter().enumerate().skip(1) {
            sum += value * (dot(&first[lag..], second) + dot(first, &second[lag..]));
        }
        sum
    }

    /// Autocorrelation up to the lag from which it stays negligible (below 1e-6), at most `n_lags`
    /// values.
    #[must_use]
    pub fn significant_autocorrelation(&self, n_lags: usize) -> Vec<f64> {
        let mut correlation = self.autocorrelation(n_lags);
        let last = correlation
            .iter()
            .rposition(|value| value.abs() > NEGLIGIBLE);
        correlation.truncate(last.map_or(0, |lag| lag + 1));
        correlation
    }

    /// The filters that make noise of this process white.
    #[must_use]
    pub fn whitener(&self) -> Whitener {
        let mut filters = vec![Vec::new()];
        let mut inverse_std = vec![1.0];
        let mut innovation = 1.0_f64;
        let mut lower: Vec<f64> = Vec::with_capacity(self.order());
        for reflection in self.reflections() {
            step_up(&mut lower, reflection);
            innovation *= 1.0 - reflection * reflection;
            filters.push(lower.clone());
            inverse_std.push(1.0 / innovation.sqrt());
        }
        Whitener {
            filters,
            inverse_std,
        }
    }
}

/// Values that are made white together.
const BLOCK: usize = 64;

/// Prediction filters of orders 0 to p: lower ones serve at the start of a segment.
#[derive(Clone, Debug, PartialEq)]
pub struct Whitener {
    filters: Vec<Vec<f64>>,
    inverse_std: Vec<f64>,
}

impl Whitener {
    /// Replaces x by w = L^-1 x in each segment (L L^T = R), so that w is white with unit variance
    /// and `sum_i` `w_i`^2 = x^T R^-1 x. Segments are index ranges of consecutive channels of `column`;
    /// values outside them stay. Divide x by the noise's standard deviation before or after.
    pub fn whiten(&self, segments: &[Range<usize>], column: &mut [f64]) {
        let order = self.filters.len() - 1;
        if order == 0 {
            return;
        }
        for segment in segments {
            let values = &mut column[segment.clone()];
            // From the end, so that every value is predicted from those still coloured.
            let mut end = values.len();
            while end > order {
                let start = end.saturating_sub(BLOCK).max(order);
                let mut predicted = [0.0; BLOCK];
                for (k, a) in self.filters[order].iter().enumerate() {
                    let before = &values[start - k - 1..end - k - 1];
                    for (sum, x) in predicted.iter_mut().zip(before) {
                        *sum += a * x;
                    }
                }
                for (value, predicted) in values[start..end].iter_mut().zip(predicted) {
                    *value = (*value - predicted) * self.inverse_std[order];
                }
                end = start;
            }
            for index in (0..end).rev() {
                let predicted: f64 = self.filters[index]
                    .iter()
                    .zip(values[..index].iter().rev())
                    .map(|(a, x)| a * x)
                    .sum();
                values[index] = (values[index] - predicted) * self.inverse_std[index];
            }
        }
    }

    /// Order of the process.
    #[must_use]
    pub fn order(&self) -> usize {
        self.filters.len() - 1
    }
}

/// Durbin's recursion: the filter of one order more, from the filter and the next reflection.
fn step_up(coefficients: &mut Vec<f64>, reflection: f64) {
    let order = coefficients.len();
    let previous = coefficients.clone();
    for k in 0..order {
        coefficients[k] -= reflection * previous[order - 1 - k];
    }
    coefficients.push(reflection);
}

/// One step of Burg's recursion: the reflection coefficient of `order` and the number of pairs it
/// rests on; `None` where too few pairs are left.
///
/// The backward errors stay where they are: that of channel i is at i + 1 - `order`.
fn burg_step(
    forward: &mut [Vec<f64>],
    backward: &mut [Vec<f64>],
    order: usize,
) -> Option<(f64, usize)> {
    let (mut cross, mut power, mut pairs) = (0.0, 0.0, 0);
    for (f, b) in forward.iter().zip(backward.iter()) {
        let f = f.get(order..).unwrap_or_default();
        let (product, squares) = dispatch(BurgSums(f, &b[..f.len()]));
        cross += product;
        power += squares;
        pairs += f.len();
    }
    if pairs < 4 * order.max(2) || power <= 0.0 {
        return None;
    }
    let reflection: f64 = (2.0 * cross / power).clamp(-LARGEST_REFLECTION, LARGEST_REFLECTION);
    for (f, b) in forward.iter_mut().zip(backward.iter_mut()) {
        let f = f.get_mut(order..).unwrap_or_default();
        for (f, b) in f.iter_mut().zip(b) {
            let (ahead, behind) = (*f, *b);
            *f = ahead - reflection * behind;
            *b = behind - reflection * ahead;
        }
    }
    Some((reflection, pairs))
}

/// `sum_i` `f_i` `b_i` and `sum_i` (`f_i`^2 + `b_i`^2).
struct BurgSums<'a>(&'a [f64], &'a [f64]);

impl Kernel for BurgSums<'_> {
    type Output = (f64, f64);

    /// No fused multiply-add: every copy gives the same.
    #[inline(always)]
    #[allow(
        clippy::inline_always,
        reason = "has to be compiled inside each instruction-set copy"
    )]
    fn run<A: Arithmetic>(self) -> (f64, f64) {
        const LANES: usize = 8;
        let Self(f, b) = self;
        let (mut cross, mut power) = ([0.0; LANES], [0.0; LANES]);
        let (whole, rest) = f.as_chunks::<LANES>();
        let (other, other_rest) = b.as_chunks::<LANES>();
        for (f, b) in whole.iter().zip(other) {
            for lane in 0..LANES {
                cross[lane] += f[lane] * b[lane];
                power[lane] += f[lane] * f[lane] + b[lane] * b[lane];
            }
        }
        let (mut cross, mut power) = (cross.iter().sum::<f64>(), power.iter().sum::<f64>());
        for (f, b) in rest.iter().zip(other_rest) {
            cross += f * b;
            power += f * f + b * b;
        }
        (cross, power)
    }
}

/// Pulls a reflection coefficient toward zero by its sampling variance (1 - k^2)/count over k, so
/// that 1 - k^2 is on average larger by 2/count.
fn shrink(reflection: f64, count: f64) -> f64 {
    let square = reflection * reflection;
    let variance = (1.0 - square) / count;
    if square <= variance {
        0.0
    } else {
        reflection * (1.0 - variance / square)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_chacha::ChaCha8Rng;

    /// White noise convolved with a kernel, unit variance.
    fn filtered(kernel: &[f64], count: usize, generator: &mut ChaCha8Rng) -> Vec<f64> {
        let norm = kernel.iter().map(|k| k * k).sum::<f64>().sqrt();
        let white: Vec<f64> = (0..count + kernel.len())
            .map(|_| StandardNormal.sample(generator))
            .collect();
        (0..count)
            .map(|i| {
                kernel
                    .iter()
                    .zip(&white[i..])
                    .map(|(k, x)| k * x)
                    .sum::<f64>()
                    / norm
            })
            .collect()
    }

    /// Correlation of filtered noise by definition.
    fn kernel_correlation(kernel: &[f64], lag: usize) -> f64 {
        let at =
            |lag: usize| -> f64 { kernel.iter().zip(&kernel[lag..]).map(|(a, b)| a * b).sum() };
        if lag < kernel.len() {
            at(lag) / at(0)
        } else {
            0.0
        }
    }

    fn kernels() -> Vec<(&'static str, Vec<f64>)> {
        let sinc = |x: f64| {
            if x == 0.0 {
                1.0
            } else {
                (std::f64::consts::PI * x).sin() / (std::f64::consts::PI * x)
            }
        };
        vec![
            ("hanning", vec![0.25, 0.5, 0.25]),
            ("boxcar 2", vec![1.0, 1.0]),
            ("boxcar 3", vec![1.0, 1.0, 1.0]),
            ("first-order", (0..60).map(|k| 0.6_f64.powi(k)).collect()),
            (
                // Twice-oversampled: band limited to half of what the channels could carry.
                "twice oversampled",
                (-12..=12)
                    .map(|k| {
                        let x = f64::from(k) * 0.5;
                        sinc(x) * (0.5 * std::f64::consts::PI * x / 6.5).cos().powi(2)
                    })
                    .collect(),
            ),
        ]
    }

    #[test]
    fn levinson_gives_back_the_autocorrelation() {
        let hanning = [2.0 / 3.0, 1.0 / 6.0, 0.0, 0.0, 0.0, 0.0];
        let process = Autoregression::from_autocorrelation(&hanning).unwrap();
        let back = process.autocorrelation(7);
        for (lag, expected) in hanning.iter().enumerate() {
            assert!((back[lag + 1] - expected).abs() < 1e-12);
        }
        assert!(Autoregression::from_autocorrelation(&[0.9, -0.9]).is_none());
    }

    #[test]
    fn drawn_values_have_the_autocorrelation_from_the_first_on() {
        let process = Autoregression::from_reflections(&[0.6, -0.3, 0.2]);
        let expected = process.autocorrelation(5);
        let mut generator = ChaCha8Rng::seed_from_u64(5);
        let trials = 40_000;
        let mut sums = [0.0; 5];
        for _ in 0..trials {
            let noise = process.unit_noise(&mut generator, 5);
            for (lag, sum) in sums.iter_mut().enumerate() {
                *sum += noise[0] * noise[lag];
            }
        }
        for (lag, sum) in sums.iter().enumerate() {
            let found = sum / f64::from(trials);
            // products of two unit normals scatter by at most sqrt(2): four standard errors
            assert!((found - expected[lag]).abs() < 0.029, "lag {lag}: {found}");
        }
    }

    #[test]
    fn white_noise_stays_exactly_white() {
        let mut generator = ChaCha8Rng::seed_from_u64(11);
        for count in [40, 120, 400] {
            let trials = 1000;
            let false_alarms = (0..trials)
                .filter(|_| {
                    let noise = filtered(&[1.0], count, &mut generator);
                    let (left, right) = noise.split_at(count / 3);
                    !Autoregression::fit(&[left, right], 8, 1.0).is_white()
                })
                .count();
            println!("{count} channels: {false_alarms} of {trials}");
            // 5 % of 1000.
            assert!(false_alarms <= 50, "{count}: {false_alarms} of {trials}");
        }
    }

    #[test]
    fn correlated_noise_is_whitened_and_its_sums_predicted() {
        let mut generator = ChaCha8Rng::seed_from_u64(12);
        for (name, kernel) in kernels() {
            let (trials, count) = (400, 400);
            let line: Vec<f64> = (-20..=20)
                .map(|i| (-0.5 * (f64::from(i) / 3.4).powi(2)).exp())
                .collect();
            let (mut chi_square, mut lag_one, mut box_variance, mut line_variance) =
                (0.0, 0.0, 0.0, 0.0);
            for _ in 0..trials {
                let training = filtered(&kernel, count, &mut generator);
                let fitted = Autoregression::fit(&[&training[..160], &training[160..]], 10, 1.0);
                let mut fresh = filtered(&kernel, 60, &mut generator);
                fitted.whitener().whiten(&[0..25, 25..60], &mut fresh);
                chi_square += fresh.iter().map(|w| w * w).sum::<f64>() / 60.0;
                lag_one += fresh[25..].windows(2).map(|w| w[0] * w[1]).sum::<f64>() / 34.0;
                box_variance += fitted.variance_of_sum(&[1.0; 30]);
                line_variance += fitted.variance_of_sum(&line);
            }
            let n = f64::from(trials);
            chi_square /= n;
            lag_one /= n;
            box_variance /= n * true_variance(&kernel, &[1.0; 30]);
            line_variance /= n * true_variance(&kernel, &line);
            println!(
                "{name}: chi2/dof {chi_square:.3}, lag 1 {lag_one:.3}, variance over the true one: \
                 sum of 30 {box_variance:.3}, line-shaped sum {line_variance:.3}"
            );
            // Twice-oversampled noise has no power in half of the band: no low order makes that half
            // white, where there is nothing to be gained; sums over a line still come out.
            if name != "twice oversampled" {
                assert!((chi_square - 1.0).abs() < 0.03);
                assert!(lag_one.abs() < 0.05);
            }
            assert!((line_variance - 1.0).abs() < 0.05);
            // Wider than the memory of the process: the power at frequency zero, hardest to measure.
            assert!((box_variance - 1.0).abs() < 0.08);
        }
    }

    /// w^T R w by definition, R from the kernel.
    fn true_variance(kernel: &[f64], weights: &[f64]) -> f64 {
        let mut sum = 0.0;
        for (i, v) in weights.iter().enumerate() {
            for (j, w) in weights.iter().enumerate() {
                sum += v * w * kernel_correlation(kernel, i.abs_diff(j));
            }
        }
        sum
    }

    #[test]
    fn chi_square_is_the_quadratic_form_of_the_inverse() {
        // First-order process: x^T R^-1 x = x_1^2 + sum (x_i - a x_(i-1))^2/(1 - a^2).
        let process = Autoregression {
            coefficients: vec![0.6],
        };
        let x = [0.3, -1.0, 0.7, 2.0];
        let mut whitened = x;
        let whole = 0..x.len();
        process
            .whitener()
            .whiten(std::slice::from_ref(&whole), &mut whitened);
        let expected = x[0] * x[0]
            + x.windows(2)
                .map(|w| (w[1] - 0.6 * w[0]).powi(2) / 0.64)
                .sum::<f64>();
        let chi_square: f64 = whitened.iter().map(|w| w * w).sum();
        assert!((chi_square - expected).abs() < 1e-12);
    }

    #[test]
    fn long_segments_are_whitened_as_the_definition_says() {
        let process = Autoregression::from_reflections(&[0.6, -0.2, 0.1]);
        let mut generator = ChaCha8Rng::seed_from_u64(14);
        let noise = filtered(&[1.0, 0.5], 300, &mut generator);
        let mut whitened = noise.clone();
        let segments = [0..2, 2..66, 66..69, 70..300];
        process.whitener().whiten(&segments, &mut whitened);
        assert_eq!(whitened[69], noise[69]);
        // Far enough into a segment, w_i = (x_i - sum_k a_k x_(i-k))/s, s^2 the innovation's variance.
        let innovation = process.innovation_variance().sqrt();
        for segment in segments {
            for i in segment.start + 3..segment.end {
                let predicted: f64 = (1..=3)
                    .map(|k| process.coefficients[k - 1] * noise[i - k])
                    .sum();
                assert!((whitened[i] - (noise[i] - predicted) / innovation).abs() < 1e-12);
            }
        }
    }

    #[test]
    fn an_outlier_does_not_make_correlation() {
        let mut generator = ChaCha8Rng::seed_from_u64(13);
        let mut noise = filtered(&[1.0], 200, &mut generator);
        noise[50] = 60.0;
        noise[51] = 40.0;
        assert!(Autoregression::fit(&[&noise], 8, 1.0).is_white());
    }
}
