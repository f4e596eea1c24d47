//! Linear algebra on a tall matrix of few columns and on small square ones.
//!
//! Tall matrices are column by column in plain slices; small ones are fixed-size arrays on the stack.

#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::{RowBlock, Structure};
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::numeric::products::products_with;

/// Most parameters a problem may have.
pub const MAX_PARAMETERS: usize = 16;

/// One number a parameter.
pub(super) type Vector = [f64; MAX_PARAMETERS];
/// A small square matrix, `matrix[row][column]`.
pub(super) type Matrix = [Vector; MAX_PARAMETERS];

/// Rows of a block: 256 rows of 9 columns take 18 kB, so that a block stays in the first cache.
const BLOCK: usize = 256;

/// `sum_i a_i b_i` of short slices.
pub(super) fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

/// `sum_i r_i^2`, block by block.
pub(super) fn sum_of_squares(values: &[f64]) -> f64 {
    struct Squares<'a>(&'a [f64]);
    impl Kernel for Squares<'_> {
        type Output = f64;
        #[inline(always)]
        fn run<A: Arithmetic>(self) -> f64 {
            let mut total = 0.0;
            for block in self.0.chunks(BLOCK) {
                total += products_with::<1, A>(block, [block])[0];
            }
            total
        }
    }
    dispatch(Squares(values))
}

/// chi2 and its derivatives, from r and J.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct NormalEquations {
    /// r^T r.
    pub chi2: f64,
    /// J^T r.
    pub gradient: [f64; MAX_PARAMETERS],
    /// J^T J.
    pub gram: [[f64; MAX_PARAMETERS]; MAX_PARAMETERS],
}

impl NormalEquations {
    /// Sets the sums of the first `parameters` to zero; nothing else is read of a smaller problem.
    pub(crate) fn clear(&mut self, parameters: usize) {
        self.chi2 = 0.0;
        self.gradient[..parameters].fill(0.0);
        for row in &mut self.gram[..parameters] {
            row[..parameters].fill(0.0);
        }
    }

    /// Takes over the sums of the first `parameters`.
    pub(super) fn take(&mut self, other: &Self, parameters: usize) {
        self.chi2 = other.chi2;
        self.gradient[..parameters].copy_from_slice(&other.gradient[..parameters]);
        for (row, other) in self.gram.iter_mut().zip(&other.gram).take(parameters) {
            row[..parameters].copy_from_slice(&other[..parameters]);
        }
    }
}

impl Default for NormalEquations {
    fn default() -> Self {
        Self {
            chi2: 0.0,
            gradient: [0.0; MAX_PARAMETERS],
            gram: [[0.0; MAX_PARAMETERS]; MAX_PARAMETERS],
        }
    }
}

/// The normal equations of a stored Jacobian.
pub(super) fn normal_equations(
    jacobian: &[f64],
    residuals: &[f64],
    structure: &Structure,
) -> NormalEquations {
    let mut sums = NormalEquations {
        chi2: sum_of_squares(residuals),
        ..NormalEquations::default()
    };
    for (block, numbers, right) in structure.parts(jacobian, residuals) {
        dispatch(Products {
            block,
            numbers,
            right,
            gram: &mut sums.gram,
            gradient: &mut sums.gradient,
        });
    }
    sums
}

/// Adds one row block's products.
struct Products<'a> {
    block: &'a RowBlock,
    numbers: &'a [f64],
    right: &'a [f64],
    gram: &'a mut Matrix,
    gradient: &'a mut Vector,
}

impl Kernel for Products<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let parameters = self.block.parameters();
        let rows = self.right.len();
        for start in (0..rows).step_by(BLOCK) {
            let end = rows.min(start + BLOCK);
            let right = &self.right[start..end];
            for (k, &i) in parameters.iter().enumerate() {
                let left = &self.numbers[k * rows + start..k * rows + end];
                let [by_right, square] = products_with::<2, A>(left, [right, left]);
                self.gradient[i] += by_right;
                self.gram[i][i] += square;
                let mut l = k + 1;
                while l < parameters.len() {
                    let column = |l: usize| {
                        let l = l.min(parameters.len() - 1);
                        &self.numbers[l * rows + start..l * rows + end]
                    };
                    let products =
                        products_with::<3, A>(left, [column(l), column(l + 1), column(l + 2)]);
                    for (product, &j) in products.iter().zip(&parameters[l..]) {
                        self.gram[i][j] += product;
                        self.gram[j][i] += product;
                    }
                    l += 3;
                }
            }
        }
    }
}

/// Replaces the upper left `size` x `size` lower triangle of a symmetric matrix by its Cholesky
/// factor. Returns the smallest pivot relative to the diagonal element it came from: about the
/// inverse condition number when the diagonal is near one; zero or less when the matrix is not
/// positive definite, and the factor is then unfinished.
pub(super) fn cholesky<const N: usize>(matrix: &mut [[f64; N]; N], size: usize) -> f64 {
    let mut smallest = f64::INFINITY;
    for k in 0..size {
        let diagonal = matrix[k][k];
        let pivot = (0..k).fold(diagonal, |rest, i| rest - matrix[k][i] * matrix[k][i]);
        let relative = pivot / diagonal;
        if relative.is_nan() || relative <= 0.0 {
            return 0.0;
        }
        smallest = smallest.min(relative);
        let root = pivot.sqrt();
        matrix[k][k] = root;
        for row in k + 1..size {
            let sum = (0..k).fold(matrix[row][k], |rest, i| {
                rest - matrix[row][i] * matrix[k][i]
            });
            matrix[row][k] = sum / root;
        }
    }
    smallest
}

