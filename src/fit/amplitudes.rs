//! The best amplitudes of a line's one or two functions inside their ranges: chi2 is a parabola in
//! them, so the answer is exact.

use crate::model::MOST_AMPLITUDES;

/// One number a function.
pub(super) type Amplitudes = [f64; MOST_AMPLITUDES];

/// Functions whose directions agree to this (1 - cosine squared) count as one.
const SAME_DIRECTION: f64 = 1e-12;

/// Inner products of a line's functions with each other and with the data, both in units of the noise;
/// zeros stand for a second function that there is not.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Products {
    /// `f_k . f_k`.
    pub squares: Amplitudes,
    /// `f_0 . f_1`.
    pub both: f64,
    /// `f_k . d`.
    pub by_data: Amplitudes,
    /// `d . d`.
    pub data: f64,
}

/// Amplitudes at the lowest chi2 inside their ranges.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Best {
    pub amplitudes: Amplitudes,
    /// Which of them are not at an end of their range.
    pub free: [bool; MOST_AMPLITUDES],
    pub chi2: f64,
}

impl Products {
    /// Those of the first function where there is no second.
    pub fn of_first_alone(&self) -> Self {
        Self {
            squares: [self.squares[0], 0.0],
            both: 0.0,
            by_data: [self.by_data[0], 0.0],
            data: self.data,
        }
    }

    fn chi2(&self, [a, b]: Amplitudes) -> f64 {
        self.data - 2.0 * (a * self.by_data[0] + b * self.by_data[1])
            + a * a * self.squares[0]
            + 2.0 * a * b * self.both
            + b * b * self.squares[1]
    }

    /// The best amplitudes inside ranges (lowest, highest); an absent function's range is (0, 0).
    #[inline]
    pub fn best(&self, ranges: &[(f64, f64); MOST_AMPLITUDES]) -> Best {
        let at = |amplitudes: Amplitudes, free| Best {
            amplitudes,
            free,
            chi2: self.chi2(amplitudes),
        };
        let [a, b] = self.shares([true, true]);
        if inside(a, ranges[0]) && inside(b, ranges[1]) {
            return at([a, b], [true, true]);
        }
        // one amplitude at an end of its range, the other at its best there
        let mut best: Option<Best> = None;
        for held in 0..MOST_AMPLITUDES {
            let other = 1 - held;
            for end in [ranges[held].0, ranges[held].1] {
                let wanted = if self.squares[other] > 0.0 {
                    (self.by_data[other] - self.both * end) / self.squares[other]
                } else {
                    ranges[other].0
                };
                let (low, high) = ranges[other];
                let mut amplitudes = [end; MOST_AMPLITUDES];
                amplitudes[other] = wanted.clamp(low, high);
                let mut free = [false; MOST_AMPLITUDES];
                free[other] = wanted > low && wanted < high;
                let found = at(amplitudes, free);
                if best.is_none_or(|best| found.chi2 < best.chi2) {
                    best = Some(found);
                }
            }
        }
        best.unwrap_or_else(|| at([ranges[0].0, ranges[1].0], [false, false]))
    }

    /// The amplitudes that the free functions have in a least-squares sum for the data; 0 of the others.
    #[inline]
    pub fn shares(&self, free: [bool; MOST_AMPLITUDES]) -> Amplitudes {
        let [f, h] = self.squares;
        let [d, e] = self.by_data;
        let determinant = f * h - self.both * self.both;
        match free {
            [true, true] if determinant > SAME_DIRECTION * f * h => [
                (d * h - e * self.both) / determinant,
                (e * f - d * self.both) / determinant,
            ],
            [true, _] if f > 0.0 => [d / f, 0.0],
            [_, true] if h > 0.0 => [0.0, e / h],
            _ => [0.0, 0.0],
        }
    }
}

fn inside(value: f64, (low, high): (f64, f64)) -> bool {
    value > low && value < high
}

#[cfg(test)]
mod tests {
    use super::*;

    /// chi2 on a fine grid of the ranges.
    fn lowest_on_grid(products: &Products, ranges: &[(f64, f64); 2]) -> f64 {
        let mut lowest = f64::INFINITY;
        for i in 0..=400 {
            for j in 0..=400 {
                let point = |k: usize, step: i32| {
                    let (low, high) = ranges[k];
                    low + (high - low) * f64::from(step) / 400.0
                };
                lowest = lowest.min(products.chi2([point(0, i), point(1, j)]));
            }
        }
        lowest
    }

    #[test]
    fn no_point_of_the_ranges_is_better() {
        let ranges = [(-0.5, 2.0), (0.0, 1.0)];
        for (both, by_data) in [
            (0.3, [1.0, 0.5]),
            (-0.6, [4.0, 0.5]),
            (0.9, [-3.0, 2.0]),
            (0.2, [0.3, -4.0]),
            (0.99, [5.0, 5.0]),
            (1.0, [0.7, 0.7]),
        ] {
            let products = Products {
                squares: [1.0, 1.0],
                both,
                by_data,
                data: 30.0,
            };
            let best = products.best(&ranges);
            let lowest = lowest_on_grid(&products, &ranges);
            assert!(best.chi2 <= lowest + 1e-12, "{both} {by_data:?}: {best:?}");
            assert!(best.chi2 > lowest - 1e-3, "{both} {by_data:?}: {best:?}");
            for ((value, (low, high)), free) in best.amplitudes.iter().zip(ranges).zip(best.free) {
                assert!(low <= *value && *value <= high);
                assert_eq!(free, *value > low && *value < high);
            }
        }
    }

    #[test]
    fn an_absent_function_has_no_amplitude() {
        let products = Products {
            squares: [2.0, 0.0],
            both: 0.0,
            by_data: [3.0, 0.0],
            data: 9.0,
        };
        let best = products.best(&[(0.0, 10.0), (0.0, 0.0)]);
        assert_eq!(best.amplitudes, [1.5, 0.0]);
        assert_eq!(best.free, [true, false]);
        assert_eq!(best.chi2, 4.5);
    }
}
