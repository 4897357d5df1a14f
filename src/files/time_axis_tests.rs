//! What times are read as, through the whole reader.

use super::{AxisForm, ReadSeries, SeriesOptions, read_series};
use std::fmt::Write as _;

fn read_as(text: &str, form: Option<AxisForm>) -> ReadSeries {
    match read_series(text.as_bytes(), &SeriesOptions { form, ..SeriesOptions::default() }) {
        Ok(series) => series,
        Err(fault) => panic!("{fault}"),
    }
}

/// A file of one time column; the values count 0, 1, 2, ….
fn file_of<T: std::fmt::Display>(header: &str, times: impl IntoIterator<Item = T>) -> String {
    let mut text = format!("{header},value\n");
    for (value, time) in times.into_iter().enumerate() {
        assert!(writeln!(text, "{time},{value}").is_ok());
    }
    text
}

fn read(header: &str, times: &[&str]) -> ReadSeries {
    read_as(&file_of(header, times), None)
}

fn read_form(header: &str, times: &[&str], form: AxisForm) -> ReadSeries {
    read_as(&file_of(header, times), Some(form))
}

fn close(found: &[f64], expected: &[f64]) {
    let same = found.len() == expected.len() && found.iter().zip(expected).all(|(a, b)| (a - b).abs() < 1e-9);
    assert!(same, "found {found:?}, expected {expected:?}");
}

/// Where the gaps are, after checking that steps tile.
fn gaps(series: &ReadSeries) -> Vec<usize> {
    assert_eq!(series.form, AxisForm::Steps);
    for pair in series.starts.windows(2).zip(&series.ends) {
        assert_eq!(pair.0[1].to_bits(), pair.1.to_bits());
    }
    (0..series.values.len()).filter(|&i| series.values[i].is_nan()).collect()
}

fn noted(series: &ReadSeries, what: &str) {
    assert!(series.notes.iter().any(|note| note.contains(what)), "no `{what}` in {:?}", series.notes);
}

#[test]
fn consecutive_integer_years_are_calendar_years() {
    let text = file_of("year", 1750..=2020);
    let series = read_as(&text, None);
    assert!(gaps(&series).is_empty());
    close(&[series.starts[0], series.ends[0], series.ends[270]], &[1750.0, 1751.0, 2021.0]);
    assert_eq!(
        series.notes,
        ["year: 271 consecutive calendar years, read as steps (the value of 1885 is the mean over \
             1885); as: instants overrides"]
    );
    let instants = read_as(&text, Some(AxisForm::Instants));
    assert_eq!(instants.form, AxisForm::Instants);
    close(&instants.starts[..2], &[1750.5, 1751.5]);
    assert!(instants.ends.is_empty());
    assert!(gaps(&read("year", &["1850.0", "1851.0"])).is_empty());
    assert!(gaps(&read("year", &["1850"])).is_empty());
}

#[test]
fn missing_years_become_gaps() {
    let series = read("year", &["1850", "1851", "1852", "1855", "1856"]);
    assert_eq!(gaps(&series), [3, 4]);
    close(&series.starts, &[1850.0, 1851.0, 1852.0, 1853.0, 1854.0, 1855.0, 1856.0]);
    close(&series.values[5..], &[3.0, 4.0]);
    noted(&series, "7 calendar years of which 2 have no row (first 1853) and become gaps");
}

#[test]
fn wider_and_irregular_integers_are_instants_at_mid_year() {
    let wider = read("year", &["1000", "1020", "1040"]);
    assert_eq!(wider.form, AxisForm::Instants);
    close(&wider.starts, &[1000.5, 1020.5, 1040.5]);
    noted(&wider, "20 years apart, read as instants at the middle of the year named");
    let irregular = read("year", &["1257", "1258", "1452", "1600", "1815"]);
    assert_eq!(irregular.form, AxisForm::Instants);
    close(&irregular.starts[..2], &[1257.5, 1258.5]);
    noted(&irregular, "unevenly spaced");
    // One far outlier must not make a million steps.
    let far = read("year", &["1", "2", "3", "1000000"]);
    assert_eq!((far.form, far.starts.len()), (AxisForm::Instants, 4));
}

