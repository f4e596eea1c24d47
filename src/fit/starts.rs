//! Where searches start: cheap candidates over the kinematics and the optical depth, each with the
//! best amplitudes inside their ranges, ranked by chi2.

use super::amplitudes::Products;
use super::channels::Channels;
use super::joint::Layout;
use super::projected::amplitude_ranges;
use crate::constants::FWHM_PER_SIGMA;
use crate::measure::ThinLine;
use crate::model::{BothSigns, Ladder, MOST_AMPLITUDES, Model, Sampling};
use crate::numeric::products::products;
use crate::spectrum::Window;

/// Centre and dispersion that a search may begin with, km/s.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Kinematics {
    pub v_km_s: f64,
    pub sigma_km_s: f64,
}

impl Kinematics {
    /// Whether one Gaussian from both would end in the same minimum.
    pub(super) fn is_near(&self, other: &Self) -> bool {
        let wider = self.sigma_km_s.max(other.sigma_km_s);
        (self.v_km_s - other.v_km_s).abs() < wider
            && (self.sigma_km_s / other.sigma_km_s).ln().abs() < 1.0
    }
}

/// Distance of the thick line's centroid from the thin line, in dispersions, from which searches begin
/// there too: the thin line's fit may have taken one of two clouds.
const OFF_CENTRE: f64 = 0.8;

/// Kinematics that the data suggest: those of the thin line where it is detected, else those of the
/// thick line's intensity; both where they are far apart.
pub(super) fn kinematics(thin_line: Option<&ThinLine>, thick: Kinematics) -> Vec<Kinematics> {
    match thin_line {
        Some(thin) => {
            let v_km_s = thin.v_km_s.value;
            let sigma = thin.fwhm_km_s.value / FWHM_PER_SIGMA;
            let at = |v_km_s: f64, factor: f64| Kinematics {
                v_km_s,
                sigma_km_s: factor * sigma,
            };
            let mut found: Vec<Kinematics> = DISPERSIONS
                .into_iter()
                .map(|factor| at(v_km_s, factor))
                .collect();
            if (thick.v_km_s - v_km_s).abs() > OFF_CENTRE * sigma {
                found.extend([0.7, 1.0, 1.4].map(|factor| at(thick.v_km_s, factor)));
            }
            found
        }
        None => [-0.4, 0.0, 0.4]
            .into_iter()
            .flat_map(|shift| {
                [0.4, 0.7].into_iter().map(move |factor| Kinematics {
                    v_km_s: thick.v_km_s + shift * thick.sigma_km_s,
                    sigma_km_s: factor * thick.sigma_km_s,
                })
            })
            .collect(),
    }
}

/// How far from its centre a line reaches, in the largest dispersion of the candidates.
const REACH: f64 = 3.6;
/// The same of the thick line, whose halves are at the fastest speed from the centre.
const THICK_REACH: f64 = 4.5;

/// Velocities about a thick and a thin line of these kinematics; outside, candidates are zero.
pub(super) fn about(kinematics: &[Kinematics]) -> (Window, Window) {
    let sigma_km_s = kinematics
        .iter()
        .map(|kinematics| kinematics.sigma_km_s)
        .fold(0.0, f64::max);
    let centres = || kinematics.iter().map(|kinematics| kinematics.v_km_s);
    let within = |reach: f64| Window {
        low_km_s: centres().fold(f64::INFINITY, f64::min) - reach * sigma_km_s,
        high_km_s: centres().fold(f64::NEG_INFINITY, f64::max) + reach * sigma_km_s,
    };
    (within(THICK_REACH), within(REACH))
}

/// Inward speeds of the candidates, in dispersions, either sign.
const SPEEDS: [f64; 5] = [0.08, 0.25, 0.5, 0.9, 1.6];
const OPTICAL_DEPTHS: [f64; 5] = [0.3, 1.0, 3.0, 10.0, 40.0];
/// Dispersions of the candidates, in that of the thin line: optical depth broadens a line, and slabs
/// without a speed fit wide ones.
const DISPERSIONS: [f64; 4] = [1.0, 0.7, 0.45, 1.4];

