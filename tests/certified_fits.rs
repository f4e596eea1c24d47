//! Fits with certified answers: the nonlinear regression problems of the NIST Statistical Reference
//! Datasets (`tests/data/nist`), all 27, from both starts: parameters to six digits, residual-scaled
//! standard deviations to four.

#![allow(clippy::unwrap_used)]

use inrush::numeric::least_squares::{
    LeastSquares, Minimum, Settings, Workspace, check_jacobian, minimize, unbounded,
};
use std::f64::consts::PI;

/// Writes a model value and its derivatives by the parameters.
type Model = fn(x: &[f64], b: &[f64], derivatives: &mut [f64]) -> f64;

/// One certified problem.
struct Certified {
    name: &'static str,
    starts: [Vec<f64>; 2],
    parameters: Vec<f64>,
    deviations: Vec<f64>,
    sum_of_squares: f64,
    y: Vec<f64>,
    /// Predictors, one row a data point.
    x: Vec<Vec<f64>>,
}

/// Layout of every file: parameters from line 41 as `b1 = start1 start2 certified deviation`, then the
/// certified sum of squares, data (response, predictors) from line 61.
fn read(name: &'static str) -> Certified {
    let path = format!("{}/tests/data/nist/{name}.dat", env!("CARGO_MANIFEST_DIR"));
    let text = std::fs::read_to_string(path).unwrap();
    let lines: Vec<&str> = text.lines().collect();
    let numbers = |text: &str| -> Vec<f64> {
        text.split_whitespace()
            .map(|word| word.parse().unwrap())
            .collect()
    };
    let table: Vec<Vec<f64>> = (lines[40..].iter())
        .map_while(|line| line.split_once('='))
        .map(|(_, row)| numbers(row))
        .collect();
    let column = |j: usize| table.iter().map(|row| row[j]).collect::<Vec<f64>>();
    let after = |label: &str| {
        let line = lines.iter().find(|line| line.starts_with(label)).unwrap();
        line[label.len()..].trim().parse::<f64>().unwrap()
    };
    let data: Vec<Vec<f64>> = (lines[60..].iter())
        .map(|line| numbers(line))
        .filter(|row| !row.is_empty())
        .collect();
    assert_eq!(data.len() as f64, after("Number of Observations:"));
    Certified {
        name,
        starts: [column(0), column(1)],
        parameters: column(2),
        deviations: column(3),
        sum_of_squares: after("Residual Sum of Squares:"),
        y: data.iter().map(|row| row[0]).collect(),
        x: data.iter().map(|row| row[1..].to_vec()).collect(),
    }
}

/// Model less data.
struct Regression<'a> {
    problem: &'a Certified,
    model: Model,
    derivatives: Vec<f64>,
}

impl<'a> Regression<'a> {
    fn new(problem: &'a Certified, model: Model) -> Self {
        let derivatives = vec![0.0; problem.parameters.len()];
        Self {
            problem,
            model,
            derivatives,
        }
    }
}

impl LeastSquares for Regression<'_> {
    fn parameters(&self) -> usize {
        self.problem.parameters.len()
    }

    fn residuals(&self) -> usize {
        self.problem.y.len()
    }

    fn evaluate(&mut self, b: &[f64], residuals: &mut [f64], mut jacobian: Option<&mut [f64]>) {
        let rows = self.problem.y.len();
        for (i, (x, y)) in self.problem.x.iter().zip(&self.problem.y).enumerate() {
            residuals[i] = (self.model)(x, b, &mut self.derivatives) - y;
            if let Some(jacobian) = jacobian.as_deref_mut() {
                for (j, derivative) in self.derivatives.iter().enumerate() {
                    jacobian[j * rows + i] = *derivative;
                }
            }
        }
    }
}

/// b1 (1 - exp(-b2 x)).
fn saturating_exponential(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let decay = (-b[1] * x[0]).exp();
    d[0] = -(-b[1] * x[0]).exp_m1();
    d[1] = b[0] * x[0] * decay;
    b[0] * d[0]
}

/// b1 (1 - (1 + b2 x / 2)^-2).
fn misra_b(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let base = 1.0 + 0.5 * b[1] * x[0];
    d[0] = 1.0 - base.powi(-2);
    d[1] = b[0] * x[0] * base.powi(-3);
    b[0] * d[0]
}

/// b1 (1 - (1 + 2 b2 x)^(-1/2)).
fn misra_c(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let base = 1.0 + 2.0 * b[1] * x[0];
    d[0] = 1.0 - base.powf(-0.5);
    d[1] = b[0] * x[0] * base.powf(-1.5);
    b[0] * d[0]
}

/// b1 b2 x / (1 + b2 x).
fn misra_d(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let base = 1.0 + b[1] * x[0];
    d[0] = b[1] * x[0] / base;
    d[1] = b[0] * x[0] / (base * base);
    b[0] * d[0]
}