#[test]
fn steps_can_be_asked_of_integers() {
    let wider = read_form("year", &["1000", "1020", "1040"], AxisForm::Steps);
    assert!(gaps(&wider).is_empty());
    close(&wider.ends, &[1020.0, 1040.0, 1060.0]);
    let irregular = read_form("year", &["1257", "1452"], AxisForm::Steps);
    close(&irregular.ends, &[1277.0 + 175.0, 1647.0]);
    let irregular = read_form("year", &["1257", "1452", "1600"], AxisForm::Steps);
    close(&irregular.starts, &[1257.0, 1452.0, 1600.0]);
    close(&irregular.ends, &[1258.0, 1453.0, 1601.0]);
}

#[test]
fn decimals_at_mid_month_are_months_and_missing_ones_gaps() {
    let series = read("year", &["1958.21", "1958.29", "1958.38", "1958.54", "1958.62"]);
    assert_eq!(gaps(&series), [3]);
    close(&[series.starts[0], series.ends[5]], &[1958.0 + 2.0 / 12.0, 1958.0 + 8.0 / 12.0]);
    noted(&series, "6 months of which 1 has no row (1958-06) and becomes a gap");
    let fine = read("year", &["1850.042", "1850.125", "1850.208", "1850.292"]);
    assert!(gaps(&fine).is_empty());
    close(&[fine.starts[0], fine.ends[3]], &[1850.0, 1850.0 + 4.0 / 12.0]);
    // Decimals cut instead of rounded, as 1850.2083 and 1850.2916.
    assert!(gaps(&read("year", &["1850.04", "1850.12", "1850.20", "1850.29", "1850.37"])).is_empty());
    let instants = read_form("year", &["1958.21", "1958.29"], AxisForm::Instants);
    close(&instants.starts, &[1958.0 + 2.5 / 12.0, 1958.0 + 3.5 / 12.0]);
}

#[test]
fn decimals_at_the_middle_of_true_months_are_months() {
    // Mid-January to mid-June of a common year in days: 15.5, 45, 74.5, 105, 135.5, 166, each over
    // 365.
    let series =
        read("decimal_year", &["1959.0425", "1959.1233", "1959.2041", "1959.2877", "1959.3712", "1959.4548"]);
    assert!(gaps(&series).is_empty());
    close(&[series.starts[1], series.ends[5]], &[1959.0 + 1.0 / 12.0, 1959.5]);
    // Some archives count to the end of the middle day: days 16, 46, 75, 106, 136, 167.
    let later = read_as(
        &file_of(
            "decimal_year",
            [16, 46, 75, 106, 136, 167].map(|day| format!("{:.4}", 1959.0 + f64::from(day) / 365.0)),
        ),
        None,
    );
    assert!(gaps(&later).is_empty());
    close(&later.starts, &series.starts);
}

#[test]
fn decimals_at_mid_year_half_year_quarter_and_day_are_steps_too() {
    let years = read("year", &["1850.5", "1851.5", "1853.5", "1854.5", "1855.5"]);
    assert_eq!(gaps(&years), [2]);
    close(&years.starts[..2], &[1850.0, 1851.0]);
    let halves = read("year", &["1850.25", "1850.75", "1851.25"]);
    close(&halves.ends, &[1850.5, 1851.0, 1851.5]);
    let quarters = read("year", &["1850.125", "1850.375", "1850.625", "1850.875"]);
    close(&quarters.ends, &[1850.25, 1850.5, 1850.75, 1851.0]);
    let days = read_as(
        &file_of("year", (0..40).map(|day| format!("{:.5}", 1996.0 + (f64::from(day) + 0.5) / 366.0))),
        None,
    );
    assert!(gaps(&days).is_empty());
    close(&[days.starts[1], days.ends[39]], &[1996.0 + 1.0 / 366.0, 1996.0 + 40.0 / 366.0]);
}

#[test]
fn decimals_that_were_cut_instead_of_rounded_are_steps_too() {
    let cut = |day: i32| ((f64::from(day) + 0.5) / 366.0 * 1000.0).floor() / 1000.0;
    let days = read_as(&file_of("year", (0..40).map(|day| format!("{:.3}", 1996.0 + cut(day)))), None);
    assert!(gaps(&days).is_empty());
    close(&[days.starts[0], days.ends[39]], &[1996.0, 1996.0 + 40.0 / 366.0]);
}