/// Candidates of each sign of the inward speed that become starts.
const STARTS: usize = 8;

/// Candidates closer than this in `v_in`/sigma, ln tau and ln sigma are neighbours.
const NEAR_SPEED: f64 = 0.25;
const NEAR_LOG: f64 = 1.3;
const NEAR_LOG_SIGMA: f64 = 0.5;

/// Optical depth of a single layer at its start.
const LAYER_TAU: f64 = 2.0;

/// Nonlinear parameters of a start, and the chi2 with the best amplitudes there.
#[derive(Clone, Copy, Debug)]
struct Candidate {
    chi2: f64,
    kinematics: Kinematics,
    /// Second component of a model with two.
    second: Kinematics,
    v_in_km_s: f64,
    tau: f64,
    /// ln tau and ln sigma.
    logarithms: [f64; 2],
    /// Which amplitudes are inside their ranges.
    free: [bool; MOST_AMPLITUDES],
}

impl Candidate {
    fn at(chi2: f64, kinematics: Kinematics) -> Self {
        Self {
            chi2,
            kinematics,
            second: kinematics,
            v_in_km_s: 0.0,
            tau: LAYER_TAU,
            logarithms: [LAYER_TAU.ln(), kinematics.sigma_km_s.ln()],
            free: [true; MOST_AMPLITUDES],
        }
    }

    fn inward(&self) -> bool {
        self.v_in_km_s > 0.0
    }

    fn is_near(&self, other: &Self) -> bool {
        let (sigma, other_sigma) = (self.kinematics.sigma_km_s, other.kinematics.sigma_km_s);
        let [tau, width] = [0, 1].map(|k| (self.logarithms[k] - other.logarithms[k]).abs());
        self.inward() == other.inward()
            && self.free == other.free
            && (self.v_in_km_s - other.v_in_km_s).abs() < NEAR_SPEED * sigma.max(other_sigma)
            && tau < NEAR_LOG
            && width < NEAR_LOG_SIGMA
    }
}

/// What the candidates of a pair share, whatever the model.
#[derive(Debug)]
pub(super) struct Scan<'a> {
    thick: &'a Channels,
    thin: &'a Channels,
    kinematics: &'a [Kinematics],
    intensity: Kinematics,
    /// chi2 of the thin line at each of the kinematics.
    thin_chi2: Vec<f64>,
    /// The slab shapes that are fitted at every speed and optical depth.
    slabs: Slabs,
    columns: Vec<f64>,
}

#[derive(Clone, Copy, Debug)]
struct Place {
    kinematics: usize,
    v_in_km_s: f64,
    tau: f64,
    logarithms: [f64; 2],
}

/// Candidates of either shape of a slab, in one order; none of a shape that is not fitted.
#[derive(Debug, Default)]
struct Slabs {
    places: Vec<Place>,
    uniform: Vec<Products>,
    peaked: Vec<Products>,
}

impl<'a> Scan<'a> {
    /// The candidates of a pair for these models; `columns` is a buffer.
    pub(super) fn new(
        (thick, thin): (&'a Channels, &'a Channels),
        kinematics: &'a [Kinematics],
        intensity: Kinematics,
        models: &[Model],
        mut columns: Vec<f64>,
    ) -> Self {
        columns.resize(3 * thick.len().max(thin.len()), 0.0);
        let thin_chi2 = kinematics
            .iter()
            .map(|kinematics| one_gaussian(thin, *kinematics, &mut columns).0)
            .collect();
        let slabs = Slabs::new(thick, kinematics, models, &mut columns);
        Self {
            thick,
            thin,
            kinematics,
            intensity,
            thin_chi2,
            slabs,
            columns,
        }
    }

    /// Gives the buffer back.
    pub(super) fn into_columns(self) -> Vec<f64> {
        self.columns
    }

