//! Where a pair's adopted speed, velocity and dispersion come from.

use super::{Judged, PairOutcome};
use crate::fit::averaged::Averaged;
use crate::fit::clump::ClumpPosterior;
use crate::fit::hypotheses::Speed;
use crate::fit::posterior::Interval;
use crate::fit::{ModelFit, PairFit};
use crate::numeric::Estimate;

/// Where they come from.
#[derive(Clone, Debug)]
pub enum Adopted<'a> {
    /// The posterior of the collapsing sphere.
    Sphere(&'a ClumpPosterior),
    /// The slabs' posteriors, averaged over models.
    Slabs(Averaged<'a>, Speed),
    /// A least-squares fit of a slab model.
    Formal(&'a ModelFit),
}

impl<'a> Adopted<'a> {
    /// The sphere's where there is one that stands, else the slabs' posterior, else a least-squares fit.
    pub(super) fn of(
        sphere: Option<&'a ClumpPosterior>,
        judged: Option<&'a Judged>,
        fit: &'a PairFit,
    ) -> Option<Self> {
        if let Some(sphere) = sphere {
            return Some(Self::Sphere(sphere));
        }
        let slabs = judged.and_then(|judged| Some(Self::Slabs(judged.adopted()?, judged.speed)));
        slabs.or_else(|| fit.adopted().map(Self::Formal))
    }

    /// What the result `v_in_model` says: `sphere`, or names of slab models joined by `+`.
    #[must_use]
    pub fn models(&self) -> String {
        match self {
            Self::Sphere(_) => "sphere".to_owned(),
            Self::Slabs(averaged, _) => averaged.models(),
            Self::Formal(fit) => fit.model.name().to_owned(),
        }
    }

    /// What is known of the speed; of a least-squares fit nobody asked.
    #[must_use]
    pub fn speed(&self) -> Option<Speed> {
        match self {
            Self::Sphere(sphere) => Some(sphere.speed()),
            Self::Slabs(_, speed) => Some(*speed),
            Self::Formal(_) => None,
        }
    }

    /// Median and intervals of `v_lsr_km_s`, `sigma_km_s` or `v_in_km_s`; `None` of a least-squares fit.
    #[must_use]
    pub fn marginal(&self, name: &str) -> Option<Interval> {
        match self {
            Self::Sphere(sphere) => sphere.physical(name),
            Self::Slabs(averaged, _) => averaged.marginal(name),
            Self::Formal(_) => None,
        }
    }

    /// Standard deviation of one of them, or its formal error; `None` where it is held.
    #[must_use]
    pub fn deviation(&self, name: &str) -> Option<f64> {
        match self {
            Self::Sphere(sphere) => sphere.deviation(name),
            Self::Slabs(averaged, _) => averaged.deviation(name),
            Self::Formal(fit) => fit.parameter(name)?.err,
        }
    }

    /// Value and error of one of them.
    #[must_use]
    pub fn estimate(&self, name: &str) -> Option<Estimate> {
        match self {
            Self::Formal(fit) => fit.estimate(name),
            _ => Some(Estimate {
                value: self.marginal(name)?.median,
                err: self.deviation(name).unwrap_or(0.0),
            }),
        }
    }
}

impl PairOutcome {
    /// Where the adopted speed, velocity and dispersion come from.
    #[must_use]
    pub fn adopted(&self) -> Option<Adopted<'_>> {
        Adopted::of(self.standing_sphere(), self.judged.as_ref(), &self.fit)
    }

    /// Posterior of the sphere where its speed is the adopted one.
    #[must_use]
    pub fn standing_sphere(&self) -> Option<&ClumpPosterior> {
        self.sphere.as_ref().filter(|_| self.sphere_stands)
    }
}
