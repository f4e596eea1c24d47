//! ECSV: CSV below a YAML header that holds column names and units (astropy APE 6).
//!
//! The header's YAML is read as far as ECSV writers use it: flow or block mappings of scalars, with
//! single, double or no quotes. Nested values are passed over. Of the meta data, the keywords that
//! mean something in FITS are taken: RESTFRQ or RESTFREQ (Hz), SPECSYS, OBJECT, BMAJ and BMIN (deg).

use std::path::Path;

use super::columns::{Column, roles};
use super::error::{Place, ReadError};
use super::text::{Channels, Line, Separator, channels, data_lines, number, split};
use super::{Draft, ReadOptions};
use crate::spectrum::{BeamArcsec, Frame};

/// First line of every ECSV file.
pub(super) const MAGIC: &str = "# %ECSV ";

/// Reads the lines of an ECSV file.
pub(super) fn read(
    path: &Path,
    lines: &[Line<'_>],
    options: &ReadOptions,
) -> Result<(Draft, Channels), ReadError> {
    let header = Header::parse(path, lines)?;
    let rows = data_lines(lines);
    let Some((&names, rows)) = rows.split_first() else {
        return Err(ReadError::NoRows {
            path: path.to_path_buf(),
        });
    };
    header.check_names(path, names)?;
    let place = Place::Line(names.0);
    let columns = &header.columns;
    if columns.len() < 2 {
        return Err(ReadError::OneColumn {
            path: path.to_path_buf(),
            line: names.0,
            found: names.1.trim().to_string(),
        });
    }
    let roles = roles(path, &place, columns, options.columns.as_ref())?;
    let channels = channels(path, rows, header.separator, columns, &roles)?;
    let mut draft = Draft::new("ECSV", &roles);
    header.state(&mut draft);
    Ok((draft, channels))
}

/// What an ECSV header says.
struct Header {
    columns: Vec<Column>,
    separator: Separator,
    meta: Vec<(String, String)>,
}

impl Header {
    fn parse(path: &Path, lines: &[Line<'_>]) -> Result<Self, ReadError> {
        let mut header = Self {
            columns: Vec::new(),
            separator: Separator::Blanks,
            meta: Vec::new(),
        };
        for section in sections(lines) {
            match section.key.as_str() {
                "delimiter" => header.separator = delimiter(path, &section)?,
                "datatype" => {
                    for (line, item) in section.items() {
                        header.columns.push(column(path, line, &item)?);
                    }
                }
                "meta" => header
                    .meta
                    .extend(section.items().iter().flat_map(|(_, item)| mapping(item))),
                _ => {}
            }
        }
        if header.columns.is_empty() {
            return Err(ReadError::EcsvHeader {
                path: path.to_path_buf(),
                line: 1,
                found: "no `datatype` list".into(),
                expected: "a list of columns with name, unit and datatype",
            });
        }
        Ok(header)
    }

    /// The line of names must repeat the names of the header.
    fn check_names(&self, path: &Path, names: Line<'_>) -> Result<(), ReadError> {
        let written = split(names.1, self.separator);
        if written
            .iter()
            .ne(self.columns.iter().map(|column| column.name.as_str()))
        {
            return Err(ReadError::EcsvHeader {
                path: path.to_path_buf(),
                line: names.0,
                found: format!("`{}`, other columns than", names.1.trim()),
                expected: "the names of its `datatype` list",
            });
        }
        Ok(())
    }

    fn meta(&self, key: &str) -> Option<&str> {
        let (_, value) = self.meta.iter().find(|(name, _)| name == key)?;
        (!value.is_empty()).then_some(value.as_str())
    }

    /// Takes over what the meta data state.
    fn state(&self, draft: &mut Draft) {
        let quantity = |key| self.meta(key).and_then(number);
        draft.rest_frequency_hz = quantity("RESTFRQ").or_else(|| quantity("RESTFREQ"));
        draft.frame = self.meta("SPECSYS").map(Frame::from_name);
        draft.object = self.meta("OBJECT").map(str::to_string);
        draft.beam = quantity("BMAJ").map(|major| BeamArcsec {
            major: major * 3600.0,
            minor: quantity("BMIN").unwrap_or(major) * 3600.0,
        });
    }
}

/// A top-level key of the YAML header with its value and the lines below it.
struct Section {
    key: String,
    line: usize,
    value: String,
    below: Vec<(usize, String)>,
}

impl Section {
    /// Items of a list, or the whole value as one item; each with its line.
    fn items(&self) -> Vec<(usize, String)> {
        let mut items: Vec<(usize, String)> = Vec::new();
        if self.value.starts_with('{') {
            items.push((self.line, self.value.clone()));
        }
        for (line, text) in &self.below {
            match (text.trim_start().strip_prefix("- "), items.last_mut()) {
                (Some(start), _) => items.push((*line, start.trim().to_string())),
                (None, Some((_, item))) => {
                    item.push('\n');
                    item.push_str(text.trim());
                }
                (None, None) => items.push((*line, text.trim().to_string())),
            }
        }
        items
    }
}

/// The YAML header's top-level keys; the header ends at the first line that is no comment.
fn sections(lines: &[Line<'_>]) -> Vec<Section> {
    let mut sections: Vec<Section> = Vec::new();
    for (line, text) in lines {
        let Some(yaml) = text.strip_prefix('#') else {
            break;
        };
        let yaml = yaml.strip_prefix(' ').unwrap_or(yaml).trim_end();
        let top_level = !yaml.starts_with([' ', '-', '%']);
        match yaml.split_once(':') {
            Some((key, value)) if top_level => sections.push(Section {
                key: key.trim().to_string(),
                line: *line,
                value: value.trim().to_string(),
                below: Vec::new(),
            }),
            _ => {
                if let Some(section) = sections.last_mut() {
                    section.below.push((*line, yaml.to_string()));
                }
            }
        }
    }
    sections
}

fn delimiter(path: &Path, section: &Section) -> Result<Separator, ReadError> {
    match unquote(&section.value).as_str() {
        "," => Ok(Separator::Character(',')),
        " " | "" => Ok(Separator::Blanks),
        other => Err(ReadError::EcsvHeader {
            path: path.to_path_buf(),
            line: section.line,
            found: format!("the delimiter `{other}`"),
            expected: "a blank or a comma",
        }),
    }
}

fn column(path: &Path, line: usize, item: &str) -> Result<Column, ReadError> {
    let pairs = mapping(item);
    let find = |key: &str| {
        pairs
            .iter()
            .find(|(name, _)| name == key)
            .map(|(_, value)| value.clone())
    };
    let name = find("name").ok_or_else(|| ReadError::EcsvHeader {
        path: path.to_path_buf(),
        line,
        found: format!("`{item}`"),
        expected: "a column with a name, such as {name: velocity, unit: km / s, datatype: float64}",
    })?;
    Ok(Column {
        name,
        unit: find("unit"),
    })
}

/// Keys and scalar values of a flow mapping `{a: b, c: 'd'}` or of block lines `a: b`.
fn mapping(item: &str) -> Vec<(String, String)> {
    let flow = item
        .strip_prefix('{')
        .map(|rest| rest.trim_end().trim_end_matches('}'));
    let parts = match flow {
        Some(inside) => split_outside(inside, ','),
        None => item.lines().map(str::to_string).collect(),
    };
    parts
        .iter()
        .filter_map(|part| {
            let pair = split_outside(part, ':');
            let (key, value) = pair.split_first()?;
            let value = value.join(":");
            let nested = value.trim_start().starts_with(['{', '[', '!']);
            (!nested && !key.trim().is_empty()).then(|| (unquote(key), unquote(&value)))
        })
        .collect()
}

/// Splits at a letter that stands outside quotes and brackets.
fn split_outside(text: &str, at: char) -> Vec<String> {
    let mut parts = vec![String::new()];
    let mut quote: Option<char> = None;
    let mut depth = 0_i32;
    let mut escaped = false;
    for letter in text.chars() {
        let mut separates = false;
        match (quote, letter) {
            (Some('"'), '\\') if !escaped => escaped = true,
            (Some(open), close) if open == close && !escaped => quote = None,
            (Some(_), _) => escaped = false,
            (None, '"' | '\'') => quote = Some(letter),
            (None, '{' | '[') => depth += 1,
            (None, '}' | ']') => depth -= 1,
            (None, _) => separates = letter == at && depth == 0,
        }
        if separates {
            parts.push(String::new());
        } else if let Some(part) = parts.last_mut() {
            part.push(if letter == '\n' { ' ' } else { letter });
        }
    }
    parts
}

/// A YAML scalar without its quotes.
fn unquote(text: &str) -> String {
    let text = text.trim();
    let inside = |quote: char| {
        text.strip_prefix(quote)
            .and_then(|rest| rest.strip_suffix(quote))
    };
    if let Some(single) = inside('\'') {
        single.replace("''", "'")
    } else if let Some(double) = inside('"') {
        double.replace("\\\"", "\"").replace("\\\\", "\\")
    } else {
        text.to_string()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn header(text: &str) -> Header {
        Header::parse(Path::new("f"), &super::super::text::lines(text)).unwrap()
    }

    #[test]
    fn flow_and_block_mappings_say_the_same() {
        let flow = header(
            "# %ECSV 1.0\n# ---\n# delimiter: ','\n# datatype:\n# - {name: v, unit: km / s, datatype: float64,\n#   description: 'a: b, {c}'}\n# - {name: \"T \\\" x\", unit: K, datatype: float32}\n",
        );
        let block = header(
            "# %ECSV 1.0\n# ---\n# delimiter: \",\"\n# datatype:\n# - name: v\n#   unit: km / s\n#   datatype: float64\n# - name: 'T \" x'\n#   unit: K\n",
        );
        assert_eq!(flow.columns, block.columns);
        assert_eq!(flow.separator, Separator::Character(','));
        assert_eq!(block.separator, Separator::Character(','));
        assert_eq!(flow.columns[1].name, "T \" x");
        assert_eq!(flow.columns[0].unit.as_deref(), Some("km / s"));
    }

    #[test]
    fn meta_data_are_taken_as_far_as_they_are_scalars() {
        let header = header(
            "# %ECSV 1.0\n# ---\n# datatype:\n# - {name: v, datatype: float64}\n# meta: !!omap\n# - {RESTFRQ: 89188524700.0}\n# - {SPECSYS: LSRK}\n# - comments: [a, b]\n# - {nested: {a: 1, b: 2}}\n# - {OBJECT: 'clump: a'}\n# schema: astropy-2.0\n",
        );
        assert_eq!(header.meta("RESTFRQ"), Some("89188524700.0"));
        assert_eq!(header.meta("OBJECT"), Some("clump: a"));
        assert_eq!(header.meta("nested"), None);
    }
}
