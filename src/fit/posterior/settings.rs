//! How posteriors are found, and what is wrong with settings.

use super::family::Family;
use crate::fit::priors::Priors;
use crate::fit::{Averaging, FitRange};
use crate::model::Model;
use crate::numeric::Estimate;
use crate::numeric::sampling::ImportanceSettings;
use std::collections::BTreeMap;

/// How posteriors are found.
#[derive(Clone, Debug, PartialEq)]
pub struct PosteriorSettings {
    /// Slab models; each moving and at rest.
    pub models: Vec<Model>,
    /// Whether families that hypotheses need beside the moving models are sampled too.
    pub hypotheses: bool,
    /// Priors.
    pub priors: Priors,
    /// Bounds of v_lsr_km_s, sigma_km_s, v_in_km_s and tau by name: priors end there. They do not hold
    /// for two clouds, which have other parameters.
    pub bounds: BTreeMap<String, (f64, f64)>,
    /// The same parameters as given: held where the error is 0, else a normal prior in the place of the
    /// table's.
    pub given: BTreeMap<String, Estimate>,
    /// Links the optical depths of slabs: the thin line's is 2 tau over this ratio; held where its error
    /// is 0, else log-normal about the value.
    pub isotope_ratio: Option<Estimate>,
    /// Relative error of each line's calibration, such as that of its main-beam efficiency: thick,
    /// thin.
    pub calibration_error: (f64, f64),
    /// Velocities whose channels hold the line; `None` takes the line windows and as much again on
    /// either side.
    pub range: Option<FitRange>,
    /// Standard deviation of the shape errors over the line's peak.
    pub shape_error: f64,
    /// How the model's value in a channel is formed.
    pub averaging: Averaging,
    /// How much is drawn.
    pub sampling: ImportanceSettings,
    /// Equal-weight draws that are kept of each family.
    pub draws: usize,
    /// Seed of all draws.
    pub seed: u64,
}

/// Departure of clouds from every family's profile, over the peak.
pub const SHAPE_ERROR: f64 = 0.03;

impl Default for PosteriorSettings {
    fn default() -> Self {
        Self {
            models: vec![Model::TwoLayer, Model::Hill],
            hypotheses: true,
            priors: Priors::default(),
            bounds: BTreeMap::new(),
            given: BTreeMap::new(),
            isotope_ratio: None,
            calibration_error: (0.0, 0.0),
            range: None,
            shape_error: SHAPE_ERROR,
            averaging: Averaging::Channel,
            sampling: ImportanceSettings::default(),
            draws: 500,
            seed: 1,
        }
    }
}

/// Why there is no posterior.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum PosteriorError {
    /// No draws are asked for.
    #[error("{draws} draws, expected at least {least}")]
    TooFewDraws {
        /// Draws asked for.
        draws: usize,
        /// Fewest that intervals need.
        least: usize,
    },
    /// No slab model, or one without a posterior.
    #[error("posterior of the {model} model, expected some of two-layer, hill, hill-surface")]
    NoPosterior {
        /// Name of the model; `no` where none was given.
        model: &'static str,
    },
    /// Bounds or a given value of something that is no coordinate of a posterior.
    #[error(
        "bounds or a value of {name} in a posterior, expected those of v_lsr_km_s, sigma_km_s, v_in_km_s or tau"
    )]
    NotConstrained {
        /// The name.
        name: String,
    },
    /// Bounds or given values that make no density.
    #[error("{name}: {found}, expected {expected}")]
    Improper {
        /// What of.
        name: String,
        /// The numbers.
        found: String,
        /// What they should be.
        expected: &'static str,
    },
    /// A shape error, or an error of the calibration, that is no small positive share.
    #[error("{name} of {value}, expected a share from 0 to below 1")]
    NoShare {
        /// Which setting.
        name: &'static str,
        /// Its value.
        value: f64,
    },
    /// An isotope ratio that is none.
    #[error(
        "isotope ratio {value} with error {err}, expected a positive number and an error of at least 0"
    )]
    IsotopeRatio {
        /// The ratio.
        value: f64,
        /// Its error.
        err: f64,
    },
    /// Too few channels.
    #[error("{channels} channels of the {line} line, expected at least {needed}")]
    TooFewChannels {
        /// Which line.
        line: &'static str,
        /// Channels in the range.
        channels: usize,
        /// Channels needed.
        needed: usize,
    },
    /// A prior without mass where the data are.
    #[error("{name}: the prior has no mass from {lower} to {upper}, expected some")]
    NoPriorMass {
        /// Of which parameter.
        name: &'static str,
        /// Lowest value that the data or bounds allow.
        lower: f64,
        /// Highest value.
        upper: f64,
    },
    /// The priors have no mass where the data are.
    #[error("{family}: the priors have no mass where the data are, expected some")]
    NoMass {
        /// Name of the family.
        family: String,
    },
}

