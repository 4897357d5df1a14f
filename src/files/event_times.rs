//! Columns of a table to the times of events, by the same rules that tell the times of a series.

use super::FileFault;
use super::calendar::{days_before_month, days_in_month, days_in_year, parse_date};
use super::time_column::{HeaderTime, ReadEra, time_of_header};

/// One cell that tells a time, or a part of one.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum TimeCell<'a> {
    /// A number.
    Number(f64),
    /// Words: a date.
    Words(&'a str),
    /// Nothing.
    Missing,
}

/// The columns that tell when events happened.
#[derive(Debug, Clone)]
pub struct EventColumns<'a> {
    /// The name of the column of times, without its unit.
    pub name: &'a str,
    /// Its unit, as the table words it.
    pub unit_text: Option<&'a str>,
    /// Its cells.
    pub times: Vec<TimeCell<'a>>,
    /// Months of the year, 1 to 12, beside a column of years.
    pub months: Option<Vec<TimeCell<'a>>>,
    /// Days of the month, beside a column of months.
    pub days: Option<Vec<TimeCell<'a>>>,
}

/// When events happened, in the order of the table.
#[derive(Debug, Clone)]
pub struct EventTimes {
    /// Decimal years CE, astronomical.
    pub years: Vec<f64>,
    /// How the table counts its times.
    pub era: ReadEra,
    /// Every decision, in the order taken.
    pub notes: Vec<String>,
}

/// What a column can tell about the times of events, by its name and unit.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum TimeRole {
    /// Years, dates or ages.
    Time,
    /// The month of the year.
    Month,
    /// The day of the month.
    Day,
    /// Nothing.
    Other,
}

/// What a column is by its name and unit.
pub fn time_role(name: &str, unit_text: Option<&str>) -> TimeRole {
    match time_of_header(name, unit_text, false) {
        Ok(HeaderTime::Month) => TimeRole::Month,
        Ok(HeaderTime::Day) => TimeRole::Day,
        Ok(HeaderTime::Other) => TimeRole::Other,
        // An age that does not say its unit is a time all the same; reading it says what is wrong.
        Ok(HeaderTime::Calendar(_) | HeaderTime::Age { .. }) | Err(_) => TimeRole::Time,
    }
}

/// The times of events: ages and decimal years as they are; a date at its beginning; a year without month in its
/// middle, a month without day in the middle of it.
///
/// # Errors
/// A column that tells no time (plain BP, an age without unit); a row whose time is missing, no number, or no date of
/// the calendar. Rows are counted from 1.
pub fn event_times(columns: &EventColumns<'_>) -> Result<EventTimes, FileFault> {
    let header = time_of_header(columns.name, columns.unit_text, true)?;
    let mut middles = 0;
    let mut years = Vec::with_capacity(columns.times.len());
    let era = match header {
        HeaderTime::Age { era, datum_year, unit_exponent } => {
            for (row, cell) in columns.times.iter().enumerate() {
                let TimeCell::Number(age) = cell else { return Err(no_time(columns.name, row, *cell)) };
                years.push(f64::from(datum_year) - age * 10_f64.powi(unit_exponent));
            }
            era
        }
        HeaderTime::Calendar(era) => {
            for (row, cell) in columns.times.iter().enumerate() {
                let (year, in_middle) = calendar_year(columns, era, row, *cell)?;
                middles += usize::from(in_middle);
                years.push(year);
            }
            era
        }
        HeaderTime::Month | HeaderTime::Day | HeaderTime::Other => {
            return Err(FileFault::new("file-no-time-column", format!("`{}` tells no time", columns.name)));
        }
    };
    let mut notes = Vec::new();
    if middles > 0 {
        notes.push(format!(
            "{}: {} whole years without more, each taken at its middle",
            columns.name,
            if middles == years.len() { "all are".to_owned() } else { format!("{middles} are") }
        ));
    }
    if years.iter().any(|year| *year < 0.0) && era == ReadEra::CommonEra {
        notes.push(format!(
            "{}: negative years are read as astronomical ones (0 is 1 BCE, −1 is 2 BCE)",
            columns.name
        ));
    }
    Ok(EventTimes { years, era, notes })
}

/// The decimal year of one row, and whether it is the middle of a year of which no more is known.
fn calendar_year(
    columns: &EventColumns<'_>,
    era: ReadEra,
    row: usize,
    cell: TimeCell<'_>,
) -> Result<(f64, bool), FileFault> {
    let number = match cell {
        TimeCell::Number(number) => number,
        TimeCell::Words(text) => {
            let date = parse_date(text).ok_or_else(|| no_time(columns.name, row, cell))?;
            let (month, day) = (date.month, date.day);
            return Ok((
                date_year(columns.name, row, date.year, month, day)?
                    + day_share(date.year, date.day_fraction),
                false,
            ));
        }
        TimeCell::Missing => return Err(no_time(columns.name, row, cell)),
    };
    let year = if era == ReadEra::BeforeCommonEra { 1.0 - number } else { number };
    if year.fract().abs() > 0.0 || year.abs() > 1e9 {
        return Ok((year, false));
    }
    let part =
        |cells: &Option<Vec<TimeCell<'_>>>, what: &str| match cells.as_ref().and_then(|cells| cells.get(row))
        {
            None | Some(TimeCell::Missing) => Ok(None),
            Some(TimeCell::Number(number)) if number.fract().abs() <= 0.0 => Ok(Some(*number as i64)),
            Some(TimeCell::Number(_) | TimeCell::Words(_)) => {
                Err(FileFault::new("file-time", format!("row {}: the {what} is no whole number", row + 1)))
            }
        };
    match part(&columns.months, "month")? {
        None => Ok((year + 0.5, true)),
        Some(month) => {
            let day = part(&columns.days, "day")?;
            Ok((date_year(columns.name, row, year as i64, month, day)?, false))
        }
    }
}

