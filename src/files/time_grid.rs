//! Regular divisions of time, and which of them decimal years and dates sit on.

use super::calendar::{days_before_month, days_before_year, days_in_month, days_in_year, year_of_day};

/// A regular division of time into numbered steps.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Grid {
    /// Equal parts of a year, as many as said, counted from the start of year 0.
    PartsOfYear(i64),
    /// Several whole years or months from the first label on: (parts of a year, how many, first
    /// label).
    Blocks { per_year: i64, length: i64, first: i64 },
    /// Calendar days, counted from 1 January of year 0.
    Days,
    /// Blocks of whole days.
    DayBlocks { length: i64, first: i64 },
}

impl Grid {
    pub(super) fn edge(self, index: i64) -> f64 {
        match self {
            Grid::PartsOfYear(per_year) => index as f64 / per_year as f64,
            Grid::Blocks { per_year, length, first } => (first + index * length) as f64 / per_year as f64,
            Grid::Days => year_of_day(index),
            Grid::DayBlocks { length, first } => year_of_day(first + index * length),
        }
    }

    pub(super) fn step_name(self) -> String {
        match self {
            Grid::PartsOfYear(1) => "calendar year".to_owned(),
            Grid::PartsOfYear(2) => "half-year".to_owned(),
            Grid::PartsOfYear(4) => "quarter".to_owned(),
            Grid::PartsOfYear(12) => "month".to_owned(),
            Grid::PartsOfYear(per_year) => format!("{per_year}th of a year"),
            Grid::Blocks { per_year: 1, length, .. } => format!("step of {length} years"),
            Grid::Blocks { length, .. } => format!("step of {length} months"),
            Grid::Days => "day".to_owned(),
            Grid::DayBlocks { length, .. } => format!("step of {length} days"),
        }
    }
}

/// Whether more than half of the spacings are one step, and filling the rest stays in proportion.
pub(super) fn mostly_consecutive(indices: &[i64]) -> bool {
    let spacings = indices.len().saturating_sub(1);
    let ones = indices.windows(2).filter(|pair| pair[1] - pair[0] == 1).count();
    let ascending = indices.windows(2).all(|pair| pair[1] > pair[0]);
    let span = match (indices.first(), indices.last()) {
        (Some(first), Some(last)) => usize::try_from(last - first).unwrap_or(usize::MAX),
        _ => return false,
    };
    ascending && (spacings == 0 || ones * 2 > spacings) && span / 50 <= indices.len() + 100
}

/// Where a decimal year sits: the index of the step, how far it is from the middle, the length of
/// the step and the extra distance allowed, all in years.
type Seat = (i64, f64, f64, f64);

/// The coarsest grid that decimal years sit on at mid-step, within the printed decimals
/// (`resolution`, one of the last decimal), most of them on neighbouring steps; and the step of
/// each.
pub(super) fn decimal_grid(years: &[f64], resolution: f64) -> Option<(Grid, Vec<i64>)> {
    fn equal_parts(year: f64, per_year: i64) -> Seat {
        let step_years = 1.0 / per_year as f64;
        let index = (year / step_years).floor();
        let offset = year - (index + 0.5) * step_years;
        (index as i64, offset, step_years, 0.0)
    }
    let on = |grid: Grid, seat: &dyn Fn(f64) -> Seat| {
        let indices = grid_indices(years, resolution, seat)?;
        mostly_consecutive(&indices).then_some((grid, indices))
    };
    [1, 2, 4, 12]
        .into_iter()
        .find_map(|per_year| on(Grid::PartsOfYear(per_year), &|year| equal_parts(year, per_year)))
        .or_else(|| on(Grid::PartsOfYear(12), &calendar_month))
        .or_else(|| on(Grid::Days, &calendar_day))
}

fn day_of(year: f64) -> (i64, f64) {
    let whole = year.floor();
    (whole as i64, (year - whole) * days_in_year(whole as i64) as f64)
}

/// Months of their true length, as in `1958.2027` for mid-March: archives differ by a day in what
/// is the middle.
fn calendar_month(year: f64) -> Seat {
    let (whole, day) = day_of(year);
    let mut month = 1;
    let mut before = 0;
    while month < 12 && day >= (before + days_in_month(whole, month)) as f64 {
        before += days_in_month(whole, month);
        month += 1;
    }
    let year_days = days_in_year(whole) as f64;
    let middle = before as f64 + days_in_month(whole, month) as f64 / 2.0;
    (whole * 12 + month - 1, (day - middle) / year_days, 1.0 / 12.0, 1.5 / year_days)
}

