//! FITS binary tables: one channel a row, or one spectrum a row in a vector column.
//!
//! A keyword of a row's spectrum is looked up as a column of that name first, then as a card of the
//! header; the axis of a vector column n also as 1CTYPn, 1CRVLn, 1CDLTn, 1CRPXn, 1CUNIn, `RFRQna` and
//! `SPECna` (FITS standard 4.0, section 8.2 and table 22).

use std::path::Path;

use fitskit::{BinCellValue, BinColumnType, BinTable};

use super::columns::{self, Column, ColumnChoice, Part};
use super::error::{Place, ReadError};
use super::fits::{Unit, base_unit, value_unit, whole};
use super::fits_image::{axis_factor, axis_problem, velocity_reference};
use super::pointings::{PointingPlace, PointingSpectrum};
use super::spectral_axis::{self, Keywords};
use super::unit::{AxisUnit, ValueUnit, nearest};
use super::{Draft, ReadOptions, RowChoice};
use crate::spectrum::{BeamArcsec, Frame, RawSpectrum};

/// Most columns that the standard allows.
const LIMIT_COLUMNS: i64 = 999;

/// A binary table whose columns fit its rows.
struct Table<'u, 'a> {
    path: &'u Path,
    unit: &'u Unit<'a>,
    columns: Vec<Column>,
    cells: BinTable,
}

/// Reads the spectrum of a table.
pub(super) fn read(
    path: &Path,
    unit: &Unit<'_>,
    options: &ReadOptions,
) -> Result<RawSpectrum, ReadError> {
    let table = Table::open(path, unit)?;
    if table.rows() == 0 {
        return Err(ReadError::NoRows {
            path: path.to_path_buf(),
        });
    }
    if let Some(value) = table.vector_column(options)? {
        return table.one_spectrum_a_row(value, options);
    }
    if let Some(choice) = &options.select {
        return Err(ReadError::RowChoiceUnused {
            path: path.to_path_buf(),
            wanted: choice.to_string(),
        });
    }
    table.one_channel_a_row(options)
}

/// Reads every spectrum of a table with one a row, and where each was taken.
pub(super) fn read_pointings(
    path: &Path,
    unit: &Unit<'_>,
    options: &ReadOptions,
) -> Result<Vec<PointingSpectrum>, ReadError> {
    let table = Table::open(path, unit)?;
    if table.rows() == 0 {
        return Err(ReadError::NoRows {
            path: path.to_path_buf(),
        });
    }
    let value = table.vector_column(options)?.ok_or_else(|| {
        let place = unit.card("TFORM");
        columns::no_column_for(path, &place, &table.columns, "spectrum")
    })?;
    let (on_sky, columns) = table.place_columns()?;
    let id = table.column_named("id");
    (0..table.rows())
        .map(|row| {
            let mut at = [0.0; 2];
            for (value, (column, factor)) in at.iter_mut().zip(columns) {
                let found = table.numbers(row, column)?.first().copied();
                *value = factor
                    * found.filter(|found| found.is_finite()).ok_or_else(|| {
                        table.not_a_number(
                            row,
                            column,
                            &found.map_or_else(String::new, |v| v.to_string()),
                        )
                    })?;
            }
            Ok(PointingSpectrum {
                id: id
                    .and_then(|column| table.cell_text(row, column))
                    .unwrap_or_else(|| (row + 1).to_string()),
                place: if on_sky {
                    PointingPlace::Sky(at)
                } else {
                    PointingPlace::Offset(at)
                },
                row: row + 1,
                spectrum: table.spectrum_of_row(row, value, options),
            })
        })
        .collect()
}

/// Names of the two columns that say where a spectrum was taken, and whether they are sky coordinates; the last
/// is how single-dish tables of one spectrum a row name the second and third axis.
const PLACE_COLUMNS: [([&str; 2], bool); 5] = [
    (["dx_arcsec", "dy_arcsec"], false),
    (["dx", "dy"], false),
    (["ra_deg", "dec_deg"], true),
    (["ra", "dec"], true),
    (["CRVAL2", "CRVAL3"], true),
];

