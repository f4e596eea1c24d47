//! Posteriors, evidences and verdicts of pairs whose answers are known.

#![allow(clippy::unwrap_used, clippy::print_stdout)]

use inrush::fit::averaged::Averaged;
use inrush::fit::hypotheses::{Hypothesis, Odds, Speed, verdict};
use inrush::fit::posterior::{
    Family, FamilyPosterior, PairPosterior, PosteriorError, PosteriorSettings, pair_posterior,
};
use inrush::fit::priors::{Prior, Priors};
use inrush::fit::{Averaging, FitRange};
use inrush::line::Line;
use inrush::measure::ThinLine;
use inrush::model::{LineShape, Model, Sampling};
use inrush::numeric::{Autoregression, Estimate};
use inrush::prepare::{Baseline, Prepared};
use inrush::spectrum::{Noise, Spectrum, Window};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use rand_distr::{Distribution, StandardNormal};
use std::path::Path;

const WINDOW: Window = Window {
    low_km_s: -2.0,
    high_km_s: 2.0,
};
const RANGE: Window = Window {
    low_km_s: -4.0,
    high_km_s: 4.0,
};

fn prepared(velocity: Vec<f64>, temperature_k: Vec<f64>, rms_k: f64) -> Prepared {
    let channels = velocity.len();
    Prepared {
        spectrum: Spectrum::new(velocity, vec![0.08; channels], temperature_k).unwrap(),
        window: WINDOW,
        window_automatic: false,
        window_cuts_line: false,
        other_signal: Vec::new(),
        baseline: Baseline {
            order: Some(1),
            values_k: vec![0.0; channels],
            channels,
            clipped: 0,
        },
        noise: Noise {
            rms_k,
            channels,
            process: Autoregression::white(),
        },
    }
}

fn thin_line(sigma_km_s: f64) -> ThinLine {
    let estimate = |value| Estimate { value, err: 0.02 };
    ThinLine {
        v_km_s: estimate(0.0),
        fwhm_km_s: estimate(sigma_km_s * inrush::constants::FWHM_PER_SIGMA),
        covariance_v_fwhm: 0.0,
        peak_k: estimate(1.0),
    }
}

fn lines() -> (Line, Line) {
    let line = |name: &str| Line::custom(name, 89.188_526, None, None).unwrap();
    (line("thick"), line("thin"))
}

fn settings() -> PosteriorSettings {
    PosteriorSettings {
        range: Some(FitRange::Within(RANGE)),
        averaging: Averaging::Centre,
        ..PosteriorSettings::default()
    }
}

fn posterior_of(
    pair: &(Prepared, Prepared),
    sigma: f64,
    settings: &PosteriorSettings,
) -> PairPosterior {
    let lines = lines();
    pair_posterior(
        &pair.0,
        &pair.1,
        (&lines.0, &lines.1),
        Some(&thin_line(sigma)),
        settings,
    )
    .unwrap()
}

/// ln Z within 0.2 of nested sampling by another library on the same data and priors, of which
/// `dynesty_evidence.py` is a second statement; the sign of v_in is the same.
#[test]
fn evidences_agree_with_nested_sampling() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/evidence");
    let text = std::fs::read_to_string(folder.join("cases.json")).unwrap();
    let cases: serde_json::Value = serde_json::from_str(&text).unwrap();
    let cases = cases["cases"].as_array().unwrap();
    assert_eq!(cases.len(), 3);
    for (case, number) in cases.iter().zip(1..) {
        let value = |name: &str| case[name].as_f64().unwrap();
        let column = |line: &str| {
            let path = folder.join(format!("case-{number}-{line}.csv"));
            let mut reader = csv::Reader::from_path(path).unwrap();
            let rows = reader.deserialize::<(f64, f64)>();
            rows.map(Result::unwrap)
                .unzip::<f64, f64, Vec<f64>, Vec<f64>>()
        };
        let of = |line: &str, noise: &str| {
            let (velocity, temperature_k) = column(line);
            prepared(velocity, temperature_k, value(noise))
        };
        let pair = (of("thick", "noise_thick_k"), of("thin", "noise_thin_k"));
        let model = Model::from_name(case["model"].as_str().unwrap()).unwrap();
        let found = posterior_of(&pair, value("sigma_km_s"), &settings());
        let found = found.of(Family::Moving(model)).unwrap();
        assert!(found.quality.holds(), "{:?}", found.quality);
        let apart = found.ln_evidence - value("ln_evidence");
        println!("case {number}: ln Z less that of nested sampling {apart:+.2}");
        assert!(
            apart.abs() < 0.2,
            "case {number}: {} {apart}",
            found.ln_evidence
        );
        let share = found.share_inward();
        assert!(
            (share - value("share_inward")).abs() < 0.01,
            "case {number}: {share}"
        );
    }
}