/// Solves L L^T x = b in place for the factor of [`cholesky`].
pub(super) fn cholesky_solve<const N: usize>(
    factor: &[[f64; N]; N],
    size: usize,
    x: &mut [f64; N],
) {
    for k in 0..size {
        x[k] = (0..k).fold(x[k], |rest, i| rest - factor[k][i] * x[i]) / factor[k][k];
    }
    for k in (0..size).rev() {
        x[k] = (k + 1..size).fold(x[k], |rest, i| rest - factor[i][k] * x[i]) / factor[k][k];
    }
}

/// Householder triangularisation of `columns` columns of `rows` rows each, in place: R in the upper
/// triangle (below it stay reflectors), Q^T b in `right`.
pub(super) fn triangularise(matrix: &mut [f64], rows: usize, columns: usize, right: &mut [f64]) {
    for k in 0..columns.min(rows) {
        let (head, tail) = matrix.split_at_mut((k + 1) * rows);
        let reflector = &mut head[k * rows + k..];
        let norm = sum_of_squares(reflector).sqrt();
        // Half the squared length of the reflector, without cancellation.
        let half_square = norm * (norm + reflector[0].abs());
        // Nothing, or so little that its square has no digits: dividing by it would give NaN.
        if half_square < f64::MIN_POSITIVE {
            continue;
        }
        let diagonal = -norm.copysign(reflector[0]);
        reflector[0] -= diagonal;
        let reflect = |values: &mut [f64]| {
            let factor = -dot(reflector, values) / half_square;
            for (value, element) in values.iter_mut().zip(reflector.iter()) {
                *value += factor * element;
            }
        };
        for column in tail.chunks_exact_mut(rows).take(columns - k - 1) {
            reflect(&mut column[k..]);
        }
        reflect(&mut right[k..rows]);
        head[k * rows + k] = diagonal;
    }
}

#[cfg(test)]
#[allow(clippy::needless_range_loop)]
mod tests {
    use super::*;

    fn sample(count: usize, phase: f64) -> Vec<f64> {
        (0..count)
            .map(|i| (phase + 1.7 * i as f64).sin() + 0.1 * phase)
            .collect()
    }

    /// Wings of a very narrow line: their squares underflow.
    #[test]
    fn columns_whose_squares_vanish_leave_no_nan() {
        for tiny in [1e-155, 1e-160, 1e-162, 1e-200, 5e-324] {
            let mut matrix = [tiny, -tiny, tiny, tiny, tiny, -2.0 * tiny];
            let mut right = [1.0, 2.0, 3.0];
            triangularise(&mut matrix, 3, 2, &mut right);
            assert!(matrix.iter().chain(&right).all(|value| value.is_finite()));
        }
    }

    #[test]
    fn normal_equations_are_the_plain_sums() {
        for (rows, columns) in [(3, 1), (17, 4), (256, 5), (700, 9), (1031, 16)] {
            let jacobian: Vec<f64> = (0..columns).flat_map(|j| sample(rows, j as f64)).collect();
            let residuals = sample(rows, 0.5);
            let NormalEquations { gram, gradient, .. } =
                normal_equations(&jacobian, &residuals, &Structure::dense(rows, columns));
            for i in 0..columns {
                let column = |j: usize| &jacobian[j * rows..(j + 1) * rows];
                for j in 0..columns {
                    let plain: f64 = (column(i).iter().zip(column(j))).map(|(a, b)| a * b).sum();
                    assert!((gram[i][j] - plain).abs() < 1e-11 * rows as f64);
                }
                let plain: f64 = (column(i).iter().zip(&residuals)).map(|(a, b)| a * b).sum();
                assert!((gradient[i] - plain).abs() < 1e-11 * rows as f64);
            }
        }
    }

    #[test]
    fn triangle_has_the_gram_matrix_of_its_columns() {
        let (rows, columns) = (40, 6);
        let jacobian: Vec<f64> = (0..columns).flat_map(|j| sample(rows, j as f64)).collect();
        let right = sample(rows, 0.5);
        let NormalEquations { gram, gradient, .. } =
            normal_equations(&jacobian, &right, &Structure::dense(rows, columns));
        let (mut reduced, mut rotated) = (jacobian, right);
        triangularise(&mut reduced, rows, columns, &mut rotated);
        let triangle = |row: usize, column: usize| {
            if row <= column {
                reduced[column * rows + row]
            } else {
                0.0
            }
        };
        for i in 0..columns {
            for j in 0..columns {
                let product: f64 = (0..columns).map(|k| triangle(k, i) * triangle(k, j)).sum();
                assert!((product - gram[i][j]).abs() < 1e-12);
            }
            let product: f64 = (0..columns).map(|k| triangle(k, i) * rotated[k]).sum();
            assert!((product - gradient[i]).abs() < 1e-12);
        }
    }

    #[test]
    fn cholesky_solves_the_hilbert_matrix_and_finds_its_smallest_pivot() {
        // The last pivot of the Hilbert matrix of order n over its diagonal element is the inverse
        // square of the binomial coefficient (2n - 2 over n - 1), from the closed form of its inverse.
        let mut matrix = [[0.0; MAX_PARAMETERS]; MAX_PARAMETERS];
        let mut x = [0.0; MAX_PARAMETERS];
        for i in 0..5 {
            for j in 0..5 {
                matrix[i][j] = 1.0 / (i + j + 1) as f64;
                x[i] += matrix[i][j];
            }
        }
        let smallest = cholesky(&mut matrix, 5);
        assert!((smallest * 4900.0 - 1.0).abs() < 1e-10);
        cholesky_solve(&matrix, 5, &mut x);
        assert!(x[..5].iter().all(|x| (x - 1.0).abs() < 1e-10));
        let mut singular = [[1.0; MAX_PARAMETERS]; MAX_PARAMETERS];
        assert_eq!(cholesky(&mut singular, 2), 0.0);
    }
}
