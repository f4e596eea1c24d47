//! CSV: a line of column names that carry the units, then one channel a line.
//!
//! Comma, `;`, tab or blanks separate; `#` starts a comment line; empty and `nan` are blank.

use std::path::Path;

use super::columns::{Column, roles};
use super::error::{Place, ReadError};
use super::text::{Channels, Line, Separator, channels, split};
use super::{Draft, ReadOptions};

/// Reads data lines of which the first names the columns.
pub(super) fn read(
    path: &Path,
    rows: &[Line<'_>],
    options: &ReadOptions,
) -> Result<(Draft, Channels), ReadError> {
    let Some((&header, rows)) = rows.split_first() else {
        return Err(ReadError::NoRows {
            path: path.to_path_buf(),
        });
    };
    let separator = Separator::of(path, header)?;
    let columns: Vec<Column> = split(header.1, separator)
        .iter()
        .map(|name| Column::from_header(name))
        .collect();
    if columns.len() < 2 {
        return Err(ReadError::OneColumn {
            path: path.to_path_buf(),
            line: header.0,
            found: header.1.trim().to_string(),
        });
    }
    let place = Place::Line(header.0);
    let roles = roles(path, &place, &columns, options.columns.as_ref())?;
    let channels = channels(path, rows, separator, &columns, &roles)?;
    Ok((Draft::new("CSV", &roles), channels))
}
