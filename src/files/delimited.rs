//! Bytes to a table of text cells: encoding, comments, delimiter, header, the shape of the rows.

use super::rows::{Cells, RowReader};
use super::text_layout::{decode, find_delimiter, header_comments};
use super::{FileFault, counted, quoted_names};
use crate::base::Cancellation;
use rayon::prelude::*;

/// After so many rows it is asked whether to go on.
pub(super) const BETWEEN_LOOKS: usize = 4096;

/// What the reader of a table is told beforehand.
#[derive(Debug, Clone, Default)]
pub struct DelimitedOptions {
    /// Numbers are written `3,14`. Here it only decides between delimiters.
    pub decimal_comma: bool,
    /// Raised to stop the reading of a long file.
    pub cancellation: Cancellation,
}

/// A table as text, its cells trimmed of white space.
#[derive(Debug, Clone)]
pub struct DelimitedTable<'t> {
    /// The comment lines before, in and after the data, without `#` and surrounding white space.
    pub comments: Vec<String>,
    /// The columns in file order.
    pub columns: Vec<TextColumn>,
    /// Whether the columns were named by the file (otherwise they are `column 1`, …).
    pub has_header: bool,
    /// What was decided while reading.
    pub notes: Vec<String>,
    /// Raised to stop the reading of a long file.
    pub(super) cancellation: Cancellation,
    cells: Cells<'t>,
    row_width: usize,
    /// The text is not longer than 2 GiB, and so are its lines.
    row_lines: Vec<u32>,
}

/// The head of one column; its cells are in [`DelimitedTable::cell`].
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct TextColumn {
    /// The name without its unit: `co2` for `co2 (ppm)`.
    pub name: String,
    /// The text in the round or square brackets that end the header: `ppm`.
    pub unit_text: Option<String>,
    /// The header as the file has it.
    pub header: String,
    /// Its place in the row, which is not its place in `columns` once empty columns are dropped.
    offset: usize,
}

impl TextColumn {
    /// A column by its name and unit alone, apart from any table.
    pub(super) fn headed(name: &str, unit_text: Option<&str>) -> Self {
        let header = match unit_text {
            Some(unit) => format!("{name} ({unit})"),
            None => name.to_owned(),
        };
        Self { name: name.to_owned(), unit_text: unit_text.map(str::to_owned), header, offset: 0 }
    }
}

impl DelimitedTable<'_> {
    /// How many rows of data there are.
    #[must_use]
    pub fn row_count(&self) -> usize {
        self.row_lines.len()
    }

    /// The line of the file (from 1) on which a row begins; 0 for a row that does not exist.
    #[must_use]
    pub fn line_of_row(&self, row: usize) -> usize {
        self.row_lines.get(row).map_or(0, |&line| line as usize)
    }

    /// The text of one cell, `""` when there is no such cell. `column` counts in `columns`.
    #[must_use]
    pub fn cell(&self, row: usize, column: usize) -> &str {
        self.columns.get(column).map_or("", |head| self.cell_at(row, head.offset))
    }

    /// The text of one cell by its place in the row.
    fn cell_at(&self, row: usize, offset: usize) -> &str {
        self.cells.get(row * self.row_width + offset)
    }

    /// Finds a column by its name or by its whole header.
    ///
    /// # Errors
    /// `file-no-such-column`, listing the columns and the nearest name; `file-column-twice` when
    /// the name is not unique.
    pub fn column_named(&self, wanted: &str) -> Result<usize, FileFault> {
        let wanted = wanted.trim();
        let by = |matches: &dyn Fn(&TextColumn) -> bool| -> Vec<usize> {
            (0..self.columns.len()).filter(|&i| matches(&self.columns[i])).collect()
        };
        let mut found = by(&|column| column.header == wanted);
        if found.is_empty() {
            found = by(&|column| column.name == wanted);
        }
        match found.as_slice() {
            [one] => Ok(*one),
            [] => Err(self.no_such_column(wanted)),
            [first, second, ..] => Err(FileFault::new(
                "file-column-twice",
                format!("columns {} and {} are both named `{wanted}`", first + 1, second + 1),
            )
            .help("give them different names in the file")),
        }
    }

    fn no_such_column(&self, wanted: &str) -> FileFault {
        let list = quoted_names(self.columns.iter().map(|column| column.header.as_str()));
        let fault = FileFault::new(
            "file-no-such-column",
            format!("there is no column `{wanted}`; the columns are {list}"),
        );
        let folded = wanted.to_lowercase();
        let nearest = self
            .columns
            .iter()
            .map(|column| {
                let distance = strsim::damerau_levenshtein(&folded, &column.name.to_lowercase());
                (distance, &column.name)
            })
            .min_by_key(|(distance, _)| *distance);
        match nearest {
            Some((distance, name)) if distance <= 1 + wanted.chars().count() / 3 => {
                fault.help(format!("did you mean `{name}`?"))
            }
            Some(_) | None => fault,
        }
    }
}

