//! One line's normal equations in one pass over its channels, with the amplitudes at their best.
//!
//! Neither residuals nor a Jacobian are stored: J = a f' + b h' of the nonlinear parameters is formed a
//! register of channels at a time, and its products with itself, with the functions f, h and with the
//! residuals are summed. The part of J along the free functions is then taken out of the sums.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::amplitudes::{Amplitudes, Products};
use crate::model::MOST_AMPLITUDES;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::numeric::products::products_with;

/// Most nonlinear parameters of a model.
pub(super) const MOST_NONLINEAR: usize = 4;

/// Numbers in a register of the widest instructions.
const LANES: usize = 8;

type Lanes = [f64; LANES];

/// chi2 at the best amplitudes and its derivatives by a line's nonlinear parameters.
#[derive(Clone, Copy, Debug)]
pub(super) struct LineSums {
    pub amplitudes: Amplitudes,
    pub chi2: f64,
    /// J^T r.
    pub gradient: [f64; MOST_NONLINEAR],
    /// J^T J, its upper triangle.
    pub gram: [[f64; MOST_NONLINEAR]; MOST_NONLINEAR],
}

/// The sums of a line: `data` and the columns of `functions` and `slopes` as in
/// [`Model::functions`](crate::model::Model::functions), amplitudes inside `ranges`.
pub(super) fn line_sums(
    data: &[f64],
    functions: &[f64],
    slopes: &[f64],
    ranges: &[(f64, f64); MOST_AMPLITUDES],
) -> LineSums {
    let columns = (functions.len() / data.len(), slopes.len() / functions.len());
    let line = Line {
        data,
        functions,
        slopes,
        ranges,
    };
    match columns {
        (1, 2) => dispatch(Sums::<1, 2>(line)),
        (1, 3) => dispatch(Sums::<1, 3>(line)),
        (1, 4) => dispatch(Sums::<1, 4>(line)),
        (2, 4) => dispatch(Sums::<2, 4>(line)),
        (functions, parameters) => {
            panic!("no sums of {functions} functions and {parameters} parameters")
        }
    }
}

#[derive(Clone, Copy)]
struct Line<'a> {
    data: &'a [f64],
    functions: &'a [f64],
    slopes: &'a [f64],
    ranges: &'a [(f64, f64); MOST_AMPLITUDES],
}

/// Of `K` functions and `P` nonlinear parameters.
struct Sums<'a, const K: usize, const P: usize>(Line<'a>);

#[inline(always)]
fn add_product<A: Arithmetic>(sum: &mut Lanes, a: &Lanes, b: &Lanes) {
    for lane in 0..LANES {
        sum[lane] = A::mul_add(a[lane], b[lane], sum[lane]);
    }
}

/// The first `count` registers of a column.
#[inline(always)]
fn registers(column: &[f64], count: usize) -> &[Lanes] {
    &column.as_chunks::<LANES>().0[..count]
}

/// Not inlined: the compiler would let the order of these few sums rule that of the loops before them.
#[inline(never)]
fn total(s: &Lanes) -> f64 {
    ((s[0] + s[4]) + (s[1] + s[5])) + ((s[2] + s[6]) + (s[3] + s[7]))
}

/// Sums over channels of the products of residuals r, J and functions.
struct Accumulated<const P: usize> {
    chi2: f64,
    gram: [[f64; P]; P],
    gradient: [f64; P],
    along_f: [f64; P],
    along_h: [f64; P],
}

