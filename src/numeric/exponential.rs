//! The exponential, and (1 - e^-x)/x, in a form that the compiler vectorises.
//!
//! e^x = 2^n e^r with |r| <= ln 2 / 2 and e^r = 1 + r (1 + r q(r)), q a polynomial of degree 9 that
//! `tests/data/exponential/make.py` makes (relative error of e^r 1e-17). Within 1 ulp or so of the
//! exact value over the whole range, subnormal results included; infinities and `NaN` behave as in
//! [`f64::exp`].
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::dispatch::{Arithmetic, Kernel, dispatch};

/// 1.5 * 2^52: adding it rounds to an integer that then stands in the low mantissa bits.
const ROUNDER: f64 = 6_755_399_441_055_744.0;
/// High part of ln 2; its trailing zeros make n times it exact.
const LN_2_HIGH: f64 = 0.693_147_180_369_123_8;
/// ln 2 minus its high part.
const LN_2_LOW: f64 = 1.908_214_929_270_587_7e-10;
/// Below, the result is zero; above the second, it is infinite.
const LOWEST: f64 = -745.2;
const HIGHEST: f64 = 709.8;
/// Arguments up to this size either way give normal numbers: n is at most 1021.
const ORDINARY: f64 = 708.0;

/// c_9 to c_0 of q(r), close to (e^r - 1 - r)/r^2: error below 3e-16, r^2 times it below 1e-17 of e^r.
/// From `tests/data/exponential/make.py`.
const QUOTIENT: [f64; 10] = [
    2.511_309_138_335_876e-8,
    2.762_338_367_155_144_3e-7,
    2.755_723_288_670_813_6e-6,
    2.480_151_348_350_472e-5,
    0.000_198_412_698_966_795_63,
    0.001_388_888_892_271_265_8,
    0.008_333_333_333_318_04,
    0.041_666_666_666_614_89,
    0.166_666_666_666_666_8,
    0.5,
];

/// An argument x = n ln 2 + r and what e^x is made of.
struct Reduced {
    /// n with [`ROUNDER`] added.
    rounded: f64,
    /// q(r).
    quotient: f64,
    /// 1 + r q(r) = (e^r - 1)/r.
    chord: f64,
    /// e^r.
    power: f64,
}

impl Reduced {
    /// Of an x within +-745.2.
    #[inline(always)]
    fn of<A: Arithmetic>(x: f64) -> Self {
        let rounded = A::mul_add(x, std::f64::consts::LOG2_E, ROUNDER);
        let n = rounded - ROUNDER;
        let r = A::mul_add(n, -LN_2_HIGH, x);
        let r = A::mul_add(n, -LN_2_LOW, r);
        let mut quotient = QUOTIENT[0];
        for coefficient in &QUOTIENT[1..] {
            quotient = A::mul_add(quotient, r, *coefficient);
        }
        let chord = A::mul_add(r, quotient, 1.0);
        Self {
            rounded,
            quotient,
            chord,
            power: A::mul_add(r, chord, 1.0),
        }
    }

    /// 2^n e^r, a normal number: n is added to the exponent.
    #[inline(always)]
    fn exp(&self) -> f64 {
        f64::from_bits(
            self.power
                .to_bits()
                .wrapping_add(self.rounded.to_bits() << 52),
        )
    }
}

/// 2^n for an integer-valued n in -1022..=1023 that has [`ROUNDER`] added to it.
#[inline(always)]
fn power_of_two(rounded: f64) -> f64 {
    f64::from_bits(rounded.to_bits().wrapping_add(1023) << 52)
}

/// e^x of one number, for use inside a [`Kernel`].
#[inline(always)]
pub fn exp<A: Arithmetic>(x: f64) -> f64 {
    let bounded = if x < LOWEST { LOWEST } else { x };
    let bounded = if bounded > HIGHEST { HIGHEST } else { bounded };
    let reduced = Reduced::of::<A>(bounded);
    let n = reduced.rounded - ROUNDER;
    // Two factors, so that neither leaves the normal range where the product is subnormal.
    let half = A::mul_add(n, 0.5, ROUNDER);
    let rest = (n - (half - ROUNDER)) + ROUNDER;
    reduced.power * power_of_two(half) * power_of_two(rest)
}

/// e^-x of x >= 0 that is far from under- and overflow or may be flushed to zero (x > 708): one
/// scale factor and no guard, for use inside a [`Kernel`].
#[inline(always)]
pub fn exp_negative<A: Arithmetic>(x: f64) -> f64 {
    negative::<A>(x).exp()
}

#[inline(always)]
fn negative<A: Arithmetic>(x: f64) -> Reduced {
    Reduced::of::<A>(-if x > ORDINARY { ORDINARY } else { x })
}

/// Below, n of -x is zero and r is -x: just under ln 2 / 2.
const UNREDUCED_BELOW: f64 = 0.3465;

