//! The joint least-squares problem with the amplitudes solved for: a search over velocities,
//! dispersions and optical depths alone.
//!
//! At every point the amplitudes of both lines take their best values inside their ranges, which is
//! exact and cheap (variable projection: Golub & Pereyra 1973, SIAM J. Numer. Anal. 10, 413); the
//! Jacobian is that of the profile with its part along the free functions taken out (Kaufman 1975,
//! BIT 15, 49). Gaussian priors on amplitudes bound their ranges; the full problem does the rest.

use super::amplitudes::Amplitudes;
use super::channels::Channels;
use super::joint::Layout;
use super::normal::{LineSums, Solved};
use super::workspace::LineBuffers;
use crate::model::{MOST_AMPLITUDES, Model};
use crate::numeric::Estimate;
use crate::numeric::least_squares::{
    Interval, Linearise, MAX_PARAMETERS, NormalEquations, Structure,
};

/// A prior's reach: its amplitude stays within so many standard errors.
const PRIOR_REACH: f64 = 3.0;

/// The problem over the nonlinear parameters of a layout.
#[derive(Debug)]
pub(super) struct Projected<'a> {
    layout: &'a Layout,
    /// Positions of the nonlinear parameters among the joint ones.
    nonlinear: Vec<usize>,
    /// What is subtracted from each: a velocity's zero is at the line, so that steps are as long as
    /// widths ask for, whatever the line's velocity.
    origins: Vec<f64>,
    /// The joint parameters last evaluated, but for their amplitudes.
    joint: Vec<f64>,
    priors: Vec<(usize, Estimate)>,
    thick: Option<Line<'a>>,
    thin: Line<'a>,
    sums: NormalEquations,
}

/// One line of the problem.
#[derive(Debug)]
struct Line<'a> {
    channels: &'a Channels,
    model: Model,
    /// Joint positions of the model's parameters.
    joint: &'a [usize],
    /// Positions, among the problem's parameters, of those that the line's residuals depend on.
    depends_on: Vec<usize>,
    /// Ranges of the amplitudes, and their best values where the problem was evaluated last, in units
    /// of the noise.
    ranges: [(f64, f64); MOST_AMPLITUDES],
    amplitudes: Amplitudes,
    buffers: LineBuffers,
}

impl<'a> Projected<'a> {
    /// The problem of a pair, or of the thin line alone where `thick` is `None`, near `joint`
    /// parameters, of which those that no line is linear in and none searches over are held.
    pub fn new(
        layout: &'a Layout,
        (thick, thin): (Option<&'a Channels>, &'a Channels),
        joint: &[f64],
        buffers: &mut [LineBuffers; 2],
    ) -> Self {
        let [of_thick, of_thin] = buffers.each_mut().map(std::mem::take);
        let mut nonlinear = Vec::with_capacity(MAX_PARAMETERS);
        let thick = thick.map(|channels| {
            let (model, map) = layout.thick_line();
            let line = (channels, model, map);
            Line::new(layout, line, None, &mut nonlinear, joint, of_thick)
        });
        let (model, map) = layout.thin_line();
        let ratio = layout.link().map(|(_, ratio)| ratio);
        let thin = Line::new(
            layout,
            (thin, model, map),
            ratio,
            &mut nonlinear,
            joint,
            of_thin,
        );
        let priors = nonlinear
            .iter()
            .enumerate()
            .filter_map(|(own, position)| Some((own, layout.parameters()[*position].prior?)))
            .collect();
        let origins: Vec<f64> = nonlinear
            .iter()
            .map(|position| {
                let name = layout.parameters()[*position].name;
                let is_velocity = name.starts_with("v_") && name != "v_in_km_s";
                if is_velocity { joint[*position] } else { 0.0 }
            })
            .collect();
        Self {
            layout,
            nonlinear,
            origins,
            joint: joint.to_vec(),
            priors,
            thick,
            thin,
            sums: NormalEquations::default(),
        }
    }

    /// The intervals of the problem's parameters.
    pub fn bounds(&self) -> Vec<Interval> {
        self.of_joint(|position, origin| {
            let Interval { lower, upper } = self.layout.parameters()[position].interval;
            Interval::new(lower - origin, upper - origin)
        })
    }

