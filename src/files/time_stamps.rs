//! Time cells to stamps (years, months, dates, ages), in ascending order.

use super::calendar::{Date, days_before_month, days_before_year, days_in_month, parse_date};
use super::numbers::{parse_number, short_number};
use super::time_column::{AgeScale, ReadEra, TimeColumns};
use super::{DelimitedTable, FileFault};

/// The times as the file has them, one for each row, ascending.
#[derive(Debug)]
pub(super) enum Stamps {
    /// Years CE with the largest number of printed decimals.
    Years { years: Vec<f64>, decimals: usize },
    /// Months, counted from January of year 0.
    Months(Vec<i64>),
    /// Days, counted from 1 January of year 0, and the fraction of the day.
    Dates(Vec<(i64, f64)>),
    /// Years CE of points whose age was given.
    Ages(Vec<f64>),
    /// Years CE of the ends of layers: (older, younger).
    Layers(Vec<(f64, f64)>),
}

/// Stamps and the row of each.
#[derive(Debug)]
pub(super) struct OrderedStamps {
    pub(super) stamps: Stamps,
    /// The rows ran from late to early and were turned round.
    pub(super) reversed: bool,
    pub(super) notes: Vec<String>,
}

/// Reads the time columns of every row and brings them into ascending order.
///
/// # Errors
/// A time that cannot be read, a time that occurs twice, rows in no order.
pub(super) fn read_stamps(
    table: &DelimitedTable<'_>,
    columns: TimeColumns,
    decimal_comma: bool,
) -> Result<OrderedStamps, FileFault> {
    let reader = CellReader { table, decimal_comma };
    let mut notes = Vec::new();
    let (mut stamps, lead) = match columns {
        TimeColumns::Calendar { column, era } => (reader.calendar(column, era, &mut notes)?, column),
        TimeColumns::Parts { year, month, day } => (reader.parts(year, month, day)?, year),
        TimeColumns::Ages { column, scale } => {
            let read = |row| reader.age(row, column, scale);
            (Stamps::Ages((0..table.row_count()).map(read).collect::<Result<_, _>>()?), column)
        }
        TimeColumns::Layers { top, bottom, scale } => (reader.layers(top, bottom, scale)?, bottom),
    };
    let name = &table.columns[lead].header;
    let shown = |row: usize| match columns {
        TimeColumns::Parts { year, month, day } => {
            let day = day.map_or_else(String::new, |day| format!("-{}", table.cell(row, day)));
            format!("{}-{}{day}", table.cell(row, year), table.cell(row, month))
        }
        TimeColumns::Layers { bottom, .. } => table.cell(row, bottom).to_owned(),
        TimeColumns::Calendar { column, .. } | TimeColumns::Ages { column, .. } => {
            table.cell(row, column).to_owned()
        }
    };
    let reversed = match &mut stamps {
        Stamps::Years { years, .. } | Stamps::Ages(years) => {
            put_in_order(table, name, &shown, years, |year| *year)?
        }
        Stamps::Months(months) => put_in_order(table, name, &shown, months, |month| *month as f64)?,
        Stamps::Dates(dates) => {
            put_in_order(table, name, &shown, dates, |(day, fraction)| *day as f64 + fraction)?
        }
        Stamps::Layers(layers) => put_in_order(table, name, &shown, layers, |(older, _)| *older)?,
    };
    if let Stamps::Layers(layers) = &stamps {
        check_layers_apart(table, layers, reversed)?;
    }
    let is_age = matches!(columns, TimeColumns::Ages { .. } | TimeColumns::Layers { .. });
    if reversed && !is_age {
        notes.push(format!("{name}: the rows run from late to early and were turned round"));
    } else if reversed {
        notes.push(format!(
            "{name}: the rows run from young to old and were turned round, so that time goes forward"
        ));
    }
    Ok(OrderedStamps { stamps, reversed, notes })
}