impl<'u, 'a> Table<'u, 'a> {
    /// Whether positions are on the sky (else offsets); and of both columns number and factor to degrees or
    /// arcseconds.
    fn place_columns(&self) -> Result<(bool, [(usize, f64); 2]), ReadError> {
        for (names, on_sky) in PLACE_COLUMNS {
            let [Some(x), Some(y)] = names.map(|name| self.column_named(name)) else {
                continue;
            };
            let factor = |column: usize| {
                let unit = self.columns[column]
                    .unit
                    .as_deref()
                    .map(str::to_ascii_lowercase);
                let degrees = match unit.as_deref() {
                    Some("deg" | "degree" | "degrees") => 1.0,
                    Some("arcmin") => 1.0 / 60.0,
                    Some("arcsec") => 1.0 / 3600.0,
                    Some(_) => {
                        return Err(self.unit.wrong_card(
                            self.path,
                            &format!("TUNIT{}", column + 1),
                            format!("`{}`", unit.unwrap_or_default()),
                            "deg, arcmin or arcsec",
                        ));
                    }
                    None if on_sky => 1.0,
                    None => 1.0 / 3600.0,
                };
                Ok((column, if on_sky { degrees } else { degrees * 3600.0 }))
            };
            return Ok((on_sky, [factor(x)?, factor(y)?]));
        }
        Err(ReadError::NoColumnFor {
            path: self.path.to_path_buf(),
            place: self.unit.card("TTYPE"),
            role: "position",
            columns: columns::list(&self.columns),
            expected: "dx_arcsec and dy_arcsec, or ra_deg and dec_deg",
            nearest: None,
        })
    }

    /// Checks the header and takes the table.
    fn open(path: &'u Path, unit: &'u Unit<'a>) -> Result<Self, ReadError> {
        let header = &unit.header;
        let number = unit.number;
        whole(path, number, header, "BITPIX", (8, 8))?;
        whole(path, number, header, "NAXIS", (2, 2))?;
        let fields = whole(path, number, header, "TFIELDS", (0, LIMIT_COLUMNS))?;
        let mut columns = Vec::with_capacity(fields);
        let mut width = 0_usize;
        for field in 1..=fields {
            let keyword = format!("TFORM{field}");
            let text = unit.text(&keyword).unwrap_or_default();
            let bytes = format_bytes(&text).ok_or_else(|| {
                let expected = "a binary-table format such as 1D, 512E or 16A";
                unit.wrong_card(path, &keyword, format!("`{text}`"), expected)
            })?;
            width = width.saturating_add(bytes);
            columns.push(Column {
                name: unit.text(&format!("TTYPE{field}")).unwrap_or_default(),
                unit: unit.text(&format!("TUNIT{field}")),
            });
        }
        if width != unit.axes[0] {
            return Err(unit.wrong_card(
                path,
                "NAXIS1",
                unit.axes[0].to_string(),
                &format!("{width}, the bytes that the {fields} columns take"),
            ));
        }
        // Rows only: the heap of variable-length columns is not read.
        let rows = &unit.data[..unit.axes[0] * unit.axes[1]];
        let table = BinTable::from_header_and_data(header, rows).map_err(|error| {
            unit.wrong_card(
                path,
                "TFORM1",
                error.to_string(),
                "a table that can be decoded",
            )
        })?;
        Ok(Self {
            path,
            unit,
            columns,
            cells: table,
        })
    }

    fn rows(&self) -> usize {
        self.cells.nrows
    }

    fn card(&self, stem: &str, column: usize) -> Place {
        self.unit.card(&format!("{stem}{}", column + 1))
    }

    /// Elements of a column's cell; 1 for text and for what holds no numbers.
    fn elements(&self, column: usize) -> usize {
        match self.cells.columns[column].format {
            BinColumnType::Byte(n)
            | BinColumnType::I16(n)
            | BinColumnType::J32(n)
            | BinColumnType::K64(n)
            | BinColumnType::E32(n)
            | BinColumnType::D64(n) => n,
            _ => 1,
        }
    }

    fn is_variable(&self, column: usize) -> bool {
        matches!(
            self.cells.columns[column].format,
            BinColumnType::VarP(_) | BinColumnType::VarQ(_)
        )
    }

