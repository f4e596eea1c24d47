//! The profile models against finite differences, symmetries, limits, and quadrature of the
//! transfer equation that they solve.
#![allow(
    clippy::unwrap_used,
    reason = "a test stops where its data cannot be read"
)]

use inrush::line::Component;
use inrush::model::{LineShape, Model, Sampling};
use proptest::prelude::*;

fn single(frequency_ghz: f64) -> LineShape {
    LineShape::new(
        frequency_ghz,
        vec![Component {
            offset_km_s: 0.0,
            weight: 1.0,
        }],
    )
}

/// HCN 1-0: three components (offsets from LAMDA frequencies; weights 3:5:1).
fn triplet() -> LineShape {
    LineShape::new(
        88.631_847_5,
        vec![
            Component {
                offset_km_s: 4.8433,
                weight: 3.0 / 9.0,
            },
            Component {
                offset_km_s: 0.0,
                weight: 5.0 / 9.0,
            },
            Component {
                offset_km_s: -7.0632,
                weight: 1.0 / 9.0,
            },
        ],
    )
}

fn grid(low: f64, high: f64, channels: usize) -> Vec<f64> {
    (0..channels)
        .map(|i| low + (high - low) * i as f64 / (channels as f64 - 1.0))
        .collect()
}

fn profile(model: Model, line: &LineShape, sampling: &Sampling, parameters: &[f64]) -> Vec<f64> {
    let mut value = vec![f64::NAN; sampling.len()];
    model.evaluate(line, sampling, parameters, &mut value, None);
    value
}

/// Typical parameters of a model, from ten numbers between 0 and 1.
fn draw(model: Model, u: &[f64; 10]) -> Vec<f64> {
    let span = |u: f64, low: f64, high: f64| low + (high - low) * u;
    let log_span = |u: f64, low: f64, high: f64| low * (high / low).powf(u);
    let velocity = span(u[0], -1.0, 1.0);
    let sigma = log_span(u[1], 0.15, 2.0);
    let v_in = span(u[2], -1.5, 1.5) * sigma;
    let tau = log_span(u[3], 0.03, 100.0);
    let (first, second) = (span(u[4], 2.8, 60.0), span(u[5], 2.8, 60.0));
    match model {
        Model::Gaussian => vec![velocity, sigma, span(u[4], -2.0, 30.0)],
        Model::TwoGaussians => {
            vec![
                velocity,
                sigma,
                span(u[4], 0.1, 20.0),
                span(u[2], -3.0, 3.0),
                log_span(u[6], 0.15, 2.0),
                span(u[5], 0.1, 20.0),
            ]
        }
        Model::Layer => vec![velocity, sigma, tau, first],
        Model::TwoLayer | Model::HillSurface => vec![velocity, sigma, v_in, tau, first, second],
        Model::TwoLayerContinuum => {
            vec![
                velocity,
                sigma,
                v_in,
                tau,
                first,
                second,
                span(u[6], 0.01, 0.9),
                span(u[7], 5.0, 400.0),
            ]
        }
        Model::Hill => vec![velocity, sigma, v_in, tau, first],
    }
}

