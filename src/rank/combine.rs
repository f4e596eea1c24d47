//! Several line pairs of one source into one finding.

use super::source::{Drawn, Finding};

/// What several line pairs of one source say together.
///
/// **Probabilities** are multiplied, hypothesis by hypothesis, and made to sum to 1: with equal prior odds and
/// independent data that is what Bayes' theorem says. **Speeds** are averaged, v = sum w_i v_i/sum w_i with
/// w_i = 1/s_i^2 from the draws' standard deviations, and so is draw by draw. Where the speeds scatter more than their errors say,
/// chi2 > k - 1 for k pairs, the averaged draws are spread about their mean by sqrt(chi2/(k - 1))
/// (Birge 1932, doi:10.1103/PhysRev.40.207; from memory). **Rates** follow: a rate is proportional to the speed of its draw.
///
/// Line pairs without a detection are left out where another has one; the rest (mass, free-fall speed,
/// dispersion) is that of the pair with the smallest error. `None` without any finding.
#[must_use]
pub fn combine(findings: &[&Finding]) -> Option<Finding> {
    let any = findings.iter().any(|one| one.detected);
    let counts = |one: &&&Finding| one.detected || !any;
    let used: Vec<&Finding> = findings.iter().filter(counts).copied().collect();
    let weights: Vec<f64> = used.iter().map(|one| weight(one)).collect();
    let best = leading(&used)?;
    let mut combined = used[best].clone();
    combined.line_pairs = findings.len();
    if used.len() < 2 {
        return Some(combined);
    }
    combined.probabilities = product(&used);
    combined.trusted = used.iter().all(|one| one.trusted);
    let Some(speed) = averaged(&used, &weights) else {
        return Some(combined);
    };
    combined.disagreement = Some(speed.disagreement);
    if let (Some(own), Some(rate)) = (&used[best].v_in_km_s, &used[best].rate_msun_yr) {
        combined.rate_msun_yr = Some(scaled(rate, own, &speed.drawn));
    }
    combined.v_in_km_s = Some(speed.drawn);
    Some(combined)
}

/// The finding whose speed has the smallest error, of those with a detection; the first of equal ones.
#[must_use]
pub fn leading(findings: &[&Finding]) -> Option<usize> {
    let key = |index: &usize| (findings[*index].detected, weight(findings[*index]));
    (0..findings.len()).max_by(|a, b| {
        let ((seen_a, weight_a), (seen_b, weight_b)) = (key(a), key(b));
        (seen_a.cmp(&seen_b))
            .then(weight_a.total_cmp(&weight_b))
            .then(b.cmp(a))
    })
}

/// One over the speed's variance; 0 without a speed.
fn weight(finding: &Finding) -> f64 {
    let moments = finding.v_in_km_s.as_ref().and_then(Drawn::moments);
    moments.map_or(0.0, |(_, deviation)| {
        let weight = deviation.powi(-2);
        if weight.is_finite() { weight } else { 0.0 }
    })
}

fn product(findings: &[&Finding]) -> Option<[f64; 4]> {
    let mut ln = [0.0; 4];
    for finding in findings {
        for (sum, probability) in ln.iter_mut().zip(finding.probabilities?) {
            *sum += probability.max(f64::MIN_POSITIVE).ln();
        }
    }
    let highest = ln.into_iter().fold(f64::NEG_INFINITY, f64::max);
    let relative = ln.map(|ln| (ln - highest).exp());
    let total: f64 = relative.iter().sum();
    Some(relative.map(|one| one / total))
}

struct Averaged {
    drawn: Drawn,
    disagreement: f64,
}

fn averaged(findings: &[&Finding], weights: &[f64]) -> Option<Averaged> {
    let speeds: Vec<(&Drawn, f64)> = findings
        .iter()
        .zip(weights)
        .filter(|(_, weight)| **weight > 0.0)
        .filter_map(|(finding, weight)| Some((finding.v_in_km_s.as_ref()?, *weight)))
        .collect();
    if speeds.len() < 2 {
        return None;
    }
    let total: f64 = speeds.iter().map(|(_, weight)| weight).sum();
    let mean = |of: &dyn Fn(&Drawn) -> f64| {
        let sum: f64 = speeds
            .iter()
            .map(|(speed, weight)| weight * of(speed))
            .sum();
        sum / total
    };
    let value = mean(&|speed| speed.value);
    let chi2: f64 = (speeds.iter())
        .map(|(speed, weight)| weight * (speed.value - value).powi(2))
        .sum();
    let disagreement = (chi2 / (speeds.len() - 1) as f64).sqrt();
    let rows = speeds.iter().map(|(speed, _)| speed.draws.len()).min()?;
    let spread = disagreement.max(1.0);
    let drawn: Vec<f64> = (0..rows)
        .map(|row| mean(&|speed| f64::from(speed.draws[row])))
        .collect();
    let centre = drawn.iter().sum::<f64>() / rows as f64;
    Some(Averaged {
        drawn: Drawn {
            value,
            #[allow(clippy::cast_possible_truncation, reason = "as all draws")]
            draws: (drawn.iter())
                .map(|draw| (centre + spread * (draw - centre)) as f32)
                .collect(),
        },
        disagreement,
    })
}

