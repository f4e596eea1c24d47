//! Tables as CSV: one header line, then one line a row; empty cells where there is no value.
//!
//! Numbers are the shortest decimals that read back as the same bits.

use std::io::Write;

use super::{Column, ReportError, Row, Table, Value};

/// Writes a table as CSV (RFC 4180, but with single line feeds). Its meta data are left out.
///
/// # Errors
///
/// [`ReportError::Stream`] where the writer fails.
pub fn write_csv(table: &Table, writer: impl Write) -> Result<(), ReportError> {
    let mut rows = CsvRows::new(table.columns(), writer)?;
    for row in table.rows() {
        rows.push(row)?;
    }
    rows.finish()
}

/// Rows written one by one: a table that need not be held in memory.
pub struct CsvRows<W: Write> {
    output: ::csv::Writer<W>,
}

impl<W: Write> CsvRows<W> {
    /// Writes the header line.
    ///
    /// # Errors
    ///
    /// [`ReportError::Stream`] where the writer fails.
    pub fn new(columns: &[Column], writer: W) -> Result<Self, ReportError> {
        let mut output = ::csv::WriterBuilder::new()
            // Quotes a first cell that begins with `#`, which many readers take for a comment.
            .comment(Some(b'#'))
            .from_writer(writer);
        output
            .write_record(columns.iter().map(|column| column.name.as_str()))
            .map_err(stream)?;
        Ok(Self { output })
    }

    /// Writes a row, which is one of the header's columns.
    ///
    /// # Errors
    ///
    /// [`ReportError::Stream`] where the writer fails, or the row has more or fewer cells.
    pub fn push(&mut self, row: &Row) -> Result<(), ReportError> {
        self.output.write_record(cells(row)).map_err(stream)
    }

    /// Writes what is still held back.
    ///
    /// # Errors
    ///
    /// [`ReportError::Stream`] where the writer fails.
    pub fn finish(mut self) -> Result<(), ReportError> {
        Ok(self.output.flush()?)
    }
}

fn cells(row: &Row) -> impl Iterator<Item = String> {
    row.values().iter().map(cell)
}

/// A cell as text that reads back to the same value.
pub(super) fn cell(value: &Value) -> String {
    match value {
        Value::Text(text) => text.clone(),
        // Rust's debug format is the shortest that round-trips, with an exponent where that is shorter.
        Value::Real(number) => format!("{number:?}"),
        Value::Integer(number) => number.to_string(),
        Value::Empty => String::new(),
    }
}

fn stream(error: ::csv::Error) -> ReportError {
    match error.into_kind() {
        ::csv::ErrorKind::Io(source) => ReportError::Stream(source),
        other => ReportError::Stream(std::io::Error::other(format!("{other:?}"))),
    }
}