proptest! {
    #[test]
    fn jacobians_agree_with_finite_differences_to_one_in_a_million(
        u in prop::array::uniform10(0.0..1.0f64), points in 1usize..4, multiplet in any::<bool>(),
    ) {
        let line = if multiplet { triplet() } else { single(89.1885) };
        let velocity = grid(-12.0, 10.0, 131);
        let sampling = Sampling::new(velocity.clone(), vec![0.17; velocity.len()], points);
        for model in Model::ALL {
            let parameters = draw(model, &u);
            let channels = sampling.len();
            let mut value = vec![0.0; channels];
            let mut jacobian = vec![f64::NAN; channels * parameters.len()];
            model.evaluate(&line, &sampling, &parameters, &mut value, Some(&mut jacobian));
            prop_assert_eq!(&value, &profile(model, &line, &sampling, &parameters));
            for (index, column) in jacobian.chunks(channels).enumerate() {
                let quotient = |step: f64| -> Vec<f64> {
                    let mut up = parameters.clone();
                    let mut down = parameters.clone();
                    up[index] += step;
                    down[index] -= step;
                    let (up, down) = (profile(model, &line, &sampling, &up), profile(model, &line, &sampling, &down));
                    up.iter().zip(&down).map(|(a, b)| (a - b) / (2.0 * step)).collect()
                };
                // velocities and widths change the profile over a fraction of sigma
                let step = if index < 3 { 2e-3 * parameters[1] } else { 2e-3 * parameters[index].abs().max(1e-2) };
                let (coarse, middle, fine) = (quotient(step), quotient(0.5 * step), quotient(0.25 * step));
                let height = column.iter().fold(0.0f64, |most, value| most.max(value.abs()));
                for channel in 0..channels {
                    let first = (4.0 * middle[channel] - coarse[channel]) / 3.0;
                    let second = (4.0 * fine[channel] - middle[channel]) / 3.0;
                    let richardson = (16.0 * second - first) / 15.0;
                    // differences of values of some 60 K round to 1e-14 K, over the finest step
                    let rounding = 2e-14 * 60.0 / (0.5 * step);
                    prop_assert!(
                        (richardson - column[channel]).abs() <= 1e-6 * height + rounding,
                        "{} {}: {} against {} (column height {height})",
                        model.name(), model.parameters()[index].name, column[channel], richardson
                    );
                }
            }
        }
    }

    #[test]
    fn mirrored_velocities_and_infall_mirror_the_profile(u in prop::array::uniform10(0.0..1.0f64)) {
        let velocity = grid(-6.0, 6.0, 121);
        let sampling = Sampling::new(velocity.clone(), vec![0.1; velocity.len()], 2);
        let line = single(89.1885);
        for model in Model::ALL.into_iter().filter(|model| model.has_infall()) {
            let parameters = draw(model, &u);
            let mut mirrored = parameters.clone();
            mirrored[0] = -mirrored[0];
            mirrored[2] = -mirrored[2];
            let one = profile(model, &line, &sampling, &parameters);
            let mut other = profile(model, &line, &sampling, &mirrored);
            other.reverse();
            for (a, b) in one.iter().zip(&other) {
                prop_assert!((a - b).abs() < 1e-11, "{}: {a} {b}", model.name());
            }
        }
    }
}

/// Brightness above background of a stack of thin sheets, from the rear to the front: the transfer
/// equation dI = (S - I) d tau stepped with the exact solution for each sheet.
fn through_sheets(background: f64, sheets: impl Iterator<Item = (f64, f64)>) -> f64 {
    let mut intensity = background;
    for (source, depth) in sheets {
        intensity = intensity * (-depth).exp() - source * (-depth).exp_m1();
    }
    intensity - background
}

/// Integral of f over 0..1 by composite Gauss-Legendre quadrature of five points on 40 parts.
fn integrate(f: impl Fn(f64) -> f64) -> f64 {
    let nodes = [
        (-0.906_179_845_938_664, 0.236_926_885_056_189_08),
        (-0.538_469_310_105_683, 0.478_628_670_499_366_5),
        (0.0, 0.568_888_888_888_888_9),
        (0.538_469_310_105_683, 0.478_628_670_499_366_5),
        (0.906_179_845_938_664, 0.236_926_885_056_189_08),
    ];
    let parts = 40;
    (0..parts)
        .flat_map(|part| {
            nodes.iter().map(move |(x, w)| {
                (
                    (f64::from(part) + 0.5 + 0.5 * x) / f64::from(parts),
                    w / 2.0 / f64::from(parts),
                )
            })
        })
        .map(|(x, w)| w * f(x))
        .sum()
}

#[test]
fn hill_solves_the_transfer_equation_of_a_linear_source_function() {
    // De Vries & Myers 2005: J rises linearly with optical depth from J0 at each surface to Jp in
    // the middle. The emergent intensity is integral of S e^-t dt plus the attenuated background.
    let line = single(89.1885);
    let j = &line.radiation;
    for (tau, v_in, t_peak, t_surface) in [
        (3.0, 0.1, 15.0, 2.725_48),
        (0.01, 0.0, 30.0, 5.0),
        (40.0, -0.4, 12.0, 4.0),
        (8.0, 0.3, 6.0, 20.0),
    ] {
        let (sigma, velocity) = (0.35, grid(-1.5, 1.5, 61));
        let (peak, surface) = (j.at(t_peak), j.at(t_surface));
        let found = profile(
            Model::HillSurface,
            &line,
            &Sampling::at(velocity.clone()),
            &[0.05, sigma, v_in, tau, t_peak, t_surface],
        );
        for (v, found) in velocity.iter().zip(&found) {
            let depth = |centre: f64| tau * (-0.5 * ((v - centre) / sigma).powi(2)).exp();
            let (front, rear) = (depth(0.05 + v_in), depth(0.05 - v_in));
            let from_front =
                integrate(|x| (surface + (peak - surface) * x) * front * (-front * x).exp());
            let from_rear = integrate(|x| (peak + (surface - peak) * x) * rear * (-rear * x).exp());
            let expected = from_front
                + (-front).exp() * from_rear
                + j.background() * ((-front - rear).exp() - 1.0);
            assert!(
                (found - expected).abs() < 1e-10,
                "tau {tau}, v {v}: {found} against {expected}"
            );
        }
    }
}