impl PosteriorError {
    /// Whether it is for the settings to change; else the data do not allow a posterior.
    #[must_use]
    pub fn is_of_settings(&self) -> bool {
        !matches!(self, Self::TooFewChannels { .. } | Self::NoMass { .. })
    }

    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        Some(match self {
            Self::TooFewDraws { .. } => "leave the number of draws out for the default".to_owned(),
            Self::NoPosterior { .. } => {
                "choose two-layer or hill beside it, or stop after least squares".to_owned()
            }
            Self::NotConstrained { .. } => {
                "brightnesses are integrated over in closed form: leave it out, replace a prior, or stop after least squares".to_owned()
            }
            Self::Improper { .. } => {
                "give the lower bound first, and a value between the bounds".to_owned()
            }
            Self::NoShare { .. } => "0.1 stands for 10 %".to_owned(),
            Self::IsotopeRatio { .. } => {
                "give the abundance of the thick line's isotopologue over the thin line's, such as 50".to_owned()
            }
            Self::TooFewChannels { .. } => "widen the fitted range".to_owned(),
            Self::NoPriorMass { .. } | Self::NoMass { .. } => {
                "check the priors that were replaced, what is given, bounds, and the range of velocities".to_owned()
            }
        })
    }
}

/// Fewest draws for a 95 % interval.
const FEWEST_DRAWS: usize = 100;

/// Parameters that can be bounded or given.
pub const CONSTRAINED: [&str; 4] = ["v_lsr_km_s", "sigma_km_s", "v_in_km_s", "tau"];

impl PosteriorSettings {
    /// The families that are sampled.
    pub(super) fn families(&self) -> Vec<Family> {
        let moving = self.models.iter().copied().map(Family::Moving);
        if !self.hypotheses {
            return moving.collect();
        }
        let still = self.models.iter().copied().map(Family::Still);
        let others = [Family::Unabsorbed, Family::TwoClouds];
        moving.chain(still).chain(others).collect()
    }

    /// The same with as many effective draws, and as many that are kept.
    #[must_use]
    pub fn with_draws(mut self, draws: usize) -> Self {
        let more = draws as f64 / self.draws as f64;
        self.sampling.effective *= more;
        self.sampling.tails *= more;
        self.sampling.round *= draws.div_ceil(self.draws);
        self.draws = draws;
        self
    }

    /// Whether they make a posterior.
    ///
    /// # Errors
    ///
    /// [`PosteriorError`] for the first setting that does not.
    pub fn check(&self) -> Result<(), PosteriorError> {
        if self.draws < FEWEST_DRAWS {
            return Err(PosteriorError::TooFewDraws {
                draws: self.draws,
                least: FEWEST_DRAWS,
            });
        }
        let unknown = |model: &&Model| !Family::Moving(**model).is_known();
        if self.models.is_empty() {
            return Err(PosteriorError::NoPosterior { model: "no" });
        }
        if let Some(model) = self.models.iter().find(unknown) {
            return Err(PosteriorError::NoPosterior {
                model: model.name(),
            });
        }
        if let Some(Estimate { value, err }) = self.isotope_ratio
            && !(value > 0.0 && value.is_finite() && err >= 0.0 && err.is_finite())
        {
            return Err(PosteriorError::IsotopeRatio { value, err });
        }
        let shares = [
            ("shape error", self.shape_error),
            (
                "calibration error of the thick line",
                self.calibration_error.0,
            ),
            (
                "calibration error of the thin line",
                self.calibration_error.1,
            ),
        ];
        for (name, value) in shares {
            if !(0.0..1.0).contains(&value) {
                return Err(PosteriorError::NoShare { name, value });
            }
        }
        self.check_constraints()
    }

    fn check_constraints(&self) -> Result<(), PosteriorError> {
        let names = self.bounds.keys().chain(self.given.keys());
        let mut unknown = names.filter(|name| !CONSTRAINED.contains(&name.as_str()));
        if let Some(name) = unknown.next() {
            return Err(PosteriorError::NotConstrained { name: name.clone() });
        }
        let improper = |name: &str, found: String, expected: &'static str| {
            let name = name.to_owned();
            Err(PosteriorError::Improper {
                name,
                found,
                expected,
            })
        };
        for (name, (lower, upper)) in &self.bounds {
            if !(lower < upper && lower.is_finite() && upper.is_finite()) {
                let found = format!("bounds {lower} to {upper}");
                return improper(name, found, "the lower below the upper");
            }
        }
        for (name, Estimate { value, err }) in &self.given {
            if !(value.is_finite() && *err >= 0.0 && err.is_finite()) {
                let found = format!("{value} with error {err}");
                return improper(name, found, "a number and an error of at least 0");
            }
            let positive = matches!(name.as_str(), "sigma_km_s" | "tau");
            let outside = self
                .bounds
                .get(name)
                .is_some_and(|(lower, upper)| value < lower || value > upper);
            if outside || (positive && *value <= 0.0) {
                return improper(name, format!("{value}"), "a value within the bounds");
            }
        }
        Ok(())
    }
}
