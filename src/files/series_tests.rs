use super::{AxisForm, ReadEra, ReadSeries, SeriesOptions, read_ensemble, read_series};

fn read(text: &str) -> ReadSeries {
    match read_series(text.as_bytes(), &SeriesOptions::default()) {
        Ok(series) => series,
        Err(fault) => panic!("{fault}"),
    }
}

fn fault(text: &str) -> String {
    match read_series(text.as_bytes(), &SeriesOptions::default()) {
        Ok(series) => panic!("read as {series:?}"),
        Err(fault) => fault.to_string(),
    }
}

fn with(time: Option<&str>, value: Option<&str>) -> SeriesOptions {
    SeriesOptions {
        time: time.map(str::to_owned),
        value: value.map(str::to_owned),
        ..SeriesOptions::default()
    }
}

/// Era and first instant of a file whose one time is 1.
fn era_of(header: &str) -> (ReadEra, i64) {
    let series = read(&format!("\"{header}\",value\n1,5\n"));
    (series.era, series.starts[0].round() as i64)
}

#[test]
fn each_name_of_an_age_has_its_era() {
    for header in [
        "age_ka",
        "age (ka)",
        "age (ka BP)",
        "age [kyr BP]",
        "ka",
        "ka BP",
        "time (ka)",
        "age (cal ka BP)",
        "AGE_KA",
    ] {
        assert_eq!(era_of(header), (ReadEra::Ka, 950), "{header}");
    }
    for header in ["age (Ma)", "age_Ma", "Ma"] {
        assert_eq!(era_of(header), (ReadEra::Ma, -998_050), "{header}");
    }
    for header in
        ["age (cal BP)", "age (cal yr BP)", "age (cal. yr BP)", "cal BP", "age (yr)", "age_cal_bp", "age_bp"]
    {
        assert_eq!(era_of(header), (ReadEra::CalBp, 1949), "{header}");
    }
    for header in ["age_b2k", "age (b2k)", "age (yr b2k)", "b2k"] {
        assert_eq!(era_of(header), (ReadEra::B2k, 1999), "{header}");
    }
    assert_eq!(era_of("age (ka b2k)"), (ReadEra::B2k, 1000));
    for header in ["year", "Year", "date", "time", "decimal_year", "year (CE)"] {
        assert_eq!(era_of(header), (ReadEra::CommonEra, 1), "{header}");
    }
    assert!(
        read("age_bp,value\n1,5\n").notes[0].contains("uncalibrated radiocarbon ages are not calendar years")
    );
}

#[test]
fn an_age_without_a_known_unit_is_refused_with_what_is_understood() {
    let no_unit = fault("age,value\n1,5\n");
    assert!(no_unit.contains("does not say its unit") && no_unit.contains("`age (cal BP)`"), "{no_unit}");
    assert!(fault("age (furlong),value\n1,5\n").contains("`furlong` of the age column"));
    assert!(fault("age_top,age_bottom,value\n1,2,5\n").contains("does not say its unit"));
    for header in ["BP", "age (BP)", "age (yr BP)", "yr_BP", "age (14C yr BP)", "age_14C"] {
        let refused = fault(&format!("{header},value\n1,5\n"));
        assert!(
            refused.contains("uncalibrated ages are not calendar") && refused.contains("`cal BP`"),
            "{header}: {refused}"
        );
    }
}

#[test]
fn without_a_time_column_the_columns_and_the_names_understood_are_listed() {
    let none = fault("depth,value\n1,5\n");
    assert!(none.contains("no column tells the time; the columns are `depth`, `value`"), "{none}");
    assert!(none.contains("decimal_year"), "{none}");
    assert!(fault("time (days since 1850-01-01),value\n1,5\n").contains("the unit of the time column"));
    assert!(fault("depth value\n1 5\n").contains("not by spaces"));
    assert!(fault("age_error_ka,value\n1,5\n").contains("no column tells the time"));
}