/// A pair of a model's profile with noise: the thin line a Gaussian of the same dispersion.
fn simulated(model: Model, parameters: &[f64], noise_k: f64, seed: u64) -> (Prepared, Prepared) {
    let lines = lines();
    let velocity: Vec<f64> = (-100..=100).map(|i| 0.08 * f64::from(i)).collect();
    let mut generator = ChaCha8Rng::seed_from_u64(seed);
    let mut line = |line: &Line, model: Model, parameters: &[f64], noise_k: f64| {
        let shape = LineShape::new(line.rest_frequency_ghz, line.components.clone());
        let sampling = Sampling::at(velocity.clone());
        let mut value = vec![0.0; sampling.len()];
        model.evaluate(&shape, &sampling, parameters, &mut value, None);
        for value in &mut value {
            let noise: f64 = StandardNormal.sample(&mut generator);
            *value += noise_k * noise;
        }
        prepared(velocity.clone(), value, noise_k)
    };
    let thick = line(&lines.0, model, parameters, noise_k);
    let thin = [parameters[0], 1.08 * parameters[1], 1.0];
    (thick, line(&lines.1, Model::Gaussian, &thin, 0.05))
}

const INFALL: [f64; 5] = [0.0, 0.5, 0.25, 5.0, 15.0];

#[test]
fn the_same_seed_gives_the_same_posterior() {
    let pair = simulated(Model::Hill, &INFALL, 0.2, 1);
    let of = |seed| posterior_of(&pair, 0.5, &PosteriorSettings { seed, ..settings() });
    assert_eq!(of(3), of(3));
    assert_ne!(of(3), of(4));
}

/// The kind of clump that a pair shows is favoured, and the mirrored pair shows the mirrored kind.
#[test]
fn clumps_are_taken_for_what_they_are() {
    let cases = [
        (INFALL, Hypothesis::Infall),
        ([0.0, 0.5, -0.25, 5.0, 15.0], Hypothesis::Expansion),
        ([0.0, 0.5, 0.0, 5.0, 15.0], Hypothesis::Static),
    ];
    for (parameters, expected) in cases {
        let posterior = posterior_of(
            &simulated(Model::Hill, &parameters, 0.2, 2),
            0.5,
            &settings(),
        );
        let verdict = verdict(&posterior, &Odds::default()).unwrap();
        assert_eq!(verdict.favoured(), expected, "{:?}", verdict.standings);
        let total: f64 = verdict.standings.iter().map(|one| one.probability).sum();
        assert!((total - 1.0).abs() < 1e-12);
        assert!(verdict.trusted);
        if expected == Hypothesis::Static {
            let Speed::Below { limit_km_s } = verdict.speed else {
                panic!("{:?}", verdict.speed)
            };
            assert!(limit_km_s < 0.2, "{limit_km_s}");
        } else {
            assert_eq!(verdict.speed, Speed::Measured);
            assert!(verdict.v_in_km_s.median * parameters[2] > 0.0);
            assert!(verdict.probability(expected) > 0.9);
        }
    }
}

