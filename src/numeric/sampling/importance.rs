//! Rounds of draws from a proposal that is refitted to them.

use super::mixture::{Freedom, StudentMixture, uniform};
use super::pareto::tail_shape;
use super::peak::Peak;
use super::{Density, Matrix, Point};
use crate::numeric::exponential::exp_in_place;
use rand::Rng;

/// How much is drawn.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ImportanceSettings {
    /// Draws of a round.
    pub round: usize,
    /// Fewest rounds.
    pub fewest_rounds: usize,
    /// Most rounds.
    pub most_rounds: usize,
    /// Components of the first proposal about each peak, beside a narrow and a wide one.
    pub spread: usize,
    /// How much wider than its peak the wide component is.
    pub wider: f64,
    /// Effective sample size at which drawing ends.
    pub effective: f64,
    /// Effective sample size in either tail (5 %) of every coordinate at which drawing ends.
    pub tails: f64,
    /// Logarithm of an integral that does not matter: drawing ends after the second round where the
    /// integral is lower, after the first where it is lower by 10 more.
    pub negligible: f64,
}

impl Default for ImportanceSettings {
    fn default() -> Self {
        Self {
            round: 300,
            fewest_rounds: 3,
            most_rounds: 16,
            spread: 2,
            wider: 2.5,
            effective: 600.0,
            tails: 20.0,
            negligible: f64::NEG_INFINITY,
        }
    }
}

/// Whether draws describe their density.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Quality {
    /// (sum of weights)^2 over the sum of their squares.
    pub effective: f64,
    /// Shape of the largest weights' distribution; `None` where they are all alike.
    pub tail_shape: Option<f64>,
    /// The same of the draws in the tails (lowest and highest 5 %) of the coordinate where it is least.
    pub tails: f64,
    /// Largest difference of a coordinate's mean between the two halves of the draws (every other
    /// one), in units of the standard deviation.
    pub halves: f64,
}

impl Quality {
    /// Fewest effective draws, largest tail shape and largest difference between halves of draws
    /// that can be trusted. The shape's limit is that of Vehtari et al. (2024, JMLR 25, 72). Halves
    /// of 100 effective draws differ by more than 0.5 with a probability of 1 %.
    pub const LIMITS: (f64, f64, f64) = (100.0, 0.7, 0.5);

    /// Whether the draws can be trusted.
    #[must_use]
    pub fn holds(&self) -> bool {
        self.doubts().is_empty()
    }

    /// Why they cannot.
    #[must_use]
    pub fn doubts(&self) -> Vec<Doubt> {
        let (effective, shape, halves) = Self::LIMITS;
        let mut doubts = Vec::new();
        if self.effective.is_nan() || self.effective < effective {
            doubts.push(Doubt::FewEffective {
                found: self.effective,
                least: effective,
            });
        }
        if let Some(found) = self.tail_shape
            && found > shape
        {
            doubts.push(Doubt::HeavyTail { found, most: shape });
        }
        if self.halves.is_nan() || self.halves > halves {
            doubts.push(Doubt::HalvesDiffer {
                found: self.split_r_hat(),
                most: r_hat(halves),
            });
        }
        doubts
    }

    /// Split R-hat of the worst coordinate: the square root of the variance over that within halves
    /// (Gelman & Rubin 1992, doi:10.1214/ss/1177011136), 1 where the halves of the draws agree.
    #[must_use]
    pub fn split_r_hat(&self) -> f64 {
        r_hat(self.halves)
    }
}

/// R-hat of two long sequences whose means differ by some deviations.
fn r_hat(deviations: f64) -> f64 {
    (1.0 + 0.5 * deviations * deviations).sqrt()
}

/// Why draws cannot be trusted.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Doubt {
    /// The weights are so uneven that few draws count.
    FewEffective {
        /// Effective sample size.
        found: f64,
        /// Fewest that can be trusted.
        least: f64,
    },
    /// The largest weights fall off so slowly that averages over the draws need not converge.
    HeavyTail {
        /// Shape of the largest weights' distribution.
        found: f64,
        /// Largest that can be trusted.
        most: f64,
    },
    /// Both halves of the draws have other means.
    HalvesDiffer {
        /// Split R-hat.
        found: f64,
        /// Largest that can be trusted.
        most: f64,
    },
}

