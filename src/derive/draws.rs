//! Values with draws: of what is given, and of what a fit says.

use super::DeriveError;
use super::source::{Input, Law, SourceProperties};
use crate::constants::FWHM_PER_SIGMA;
use crate::fit::ModelFit;
use crate::fit::averaged::{Averaged, Row};
use crate::fit::clump::ClumpPosterior;
use crate::line::Line;
use crate::measure::ThinLine;
use crate::model::RadiationTemperature;
use crate::numeric::Estimate;
use crate::numeric::robust::median;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use rand_distr::{Distribution, StandardNormal};

/// How results are sampled.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct DeriveSettings {
    /// Draws behind each interval.
    pub draws: usize,
    /// Seed of the draws.
    pub seed: u64,
}

/// Draws unless the user says otherwise: the ends of 68 % intervals are then uncertain by 3.4 % of a
/// standard deviation, those of 95 % intervals by 6 %.
pub const DEFAULT_DRAWS: usize = 2000;

/// Fewest and most draws.
pub const DRAWS_LIMITS: (usize, usize) = (100, 1_000_000);

impl Default for DeriveSettings {
    fn default() -> Self {
        Self {
            draws: DEFAULT_DRAWS,
            seed: 0,
        }
    }
}

impl DeriveSettings {
    /// Refuses a number of draws outside [`DRAWS_LIMITS`].
    ///
    /// # Errors
    ///
    /// [`DeriveError::Draws`].
    pub fn check(&self) -> Result<(), DeriveError> {
        if (DRAWS_LIMITS.0..=DRAWS_LIMITS.1).contains(&self.draws) {
            Ok(())
        } else {
            Err(DeriveError::Draws { found: self.draws })
        }
    }
}

/// A quantity's value and its draws.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Drawn {
    pub value: f64,
    /// Empty for one without error.
    draws: Vec<f64>,
}

impl Drawn {
    /// A draw; the value where no row is named.
    pub(super) fn at(&self, row: Option<usize>) -> f64 {
        row.and_then(|row| self.draws.get(row))
            .copied()
            .unwrap_or(self.value)
    }
}

/// Joint draws of what a fit determines: one column a parameter, one row a draw.
///
/// Columns bear the names of the fit's parameters (`v_in_km_s`, `sigma_km_s`, `tau`, ...). Each has the
/// value that is reported beside its draws. Correlations are those of the rows, so samples of a
/// posterior are put in as they are, by [`FitDraws::with`].
#[derive(Clone, Debug, PartialEq)]
pub struct FitDraws {
    rows: usize,
    columns: Vec<(String, Drawn)>,
}

/// Parameters of fits that something is derived from.
const USED: [&str; 14] = [
    "v_in_km_s",
    "sigma_km_s",
    "sigma_thin_km_s",
    "tau",
    "tau_total",
    "tau_thin",
    "t_ex_k",
    "t_ex_thin_k",
    "t_front_k",
    "t_rear_k",
    "t_peak_k",
    "t_surface_k",
    "peak_thin_k",
    "isotope_ratio",
];

/// First stream of the inputs. Far from the streams that others draw from with the same seed: a
/// posterior sampled on one of these would be correlated with the distance.
const INPUT_STREAMS: u64 = 0x6465_7269_7665_0000;

/// Stream of a fit's first parameter; those of the inputs stand below.
const FIT_STREAMS: u64 = INPUT_STREAMS + 64;

impl FitDraws {
    /// No column yet, for as many draws.
    #[must_use]
    pub fn new(rows: usize) -> Self {
        Self {
            rows,
            columns: Vec::new(),
        }
    }