#[test]
fn two_clouds_in_both_lines_are_told_from_infall() {
    let two = [-0.6, 0.35, 4.0, 0.7, 0.35, 3.0];
    let thick = simulated(Model::TwoGaussians, &two, 0.1, 3).0;
    let thin_two = [-0.6, 0.35, 1.0, 0.7, 0.35, 0.8];
    let thin = simulated(Model::TwoGaussians, &thin_two, 0.05, 4).0;
    let posterior = posterior_of(&(thick, thin), 0.5, &settings());
    let verdict = verdict(&posterior, &Odds::default()).unwrap();
    assert_eq!(
        verdict.favoured(),
        Hypothesis::TwoClouds,
        "{:?}",
        verdict.standings
    );
    let infall = verdict.standings[0];
    assert!(infall.is_excluded(), "{infall:?}");
}

/// Noise alone says nothing of a speed.
#[test]
fn a_pair_without_lines_leaves_the_speed_unconstrained() {
    let pair = simulated(Model::Hill, &[0.0, 0.5, 0.25, 5.0, 2.73], 0.2, 5);
    let noise_only = (pair.0.clone(), {
        let mut thin = pair.1.clone();
        thin.spectrum = pair.0.spectrum.clone();
        thin.noise = pair.0.noise.clone();
        thin
    });
    let lines = lines();
    let posterior = pair_posterior(
        &noise_only.0,
        &noise_only.1,
        (&lines.0, &lines.1),
        None,
        &settings(),
    )
    .unwrap();
    let verdict = verdict(&posterior, &Odds::default()).unwrap();
    assert_eq!(
        verdict.speed,
        Speed::Unconstrained,
        "{:?}",
        verdict.v_in_km_s
    );
}

#[test]
fn marginals_and_correlations_belong_to_named_parameters() {
    let posterior = posterior_of(&simulated(Model::Hill, &INFALL, 0.2, 6), 0.5, &settings());
    let hill: &FamilyPosterior = posterior.of(Family::Moving(Model::Hill)).unwrap();
    for (name, truth) in Model::Hill
        .parameters()
        .iter()
        .map(|one| one.name)
        .zip(INFALL)
    {
        let marginal = hill.marginal(name).unwrap();
        let (low, high) = marginal.interval95;
        // one seed: within the interval and half its width beside it
        let margin = 0.5 * (high - low);
        assert!(
            truth > low - margin && truth < high + margin,
            "{name}: {marginal:?}"
        );
    }
    let correlation = hill.correlation("tau", "sigma_km_s").unwrap();
    assert!(
        correlation < 0.0,
        "a thicker line is as wide at a lower dispersion: {correlation}"
    );
    assert!(hill.marginal("filling").is_none());
}

#[test]
fn settings_that_make_no_posterior_are_refused() {
    let pair = simulated(Model::Hill, &INFALL, 0.2, 7);
    let lines = lines();
    let of = |settings: PosteriorSettings| {
        pair_posterior(&pair.0, &pair.1, (&lines.0, &lines.1), None, &settings).unwrap_err()
    };
    let none = PosteriorSettings {
        draws: 0,
        ..settings()
    };
    assert!(matches!(
        of(none),
        PosteriorError::TooFewDraws { draws: 0, .. }
    ));
    let models = vec![Model::TwoLayerContinuum];
    assert!(matches!(
        of(PosteriorSettings {
            models,
            ..settings()
        }),
        PosteriorError::NoPosterior { .. }
    ));
    let range = Some(FitRange::Within(Window {
        low_km_s: 0.0,
        high_km_s: 0.3,
    }));
    assert!(matches!(
        of(PosteriorSettings {
            range,
            ..settings()
        }),
        PosteriorError::TooFewChannels { .. }
    ));
    let odds = Odds([0.0; 4]);
    assert!(verdict(&posterior_of(&pair, 0.5, &settings()), &odds).is_err());
}

