//! Quantiles, shares and the cells that show them.

/// The value below which a part of the values lies, between neighbours by linear interpolation.
pub fn quantile(values: &[f64], part: f64) -> Option<f64> {
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    let last = sorted.len().checked_sub(1)?;
    let place = part * last as f64;
    let below = (0..last).rfind(|&index| index as f64 <= place).unwrap_or(0);
    let above = sorted[(below + 1).min(last)];
    Some(sorted[below] + (place - below as f64) * (above - sorted[below]))
}

/// Root of the mean square.
pub fn rms(values: &[f64]) -> f64 {
    let square: f64 = values.iter().map(|value| value * value).sum();
    (square / values.len().max(1) as f64).sqrt()
}

/// Rounded to hundredths, and zero without a sign.
fn hundredths(value: f64) -> f64 {
    (value * 100.0).round() / 100.0 + 0.0
}

/// Median and 16 to 84 % as a cell.
pub fn spread(values: &[f64]) -> String {
    match [0.5, 0.16, 0.84].map(|part| quantile(values, part)) {
        [Some(median), Some(low), Some(high)] => {
            let [median, low, high] = [median, low, high].map(hundredths);
            format!("{median:.2} ({low:.2} to {high:.2})")
        }
        _ => "-".to_owned(),
    }
}

/// How many of the values hold, as a share in percent.
pub fn percent<T>(values: &[T], holds: impl Fn(&T) -> bool) -> String {
    if values.is_empty() {
        return "-".to_owned();
    }
    let count = values.iter().filter(|value| holds(value)).count();
    format!("{:.0} %", 100.0 * count as f64 / values.len() as f64)
}