    /// The vector column of the values, where there is one.
    fn vector_column(&self, options: &ReadOptions) -> Result<Option<usize>, ReadError> {
        if let Some(choice) = &options.columns {
            let value = columns::index_of(self.path, &self.columns, &choice.value)?;
            self.refuse_variable(value)?;
            return Ok((self.elements(value) > 1).then_some(value));
        }
        let mut found = Vec::new();
        for (index, column) in self.columns.iter().enumerate() {
            let vector = self.elements(index) > 1 || self.is_variable(index);
            if !vector {
                continue;
            }
            let part = column.part(self.path, &self.card("TTYPE", index))?;
            let unnamed =
                column.unit.is_none() && part == Part::Other && is_data_name(&column.name);
            if matches!(part, Part::Value(_)) || unnamed {
                self.refuse_variable(index)?;
                found.push(index);
            }
        }
        match found.as_slice() {
            [] => Ok(None),
            [one] => Ok(Some(*one)),
            several => Err(ReadError::SeveralColumnsFor {
                path: self.path.to_path_buf(),
                place: self.unit.card("TTYPE"),
                role: "spectrum",
                columns: several
                    .iter()
                    .map(|index| format!("`{}`", self.columns[*index].name))
                    .collect::<Vec<_>>()
                    .join(", "),
            }),
        }
    }

    fn refuse_variable(&self, column: usize) -> Result<(), ReadError> {
        if !self.is_variable(column) {
            return Ok(());
        }
        Err(ReadError::FitsVariableLength {
            path: self.path.to_path_buf(),
            unit: self.unit.number,
            column: self.columns[column].name.clone(),
            format: self
                .unit
                .text(&format!("TFORM{}", column + 1))
                .unwrap_or_default(),
        })
    }

    fn one_channel_a_row(&self, options: &ReadOptions) -> Result<RawSpectrum, ReadError> {
        let place = self.unit.card("TTYPE");
        let roles = columns::roles(self.path, &place, &self.columns, options.columns.as_ref())?;
        let column = |index: usize| -> Result<Vec<f64>, ReadError> {
            self.refuse_variable(index)?;
            (0..self.rows())
                .map(|row| {
                    let cell = self.numbers(row, index)?;
                    cell.first()
                        .copied()
                        .ok_or_else(|| self.not_a_number(row, index, "an empty cell"))
                })
                .collect()
        };
        let format = "FITS binary table, one channel a row";
        let draft = self
            .unit
            .draft(self.path, format, roles.axis_unit, roles.value_unit)?;
        draft.finish(
            self.path,
            column(roles.axis)?,
            column(roles.value)?,
            |channel| self.row_place(channel),
        )
    }

    fn one_spectrum_a_row(
        &self,
        value: usize,
        options: &ReadOptions,
    ) -> Result<RawSpectrum, ReadError> {
        let row = self.choose_row(options)?;
        self.spectrum_of_row(row, value, options)
    }

    fn spectrum_of_row(
        &self,
        row: usize,
        value: usize,
        options: &ReadOptions,
    ) -> Result<RawSpectrum, ReadError> {
        self.check_cell_axes(value)?;
        let values = self.numbers(row, value)?;
        let value_unit = self.vector_unit(value, options)?;
        let (axis, axis_unit, axis_frame) =
            match self.axis_column(value, values.len(), options.columns.as_ref())? {
                Some((axis, axis_unit)) => (self.numbers(row, axis)?, axis_unit, None),
                None => self.axis_of_keywords(row, value, values.len())?,
            };
        if axis.len() != values.len() {
            return Err(ReadError::LengthMismatch {
                path: self.path.to_path_buf(),
                place: self.row_place(row),
                axis: axis.len(),
                values: values.len(),
            });
        }
        let draft = Draft {
            format: "FITS binary table, one spectrum a row".into(),
            axis_unit,
            value_unit,
            rest_frequency_hz: self.rest_frequency(row, value)?,
            frame: self
                .keyword_text(row, &["SPECSYS", &format!("SPEC{}", value + 1)])
                .map(|name| Frame::from_name(&name))
                .or(axis_frame),
            beam: self.beam(row)?,
            object: self.keyword_text(row, &["OBJECT", "SOURCE"]),
        };
        draft.finish(self.path, axis, values, |_| self.row_place(row))
    }

    /// Where TDIM gives a cell axes, only the first may be longer than 1.
    fn check_cell_axes(&self, column: usize) -> Result<(), ReadError> {
        let keyword = format!("TDIM{}", column + 1);
        let Some(shape) = self.unit.text(&keyword) else {
            return Ok(());
        };
        let mut axes = shape.trim_matches(['(', ')']).split(',');
        let first = axes.next();
        if first.map(str::trim) != Some("1") && axes.all(|axis| axis.trim() == "1") {
            return Ok(());
        }
        Err(ReadError::FitsCellAxes {
            path: self.path.to_path_buf(),
            unit: self.unit.number,
            keyword,
            shape,
        })
    }