/// Turns descending stamps round; says whether it did.
fn put_in_order<T>(
    table: &DelimitedTable<'_>,
    name: &str,
    shown: &dyn Fn(usize) -> String,
    stamps: &mut [T],
    key: impl Fn(&T) -> f64,
) -> Result<bool, FileFault> {
    let descending = match (stamps.first(), stamps.last()) {
        (Some(first), Some(last)) => key(first) > key(last),
        _ => false,
    };
    for row in 1..stamps.len() {
        let (before, here) = (key(&stamps[row - 1]), key(&stamps[row]));
        let forward = if descending { before - here } else { here - before };
        if forward > 0.0 {
            continue;
        }
        return Err(out_of_order(table, name, shown, stamps, row, key));
    }
    if descending {
        stamps.reverse();
    }
    Ok(descending)
}

/// A time that occurs twice anywhere is the likelier cause of a break in the order, and is named
/// first.
fn out_of_order<T>(
    table: &DelimitedTable<'_>,
    name: &str,
    shown: &dyn Fn(usize) -> String,
    stamps: &[T],
    row: usize,
    key: impl Fn(&T) -> f64,
) -> FileFault {
    let mut by_time: Vec<usize> = (0..stamps.len()).collect();
    by_time.sort_by(|&a, &b| key(&stamps[a]).total_cmp(&key(&stamps[b])).then(a.cmp(&b)));
    let twice = by_time
        .windows(2)
        .filter(|pair| key(&stamps[pair[0]]) >= key(&stamps[pair[1]]))
        .map(|pair| (pair[1], pair[0]))
        .min();
    if let Some((second, first)) = twice {
        return FileFault::new(
            "file-time-twice",
            format!(
                "the time {} occurs twice, in line {} and in line {}",
                shown(second),
                table.line_of_row(first),
                table.line_of_row(second)
            ),
        )
        .help(
            "each time needs one row; if the rows belong to different records, put them into different \
             columns or files",
        )
        .at_cell(table.line_of_row(second), name);
    }
    FileFault::new(
        "file-time-order",
        format!(
            "the time {} is out of order after {} in line {}",
            shown(row),
            shown(row - 1),
            table.line_of_row(row - 1)
        ),
    )
    .help("sort the rows by time, either way")
    .at_cell(table.line_of_row(row), name)
}

fn check_layers_apart(
    table: &DelimitedTable<'_>,
    layers: &[(f64, f64)],
    reversed: bool,
) -> Result<(), FileFault> {
    for index in 1..layers.len() {
        let ((_, younger), (older, _)) = (layers[index - 1], layers[index]);
        // Ages that touch come from the same printed number and are equal to the last bits.
        if older < younger - 1e-6 {
            let row = |index: usize| {
                if reversed { layers.len() - 1 - index } else { index }
            };
            let (first, second) = (row(index - 1).min(row(index)), row(index - 1).max(row(index)));
            return Err(FileFault::new(
                "file-age-layers",
                format!("the layer overlaps the one in line {}", table.line_of_row(first)),
            )
            .help("each layer must end where the next begins, or before")
            .at_line(table.line_of_row(second)));
        }
    }
    Ok(())
}

struct CellReader<'a> {
    table: &'a DelimitedTable<'a>,
    decimal_comma: bool,
}

