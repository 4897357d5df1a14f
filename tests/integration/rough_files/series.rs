use super::Times::{Instants, Months, Steps, Years};
use super::{GAP, Loads, Times};

const NUMBERED: &str = "no unit is given, so its values are plain numbers";

const fn loads(
    file: &'static str,
    times: Times,
    values: &'static [f64],
    unit: &'static str,
    notes: &'static [&'static str],
) -> Loads {
    Loads { file, options: "", times, values, unit, notes }
}

const fn with(options: &'static str, case: Loads) -> Loads {
    Loads {
        file: case.file,
        options,
        times: case.times,
        values: case.values,
        unit: case.unit,
        notes: case.notes,
    }
}

const TWO_YEARS: &[f64] = &[
    1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0, 9.0, 10.0, 11.0, 12.0, 13.0, 14.0, 15.0, 16.0, 17.0, 18.0, 19.0,
    20.0, 21.0, 22.0, 23.0, 24.0,
];

/// The day `number` (from 1) of the leap year 1904, by the rule that a day is 1/366 of it.
const fn day_of_1904(number: u32) -> (f64, f64) {
    (1904.0 + (number - 1) as f64 / 366.0, 1904.0 + number as f64 / 366.0)
}

/// The files that must load, and what must come of each.
pub(super) const LOADS: &[Loads] = &[
    // The outside of the text.
    loads(
        "byte_order_mark.csv",
        Years(1901),
        &[280.5, 281.0, 281.25],
        "ppm",
        &["3 consecutive calendar years, read as steps"],
    ),
    loads(
        "windows_newlines.csv",
        Years(1901),
        &[280.5, GAP, 281.25],
        "ppm",
        &["1 of 3 values missing and kept as gaps: 1 empty (first in line 3)"],
    ),
    loads("carriage_returns.csv", Years(1901), &[280.5, 281.0, 281.25], "ppm", &[]),
    loads("no_final_newline.csv", Years(1901), &[1.0, 2.0], "1", &[NUMBERED]),
    loads(
        "tabs.tsv",
        Years(1901),
        &[1.5, 2.5, 4.0],
        "mm",
        &["separated by tabs", "`value` is taken of the columns `depth note`, `value (mm)`"],
    ),
    with(
        "decimals: comma",
        loads(
            "semicolons_decimal_commas.csv",
            Years(1901),
            &[3.25, -2.5, 7.0],
            "degC",
            &["separated by semicolons"],
        ),
    ),
    loads(
        "quoted_newlines.csv",
        Years(1901),
        &[1.0, 2.0, 3.0],
        "1",
        &["`value` is taken of the columns `remark`, `value`"],
    ),
    loads("blank_lines.csv", Years(1901), &[1.0, 2.0, 3.0], "1", &["2 rows without any value skipped"]),
    loads(
        "comment_in_the_middle.csv",
        Years(1901),
        &[1.0, 2.0, 3.0, 4.0],
        "1",
        &["2 comment lines among the data rows skipped (first in line 4)"],
    ),
    loads("trailing_delimiters.csv", Years(1901), &[1.0, 2.0, 3.0], "mm", &[]),
    loads(
        "empty_column.csv",
        Years(1901),
        &[1.0, 2.0, 3.0],
        "mm",
        &["no row has anything in `flag`, which is not read"],
    ),
    loads(
        "no_header.csv",
        Years(1901),
        &[1.5, 2.5, GAP, 4.5],
        "1",
        &["the first row (line 1) is all numbers", "column 1 is taken for the time"],
    ),
    // Units.
    loads("unit_in_square_brackets.csv", Years(1901), &[0.5, 0.75], "W/m2", &[]),
    loads("degree_sign.csv", Years(1901), &[8.5, 9.0], "degC", &[]),
    loads(
        "unit_in_comment.csv",
        Years(1901),
        &[0.5, 0.75],
        "W/m2",
        &["the unit `W m-2` is taken from a comment"],
    ),
    loads(
        "unit_said_twice.csv",
        Years(1901),
        &[10.0, 12.0],
        "cm",
        &["the header says the unit is `cm`, a comment says `mm`: the header is taken"],
    ),
    with("unit: \"1\"", loads("unit_unknown.csv", Years(1901), &[760.0, 755.0], "1", &[])),
    // Gaps and numbers.
    loads(
        "missing_markers.csv",
        Years(1901),
        &[1.0, GAP, GAP, GAP, GAP, GAP, GAP, GAP, 9.0],
        "1",
        &["7 of 9 values missing and kept as gaps: 1 `NA` (first in line 3), 1 empty (first in line 4)"],
    ),
    with(
        "missing: \"n/a\"",
        loads(
            "missing_words.csv",
            Years(1901),
            &[1.0, GAP, 3.0, GAP],
            "1",
            &["2 of 4 values missing and kept as gaps: 2 `n/a` (first in line 3)"],
        ),
    ),
    loads(
        "sentinel_999.csv",
        Years(1901),
        &[0.5, -999.0, -0.25, -999.0, 1.0],
        "degC",
        &[
            "2 values are −999, a customary missing marker, while the others lie between -0.25 and 1: say missing: \"-999\"",
        ],
    ),
    with(
        "missing: \"-999\"",
        loads(
            "sentinel_999.csv",
            Years(1901),
            &[0.5, GAP, -0.25, GAP, 1.0],
            "degC",
            &["2 of 5 values missing"],
        ),
    ),
    loads(
        "fill_1e20.csv",
        Years(1901),
        &[0.5, 1e20, 1e20, 0.75],
        "W/m2",
        &["2 values are 1e20, a customary missing marker"],
    ),
    with(
        "missing: \"1e20\"",
        loads("fill_1e20.csv", Years(1901), &[0.5, GAP, GAP, 0.75], "W/m2", &["2 of 4 values missing"]),
    ),
    loads(
        "not_finite.csv",
        Years(1901),
        &[1.0, GAP, GAP, GAP, 5.0],
        "1",
        &["1 `inf` (first in line 3), 1 `-Infinity` (first in line 4)"],
    ),
    loads("typographic_minus.csv", Years(1901), &[-0.5, 0.25, -0.1], "degC", &[]),
    with("value: \"flow\"", loads("several_values.csv", Years(1901), &[10.0, 20.0], "mm", &[])),
    // Calendar times.
    loads(
        "newest_first.csv",
        Years(1901),
        &[1.0, 2.0, 3.0, 4.0],
        "1",
        &["the rows run from late to early and were turned round"],
    ),
    loads("years_as_decimals.csv", Years(1901), &[1.0, 2.0, 3.0], "1", &["3 consecutive calendar years"]),
    loads(
        "years_left_out.csv",
        Years(1901),
        &[1.0, 2.0, GAP, GAP, 5.0, 6.0, 7.0],
        "1",
        &["7 calendar years of which 2 have no row (first 1903) and become gaps"],
    ),
    loads(
        "irregular_years.csv",
        Instants(&[1901.5, 1907.5, 1950.5]),
        &[1.0, 2.0, 3.0],
        "1",
        &["3 years, unevenly spaced, read as instants at the middle of the year named"],
    ),
    with(
        "as: steps",
        loads(
            "irregular_years.csv",
            Steps(&[(1901.0, 1902.0), (1907.0, 1908.0), (1950.0, 1951.0)]),
            &[1.0, 2.0, 3.0],
            "1",
            &["each read as a step of one year, because as: steps says so"],
        ),
    ),
    loads(
        "negative_years.csv",
        Years(-2),
        &[1.0, 2.0, 3.0, 4.0],
        "1",
        &[
            "negative years are read as astronomical ones (0 is 1 BCE, −1 is 2 BCE)",
            "the value of 1 BCE is the mean over 1 BCE",
        ],
    ),
    loads(
        "no_year_zero.csv",
        Years(-2),
        &[1.0, 2.0, GAP, 3.0, 4.0],
        "1",
        &["there is a year −1 and a year 1 but no year 0"],
    ),
    loads(
        "years_bce.csv",
        Years(-43),
        &[1.0, 2.0, 3.0],
        "1",
        &["the value of 43 BCE is the mean over 43 BCE"],
    ),
    loads(
        "spreadsheet_day_numbers.csv",
        Years(21_186),
        &[1.0, 2.0, 3.0],
        "1",
        &["if these are the day numbers of a spreadsheet, write them as dates"],
    ),
    loads(
        "year_and_month.csv",
        Months(1901, 1),
        &[
            1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0, 9.0, 10.0, 11.0, 12.0, 13.0, 14.0, GAP, 16.0, 17.0, 18.0,
            19.0, 20.0, 21.0, 22.0, 23.0, 24.0,
        ],
        "mm",
        &["24 months of which 1 has no row (1902-03) and becomes a gap"],
    ),
    loads(
        "iso_months.csv",
        Months(1901, 11),
        &[1.0, 2.0, 3.0, GAP, 5.0],
        "mm",
        &["5 months of which 1 has no row (1902-02) and becomes a gap"],
    ),
    loads(
        "iso_dates.csv",
        Steps(&[day_of_1904(58), day_of_1904(59), day_of_1904(60), day_of_1904(61)]),
        &[1.0, 2.0, 3.0, 4.0],
        "mm",
        &["4 consecutive days, read as steps (the value of 1904-02-29 is the mean over 1904-02-29)"],
    ),
    loads(
        "iso_times.csv",
        Steps(&[
            (1901.0, 1901.0 + 1.0 / 365.0),
            (1901.0 + 1.0 / 365.0, 1901.0 + 2.0 / 365.0),
            (1901.0 + 2.0 / 365.0, 1901.0 + 3.0 / 365.0),
        ]),
        &[1.0, 2.0, 3.0],
        "mm",
        &["3 consecutive days, read as steps"],
    ),
    loads(
        "decimal_months.csv",
        Months(1958, 1),
        &[315.0, 315.5, 316.0, 316.5, GAP, 317.0, 317.5, 318.0, GAP, 318.5, 319.0, 319.5, 320.0],
        "ppm",
        &["decimal years at mid-step: 13 months of which 2 have no row (first 1958-05) and become gaps"],
    ),
    loads(
        "year_by_month.csv",
        Months(1901, 1),
        TWO_YEARS,
        "mm",
        &[
            "a row for each year in `Year` and a column for each month, `Jan` to `Dec`: read as 24 months",
            "the unit `mm` is taken from a comment",
        ],
    ),
    with(
        "value: \"Jul\"",
        loads("year_by_month.csv", Years(1901), &[7.0, 19.0], "1", &["2 consecutive calendar years"]),
    ),
    with(
        "missing: \"-99.9\"",
        loads(
            "year_by_month_newest_first.csv",
            Months(1901, 1),
            &[
                GAP, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0, 9.0, 10.0, 11.0, 12.0, 13.0, 14.0, 15.0, 16.0, 17.0,
                18.0, 19.0, 20.0, 21.0, 22.0, 23.0, 24.0, 25.0, 26.0, GAP, GAP, GAP, GAP, GAP, GAP, GAP, GAP,
                GAP, GAP,
            ],
            "degC",
            &[
                "read as 36 months; `Annual` not read",
                "turned round",
                "value: 11 of 36 values missing and kept as gaps",
            ],
        ),
    ),
    // Ages.
    loads(
        "ages_young_first.csv",
        Instants(&[-300.0, 950.0, 1450.0]),
        &[4.5, 3.6, 3.5],
        "permil",
        &["counted in thousands of years before 1950", "turned round"],
    ),
    loads(
        "ages_old_first.csv",
        Instants(&[-300.0, 950.0, 1450.0]),
        &[4.5, 3.6, 3.5],
        "permil",
        &["3 ages, read as instants"],
    ),
    loads(
        "age_ma.csv",
        Instants(&[-2_998_050.0, -2_498_050.0, -1_998_050.0]),
        &[3.1, 3.3, 3.5],
        "permil",
        &["counted in millions of years before 1950"],
    ),
    loads(
        "age_cal_bp.csv",
        Instants(&[750.0, 1500.0, 2000.0]),
        &[30.0, 20.0, 10.0],
        "percent",
        &["counted in years before 1950"],
    ),
    loads(
        "age_b2k.csv",
        Instants(&[-9700.0, 1950.0]),
        &[-38.5, -35.0],
        "permil",
        &["counted in years before 2000"],
    ),
    loads(
        "layers_with_hiatus.csv",
        Steps(&[(-5050.0, -3050.0), (-3050.0, -2050.0), (-50.0, 950.0), (950.0, 1950.0)]),
        &[10.0, 9.0, 6.0, 5.0],
        "g",
        &["4 layers between age_top and age_bottom read as steps, with 1 hole between them"],
    ),
];
