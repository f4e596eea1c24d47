//! Where searches start: cheap candidates over the kinematics and the optical depth, each with the
//! best amplitudes from a linear solution, ranked by chi2.

use super::channels::Channels;
use super::joint::Layout;
use crate::constants::FWHM_PER_SIGMA;
use crate::measure::ThinLine;
use crate::model::{LineShape, Model, Sampling, basis, temperatures};
use crate::numeric::products::products;

/// Centre and dispersion that a search may begin with, km/s.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Kinematics {
    pub v_km_s: f64,
    pub sigma_km_s: f64,
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
            let mut found: Vec<Kinematics> = [1.0, 0.7, 0.45]
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

const INWARD_SPEEDS: [f64; 12] = [
    -1.8, -1.2, -0.8, -0.5, -0.25, -0.08, 0.08, 0.25, 0.5, 0.8, 1.2, 1.8,
];
const OPTICAL_DEPTHS: [f64; 6] = [0.5, 1.5, 4.0, 10.0, 30.0, 80.0];

/// Candidates of each sign of the inward speed that become starts.
const STARTS: usize = 4;

/// A start with the chi2 that its candidate reached.
struct Candidate {
    chi2: f64,
    parameters: Vec<f64>,
}

/// Joint starting parameters for a model, most promising first.
pub(super) fn starts(
    layout: &Layout,
    thick: &Channels,
    thin: &Channels,
    kinematics: &[Kinematics],
    intensity: Kinematics,
) -> Vec<Vec<f64>> {
    let (model, _) = layout.thick(&vec![1.0; layout.parameters().len()]);
    let mut candidates = Vec::new();
    let mut scan = Scan::new(thick, thin);
    if model == Model::TwoGaussians {
        // widths are scanned about each centre: once is enough
        let mut centres = kinematics.to_vec();
        centres.dedup_by_key(|kinematics| kinematics.v_km_s);
        for about in centres.into_iter().chain([intensity]) {
            two_gaussians(layout, &mut scan, about, &mut candidates);
        }
        return distinct(candidates, layout);
    }
    let source = source(layout);
    for kinematics in kinematics {
        let (thin_chi2, thin_peak) = scan.thin(*kinematics);
        match model {
            Model::Gaussian | Model::Layer => {
                for sigma_factor in [0.8, 1.0, 1.5, 2.2] {
                    let widened = Kinematics {
                        sigma_km_s: sigma_factor * kinematics.sigma_km_s,
                        ..*kinematics
                    };
                    let (chi2, peak) = scan.gaussian(widened);
                    let parameters =
                        layout_start(layout, thin, widened, thin_peak, |name| match name {
                            "peak_k" => Some(peak),
                            "tau_total" => Some(2.0),
                            "t_ex_k" => Some(excitation_k(thick.line(), 2.0, peak.max(0.1))),
                            _ => None,
                        });
                    candidates.push(Candidate {
                        chi2: chi2 + thin_chi2,
                        parameters,
                    });
                }
            }
            // scanned above, about each centre once
            Model::TwoGaussians => {}
            Model::TwoLayer | Model::TwoLayerContinuum | Model::Hill | Model::HillSurface => {
                for speed in INWARD_SPEEDS {
                    for tau in OPTICAL_DEPTHS {
                        let v_in = speed * kinematics.sigma_km_s;
                        let (chi2, a, b) = scan.slab(model, *kinematics, v_in, tau, source);
                        let (fifth, sixth) = temperatures(model, thick.line(), a, b, source);
                        let parameters =
                            layout_start(layout, thin, *kinematics, thin_peak, |name| match name {
                                "v_in_km_s" => Some(v_in),
                                "tau" => Some(tau),
                                "t_front_k" | "t_peak_k" => Some(fifth),
                                "t_rear_k" | "t_surface_k" => Some(sixth),
                                "filling" => Some(source.0),
                                "t_continuum_k" => Some(source.1),
                                _ => None,
                            });
                        candidates.push(Candidate {
                            chi2: chi2 + thin_chi2,
                            parameters,
                        });
                    }
                }
            }
        }
    }
    distinct(candidates, layout)
}

