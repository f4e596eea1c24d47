//! A family's posterior density, with brightnesses, baselines and noise levels integrated out.

use super::constraints::Constraints;
use super::data::LineData;
use super::family::Family;
use super::settings::{CONSTRAINED, PosteriorSettings};
use super::shapes::{
    Combine, Hill, HillSurface, Part, TwoClouds, TwoLayers, absorbing, channels_of, emitting,
};
use super::starts::Kinematics;
use crate::fit::priors::{Prior, Priors};
use crate::model::Model;
use crate::numeric::marginal::Quadratic;
use crate::numeric::sampling::{Density, MOST_DIMENSIONS, Matrix, Point};
use rand_distr::{Distribution, StandardNormal};

/// A normal density of a logarithm.
#[derive(Clone, Copy, Debug)]
struct OfLogarithm {
    mean: f64,
    deviation: f64,
    ln_height: f64,
}

impl OfLogarithm {
    fn new(median: f64, deviation: f64) -> Self {
        Self {
            mean: median.ln(),
            deviation,
            ln_height: -deviation.ln() - 0.5 * std::f64::consts::TAU.ln(),
        }
    }

    fn of(priors: &Priors, name: &str) -> Self {
        match priors.of(name) {
            Prior::LogNormal {
                median,
                ln_deviation,
            } => Self::new(median, ln_deviation),
            other => panic!("{name}: {}, expected a log-normal prior", other.text()),
        }
    }

    fn ln(&self, ln_value: f64) -> f64 {
        let z = (ln_value - self.mean) / self.deviation;
        self.ln_height - 0.5 * z * z
    }
}

/// Priors looked up once.
#[derive(Clone, Copy, Debug)]
struct Looked {
    separation: Prior,
    ratio: OfLogarithm,
    tau_cloud: OfLogarithm,
    brightness: OfLogarithm,
    thin_width: OfLogarithm,
    thick_k: f64,
    thin_k: f64,
}

/// The ratio of the optical depths, where they are linked.
#[derive(Clone, Copy, Debug)]
enum Link {
    None,
    Held(f64),
    /// Its logarithm is the last coordinate.
    Free(OfLogarithm),
}

/// A family's posterior density. Its coordinates are those of the family, and the logarithm of the
/// isotope ratio where that is free, without those that are held.
pub(super) struct Target<'a> {
    family: Family,
    lines: [&'a LineData; 2],
    constraints: Constraints,
    priors: Looked,
    link: Link,
    /// Relative errors of the lines' calibrations.
    calibration: [f64; 2],
    /// v_lsr, dispersion, inward speed and optical depth that are held.
    held: [Option<f64>; 4],
    /// Positions of the free coordinates among all.
    free: Vec<usize>,
    /// Both shapes of the thick line, and both of the thin line.
    shapes: [Vec<f64>; 4],
}

impl<'a> Target<'a> {
    pub fn new(
        family: Family,
        (thick, thin): (&'a LineData, &'a LineData),
        constraints: &Constraints,
        settings: &PosteriorSettings,
    ) -> Self {
        let priors = &settings.priors;
        let mean = |name: &str| match priors.of(name) {
            Prior::Exponential { mean } => mean,
            other => panic!("{}: brightnesses have exponential priors", other.text()),
        };
        let link = match settings.isotope_ratio {
            Some(ratio) if family.has_depth() && ratio.err > 0.0 => {
                Link::Free(OfLogarithm::new(ratio.value, ratio.err / ratio.value))
            }
            Some(ratio) if family.has_depth() => Link::Held(ratio.value),
            _ => Link::None,
        };
        let places = family.constrained();
        let all_held = constraints.held();
        let held = std::array::from_fn(|k| places[k].and(all_held[k]));
        let dimensions = family.dimensions() + usize::from(matches!(link, Link::Free(_)));
        let is_held =
            |place: &usize| (0..4).any(|k| held[k].is_some() && places[k] == Some(*place));
        Self {
            family,
            lines: [thick, thin],
            constraints: *constraints,
            priors: Looked {
                separation: priors.of("separation_over_sigma"),
                ratio: OfLogarithm::of(priors, "sigma_ratio"),
                tau_cloud: OfLogarithm::of(priors, "tau_cloud"),
                brightness: OfLogarithm::of(priors, "thin_brightness_ratio"),
                thin_width: OfLogarithm::of(priors, "thin_width_ratio"),
                thick_k: mean("excess_thick_k"),
                thin_k: mean("peak_thin_k"),
            },
            link,
            calibration: [settings.calibration_error.0, settings.calibration_error.1],
            held,
            free: (0..dimensions).filter(|place| !is_held(place)).collect(),
            shapes: [thick, thick, thin, thin].map(|line| vec![0.0; line.channels().len()]),
        }
    }

