//! Polynomials of low order over a scaled axis, fitted by orthogonal decomposition.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::dispatch::{Arithmetic, Kernel, dispatch};

/// A polynomial as a sum of Legendre polynomials over an axis scaled to [-1, 1].
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Polynomial {
    axis: ScaledAxis,
    /// Number of coefficients that count.
    terms: usize,
    coefficients: [f64; 4],
}

/// x to (x - `centre`)/`half_range`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ScaledAxis {
    centre: f64,
    half_range: f64,
}

impl ScaledAxis {
    /// The scale that takes `low` to -1 and `high` to 1.
    #[must_use]
    pub fn new(low: f64, high: f64) -> Self {
        let half_range = 0.5 * (high - low);
        Self {
            centre: 0.5 * (low + high),
            half_range: if half_range > 0.0 { half_range } else { 1.0 },
        }
    }

    /// The Legendre polynomials 0 to 3 at x.
    #[must_use]
    pub fn basis(&self, x: f64) -> [f64; 4] {
        let t = (x - self.centre) / self.half_range;
        [1.0, t, 1.5 * t * t - 0.5, (2.5 * t * t - 1.5) * t]
    }
}

/// The triangular factor of the basis over a set of points: what a fit on them needs.
#[derive(Clone, Debug)]
pub struct Factor {
    axis: ScaledAxis,
    terms: usize,
    /// Lower triangle of the Cholesky factor of the normal matrix, row by row.
    lower: [[f64; 4]; 4],
}

impl Factor {
    /// Factorises the polynomial basis of an order (0 to 3) over the points `x`.
    ///
    /// `None` where the order is above 3 or the points cannot determine it.
    #[must_use]
    pub fn new(axis: ScaledAxis, order: usize, x: impl Iterator<Item = f64>) -> Option<Self> {
        let mut sums = Sums::default();
        for point in x {
            match order {
                0 => sums.add::<1>(axis.basis(point), 0.0),
                1 => sums.add::<2>(axis.basis(point), 0.0),
                2 => sums.add::<3>(axis.basis(point), 0.0),
                3 => sums.add::<4>(axis.basis(point), 0.0),
                _ => return None,
            }
        }
        Self::of_sums(axis, order + 1, &sums.normal)
    }

    fn of_sums(axis: ScaledAxis, terms: usize, normal: &[[f64; 4]; 4]) -> Option<Self> {
        let mut lower = [[0.0_f64; 4]; 4];
        for row in 0..terms {
            for column in 0..=row {
                let inner: f64 = (0..column).map(|k| lower[row][k] * lower[column][k]).sum();
                let rest = normal[row][column] - inner;
                if row == column {
                    // A pivot this far below its diagonal holds rounding only.
                    if rest.is_nan() || rest <= 1e-12 * normal[row][row] {
                        return None;
                    }
                    lower[row][row] = rest.sqrt();
                } else {
                    lower[row][column] = rest / lower[column][column];
                }
            }
        }
        Some(Self { axis, terms, lower })
    }

    /// Solves the normal equations for a right-hand side (entries beyond the order are ignored).
    #[must_use]
    pub fn solve(&self, right: [f64; 4]) -> [f64; 4] {
        let mut solution = [0.0; 4];
        for row in 0..self.terms {
            let inner: f64 = (0..row).map(|k| self.lower[row][k] * solution[k]).sum();
            solution[row] = (right[row] - inner) / self.lower[row][row];
        }
        for row in (0..self.terms).rev() {
            let inner: f64 = (row + 1..self.terms)
                .map(|k| self.lower[k][row] * solution[k])
                .sum();
            solution[row] = (solution[row] - inner) / self.lower[row][row];
        }
        solution
    }

    /// Variance of the fitted polynomial at x for values of unit variance, b^T (B^T B)^-1 b.
    #[must_use]
    pub fn leverage(&self, x: f64) -> f64 {
        let basis = self.axis.basis(x);
        let solution = self.solve(basis);
        (0..self.terms).map(|k| basis[k] * solution[k]).sum()
    }

    /// The axis scale.
    #[must_use]
    pub fn axis(&self) -> ScaledAxis {
        self.axis
    }

    /// Number of terms, order + 1.
    #[must_use]
    pub fn terms(&self) -> usize {
        self.terms
    }