    fn row_place(&self, row: usize) -> Place {
        Place::Row {
            unit: self.unit.number,
            row: row + 1,
        }
    }

    fn choose_row(&self, options: &ReadOptions) -> Result<usize, ReadError> {
        let wrong = |wanted: &RowChoice, found: String, nearest| ReadError::FitsRowChoice {
            path: self.path.to_path_buf(),
            unit: self.unit.number,
            wanted: wanted.to_string(),
            found,
            rows: self.rows(),
            nearest,
        };
        match &options.select {
            None if self.rows() == 1 => Ok(0),
            None => Err(ReadError::FitsManyRows {
                path: self.path.to_path_buf(),
                unit: self.unit.number,
                rows: self.rows(),
                columns: self.choosing_columns(),
            }),
            Some(RowChoice::Number(number)) if *number <= self.rows() => Ok(number - 1),
            Some(choice @ RowChoice::Number(_)) => Err(wrong(choice, "no rows".into(), None)),
            Some(choice @ RowChoice::Value { column, value }) => {
                let key = columns::ColumnKey::Name(column.clone());
                let column = columns::index_of(self.path, &self.columns, &key)?;
                let cells: Vec<String> = (0..self.rows())
                    .map(|row| self.cell_text(row, column).unwrap_or_default())
                    .collect();
                let fits = |cell: &str| {
                    cell == value
                        || matches!(
                            (cell.parse::<f64>(), value.parse::<f64>()),
                            (Ok(a), Ok(b)) if a == b
                        )
                };
                let rows: Vec<usize> = (0..cells.len()).filter(|row| fits(&cells[*row])).collect();
                match rows.as_slice() {
                    [one] => Ok(*one),
                    [] => {
                        let near = nearest(value, cells.iter().map(String::as_str));
                        Err(wrong(choice, "no rows".into(), near))
                    }
                    several => {
                        let numbers: Vec<String> = several
                            .iter()
                            .take(10)
                            .map(|row| (row + 1).to_string())
                            .collect();
                        let found = format!("{} rows ({})", several.len(), numbers.join(", "));
                        Err(wrong(choice, found, None))
                    }
                }
            }
        }
    }

    /// Names of the columns of single cells, which can choose a row.
    fn choosing_columns(&self) -> String {
        let names: Vec<Column> = (0..self.columns.len())
            .filter(|index| self.elements(*index) == 1 && !self.is_variable(*index))
            .map(|index| self.columns[index].clone())
            .collect();
        columns::list(&names)
    }

    fn vector_unit(&self, value: usize, options: &ReadOptions) -> Result<ValueUnit, ReadError> {
        if let Some(choice) = &options.columns {
            return Ok(choice.value_unit);
        }
        let column = &self.columns[value];
        if let Part::Value(unit) = column.part(self.path, &self.card("TTYPE", value))? {
            return Ok(unit);
        }
        let stated = column.unit.clone().or_else(|| self.unit.text("BUNIT"));
        value_unit(
            self.path,
            &self.card("TUNIT", value),
            stated.as_deref(),
            options,
        )
    }

    /// A vector column that holds the axis, with its unit.
    fn axis_column(
        &self,
        value: usize,
        channels: usize,
        choice: Option<&ColumnChoice>,
    ) -> Result<Option<(usize, AxisUnit)>, ReadError> {
        if let Some(choice) = choice {
            let axis = columns::index_of(self.path, &self.columns, &choice.axis)?;
            self.refuse_variable(axis)?;
            return Ok(Some((axis, choice.axis_unit)));
        }
        let mut found = Vec::new();
        for (index, column) in self.columns.iter().enumerate() {
            if index == value || self.elements(index) != channels {
                continue;
            }
            if let Part::Axis(unit) = column.part(self.path, &self.card("TTYPE", index))? {
                found.push((index, unit));
            }
        }
        match found.as_slice() {
            [] => Ok(None),
            [one] => Ok(Some(*one)),
            several => Err(ReadError::SeveralColumnsFor {
                path: self.path.to_path_buf(),
                place: self.unit.card("TTYPE"),
                role: "velocity or frequency",
                columns: several
                    .iter()
                    .map(|(index, _)| format!("`{}`", self.columns[*index].name))
                    .collect::<Vec<_>>()
                    .join(", "),
            }),
        }
    }