/// A wider prior of the speed lowers the evidence of a small one.
#[test]
fn replaced_priors_change_the_evidence() {
    let pair = simulated(Model::Hill, &[0.0, 0.5, 0.1, 5.0, 15.0], 0.2, 8);
    let wide = Priors::default()
        .with("v_in_over_sigma", Prior::Normal { deviation: 5.0 })
        .unwrap();
    let evidence = |priors: Priors| {
        let posterior = posterior_of(
            &pair,
            0.5,
            &PosteriorSettings {
                priors,
                ..settings()
            },
        );
        posterior
            .of(Family::Moving(Model::Hill))
            .unwrap()
            .ln_evidence
    };
    let lower = evidence(Priors::default()) - evidence(wide);
    // the speed is far smaller than either width: five times wider, five times less dense
    assert!((lower - 5f64.ln()).abs() < 0.25, "{lower}");
}

/// What is given narrows the posterior, bounds end it, and held parameters stay.
#[test]
fn bounds_and_given_values_hold_in_draws() {
    let pair = simulated(Model::Hill, &INFALL, 0.4, 9);
    let estimate = |value, err| Estimate { value, err };
    let of = |bounds: &[(&str, (f64, f64))], given: &[(&str, Estimate)]| {
        let bounds = bounds
            .iter()
            .map(|(name, ends)| ((*name).to_owned(), *ends));
        let given = given
            .iter()
            .map(|(name, value)| ((*name).to_owned(), *value));
        let settings = PosteriorSettings {
            bounds: bounds.collect(),
            given: given.collect(),
            ..settings()
        };
        posterior_of(&pair, 0.5, &settings)
    };
    let hill = Family::Moving(Model::Hill);
    let column = |posterior: &PairPosterior, name: &str| -> Vec<f64> {
        let family = posterior.of(hill).unwrap();
        let index = family
            .names
            .iter()
            .position(|known| *known == name)
            .unwrap();
        family.draws.iter().map(|draw| draw[index]).collect()
    };
    let free = of(&[], &[]);
    let held = of(
        &[("tau", (1.0, 4.0))],
        &[
            ("sigma_km_s", estimate(0.5, 0.0)),
            ("v_lsr_km_s", estimate(0.02, 0.0)),
        ],
    );
    assert!(
        column(&held, "sigma_km_s")
            .iter()
            .all(|one| (one - 0.5).abs() < 1e-12)
    );
    assert!(column(&held, "v_lsr_km_s").iter().all(|one| *one == 0.02));
    assert!(
        column(&held, "tau")
            .iter()
            .all(|tau| (1.0..=4.0).contains(tau))
    );
    let wide = |posterior: &PairPosterior| {
        let (low, high) = posterior.of(hill).unwrap().v_in_km_s().unwrap().interval68;
        high - low
    };
    let known = of(&[], &[("v_in_km_s", estimate(0.25, 0.01))]);
    assert!(wide(&known) < 0.5 * wide(&free));
    // a speed that can only be outward leaves no evidence of infall
    let outward = of(&[("v_in_km_s", (-1.0, -0.01))], &[]);
    let verdict = verdict(&outward, &Odds::default()).unwrap();
    assert_eq!(verdict.probability(Hypothesis::Infall), 0.0);
    assert!(verdict.v_in_km_s.interval95.1 < 0.0);
}