#[test]
fn the_time_column_can_be_named() {
    let read_time = |text: &str, time| read_series(text.as_bytes(), &with(Some(time), None));
    let when = read_time("when,value\n1850,5\n1851,6\n", "when");
    assert!(
        when.is_ok_and(
            |series| series.form == AxisForm::Steps && series.notes[0].contains("read as years CE")
        )
    );
    for header in ["gas_age_ka", "gas age (ka)"] {
        let gas = read_time(&format!("year,{header},value\n1,2,5\n3,4,6\n"), header);
        assert!(gas.is_ok_and(|series| series.era == ReadEra::Ka && series.values.len() == 2), "{header}");
    }
    assert!(
        read_time("gas_age_model,value\n1,2\n", "gas_age_model").is_err_and(|f| f.code == "file-age-unit")
    );
    let misspelt = read_time("year,value\n1,2\n", "yaer");
    assert!(misspelt.is_err_and(|f| f.help.as_deref() == Some("did you mean `year`?")));
}

#[test]
fn of_several_times_one_is_taken_and_the_others_noted() {
    let series = read("year,month,decimal date,average\n1958,3,1958.2027,315.7\n1958,4,1958.2877,317.4\n");
    assert_eq!((series.value_name.as_str(), series.form), ("average", AxisForm::Steps));
    assert!(series.notes[0].contains("`decimal date` not read"), "{:?}", series.notes);
}

#[test]
fn the_value_column_is_the_only_one_or_named() {
    let text = "year,low,best (ppm),value\n1850,1,2,3\n1851,4,5,6\n";
    assert_eq!(read(text).value_name, "value");
    let best = read_series(text.as_bytes(), &with(None, Some("best")));
    assert!(
        best.is_ok_and(
            |best| best.unit_text.as_deref() == Some("ppm") && (best.values[1] - 5.0).abs() < 1e-12
        )
    );
    let which = fault("year,low,high\n1850,1,2\n");
    assert!(which.contains("several columns could hold the values: `low`, `high`"), "{which}");
    assert!(which.contains("value: \"low\""), "{which}");
    assert!(fault("year\n1850\n").contains("no column of values"));
    let none = read_series(text.as_bytes(), &with(None, Some("bets")));
    assert!(none.is_err_and(|f| f.help.as_deref() == Some("did you mean `best`?")));
}

#[test]
fn a_file_without_header_is_time_and_value() {
    let series = read("1850,0.5\n1851,0.25\n");
    assert_eq!((series.value_name.as_str(), series.starts.len()), ("column 2", 2));
    assert!(series.notes.iter().any(|note| note.contains("column 1 is taken for the time")));
}

#[test]
fn the_unit_comes_from_the_header_or_from_a_comment_of_a_single_column() {
    let unit = |text: &str| read(text).unit_text;
    let commented = |comment: &str| unit(&format!("# {comment}\nyear,value\n1,5\n"));
    assert_eq!(unit("year,co2 [ppm]\n1,5\n").as_deref(), Some("ppm"));
    assert_eq!(unit("year,temperature_anomaly_degC\n1,5\n"), None);
    assert_eq!(commented("units: ppm; age ka before 1950").as_deref(), Some("ppm"));
    assert_eq!(commented("unit: W/m2, global").as_deref(), Some("W/m2"));
    assert_eq!(commented("units: degC anomaly vs 1951-1980").as_deref(), Some("degC"));
    assert_eq!(commented("Units: sunspot number (v1)").as_deref(), Some("sunspot number (v1)"));
    assert_eq!(commented("source: units of none"), None);
    assert_eq!(unit("# units: ppm\nyear,value,error\n1,5,2\n"), None);
    let both = read("# units: ppb\nyear,co2 (ppm)\n1,5\n");
    assert_eq!(both.unit_text.as_deref(), Some("ppm"));
    assert!(both.notes[0].contains("the header is taken"), "{:?}", both.notes);
}

#[test]
fn times_twice_or_out_of_order_are_named_by_line() {
    assert!(
        fault("year,value\n1850,1\n1851,2\n\n1851,3\n1852,4\n")
            .starts_with("line 5, column `year`: the time 1851 occurs twice, in line 3 and in line 5")
    );
    assert!(
        fault("year,value\n1850,1\n1852,2\n1851,3\n1853,4\n")
            .starts_with("line 4, column `year`: the time 1851 is out of order after 1852 in line 3")
    );
    assert!(fault("year,value\n1850,1\n1852,2\n1850,3\n1853,4\n").contains("in line 2 and in line 4"));
    assert!(
        fault("year,month,value\n2015,6,1\n2015,7,1\n2015,7,2\n").contains("the time 2015-7 occurs twice")
    );
    assert!(fault("age_ka,value\n3,1\n2,1\n2.0,2\n").contains("occurs twice"));
}

