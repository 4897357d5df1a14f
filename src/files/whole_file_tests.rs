//! Real files, and files of random pieces.

use super::{AxisForm, ReadEra, ReadSeries, SeriesOptions, read_series};

fn real(file: &str) -> ReadSeries {
    let path = format!("{}/tests/data/real/{file}", env!("CARGO_MANIFEST_DIR"));
    let bytes = match std::fs::read(&path) {
        Ok(bytes) => bytes,
        Err(error) => panic!("{path}: {error}"),
    };
    match read_series(&bytes, &SeriesOptions::default()) {
        Ok(series) => series,
        Err(fault) => panic!("{file}: {fault}"),
    }
}

fn gap_count(series: &ReadSeries) -> usize {
    series.values.iter().filter(|value| value.is_nan()).count()
}

/// Form, unit, number of times, gaps; first start and last end in thousandths of a year.
fn summary(series: &ReadSeries) -> (AxisForm, Option<&str>, usize, usize, i64, i64) {
    let thousandths = |year: Option<&f64>| year.map_or(0, |year| (year * 1000.0).round() as i64);
    (
        series.form,
        series.unit_text.as_deref(),
        series.values.len(),
        gap_count(series),
        thousandths(series.starts.first()),
        thousandths(series.ends.last().or(series.starts.last())),
    )
}

fn ends_with_values(series: &ReadSeries, first: f64, last: f64) {
    let found = (series.values.first().copied(), series.values.last().copied());
    assert!(
        matches!(found, (Some(a), Some(b)) if (a - first).abs() < 1e-9 && (b - last).abs() < 1e-9),
        "found {found:?}, expected {first} and {last}"
    );
}

// Numbers of rows, first and last times below are read off the files, whose headers name source and
// licence.

#[test]
fn real_yearly_series_are_calendar_years() {
    let temperature = real("temp_global_gistemp_annual_vega_1880_2022.csv");
    assert_eq!(summary(&temperature), (AxisForm::Steps, Some("degC"), 144, 0, 1_880_000, 2_024_000));
    ends_with_values(&temperature, -0.17, 1.17);
    let spots = real("sunspot_yearly_v1_1700_2008.csv");
    assert_eq!(summary(&spots), (AxisForm::Steps, Some("sunspot number (v1)"), 309, 0, 1_700_000, 2_009_000));
}

#[test]
fn real_monthly_series_are_months() {
    let carbon_dioxide = real("co2_mlo_monthly_1958_2020.csv");
    let (form, unit, count, gaps, start, end) = summary(&carbon_dioxide);
    assert_eq!((form, unit, start, end), (AxisForm::Steps, Some("ppm"), 1_958_167, 2_020_333));
    // March 1958 to April 2020 are 746 months; the file has 741 rows.
    assert_eq!((count, gaps), (746, 746 - 741));
    ends_with_values(&carbon_dioxide, 315.7, 416.18);
    let sea = real("nino12_sst_monthly_1950_2010.csv");
    assert_eq!(summary(&sea), (AxisForm::Steps, Some("degC"), 732, 0, 1_950_000, 2_011_000));
}

#[test]
fn real_ice_core_series_are_instants() {
    let long = real("co2_icecore_bereiter2015_805ka.csv");
    assert_eq!(
        (long.form, long.era, long.unit_text.as_deref()),
        (AxisForm::Instants, ReadEra::Ka, Some("ppm"))
    );
    assert_eq!((long.starts[0] as i64, gap_count(&long)), (-803_182, 0));
    ends_with_values(&long, 202.23, 368.02);
    let recent = real("co2_lawdome_20yr_20_2000.csv");
    assert_eq!(summary(&recent), (AxisForm::Instants, Some("ppm"), 100, 0, 20_500, 2_000_500));
}

/// A generator of our own, so that the test is the same everywhere.
fn next_random(state: &mut u64) -> usize {
    *state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
    (*state >> 33) as usize
}

#[test]
fn no_bytes_make_the_reader_panic_and_what_is_read_is_well_formed() {
    const PIECES: [&[u8]; 46] = [
        b"\n",
        b"\n",
        b"\n",
        b"\n",
        b",",
        b",",
        b",",
        b";",
        b"\t",
        b"\r",
        b"#",
        b"\"",
        b" ",
        b"-",
        b"\xB0",
        b"\xE2\x88\x92",
        b"year",
        b"value",
        b"month",
        b"day",
        b"age (ka)",
        b"age_top (ka)",
        b"age_bottom (ka)",
        b"BP",
        b"1850",
        b"1851",
        b"1852",
        b"0",
        b"1",
        b"2",
        b"12",
        b"13",
        b".5",
        b"1850.04",
        b"1850.12",
        b"1850-01",
        b"1850-02",
        b"1850-02-29",
        b"1852-02-29",
        b"1e300",
        b"-1e18",
        b"9223372036854775807",
        b"inf",
        b"NaN",
        b"NA",
        b"T12:00",
    ];
    const HEADS: [(&str, usize); 6] = [
        ("year,value", 2),
        ("date,value", 2),
        ("year,month,value", 3),
        ("year,month,day,value", 4),
        ("age_top (Ma),age_bottom (Ma),value", 3),
        ("age (ka),value", 2),
    ];
    let mut state = 7;
    let mut read_count = 0;
    for round in 0..6_000 {
        let (head, width) = HEADS[round % HEADS.len()];
        let mut bytes = head.as_bytes().to_vec();
        for _ in 0..next_random(&mut state) % 5 {
            for column in 0..width {
                bytes.push(if column == 0 { b'\n' } else { b',' });
                // Mostly numbers and dates, now and then anything.
                let from = if next_random(&mut state).is_multiple_of(12) { 0 } else { 24 };
                let piece = from + next_random(&mut state) % (PIECES.len() - from);
                bytes.extend_from_slice(PIECES[piece]);
            }
        }
        let form = [None, Some(AxisForm::Steps), Some(AxisForm::Instants)][round % 3];
        let options = SeriesOptions { form, decimal_comma: round % 7 == 0, ..SeriesOptions::default() };
        let Ok(series) = read_series(&bytes, &options) else {
            continue;
        };
        read_count += 1;
        let shown = String::from_utf8_lossy(&bytes);
        let count = series.values.len();
        let ends = if series.form == AxisForm::Steps { count } else { 0 };
        assert!(count > 0 && series.starts.len() == count && series.ends.len() == ends, "{shown}");
        assert!(series.starts.windows(2).all(|pair| pair[0] < pair[1]), "{shown} {series:?}");
        assert!(series.starts.iter().chain(&series.ends).all(|time| time.is_finite()), "{shown} {series:?}");
        assert!(series.values.iter().all(|value| !value.is_infinite()), "{shown}");
        assert!(
            series.starts.iter().zip(&series.ends).all(|(start, end)| start <= end),
            "{shown} {series:?}"
        );
    }
    assert!(read_count > 250, "only {read_count} files could be read: the test says little");
}