impl Doubt {
    /// What was found and what is expected, without commas.
    #[must_use]
    pub fn text(&self) -> String {
        match self {
            Self::FewEffective { found, least } => {
                format!("{found:.0} effective draws where {least:.0} are needed")
            }
            Self::HeavyTail { found, most } => {
                format!("weights of tail shape {found:.2} where {most} is the most")
            }
            Self::HalvesDiffer { found, most } => {
                format!(
                    "halves of the draws apart at a split R-hat of {found:.2} where {most:.2} is the most"
                )
            }
        }
    }
}

/// Weighted draws of a density.
#[derive(Clone, Debug, PartialEq)]
pub struct Draws {
    /// Points.
    pub points: Vec<Point>,
    /// Their weights, of sum 1.
    pub weights: Vec<f64>,
    /// Logarithm of the density's integral.
    pub ln_integral: f64,
    /// Standard error of it.
    pub ln_integral_err: f64,
    /// Whether they can be trusted.
    pub quality: Quality,
    /// Evaluations of the density while drawing.
    pub evaluations: usize,
}

/// Part of the first proposal that is wide.
const FIRST_SHARE: f64 = 0.4;

/// Part of every later proposal that stays so: what adapting loses stays reachable.
const KEPT_SHARE: f64 = 0.2;

/// Powers of the weights that the proposals of the rounds are fitted to, the last one for all that
/// follow: wider than the density, in the first rounds much so.
const POWERS: [f64; 4] = [0.3, 0.5, 0.7, 0.8];

/// Share of the broad components in the first, wide proposal.
const BROAD_SHARE: f64 = 0.5;

/// Tails of a coordinate hold this share of the probability each.
const TAIL: f64 = 0.05;

/// Weighted draws of a density about its peaks; `broad` are centres and scatters of what may hold more
/// than the peaks. `None` where no peak has a scatter or every draw has the density zero.
pub fn sample(
    density: &mut impl Density,
    peaks: &[Peak],
    broad: &[(Point, Matrix)],
    settings: &ImportanceSettings,
    generator: &mut impl Rng,
) -> Option<Draws> {
    let dimensions = density.dimensions();
    let chi_squared = Freedom::new()?;
    let wider = settings.wider;
    let wide = |scatter: &Matrix| scatter.map(|row| row.map(|value| wider * wider * value));
    let about = |scatter: &dyn Fn(&Matrix) -> Matrix| {
        let each = peaks
            .iter()
            .map(|peak| (peak.point, scatter(&peak.scatter)));
        StudentMixture::new(dimensions, each)
    };
    let narrow = about(&|scatter| *scatter);
    let first = about(&wide);
    let spread = StudentMixture::new(
        dimensions,
        (0..settings.spread * peaks.len()).map(|index| {
            let peak = &peaks[index % peaks.len()];
            let single = StudentMixture::new(dimensions, [(peak.point, peak.scatter)]);
            (single.draw(generator, &chi_squared), wide(&peak.scatter))
        }),
    );
    if first.is_empty() {
        return None;
    }
    let broad = StudentMixture::new(dimensions, broad.iter().copied());
    let first = if broad.is_empty() {
        first
    } else {
        first.with(&broad, BROAD_SHARE)
    };
    let mut adapted = spread.with(&narrow, 0.5);
    let mut proposal = adapted.with(&first, FIRST_SHARE);
    let mut proposals: Vec<StudentMixture> = Vec::new();
    let mut points: Vec<Point> = Vec::new();
    let mut ln_density: Vec<f64> = Vec::new();
    // sum over rounds of the proposals' densities
    let mut proposed: Vec<f64> = Vec::new();
    let mut weights: Vec<f64> = Vec::new();
    let mut ln_integral = f64::NEG_INFINITY;
    for round in 1..=settings.most_rounds {
        let before = points.len();
        for _ in 0..settings.round {
            let point = proposal.draw(generator, &chi_squared);
            ln_density.push(density.ln(&point));
            points.push(point);
        }
        proposed.resize(points.len(), 0.0);
        for earlier in &proposals {
            earlier.add_densities(&points[before..], &mut proposed[before..]);
        }
        proposal.add_densities(&points, &mut proposed);
        proposals.push(proposal.clone());
        let (ln_weights, found, ln_sum) = weights_of(&ln_density, &proposed)?;
        weights = found;
        // the mean over draws of density over mean proposal
        ln_integral = ln_sum + (round as f64 / points.len() as f64).ln();
        let enough = round >= settings.fewest_rounds
            && effective(&weights) >= settings.effective
            && (settings.tails <= 0.0 || tails(dimensions, &points, &weights) >= settings.tails);
        let negligible = NEGLIGIBLE_BY
            .iter()
            .any(|(rounds, margin)| round >= *rounds && ln_integral < settings.negligible - margin);
        if enough || negligible || round == settings.most_rounds {
            break;
        }
        let power = POWERS[(round - 1).min(POWERS.len() - 1)];
        let tempered = tempered(&ln_weights, power, (4 * dimensions * dimensions) as f64);
        let (kept, kept_weights) = worth_fitting(&points, &tempered);
        adapted = adapted.refitted(&kept, &kept_weights);
        proposal = adapted.with(&first, KEPT_SHARE);
    }
    Some(finish(dimensions, points, ln_integral, weights))
}

