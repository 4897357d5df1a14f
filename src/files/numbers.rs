//! Cells to numbers and gaps.

use super::delimited::BETWEEN_LOOKS;
use super::{DelimitedTable, FileFault, counted};
use std::borrow::Cow;

/// How the cells of a column of numbers are written.
#[derive(Debug, Clone, Default)]
pub struct NumberOptions {
    /// What marks a missing value beside an empty cell, `NA`, `NaN`, `nan`, `null`, `-` and `--`. A
    /// marker that is a number (`-999`) is compared as a number, so that it meets `-999.00` too.
    pub missing: Vec<String>,
    /// Numbers are written `3,14`.
    pub decimal_comma: bool,
}

/// The numbers of one column.
#[derive(Debug, Clone)]
pub struct NumberColumn {
    /// One for each row, NaN for a gap; never infinite.
    pub values: Vec<f64>,
    /// What the gaps were, and which values look like unsaid missing markers.
    pub notes: Vec<String>,
}

const MISSING_MARKERS: [&str; 7] = ["", "NA", "NaN", "nan", "null", "-", "--"];

/// What people write for a missing value and we do not guess at (compared in lower case).
const NEAR_MISSING: [&str; 26] = [
    "n/a", "#n/a", "n.a.", "na", "nan", "null", "none", "nil", "missing", "miss", "nd", "n.d.", "no data",
    ".", "..", "...", "*", "**", "***", "?", "x", "---", "—", "–", "#value!", "#div/0!",
];

/// Numbers that customarily stand for a missing value (common practice).
const SENTINELS: [f64; 7] = [-999.0, -99.9, -9999.0, -99.99, 999.9, 9999.0, 1e20];

pub(super) fn is_missing_marker(cell: &str) -> bool {
    MISSING_MARKERS.contains(&cell)
}

/// Reads one number as it is written, without any missing marker: `3.14`, `3,14` when told, `−5`,
/// `1e-3`.
pub(super) fn parse_number(cell: &str, decimal_comma: bool) -> Option<f64> {
    if let Some((number, _)) = short_number(cell, decimal_comma) {
        return Some(number);
    }
    let mut text = Cow::Borrowed(cell);
    if decimal_comma {
        if cell.contains('.') {
            return None;
        }
        if cell.contains(',') {
            text = Cow::Owned(cell.replacen(',', ".", 1));
        }
    }
    if let Ok(number) = text.parse::<f64>() {
        return Some(number);
    }
    // The typographic minus of a spreadsheet or a copied table.
    let sign_made_plain = text.strip_prefix('−')?;
    if !sign_made_plain.starts_with(|c: char| c.is_ascii_digit() || c == '.') {
        return None;
    }
    sign_made_plain.parse::<f64>().ok().map(|number| -number)
}

/// The powers of ten up to the most digits that a [`short_number`] has.
const POWERS_OF_TEN: [f64; 16] =
    [1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15];

/// Reads digits with a sign and a decimal mark, as nearly all numbers are written, at several times the speed of the
/// standard library, and how many of them are decimals; `None` for what has another form or more than 15 digits.
///
/// It gives the same bits: the digits as a whole number and the power of ten are both exact, so that the one division
/// rounds correctly (Clinger 1990, Proceedings of the ACM SIGPLAN 1990 Conference on Programming Language Design and
/// Implementation, 92).
pub(super) fn short_number(cell: &str, decimal_comma: bool) -> Option<(f64, usize)> {
    let mark = if decimal_comma { b',' } else { b'.' };
    let bytes = cell.as_bytes();
    let digits = bytes.strip_prefix(b"-").unwrap_or(bytes);
    if digits.len() > 16 {
        return None;
    }
    let (mut whole, mut mark_at) = (0_u64, None);
    for (at, &byte) in digits.iter().enumerate() {
        if byte.is_ascii_digit() {
            whole = 10 * whole + u64::from(byte - b'0');
        } else if byte == mark && mark_at.is_none() {
            mark_at = Some(at);
        } else {
            return None;
        }
    }
    let (count, decimals) = match mark_at {
        Some(at) => (digits.len() - 1, digits.len() - 1 - at),
        None => (digits.len(), 0),
    };
    if count == 0 || count > 15 {
        return None;
    }
    let size = whole as f64 / POWERS_OF_TEN.get(decimals)?;
    Some((if digits.len() < bytes.len() { -size } else { size }, decimals))
}

