//! Robust location and scale.

/// Standard deviation of a Gaussian over its median absolute deviation, 1/`Phi^-1(3/4)`.
pub const SIGMA_PER_MAD: f64 = 1.482_602_218_505_602;

/// Median of a slice, `NaN` values left out; `NaN` where none is left.
#[must_use]
pub fn median(values: &[f64]) -> f64 {
    let mut kept: Vec<f64> = values
        .iter()
        .copied()
        .filter(|value| !value.is_nan())
        .collect();
    if kept.is_empty() {
        return f64::NAN;
    }
    let middle = kept.len() / 2;
    let (below, upper, _) = kept.select_nth_unstable_by(middle, f64::total_cmp);
    let upper = *upper;
    if below.len() == middle && kept.len() % 2 == 1 {
        return upper;
    }
    let lower = kept[..middle]
        .iter()
        .copied()
        .fold(f64::NEG_INFINITY, f64::max);
    0.5 * (lower + upper)
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
    let mut magnitude: Vec<f64> = values.iter().map(|value| value.abs()).collect();
    let rank = magnitude.len() * 3 / 10;
    let (_, start, _) = magnitude.select_nth_unstable_by(rank, f64::total_cmp);
    let start = *start;
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
        let (mut sum, mut count) = (0.0, 0.0);
        for value in magnitude {
            if *value <= limit {
                sum += value * value;
                count += 1.0;
            }
        }
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
