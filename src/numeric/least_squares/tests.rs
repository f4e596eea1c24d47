use super::*;
use argmin::core::observers::{Observe, ObserverMode};
use argmin::core::{Executor, IterState, KV, State, TerminationReason, TerminationStatus};
use proptest::prelude::*;
use std::sync::{Arc, Mutex};

/// A problem given by a closure that writes residuals and, column by column, the Jacobian.
struct Problem<F> {
    columns: usize,
    rows: usize,
    model: F,
}

impl<F: FnMut(&[f64], &mut [f64], &mut [f64])> LeastSquares for Problem<F> {
    fn parameters(&self) -> usize {
        self.columns
    }

    fn residuals(&self) -> usize {
        self.rows
    }

    fn evaluate(&mut self, p: &[f64], residuals: &mut [f64], jacobian: Option<&mut [f64]>) {
        let mut unused = vec![0.0; self.rows * self.columns];
        (self.model)(p, residuals, jacobian.unwrap_or(&mut unused));
    }
}

fn problem<F: FnMut(&[f64], &mut [f64], &mut [f64])>(
    columns: usize,
    rows: usize,
    model: F,
) -> Problem<F> {
    Problem {
        columns,
        rows,
        model,
    }
}

/// r = (10 (y - x^2), 1 - x), zero at (1, 1) (Rosenbrock 1960, Computer Journal 3, 175).
fn rosenbrock() -> impl LeastSquares {
    problem(2, 2, |p, r, j| {
        r.copy_from_slice(&[10.0 * (p[1] - p[0] * p[0]), 1.0 - p[0]]);
        j.copy_from_slice(&[-20.0 * p[0], -1.0, 10.0, 0.0]);
    })
}

/// Powell's singular function (1962, Computer Journal 5, 147): zero at the origin, where the Jacobian
/// loses two of its four ranks.
fn powell() -> impl LeastSquares {
    problem(4, 4, |p, r, j| {
        let (root5, root10) = (5.0_f64.sqrt(), 10.0_f64.sqrt());
        let (a, b) = (p[1] - 2.0 * p[2], p[0] - p[3]);
        r.copy_from_slice(&[
            p[0] + 10.0 * p[1],
            root5 * (p[2] - p[3]),
            a * a,
            root10 * b * b,
        ]);
        j.fill(0.0);
        (j[0], j[3]) = (1.0, 2.0 * root10 * b);
        (j[4], j[6]) = (10.0, 2.0 * a);
        (j[9], j[10]) = (root5, -4.0 * a);
        (j[13], j[15]) = (-root5, -2.0 * root10 * b);
    })
}

/// One Gaussian line by amplitude, centre and full width at half maximum, in 101 channels with noise
/// of 0.1, the noise made of sines.
fn gaussian() -> impl LeastSquares {
    scaled_gaussian([1.0; 3], 1.0)
}

/// The same with parameters in other units, `units[j]` times smaller numbers, and residuals `factor`
/// times as large.
fn scaled_gaussian(units: [f64; 3], factor: f64) -> impl LeastSquares {
    problem(3, 101, move |p, r, j| {
        let k = 4.0 * 2.0_f64.ln();
        let (amplitude, centre, width) = (p[0] * units[0], p[1] * units[1], p[2] * units[2]);
        for (i, residual) in r.iter_mut().enumerate() {
            let v = -5.0 + 0.1 * i as f64;
            let shape = |centre: f64, width: f64| (-k * ((v - centre) / width).powi(2)).exp();
            let phase = i as f64;
            let noise = 0.07 * ((1.0 + 12.9898 * phase).sin() + (2.0 + 78.233 * phase).cos());
            let data = 1.2 * shape(0.35, 0.8) + noise;
            let profile = shape(centre, width);
            let weight = factor / 0.1;
            *residual = weight * (amplitude * profile - data);
            let slope = weight * amplitude * profile * 2.0 * k * (v - centre) / (width * width);
            j[i] = weight * profile * units[0];
            j[101 + i] = slope * units[1];
            j[202 + i] = slope * (v - centre) / width * units[2];
        }
    })
}

/// A straight line through the points (0, 1), (1, 2.9), (2, 5.2), (3, 6.9).
fn line() -> impl LeastSquares {
    problem(2, 4, |p, r, j| {
        for (i, y) in [1.0, 2.9, 5.2, 6.9].into_iter().enumerate() {
            r[i] = p[0] + p[1] * i as f64 - y;
            (j[i], j[4 + i]) = (1.0, i as f64);
        }
    })
}