    /// Joint starting parameters of a layout, most promising first.
    pub(super) fn starts(&mut self, layout: &Layout) -> Vec<Vec<f64>> {
        let (model, _) = layout.thick_line();
        let candidates = match model {
            Model::Gaussian | Model::Layer => self.one_component(),
            Model::TwoGaussians => self.two_components(),
            Model::TwoLayer | Model::TwoLayerContinuum | Model::Hill | Model::HillSurface => {
                self.slabs(model, layout)
            }
        };
        distinct(&candidates, model.has_infall())
            .iter()
            .map(|candidate| joint_start(layout, candidate))
            .collect()
    }

    fn one_component(&mut self) -> Vec<Candidate> {
        let mut candidates = Vec::new();
        for (kinematics, thin_chi2) in self.kinematics.iter().zip(&self.thin_chi2) {
            for factor in [0.8, 1.0, 1.5, 2.2] {
                let widened = Kinematics {
                    sigma_km_s: factor * kinematics.sigma_km_s,
                    ..*kinematics
                };
                let (chi2, _) = one_gaussian(self.thick, widened, &mut self.columns);
                candidates.push(Candidate::at(chi2 + thin_chi2, widened));
            }
        }
        candidates
    }

    /// Two Gaussians on either side of each centre; widths are scanned about each centre once.
    fn two_components(&mut self) -> Vec<Candidate> {
        let mut centres = self.kinematics.to_vec();
        centres.dedup_by_key(|kinematics| kinematics.v_km_s);
        centres.push(self.intensity);
        let mut candidates = Vec::new();
        for about in centres {
            for first in [-2.0, -1.3, -0.8, -0.4] {
                for second in [0.4, 0.8, 1.3, 2.0] {
                    for factor in [0.3, 0.5, 0.9] {
                        let [one, two] = [first, second].map(|shift| Kinematics {
                            v_km_s: about.v_km_s + shift * about.sigma_km_s,
                            sigma_km_s: factor * about.sigma_km_s,
                        });
                        let chi2 = [self.thick, self.thin]
                            .map(|line| two_gaussians(line, one, two, &mut self.columns));
                        candidates.push(Candidate {
                            second: two,
                            ..Candidate::at(chi2[0] + chi2[1], one)
                        });
                    }
                }
            }
        }
        candidates
    }

    fn slabs(&self, model: Model, layout: &Layout) -> Vec<Candidate> {
        let (_, map) = layout.thick_line();
        let reference = joint_start(layout, &Candidate::at(0.0, self.intensity));
        let ranges = amplitude_ranges(layout, self.thick, (model, map), &reference);
        let of_shape = if is_uniform(model) {
            &self.slabs.uniform
        } else {
            &self.slabs.peaked
        };
        (self.slabs.places.iter())
            .zip(of_shape)
            .map(|(place, products)| {
                let best = if model == Model::Hill {
                    products.of_first_alone().best(&ranges)
                } else {
                    products.best(&ranges)
                };
                let kinematics = self.kinematics[place.kinematics];
                Candidate {
                    chi2: best.chi2 + self.thin_chi2[place.kinematics],
                    kinematics,
                    second: kinematics,
                    v_in_km_s: place.v_in_km_s,
                    tau: place.tau,
                    logarithms: place.logarithms,
                    free: best.free,
                }
            })
            .collect()
    }
}

/// Whether each half of a slab has one temperature.
fn is_uniform(model: Model) -> bool {
    matches!(model, Model::TwoLayer | Model::TwoLayerContinuum)
}

