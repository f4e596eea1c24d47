//! Mixtures of multivariate t distributions: densities, draws, and fits to weighted draws.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::matrix::{MOST_DIMENSIONS, Matrix, Point, cholesky, inverse_lower};
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use rand::Rng;
use rand_distr::{ChiSquared, Distribution, StandardNormal};
use statrs::function::gamma::ln_gamma;

/// Degrees of freedom of every component: tails heavy enough for weights to stay bounded, and a
/// finite third moment.
const FREEDOM: f64 = 5.0;

/// Share below which a component is given up.
const LEAST_SHARE: f64 = 5e-3;

/// Part of a component's old scatter that is kept in each direction: it never collapses on one draw.
const KEPT_SCATTER: f64 = 0.02;

/// A mixture of multivariate t distributions of 5 degrees of freedom.
#[derive(Clone, Debug, PartialEq)]
pub struct StudentMixture {
    dimensions: usize,
    components: Vec<Component>,
}

#[derive(Clone, Debug, PartialEq)]
struct Component {
    share: f64,
    centre: Point,
    scatter: Matrix,
    lower: Matrix,
    /// The inverse of `lower`.
    inverse: Matrix,
    /// Share times the density at the centre.
    height: f64,
}

impl Component {
    fn new(dimensions: usize, share: f64, centre: Point, scatter: &Matrix) -> Option<Self> {
        let lower = cholesky(scatter, dimensions)?;
        let ln_determinant: f64 = (0..dimensions).map(|i| lower[i][i].ln()).sum();
        let d = dimensions as f64;
        let ln_height = ln_gamma(0.5 * (FREEDOM + d))
            - ln_gamma(0.5 * FREEDOM)
            - 0.5 * d * (FREEDOM * std::f64::consts::PI).ln()
            - ln_determinant;
        Some(Self {
            share,
            centre,
            scatter: *scatter,
            inverse: inverse_lower(&lower, dimensions),
            lower,
            height: share * ln_height.exp(),
        })
    }

    /// Squared distances of some points from the centre in units of the scatter.
    #[inline(always)]
    fn distances_squared<A: Arithmetic>(&self, dimensions: usize, points: &Lanewise) -> Lanes {
        let mut offsets = [[0.0; LANES]; MOST_DIMENSIONS];
        for i in 0..dimensions {
            for lane in 0..LANES {
                offsets[i][lane] = points[i][lane] - self.centre[i];
            }
        }
        let mut squares = [0.0; LANES];
        for i in 0..dimensions {
            let mut along = [0.0; LANES];
            for j in 0..=i {
                let factor = self.inverse[i][j];
                for lane in 0..LANES {
                    along[lane] = A::mul_add(factor, offsets[j][lane], along[lane]);
                }
            }
            for lane in 0..LANES {
                squares[lane] = A::mul_add(along[lane], along[lane], squares[lane]);
            }
        }
        squares
    }

    /// Share times densities at these squared distances.
    #[inline(always)]
    fn densities(&self, dimensions: usize, distances_squared: &Lanes) -> Lanes {
        let mut found = [0.0; LANES];
        let base: Lanes = distances_squared.map(|square| 1.0 + square * (1.0 / FREEDOM));
        // base^((5 + d)/2), a whole number or a half
        let mut power = if dimensions.is_multiple_of(2) {
            base.map(f64::sqrt)
        } else {
            [1.0; LANES]
        };
        for _ in 0..dimensions.div_ceil(2) + 2 {
            for lane in 0..LANES {
                power[lane] *= base[lane];
            }
        }
        for lane in 0..LANES {
            found[lane] = self.height / power[lane];
        }
        found
    }
}

/// Points that are worked on together: one register of the widest instructions.
const LANES: usize = 8;

type Lanes = [f64; LANES];

/// Coordinates of [`LANES`] points, one coordinate after the other.
type Lanewise = [Lanes; MOST_DIMENSIONS];

