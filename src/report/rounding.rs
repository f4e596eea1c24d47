//! Numbers as people read them: a value with as many digits as its error warrants.
//!
//! The rule: an error is shown with two significant digits where it begins with 1 or 2 (one digit
//! would round it by up to half its size), else with one; the value ends at the same decimal place.
//! An error that rounds up to the next power of ten keeps that place: 0.96 becomes 1.0.

/// Below and above these magnitudes the power of ten is written out.
const PLAIN_FROM: f64 = 1e-3;
const PLAIN_BELOW: f64 = 1e6;

/// Significant digits of a value without an error.
const DIGITS_WITHOUT_ERROR: i32 = 3;

/// A value and its standard error: `0.48 +- 0.03`, `(1.2 +- 0.4)e-5`.
///
/// Without a usable error (zero, negative or not finite) the value alone, as [`rounded_plain`].
///
/// ```
/// assert_eq!(inrush::report::rounded(0.4812, 0.0273), "0.481 +- 0.027");
/// assert_eq!(inrush::report::rounded(0.4812, 0.0347), "0.48 +- 0.03");
/// ```
pub fn rounded(value: f64, err: f64) -> String {
    if !is_error(err) || !value.is_finite() {
        return rounded_plain(value);
    }
    let power = shown_power(value.abs().max(err));
    let place = last_place(err) - power;
    let (value, err) = (scaled(value, power, place), scaled(err, power, place));
    with_power(&format!("{value} +- {err}"), power)
}

/// A value with the ends of its interval as differences from it: `0.48 -0.03 +0.05`.
///
/// Both ends have the decimal place that the smaller difference warrants. Where an end is not finite
/// or does not lie on its side of the value, the ends themselves are written: `0.48 (0.50 to 0.60)`.
pub fn rounded_interval(value: f64, low: f64, high: f64) -> String {
    if !(value.is_finite() && low.is_finite() && high.is_finite()) {
        return rounded_plain(value);
    }
    let (below, above) = (value - low, high - value);
    let width = if is_error(below) && is_error(above) {
        below.min(above)
    } else {
        (high - low).abs() / 2.0
    };
    if !is_error(width) {
        return rounded_plain(value);
    }
    let power = shown_power(value.abs().max(low.abs()).max(high.abs()));
    let place = last_place(width) - power;
    let show = |number| scaled(number, power, place);
    let text = if is_error(below) && is_error(above) {
        format!("{} -{} +{}", show(value), show(below), show(above))
    } else {
        format!("{} ({} to {})", show(value), show(low), show(high))
    };
    with_power(&text, power)
}

/// The ends of an interval, to the place that half its width warrants: `0.28 to 0.33`.
///
/// ```
/// assert_eq!(inrush::report::rounded_range(0.2813, 0.3342), "0.281 to 0.334");
/// ```
pub fn rounded_range(low: f64, high: f64) -> String {
    let width = 0.5 * (high - low);
    if !(is_error(width) && low.is_finite() && high.is_finite()) {
        return format!("{} to {}", rounded_plain(low), rounded_plain(high));
    }
    let power = shown_power(low.abs().max(high.abs()));
    let place = last_place(width) - power;
    let text = format!(
        "{} to {}",
        scaled(low, power, place),
        scaled(high, power, place)
    );
    with_power(&text, power)
}

/// A value without an error, to three significant digits: `12.3`, `235000`, `1.23e-5`.
pub fn rounded_plain(value: f64) -> String {
    if !value.is_finite() {
        return "-".to_owned();
    }
    if value == 0.0 {
        return "0".to_owned();
    }
    // The exponent after rounding, so that 9.996 becomes 10.0.
    let digits = usize::try_from(DIGITS_WITHOUT_ERROR - 1).unwrap_or(0);
    let exponent = printed_exponent(&format!("{:.digits$e}", value.abs()));
    let power = shown_power(value.abs());
    let place = exponent + 1 - DIGITS_WITHOUT_ERROR - power;
    let text = scaled(value, power, place);
    if power == 0 {
        text
    } else {
        format!("{text}e{power}")
    }
}

fn is_error(err: f64) -> bool {
    err.is_finite() && err > 0.0
}

