//! Families of profiles of a pair: their coordinates, priors and shapes, and the physical parameters
//! of a draw. Brightnesses are amplitudes of the shapes and no coordinates.

use super::data::LineData;
use super::shapes::{
    Combine, Hill, HillSurface, Part, TwoClouds, TwoLayers, absorbing, channels_of, emitting,
};
use crate::fit::priors::{Prior, Priors};
use crate::model::{Model, RadiationTemperature};
use crate::numeric::marginal::Quadratic;
use crate::numeric::sampling::{Density, MOST_DIMENSIONS, Point};
use crate::spectrum::Window;

/// A family of profiles.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Family {
    /// A slab model, its halves moving.
    Moving(Model),
    /// The same at rest.
    Still(Model),
    /// One Gaussian in both lines, nothing absorbed.
    Unabsorbed,
    /// Two clouds of two velocities, of comparable brightness in the thin line, each a Gaussian there;
    /// in the thick line each a layer of one optical depth, the front one absorbing the rear one.
    TwoClouds,
}

impl Family {
    /// Name for tables.
    #[must_use]
    pub fn name(self) -> String {
        match self {
            Self::Moving(model) => model.name().to_owned(),
            Self::Still(model) => format!("{} at rest", model.name()),
            Self::Unabsorbed => "unabsorbed Gaussian".to_owned(),
            Self::TwoClouds => "two clouds".to_owned(),
        }
    }

    /// Whether posteriors are known of it: slabs whose temperatures are their amplitudes.
    #[must_use]
    pub fn is_known(self) -> bool {
        match self {
            Self::Moving(model) | Self::Still(model) => {
                matches!(model, Model::TwoLayer | Model::Hill | Model::HillSurface)
            }
            Self::Unabsorbed | Self::TwoClouds => true,
        }
    }

    /// Number of coordinates.
    pub(super) fn dimensions(self) -> usize {
        match self {
            Self::Moving(_) => 5,
            Self::Still(_) => 4,
            Self::Unabsorbed => 3,
            Self::TwoClouds => 7,
        }
    }

    /// The coordinate of the thin line's width: the last one.
    fn thin_width(self) -> usize {
        self.dimensions() - 1
    }

    /// Rough sizes of the coordinates, the first in units of `sigma_km_s`.
    pub(super) fn scales(self, sigma_km_s: f64) -> Point {
        let v = 0.3 * sigma_km_s;
        match self {
            Self::Moving(_) => padded(&[v, 0.3, 0.3, 0.5, 0.1]),
            Self::Still(_) => padded(&[v, 0.3, 0.5, 0.1]),
            Self::Unabsorbed => padded(&[v, 0.3, 0.1]),
            Self::TwoClouds => padded(&[v, 0.3, 0.4, 0.3, 0.5, 0.4, 0.1]),
        }
    }

    /// Names of the physical parameters.
    #[must_use]
    pub fn parameters(self) -> Vec<&'static str> {
        let thin = ["peak_thin_k", "thin_width_ratio"];
        match self {
            Self::Moving(model) => {
                let own = model.parameters().iter().map(|parameter| parameter.name);
                own.chain(thin).collect()
            }
            Self::Still(model) => {
                let own = model.parameters().iter().map(|parameter| parameter.name);
                own.filter(|name| *name != "v_in_km_s")
                    .chain(thin)
                    .collect()
            }
            Self::Unabsorbed => [&["v_lsr_km_s", "sigma_km_s", "peak_k"][..], &thin].concat(),
            Self::TwoClouds => vec![
                "v_front_km_s",
                "sigma_front_km_s",
                "v_rear_km_s",
                "sigma_rear_km_s",
                "tau_cloud",
                "excess_front_k",
                "excess_rear_k",
                "peak_thin_k",
                "thin_brightness_ratio",
                "thin_width_ratio",
            ],
        }
    }

    /// Physical parameters, in the order of [`Family::parameters`], of a point and the brightnesses of
    /// both lines.
    pub(super) fn physical(
        self,
        point: &Point,
        radiation: &RadiationTemperature,
        [x, y]: [f64; 2],
        thin_k: f64,
    ) -> Vec<f64> {
        let t = |excess: f64| radiation.inverse(radiation.background() + excess);
        let (v, sigma) = (point[0], point[1].exp());
        let temperatures = |model: Model| match model {
            Model::TwoLayer => vec![t(x), t(x + y)],
            Model::HillSurface => vec![t(x + y), t(x)],
            _ => vec![t(x)],
        };
        let kinematics = match self {
            Self::Moving(_) => vec![v, sigma, point[2] * sigma, point[3].exp()],
            Self::Still(_) => vec![v, sigma, point[2].exp()],
            Self::Unabsorbed => vec![v, sigma],
            Self::TwoClouds => vec![
                v,
                sigma,
                v + point[2] * sigma,
                sigma * point[3].exp(),
                point[4].exp(),
            ],
        };
        let rest = match self {
            Self::Moving(model) | Self::Still(model) => {
                let mut rest = temperatures(model);
                rest.push(thin_k);
                rest
            }
            Self::Unabsorbed => vec![x, thin_k],
            Self::TwoClouds => vec![x, y, thin_k, point[5].exp()],
        };
        let ratio = point[self.thin_width()].exp();
        [kinematics, rest, vec![ratio]].concat()
    }
}

