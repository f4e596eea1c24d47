//! The table of a ranking: its columns about those of every result, and its first places as text.

use super::{Column, Kind, ReportError, Row, Schema, Value, columns, rounded_interval};
use crate::rank::Quantity;
use std::fmt::Write as _;

/// Sources that the text shows.
pub const MOST_SHOWN: usize = 20;

/// `rank`, the result columns, and what is said of the place; `top` is what `p_top` is about.
///
/// # Errors
///
/// [`ReportError::RepeatedColumn`]: never, the names differ.
pub fn schema(top: usize) -> Result<Schema, ReportError> {
    let column = |name: &str, kind: Kind, description: String| Column {
        name: name.to_owned(),
        unit: None,
        description,
        kind,
    };
    let text = |name: &str, description: &str| column(name, Kind::Text, description.to_owned());
    let integer =
        |name: &str, description: &str| column(name, Kind::Integer, description.to_owned());
    let mut all = vec![integer(
        "rank",
        "Place in the ranking, from 1; empty where a source cannot be used",
    )];
    all.extend(columns::results().columns().iter().cloned());
    all.extend([
        Column {
            unit: Some("solMass/yr".to_owned()),
            ..column(
                "mass_rate_expected_msun_yr",
                Kind::Real,
                "Expected mass infall rate: probability of infall times the mean of the inward draws"
                    .to_owned(),
            )
        },
        Column {
            unit: Some("km/s".to_owned()),
            ..column(
                "v_in_expected_km_s",
                Kind::Real,
                "Expected inward speed: probability of infall times the mean of the inward draws"
                    .to_owned(),
            )
        },
        integer(
            "rank_lo68",
            "Lower end of the central 68 % interval of the place by the true rate or speed",
        ),
        integer(
            "rank_hi68",
            "Upper end of the central 68 % interval of the place by the true rate or speed",
        ),
        column(
            "p_top",
            Kind::Real,
            format!(
                "Probability of being among the {top} sources with the highest true rate or speed"
            ),
        ),
        text("group", "Group of the source, as given"),
        integer("line_pairs", "Line pairs of the source with a result"),
        column(
            "pair_disagreement",
            Kind::Real,
            "Scatter of the speeds of its line pairs over their errors, sqrt(chi2/(k - 1))"
                .to_owned(),
        ),
        text("why", "Why the source stands at its place"),
    ]);
    Schema::new(all)
}

/// A row of the ranking with the cells of a row of results.
///
/// # Errors
///
/// [`ReportError::UnknownColumn`] where `schema` is not that of a ranking.
pub fn with_results(schema: &Schema, results: &Row) -> Result<Row, ReportError> {
    let mut row = schema.row();
    for (column, value) in results.schema().columns().iter().zip(results.values()) {
        row.set(&column.name, value.clone())?;
    }
    Ok(row)
}

/// The first places as a table for people; `counts` are all sources with a place and those without.
pub fn text(rows: &[Row], counts: (usize, usize), quantity: Quantity, top: usize) -> String {
    let by = match quantity {
        Quantity::Rate => "mass infall rate",
        Quantity::Speed => "inward speed",
    };
    let mut text = format!("Ranking of {} sources, by expected {by}\n\n", counts.0);
    let head = [
        "rank",
        "68 %",
        &format!("top {top}"),
        "source",
        "infall",
        "v_in (km/s)",
        "rate (Msun/yr)",
    ]
    .map(str::to_owned);
    let mut cells = vec![head];
    cells.extend(rows.iter().map(cells_of));
    let widths: Vec<usize> = (0..cells[0].len())
        .map(|column| {
            cells
                .iter()
                .map(|row| row[column].chars().count())
                .max()
                .unwrap_or(0)
        })
        .collect();
    for row in &cells {
        let mut line = String::new();
        for (index, (cell, width)) in row.iter().zip(&widths).enumerate() {
            let gap = if index == 0 { "" } else { "  " };
            // writing to a string cannot fail
            let _ = match index {
                0 | 2 | 4 => write!(line, "{gap}{cell:>width$}"),
                _ => write!(line, "{gap}{cell:<width$}"),
            };
        }
        let _ = writeln!(text, "  {}", line.trim_end());
    }
    let more = counts.0.saturating_sub(rows.len());
    if more > 0 {
        let _ = writeln!(text, "  and {more} more in the tables");
    }
    if counts.1 > 0 {
        let _ = writeln!(
            text,
            "  {} without a place stand at the end of the tables",
            counts.1
        );
    }
    text
}

fn cells_of(row: &Row) -> [String; 7] {
    let get = |name: &str| row.find(name).unwrap_or(&Value::Empty);
    let integer = |name: &str| match get(name) {
        Value::Integer(number) => number.to_string(),
        _ => "-".to_owned(),
    };
    let share =
        |name: &str| (get(name).number()).map_or("-".to_owned(), |share| format!("{share:.2}"));
    let spread = |name: &str| {
        let at = |suffix: &str| get(&format!("{name}{suffix}")).number();
        match (at(""), at("_lo68"), at("_hi68")) {
            (Some(value), Some(low), Some(high)) => rounded_interval(value, low, high),
            _ => "-".to_owned(),
        }
    };
    let interval = match (get("rank_lo68"), get("rank_hi68")) {
        (Value::Integer(low), Value::Integer(high)) => format!("{low}-{high}"),
        _ => "-".to_owned(),
    };
    let name: String = get("id")
        .text()
        .unwrap_or("?")
        .chars()
        .filter(|c| !c.is_control())
        .collect();
    [
        integer("rank"),
        interval,
        share("p_top"),
        name,
        share("p_infall"),
        spread("v_in_km_s"),
        spread("mass_rate_msun_yr"),
    ]
}