/// Decimal exponent of the last place that an error warrants.
fn last_place(err: f64) -> i32 {
    let exponent = exponent(err);
    let leading = err / 10_f64.powi(exponent);
    if leading < 3.0 {
        exponent - 1
    } else {
        exponent
    }
}

/// Exponent of the leading decimal digit, exactly as Rust prints it.
fn exponent(positive: f64) -> i32 {
    printed_exponent(&format!("{positive:e}"))
}

fn printed_exponent(text: &str) -> i32 {
    text.split_once('e')
        .and_then(|(_, exponent)| exponent.parse().ok())
        .unwrap_or(0)
}

/// Zero where a magnitude is written plainly, else its power of ten.
fn shown_power(magnitude: f64) -> i32 {
    if magnitude == 0.0 || (PLAIN_FROM..PLAIN_BELOW).contains(&magnitude) {
        0
    } else {
        exponent(magnitude)
    }
}

/// A number over 10^power, rounded at decimal place 10^place.
fn scaled(number: f64, power: i32, place: i32) -> String {
    let number = number / 10_f64.powi(power);
    let text = if place > 0 {
        let unit = 10_f64.powi(place);
        format!("{:.0}", (number / unit).round() * unit)
    } else {
        format!("{number:.*}", usize::try_from(-place).unwrap_or(0))
    };
    let is_zero = text
        .chars()
        .all(|character| matches!(character, '-' | '0' | '.'));
    if is_zero {
        text.trim_start_matches('-').to_owned()
    } else {
        text
    }
}

fn with_power(text: &str, power: i32) -> String {
    if power == 0 {
        text.to_owned()
    } else {
        format!("({text})e{power}")
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn values_end_where_their_errors_do() {
        for (value, err, expected) in [
            (0.4812, 0.0347, "0.48 +- 0.03"),
            (0.4812, 0.0273, "0.481 +- 0.027"),
            (0.4812, 0.0299, "0.481 +- 0.030"),
            (0.4812, 0.0301, "0.48 +- 0.03"),
            (0.4812, 0.1, "0.48 +- 0.10"),
            (3.21, 0.96, "3.2 +- 1.0"),
            (-0.52, 0.04, "-0.52 +- 0.04"),
            (-0.001, 0.04, "0.00 +- 0.04"),
            (0.0, 0.4, "0.0 +- 0.4"),
            (12345.6, 234.0, "12350 +- 230"),
            (12345.6, 567.0, "12300 +- 600"),
            (12345.6, 12.0, "12346 +- 12"),
            (1.234e-5, 4.1e-6, "(1.2 +- 0.4)e-5"),
            (1.234e-5, 4.1e-5, "(1 +- 4)e-5"),
            (2.5e7, 3.2e5, "(2.50 +- 0.03)e7"),
            (999_999.0, 400.0, "1000000 +- 400"),
            (5.0, 0.0, "5.00"),
            (5.0, f64::NAN, "5.00"),
            (f64::NAN, 1.0, "-"),
        ] {
            assert_eq!(rounded(value, err), expected, "{value} {err}");
        }
    }

    #[test]
    fn intervals_keep_their_sides() {
        for (value, low, high, expected) in [
            (0.48, 0.443, 0.532, "0.48 -0.04 +0.05"),
            (0.48, 0.461, 0.532, "0.480 -0.019 +0.052"),
            (0.48, 0.50, 0.60, "0.48 (0.50 to 0.60)"),
            (1.2e-5, 0.8e-5, 2.0e-5, "(1.2 -0.4 +0.8)e-5"),
            (0.48, f64::NEG_INFINITY, 0.6, "0.480"),
        ] {
            assert_eq!(rounded_interval(value, low, high), expected, "{value}");
        }
    }

    #[test]
    fn values_without_error_have_three_digits() {
        for (value, expected) in [
            (12.3456, "12.3"),
            (234_560.0, "235000"),
            (1.234_56e-5, "1.23e-5"),
            (0.0, "0"),
            (-1.0, "-1.00"),
            (9.996, "10.0"),
        ] {
            assert_eq!(rounded_plain(value), expected, "{value}");
        }
    }
}