fn calendar_day(year: f64) -> Seat {
    let (whole, day) = day_of(year);
    let day_years = 1.0 / days_in_year(whole) as f64;
    let index = days_before_year(whole) + day.floor() as i64;
    (index, (day - day.floor() - 0.5) * day_years, day_years, 0.0)
}

/// The step of each year, where all sit in the middle of one within the printed decimals, either
/// rounded or cut.
fn grid_indices(years: &[f64], resolution: f64, seat: &dyn Fn(f64) -> Seat) -> Option<Vec<i64>> {
    // A single-precision year is only good to 6e-5 however many decimals are printed.
    let fuzz = 1e-4;
    let rounded = (resolution / 2.0 * 1.000_001).max(fuzz);
    let (mut all_rounded, mut all_cut) = (true, true);
    let mut indices = Vec::with_capacity(years.len());
    for &year in years {
        if year.abs() > 1e9 {
            return None;
        }
        let (index, offset, step_years, extra) = seat(year);
        // Where the printed decimals nearly span the step, everything would fit.
        if 2.0 * (rounded + extra) > 0.4 * step_years {
            return None;
        }
        all_rounded = all_rounded && offset.abs() <= rounded + extra;
        all_cut = all_cut && offset <= fuzz + extra && offset >= -(resolution + fuzz + extra);
        if !(all_rounded || all_cut) {
            return None;
        }
        indices.push(index);
    }
    Some(indices)
}

/// Dates that label months, quarters, half-years or years: by their first, their last or their
/// middle day.
pub(super) fn month_grid(days: &[i64]) -> Option<(Grid, Vec<i64>, &'static str)> {
    let parts: Vec<(i64, i64, i64)> = days.iter().map(|&day| month_and_day(day)).collect();
    let months: Vec<i64> = parts.iter().map(|part| part.0).collect();
    if parts.iter().all(|part| part.1 == 1) {
        let spacing = months.windows(2).map(|pair| pair[1] - pair[0]).min().unwrap_or(0);
        if matches!(spacing, 1 | 3 | 6 | 12) && months.iter().all(|month| month.rem_euclid(spacing) == 0) {
            let indices: Vec<i64> = months.iter().map(|month| month.div_euclid(spacing)).collect();
            return mostly_consecutive(&indices).then_some((
                Grid::PartsOfYear(12 / spacing),
                indices,
                "dates on the first day: ",
            ));
        }
    }
    if parts.iter().all(|part| part.0.rem_euclid(12) == 6 && part.1 <= 2) {
        let indices: Vec<i64> = months.iter().map(|month| month.div_euclid(12)).collect();
        return mostly_consecutive(&indices).then_some((
            Grid::PartsOfYear(1),
            indices,
            "dates in mid-year: ",
        ));
    }
    let stamped = if parts.iter().all(|part| (14..=17).contains(&part.1)) {
        "dates in mid-month: "
    } else if parts.iter().all(|part| part.1 == part.2) {
        "dates on the last day of the month: "
    } else {
        return None;
    };
    mostly_consecutive(&months).then_some((Grid::PartsOfYear(12), months, stamped))
}

/// The month from January of year 0, the day of it from 1, and its length.
fn month_and_day(day_number: i64) -> (i64, i64, i64) {
    let year = year_of_day(day_number).floor() as i64;
    let day_of_year = day_number - days_before_year(year);
    let month = (1..=12).rev().find(|&month| days_before_month(year, month) <= day_of_year).unwrap_or(1);
    (year * 12 + month - 1, day_of_year - days_before_month(year, month) + 1, days_in_month(year, month))
}

pub(super) fn label(grid: Grid, index: i64) -> String {
    match grid {
        Grid::PartsOfYear(1) if index < 1 => format!("{} BCE", 1 - index),
        Grid::PartsOfYear(1) => index.to_string(),
        Grid::PartsOfYear(12) => {
            format!("{:04}-{:02}", index.div_euclid(12), index.rem_euclid(12) + 1)
        }
        Grid::Days => {
            let (month, day, _) = month_and_day(index);
            format!("{:04}-{:02}-{day:02}", month.div_euclid(12), month.rem_euclid(12) + 1)
        }
        Grid::PartsOfYear(per_year) => {
            format!("{}, part {} of {per_year}", index.div_euclid(per_year), index.rem_euclid(per_year) + 1)
        }
        Grid::Blocks { .. } | Grid::DayBlocks { .. } => format!("{}", grid.edge(index)),
    }
}