impl CellReader<'_> {
    fn fault(&self, row: usize, column: usize, message: String) -> FileFault {
        FileFault::new("file-time", message)
            .at_cell(self.table.line_of_row(row), &self.table.columns[column].header)
    }

    fn number(&self, row: usize, column: usize) -> Result<f64, FileFault> {
        self.number_in(self.table.cell(row, column), row, column)
    }

    /// The number in a cell that was already looked up.
    fn number_in(&self, cell: &str, row: usize, column: usize) -> Result<f64, FileFault> {
        match parse_number(cell, self.decimal_comma) {
            Some(number) if number.is_finite() => Ok(number),
            Some(_) | None if super::numbers::is_missing_marker(cell) => Err(self
                .fault(row, column, "the time is missing".to_owned())
                .help("every row needs its time")),
            Some(_) | None => Err(self.table.not_a_number(row, column, cell, self.decimal_comma)),
        }
    }

    /// A number as printed, times a power of ten, correctly rounded: 0.051 ka is 51 years, not
    /// 50.99….
    fn scaled(&self, row: usize, column: usize, exponent: i32) -> Result<f64, FileFault> {
        let plain = self.number(row, column)?;
        let cell = self.table.cell(row, column);
        if exponent == 0 || cell.contains(['e', 'E']) {
            return Ok(plain * 10_f64.powi(exponent));
        }
        let text = format!("{}e{exponent}", cell.replace('−', "-").replace(',', "."));
        Ok(text.parse().unwrap_or(plain * 10_f64.powi(exponent)))
    }

    fn age(&self, row: usize, column: usize, scale: AgeScale) -> Result<f64, FileFault> {
        let age_years = self.scaled(row, column, scale.unit_exponent)?;
        if age_years.is_finite() {
            return Ok(f64::from(scale.datum_year) - age_years);
        }
        let cell = self.table.cell(row, column);
        Err(self.fault(row, column, format!("the age `{cell}` is beyond all bounds")))
    }

    fn layers(&self, top: usize, bottom: usize, scale: AgeScale) -> Result<Stamps, FileFault> {
        let read = |row: usize| {
            let older = self.age(row, bottom, scale)?;
            let younger = self.age(row, top, scale)?;
            if older < younger {
                return Ok((older, younger));
            }
            let message = format!(
                "the bottom of the layer ({}) is not older than its top ({})",
                self.table.cell(row, bottom),
                self.table.cell(row, top)
            );
            Err(FileFault::new("file-age-layers", message).at_line(self.table.line_of_row(row)))
        };
        Ok(Stamps::Layers((0..self.table.row_count()).map(read).collect::<Result<_, FileFault>>()?))
    }

    /// A year; what looks like a date instead is told how to be written.
    fn year(&self, cell: &str, row: usize, column: usize) -> Result<f64, FileFault> {
        self.number_in(cell, row, column).map_err(|fault| {
            let numeric = cell.starts_with(|c: char| c.is_ascii_digit());
            let date_like = !numeric || cell.contains(['/', '-', '.']);
            if fault.code == "file-not-a-number" && date_like { fault.help(DATE_HELP) } else { fault }
        })
    }

    /// Years or dates: the first cell tells which, and the others must follow.
    fn calendar(&self, column: usize, era: ReadEra, notes: &mut Vec<String>) -> Result<Stamps, FileFault> {
        let table = self.table;
        if let Some(first) = parse_date(table.cell(0, column)) {
            let read = |row: usize| {
                let cell = table.cell(row, column);
                let date = parse_date(cell).ok_or_else(|| {
                    self.fault(row, column, format!("expected a date, found `{cell}`")).help(DATE_HELP)
                })?;
                if date.day.is_some() != first.day.is_some() {
                    return Err(self
                        .fault(
                            row,
                            column,
                            format!(
                                "`{cell}` is not written like the first date, `{}`",
                                table.cell(0, column)
                            ),
                        )
                        .help("write all as 2015-06 or all as 2015-06-15"));
                }
                self.check_date(row, column, date)
            };
            return self.dates(first.day.is_some(), read);
        }
        let mut decimals = 0;
        let mut years = Vec::with_capacity(table.row_count());
        for row in 0..table.row_count() {
            let cell = table.cell(row, column);
            let (year, printed) = match short_number(cell, self.decimal_comma) {
                Some(number) => number,
                None => (self.year(cell, row, column)?, printed_decimals(cell)),
            };
            decimals = decimals.max(printed);
            years.push(if era == ReadEra::BeforeCommonEra { 1.0 - year } else { year });
        }
        if years.iter().all(|&year| looks_like_year_and_month(year)) {
            let cell = table.cell(0, column);
            return Err(self
                .fault(0, column, format!("`{cell}` looks like a year and a month in one number"))
                .help("write 2015-06 or 2015-06-15, or year, month and day in columns of their own"));
        }
        if decimals == 2 && look_like_years_and_months_apart_by_a_point(&years) {
            let cell = table.cell(0, column);
            return Err(self
                .fault(
                    0,
                    column,
                    format!(
                        "`{cell}` looks like a year and a month with a point between them, not a decimal year"
                    ),
                )
                .help("write months as 1958-03, or decimal years with three decimals"));
        }
        let unlikely_zero = years.iter().any(|&year| year < 0.0) && era == ReadEra::CommonEra;
        if unlikely_zero {
            notes.push(format!(
                "{}: negative years are read as astronomical ones (0 is 1 BCE, −1 is 2 BCE)",
                table.columns[column].header
            ));
        }
        if era == ReadEra::CommonEra && decimals == 0 && years.iter().all(|&year| year > 9999.0) {
            notes.push(format!(
                "{}: all years are after 9999 CE: if these are the day numbers of a spreadsheet, write them as \
                 dates",
                table.columns[column].header
            ));
        }
        Ok(Stamps::Years { years, decimals })
    }

    fn parts(&self, year: usize, month: usize, day: Option<usize>) -> Result<Stamps, FileFault> {
        let whole = |row: usize, column: usize| -> Result<i64, FileFault> {
            let number = self.number(row, column)?;
            if number.fract().abs() > 0.0 || number.abs() > 1e9 {
                let cell = self.table.cell(row, column);
                return Err(self.fault(row, column, format!("expected a whole number, found `{cell}`")));
            }
            Ok(number as i64)
        };
        let read = |row: usize| {
            let date = Date {
                year: whole(row, year)?,
                month: whole(row, month)?,
                day: day.map(|day| whole(row, day)).transpose()?,
                day_fraction: 0.0,
            };
            let blamed = if (1..=12).contains(&date.month) { day.unwrap_or(month) } else { month };
            self.check_date(row, blamed, date)
        };
        self.dates(day.is_some(), read)
    }

    fn dates(
        &self,
        with_day: bool,
        read: impl Fn(usize) -> Result<Date, FileFault>,
    ) -> Result<Stamps, FileFault> {
        let rows = 0..self.table.row_count();
        if with_day {
            let number = |date: Date| {
                let first_of_month = days_before_year(date.year) + days_before_month(date.year, date.month);
                (first_of_month + date.day.unwrap_or(1) - 1, date.day_fraction)
            };
            return Ok(Stamps::Dates(rows.map(|row| read(row).map(number)).collect::<Result<_, _>>()?));
        }
        let number = |date: Date| date.year * 12 + date.month - 1;
        Ok(Stamps::Months(rows.map(|row| read(row).map(number)).collect::<Result<_, _>>()?))
    }

    fn check_date(&self, row: usize, column: usize, date: Date) -> Result<Date, FileFault> {
        if !(1..=12).contains(&date.month) {
            return Err(self
                .fault(row, column, format!("there is no month {}", date.month))
                .help("months are 1 to 12"));
        }
        let length = days_in_month(date.year, date.month);
        match date.day {
            Some(day) if !(1..=length).contains(&day) => Err(self.fault(
                row,
                column,
                format!("there is no day {day} in {}-{:02}, which has {length} days", date.year, date.month),
            )),
            Some(_) | None => Ok(date),
        }
    }
}

