//! What do the posteriors and evidences of one pair cost? Each answer is checked.
#![allow(
    missing_docs,
    clippy::unwrap_used,
    reason = "a bench stops where it cannot go on"
)]

use criterion::{Criterion, criterion_group, criterion_main};
use inrush::fit::hypotheses::{Hypothesis, Odds, verdict};
use inrush::fit::posterior::{PosteriorSettings, pair_posterior};
use inrush::fit::{FitSettings, Workspace, fit_thin};
use inrush::line::find;
use inrush::model::Model;
use inrush::prepare::{Expected, PrepareSettings, prepare_pair};
use inrush::simulate::{PairTruth, simulate_pair};
use std::hint::black_box;

/// The default simulated pair, of a hill, and the same of two layers.
fn posteriors(criterion: &mut Criterion) {
    let mut group = criterion.benchmark_group("posteriors_of_one_pair");
    group.sample_size(20);
    for model in [Model::Hill, Model::TwoLayer] {
        let lines = (find("HCO+ 1-0").unwrap(), find("H13CO+ 1-0").unwrap());
        let truth = PairTruth::new((model, Model::Gaussian), lines.clone(), 7);
        let v_in = truth.thick.parameters["v_in_km_s"];
        let pair = simulate_pair(&truth).unwrap();
        let (settings, expected) = (PrepareSettings::default(), Expected::default());
        let (thick, thin) = prepare_pair(
            (&pair.thick.spectrum, &settings, &expected),
            (&pair.thin.spectrum, &settings, &expected),
        )
        .unwrap();
        let fit_settings = FitSettings::default();
        let thin_fit = fit_thin(&thin, &lines.1, &fit_settings, &mut Workspace::new()).unwrap();
        group.bench_function(model.name(), |bencher| {
            bencher.iter(|| {
                let posterior = pair_posterior(
                    black_box(&thick),
                    black_box(&thin),
                    (&lines.0, &lines.1),
                    thin_fit.line.as_ref(),
                    &PosteriorSettings::default(),
                )
                .unwrap();
                assert_eq!(posterior.families.len(), 6);
                let verdict = verdict(&posterior, &Odds::default()).unwrap();
                assert_eq!(verdict.favoured(), Hypothesis::Infall);
                let (low, high) = verdict.v_in_km_s.interval95;
                let margin = 0.5 * (high - low);
                assert!(v_in > low - margin && v_in < high + margin);
                verdict
            });
        });
    }
    group.finish();
}

criterion_group!(benches, posteriors);
criterion_main!(benches);
