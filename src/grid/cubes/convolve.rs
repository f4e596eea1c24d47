//! The convolution of a plane with a Gaussian, by Fourier transform.
//!
//! What is blank has no weight: each value is the mean of those around it that are there, weighted by
//! the Gaussian. Values and weights are the real and imaginary part of one transform, since that of the
//! Gaussian is real and even. What was blank stays blank.

use rustfft::num_complex::Complex;
use rustfft::{Fft, FftPlanner};
use std::sync::Arc;

/// The Gaussian reaches so many standard deviations: farther out it is below 1e-6 of its middle.
const REACH: f64 = 5.3;

/// A value with less of the Gaussian's weight than this around it is left blank.
const LEAST_WEIGHT: f32 = 0.3;

/// A Gaussian that planes of one size are convolved with.
pub struct PlaneConvolution {
    width: usize,
    height: usize,
    /// Sizes with room for what wraps around.
    padded: (usize, usize),
    /// Transform of the Gaussian over the number of elements, `[column][row]`.
    transfer: Vec<f32>,
    along_rows: [Arc<dyn Fft<f32>>; 2],
    along_columns: [Arc<dyn Fft<f32>>; 2],
    rows: Vec<Complex<f32>>,
    columns: Vec<Complex<f32>>,
    scratch: Vec<Complex<f32>>,
}

impl std::fmt::Debug for PlaneConvolution {
    fn fmt(&self, formatter: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        formatter
            .debug_struct("PlaneConvolution")
            .field("padded", &self.padded)
            .finish_non_exhaustive()
    }
}

impl PlaneConvolution {
    /// For planes of a width and height; the Gaussian's covariance is that of columns and rows, pixels^2.
    #[must_use]
    pub fn new((width, height): (usize, usize), covariance: [[f64; 2]; 2]) -> Self {
        let [[xx, xy], [_, yy]] = covariance;
        // Finite and small: a beam in pixels.
        #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
        let reach = |variance: f64| (REACH * variance.max(0.0).sqrt()).ceil() as usize + 1;
        let padded = (
            transform_length(width + reach(xx)),
            transform_length(height + reach(yy)),
        );
        let mut planner = FftPlanner::new();
        let mut both = |length| {
            [
                planner.plan_fft_forward(length),
                planner.plan_fft_inverse(length),
            ]
        };
        let (along_rows, along_columns) = (both(padded.0), both(padded.1));
        let frequency = |index: usize, length: usize| {
            let index = index as f64;
            let length = length as f64;
            (if 2.0 * index <= length {
                index
            } else {
                index - length
            }) / length
        };
        let elements = (padded.0 * padded.1) as f64;
        let mut transfer = Vec::with_capacity(padded.0 * padded.1);
        for column in 0..padded.0 {
            let u = frequency(column, padded.0);
            for row in 0..padded.1 {
                let v = frequency(row, padded.1);
                let form = xx * u * u + 2.0 * xy * u * v + yy * v * v;
                let value = (-2.0 * std::f64::consts::PI.powi(2) * form).exp() / elements;
                #[allow(clippy::cast_possible_truncation)]
                transfer.push(value as f32);
            }
        }
        let scratch = (along_rows.iter().chain(&along_columns))
            .map(|transform| transform.get_inplace_scratch_len())
            .max()
            .unwrap_or(0);
        let zero = Complex::new(0.0, 0.0);
        Self {
            width,
            height,
            padded,
            transfer,
            along_rows,
            along_columns,
            rows: vec![zero; padded.0 * padded.1],
            columns: vec![zero; padded.0 * padded.1],
            scratch: vec![zero; scratch],
        }
    }

    /// Convolves a plane, row by row with columns fastest, in place.
    pub fn apply(&mut self, plane: &mut [f32]) {
        let (columns, rows) = self.padded;
        // Rounding of the weights, which are 1, goes into the values: so these are about 1 as well.
        let largest = (plane.iter().filter(|value| value.is_finite()))
            .fold(0.0_f32, |largest, value| largest.max(value.abs()));
        let unit = if largest > 0.0 { largest } else { 1.0 };
        self.rows.fill(Complex::new(0.0, 0.0));
        for (row, values) in plane.chunks_exact(self.width).enumerate() {
            for (target, &value) in self.rows[row * columns..].iter_mut().zip(values) {
                if !value.is_nan() {
                    *target = Complex::new(value / unit, 1.0);
                }
            }
        }
        // Rows that are all padding stay zero.
        let filled = self.height * columns;
        self.along_rows[0].process_with_scratch(&mut self.rows[..filled], &mut self.scratch);
        transpose(&self.rows, &mut self.columns, columns, rows);
        self.along_columns[0].process_with_scratch(&mut self.columns, &mut self.scratch);
        for (value, transfer) in self.columns.iter_mut().zip(&self.transfer) {
            *value *= *transfer;
        }
        self.along_columns[1].process_with_scratch(&mut self.columns, &mut self.scratch);
        transpose(&self.columns, &mut self.rows, rows, columns);
        self.along_rows[1].process_with_scratch(&mut self.rows[..filled], &mut self.scratch);
        for (row, values) in plane.chunks_exact_mut(self.width).enumerate() {
            for (value, sum) in values.iter_mut().zip(&self.rows[row * columns..]) {
                if !value.is_nan() {
                    *value = if sum.im >= LEAST_WEIGHT {
                        unit * (sum.re / sum.im)
                    } else {
                        f32::NAN
                    };
                }
            }
        }
    }
}

/// `[row][column]` into `[column][row]`.
fn transpose(from: &[Complex<f32>], to: &mut [Complex<f32>], columns: usize, rows: usize) {
    /// Tiles that stay in the fastest memory.
    const TILE: usize = 16;
    for row in (0..rows).step_by(TILE) {
        for column in (0..columns).step_by(TILE) {
            for y in row..(row + TILE).min(rows) {
                for x in column..(column + TILE).min(columns) {
                    to[x * rows + y] = from[y * columns + x];
                }
            }
        }
    }
}

/// The next length without prime factors above 5, which transforms are fast for.
fn transform_length(least: usize) -> usize {
    // a power of two comes before twice the least
    (least.max(1)..=2 * least.max(1))
        .find(|length| {
            let mut rest = *length;
            for factor in [2, 3, 5] {
                while rest % factor == 0 {
                    rest /= factor;
                }
            }
            rest == 1
        })
        .unwrap_or(least)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn blank_pixels_have_no_weight_and_stay_blank() {
        let (width, height) = (40, 30);
        let mut plane = vec![2.5_f32; width * height];
        for y in 10..14 {
            plane[y * width + 20] = f32::NAN;
        }
        plane[..width].fill(f32::NAN);
        PlaneConvolution::new((width, height), [[4.0, 1.0], [1.0, 3.0]]).apply(&mut plane);
        for (index, value) in plane.iter().enumerate() {
            let (x, y) = (index % width, index / width);
            if y == 0 || (x == 20 && (10..14).contains(&y)) {
                assert!(value.is_nan(), "{x} {y}");
            } else {
                // Single precision through two transforms.
                assert!((value - 2.5).abs() < 1e-5, "{x} {y}: {value}");
            }
        }
    }

    #[test]
    fn lengths_have_small_factors() {
        for (least, length) in [(1, 1), (7, 8), (11, 12), (97, 100), (1031, 1080)] {
            assert_eq!(transform_length(least), length, "{least}");
        }
    }
}
