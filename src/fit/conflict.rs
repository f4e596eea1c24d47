//! A prior that was replaced against what the data say under the default ones.

use super::posterior::{Family, FamilyPosterior, PairPosterior, interval};
use super::priors::{PRIORS, Prior, Priors};
use crate::model::RadiationTemperature;

/// A replaced prior with no mass where the data are.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[error(
    "prior of {name}: all but a millionth of its mass from {:.3} to {:.3}, expected some where the data are, {:.3} to {:.3} with the default prior",
    prior.0, prior.1, data.0, data.1
)]
pub struct PriorConflict {
    /// Name of the prior.
    pub name: &'static str,
    /// Where the prior is.
    pub prior: (f64, f64),
    /// Where the data are: the 95 % intervals of all models.
    pub data: (f64, f64),
}

impl PriorConflict {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> String {
        format!(
            "widen the prior of {}, or leave it out for the default",
            self.name
        )
    }
}

/// Priors that differ from the table's.
#[must_use]
pub fn replaced(priors: &Priors) -> Vec<(&'static str, Prior)> {
    let rows = priors.rows().iter().zip(&PRIORS);
    rows.filter(|(own, default)| own.prior != default.prior)
        .map(|(own, _)| (own.name, own.prior))
        .collect()
}

/// The first replaced prior that excludes what every moving model says of its number under the default
/// priors. Those of two clouds alone are not compared: two clouds are then improbable, no more.
#[must_use]
pub fn conflict(
    priors: &Priors,
    by_default: &PairPosterior,
    radiation: &RadiationTemperature,
) -> Option<PriorConflict> {
    let moving: Vec<&FamilyPosterior> = by_default
        .families
        .iter()
        .filter(|one| matches!(one.family, Family::Moving(_)))
        .collect();
    replaced(priors).into_iter().find_map(|(name, prior)| {
        let ends: Vec<(f64, f64)> = moving
            .iter()
            .filter_map(|one| Some(interval(&values(one, name, radiation)?)?.interval95))
            .collect();
        let (low, high) = prior.reach();
        let outside = |(from, to): &(f64, f64)| *to < low || *from > high;
        if ends.is_empty() || !ends.iter().all(outside) {
            return None;
        }
        let data = ends
            .iter()
            .fold((f64::INFINITY, f64::NEG_INFINITY), |all, one| {
                (all.0.min(one.0), all.1.max(one.1))
            });
        Some(PriorConflict {
            name,
            prior: (low, high),
            data,
        })
    })
}

/// Draws of what a prior is of; `None` where the family has none.
fn values(
    posterior: &FamilyPosterior,
    name: &str,
    radiation: &RadiationTemperature,
) -> Option<Vec<(f64, f64)>> {
    let at = |name: &str| posterior.names.iter().position(|known| *known == name);
    let column = |of: &dyn Fn(&[f64]) -> f64| {
        let draws = posterior.draws.iter();
        draws.map(|draw| (of(draw), 1.0)).collect()
    };
    Some(match name {
        "v_in_over_sigma" => {
            let (v_in, sigma) = (at("v_in_km_s")?, at("sigma_km_s")?);
            column(&|draw| draw[v_in] / draw[sigma])
        }
        "excess_thick_k" => {
            let temperatures: Vec<usize> = (0..posterior.names.len())
                .filter(|index| posterior.names[*index].starts_with("t_"))
                .collect();
            column(&|draw| {
                let mut levels: Vec<f64> = temperatures
                    .iter()
                    .map(|index| radiation.at(draw[*index]))
                    .chain([radiation.background()])
                    .collect();
                levels.sort_by(f64::total_cmp);
                let steps = levels.windows(2).map(|pair| pair[1] - pair[0]);
                steps.fold(0.0, f64::max)
            })
        }
        _ => {
            let index = at(name)?;
            column(&|draw| draw[index])
        }
    })
}
