//! The exponential, and (1 - e^-x)/x, in a form that the compiler vectorises.
//!
//! e^x = 2^n e^r with |r| <= ln 2 / 2, e^r by its Taylor polynomial of degree 13 (truncation
//! below 5e-18 relative). Within 1 ulp or so of the exact value over the whole range, subnormal
//! results included; infinities and `NaN` behave as in [`f64::exp`].
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

/// 1/k! for k = 13 down to 2.
const INVERSE_FACTORIALS: [f64; 12] = [
    1.0 / 6_227_020_800.0,
    1.0 / 479_001_600.0,
    1.0 / 39_916_800.0,
    1.0 / 3_628_800.0,
    1.0 / 362_880.0,
    1.0 / 40_320.0,
    1.0 / 5_040.0,
    1.0 / 720.0,
    1.0 / 120.0,
    1.0 / 24.0,
    1.0 / 6.0,
    0.5,
];

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
    let n = A::mul_add(bounded, std::f64::consts::LOG2_E, ROUNDER) - ROUNDER;
    let r = A::mul_add(n, -LN_2_HIGH, bounded);
    let r = A::mul_add(n, -LN_2_LOW, r);
    let mut polynomial = INVERSE_FACTORIALS[0];
    for coefficient in &INVERSE_FACTORIALS[1..] {
        polynomial = A::mul_add(polynomial, r, *coefficient);
    }
    // 1 + (r + r^2 p): the small part is added last, so that its rounding is below 1 ulp.
    let small = A::mul_add(r * r, polynomial, r);
    // Two factors, so that neither leaves the normal range where the product is subnormal.
    let half = A::mul_add(n, 0.5, ROUNDER);
    let rest = (n - (half - ROUNDER)) + ROUNDER;
    (1.0 + small) * power_of_two(half) * power_of_two(rest)
}

/// e^-x of x >= 0 that is far from under- and overflow or may be flushed to zero (x > 708): one
/// scale factor and no guard, for use inside a [`Kernel`].
#[inline(always)]
pub fn exp_negative<A: Arithmetic>(x: f64) -> f64 {
    let bounded = if x > 708.0 { 708.0 } else { x };
    let shifted = A::mul_add(bounded, -std::f64::consts::LOG2_E, ROUNDER);
    let n = shifted - ROUNDER;
    let r = A::mul_add(n, -LN_2_HIGH, -bounded);
    let r = A::mul_add(n, -LN_2_LOW, r);
    let mut polynomial = INVERSE_FACTORIALS[0];
    for coefficient in &INVERSE_FACTORIALS[1..] {
        polynomial = A::mul_add(polynomial, r, *coefficient);
    }
    let small = A::mul_add(r * r, polynomial, r);
    (1.0 + small) * power_of_two(shifted)
}

/// (-1)^(k+1) (k+1)/(k+2)! for k = 13 down to 0: the series of d/dx (1 - e^-x)/x.
const ESCAPE_SLOPE_SERIES: [f64; 14] = [
    14.0 / 1_307_674_368_000.0,
    -13.0 / 87_178_291_200.0,
    12.0 / 6_227_020_800.0,
    -11.0 / 479_001_600.0,
    10.0 / 39_916_800.0,
    -9.0 / 3_628_800.0,
    8.0 / 362_880.0,
    -7.0 / 40_320.0,
    6.0 / 5_040.0,
    -5.0 / 720.0,
    4.0 / 120.0,
    -3.0 / 24.0,
    2.0 / 6.0,
    -0.5,
];

/// Below, the series is used; its truncation there is below 5e-17.
const SERIES_BELOW: f64 = 0.5;

/// g(x) = (1 - e^-x)/x and its slope g'(x) for x >= 0, given e^-x; for use inside a [`Kernel`].
///
/// g(0) = 1, g'(0) = -1/2. The slope comes from its series below x = 0.5, else from
/// g' = (e^-x - g)/x; then g = e^-x - x g', which loses no digits anywhere.
#[inline(always)]
pub fn escape_and_slope<A: Arithmetic>(x: f64, exp_minus_x: f64) -> (f64, f64) {
    let mut series = ESCAPE_SLOPE_SERIES[0];
    for coefficient in &ESCAPE_SLOPE_SERIES[1..] {
        series = A::mul_add(series, x, *coefficient);
    }
    let inverse = 1.0 / x;
    let direct = (exp_minus_x - (1.0 - exp_minus_x) * inverse) * inverse;
    let slope = if x < SERIES_BELOW { series } else { direct };
    (A::mul_add(-x, slope, exp_minus_x), slope)
}

struct ExpSlice<'a> {
    values: &'a mut [f64],
}

impl Kernel for ExpSlice<'_> {
    type Output = ();
    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for value in self.values {
            *value = exp::<A>(*value);
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
    dispatch(ExpSlice { values });
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
            ExpSlice {
                values: &mut self.0,
            }
            .run::<A>();
            self.0
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
