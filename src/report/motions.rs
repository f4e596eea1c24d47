//! What a map as a whole says of motions, as a long table, a row a quantity, and as text.

use super::summary::{LABEL, wrapped};
use super::{Column, Kind, ReportError, Row, Schema, Table, Value, rounded, rounded_plain};
use crate::numeric::Estimate;
use std::fmt::Write as _;

/// What entries are about, in order.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Part {
    /// Where the centre is, and how noise goes together.
    Ground,
    /// Velocity gradients.
    Gradient,
    /// Even and odd parts about the centre.
    Parity,
    /// First moment against radius.
    Spot,
    /// Inward speed against radius.
    Speed,
    /// What follows.
    Verdict,
}

impl Part {
    fn heading(self) -> &'static str {
        match self {
            Self::Ground => "Centre and noise",
            Self::Gradient => "Velocity gradients",
            Self::Parity => "Even about the centre, odd along an axis",
            Self::Spot => "First moment of the thick line against radius",
            Self::Speed => "Inward speed against radius",
            Self::Verdict => "Motions",
        }
    }
}

/// One quantity, or a sentence.
#[derive(Clone, Debug, PartialEq)]
pub struct Entry {
    /// What it is about.
    pub part: Part,
    /// Its name in the table, with unit suffix.
    pub quantity: String,
    /// Column of the pointings that it is read from; empty for none that is one.
    pub column: &'static str,
    /// Its name for people; empty where it is not shown to them.
    pub label: String,
    /// Its unit.
    pub unit: &'static str,
    /// Value and error; an error of 0 stands for none.
    pub estimate: Option<Estimate>,
    /// Its significance, in standard deviations.
    pub significance: Option<f64>,
    /// Reduced chi2 of the fit that it is from, and readings behind it.
    pub fit: Option<(f64, usize)>,
    /// In words: a finding, or why there is no value.
    pub words: String,
}

/// Columns: name, kind, meaning.
#[rustfmt::skip]
const COLUMNS: [(&str, Kind, &str); 9] = [
    ("quantity", Kind::Text, "What is stated, its unit in the name"),
    ("column", Kind::Text, "Column of the pointings that it is read from"),
    ("unit", Kind::Text, "Unit of value and err"),
    ("value", Kind::Real, "Value"),
    ("err", Kind::Real, "Standard error, the correlation of pointings allowed for"),
    ("significance", Kind::Real, "Significance, standard deviations of a normal variable"),
    ("chi2_red", Kind::Real, "Reduced chi-squared of the fit behind it"),
    ("readings", Kind::Integer, "Pointings behind it"),
    ("words", Kind::Text, "The finding in words, or why there is no value"),
];

/// Columns of the table.
///
/// # Errors
///
/// [`ReportError`]: a defect.
pub fn schema() -> Result<Schema, ReportError> {
    let columns = COLUMNS.map(|(name, kind, description)| Column {
        name: name.to_owned(),
        unit: None,
        description: description.to_owned(),
        kind,
    });
    Schema::new(columns.into())
}

/// The entries as a table.
///
/// # Errors
///
/// [`ReportError::Infinite`] for a value that is.
pub fn table(entries: &[Entry]) -> Result<Table, ReportError> {
    let schema = schema()?;
    let mut table = Table::new(schema.clone());
    for entry in entries {
        let mut row: Row = schema.row();
        row.set("quantity", entry.quantity.as_str())?;
        row.set("column", filled(entry.column))?;
        row.set("unit", filled(entry.unit))?;
        row.set("value", entry.estimate.map(|one| one.value))?;
        let err = entry.estimate.map(|one| one.err);
        row.set("err", err.filter(|err| *err > 0.0))?;
        row.set("significance", entry.significance)?;
        row.set("chi2_red", entry.fit.map(|(chi2, _)| chi2))?;
        if let Some((_, readings)) = entry.fit {
            let readings = i64::try_from(readings).unwrap_or(i64::MAX);
            row.set("readings", Value::Integer(readings))?;
        }
        row.set("words", filled(&entry.words))?;
        table.push(row)?;
    }
    Ok(table)
}

fn filled(text: &str) -> Option<&str> {
    (!text.is_empty()).then_some(text)
}

/// The entries for people: a heading a part, a line an entry that has a label, sentences below.
#[must_use]
pub fn text(title: &str, entries: &[Entry]) -> String {
    let mut text = format!("{title}\n");
    let mut part = None;
    // writing to a string cannot fail
    for entry in entries {
        let words = filled(&entry.words);
        if entry.label.is_empty() && (words.is_none() || entry.estimate.is_some()) {
            continue;
        }
        if part != Some(entry.part) {
            part = Some(entry.part);
            let _ = write!(text, "\n{}\n", entry.part.heading());
        }
        match (shown(entry), words) {
            (Some(shown), _) => {
                let _ = writeln!(text, "  {:<LABEL$}{shown}", entry.label);
            }
            (None, Some(words)) if entry.label.is_empty() => text.push_str(&wrapped(words)),
            (None, words) => {
                let _ = writeln!(text, "  {:<LABEL$}{}", entry.label, words.unwrap_or("-"));
            }
        }
    }
    text
}

/// An entry's value as people read it.
fn shown(entry: &Entry) -> Option<String> {
    let Estimate { value, err } = entry.estimate?;
    let mut shown = if err > 0.0 {
        rounded(value, err)
    } else {
        rounded_plain(value)
    };
    if !entry.unit.is_empty() {
        let _ = write!(shown, " {}", entry.unit);
    }
    if let Some(sigma) = entry.significance {
        let _ = write!(shown, " ({:.1} sigma)", sigma.abs());
    }
    Some(shown)
}

/// An entry as one line of a FITS header.
#[must_use]
pub fn line(entry: &Entry) -> (String, String) {
    let text = match (&entry.estimate, filled(&entry.words)) {
        (Some(_), _) => shown(entry).unwrap_or_default(),
        (None, words) => words.unwrap_or_default().to_owned(),
    };
    (entry.quantity.clone(), text)
}
