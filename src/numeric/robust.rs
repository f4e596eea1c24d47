//! Robust location and scale.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::dispatch::{Arithmetic, Kernel, dispatch};
use std::cmp::Ordering;

/// Standard deviation of a Gaussian over its median absolute deviation, 1/`Phi^-1(3/4)`.
pub const SIGMA_PER_MAD: f64 = 1.482_602_218_505_602;

/// Median of a slice, `NaN` values left out; `NaN` where none is left.
#[must_use]
pub fn median(values: &[f64]) -> f64 {
    let mut kept: Vec<i64> = values
        .iter()
        .filter(|value| !value.is_nan())
        .map(|value| order_key(*value))
        .collect();
    if kept.is_empty() {
        return f64::NAN;
    }
    let middle = kept.len() / 2;
    let odd = kept.len() % 2 == 1;
    let (below, &mut upper, _) = kept.select_nth_unstable(middle);
    if odd {
        return of_order_key(upper);
    }
    let lower = below.iter().copied().max().unwrap_or(upper);
    0.5 * (of_order_key(lower) + of_order_key(upper))
}

/// A whole number that orders as [`f64::total_cmp`] does: compared faster.
fn order_key(value: f64) -> i64 {
    flip_negative(value.to_bits().cast_signed())
}

fn of_order_key(key: i64) -> f64 {
    f64::from_bits(flip_negative(key).cast_unsigned())
}

fn flip_negative(bits: i64) -> i64 {
    if bits < 0 { bits ^ i64::MAX } else { bits }
}

/// A limit that `count` of the numbers, none of which is negative, do not exceed; more of them only
/// where several are equal. 0 for a count of 0.
///
/// By halving: where the numbers are in the way of a limit, it is the number itself.
#[must_use]
pub fn limit_of_smallest(magnitude: &[f64], count: usize) -> f64 {
    dispatch(LimitOfSmallest {
        magnitude,
        count: count as u64,
    })
}

struct LimitOfSmallest<'a> {
    magnitude: &'a [f64],
    count: u64,
}

impl Kernel for LimitOfSmallest<'_> {
    type Output = f64;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> f64 {
        let Self { magnitude, count } = self;
        let (mut low, mut high) = (0.0, largest(magnitude));
        if within(magnitude, low) >= count {
            return low;
        }
        loop {
            let middle = 0.5 * (low + high);
            if middle <= low || middle >= high {
                return high;
            }
            match within(magnitude, middle).cmp(&count) {
                Ordering::Less => low = middle,
                Ordering::Equal => return middle,
                Ordering::Greater => high = middle,
            }
        }
    }
}

/// The largest of numbers that are not negative: as whole numbers they order alike.
#[inline(always)]
fn largest(magnitude: &[f64]) -> f64 {
    f64::from_bits(magnitude.iter().map(|x| x.to_bits()).max().unwrap_or(0))
}

/// How many numbers do not exceed a limit.
#[inline(always)]
fn within(magnitude: &[f64], limit: f64) -> u64 {
    magnitude.iter().map(|&x| u64::from(x <= limit)).sum()
}

/// Standard deviation about zero of the Gaussian core of `values`, where up to 60 % are signal.
///
/// As [`clipped_scale`], but it starts from below, at the 30 % quantile of |x|, and so settles on the
/// noise even where most values are signal. Less reliable than that on few values. `NaN` for an
/// empty slice.
#[must_use]
pub fn core_scale(values: &[f64], clip: f64) -> f64 {
    if values.is_empty() {
        return f64::NAN;
    }
    let magnitude: Vec<f64> = values.iter().map(|value| value.abs()).collect();
    let mut ranked: Vec<u64> = magnitude.iter().map(|value| value.to_bits()).collect();
    let rank = ranked.len() * 3 / 10;
    let start = f64::from_bits(*ranked.select_nth_unstable(rank).1);
    settle(&magnitude, clip, start)
}

/// Standard deviation about zero of `values` with outliers left out.
///
/// Iterates s^2 = <x^2 : |x| < c s>/t(c) to its fixed point from 1.4826 times the median of |x|,
/// with c = `clip` and t(c) = 1 - 2 c phi(c)/(2 Phi(c) - 1), the variance that clipping leaves of a
/// unit Gaussian. Consistent for Gaussian values and nearly as precise as their standard deviation.
/// `NaN` for an empty slice.
#[must_use]
pub fn clipped_scale(values: &[f64], clip: f64) -> f64 {
    let magnitude: Vec<f64> = values.iter().map(|value| value.abs()).collect();
    let start = SIGMA_PER_MAD * median(&magnitude);
    settle(&magnitude, clip, start)
}

