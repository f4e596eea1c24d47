//! Tables as ECSV 1.0 (Astropy Proposal for Enhancement 6): CSV beneath a YAML header that holds
//! units, types, descriptions and meta data.

use std::fmt::Write as _;
use std::io::Write;

use super::{Column, Kind, ReportError, Schema, Table, Value, csv, write_csv};

/// Writes a table as ECSV.
///
/// # Errors
///
/// [`ReportError::Stream`] where the writer fails.
pub fn write_ecsv(table: &Table, mut writer: impl Write) -> Result<(), ReportError> {
    writer.write_all(header(table.schema(), &table.meta).as_bytes())?;
    write_csv(table, writer)
}

/// The lines that stand above the CSV.
pub(super) fn header(schema: &Schema, meta: &[(String, Value)]) -> String {
    let mut text = String::from("# %ECSV 1.0\n# ---\n# delimiter: ','\n# datatype:\n");
    for column in schema.columns() {
        // Writing to a string cannot fail.
        let _ = writeln!(text, "# - {{{}}}", column_fields(column));
    }
    if !meta.is_empty() {
        text.push_str("# meta: !!omap\n");
        for (key, value) in meta {
            let _ = writeln!(text, "# - {{{}: {}}}", quoted(key), scalar(value));
        }
    }
    text
}

fn column_fields(column: &Column) -> String {
    let mut fields = vec![format!("name: {}", quoted(&column.name))];
    if let Some(unit) = &column.unit {
        fields.push(format!("unit: {}", quoted(unit)));
    }
    let datatype = match column.kind {
        Kind::Text => "string",
        Kind::Real => "float64",
        Kind::Integer => "int64",
    };
    fields.push(format!("datatype: {datatype}"));
    fields.push(format!("description: {}", quoted(&column.description)));
    fields.join(", ")
}

fn scalar(value: &Value) -> String {
    match value {
        Value::Text(text) => quoted(text),
        // YAML 1.1 takes an exponent for a number only with a decimal point and a sign.
        Value::Real(number) => yaml_real(*number),
        Value::Integer(_) => csv::cell(value),
        Value::Empty => "null".to_owned(),
    }
}

fn yaml_real(number: f64) -> String {
    let text = format!("{number:?}");
    let Some((mantissa, exponent)) = text.split_once('e') else {
        return text;
    };
    let point = if mantissa.contains('.') { "" } else { ".0" };
    let sign = if exponent.starts_with('-') { "" } else { "+" };
    format!("{mantissa}{point}e{sign}{exponent}")
}

/// A double-quoted YAML string; JSON's escapes are a subset of YAML's.
fn quoted(text: &str) -> String {
    serde_json::Value::from(text).to_string()
}

#[cfg(test)]
mod tests {
    use super::yaml_real;

    #[test]
    fn exponents_have_a_point_and_a_sign() {
        // YAML 1.1, float language-independent type: [-+]?([0-9][0-9_]*)?\.[0-9.]*([eE][-+][0-9]+)?
        for (number, text) in [
            (0.5, "0.5"),
            (1e-7, "1.0e-7"),
            (1.5e20, "1.5e+20"),
            (-3.0, "-3.0"),
        ] {
            assert_eq!(yaml_real(number), text);
        }
    }
}