    /// With a parameter's value and draws.
    ///
    /// ```
    /// let draws = inrush::derive::FitDraws::new(3).with("v_in_km_s", 0.3, vec![0.28, 0.31, 0.33])?;
    /// assert_eq!(draws.value("v_in_km_s"), Some(0.3));
    /// # Ok::<(), inrush::derive::DeriveError>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`DeriveError::Ragged`] where the draws are not as many as the rows.
    pub fn with(mut self, name: &str, value: f64, draws: Vec<f64>) -> Result<Self, DeriveError> {
        if draws.len() != self.rows {
            return Err(DeriveError::Ragged {
                name: name.to_owned(),
                found: draws.len(),
                expected: self.rows,
            });
        }
        self.columns.push((name.to_owned(), Drawn { value, draws }));
        Ok(self)
    }

    /// The parameters that are used of a least-squares fit, with independent formal errors: `v_in_km_s` and the
    /// velocities normal, what is positive log-normal. A parameter without an error (held, or at a
    /// bound) keeps its value.
    #[must_use]
    pub fn formal(fit: &ModelFit, settings: &DeriveSettings) -> Self {
        let mut made = Self::new(settings.draws);
        for parameter in fit.parameters.iter().filter(|one| USED.contains(&one.name)) {
            let estimate = Estimate {
                value: parameter.value,
                err: parameter.err.unwrap_or(0.0),
            };
            made.push(parameter.name, estimate, settings.seed);
        }
        made
    }

    /// Joint draws of a posterior averaged over models, each parameter with its median as its value. The
    /// speed is left out where `with_speed` is false.
    ///
    /// A model's halves become `t_front_k` and `t_rear_k`: of a hill, both at the mean of J over a half.
    /// `sigma_thin_km_s` is that of the thin line.
    #[must_use]
    pub fn of_posterior(
        averaged: &Averaged<'_>,
        thick: &Line,
        with_speed: bool,
        settings: &DeriveSettings,
    ) -> Self {
        let radiation = RadiationTemperature::new(thick.rest_frequency_ghz);
        let half_of_hill = |row: &Row<'_>| {
            let surface = row.get("t_surface_k").map(|t| radiation.at(t));
            let surface = surface.unwrap_or(radiation.background());
            let mean = 0.5 * (radiation.at(row.get("t_peak_k")?) + surface);
            Some(radiation.inverse(mean))
        };
        let rows: Vec<Row<'_>> = averaged.rows(settings.draws).collect();
        let mut made = Self::new(rows.len());
        let mut put = |name: &str, value: &dyn Fn(&Row<'_>) -> Option<f64>| {
            let Some(draws) = rows.iter().map(value).collect::<Option<Vec<f64>>>() else {
                return;
            };
            let value = match averaged.marginal(name) {
                Some(marginal) => marginal.median,
                None => median(&draws),
            };
            made.columns.push((name.to_owned(), Drawn { value, draws }));
        };
        for name in [
            "v_in_km_s",
            "sigma_km_s",
            "tau",
            "peak_thin_k",
            "isotope_ratio",
            "t_ex_thin_k",
        ] {
            if with_speed || name != "v_in_km_s" {
                put(name, &|row| row.get(name));
            }
        }
        put("sigma_thin_km_s", &|row| {
            Some(row.get("sigma_km_s")? * row.get("thin_width_ratio")?)
        });
        for name in ["t_front_k", "t_rear_k"] {
            put(name, &|row| row.get(name).or_else(|| half_of_hill(row)));
        }
        made
    }

    /// The same with speed and dispersion of a sphere: `v_in_km_s` in the place of the slabs', and
    /// `sigma_gas_km_s`, that of the gas, beside theirs. Depths and temperatures stay those of the slabs.
    /// The speed is left out where `with_speed` is false.
    #[must_use]
    pub fn with_sphere(
        mut self,
        sphere: &ClumpPosterior,
        with_speed: bool,
        settings: &DeriveSettings,
    ) -> Self {
        let draws = sphere.speeds_and_dispersions(self.rows, settings.seed);
        let (speeds, dispersions): (Vec<f64>, Vec<f64>) = draws.into_iter().unzip();
        self.columns.retain(|(name, _)| name != "v_in_km_s");
        let mut put = |name: &str, of: &str, draws: Vec<f64>| {
            let value = sphere.physical(of).map_or(f64::NAN, |one| one.median);
            self.columns.push((name.to_owned(), Drawn { value, draws }));
        };
        if with_speed {
            put("v_in_km_s", "v_in_km_s", speeds);
        }
        put("sigma_gas_km_s", "sigma_km_s", dispersions);
        self
    }

    /// Dispersion and peak of the thin line's own fit alone, where no model describes the pair.
    #[must_use]
    pub fn of_thin_line(line: &ThinLine, settings: &DeriveSettings) -> Self {
        let mut made = Self::new(settings.draws);
        let dispersion = Estimate {
            value: line.fwhm_km_s.value / FWHM_PER_SIGMA,
            err: line.fwhm_km_s.err / FWHM_PER_SIGMA,
        };
        made.push("sigma_km_s", dispersion, settings.seed);
        made.push("peak_thin_k", line.peak_k, settings.seed);
        made
    }

    /// Draws of one row.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// The reported value of a parameter.
    #[must_use]
    pub fn value(&self, name: &str) -> Option<f64> {
        self.column(name).map(|column| column.value)
    }

    pub(super) fn column(&self, name: &str) -> Option<&Drawn> {
        let named = self.columns.iter().find(|(own, _)| own == name);
        named.map(|(_, column)| column)
    }

    fn push(&mut self, name: &str, estimate: Estimate, seed: u64) {
        let either_sign = name.starts_with("v_") || name.starts_with("peak_");
        // a stream for each name: another model's parameters leave the others as they are
        let place = USED
            .iter()
            .position(|used| *used == name)
            .unwrap_or(USED.len());
        let stream = FIT_STREAMS + place as u64;
        let draws = if estimate.err == 0.0 {
            Vec::new()
        } else if either_sign || estimate.value <= 0.0 {
            let normal = |z: f64| estimate.value + estimate.err * z;
            deviates(seed, stream).take(self.rows).map(normal).collect()
        } else {
            log_normal(estimate, seed, stream, self.rows)
        };
        let drawn = Drawn {
            value: estimate.value,
            draws,
        };
        self.columns.push((name.to_owned(), drawn));
    }
}