/// Rounds after which an integral is called negligible that is lower than the limit by a margin of its
/// logarithm: the first round's is rough.
const NEGLIGIBLE_BY: [(usize, f64); 2] = [(1, 10.0), (2, 0.0)];

/// Logarithms of weights, the largest 0, weights of sum 1, and the logarithm of the sum before; `None`
/// where all densities are zero.
fn weights_of(ln_density: &[f64], proposed: &[f64]) -> Option<(Vec<f64>, Vec<f64>, f64)> {
    let mut ln_weights: Vec<f64> = ln_density
        .iter()
        .zip(proposed)
        .map(|(ln, proposed)| ln - proposed.ln())
        .collect();
    let highest = ln_weights.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if !highest.is_finite() {
        return None;
    }
    for ln in &mut ln_weights {
        *ln -= highest;
    }
    let mut weights = ln_weights.clone();
    exp_in_place(&mut weights);
    let total: f64 = weights.iter().sum();
    for weight in &mut weights {
        *weight /= total;
    }
    Some((ln_weights, weights, highest + total.ln()))
}

fn normalise(weights: &mut [f64]) {
    let total: f64 = weights.iter().sum();
    for weight in weights {
        *weight /= total;
    }
}

/// Effective number of weights of sum 1.
fn effective(weights: &[f64]) -> f64 {
    1.0 / weights.iter().map(|weight| weight * weight).sum::<f64>()
}

/// The weights raised to the largest power, at most the given one, that leaves the wanted effective
/// number: a proposal is not fitted to a handful of draws. Logarithms of weights go in.
fn tempered(ln_weights: &[f64], power: f64, wanted: f64) -> Vec<f64> {
    let raised = |power: f64| {
        let mut raised: Vec<f64> = ln_weights.iter().map(|ln| power * ln).collect();
        exp_in_place(&mut raised);
        normalise(&mut raised);
        raised
    };
    let mut power = power;
    let mut found = raised(power);
    while effective(&found) < wanted && power > 0.01 {
        power *= 0.7;
        found = raised(power);
    }
    found
}

/// The points that carry weight.
fn worth_fitting(points: &[Point], weights: &[f64]) -> (Vec<Point>, Vec<f64>) {
    let least = 1e-3 / weights.len() as f64;
    points
        .iter()
        .zip(weights)
        .filter(|(_, weight)| **weight > least)
        .map(|(point, weight)| (*point, *weight))
        .unzip()
}

