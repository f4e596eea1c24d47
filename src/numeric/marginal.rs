//! What data say of a model that is a sum of known shapes times amplitudes that are not negative:
//! the likelihood integrated over the amplitudes and over the noise level, and draws of amplitudes.
//!
//! chi2(x) = D - 2 c^T x + x^T M x with at most two amplitudes x, each with an exponential prior. The
//! noise level s has the prior 1/s, so that the likelihood of n values is chi2^(-n/2) up to a constant.

use super::sampling::uniform;
use rand::Rng;
use rand_distr::{Distribution, Exp1};
use statrs::function::erf::{erfc, erfc_inv};
use std::f64::consts::{FRAC_1_SQRT_2, PI, TAU};

/// chi2 as a function of up to two amplitudes, in units of an assumed noise.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Quadratic {
    /// Number of amplitudes, 0 to 2.
    pub count: usize,
    /// D, the sum of the data's squares.
    pub data: f64,
    /// c, the shapes' products with the data.
    pub projected: [f64; 2],
    /// M, the shapes' products with each other: (1, 1), (1, 2), (2, 2).
    pub products: [f64; 3],
    /// n, the number of values.
    pub values: f64,
    /// Means of the amplitudes' priors.
    pub means: [f64; 2],
}

/// Least product of a shape with itself: one that vanishes leaves its amplitude to the prior.
const LEAST_PRODUCT: f64 = 1e-10;

/// Largest correlation of two shapes, squared: beyond, their products are rounding errors apart.
const LARGEST_CORRELATION: f64 = 1.0 - 1e-12;

/// The exponent -x^T M x/2 + b^T x of two amplitudes.
#[derive(Clone, Copy, Debug)]
struct Exponent {
    m: [f64; 3],
    b: [f64; 2],
}

impl Quadratic {
    /// The amplitudes that are best without being negative, and chi2 there.
    #[must_use]
    pub fn best(&self) -> ([f64; 2], f64) {
        let [c, d] = self.projected;
        let [m, k, l] = self.guarded();
        let first = (c / m).max(0.0);
        let one = ([first, 0.0], -c.max(0.0) * first);
        let ([x, y], gain) = match self.count {
            0 => ([0.0; 2], 0.0),
            1 => one,
            _ => {
                let determinant = m * l - k * k;
                let (x, y) = ((l * c - k * d) / determinant, (m * d - k * c) / determinant);
                if x >= 0.0 && y >= 0.0 {
                    ([x, y], -(c * x + d * y))
                } else {
                    let second = (d / l).max(0.0);
                    let two = ([0.0, second], -d.max(0.0) * second);
                    if two.1 < one.1 { two } else { one }
                }
            }
        };
        ([x, y], self.data + gain)
    }

    /// M, made positive definite.
    fn guarded(&self) -> [f64; 3] {
        let [m, k, l] = self.products;
        let (m, l) = (m.max(LEAST_PRODUCT), l.max(LEAST_PRODUCT));
        let most = (LARGEST_CORRELATION * m * l).sqrt();
        [m, k.clamp(-most, most), l]
    }

    /// ln of the likelihood integrated over amplitudes and noise level, up to a constant of n: without
    /// amplitudes -n/2 (1 + ln(D/n)), which is -D/2 where the assumed noise is right.
    ///
    /// Amplitudes are integrated at the noise level s^2 = chi2/(n - 1 - k/2) of the best ones, k of
    /// them: for amplitudes far from zero that is exact to second order in 1/n.
    #[must_use]
    pub fn ln_marginal(&self) -> f64 {
        let (best, chi2) = self.best();
        let n = self.values;
        let level = -0.5 * n * (1.0 + (chi2 / n).ln());
        let variance = self.variance(chi2);
        let exponent = self.exponent(variance);
        let above = 0.5 * (chi2 - self.data) / variance;
        let integral = match self.count {
            0 => 0.0,
            1 => ln_half_line(exponent.m[0], exponent.b[0]),
            _ => exponent.ln_quadrant(best),
        };
        let prior: f64 = self.means[..self.count].iter().map(|mean| mean.ln()).sum();
        level + above + integral - prior
    }

