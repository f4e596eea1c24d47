//! Walkers that settle where a density has its mass: peaks measured by them are wider or narrower than
//! those of curvature, as the density is.

use super::mixture::{Freedom, StudentMixture, uniform};
use super::{Density, Matrix, Peak, Point};
use rand::Rng;
use rand_distr::{Distribution, StandardNormal};

/// How long walkers walk.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EnsembleSettings {
    /// Number of walkers: at least three a coordinate.
    pub walkers: usize,
    /// Steps of each; those of the second half count.
    pub steps: usize,
}

/// Peaks lower than the highest by more than this get no walkers.
const DEEPEST: f64 = 12.0;

/// Every how many steps a walker jumps by the whole difference of two others, from peak to peak.
const JUMP: usize = 6;

/// Fewest points that a scatter is measured from, a coordinate.
const FEWEST: usize = 8;

/// Mean and scatter about each peak after walkers that started from its curvature have settled.
///
/// Differential evolution (ter Braak 2006, doi:10.1007/s11222-006-8769-1): a walker tries to move along
/// the difference of two others. `peaks` are distinct, the highest first; those that keep no walkers are
/// dropped. Empty where no peak has a scatter.
pub fn settle(
    density: &mut impl Density,
    peaks: &[Peak],
    settings: &EnsembleSettings,
    generator: &mut impl Rng,
) -> Vec<Peak> {
    let dimensions = density.dimensions();
    let Some(freedom) = Freedom::new() else {
        return Vec::new();
    };
    let highest = peaks
        .iter()
        .map(|peak| peak.ln)
        .fold(f64::NEG_INFINITY, f64::max);
    let about: Vec<(Peak, StudentMixture)> = peaks
        .iter()
        .filter(|peak| highest - peak.ln < DEEPEST)
        .map(|peak| {
            let scatter = peak.scatter.map(|row| row.map(|value| 0.25 * value));
            (
                *peak,
                StudentMixture::new(dimensions, [(peak.point, scatter)]),
            )
        })
        .filter(|(_, mixture)| !mixture.is_empty())
        .collect();
    if about.is_empty() {
        return Vec::new();
    }
    let mut walkers: Vec<(Point, f64, usize)> = Vec::new();
    for index in 0..settings.walkers {
        let of = index % about.len();
        let (peak, mixture) = &about[of];
        let point = mixture.draw(generator, &freedom);
        let ln = density.ln(&point);
        walkers.push(if ln.is_finite() {
            (point, ln, of)
        } else {
            (peak.point, peak.ln, of)
        });
    }
    let usual = 2.38 / (2.0 * dimensions as f64).sqrt();
    let mut visited: Vec<(Point, f64, usize)> = Vec::new();
    for step in 0..settings.steps {
        let jumps = step % JUMP == JUMP - 1;
        for index in 0..walkers.len() {
            let [first, second] = [0, 1].map(|_| {
                let chosen = uniform(generator) * walkers.len() as f64;
                #[expect(
                    clippy::cast_possible_truncation,
                    clippy::cast_sign_loss,
                    reason = "below the number of walkers"
                )]
                let chosen = chosen as usize;
                chosen.min(walkers.len() - 1)
            });
            let factor = if jumps {
                1.0
            } else {
                usual * (0.5 + uniform(generator))
            };
            let (point, ln, of) = walkers[index];
            let mut trial = point;
            for i in 0..dimensions {
                let along = walkers[first].0[i] - walkers[second].0[i];
                let noise: f64 = StandardNormal.sample(generator);
                let width = about[of].0.scatter[i][i].sqrt();
                trial[i] += factor * along + 1e-3 * width * noise;
            }
            let found = density.ln(&trial);
            if found - ln > uniform(generator).max(f64::MIN_POSITIVE).ln() {
                let belongs = if jumps {
                    nearest(dimensions, &about, &trial)
                } else {
                    of
                };
                walkers[index] = (trial, found, belongs);
            }
            if 2 * step >= settings.steps {
                visited.push(walkers[index]);
            }
        }
    }
    (0..about.len())
        .filter_map(|of| {
            let points: Vec<&(Point, f64, usize)> =
                visited.iter().filter(|point| point.2 == of).collect();
            (points.len() >= FEWEST * dimensions).then(|| measured(dimensions, &points))
        })
        .collect()
}

/// The peak whose centre is nearest in units of its own widths.
fn nearest(dimensions: usize, about: &[(Peak, StudentMixture)], point: &Point) -> usize {
    let distance = |peak: &Peak| -> f64 {
        (0..dimensions)
            .map(|i| (point[i] - peak.point[i]).powi(2) / peak.scatter[i][i])
            .sum()
    };
    let mut best = 0;
    for index in 1..about.len() {
        if distance(&about[index].0) < distance(&about[best].0) {
            best = index;
        }
    }
    best
}

fn measured(dimensions: usize, points: &[&(Point, f64, usize)]) -> Peak {
    let count = points.len() as f64;
    let mut peak = Peak {
        point: [0.0; super::MOST_DIMENSIONS],
        ln: points
            .iter()
            .map(|point| point.1)
            .fold(f64::NEG_INFINITY, f64::max),
        scatter: Matrix::default(),
    };
    for i in 0..dimensions {
        peak.point[i] = points.iter().map(|point| point.0[i]).sum::<f64>() / count;
    }
    for i in 0..dimensions {
        for j in 0..=i {
            let sum: f64 = points
                .iter()
                .map(|point| (point.0[i] - peak.point[i]) * (point.0[j] - peak.point[j]))
                .sum();
            peak.scatter[i][j] = sum / count;
            peak.scatter[j][i] = sum / count;
        }
    }
    peak
}
