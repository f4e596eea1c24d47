//! Joint fits: the Jacobian of every layout, and what sharing, linking, holding and bounding do.
#![allow(
    clippy::unwrap_used,
    reason = "a test stops where its data cannot be read"
)]

use inrush::fit::Workspace;
use inrush::fit::{
    Averaging, Channels, FitRange, FitSettings, JointProblem, Layout, fit_pair, fit_thin,
};
use inrush::line::{Component, Line};
use inrush::model::{LineShape, Model, Sampling};
use inrush::numeric::least_squares::{Interval, check_jacobian};
use inrush::numeric::{Autoregression, Estimate};
use inrush::prepare::Prepared;
use inrush::spectrum::{Noise, Spectrum, Window};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

fn line(rest_frequency_ghz: f64, components: &[(f64, f64)]) -> Line {
    Line {
        name: "a line".to_owned(),
        rest_frequency_ghz,
        rest_frequency_err_ghz: 1e-6,
        components: components
            .iter()
            .map(|(offset_km_s, weight)| Component {
                offset_km_s: *offset_km_s,
                weight: *weight,
            })
            .collect(),
    }
}

/// A model's profile with white noise, as a prepared spectrum.
fn prepared(model: Model, line: &Line, parameters: &[f64], noise_k: f64, seed: u64) -> Prepared {
    let width = 0.1;
    let velocity: Vec<f64> = (0..241).map(|i| -12.0 + width * f64::from(i)).collect();
    let shape = LineShape::new(line.rest_frequency_ghz, line.components.clone());
    let sampling = Sampling::new(velocity.clone(), vec![width; velocity.len()], 3);
    let mut value = vec![0.0; velocity.len()];
    model.evaluate(&shape, &sampling, parameters, &mut value, None);
    let mut random = ChaCha8Rng::seed_from_u64(seed);
    for value in &mut value {
        let deviate: f64 = StandardNormal.sample(&mut random);
        *value += noise_k * deviate;
    }
    let channels = velocity.len();
    Prepared::as_given(
        Spectrum::new(velocity, vec![width; channels], value).unwrap(),
        Window {
            low_km_s: -4.0,
            high_km_s: 4.0,
        },
        Noise {
            rms_k: noise_k,
            channels,
            process: Autoregression::white(),
        },
    )
}

const SINGLE: &[(f64, f64)] = &[(0.0, 1.0)];
const TRIPLET: &[(f64, f64)] = &[(4.8433, 3.0 / 9.0), (0.0, 5.0 / 9.0), (-7.0632, 1.0 / 9.0)];