/// Up to [`LANES`] points, the first one repeated.
#[inline(always)]
fn lanewise(dimensions: usize, points: &[Point]) -> Lanewise {
    let mut lanes = [[0.0; LANES]; MOST_DIMENSIONS];
    for (i, values) in lanes.iter_mut().enumerate().take(dimensions) {
        for (lane, value) in values.iter_mut().enumerate() {
            *value = points[if lane < points.len() { lane } else { 0 }][i];
        }
    }
    lanes
}

/// Adds a mixture's densities at points.
struct AddDensities<'a> {
    mixture: &'a StudentMixture,
    points: &'a [Point],
    sums: &'a mut [f64],
}

impl Kernel for AddDensities<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let d = self.mixture.dimensions;
        for (points, sums) in self.points.chunks(LANES).zip(self.sums.chunks_mut(LANES)) {
            let lanes = lanewise(d, points);
            let mut total = [0.0; LANES];
            for component in &self.mixture.components {
                let distances = component.distances_squared::<A>(d, &lanes);
                let densities = component.densities(d, &distances);
                for lane in 0..LANES {
                    total[lane] += densities[lane];
                }
            }
            for (sum, density) in sums.iter_mut().zip(total) {
                *sum += density;
            }
        }
    }
}

/// Least part of a point that counts for a component when the mixture is refitted.
const LEAST_PART: f64 = 1e-3;

/// Sums over weighted points for each component of a mixture.
struct Memberships<'a> {
    mixture: &'a StudentMixture,
    points: &'a [Point],
    weights: &'a [f64],
}

impl Kernel for Memberships<'_> {
    type Output = Vec<Sums>;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Vec<Sums> {
        let (d, components) = (self.mixture.dimensions, &self.mixture.components);
        let mut sums = vec![Sums::default(); components.len()];
        let mut found = vec![([0.0; LANES], [0.0; LANES]); components.len()];
        for (points, weights) in self.points.chunks(LANES).zip(self.weights.chunks(LANES)) {
            let lanes = lanewise(d, points);
            let mut total = [0.0; LANES];
            for (slot, component) in found.iter_mut().zip(components) {
                let distances = component.distances_squared::<A>(d, &lanes);
                let densities = component.densities(d, &distances);
                for lane in 0..LANES {
                    total[lane] += densities[lane];
                }
                *slot = (densities, distances);
            }
            for (sum, (densities, distances)) in sums.iter_mut().zip(&found) {
                for (lane, (point, weight)) in points.iter().zip(weights).enumerate() {
                    let part = densities[lane] / total[lane];
                    if part > LEAST_PART {
                        let pull = (FREEDOM + d as f64) / (FREEDOM + distances[lane]);
                        sum.add(d, point, weight * part, pull);
                    }
                }
            }
        }
        sums
    }
}

impl StudentMixture {
    /// A mixture of equal shares about centres with their scatter matrices; those that are not
    /// positive definite are left out.
    #[must_use]
    pub fn new(dimensions: usize, centres: impl IntoIterator<Item = (Point, Matrix)>) -> Self {
        let components: Vec<Component> = centres
            .into_iter()
            .filter_map(|(centre, scatter)| Component::new(dimensions, 1.0, centre, &scatter))
            .collect();
        Self {
            dimensions,
            components,
        }
        .with_equal_shares()
    }

    fn with_equal_shares(mut self) -> Self {
        let share = 1.0 / self.components.len().max(1) as f64;
        for component in &mut self.components {
            component.height *= share / component.share;
            component.share = share;
        }
        self
    }

