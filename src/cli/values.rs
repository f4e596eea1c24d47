//! Values of options: numbers, ranges, and values with a name.

use inrush::run::Given;

/// One finite number.
pub fn number(text: &str) -> Result<f64, String> {
    let text = text.trim();
    text.parse()
        .ok()
        .filter(|number: &f64| number.is_finite())
        .ok_or_else(|| format!("`{text}`, expected a number"))
}

/// Finite numbers with commas between them.
pub fn numbers(text: &str) -> Result<Vec<f64>, String> {
    text.split(',').map(number).collect()
}

/// A number, or a number and its error; what they may be is the receiver's to check.
pub fn given(text: &str) -> Result<Given, String> {
    match numbers(text)?[..] {
        [value] => Ok(Given::Value(value)),
        [value, err] => Ok(Given::WithError([value, err])),
        _ => Err("expected VALUE or VALUE,ERR".to_owned()),
    }
}

/// Two numbers, the lower and the higher end; their order is the receiver's to check.
pub fn range(text: &str) -> Result<[f64; 2], String> {
    match numbers(text)?[..] {
        [low, high] => Ok([low, high]),
        _ => Err("expected LOW,HIGH".to_owned()),
    }
}

/// A name, and a value of a kind.
pub fn named<T>(
    text: &str,
    parse: impl Fn(&str) -> Result<T, String>,
) -> Result<(String, T), String> {
    let (name, value) = text.split_once('=').ok_or("expected NAME=VALUE")?;
    Ok((name.trim().to_owned(), parse(value)?))
}
