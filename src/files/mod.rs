//! Delimited text (CSV, TSV): bytes to times and values, with every decision noted.
//!
//! Nothing here opens a file, and nothing here knows units or eras beyond their text. Times leave
//! on one axis: years CE, astronomical (1 BCE is year 0), as `f64`.
//!
//! Reading goes through four rooms, each using only those before it: `text_layout`, `rows` and `delimited`
//! (bytes to cells), `numbers` (cells to numbers and gaps), `time_column`, `time_stamps`,
//! `time_grid` and `time_axis` (which columns tell the time, and what steps or instants they mean),
//! `month_layout` (a row a year, a column a month), `series` and
//! `whole_table` (the whole), `event_times` (columns of a table to the times of events).

mod calendar;
mod delimited;
#[cfg(test)]
mod delimited_tests;
mod event_times;
mod month_layout;
mod numbers;
mod rows;
mod series;
#[cfg(test)]
mod series_tests;
mod text_layout;
mod time_axis;
#[cfg(test)]
mod time_axis_tests;
mod time_column;
mod time_grid;
mod time_stamps;
#[cfg(test)]
mod whole_file_tests;
mod whole_table;

pub use delimited::{DelimitedOptions, DelimitedTable, TextColumn, read_table};
pub use event_times::{EventColumns, EventTimes, TimeCell, TimeRole, event_times, time_role};
pub use numbers::{NumberColumn, NumberOptions};
pub use series::{ReadEnsemble, ReadSeries, SeriesOptions, read_ensemble, read_series};
pub use time_axis::AxisForm;
pub use time_column::ReadEra;
pub use whole_table::{ReadCells, ReadColumn, ReadTable, read_whole_table};

use std::fmt;

use crate::base::{Cancelled, INTERRUPTED};

/// Where in a file something was found.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Place {
    /// The line, counted from 1, comments and blank lines included.
    pub line: usize,
    /// The name of the column, where one cell is to blame.
    pub column: Option<String>,
}

impl fmt::Display for Place {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(formatter, "line {}", self.line)?;
        match &self.column {
            Some(column) => write!(formatter, ", column `{column}`"),
            None => Ok(()),
        }
    }
}

/// Why a file could not be read. The message does not repeat the place; [`fmt::Display`] puts it in
/// front.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct FileFault {
    /// A short stable code.
    pub code: &'static str,
    /// What was found, and what was expected.
    pub message: String,
    /// What to write instead.
    pub help: Option<String>,
    /// Where it was found, when one place is to blame.
    pub place: Option<Place>,
}

impl FileFault {
    fn new(code: &'static str, message: impl Into<String>) -> Self {
        FileFault { code, message: message.into(), help: None, place: None }
    }

    /// Whether it is no fault of the file: someone asked to stop.
    pub fn is_interruption(&self) -> bool {
        self.code == INTERRUPTED
    }

    fn help(mut self, help: impl Into<String>) -> Self {
        self.help = Some(help.into());
        self
    }

    fn at_line(mut self, line: usize) -> Self {
        self.place = Some(Place { line, column: None });
        self
    }

    fn at_cell(mut self, line: usize, column: &str) -> Self {
        self.place = Some(Place { line, column: Some(column.to_owned()) });
        self
    }
}

impl fmt::Display for FileFault {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        if let Some(place) = &self.place {
            write!(formatter, "{place}: ")?;
        }
        write!(formatter, "{}", self.message)?;
        match &self.help {
            Some(help) => write!(formatter, " ({help})"),
            None => Ok(()),
        }
    }
}

impl std::error::Error for FileFault {}

impl From<Cancelled> for FileFault {
    fn from(_: Cancelled) -> Self {
        FileFault::new(INTERRUPTED, "interrupted before it was read")
    }
}

/// "1 value", "2 values": a count with its noun.
fn counted(count: usize, noun: &str) -> String {
    if count == 1 { format!("1 {noun}") } else { format!("{count} {noun}s") }
}

/// "`a`, `b`": names in a row, each in backquotes; after twelve only how many more there are.
fn quoted_names<'a>(names: impl IntoIterator<Item = &'a str>) -> String {
    let names: Vec<&str> = names.into_iter().collect();
    let shown: Vec<String> = names.iter().take(12).map(|name| format!("`{name}`")).collect();
    let more = match names.len().saturating_sub(12) {
        0 => String::new(),
        rest => format!(" and {rest} more"),
    };
    format!("{}{more}", shown.join(", "))
}