struct GapKind {
    marker: String,
    count: usize,
    first_line: usize,
}

impl DelimitedTable<'_> {
    /// Reads a whole column as numbers. `column` counts in `columns`.
    ///
    /// # Errors
    /// `file-not-a-number` with line and column, naming what was found and, where it looks like a
    /// missing marker, how to say so; `file-no-values` when nothing but gaps was found.
    pub fn numbers(&self, column: usize, options: &NumberOptions) -> Result<NumberColumn, FileFault> {
        let name = self.columns.get(column).map_or("", |head| head.name.as_str());
        self.numbers_in(name, (0..self.row_count()).map(|row| (row, column)), options)
    }

    /// Reads cells, each by its row and column, as the numbers of what is called `name`.
    ///
    /// # Errors
    /// As [`DelimitedTable::numbers`].
    pub(super) fn numbers_in(
        &self,
        name: &str,
        cells: impl ExactSizeIterator<Item = (usize, usize)>,
        options: &NumberOptions,
    ) -> Result<NumberColumn, FileFault> {
        let missing_numbers: Vec<f64> = options
            .missing
            .iter()
            .filter_map(|marker| parse_number(marker.trim(), options.decimal_comma))
            .collect();
        let mut gaps: Vec<GapKind> = Vec::new();
        let mut values = Vec::with_capacity(cells.len());
        for (row, column) in cells {
            if values.len().is_multiple_of(BETWEEN_LOOKS) {
                self.cancellation.check()?;
            }
            let cell = self.cell(row, column);
            let said_missing = || options.missing.iter().any(|marker| marker.trim() == cell);
            let value = match parse_number(cell, options.decimal_comma) {
                Some(number) if number.is_finite() => {
                    // Both were parsed from text, so equal numbers are the same bits.
                    let is_gap = missing_numbers.iter().any(|&missing| (missing - number).abs() <= 0.0);
                    (!is_gap).then_some(number)
                }
                Some(_) => None,
                None if is_missing_marker(cell) || said_missing() => None,
                None => {
                    return Err(self.not_a_number(row, column, cell, options.decimal_comma));
                }
            };
            values.push(value.unwrap_or(f64::NAN));
            if value.is_none() {
                match gaps.iter_mut().find(|kind| kind.marker == cell) {
                    Some(kind) => kind.count += 1,
                    None => gaps.push(GapKind {
                        marker: cell.to_owned(),
                        count: 1,
                        first_line: self.line_of_row(row),
                    }),
                }
            }
        }
        let gap_count: usize = gaps.iter().map(|kind| kind.count).sum();
        if gap_count == values.len() {
            return Err(FileFault::new(
                "file-no-values",
                format!("column `{name}` holds no number, only missing values"),
            ));
        }
        let mut notes = Vec::new();
        if gap_count > 0 {
            notes.push(gap_note(name, &gaps, gap_count, values.len()));
        }
        notes.extend(sentinel_notes(name, &values));
        Ok(NumberColumn { values, notes })
    }

    /// The fault for a cell that should have been a number.
    pub(super) fn not_a_number(
        &self,
        row: usize,
        column: usize,
        cell: &str,
        decimal_comma: bool,
    ) -> FileFault {
        let header = self.columns.get(column).map_or("", |head| head.header.as_str());
        let found = if cell.is_empty() { "an empty cell".to_owned() } else { format!("`{cell}`") };
        let fault = FileFault::new("file-not-a-number", format!("expected a number, found {found}"))
            .at_cell(self.line_of_row(row), header);
        match advice(cell, decimal_comma) {
            Some(help) => fault.help(help),
            None => fault,
        }
    }
}

