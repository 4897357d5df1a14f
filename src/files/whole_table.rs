//! Bytes to a table of numbers and words, without any column being taken for the time.

use super::delimited::{DelimitedOptions, DelimitedTable, read_table};
use super::numbers::{NumberOptions, is_missing_marker, parse_number};
use super::{FileFault, counted};
use crate::base::Cancellation;

/// A table as read.
#[derive(Debug, Clone)]
pub struct ReadTable {
    /// The columns in file order, all of one length, at least 1.
    pub columns: Vec<ReadColumn>,
    /// The comment lines of the file.
    pub comments: Vec<String>,
    /// Every decision, in the order taken.
    pub notes: Vec<String>,
}

/// One column of a table.
#[derive(Debug, Clone)]
pub struct ReadColumn {
    /// The name without its unit.
    pub name: String,
    /// The unit as the file words it.
    pub unit_text: Option<String>,
    /// What stands in it.
    pub cells: ReadCells,
}

/// The cells of a column.
#[derive(Debug, Clone, PartialEq)]
pub enum ReadCells {
    /// Numbers, NaN for a gap.
    Numbers(Vec<f64>),
    /// Words, empty for a gap.
    Words(Vec<String>),
}

/// Reads every column: as numbers where all its cells are numbers or gaps, else as words.
///
/// # Errors
/// Whatever is wrong with the file, at its line; two columns of one name.
pub fn read_whole_table(
    bytes: &[u8],
    options: &NumberOptions,
    cancellation: &Cancellation,
) -> Result<ReadTable, FileFault> {
    let table = read_table(
        bytes,
        &DelimitedOptions { decimal_comma: options.decimal_comma, cancellation: cancellation.clone() },
    )?;
    let mut notes = table.notes.clone();
    let mut columns = Vec::with_capacity(table.columns.len());
    for (column, head) in table.columns.iter().enumerate() {
        table.column_named(&head.header)?;
        let cells = match table.numbers(column, options) {
            Ok(read) => {
                notes.extend(read.notes);
                ReadCells::Numbers(read.values)
            }
            Err(fault) => words(&table, column, options, &fault, &mut notes),
        };
        columns.push(ReadColumn { name: head.name.clone(), unit_text: head.unit_text.clone(), cells });
    }
    Ok(ReadTable { columns, comments: table.comments, notes })
}

/// The words of a column; where most of them are numbers, it is said which one is not.
fn words(
    table: &DelimitedTable<'_>,
    column: usize,
    options: &NumberOptions,
    fault: &FileFault,
    notes: &mut Vec<String>,
) -> ReadCells {
    let cells = || (0..table.row_count()).map(|row| table.cell(row, column));
    let is_gap =
        |cell: &str| is_missing_marker(cell) || options.missing.iter().any(|said| said.trim() == cell);
    let filled = cells().filter(|cell| !is_gap(cell)).count();
    let numbers = cells().filter(|cell| parse_number(cell, options.decimal_comma).is_some()).count();
    let name = &table.columns[column].name;
    if filled == 0 {
        notes.push(format!("{name}: no row has anything there"));
        return ReadCells::Numbers(vec![f64::NAN; table.row_count()]);
    }
    if numbers * 2 >= filled {
        notes.push(format!(
            "{name}: read as words, although {} would be numbers: {fault}",
            counted(numbers, "cell")
        ));
    }
    ReadCells::Words(cells().map(|cell| if is_gap(cell) { String::new() } else { cell.to_owned() }).collect())
}