    fn axis_of_keywords(
        &self,
        row: usize,
        value: usize,
        channels: usize,
    ) -> Result<(Vec<f64>, AxisUnit, Option<Frame>), ReadError> {
        let column = value + 1;
        let names = |image: &str, vector: &str| [format!("1{vector}{column}"), image.to_string()];
        let kind_names = names("CTYPE1", "CTYP");
        let kind = self
            .keyword_text(row, &as_slices(&kind_names))
            .unwrap_or_default();
        if !spectral_axis::is_spectral(&kind) {
            return Err(self.no_axis(&kind));
        }
        let needed = |image: &str, vector: &str| {
            let names = names(image, vector);
            self.keyword_number(row, &as_slices(&names))?
                .ok_or_else(|| {
                    let found = "no such card or column".into();
                    self.unit.wrong_card(self.path, image, found, "a number")
                })
        };
        let unit_names = names("CUNIT1", "CUNI");
        let stated = self.keyword_text(row, &as_slices(&unit_names));
        let factor = axis_factor(
            self.path,
            &self.unit.card("CUNIT1"),
            &kind,
            stated.as_deref(),
        )?;
        let keywords = Keywords {
            kind: kind.clone(),
            reference_value: needed("CRVAL1", "CRVL")? * factor,
            increment: needed("CDELT1", "CDLT")? * factor,
            reference_channel: needed("CRPIX1", "CRPX")?,
            rest_frequency_hz: self.rest_frequency(row, value)?,
            velocity_reference: velocity_reference(
                self.path,
                self.unit,
                self.keyword_number(row, &["VELREF"])?,
            )?,
        };
        let axis = spectral_axis::decode(channels, &keywords)
            .map_err(|problem| axis_problem(self.path, self.unit, "CTYPE1", &kind, problem))?;
        let unit = base_unit(axis.kind, axis.convention_stated);
        Ok((axis.values, unit, axis.frame))
    }

    fn no_axis(&self, kind: &str) -> ReadError {
        if kind.is_empty() {
            let place = self.unit.card("TTYPE");
            return columns::no_column_for(
                self.path,
                &place,
                &self.columns,
                "velocity or frequency",
            );
        }
        ReadError::FitsAxisType {
            path: self.path.to_path_buf(),
            unit: self.unit.number,
            keyword: "CTYPE1".into(),
            found: kind.to_string(),
        }
    }

    fn rest_frequency(&self, row: usize, value: usize) -> Result<Option<f64>, ReadError> {
        let vector = format!("RFRQ{}", value + 1);
        let rest = self.keyword_number(row, &["RESTFRQ", "RESTFREQ", &vector])?;
        Ok(rest.filter(|rest| *rest != 0.0))
    }

    fn beam(&self, row: usize) -> Result<Option<BeamArcsec>, ReadError> {
        let major = self.keyword_number(row, &["BMAJ"])?;
        let minor = self.keyword_number(row, &["BMIN"])?;
        Ok(major.map(|major| BeamArcsec {
            major: major * 3600.0,
            minor: minor.unwrap_or(major) * 3600.0,
        }))
    }

    /// The first of some keywords that a row's cell or a card gives as text.
    fn keyword_text(&self, row: usize, keywords: &[&str]) -> Option<String> {
        keywords.iter().find_map(|keyword| {
            let cell = self
                .column_named(keyword)
                .and_then(|column| self.cell_text(row, column));
            cell.filter(|text| !text.is_empty())
                .or_else(|| self.unit.text(keyword))
        })
    }

    /// The first of some keywords that a row's cell or a card gives as a number.
    fn keyword_number(&self, row: usize, keywords: &[&str]) -> Result<Option<f64>, ReadError> {
        for keyword in keywords {
            if let Some(column) = self.column_named(keyword)
                && self.elements(column) == 1
            {
                let cell = self.numbers(row, column)?;
                if let Some(value) = cell.first().filter(|value| value.is_finite()) {
                    return Ok(Some(*value));
                }
            }
            if let Some(value) = self.unit.number(self.path, keyword)? {
                return Ok(Some(value));
            }
        }
        Ok(None)
    }

    fn column_named(&self, name: &str) -> Option<usize> {
        self.columns
            .iter()
            .position(|column| column.name.eq_ignore_ascii_case(name))
    }

