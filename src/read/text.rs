//! What the text formats share: lines, separators, quotes, numbers.

use std::borrow::Cow;
use std::path::Path;

use super::columns::{Column, Roles};
use super::error::{Place, ReadError};

/// A line with its number from 1, without its line ending.
pub(super) type Line<'a> = (usize, &'a str);

/// What stands between two fields.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Separator {
    Character(char),
    /// One or more blanks or tabs.
    Blanks,
}

impl Separator {
    /// The separator that a line of names or numbers uses: tab, `;`, `,` or blanks.
    ///
    /// # Errors
    ///
    /// The line has both `;` and `,` and is no row of decimal commas.
    pub fn of(path: &Path, (line, text): Line<'_>) -> Result<Self, ReadError> {
        if let Some(found) = text
            .split([';', '\t'])
            .find(|field| is_decimal_comma(field))
            && text.contains([';', '\t'])
        {
            return Err(decimal_comma(path, line, found));
        }
        match (text.contains(';'), text.contains(',')) {
            (true, true) => Err(ReadError::MixedSeparators {
                path: path.to_path_buf(),
                line,
                found: text.trim().to_string(),
            }),
            (true, false) => Ok(Self::Character(';')),
            (false, true) => match text.split_whitespace().find(|word| is_decimal_comma(word)) {
                Some(found) if text.split_whitespace().count() > 1 => {
                    Err(decimal_comma(path, line, found))
                }
                _ => Ok(Self::Character(',')),
            },
            (false, false) if text.contains('\t') => Ok(Self::Character('\t')),
            (false, false) => Ok(Self::Blanks),
        }
    }
}

/// The text without its byte-order mark, as UTF-8.
///
/// # Errors
///
/// The bytes are no text, or not in UTF-8.
pub(super) fn decode<'a>(path: &Path, bytes: &'a [u8]) -> Result<&'a str, ReadError> {
    let bytes = bytes.strip_prefix(b"\xef\xbb\xbf").unwrap_or(bytes);
    let unrecognised = || ReadError::Unrecognised {
        path: path.to_path_buf(),
        found: describe(bytes),
    };
    let is_binary =
        |byte: u8| byte.is_ascii_control() && !matches!(byte, b'\t' | b'\n' | b'\r' | b'\x0c');
    // No early end: so the compiler looks at many bytes at once.
    if bytes
        .iter()
        .fold(false, |found, byte| found | is_binary(*byte))
    {
        return Err(unrecognised());
    }
    std::str::from_utf8(bytes).map_err(|error| {
        let before = &bytes[..error.valid_up_to()];
        if before.is_empty() {
            return unrecognised();
        }
        ReadError::NotUtf8 {
            path: path.to_path_buf(),
            line: before.split(|byte| *byte == b'\n').count(),
            found: bytes[error.valid_up_to()],
        }
    })
}

/// The first bytes of a file in words.
fn describe(bytes: &[u8]) -> String {
    let shown: Vec<String> = bytes
        .iter()
        .take(8)
        .map(|byte| format!("{byte:02x}"))
        .collect();
    format!("the bytes {}", shown.join(" "))
}

/// All lines with their numbers; CR, LF and CRLF end a line.
pub(super) fn lines(text: &str) -> Vec<Line<'_>> {
    let ends = if text.contains('\n') { '\n' } else { '\r' };
    text.split(ends)
        .enumerate()
        .map(|(index, line)| (index + 1, line.trim_end_matches('\r')))
        .collect()
}

/// Lines that are neither blank nor comments.
pub(super) fn data_lines<'a>(lines: &[Line<'a>]) -> Vec<Line<'a>> {
    lines
        .iter()
        .filter(|(_, text)| {
            let text = text.trim();
            !text.is_empty() && !text.starts_with('#')
        })
        .copied()
        .collect()
}

/// Fields of a line; double quotes keep separators, and two of them stand for one.
pub(super) fn split(text: &str, separator: Separator) -> Vec<Cow<'_, str>> {
    let mut fields = Vec::new();
    split_into(text, separator, &mut fields);
    fields
}

/// The same into `fields`, which are overwritten.
fn split_into<'a>(text: &'a str, separator: Separator, fields: &mut Vec<Cow<'a, str>>) {
    fields.clear();
    let text = text.trim();
    if text.contains('"') {
        let unquoted = split_quoted(text, separator);
        return fields.extend(unquoted.into_iter().map(Cow::Owned));
    }
    let trimmed = |field: &'a str| Cow::Borrowed(field.trim());
    match separator {
        Separator::Character(letter) => fields.extend(text.split(letter).map(trimmed)),
        Separator::Blanks => {
            let words = text.split([' ', '\t']).filter(|word| !word.is_empty());
            fields.extend(words.map(trimmed));
        }
    }
}

fn split_quoted(text: &str, separator: Separator) -> Vec<String> {
    let mut fields = Vec::new();
    let mut field = String::new();
    let mut quoted = false;
    let mut was_quoted = false;
    let mut letters = text.chars().peekable();
    while let Some(letter) = letters.next() {
        match letter {
            '"' if quoted && letters.peek() == Some(&'"') => {
                letters.next();
                field.push('"');
            }
            '"' if quoted => quoted = false,
            '"' if field.trim().is_empty() => {
                field.clear();
                quoted = true;
                was_quoted = true;
            }
            _ if quoted => field.push(letter),
            _ if separator == Separator::Character(letter) => {
                fields.push(std::mem::take(&mut field));
                was_quoted = false;
            }
            ' ' | '\t' if separator == Separator::Blanks => {
                if !field.is_empty() || was_quoted {
                    fields.push(std::mem::take(&mut field));
                    was_quoted = false;
                }
            }
            _ => field.push(letter),
        }
    }
    if !field.is_empty() || was_quoted || separator != Separator::Blanks {
        fields.push(field);
    }
    fields
        .into_iter()
        .map(|field| field.trim().to_string())
        .collect()
}

