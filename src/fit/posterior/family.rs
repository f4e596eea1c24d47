//! Families of profiles of a pair: their coordinates, priors and shapes, and the physical parameters
//! of a draw. Brightnesses are amplitudes of the shapes and no coordinates.

use super::data::LineData;
use crate::fit::priors::{Prior, Priors};
use crate::model::{LineShape, Model, RadiationTemperature};
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
    /// Shapes of the thick and of the thin line.
    shapes: [[Vec<f64>; 2]; 2],
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
        let shapes = [thick, thin].map(|line| {
            let length = line.channels().len();
            [vec![0.0; length], vec![0.0; length]]
        });
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
        let (v, sigma) = (point[0], point[1].exp());
        let [thick, thin] = self.lines;
        let [thick_shapes, thin_shapes] = &mut self.shapes;
        let thick_count = match self.family {
            Family::Moving(model) => {
                let kinematics = [v, sigma, point[2] * sigma, point[3].exp()];
                slab(model, thick, kinematics, thick_shapes)
            }
            Family::Still(model) => {
                slab(model, thick, [v, sigma, 0.0, point[2].exp()], thick_shapes)
            }
            Family::Unabsorbed => {
                gaussian(thick, v, sigma, &mut thick_shapes[0]);
                1
            }
            Family::TwoClouds => {
                let (second, wide) = (v + point[2] * sigma, sigma * point[3].exp());
                let tau = point[4].exp();
                clouds(thick, (v, sigma, tau), (second, wide, tau), thick_shapes);
                2
            }
        };
        let thin_width = point[self.family.thin_width()].exp();
        gaussian(thin, v, thin_width * sigma, &mut thin_shapes[0]);
        if self.family == Family::TwoClouds {
            let (second, wide) = (v + point[2] * sigma, sigma * point[3].exp());
            let [front, rear] = thin_shapes;
            gaussian(thin, second, thin_width * wide, rear);
            let ratio = point[5].exp();
            for (front, rear) in front.iter_mut().zip(rear) {
                *front += ratio * *rear;
            }
        }
        let of = |line: &LineData, shapes: &[Vec<f64>; 2], count: usize, mean: f64| {
            let columns = [&shapes[0][..], &shapes[1][..]];
            line.quadratic(&columns[..count], mean)
        };
        [
            of(thick, thick_shapes, thick_count, self.priors.thick_k),
            of(thin, thin_shapes, 1, self.priors.thin_k),
        ]
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

fn gaussian(line: &LineData, v_km_s: f64, sigma_km_s: f64, column: &mut [f64]) {
    let channels = line.channels();
    Model::Gaussian.evaluate(
        channels.line(),
        channels.sampling(),
        &[v_km_s, sigma_km_s, 1.0],
        column,
        None,
    );
    channels.whiten(column);
}

/// Shapes that a slab's brightness steps multiply; their number.
fn slab(
    model: Model,
    line: &LineData,
    kinematics: [f64; 4],
    [first, second]: &mut [Vec<f64>; 2],
) -> usize {
    let channels = line.channels();
    let count = channels.len();
    let shapes = model.linear().len();
    // both in one column, until they are apart
    first.resize(shapes * count, 0.0);
    model.functions(
        channels.line(),
        channels.sampling(),
        &kinematics,
        first,
        None,
    );
    channels.whiten(first);
    if shapes == 1 {
        return 1;
    }
    second[..count].copy_from_slice(&first[count..]);
    first.truncate(count);
    if model == Model::TwoLayer {
        // x (1 - E_f E_r) + y (1 - E_r) E_f, x of both layers, y of the rear one alone
        for (first, second) in first.iter_mut().zip(second.iter()) {
            *first += second;
        }
    } else {
        // x (1 - E_f E_r) of both surfaces, y F of what the middle has above them
        for (first, second) in first.iter_mut().zip(second.iter_mut()) {
            let (peaked, rest) = (*first, *second);
            (*first, *second) = (peaked + rest, peaked);
        }
    }
    2
}

/// Shapes of a front cloud and of a rear one seen through it.
fn clouds(
    line: &LineData,
    front: (f64, f64, f64),
    rear: (f64, f64, f64),
    [first, second]: &mut [Vec<f64>; 2],
) {
    let channels = line.channels();
    let unit = unit_excess_k(channels.line());
    let layer = |(v, sigma, tau): (f64, f64, f64), column: &mut [f64]| {
        Model::Layer.evaluate(
            channels.line(),
            channels.sampling(),
            &[v, sigma, tau, unit],
            column,
            None,
        );
    };
    layer(front, first);
    layer(rear, second);
    for (rear, front) in second.iter_mut().zip(first.iter()) {
        *rear *= 1.0 - front;
    }
    channels.whiten(first);
    channels.whiten(second);
}

/// The excitation temperature, K, at which J(T) is 1 K above the background.
fn unit_excess_k(line: &LineShape) -> f64 {
    let radiation = &line.radiation;
    radiation.inverse(radiation.background() + 1.0)
}
