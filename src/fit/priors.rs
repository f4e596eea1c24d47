//! What is assumed of a clump before its lines are looked at: one table of densities, used for
//! posteriors and for drawing simulated pairs alike.
//!
//! Weak, proper, in the units of the names, and replaceable one by one.

use rand::Rng;
use rand_distr::{Distribution, Exp1, StandardNormal};

/// A prior density of one number.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Prior {
    /// Normal about zero.
    Normal {
        /// Standard deviation.
        deviation: f64,
    },
    /// The logarithm is normal.
    LogNormal {
        /// Median.
        median: f64,
        /// Standard deviation of the natural logarithm.
        ln_deviation: f64,
    },
    /// exp(-x/mean)/mean for x >= 0.
    Exponential {
        /// Mean.
        mean: f64,
    },
}

/// ln sqrt(2 pi)
const LN_ROOT_TAU: f64 = 0.918_938_533_204_672_8;

impl Prior {
    /// Natural logarithm of the density at a value, minus infinity where it is zero.
    #[must_use]
    pub fn ln_density(&self, value: f64) -> f64 {
        match *self {
            Self::Normal { deviation } => {
                let z = value / deviation;
                -0.5 * z * z - deviation.ln() - LN_ROOT_TAU
            }
            Self::LogNormal { .. } if value <= 0.0 => f64::NEG_INFINITY,
            Self::LogNormal { .. } => self.ln_density_of_logarithm(value.ln()) - value.ln(),
            Self::Exponential { .. } if value < 0.0 => f64::NEG_INFINITY,
            Self::Exponential { mean } => -value / mean - mean.ln(),
        }
    }

    /// The same of the value's natural logarithm, per unit of that.
    #[must_use]
    pub fn ln_density_of_logarithm(&self, ln_value: f64) -> f64 {
        match *self {
            Self::LogNormal {
                median,
                ln_deviation,
            } => {
                let z = (ln_value - median.ln()) / ln_deviation;
                -0.5 * z * z - ln_deviation.ln() - LN_ROOT_TAU
            }
            _ => self.ln_density(ln_value.exp()) + ln_value,
        }
    }

    /// A draw.
    pub fn draw(&self, generator: &mut impl Rng) -> f64 {
        match *self {
            Self::Normal { deviation } => {
                let z: f64 = StandardNormal.sample(generator);
                deviation * z
            }
            Self::LogNormal {
                median,
                ln_deviation,
            } => {
                let z: f64 = StandardNormal.sample(generator);
                median * (ln_deviation * z).exp()
            }
            Self::Exponential { mean } => {
                let x: f64 = Exp1.sample(generator);
                mean * x
            }
        }
    }

    /// Where all but about a millionth of the mass lies.
    #[must_use]
    pub fn reach(&self) -> (f64, f64) {
        // of a normal density 4.9 deviations; of an exponential one ln of a million means
        match *self {
            Self::Normal { deviation } => (-4.9 * deviation, 4.9 * deviation),
            Self::LogNormal {
                median,
                ln_deviation,
            } => {
                let factor = (4.9 * ln_deviation).exp();
                (median / factor, median * factor)
            }
            Self::Exponential { mean } => (0.0, 13.8 * mean),
        }
    }

    /// Names of the numbers that describe the density, in order.
    #[must_use]
    pub fn numbers(&self) -> &'static [&'static str] {
        match self {
            Self::Normal { .. } => &["deviation"],
            Self::LogNormal { .. } => &["median", "deviation in ln"],
            Self::Exponential { .. } => &["mean"],
        }
    }

    /// The same density with other numbers, as many as [`Prior::numbers`]; `None` for more or fewer.
    #[must_use]
    pub fn with_numbers(&self, numbers: &[f64]) -> Option<Self> {
        Some(match (self, numbers) {
            (Self::Normal { .. }, [deviation]) => Self::Normal {
                deviation: *deviation,
            },
            (Self::LogNormal { .. }, [median, ln_deviation]) => Self::LogNormal {
                median: *median,
                ln_deviation: *ln_deviation,
            },
            (Self::Exponential { .. }, [mean]) => Self::Exponential { mean: *mean },
            _ => return None,
        })
    }

    /// The density in words, for tables.
    #[must_use]
    pub fn text(&self) -> String {
        match self {
            Self::Normal { deviation } => format!("normal about 0, deviation {deviation}"),
            Self::LogNormal {
                median,
                ln_deviation,
            } => format!("log-normal, median {median}, deviation {ln_deviation} in ln"),
            Self::Exponential { mean } => format!("exponential, mean {mean}"),
        }
    }

    fn same_kind(&self, other: &Self) -> bool {
        std::mem::discriminant(self) == std::mem::discriminant(other)
    }

    fn is_proper(&self) -> bool {
        let positive = |value: f64| value > 0.0 && value.is_finite();
        match *self {
            Self::Normal { deviation } => positive(deviation),
            Self::LogNormal {
                median,
                ln_deviation,
            } => positive(median) && positive(ln_deviation),
            Self::Exponential { mean } => positive(mean),
        }
    }
}