    /// The problem's parameters of joint ones.
    pub fn parameters_of(&self, joint: &[f64]) -> Vec<f64> {
        self.of_joint(|position, origin| joint[position] - origin)
    }

    /// Whether the two halves of the thick line have temperatures of their own.
    pub fn has_two_temperatures(&self) -> bool {
        let two = |line: &Line<'_>| line.model.has_infall() && line.model.linear().len() == 2;
        self.thick.as_ref().is_some_and(two)
    }

    /// Gives the buffers back.
    pub fn into_buffers(self) -> [LineBuffers; 2] {
        let of_thick = self.thick.map(|line| line.buffers).unwrap_or_default();
        [of_thick, self.thin.buffers]
    }

    /// Position of a joint parameter, by name, among the problem's.
    pub fn position_of(&self, name: &str) -> Option<usize> {
        let joint = self.layout.position(name)?;
        self.nonlinear
            .iter()
            .position(|position| *position == joint)
    }

    fn place(&mut self, parameters: &[f64]) {
        for ((position, origin), value) in self.nonlinear.iter().zip(&self.origins).zip(parameters)
        {
            self.joint[*position] = origin + value;
        }
    }

    /// chi2 and its derivatives with the amplitudes at their best.
    fn normal_equations(&mut self, parameters: &[f64]) -> &NormalEquations {
        self.place(parameters);
        let all = &mut self.sums;
        all.clear(self.nonlinear.len());
        let mut local = [0.0; MAX_PARAMETERS];
        if let Some(line) = &mut self.thick {
            for (value, position) in local.iter_mut().zip(line.joint) {
                *value = self.joint[*position];
            }
            let sums = line.sums(&local[..line.joint.len()]);
            for (p, own) in line.depends_on.iter().enumerate() {
                all.gradient[*own] += sums.gradient[p];
                for (q, other) in line.depends_on.iter().enumerate() {
                    all.gram[*own][*other] += sums.gram[p.min(q)][p.max(q)];
                }
            }
            all.chi2 += sums.chi2;
        }
        let line = &mut self.thin;
        let local = &mut local[..line.joint.len()];
        self.layout.thin_local(&self.joint, local);
        let sums = line.sums(local);
        all.chi2 += sums.chi2;
        // an own optical depth that is linked counts for tau and for the isotope ratio
        let chain = self.layout.link_slopes(&self.joint);
        let own = |column: usize| match (column, chain) {
            (2, Some((by_tau, _))) => (2, by_tau),
            (3, Some((_, by_ratio))) => (2, by_ratio),
            _ => (column, 1.0),
        };
        for (column, place) in line.depends_on.iter().enumerate() {
            let (p, factor) = own(column);
            all.gradient[*place] += factor * sums.gradient[p];
            for (other, other_place) in line.depends_on.iter().enumerate() {
                let (q, other_factor) = own(other);
                let product = sums.gram[p.min(q)][p.max(q)];
                all.gram[*place][*other_place] += factor * other_factor * product;
            }
        }
        for (place, prior) in &self.priors {
            let residual = (self.joint[self.nonlinear[*place]] - prior.value) / prior.err;
            all.chi2 += residual * residual;
            all.gradient[*place] += residual / prior.err;
            all.gram[*place][*place] += 1.0 / (prior.err * prior.err);
        }
        all
    }

    fn of_joint<T>(&self, value: impl Fn(usize, f64) -> T) -> Vec<T> {
        (self.nonlinear.iter().zip(&self.origins))
            .map(|(position, origin)| value(*position, *origin))
            .collect()
    }

    /// The joint parameters where the problem's parameters are these and the amplitudes are at their
    /// best, inside their intervals.
    pub fn settled(&mut self, parameters: &[f64]) -> Vec<f64> {
        self.normal_equations(parameters);
        let mut joint = self.joint.clone();
        for line in self.thick.iter().chain([&self.thin]) {
            let local: Vec<f64> = line.joint.iter().map(|position| joint[*position]).collect();
            let shape = line.channels.line();
            for (k, own) in line.model.linear().iter().enumerate() {
                let amplitude_k = line.amplitudes[k] * line.channels.noise_k();
                let value = line.model.value_at_amplitude(shape, &local, k, amplitude_k);
                let position = line.joint[*own];
                joint[position] = self.layout.parameters()[position].interval.nearest(value);
            }
        }
        joint
    }
}