    fn variance(&self, chi2: f64) -> f64 {
        chi2 / (self.values - 1.0 - 0.5 * self.count as f64).max(1.0)
    }

    fn exponent(&self, variance: f64) -> Exponent {
        let m = self.guarded();
        Exponent {
            m: m.map(|product| product / variance),
            b: [0, 1].map(|k| {
                if k < self.count {
                    self.projected[k] / variance - 1.0 / self.means[k]
                } else {
                    0.0
                }
            }),
        }
    }

    /// Amplitudes drawn from their distribution given the data, zero where there are none.
    pub fn draw(&self, generator: &mut impl Rng) -> [f64; 2] {
        let (best, chi2) = self.best();
        let exponent = self.exponent(self.variance(chi2));
        match self.count {
            0 => [0.0; 2],
            1 => [draw_half_line(exponent.m[0], exponent.b[0], generator), 0.0],
            _ => exponent.draw(best, generator),
        }
    }
}

/// erfc(t) e^(t^2) for t >= 0.
fn scaled_erfc(t: f64) -> f64 {
    /// From here on the continued fraction holds to 1e-12 with the terms below.
    const FAR: f64 = 5.0;
    if t < FAR {
        return erfc(t) * (t * t).exp();
    }
    // t + (1/2)/(t + 1/(t + (3/2)/(t + ...))), Abramowitz & Stegun 1964, 7.1.14
    let tail = (1..=12)
        .rev()
        .fold(t, |below, term| t + 0.5 * f64::from(term) / below);
    1.0 / (PI.sqrt() * tail)
}

/// z^2/2 + ln Phi(z) with its first two derivatives, Phi the unit normal distribution function.
fn tilted(z: f64) -> (f64, f64, f64) {
    if z > FAR_FROM_ZERO {
        return (0.5 * z * z, z, 1.0);
    }
    let (value, hazard) = if z < 0.0 {
        let scaled = scaled_erfc(-z * FRAC_1_SQRT_2);
        ((0.5 * scaled).ln(), (2.0 / PI).sqrt() / scaled)
    } else {
        let phi = 0.5 * erfc(-z * FRAC_1_SQRT_2);
        let density = (-0.5 * z * z).exp() / TAU.sqrt();
        (0.5 * z * z + phi.ln(), density / phi)
    };
    (value, z + hazard, 1.0 - hazard * (hazard + z))
}

/// ln of the integral of exp(-m x^2/2 + b x) over x >= 0.
fn ln_half_line(m: f64, b: f64) -> f64 {
    0.5 * (TAU / m).ln() + tilted(b / m.sqrt()).0
}

/// ln of the integral of exp(-(m x^2 + 2 k x y + l y^2)/2 + b x + c y) over y >= 0 and all x, where
/// x >= 0 is not felt: at every y that counts x is far above zero.
fn ln_without_bound(m: f64, k: f64, l: f64, b: f64, c: f64) -> Option<f64> {
    let (of_y, along) = (l - k * k / m, c - k * b / m);
    let highest = (along / of_y).max(0.0) + FAR_FROM_ZERO / of_y.sqrt();
    // mean of x at given y over its deviation
    let least = (b - k * highest).min(b) / m.sqrt();
    (least > FAR_FROM_ZERO)
        .then(|| 0.5 * (TAU / m).ln() + 0.5 * b * b / m + ln_half_line(of_y, along))
}

/// Drop of the integrand's logarithm at which the outer integral ends.
const DROP: f64 = 17.0;

/// Deviations from zero beyond which the bound at zero is not felt (probability 1e-9).
const FAR_FROM_ZERO: f64 = 6.0;