fn fit(problem: &mut impl LeastSquares, start: &[f64], bounds: &[Interval]) -> Minimum {
    let settings = Settings::default();
    minimize(problem, start, bounds, &settings, &mut Workspace::new()).unwrap()
}

fn refusal(
    problem: &mut impl LeastSquares,
    start: &[f64],
    bounds: &[Interval],
) -> LeastSquaresError {
    let settings = Settings::default();
    minimize(problem, start, bounds, &settings, &mut Workspace::new()).unwrap_err()
}

#[test]
fn test_jacobians_agree_with_finite_differences() {
    assert!(check_jacobian(&mut rosenbrock(), &[-1.2, 1.0], &[0.1; 2]) < 1e-11);
    assert!(check_jacobian(&mut powell(), &[3.0, -1.0, 0.5, 1.0], &[0.1; 4]) < 1e-11);
    assert!(check_jacobian(&mut gaussian(), &[1.2, 0.35, 0.8], &[0.01; 3]) < 1e-9);
}

#[test]
fn jacobian_check_sees_a_wrong_derivative_and_a_missing_number() {
    let mut wrong = problem(1, 2, |p, r, j| {
        r.copy_from_slice(&[p[0].sin(), p[0]]);
        j.copy_from_slice(&[p[0].cos() * 1.001, 1.0]);
    });
    let worst = check_jacobian(&mut wrong, &[0.5], &[0.01]);
    assert!((worst - 0.001 * 0.5_f64.cos()).abs() < 1e-10);
    let mut undefined = problem(1, 1, |p, r, j| {
        r[0] = p[0].sqrt();
        j[0] = 0.5 / p[0].sqrt();
    });
    assert!(check_jacobian(&mut undefined, &[0.0], &[0.01]).is_nan());
}

#[test]
fn rosenbrock_is_solved_from_the_usual_and_from_far_starts() {
    for start in [[-1.2, 1.0], [100.0, -50.0], [-1e4, 1e4], [0.0, 0.0]] {
        let minimum = fit(&mut rosenbrock(), &start, &unbounded(2));
        assert!(minimum.termination.converged(), "{start:?}");
        assert!(
            minimum.parameters.iter().all(|p| (p - 1.0).abs() < 1e-8),
            "{minimum:?}"
        );
    }
}

#[test]
fn powell_singular_function_comes_down_to_the_origin() {
    // Convergence is linear and nothing is left to compare with, so that the search runs to its limit.
    let minimum = fit(&mut powell(), &[3.0, -1.0, 0.0, 1.0], &unbounded(4));
    assert!(
        minimum.parameters.iter().all(|p| p.abs() < 1e-8),
        "{minimum:?}"
    );
    assert!(minimum.chi2 < 1e-30);
    assert_eq!(minimum.termination, Termination::Evaluations);
}

#[test]
#[allow(clippy::unreadable_literal)]
fn gaussian_agrees_with_scipy() {
    // scipy.optimize.least_squares(method="lm", all tolerances 1e-15) on the same numbers; errors from
    // numpy's inverse of J^T J.
    let expected = [1.111103260534935, 0.35274822486286256, 0.8836323622364649];
    let errors = [
        0.04748989554809255,
        0.018519533857962553,
        0.0436101695840581,
    ];
    let exact = Settings {
        chi2_tolerance: 1e-16,
        ..Settings::default()
    };
    let mut workspace = Workspace::new();
    let minimum = minimize(
        &mut gaussian(),
        &[1.0, 0.0, 1.0],
        &unbounded(3),
        &exact,
        &mut workspace,
    )
    .unwrap();
    let covariance = minimum.covariance().unwrap();
    assert!((minimum.chi2 - 45.34099159847416).abs() < 1e-11);
    for j in 0..3 {
        assert!((minimum.parameters[j] - expected[j]).abs() < 1e-9);
        assert!((covariance.standard_error(j).unwrap() - errors[j]).abs() < 1e-9);
    }
    // Amplitude and width of a Gaussian: -1 / sqrt 3 in the limit of many channels (Condon 1997,
    // PASP 109, 166).
    assert!((covariance.correlation(0, 2).unwrap() + 1.0 / 3.0_f64.sqrt()).abs() < 1e-3);
    assert_eq!(minimum.degrees_of_freedom(), 98);
    // The defaults end within 1e-4 of the errors.
    let quick = fit(&mut gaussian(), &[1.0, 0.0, 1.0], &unbounded(3));
    assert_eq!(quick.termination, Termination::Chi2);
    for j in 0..3 {
        assert!((quick.parameters[j] - expected[j]).abs() < 1e-4 * errors[j]);
    }
}