/// Unit normal deviates of a stream.
fn deviates(seed: u64, stream: u64) -> impl Iterator<Item = f64> {
    let mut generator = ChaCha8Rng::seed_from_u64(seed);
    generator.set_stream(stream);
    std::iter::repeat_with(move || StandardNormal.sample(&mut generator))
}

/// Draws of a positive quantity: log-normal with its value as mean and its error as standard deviation.
///
/// ln x is normal with variance s^2 = ln(1 + (err/value)^2) and mean ln(value) - s^2/2.
fn log_normal(given: Estimate, seed: u64, stream: u64, rows: usize) -> Vec<f64> {
    let variance = (given.err / given.value).powi(2).ln_1p();
    let (centre, width) = (given.value.ln() - 0.5 * variance, variance.sqrt());
    deviates(seed, stream)
        .take(rows)
        .map(|z| (centre + width * z).exp())
        .collect()
}

/// Draws of every input that is given, a stream each: adding one leaves the others as they are.
pub(super) fn draw_source(
    source: &SourceProperties,
    seed: u64,
    rows: usize,
) -> [Option<Drawn>; Input::ALL.len()] {
    let own = |input: Input| -> Option<Drawn> {
        let given = source.get(input)?;
        let facts = input.facts();
        let stream = INPUT_STREAMS + input.index() as u64;
        let draws = if given.err == 0.0 {
            Vec::new()
        } else if facts.law == Law::LogNormal {
            log_normal(given, seed, stream, rows)
        } else {
            let (low, high) = facts.limits;
            deviates(seed, stream)
                .map(|z| given.value + given.err * z)
                .filter(|value| (low..high).contains(value))
                .take(rows)
                .collect()
        };
        Some(Drawn {
            value: given.value,
            draws,
        })
    };
    let distance = own(Input::Distance);
    Input::ALL.map(|input| {
        let drawn = own(input)?;
        let power = input.distance_power();
        let Some(distance) = distance.as_ref().filter(|_| input != Input::Distance) else {
            return Some(drawn);
        };
        if power == 0 || distance.draws.is_empty() {
            return Some(drawn);
        }
        let moved =
            |row| drawn.at(Some(row)) * (distance.at(Some(row)) / distance.value).powi(power);
        Some(Drawn {
            value: drawn.value,
            draws: (0..rows).map(moved).collect(),
        })
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn moments(draws: &[f64]) -> (f64, f64) {
        let mean = draws.iter().sum::<f64>() / draws.len() as f64;
        let square = draws.iter().map(|x| (x - mean).powi(2)).sum::<f64>() / draws.len() as f64;
        (mean, square.sqrt())
    }

    fn source(inputs: &[(Input, f64, f64)]) -> SourceProperties {
        let mut source = SourceProperties::default();
        for (input, value, err) in inputs.iter().copied() {
            source.set(input, Estimate { value, err }).unwrap();
        }
        source
    }

    #[test]
    fn positive_inputs_stay_positive_with_the_given_mean_and_error() {
        for (value, err) in [(350.0, 90.0), (350.0, 350.0)] {
            let drawn = draw_source(&source(&[(Input::Mass, value, err)]), 7, 400_000);
            let draws = &drawn[Input::Mass.index()].as_ref().unwrap().draws;
            let (mean, deviation) = moments(draws);
            assert!(draws.iter().all(|mass| *mass > 0.0));
            // 400,000 draws: mean to 0.3 %, a deviation of such skewness to 2 %
            assert!((mean / value - 1.0).abs() < 5e-3, "{mean}");
            assert!((deviation / err - 1.0).abs() < 3e-2, "{deviation}");
        }
    }

    #[test]
    fn slopes_stay_where_masses_are_finite() {
        let drawn = draw_source(&source(&[(Input::Slope, 2.9, 0.8)]), 7, 10_000);
        let draws = &drawn[Input::Slope.index()].as_ref().unwrap().draws;
        assert_eq!(draws.len(), 10_000);
        assert!(draws.iter().all(|slope| (0.0..3.0).contains(slope)));
    }

    #[test]
    fn one_distance_moves_radius_mass_and_density_together() {
        let exact = [
            (Input::Distance, 2.0, 0.3),
            (Input::Radius, 0.4, 0.0),
            (Input::Mass, 500.0, 0.0),
            (Input::Density, 1e4, 0.0),
            (Input::Kinetic, 15.0, 0.0),
        ];
        let drawn = draw_source(&source(&exact), 3, 50);
        let at = |input: Input, row| drawn[input.index()].as_ref().unwrap().at(Some(row));
        for row in 0..50 {
            let factor = at(Input::Distance, row) / 2.0;
            assert!((at(Input::Radius, row) / (0.4 * factor) - 1.0).abs() < 1e-14);
            assert!((at(Input::Mass, row) / (500.0 * factor * factor) - 1.0).abs() < 1e-14);
            assert!((at(Input::Density, row) * factor / 1e4 - 1.0).abs() < 1e-14);
            assert_eq!(at(Input::Kinetic, row), 15.0);
        }
        assert_ne!(at(Input::Radius, 0), at(Input::Radius, 1));
    }

    #[test]
    fn another_input_leaves_the_draws_of_the_first_as_they_are() {
        let alone = draw_source(&source(&[(Input::Mass, 350.0, 90.0)]), 7, 100);
        let beside = [(Input::Radius, 0.3, 0.03), (Input::Mass, 350.0, 90.0)];
        let both = draw_source(&source(&beside), 7, 100);
        assert_eq!(alone[Input::Mass.index()], both[Input::Mass.index()]);
    }
}
