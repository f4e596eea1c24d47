//! The posterior density of a spherical clump's coordinates; brightness, baselines and noise levels are
//! integrated out.

use super::priors::{ClumpPriors, Normal};
use crate::fit::posterior::LineData;
use crate::line::Component;
use crate::numeric::marginal::Quadratic;
use crate::numeric::sampling::{Density, Point};
use crate::spectrum::Window;
use crate::sphere::{ReducedClump, ReducedLine, ReducedPair};

/// Number of coordinates.
pub(super) const DIMENSIONS: usize = 12;

/// Their places in a point.
pub(super) mod place {
    pub const V_LSR: usize = 0;
    pub const LN_SIGMA: usize = 1;
    pub const V_IN: usize = 2;
    pub const LN_DEPTH: usize = 3;
    pub const OPACITY_SLOPE: usize = 4;
    pub const LN_COLLISIONS: usize = 5;
    pub const EXCESS_SLOPE: usize = 6;
    pub const TEMPERATURE_SLOPE: usize = 7;
    pub const LN_RATIO: usize = 8;
    pub const LN_BEAM: usize = 9;
    pub const RESPONSE: usize = 10;
    pub const SHARED: usize = 11;
}

/// Coordinates that only priors bound stay within this many standard deviations.
const FARTHEST: f64 = 4.0;

/// The posterior density.
pub(super) struct Target<'a> {
    lines: [&'a LineData; 2],
    range: Window,
    priors: ClumpPriors,
    velocity_slope: f64,
    /// Thin over thick beam.
    beam_ratio: f64,
    /// ln of J(T) - J(T_bg) at the outer radius, K.
    ln_brightness: Normal,
    pair: ReducedPair,
    columns: [Vec<f64>; 2],
    pub evaluations: usize,
}

/// Amplitudes of both lines with what is known of them.
#[derive(Clone, Copy, Debug)]
struct Amplitude {
    best: f64,
    variance: f64,
    level: f64,
}