/// What to write instead of a cell that is no number.
fn advice(cell: &str, decimal_comma: bool) -> Option<String> {
    let folded = cell.to_lowercase();
    if NEAR_MISSING.contains(&folded.as_str()) {
        return Some(format!("if `{cell}` marks a missing value, say missing: \"{cell}\""));
    }
    if decimal_comma && cell.contains('.') {
        return Some(
            "with `decimals: comma` a number has no point; leave it out if points are decimal marks"
                .to_owned(),
        );
    }
    let with_point = cell.replacen(',', ".", 1);
    if !decimal_comma && cell.contains(',') && with_point.parse::<f64>().is_ok() {
        return Some(
            "if commas are decimal marks, say `decimals: comma`; if they group thousands, take them out"
                .to_owned(),
        );
    }
    let joined: String = cell.chars().filter(|c| !c.is_whitespace() && !",'_".contains(*c)).collect();
    if joined != cell && joined.parse::<f64>().is_ok() {
        return Some(format!("write {joined}, without marks between the digits"));
    }
    let exponent_as_e = folded.replace('d', "e");
    if folded.contains('d') && exponent_as_e.parse::<f64>().is_ok() {
        return Some(format!("write the exponent with e: {exponent_as_e}"));
    }
    let number_length = cell.find(|c: char| !(c.is_ascii_digit() || "+-.".contains(c))).unwrap_or(0);
    let (number, rest) = cell.split_at(number_length);
    if number.parse::<f64>().is_ok() {
        return Some(format!(
            "write only the number {number}; a unit goes into the column name, as in `name (unit)`, and \
             what is more than that (`{}`) into a column of its own",
            rest.trim()
        ));
    }
    None
}

fn gap_note(name: &str, gaps: &[GapKind], gap_count: usize, row_count: usize) -> String {
    let kinds: Vec<String> = gaps
        .iter()
        .take(6)
        .map(|kind| {
            let marker =
                if kind.marker.is_empty() { "empty".to_owned() } else { format!("`{}`", kind.marker) };
            format!("{} {marker} (first in line {})", kind.count, kind.first_line)
        })
        .collect();
    let more = if gaps.len() > kinds.len() { ", …" } else { "" };
    format!(
        "{name}: {gap_count} of {} missing and kept as gaps: {}{more}",
        counted(row_count, "value"),
        kinds.join(", ")
    )
}