/// Reads delimited text.
///
/// Comment lines begin with `#`; blank lines and rows without a single filled cell are skipped. The
/// delimiter is the tab, the semicolon or the comma, found from the first line and confirmed by the
/// second.
///
/// # Errors
/// No UTF-8, no data, a row of another length than the header (with its line).
pub fn read_table<'t>(bytes: &'t [u8], options: &DelimitedOptions) -> Result<DelimitedTable<'t>, FileFault> {
    let text = decode(bytes)?;
    let mut notes = Vec::new();
    let mut comments = Vec::new();
    let body_start = header_comments(&text, &mut comments);
    let body = &text[body_start..];
    if body.is_empty() {
        let what =
            if comments.is_empty() { "the file is empty" } else { "the file holds comments and no data" };
        return Err(FileFault::new("file-empty", what)
            .help("expected a line of column names and a line for each time"));
    }
    let delimiter = find_delimiter(body, options.decimal_comma);
    match delimiter {
        b'\t' => notes.push("columns are separated by tabs".to_owned()),
        b';' => notes.push("columns are separated by semicolons".to_owned()),
        _ => {}
    }

    let mut rows = RowReader::new(&text, body_start, delimiter)?;
    let Some(first_line) = rows.next_row()? else {
        return Err(FileFault::new("file-empty", "the file holds no data"));
    };
    let first: Vec<String> = rows.row().map(str::to_owned).collect();
    let has_header = !looks_like_data(&first);
    let columns = columns_from(&first, has_header);
    let parts = rows.rest_in_parts();
    let mut body = Body { rows, lines: Vec::new(), empty_rows: 0 };
    if has_header {
        body.rows.drop_row();
    } else {
        notes.push(format!(
            "the first row (line {first_line}) is all numbers, so the columns have no names: they are {}",
            quoted_names(columns.iter().map(|column| column.name.as_str()))
        ));
        body.lines.push(first_line as u32);
    }
    let parts: Vec<_> = parts
        .into_par_iter()
        .map(|rows| Body::read(rows, &columns, has_header, delimiter, &options.cancellation))
        .collect();
    for part in parts {
        body.append(part?);
    }
    let Body { mut rows, lines: row_lines, empty_rows } = body;
    let is_inside = |line: usize| {
        let beside = row_lines.first().zip(row_lines.last());
        beside.is_some_and(|(first, last)| (*first as usize..*last as usize).contains(&line))
    };
    let inside: Vec<usize> =
        rows.comments.iter().map(|comment| comment.0).filter(|line| is_inside(*line)).collect();
    comments.extend(rows.comments.drain(..).map(|comment| comment.1));
    let (row_width, found) = (first.len(), rows.found());
    let cells = Cells::found(text, found);
    let cancellation = options.cancellation.clone();
    let mut table =
        DelimitedTable { comments, columns, has_header, notes, cancellation, cells, row_width, row_lines };
    if table.row_count() == 0 {
        let names = quoted_names(first.iter().map(String::as_str));
        return Err(FileFault::new(
            "file-empty",
            format!("the file has column names ({names}) and no rows below them"),
        )
        .at_line(first_line));
    }
    if let Some(fault) = second_header(&table) {
        return Err(fault);
    }
    if let Some(first) = inside.first() {
        let lines = counted(inside.len(), "comment line");
        table.notes.push(format!("{lines} among the data rows skipped (first in line {first})"));
    }
    if empty_rows > 0 {
        let rows = if empty_rows == 1 { "row" } else { "rows" };
        table.notes.push(format!("{empty_rows} {rows} without any value skipped"));
    }
    table.drop_empty_columns(&first);
    Ok(table)
}

/// Rows of data: their cells and comments, and the line of each.
struct Body<'t> {
    rows: RowReader<'t>,
    lines: Vec<u32>,
    empty_rows: usize,
}

impl<'t> Body<'t> {
    /// Reads all rows, each of which must have a cell for each column or none with anything in it.
    fn read(
        rows: RowReader<'t>,
        columns: &[TextColumn],
        has_header: bool,
        delimiter: u8,
        cancellation: &Cancellation,
    ) -> Result<Self, FileFault> {
        let mut body = Self { rows, lines: Vec::new(), empty_rows: 0 };
        while let Some(line) = body.rows.next_row()? {
            if body.lines.len().is_multiple_of(BETWEEN_LOOKS) {
                cancellation.check()?;
            }
            if body.rows.row_is_empty() {
                body.rows.drop_row();
                body.empty_rows += 1;
            } else if body.rows.width() == columns.len() {
                body.lines.push(line as u32);
            } else {
                return Err(row_length_fault(columns, has_header, &body.rows, line, delimiter));
            }
        }
        Ok(body)
    }

