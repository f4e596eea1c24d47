//! docs/methods.md: its equations where no other test checks them, written out here a second time,
//! and the tests that it and docs/validation.md name.

#![allow(clippy::unwrap_used)]

use inrush::constants::FWHM_PER_SIGMA;
use inrush::fit::Workspace;
use inrush::fit::priors::PRIORS;
use inrush::fit::{FitSettings, Layout, fit_pair};
use inrush::line::{Component, Line};
use inrush::measure::{MeasureSettings, ThinLine, measure};
use inrush::model::{LineShape, Model, Sampling};
use inrush::numeric::least_squares::Interval;
use inrush::numeric::{Autoregression, Estimate};
use inrush::prepare::Prepared;
use inrush::simulate::{NoiseLevel, PairTruth, simulate_pair};
use inrush::spectrum::{Noise, Spectrum, Window};
use std::fmt::Write as _;
use std::path::Path;

const V_LSR_KM_S: f64 = 0.02;
const SIGMA_KM_S: f64 = 0.5;
const CHANNEL_KM_S: f64 = 0.08;
const WINDOW: Window = Window {
    low_km_s: -2.5,
    high_km_s: 2.5,
};

fn line(name: &str, rest_frequency_ghz: f64, components: Vec<Component>) -> Line {
    Line::custom(name, rest_frequency_ghz, None, Some(components)).unwrap()
}

/// Three components with shares 3:5:1 at invented offsets.
fn triplet() -> Vec<Component> {
    [(0.9, 3.0), (0.0, 5.0), (-1.4, 1.0)]
        .map(|(offset_km_s, parts)| Component {
            offset_km_s,
            weight: parts / 9.0,
        })
        .to_vec()
}

fn velocities() -> Vec<f64> {
    (-62..=62)
        .map(|step| f64::from(step) * CHANNEL_KM_S)
        .collect()
}

fn prepared(temperature_k: Vec<f64>, process: Autoregression) -> Prepared {
    let velocity = velocities();
    let channels = velocity.len();
    Prepared::as_given(
        Spectrum::new(velocity, vec![CHANNEL_KM_S; channels], temperature_k).unwrap(),
        WINDOW,
        Noise {
            rms_k: 0.05,
            channels,
            process,
        },
    )
}

fn profile(model: Model, shape: &LineShape, parameters: &[f64]) -> Vec<f64> {
    let sampling = Sampling::at(velocities());
    let mut value = vec![0.0; sampling.len()];
    model.evaluate(shape, &sampling, parameters, &mut value, None);
    value
}

#[test]
fn gaussians_and_layers_follow_their_equations() {
    let shape = LineShape::new(93.2, triplet());
    let (sigma, peak, tau, t_ex) = (0.3, 4.0, 2.5, 9.0);
    // J(T) = x/(e^(x/T) - 1), x = h nu/k with h = 6.62607015e-34, k = 1.380649e-23 (SI)
    let j = |t: f64| {
        let x = 6.626_070_15e-34 * 93.2e9 / 1.380_649e-23;
        x / ((x / t).exp() - 1.0)
    };
    let gaussian = profile(Model::Gaussian, &shape, &[V_LSR_KM_S, sigma, peak]);
    let two = profile(
        Model::TwoGaussians,
        &shape,
        &[V_LSR_KM_S, sigma, peak, V_LSR_KM_S, sigma, 1.0],
    );
    let layer = profile(Model::Layer, &shape, &[V_LSR_KM_S, sigma, tau, t_ex]);
    for (channel, v) in velocities().into_iter().enumerate() {
        let phi: f64 = triplet()
            .iter()
            .map(|one| {
                let z = (v - V_LSR_KM_S - one.offset_km_s) / sigma;
                one.weight * (-0.5 * z * z).exp()
            })
            .sum();
        let expected = peak * phi / (5.0 / 9.0);
        assert!((gaussian[channel] - expected).abs() < 1e-12, "{v}");
        assert!((two[channel] - 1.25 * expected).abs() < 1e-12, "{v}");
        let expected = (j(t_ex) - j(2.725_48)) * (1.0 - (-tau * phi).exp());
        assert!((layer[channel] - expected).abs() < 1e-12, "{v}");
    }
}