    /// Least-squares polynomial through points, which must be those of the factor.
    pub fn fit(&self, points: impl Iterator<Item = (f64, f64)>) -> Polynomial {
        let mut right = [0.0; 4];
        for (x, y) in points {
            let basis = self.axis.basis(x);
            for (sum, value) in right.iter_mut().zip(basis) {
                *sum += value * y;
            }
        }
        self.polynomial(right)
    }

    fn polynomial(&self, right: [f64; 4]) -> Polynomial {
        Polynomial {
            axis: self.axis,
            terms: self.terms,
            coefficients: self.solve(right),
        }
    }

    /// (B^T B)^-1; zero beyond the order.
    fn inverse(&self) -> [[f64; 4]; 4] {
        let mut inverse = [[0.0; 4]; 4];
        for (term, row) in inverse.iter_mut().enumerate().take(self.terms) {
            let mut unit = [0.0; 4];
            unit[term] = 1.0;
            *row = self.solve(unit);
        }
        inverse
    }
}

/// What a fit sums over its points: the lower triangle of the normal matrix, and the right-hand side.
#[derive(Default)]
struct Sums {
    normal: [[f64; 4]; 4],
    right: [f64; 4],
}

impl Sums {
    #[inline]
    fn add<const TERMS: usize>(&mut self, basis: [f64; 4], y: f64) {
        for row in 0..TERMS {
            for column in 0..=row {
                self.normal[row][column] += basis[row] * basis[column];
            }
            self.right[row] += basis[row] * y;
        }
    }
}

/// The Legendre polynomials 1 to 3 at many points, evaluated once for many fits.
#[derive(Clone, Debug)]
pub struct Basis {
    axis: ScaledAxis,
    /// Degree by degree; that of degree 0 is 1.
    columns: [Vec<f64>; 3],
}

impl Basis {
    /// Evaluates the polynomials at points.
    #[must_use]
    pub fn new(axis: ScaledAxis, x: &[f64]) -> Self {
        let mut columns = [(); 3].map(|()| Vec::with_capacity(x.len()));
        for &point in x {
            let [_, of_points @ ..] = axis.basis(point);
            for (column, value) in columns.iter_mut().zip(of_points) {
                column.push(value);
            }
        }
        Self { axis, columns }
    }

    /// Every `stride`-th point.
    #[must_use]
    pub fn every(&self, stride: usize) -> Self {
        let thinned = |column: &Vec<f64>| column.iter().copied().step_by(stride).collect();
        Self {
            axis: self.axis,
            columns: self.columns.each_ref().map(thinned),
        }
    }

    #[inline]
    fn at(&self, point: usize) -> [f64; 4] {
        let [first, second, third] = &self.columns;
        [1.0, first[point], second[point], third[point]]
    }

    /// Least-squares polynomial of an order (0 to 3) through the values of chosen points.
    ///
    /// `None` where the order is above 3 or the points cannot determine it.
    #[must_use]
    pub fn fit(&self, order: usize, chosen: &[usize], values: &[f64]) -> Option<Polynomial> {
        let sums = match order {
            0 => self.sums::<1>(chosen, values),
            1 => self.sums::<2>(chosen, values),
            2 => self.sums::<3>(chosen, values),
            3 => self.sums::<4>(chosen, values),
            _ => return None,
        };
        let factor = Factor::of_sums(self.axis, order + 1, &sums.normal)?;
        Some(factor.polynomial(sums.right))
    }

    /// The same through all points whose `magnitude` does not exceed a limit.
    #[must_use]
    pub fn fit_within(
        &self,
        order: usize,
        magnitude: &[f64],
        limit: f64,
        values: &[f64],
    ) -> Option<Polynomial> {
        let columns = self.columns.each_ref().map(Vec::as_slice);
        let within = SumsWithin {
            columns,
            magnitude,
            limit,
            values,
        };
        let sums = match order {
            0 => dispatch(OfTerms::<1>(within)),
            1 => dispatch(OfTerms::<2>(within)),
            2 => dispatch(OfTerms::<3>(within)),
            3 => dispatch(OfTerms::<4>(within)),
            _ => return None,
        };
        let factor = Factor::of_sums(self.axis, order + 1, &sums.normal)?;
        Some(factor.polynomial(sums.right))
    }