#[test]
fn units_of_parameters_and_residuals_do_not_change_the_path() {
    let plain = fit(&mut gaussian(), &[1.0, 0.1, 1.0], &unbounded(3));
    // Powers of two, so that not even rounding differs.
    let units = [2.0_f64.powi(30), 2.0_f64.powi(-20), 2.0_f64.powi(7)];
    let start = [1.0 / units[0], 0.1 / units[1], 1.0 / units[2]];
    let mut scaled = scaled_gaussian(units, 2.0_f64.powi(12));
    let scaled = fit(&mut scaled, &start, &unbounded(3));
    assert_eq!(scaled.evaluations, plain.evaluations);
    assert_eq!(scaled.chi2, plain.chi2 * 2.0_f64.powi(24));
    for (j, unit) in units.into_iter().enumerate() {
        assert_eq!(scaled.parameters[j] * unit, plain.parameters[j]);
    }
}

#[test]
fn bounds_that_hold_nothing_change_nothing() {
    let free = fit(&mut gaussian(), &[1.0, 0.0, 1.0], &unbounded(3));
    let wide = [
        Interval::new(-10.0, 10.0),
        Interval::new(-5.0, 5.0),
        Interval::at_least(0.01),
    ];
    assert_eq!(fit(&mut gaussian(), &[1.0, 0.0, 1.0], &wide), free);
    assert_eq!(free.at_bound, [None; 3]);
}

#[test]
fn a_bound_that_holds_leaves_the_minimum_of_the_others() {
    // With the slope at its bound s the best offset is mean(y) - s mean(x) = 4 - 1.5 s.
    for (interval, slope, side) in [
        (Interval::at_most(1.5), 1.5, Side::Upper),
        (Interval::at_least(3.0), 3.0, Side::Lower),
        (Interval::fixed(2.5), 2.5, Side::Fixed),
    ] {
        let bounds = [Interval::UNBOUNDED, interval];
        let minimum = fit(&mut line(), &[0.0, slope], &bounds);
        assert!(minimum.termination.converged());
        assert!((minimum.parameters[0] - (4.0 - 1.5 * slope)).abs() < 1e-9);
        assert_eq!(minimum.parameters[1], slope);
        assert_eq!(minimum.at_bound, [None, Some(side)]);
        // The error of a mean of four; none for the parameter at its bound.
        let covariance = minimum.covariance().unwrap();
        assert!((covariance.standard_error(0).unwrap() - 0.5).abs() < 1e-12);
        assert_eq!(covariance.standard_error(1), None);
        assert_eq!(covariance.get(0, 1), None);
        assert_eq!(minimum.degrees_of_freedom(), 3);
    }
}

#[test]
fn a_parameter_leaves_the_bound_it_started_on() {
    // sum x y and sum x^2 about the means: slope 2, offset 1 (by hand).
    let bounds = [Interval::at_most(50.0), Interval::new(0.0, 9.0)];
    for start in [[50.0, 0.0], [50.0, 9.0], [-30.0, 0.0]] {
        let minimum = fit(&mut line(), &start, &bounds);
        assert!((minimum.parameters[0] - 1.0).abs() < 1e-9, "{minimum:?}");
        assert!((minimum.parameters[1] - 2.0).abs() < 1e-9);
        assert_eq!(minimum.at_bound, [None, None]);
    }
}

#[test]
fn bounded_rosenbrock_ends_on_the_bound() {
    // On x <= 0.5 the minimum is (0.5, 0.25) with chi2 = 0.25 (by hand).
    let bounds = [Interval::new(-2.0, 0.5), Interval::new(-2.0, 2.0)];
    for start in [[-1.2, 1.0], [0.5, 2.0], [-2.0, -2.0]] {
        let minimum = fit(&mut rosenbrock(), &start, &bounds);
        assert!(minimum.termination.converged());
        assert_eq!(minimum.parameters[0], 0.5);
        assert!((minimum.parameters[1] - 0.25).abs() < 1e-6);
        assert!((minimum.chi2 - 0.25).abs() < 1e-10);
    }
}

