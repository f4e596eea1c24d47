//! Core, wings and first moment of the thick line: values of known profiles, errors against scatter.
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.

use inrush::measure::{ThinLine, first_moment, sides};
use inrush::numeric::{Autoregression, Estimate};
use inrush::prepare::Prepared;
use inrush::spectrum::{Noise, Spectrum, Window};
use rand::SeedableRng as _;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution as _, StandardNormal};
use statrs::function::erf::erf;

const CHANNEL_KM_S: f64 = 0.05;
const NOISE_K: f64 = 0.1;
const RANGE: Window = Window {
    low_km_s: -6.0,
    high_km_s: 6.0,
};

fn velocities() -> Vec<f64> {
    (-240..=240)
        .map(|step| CHANNEL_KM_S * f64::from(step))
        .collect()
}

/// Peak (K), centre and dispersion (km/s) of Gaussians that the line is the sum of.
fn line(gaussians: &[[f64; 3]]) -> Vec<f64> {
    let at = |v: f64| {
        let terms = gaussians
            .iter()
            .map(|[peak, centre, sigma]| peak * (-0.5 * ((v - centre) / sigma).powi(2)).exp());
        terms.sum()
    };
    velocities().into_iter().map(at).collect()
}

fn prepared(temperature_k: Vec<f64>) -> Prepared {
    let velocity = velocities();
    let widths = vec![CHANNEL_KM_S; velocity.len()];
    let channels = velocity.len();
    Prepared::as_given(
        Spectrum::new(velocity, widths, temperature_k).unwrap(),
        RANGE,
        Noise {
            rms_k: NOISE_K,
            channels,
            process: Autoregression::from_reflections(&[]),
        },
    )
}

fn thin(v_km_s: f64, fwhm_km_s: f64) -> ThinLine {
    let estimate = |value, err| Estimate { value, err };
    ThinLine {
        v_km_s: estimate(v_km_s, 0.02),
        fwhm_km_s: estimate(fwhm_km_s, 0.03),
        covariance_v_fwhm: 0.0,
        peak_k: estimate(1.0, 0.05),
    }
}

/// Integral of a Gaussian between two velocities.
fn part([peak, centre, sigma]: [f64; 3], low: f64, high: f64) -> f64 {
    let scaled = |v: f64| erf((v - centre) / (sigma * std::f64::consts::SQRT_2));
    0.5 * peak * sigma * std::f64::consts::TAU.sqrt() * (scaled(high) - scaled(low))
}

#[test]
fn core_and_wings_are_what_lies_blue_less_what_lies_red() {
    let (main, lobe, fwhm) = ([4.0, -0.2, 0.5], [0.5, 2.4, 0.6], 1.2);
    let found = sides(
        &prepared(line(&[main, lobe])),
        &thin(0.03, fwhm),
        1,
        0.02,
        5.0,
    )
    .unwrap();
    let both = |low: f64, high: f64| part(main, low, high) + part(lobe, low, high);
    let (v, end) = (0.03, 4.0 * fwhm);
    let (blue, red) = (both(v - fwhm, v), both(v, v + fwhm));
    let (blue_wing, red_wing) = (both(v - end, v - fwhm), both(v + fwhm, v + end));
    // channels of a tenth of the dispersion, whose values are those at their centres
    assert!((found.core.value - (blue - red) / (blue + red)).abs() < 2e-3);
    assert!((found.wings.value - (blue_wing - red_wing) / (blue + red)).abs() < 2e-3);
    assert!(found.core.value > 0.2 && found.wings.value < -0.05);
    // dA/dv = 2 T(v)/I where edges are faint: 0.02 km/s times that
    let slope = 2.0 * 4.0 * (-0.5f64 * (0.23 / 0.5f64).powi(2)).exp() / (blue + red);
    assert!((found.core_systematic / (0.02 * slope) - 1.0).abs() < 0.1);
    // reversed velocities change the signs
    let mirrored: Vec<f64> = line(&[main, lobe]).into_iter().rev().collect();
    let mirrored = sides(&prepared(mirrored), &thin(-0.03, fwhm), 1, 0.02, 5.0).unwrap();
    assert!((mirrored.core.value + found.core.value).abs() < 1e-12);
    assert!((mirrored.wings.value + found.wings.value).abs() < 1e-12);
}

#[test]
fn a_multiplet_a_faint_line_and_a_blank_core_have_no_sides() {
    let bright = line(&[[4.0, 0.0, 0.5]]);
    let of = |values: Vec<f64>, components| {
        sides(&prepared(values), &thin(0.0, 1.2), components, 0.0, 5.0)
    };
    assert!(of(bright.clone(), 1).is_some());
    assert!(of(bright.clone(), 3).is_none());
    assert!(of(line(&[[0.01, 0.0, 0.5]]), 1).is_none());
    let mut blank = bright.clone();
    blank[245] = f64::NAN;
    assert!(of(blank, 1).is_none());
    let mut blank = bright;
    blank[200] = f64::NAN;
    assert!(of(blank, 1).is_some());
}

#[test]
fn a_first_moment_is_the_mean_velocity() {
    let (main, lobe) = ([4.0, -0.2, 0.5], [0.5, 2.4, 0.6]);
    let found = first_moment(&prepared(line(&[main, lobe])), RANGE, 5.0).unwrap();
    let (one, other) = (4.0 * 0.5, 0.5 * 0.6);
    let expected = (-0.2 * one + 2.4 * other) / (one + other);
    assert!((found.value - expected).abs() < 1e-6);
    assert!(first_moment(&prepared(line(&[[0.01, 0.0, 0.5]])), RANGE, 5.0).is_none());
}

#[test]
fn stated_errors_are_the_scatter() {
    const DRAWS: usize = 500;
    let profile = line(&[[4.0, -0.2, 0.5], [0.5, 2.4, 0.6]]);
    let mut generator = ChaCha8Rng::seed_from_u64(8);
    let mut found: [Vec<Estimate>; 3] = [vec![], vec![], vec![]];
    for _ in 0..DRAWS {
        let mut normal = || -> f64 { StandardNormal.sample(&mut generator) };
        let line = thin(0.02 * normal(), 1.2 + 0.03 * normal());
        let noisy: Vec<f64> = profile
            .iter()
            .map(|value| value + NOISE_K * normal())
            .collect();
        let noisy = prepared(noisy);
        let both = sides(&noisy, &line, 1, 0.0, 5.0).unwrap();
        let moment = first_moment(&noisy, RANGE, 5.0).unwrap();
        for (list, estimate) in found.iter_mut().zip([both.core, both.wings, moment]) {
            list.push(estimate);
        }
    }
    for (name, list) in ["core", "wings", "moment"].iter().zip(&found) {
        let mean = list.iter().map(|one| one.value).sum::<f64>() / DRAWS as f64;
        let squares: f64 = list.iter().map(|one| (one.value - mean).powi(2)).sum();
        let scatter = (squares / DRAWS as f64).sqrt();
        let stated = list.iter().map(|one| one.err).sum::<f64>() / DRAWS as f64;
        // four standard errors of a scatter from 500 draws
        assert!(
            (stated / scatter - 1.0).abs() < 0.126,
            "{name}: {stated} {scatter}"
        );
    }
}