/// exp(-b1 x) / (b2 + b3 x).
fn chwirut(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let base = b[1] + b[2] * x[0];
    let value = (-b[0] * x[0]).exp() / base;
    d[0] = -x[0] * value;
    d[1] = -value / base;
    d[2] = -value * x[0] / base;
    value
}

/// b1 exp(-b2 x) + b3 exp(-b4 x) + b5 exp(-b6 x).
fn lanczos(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    for k in [0, 2, 4] {
        d[k] = (-b[k + 1] * x[0]).exp();
        d[k + 1] = -b[k] * x[0] * d[k];
    }
    b[0] * d[0] + b[2] * d[2] + b[4] * d[4]
}

/// b1 exp(-b2 x) + b3 exp(-(x - b4)^2 / b5^2) + b6 exp(-(x - b7)^2 / b8^2).
fn gauss(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    d[0] = (-b[1] * x[0]).exp();
    d[1] = -b[0] * x[0] * d[0];
    let mut value = b[0] * d[0];
    for k in [2, 5] {
        let u = (x[0] - b[k + 1]) / b[k + 2];
        d[k] = (-u * u).exp();
        let peak = b[k] * d[k];
        d[k + 1] = peak * 2.0 * u / b[k + 2];
        d[k + 2] = peak * 2.0 * u * u / b[k + 2];
        value += peak;
    }
    value
}

/// b1 x^b2.
fn dan_wood(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    d[0] = x[0].powf(b[1]);
    d[1] = b[0] * d[0] * x[0].ln();
    b[0] * d[0]
}

/// (b1 + ... + bN x^(N-1)) / (1 + b(N+1) x + ...), N numerator terms.
fn rational<const N: usize>(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let power = |k: usize| x[0].powi(i32::try_from(k).unwrap());
    let above: f64 = (0..N).map(|k| b[k] * power(k)).sum();
    let below: f64 = 1.0 + (N..b.len()).map(|k| b[k] * power(k - N + 1)).sum::<f64>();
    let value = above / below;
    for (k, derivative) in d.iter_mut().enumerate() {
        *derivative = if k < N {
            power(k) / below
        } else {
            -value * power(k - N + 1) / below
        };
    }
    value
}

/// log y = b1 - b2 x1 exp(-b3 x2).
fn nelson(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let decay = (-b[2] * x[1]).exp();
    d[0] = 1.0;
    d[1] = -x[0] * decay;
    d[2] = b[1] * x[0] * x[1] * decay;
    b[0] + b[1] * d[1]
}

/// b1 + b2 exp(-b4 x) + b3 exp(-b5 x).
fn mgh17(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    d[0] = 1.0;
    for k in [1, 2] {
        d[k] = (-b[k + 2] * x[0]).exp();
        d[k + 2] = -b[k] * x[0] * d[k];
    }
    b[0] + b[1] * d[1] + b[2] * d[2]
}

/// b1 (x^2 + b2 x) / (x^2 + b3 x + b4).
fn mgh09(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let x = x[0];
    let below = x * x + b[2] * x + b[3];
    d[0] = x * (x + b[1]) / below;
    let value = b[0] * d[0];
    d[1] = b[0] * x / below;
    d[2] = -value * x / below;
    d[3] = -value / below;
    value
}

/// b1 exp(b2 / (x + b3)).
fn mgh10(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let base = x[0] + b[2];
    d[0] = (b[1] / base).exp();
    let value = b[0] * d[0];
    d[1] = value / base;
    d[2] = -value * b[1] / (base * base);
    value
}

/// b1 / (1 + exp(b2 - b3 x)).
fn rat42(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let growth = (b[1] - b[2] * x[0]).exp();
    d[0] = 1.0 / (1.0 + growth);
    let value = b[0] * d[0];
    d[1] = -value * growth * d[0];
    d[2] = -x[0] * d[1];
    value
}

/// b1 / (1 + exp(b2 - b3 x))^(1 / b4).
fn rat43(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let growth = (b[1] - b[2] * x[0]).exp();
    let base = 1.0 + growth;
    d[0] = base.powf(-1.0 / b[3]);
    let value = b[0] * d[0];
    d[1] = -value * growth / (base * b[3]);
    d[2] = -x[0] * d[1];
    d[3] = value * base.ln() / (b[3] * b[3]);
    value
}

/// b1 - b2 x - arctan(b3 / (x - b4)) / pi.
fn roszman(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let offset = x[0] - b[3];
    let square = offset * offset + b[2] * b[2];
    d[0] = 1.0;
    d[1] = -x[0];
    d[2] = -offset / (square * PI);
    d[3] = -b[2] / (square * PI);
    b[0] - b[1] * x[0] - (b[2] / offset).atan() / PI
}

