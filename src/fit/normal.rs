//! One line's normal equations, with the amplitudes at their best.
//!
//! Columns over the channels go in: the functions f, h with their best amplitudes a, b, and the slopes J of
//! a f + b h by the nonlinear parameters. Every column is read a few times while it is in the first cache,
//! each time with as many products as there are registers for. The part of J along the free functions is
//! then taken out of the sums.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::amplitudes::{Amplitudes, Best, Products};
use crate::model::MOST_AMPLITUDES;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::numeric::products::{products, products_with};

/// Most nonlinear parameters of a model.
pub(super) const MOST_NONLINEAR: usize = 4;

/// chi2 at the best amplitudes and its derivatives by a line's nonlinear parameters.
#[derive(Clone, Copy, Debug)]
pub(super) struct LineSums {
    pub chi2: f64,
    /// J^T r.
    pub gradient: [f64; MOST_NONLINEAR],
    /// J^T J, its upper triangle.
    pub gram: [[f64; MOST_NONLINEAR]; MOST_NONLINEAR],
}

/// The functions of a line, one or two columns, and their products with each other and the data.
pub(super) struct Solved<'a> {
    data: &'a [f64],
    functions: &'a [f64],
    products: Products,
    best: Best,
}

impl<'a> Solved<'a> {
    /// The best amplitudes of the columns of `functions` inside `ranges`.
    pub fn new(
        data: &'a [f64],
        functions: &'a [f64],
        ranges: &[(f64, f64); MOST_AMPLITUDES],
    ) -> Self {
        let (f, h) = functions.split_at(data.len());
        let products = if h.is_empty() {
            let [ff, fd] = products(f, [f, data]);
            Products {
                squares: [ff, 0.0],
                by_data: [fd, 0.0],
                ..Products::default()
            }
        } else {
            let [ff, fh, fd] = products(f, [f, h, data]);
            let [hh, hd] = products(h, [h, data]);
            Products {
                squares: [ff, hh],
                both: fh,
                by_data: [fd, hd],
                data: 0.0,
            }
        };
        let best = products.best(ranges);
        Self {
            data,
            functions,
            products,
            best,
        }
    }

    pub fn amplitudes(&self) -> Amplitudes {
        self.best.amplitudes
    }

    /// The sums of the slopes at these amplitudes; `residuals` is scratch, a number a channel.
    pub fn sums(&self, slopes: &[f64], residuals: &mut [f64]) -> LineSums {
        let sums = match (
            self.functions.len() / self.data.len(),
            slopes.len() / self.data.len(),
        ) {
            (1, 2) => dispatch(Sums::<1, 2>(self, slopes, residuals)),
            (1, 3) => dispatch(Sums::<1, 3>(self, slopes, residuals)),
            (1, 4) => dispatch(Sums::<1, 4>(self, slopes, residuals)),
            (2, 4) => dispatch(Sums::<2, 4>(self, slopes, residuals)),
            (functions, parameters) => {
                panic!("no sums of {functions} functions and {parameters} parameters")
            }
        };
        self.without_explained(&sums, slopes.len() / self.data.len())
    }

    /// Takes the part along the free functions out of the Gram matrix.
    fn without_explained(&self, sums: &Accumulated, parameters: usize) -> LineSums {
        let mut gram = sums.gram;
        for p in 0..parameters {
            let along = Products {
                by_data: sums.along[p],
                ..self.products
            };
            let [by_f, by_h] = along.shares(self.best.free);
            for q in p..parameters {
                let [f, h] = sums.along[q];
                gram[p][q] -= by_f * f + by_h * h;
            }
        }
        let mut gradient = sums.gradient;
        for p in 0..parameters {
            if gram[p][p] <= ALL_EXPLAINED * sums.gram[p][p] {
                gradient[p] = 0.0;
                for other in 0..parameters {
                    gram[p.min(other)][p.max(other)] = 0.0;
                }
            }
        }
        LineSums {
            chi2: sums.chi2,
            gradient,
            gram,
        }
    }
}

/// A slope of which the functions explain all but this share, of squares, has nothing of its own but rounding:
/// such as one of a line narrower than a channel.
const ALL_EXPLAINED: f64 = 1e-12;

/// Sums over channels of the products of residuals r, J and functions.
#[derive(Default)]
struct Accumulated {
    chi2: f64,
    gram: [[f64; MOST_NONLINEAR]; MOST_NONLINEAR],
    gradient: [f64; MOST_NONLINEAR],
    along: [Amplitudes; MOST_NONLINEAR],
}

/// Of `K` functions and `P` nonlinear parameters.
struct Sums<'a, const K: usize, const P: usize>(&'a Solved<'a>, &'a [f64], &'a mut [f64]);

impl<const K: usize, const P: usize> Kernel for Sums<'_, K, P> {
    type Output = Accumulated;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Accumulated {
        let Self(solved, slopes, r) = self;
        let channels = solved.data.len();
        let [a, b] = solved.best.amplitudes;
        let f = &solved.functions[..channels];
        let h = &solved.functions[(K - 1) * channels..];
        residuals::<K, A>((a, b), f, h, solved.data, r);
        let r = &r[..channels];
        let j: [&[f64]; P] = std::array::from_fn(|p| &slopes[p * channels..(p + 1) * channels]);
        let mut sums = Accumulated {
            chi2: products_with::<1, A>(r, [r])[0],
            ..Accumulated::default()
        };
        for p in 0..P {
            let own = j[p];
            let mut take = |[by_r, by_f, by_h]: [f64; 3]| {
                sums.gradient[p] = by_r;
                sums.along[p] = [by_f, by_h];
            };
            // r, f and (of two functions) h, then the columns from this one on
            let with = |q: usize| j[(p + q).min(P - 1)];
            if K == 2 {
                take(products_with::<3, A>(own, [r, f, h]));
            } else {
                let [by_r, by_f] = products_with::<2, A>(own, [r, f]);
                take([by_r, by_f, 0.0]);
            }
            let squares = match P - p {
                4 => products_with::<4, A>(own, [with(0), with(1), with(2), with(3)]),
                3 => padded(products_with::<3, A>(own, [with(0), with(1), with(2)])),
                2 => padded(products_with::<2, A>(own, [with(0), with(1)])),
                _ => padded(products_with::<1, A>(own, [with(0)])),
            };
            sums.gram[p][p..P].copy_from_slice(&squares[..P - p]);
        }
        sums
    }
}

fn padded<const N: usize>(values: [f64; N]) -> [f64; MOST_NONLINEAR] {
    let mut padded = [0.0; MOST_NONLINEAR];
    padded[..N].copy_from_slice(&values);
    padded
}

/// a f + b h - d.
#[inline(always)]
fn residuals<const K: usize, A: Arithmetic>(
    (a, b): (f64, f64),
    f: &[f64],
    h: &[f64],
    data: &[f64],
    r: &mut [f64],
) {
    let n = data.len();
    let (f, h, r) = (&f[..n], &h[..n], &mut r[..n]);
    for i in 0..n {
        let first = A::mul_add(a, f[i], -data[i]);
        r[i] = if K == 2 {
            A::mul_add(b, h[i], first)
        } else {
            first
        };
    }
}
