//! What ranking knows of a source.

use crate::fit::hypotheses::Hypothesis;
use serde::{Deserialize, Serialize};

/// A quantity's value and equal-weight draws of it.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Drawn {
    /// The reported value.
    pub value: f64,
    /// Draws; a thousandth of their scatter is all that single precision takes from them.
    pub draws: Vec<f32>,
}

impl Drawn {
    /// The value below which a share of the draws lies; `None` without draws or at an infinite one.
    #[must_use]
    pub fn quantile(&self, share: f64) -> Option<f64> {
        let mut draws = self.draws.clone();
        let last = draws.len().checked_sub(1)?;
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a place within the draws"
        )]
        let place = (share.clamp(0.0, 1.0) * last as f64).round() as usize;
        let (_, found, _) = draws.select_nth_unstable_by(place, f32::total_cmp);
        found.is_finite().then(|| f64::from(*found))
    }

    /// Ends of the central 68 % of the draws.
    #[must_use]
    pub fn interval68(&self) -> Option<[f64; 2]> {
        Some([self.quantile(0.16)?, self.quantile(0.84)?])
    }

    /// Ends of the central 95 % of the draws.
    #[must_use]
    pub fn interval95(&self) -> Option<[f64; 2]> {
        Some([self.quantile(0.025)?, self.quantile(0.975)?])
    }

    /// Mean and standard deviation of the draws; `None` without two finite ones.
    #[must_use]
    pub fn moments(&self) -> Option<(f64, f64)> {
        let count = self.draws.len() as f64;
        let draws = || self.draws.iter().map(|draw| f64::from(*draw));
        let mean = draws().sum::<f64>() / count;
        let variance = draws().map(|draw| (draw - mean).powi(2)).sum::<f64>() / (count - 1.0);
        (mean.is_finite() && variance.is_finite()).then(|| (mean, variance.sqrt()))
    }
}

/// Sense of a line's asymmetry.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Profile {
    /// Blue.
    Blue,
    /// Red.
    Red,
    /// Neither.
    Neither,
    /// A line is not detected.
    Undetected,
}

/// What the lines say of a source. Draws of one row belong together: they share the draw of the
/// distance and of every other input.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Finding {
    /// Probability of each hypothesis, in the order of [`Hypothesis::ALL`]; `None` where none was asked for.
    pub probabilities: Option<[f64; 4]>,
    /// Whether the posteriors behind them can be trusted.
    pub trusted: bool,
    /// Whether both lines are detected.
    pub detected: bool,
    /// Inward speed, km/s, negative for expansion.
    pub v_in_km_s: Option<Drawn>,
    /// Mass infall rate, solar masses a year, of the speed's sign.
    pub rate_msun_yr: Option<Drawn>,
    /// Free-fall speed, km/s.
    pub v_ff_km_s: Option<Drawn>,
    /// Mass, solar masses.
    pub mass_msun: Option<Drawn>,
    /// Velocity dispersion, km/s.
    pub sigma_km_s: Option<Drawn>,
    /// Line pairs behind it.
    pub line_pairs: usize,
    /// How far the speeds of several line pairs lie apart, in standard deviations: the root of chi2 about
    /// their mean over its degrees of freedom.
    pub disagreement: Option<f64>,
}

impl Finding {
    /// Probability of infall. Without hypotheses, the share of the speed's draws above zero stands for it.
    #[must_use]
    pub fn p_infall(&self) -> Option<f64> {
        if let Some(probabilities) = self.probabilities {
            return Some(probabilities[Hypothesis::Infall as usize]);
        }
        let draws = &self.v_in_km_s.as_ref()?.draws;
        let inward = draws.iter().filter(|draw| **draw > 0.0).count();
        (!draws.is_empty()).then(|| inward as f64 / draws.len() as f64)
    }

    /// Its grade.
    #[must_use]
    pub fn grade(&self) -> Grade {
        match self.p_infall() {
            Some(p_infall) if self.detected => Grade::of(p_infall),
            _ => Grade::Unknown,
        }
    }
}

/// How probable infall is, in words.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Grade {
    /// At least 0.95: 20 times as probable as all else together.
    Firm,
    /// At least 0.5.
    Likely,
    /// At least 0.05.
    Open,
    /// Below.
    Unlikely,
    /// No line, or no model with an inward speed.
    Unknown,
}

impl Grade {
    /// Lowest probabilities of infall of the first three grades.
    pub const FROM: [f64; 3] = [0.95, 0.5, 0.05];

    /// The grade of a probability.
    #[must_use]
    pub fn of(p_infall: f64) -> Self {
        match p_infall {
            _ if p_infall >= Self::FROM[0] => Self::Firm,
            _ if p_infall >= Self::FROM[1] => Self::Likely,
            _ if p_infall >= Self::FROM[2] => Self::Open,
            _ => Self::Unlikely,
        }
    }

    /// In words.
    #[must_use]
    pub fn words(self) -> &'static str {
        match self {
            Self::Firm => "infall is firm",
            Self::Likely => "infall is likely",
            Self::Open => "infall is open",
            Self::Unlikely => "infall is unlikely",
            Self::Unknown => "nothing is known of infall",
        }
    }
}

/// A source to be ranked.
#[derive(Clone, Debug, PartialEq)]
pub struct Source {
    /// Name.
    pub id: String,
    /// What its lines say.
    pub finding: Finding,
}
