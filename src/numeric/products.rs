//! Dot products over slices, compiled for every instruction set.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::dispatch::{Arithmetic, Kernel, dispatch};

/// Independent partial sums of a dot product: one register of the widest instructions.
const LANES: usize = 8;

/// `sum_i a_i b_i` of `a` with each of `N` others at least as long, in one pass over `a`; for use
/// inside a [`Kernel`].
#[inline(always)]
pub fn products_with<const N: usize, A: Arithmetic>(a: &[f64], others: [&[f64]; N]) -> [f64; N] {
    let mut sums = [[0.0; LANES]; N];
    let (whole, rest) = a.as_chunks::<LANES>();
    let others = others.map(|other| other[..a.len()].as_chunks::<LANES>());
    for (index, left) in whole.iter().enumerate() {
        for k in 0..N {
            let right = &others[k].0[index];
            for lane in 0..LANES {
                sums[k][lane] = A::mul_add(left[lane], right[lane], sums[k][lane]);
            }
        }
    }
    let mut totals = [0.0; N];
    for k in 0..N {
        let mut tail = 0.0;
        for (left, right) in rest.iter().zip(others[k].1) {
            tail = A::mul_add(*left, *right, tail);
        }
        let s = &sums[k];
        totals[k] = ((s[0] + s[4]) + (s[1] + s[5])) + ((s[2] + s[6]) + (s[3] + s[7])) + tail;
    }
    totals
}

/// The dot products of `a` with each of `N` others at least as long.
///
/// ```
/// let [square, sum] = inrush::numeric::products::products(&[1.0, 2.0], [&[1.0, 2.0], &[1.0, 1.0]]);
/// assert_eq!((square, sum), (5.0, 3.0));
/// ```
pub fn products<const N: usize>(a: &[f64], others: [&[f64]; N]) -> [f64; N] {
    dispatch(Products(a, others))
}

struct Products<'a, const N: usize>(&'a [f64], [&'a [f64]; N]);

impl<const N: usize> Kernel for Products<'_, N> {
    type Output = [f64; N];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> [f64; N] {
        products_with::<N, A>(self.0, self.1)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::dispatch::dispatch_all;

    #[test]
    fn products_are_the_plain_sums_and_fused_copies_agree_bit_for_bit() {
        for length in [0, 1, 7, 8, 9, 200, 291] {
            let column = |phase: f64| -> Vec<f64> {
                (0..length)
                    .map(|i| (f64::from(i) * 0.7 + phase).sin())
                    .collect()
            };
            let (a, b, c) = (column(0.0), column(1.0), column(2.0));
            let plain = |x: &[f64]| -> f64 { a.iter().zip(x).map(|(a, x)| a * x).sum() };
            let copies = dispatch_all(|| Products(&a, [&b, &c]));
            for [by_b, by_c] in &copies {
                assert!((by_b - plain(&b)).abs() < 1e-13);
                assert!((by_c - plain(&c)).abs() < 1e-13);
            }
            if let [_, avx2, avx512] = &copies[..] {
                assert_eq!(avx2, avx512);
            }
        }
    }
}
