//! A table of results: named, described columns with units, and rows that know their columns.

use std::collections::HashMap;
use std::sync::Arc;

use super::ReportError;
use crate::numeric::Estimate;
use serde::{Deserialize, Serialize};

/// What a column holds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// Text.
    Text,
    /// A 64-bit floating-point number.
    Real,
    /// A 64-bit signed integer.
    Integer,
}

impl Kind {
    fn name(self) -> &'static str {
        match self {
            Self::Text => "text",
            Self::Real => "a real number",
            Self::Integer => "an integer",
        }
    }
}

/// Name, unit, meaning and kind of one column.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Column {
    /// Name, as in every output format.
    pub name: String,
    /// Unit as FITS and `VOUnit` write it, such as `km/s` or `solMass/yr`; `None` for a pure number
    /// or text.
    pub unit: Option<String>,
    /// One sentence without a full stop.
    pub description: String,
    /// What it holds.
    pub kind: Kind,
}

/// One cell.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Value {
    /// Text; not empty.
    Text(String),
    /// A finite number.
    Real(f64),
    /// An integer.
    Integer(i64),
    /// No value.
    Empty,
}

impl Value {
    fn kind_name(&self) -> &'static str {
        match self {
            Self::Text(_) => Kind::Text.name(),
            Self::Real(_) => Kind::Real.name(),
            Self::Integer(_) => Kind::Integer.name(),
            Self::Empty => "nothing",
        }
    }

    /// The number of a real or integer cell.
    pub fn number(&self) -> Option<f64> {
        match self {
            Self::Real(value) => Some(*value),
            Self::Integer(value) => Some(*value as f64),
            Self::Text(_) | Self::Empty => None,
        }
    }

    /// The text of a text cell.
    pub fn text(&self) -> Option<&str> {
        match self {
            Self::Text(text) => Some(text),
            _ => None,
        }
    }
}

/// `NaN` is no value, as everywhere in this crate.
impl From<f64> for Value {
    fn from(value: f64) -> Self {
        if value.is_nan() {
            Self::Empty
        } else {
            Self::Real(value)
        }
    }
}

impl From<i64> for Value {
    fn from(value: i64) -> Self {
        Self::Integer(value)
    }
}

/// An empty string is no value.
impl From<&str> for Value {
    fn from(text: &str) -> Self {
        if text.is_empty() {
            Self::Empty
        } else {
            Self::Text(text.to_owned())
        }
    }
}

impl From<String> for Value {
    fn from(text: String) -> Self {
        Self::from(text.as_str())
    }
}

impl<T: Into<Self>> From<Option<T>> for Value {
    fn from(value: Option<T>) -> Self {
        value.map_or(Self::Empty, Into::into)
    }
}

/// The columns that rows and tables share; cheap to clone.
#[derive(Clone, Debug)]
pub struct Schema(Arc<Columns>);

#[derive(Debug)]
struct Columns {
    columns: Vec<Column>,
    index: HashMap<String, usize>,
}

impl Schema {
    /// Takes the columns, in their order.
    ///
    /// # Errors
    ///
    /// [`ReportError::RepeatedColumn`] where two have one name.
    pub fn new(columns: Vec<Column>) -> Result<Self, ReportError> {
        let mut index = HashMap::with_capacity(columns.len());
        for (position, column) in columns.iter().enumerate() {
            if index.insert(column.name.clone(), position).is_some() {
                return Err(ReportError::RepeatedColumn {
                    name: column.name.clone(),
                });
            }
        }
        Ok(Self(Arc::new(Columns { columns, index })))
    }

    /// The columns, in order.
    pub fn columns(&self) -> &[Column] {
        &self.0.columns
    }

    /// A row with every cell empty.
    pub fn row(&self) -> Row {
        Row {
            schema: self.clone(),
            values: vec![Value::Empty; self.columns().len()],
        }
    }

    /// A row of these cells.
    ///
    /// # Errors
    ///
    /// [`ReportError::ForeignRow`] where they are not as many as the columns.
    pub fn row_of(&self, values: Vec<Value>) -> Result<Row, ReportError> {
        if values.len() != self.columns().len() {
            return Err(ReportError::ForeignRow {
                found: values.len(),
                expected: self.columns().len(),
            });
        }
        Ok(Row {
            schema: self.clone(),
            values,
        })
    }

    fn position(&self, name: &str) -> Result<usize, ReportError> {
        self.0
            .index
            .get(name)
            .copied()
            .ok_or_else(|| ReportError::UnknownColumn {
                name: name.to_owned(),
                nearest: self.nearest(name),
            })
    }

