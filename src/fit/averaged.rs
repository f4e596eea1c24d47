//! Posteriors of moving models into one: draws of each model in the share of its evidence.
//!
//! Not computed here: evidences and draws (see `posterior`), probabilities (see `hypotheses`).

use super::hypotheses::Verdict;
use super::posterior::{Family, FamilyPosterior, Interval, PairPosterior, interval};
use crate::model::Model;

/// The moving models' posteriors with their shares.
#[derive(Clone, Debug)]
pub struct Averaged<'a> {
    /// Model, its share of the evidence, and its posterior.
    parts: Vec<(Model, f64, &'a FamilyPosterior)>,
}

/// Shares below this leave no draw.
const NEGLIGIBLE: f64 = 1e-3;

impl<'a> Averaged<'a> {
    /// The models of a verdict in their shares; `None` where no model has draws.
    #[must_use]
    pub fn new(posterior: &'a PairPosterior, verdict: &Verdict) -> Option<Self> {
        let parts: Vec<_> = verdict
            .shares
            .iter()
            .filter(|(_, share)| *share >= NEGLIGIBLE)
            .filter_map(|(model, share)| {
                let own = posterior.of(Family::Moving(*model))?;
                (!own.draws.is_empty()).then_some((*model, *share, own))
            })
            .collect();
        (!parts.is_empty()).then_some(Self { parts })
    }

    /// Names of the models that have a part, joined by `+`.
    #[must_use]
    pub fn models(&self) -> String {
        let names: Vec<&str> = self.parts.iter().map(|(model, ..)| model.name()).collect();
        names.join("+")
    }

    /// As many draws of physical parameters, each with its model and the names of its parameters.
    ///
    /// Models follow each other in blocks, each of its share; draws are repeated where more are asked for
    /// than there are.
    pub fn rows(&self, count: usize) -> impl Iterator<Item = Row<'a>> {
        let total: f64 = self.parts.iter().map(|(_, share, _)| share).sum();
        let mut cumulated = 0.0;
        let mut begun = 0;
        let blocks: Vec<_> = self
            .parts
            .iter()
            .map(|(model, share, posterior)| {
                cumulated += share / total;
                #[expect(
                    clippy::cast_possible_truncation,
                    clippy::cast_sign_loss,
                    reason = "a share of a count"
                )]
                let end = ((cumulated * count as f64).round() as usize).min(count);
                let rows = end - begun;
                begun = end;
                (*model, *posterior, rows)
            })
            .collect();
        blocks.into_iter().flat_map(|(model, posterior, rows)| {
            (0..rows).map(move |row| Row {
                model,
                names: &posterior.names,
                values: &posterior.draws[row * posterior.draws.len() / rows],
            })
        })
    }

    /// Median and intervals of a parameter that every model has; `None` for another name.
    #[must_use]
    pub fn marginal(&self, name: &str) -> Option<Interval> {
        interval(&self.weighted(name)?)
    }

    /// Standard deviation of a parameter that every model has; `None` for another name, and for one that
    /// is held.
    #[must_use]
    pub fn deviation(&self, name: &str) -> Option<f64> {
        let values = self.weighted(name)?;
        let (first, _) = values.first()?;
        if values.iter().all(|(value, _)| value == first) {
            return None;
        }
        let total: f64 = values.iter().map(|(_, weight)| weight).sum();
        let mean = values.iter().map(|(v, weight)| v * weight).sum::<f64>() / total;
        let squares = values.iter().map(|(v, weight)| weight * (v - mean).powi(2));
        Some((squares.sum::<f64>() / total).sqrt())
    }

    /// A parameter's draws with their weights. Of the speed these are all draws, of others those that
    /// are kept.
    #[must_use]
    pub fn weighted(&self, name: &str) -> Option<Vec<(f64, f64)>> {
        let mut values = Vec::new();
        for (_, share, posterior) in &self.parts {
            if name == "v_in_km_s" {
                values.extend(
                    posterior
                        .v_in
                        .iter()
                        .map(|(v, weight)| (*v, share * weight)),
                );
                continue;
            }
            let index = posterior.names.iter().position(|known| *known == name)?;
            let weight = share / posterior.draws.len() as f64;
            values.extend(posterior.draws.iter().map(|draw| (draw[index], weight)));
        }
        Some(values)
    }
}