/// Candidates of two Gaussians on either side of a centre, with the best amplitudes in both lines.
fn two_gaussians(
    layout: &Layout,
    scan: &mut Scan<'_>,
    about: Kinematics,
    candidates: &mut Vec<Candidate>,
) {
    for first in [-2.0, -1.3, -0.8, -0.4] {
        for second in [0.4, 0.8, 1.3, 2.0] {
            for factor in [0.3, 0.5, 0.9] {
                let sigma_km_s = factor * about.sigma_km_s;
                let [one, two] = [first, second].map(|shift| Kinematics {
                    v_km_s: about.v_km_s + shift * about.sigma_km_s,
                    sigma_km_s,
                });
                let (thick_chi2, peaks) = scan.two_gaussians(scan.thick, one, two);
                let (thin_chi2, thin_peaks) = scan.two_gaussians(scan.thin, one, two);
                let parameters =
                    layout_start(layout, scan.thin, one, thin_peaks.0, |name| match name {
                        "peak_k" => Some(peaks.0),
                        "peak_second_k" => Some(peaks.1),
                        "peak_second_thin_k" => Some(thin_peaks.1),
                        "v_second_km_s" | "v_second_thin_km_s" => Some(two.v_km_s),
                        "sigma_second_km_s" | "sigma_second_thin_km_s" => Some(sigma_km_s),
                        _ => None,
                    });
                candidates.push(Candidate {
                    chi2: thick_chi2 + thin_chi2,
                    parameters,
                });
            }
        }
    }
}

/// The best candidates that differ, the best first: neighbours of a better one would end in the same minimum. Both
/// signs of the inward speed are kept.
fn distinct(mut candidates: Vec<Candidate>, layout: &Layout) -> Vec<Vec<f64>> {
    candidates.sort_by(|one, other| one.chi2.total_cmp(&other.chi2));
    let position = |name: &str| layout.position(name);
    let (sigma, v_in, tau) = (
        position("sigma_km_s"),
        position("v_in_km_s"),
        position("tau"),
    );
    let value = |candidate: &Candidate, index: Option<usize>| {
        index.map_or(1.0, |index| candidate.parameters[index])
    };
    let same_sign =
        |one: &Candidate, other: &Candidate| (value(one, v_in) > 0.0) == (value(other, v_in) > 0.0);
    let near = |one: &Candidate, other: &Candidate| {
        let scale = value(one, sigma).max(value(other, sigma));
        same_sign(one, other)
            && (value(one, v_in) - value(other, v_in)).abs() < NEAR_SPEED * scale
            && (value(one, tau) / value(other, tau)).ln().abs() < NEAR_LOG
            && (value(one, sigma) / value(other, sigma)).ln().abs() < NEAR_LOG_SIGMA
    };
    let mut kept: Vec<Candidate> = Vec::new();
    for candidate in candidates {
        let of_its_sign = kept
            .iter()
            .filter(|other| same_sign(&candidate, other))
            .count();
        if of_its_sign < STARTS
            && !(v_in.is_some() && kept.iter().any(|other| near(&candidate, other)))
        {
            kept.push(candidate);
        }
    }
    kept.into_iter()
        .map(|candidate| candidate.parameters)
        .collect()
}

/// Candidates closer than this in `v_in`/sigma, ln tau and ln sigma are neighbours.
const NEAR_SPEED: f64 = 0.45;
const NEAR_LOG: f64 = 1.3;
const NEAR_LOG_SIGMA: f64 = 0.5;

/// Filling and temperature of the continuum source, as held or given; a weak one otherwise.
fn source(layout: &Layout) -> (f64, f64) {
    let given = |name: &str, otherwise: f64| {
        layout.position(name).map_or(otherwise, |index| {
            let parameter = &layout.parameters()[index];
            let held = parameter
                .interval
                .is_fixed()
                .then_some(parameter.interval.lower);
            held.or(parameter.prior.map(|prior| prior.value))
                .unwrap_or(otherwise)
        })
    };
    (given("filling", 0.1), given("t_continuum_k", 50.0))
}