/// A constant, a cycle of period 12 and two cycles of free period, a cosine and a sine each.
fn enso(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let (sine, cosine) = (2.0 * PI * x[0] / 12.0).sin_cos();
    (d[0], d[1], d[2]) = (1.0, cosine, sine);
    let mut value = b[0] + b[1] * cosine + b[2] * sine;
    for k in [3, 6] {
        let phase = 2.0 * PI * x[0] / b[k];
        let (sine, cosine) = phase.sin_cos();
        d[k] = (b[k + 1] * sine - b[k + 2] * cosine) * phase / b[k];
        (d[k + 1], d[k + 2]) = (cosine, sine);
        value += b[k + 1] * cosine + b[k + 2] * sine;
    }
    value
}

/// b1 / b2 exp(-((x - b3) / b2)^2 / 2).
fn eckerle(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let u = (x[0] - b[2]) / b[1];
    d[0] = (-0.5 * u * u).exp() / b[1];
    let value = b[0] * d[0];
    d[1] = value * (u * u - 1.0) / b[1];
    d[2] = value * u / b[1];
    value
}

/// b1 (b2 + x)^(-1 / b3).
fn bennett(x: &[f64], b: &[f64], d: &mut [f64]) -> f64 {
    let base = b[1] + x[0];
    d[0] = base.powf(-1.0 / b[2]);
    let value = b[0] * d[0];
    d[1] = -value / (b[2] * base);
    d[2] = value * base.ln() / (b[2] * b[2]);
    value
}

const PROBLEMS: [(&str, Model); 27] = [
    ("Misra1a", saturating_exponential),
    ("Misra1b", misra_b),
    ("Misra1c", misra_c),
    ("Misra1d", misra_d),
    ("Chwirut1", chwirut),
    ("Chwirut2", chwirut),
    ("Lanczos1", lanczos),
    ("Lanczos2", lanczos),
    ("Lanczos3", lanczos),
    ("Gauss1", gauss),
    ("Gauss2", gauss),
    ("Gauss3", gauss),
    ("DanWood", dan_wood),
    ("Kirby2", rational::<3>),
    ("Hahn1", rational::<4>),
    ("Thurber", rational::<4>),
    ("Nelson", nelson),
    ("MGH09", mgh09),
    ("MGH10", mgh10),
    ("MGH17", mgh17),
    ("Rat42", rat42),
    ("Rat43", rat43),
    ("Roszman1", roszman),
    ("ENSO", enso),
    ("BoxBOD", saturating_exponential),
    ("Eckerle4", eckerle),
    ("Bennett5", bennett),
];

/// The problem with its response as it is fitted.
fn certified(name: &'static str) -> Certified {
    let mut problem = read(name);
    if name == "Nelson" {
        problem.y.iter_mut().for_each(|y| *y = y.ln());
    }
    problem
}

/// -log10 of the largest relative deviation.
fn digits<'a>(
    found: impl IntoIterator<Item = f64>,
    expected: impl IntoIterator<Item = &'a f64>,
) -> f64 {
    (found.into_iter().zip(expected))
        .map(|(found, expected)| -((found - expected).abs() / expected.abs()).log10())
        .fold(f64::INFINITY, f64::min)
}

/// The certified deviations assume noise of unknown size: scaled by chi2 / degrees of freedom.
fn scaled_deviations(minimum: &Minimum) -> Vec<f64> {
    let covariance = minimum.covariance().unwrap();
    let factor = (minimum.chi2 / minimum.degrees_of_freedom() as f64).sqrt();
    (0..minimum.parameters.len())
        .map(|j| covariance.standard_error(j).unwrap() * factor)
        .collect()
}

/// A number as an unevaluated sum of two: about 32 digits.
#[derive(Clone, Copy)]
struct Pair(f64, f64);

impl Pair {
    /// The decimal number of at most 14 places that `value` was read from.
    fn decimal(value: f64) -> Self {
        let unit = 1e14;
        let rest = (-value).mul_add(unit, (value * unit).round());
        Self(value, rest / unit)
    }

    fn plus(self, other: Self) -> Self {
        let sum = self.0 + other.0;
        let part = sum - self.0;
        let error = (self.0 - (sum - part)) + (other.0 - part) + self.1 + other.1;
        Self(sum + error, error - ((sum + error) - sum))
    }

    fn times(self, other: Self) -> Self {
        let product = self.0 * other.0;
        let error = self.0.mul_add(other.0, -product) + self.0 * other.1 + self.1 * other.0;
        Self(product + error, error - ((product + error) - product))
    }