/// What is proportional to a speed, for another speed.
fn scaled(rate: &Drawn, own: &Drawn, other: &Drawn) -> Drawn {
    // the factor does not depend on the speed; it is taken where the speed is not 0
    let factor = |rate: f64, speed: f64| (speed != 0.0).then(|| rate / speed);
    let usual = factor(rate.value, own.value).unwrap_or(0.0);
    let draws = rate.draws.iter().zip(&own.draws).zip(&other.draws);
    Drawn {
        value: usual * other.value,
        #[allow(clippy::cast_possible_truncation, reason = "as all draws")]
        draws: draws
            .map(|((rate, own), other)| {
                let factor = factor(f64::from(*rate), f64::from(*own)).unwrap_or(usual);
                (factor * f64::from(*other)) as f32
            })
            .collect(),
    }
}

#[cfg(test)]
#[allow(clippy::cast_possible_truncation, clippy::unwrap_used)]
mod tests {
    use super::*;

    /// Draws at even shares of a triangle about a value, and rates of 1e-4 a km/s.
    fn finding(value: f64, width: f64, probabilities: [f64; 4]) -> Finding {
        let draws: Vec<f32> = (0..201)
            .map(|draw| (value + width * (f64::from(draw) / 100.0 - 1.0)) as f32)
            .collect();
        Finding {
            probabilities: Some(probabilities),
            trusted: true,
            detected: true,
            rate_msun_yr: Some(Drawn {
                value: 1e-4 * value,
                draws: draws.iter().map(|draw| 1e-4 * draw).collect(),
            }),
            v_in_km_s: Some(Drawn { value, draws }),
            v_ff_km_s: None,
            mass_msun: None,
            sigma_km_s: None,
            line_pairs: 1,
            disagreement: None,
        }
    }

    #[test]
    fn one_pair_stays_as_it_is() {
        let one = finding(0.3, 0.1, [0.9, 0.0, 0.1, 0.0]);
        assert_eq!(combine(&[&one]), Some(one.clone()));
        assert_eq!(combine(&[]), None);
    }

    #[test]
    fn two_pairs_that_agree_sharpen_speed_rate_and_probability() {
        let pairs = [
            finding(0.30, 0.1, [0.9, 0.0, 0.1, 0.0]),
            finding(0.34, 0.2, [0.6, 0.1, 0.2, 0.1]),
        ];
        let both = combine(&[&pairs[0], &pairs[1]]).unwrap();
        assert_eq!(leading(&[&pairs[1], &pairs[0]]), Some(1));
        // 4 to 1 in weight
        let speed = both.v_in_km_s.unwrap();
        assert!((speed.value - 0.308).abs() < 1e-9, "{}", speed.value);
        let p = both.probabilities.unwrap();
        assert!((p[0] - 0.54 / 0.56).abs() < 1e-12, "{p:?}");
        assert!(both.disagreement.unwrap() < 1.0);
        let rate = both.rate_msun_yr.unwrap();
        assert!((rate.value / 1e-4 / speed.value - 1.0).abs() < 1e-12);
        let widths = (rate.moments().unwrap().1, speed.moments().unwrap().1);
        assert!((widths.0 / 1e-4 / widths.1 - 1.0).abs() < 1e-4);
        assert_eq!(both.line_pairs, 2);
    }

    #[test]
    fn pairs_that_disagree_widen_the_speed() {
        let p = [0.9, 0.0, 0.1, 0.0];
        let apart = combine(&[&finding(0.3, 0.1, p), &finding(0.9, 0.1, p)]).unwrap();
        let deviation = 0.1 / 3f64.sqrt();
        // chi2 = 2 (0.3/s)^2 with one degree of freedom
        let expected = 2f64.sqrt() * 0.3 / deviation;
        let found = apart.disagreement.unwrap();
        assert!((found / expected - 1.0).abs() < 0.02, "{found} {expected}");
        let (_, wide) = apart.v_in_km_s.unwrap().moments().unwrap();
        // rows of both pairs ascend together here, so their mean is as wide as each
        assert!((wide / (deviation * expected) - 1.0).abs() < 0.03, "{wide}");
    }

    #[test]
    fn an_undetected_pair_does_not_count_beside_a_detected_one() {
        let mut dark = finding(0.0, 2.0, [0.25; 4]);
        dark.detected = false;
        let seen = finding(0.3, 0.1, [0.9, 0.0, 0.1, 0.0]);
        let both = combine(&[&dark, &seen]).unwrap();
        assert_eq!(both.v_in_km_s, seen.v_in_km_s);
        assert_eq!((both.line_pairs, both.disagreement), (2, None));
    }
}
