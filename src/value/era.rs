use std::fmt;

use super::block::Block;
use crate::base::Fault;

/// How an instant is counted. Inside, every instant is a decimal year CE with a year zero.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Era {
    /// Years of the common era.
    Ce,
    /// Years before the common era; there is no year zero, 1 BCE is year 0 inside.
    Bce,
    /// Thousand years before 1950.
    Ka,
    /// Million years before 1950.
    Ma,
    /// Calendar years before 1950.
    CalBp,
    /// Years before 2000.
    B2k,
}

impl Era {
    /// Every era, in the order help shows them.
    pub const ALL: [Era; 6] = [Era::Ce, Era::Bce, Era::Ka, Era::Ma, Era::CalBp, Era::B2k];

    /// As it is written after a number.
    pub fn symbol(self) -> &'static str {
        match self {
            Era::Ce => "CE",
            Era::Bce => "BCE",
            Era::Ka => "ka",
            Era::Ma => "Ma",
            Era::CalBp => "cal BP",
            Era::B2k => "b2k",
        }
    }

    /// What a number in it counts.
    pub fn meaning(self) -> &'static str {
        match self {
            Era::Ce => "year of the common era",
            Era::Bce => "year before the common era; there is no year zero",
            Era::Ka => "thousand years before 1950",
            Era::Ma => "million years before 1950",
            Era::CalBp => "calendar years before 1950",
            Era::B2k => "years before 2000",
        }
    }

    /// The era written `symbol`, if it is one.
    pub fn parse(symbol: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|era| era.symbol() == symbol)
    }

    /// Whether it counts ages back from a datum rather than calendar years.
    pub fn is_age(self) -> bool {
        !matches!(self, Era::Ce | Era::Bce)
    }

    /// Years per unit of the era's number, negative where it counts back, and the datum in years CE.
    fn scale(self) -> (f64, f64) {
        match self {
            Era::Ce => (1.0, 0.0),
            Era::Bce => (-1.0, 1.0),
            Era::Ka => (-1e3, 1950.0),
            Era::Ma => (-1e6, 1950.0),
            Era::CalBp => (-1.0, 1950.0),
            Era::B2k => (-1.0, 2000.0),
        }
    }

    /// The decimal year CE of `number` in this era.
    pub fn to_year(self, number: f64) -> f64 {
        let (years, datum) = self.scale();
        datum + years * number
    }

    /// The number in this era of the decimal year CE `year`.
    pub fn of_year(self, year: f64) -> f64 {
        let (years, datum) = self.scale();
        (year - datum) / years
    }

    /// How many years one unit of the era's number is: 1000 for ka.
    pub fn years_per_unit(self) -> f64 {
        self.scale().0.abs()
    }

    /// `year` as a person writes it in this era; a calendar year before 1 CE is written in BCE.
    pub fn format(self, year: f64) -> String {
        let era = if self == Era::Ce && year < 1.0 {
            Era::Bce
        } else if self == Era::Bce && year >= 1.0 {
            Era::Ce
        } else {
            self
        };
        format!("{} {}", trimmed(era.of_year(year)), era.symbol())
    }
}

/// A number with at most six decimals, without trailing zeros.
fn trimmed(number: f64) -> String {
    let text = format!("{number:.6}");
    let text = text.trim_end_matches('0').trim_end_matches('.');
    if text == "-0" { "0".to_owned() } else { text.to_owned() }
}

/// A point in time, one for each member, with the era it was written in.
#[derive(Clone, Debug)]
pub struct Instant {
    /// Decimal years CE, astronomical; one column.
    pub years: Block,
    /// The era it is shown in.
    pub era: Era,
    /// How many years the literal covers as the end of a span: one for `1850 CE`, a day for a date, none for
    /// an age.
    pub width_years: f64,
    /// Whether it came as a date of the calendar, and is shown as one.
    pub is_date: bool,
}

impl Instant {
    /// The instant that `number` is in `era`.
    ///
    /// # Errors
    /// `no-such-year` for year 0 and for negative calendar years.
    pub fn new(number: f64, era: Era) -> Result<Self, Fault> {
        let calendar = !era.is_age();
        if calendar && number < 1.0 {
            let other = if era == Era::Ce { Era::Bce } else { Era::Ce };
            let years = if number > -1.0 { 1.0 } else { -number };
            return Err(Fault::new(
                "no-such-year",
                format!("there is no year {} {}", trimmed(number), era.symbol()),
            )
            .help(format!(
                "1 BCE is followed by 1 CE: write {} {}",
                trimmed(years),
                other.symbol()
            )));
        }
        let whole = calendar && number.fract().abs() < f64::EPSILON;
        Ok(Self::at(Block::single(era.to_year(number)), era, if whole { 1.0 } else { 0.0 }))
    }

    /// An instant from decimal years; one that covers a day of the calendar is a date.
    pub fn at(years: Block, era: Era, width_years: f64) -> Self {
        Self { years, era, width_years, is_date: era == Era::Ce && is_day(width_years) }
    }

    /// The decimal year of the first row.
    pub fn year(&self) -> f64 {
        self.years.first()
    }
}

impl fmt::Display for Instant {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.is_date {
            return formatter.write_str(&date_label(self.year()));
        }
        formatter.write_str(&self.era.format(self.year()))
    }
}

/// Whether a length of time is a day, in a year of 365 or 366 of them.
pub(super) fn is_day(years: f64) -> bool {
    (years - 1.0 / 365.0).abs() < 1e-5 || (years - 1.0 / 366.0).abs() < 1e-5
}