    /// Taylor series at a 256th of the argument, squared eight times.
    fn exp(self) -> Self {
        let argument = Self(self.0 / 256.0, self.1 / 256.0);
        let one = Self(1.0, 0.0);
        let series = (1..=12).rev().fold(one, |sum, k| {
            let factorial_step = f64::from(k);
            let quotient = argument.0 / factorial_step;
            let rest = (-quotient).mul_add(factorial_step, argument.0) + argument.1;
            one.plus(Self(quotient, rest / factorial_step).times(sum))
        });
        (0..8).fold(series, |power, _| power.times(power))
    }
}

/// Lanczos1 with residuals in doubled precision: they are of order 1e-13 for data of order 1, so that
/// plain doubles leave them three digits.
struct PreciseLanczos<'a>(Regression<'a>);

impl LeastSquares for PreciseLanczos<'_> {
    fn parameters(&self) -> usize {
        self.0.parameters()
    }

    fn residuals(&self) -> usize {
        self.0.residuals()
    }

    fn evaluate(&mut self, b: &[f64], residuals: &mut [f64], jacobian: Option<&mut [f64]>) {
        self.0.evaluate(b, residuals, jacobian);
        let problem = self.0.problem;
        for ((residual, x), y) in residuals.iter_mut().zip(&problem.x).zip(&problem.y) {
            let Pair(y, rest) = Pair::decimal(*y);
            let term = |k: usize| {
                let decay = Pair::decimal(x[0]).times(Pair(-b[k + 1], 0.0)).exp();
                decay.times(Pair(b[k], 0.0))
            };
            let sum = term(0).plus(term(2)).plus(term(4)).plus(Pair(-y, -rest));
            *residual = sum.0;
        }
    }
}

fn fit(problem: &Certified, model: Model, start: &[f64], settings: &Settings) -> Minimum {
    let regression = Regression::new(problem, model);
    let mut regression: Box<dyn LeastSquares> = if problem.name == "Lanczos1" {
        Box::new(PreciseLanczos(regression))
    } else {
        Box::new(regression)
    };
    let bounds = unbounded(start.len());
    let mut workspace = Workspace::new();
    minimize(&mut *regression, start, &bounds, settings, &mut workspace).unwrap()
}

/// As close to the minimum as rounding allows.
fn exact() -> Settings {
    Settings {
        max_evaluations: 5000,
        chi2_tolerance: 1e-16,
        step_tolerance: 1e-16,
        ..Settings::default()
    }
}

#[test]
fn certified_parameters_to_six_digits_and_deviations_to_four() {
    let mut failures = Vec::new();
    for (name, model) in PROBLEMS {
        let problem = certified(name);
        for (start, values) in problem.starts.iter().enumerate() {
            let minimum = fit(&problem, model, values, &exact());
            let parameters = digits(minimum.parameters.iter().copied(), &problem.parameters);
            let sum_of_squares = digits([minimum.chi2], &[problem.sum_of_squares]);
            let deviations = digits(scaled_deviations(&minimum), &problem.deviations);
            let line = format!(
                "{name:9} start {} {parameters:5.1} digits of parameters {deviations:5.1} of deviations \
                 {sum_of_squares:5.1} of chi2, {:4} evaluations, {}",
                start + 1,
                minimum.evaluations,
                minimum.termination
            );
            println!("{line}");
            let good = parameters >= 6.0 && deviations >= 4.0 && sum_of_squares >= 4.0;
            if !(good && minimum.termination.converged()) {
                failures.push(line);
            }
        }
    }
    assert!(failures.is_empty(), "{failures:#?}");
}

#[test]
fn default_tolerances_end_within_a_thousandth_of_a_standard_deviation() {
    let settings = Settings {
        max_evaluations: 5000,
        ..Settings::default()
    };
    for (name, model) in PROBLEMS {
        let problem = certified(name);
        for start in &problem.starts {
            let minimum = fit(&problem, model, start, &settings);
            assert!(
                minimum.termination.converged(),
                "{name}: {}",
                minimum.termination
            );
            let certified = problem.parameters.iter().zip(&problem.deviations);
            for (found, (parameter, deviation)) in minimum.parameters.iter().zip(certified) {
                // The certified values end at eleven digits.
                let rounding = 1e-10 * parameter.abs();
                let distance = (found - parameter).abs();
                assert!(
                    distance <= 1e-3 * deviation + rounding,
                    "{name}: {found} for {parameter}, deviation {deviation}"
                );
            }
        }
    }
}

#[test]
fn model_jacobians_agree_with_finite_differences() {
    for (name, model) in PROBLEMS {
        let problem = certified(name);
        let mut regression = Regression::new(&problem, model);
        let steps: Vec<f64> = problem.parameters.iter().map(|b| 1e-3 * b.abs()).collect();
        let worst = check_jacobian(&mut regression, &problem.parameters, &steps);
        assert!(worst < 1e-8, "{name}: {worst:e}");
    }
}