/// Gauss-Legendre nodes and weights on 0 to 1 (numpy 2, `polynomial.legendre.leggauss(12)`, halved).
const NODES: [(f64, f64); 12] = [
    (0.009_219_682_876_640_4, 0.023_587_668_193_255_7),
    (0.047_941_371_814_762_6, 0.053_469_662_997_659_5),
    (0.115_048_662_902_847_7, 0.080_039_164_271_673_2),
    (0.206_341_022_856_691_3, 0.101_583_713_361_532_9),
    (0.316_084_250_500_909_9, 0.116_746_268_269_177_3),
    (0.437_383_295_744_265_5, 0.124_573_522_906_701_3),
    (0.562_616_704_255_734_4, 0.124_573_522_906_701_3),
    (0.683_915_749_499_090_1, 0.116_746_268_269_177_3),
    (0.793_658_977_143_308_7, 0.101_583_713_361_532_9),
    (0.884_951_337_097_152_3, 0.080_039_164_271_673_2),
    (0.952_058_628_185_237_5, 0.053_469_662_997_659_5),
    (0.990_780_317_123_359_6, 0.023_587_668_193_255_7),
];

impl Exponent {
    /// The outer integrand's logarithm at x with two derivatives: y is integrated over y >= 0.
    fn outer(&self, x: f64) -> (f64, f64, f64) {
        let [m, k, l] = self.m;
        let root = l.sqrt();
        let (value, slope, bend) = tilted((self.b[1] - k * x) / root);
        let turn = -k / root;
        (
            -0.5 * m * x * x + self.b[0] * x + value,
            -m * x + self.b[0] + slope * turn,
            -m + bend * turn * turn,
        )
    }

    /// Where the outer integrand is highest, with its logarithm, slope and bend there.
    fn summit(&self, start: f64) -> (f64, (f64, f64, f64)) {
        let (mut low, mut high) = (0.0, f64::INFINITY);
        let mut x = start;
        let mut here = self.outer(x);
        for _ in 0..60 {
            if here.1 > 0.0 {
                low = x;
            } else {
                high = x;
            }
            if x == 0.0 && here.1 <= 0.0 {
                break;
            }
            let mut next = x - here.1 / here.2;
            if next <= low || next >= high {
                next = if high.is_finite() {
                    0.5 * (low + high)
                } else {
                    2.0 * x + 1.0
                };
                if low == 0.0 && here.1 < 0.0 && self.outer(0.0).1 <= 0.0 {
                    next = 0.0;
                }
            }
            let step = next - x;
            x = next;
            here = self.outer(x);
            if step * step * -here.2 < 1e-4 {
                break;
            }
        }
        (x, here)
    }

    /// Ends of the outer integral: where its integrand has dropped from the summit.
    fn ends(&self, start: f64) -> (f64, f64, f64, f64) {
        let (summit, (highest, slope, bend)) = self.summit(start);
        let bend = (-bend).max(1e-300);
        // -slope x - bend x^2/2 = -drop on the falling side
        let fall = (-slope).max(0.0);
        let first = 2.0 * DROP / (fall + (fall * fall + 2.0 * bend * DROP).sqrt());
        let end = |sign: f64, limit: f64| {
            let mut step = first.min(limit);
            for _ in 0..40 {
                let drop = highest - self.outer(summit + sign * step).0;
                if drop < 0.7 * DROP && step < limit {
                    step = (1.5 * step).min(limit);
                } else if drop > 2.0 * DROP {
                    step *= 0.7;
                } else {
                    break;
                }
            }
            step
        };
        let below = if summit > 0.0 { end(-1.0, summit) } else { 0.0 };
        (summit, highest, below, end(1.0, f64::INFINITY))
    }

    /// ln of the integral of exp(-x^T M x/2 + b^T x) over both amplitudes from zero up.
    fn ln_quadrant(&self, start: [f64; 2]) -> f64 {
        let [m, k, l] = self.m;
        let determinant = m * l - k * k;
        let inner = 0.5 * (TAU / l).ln();
        let [b, c] = self.b;
        let (x, y) = ((l * b - k * c) / determinant, (m * c - k * b) / determinant);
        // variances are l/determinant and m/determinant
        if x > 0.0
            && y > 0.0
            && x * x * determinant > FAR_FROM_ZERO * FAR_FROM_ZERO * l
            && y * y * determinant > FAR_FROM_ZERO * FAR_FROM_ZERO * m
        {
            return TAU.ln() - 0.5 * determinant.ln() + 0.5 * (b * x + c * y);
        }
        for (m, k, l, b, c) in [(m, k, l, b, c), (l, k, m, c, b)] {
            if let Some(found) = ln_without_bound(m, k, l, b, c) {
                return found;
            }
        }
        let (summit, highest, below, above) = self.ends(start[0]);
        let panel = |sign: f64, length: f64| -> f64 {
            if length == 0.0 {
                return 0.0;
            }
            let sum: f64 = NODES
                .iter()
                .map(|(node, weight)| {
                    weight * (self.outer(summit + sign * length * node).0 - highest).exp()
                })
                .sum();
            length * sum
        };
        inner + highest + (panel(-1.0, below) + panel(1.0, above)).ln()
    }