impl<const K: usize, const P: usize> Kernel for Sums<'_, K, P> {
    type Output = LineSums;

    #[inline(always)]
    #[allow(
        clippy::needless_range_loop,
        reason = "loops over constants are unrolled, and sums stay in registers"
    )]
    fn run<A: Arithmetic>(self) -> LineSums {
        let line = self.0;
        let channels = line.data.len();
        let data = line.data;
        let f = &line.functions[..channels];
        let h = if K == 2 {
            &line.functions[channels..2 * channels]
        } else {
            f
        };
        let [ff, fh, fd] = products_with::<3, A>(f, [f, h, data]);
        let [hh, hd] = products_with::<2, A>(h, [h, data]);
        let products = Products {
            squares: [ff, hh],
            both: fh,
            by_data: [fd, hd],
            data: 0.0,
        };
        let products = if K == 2 {
            products
        } else {
            products.of_first_alone()
        };
        let best = products.best(line.ranges);
        let [a, b] = best.amplitudes;

        let slope = |p: usize, k: usize| {
            let first = (p * K + k) * channels;
            &line.slopes[first..first + channels]
        };
        let mut by_f: [&[f64]; P] = [f; P];
        let mut by_h: [&[f64]; P] = [f; P];
        for p in 0..P {
            by_f[p] = slope(p, 0);
            if K == 2 {
                by_h[p] = slope(p, 1);
            }
        }
        let sums = accumulate::<K, P, A>((data, f, h), (by_f, by_h), (a, b));
        let mut result = LineSums {
            amplitudes: best.amplitudes,
            chi2: sums.chi2,
            gradient: [0.0; MOST_NONLINEAR],
            gram: [[0.0; MOST_NONLINEAR]; MOST_NONLINEAR],
        };
        for p in 0..P {
            result.gradient[p] = sums.gradient[p];
            let along = Products {
                by_data: [sums.along_f[p], sums.along_h[p]],
                ..products
            };
            let [by_f, by_h] = along.shares(best.free);
            for q in p..P {
                let explained = by_f * sums.along_f[q] + by_h * sums.along_h[q];
                result.gram[p][q] = sums.gram[p][q] - explained;
            }
        }
        result
    }
}

/// The sums with amplitudes a and b.
#[inline(always)]
#[allow(
    clippy::needless_range_loop,
    reason = "loops over constants are unrolled, and sums stay in registers"
)]
fn accumulate<const K: usize, const P: usize, A: Arithmetic>(
    (data, f, h): (&[f64], &[f64], &[f64]),
    (by_f, by_h): ([&[f64]; P], [&[f64]; P]),
    (a, b): (f64, f64),
) -> Accumulated<P> {
    let (d, rest) = data.as_chunks::<LANES>();
    let whole = data.len() - rest.len();
    let n = d.len();
    let (f_lanes, h_lanes) = (registers(f, n), registers(h, n));
    let (by_f_lanes, by_h_lanes) = (
        by_f.map(|column| registers(column, n)),
        by_h.map(|column| registers(column, n)),
    );
    let zero = [0.0; LANES];
    let mut chi2 = zero;
    let mut gram = [[zero; P]; P];
    let [mut gradient, mut along_f, mut along_h] = [[zero; P]; 3];
    for i in 0..n {
        let mut r = zero;
        for lane in 0..LANES {
            r[lane] = A::mul_add(a, f_lanes[i][lane], -d[i][lane]);
        }
        if K == 2 {
            for lane in 0..LANES {
                r[lane] = A::mul_add(b, h_lanes[i][lane], r[lane]);
            }
        }
        let mut j = [zero; P];
        for p in 0..P {
            let mut column = zero;
            for lane in 0..LANES {
                column[lane] = a * by_f_lanes[p][i][lane];
            }
            if K == 2 {
                for lane in 0..LANES {
                    column[lane] = A::mul_add(b, by_h_lanes[p][i][lane], column[lane]);
                }
            }
            j[p] = column;
        }
        add_product::<A>(&mut chi2, &r, &r);
        for p in 0..P {
            add_product::<A>(&mut gradient[p], &j[p], &r);
            add_product::<A>(&mut along_f[p], &j[p], &f_lanes[i]);
            if K == 2 {
                add_product::<A>(&mut along_h[p], &j[p], &h_lanes[i]);
            }
            for q in p..P {
                add_product::<A>(&mut gram[p][q], &j[p], &j[q]);
            }
        }
    }
    let totals = |sums: [Lanes; P]| sums.map(|lanes| total(&lanes));
    let mut sums = Accumulated {
        chi2: total(&chi2),
        gram: gram.map(totals),
        gradient: totals(gradient),
        along_f: totals(along_f),
        along_h: totals(along_h),
    };
    for i in whole..data.len() {
        let both = |first: f64, second: f64| {
            if K == 2 {
                a * first + b * second
            } else {
                a * first
            }
        };
        let r = both(f[i], h[i]) - data[i];
        sums.chi2 += r * r;
        let mut j = [0.0; P];
        for p in 0..P {
            j[p] = both(by_f[p][i], by_h[p][i]);
        }
        for p in 0..P {
            sums.gradient[p] += j[p] * r;
            sums.along_f[p] += j[p] * f[i];
            if K == 2 {
                sums.along_h[p] += j[p] * h[i];
            }
            for q in p..P {
                sums.gram[p][q] += j[p] * j[q];
            }
        }
    }
    sums
}