#[test]
fn an_age_in_thousands_of_years_becomes_a_whole_year() {
    // 1.001 times 1000 is 1000.9999999999999 in binary.
    let series = read("age_ka", &["1.001", "1.003", "1.009"]);
    for (start, expected) in series.starts.iter().zip([941.0_f64, 947.0, 949.0]) {
        assert_eq!(start.to_bits(), expected.to_bits());
    }
}

#[test]
fn other_decimals_are_instants_where_they_are() {
    let elsewhere = read("year", &["1850.0", "1850.25", "1850.5", "1850.75"]);
    assert_eq!(elsewhere.form, AxisForm::Instants);
    close(&elsewhere.starts, &[1850.0, 1850.25, 1850.5, 1850.75]);
    noted(&elsewhere, "regular but not at the middle");
    let uneven = read("year", &["1850.31", "1850.9", "1853.62"]);
    close(&uneven.starts, &[1850.31, 1850.9, 1853.62]);
    noted(&uneven, "on no regular grid");
    // With one decimal every year would lie near the middle of some month.
    assert_eq!(read("year", &["1850.1", "1850.2", "1850.3", "1850.4"]).form, AxisForm::Instants);
}

#[test]
fn steps_can_be_asked_of_regular_decimals_only() {
    let starting = read_form("year", &["1850.0", "1850.25", "1850.5"], AxisForm::Steps);
    close(&starting.ends, &[1850.25, 1850.5, 1850.75]);
    // The spacing is only seen through two decimals, and still the steps are twelfths.
    let months = read_form("year", &["1950.00", "1950.08", "1950.17"], AxisForm::Steps);
    close(&months.ends, &[1950.0 + 1.0 / 12.0, 1950.0 + 2.0 / 12.0, 1950.25]);
    let around = read_form("year", &["1850.2", "1852.2", "1854.2"], AxisForm::Steps);
    close(&around.starts, &[1849.2, 1851.2, 1853.2]);
    let text = file_of("year", ["1850.31", "1850.9", "1853.62"]);
    let options = SeriesOptions { form: Some(AxisForm::Steps), ..SeriesOptions::default() };
    let fault = read_series(text.as_bytes(), &options).err();
    assert!(fault.is_some_and(|fault| fault.code == "file-steps"));
}

#[test]
fn months_of_the_calendar_are_steps() {
    for series in [
        read("date", &["2015-11", "2015-12", "2016-01"]),
        read("date", &["2015-11-01", "2015-12-01", "2016-01-01"]),
        read("time", &["2015-11-16T00:00:00", "2015-12-16T00:00:00", "2016-01-16T00:00:00"]),
        read("date", &["2015-11-30", "2015-12-31", "2016-01-31"]),
        read_as("year,month,value\n2015,11,0\n2015,12,1\n2016,1,2\n", None),
    ] {
        assert!(gaps(&series).is_empty());
        close(&series.starts, &[2015.0 + 10.0 / 12.0, 2015.0 + 11.0 / 12.0, 2016.0]);
        close(&series.values, &[0.0, 1.0, 2.0]);
    }
    assert_eq!(gaps(&read("date", &["2015-01", "2015-02", "2015-03", "2015-05"])), [3]);
    let sparse = read("date", &["2015-06", "2016-02", "2018-09"]);
    assert_eq!(sparse.form, AxisForm::Instants);
    close(&sparse.starts[..1], &[2015.0 + 5.5 / 12.0]);
}

#[test]
fn yearly_dates_label_calendar_years() {
    close(&read("date", &["1850-01-01", "1851-01-01", "1852-01-01"]).ends, &[1851.0, 1852.0, 1853.0]);
    close(&read("date", &["1850-07-02", "1851-07-02"]).starts, &[1850.0, 1851.0]);
    close(&read("date", &["1850-01-01", "1850-04-01", "1850-07-01"]).ends, &[1850.25, 1850.5, 1850.75]);
}

