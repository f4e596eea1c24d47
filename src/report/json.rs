//! Rows as JSON objects whose keys are the column names, in the columns' order; `null` where there
//! is no value.

use std::io::Write;

use serde_json::{Map, Value as Json};

use super::{ReportError, Row, Table, Value};

/// One row as an indented JSON object and a line feed.
///
/// # Errors
///
/// [`ReportError::Stream`] where it cannot be written; never, there is room.
pub fn json(row: &Row) -> Result<String, ReportError> {
    let text = serde_json::to_string_pretty(&object(row)).map_err(std::io::Error::from)?;
    Ok(text + "\n")
}

/// Writes all rows of a table as an indented JSON array and a line feed.
///
/// # Errors
///
/// [`ReportError::Stream`] where the writer fails.
pub fn write_json_rows(table: &Table, mut writer: impl Write) -> Result<(), ReportError> {
    let rows = Json::Array(table.rows().iter().map(object).collect());
    serde_json::to_writer_pretty(&mut writer, &rows).map_err(std::io::Error::from)?;
    writer.write_all(b"\n")?;
    Ok(writer.flush()?)
}

fn object(row: &Row) -> Json {
    let pairs = row.schema().columns().iter().zip(row.values());
    Json::Object(
        pairs
            .map(|(column, value)| (column.name.clone(), cell(value)))
            .collect::<Map<_, _>>(),
    )
}

fn cell(value: &Value) -> Json {
    match value {
        Value::Text(text) => Json::from(text.as_str()),
        Value::Real(number) => Json::from(*number),
        Value::Integer(number) => Json::from(*number),
        Value::Empty => Json::Null,
    }
}