#[test]
fn impossible_times_are_named_by_line_and_column() {
    assert!(
        fault("year,month,value\n2015,12,1\n2015,13,1\n")
            .starts_with("line 3, column `month`: there is no month 13")
    );
    assert!(
        fault("date,value\n2015-02-28,1\n2015-02-30,1\n")
            .starts_with("line 3, column `date`: there is no day 30 in 2015-02, which has 28 days")
    );
    assert!(fault("date,value\n15/06/2015,1\n").contains("2015-06-15"));
    assert!(
        fault("date,value\n2015-06-15,1\nJune,1\n")
            .starts_with("line 3, column `date`: expected a date, found `June`")
    );
    assert!(fault("date,value\n2015-06-15,1\n2015-07,1\n").contains("not written like the first date"));
    assert!(fault("year,value\n1850,1\n,2\n").starts_with("line 3, column `year`: the time is missing"));
    assert!(fault("year,value\n195803,1\n195804,2\n").contains("looks like a year and a month"));
    assert!(fault("date,value\n20150601,1\n").contains("looks like a year and a month"));
    assert!(fault("year,month,value\n2015,1.5,1\n").contains("expected a whole number, found `1.5`"));
    assert!(fault("age_top (ka),age_bottom (ka),value\n1,1,5\n").contains("not older than its top"));
    assert!(
        fault("age_top (ka),age_bottom (ka),value\n0,2,5\n1,3,5\n")
            .starts_with("line 3: the layer overlaps the one in line 2")
    );
    assert!(fault("age_top (ka),value\n0,2\n").contains("no partner"));
    assert!(fault("age_top (ka),age_bottom (yr),value\n0,2,5\n").contains("different units"));
}

#[test]
fn decimal_commas_reach_times_and_values() {
    let options = SeriesOptions { decimal_comma: true, ..SeriesOptions::default() };
    let series = read_series("year;value\n1850,5;0,25\n1851,5;NA\n".as_bytes(), &options);
    assert!(series.is_ok_and(|series| {
        series.form == AxisForm::Steps && (series.values[0] - 0.25).abs() < 1e-12 && series.values[1].is_nan()
    }));
    assert!(fault("year;value\n1850,5;0,25\n").contains("decimals: comma"));
}

#[test]
fn members_are_the_columns_that_match() {
    let text = "year,m1,note,m2,x10\n1850,1,9,2,0\n1851,3,9,NA,0\n1853,5,9,6,0\n1854,7,9,8,0\n";
    let read = read_ensemble(text.as_bytes(), "m*", &SeriesOptions::default());
    let Ok(ensemble) = read else { panic!("{read:?}") };
    assert_eq!(ensemble.member_names, ["m1", "m2"]);
    assert_eq!((ensemble.values.len(), ensemble.starts.len()), (2, 5));
    assert!(
        (ensemble.values[1][3] - 6.0).abs() < 1e-12
            && ensemble.values[0][2].is_nan()
            && ensemble.values[1][1].is_nan()
    );
    let none = read_ensemble(text.as_bytes(), "run?", &SeriesOptions::default());
    assert!(none.is_err_and(|f| f.message.contains("they are `m1`, `note`, `m2`, `x10`")));
    let only = read_ensemble(b"year,t (degC)\n1850,1\n", "m*", &SeriesOptions::default());
    assert!(only.is_err_and(|f| f.message.ends_with("`m*`; the only one is `t (degC)`")));
    let question = read_ensemble(text.as_bytes(), "?1*", &SeriesOptions::default());
    assert!(question.is_ok_and(|ensemble| ensemble.member_names == ["m1", "x10"]), "`?` is one character");
    let units = read_ensemble(b"year,m1 (ppm),m2 (ppb)\n1,2,3\n", "m*", &SeriesOptions::default());
    assert!(units.is_err_and(|f| f.code == "file-member-units"));
}
