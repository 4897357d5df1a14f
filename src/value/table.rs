use std::sync::Arc;

/// Rows and columns, full precision; rounding is the display's business.
#[derive(Clone, Debug, PartialEq)]
pub struct Table {
    /// What it shows.
    pub title: String,
    /// The columns.
    pub columns: Vec<Column>,
    /// One cell for each column in every row.
    pub rows: Vec<Vec<Cell>>,
    /// Lines beneath it.
    pub notes: Vec<String>,
}

/// The head of a column.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Column {
    /// Its name.
    pub name: String,
    /// The unit of its numbers, if all have one.
    pub unit: Option<String>,
}

impl Column {
    /// A column of words or plain numbers.
    pub fn plain(name: &str) -> Self {
        Self { name: name.to_owned(), unit: None }
    }

    /// A column in a unit.
    pub fn in_unit(name: &str, unit: impl ToString) -> Self {
        Self { name: name.to_owned(), unit: Some(unit.to_string()) }
    }
}

/// One cell of a table.
#[derive(Clone, Debug, PartialEq)]
pub enum Cell {
    /// Words.
    Text(Arc<str>),
    /// A number, as precise as it is.
    Number(f64),
    /// A number of which so many decimals are worth showing (negative: tens, hundreds).
    Rounded(f64, i32),
    /// Nothing: a gap, or not asked for.
    Empty,
}

impl Cell {
    /// A number, or nothing where it is a gap.
    pub fn number(value: f64) -> Self {
        if value.is_finite() { Cell::Number(value) } else { Cell::Empty }
    }

    /// A number to two significant digits of its uncertainty; nothing where it is a gap.
    pub fn to_uncertainty(value: f64, uncertainty: f64) -> Self {
        if !value.is_finite() {
            Cell::Empty
        } else if uncertainty.is_finite() && uncertainty > 0.0 {
            Cell::Rounded(value, 1 - uncertainty.log10().floor() as i32)
        } else {
            Cell::Number(value)
        }
    }
}