#[test]
fn hill_with_its_surface_at_the_background_is_the_five_parameter_form() {
    let line = single(267.5576);
    let sampling = Sampling::at(grid(-2.0, 2.0, 81));
    let five = profile(Model::Hill, &line, &sampling, &[0.1, 0.3, 0.1, 5.0, 14.0]);
    let six = profile(
        Model::HillSurface,
        &line,
        &sampling,
        &[0.1, 0.3, 0.1, 5.0, 14.0, 2.725_48],
    );
    for (a, b) in five.iter().zip(&six) {
        assert!((a - b).abs() < 1e-13);
    }
}

#[test]
fn two_layers_solve_the_transfer_equation_of_two_sheets_with_a_source_between() {
    let line = single(89.1885);
    let j = &line.radiation;
    let velocity = grid(-2.0, 2.0, 81);
    let (sigma, v_in, tau, t_front, t_rear) = (0.4, 0.15, 4.0, 7.0, 18.0);
    for (filling, t_source) in [(0.0, 100.0), (0.2, 60.0), (0.7, 300.0)] {
        let found = profile(
            Model::TwoLayerContinuum,
            &line,
            &Sampling::at(velocity.clone()),
            &[0.0, sigma, v_in, tau, t_front, t_rear, filling, t_source],
        );
        let plain = profile(
            Model::TwoLayer,
            &line,
            &Sampling::at(velocity.clone()),
            &[0.0, sigma, v_in, tau, t_front, t_rear],
        );
        for ((v, found), plain) in velocity.iter().zip(&found).zip(&plain) {
            let depth = |centre: f64| tau * (-0.5 * ((v - centre) / sigma).powi(2)).exp();
            let (front, rear) = (depth(v_in), depth(-v_in));
            // Where the source covers the beam nothing from behind it passes; its own emission does.
            let open = through_sheets(
                j.background(),
                [(j.at(t_rear), rear), (j.at(t_front), front)].into_iter(),
            );
            let covered = through_sheets(j.at(t_source), [(j.at(t_front), front)].into_iter());
            let expected = (1.0 - filling) * open + filling * covered;
            assert!(
                (found - expected).abs() < 1e-12,
                "Phi {filling}, v {v}: {found} against {expected}"
            );
            if filling == 0.0 {
                assert!((found - plain).abs() < 1e-13);
            }
        }
    }
}

#[test]
fn thin_limit_is_a_pair_of_gaussians_whose_brightness_is_linear_in_tau() {
    let line = single(89.1885);
    let j = &line.radiation;
    let velocity = grid(-2.0, 2.0, 41);
    let (sigma, v_in, tau) = (0.4, 0.2, 1e-7);
    for (model, tail, mean_source) in [
        (Model::TwoLayer, vec![10.0, 16.0], [j.at(10.0), j.at(16.0)]),
        // a half's mean source function is midway between the middle's and the surface's
        (
            Model::Hill,
            vec![16.0],
            [0.5 * (j.at(16.0) + j.background()); 2],
        ),
    ] {
        let parameters = [vec![0.0, sigma, v_in, tau], tail].concat();
        let found = profile(model, &line, &Sampling::at(velocity.clone()), &parameters);
        for (v, found) in velocity.iter().zip(&found) {
            let phi = |centre: f64| (-0.5 * ((v - centre) / sigma).powi(2)).exp();
            let expected = tau
                * ((mean_source[0] - j.background()) * phi(v_in)
                    + (mean_source[1] - j.background()) * phi(-v_in));
            assert!(
                (found - expected).abs() < 1e-14 + 1e-6 * expected.abs(),
                "{}: {found} {expected}",
                model.name()
            );
        }
    }
}

#[test]
fn equal_temperatures_at_rest_are_one_layer_of_twice_the_depth() {
    let line = single(89.1885);
    let sampling = Sampling::at(grid(-2.0, 2.0, 41));
    let two = profile(
        Model::TwoLayer,
        &line,
        &sampling,
        &[0.1, 0.4, 0.0, 2.5, 12.0, 12.0],
    );
    let one = profile(Model::Layer, &line, &sampling, &[0.1, 0.4, 5.0, 12.0]);
    for (a, b) in two.iter().zip(&one) {
        assert!((a - b).abs() < 1e-12);
    }
}