#[test]
fn joint_jacobians_agree_with_finite_differences_in_every_layout() {
    let thick_line = line(89.1885, SINGLE);
    let thin_line = line(86.7543, TRIPLET);
    let mut thick = prepared(
        Model::Hill,
        &thick_line,
        &[0.1, 0.5, 0.2, 4.0, 15.0],
        0.1,
        1,
    );
    let thin = prepared(Model::Layer, &thin_line, &[0.1, 0.5, 0.4, 9.0], 0.03, 2);
    thick.noise.process = Autoregression::from_reflections(&[0.6, -0.3]);
    let linked = FitSettings {
        isotope_ratio: Some(Estimate {
            value: 60.0,
            err: 15.0,
        }),
        given: [(
            "t_ex_thin_k".to_owned(),
            Estimate {
                value: 9.0,
                err: 2.0,
            },
        )]
        .into_iter()
        .collect(),
        ..FitSettings::default()
    };
    let free = FitSettings {
        free_thin_velocity: true,
        free_thin_sigma: true,
        ..FitSettings::default()
    };
    let reach = Interval::new(-12.0, 12.0);
    for model in Model::ALL {
        for (thin_model, settings) in [
            (Model::Gaussian, &free),
            (Model::Layer, &FitSettings::default()),
            (Model::Layer, &linked),
        ] {
            let Ok(layout) = Layout::new(model, thin_model, settings, reach) else {
                assert!(
                    !model.has_infall(),
                    "{} has an optical depth to link",
                    model.name()
                );
                continue;
            };
            let channels = |prepared: &Prepared, line: &Line| {
                let shape = LineShape::new(line.rest_frequency_ghz, line.components.clone());
                Channels::new(prepared, shape, None, Averaging::Channel, 0.25)
            };
            let (thick, thin) = (channels(&thick, &thick_line), channels(&thin, &thin_line));
            let mut problem = JointProblem::new(&layout, Some(&thick), &thin);
            let parameters: Vec<f64> = layout
                .parameters()
                .iter()
                .map(|parameter| match parameter.name {
                    "v_lsr_km_s" | "v_thin_km_s" => 0.13,
                    "v_in_km_s" => 0.22,
                    "v_second_km_s" | "v_second_thin_km_s" => 1.1,
                    name if name.starts_with("sigma") => 0.47,
                    "isotope_ratio" => 55.0,
                    "filling" => 0.3,
                    "tau" => 3.0,
                    "tau_total" | "tau_thin" => 0.6,
                    _ => 8.0,
                })
                .collect();
            let steps: Vec<f64> = parameters.iter().map(|value| 4e-3 * value.abs()).collect();
            let worst = check_jacobian(&mut problem, &parameters, &steps);
            assert!(
                worst < 1e-6,
                "{} with {}: {worst}",
                model.name(),
                thin_model.name()
            );
        }
    }
}

/// A hill pair with an optically thin Gaussian line.
fn hill_pair(v_in: f64, seed: u64) -> (Prepared, Prepared, Line, Line) {
    let (thick_line, thin_line) = (line(89.1885, SINGLE), line(86.7543, SINGLE));
    let thick = prepared(
        Model::Hill,
        &thick_line,
        &[0.1, 0.5, v_in, 5.0, 15.0],
        0.05,
        seed,
    );
    let thin = prepared(
        Model::Gaussian,
        &thin_line,
        &[0.1, 0.5, 0.8],
        0.03,
        seed + 1000,
    );
    (thick, thin, thick_line, thin_line)
}

fn fit(pair: &(Prepared, Prepared, Line, Line), settings: &FitSettings) -> inrush::fit::PairFit {
    let thin = fit_thin(&pair.1, &pair.3, settings, &mut Workspace::new()).unwrap();
    fit_pair(
        &pair.0,
        &pair.1,
        (&pair.2, &pair.3),
        thin.line.as_ref(),
        settings,
        &mut Workspace::new(),
    )
    .unwrap()
}

#[test]
fn mirrored_data_give_the_mirrored_speed() {
    let pair = hill_pair(0.2, 3);
    let mirror = |prepared: &Prepared| {
        let mut mirrored = prepared.clone();
        let spectrum = &prepared.spectrum;
        let velocity = spectrum.velocity_km_s().iter().rev().map(|v| -v).collect();
        let temperature = spectrum.temperature_k().iter().rev().copied().collect();
        mirrored.spectrum =
            Spectrum::new(velocity, spectrum.width_km_s().to_vec(), temperature).unwrap();
        mirrored
    };
    let mirrored = (
        mirror(&pair.0),
        mirror(&pair.1),
        pair.2.clone(),
        pair.3.clone(),
    );
    let (one, other) = (
        fit(&pair, &FitSettings::default()),
        fit(&mirrored, &FitSettings::default()),
    );
    for (one, other) in one.models.iter().zip(&other.models) {
        let (v_in, mirrored_v_in) = (
            one.estimate("v_in_km_s").unwrap(),
            other.estimate("v_in_km_s").unwrap(),
        );
        assert!(
            (v_in.value + mirrored_v_in.value).abs() < 0.01 * v_in.err,
            "{}",
            one.model.name()
        );
        assert!((one.chi2 / other.chi2 - 1.0).abs() < 1e-6);
    }
}