/// Whether all times begin days of the calendar, as dates do. Whole, half and quarter years are no dates: they are
/// written so as years.
pub(crate) fn are_dates(years: &[f64]) -> bool {
    let begins_a_day = |year: &f64| {
        let whole = year.floor();
        let length = if is_leap(whole as i64) { 366.0 } else { 365.0 };
        let day = (year - whole) * length;
        *year >= 1.0 && (day - day.round()).abs() < 2e-3
    };
    let part_of_a_year = |year: &f64| (year * 4.0 - (year * 4.0).round()).abs() < 1e-6;
    years.iter().all(begins_a_day) && !years.iter().all(part_of_a_year)
}

/// Whether `year` is a leap year of the Gregorian calendar.
fn is_leap(year: i64) -> bool {
    (year % 4 == 0 && year % 100 != 0) || year % 400 == 0
}

fn month_lengths(year: i64) -> [u32; 12] {
    let february = if is_leap(year) { 29 } else { 28 };
    [31, february, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31]
}

/// The decimal year of the beginning of a day of the (proleptic) Gregorian calendar: the day of the year over
/// the year's own length. `day_of_year` counts from 0 and may run past the year.
pub fn decimal_year(year: i64, day_of_year: i64) -> f64 {
    let (mut year, mut day) = (year, day_of_year);
    loop {
        let length = if is_leap(year) { 366 } else { 365 };
        if day < length {
            return year as f64 + day as f64 / length as f64;
        }
        day -= length;
        year += 1;
    }
}

/// Year, month and day of a date as an instant that covers the day.
///
/// # Errors
/// `no-such-date` for a month 13 or a 30 February.
pub fn instant_of_date(year: i64, month: u32, day: u32) -> Result<Instant, Fault> {
    let lengths = month_lengths(year);
    let length = usize::try_from(month).ok().and_then(|month| lengths.get(month.wrapping_sub(1)));
    let Some(length) = length else {
        return Err(
            Fault::new("no-such-date", format!("there is no month {month}")).help("months run from 01 to 12")
        );
    };
    if day == 0 || day > *length {
        return Err(Fault::new("no-such-date", format!("month {month} of {year} has no day {day}"))
            .help(format!("its days run from 01 to {length}")));
    }
    let before: u32 = lengths.iter().take(month as usize - 1).sum();
    let day_of_year = i64::from(before + day - 1);
    let start = decimal_year(year, day_of_year);
    let end = decimal_year(year, day_of_year + 1);
    Ok(Instant::at(Block::single(start), Era::Ce, end - start))
}

/// The date of a decimal year, to the nearest day.
pub(crate) fn date_label(year: f64) -> String {
    let whole = (year + 1e-6).floor();
    let length = if is_leap(whole as i64) { 366.0 } else { 365.0 };
    let mut day = ((year - whole) * length).round().max(0.0) as u32;
    for (month, days) in month_lengths(whole as i64).into_iter().enumerate() {
        if day < days {
            return format!("{whole:04}-{:02}-{:02}", month + 1, day + 1);
        }
        day -= days;
    }
    format!("{:04}-01-01", whole + 1.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_eras_meet_on_one_axis() {
        // 21 ka is 21,000 years before 1950; BCE has no year zero, so that this is 19,051 BCE.
        let year = Instant::new(21.0, Era::Ka).unwrap().year();
        assert!((year - -19_050.0).abs() < 1e-9);
        assert_eq!(Era::Bce.format(year), "19051 BCE");
        assert!((Instant::new(44.0, Era::Bce).unwrap().year() - -43.0).abs() < 1e-12);
        assert!((Era::B2k.to_year(11_700.0) - -9_700.0).abs() < 1e-9);
        assert!((Era::CalBp.to_year(450.0) - 1500.0).abs() < 1e-9);
    }

    #[test]
    fn there_is_no_year_zero() {
        assert_eq!(Instant::new(0.0, Era::Ce).unwrap_err().code, "no-such-year");
        assert_eq!(Era::Ce.format(0.0), "1 BCE");
    }

    #[test]
    fn what_came_as_a_date_is_shown_as_one() {
        for (year, month, day, text) in [
            (2015, 6, 15, "2015-06-15"),
            (2016, 2, 29, "2016-02-29"),
            (1999, 12, 31, "1999-12-31"),
            (44, 3, 15, "0044-03-15"),
        ] {
            assert_eq!(instant_of_date(year, month, day).unwrap().to_string(), text);
        }
        assert_eq!(Instant::new(2015.5, Era::Ce).unwrap().to_string(), "2015.5 CE");
        assert_eq!(Instant::new(2015.0, Era::Ce).unwrap().to_string(), "2015 CE");
    }

    #[test]
    fn years_and_their_parts_are_no_dates() {
        let date = |year, month, day| instant_of_date(year, month, day).unwrap().year();
        assert!(are_dates(&[date(2015, 6, 15), date(2016, 1, 1)]));
        assert!(!are_dates(&[2015.0, 2016.0]));
        // The middle of 2016 is the beginning of a day, and nobody means that.
        assert!(!are_dates(&[2016.5]));
        assert!(!are_dates(&[date(2015, 6, 15), 2015.123]));
        assert!(!are_dates(&[-43.0, -42.0]));
    }

    #[test]
    fn a_date_is_its_day_of_the_year() {
        let date = instant_of_date(2015, 6, 15).unwrap();
        assert!((date.year() - (2015.0 + 165.0 / 365.0)).abs() < 1e-12);
        assert!(instant_of_date(2015, 2, 29).is_err());
        assert!(instant_of_date(2016, 2, 29).is_ok());
    }
}