    /// All coordinates of a point of the free ones.
    pub fn full(&self, point: &Point) -> Point {
        let mut full = [0.0; MOST_DIMENSIONS];
        for (value, place) in point.iter().zip(&self.free) {
            full[*place] = *value;
        }
        let [v, sigma, speed, tau] = self.held;
        let places = self.family.constrained();
        let mut put = |k: usize, value: Option<f64>| {
            if let (Some(place), Some(value)) = (places[k], value) {
                full[place] = value;
            }
        };
        put(0, v);
        put(1, sigma.map(f64::ln));
        put(3, tau.map(f64::ln));
        if let (Some(place), Some(speed)) = (places[2], speed) {
            full[place] = speed / full[1].exp();
        }
        full
    }

    /// The free coordinates of a family's point; an isotope ratio comes in at its median.
    pub fn reduced(&self, family_point: &Point) -> Point {
        let mut full = *family_point;
        if let Link::Free(prior) = self.link {
            full[self.family.dimensions()] = prior.mean;
        }
        self.picked(&full)
    }

    /// Scales of the free coordinates, given those of the family's.
    pub fn scales(&self, sigma_km_s: f64) -> Point {
        let mut full = self.family.scales(sigma_km_s);
        if let Link::Free(prior) = self.link {
            full[self.family.dimensions()] = prior.deviation;
        }
        self.picked(&full)
    }

    /// Middle and scatter of the priors about given kinematics.
    pub fn broad(&self, about: Kinematics) -> (Point, Matrix) {
        let (middle, mut deviations) = self.family.broad(about.v_km_s, about.sigma_km_s);
        if let Link::Free(prior) = self.link {
            deviations[self.family.dimensions()] = prior.deviation;
        }
        let deviations = self.picked(&deviations);
        let mut scatter = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
        for (i, deviation) in deviations.iter().enumerate() {
            scatter[i][i] = deviation * deviation;
        }
        (self.reduced(&middle), scatter)
    }

    fn picked(&self, full: &Point) -> Point {
        let mut point = [0.0; MOST_DIMENSIONS];
        for (value, place) in point.iter_mut().zip(&self.free) {
            *value = full[*place];
        }
        point
    }

    fn ln_prior(&self, full: &Point) -> f64 {
        let (priors, constraints) = (&self.priors, &self.constraints);
        let clouds = self.family == Family::TwoClouds;
        let of_family = match self.family {
            Family::Moving(_) => {
                constraints.ln_speed(full[2], full[1].exp()) + constraints.ln_tau(full[3])
            }
            Family::Still(_) => constraints.ln_tau(full[2]),
            Family::Unabsorbed => 0.0,
            Family::TwoClouds => {
                priors.separation.ln_density(full[2])
                    + priors.ratio.ln(full[3])
                    + priors.tau_cloud.ln(full[4])
                    + priors.brightness.ln(full[5])
            }
        };
        let of_link = match self.link {
            Link::Free(prior) => prior.ln(full[self.family.dimensions()]),
            Link::None | Link::Held(_) => 0.0,
        };
        constraints.ln_kinematics(full[0], full[1], clouds)
            + priors.thin_width.ln(full[self.family.thin_width()])
            + of_family
            + of_link
    }

    /// The isotope ratio at a point, where depths are linked.
    fn isotope_ratio(&self, full: &Point) -> Option<f64> {
        match self.link {
            Link::None => None,
            Link::Held(ratio) => Some(ratio),
            Link::Free(_) => Some(full[self.family.dimensions()].exp()),
        }
    }

    /// The thin line's optical depth at a point, where depths are linked: that of both halves over the
    /// ratio.
    fn thin_depth(&self, full: &Point) -> Option<f64> {
        let place = self.family.constrained()[3]?;
        Some(2.0 * full[place].exp() / self.isotope_ratio(full)?)
    }

