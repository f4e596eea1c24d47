//! One pair's results as plain text for a terminal, values rounded to their errors.

use std::fmt::Write as _;

use super::columns::{Group, QUANTITIES, Quantity, Uncertainty};
use super::csv::cell;
use super::{Row, Value, rounded, rounded_interval, rounded_plain, rounded_range};

/// Columns that the text is wrapped at.
const WIDTH: usize = 78;
/// Columns of the names on the left.
pub(super) const LABEL: usize = 30;

/// A readable summary of one pair: headings, one result a line, cautions in words.
///
/// `row` has columns of [`super::columns`]; groups and quantities without a value are left out.
/// `cautions` are sentences. Inward speeds read `0.48 +- 0.03 km/s`, intervals `0.48 -0.03 +0.05`.
///
pub fn summary(row: &Row, cautions: &[String]) -> String {
    let mut text = title(row);
    let mut heading = None;
    let of_posterior = row.find("v_in_errors").and_then(Value::text) == Some("posterior");
    let formal = !of_posterior;
    for quantity in QUANTITIES {
        if matches!(
            quantity.group,
            Group::Identity | Group::Missing | Group::Cautions
        ) {
            continue;
        }
        let Some(shown) = shown(quantity, row) else {
            continue;
        };
        if heading != Some(quantity.group) {
            heading = Some(quantity.group);
            let errors = if quantity.group.is_fitted() || quantity.group == Group::Infall && formal
            {
                " (formal errors)"
            } else if quantity.group.is_derived() && formal {
                " (68 % intervals; formal errors of the fit)"
            } else if quantity.group.is_derived() || quantity.group == Group::Infall {
                " (68 % intervals)"
            } else {
                ""
            };
            let _ = write!(text, "\n{}{errors}\n", quantity.group.heading());
        }
        if quantity.name == "verdict" {
            for sentence in shown.trim_end_matches('.').split(". ") {
                text.push_str(&wrapped(sentence));
            }
            continue;
        }
        let _ = writeln!(text, "  {:<LABEL$}{shown}", quantity.label);
        if quantity.group.is_fitted()
            && let Some(range) = posterior_range(quantity, row)
        {
            let _ = writeln!(text, "  {:<LABEL$}{range}", "68 % of its posterior");
        }
    }
    if let Ok(Value::Text(missing)) = row.get("missing_inputs") {
        let _ = write!(text, "\n{}\n", Group::Missing.heading());
        for sentence in missing.split("; ") {
            text.push_str(&wrapped(&one_line(sentence)));
        }
    }
    if !cautions.is_empty() {
        let _ = write!(text, "\n{}\n", Group::Cautions.heading());
        for caution in cautions {
            text.push_str(&wrapped(caution));
        }
    }
    text
}

/// `clump: HCO+ 1-0 (thick) and H13CO+ 1-0 (thin)`.
fn title(row: &Row) -> String {
    let name = |name| row.find(name).and_then(Value::text).unwrap_or("?");
    // Given, not measured: as precise as they are.
    let offset = |name| row.find(name).filter(|value| **value != Value::Empty);
    let place = match (offset("dx_arcsec"), offset("dy_arcsec")) {
        (Some(dx), Some(dy)) => format!(" at ({}, {}) arcsec", cell(dx), cell(dy)),
        _ => String::new(),
    };
    format!(
        "{}{place}: {} (thick) and {} (thin)\n",
        one_line(name("id")),
        one_line(name("thick_line")),
        one_line(name("thin_line"))
    )
}

/// Value, error and unit; `None` where there is no value or the row has no such column.
fn shown(quantity: &Quantity, row: &Row) -> Option<String> {
    let number = match row.find(quantity.name)? {
        Value::Empty => return None,
        Value::Text(text) => return Some(one_line(text)),
        Value::Real(number) => *number,
        Value::Integer(number) => return Some(number.to_string()),
    };
    let further = |suffix: &str| {
        row.find(&format!("{}{suffix}", quantity.name))
            .and_then(Value::number)
    };
    let interval = match quantity.uncertainty {
        // a least-squares value beside the posterior's interval: they stand on lines of their own
        _ if quantity.group.is_fitted() => None,
        Uncertainty::Intervals | Uncertainty::ErrorAndIntervals => {
            further("_lo68").zip(further("_hi68"))
        }
        _ => None,
    };
    let error = match quantity.uncertainty {
        Uncertainty::Error | Uncertainty::ErrorAndIntervals => further("_err"),
        _ => None,
    };
    let value = match (interval, error) {
        (Some((low, high)), _) => rounded_interval(number, low, high),
        (None, Some(err)) => rounded(number, err),
        (None, None)
            if quantity.group == Group::Hypotheses || quantity.name.ends_with("_share") =>
        {
            format!("{number:.3}")
        }
        (None, None) => rounded_plain(number),
    };
    let unit = quantity.unit.map(|unit| format!(" {}", spoken(unit)));
    Some(value + &unit.unwrap_or_default())
}

/// The posterior's 68 % interval of a model's parameter.
fn posterior_range(quantity: &Quantity, row: &Row) -> Option<String> {
    let end = |suffix: &str| {
        row.find(&format!("{}{suffix}", quantity.name))
            .and_then(Value::number)
    };
    let range = rounded_range(end("_lo68")?, end("_hi68")?);
    let unit = quantity.unit.map(|unit| format!(" {}", spoken(unit)));
    Some(range + &unit.unwrap_or_default())
}

/// A unit as people write it.
fn spoken(unit: &str) -> String {
    unit.replace("solMass", "Msun").replace('.', " ")
}

/// Control characters as visible escapes, so that a name cannot break the layout.
fn one_line(text: &str) -> String {
    text.chars()
        .map(|character| {
            if character.is_control() {
                character.escape_default().to_string()
            } else {
                character.to_string()
            }
        })
        .collect()
}

/// A sentence behind a dash, wrapped and indented.
pub(super) fn wrapped(sentence: &str) -> String {
    let mut text = String::new();
    let mut line = String::from("  -");
    for word in sentence.split_whitespace() {
        if line.chars().count() + 1 + word.chars().count() > WIDTH && line.len() > 3 {
            let _ = writeln!(text, "{line}");
            line = String::from("   ");
        }
        let _ = write!(line, " {word}");
    }
    let _ = writeln!(text, "{line}");
    text
}