    /// Whether it has no component.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.components.is_empty()
    }

    /// Adds its densities at points to as many sums.
    pub fn add_densities(&self, points: &[Point], sums: &mut [f64]) {
        dispatch(AddDensities {
            mixture: self,
            points,
            sums,
        });
    }

    /// Number of components.
    #[must_use]
    pub fn len(&self) -> usize {
        self.components.len()
    }

    /// A draw.
    pub fn draw(&self, generator: &mut impl Rng, chi_squared: &Freedom) -> Point {
        let mut left = uniform(generator);
        let last = self.components.len() - 1;
        let chosen = self.components[..last].iter().position(|component| {
            left -= component.share;
            left < 0.0
        });
        let component = &self.components[chosen.unwrap_or(last)];
        let mut normal = [0.0; MOST_DIMENSIONS];
        for value in normal.iter_mut().take(self.dimensions) {
            *value = StandardNormal.sample(generator);
        }
        let stretch = (FREEDOM / chi_squared.0.sample(generator)).sqrt();
        let mut point = component.centre;
        for i in 0..self.dimensions {
            let along: f64 = (0..=i).map(|j| component.lower[i][j] * normal[j]).sum();
            point[i] += stretch * along;
        }
        point
    }

    /// The mixture after one step of expectation and maximisation on weighted points (weights of sum
    /// 1). Components that no longer carry weight are dropped.
    #[must_use]
    pub fn refitted(&self, points: &[Point], weights: &[f64]) -> Self {
        let d = self.dimensions;
        let sums = dispatch(Memberships {
            mixture: self,
            points,
            weights,
        });
        let components: Vec<Component> = self
            .components
            .iter()
            .zip(&sums)
            .filter_map(|(component, sum)| sum.component(d, component))
            .collect();
        if components.is_empty() {
            return self.clone();
        }
        let mut refitted = Self {
            dimensions: d,
            components,
        };
        refitted.normalise();
        refitted
    }

    fn normalise(&mut self) {
        let total: f64 = self.components.iter().map(|one| one.share).sum();
        for component in &mut self.components {
            component.share /= total;
            component.height /= total;
        }
    }

    /// The mixture with another one mixed in at a share.
    #[must_use]
    pub fn with(&self, other: &Self, share: f64) -> Self {
        let scaled = |mixture: &Self, factor: f64| {
            let mut components = mixture.components.clone();
            for component in &mut components {
                component.share *= factor;
                component.height *= factor;
            }
            components
        };
        let mut components = scaled(self, 1.0 - share);
        components.extend(scaled(other, share));
        Self {
            dimensions: self.dimensions,
            components,
        }
    }
}

/// Distribution of the squared lengths that stretch normal deviates into t deviates.
#[derive(Clone, Copy, Debug)]
pub struct Freedom(ChiSquared<f64>);

impl Freedom {
    /// That of the mixture's degrees of freedom; `None` never, as these are positive.
    #[must_use]
    pub fn new() -> Option<Self> {
        ChiSquared::new(FREEDOM).ok().map(Self)
    }
}

/// A number from 0 up to, not including, 1.
pub(crate) fn uniform(generator: &mut impl Rng) -> f64 {
    /// 2^-53
    const STEP: f64 = 1.0 / 9_007_199_254_740_992.0;
    (generator.next_u64() >> 11) as f64 * STEP
}

/// Weighted sums over points that belong to a component.
#[derive(Clone, Copy, Debug, Default)]
struct Sums {
    weight: f64,
    pulled: f64,
    first: Point,
    second: Matrix,
}

impl Sums {
    fn add(&mut self, dimensions: usize, point: &Point, weight: f64, pull: f64) {
        self.weight += weight;
        let pulled = weight * pull;
        self.pulled += pulled;
        for i in 0..dimensions {
            let along = pulled * point[i];
            self.first[i] += along;
            for j in 0..=i {
                self.second[i][j] += along * point[j];
            }
        }
    }

    fn component(&self, dimensions: usize, old: &Component) -> Option<Component> {
        if self.weight < LEAST_SHARE {
            return None;
        }
        let mut centre = old.centre;
        for i in 0..dimensions {
            centre[i] = self.first[i] / self.pulled;
        }
        let mut scatter = old.scatter;
        for i in 0..dimensions {
            for j in 0..=i {
                let spread =
                    (self.second[i][j] - self.pulled * centre[i] * centre[j]) / self.weight;
                let kept = KEPT_SCATTER * old.scatter[i][j];
                scatter[i][j] = (1.0 - KEPT_SCATTER) * spread + kept;
                scatter[j][i] = scatter[i][j];
            }
        }
        Component::new(dimensions, self.weight, centre, &scatter)
            .or_else(|| Component::new(dimensions, self.weight, old.centre, &old.scatter))
    }
}
