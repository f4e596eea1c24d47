//! The sample table: CSV with a row a line pair.

use crate::derive::Input;
use crate::run::{Given, RunError, RunSheet, nearest};
use std::collections::HashMap;
use std::path::{Path, PathBuf};

/// One row: a line pair of a source.
#[derive(Clone, Debug, PartialEq)]
pub struct SampleRow {
    /// Line of the file, from 1.
    pub line: u64,
    /// Name of the source.
    pub id: String,
    /// Spectrum of the thick line, as given.
    pub thick_file: PathBuf,
    /// Spectrum of the thin line.
    pub thin_file: PathBuf,
    /// Name of the thick line.
    pub thick_line: String,
    /// Name of the thin line.
    pub thin_line: String,
    /// Group, such as an evolutionary stage.
    pub group: Option<String>,
    /// What is given of the source.
    pub given: Vec<(Input, Given)>,
}

/// A sample table.
#[derive(Clone, Debug, PartialEq)]
pub struct SampleTable {
    /// Its rows; those of one source need not follow each other.
    pub rows: Vec<SampleRow>,
    /// Columns that nothing is done with.
    pub unused: Vec<String>,
}

/// Columns that every table has.
const REQUIRED: [&str; 5] = ["id", "thick_file", "thin_file", "thick_line", "thin_line"];
const GROUP: &str = "group";
const ERR: &str = "_err";

/// What a column holds.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Role {
    Required(usize),
    Group,
    Value(Input),
    Err(Input),
    Unused,
}

impl SampleTable {
    /// Reads a table.
    ///
    /// # Errors
    ///
    /// [`RunError::File`] where it cannot be read, [`RunError::Sample`] with the line where it is no
    /// sample table: a column missing, twice or in another unit, a cell that is no number, a source with the
    /// same lines twice or with different properties, no row.
    pub fn read(path: &Path) -> Result<Self, RunError> {
        let bytes = std::fs::read(path).map_err(|source| RunError::File {
            path: path.to_owned(),
            source,
        })?;
        Self::parse(&bytes, path)
    }

    /// Parses a table; `path` serves messages only.
    ///
    /// # Errors
    ///
    /// As [`SampleTable::read`].
    pub fn parse(bytes: &[u8], path: &Path) -> Result<Self, RunError> {
        let at = |line: u64| Place { path, line };
        let text = std::str::from_utf8(bytes).map_err(|_| {
            at(1).error("bytes that are not UTF-8 text", "a sample table in CSV", "")
        })?;
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        let mut reader = csv::ReaderBuilder::new()
            .has_headers(false)
            .comment(Some(b'#'))
            .trim(csv::Trim::All)
            .flexible(true)
            .from_reader(text.as_bytes());
        let mut records = reader.records();
        let mut lines = Lines {
            text,
            byte: 0,
            line: 1,
        };
        let mut next = || -> Option<Result<(csv::StringRecord, u64), RunError>> {
            Some(match records.next()? {
                Ok(record) => {
                    let line = lines.of(&record);
                    Ok((record, line))
                }
                Err(error) => {
                    let line = error.position().map_or(1, csv::Position::line);
                    Err(at(line).error(&error.to_string(), "a row of CSV", ""))
                }
            })
        };
        let (header, header_line) = next().ok_or_else(|| {
            at(1).error("an empty table", "a line of column names", HEADER_HINT)
        })??;
        let names: Vec<&str> = header.iter().collect();
        let roles = roles(&names, &at(header_line))?;
        let mut rows = Vec::new();
        while let Some(record) = next() {
            let (record, line) = record?;
            let place = at(line);
            if record.iter().all(str::is_empty) {
                continue;
            }
            if record.len() != names.len() {
                let found = format!("{} cells", record.len());
                let expected = format!("{}, one a column", names.len());
                return Err(place.error(&found, &expected, "quote cells that hold commas"));
            }
            rows.push(row(&record, &names, &roles, &place)?);
        }
        if rows.is_empty() {
            let found = "no row below the column names";
            return Err(at(header_line).error(found, "a row a source", ""));
        }
        check_sources(&rows, path)?;
        let unused = names.iter().zip(&roles);
        Ok(Self {
            unused: (unused.filter(|(_, role)| **role == Role::Unused))
                .map(|(name, _)| (*name).to_owned())
                .collect(),
            rows,
        })
    }
}