impl<'a> Target<'a> {
    pub fn new(
        lines: [&'a LineData; 2],
        range: Window,
        priors: &ClumpPriors,
        velocity_slope: f64,
        beam_ratio: f64,
    ) -> Self {
        let radiation = &lines[0].channels().line().radiation;
        let ln = |z: f64| {
            let t = (priors.ln_t_kin.mean + z * priors.ln_t_kin.deviation).exp();
            (radiation.at(t) - radiation.background()).max(1e-3).ln()
        };
        Self {
            lines,
            range,
            priors: *priors,
            velocity_slope,
            beam_ratio,
            ln_brightness: Normal::of(ln(0.0), 0.5 * (ln(1.0) - ln(-1.0))),
            pair: ReducedPair::default(),
            columns: lines.map(|line| vec![0.0; line.channels().len()]),
            evaluations: 0,
        }
    }

    /// Normal densities of the coordinates after the first.
    pub fn densities(&self) -> [Normal; DIMENSIONS - 1] {
        let p = &self.priors;
        [
            p.ln_sigma,
            p.v_in_over_sigma,
            p.ln_depth,
            p.opacity_slope,
            p.ln_collision_ratio,
            p.excess_slope,
            p.temperature_slope,
            p.ln_isotope_ratio,
            p.ln_beam_over_radius,
            p.opacity_response,
            p.shared_trapping,
        ]
    }

    fn ln_prior(&self, point: &Point) -> f64 {
        if !self.range.contains(point[place::V_LSR]) {
            return f64::NEG_INFINITY;
        }
        let mut ln = -(self.range.high_km_s - self.range.low_km_s).ln();
        for (value, density) in point[1..].iter().zip(self.densities()) {
            if (value - density.mean).abs() > FARTHEST * density.deviation {
                return f64::NEG_INFINITY;
            }
            ln += density.ln_density(*value);
        }
        ln
    }

    /// The clump and lines of a point.
    fn clump(&self, point: &Point) -> (ReducedClump, [ReducedLine; 2]) {
        let sigma = point[place::LN_SIGMA].exp();
        let beam = point[place::LN_BEAM].exp();
        let components = |line: &LineData| -> Vec<Component> {
            let components = line.channels().line().components.iter();
            components
                .map(|one| Component {
                    offset_km_s: one.offset_km_s / sigma,
                    weight: one.weight,
                })
                .collect()
        };
        let clump = ReducedClump {
            v_in_over_sigma: point[place::V_IN],
            velocity_slope: self.velocity_slope,
            depth: point[place::LN_DEPTH].exp(),
            opacity_slope: point[place::OPACITY_SLOPE],
            shared_trapping: point[place::SHARED],
            opacity_response: point[place::RESPONSE],
            collision_ratio: point[place::LN_COLLISIONS].exp(),
            collision_slope: point[place::OPACITY_SLOPE] + point[place::EXCESS_SLOPE],
            temperature_slope: point[place::TEMPERATURE_SLOPE],
        };
        let lines = [
            ReducedLine {
                opacity_ratio: 1.0,
                beam_over_radius: beam,
                components: components(self.lines[0]),
            },
            ReducedLine {
                opacity_ratio: (-point[place::LN_RATIO]).exp(),
                beam_over_radius: beam * self.beam_ratio,
                components: components(self.lines[1]),
            },
        ];
        (clump, lines)
    }

    /// Profiles of a point for an amplitude of 1 K.
    fn profiles(&mut self, point: &Point) {
        let (clump, [thick, thin]) = self.clump(point);
        self.pair.trace(&clump, [&thick, &thin]);
        let inverse = (-point[place::LN_SIGMA]).exp();
        for (line, column) in self.columns.iter_mut().enumerate() {
            let channels = self.lines[line].channels();
            let sampling = channels.sampling();
            let velocities = sampling.velocity_km_s().iter().zip(sampling.width_km_s());
            for (value, (v, width)) in column.iter_mut().zip(velocities) {
                let nodes = sampling.nodes().iter();
                *value = nodes
                    .map(|(node, weight)| {
                        let x = (v + node * width - point[place::V_LSR]) * inverse;
                        weight * self.pair.at(line, x)
                    })
                    .sum();
            }
        }
    }

    fn amplitudes(&mut self, point: &Point) -> [Amplitude; 2] {
        self.profiles(point);
        [0, 1].map(|line| {
            let column = &mut self.columns[line];
            let channels = 0..column.len();
            let quadratic = self.lines[line].quadratic(channels, &mut [column], 1.0);
            let Quadratic {
                projected,
                products,
                data,
                values,
                ..
            } = quadratic;
            let product = products[0].max(1e-12);
            let best = projected[0] / product;
            let chi2 = data - projected[0] * best;
            Amplitude {
                best,
                variance: chi2 / (values - 1.5).max(1.0) / product,
                level: -0.5 * values * (1.0 + (chi2 / values).ln()),
            }
        })
    }

    /// ln of the likelihood integrated over both amplitudes, and the amplitudes that are best.
    ///
    /// The thick line's amplitude x has a log-normal prior, the thin line's is normal about x with a
    /// standard deviation of `thin_scale` x.
    pub fn likelihood(&mut self, point: &Point) -> (f64, [f64; 2]) {
        let [thick, thin] = self.amplitudes(point);
        let scale = self.priors.thin_scale;
        // the amplitude that both lines together suggest; it has to be positive
        let floor = 0.3 * thick.variance.sqrt();
        let x = thick.best.max(floor);
        let tie = (scale * x).powi(2);
        let other = thin.variance + tie;
        let apart = thin.best - thick.best;
        let both = (thick.best * other + thin.best * thick.variance) / (other + thick.variance);
        let both = both.max(floor);
        let ln_prior = self.ln_brightness.ln_density(both.ln()) - both.ln();
        let total = other + thick.variance;
        let ln = thick.level
            + thin.level
            + 0.5 * (std::f64::consts::TAU * thick.variance * thin.variance / total).ln()
            - 0.5 * apart * apart / total
            + ln_prior;
        let thin_k = (thin.best * tie + both * thin.variance) / (tie + thin.variance);
        (ln, [both, thin_k])
    }
}

impl Target<'_> {
    /// Profiles of both lines, K, with the amplitudes that are best.
    pub fn best_profiles_k(&mut self, point: &Point) -> [Vec<f64>; 2] {
        let (_, amplitudes) = self.likelihood(point);
        self.profiles(point);
        [0, 1].map(|line| {
            let column = self.columns[line].iter();
            column.map(|value| amplitudes[line] * value).collect()
        })
    }

    /// White residuals of both lines.
    pub fn residuals(&mut self, point: &Point) -> [Vec<f64>; 2] {
        let lines = self.lines;
        let [thick, thin] = self.best_profiles_k(point);
        [lines[0].residuals(thick), lines[1].residuals(thin)]
    }

    /// Velocities of a line's channels, km/s.
    pub fn velocities(&self, line: usize) -> &[f64] {
        self.lines[line].channels().sampling().velocity_km_s()
    }
}

impl Density for Target<'_> {
    fn dimensions(&self) -> usize {
        DIMENSIONS
    }

    fn ln(&mut self, point: &Point) -> f64 {
        let prior = self.ln_prior(point);
        if prior == f64::NEG_INFINITY {
            return prior;
        }
        self.evaluations += 1;
        let ln = prior + self.likelihood(point).0;
        if ln.is_finite() {
            ln
        } else {
            f64::NEG_INFINITY
        }
    }
}
