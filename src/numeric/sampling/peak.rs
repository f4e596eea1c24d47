//! A peak of a density and the scatter about it, without derivatives being given.

use super::Density;
use super::matrix::{MOST_DIMENSIONS, Matrix, Point, cholesky, inverse};

/// A peak.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Peak {
    /// Where it is.
    pub point: Point,
    /// Logarithm of the density there.
    pub ln: f64,
    /// Inverse of the curvature of -ln(density), measured where it has dropped by about a half.
    pub scatter: Matrix,
}

/// Difference step for slopes, in units of the scales.
const STEP: f64 = 1e-3;

/// Longest step of the ascent, in units of the scales.
const LONGEST: f64 = 1.0;

/// Rise of ln(density) below which an ascent ends.
const RISE: f64 = 0.05;

/// Follows a density upward from a point and measures the scatter about the peak: [`climb`], then
/// [`Peak::measured`]. `None` where the density is zero at the start.
pub fn ascend(
    density: &mut impl Density,
    start: &Point,
    scales: &Point,
    iterations: usize,
) -> Option<Peak> {
    let (point, ln) = climb(density, start, scales, iterations, |_, _, _| false)?;
    Some(Peak::measured(density, point, ln, scales))
}

impl Peak {
    /// A peak at a point with the logarithm of the density there: its scatter is measured.
    pub fn measured(density: &mut impl Density, point: Point, ln: f64, scales: &Point) -> Self {
        let scatter = scatter(density, &point, ln, scales);
        Self { point, ln, scatter }
    }
}

/// Follows a density upward from a point by quasi-Newton steps (Broyden, Fletcher, Goldfarb, Shanno
/// 1970) with slopes from differences: the highest point and the logarithm of the density there.
///
/// `scales` are rough sizes of each coordinate; at most `iterations` steps are taken. `None` where the
/// density is zero at the start, or where `vain` says so of a point on the way, the logarithm of the
/// density there and its rise in the last step: its peak is known, or too low.
pub fn climb(
    density: &mut impl Density,
    start: &Point,
    scales: &Point,
    iterations: usize,
    vain: impl Fn(&Point, f64, f64) -> bool,
) -> Option<(Point, f64)> {
    let dimensions = density.dimensions();
    let mut here = *start;
    let mut ln = density.ln(&here);
    if !ln.is_finite() {
        return None;
    }
    let mut slope = slopes(density, &here, ln, scales);
    let mut metric = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
    let reset = |metric: &mut Matrix, slope: &Point| {
        let length = norm(slope);
        for i in 0..dimensions {
            metric[i] = [0.0; MOST_DIMENSIONS];
            metric[i][i] = 1.0 / length.max(1.0);
        }
    };
    reset(&mut metric, &slope);
    let mut small = 0;
    for _ in 0..iterations {
        let mut direction = [0.0; MOST_DIMENSIONS];
        for i in 0..dimensions {
            direction[i] = (0..dimensions).map(|j| metric[i][j] * slope[j]).sum();
        }
        let length = norm(&direction);
        if length > LONGEST {
            direction = direction.map(|along| along * LONGEST / length);
        }
        let promised = dot(&direction, &slope);
        let mut fraction = 1.0;
        let mut next = None;
        for _ in 0..8 {
            let mut trial = here;
            for i in 0..dimensions {
                trial[i] += fraction * direction[i] * scales[i];
            }
            let found = density.ln(&trial);
            if found > ln + 1e-4 * fraction * promised {
                next = Some((trial, found));
                break;
            }
            fraction *= 0.3;
        }
        let Some((point, found)) = next else {
            reset(&mut metric, &slope);
            small += 1;
            if small > 1 {
                break;
            }
            continue;
        };
        let new_slope = slopes(density, &point, found, scales);
        let mut moved = [0.0; MOST_DIMENSIONS];
        let mut turned = [0.0; MOST_DIMENSIONS];
        for i in 0..dimensions {
            moved[i] = fraction * direction[i];
            turned[i] = slope[i] - new_slope[i];
        }
        update(&mut metric, &moved, &turned, dimensions);
        let rise = found - ln;
        (here, ln, slope) = (point, found, new_slope);
        if vain(&here, ln, rise) {
            return None;
        }
        small = if rise < RISE { small + 1 } else { 0 };
        if small > 1 {
            break;
        }
    }
    Some((here, ln))
}