/// Says which values look like missing markers, and leaves them as they are.
fn sentinel_notes(name: &str, values: &[f64]) -> Vec<String> {
    let is = |value: f64, sentinel: f64| (value - sentinel).abs() <= sentinel.abs() * 1e-12;
    // NaN is passed over by both.
    let (lowest, highest) = values.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), &value| {
        (if value < low { value } else { low }, if value > high { value } else { high })
    });
    let in_reach = |sentinel: f64| {
        let reach = sentinel.abs() * 1e-9;
        lowest - reach <= sentinel && sentinel <= highest + reach
    };
    if !SENTINELS.into_iter().any(in_reach) {
        return Vec::new();
    }
    let mut counts = [0_usize; SENTINELS.len()];
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    for &value in values.iter().filter(|value| !value.is_nan()) {
        match SENTINELS.iter().position(|&sentinel| is(value, sentinel)) {
            Some(which) => counts[which] += 1,
            None => {
                low = low.min(value);
                high = high.max(value);
            }
        }
    }
    if low > high {
        return Vec::new();
    }
    let others = if low < high { format!("lie between {low} and {high}") } else { format!("are all {low}") };
    // Far away: farther from the other values than those are from each other.
    SENTINELS
        .iter()
        .zip(counts)
        .filter(|&(&sentinel, count)| count > 0 && (low - sentinel).max(sentinel - high) > high - low)
        .map(|(&sentinel, count)| {
            let are = if count == 1 { "value is" } else { "values are" };
            let (shown, pronoun) = (
                if sentinel.abs() < 1e19 { format!("{sentinel}") } else { format!("{sentinel:e}") },
                if count == 1 { "it is a gap" } else { "they are gaps" },
            );
            let typographic = shown.replace('-', "−");
            format!(
                "{name}: {count} {are} {typographic}, a customary missing marker, while the others \
                 {others}: say missing: \"{shown}\" if {pronoun}"
            )
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::files::{DelimitedOptions, read_table};

    fn numbers(text: &str, missing: &[&str], decimal_comma: bool) -> Result<NumberColumn, FileFault> {
        let table =
            read_table(text.as_bytes(), &DelimitedOptions { decimal_comma, ..DelimitedOptions::default() })?;
        let column = table.column_named("value")?;
        let missing = missing.iter().map(|&marker| marker.to_owned()).collect();
        table.numbers(column, &NumberOptions { missing, decimal_comma })
    }

    fn fault(text: &str) -> String {
        match numbers(text, &[], false) {
            Ok(column) => format!("read as {:?}", column.values),
            Err(fault) => fault.to_string(),
        }
    }

    proptest::proptest! {
        #[test]
        fn a_number_has_the_bits_that_the_standard_library_reads(
            cell in "-?[0-9]{0,17}(\\.[0-9]{0,17})?", comma in proptest::bool::ANY,
        ) {
            let written = if comma { cell.replace('.', ",") } else { cell.clone() };
            let bits = |number: Option<f64>| number.map(f64::to_bits);
            proptest::prop_assert_eq!(bits(parse_number(&written, comma)), bits(cell.parse().ok()));
        }
    }

    #[test]
    fn each_marker_of_a_gap_is_counted_with_its_first_line() -> Result<(), FileFault> {
        let text = "year,value\n1,2\n2,NA\n3,\n4,NaN\n5,nan\n6,null\n7,-\n8,--\n9,inf\n10,NA\n11,-Infinity\n";
        let column = numbers(text, &[], false)?;
        assert_eq!(column.values.iter().filter(|value| value.is_nan()).count(), 10);
        let note = column.notes.join("\n");
        assert!(note.contains("10 of 11 values missing and kept as gaps"), "{note}");
        assert!(
            note.contains("2 `NA` (first in line 3)") && note.contains("1 empty (first in line 4)"),
            "{note}"
        );
        Ok(())
    }

    #[test]
    fn a_said_marker_is_compared_as_a_number_and_as_text() -> Result<(), FileFault> {
        let column = numbers("year,value\n1,-999.00\n2,gone\n3,5\n", &["-999", "gone"], false)?;
        assert!(column.values[0].is_nan() && column.values[1].is_nan() && !column.values[2].is_nan());
        assert_eq!(column.notes.len(), 1, "{:?}", column.notes);
        Ok(())
    }

    #[test]
    fn a_lonely_sentinel_is_kept_and_warned_of() -> Result<(), FileFault> {
        let column = numbers("year,value\n1,-999\n2,0.5\n3,1.5\n4,-999\n", &[], false)?;
        assert!((column.values[0] + 999.0).abs() < 1e-9);
        assert!(
            column.notes[0].contains("2 values are −999, a customary missing marker"),
            "{:?}",
            column.notes
        );
        assert!(column.notes[0].ends_with("say missing: \"-999\" if they are gaps"), "{:?}", column.notes);
        let large = numbers("year,value\n1,1e20\n2,0.5\n", &[], false)?;
        assert!(large.notes[0].contains("missing: \"1e20\" if it is a gap"), "{:?}", large.notes);
        Ok(())
    }

    #[test]
    fn a_sentinel_among_its_like_is_a_value() -> Result<(), FileFault> {
        let column = numbers("year,value\n1,-999\n2,-1200\n3,900\n", &[], false)?;
        assert_eq!(column.notes, Vec::<String>::new());
        Ok(())
    }

    #[test]
    fn a_cell_that_is_no_number_is_named_with_line_and_column() {
        assert_eq!(
            fault("# c\nyear,value\n1,2\n\n2,n/a\n"),
            "line 5, column `value`: expected a number, found `n/a` (if `n/a` marks a missing value, say \
             missing: \"n/a\")"
        );
        assert!(fault("year;value\n1;3,14\n").contains("decimals: comma"));
        assert!(fault("year;value\n1;1 234.5\n").contains("write 1234.5"));
        assert!(fault("year,value\n1,1.0D+03\n").contains("write the exponent with e: 1.0e+03"));
        assert!(fault("year,value\n1,280 ppm\n").contains("write only the number 280"));
        assert!(fault("year,value\n1,abc\n").ends_with("found `abc`"));
    }

    #[test]
    fn decimal_commas_are_read_when_told_and_then_points_are_refused() -> Result<(), FileFault> {
        let column = numbers("year;value\n1;3,25\n2;−2,5\n3;7\n", &[], true)?;
        for (value, expected) in column.values.iter().zip([3.25_f64, -2.5, 7.0]) {
            assert!((value - expected).abs() < 1e-12);
        }
        let refused = numbers("year;value\n1;3.14\n", &[], true);
        assert!(refused.is_err_and(|fault| fault.help.is_some_and(|help| help.contains("no point"))));
        Ok(())
    }

    #[test]
    fn a_column_of_gaps_alone_is_refused() {
        assert!(fault("year,value\n1,NA\n2,\n").contains("holds no number"));
    }
}