/// g(x) = (1 - e^-x)/x and its slope g'(x) for x >= 0, given e^-x; for use inside a [`Kernel`].
///
/// g(0) = 1, g'(0) = -1/2. Below x = 0.3465 from the polynomial of e^-x, g = 1 - x q(-x) and
/// g' = q(-x) (1 + x) - 1, which loses no digits; else g' = (e^-x - g)/x. Where e^-x comes from
/// [`exp_negative`] of the same x, the compiler evaluates the polynomial once for both.
#[inline(always)]
pub fn escape_and_slope<A: Arithmetic>(x: f64, exp_minus_x: f64) -> (f64, f64) {
    let Reduced {
        quotient, chord, ..
    } = negative::<A>(x);
    let inverse = 1.0 / x;
    let g = (1.0 - exp_minus_x) * inverse;
    let slope = (exp_minus_x - g) * inverse;
    if x < UNREDUCED_BELOW {
        (chord, A::mul_add(quotient, 1.0 + x, -1.0))
    } else {
        (g, slope)
    }
}

/// The kernel that replaces each number by its exponential.
pub struct ExpInPlace<'a>(pub &'a mut [f64]);

/// Numbers that are looked at together for one that needs more care.
const RUN: usize = 64;

impl Kernel for ExpInPlace<'_> {
    type Output = ();
    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let (runs, rest) = self.0.as_chunks_mut::<RUN>();
        for run in runs {
            exp_of_run::<A>(run);
        }
        exp_of_run::<A>(rest);
    }
}

#[inline(always)]
fn exp_of_run<A: Arithmetic>(run: &mut [f64]) {
    let extreme = run.iter().fold(false, |extreme, x| {
        extreme | (x.is_nan() || x.abs() > ORDINARY)
    });
    if extreme {
        for value in run {
            *value = exp::<A>(*value);
        }
    } else {
        for value in run {
            *value = Reduced::of::<A>(*value).exp();
        }
    }
}

