//! Ranges and ticks of an axis, and the way from values to the page.

/// A linear axis: values from `low` to `high` lie from `start_mm` to `end_mm` on the page.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Axis {
    pub(super) low: f64,
    pub(super) high: f64,
    pub(super) start_mm: f64,
    pub(super) end_mm: f64,
}

impl Axis {
    pub(super) fn place_mm(&self, value: f64) -> f64 {
        self.start_mm + (value - self.low) / (self.high - self.low) * (self.end_mm - self.start_mm)
    }

    pub(super) fn contains(&self, value: f64) -> bool {
        value >= self.low && value <= self.high
    }
}

/// Round values to be labelled, with the decimals that tell them apart.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Ticks {
    pub(super) values: Vec<f64>,
    decimals: usize,
}

impl Ticks {
    /// At most `most` (at least 2) multiples of 1, 2 or 5 times a power of ten.
    pub(super) fn between(low: f64, high: f64, most: usize) -> Self {
        let wanted = (high - low) / most.max(2) as f64;
        let power = 10_f64.powf(wanted.log10().floor());
        let step = [1.0, 2.0, 5.0, 10.0]
            .into_iter()
            .map(|factor| factor * power)
            .find(|step| *step >= wanted * (1.0 - 1e-9))
            .unwrap_or(10.0 * power);
        // Finite and small: a step's power of ten.
        #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
        let decimals = (-step.log10().floor()).max(0.0) as usize;
        let first = (low / step - 1e-9).ceil();
        let values = (0..=most)
            .map(|index| (first + index as f64) * step)
            .take_while(|value| *value <= high + 1e-9 * step)
            .collect();
        Self { values, decimals }
    }

    pub(super) fn label(&self, value: f64) -> String {
        let text = format!("{value:.*}", self.decimals);
        let digits = text.trim_start_matches('-');
        let is_zero = digits.chars().all(|c| matches!(c, '0' | '.'));
        if is_zero || !text.starts_with('-') {
            digits.to_owned()
        } else {
            format!("\u{2212}{digits}")
        }
    }
}

/// Smallest and largest finite value.
pub(super) fn extent(values: impl Iterator<Item = f64>) -> Option<(f64, f64)> {
    values
        .filter(|value| value.is_finite())
        .fold(None, |extent, value| {
            let (low, high) = extent.unwrap_or((value, value));
            Some((low.min(value), high.max(value)))
        })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ticks_are_round_inside_and_few() {
        for (low, high, most, expected) in [
            (
                -2.3,
                3.1,
                6,
                vec!["\u{2212}2", "\u{2212}1", "0", "1", "2", "3"],
            ),
            (-0.3, 3.4, 4, vec!["0", "1", "2", "3"]),
            (
                0.0,
                0.05,
                5,
                vec!["0.00", "0.01", "0.02", "0.03", "0.04", "0.05"],
            ),
            (-60.0, 140.0, 6, vec!["\u{2212}50", "0", "50", "100"]),
            (41.31, 41.98, 6, vec!["41.4", "41.6", "41.8"]),
        ] {
            let ticks = Ticks::between(low, high, most);
            let labels: Vec<_> = ticks.values.iter().map(|v| ticks.label(*v)).collect();
            assert_eq!(labels, expected, "{low} {high}");
        }
    }
}