impl Slabs {
    /// The slab shapes of these models on the thick line's channels over kinematics, speeds and optical
    /// depths.
    fn new(
        thick: &Channels,
        kinematics: &[Kinematics],
        models: &[Model],
        columns: &mut [f64],
    ) -> Self {
        let mut slabs = Self::default();
        let fitted = |uniform: bool| {
            let mut slab_models = models.iter().filter(|model| model.has_infall());
            slab_models.any(|model| is_uniform(*model) == uniform)
        };
        let (uniform, peaked) = (fitted(true), fitted(false));
        if !uniform && !peaked {
            return slabs;
        }
        let count = 2 * kinematics.len() * SPEEDS.len() * OPTICAL_DEPTHS.len();
        slabs.places.reserve_exact(count);
        let sampling = thick.coarse_sampling();
        let columns = &mut columns[..3 * thick.len()];
        let mut ladder = Ladder::default();
        for (index, at) in kinematics.iter().enumerate() {
            for speed in SPEEDS {
                let speed_km_s = speed * at.sigma_km_s;
                let place = (at.v_km_s, at.sigma_km_s, speed_km_s);
                ladder.place(thick.line(), sampling, place);
                for tau in OPTICAL_DEPTHS {
                    slabs
                        .places
                        .extend([speed_km_s, -speed_km_s].map(|v_in_km_s| Place {
                            kinematics: index,
                            v_in_km_s,
                            tau,
                            logarithms: [tau.ln(), at.sigma_km_s.ln()],
                        }));
                    if uniform {
                        let (shape, absorbed) = three_columns(columns);
                        ladder.uniform(sampling, tau, shape, absorbed);
                        slabs.uniform.extend(products_of(thick, columns));
                    }
                    if peaked {
                        let (shape, absorbed) = three_columns(columns);
                        ladder.peaked(sampling, tau, shape, absorbed);
                        slabs.peaked.extend(products_of(thick, columns));
                    }
                }
            }
        }
        slabs
    }
}

/// Products of a slab's two functions, for either sign of the inward speed; the columns as they were
/// filled.
fn products_of(thick: &Channels, columns: &mut [f64]) -> [Products; 2] {
    thick.decorrelate(columns);
    let (shape, absorbed) = three_columns(columns);
    let data = thick.whitened_data();
    let [square, by_data] = products(absorbed, [absorbed, data]);
    [shape.inward, shape.outward].map(|shape| {
        let [ff, fg, fd] = products(shape, [shape, absorbed, data]);
        // the second function is the absorbed share less the first
        Products {
            squares: [ff, square - 2.0 * fg + ff],
            both: fg - ff,
            by_data: [fd, by_data - fd],
            data: thick.data_chi2(),
        }
    })
}

/// F of either sign, and the absorbed share.
fn three_columns(columns: &mut [f64]) -> (BothSigns<'_>, &mut [f64]) {
    let channels = columns.len() / 3;
    let (inward, rest) = columns.split_at_mut(channels);
    let (outward, absorbed) = rest.split_at_mut(channels);
    (BothSigns { inward, outward }, absorbed)
}

/// The best candidates that differ, the best first: neighbours of a better one would end in the same minimum. Both
/// signs of the inward speed are kept.
fn distinct(candidates: &[Candidate], has_infall: bool) -> Vec<Candidate> {
    let mut order: Vec<usize> = (0..candidates.len()).collect();
    order.sort_by(|one, other| candidates[*one].chi2.total_cmp(&candidates[*other].chi2));
    let mut kept: Vec<Candidate> = Vec::with_capacity(2 * STARTS);
    for candidate in order.into_iter().map(|index| candidates[index]) {
        let of_its_sign = kept
            .iter()
            .filter(|other| candidate.inward() == other.inward())
            .count();
        let near = has_infall && kept.iter().any(|other| candidate.is_near(other));
        if of_its_sign < STARTS && !near {
            kept.push(candidate);
        }
    }
    kept
}