impl<'a> Line<'a> {
    fn new(
        layout: &Layout,
        (channels, model, map): (&'a Channels, Model, &'a [usize]),
        ratio: Option<usize>,
        nonlinear: &mut Vec<usize>,
        joint: &[f64],
        mut buffers: LineBuffers,
    ) -> Self {
        let own = model.nonlinear().iter().map(|own| map[*own]).chain(ratio);
        let depends_on: Vec<usize> = own
            .map(|position| {
                let known = nonlinear.iter().position(|other| *other == position);
                known.unwrap_or_else(|| {
                    nonlinear.push(position);
                    nonlinear.len() - 1
                })
            })
            .collect();
        let numbers = model.linear().len() * channels.len();
        buffers.functions.resize(numbers, 0.0);
        buffers.parts.resize(model.parts(channels.sampling()), 0.0);
        buffers
            .slopes
            .resize(model.nonlinear().len() * channels.len(), 0.0);
        buffers.residuals.resize(channels.len(), 0.0);
        Self {
            channels,
            model,
            joint: map,
            depends_on,
            ranges: amplitude_ranges(layout, channels, (model, map), joint),
            amplitudes: [0.0; MOST_AMPLITUDES],
            buffers,
        }
    }

    /// The sums at local parameters.
    fn sums(&mut self, local: &[f64]) -> LineSums {
        let LineBuffers {
            functions,
            parts,
            slopes,
            residuals,
        } = &mut self.buffers;
        let (channels, model) = (self.channels, self.model);
        let (line, sampling) = (channels.line(), channels.sampling());
        model.functions(line, sampling, local, functions, Some(parts));
        // white as the data are
        channels.decorrelate(functions);
        let solved = Solved::new(channels.whitened_data(), functions, &self.ranges);
        self.amplitudes = solved.amplitudes();
        model.slopes(local, self.amplitudes, parts, slopes);
        channels.decorrelate(slopes);
        solved.sums(slopes, residuals)
    }
}

impl Linearise for Projected<'_> {
    fn sizes(&self) -> (usize, usize) {
        let thick = self.thick.as_ref().map_or(0, |line| line.channels.len());
        let residuals = thick + self.thin.channels.len() + self.priors.len();
        (residuals, self.nonlinear.len())
    }

    fn storage(&self) -> Structure {
        Structure::new(&[])
    }

    fn linearise(
        &mut self,
        parameters: &[f64],
        _: &mut [f64],
        _: &mut [f64],
    ) -> Option<&NormalEquations> {
        Some(self.normal_equations(parameters))
    }
}