#[test]
fn closed_form_peak_ratio_asymmetry_and_skewness_follow_their_equations() {
    let shape = LineShape::new(89.188_524_7, vec![Component::SINGLE]);
    let temperature = profile(
        Model::TwoLayer,
        &shape,
        &[V_LSR_KM_S, SIGMA_KM_S, 0.08, 4.0, 6.0, 20.0],
    );
    let thick = prepared(temperature.clone(), Autoregression::white());
    let thin = prepared(
        profile(Model::Gaussian, &shape, &[V_LSR_KM_S, SIGMA_KM_S, 1.0]),
        Autoregression::white(),
    );
    let measures = measure(
        &thick,
        &thin,
        Some(&thin_line()),
        0.0,
        &MeasureSettings::default(),
    );
    let peaks = measures.two_peaks.unwrap();
    let (blue, red, dip) = (peaks.blue_k.value, peaks.red_k.value, peaks.dip_k.value);
    assert!((measures.peak_ratio.unwrap().value - blue / red).abs() < 1e-12);
    let e = std::f64::consts::E;
    let closed = SIGMA_KM_S.powi(2) / (peaks.v_red_km_s.value - peaks.v_blue_km_s.value)
        * ((1.0 + e * (blue - dip) / dip) / (1.0 + e * (red - dip) / dip)).ln();
    assert!((measures.v_closed_form_km_s.unwrap().value - closed).abs() < 1e-12);
    let (mut sides, mut moments) = ([0.0; 2], [0.0; 4]);
    for (v, t) in velocities().into_iter().zip(&temperature) {
        if !WINDOW.contains(v) {
            continue;
        }
        // the part of the channel on the blue side of v_thin
        let blue_share = (0.5 - (v - V_LSR_KM_S) / CHANNEL_KM_S).clamp(0.0, 1.0);
        sides[0] += blue_share * t;
        sides[1] += (1.0 - blue_share) * t;
        for (power, moment) in (0..).zip(&mut moments) {
            *moment += t * (v - V_LSR_KM_S).powi(power);
        }
    }
    let asymmetry = (sides[0] - sides[1]) / (sides[0] + sides[1]);
    assert!((measures.asymmetry.unwrap().value - asymmetry).abs() < 1e-12);
    let skewness = moments[3] / moments[0] / (moments[2] / moments[0]).powf(1.5);
    assert!((measures.skewness.unwrap().value - skewness).abs() < 1e-12);
}

fn thin_line() -> ThinLine {
    let estimate = |value, err| Estimate { value, err };
    ThinLine {
        v_km_s: estimate(V_LSR_KM_S, 0.01),
        fwhm_km_s: estimate(FWHM_PER_SIGMA * SIGMA_KM_S, 0.02),
        covariance_v_fwhm: 0.0,
        peak_k: estimate(1.0, 0.02),
    }
}

fn linked() -> FitSettings {
    FitSettings {
        isotope_ratio: Some(Estimate {
            value: 60.0,
            err: 12.0,
        }),
        ..FitSettings::default()
    }
}

fn reach() -> Interval {
    Interval::new(-5.0, 5.0)
}

#[test]
fn linked_depths_follow_the_isotope_ratio() {
    let layout = Layout::new(Model::Hill, Model::Layer, &linked(), reach()).unwrap();
    let values: Vec<f64> = layout
        .parameters()
        .iter()
        .map(|parameter| match parameter.name {
            "tau" => 9.0,
            "isotope_ratio" => 45.0,
            _ => 1.0,
        })
        .collect();
    let (model, thin) = layout.thin(&values);
    // 2 * 9/45
    assert_eq!(model, Model::Layer);
    assert!((thin[model.position("tau_total").unwrap()] - 0.4).abs() < 1e-15);
}

#[test]
fn the_hill_is_adopted_before_two_layers_whatever_their_chi2() {
    let lines = (
        line("thick", 89.2, vec![Component::SINGLE]),
        line("thin", 86.8, vec![Component::SINGLE]),
    );
    let shape = LineShape::new(89.2, vec![Component::SINGLE]);
    let temperature = profile(
        Model::TwoLayer,
        &shape,
        &[V_LSR_KM_S, SIGMA_KM_S, 0.08, 4.0, 6.0, 20.0],
    );
    // a ripple in the place of noise, so that chi2 is not zero
    let rippled = temperature
        .iter()
        .enumerate()
        .map(|(channel, t)| t + 0.03 * (2.1 * channel as f64).sin())
        .collect();
    let thick = prepared(rippled, Autoregression::white());
    let thin = prepared(
        profile(Model::Gaussian, &shape, &[V_LSR_KM_S, SIGMA_KM_S, 1.0]),
        Autoregression::white(),
    );
    let fitted = |models: Vec<Model>| {
        let settings = FitSettings {
            models,
            ..FitSettings::default()
        };
        fit_pair(
            &thick,
            &thin,
            (&lines.0, &lines.1),
            Some(&thin_line()),
            &settings,
            &mut Workspace::new(),
        )
        .unwrap()
    };
    let both = fitted(vec![Model::TwoLayer, Model::Hill]);
    assert!(both.models[0].chi2 < both.models[1].chi2);
    assert_eq!(both.adopted().unwrap().model, Model::Hill);
    let alone = fitted(vec![Model::Gaussian, Model::TwoLayer]);
    assert_eq!(alone.adopted().unwrap().model, Model::TwoLayer);
    assert_eq!(fitted(vec![Model::Gaussian]).adopted, None);
}