    fn append(&mut self, part: Self) {
        self.lines.extend(part.lines);
        self.empty_rows += part.empty_rows;
        self.rows.append(part.rows);
    }
}

impl DelimitedTable<'_> {
    /// Spreadsheets end each row with delimiters: columns with neither name nor cell are no
    /// columns.
    fn drop_empty_columns(&mut self, headers: &[String]) {
        if !self.has_header || headers.iter().all(|header| !header.is_empty()) {
            return;
        }
        let kept = (0..self.columns.len())
            .filter(|&column| {
                headers.get(column).is_some_and(|header| !header.is_empty())
                    || (0..self.row_count()).any(|row| !self.cell(row, column).is_empty())
            })
            .map(|column| self.columns[column].clone())
            .collect();
        self.columns = kept;
    }
}

fn is_number_or_date(cell: &str) -> bool {
    let plain = cell.replace('−', "-").replace(',', ".");
    let starts_as_number = plain.starts_with(|c: char| c.is_ascii_digit() || "+-.".contains(c));
    starts_as_number && (plain.parse::<f64>().is_ok() || super::calendar::parse_date(&plain).is_some())
}

/// A first row of words alone above rows with numbers is a second line of names, or a line of units.
fn second_header(table: &DelimitedTable<'_>) -> Option<FileFault> {
    let cells = |row: usize| (0..table.row_width).map(move |offset| table.cell_at(row, offset));
    let words: Vec<&str> = cells(0).filter(|cell| !super::numbers::is_missing_marker(cell)).collect();
    let only_words = !words.is_empty() && !cells(0).any(is_number_or_date);
    // Where later rows begin with words too, words are what the column holds.
    let numbers_below =
        table.row_count() > 1 && table.has_header && cells(1).next().is_some_and(is_number_or_date);
    (only_words && numbers_below).then(|| {
        FileFault::new(
            "file-two-headers",
            format!("the line below the column names holds no number: {}", quoted_names(words)),
        )
        .help("units go into the names, as in `co2 (ppm)`; take the line out, or begin it with #")
        .at_line(table.line_of_row(0))
    })
}

/// A first row is data when each cell is a number, a date or a gap, and not all are gaps.
fn looks_like_data(cells: &[String]) -> bool {
    cells.iter().any(|cell| is_number_or_date(cell))
        && cells.iter().all(|cell| is_number_or_date(cell) || super::numbers::is_missing_marker(cell))
}

fn columns_from(first: &[String], has_header: bool) -> Vec<TextColumn> {
    let named = |(offset, cell): (usize, &String)| {
        let header =
            if has_header && !cell.is_empty() { cell.clone() } else { format!("column {}", offset + 1) };
        let (name, unit_text) = split_unit(&header);
        TextColumn { name, unit_text, header, offset }
    };
    first.iter().enumerate().map(named).collect()
}

/// `co2 (ppm)` and `co2 [ppm]` are a name and a unit; any other header is a name.
fn split_unit(header: &str) -> (String, Option<String>) {
    for (open, close) in [('(', ')'), ('[', ']')] {
        let Some(inner) = header.strip_suffix(close) else {
            continue;
        };
        // The bracket that matches the last one: units hold brackets of their own, as in `flux (kg
        // (m2 s)-1)`.
        let mut depth = 1;
        for (at, character) in inner.char_indices().rev() {
            if character == close {
                depth += 1;
            } else if character == open {
                depth -= 1;
            }
            if depth == 0 {
                let name = inner[..at].trim();
                let unit = inner[at + 1..].trim();
                if !name.is_empty() && !unit.is_empty() {
                    return (name.to_owned(), Some(unit.to_owned()));
                }
                break;
            }
        }
    }
    (header.to_owned(), None)
}

fn row_length_fault(
    columns: &[TextColumn],
    has_header: bool,
    rows: &RowReader<'_>,
    line: usize,
    delimiter: u8,
) -> FileFault {
    let found = rows.width();
    let expected = columns.len();
    let than = if has_header { "the header has" } else { "the first row has" };
    let fault = FileFault::new(
        "file-row-length",
        format!("the row has {}, {than} {expected}", counted(found, "field")),
    )
    .at_line(line);
    let first_header = columns.first().map_or("", |head| head.header.as_str());
    if first_header.starts_with(['%', '!', '/', ';', '*']) {
        fault.help(format!("`{first_header}` was taken for the column names: comment lines begin with #"))
    } else if rows.has_several_lines() {
        fault.help("a quotation mark is opened in this line and not closed in it")
    } else if delimiter == b',' && found > expected {
        fault.help(
            "if commas are decimal marks, separate the columns by `;` or tabs and say `decimals: comma`; text that holds a comma goes into double quotes",
        )
    } else if found > expected {
        fault.help("text that holds the delimiter goes into double quotes")
    } else {
        fault.help("leave the cell of a missing value empty, but keep its delimiter")
    }
}
