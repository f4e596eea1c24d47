//! Whether the best sphere describes a pair, and what would explain that it does not.

use super::target::{Target, place};
use crate::numeric::sampling::Point;
use statrs::distribution::{ChiSquared, ContinuousCDF};

/// How one line's residuals look beside the best sphere, baseline and shape errors taken out.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LineResiduals {
    /// Sum of the squared residuals over the noise, channels of the fitted range.
    pub chi2: f64,
    /// Channels of the fitted range.
    pub channels: usize,
    /// Correlation of neighbouring residuals, in units of its scatter for white ones.
    pub correlation: f64,
}

/// Probability of a chi2 or a correlation that high by chance at which a sphere does not fit: one pair
/// in a few hundred.
const CHANCE: f64 = 1e-3;

/// The same of a correlation, in standard deviations.
const CORRELATED: f64 = 3.3;

impl LineResiduals {
    fn of(residuals: &[f64]) -> Self {
        let chi2: f64 = residuals.iter().map(|one| one * one).sum();
        let pairs: f64 = residuals.windows(2).map(|pair| pair[0] * pair[1]).sum();
        Self {
            chi2,
            channels: residuals.len(),
            correlation: if chi2 > 0.0 {
                pairs / chi2 * (residuals.len() as f64).sqrt()
            } else {
                0.0
            },
        }
    }

    /// Probability that noise alone makes a chi2 that high.
    #[must_use]
    pub fn chance(&self) -> f64 {
        ChiSquared::new(self.channels.max(1) as f64)
            .map_or(1.0, |distribution| distribution.sf(self.chi2))
    }

    /// Whether noise explains them.
    #[must_use]
    pub fn are_noise(&self) -> bool {
        self.chance() > CHANCE && self.correlation < CORRELATED
    }
}

/// What would leave residuals as those of the best sphere.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Misfit {
    /// Emission beyond the gas of the sphere: an outflow.
    Wings,
    /// The thin line shows gas at a velocity of its own.
    SecondCloud,
    /// The thin line is flatter than a sphere's, or has two peaks: rotation, or two clouds that are not
    /// resolved.
    Rotation,
    /// None of them.
    Unknown,
}

impl Misfit {
    /// The reason in words.
    #[must_use]
    pub fn text(self) -> &'static str {
        match self {
            Self::Wings => "emission in the wings, as of an outflow",
            Self::SecondCloud => {
                "the thin line shows gas at another velocity, as of a second cloud"
            }
            Self::Rotation => "the thin line is flatter than a sphere's, as of rotation",
            Self::Unknown => "no reason stands out",
        }
    }
}

/// Residuals of both lines, and the likely reason where noise does not explain them.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ClumpResiduals {
    /// The thick line's.
    pub thick: LineResiduals,
    /// The thin line's.
    pub thin: LineResiduals,
    /// `None` where the sphere fits.
    pub misfit: Option<Misfit>,
}

impl ClumpResiduals {
    /// chi2 of both lines over their channels, baselines and shape errors taken out.
    #[must_use]
    pub fn chi2_reduced(&self) -> f64 {
        let channels = self.thick.channels + self.thin.channels;
        (self.thick.chi2 + self.thin.chi2) / channels.max(1) as f64
    }
}

/// Sums of residuals that stand out, in units of their noise.
const STANDS_OUT: f64 = 4.0;

/// Offsets from v_lsr in dispersions of the gas beyond which emission is of wings.
const WINGS_FROM: f64 = 3.0;

/// Offsets from v_lsr in dispersions beyond which gas that the thin line shows is another cloud's.
const CLOUD_FROM: f64 = 1.5;

/// Windows in which the thin line's residuals are summed: width and distance of neighbours in dispersions,
/// and how many there are on either side of v_lsr.
const WINDOW: f64 = 0.7;
const WINDOW_STEP: f64 = 0.35;
const WINDOWS: i32 = 11;

/// Excesses on either side that are as alike as a rotating clump's: their ratio.
const ALIKE: f64 = 2.0;

pub(super) fn residuals(target: &mut Target<'_>, best: &Point) -> ClumpResiduals {
    let residuals = target.residuals(best);
    let [thick, thin] = [0, 1].map(|line| LineResiduals::of(&residuals[line]));
    let misfit = (!(thick.are_noise() && thin.are_noise())).then(|| {
        let sigma = best[place::LN_SIGMA].exp();
        // sum of residuals between two offsets, in units of its noise
        let sum = |line: usize, low: f64, high: f64| {
            let velocity = target.velocities(line);
            let inside = velocity.iter().zip(&residuals[line]).filter(|(v, _)| {
                let x = (**v - best[place::V_LSR]) / sigma;
                x >= low && x < high
            });
            let (sum, count) =
                inside.fold((0.0, 0.0), |(s, n): (f64, f64), (_, r)| (s + r, n + 1.0));
            sum / count.max(1.0).sqrt()
        };
        let motion = best[place::V_IN].abs();
        let (wing, far) = (WINGS_FROM + motion, f64::INFINITY);
        let windows: Vec<(f64, f64)> = (-WINDOWS..=WINDOWS)
            .map(|index| WINDOW_STEP * f64::from(index))
            .map(|x| (x, sum(1, x - 0.5 * WINDOW, x + 0.5 * WINDOW)))
            .collect();
        let (dip, depth) = windows.iter().fold(
            (0.0, 0.0),
            |low, one| if one.1 < low.1 { *one } else { low },
        );
        let highest = |belongs: &dyn Fn(f64) -> bool| {
            let sums = windows.iter().filter(|one| belongs(one.0));
            sums.map(|one| one.1).fold(0.0, f64::max)
        };
        let (left, right) = (highest(&|x| x < dip), highest(&|x| x > dip));
        let two_peaks = depth < -STANDS_OUT && left.min(right) > STANDS_OUT;
        if two_peaks && left.max(right) < ALIKE * left.min(right) {
            Misfit::Rotation
        } else if two_peaks || highest(&|x| x.abs() > CLOUD_FROM) > STANDS_OUT {
            Misfit::SecondCloud
        } else if sum(0, -far, -wing).max(sum(0, wing, far)) > STANDS_OUT {
            Misfit::Wings
        } else {
            Misfit::Unknown
        }
    });
    ClumpResiduals {
        thick,
        thin,
        misfit,
    }
}