#[test]
fn no_step_leaves_the_box() {
    let bounds = [
        Interval::new(0.5, 1.1),
        Interval::new(0.1, 0.3),
        Interval::new(0.9, 2.0),
    ];
    let mut inner = gaussian();
    let mut watched = problem(3, 101, |p: &[f64], r: &mut [f64], j: &mut [f64]| {
        assert!(
            p.iter()
                .zip(&bounds)
                .all(|(p, interval)| interval.contains(*p)),
            "{p:?}"
        );
        inner.evaluate(p, r, Some(j));
    });
    let minimum = fit(&mut watched, &[0.6, 0.2, 1.9], &bounds);
    assert!(minimum.termination.converged());
    assert_eq!(minimum.at_bound[1], Some(Side::Upper));
}

#[test]
fn a_corner_pressed_from_all_sides_has_converged() {
    let bounds = [Interval::at_most(0.0), Interval::at_most(1.0)];
    let minimum = fit(&mut line(), &[0.0, 1.0], &bounds);
    assert_eq!(minimum.termination, Termination::Gradient);
    assert_eq!(minimum.at_bound, [Some(Side::Upper); 2]);
    assert_eq!((minimum.evaluations, minimum.iterations), (1, 0));
    assert_eq!(minimum.covariance().unwrap().standard_error(0), None);
}

#[test]
fn steps_into_undefined_parameters_are_rejected() {
    // r = ln(p - 1) - 1 is undefined for p <= 1; from p = 20 the longest step ends at 0. Minimum at e + 1.
    let mut undefined = 0;
    let mut logarithm = problem(1, 1, |p: &[f64], r: &mut [f64], j: &mut [f64]| {
        (r[0], j[0]) = ((p[0] - 1.0).ln() - 1.0, 1.0 / (p[0] - 1.0));
        undefined += usize::from(!r[0].is_finite());
    });
    let minimum = fit(&mut logarithm, &[20.0], &unbounded(1));
    assert!((minimum.parameters[0] - 1.0 - std::f64::consts::E).abs() < 1e-9);
    assert!(undefined > 0);
    // A derivative that is missing counts as well.
    let mut cliff = problem(1, 1, |p: &[f64], r: &mut [f64], j: &mut [f64]| {
        (r[0], j[0]) = (p[0] - 4.0, if p[0] > 3.0 { f64::NAN } else { 1.0 });
    });
    let minimum = fit(&mut cliff, &[1.0], &unbounded(1));
    assert!(minimum.parameters[0] <= 3.0 && minimum.parameters[0] > 2.99);
    assert_eq!(minimum.termination, Termination::Stalled);
}

#[test]
fn a_wrong_jacobian_is_reported_as_a_stall() {
    let mut wrong = problem(1, 2, |p: &[f64], r: &mut [f64], j: &mut [f64]| {
        r.copy_from_slice(&[p[0] - 4.0, 1.0]);
        j.copy_from_slice(&[-1.0, 0.0]);
    });
    let minimum = fit(&mut wrong, &[1.0], &unbounded(1));
    assert_eq!(minimum.termination, Termination::Stalled);
    assert!(!minimum.termination.converged());
    assert_eq!(minimum.parameters, [1.0]);
}

#[test]
fn the_limit_of_evaluations_is_kept() {
    let mut calls = 0;
    let mut inner = rosenbrock();
    let mut counted = problem(2, 2, |p: &[f64], r: &mut [f64], j: &mut [f64]| {
        calls += 1;
        inner.evaluate(p, r, Some(j));
    });
    let settings = Settings {
        max_evaluations: 4,
        ..Settings::default()
    };
    let start = [-1.2, 1.0];
    let minimum = minimize(
        &mut counted,
        &start,
        &unbounded(2),
        &settings,
        &mut Workspace::new(),
    )
    .unwrap();
    assert_eq!(minimum.termination, Termination::Evaluations);
    assert_eq!((minimum.evaluations, calls), (4, 4));
    assert!(minimum.chi2 < 24.2, "the best so far is kept");
}

#[test]
fn as_many_residuals_as_parameters_are_enough() {
    let mut two = problem(2, 2, |p, r, j| {
        r.copy_from_slice(&[p[0] + p[1] - 3.0, p[0] - p[1] - 1.0]);
        j.copy_from_slice(&[1.0, 1.0, 1.0, -1.0]);
    });
    let minimum = fit(&mut two, &[0.0, 0.0], &unbounded(2));
    assert!((minimum.parameters[0] - 2.0).abs() < 1e-12);
    assert!((minimum.parameters[1] - 1.0).abs() < 1e-12);
    assert_eq!(minimum.degrees_of_freedom(), 0);
    let covariance = minimum.covariance().unwrap();
    assert!((covariance.get(0, 0).unwrap() - 0.5).abs() < 1e-12);
}

