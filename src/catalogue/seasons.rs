//! Means over seasons and over years that begin in another month than January.

use std::sync::Arc;

use super::call::{Call, Path, Stop};
use super::entry::{Body, Entry, Fails, Shows};
use super::filters::cells;
use super::onto::counted;
use super::time::series_or_bundle;
use crate::base::Fault;
use crate::language::{MONTHS, Parameter, Signature};
use crate::value::{Axis, Era, Series, Standing, instant_of_date};

static SEASON: Entry = Entry {
    name: "season",
    summary: "The mean of a season in every year, from monthly or finer data.",
    signature: Signature {
        parameters: &[
            Parameter::required("series", &["series", "bundle"], "monthly or finer values"),
            Parameter::required("months", &["months"], "the months, which may run over the turn of the year")
                .as_months(),
        ],
    },
    result: "one step a year that spans the season; a winter over the turn of the year belongs to the year in which it ends",
    equation: None,
    gaps: "A season with a missing value is incomplete: it is left as a gap, and named in a note.",
    shows: &[Shows {
        program: "x = series([1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12] degC, along: 1850..1850 CE by 1 month)\nx |> season(June..August)",
        gives: "1 step, 1850-06 to 1850-06: first 7, last 7 degC",
    }],
    fails: &[
        Fails {
            program: "x = series([1, 2] degC, along: 1850..1851 CE by 1 yr)\nx |> season(June..August)",
            code: "too-coarse",
            says: "months",
        },
        Fails {
            program: "x = series([1, 2] degC, along: 1850..1851 CE by 1 yr)\nx |> season(June..Augsut)",
            code: "unknown-choice",
            says: "August",
        },
    ],
    revision: 2,
    search: &["winter", "summer", "djf", "jja", "monsoon", "seasonal"],
    shape: |call| call.shape("series"),
    body: Body::PerMember(|call| {
        let (first, last) = call.months("months").unwrap_or((0, 11));
        means(call, first, (last + 12 - first) % 12 + 1, "season")
    }),
    ..Entry::PLAIN
};

static YEARLY: Entry = Entry {
    name: "yearly",
    summary: "The mean of every year that begins with a given month, such as a hydrological year.",
    signature: Signature {
        parameters: &[
            Parameter::required("series", &["series", "bundle"], "monthly or finer values"),
            Parameter::required("from", &["months"], "the month with which a year begins").as_months(),
        ],
    },
    result: "one step a year; a year belongs to the calendar year in which it ends",
    equation: None,
    gaps: "A year with a missing value is incomplete: it is left as a gap, and named in a note.",
    shows: &[Shows {
        program: "x = series([1, 2, 3, 4] mm, along: 1850..1851 CE by 6 month)\nx |> yearly(from: July)",
        gives: "1 step, 1850.5 CE to 1850.5 CE: first 2.5, last 2.5 mm",
    }],
    fails: &[Fails {
        program: "x = series([1, 2] degC, along: 1850..1851 CE by 1 yr)\nx |> yearly(from: autumn)",
        code: "unknown-choice",
        says: "no month",
    }],
    revision: 2,
    search: &["hydrological year", "water year", "annual mean"],
    shape: |call| call.shape("series"),
    body: Body::PerMember(|call| {
        let (first, _) = call.months("from").unwrap_or((0, 0));
        means(call, first, 12, "year")
    }),
    ..Entry::PLAIN
};

pub(super) const FAMILY: &[&Entry] = &[&SEASON, &YEARLY];

fn means(call: &Call<'_>, first: usize, months: usize, word: &str) -> Result<crate::value::Value, Stop> {
    let name = call.label("series");
    series_or_bundle(&*call.value("series")?, &name, &mut |series, name| {
        stretch(call, series, name, first, months, word)
    })
}