/// Joint parameters: the model's own from `own`, shared and thin ones from the kinematics and the
/// thin line's peak, all moved inside their intervals.
pub(super) fn layout_start(
    layout: &Layout,
    thin: &Channels,
    kinematics: Kinematics,
    thin_peak_k: f64,
    own: impl Fn(&str) -> Option<f64>,
) -> Vec<f64> {
    const THIN_TAU: f64 = 0.5;
    let ratio = layout
        .position("isotope_ratio")
        .map(|index| &layout.parameters()[index])
        .map_or(50.0, |parameter| {
            parameter
                .prior
                .map_or(parameter.interval.nearest(50.0), |prior| prior.value)
        });
    let thin_tau = match (layout.position("isotope_ratio"), own("tau")) {
        (Some(_), Some(tau)) => 2.0 * tau / ratio,
        _ => THIN_TAU,
    };
    layout
        .parameters()
        .iter()
        .map(|parameter| {
            let value = own(parameter.name).unwrap_or_else(|| match parameter.name {
                "v_lsr_km_s" | "v_thin_km_s" => kinematics.v_km_s,
                "sigma_km_s" | "sigma_thin_km_s" => kinematics.sigma_km_s,
                "tau_thin" => THIN_TAU,
                "isotope_ratio" => ratio,
                "t_ex_thin_k" => excitation_k(thin.line(), thin_tau, thin_peak_k),
                _ => thin_peak_k,
            });
            let value = if let Some(prior) = parameter.prior {
                prior.value
            } else {
                value
            };
            parameter.interval.nearest(value)
        })
        .collect()
}

/// Excitation temperature of a layer of total optical depth `tau` whose strongest component is
/// `peak_k` high.
pub(super) fn excitation_k(line: &LineShape, tau: f64, peak_k: f64) -> f64 {
    let strongest = line
        .components
        .iter()
        .map(|component| component.weight)
        .fold(0.0, f64::max);
    let absorbed = -(-tau * strongest).exp_m1();
    line.radiation
        .inverse(line.radiation.background() + peak_k.max(0.0) / absorbed)
}

/// Scratch columns for the linear solutions.
pub(super) struct Scan<'a> {
    thick: &'a Channels,
    thin: &'a Channels,
    first: Vec<f64>,
    second: Vec<f64>,
}

impl<'a> Scan<'a> {
    pub(super) fn new(thick: &'a Channels, thin: &'a Channels) -> Self {
        let most = thick.len().max(thin.len());
        Self {
            thick,
            thin,
            first: vec![0.0; most],
            second: vec![0.0; most],
        }
    }

    /// chi2 of the thin line with the best amplitude, and that amplitude.
    pub(super) fn thin(&mut self, kinematics: Kinematics) -> (f64, f64) {
        one_gaussian(self.thin, kinematics, &mut self.first)
    }

    /// The same of the thick line.
    fn gaussian(&mut self, kinematics: Kinematics) -> (f64, f64) {
        one_gaussian(self.thick, kinematics, &mut self.first)
    }

    /// chi2 of a line with two Gaussians of the best amplitudes.
    fn two_gaussians(
        &mut self,
        line: &Channels,
        one: Kinematics,
        two: Kinematics,
    ) -> (f64, (f64, f64)) {
        let (first, second) = (
            &mut self.first[..line.len()],
            &mut self.second[..line.len()],
        );
        unit_gaussian(line, one, first);
        unit_gaussian(line, two, second);
        let solution = Amplitudes::of(line, first, second);
        let (a, b) = solution.non_negative();
        (solution.chi2(a, b), (a, b))
    }

    /// chi2 of the thick line's slab with the best amplitudes that temperatures allow, and those.
    fn slab(
        &mut self,
        model: Model,
        kinematics: Kinematics,
        v_in: f64,
        tau: f64,
        source: (f64, f64),
    ) -> (f64, f64, f64) {
        let channels = self.thick.len();
        let (first, second) = (&mut self.first[..channels], &mut self.second[..channels]);
        let line = self.thick.line();
        basis(
            model,
            line,
            self.thick.coarse_sampling(),
            [kinematics.v_km_s, kinematics.sigma_km_s, v_in, tau],
            first,
            second,
        );
        self.thick.whiten(first);
        self.thick.whiten(second);
        let solution = Amplitudes::of(self.thick, first, second);
        let (a, b) = match model {
            Model::Hill => (solution.first_alone().max(0.0), 0.0),
            Model::TwoLayerContinuum => {
                let radiation = &line.radiation;
                let shadow = source.0 * (radiation.at(source.1) - radiation.background());
                solution.with_sum_above(-shadow.max(0.0))
            }
            _ => solution.with_sum_above(0.0),
        };
        (solution.chi2(a, b), a, b)
    }
}