/// Replaces each number by its exponential.
///
/// ```
/// let mut values = [0.0, 1.0, -1e9];
/// inrush::numeric::exponential::exp_in_place(&mut values);
/// assert_eq!([values[0], values[2]], [1.0, 0.0]);
/// assert!((values[1] - std::f64::consts::E).abs() < 1e-15);
/// ```
pub fn exp_in_place(values: &mut [f64]) {
    dispatch(ExpInPlace(values));
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::dispatch::dispatch_all;

    fn ulps(a: f64, b: f64) -> u64 {
        a.to_bits().abs_diff(b.to_bits())
    }

    struct Copy(Vec<f64>);
    impl Kernel for Copy {
        type Output = Vec<f64>;
        #[inline(always)]
        fn run<A: Arithmetic>(mut self) -> Vec<f64> {
            ExpInPlace(&mut self.0).run::<A>();
            self.0
        }
    }

    /// Numbers of a table below `tests/data/exponential`, made by `make.py` beside it with decimal
    /// arithmetic of 50 digits.
    fn references(table: &str) -> Vec<[f64; 3]> {
        let rows = table.lines().skip(1).map(|line| {
            let mut numbers = line.split(',').map(|number| number.parse().unwrap());
            [(); 3].map(|()| numbers.next().unwrap())
        });
        rows.collect()
    }

    /// Error of `found` in ulps of the nearest double, from which the exact value is `rest` ulps away.
    fn error_ulps(found: f64, nearest: f64, rest: f64) -> f64 {
        let apart = ulps(found, nearest) as f64;
        (apart.copysign(found - nearest) - rest).abs()
    }

    /// Two roundings instead of one where the processor does not fuse: a quarter more.
    const WORST_ULPS: [f64; 3] = [1.25, 1.0, 1.0];

    #[test]
    fn exponential_is_within_an_ulp_of_exact_values_on_every_instruction_set() {
        let references = references(include_str!(
            "../../tests/data/exponential/exponentials.csv"
        ));
        assert_eq!(references.len(), 1658);
        let arguments: Vec<f64> = references.iter().map(|row| row[0]).collect();
        let copies = dispatch_all(|| Copy(arguments.clone()));
        for (values, limit) in copies.iter().zip(WORST_ULPS) {
            for (value, [x, nearest, rest]) in values.iter().zip(&references) {
                let error = error_ulps(*value, *nearest, *rest);
                assert!(error <= limit, "e^{x} = {value} is off by {error} ulps");
            }
        }
    }

    #[test]
    fn negative_exponential_is_within_an_ulp_of_exact_values() {
        use crate::numeric::dispatch::Separate;
        for [x, nearest, rest] in references(include_str!(
            "../../tests/data/exponential/exponentials.csv"
        )) {
            if x <= 0.0 {
                let error = error_ulps(exp_negative::<Separate>(-x), nearest, rest);
                assert!(error <= WORST_ULPS[0], "e^{x} is off by {error} ulps");
            }
        }
    }

    struct Escapes(Vec<f64>);
    impl Kernel for Escapes {
        type Output = Vec<(f64, f64)>;
        #[inline(always)]
        fn run<A: Arithmetic>(self) -> Vec<(f64, f64)> {
            let pair = |x: f64| escape_and_slope::<A>(x, exp_negative::<A>(x));
            self.0.into_iter().map(pair).collect()
        }
    }

    #[test]
    fn escape_factor_agrees_with_exact_values_on_every_instruction_set() {
        let references = references(include_str!("../../tests/data/exponential/escapes.csv"));
        assert_eq!(references.len(), 1300);
        let depths: Vec<f64> = references.iter().map(|row| row[0]).collect();
        let copies = dispatch_all(|| Escapes(depths.clone()));
        for values in &copies {
            for ((g, slope), [x, exact, exact_slope]) in values.iter().zip(&references) {
                assert!((g - exact).abs() <= 4e-16, "g({x}) = {g}, exact {exact}");
                assert!(
                    (slope - exact_slope).abs() <= 2e-15,
                    "g'({x}) = {slope}, exact {exact_slope}"
                );
            }
        }
        if let [_, avx2, avx512] = &copies[..] {
            assert_eq!(avx2, avx512);
        }
    }

    #[test]
    fn exponential_is_within_two_ulps_of_std_on_every_instruction_set() {
        let arguments: Vec<f64> = (0..200_000)
            .map(|i| -745.0 + 1454.0 * f64::from(i) / 2e5)
            .collect();
        for values in dispatch_all(|| Copy(arguments.clone())) {
            let worst = arguments
                .iter()
                .zip(&values)
                .map(|(x, y)| ulps(x.exp(), *y))
                .max()
                .unwrap();
            assert!(worst <= 2, "{worst} ulps");
        }
    }

    #[test]
    fn exponential_edges_are_those_of_std() {
        let edges = [
            0.0,
            -0.0,
            f64::INFINITY,
            f64::NEG_INFINITY,
            709.782,
            710.0,
            -745.13,
            -746.0,
            1e308,
            -1e308,
            5e-324,
        ];
        for values in dispatch_all(|| Copy(edges.to_vec())) {
            for (x, y) in edges.iter().zip(&values) {
                assert!(
                    ulps(x.exp(), *y) <= 2,
                    "exp({x}) = {y}, std has {}",
                    x.exp()
                );
            }
        }
        for values in dispatch_all(|| Copy(vec![f64::NAN])) {
            assert!(values[0].is_nan());
        }
    }

    #[test]
    fn an_extreme_number_changes_none_of_its_neighbours() {
        let ordinary: Vec<f64> = (0..150).map(|i| 0.3 * f64::from(i) - 20.0).collect();
        let alone = dispatch_all(|| Copy(ordinary.clone()));
        for extreme in [-744.0, 709.5, f64::NAN, f64::NEG_INFINITY] {
            let mut mixed = ordinary.clone();
            mixed[70] = extreme;
            mixed[140] = extreme;
            let mixed = dispatch_all(|| Copy(mixed.clone()));
            for (alone, mixed) in alone.iter().zip(&mixed) {
                for i in (0..150).filter(|i| i % 70 != 0 || *i == 0) {
                    assert_eq!(alone[i], mixed[i]);
                }
            }
        }
    }

    #[test]
    fn fused_copies_agree_bit_for_bit() {
        let arguments: Vec<f64> = (0..10_001).map(|i| -40.0 + 0.008 * f64::from(i)).collect();
        let copies = dispatch_all(|| Copy(arguments.clone()));
        if copies.len() == 3 {
            assert_eq!(copies[1], copies[2]);
        }
    }

    #[test]
    fn exp_negative_agrees_with_std_and_flushes_what_is_tiny() {
        for i in 0..100_000 {
            let x = 7.0e-3 * f64::from(i);
            assert!(
                ulps(
                    exp_negative::<crate::numeric::dispatch::Separate>(x),
                    (-x).exp()
                ) <= 2,
                "{x}"
            );
        }
        assert!(exp_negative::<crate::numeric::dispatch::Separate>(1e300) < 1e-307);
    }

    #[test]
    fn escape_factor_has_its_limits_and_agrees_with_expm1() {
        use crate::numeric::dispatch::Separate;
        assert_eq!(escape_and_slope::<Separate>(0.0, 1.0), (1.0, -0.5));
        for i in 1..60_000 {
            let x = 1e-3 * f64::from(i);
            let (g, slope) = escape_and_slope::<Separate>(x, (-x).exp());
            let exact = -(-x).exp_m1() / x;
            assert!(
                (g - exact).abs() <= 4e-16,
                "g({x}) = {g}, expm1 gives {exact}"
            );
            // slope by the Taylor series in 40 terms where it converges quickly
            if x < 5.0 {
                let mut term = 1.0;
                let mut sum = 0.0;
                for k in 0..60 {
                    let k = f64::from(k);
                    sum -= term * (k + 1.0) / ((k + 1.0) * (k + 2.0));
                    term *= -x / (k + 1.0);
                }
                assert!(
                    (slope - sum).abs() < 3e-15,
                    "g'({x}) = {slope}, series {sum}"
                );
            }
        }
    }
}
