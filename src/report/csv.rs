//! Tables as CSV: one header line, then one line a row; empty cells where there is no value.
//!
//! Numbers are the shortest decimals that read back as the same bits.

use std::io::Write;

use super::{ReportError, Row, Schema, Table, Value};

/// Writes a table as CSV (RFC 4180, but with single line feeds). Its meta data are left out.
///
/// # Errors
///
/// [`ReportError::Stream`] where the writer fails.
pub fn write_csv(table: &Table, writer: impl Write) -> Result<(), ReportError> {
    let mut rows = CsvRows::begin(table.schema(), writer)?;
    for row in table.rows() {
        rows.push(row)?;
    }
    rows.finish()?;
    Ok(())
}

/// Rows written as CSV one at a time: what [`write_csv`] writes of them all.
#[derive(Debug)]
pub struct CsvRows<W: Write> {
    schema: Schema,
    output: ::csv::Writer<W>,
}

impl<W: Write> CsvRows<W> {
    /// Writes the header line.
    ///
    /// # Errors
    ///
    /// [`ReportError::Stream`] where the writer fails.
    pub fn begin(schema: &Schema, writer: W) -> Result<Self, ReportError> {
        let mut output = ::csv::WriterBuilder::new()
            // Quotes a first cell that begins with `#`, which many readers take for a comment.
            .comment(Some(b'#'))
            .from_writer(writer);
        let names = schema.columns().iter().map(|column| column.name.as_str());
        output.write_record(names).map_err(stream)?;
        Ok(Self {
            schema: schema.clone(),
            output,
        })
    }

    /// Writes a row.
    ///
    /// # Errors
    ///
    /// [`ReportError`] where the row is not one of this table, or the writer fails.
    pub fn push(&mut self, row: &Row) -> Result<(), ReportError> {
        self.schema.check(row)?;
        let cells = row.values().iter().map(cell);
        self.output.write_record(cells).map_err(stream)
    }

    /// Flushes and gives the writer back.
    ///
    /// # Errors
    ///
    /// [`ReportError::Stream`] where the writer fails.
    pub fn finish(self) -> Result<W, ReportError> {
        let writer = self.output.into_inner();
        let mut writer = writer.map_err(::csv::IntoInnerError::into_error)?;
        writer.flush()?;
        Ok(writer)
    }
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