const DATE_HELP: &str =
    "write dates as 2015-06-15 or 2015-06: in other orders day and month cannot be told apart";

/// `195803`, `19580315`: a year never runs past five digits in a file that anybody keeps.
fn looks_like_year_and_month(year: f64) -> bool {
    let whole = year.fract().abs() <= 0.0;
    let month = match year {
        100_000.0..=999_999.0 => year % 100.0,
        10_000_000.0..=99_999_999.0 => (year / 100.0).floor() % 100.0,
        _ => return false,
    };
    whole && (1.0..=12.0).contains(&month)
}

/// `1958.01`, `1958.02`, … `1958.12`: read as decimal years, they would all lie in January and February.
fn look_like_years_and_months_apart_by_a_point(years: &[f64]) -> bool {
    let months: Vec<Option<i64>> = years
        .iter()
        .map(|year| {
            let hundredths = (year * 100.0).round() as i64;
            (1..=12)
                .contains(&hundredths.rem_euclid(100))
                .then(|| hundredths.div_euclid(100) * 12 + hundredths.rem_euclid(100))
        })
        .collect();
    let neighbours = months.windows(2).filter(|pair| match pair {
        [Some(before), Some(after)] => (after - before).abs() == 1,
        _ => false,
    });
    years.len() >= 6 && !months.contains(&None) && neighbours.count() * 2 >= years.len()
}

/// How many decimals a number is printed with; an exponent makes them unknown, and counted as many.
fn printed_decimals(cell: &str) -> usize {
    if cell.contains(['e', 'E']) {
        return 12;
    }
    cell.find(['.', ',']).map_or(0, |at| cell.len() - at - 1)
}