impl SampleRow {
    /// The run sheet of the row: that of the whole sample with what the row says.
    #[must_use]
    pub fn sheet(&self, sample: &RunSheet) -> RunSheet {
        let mut sheet = sample.clone();
        sheet.source.name = Some(self.id.clone());
        for (input, given) in &self.given {
            sheet.source.set(*input, *given);
        }
        for (section, file, line) in [
            (&mut sheet.thick, &self.thick_file, &self.thick_line),
            (&mut sheet.thin, &self.thin_file, &self.thin_line),
        ] {
            section.file = Some(file.clone());
            section.line = Some(line.clone());
        }
        sheet
    }

    /// The line pair in words.
    #[must_use]
    pub fn line_pair(&self) -> String {
        format!("{} / {}", self.thick_line, self.thin_line)
    }
}

const HEADER_HINT: &str =
    "a sample table begins with `id,thick_file,thin_file,thick_line,thin_line`";

/// Lines of records: the library's own begin with the comments and empty lines above them.
struct Lines<'a> {
    text: &'a str,
    byte: usize,
    line: u64,
}

impl Lines<'_> {
    /// The line of a record, from 1; records come in their order.
    fn of(&mut self, record: &csv::StringRecord) -> u64 {
        let begin = record.position().map_or(0, csv::Position::byte);
        let begin = usize::try_from(begin).unwrap_or(usize::MAX);
        while let Some(end) = self.text[self.byte..].find('\n') {
            let line = self.text[self.byte..self.byte + end].trim();
            let passed_over = line.is_empty() || line.starts_with('#');
            if self.byte >= begin && !passed_over {
                break;
            }
            self.byte += end + 1;
            self.line += 1;
        }
        self.line
    }
}

/// Where something stands.
struct Place<'a> {
    path: &'a Path,
    line: u64,
}

impl Place<'_> {
    fn error(&self, found: &str, expected: &str, hint: &str) -> RunError {
        RunError::Sample {
            path: self.path.to_owned(),
            line: self.line,
            message: format!("{found}, expected {expected}"),
            hint: (!hint.is_empty()).then(|| hint.to_owned()),
        }
    }
}

/// What each column holds.
fn roles(names: &[&str], place: &Place<'_>) -> Result<Vec<Role>, RunError> {
    for (index, name) in names.iter().enumerate() {
        if !name.is_empty() && names[..index].contains(name) {
            return Err(place.error(
                &format!("the column `{name}` twice"),
                "each column once",
                "rename or remove one of the two",
            ));
        }
    }
    let roles: Vec<Role> = names.iter().map(|name| role(name)).collect();
    for (index, required) in REQUIRED.iter().enumerate() {
        if roles.contains(&Role::Required(index)) {
            continue;
        }
        let spare = names.iter().zip(&roles);
        let spare = spare.filter(|(_, role)| **role == Role::Unused);
        let hint = nearest(required, spare.map(|(name, _)| *name)).map_or_else(
            || HEADER_HINT.to_owned(),
            |found| format!("did you mean `{required}` by `{found}`?"),
        );
        let found = format!("no column `{required}` among {}", names.join(", "));
        return Err(place.error(&found, &format!("`{}`", REQUIRED.join("`, `")), &hint));
    }
    for (name, role) in names.iter().zip(&roles) {
        match role {
            Role::Unused => refuse_meant_column(name, place)?,
            Role::Err(input) if !roles.contains(&Role::Value(*input)) => {
                let found = format!("the column `{name}` without `{}`", input.key());
                return Err(place.error(&found, "the value beside its error", ""));
            }
            _ => {}
        }
    }
    Ok(roles)
}

fn role(name: &str) -> Role {
    if let Some(index) = REQUIRED.iter().position(|required| *required == name) {
        return Role::Required(index);
    }
    if name == GROUP {
        return Role::Group;
    }
    match (Input::from_key(name), name.strip_suffix(ERR)) {
        (Some(input), _) => Role::Value(input),
        (None, Some(stem)) => Input::from_key(stem).map_or(Role::Unused, Role::Err),
        (None, None) => Role::Unused,
    }
}