    fn sums<const TERMS: usize>(&self, chosen: &[usize], values: &[f64]) -> Sums {
        let mut sums = Sums::default();
        for &point in chosen {
            sums.add::<TERMS>(self.at(point), values[point]);
        }
        sums
    }

    /// Values minus a polynomial at all points, into `residuals`.
    pub fn subtract(&self, polynomial: &Polynomial, values: &[f64], residuals: &mut Vec<f64>) {
        let [c0, c1, c2, c3] = polynomial.coefficients;
        let [first, second, third] = &self.columns;
        residuals.clear();
        match polynomial.terms {
            1 => residuals.extend(values.iter().map(|y| y - c0)),
            2 => residuals.extend(values.iter().zip(first).map(|(y, p1)| y - (c0 + p1 * c1))),
            3 => residuals.extend(
                (values.iter().zip(first).zip(second))
                    .map(|((y, p1), p2)| y - (c0 + p1 * c1 + p2 * c2)),
            ),
            _ => residuals.extend(
                (values.iter().zip(first).zip(second).zip(third))
                    .map(|(((y, p1), p2), p3)| y - (c0 + p1 * c1 + p2 * c2 + p3 * c3)),
            ),
        }
    }

    /// Variance at all points of a polynomial fitted to chosen points of unit variance,
    /// b^T (B^T B)^-1 b; `None` as for [`Self::fit`].
    #[must_use]
    pub fn leverages(&self, order: usize, chosen: &[usize]) -> Option<Vec<f64>> {
        let points = chosen.iter().map(|&point| self.at(point));
        let mut sums = Sums::default();
        match order {
            0 => points.for_each(|basis| sums.add::<1>(basis, 0.0)),
            1 => points.for_each(|basis| sums.add::<2>(basis, 0.0)),
            2 => points.for_each(|basis| sums.add::<3>(basis, 0.0)),
            3 => points.for_each(|basis| sums.add::<4>(basis, 0.0)),
            _ => return None,
        }
        let inverse = Factor::of_sums(self.axis, order + 1, &sums.normal)?.inverse();
        let of_point = |point: usize| {
            let basis = self.at(point);
            let row = |a: usize| {
                let [i0, i1, i2, i3] = inverse[a];
                basis[a] * (i0 + i1 * basis[1] + i2 * basis[2] + i3 * basis[3])
            };
            row(0) + row(1) + row(2) + row(3)
        };
        Some((0..self.columns[0].len()).map(of_point).collect())
    }
}

/// What [`Basis::fit_within`] sums over.
struct SumsWithin<'a> {
    columns: [&'a [f64]; 3],
    magnitude: &'a [f64],
    limit: f64,
    values: &'a [f64],
}

struct OfTerms<'a, const TERMS: usize>(SumsWithin<'a>);

/// Independent partial sums: one register of the widest instructions.
const LANES: usize = 8;

impl<const TERMS: usize> Kernel for OfTerms<'_, TERMS> {
    type Output = Sums;

    /// No fused multiply-add: every copy gives the same.
    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Sums {
        let SumsWithin {
            columns,
            magnitude,
            limit,
            values,
        } = self.0;
        let mut sums = LaneSums {
            normal: [[[0.0; LANES]; TERMS]; TERMS],
            right: [[0.0; LANES]; TERMS],
        };
        let (magnitude, magnitude_rest) = magnitude.as_chunks::<LANES>();
        let (values, values_rest) = values.as_chunks::<LANES>();
        let [first, second, third] = columns.map(|column| column.as_chunks::<LANES>());
        for (index, magnitude) in magnitude.iter().enumerate() {
            let columns = [&first.0[index], &second.0[index], &third.0[index]];
            sums.add(columns, magnitude, limit, &values[index]);
        }
        let columns = [first.1, second.1, third.1].map(|rest| padded(rest, 0.0));
        sums.add(
            columns.each_ref(),
            &padded(magnitude_rest, f64::INFINITY),
            limit,
            &padded(values_rest, 0.0),
        );
        let mut total = Sums::default();
        for row in 0..TERMS {
            for column in 0..=row {
                total.normal[row][column] = sums.normal[row][column].iter().sum();
            }
            total.right[row] = sums.right[row].iter().sum();
        }
        total
    }
}

/// Fewer than [`LANES`] values, filled up.
#[inline(always)]
fn padded(rest: &[f64], filler: f64) -> [f64; LANES] {
    let mut lanes = [filler; LANES];
    lanes[..rest.len()].copy_from_slice(rest);
    lanes
}

