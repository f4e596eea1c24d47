//! What a directory of results rests on.

use super::RunError;
use crate::report::citation::{Citation, citation, known_columns};
use std::collections::BTreeSet;
use std::path::{Path, PathBuf};

/// Tables that say by their columns which methods were used.
const TABLES: [&str; 3] = ["pair.csv", "ranking.csv", "pointings.csv"];
/// The table that says it by its rows.
const STATISTICS: &str = "statistics.csv";

/// Methods and publications behind the results of a directory: those whose columns have a value.
///
/// # Errors
///
/// [`RunError::NoResults`] where no table of results is there, [`RunError::File`] where one cannot be read.
pub fn cite_results(directory: &Path) -> Result<Citation, RunError> {
    let mut columns = BTreeSet::new();
    let mut tables = 0;
    for name in TABLES {
        let path = directory.join(name);
        if path.is_file() {
            tables += 1;
            columns.extend(filled_columns(&path)?);
        }
    }
    if tables == 0 {
        return Err(RunError::NoResults {
            path: directory.to_owned(),
            expected: TABLES.join(", "),
        });
    }
    let path = directory.join(STATISTICS);
    if path.is_file() {
        columns.extend(first_cells(&path)?);
    }
    Ok(citation(&columns, env!("CARGO_PKG_VERSION")))
}

/// Methods and publications behind result columns of these names.
///
/// # Errors
///
/// [`RunError::Setting`] for a column that no method is known by.
pub fn cite_columns(columns: &[String]) -> Result<Citation, RunError> {
    for column in columns {
        if !known_columns().any(|known| known == column) {
            let known: BTreeSet<&str> = known_columns().collect();
            return Err(RunError::Setting {
                key: "for".to_owned(),
                message: format!(
                    "`{column}`, expected some of {}",
                    known.iter().copied().collect::<Vec<_>>().join(", ")
                ),
                hint: super::nearest(column, known.iter().copied())
                    .map(|name| format!("did you mean `{name}`?")),
            });
        }
    }
    let columns = columns.iter().cloned().collect();
    Ok(citation(&columns, env!("CARGO_PKG_VERSION")))
}

/// Methods and publications of everything that Inrush does.
#[must_use]
pub fn cite_all() -> Citation {
    let columns = known_columns().map(str::to_owned).collect();
    citation(&columns, env!("CARGO_PKG_VERSION"))
}

fn reader(path: &Path) -> Result<csv::Reader<std::fs::File>, RunError> {
    csv::Reader::from_path(path).map_err(|error| unreadable(path, error))
}

fn unreadable(path: &Path, error: csv::Error) -> RunError {
    RunError::File {
        path: PathBuf::from(path),
        source: std::io::Error::other(error),
    }
}

/// Columns with a value in any row.
fn filled_columns(path: &Path) -> Result<Vec<String>, RunError> {
    let mut reader = reader(path)?;
    let names = (reader.headers().map_err(|error| unreadable(path, error))?).clone();
    let mut filled = vec![false; names.len()];
    for record in reader.records() {
        let record = record.map_err(|error| unreadable(path, error))?;
        for (filled, cell) in filled.iter_mut().zip(&record) {
            *filled |= !cell.is_empty();
        }
    }
    let names = names.iter().zip(filled).filter(|(_, filled)| *filled);
    Ok(names.map(|(name, _)| name.to_owned()).collect())
}

/// The first cell of every row.
fn first_cells(path: &Path) -> Result<Vec<String>, RunError> {
    let mut reader = reader(path)?;
    (reader.records())
        .map(|record| {
            let record = record.map_err(|error| unreadable(path, error))?;
            Ok(record.get(0).unwrap_or_default().to_owned())
        })
        .collect()
}