#[test]
fn fixed_parameters_need_no_residuals() {
    let mut one = problem(2, 1, |p, r, j| {
        r[0] = p[0] + p[1] - 3.0;
        j.copy_from_slice(&[1.0, 1.0]);
    });
    let minimum = fit(
        &mut one,
        &[0.0, 1.0],
        &[Interval::UNBOUNDED, Interval::fixed(1.0)],
    );
    assert!((minimum.parameters[0] - 2.0).abs() < 1e-12);
    let refused = refusal(&mut one, &[0.0, 1.0], &unbounded(2));
    let expected = LeastSquaresError::TooFewResiduals {
        residuals: 1,
        parameters: 2,
    };
    assert_eq!(refused, expected);
    assert!(refused.hint().is_some());
}

#[test]
fn unusable_starts_are_refused_with_the_evidence() {
    use LeastSquaresError as E;
    let free = unbounded(2);
    let text = |error: E| error.to_string();
    let short = refusal(&mut line(), &[0.0], &free);
    assert_eq!(
        text(short),
        "found 1 values in start, expected 2, one a parameter"
    );
    let outside = refusal(
        &mut line(),
        &[0.0, 2.0],
        &[free[0], Interval::new(0.0, 1.0)],
    );
    assert_eq!(
        text(outside),
        "found start 2 for parameter 1, expected a number from 0 to 1"
    );
    let reversed = refusal(
        &mut line(),
        &[0.0, 2.0],
        &[free[0], Interval::new(3.0, 1.0)],
    );
    assert!(matches!(reversed, E::Bounds { parameter: 1, .. }));
    let unordered = refusal(
        &mut line(),
        &[0.0, 2.0],
        &[Interval::at_most(f64::NAN), free[1]],
    );
    assert!(matches!(unordered, E::Bounds { parameter: 0, .. }));
    let missing = refusal(&mut line(), &[0.0, f64::NAN], &free);
    assert!(matches!(missing, E::Start { parameter: 1, .. }));
    let mut many = problem(17, 20, |_, r, j| {
        r.fill(0.0);
        j.fill(0.0);
    });
    assert_eq!(
        refusal(&mut many, &[0.0; 17], &unbounded(17)),
        E::ParameterCount { found: 17 }
    );
    let mut logarithm = problem(1, 1, |p, r, j| (r[0], j[0]) = (p[0].ln(), 1.0 / p[0]));
    assert!(matches!(
        refusal(&mut logarithm, &[-1.0], &unbounded(1)),
        E::StartResidual { residual: 0, .. }
    ));
    let mut steep = problem(1, 2, |p, r, j| {
        r.copy_from_slice(&[p[0].sqrt(), 0.0]);
        j.copy_from_slice(&[0.5 / p[0].sqrt(), 0.0]);
    });
    assert!(matches!(
        refusal(&mut steep, &[0.0], &unbounded(1)),
        E::StartJacobian {
            residual: 0,
            parameter: 0,
            ..
        }
    ));
    let settings = [
        Settings {
            chi2_tolerance: -1.0,
            ..Settings::default()
        },
        Settings {
            initial_radius: 0.0,
            ..Settings::default()
        },
        Settings {
            step_tolerance: f64::NAN,
            ..Settings::default()
        },
    ];
    for (settings, expected) in
        (settings.iter()).zip(["chi2_tolerance", "initial_radius", "step_tolerance"])
    {
        let refused = minimize(
            &mut line(),
            &[0.0; 2],
            &free,
            settings,
            &mut Workspace::new(),
        );
        assert!(matches!(refused, Err(E::Setting { name, .. }) if name == expected));
    }
}

#[test]
fn a_line_is_found_from_amplitudes_of_any_size() {
    for amplitude in [0.0, 1e-12, 1e-3, 0.1, 10.0, 1e4] {
        let bounds = [
            Interval::at_least(0.0),
            Interval::new(-5.0, 5.0),
            Interval::new(0.1, 5.0),
        ];
        let minimum = fit(&mut gaussian(), &[amplitude, 0.8, 1.0], &bounds);
        assert!(
            (minimum.chi2 - 45.341).abs() < 1e-3,
            "{amplitude}: {minimum:?}"
        );
        assert!(
            minimum.evaluations <= 30,
            "{amplitude}: {}",
            minimum.evaluations
        );
    }
}

