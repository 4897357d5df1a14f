//! The proleptic Gregorian calendar: dates to days, days to years CE.

/// A calendar date, with the time of day as a fraction of the day.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Date {
    pub(super) year: i64,
    /// 1 to 12, not yet checked.
    pub(super) month: i64,
    /// 1 to 31, not yet checked; `None` where only the month is given.
    pub(super) day: Option<i64>,
    pub(super) day_fraction: f64,
}

pub(super) fn is_leap_year(year: i64) -> bool {
    year % 4 == 0 && (year % 100 != 0 || year % 400 == 0)
}

pub(super) fn days_in_year(year: i64) -> i64 {
    if is_leap_year(year) { 366 } else { 365 }
}

/// Days in a month; `month` outside 1 to 12 has none.
pub(super) fn days_in_month(year: i64, month: i64) -> i64 {
    match month {
        2 if is_leap_year(year) => 29,
        2 => 28,
        4 | 6 | 9 | 11 => 30,
        1 | 3 | 5 | 7 | 8 | 10 | 12 => 31,
        _ => 0,
    }
}

/// Days of the year before the first of `month`.
pub(super) fn days_before_month(year: i64, month: i64) -> i64 {
    (1..month).map(|earlier| days_in_month(year, earlier)).sum()
}

/// Days from 1 January of year 0 to 1 January of `year`.
pub(super) fn days_before_year(year: i64) -> i64 {
    // Leap years before `year`, counting year 0 itself as one.
    let last = year - 1;
    365 * year + last.div_euclid(4) - last.div_euclid(100) + last.div_euclid(400) + 1
}

/// The day, counted from 1 January of year 0, as year CE at its start.
pub(super) fn year_of_day(day_number: i64) -> f64 {
    let mut year = day_number.div_euclid(146_097) * 400 + day_number.rem_euclid(146_097) / 366;
    while days_before_year(year + 1) <= day_number {
        year += 1;
    }
    let day_of_year = day_number - days_before_year(year);
    year as f64 + day_of_year as f64 / days_in_year(year) as f64
}

/// Reads `2015-06`, `2015-06-15` and `2015-06-15T12:00:00Z`; digits are checked, the calendar is
/// not.
pub(super) fn parse_date(text: &str) -> Option<Date> {
    let (year, rest) = digits(text.as_bytes(), 4)?;
    let (month, rest) = digits(rest.strip_prefix(b"-")?, 2)?;
    let mut date = Date { year, month, day: None, day_fraction: 0.0 };
    if rest.is_empty() {
        return Some(date);
    }
    let (day, rest) = digits(rest.strip_prefix(b"-")?, 2)?;
    date.day = Some(day);
    if let Some((separator, time)) = rest.split_first() {
        if !matches!(separator, b'T' | b' ') {
            return None;
        }
        date.day_fraction = time_of_day(text.get(text.len() - time.len()..)?.trim())?;
    }
    Some(date)
}

/// A number of exactly so many digits, and what follows them.
fn digits(bytes: &[u8], length: usize) -> Option<(i64, &[u8])> {
    let (digits, rest) = bytes.split_at_checked(length)?;
    let number = digits
        .iter()
        .try_fold(0, |number, byte| byte.is_ascii_digit().then(|| 10 * number + i64::from(byte - b'0')))?;
    Some((number, rest))
}

fn time_of_day(text: &str) -> Option<f64> {
    let text = text.strip_suffix('Z').unwrap_or(text);
    let mut parts = text.split(':');
    let mut two_digits = || digits(parts.next()?.as_bytes(), 2).filter(|(_, rest)| rest.is_empty());
    let ((hours, _), (minutes, _)) = (two_digits()?, two_digits()?);
    let seconds = match parts.next() {
        Some(seconds) => seconds.parse::<f64>().ok()?,
        None => 0.0,
    };
    let possible = hours < 24 && minutes < 60 && (0.0..61.0).contains(&seconds) && parts.next().is_none();
    possible.then_some((hours as f64 + (minutes as f64 + seconds / 60.0) / 60.0) / 24.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn days_and_years_agree_over_leap_years_and_before_year_zero() {
        for year in [-401, -400, -4, -1, 0, 1, 4, 1899, 1900, 1999, 2000, 2001, 2015, 2400] {
            let first = days_before_year(year);
            assert_eq!(days_before_year(year + 1) - first, days_in_year(year), "{year}");
            assert!((year_of_day(first) - year as f64).abs() < 1e-12, "{year}");
            assert!((year_of_day(first + 1) - year as f64 - 1.0 / days_in_year(year) as f64).abs() < 1e-9);
        }
        // From memory: 2000-01-01 is 730,485 days after 0000-01-01 (1970-01-01 is 719,528).
        assert_eq!(days_before_year(1970), 719_528);
        assert_eq!(days_before_year(2000), 730_485);
    }

    #[test]
    fn a_date_is_read_only_in_full_digits() {
        assert!(parse_date("2015-06").is_some_and(|date| date.day.is_none() && date.month == 6));
        assert!(
            parse_date("2015-06-15T12:00:00Z").is_some_and(|date| (date.day_fraction - 0.5).abs() < 1e-12)
        );
        for wrong in
            ["2015-6-15", "15-06-2015", "2015", "-44", "2015-06-15-1", "2015-06-15T25:00", "2015-06T10:00"]
        {
            assert_eq!(parse_date(wrong), None, "{wrong}");
        }
    }
}
