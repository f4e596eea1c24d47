//! One line's channels as sums that a likelihood needs, with baseline and noise level unknown.
//!
//! All usable channels count. Those outside the fitted range hold no line: they tell of the baseline
//! (whose polynomial is integrated over with a flat prior) and of the noise level alone.

use crate::fit::{Averaging, Channels};
use crate::model::LineShape;
use crate::numeric::amplitudes::Quadratic;
use crate::numeric::products::products;
use crate::prepare::Prepared;
use crate::spectrum::Window;

/// Channels outside the fitted range count no farther from zero than this, in units of the noise: a
/// spike is no noise level.
const FARTHEST: f64 = 4.0;

/// A line's data.
#[derive(Clone, Debug)]
pub(super) struct LineData {
    channels: Channels,
    /// Data in the range, white, less the baseline that all channels together suggest.
    data: Vec<f64>,
    /// Baseline polynomials in the range, white, orthonormal over all channels.
    baseline: Vec<Vec<f64>>,
    /// Sum of the data's squares over all channels, less the baseline's part.
    squares: f64,
    /// Channels less baseline terms.
    values: f64,
}

impl LineData {
    pub fn new(
        prepared: &Prepared,
        line: LineShape,
        range: Window,
        averaging: Averaging,
        narrowest_km_s: f64,
    ) -> Self {
        let within = |low_km_s: f64, high_km_s: f64| {
            let window = Window {
                low_km_s,
                high_km_s,
            };
            let line = line.clone();
            Channels::new(prepared, line, Some(window), averaging, narrowest_km_s)
        };
        let channels = within(range.low_km_s, range.high_km_s);
        let outside = [
            within(f64::NEG_INFINITY, range.low_km_s.next_down()),
            within(range.high_km_s.next_up(), f64::INFINITY),
        ];
        let parts = [&channels, &outside[0], &outside[1]];
        let mut data: Vec<f64> = channels.whitened_data().to_vec();
        for part in &outside {
            let whitened = part.whitened_data().iter();
            data.extend(whitened.map(|value| value.clamp(-FARTHEST, FARTHEST)));
        }
        let terms = prepared.baseline.order.map_or(0, |order| order + 1);
        let polynomials = orthonormal(polynomials(&parts, terms));
        let [mut squares] = products(&data, [&data]);
        for polynomial in &polynomials {
            let [share] = products(&data, [polynomial]);
            for (datum, value) in data.iter_mut().zip(polynomial) {
                *datum -= share * value;
            }
            squares -= share * share;
        }
        let values = (data.len() - polynomials.len()) as f64;
        let count = channels.len();
        data.truncate(count);
        let baseline = polynomials
            .into_iter()
            .map(|mut polynomial| {
                polynomial.truncate(count);
                polynomial
            })
            .collect();
        Self {
            channels,
            data,
            baseline,
            squares,
            values,
        }
    }

    pub fn channels(&self) -> &Channels {
        &self.channels
    }

    /// chi2 as a function of the amplitudes of white columns (at most two).
    pub fn quadratic(&self, columns: &[&[f64]], mean: f64) -> Quadratic {
        let mut quadratic = Quadratic {
            count: columns.len(),
            data: self.squares,
            values: self.values,
            means: [mean; 2],
            ..Quadratic::default()
        };
        match columns {
            [] => {}
            [one] => {
                let [square, product] = products(one, [one, &self.data]);
                quadratic.products[0] = square;
                quadratic.projected[0] = product;
                for polynomial in &self.baseline {
                    let [along] = products(one, [polynomial]);
                    quadratic.products[0] -= along * along;
                }
            }
            [one, two, ..] => {
                let [square, cross, first] = products(one, [one, two, &self.data]);
                let [other, second] = products(two, [two, &self.data]);
                quadratic.products = [square, cross, other];
                quadratic.projected = [first, second];
                for polynomial in &self.baseline {
                    let [a, b] = products(polynomial, [one, two]);
                    quadratic.products[0] -= a * a;
                    quadratic.products[1] -= a * b;
                    quadratic.products[2] -= b * b;
                }
            }
        }
        quadratic
    }
}

/// Powers of velocity in all channels of the parts, white.
fn polynomials(parts: &[&Channels], terms: usize) -> Vec<Vec<f64>> {
    let ends = parts
        .iter()
        .flat_map(|part| part.sampling().velocity_km_s());
    let (low, high) = ends.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), v| {
        (low.min(*v), high.max(*v))
    });
    (0..i32::try_from(terms).unwrap_or(0))
        .map(|power| {
            parts
                .iter()
                .flat_map(|part| {
                    let scaled = |v: &f64| (2.0 * v - low - high) / (high - low);
                    let velocities = part.sampling().velocity_km_s().iter();
                    let mut column: Vec<f64> = velocities.map(|v| scaled(v).powi(power)).collect();
                    part.whiten(&mut column);
                    column
                })
                .collect()
        })
        .collect()
}

/// Columns made orthonormal one after the other.
fn orthonormal(mut columns: Vec<Vec<f64>>) -> Vec<Vec<f64>> {
    for index in 0..columns.len() {
        let (before, rest) = columns.split_at_mut(index);
        let column = &mut rest[0];
        for other in before.iter() {
            let [along] = products(column, [other]);
            for (value, other) in column.iter_mut().zip(other) {
                *value -= along * other;
            }
        }
        let [square] = products(column, [&*column]);
        let norm = square.sqrt();
        for value in column.iter_mut() {
            *value /= norm;
        }
    }
    columns
}