fn unit_gaussian(channels: &Channels, kinematics: Kinematics, column: &mut [f64]) {
    Model::Gaussian.evaluate(
        channels.line(),
        channels.coarse_sampling(),
        &[kinematics.v_km_s, kinematics.sigma_km_s, 1.0],
        column,
        None,
    );
    channels.whiten(column);
}

fn one_gaussian(channels: &Channels, kinematics: Kinematics, scratch: &mut [f64]) -> (f64, f64) {
    let column = &mut scratch[..channels.len()];
    unit_gaussian(channels, kinematics, column);
    let data = channels.whitened_data();
    let [square, product] = products(column, [column, data]);
    if square == 0.0 {
        return (channels.data_chi2(), 0.0);
    }
    (
        channels.data_chi2() - product * product / square,
        product / square,
    )
}

/// Normal equations of data = a first + b second.
struct Amplitudes {
    data: f64,
    first: f64,
    second: f64,
    both: f64,
    by_first: f64,
    by_second: f64,
}

impl Amplitudes {
    fn of(channels: &Channels, first: &[f64], second: &[f64]) -> Self {
        let data = channels.whitened_data();
        let [square, both, by_first] = products(first, [first, second, data]);
        let [second_square, by_second] = products(second, [second, data]);
        Self {
            data: channels.data_chi2(),
            first: square,
            second: second_square,
            both,
            by_first,
            by_second,
        }
    }

    fn chi2(&self, a: f64, b: f64) -> f64 {
        self.data - 2.0 * (a * self.by_first + b * self.by_second)
            + a * a * self.first
            + 2.0 * a * b * self.both
            + b * b * self.second
    }

    fn first_alone(&self) -> f64 {
        if self.first > 0.0 {
            self.by_first / self.first
        } else {
            0.0
        }
    }

    fn unconstrained(&self) -> Option<(f64, f64)> {
        let determinant = self.first * self.second - self.both * self.both;
        (determinant > 1e-12 * self.first * self.second).then(|| {
            (
                (self.by_first * self.second - self.by_second * self.both) / determinant,
                (self.by_second * self.first - self.by_first * self.both) / determinant,
            )
        })
    }

    fn best(&self, candidates: [(f64, f64); 2]) -> (f64, f64) {
        let [one, other] = candidates;
        if self.chi2(one.0, one.1) <= self.chi2(other.0, other.1) {
            one
        } else {
            other
        }
    }

    /// The best a, b >= 0.
    fn non_negative(&self) -> (f64, f64) {
        if let Some((a, b)) = self.unconstrained().filter(|(a, b)| *a >= 0.0 && *b >= 0.0) {
            return (a, b);
        }
        let second_alone = if self.second > 0.0 {
            self.by_second / self.second
        } else {
            0.0
        };
        self.best([
            (self.first_alone().max(0.0), 0.0),
            (0.0, second_alone.max(0.0)),
        ])
    }

    /// The best b >= 0 and a + b >= `least` (`least` <= 0).
    fn with_sum_above(&self, least: f64) -> (f64, f64) {
        if let Some((a, b)) = self
            .unconstrained()
            .filter(|(a, b)| *b >= 0.0 && a + b >= least)
        {
            return (a, b);
        }
        // on the edge a = least - b
        let square = self.first - 2.0 * self.both + self.second;
        let product = self.by_second - self.by_first + least * (self.first - self.both);
        let b = if square > 0.0 {
            (product / square).max(0.0)
        } else {
            0.0
        };
        self.best([(self.first_alone().max(least), 0.0), (least - b, b)])
    }
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