#[test]
fn held_parameters_stay_and_priors_pull() {
    let pair = hill_pair(0.2, 4);
    let given = |err: f64| FitSettings {
        models: vec![Model::Hill],
        given: [("tau".to_owned(), Estimate { value: 8.0, err })]
            .into_iter()
            .collect(),
        ..FitSettings::default()
    };
    let free = fit(
        &pair,
        &FitSettings {
            models: vec![Model::Hill],
            ..FitSettings::default()
        },
    );
    let held = fit(&pair, &given(0.0));
    let pulled = fit(&pair, &given(0.05));
    let tau = |fit: &inrush::fit::PairFit| fit.models[0].parameter("tau").unwrap().clone();
    assert_eq!(tau(&held).value, 8.0);
    assert!(tau(&held).held && tau(&held).err.is_none());
    assert!(tau(&free).value < tau(&pulled).value && tau(&pulled).value < 8.0);
    assert!(tau(&pulled).err.unwrap() < 0.05);
    assert!(held.models[0].chi2 > free.models[0].chi2);
}

#[test]
fn linked_depths_have_the_given_ratio() {
    let (thick_line, thin_line) = (line(89.1885, SINGLE), line(86.7543, SINGLE));
    let thick = prepared(
        Model::Hill,
        &thick_line,
        &[0.1, 0.5, 0.2, 10.0, 15.0],
        0.05,
        5,
    );
    // 2 * 10 / 50 in the thin line
    let thin = prepared(Model::Layer, &thin_line, &[0.1, 0.5, 0.4, 9.0], 0.02, 6);
    let settings = FitSettings {
        models: vec![Model::Hill],
        isotope_ratio: Some(Estimate {
            value: 50.0,
            err: 0.0,
        }),
        ..FitSettings::default()
    };
    let fit = fit(&(thick, thin, thick_line, thin_line), &settings);
    let tau = fit.models[0].estimate("tau").unwrap();
    let t_ex = fit.models[0].estimate("t_ex_thin_k").unwrap();
    assert!((tau.value - 10.0).abs() < 4.0 * tau.err, "{tau:?}");
    assert!((t_ex.value - 9.0).abs() < 4.0 * t_ex.err, "{t_ex:?}");
    assert_eq!(
        fit.models[0].parameter("isotope_ratio").unwrap().value,
        50.0
    );
}

#[test]
fn a_bound_that_binds_is_reported_and_has_no_error() {
    let pair = hill_pair(0.2, 7);
    let settings = FitSettings {
        models: vec![Model::Hill],
        bounds: [("tau".to_owned(), (4.0, 4.5))].into_iter().collect(),
        range: Some(FitRange::All),
        ..FitSettings::default()
    };
    let fit = fit(&pair, &settings);
    let tau = fit.models[0].parameter("tau").unwrap();
    assert_eq!(tau.value, 4.5);
    assert!(tau.at_bound.is_some() && tau.err.is_none());
}

#[test]
fn a_multiplet_thick_line_gives_its_speed_back() {
    let (thick_line, thin_line) = (line(88.6318, TRIPLET), line(86.34, SINGLE));
    let thick = prepared(
        Model::Hill,
        &thick_line,
        &[0.1, 0.5, 0.25, 8.0, 12.0],
        0.05,
        8,
    );
    let thin = prepared(Model::Gaussian, &thin_line, &[0.1, 0.5, 0.8], 0.03, 9);
    let fit = fit(
        &(thick, thin, thick_line, thin_line),
        &FitSettings::default(),
    );
    let hill = &fit.models[1];
    let v_in = hill.estimate("v_in_km_s").unwrap();
    assert!((v_in.value - 0.25).abs() < 4.0 * v_in.err, "{v_in:?}");
    assert!(hill.chi2_reduced() < 1.2);
}