/// A row of the table of priors.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PriorRow {
    /// Name, unit included.
    pub name: &'static str,
    /// Its density.
    pub prior: Prior,
    /// What it is of, and why so.
    pub about: &'static str,
}

/// The table: every prior that posteriors and probabilities rest on, beside v_lsr (uniform over the
/// fitted velocities) and the noise levels s (1/s, made proper by the line-free channels).
pub const PRIORS: [PriorRow; 10] = [
    PriorRow {
        name: "sigma_km_s",
        prior: Prior::LogNormal {
            median: 0.6,
            ln_deviation: 0.8,
        },
        about: "velocity dispersion: 0.12 to 3 km/s in 95 %, quiet cores to massive clumps",
    },
    PriorRow {
        name: "v_in_over_sigma",
        prior: Prior::Normal { deviation: 1.0 },
        about: "inward speed over the dispersion, either sign: profiles depend on this ratio, and much faster motion would be the dispersion itself",
    },
    PriorRow {
        name: "tau",
        prior: Prior::LogNormal {
            median: 4.0,
            ln_deviation: 1.0,
        },
        about: "optical depth of one half: 0.6 to 28 in 95 %, for a line chosen as thick",
    },
    PriorRow {
        name: "excess_thick_k",
        prior: Prior::Exponential { mean: 8.0 },
        about: "each step of J(T) in the thick line: from the background to the front layer (surface, cloud), from there to the rear layer (middle), never down",
    },
    PriorRow {
        name: "peak_thin_k",
        prior: Prior::Exponential { mean: 2.0 },
        about: "peak of the thin line, of the front cloud in it",
    },
    PriorRow {
        name: "thin_width_ratio",
        prior: Prior::LogNormal {
            median: 1.08,
            ln_deviation: 0.1,
        },
        about: "dispersion of the thin line over sigma: an optical depth of 0.5 to 1 and the motion itself widen it by 6 to 13 %",
    },
    PriorRow {
        name: "separation_over_sigma",
        prior: Prior::Normal { deviation: 3.0 },
        about: "velocity of the rear cloud from the front one over the front one's dispersion: clouds of one line window",
    },
    PriorRow {
        name: "sigma_ratio",
        prior: Prior::LogNormal {
            median: 1.0,
            ln_deviation: 0.4,
        },
        about: "dispersion of the rear cloud over the front one's",
    },
    PriorRow {
        name: "tau_cloud",
        prior: Prior::LogNormal {
            median: 4.0,
            ln_deviation: 1.0,
        },
        about: "optical depth of two clouds in the thick line",
    },
    PriorRow {
        name: "thin_brightness_ratio",
        prior: Prior::LogNormal {
            median: 1.0,
            ln_deviation: 0.7,
        },
        about: "peak of the rear cloud in the thin line over the front one's: two clouds are those that both lines show",
    },
];

/// The priors of a run.
#[derive(Clone, Debug, PartialEq)]
pub struct Priors {
    rows: Vec<PriorRow>,
}

impl Default for Priors {
    fn default() -> Self {
        Self {
            rows: PRIORS.to_vec(),
        }
    }
}