#[test]
fn undetermined_parameters_are_named_instead_of_given_errors() {
    let mut idle = problem(2, 3, |p, r, j| {
        r.copy_from_slice(&[p[0] - 1.0, p[0] - 2.0, p[0] - 3.0]);
        j.copy_from_slice(&[1.0, 1.0, 1.0, 0.0, 0.0, 0.0]);
    });
    let minimum = fit(&mut idle, &[0.0, 7.0], &unbounded(2));
    assert!(minimum.termination.converged());
    assert!((minimum.parameters[0] - 2.0).abs() < 1e-9);
    assert_eq!(minimum.parameters[1], 7.0);
    assert_eq!(
        minimum.covariance(),
        Err(CovarianceError::NoInfluence { parameter: 1 })
    );
    // Only the sum of the last two parameters matters.
    let mut sum = problem(3, 4, |p, r, j| {
        for (i, y) in [1.0, 3.0, 4.0, 8.0].into_iter().enumerate() {
            let x = 0.3 * i as f64;
            r[i] = p[0] + x * (p[1] + p[2]) - y;
            (j[i], j[4 + i], j[8 + i]) = (1.0, x, x);
        }
    });
    let minimum = fit(&mut sum, &[0.0, 1.0, 2.0], &unbounded(3));
    assert!(minimum.termination.converged());
    let error = minimum.covariance().unwrap_err();
    assert!(
        matches!(error, CovarianceError::Dependent { parameter: 2, .. }),
        "{error}"
    );
    assert!(error.to_string().contains("parameter 2"));
    // Held fixed, the others have errors.
    let bounds = [
        Interval::UNBOUNDED,
        Interval::UNBOUNDED,
        Interval::fixed(2.0),
    ];
    let minimum = fit(&mut sum, &[0.0, 1.0, 2.0], &bounds);
    assert!(minimum.covariance().unwrap().standard_error(1).is_some());
}

#[test]
fn nearly_dependent_columns_keep_eight_digits_of_their_errors() {
    // Columns (1, 1, 1), (1, 1, 1 + e) with e = 2^-20: var(p1) = 3 / (2 e^2), var(p0) =
    // (2 + (1 + e)^2) / (2 e^2) from the 2 x 2 inverse by hand. The normal equations would keep four.
    let e = 2.0_f64.powi(-20);
    let mut near = problem(2, 3, move |p, r, j| {
        let x = [1.0, 1.0, 1.0 + e];
        for i in 0..3 {
            r[i] = p[0] + x[i] * p[1] - [3.0, 3.0, 3.0 + 2.0 * e][i];
            (j[i], j[3 + i]) = (1.0, x[i]);
        }
    });
    let minimum = fit(&mut near, &[0.0, 0.0], &unbounded(2));
    assert!((minimum.parameters[0] - 1.0).abs() < 1e-8, "{minimum:?}");
    assert!((minimum.parameters[1] - 2.0).abs() < 1e-8);
    let covariance = minimum.covariance().unwrap();
    let expected = [
        (2.0 + (1.0 + e).powi(2)) / (2.0 * e * e),
        3.0 / (2.0 * e * e),
    ];
    for (j, expected) in expected.into_iter().enumerate() {
        assert!((covariance.get(j, j).unwrap() / expected - 1.0).abs() < 1e-8);
    }
}

#[test]
fn one_workspace_serves_fits_of_all_sizes_and_repeats_them_exactly() {
    let mut workspace = Workspace::new();
    let settings = Settings::default();
    let mut run = |problem: &mut dyn LeastSquares, start: &[f64]| {
        let bounds = unbounded(start.len());
        let minimum = minimize(problem, start, &bounds, &settings, &mut workspace).unwrap();
        let fresh = minimize(problem, start, &bounds, &settings, &mut Workspace::new()).unwrap();
        assert_eq!(minimum, fresh);
    };
    for _ in 0..2 {
        run(&mut gaussian(), &[1.0, 0.0, 1.0]);
        run(&mut powell(), &[3.0, -1.0, 0.0, 1.0]);
        run(&mut line(), &[0.0, 0.0]);
        run(&mut rosenbrock(), &[-1.2, 1.0]);
    }
}

/// How far `p` is from a minimum inside the box: the largest cosine between the residuals and a
/// Jacobian column along which chi2 still falls.
fn violation(problem: &mut impl LeastSquares, p: &[f64], bounds: &[Interval]) -> f64 {
    let rows = problem.residuals();
    let mut residuals = vec![0.0; rows];
    let mut jacobian = vec![0.0; rows * p.len()];
    problem.evaluate(p, &mut residuals, Some(&mut jacobian));
    let norm = |values: &[f64]| values.iter().map(|x| x * x).sum::<f64>().sqrt();
    (jacobian.chunks_exact(rows).enumerate())
        .map(|(j, column)| {
            let slope: f64 = column.iter().zip(&residuals).map(|(a, b)| a * b).sum();
            let falling = match bounds[j].side(p[j]) {
                None => slope.abs(),
                Some(Side::Lower) => -slope,
                Some(Side::Upper) => slope,
                Some(Side::Fixed) => 0.0,
            };
            falling / (norm(column) * norm(&residuals))
        })
        .fold(0.0, f64::max)
}