fn dot(a: &Point, b: &Point) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

fn norm(a: &Point) -> f64 {
    dot(a, a).sqrt()
}

/// Slopes of ln(density) per unit of the scales.
fn slopes(density: &mut impl Density, here: &Point, ln: f64, scales: &Point) -> Point {
    let mut slope = [0.0; MOST_DIMENSIONS];
    for i in 0..density.dimensions() {
        let mut moved = *here;
        moved[i] += STEP * scales[i];
        let mut found = (density.ln(&moved) - ln) / STEP;
        if !found.is_finite() {
            moved[i] = here[i] - STEP * scales[i];
            found = (ln - density.ln(&moved)) / STEP;
        }
        slope[i] = if found.is_finite() { found } else { 0.0 };
    }
    slope
}

/// The inverse curvature after a step that turned the slope.
fn update(metric: &mut Matrix, moved: &Point, turned: &Point, dimensions: usize) {
    let along = dot(moved, turned);
    if along <= 1e-10 * norm(moved) * norm(turned) {
        return;
    }
    let mut image = [0.0; MOST_DIMENSIONS];
    for i in 0..dimensions {
        image[i] = (0..dimensions).map(|j| metric[i][j] * turned[j]).sum();
    }
    let factor = (1.0 + dot(turned, &image) / along) / along;
    for i in 0..dimensions {
        for j in 0..dimensions {
            metric[i][j] +=
                factor * moved[i] * moved[j] - (image[i] * moved[j] + moved[i] * image[j]) / along;
        }
    }
}

/// Drop of ln(density) at which curvature is measured.
const DROP: f64 = 0.5;

/// Widest standard deviation of a scatter, in units of the scales.
const WIDEST: f64 = 6.0;

/// Inverse curvature about a peak from differences over steps that lower ln(density) by about
/// [`DROP`] each.
fn scatter(density: &mut impl Density, here: &Point, ln: f64, scales: &Point) -> Matrix {
    let dimensions = density.dimensions();
    let mut drop = |moves: &[(usize, f64)]| {
        let mut point = *here;
        for (coordinate, step) in moves {
            point[*coordinate] += step;
        }
        (ln - density.ln(&point)).min(1e3)
    };
    let mut steps = [0.0; MOST_DIMENSIONS];
    let mut curvature = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
    for i in 0..dimensions {
        let mut step = 0.03 * scales[i];
        let mut mean = 0.0;
        for _ in 0..8 {
            mean = 0.5 * (drop(&[(i, step)]) + drop(&[(i, -step)]));
            if mean > 0.25 * DROP && mean < 4.0 * DROP {
                break;
            }
            let factor = (DROP / mean.max(1e-6)).sqrt().clamp(0.1, 10.0);
            if step * factor > 4.0 * scales[i] {
                break;
            }
            step *= factor;
        }
        steps[i] = step;
        curvature[i][i] = (2.0 * mean / (step * step)).max(1.0 / (16.0 * scales[i] * scales[i]));
    }
    for i in 0..dimensions {
        for j in 0..i {
            let (a, b) = (steps[i], steps[j]);
            let same = drop(&[(i, a), (j, b)]) + drop(&[(i, -a), (j, -b)]);
            let opposite = drop(&[(i, a), (j, -b)]) + drop(&[(i, -a), (j, b)]);
            curvature[i][j] = (same - opposite) / (4.0 * a * b);
            curvature[j][i] = curvature[i][j];
        }
    }
    // curvature that is not that of a peak, or hardly: correlations are lowered until it is
    for _ in 0..20 {
        if let Some(scatter) = inverse(&curvature, dimensions)
            && cholesky(&scatter, dimensions).is_some()
            && (0..dimensions).all(|i| scatter[i][i] < (WIDEST * scales[i]).powi(2))
        {
            return scatter;
        }
        for i in 0..dimensions {
            for j in 0..dimensions {
                if i != j {
                    curvature[i][j] *= 0.8;
                }
            }
        }
    }
    let mut scatter = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
    for i in 0..dimensions {
        scatter[i][i] = 1.0 / curvature[i][i];
    }
    scatter
}
