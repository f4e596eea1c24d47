//! Rows as JSON objects whose keys are the column names, in the columns' order; `null` where there
//! is no value.

use std::io::Write;

use serde_json::{Map, Value as Json};

use super::{ReportError, Row, Table, Value};

/// Writes one row as an indented JSON object and a line feed.
///
/// # Errors
///
/// [`ReportError::Stream`] where the writer fails.
pub fn write_json(row: &Row, writer: impl Write) -> Result<(), ReportError> {
    pretty(&object(row), writer)
}

/// Writes all rows of a table as an indented JSON array and a line feed.
///
/// # Errors
///
/// [`ReportError::Stream`] where the writer fails.
pub fn write_json_rows(table: &Table, writer: impl Write) -> Result<(), ReportError> {
    pretty(
        &Json::Array(table.rows().iter().map(object).collect()),
        writer,
    )
}

fn object(row: &Row) -> Json {
    let pairs = row.schema().columns().iter().zip(row.values());
    Json::Object(
        pairs
            .map(|(column, value)| (column.name.clone(), json(value)))
            .collect::<Map<_, _>>(),
    )
}

fn json(value: &Value) -> Json {
    match value {
        Value::Text(text) => Json::from(text.as_str()),
        Value::Real(number) => Json::from(*number),
        Value::Integer(number) => Json::from(*number),
        Value::Empty => Json::Null,
    }
}

fn pretty(value: &Json, mut writer: impl Write) -> Result<(), ReportError> {
    serde_json::to_writer_pretty(&mut writer, value).map_err(std::io::Error::from)?;
    writer.write_all(b"\n")?;
    writer.flush()?;
    Ok(())
}