fn settle(magnitude: &[f64], clip: f64, start: f64) -> f64 {
    let left = clipped_variance(clip);
    let mut scale = start;
    for _ in 0..100 {
        let limit = clip * scale;
        let (sum, count) = squares_within(magnitude, limit);
        if count == 0.0 {
            return scale;
        }
        let next = (sum / count / left).sqrt();
        if (next - scale).abs() <= 1e-9 * scale {
            return next;
        }
        scale = next;
    }
    scale
}

/// The sum of the squares of all numbers that do not exceed a limit, and their number.
#[must_use]
pub fn squares_within(magnitude: &[f64], limit: f64) -> (f64, f64) {
    dispatch(SquaresWithin { magnitude, limit })
}

struct SquaresWithin<'a> {
    magnitude: &'a [f64],
    limit: f64,
}

/// Independent partial sums: one register of the widest instructions.
const LANES: usize = 8;

impl Kernel for SquaresWithin<'_> {
    type Output = (f64, f64);

    /// No fused multiply-add: every copy gives the same.
    #[inline(always)]
    fn run<A: Arithmetic>(self) -> (f64, f64) {
        let (mut sums, mut counts) = ([0.0; LANES], [0.0; LANES]);
        let (whole, rest) = self.magnitude.as_chunks::<LANES>();
        for values in whole {
            for lane in 0..LANES {
                let value = values[lane];
                let inside = value <= self.limit;
                sums[lane] += if inside { value * value } else { 0.0 };
                counts[lane] += if inside { 1.0 } else { 0.0 };
            }
        }
        let (mut sum, mut count) = (sums.iter().sum::<f64>(), counts.iter().sum::<f64>());
        for value in rest {
            if *value <= self.limit {
                sum += value * value;
                count += 1.0;
            }
        }
        (sum, count)
    }
}

/// Variance of a unit Gaussian of which only |x| < `clip` is kept,
/// 1 - 2 c phi(c)/(2 Phi(c) - 1).
#[must_use]
pub fn clipped_variance(clip: f64) -> f64 {
    let density = (-0.5 * clip * clip).exp() / (2.0 * std::f64::consts::PI).sqrt();
    let inside = statrs::function::erf::erf(clip / std::f64::consts::SQRT_2);
    1.0 - 2.0 * clip * density / inside
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_distr::{Distribution, StandardNormal};

    #[test]
    fn median_of_odd_even_and_blank() {
        assert_eq!(median(&[3.0, 1.0, f64::NAN, 2.0]), 2.0);
        assert_eq!(median(&[4.0, 1.0, 3.0, 2.0]), 2.5);
        assert!(median(&[f64::NAN]).is_nan());
    }

    #[test]
    fn the_limit_of_the_smallest_holds_as_many_as_asked() {
        let values: Vec<f64> = (0..121).map(|i| f64::from(i * 37 % 121) + 0.25).collect();
        for count in 1..=121 {
            let limit = limit_of_smallest(&values, count);
            assert_eq!(values.iter().filter(|&&x| x <= limit).count(), count);
            let (sum, held) = squares_within(&values, limit);
            let smallest = (0..count).map(|i| (i as f64 + 0.25).powi(2));
            assert_eq!((sum, held), (smallest.sum(), count as f64));
        }
        // Equal numbers come together; zeros too.
        assert_eq!(limit_of_smallest(&[3.0, 1.0, 1.0, 1.0, 2.0], 2), 1.0);
        assert_eq!(limit_of_smallest(&[0.0, 5.0, 0.0], 1), 0.0);
        assert_eq!(limit_of_smallest(&[4.0, 4.0], 1), 4.0);
    }

    #[test]
    fn clipping_leaves_the_variance_of_a_truncated_gaussian() {
        // Truncated normal on [-3, 3]: 1 - 6 phi(3)/(2 Phi(3) - 1), phi(3) = 0.004431848412 and
        // Phi(3) = 0.998650101968 (standard tables).
        let expected = 1.0 - 6.0 * 0.004_431_848_412 / 0.997_300_203_937;
        assert!((clipped_variance(3.0) - expected).abs() < 1e-10);
    }

    #[test]
    fn core_scale_finds_the_noise_under_many_outliers() {
        let mut generator = rand_chacha::ChaCha8Rng::seed_from_u64(3);
        let mut values: Vec<f64> = (0..2000)
            .map(|_| StandardNormal.sample(&mut generator))
            .collect();
        assert!((core_scale(&values, 3.0) - 1.0).abs() < 0.04);
        let plain = (values.iter().map(|x| x * x).sum::<f64>() / 2000.0).sqrt();
        assert!((clipped_scale(&values, 3.0) - plain).abs() < 0.01);
        values.extend((0..2500).map(|index| 8.0 + f64::from(index) * 0.01));
        assert!((core_scale(&values, 3.0) - 1.0).abs() < 0.04);
    }
}