    /// A cell of one element as text; none where it is a vector or cannot be shown.
    fn cell_text(&self, row: usize, column: usize) -> Option<String> {
        if let BinColumnType::Char(_) = self.cells.columns[column].format {
            let bytes = self.cells.cell_bytes(row, column).ok()?;
            let text = bytes.split(|byte| *byte == 0).next()?;
            return Some(String::from_utf8_lossy(text).trim().to_string());
        }
        let numbers = self.numbers(row, column).ok()?;
        let [one] = numbers.as_slice() else {
            return None;
        };
        Some(one.to_string())
    }

    /// The numbers of a cell, scaled by TSCAL and TZERO; `NaN` where an integer is TNULL.
    fn numbers(&self, row: usize, column: usize) -> Result<Vec<f64>, ReadError> {
        let described = &self.cells.columns[column];
        let null = self.unit.header.get_int(&format!("TNULL{}", column + 1));
        let scale = |value: f64| described.tzero + described.tscal * value;
        let integer = |value: i64| {
            if Some(value) == null {
                f64::NAN
            } else {
                scale(value as f64)
            }
        };
        let cell = match described.format {
            BinColumnType::VarP(_) | BinColumnType::VarQ(_) => None,
            _ => self.cells.get_cell(row, column).ok(),
        };
        match cell {
            Some(BinCellValue::Bytes(cell)) => {
                Ok(cell.iter().map(|&value| integer(value.into())).collect())
            }
            Some(BinCellValue::I16(cell)) => {
                Ok(cell.iter().map(|&value| integer(value.into())).collect())
            }
            Some(BinCellValue::I32(cell)) => {
                Ok(cell.iter().map(|&value| integer(value.into())).collect())
            }
            Some(BinCellValue::I64(cell)) => Ok(cell.iter().map(|&value| integer(value)).collect()),
            Some(BinCellValue::F32(cell)) => {
                Ok(cell.iter().map(|&value| scale(value.into())).collect())
            }
            Some(BinCellValue::F64(cell)) => Ok(cell.iter().map(|&value| scale(value)).collect()),
            Some(BinCellValue::String(text)) => Err(self.not_a_number(row, column, &text)),
            _ => Err(self.not_a_number(row, column, &described.format.to_tform_string())),
        }
    }

    fn not_a_number(&self, row: usize, column: usize, found: &str) -> ReadError {
        ReadError::NotANumber {
            path: self.path.to_path_buf(),
            place: self.row_place(row),
            column: self.columns[column].name.clone(),
            found: found.to_string(),
        }
    }
}

fn as_slices(names: &[String; 2]) -> [&str; 2] {
    [&names[0], &names[1]]
}

/// Names that spectra have in tables whose unit stands elsewhere.
fn is_data_name(name: &str) -> bool {
    ["DATA", "SPECTRUM", "SERIES", "FLUX"]
        .iter()
        .any(|known| name.eq_ignore_ascii_case(known))
}

/// Bytes that a column of this TFORM takes in a row; none where the text is no format. Repeat counts
/// of variable-length arrays are 0 or 1; those of 0 take nothing and are not supported.
pub(super) fn format_bytes(text: &str) -> Option<usize> {
    let digits = text.bytes().take_while(u8::is_ascii_digit).count();
    let repeat: usize = match digits {
        0 => 1,
        _ => text[..digits].parse().ok()?,
    };
    let letter = text[digits..].chars().next()?;
    let size = match letter {
        'L' | 'B' | 'A' => 1,
        'X' => return Some(repeat.div_ceil(8)),
        'I' => 2,
        'J' | 'E' => 4,
        'K' | 'D' | 'C' => 8,
        'M' => 16,
        'P' if repeat == 1 => 8,
        'Q' if repeat == 1 => 16,
        _ => return None,
    };
    repeat.checked_mul(size)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn formats_take_the_bytes_that_the_standard_says() {
        for (text, bytes) in [
            ("D", 8),
            ("1D", 8),
            ("512E", 2048),
            ("16A", 16),
            ("9X", 2),
            ("0J", 0),
            ("1PE(300)", 8),
            ("1QD", 16),
        ] {
            assert_eq!(format_bytes(text), Some(bytes), "{text}");
        }
        for text in [
            "",
            "5",
            "Z",
            "-1E",
            "99999999999999999999E",
            "9999999999999999999J",
            "0PE",
        ] {
            assert_eq!(format_bytes(text), None, "{text}");
        }
    }
}