#[test]
fn simulated_channels_follow_their_equation() {
    let lines = (
        line("thick", 89.2, vec![Component::SINGLE]),
        line("thin", 86.8, vec![Component::SINGLE]),
    );
    let mut truth = PairTruth::new((Model::Gaussian, Model::Gaussian), lines, 5);
    truth.thick.noise = NoiseLevel::RmsK(0.0);
    truth.thick.axis.channel_km_s = 0.5;
    truth.thick.parameters = [("v_lsr_km_s", 0.3), ("sigma_km_s", 0.4), ("peak_k", 2.0)]
        .map(|(name, value)| (name.to_owned(), value))
        .into();
    let baseline = &mut truth.thick.baseline;
    baseline.offset_k = 0.2;
    baseline.slope_k_per_km_s = -0.03;
    baseline.curvature_k_per_km2_s2 = 0.002;
    baseline.ripple_k = 0.1;
    baseline.ripple_period_km_s = 7.0;
    baseline.ripple_phase_deg = 40.0;
    let spectrum = simulate_pair(&truth).unwrap().thick.spectrum;
    let v = spectrum.velocity_km_s();
    let middle = 0.5 * (v[0] + v[v.len() - 1]);
    for (v, found) in v.iter().zip(spectrum.temperature_k()) {
        // the mean of a Gaussian over a channel is a difference of error functions
        let edge = |side: f64| {
            statrs::function::erf::erf((v + 0.25 * side - 0.3) / (0.4 * std::f64::consts::SQRT_2))
        };
        let mean = 2.0 * 0.4 * (0.5 * std::f64::consts::PI).sqrt() * (edge(1.0) - edge(-1.0)) / 0.5;
        let x = v - middle;
        let ripple = 0.1 * (std::f64::consts::TAU * x / 7.0 + 40_f64.to_radians()).sin();
        let expected = mean + 0.2 - 0.03 * x + 0.002 * x * x + ripple;
        // the error function here is good to 1e-10 or better
        assert!((found - expected).abs() < 1e-9, "{v}: {found} {expected}");
    }
}

/// Whether a name ends in a unit, as results and settings do and tests do not.
fn is_quantity(name: &str) -> bool {
    ["_k", "_km_s", "_cm3", "_cm2", "_cm2_g", "_msun_yr"]
        .iter()
        .any(|unit| name.ends_with(unit))
}

/// Names in backquotes: a file, then `: `, then a test; a test alone belongs to the file before it.
#[test]
fn every_test_that_the_pages_name_exists() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let pages = ["docs/methods.md", "docs/validation.md"]
        .map(|page| std::fs::read_to_string(root.join(page)).unwrap());
    let page = pages.concat().replace('\n', " ");
    let mut file: Option<(String, String)> = None;
    let mut checked = 0;
    for quoted in page.split('`').skip(1).step_by(2) {
        let test = if let Some((path, test)) = quoted.split_once(".rs: ") {
            let path = format!("{path}.rs");
            let source = std::fs::read_to_string(root.join(&path))
                .unwrap_or_else(|error| panic!("{path}: {error}"));
            file = Some((path, source));
            test
        } else if quoted.matches('_').count() >= 3 && !is_quantity(quoted) {
            quoted
        } else {
            continue;
        };
        let (path, source) = file.as_ref().expect("a file before the first test");
        assert!(source.contains(&format!("fn {test}(")), "{path}: {test}");
        checked += 1;
    }
    assert!(checked > 40, "{checked} tests named");
}

/// The table of priors on the page is that of the code. `INRUSH_WRITE_EXPECTED=1` writes it.
#[test]
fn the_page_shows_the_priors() {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("docs/methods.md");
    let page = std::fs::read_to_string(&path).unwrap();
    let (begin, end) = (
        "<!-- priors: written by tests/methods_page.rs -->\n",
        "<!-- end of priors -->",
    );
    let (before, rest) = page.split_once(begin).unwrap();
    let (found, after) = rest.split_once(end).unwrap();
    let mut expected = String::from("| name | density | of what, and why |\n| --- | --- | --- |\n");
    for row in PRIORS {
        let (name, density, about) = (row.name, row.prior.text(), row.about);
        writeln!(expected, "| {name} | {density} | {about} |").unwrap();
    }
    if std::env::var_os("INRUSH_WRITE_EXPECTED").is_some() {
        std::fs::write(&path, format!("{before}{begin}{expected}{end}{after}")).unwrap();
    } else {
        assert_eq!(found, expected, "docs/methods.md");
    }
}