/// Whether a text is a number or a blank.
pub(super) fn is_number_or_blank(text: &str) -> bool {
    text.is_empty() || number(text).is_some()
}

/// A number; `nan` in any case is one, an exponent may be written with D.
pub(super) fn number(text: &str) -> Option<f64> {
    let text = text.trim();
    text.parse()
        .ok()
        .or_else(|| text.replace(['D', 'd'], "e").parse().ok())
}

/// Whether a text is a number written with a decimal comma, such as `1,5` or `-0,25e3`.
pub(super) fn is_decimal_comma(text: &str) -> bool {
    let text = text.trim();
    text.matches(',').count() == 1
        && !text.contains('.')
        && text.split(',').all(|part| !part.is_empty())
        && text.replace(',', ".").parse::<f64>().is_ok()
}

pub(super) fn decimal_comma(path: &Path, line: usize, found: &str) -> ReadError {
    ReadError::DecimalComma {
        path: path.to_path_buf(),
        line,
        found: found.trim().to_string(),
    }
}

/// Axis and values of rows of text, in the file's order and units; and the line of each.
#[derive(Debug)]
pub(super) struct Channels {
    pub axis: Vec<f64>,
    pub values: Vec<f64>,
    pub lines: Vec<usize>,
}

/// Reads rows of fields.
///
/// # Errors
///
/// A row has another number of fields than there are columns, a decimal comma, or text in a
/// number's place.
pub(super) fn channels(
    path: &Path,
    rows: &[Line<'_>],
    separator: Separator,
    columns: &[Column],
    roles: &Roles,
) -> Result<Channels, ReadError> {
    let mut read = Channels {
        axis: Vec::with_capacity(rows.len()),
        values: Vec::with_capacity(rows.len()),
        lines: Vec::with_capacity(rows.len()),
    };
    let mut fields = Vec::with_capacity(columns.len());
    for &(line, text) in rows {
        split_into(text, separator, &mut fields);
        if fields.len() != columns.len() {
            return Err(wrong_count(path, (line, text), &fields, columns.len()));
        }
        let cell = |index: usize| {
            let field = &fields[index];
            if field.is_empty() {
                return Ok(f64::NAN);
            }
            number(field).ok_or_else(|| not_a_number(path, line, &columns[index].name, field))
        };
        let axis = cell(roles.axis)?;
        if !axis.is_finite() {
            return Err(ReadError::BlankAxis {
                path: path.to_path_buf(),
                place: Place::Line(line),
            });
        }
        read.axis.push(axis);
        read.values.push(cell(roles.value)?);
        read.lines.push(line);
    }
    if read.lines.is_empty() {
        return Err(ReadError::NoRows {
            path: path.to_path_buf(),
        });
    }
    Ok(read)
}

fn not_a_number(path: &Path, line: usize, column: &str, field: &str) -> ReadError {
    if is_decimal_comma(field) {
        return decimal_comma(path, line, field);
    }
    ReadError::NotANumber {
        path: path.to_path_buf(),
        place: Place::Line(line),
        column: column.to_string(),
        found: field.to_string(),
    }
}

/// A wrong number of fields, and what made it: one column, or decimal commas between commas.
fn wrong_count(
    path: &Path,
    (line, text): Line<'_>,
    fields: &[Cow<'_, str>],
    expected: usize,
) -> ReadError {
    let whole = |field: &Cow<'_, str>| field.trim_start_matches(['+', '-']).parse::<u64>().is_ok();
    if fields.len() == 2 * expected && fields.iter().skip(1).step_by(2).all(whole) {
        let found = format!("{},{}", fields[0], fields[1]);
        if is_decimal_comma(&found) {
            return decimal_comma(path, line, &found);
        }
    }
    if fields.len() == 1 {
        return ReadError::OneColumn {
            path: path.to_path_buf(),
            line,
            found: text.trim().to_string(),
        };
    }
    ReadError::FieldCount {
        path: path.to_path_buf(),
        line,
        found: fields.len(),
        expected,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn quotes_keep_separators_and_double_to_one() {
        let comma = Separator::Character(',');
        assert_eq!(
            split(r#"a,"b,c", "d ""e""""#, comma),
            ["a", "b,c", "d \"e\""]
        );
        assert_eq!(split("1,,", comma), ["1", "", ""]);
        assert_eq!(
            split(r#"  1   "" "two words"  3"#, Separator::Blanks),
            ["1", "", "two words", "3"]
        );
    }

    #[test]
    fn decimal_commas_are_told_from_lists() {
        for text in ["1,5", "-0,25", "3,1e-2"] {
            assert!(is_decimal_comma(text), "{text}");
        }
        for text in ["1.5", "1,", "1,5,2", "1.0,2", "a,b", "1"] {
            assert!(!is_decimal_comma(text), "{text}");
        }
    }

    #[test]
    fn numbers_are_read_as_fortran_and_people_write_them() {
        assert_eq!(number("1.5D+02"), Some(150.0));
        assert_eq!(number("-3e1"), Some(-30.0));
        assert!(number("NaN").unwrap().is_nan());
        assert_eq!(number("two"), None);
    }
}
