//! Plain columns: numbers only, one channel a line, with the columns and units given by the caller.

use std::path::Path;

use super::columns::{Column, roles};
use super::error::{Place, ReadError};
use super::text::{Channels, Line, Separator, channels, is_number_or_blank, split};
use super::{Draft, ReadOptions};

/// Whether a line holds numbers only, so that it is no line of column names.
pub(super) fn is_numbers(path: &Path, line: Line<'_>) -> Result<bool, ReadError> {
    let separator = Separator::of(path, line)?;
    Ok(split(line.1, separator)
        .iter()
        .all(|field| is_number_or_blank(field)))
}

/// Reads data lines without column names.
pub(super) fn read(
    path: &Path,
    rows: &[Line<'_>],
    options: &ReadOptions,
) -> Result<(Draft, Channels), ReadError> {
    let first = rows[0];
    let separator = Separator::of(path, first)?;
    let columns: Vec<Column> = (1..=split(first.1, separator).len())
        .map(|number| Column {
            name: number.to_string(),
            unit: None,
        })
        .collect();
    if columns.len() < 2 {
        return Err(ReadError::OneColumn {
            path: path.to_path_buf(),
            line: first.0,
            found: first.1.trim().to_string(),
        });
    }
    if options.columns.is_none() {
        return Err(ReadError::UnnamedColumns {
            path: path.to_path_buf(),
            line: first.0,
            columns: columns.len(),
        });
    }
    let roles = roles(
        path,
        &Place::Line(first.0),
        &columns,
        options.columns.as_ref(),
    )?;
    let channels = channels(path, rows, separator, &columns, &roles)?;
    Ok((Draft::new("plain columns", &roles), channels))
}