/// Refuses a column that is a property of the source but for a slip or another unit.
fn refuse_meant_column(name: &str, place: &Place<'_>) -> Result<(), RunError> {
    const A_SLIP: f64 = 0.8;
    let stem = name.strip_suffix(ERR).unwrap_or(name);
    for input in Input::ALL {
        let key = input.key();
        let unit = key.rsplit_once('_').filter(|_| !input.unit().is_empty());
        let other_unit = unit.is_some_and(|(quantity, _)| {
            stem == quantity
                || (stem.strip_prefix(quantity))
                    .and_then(|rest| rest.strip_prefix('_'))
                    .is_some_and(|unit| !unit.contains('_') && !unit.is_empty())
        });
        let slip = strsim::normalized_damerau_levenshtein(stem, key) >= A_SLIP;
        if other_unit || slip {
            let found = format!("the column `{name}`");
            let hint = if other_unit {
                format!(
                    "give it in {} and name it `{key}`, or rename it",
                    input.unit()
                )
            } else {
                format!("did you mean `{key}`? Another name is passed over")
            };
            return Err(place.error(&found, &format!("`{key}`"), &hint));
        }
    }
    Ok(())
}

fn row(
    record: &csv::StringRecord,
    names: &[&str],
    roles: &[Role],
    place: &Place<'_>,
) -> Result<SampleRow, RunError> {
    let mut required = REQUIRED.map(|_| "");
    let mut group = None;
    let (mut values, mut errs) = (Vec::new(), HashMap::new());
    for ((cell, name), role) in record.iter().zip(names).zip(roles) {
        let number = || -> Result<f64, RunError> {
            (cell.parse().ok())
                .filter(|number: &f64| number.is_finite())
                .ok_or_else(|| {
                    let found = format!("`{cell}` in column `{name}`");
                    place.error(&found, "a number", "the unit is that of the column's name; leave the cell empty where nothing is known")
                })
        };
        match role {
            Role::Required(_) if cell.is_empty() => {
                return Err(place.error(&format!("nothing in column `{name}`"), "a text", ""));
            }
            Role::Required(index) => required[*index] = cell,
            Role::Group => group = (!cell.is_empty()).then(|| cell.to_owned()),
            Role::Value(input) if !cell.is_empty() => values.push((*input, number()?)),
            Role::Err(input) if !cell.is_empty() => {
                errs.insert(input.key(), number()?);
            }
            _ => {}
        }
    }
    let mut given = Vec::new();
    for (input, value) in values {
        given.push(match errs.remove(input.key()) {
            Some(err) => (input, Given::WithError([value, err])),
            None => (input, Given::Value(value)),
        });
    }
    if let Some(key) = errs.into_keys().min() {
        let found = format!("an error of `{key}` without its value");
        return Err(place.error(&found, "both or neither", ""));
    }
    let [id, thick_file, thin_file, thick_line, thin_line] = required;
    Ok(SampleRow {
        line: place.line,
        id: id.to_owned(),
        thick_file: thick_file.into(),
        thin_file: thin_file.into(),
        thick_line: thick_line.to_owned(),
        thin_line: thin_line.to_owned(),
        group,
        given,
    })
}

/// Refuses a source with one line pair twice, or with properties that differ from row to row.
fn check_sources(rows: &[SampleRow], path: &Path) -> Result<(), RunError> {
    let canonical = |name: &str| crate::line::find(name).map_or(name.to_owned(), |line| line.name);
    let mut pairs = HashMap::new();
    let mut first: HashMap<&str, &SampleRow> = HashMap::new();
    for row in rows {
        let place = Place {
            path,
            line: row.line,
        };
        let pair = (
            row.id.as_str(),
            canonical(&row.thick_line),
            canonical(&row.thin_line),
        );
        if let Some(line) = pairs.insert(pair, row.line) {
            let found = format!("`{}` with {} as in line {line}", row.id, row.line_pair());
            let hint =
                "name the sources apart; one source may have several rows with different lines";
            return Err(place.error(&found, "each source once with the same lines", hint));
        }
        let earlier = *first.entry(&row.id).or_insert(row);
        if earlier.given != row.given || earlier.group != row.group {
            let found = format!(
                "other properties of `{}` than in line {}",
                row.id, earlier.line
            );
            let hint = "give a source the same group and properties in all its rows";
            return Err(place.error(&found, "the same", hint));
        }
    }
    Ok(())
}