fn finish(dimensions: usize, points: Vec<Point>, ln_integral: f64, mut weights: Vec<f64>) -> Draws {
    let count = points.len() as f64;
    let relative = (1.0 / effective(&weights) - 1.0 / count).max(0.0).sqrt();
    let shape = tail_shape(&mut weights);
    normalise(&mut weights);
    let quality = Quality {
        effective: effective(&weights),
        tail_shape: shape,
        tails: tails(dimensions, &points, &weights),
        halves: halves(dimensions, &points, &weights),
    };
    Draws {
        ln_integral,
        ln_integral_err: relative,
        quality,
        evaluations: points.len(),
        points,
        weights,
    }
}

/// Weights below this part of the mean weight are nothing in a tail: they need no place in its order.
const LEAST_OF_MEAN: f64 = 1e-6;

/// Smallest effective number of draws in a tail of a coordinate.
fn tails(dimensions: usize, points: &[Point], weights: &[f64]) -> f64 {
    let least = LEAST_OF_MEAN / weights.len() as f64;
    let mut order: Vec<usize> = (0..points.len())
        .filter(|index| weights[*index] > least)
        .collect();
    let mut least = f64::INFINITY;
    for coordinate in 0..dimensions {
        let value = |index: &usize| points[*index][coordinate];
        order.sort_unstable_by(|a, b| value(a).total_cmp(&value(b)).then(a.cmp(b)));
        let lowest = tail(&mut order.iter(), weights);
        let highest = tail(&mut order.iter().rev(), weights);
        least = least.min(lowest).min(highest);
    }
    least
}

/// Effective number of the first draws, up to the share of a tail.
fn tail<'a>(order: &mut impl Iterator<Item = &'a usize>, weights: &[f64]) -> f64 {
    let (mut sum, mut squares) = (0.0, 0.0);
    for index in order {
        let weight = weights[*index];
        sum += weight;
        squares += weight * weight;
        if sum >= TAIL {
            break;
        }
    }
    sum * sum / squares
}

/// Largest difference of means between halves, in standard deviations.
fn halves(dimensions: usize, points: &[Point], weights: &[f64]) -> f64 {
    (0..dimensions)
        .map(|coordinate| {
            let mut sums = [[0.0; 3]; 2];
            for (index, (point, weight)) in points.iter().zip(weights).enumerate() {
                let value = point[coordinate] - points[0][coordinate];
                let half = &mut sums[index % 2];
                half[0] += weight;
                half[1] += weight * value;
                half[2] += weight * value * value;
            }
            let [a, b] = sums.map(|half| half[1] / half[0]);
            let total = sums[0][0] + sums[1][0];
            let mean = (sums[0][1] + sums[1][1]) / total;
            let variance = (sums[0][2] + sums[1][2]) / total - mean * mean;
            (a - b).abs() / variance.max(f64::MIN_POSITIVE).sqrt()
        })
        .fold(0.0, f64::max)
}

impl Draws {
    /// Indices of `count` draws of equal weight (systematic resampling), ascending.
    pub fn equal(&self, count: usize, generator: &mut impl Rng) -> Vec<usize> {
        let offset = uniform(generator);
        let mut chosen = Vec::with_capacity(count);
        let mut cumulated = 0.0;
        for (index, weight) in self.weights.iter().enumerate() {
            cumulated += weight * count as f64;
            while chosen.len() < count && (chosen.len() as f64 + offset) < cumulated {
                chosen.push(index);
            }
        }
        let last = chosen.last().copied().unwrap_or(0);
        chosen.resize(count, last);
        chosen
    }

    /// Weighted mean and standard deviation of a function of the points.
    pub fn moments(&self, value: impl Fn(&Point) -> f64) -> (f64, f64) {
        let values: Vec<f64> = self.points.iter().map(value).collect();
        let weighted = |f: &dyn Fn(f64) -> f64| -> f64 {
            values
                .iter()
                .zip(&self.weights)
                .map(|(value, weight)| weight * f(*value))
                .sum()
        };
        let mean = weighted(&|value| value);
        let variance = weighted(&|value| (value - mean) * (value - mean));
        (mean, variance.sqrt())
    }
}
