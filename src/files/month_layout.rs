//! The layout of a row a year with a column for each month, unfolded into a row of months.

use super::numbers::{NumberColumn, NumberOptions};
use super::time_column::{ReadEra, TimeColumns};
use super::time_stamps::{OrderedStamps, Stamps, read_stamps};
use super::{DelimitedTable, FileFault, counted, quoted_names};

const MONTH_NAMES: [&str; 12] = [
    "january",
    "february",
    "march",
    "april",
    "may",
    "june",
    "july",
    "august",
    "september",
    "october",
    "november",
    "december",
];

/// Which columns of a table hold the months of the year that its row is of.
#[derive(Debug, PartialEq, Eq)]
pub(super) struct MonthLayout {
    pub(super) year: usize,
    /// The columns of January to December, wherever they stand.
    pub(super) months: [usize; 12],
    /// Columns beside them, such as yearly means: not read.
    others: Vec<usize>,
}

/// The months in order of time, and the value of each.
pub(super) struct Unfolded {
    pub(super) stamps: OrderedStamps,
    pub(super) numbers: NumberColumn,
}

impl MonthLayout {
    /// The layout, where twelve of the columns that tell no time are named by the twelve months and stand beside a
    /// column of years.
    pub(super) fn find(table: &DelimitedTable<'_>, time: TimeColumns, candidates: &[usize]) -> Option<Self> {
        let TimeColumns::Calendar { column: year, era: ReadEra::CommonEra } = time else { return None };
        let mut months = [usize::MAX; 12];
        let mut others = Vec::new();
        for &column in candidates {
            match table.columns.get(column).and_then(|head| month_named(&head.name)) {
                // A month that stands twice leaves open which one is meant.
                Some(month) if months[month] != usize::MAX => return None,
                Some(month) => months[month] = column,
                None => others.push(column),
            }
        }
        (!months.contains(&usize::MAX)).then_some(Self { year, months, others })
    }

    /// What was decided, in words.
    pub(super) fn note(&self, table: &DelimitedTable<'_>) -> String {
        let head = |column: usize| table.columns[column].header.as_str();
        let others = match self.others.as_slice() {
            [] => String::new(),
            others => format!("; {} not read", quoted_names(others.iter().map(|&column| head(column)))),
        };
        format!(
            "a row for each year in `{}` and a column for each month, `{}` to `{}`: read as {}{others}",
            head(self.year),
            head(self.months[0]),
            head(self.months[11]),
            counted(12 * table.row_count(), "month"),
        )
    }

    /// Lays the rows end to end, in order of time.
    ///
    /// # Errors
    /// A year that is no whole number, stands twice or out of order; a cell that is no number, with its line and the
    /// name of its month.
    pub(super) fn unfold(
        &self,
        table: &DelimitedTable<'_>,
        time: TimeColumns,
        options: &NumberOptions,
    ) -> Result<Unfolded, FileFault> {
        let ordered = read_stamps(table, time, options.decimal_comma)?;
        let rows = table.row_count();
        let row_at = |place: usize| if ordered.reversed { rows - 1 - place } else { place };
        let Stamps::Years { years, .. } = &ordered.stamps else {
            return Err(self.not_a_year(table, 0));
        };
        let mut months = Vec::with_capacity(12 * rows);
        for (place, &year) in years.iter().enumerate() {
            if year.fract().abs() > 0.0 || year.abs() > 1e9 {
                return Err(self.not_a_year(table, row_at(place)));
            }
            months.extend((0..12).map(|month| year as i64 * 12 + month));
        }
        let cell = |place: usize| (row_at(place / 12), self.months[place % 12]);
        let numbers = table.numbers_in("value", (0..12 * rows).map(cell), options)?;
        // The values are in order of time already, so nothing is left to be turned round.
        let stamps = OrderedStamps { stamps: Stamps::Months(months), reversed: false, notes: ordered.notes };
        Ok(Unfolded { stamps, numbers })
    }

    fn not_a_year(&self, table: &DelimitedTable<'_>, row: usize) -> FileFault {
        FileFault::new(
            "file-time",
            format!(
                "a row with a column for each month needs a whole year, found `{}`",
                table.cell(row, self.year)
            ),
        )
        .help("write the year alone, as in 1958; or a row for each month, with its time and one value")
        .at_cell(table.line_of_row(row), &table.columns[self.year].header)
    }
}

/// The number, from 0, of the month that a column is named by: whole, or by its first three letters (`Sept` too).
fn month_named(name: &str) -> Option<usize> {
    let name = name.trim_end_matches('.').to_lowercase();
    MONTH_NAMES
        .iter()
        .position(|month| name == *month || name == month[..3] || (name == "sept" && *month == "september"))
}