/// One draw.
#[derive(Clone, Copy, Debug)]
pub struct Row<'a> {
    /// Its model.
    pub model: Model,
    names: &'a [&'static str],
    values: &'a [f64],
}

impl Row<'_> {
    /// A parameter of the draw.
    #[must_use]
    pub fn get(&self, name: &str) -> Option<f64> {
        let index = self.names.iter().position(|known| *known == name)?;
        Some(self.values[index])
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fit::hypotheses::{Hypothesis, Speed, Standing};
    use crate::numeric::sampling::Quality;
    use crate::spectrum::Window;

    fn family(model: Model, speed: f64, draws: usize) -> FamilyPosterior {
        let drawn = |index: usize| vec![speed + 0.01 * index as f64, 1.0 + speed];
        FamilyPosterior {
            family: Family::Moving(model),
            ln_evidence: 0.0,
            ln_evidence_err: 0.0,
            quality: Quality {
                effective: 500.0,
                tail_shape: None,
                tails: 25.0,
                halves: 0.0,
            },
            evaluations: 0,
            inward: 2.0,
            outward: 0.0,
            v_in: (0..draws)
                .map(|index| (drawn(index)[0], 1.0 / draws as f64))
                .collect(),
            names: vec!["v_in_km_s", "sigma_km_s"],
            draws: (0..draws).map(drawn).collect(),
        }
    }

    #[test]
    fn every_model_has_its_share_of_rows_and_of_the_mean() {
        let posterior = PairPosterior {
            families: vec![
                family(Model::TwoLayer, 0.0, 10),
                family(Model::Hill, 1.0, 20),
                family(Model::HillSurface, 5.0, 20),
            ],
            range: Window {
                low_km_s: -1.0,
                high_km_s: 1.0,
            },
        };
        let verdict = Verdict {
            standings: Hypothesis::ALL.map(|hypothesis| Standing {
                hypothesis,
                probability: 0.25,
                ln_odds_against: 0.0,
            }),
            v_in_km_s: interval(&[(0.0, 1.0)]).unwrap(),
            between_models_km_s: 0.0,
            shares: vec![
                (Model::TwoLayer, 0.25),
                (Model::Hill, 0.7499),
                (Model::HillSurface, 0.0001),
            ],
            speed: Speed::Measured,
            trusted: true,
            doubts: Vec::new(),
        };
        let averaged = Averaged::new(&posterior, &verdict).unwrap();
        assert_eq!(averaged.models(), "two-layer+hill");
        let rows: Vec<Row<'_>> = averaged.rows(1000).collect();
        assert_eq!(rows.len(), 1000);
        let of = |model: Model| rows.iter().filter(|row| row.model == model).count();
        assert_eq!((of(Model::TwoLayer), of(Model::Hill)), (250, 750));
        // each draw of a block as often as any other
        let first = rows.iter().filter(|row| row.get("v_in_km_s") == Some(0.0));
        assert_eq!(first.count(), 25);
        assert_eq!(rows[0].get("tau"), None);
        // sigma is 1 or 2 by model: a mean of 1.75 and a variance of 0.25 0.75
        let sigma = averaged.marginal("sigma_km_s").unwrap();
        assert!((sigma.mean - 1.75).abs() < 1e-3, "{sigma:?}");
        let deviation = averaged.deviation("sigma_km_s").unwrap();
        assert!((deviation - 0.1875_f64.sqrt()).abs() < 1e-3, "{deviation}");
        assert_eq!(averaged.marginal("tau"), None);
    }
}