/// The ratio's prior is what the pair leaves of it, and the thin line's excitation follows its depth.
#[test]
fn linked_depths_and_calibration_errors_reach_the_draws() {
    let pair = simulated(Model::Hill, &INFALL, 0.2, 10);
    let ratio = Estimate {
        value: 40.0,
        err: 4.0,
    };
    let linked = posterior_of(
        &pair,
        0.5,
        &PosteriorSettings {
            isotope_ratio: Some(ratio),
            ..settings()
        },
    );
    let hill = linked.of(Family::Moving(Model::Hill)).unwrap();
    let found = hill.marginal("isotope_ratio").unwrap();
    assert!((found.median - 40.0).abs() < 4.0, "{found:?}");
    for draw in &hill.draws {
        let value = |name: &str| draw[hill.names.iter().position(|known| *known == name).unwrap()];
        let depth = 2.0 * value("tau") / value("isotope_ratio");
        let radiation = LineShape::new(89.188_526, lines().1.components).radiation;
        let excess = radiation.at(value("t_ex_thin_k")) - radiation.background();
        let peak = excess * -(-depth).exp_m1();
        assert!((peak / value("peak_thin_k") - 1.0).abs() < 1e-6);
    }
    let width = |calibration_error: (f64, f64), name: &str| {
        let settings = PosteriorSettings {
            calibration_error,
            ..settings()
        };
        let posterior = posterior_of(&pair, 0.5, &settings);
        let hill = posterior.of(Family::Moving(Model::Hill)).unwrap();
        let (low, high) = hill.marginal(name).unwrap().interval68;
        (high - low, hill.v_in.clone())
    };
    let (certain, speeds) = width((0.0, 0.0), "peak_thin_k");
    let (uncertain, same_speeds) = width((0.1, 0.2), "peak_thin_k");
    // the line's peak of 1 K becomes uncertain by a fifth either way
    assert!(certain < 0.1 && uncertain > 0.3, "{certain} {uncertain}");
    assert_eq!(speeds, same_speeds);
}

/// Draws of the average are those of the models by their shares.
#[test]
fn averaged_draws_come_from_the_models_by_their_evidence() {
    let posterior = posterior_of(&simulated(Model::Hill, &INFALL, 0.4, 11), 0.5, &settings());
    let verdict = verdict(&posterior, &Odds::default()).unwrap();
    let averaged = Averaged::new(&posterior, &verdict).unwrap();
    let draws: Vec<_> = averaged.rows(800).collect();
    assert_eq!(draws.len(), 800);
    for (model, share) in posterior.model_shares() {
        let of = draws.iter().filter(|draw| draw.model == model).count();
        // blocks end at whole draws; a share below a thousandth has none
        assert!((of as f64 - 800.0 * share).abs() <= 1.0);
    }
    let mean = draws
        .iter()
        .map(|draw| draw.get("v_in_km_s").unwrap())
        .sum::<f64>()
        / 800.0;
    let average = verdict.v_in_km_s;
    let (low, high) = average.interval68;
    // 500 draws of each model: four standard errors
    assert!((mean - average.mean).abs() < 4.0 * 0.5 * (high - low) / 500f64.sqrt());
}

#[test]
fn impossible_options_are_refused() {
    let pair = simulated(Model::Hill, &INFALL, 0.2, 12);
    let lines = lines();
    let refused = |settings: PosteriorSettings| {
        let error = pair_posterior(&pair.0, &pair.1, (&lines.0, &lines.1), None, &settings);
        let error = error.unwrap_err();
        assert!(error.to_string().contains("expected") && error.hint().is_some());
        error
    };
    let estimate = |value, err| Estimate { value, err };
    assert!(matches!(
        refused(PosteriorSettings {
            isotope_ratio: Some(estimate(-50.0, 0.0)),
            ..settings()
        }),
        PosteriorError::IsotopeRatio { .. }
    ));
    assert!(matches!(
        refused(PosteriorSettings {
            calibration_error: (0.1, 1.5),
            ..settings()
        }),
        PosteriorError::NoShare { .. }
    ));
    let bounded = |name: &str, ends| PosteriorSettings {
        bounds: [(name.to_owned(), ends)].into(),
        ..settings()
    };
    assert!(matches!(
        refused(bounded("t_peak_k", (5.0, 20.0))),
        PosteriorError::NotConstrained { .. }
    ));
    assert!(matches!(
        refused(bounded("tau", (5.0, 2.0))),
        PosteriorError::Improper { .. }
    ));
    // beyond the fitted velocities
    assert!(matches!(
        refused(bounded("v_lsr_km_s", (20.0, 30.0))),
        PosteriorError::NoPriorMass { .. }
    ));
}