/// The means over the stretch of `months` months that begins with month `first`, once a year.
fn stretch(
    call: &Call<'_>,
    series: &Series,
    name: &str,
    first: usize,
    months: usize,
    word: &str,
) -> Result<Series, Stop> {
    let (starts, ends) = cells(&series.axis);
    let (Some(begin), Some(end)) = (starts.first(), ends.last()) else {
        return Err(Fault::new("missing-argument", format!("`{name}` has no values")).into());
    };
    let length = months as f64 / 12.0;
    if series.axis.median_step() > length * (1.0 + 1e-6) {
        return Err(Fault::new(
            "too-coarse",
            format!("`{name}` has steps of {}, longer than the months asked for", step_words(series)),
        )
        .blame("series")
        .help("a season needs monthly or finer values")
        .into());
    }
    // Only stretches that the record touches on both sides can be complete; those it cuts are named as incomplete.
    let offset = first as f64 / 12.0;
    // Months of monthly values are twelfths of a year. Days know their months: June begins with its first day.
    let by_days = series.axis.median_step() < LONGEST_OF_DAYS_YEARS;
    let years = (begin - offset - length).floor() as i64..=(end - offset).ceil() as i64;
    let targets: Vec<(f64, f64)> = years
        .map(|year| {
            let from = year as f64 + offset;
            if by_days {
                (month_start(year, first), month_start(year, first + months))
            } else {
                (from, from + length)
            }
        })
        .filter(|(from, to)| *to > begin + 1e-6 && *from < end - 1e-6)
        .collect();
    // In decimal years a day is shorter in a leap year; all days count the same.
    let scale = |year: f64| if by_days { day_number(year) } else { year };
    let on_scale = |years: &[f64]| years.iter().map(|year| scale(*year)).collect::<Vec<_>>();
    let (cell_starts, cell_ends) = (on_scale(&starts), on_scale(&ends));
    let mean =
        |row: &[f64], (from, to): &(f64, f64)| mean(&cell_starts, &cell_ends, row, scale(*from), scale(*to));
    let nominal = series.values.member(0);
    let incomplete: Vec<f64> =
        targets.iter().filter(|target| mean(nominal, target).is_none()).map(|(_, to)| *to).collect();
    let whole: Vec<&(f64, f64)> =
        targets.iter().filter(|(from, to)| *from > begin - 1e-6 && *to < end + 1e-6).collect();
    if whole.is_empty() {
        return Err(Fault::new("no-overlap", format!("`{name}` holds no complete {word}"))
            .blame("series")
            .into());
    }
    if !incomplete.is_empty() && call.context.path() == Path::Nominal {
        let named: Vec<String> =
            incomplete.iter().take(5).map(|to| format!("{}", (to - 1e-6).floor())).collect();
        let more = if incomplete.len() > 5 { ", …" } else { "" };
        let gaps = if incomplete.len() == 1 { "a gap, or" } else { "gaps, or" };
        call.context.note(format!(
            "{name}: {} incomplete ({}{more}), left as {gaps} away at the ends",
            counted(incomplete.len(), &format!("{word}s")),
            named.join(", ")
        ));
    }
    let values = series.values.map_rows(whole.len(), |row, out| {
        for (value, target) in out.iter_mut().zip(&whole) {
            *value = mean(row, target).unwrap_or(f64::NAN);
        }
    });
    if call.context.path() == Path::Nominal {
        let last = (first + months - 1) % 12;
        let (from, to) = (MONTHS.get(first).unwrap_or(&""), MONTHS.get(last).unwrap_or(&""));
        let months = if by_days { "of the calendar" } else { "each counting the same" };
        call.context.note(format!("{name}: means from {from} to {to}, months {months}"));
    }
    let axis = Axis::steps(
        whole.iter().map(|(from, _)| *from).collect(),
        whole.iter().map(|(_, to)| *to).collect(),
        Era::Ce,
    );
    let standing = if series.standing == Standing::Pinned { Standing::Pinned } else { Standing::Own };
    let mut means = Series::new(Arc::new(axis), values, series.measure.clone(), standing);
    // The other months of a year are no gap in the record.
    means.longest_gap_years = 3.0;
    Ok(means)
}

/// Values closer than this are taken to stand on days of the calendar rather than on months.
const LONGEST_OF_DAYS_YEARS: f64 = 0.05;

/// The decimal year at which a month begins; `month` counts from 0 for January of `year` and may run past it.
fn month_start(year: i64, month: usize) -> f64 {
    let (later, month) = ((month / 12) as i64, month % 12);
    let date = instant_of_date(year + later, month as u32 + 1, 1);
    date.map_or(f64::NAN, |date| date.year())
}

/// The days from the beginning of year 0 to a decimal year.
fn day_number(year: f64) -> f64 {
    let whole = (year + 1e-9).floor();
    let before = |year: i64| {
        365 * year + (year - 1).div_euclid(4) - (year - 1).div_euclid(100) + (year - 1).div_euclid(400)
    };
    let (first, next) = (before(whole as i64), before(whole as i64 + 1));
    first as f64 + (year - whole) * (next - first) as f64
}

/// The mean over `from..to`; none unless values cover all of it.
fn mean(starts: &[f64], ends: &[f64], values: &[f64], from: f64, to: f64) -> Option<f64> {
    let first = ends.partition_point(|end| *end <= from + 1e-6);
    let (mut sum, mut weight) = (0.0, 0.0);
    for ((start, end), value) in starts.iter().zip(ends).zip(values).skip(first) {
        if *start >= to - 1e-6 {
            break;
        }
        let share = end.min(to) - start.max(from);
        if !value.is_nan() {
            sum += share * value;
            weight += share;
        }
    }
    (weight >= (to - from) * (1.0 - 1e-4)).then(|| sum / weight)
}

fn step_words(series: &Series) -> String {
    crate::value::duration_words(series.axis.median_step())
}
