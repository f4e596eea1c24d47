//! One line's normal equations in one pass over its channels, with the amplitudes at their best.
//!
//! Neither residuals nor a Jacobian are stored: J = a f' + b h' of the nonlinear parameters is formed a
//! register of channels at a time, and its products with itself, with the functions f, h and with the
//! residuals are summed. The part of J along the free functions is then taken out of the sums.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::amplitudes::Products;
use crate::model::MOST_AMPLITUDES;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};

/// Most nonlinear parameters of a model.
pub(super) const MOST_NONLINEAR: usize = 4;

/// Numbers in a register of the widest instructions.
const LANES: usize = 8;

type Lanes = [f64; LANES];

/// chi2 at the best amplitudes and its derivatives by a line's nonlinear parameters.
#[derive(Clone, Copy, Debug)]
pub(super) struct LineSums {
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

/// The channels from `start` on that fill a register; zeros where there are no more.
#[inline(always)]
fn lanes(column: &[f64], start: usize) -> Lanes {
    if let Some(whole) = column.get(start..start + LANES) {
        let mut lanes = [0.0; LANES];
        lanes.copy_from_slice(whole);
        return lanes;
    }
    let mut lanes = [0.0; LANES];
    for (lane, value) in lanes.iter_mut().zip(&column[start..]) {
        *lane = *value;
    }
    lanes
}

#[inline(always)]
fn add_product<A: Arithmetic>(sum: &mut Lanes, a: &Lanes, b: &Lanes) {
    for lane in 0..LANES {
        sum[lane] = A::mul_add(a[lane], b[lane], sum[lane]);
    }
}

#[inline(always)]
fn total(s: &Lanes) -> f64 {
    ((s[0] + s[4]) + (s[1] + s[5])) + ((s[2] + s[6]) + (s[3] + s[7]))
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
        let zero = [0.0; LANES];
        let [mut ff, mut fh, mut hh, mut fd, mut hd, mut dd] = [zero; 6];
        for start in (0..channels).step_by(LANES) {
            let (d, f) = (lanes(data, start), lanes(f, start));
            add_product::<A>(&mut ff, &f, &f);
            add_product::<A>(&mut fd, &f, &d);
            add_product::<A>(&mut dd, &d, &d);
            if K == 2 {
                let h = lanes(h, start);
                add_product::<A>(&mut fh, &f, &h);
                add_product::<A>(&mut hh, &h, &h);
                add_product::<A>(&mut hd, &h, &d);
            }
        }
        let products = Products {
            squares: [total(&ff), total(&hh)],
            both: total(&fh),
            by_data: [total(&fd), total(&hd)],
            data: total(&dd),
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
        let mut chi2 = zero;
        let mut gram = [[zero; P]; P];
        let mut gradient = [zero; P];
        let mut along_f = [zero; P];
        let mut along_h = [zero; P];
        for start in (0..channels).step_by(LANES) {
            let (d, f) = (lanes(data, start), lanes(f, start));
            let h = if K == 2 { lanes(h, start) } else { zero };
            let mut r = zero;
            for lane in 0..LANES {
                r[lane] = A::mul_add(a, f[lane], -d[lane]);
                if K == 2 {
                    r[lane] = A::mul_add(b, h[lane], r[lane]);
                }
            }
            add_product::<A>(&mut chi2, &r, &r);
            let mut j = [zero; P];
            for p in 0..P {
                let s = lanes(by_f[p], start);
                let t = if K == 2 { lanes(by_h[p], start) } else { zero };
                for lane in 0..LANES {
                    j[p][lane] = a * s[lane];
                    if K == 2 {
                        j[p][lane] = A::mul_add(b, t[lane], j[p][lane]);
                    }
                }
            }
            for p in 0..P {
                add_product::<A>(&mut gradient[p], &j[p], &r);
                add_product::<A>(&mut along_f[p], &j[p], &f);
                if K == 2 {
                    add_product::<A>(&mut along_h[p], &j[p], &h);
                }
                for q in p..P {
                    add_product::<A>(&mut gram[p][q], &j[p], &j[q]);
                }
            }
        }

        let mut sums = LineSums {
            chi2: total(&chi2),
            gradient: [0.0; MOST_NONLINEAR],
            gram: [[0.0; MOST_NONLINEAR]; MOST_NONLINEAR],
        };
        let along = |p: usize| [total(&along_f[p]), total(&along_h[p])];
        for p in 0..P {
            sums.gradient[p] = total(&gradient[p]);
            let of_p = Products {
                by_data: along(p),
                ..products
            };
            let [by_f, by_h] = of_p.shares(best.free);
            for q in p..P {
                let [with_f, with_h] = along(q);
                sums.gram[p][q] = total(&gram[p][q]) - by_f * with_f - by_h * with_h;
            }
        }
        sums
    }
}