    fn draw(&self, start: [f64; 2], generator: &mut impl Rng) -> [f64; 2] {
        const CELLS: usize = 96;
        let (summit, highest, below, above) = self.ends(start[0]);
        let width = (below + above) / CELLS as f64;
        let mut cumulated = [0.0; CELLS + 1];
        for cell in 0..CELLS {
            let x = summit - below + (cell as f64 + 0.5) * width;
            cumulated[cell + 1] = cumulated[cell] + (self.outer(x).0 - highest).exp();
        }
        let wanted = uniform(generator) * cumulated[CELLS];
        let cell = cumulated
            .partition_point(|sum| *sum <= wanted)
            .clamp(1, CELLS)
            - 1;
        let x = summit - below + (cell as f64 + uniform(generator)) * width;
        let y = draw_half_line(self.m[2], self.b[1] - self.m[1] * x, generator);
        [x, y]
    }
}

/// A draw of x >= 0 with density exp(-m x^2/2 + b x).
fn draw_half_line(m: f64, b: f64, generator: &mut impl Rng) -> f64 {
    /// Beyond this many deviations below zero draws come by rejection.
    const FAR_BELOW: f64 = -4.0;
    let root = m.sqrt();
    let z = b / root;
    if z > FAR_BELOW {
        // Phi(-z) to 1, from the upper end: u times Phi(z) is the probability above
        let above = (1.0 - uniform(generator)) * 0.5 * erfc(-z * FRAC_1_SQRT_2);
        let normal = erfc_inv(2.0 * above) / FRAC_1_SQRT_2;
        return ((normal + z) / root).max(0.0);
    }
    // exponential proposals of rate -z (Robert 1995, Statistics and Computing 5, 121)
    loop {
        let exponential: f64 = Exp1.sample(generator);
        let step = exponential / -z;
        if uniform(generator) < (-0.5 * step * step).exp() {
            return step / root;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand_chacha::ChaCha8Rng;
    use rand_chacha::rand_core::SeedableRng;

    /// Sums over a fine grid, by definition, of the exact chi2^(-n/2).
    fn by_grid(quadratic: &Quadratic, reach: [f64; 2]) -> f64 {
        let steps = 1500;
        let (best, lowest) = quadratic.best();
        let [m, k, l] = quadratic.products;
        let second = if quadratic.count == 2 { steps } else { 1 };
        let mut sum = 0.0;
        for i in 0..steps {
            for j in 0..second {
                let x = [
                    (best[0] + reach[0] * 2.0 * ((f64::from(i) + 0.5) / f64::from(steps) - 0.5)),
                    if quadratic.count == 2 {
                        best[1] + reach[1] * 2.0 * ((f64::from(j) + 0.5) / f64::from(steps) - 0.5)
                    } else {
                        0.0
                    },
                ];
                if x[0] < 0.0 || x[1] < 0.0 {
                    continue;
                }
                let chi2 = quadratic.data
                    - 2.0 * (quadratic.projected[0] * x[0] + quadratic.projected[1] * x[1])
                    + m * x[0] * x[0]
                    + 2.0 * k * x[0] * x[1]
                    + l * x[1] * x[1];
                let prior = x[0] / quadratic.means[0] + x[1] / quadratic.means[1];
                sum += (-0.5 * quadratic.values * (chi2 / lowest).ln() - prior).exp();
            }
        }
        let mut cell = 2.0 * reach[0] / f64::from(steps);
        let mut prior = quadratic.means[0].ln();
        if quadratic.count == 2 {
            cell *= 2.0 * reach[1] / f64::from(steps);
            prior += quadratic.means[1].ln();
        }
        let n = quadratic.values;
        (sum * cell).ln() - prior - 0.5 * n * (1.0 + (lowest / n).ln())
    }

    fn cases() -> Vec<(Quadratic, [f64; 2])> {
        let two = |projected, products| Quadratic {
            count: 2,
            data: 400.0,
            projected,
            products,
            values: 300.0,
            means: [8.0, 5.0],
        };
        let one = |projected: f64| Quadratic {
            count: 1,
            data: 330.0,
            projected: [projected, 0.0],
            products: [25.0, 0.0, 0.0],
            values: 300.0,
            means: [8.0, 1.0],
        };
        vec![
            (one(50.0), [2.0, 0.0]),
            (one(5.0), [2.0, 0.0]),
            (one(-30.0), [1.5, 0.0]),
            // far from zero, correlated, one negative, both, nearly degenerate
            (two([40.0, 30.0], [9.0, 1.0, 16.0]), [3.5, 2.5]),
            (two([40.0, 40.0], [25.0, 20.0, 25.0]), [2.5, 2.5]),
            (two([30.0, 10.0], [25.0, 15.0, 16.0]), [2.5, 2.5]),
            (two([-10.0, -20.0], [25.0, 15.0, 16.0]), [1.2, 1.2]),
            (two([29.0, 31.0], [25.0, 24.9, 25.0]), [4.0, 4.0]),
        ]
    }

    /// Within 0.01 in the logarithm: the terms of order 1/n that are left out.
    #[test]
    fn integrals_over_amplitudes_agree_with_sums_over_a_grid() {
        for (quadratic, reach) in cases() {
            let (found, expected) = (quadratic.ln_marginal(), by_grid(&quadratic, reach));
            assert!(
                (found - expected).abs() < 0.01,
                "{quadratic:?}: {found}, {expected}"
            );
        }
    }

    /// The quadrature alone against the closed form that holds far from zero.
    #[test]
    fn the_quadrant_goes_over_into_the_plane() {
        let at = |z: f64| {
            let exponent = Exponent {
                m: [1.0, 0.3, 1.0],
                b: [1.3 * z, 1.3 * z],
            };
            let plane = TAU.ln() - 0.5 * 0.91f64.ln() + 1.3 * z * z;
            exponent.ln_quadrant([z, z]) - plane
        };
        // just below and above the switch at 6 standard deviations
        assert!(at(6.25).abs() < 1e-6, "{}", at(6.25));
        assert!(at(6.35).abs() < 1e-12);
    }

    #[test]
    fn draws_have_the_mean_of_their_density() {
        let mut generator = ChaCha8Rng::seed_from_u64(3);
        for (quadratic, _) in cases() {
            let draws: Vec<[f64; 2]> = (0..20_000)
                .map(|_| quadratic.draw(&mut generator))
                .collect();
            let mean = |k: usize| draws.iter().map(|x| x[k]).sum::<f64>() / draws.len() as f64;
            // d ln Z/d(1/mean) = -<x> + mean: differences of the integral give the mean
            for k in 0..quadratic.count {
                let shifted = |by: f64| {
                    let mut other = quadratic;
                    other.means[k] = 1.0 / (1.0 / quadratic.means[k] + by);
                    other.ln_marginal() + other.means[k].ln()
                };
                let expected = -(shifted(1e-4) - shifted(-1e-4)) / 2e-4;
                let tolerance = 0.02 * expected.max(0.05);
                assert!(
                    (mean(k) - expected).abs() < tolerance,
                    "{quadratic:?}: {} {expected}",
                    mean(k)
                );
            }
        }
    }

    #[test]
    fn scaled_error_function_is_smooth_where_its_form_changes() {
        let (below, above) = (scaled_erfc(5.0 - 1e-9), scaled_erfc(5.0));
        assert!((below / above - 1.0).abs() < 1e-9);
        // scipy 1.17: erfcx(1); the error function here is good to 1e-10 or better
        assert!((scaled_erfc(1.0) - 0.427_583_576_155_807).abs() < 1e-10);
    }
}