#[test]
fn no_infall_makes_a_symmetric_profile() {
    let line = single(89.1885);
    let sampling = Sampling::at(grid(-2.0, 2.0, 41));
    for model in [
        Model::TwoLayer,
        Model::Hill,
        Model::HillSurface,
        Model::TwoLayerContinuum,
    ] {
        let parameters = draw(model, &[0.5, 0.4, 0.5, 0.6, 0.2, 0.4, 0.3, 0.3, 0.0, 0.0]);
        assert_eq!(parameters[2], 0.0);
        let value = profile(model, &line, &sampling, &parameters);
        for channel in 0..value.len() {
            assert!((value[channel] - value[value.len() - 1 - channel]).abs() < 1e-12);
        }
    }
}

#[test]
#[allow(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "positions on a grid of positive whole steps"
)]
fn channel_values_are_means_over_the_channel() {
    let line = single(89.1885);
    let fine = grid(-3.0, 3.0, 60_001);
    for (model, parameters) in [
        (Model::TwoLayer, vec![0.0, 0.4, 0.1, 3.0, 8.0, 15.0]),
        (Model::Hill, vec![0.0, 0.4, 0.1, 5.0, 20.0]),
        (Model::Gaussian, vec![0.0, 0.4, 5.0]),
        (Model::Layer, vec![0.0, 0.4, 2.0, 15.0]),
    ] {
        let values = profile(model, &line, &Sampling::at(fine.clone()), &parameters);
        let width = 0.2;
        let centres = grid(-2.4, 2.4, 25);
        let averaged = profile(
            model,
            &line,
            &Sampling::new(centres.clone(), vec![width; centres.len()], 3),
            &parameters,
        );
        for (centre, averaged) in centres.iter().zip(&averaged) {
            // trapezoid over the channel on a grid of 1e-4 km/s
            let first = ((centre - 0.5 * width + 3.0) / 1e-4).round() as usize;
            let last = ((centre + 0.5 * width + 3.0) / 1e-4).round() as usize;
            let sum: f64 =
                values[first..=last].iter().sum::<f64>() - 0.5 * (values[first] + values[last]);
            let mean = sum * 1e-4 / width;
            assert!(
                (averaged - mean).abs() < 2e-4,
                "{} at {centre}: {averaged} {mean}",
                model.name()
            );
        }
    }
}

/// The rule of the fits: points from the width of the sharpest feature, 0.3 of the dispersion.
#[test]
fn channel_means_are_within_a_hundredth_of_the_noise() {
    let line = single(89.1885);
    let sigma = 0.5;
    let mut worst = (0.0, String::new());
    for width in [0.1, 0.2, 0.4, 0.7, 1.0].map(|share: f64| share * sigma) {
        for signal_to_noise in [10.0, 30.0, 100.0] {
            for (model, tail) in [
                (Model::TwoLayer, vec![6.0, 20.0]),
                (Model::Hill, vec![20.0]),
            ] {
                for tau in [0.5, 3.0, 10.0, 30.0] {
                    for v_in in [0.0, 0.15, 0.5] {
                        let parameters = [vec![0.03, sigma, v_in, tau], tail.clone()].concat();
                        let centres = grid(-3.0, 3.0, 61);
                        let means = |width: f64, points: usize| {
                            let sampling =
                                Sampling::new(centres.clone(), vec![width; centres.len()], points);
                            profile(model, &line, &sampling, &parameters)
                        };
                        let peak = means(width, 5).iter().copied().fold(0.0, f64::max);
                        let points =
                            Sampling::points_needed(width, 0.3 * sigma, signal_to_noise, 0.01);
                        let found = means(width, points);
                        // twenty parts of a channel, five points each
                        let mut exact = vec![0.0; centres.len()];
                        for part in 0..20 {
                            let shift = width * ((f64::from(part) + 0.5) / 20.0 - 0.5);
                            let shifted: Vec<f64> = centres.iter().map(|v| v + shift).collect();
                            let sampling =
                                Sampling::new(shifted, vec![width / 20.0; centres.len()], 5);
                            let part = profile(model, &line, &sampling, &parameters);
                            for (sum, part) in exact.iter_mut().zip(part) {
                                *sum += part / 20.0;
                            }
                        }
                        for (found, exact) in found.iter().zip(&exact) {
                            let error = (found - exact).abs() / (peak / signal_to_noise);
                            if error > worst.0 {
                                let case = format!(
                                    "{} width {width} S/N {signal_to_noise} tau {tau} v_in {v_in}, {points} points",
                                    model.name()
                                );
                                worst = (error, case);
                            }
                        }
                    }
                }
            }
        }
    }
    assert!(worst.0 < 0.01, "{} of the noise: {}", worst.0, worst.1);
}