#[test]
fn daily_dates_are_days_and_other_dates_instants() {
    let days = read("date", &["2015-12-30", "2015-12-31", "2016-01-01", "2016-01-03"]);
    assert_eq!(gaps(&days), [3]);
    close(
        &days.starts,
        &[2015.0 + 363.0 / 365.0, 2015.0 + 364.0 / 365.0, 2016.0, 2016.0 + 1.0 / 366.0, 2016.0 + 2.0 / 366.0],
    );
    noted(&days, "1 has no row (2016-01-02)");
    let other = read("date", &["2015-06-15", "2015-06-22", "2015-09-03"]);
    assert_eq!(other.form, AxisForm::Instants);
    // 15 June is day 166 of a common year.
    close(&other.starts[..1], &[2015.0 + 165.0 / 365.0]);
    let weeks = read_form("date", &["2015-06-15", "2015-06-22"], AxisForm::Steps);
    close(&weeks.ends, &[2015.0 + 172.0 / 365.0, 2015.0 + 179.0 / 365.0]);
    close(&read("date", &["2015-06-15T12:00", "2015-08-15T18:00"]).starts[..1], &[2015.0 + 165.5 / 365.0]);
    close(
        &read_as("year,month,day,value\n2015,6,15,0\n2015,6,16,1\n", None).starts[..1],
        &[2015.0 + 165.0 / 365.0],
    );
}

#[test]
fn ages_are_instants_and_descending_rows_are_turned_round() {
    let series = read("age_ka", &["-0.051", "0.051", "1.5", "21"]);
    assert_eq!(series.form, AxisForm::Instants);
    let expected: [f64; 4] = [-19050.0, 450.0, 1899.0, 2001.0];
    assert_eq!(series.starts.iter().map(|t| t.to_bits()).collect::<Vec<_>>(), expected.map(f64::to_bits));
    close(&series.values, &[3.0, 2.0, 1.0, 0.0]);
    noted(&series, "turned round");
    noted(&series, "thousands of years before 1950");
}

#[test]
fn descending_years_keep_their_values_and_gaps() {
    let series = read("year", &["1853", "1852", "1850", "1849"]);
    assert_eq!(gaps(&series), [2]);
    close(&series.starts, &[1849.0, 1850.0, 1851.0, 1852.0, 1853.0]);
    close(&[series.values[0], series.values[4]], &[3.0, 0.0]);
    noted(&series, "from late to early");
}

#[test]
fn regular_ages_can_be_steps_and_irregular_ones_cannot() {
    let steps = read_form("age (ka)", &["0", "0.5", "1"], AxisForm::Steps);
    close(&steps.starts, &[700.0, 1200.0, 1700.0]);
    close(&steps.ends, &[1200.0, 1700.0, 2200.0]);
    let options = SeriesOptions { form: Some(AxisForm::Steps), ..SeriesOptions::default() };
    let fault = read_series(b"age (ka),value\n0,1\n1,2\n5,3\n", &options).err();
    assert!(fault.is_some_and(|fault| fault.code == "file-steps"));
}

#[test]
fn layers_that_touch_tile_even_if_their_ages_are_written_differently() {
    let text = "age_top (ka),age_bottom (ka),value\n0,1.001,5\n1.001e0,2,6\n";
    assert!(gaps(&read_as(text, None)).is_empty());
}

#[test]
fn layers_between_two_ages_are_steps() {
    let text = "age_top (ka),age_bottom (ka),value\n0,0.1,5\n0.1,0.35,6\n0.5,0.6,7\n";
    let series = read_as(text, None);
    assert_eq!(series.form, AxisForm::Steps);
    close(&series.starts, &[1350.0, 1600.0, 1850.0]);
    close(&series.ends, &[1450.0, 1850.0, 1950.0]);
    close(&series.values, &[7.0, 6.0, 5.0]);
    noted(&series, "1 hole between them");
    let middle = read_as(text, Some(AxisForm::Instants));
    close(&middle.starts, &[1400.0, 1725.0, 1900.0]);
}

#[test]
fn negative_years_are_astronomical_and_bce_years_count_back() {
    let series = read("year", &["-2", "-1", "0", "1"]);
    close(&series.starts, &[-2.0, -1.0, 0.0, 1.0]);
    noted(&series, "0 is 1 BCE");
    assert!(!series.notes.iter().any(|note| note.contains("no year 0")));
    noted(&read("year", &["-3", "-2", "-1", "1", "2"]), "no year 0");
    let counted_back = read("year (BCE)", &["44", "43", "42"]);
    close(&counted_back.starts, &[-43.0, -42.0, -41.0]);
}