    fn nearest(&self, name: &str) -> Option<String> {
        self.columns()
            .iter()
            .map(|column| {
                (
                    strsim::normalized_damerau_levenshtein(name, &column.name),
                    column,
                )
            })
            .filter(|(similarity, _)| *similarity > 0.5)
            .max_by(|a, b| a.0.total_cmp(&b.0))
            .map(|(_, column)| column.name.clone())
    }

    /// Refuses a row that was made for other columns.
    pub(super) fn check(&self, row: &Row) -> Result<(), ReportError> {
        let same = Arc::ptr_eq(&self.0, &row.schema.0) || self.columns() == row.schema.columns();
        if same {
            return Ok(());
        }
        Err(ReportError::ForeignRow {
            found: row.values.len(),
            expected: self.columns().len(),
        })
    }
}

/// One row: a cell for each column of its schema, empty until set.
#[derive(Clone, Debug)]
pub struct Row {
    schema: Schema,
    values: Vec<Value>,
}

impl Row {
    /// Sets a cell by its column's name; `NaN`, an empty string and `None` leave it empty.
    ///
    /// ```
    /// use inrush::report::columns;
    ///
    /// let mut row = columns::results().row();
    /// row.set("delta_v", -0.48)?;
    /// assert!(row.set("dleta_v", -0.48).is_err());
    /// # Ok::<(), inrush::report::ReportError>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`ReportError::UnknownColumn`], [`ReportError::WrongKind`] or [`ReportError::Infinite`].
    pub fn set(&mut self, name: &str, value: impl Into<Value>) -> Result<&mut Self, ReportError> {
        let position = self.schema.position(name)?;
        let value = value.into();
        let kind = self.schema.columns()[position].kind;
        match (&value, kind) {
            (Value::Real(number), Kind::Real) if number.is_infinite() => {
                return Err(ReportError::Infinite {
                    name: name.to_owned(),
                });
            }
            (Value::Empty, _)
            | (Value::Text(_), Kind::Text)
            | (Value::Real(_), Kind::Real)
            | (Value::Integer(_), Kind::Integer) => {}
            _ => {
                return Err(ReportError::WrongKind {
                    name: name.to_owned(),
                    found: value.kind_name(),
                    expected: kind.name(),
                });
            }
        }
        self.values[position] = value;
        Ok(self)
    }

    /// Sets a value and, in column `NAME_err`, its standard error, both in the column's unit.
    ///
    /// # Errors
    ///
    /// As [`Row::set`].
    pub fn set_estimate(
        &mut self,
        name: &str,
        estimate: impl Into<Option<Estimate>>,
    ) -> Result<&mut Self, ReportError> {
        let estimate = estimate.into();
        self.set(name, estimate.map(|estimate| estimate.value))?;
        self.set(
            &format!("{name}_err"),
            estimate.map(|estimate| estimate.err),
        )
    }

    /// The cell of a column that not every table has.
    #[must_use]
    pub fn find(&self, name: &str) -> Option<&Value> {
        let position = self.schema.0.index.get(name)?;
        Some(&self.values[*position])
    }

    /// The cell of a column.
    ///
    /// # Errors
    ///
    /// [`ReportError::UnknownColumn`].
    pub fn get(&self, name: &str) -> Result<&Value, ReportError> {
        Ok(&self.values[self.schema.position(name)?])
    }

    /// The cells, in the order of the columns.
    pub fn values(&self) -> &[Value] {
        &self.values
    }

    /// The cells alone, in the order of the columns.
    #[must_use]
    pub fn into_values(self) -> Vec<Value> {
        self.values
    }

    /// The columns it is for.
    pub fn schema(&self) -> &Schema {
        &self.schema
    }
}

/// Rows over shared columns, and facts about the whole.
#[derive(Clone, Debug)]
pub struct Table {
    schema: Schema,
    rows: Vec<Row>,
    /// Facts about the whole table, such as version and seed, in order; formats that cannot hold
    /// them (CSV) leave them out.
    pub meta: Vec<(String, Value)>,
}

impl Table {
    /// An empty table.
    pub fn new(schema: Schema) -> Self {
        Self {
            schema,
            rows: Vec::new(),
            meta: Vec::new(),
        }
    }

    /// Appends a row.
    ///
    /// # Errors
    ///
    /// [`ReportError::ForeignRow`] where it was made for other columns.
    pub fn push(&mut self, row: Row) -> Result<(), ReportError> {
        self.schema.check(&row)?;
        self.rows.push(row);
        Ok(())
    }

    /// What the rows share.
    pub fn schema(&self) -> &Schema {
        &self.schema
    }

    /// The columns, in order.
    pub fn columns(&self) -> &[Column] {
        self.schema.columns()
    }

    /// The rows, in order.
    pub fn rows(&self) -> &[Row] {
        &self.rows
    }
}
