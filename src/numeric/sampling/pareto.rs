//! The tail of importance weights: its shape tells whether averages over the draws can be trusted.

/// Fewest tail values for a shape.
const FEWEST: usize = 8;

/// Shape k of the generalised Pareto distribution that fits the largest weights, and those weights
/// replaced by the fitted distribution's order statistics (never above the largest).
///
/// The tail holds the largest min(0.2 n, 3 sqrt(n)) weights. Averages converge well below k = 0.7 and
/// hardly above 1 (Vehtari et al. 2024, JMLR 25, 72: Pareto smoothed importance sampling). The shape
/// is estimated after Zhang & Stephens (2009, doi:10.1198/tech.2009.08017), with a weak prior toward
/// 0.5. `None` where there are too few weights, or they are all alike.
#[must_use]
pub fn tail_shape(weights: &mut [f64]) -> Option<f64> {
    let count = weights.len() as f64;
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "between 0 and the number of weights"
    )]
    let tail = (0.2 * count).min(3.0 * count.sqrt()).ceil() as usize;
    if tail < FEWEST || tail >= weights.len() {
        return None;
    }
    let mut order: Vec<usize> = (0..weights.len()).collect();
    order.sort_unstable_by(|a, b| weights[*a].total_cmp(&weights[*b]));
    let threshold = weights[order[weights.len() - tail - 1]];
    let highest = &order[weights.len() - tail..];
    let largest = weights[highest[tail - 1]];
    let excess: Vec<f64> = highest
        .iter()
        .map(|index| weights[*index] - threshold)
        .collect();
    let (shape, scale) = generalised_pareto(&excess)?;
    for (rank, index) in highest.iter().enumerate() {
        let part = (rank as f64 + 0.5) / tail as f64;
        let quantile = if shape.abs() < 1e-8 {
            -scale * (-part).ln_1p()
        } else {
            scale * (-shape * (-part).ln_1p()).exp_m1() / shape
        };
        weights[*index] = (threshold + quantile).min(largest);
    }
    Some(shape)
}

/// Shape and scale of excesses in ascending order.
fn generalised_pareto(excess: &[f64]) -> Option<(f64, f64)> {
    const PRIOR_COUNT: f64 = 10.0;
    const PRIOR_SHAPE: f64 = 0.5;
    let count = excess.len();
    let n = count as f64;
    let largest = excess[count - 1];
    let quartile = excess[((count + 2) / 4).clamp(1, count) - 1];
    if largest <= 0.0 || quartile <= 0.0 {
        return None;
    }
    let grid = 20 + count.isqrt();
    let shape_of = |b: f64| -> f64 { excess.iter().map(|x| (-b * x).ln_1p()).sum::<f64>() / n };
    let candidates: Vec<(f64, f64)> = (1..=grid)
        .map(|j| {
            let b =
                1.0 / largest + (1.0 - (grid as f64 / (j as f64 - 0.5)).sqrt()) / (3.0 * quartile);
            let k = shape_of(b);
            // profile of the logarithm of the likelihood
            (b, n * ((-b / k).ln() - k - 1.0))
        })
        .filter(|(_, ln)| ln.is_finite())
        .collect();
    let best = candidates
        .iter()
        .map(|(_, ln)| *ln)
        .fold(f64::NEG_INFINITY, f64::max);
    let total: f64 = candidates.iter().map(|(_, ln)| (ln - best).exp()).sum();
    let b: f64 = candidates
        .iter()
        .map(|(b, ln)| b * (ln - best).exp() / total)
        .sum();
    let k = shape_of(b);
    let scale = -k / b;
    let shape = (n * k + PRIOR_COUNT * PRIOR_SHAPE) / (n + PRIOR_COUNT);
    (shape.is_finite() && scale > 0.0).then_some((shape, scale))
}

#[cfg(test)]
mod tests {
    use super::super::mixture::uniform;
    use super::*;
    use rand_chacha::ChaCha8Rng;
    use rand_chacha::rand_core::SeedableRng;

    /// Weights u^-k have a Pareto tail of shape k by definition; the weak prior pulls by a few
    /// hundredths.
    #[test]
    fn shapes_of_pareto_weights_are_found() {
        for shape in [0.2, 0.5, 0.9] {
            let mut generator = ChaCha8Rng::seed_from_u64(5);
            let mut weights: Vec<f64> = (0..4000)
                .map(|_| (1.0 - uniform(&mut generator)).powf(-shape))
                .collect();
            let found = tail_shape(&mut weights).unwrap();
            assert!((found - shape).abs() < 0.15, "{found}, expected {shape}");
        }
    }

    #[test]
    fn equal_weights_have_no_tail() {
        assert_eq!(tail_shape(&mut [1.0; 100]), None);
    }
}