pub(super) fn padded(values: &[f64]) -> Point {
    let mut point = [0.0; MOST_DIMENSIONS];
    point[..values.len()].copy_from_slice(values);
    point
}

/// Priors looked up once.
#[derive(Clone, Copy, Debug)]
struct Looked {
    sigma: Prior,
    v_in: Prior,
    tau: Prior,
    separation: Prior,
    ratio: Prior,
    tau_cloud: Prior,
    brightness: Prior,
    thin_width: Prior,
    thick_k: f64,
    thin_k: f64,
}

/// A family's posterior density, brightnesses, baselines and noise levels integrated out.
pub(super) struct Target<'a> {
    family: Family,
    lines: [&'a LineData; 2],
    range: Window,
    priors: Looked,
    /// Both shapes of the thick line, and that of the thin line.
    shapes: [Vec<f64>; 3],
}

impl<'a> Target<'a> {
    pub fn new(
        family: Family,
        (thick, thin): (&'a LineData, &'a LineData),
        range: Window,
        priors: &Priors,
    ) -> Self {
        let mean = |name: &str| match priors.of(name) {
            Prior::Exponential { mean } => mean,
            other => panic!("{}: brightnesses have exponential priors", other.text()),
        };
        let shapes = [thick, thick, thin].map(|line| vec![0.0; line.channels().len()]);
        Self {
            family,
            lines: [thick, thin],
            range,
            priors: Looked {
                sigma: priors.of("sigma_km_s"),
                v_in: priors.of("v_in_over_sigma"),
                tau: priors.of("tau"),
                separation: priors.of("separation_over_sigma"),
                ratio: priors.of("sigma_ratio"),
                tau_cloud: priors.of("tau_cloud"),
                brightness: priors.of("thin_brightness_ratio"),
                thin_width: priors.of("thin_width_ratio"),
                thick_k: mean("excess_thick_k"),
                thin_k: mean("peak_thin_k"),
            },
            shapes,
        }
    }

    fn ln_prior(&self, point: &Point) -> f64 {
        if !(self.range.low_km_s..=self.range.high_km_s).contains(&point[0]) {
            return f64::NEG_INFINITY;
        }
        let priors = &self.priors;
        let velocity = -(self.range.high_km_s - self.range.low_km_s).ln();
        let thin_width = point[self.family.thin_width()];
        let shared = velocity
            + priors.sigma.ln_density_of_logarithm(point[1])
            + priors.thin_width.ln_density_of_logarithm(thin_width);
        shared
            + match self.family {
                Family::Moving(_) => {
                    priors.v_in.ln_density(point[2]) + priors.tau.ln_density_of_logarithm(point[3])
                }
                Family::Still(_) => priors.tau.ln_density_of_logarithm(point[2]),
                Family::Unabsorbed => 0.0,
                Family::TwoClouds => {
                    priors.separation.ln_density(point[2])
                        + priors.ratio.ln_density_of_logarithm(point[3])
                        + priors.tau_cloud.ln_density_of_logarithm(point[4])
                        + priors.brightness.ln_density_of_logarithm(point[5])
                }
            }
    }