/// Bounds around numbers of order one: open, half open, closed or fixed.
fn interval() -> impl Strategy<Value = Interval> {
    (-2.0..2.0, 0.0..3.0, 0..5).prop_map(|(lower, width, kind): (f64, f64, i32)| match kind {
        0 => Interval::UNBOUNDED,
        1 => Interval::at_least(lower),
        2 => Interval::at_most(lower),
        3 => Interval::fixed(lower),
        _ => Interval::new(lower, lower + width),
    })
}

proptest! {
    #[test]
    fn linear_problems_end_at_the_minimum_of_their_box(
        bounds in prop::collection::vec(interval(), 1..7),
        numbers in prop::collection::vec(-1.0..1.0, 80),
        starts in prop::collection::vec(-4.0..4.0, 7),
    ) {
        // Neighbouring columns share most of their numbers, so that they are correlated.
        let columns = bounds.len();
        let mut linear = problem(columns, 10, |p: &[f64], r: &mut [f64], j: &mut [f64]| {
            for i in 0..10 {
                r[i] = 3.0 * numbers[70 + i];
                for (k, p) in p.iter().enumerate() {
                    j[k * 10 + i] = numbers[i] + 0.3 * numbers[10 + 10 * k + i - if k == 6 { 10 } else { 0 }];
                    r[i] += j[k * 10 + i] * p;
                }
            }
        });
        let start: Vec<f64> = bounds.iter().zip(&starts).map(|(b, &p)| b.nearest(p)).collect();
        let exact = Settings { chi2_tolerance: 1e-18, ..Settings::default() };
        let minimum =
            minimize(&mut linear, &start, &bounds, &exact, &mut Workspace::new()).unwrap();
        prop_assert!(minimum.termination.converged(), "{}", minimum.termination);
        let violation = violation(&mut linear, &minimum.parameters, &bounds);
        prop_assert!(violation < 1e-8, "{violation:e} {minimum:?}");
    }

    #[test]
    fn lines_end_at_a_minimum_of_their_box(
        amplitude in 0.3..3.0, centre in -1.0..1.5, width in 0.3..2.0,
        room in prop::collection::vec(0.0..1.0, 6),
    ) {
        let start = [amplitude, centre, width];
        let bounds: Vec<Interval> = (0..3)
            .map(|j| Interval::new(start[j] - 0.25 * room[j], start[j] + room[3 + j]))
            .collect();
        let exact = Settings { chi2_tolerance: 1e-16, ..Settings::default() };
        let minimum =
            minimize(&mut gaussian(), &start, &bounds, &exact, &mut Workspace::new()).unwrap();
        prop_assert!(minimum.termination.converged(), "{}", minimum.termination);
        let violation = violation(&mut gaussian(), &minimum.parameters, &bounds);
        prop_assert!(violation < 1e-6, "{violation:e} {minimum:?}");
    }
}

#[test]
fn a_parameter_without_influence_at_the_start_is_found_later() {
    // The second parameter only matters once the first is positive, in units 1e-12 times smaller.
    let mut late = problem(2, 3, |p: &[f64], r: &mut [f64], j: &mut [f64]| {
        let (a, b) = (p[0].max(0.0), 1e-12 * p[1]);
        let gate = if p[0] > 0.0 { 1.0 } else { 0.0 };
        r.copy_from_slice(&[p[0] - 2.0, a * b - 6.0, 0.0]);
        j.copy_from_slice(&[1.0, gate * b, 0.0, 0.0, 1e-12 * a, 0.0]);
    });
    let minimum = fit(&mut late, &[-1.0, 1e12], &unbounded(2));
    assert!(minimum.termination.converged());
    assert!((minimum.parameters[0] - 2.0).abs() < 1e-9, "{minimum:?}");
    assert!((minimum.parameters[1] * 1e-12 - 3.0).abs() < 1e-9);
}