/// Joint parameters of a candidate, inside their intervals. Amplitudes are not set: they are solved for.
fn joint_start(layout: &Layout, candidate: &Candidate) -> Vec<f64> {
    const ISOTOPE_RATIO: f64 = 50.0;
    const THIN_TAU: f64 = 0.5;
    const FILLING: f64 = 0.1;
    const CONTINUUM_K: f64 = 50.0;
    layout
        .parameters()
        .iter()
        .map(|parameter| {
            let value = match parameter.name {
                "v_lsr_km_s" | "v_thin_km_s" => candidate.kinematics.v_km_s,
                "sigma_km_s" | "sigma_thin_km_s" => candidate.kinematics.sigma_km_s,
                "v_second_km_s" | "v_second_thin_km_s" => candidate.second.v_km_s,
                "sigma_second_km_s" | "sigma_second_thin_km_s" => candidate.second.sigma_km_s,
                "v_in_km_s" => candidate.v_in_km_s,
                "tau" | "tau_total" => candidate.tau,
                "tau_thin" => THIN_TAU,
                "isotope_ratio" => ISOTOPE_RATIO,
                "filling" => FILLING,
                "t_continuum_k" => CONTINUUM_K,
                _ => 0.0,
            };
            let value = parameter.prior.map_or(value, |prior| prior.value);
            parameter.interval.nearest(value)
        })
        .collect()
}

/// Joint parameters of a line alone.
pub(super) fn start_alone(layout: &Layout, kinematics: Kinematics) -> Vec<f64> {
    joint_start(layout, &Candidate::at(0.0, kinematics))
}

/// chi2 of a line with one Gaussian of the best amplitude, and that amplitude in units of the noise.
/// `columns` is scratch of at least a number a channel.
pub(super) fn one_gaussian(line: &Channels, at: Kinematics, columns: &mut [f64]) -> (f64, f64) {
    let column = &mut columns[..line.len()];
    let parameters = [at.v_km_s, at.sigma_km_s];
    Model::Gaussian.functions(
        line.line(),
        line.coarse_sampling(),
        &parameters,
        column,
        None,
    );
    line.decorrelate(column);
    let [square, product] = products(column, [column, line.whitened_data()]);
    if square == 0.0 {
        return (line.data_chi2(), 0.0);
    }
    let amplitude = product / square;
    (line.data_chi2() - amplitude * product, amplitude)
}

/// chi2 of a line with two Gaussians of the best amplitudes that are not negative.
fn two_gaussians(line: &Channels, one: Kinematics, two: Kinematics, columns: &mut [f64]) -> f64 {
    let columns = &mut columns[..2 * line.len()];
    let parameters = [
        one.v_km_s,
        one.sigma_km_s,
        0.0,
        two.v_km_s,
        two.sigma_km_s,
        0.0,
    ];
    let sampling = line.coarse_sampling();
    Model::TwoGaussians.functions(line.line(), sampling, &parameters, columns, None);
    line.decorrelate(columns);
    let (first, second) = columns.split_at(line.len());
    let [ff, fh, fd] = products(first, [first, second, line.whitened_data()]);
    let [hh, hd] = products(second, [second, line.whitened_data()]);
    let products = Products {
        squares: [ff, hh],
        both: fh,
        by_data: [fd, hd],
        data: line.data_chi2(),
    };
    products.best(&[(0.0, f64::INFINITY); 2]).chi2
}

/// Centroid and dispersion of the intensity above zero inside a window of a line's channels.
pub(super) fn intensity_moments(
    sampling: &Sampling,
    temperature_k: &[f64],
    low: f64,
    high: f64,
) -> Kinematics {
    let mut sums = [0.0; 3];
    for ((v, width), t) in sampling
        .velocity_km_s()
        .iter()
        .zip(sampling.width_km_s())
        .zip(temperature_k)
    {
        if *v >= low && *v <= high && *t > 0.0 {
            let weight = t * width;
            sums[0] += weight;
            sums[1] += weight * v;
            sums[2] += weight * v * v;
        }
    }
    if sums[0] <= 0.0 {
        return Kinematics {
            v_km_s: 0.5 * (low + high),
            sigma_km_s: 0.15 * (high - low),
        };
    }
    let mean = sums[1] / sums[0];
    let variance = (sums[2] / sums[0] - mean * mean).max((0.02 * (high - low)).powi(2));
    Kinematics {
        v_km_s: mean,
        sigma_km_s: variance.sqrt(),
    }
}