    /// chi2 of the thick and of the thin line as functions of their amplitudes.
    fn quadratics(&mut self, full: &Point) -> [Quadratic; 2] {
        let (v_km_s, sigma_km_s) = (full[0], full[1].exp());
        let part = |v_km_s: f64, sigma_km_s: f64, depth: f64| Part {
            v_km_s,
            sigma_km_s,
            depth,
        };
        let halves = |v_in_km_s: f64, tau: f64| {
            [v_in_km_s, -v_in_km_s].map(|along| part(v_km_s + along, sigma_km_s, tau))
        };
        let second_cloud = || (v_km_s + full[2] * sigma_km_s, sigma_km_s * full[3].exp());
        let width = full[self.family.thin_width()].exp();
        let front = part(v_km_s, width * sigma_km_s, 1.0);
        let depth = self.thin_depth(full);
        let [thick, thin] = self.lines;
        let (thick_k, thin_k) = (self.priors.thick_k, self.priors.thin_k);
        let [first, second, third, fourth] = &mut self.shapes;
        let both = [&mut first[..], &mut second[..]];
        let of_thick = match self.family {
            Family::Moving(model) => {
                let halves = halves(full[2] * sigma_km_s, full[3].exp());
                slab(model, thick, halves, thick_k, both)
            }
            Family::Still(model) => slab(model, thick, halves(0.0, full[2].exp()), thick_k, both),
            Family::Unabsorbed => {
                let cloud = [part(v_km_s, sigma_km_s, 1.0)];
                emission(thick, &cloud, thick_k, first)
            }
            Family::TwoClouds => {
                let (v, sigma) = second_cloud();
                let tau = full[4].exp();
                let clouds = [part(v_km_s, sigma_km_s, tau), part(v, sigma, tau)];
                absorption::<TwoClouds>(thick, clouds, 2, thick_k, both)
            }
        };
        let of_thin = if self.family == Family::TwoClouds {
            let (v, sigma) = second_cloud();
            let rear = part(v, width * sigma, full[5].exp());
            emission(thin, &[front, rear], thin_k, third)
        } else if let Some(depth) = depth {
            // a layer: a front part with nothing behind it, of unit peak
            let layer = [
                part(v_km_s, width * sigma_km_s, depth),
                part(v_km_s, width * sigma_km_s, 0.0),
            ];
            let peak = -(-depth * strongest(thin)).exp_m1();
            let mut found =
                absorption::<TwoClouds>(thin, layer, 1, thin_k, [&mut third[..], &mut fourth[..]]);
            found.products[0] /= peak * peak;
            found.projected[0] /= peak;
            found
        } else {
            emission(thin, &[front], thin_k, third)
        };
        [of_thick, of_thin]
    }

    /// Physical parameters of a point with brightnesses drawn given it.
    pub fn physical(&mut self, point: &Point, generator: &mut impl rand::Rng) -> Vec<f64> {
        let full = self.full(point);
        let [thick, thin] = self.quadratics(&full);
        let (thick, [thin_k, _]) = (thick.draw(generator), thin.draw(generator));
        // priors of brightnesses hold for the scale of the data: its error is what it was
        let factors = self.calibration.map(|err| {
            if err == 0.0 {
                return 1.0;
            }
            let z: f64 = StandardNormal.sample(generator);
            (err * z).exp()
        });
        let thick = thick.map(|step| step / factors[0]);
        let thin_k = thin_k / factors[1];
        let radiation = &self.lines[0].channels().line().radiation;
        let mut physical = self.family.physical(&full, radiation, thick, thin_k);
        // what is held comes back without the rounding of its coordinate
        let names = self.family.parameters();
        for (name, held) in CONSTRAINED.iter().zip(self.held) {
            let place = names.iter().position(|known| known == name);
            if let (Some(place), Some(held)) = (place, held) {
                physical[place] = held;
            }
        }
        if let (Some(ratio), Some(depth)) = (self.isotope_ratio(&full), self.thin_depth(&full)) {
            let line = self.lines[1].channels().line();
            let excess = thin_k / -(-depth * strongest(self.lines[1])).exp_m1();
            let radiation = &line.radiation;
            physical.push(ratio);
            physical.push(radiation.inverse(radiation.background() + excess));
        }
        physical
    }

    /// Inward speed at a point, km/s, of a family that has one.
    pub fn v_in_km_s(&self, full: &Point) -> f64 {
        self.held[2].unwrap_or(full[2] * full[1].exp())
    }

    /// Names of the physical parameters.
    pub fn names(&self) -> Vec<&'static str> {
        let mut names = self.family.parameters();
        if !matches!(self.link, Link::None) {
            names.extend(["isotope_ratio", "t_ex_thin_k"]);
        }
        names
    }

    /// Probability of an inward speed at a point's dispersion, before the data.
    pub fn inward_before(&self, full: &Point) -> f64 {
        self.constraints.inward(full[1].exp())
    }
}

/// Share of the strongest component in a line's optical depth.
fn strongest(line: &LineData) -> f64 {
    let components = line.channels().line().components.iter();
    components.map(|one| one.weight).fold(0.0, f64::max)
}

/// ln of dispersions and optical depths beyond these is taken as impossible, before shapes lose their
/// digits.
const LARGEST_LN: f64 = 12.0;

impl Density for Target<'_> {
    fn dimensions(&self) -> usize {
        self.free.len()
    }

    fn ln(&mut self, point: &Point) -> f64 {
        let full = self.full(point);
        if full[1..]
            .iter()
            .any(|value| value.is_nan() || value.abs() > LARGEST_LN)
        {
            return f64::NEG_INFINITY;
        }
        let prior = self.ln_prior(&full);
        if prior == f64::NEG_INFINITY {
            return prior;
        }
        let [thick, thin] = self.quadratics(&full);
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
    shapes: [&mut [f64]; 2],
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
    [first, second]: [&mut [f64]; 2],
) -> Quadratic {
    let data = line.channels();
    let channels = channels_of(&parts, data.line(), data.sampling(), data.order());
    let (first, second) = (&mut first[..channels.len()], &mut second[..channels.len()]);
    let place = (data.sampling(), channels.clone());
    absorbing::<C>(data.line(), place, parts, (first, second));
    line.quadratic(channels, &mut [first, second][..count], mean)
}