#[test]
fn executor_and_direct_call_give_the_same_numbers() {
    fn compare(mut problem: impl LeastSquares, start: &[f64], bounds: &[Interval]) {
        let direct = fit(&mut problem, start, bounds);
        let solver = LevenbergMarquardt::new(bounds.to_vec(), Settings::default());
        let result = Executor::new(&mut problem, solver)
            .configure(|state| state.param(start.to_vec()).counting(true))
            .run()
            .unwrap();
        assert_eq!(result.solver.minimum(), Some(&direct));
        assert_eq!(result.state.get_best_param(), Some(&direct.parameters));
        assert_eq!(result.state.get_best_cost(), direct.chi2);
        assert_eq!(
            result.state.get_termination_reason(),
            Some(&direct.termination.into())
        );
        let counts = result.state.get_func_counts();
        assert_eq!(counts["evaluation_count"], direct.evaluations as u64);
    }
    compare(gaussian(), &[1.0, 0.0, 1.0], &unbounded(3));
    compare(rosenbrock(), &[-1.2, 1.0], &unbounded(2));
    compare(powell(), &[3.0, -1.0, 0.0, 1.0], &unbounded(4));
    let bounds = [Interval::at_most(0.5), Interval::UNBOUNDED];
    compare(rosenbrock(), &[-1.2, 1.0], &bounds);
}

#[test]
fn executor_can_stop_the_search_and_refuses_bad_starts() {
    let solver = LevenbergMarquardt::new(unbounded(2), Settings::default());
    let result = Executor::new(rosenbrock(), solver.clone())
        .configure(|state| state.param(vec![-1.2, 1.0]).max_iters(3))
        .run()
        .unwrap();
    assert_eq!(
        result.state.get_termination_reason(),
        Some(&TerminationReason::MaxItersReached)
    );
    assert_eq!(result.solver.minimum(), None);
    let without_start = Executor::new(rosenbrock(), solver.clone()).run();
    assert!(without_start.is_err_and(|error| error.to_string().contains("no start")));
    let short = Executor::new(rosenbrock(), solver)
        .configure(|state| state.param(vec![1.0]))
        .run();
    let error = short.err().unwrap();
    assert!(error.downcast_ref::<LeastSquaresError>().is_some());
}

/// Collects chi2 and the reported numbers of every step.
#[derive(Clone, Default)]
struct Watcher(Arc<Mutex<Vec<(f64, String)>>>);

impl Observe<IterState<Vec<f64>, (), (), (), (), f64>> for Watcher {
    fn observe_iter(
        &mut self,
        state: &IterState<Vec<f64>, (), (), (), (), f64>,
        log: &KV,
    ) -> Result<(), argmin::core::Error> {
        let keys = ["damping", "gain", "evaluations"];
        let found: Vec<&str> = (keys.into_iter())
            .filter(|key| log.get(key).is_some())
            .collect();
        self.0
            .lock()
            .unwrap()
            .push((state.get_cost(), found.join(" ")));
        Ok(())
    }
}

#[test]
fn an_observer_sees_every_step() {
    let watcher = Watcher::default();
    let solver = LevenbergMarquardt::new(unbounded(2), Settings::default());
    let result = Executor::new(rosenbrock(), solver)
        .configure(|state| state.param(vec![-1.2, 1.0]))
        .add_observer(watcher.clone(), ObserverMode::Always)
        .run()
        .unwrap();
    let seen = watcher.0.lock().unwrap();
    let minimum = result.solver.minimum().unwrap();
    // Every step tried, and the one that found the end.
    assert_eq!(seen.len(), minimum.iterations + 1);
    assert!(
        seen.iter()
            .all(|(_, keys)| keys == "damping gain evaluations")
    );
    assert!(seen.windows(2).all(|pair| pair[1].0 <= pair[0].0));
    assert_eq!(seen.last().unwrap().0, minimum.chi2);
}

#[test]
fn terminations_map_to_the_reasons_of_argmin() {
    use Termination as T;
    for termination in [
        T::Chi2,
        T::Step,
        T::Gradient,
        T::Rounding,
        T::Stalled,
        T::Evaluations,
    ] {
        let reason = TerminationReason::from(termination);
        let converged = reason == TerminationReason::SolverConverged;
        assert_eq!(converged, termination.converged());
        assert_eq!(termination.text().starts_with("converged"), converged);
        let status = TerminationStatus::from(termination);
        assert_eq!(status, TerminationStatus::Terminated(reason));
    }
    assert_eq!(
        TerminationReason::from(T::Evaluations),
        TerminationReason::MaxItersReached
    );
    assert_eq!(
        TerminationReason::from(T::Stalled).text(),
        T::Stalled.text()
    );
}