/// Ranges of a line's amplitudes, in units of the noise, from the intervals and priors of its
/// parameters; (0, 0) of a function that it has not. `joint` gives what else amplitudes depend on.
pub(super) fn amplitude_ranges(
    layout: &Layout,
    channels: &Channels,
    (model, map): (Model, &[usize]),
    joint: &[f64],
) -> [(f64, f64); MOST_AMPLITUDES] {
    let local: Vec<f64> = map.iter().map(|position| joint[*position]).collect();
    let mut ranges = [(0.0, 0.0); MOST_AMPLITUDES];
    for (k, (range, own)) in ranges.iter_mut().zip(model.linear()).enumerate() {
        let parameter = &layout.parameters()[map[*own]];
        let Interval { lower, upper } = parameter.interval;
        let (low, high) = parameter.prior.map_or((lower, upper), |prior| {
            let reach = PRIOR_REACH * prior.err;
            let inside = |value: f64| value.clamp(lower, upper);
            (inside(prior.value - reach), inside(prior.value + reach))
        });
        let amplitude =
            |value| model.amplitude_k(channels.line(), &local, k, value) / channels.noise_k();
        *range = (amplitude(low), amplitude(high));
    }
    ranges
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fit::{Averaging, FitSettings};
    use crate::line::{Component, Line as SpectralLine, find};
    use crate::model::LineShape;
    use crate::numeric::Autoregression;
    use crate::prepare::Prepared;
    use crate::spectrum::{Noise, Spectrum, Window};

    fn channels(line: &SpectralLine, process: Autoregression, count: i32) -> Channels {
        let velocity: Vec<f64> = (0..count).map(|i| 0.1 * f64::from(i - count / 2)).collect();
        let temperature = velocity
            .iter()
            .map(|v| (-v * v).exp() * (1.0 + 0.3 * v) + 0.05 * (37.0 * v).sin())
            .collect();
        let channels = velocity.len();
        let prepared = Prepared::as_given(
            Spectrum::new(velocity, vec![0.1; channels], temperature).unwrap(),
            Window {
                low_km_s: -2.0,
                high_km_s: 2.0,
            },
            Noise {
                rms_k: 0.05,
                channels,
                process,
            },
        );
        let shape = LineShape::new(line.rest_frequency_ghz, line.components.clone());
        Channels::new(&prepared, shape, None, Averaging::Channel, 0.2)
    }

    fn joint_at(layout: &Layout) -> Vec<f64> {
        let value = |name: &str| match name {
            "v_lsr_km_s" => 0.1,
            "v_second_km_s" => 0.8,
            "v_in_km_s" => 0.2,
            "sigma_km_s" | "sigma_second_km_s" => 0.6,
            "tau" => 2.5,
            "isotope_ratio" => 45.0,
            _ => 1.5,
        };
        let parameters = layout.parameters().iter();
        parameters.map(|parameter| value(parameter.name)).collect()
    }

    fn dot(a: &[f64], b: &[f64]) -> f64 {
        a.iter().zip(b).map(|(a, b)| a * b).sum()
    }

    fn subtract(column: &mut [f64], factor: f64, other: &[f64]) {
        for (value, other) in column.iter_mut().zip(other) {
            *value -= factor * other;
        }
    }

    /// Residuals of a line where it was evaluated last, and their slopes by its nonlinear parameters
    /// without the part along the free functions.
    fn residuals_and_slopes(line: &Line<'_>) -> (Vec<f64>, Vec<Vec<f64>>) {
        let channels = line.channels.len();
        let LineBuffers {
            functions, slopes, ..
        } = &line.buffers;
        let functions: Vec<&[f64]> = functions.chunks_exact(channels).collect();
        let with_amplitudes = |columns: &[f64]| -> Vec<f64> {
            let mut sum = vec![0.0; channels];
            for (amplitude, column) in line.amplitudes.iter().zip(columns.chunks_exact(channels)) {
                subtract(&mut sum, -amplitude, column);
            }
            sum
        };
        let mut residuals = with_amplitudes(&line.buffers.functions);
        subtract(&mut residuals, 1.0, line.channels.whitened_data());
        // an orthonormal basis of the free functions
        let mut basis: Vec<Vec<f64>> = Vec::new();
        for (k, function) in functions.iter().enumerate() {
            let (low, high) = line.ranges[k];
            if line.amplitudes[k] <= low || line.amplitudes[k] >= high {
                continue;
            }
            let mut own = function.to_vec();
            for other in &basis {
                let along = dot(&own, other);
                subtract(&mut own, along, other);
            }
            let norm = dot(&own, &own).sqrt();
            for value in &mut own {
                *value /= norm;
            }
            basis.push(own);
        }
        let slopes = slopes.chunks_exact(channels).map(|column| {
            let mut column = column.to_vec();
            for other in &basis {
                let along = dot(&column, other);
                subtract(&mut column, along, other);
            }
            column
        });
        (residuals, slopes.collect())
    }

    /// chi2, J^T r and J^T J of the residuals and the Jacobian written out.
    fn explicit_sums(problem: &mut Projected<'_>, at: &[f64]) -> NormalEquations {
        problem.normal_equations(at);
        let mut sums = NormalEquations::default();
        let mut add = |residuals: &[f64], columns: &[(usize, Vec<f64>)]| {
            sums.chi2 += dot(residuals, residuals);
            for (i, column) in columns {
                sums.gradient[*i] += dot(column, residuals);
                for (j, other) in columns {
                    sums.gram[*i][*j] += dot(column, other);
                }
            }
        };
        for line in problem.thick.iter().chain([&problem.thin]) {
            let (residuals, mut slopes) = residuals_and_slopes(line);
            // the thin line's optical depth is 2 tau / ratio
            if line.depends_on.len() > slopes.len() {
                let (tau, ratio) = problem.layout.link().unwrap();
                let (tau, ratio) = (problem.joint[tau], problem.joint[ratio]);
                let by_ratio = slopes[2]
                    .iter()
                    .map(|slope| -2.0 * tau / (ratio * ratio) * slope);
                slopes.push(by_ratio.collect());
                for slope in &mut slopes[2] {
                    *slope *= 2.0 / ratio;
                }
            }
            let columns: Vec<(usize, Vec<f64>)> =
                line.depends_on.iter().copied().zip(slopes).collect();
            add(&residuals, &columns);
        }
        for (own, prior) in &problem.priors {
            let residual = (problem.joint[problem.nonlinear[*own]] - prior.value) / prior.err;
            add(&[residual], &[(*own, vec![1.0 / prior.err])]);
        }
        sums
    }

    /// Sums in one pass are those of the residuals and the Jacobian, and the gradient is that of chi2.
    #[test]
    fn normal_equations_are_those_of_residuals_and_jacobian() {
        let reach = Interval::new(-3.0, 3.0);
        let linked = FitSettings {
            isotope_ratio: Some(Estimate {
                value: 50.0,
                err: 10.0,
            }),
            ..FitSettings::default()
        };
        let single = find("HCO+ 1-0").unwrap();
        let triplet = SpectralLine {
            components: vec![
                Component {
                    offset_km_s: -0.5,
                    weight: 0.4,
                },
                Component {
                    offset_km_s: 0.3,
                    weight: 0.6,
                },
            ],
            ..single.clone()
        };
        for (thick_model, thin_model, settings) in [
            (Model::TwoLayer, Model::Gaussian, FitSettings::default()),
            (Model::Hill, Model::Layer, linked.clone()),
            (Model::HillSurface, Model::Layer, linked),
            (Model::Layer, Model::Gaussian, FitSettings::default()),
            (
                Model::TwoGaussians,
                Model::TwoGaussians,
                FitSettings::default(),
            ),
        ] {
            for (count, process) in [
                (83, Autoregression::white()),
                (64, Autoregression::from_reflections(&[0.5, -0.2])),
            ] {
                let thick = channels(&triplet, process.clone(), count);
                let thin = channels(&single, process, 61);
                let layout = Layout::new(thick_model, thin_model, &settings, reach).unwrap();
                let joint = joint_at(&layout);
                let mut buffers = [LineBuffers::default(), LineBuffers::default()];
                let mut problem =
                    Projected::new(&layout, (Some(&thick), &thin), &joint, &mut buffers);
                let at = problem.parameters_of(&joint);
                let NormalEquations {
                    chi2,
                    gradient,
                    gram,
                } = explicit_sums(&mut problem, &at);
                let sums = *problem.normal_equations(&at);
                assert!((sums.chi2 / chi2 - 1.0).abs() < 1e-12);
                for i in 0..at.len() {
                    let scale = gram[i][i].sqrt();
                    assert!(
                        (sums.gradient[i] - gradient[i]).abs() < 1e-9 * scale * chi2.sqrt(),
                        "{thick_model:?} gradient {i}: {} and {}",
                        sums.gradient[i],
                        gradient[i]
                    );
                    for j in 0..at.len() {
                        let scale = scale * gram[j][j].sqrt();
                        assert!((sums.gram[i][j] - gram[i][j]).abs() < 1e-9 * scale);
                    }
                    let step = 1e-5;
                    let mut chi2_at = |shift: f64| {
                        let mut moved = at.clone();
                        moved[i] += shift;
                        problem.normal_equations(&moved).chi2
                    };
                    let slope = (chi2_at(step) - chi2_at(-step)) / (2.0 * step);
                    let expected = 2.0 * sums.gradient[i];
                    assert!(
                        (slope - expected).abs()
                            < 1e-4 * (slope.abs() + scale * chi2.sqrt() * 1e-3),
                        "{thick_model:?} parameter {i}: {slope} and {expected}"
                    );
                }
            }
        }
    }
}