/// [`Sums`] in independent parts.
struct LaneSums<const TERMS: usize> {
    normal: [[[f64; LANES]; TERMS]; TERMS],
    right: [[f64; LANES]; TERMS],
}

impl<const TERMS: usize> LaneSums<TERMS> {
    #[inline(always)]
    fn add(
        &mut self,
        columns: [&[f64; LANES]; 3],
        magnitude: &[f64; LANES],
        limit: f64,
        values: &[f64; LANES],
    ) {
        for lane in 0..LANES {
            let weight = if magnitude[lane] <= limit { 1.0 } else { 0.0 };
            let basis = [1.0, columns[0][lane], columns[1][lane], columns[2][lane]];
            for row in 0..TERMS {
                let weighted = weight * basis[row];
                for column in 0..=row {
                    self.normal[row][column][lane] += weighted * basis[column];
                }
                self.right[row][lane] += weighted * values[lane];
            }
        }
    }
}

impl Polynomial {
    /// Its value at x.
    #[must_use]
    pub fn evaluate(&self, x: f64) -> f64 {
        self.axis
            .basis(x)
            .iter()
            .zip(&self.coefficients[..self.terms])
            .map(|(basis, coefficient)| basis * coefficient)
            .sum()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn recovers_a_cubic_far_from_the_origin() {
        let x: Vec<f64> = (0..60).map(|i| 1.0e5 + 0.1 * f64::from(i)).collect();
        let cubic = |x: f64| {
            let t = x - 1.0e5 - 3.0;
            1.0 - 0.3 * t + 0.07 * t * t + 0.01 * t * t * t
        };
        // Points at the two ends only, as beside a line.
        let chosen = || x.iter().copied().filter(|v| (v - 1.0e5 - 3.0).abs() > 1.5);
        let axis = ScaledAxis::new(x[0], x[59]);
        let factor = Factor::new(axis, 3, chosen()).unwrap();
        let fitted = factor.fit(chosen().map(|v| (v, cubic(v))));
        for v in x {
            assert!((fitted.evaluate(v) - cubic(v)).abs() < 1e-9);
        }
    }

    #[test]
    fn a_basis_evaluated_once_gives_the_same_fits() {
        let x: Vec<f64> = (0..50).map(|i| 3.0 + 0.2 * f64::from(i)).collect();
        let y: Vec<f64> = x.iter().map(|x| x.sin()).collect();
        let axis = ScaledAxis::new(x[0], x[49]);
        let basis = Basis::new(axis, &x);
        let chosen: Vec<usize> = (0..50).filter(|i| i % 7 < 4).collect();
        let mut residuals = Vec::new();
        for order in 0..=3 {
            let factor = Factor::new(axis, order, chosen.iter().map(|&i| x[i])).unwrap();
            let expected = factor.fit(chosen.iter().map(|&i| (x[i], y[i])));
            let found = basis.fit(order, &chosen, &y).unwrap();
            assert_eq!(found, expected);
            basis.subtract(&found, &y, &mut residuals);
            let leverages = basis.leverages(order, &chosen).unwrap();
            for i in 0..50 {
                assert_eq!(residuals[i], y[i] - expected.evaluate(x[i]));
                assert!((leverages[i] / factor.leverage(x[i]) - 1.0).abs() < 1e-12);
            }
        }
        let magnitude: Vec<f64> = (0..50).map(|i| f64::from(i % 7)).collect();
        for order in 0..=3 {
            let found = basis.fit_within(order, &magnitude, 3.0, &y).unwrap();
            let expected = basis.fit(order, &chosen, &y).unwrap();
            for x in &x {
                assert!((found.evaluate(*x) - expected.evaluate(*x)).abs() < 1e-14);
            }
        }
        assert!(basis.fit(4, &chosen, &y).is_none());
        assert!(basis.leverages(1, &[3]).is_none());
    }

    #[test]
    fn refuses_what_the_points_cannot_determine() {
        let axis = ScaledAxis::new(0.0, 1.0);
        assert!(Factor::new(axis, 2, [0.1, 0.9, 0.9].into_iter()).is_none());
        assert!(Factor::new(axis, 4, (0..9).map(f64::from)).is_none());
    }
}
