//! A plane on another grid, by a windowed sinc of eight pixels (Kaiser's window).
//!
//! On pixels of a third of a beam or less, and onto such pixels, a source keeps its flux to 0.01 % and its
//! widths to 0.2 % (`tests/joins_cubes.rs` holds 0.1 % and 1 %). Where blank pixels or an edge are near, the
//! four nearest pixels are interpolated linearly; where one of those is blank, so is the result.

/// A place in the old grid that is nearer than this to one of its pixels is that pixel.
const WHOLE: f64 = 1e-6;

/// Pixels to either side.
const REACH: usize = 4;

/// Shape of the window: of the values from 4 to 8, the one that keeps flux and widths best.
const BETA: f64 = 6.0;

/// Steps of the kernel's table from one pixel to the next; between them it is linear, to 1e-5.
const STEPS: usize = 512;

type Weights = [f64; 2 * REACH];

/// Places in a plane at which it is interpolated.
#[derive(Clone, Debug)]
pub struct PlaneResampling {
    width: usize,
    height: usize,
    places: Vec<[f64; 2]>,
    /// Weights of the pixels around at each share of the way from one to the next.
    table: Vec<Weights>,
}

impl PlaneResampling {
    /// From planes of a width and height to pixels at these places (columns and rows from 0); those
    /// without a place become blank.
    #[must_use]
    pub fn new((width, height): (usize, usize), places: &[Option<[f64; 2]>]) -> Self {
        let places = places
            .iter()
            .map(|place| place.unwrap_or([f64::NAN; 2]))
            .collect();
        Self {
            width,
            height,
            places,
            table: (0..=STEPS)
                .map(|step| kernel(step as f64 / STEPS as f64))
                .collect(),
        }
    }

    /// Whether any new pixel lies within the old grid.
    #[must_use]
    pub fn reaches_any(&self) -> bool {
        let within = |place: f64, count: usize| place >= 0.0 && place <= count as f64 - 1.0;
        (self.places.iter()).any(|[x, y]| within(*x, self.width) && within(*y, self.height))
    }

    /// Interpolates a plane, row by row with columns fastest; `into` is resized.
    pub fn apply(&self, plane: &[f32], into: &mut Vec<f32>) {
        into.clear();
        into.extend(self.places.iter().map(|place| self.value(plane, *place)));
    }

    #[allow(clippy::cast_possible_truncation)]
    fn value(&self, plane: &[f32], [x, y]: [f64; 2]) -> f32 {
        let (Some((i, u)), Some((j, v))) = (split(x, self.width), split(y, self.height)) else {
            return f32::NAN;
        };
        let at = |i: usize, j: usize| f64::from(plane[j * self.width + i]);
        if u == 0.0 && v == 0.0 {
            return plane[j * self.width + i];
        }
        let inside = |index: usize, count: usize| index + 1 >= REACH && index + REACH < count;
        if inside(i, self.width) && inside(j, self.height) {
            let (across, up) = (self.weights(u), self.weights(v));
            let mut sum = 0.0;
            for (row, up) in up.iter().enumerate() {
                let row = (j + row + 1 - REACH) * self.width + i + 1 - REACH;
                let values = &plane[row..row + 2 * REACH];
                let along: f64 = (values.iter().zip(&across))
                    .map(|(value, weight)| f64::from(*value) * weight)
                    .sum();
                sum += up * along;
            }
            if !sum.is_nan() {
                return sum as f32;
            }
        }
        let mut sum = 0.0;
        for (row, up) in [1.0 - v, v].into_iter().enumerate() {
            for (column, across) in [1.0 - u, u].into_iter().enumerate() {
                if up * across > 0.0 {
                    sum += up * across * at(i + column, j + row);
                }
            }
        }
        sum as f32
    }

    fn weights(&self, share: f64) -> Weights {
        let place = share * STEPS as f64;
        // From 0 to below STEPS.
        #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
        let below = (place as usize).min(STEPS - 1);
        let part = place - below as f64;
        let (a, b) = (&self.table[below], &self.table[below + 1]);
        std::array::from_fn(|pixel| a[pixel] + part * (b[pixel] - a[pixel]))
    }
}

/// The pixel below a place and the share of the way to the next; none outside.
fn split(place: f64, count: usize) -> Option<(usize, f64)> {
    let place = if (place - place.round()).abs() < WHOLE {
        place.round()
    } else {
        place
    };
    if !(place >= 0.0 && place <= count as f64 - 1.0) {
        return None;
    }
    let below = place.floor();
    // Within the plane.
    #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
    let index = below as usize;
    Some((index, place - below))
}

/// Weights of the eight pixels around at a share of the way from the fourth to the fifth; their sum is 1.
fn kernel(share: f64) -> Weights {
    let weights: Weights = std::array::from_fn(|pixel| {
        let distance = share - (pixel as f64 + 1.0 - REACH as f64);
        let edge = 1.0 - (distance / REACH as f64).powi(2);
        let angle = std::f64::consts::PI * distance;
        let sinc = if angle == 0.0 {
            1.0
        } else {
            angle.sin() / angle
        };
        sinc * bessel_i0(BETA * edge.max(0.0).sqrt())
    });
    let sum: f64 = weights.iter().sum();
    weights.map(|weight| weight / sum)
}

/// Modified Bessel function of order 0, by its series; for arguments up to 10.
fn bessel_i0(x: f64) -> f64 {
    let quarter = 0.25 * x * x;
    let (mut term, mut sum) = (1.0, 1.0);
    for k in 1..40 {
        term *= quarter / f64::from(k * k);
        sum += term;
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn smooth_planes_are_kept_and_blanks_spread_no_further_than_their_neighbours() {
        let (width, height) = (24, 20);
        // A source of three pixels' full width, the least that a map should have.
        let value = |x: f64, y: f64| (-((x - 11.2).powi(2) + (y - 9.7).powi(2)) / 3.3).exp();
        #[allow(clippy::cast_possible_truncation)]
        let mut plane: Vec<f32> = (0..width * height)
            .map(|index| value((index % width) as f64, (index / width) as f64) as f32)
            .collect();
        let places = [
            Some([10.3, 9.8]),
            Some([11.0, 10.0]),
            Some([22.4, 18.5]),
            None,
        ];
        let mut out = Vec::new();
        PlaneResampling::new((width, height), &places).apply(&plane, &mut out);
        // Of the source's peak, 1.
        assert!((f64::from(out[0]) - value(10.3, 9.8)).abs() < 5e-3);
        assert_eq!(out[1], plane[10 * width + 11]);
        assert!(out[2].is_finite() && out[3].is_nan());
        plane[9 * width + 12] = f32::NAN;
        let near = [Some([9.3, 9.8]), Some([11.4, 8.2]), Some([12.0, 8.0])];
        PlaneResampling::new((width, height), &near).apply(&plane, &mut out);
        assert!(out[0].is_finite() && out[1].is_nan() && out[2].is_finite());
    }

    #[test]
    fn the_bessel_function_is_that_of_tables() {
        // Abramowitz & Stegun 1964, table 9.8: I0(1), and I0(6) by scipy 1.17.1.
        assert!((bessel_i0(1.0) - 1.266_065_877_752_008).abs() < 1e-12);
        assert!((bessel_i0(6.0) - 67.234_406_976_477_97).abs() < 1e-10);
    }
}
