//! Equal-weight draws of the moving models together, each model by its evidence.

use super::{Family, PairPosterior};
use crate::model::Model;
use crate::numeric::sampling::uniform;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;

/// A draw of the physical parameters of a model.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ModelDraw<'a> {
    /// The model.
    pub model: Model,
    /// Names of the parameters, those of the model and of the thin line.
    pub names: &'a [&'static str],
    /// Their values.
    pub values: &'a [f64],
}

impl ModelDraw<'_> {
    /// A parameter by name; `None` where the model has none of that name.
    #[must_use]
    pub fn value(&self, name: &str) -> Option<f64> {
        let index = self.names.iter().position(|known| *known == name)?;
        self.values.get(index).copied()
    }
}

/// Stream of the generator that draws of the average come from: far from those of the families.
const STREAM: u64 = 1 << 32;

impl PairPosterior {
    /// Share of each moving model's evidence in their sum.
    #[must_use]
    pub fn model_shares(&self) -> Vec<(Model, f64)> {
        let moving = || {
            self.families.iter().filter_map(|one| match one.family {
                Family::Moving(model) => Some((model, one.ln_evidence)),
                _ => None,
            })
        };
        let highest = moving().map(|(_, ln)| ln).fold(f64::NEG_INFINITY, f64::max);
        let total: f64 = moving().map(|(_, ln)| (ln - highest).exp()).sum();
        moving()
            .map(|(model, ln)| (model, (ln - highest).exp() / total))
            .collect()
    }

    /// `count` draws of equal weight from the moving models together: what derived quantities are
    /// sampled from. The same seed gives the same draws.
    ///
    /// A model with share s has s `count` of them, in random order; beyond the draws that are kept of a
    /// model they repeat.
    #[must_use]
    pub fn moving_draws(&self, count: usize, seed: u64) -> Vec<ModelDraw<'_>> {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        generator.set_stream(STREAM);
        let offset = uniform(&mut generator);
        let mut drawn = Vec::with_capacity(count);
        let mut cumulated = 0.0;
        for (model, share) in self.model_shares() {
            let Some(family) = self.of(Family::Moving(model)) else {
                continue;
            };
            cumulated += share * count as f64;
            let mut order: Vec<usize> = Vec::new();
            while drawn.len() < count && drawn.len() as f64 + offset < cumulated + 1e-9 {
                if order.is_empty() {
                    order = shuffled(family.draws.len(), &mut generator);
                }
                let Some(index) = order.pop() else { break };
                drawn.push(ModelDraw {
                    model,
                    names: &family.names,
                    values: &family.draws[index],
                });
            }
        }
        let order = shuffled(drawn.len(), &mut generator);
        order.into_iter().map(|index| drawn[index]).collect()
    }
}

/// The numbers below `count` in random order (Fisher and Yates).
fn shuffled(count: usize, generator: &mut ChaCha8Rng) -> Vec<usize> {
    let mut order: Vec<usize> = (0..count).collect();
    for last in (1..count).rev() {
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "below the number of draws"
        )]
        let other = (uniform(generator) * (last + 1) as f64) as usize;
        order.swap(last, other);
    }
    order
}