/// Why a prior cannot be replaced.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum PriorError {
    /// No prior has the name.
    #[error("prior `{name}`, expected one of {known}")]
    Unknown {
        /// The name.
        name: String,
        /// The names there are.
        known: String,
    },
    /// Another kind of density.
    #[error("prior of {name}: {found}, expected the kind of `{expected}`")]
    Kind {
        /// The name.
        name: &'static str,
        /// What was given, in words.
        found: String,
        /// What the table holds, in words.
        expected: String,
    },
    /// A density whose numbers are not positive and finite.
    #[error("prior of {name}: {found}, expected positive numbers")]
    Improper {
        /// The name.
        name: &'static str,
        /// What was given, in words.
        found: String,
    },
}

impl PriorError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        Some(match self {
            Self::Unknown { .. } => "see the table of priors in docs/methods.md".to_owned(),
            Self::Kind { .. } => {
                "give the numbers of the same kind of density; the kind is part of the method"
                    .to_owned()
            }
            Self::Improper { .. } => "leave it out for the default".to_owned(),
        })
    }
}

impl Priors {
    /// The rows of the table.
    #[must_use]
    pub fn rows(&self) -> &[PriorRow] {
        &self.rows
    }

    /// The same with one density replaced by another of its kind.
    ///
    /// # Errors
    ///
    /// [`PriorError`] for an unknown name, another kind, or numbers that are not positive.
    pub fn with(mut self, name: &str, prior: Prior) -> Result<Self, PriorError> {
        let known = || {
            let names: Vec<&str> = PRIORS.iter().map(|row| row.name).collect();
            names.join(", ")
        };
        let row = self
            .rows
            .iter_mut()
            .find(|row| row.name == name)
            .ok_or_else(|| PriorError::Unknown {
                name: name.to_owned(),
                known: known(),
            })?;
        if !row.prior.same_kind(&prior) {
            return Err(PriorError::Kind {
                name: row.name,
                found: prior.text(),
                expected: row.prior.text(),
            });
        }
        if !prior.is_proper() {
            return Err(PriorError::Improper {
                name: row.name,
                found: prior.text(),
            });
        }
        row.prior = prior;
        Ok(self)
    }

    /// The density of a row of the table.
    ///
    /// # Panics
    ///
    /// For a name that the table does not hold.
    #[must_use]
    pub fn of(&self, name: &str) -> Prior {
        match self.rows.iter().find(|row| row.name == name) {
            Some(row) => row.prior,
            None => panic!("no prior of the name {name}"),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand_chacha::ChaCha8Rng;
    use rand_chacha::rand_core::SeedableRng;

    /// Densities integrate to one, and the share of draws below a value is the integral up to it.
    #[test]
    fn densities_are_normalised_and_draws_follow_them() {
        let mut generator = ChaCha8Rng::seed_from_u64(2);
        for row in PRIORS {
            let steps = 400_000;
            let (low, high) = (-80.0, 400.0);
            let width = (high - low) / f64::from(steps);
            let (mut total, mut below) = (0.0, 0.0);
            let draws: Vec<f64> = (0..20_000)
                .map(|_| row.prior.draw(&mut generator))
                .collect();
            let cut = draws[0];
            for step in 0..steps {
                let x = low + (f64::from(step) + 0.5) * width;
                let mass = row.prior.ln_density(x).exp() * width;
                total += mass;
                if x < cut {
                    below += mass;
                }
            }
            assert!((total - 1.0).abs() < 2e-3, "{}: {total}", row.name);
            let share = draws.iter().filter(|x| **x < cut).count() as f64 / 20_000.0;
            // four standard errors of a share
            assert!(
                (share - below).abs() < 0.015,
                "{}: {share} {below}",
                row.name
            );
        }
    }

    #[test]
    fn only_a_proper_density_of_the_same_kind_replaces_another() {
        let priors = Priors::default();
        let wider = Prior::Normal { deviation: 2.0 };
        let changed = priors.clone().with("v_in_over_sigma", wider).unwrap();
        assert_eq!(changed.of("v_in_over_sigma"), wider);
        let of = |name, prior| priors.clone().with(name, prior).unwrap_err();
        assert!(matches!(of("v_in", wider), PriorError::Unknown { .. }));
        assert!(matches!(of("tau", wider), PriorError::Kind { .. }));
        let none = Prior::Normal { deviation: 0.0 };
        assert!(matches!(
            of("v_in_over_sigma", none),
            PriorError::Improper { .. }
        ));
    }
}
