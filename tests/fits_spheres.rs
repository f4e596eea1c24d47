//! The joint least-squares fits against those of scipy on 80 simulated pairs (tests/data/spheres).
#![allow(
    clippy::unwrap_used,
    reason = "a test stops where its data cannot be read"
)]

#[path = "../examples/fit_sample/comparison.rs"]
mod comparison;

use comparison::settings;
use inrush::fit::Workspace;
use inrush::fit::fit_pair;
use inrush::line::{Component, Line};
use inrush::measure::ThinLine;
use inrush::model::Model;
use inrush::numeric::Autoregression;
use inrush::prepare::Prepared;
use inrush::spectrum::{Noise, Spectrum, Window};
use std::collections::HashMap;
use std::path::{Path, PathBuf};

fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/spheres")
}

fn table(name: &str) -> Vec<HashMap<String, String>> {
    csv::Reader::from_path(folder().join(name))
        .unwrap()
        .deserialize()
        .map(Result::unwrap)
        .collect()
}

fn number(row: &HashMap<String, String>, column: &str) -> f64 {
    row[column].parse().unwrap()
}

/// A spectrum with the noise of the truth table and no baseline: the comparison's own settings.
fn spectrum(name: &str, noise_k: f64, window: Window) -> Prepared {
    let mut velocity = Vec::new();
    let mut temperature = Vec::new();
    for row in csv::Reader::from_path(folder().join(name))
        .unwrap()
        .deserialize()
    {
        let (v, t): (f64, f64) = row.unwrap();
        velocity.push(v);
        temperature.push(t);
    }
    let channels = velocity.len();
    let width = (velocity[channels - 1] - velocity[0]) / (channels as f64 - 1.0);
    Prepared::as_given(
        Spectrum::new(velocity, vec![width; channels], temperature).unwrap(),
        window,
        Noise {
            rms_k: noise_k,
            channels,
            process: Autoregression::white(),
        },
    )
}

/// A line at the comparison's frequency.
fn line(name: &str) -> Line {
    let rest_frequency_ghz = match name {
        "HCO+ 1-0" => 89.188_526,
        "HCO+ 4-3" => 356.734_223,
        // the thin line is a Gaussian: its frequency does not enter
        _ => 87.0,
    };
    Line {
        name: name.to_owned(),
        rest_frequency_ghz,
        rest_frequency_err_ghz: 1e-6,
        components: vec![Component {
            offset_km_s: 0.0,
            weight: 1.0,
        }],
    }
}

#[test]
fn every_slab_fit_is_as_deep_as_scipys_best_of_ten_starts() {
    let truth = table("truth.csv");
    let reference = table("least-squares.csv");
    assert_eq!((truth.len(), reference.len()), (80, 80));
    for model in [Model::TwoLayer, Model::Hill] {
        let mut shallow = Vec::new();
        let mut disagreeing = Vec::new();
        let mut deeper = Vec::new();
        let mut evaluations = 0;
        for (truth, reference) in truth.iter().zip(&reference) {
            let id = &truth["id"];
            let v_lsr = number(truth, "v_lsr_km_s");
            let sigma = number(truth, "sigma_km_s");
            let window = Window {
                low_km_s: v_lsr - 3.0 * sigma,
                high_km_s: v_lsr + 3.0 * sigma,
            };
            let thick = spectrum(
                &format!("{id}-thick.csv"),
                number(truth, "noise_thick_k"),
                window,
            );
            let thin = spectrum(
                &format!("{id}-thin.csv"),
                number(truth, "noise_thin_k"),
                window,
            );
            let lines = (line(&truth["thick_line"]), line(&truth["thin_line"]));
            let settings = settings(model, v_lsr);
            let thin_fit =
                inrush::fit::fit_thin(&thin, &lines.1, &settings, &mut Workspace::new()).unwrap();
            let thin_line: Option<&ThinLine> = thin_fit.line.as_ref();
            let pair = fit_pair(
                &thick,
                &thin,
                (&lines.0, &lines.1),
                thin_line,
                &settings,
                &mut Workspace::new(),
            )
            .unwrap();
            let fit = &pair.models[0];
            evaluations += fit.evaluations;
            let chi2 = number(reference, &format!("{}_chi2", model.column_prefix()));
            let ratio = fit.chi2 / chi2;
            if ratio > 1.0001 {
                shallow.push(format!("{id} {} {ratio:.5}", truth["kind"]));
            } else if ratio > 0.9999 {
                let v_in = number(reference, &format!("{}_v_in_km_s", model.column_prefix()));
                let v_in_err = number(
                    reference,
                    &format!("{}_v_in_km_s_err", model.column_prefix()),
                );
                let found = fit.parameter("v_in_km_s").unwrap();
                let err = found.err.unwrap_or(v_in_err).max(v_in_err);
                if (found.value - v_in).abs() > err {
                    disagreeing.push(format!(
                        "{id}: {} +- {:?}, scipy {v_in} +- {v_in_err}",
                        found.value, found.err
                    ));
                }
            } else {
                deeper.push(format!("{id} {ratio:.5}"));
            }
        }
        println!(
            "{}: shallower {shallow:?}, deeper than scipy {deeper:?}, {evaluations} evaluations",
            model.name()
        );
        println!("{disagreeing:#?}");
        assert!(shallow.len() <= 1, "{}: {shallow:?}", model.name());
        assert!(disagreeing.is_empty(), "{}: {disagreeing:?}", model.name());
    }
}
