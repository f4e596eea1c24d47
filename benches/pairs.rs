//! What does it cost to fit one pair? Each answer is checked.
#![allow(
    missing_docs,
    clippy::unwrap_used,
    reason = "a bench stops where it cannot go on"
)]

use criterion::{Criterion, criterion_group, criterion_main};
use inrush::fit::{FitRange, FitSettings, Workspace, fit_pair, fit_thin};
use inrush::line::{Line, find};
use inrush::model::Model;
use inrush::prepare::{Expected, PrepareSettings, Prepared, prepare_pair};
use inrush::simulate::{PairTruth, simulate_pair};
use inrush::spectrum::Spectrum;
use std::hint::black_box;

/// The default simulated pair: HCO+ 1-0 and H13CO+ 1-0 of a hill.
fn spectra() -> (Spectrum, Spectrum, Line, Line, f64) {
    let lines = (find("HCO+ 1-0").unwrap(), find("H13CO+ 1-0").unwrap());
    let truth = PairTruth::new((Model::Hill, Model::Gaussian), lines.clone(), 7);
    let v_in = truth.thick.parameters["v_in_km_s"];
    let pair = simulate_pair(&truth).unwrap();
    (
        pair.thick.spectrum,
        pair.thin.spectrum,
        lines.0,
        lines.1,
        v_in,
    )
}

fn prepared(thick: &Spectrum, thin: &Spectrum) -> (Prepared, Prepared) {
    let settings = PrepareSettings::default();
    let expected = Expected::default();
    prepare_pair((thick, &settings, &expected), (thin, &settings, &expected)).unwrap()
}

fn fitting(criterion: &mut Criterion) {
    let (thick, thin, thick_line, thin_line, v_in) = spectra();
    let pair = prepared(&thick, &thin);
    let thin_fit = fit_thin(
        &pair.1,
        &thin_line,
        &FitSettings::default(),
        &mut Workspace::new(),
    )
    .unwrap();
    let mut group = criterion.benchmark_group("one_pair");
    for (name, models) in [
        ("two_layer", vec![Model::TwoLayer]),
        ("hill", vec![Model::Hill]),
        ("both_slabs", vec![Model::TwoLayer, Model::Hill]),
        (
            "six_models",
            vec![
                Model::Gaussian,
                Model::TwoGaussians,
                Model::Layer,
                Model::TwoLayer,
                Model::Hill,
                Model::HillSurface,
            ],
        ),
    ] {
        let settings = FitSettings {
            models,
            range: Some(FitRange::All),
            ..FitSettings::default()
        };
        group.bench_function(name, |bencher| {
            bencher.iter(|| {
                let fit = fit_pair(
                    black_box(&pair.0),
                    black_box(&pair.1),
                    (&thick_line, &thin_line),
                    thin_fit.line.as_ref(),
                    &settings,
                    &mut Workspace::new(),
                )
                .unwrap();
                assert!(fit.models.iter().all(|fit| fit.chi2.is_finite()));
                if let Some(hill) = fit.models.iter().find(|fit| fit.model == Model::Hill) {
                    let found = hill.estimate("v_in_km_s").unwrap();
                    assert!((found.value - v_in).abs() < 5.0 * found.err);
                }
                fit
            });
        });
    }
    group.bench_function("thin_line", |bencher| {
        bencher.iter(|| {
            let fit = fit_thin(
                black_box(&pair.1),
                &thin_line,
                &FitSettings::default(),
                &mut Workspace::new(),
            )
            .unwrap();
            assert!(fit.line.is_some());
            fit
        });
    });
    group.finish();
}

criterion_group!(benches, fitting);
criterion_main!(benches);