/// The beginning of a day, or the middle of a month.
fn date_year(name: &str, row: usize, year: i64, month: i64, day: Option<i64>) -> Result<f64, FileFault> {
    let length = days_in_month(year, month);
    let possible = day.is_none_or(|day| (1..=length).contains(&day));
    if length == 0 || !possible {
        let what = if length == 0 {
            format!("there is no month {month}")
        } else {
            format!("there is no day {} in {year}-{month:02}, which has {length} days", day.unwrap_or(0))
        };
        return Err(FileFault::new("file-time", format!("`{name}`, row {}: {what}", row + 1)));
    }
    let share = match day {
        None => (month as f64 - 0.5) / 12.0,
        Some(day) => (days_before_month(year, month) + day - 1) as f64 / days_in_year(year) as f64,
    };
    Ok(year as f64 + share)
}

fn day_share(year: i64, day_fraction: f64) -> f64 {
    day_fraction / days_in_year(year) as f64
}

fn no_time(name: &str, row: usize, cell: TimeCell<'_>) -> FileFault {
    let found = match cell {
        TimeCell::Missing => "the time is missing".to_owned(),
        TimeCell::Words(text) => format!("expected a year, a date or an age, found `{text}`"),
        TimeCell::Number(number) => format!("expected a time, found {number}"),
    };
    FileFault::new("file-time", format!("`{name}`, row {}: {found}", row + 1))
        .help("every event needs its time: a year, a date as 2015-06-15 or 2015-06, or an age whose unit is in the name")
}

#[cfg(test)]
mod tests {
    use super::TimeCell::{Missing, Number, Words};
    use super::*;

    fn columns<'a>(name: &'a str, unit_text: Option<&'a str>, times: &[TimeCell<'a>]) -> EventColumns<'a> {
        EventColumns { name, unit_text, times: times.to_vec(), months: None, days: None }
    }

    fn years(columns: &EventColumns<'_>) -> Vec<f64> {
        event_times(columns).map_or_else(|fault| panic!("{fault}"), |times| times.years)
    }

    fn close(found: &[f64], expected: &[f64]) -> bool {
        found.len() == expected.len()
            && found.iter().zip(expected).all(|(found, expected)| (found - expected).abs() < 1e-9)
    }

    #[test]
    fn a_year_is_taken_at_its_middle_a_month_too_and_a_date_at_its_beginning() {
        assert!(close(
            &years(&columns("year", None, &[Number(1257.0), Number(1815.25)])),
            &[1257.5, 1815.25]
        ));
        let dated =
            columns("date", None, &[Words("1815-04-10"), Words("1904-12"), Words("1901-01-01T12:00:00Z")]);
        // 10 April is day 99 from 0 of a common year: 31 + 28 + 31 + 9.
        assert!(close(&years(&dated), &[1815.0 + 99.0 / 365.0, 1904.0 + 11.5 / 12.0, 1901.0 + 0.5 / 365.0]));
        let parts = EventColumns {
            months: Some(vec![Number(4.0), Number(4.0), Missing]),
            days: Some(vec![Number(10.0), Missing, Missing]),
            ..columns("year", None, &[Number(1815.0); 3])
        };
        assert!(close(&years(&parts), &[1815.0 + 99.0 / 365.0, 1815.0 + 3.5 / 12.0, 1815.5]));
    }

    #[test]
    fn ages_count_back_from_their_own_datum() {
        assert!(close(&years(&columns("age", Some("ka"), &[Number(21.0)])), &[-19_050.0]));
        assert!(close(&years(&columns("age_b2k", None, &[Number(11_700.0)])), &[-9_700.0]));
        assert!(close(&years(&columns("year_bce", None, &[Number(44.0)])), &[-42.5]));
    }

    #[test]
    fn what_tells_no_time_is_refused_with_its_row() {
        let said = |columns: &EventColumns<'_>| {
            event_times(columns).map_or_else(|fault| fault.to_string(), |_| String::new())
        };
        assert!(said(&columns("age", Some("BP"), &[Number(450.0)])).contains("uncalibrated"));
        assert!(said(&columns("year", None, &[Number(1.0), Missing])).contains("row 2: the time is missing"));
        assert!(
            said(&columns("date", None, &[Words("10/04/1815")])).contains("row 1: expected a year, a date")
        );
        assert!(said(&columns("date", None, &[Words("1815-02-30")])).contains("there is no day 30"));
        let month =
            EventColumns { months: Some(vec![Number(13.0)]), ..columns("year", None, &[Number(1815.0)]) };
        assert!(said(&month).contains("there is no month 13"));
        assert!(said(&columns("depth", Some("m"), &[Number(3.0)])).contains("not known"));
    }
}