    /// chi2 of the thick and of the thin line as functions of their amplitudes.
    pub fn quadratics(&mut self, point: &Point) -> [Quadratic; 2] {
        let (v_km_s, sigma_km_s) = (point[0], point[1].exp());
        let part = |v_km_s: f64, sigma_km_s: f64, depth: f64| Part {
            v_km_s,
            sigma_km_s,
            depth,
        };
        let halves = |v_in_km_s: f64, tau: f64| {
            [v_in_km_s, -v_in_km_s].map(|along| part(v_km_s + along, sigma_km_s, tau))
        };
        let second_cloud = || (v_km_s + point[2] * sigma_km_s, sigma_km_s * point[3].exp());
        let width = point[self.family.thin_width()].exp();
        let front = part(v_km_s, width * sigma_km_s, 1.0);
        let [thick, thin] = self.lines;
        let (thick_k, thin_k) = (self.priors.thick_k, self.priors.thin_k);
        let [both @ .., emitted] = &mut self.shapes;
        let of_thick = match self.family {
            Family::Moving(model) => {
                let halves = halves(point[2] * sigma_km_s, point[3].exp());
                slab(model, thick, halves, thick_k, both)
            }
            Family::Still(model) => slab(model, thick, halves(0.0, point[2].exp()), thick_k, both),
            Family::Unabsorbed => emission(
                thick,
                &[part(v_km_s, sigma_km_s, 1.0)],
                thick_k,
                &mut both[0],
            ),
            Family::TwoClouds => {
                let (v, sigma) = second_cloud();
                let tau = point[4].exp();
                let clouds = [part(v_km_s, sigma_km_s, tau), part(v, sigma, tau)];
                absorption::<TwoClouds>(thick, clouds, 2, thick_k, both)
            }
        };
        let of_thin = if self.family == Family::TwoClouds {
            let (v, sigma) = second_cloud();
            let rear = part(v, width * sigma, point[5].exp());
            emission(thin, &[front, rear], thin_k, emitted)
        } else {
            emission(thin, &[front], thin_k, emitted)
        };
        [of_thick, of_thin]
    }

    /// Physical parameters of a point with brightnesses drawn given it.
    pub fn physical(&mut self, point: &Point, generator: &mut impl rand::Rng) -> Vec<f64> {
        let [thick, thin] = self.quadratics(point);
        let (thick, [thin_k, _]) = (thick.draw(generator), thin.draw(generator));
        let radiation = &self.lines[0].channels().line().radiation;
        self.family.physical(point, radiation, thick, thin_k)
    }
}

/// ln of dispersions and optical depths beyond these is taken as impossible, before shapes lose their
/// digits.
const LARGEST_LN: f64 = 12.0;

impl Density for Target<'_> {
    fn dimensions(&self) -> usize {
        self.family.dimensions()
    }

    fn ln(&mut self, point: &Point) -> f64 {
        if point[1..].iter().any(|value| value.abs() > LARGEST_LN) {
            return f64::NEG_INFINITY;
        }
        let prior = self.ln_prior(point);
        if prior == f64::NEG_INFINITY {
            return prior;
        }
        let [thick, thin] = self.quadratics(point);
        let ln = prior + thick.ln_marginal() + thin.ln_marginal();
        if ln.is_finite() {
            ln
        } else {
            f64::NEG_INFINITY
        }
    }
}

/// What a line's data say of Gaussian emission; `mean` is the prior mean of its brightness.
fn emission(line: &LineData, parts: &[Part], mean: f64, shape: &mut [f64]) -> Quadratic {
    let data = line.channels();
    let channels = channels_of(parts, data.line(), data.sampling(), data.order());
    let shape = &mut shape[..channels.len()];
    let place = (data.sampling(), channels.clone());
    emitting(data.line(), place, parts, shape);
    line.quadratic(channels, &mut [shape], mean)
}

/// What they say of a slab's halves, front and rear.
fn slab(
    model: Model,
    line: &LineData,
    halves: [Part; 2],
    mean: f64,
    shapes: &mut [Vec<f64>; 2],
) -> Quadratic {
    match model {
        Model::TwoLayer => absorption::<TwoLayers>(line, halves, 2, mean, shapes),
        Model::HillSurface => absorption::<HillSurface>(line, halves, 2, mean, shapes),
        _ => absorption::<Hill>(line, halves, 1, mean, shapes),
    }
}

/// What they say of the first `count` shapes of a front and a rear part.
fn absorption<C: Combine>(
    line: &LineData,
    parts: [Part; 2],
    count: usize,
    mean: f64,
    [first, second]: &mut [Vec<f64>; 2],
) -> Quadratic {
    let data = line.channels();
    let channels = channels_of(&parts, data.line(), data.sampling(), data.order());
    let (first, second) = (&mut first[..channels.len()], &mut second[..channels.len()]);
    let place = (data.sampling(), channels.clone());
    absorbing::<C>(data.line(), place, parts, (first, second));
    line.quadratic(channels, &mut [first, second][..count], mean)
}
