//! Stamps to steps or instants, with the decision noted.

use super::calendar::{days_in_year, year_of_day};
use super::time_grid::{Grid, decimal_grid, label, month_grid, mostly_consecutive};
use super::time_stamps::{OrderedStamps, Stamps};
use super::{FileFault, counted};

/// What the values of a series stand for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum AxisForm {
    /// Means over spans of time.
    Steps,
    /// Values at points in time.
    Instants,
}

/// Times in years CE, ascending.
#[derive(Debug)]
pub(super) struct Axis {
    pub(super) form: AxisForm,
    pub(super) starts: Vec<f64>,
    pub(super) ends: Vec<f64>,
    /// Places of the steps that have no row in the file and were filled in, ascending.
    pub(super) filled: Vec<usize>,
    /// The rows of the file run from the last time to the first.
    pub(super) reversed: bool,
    pub(super) notes: Vec<String>,
}

/// Decides what the stamps of `name` mean. `form` overrides.
///
/// # Errors
/// Steps asked for where their length cannot be told.
pub(super) fn axis_from(
    ordered: OrderedStamps,
    name: &str,
    form: Option<AxisForm>,
) -> Result<Axis, FileFault> {
    let reversed = ordered.reversed;
    let builder = Builder { name, form };
    let mut axis = match ordered.stamps {
        Stamps::Years { years, decimals } => builder.years(years, decimals),
        Stamps::Months(months) => builder.labels(&months, 12, "month"),
        Stamps::Dates(dates) => builder.dates(&dates),
        Stamps::Ages(years) => builder.ages(years),
        Stamps::Layers(layers) => Ok(builder.layers(&layers)),
    }?;
    axis.reversed = reversed;
    axis.notes.splice(0..0, ordered.notes);
    Ok(axis)
}

impl Axis {
    /// Steps from `starts` to `ends`, a row of the file for each.
    fn steps(starts: Vec<f64>, ends: Vec<f64>) -> Self {
        Self { form: AxisForm::Steps, starts, ends, filled: Vec::new(), reversed: false, notes: Vec::new() }
    }

    /// Brings the values of the rows of the file onto the axis; a step that was filled in is a gap.
    pub(super) fn place(&self, mut by_row: Vec<f64>) -> Vec<f64> {
        if self.reversed {
            by_row.reverse();
        }
        if self.filled.is_empty() {
            return by_row;
        }
        let (mut rows, mut filled) = (by_row.into_iter(), self.filled.iter().peekable());
        (0..self.starts.len())
            .map(|place| match filled.next_if_eq(&&place) {
                Some(_) => f64::NAN,
                None => rows.next().unwrap_or(f64::NAN),
            })
            .collect()
    }
}

struct Builder<'a> {
    name: &'a str,
    form: Option<AxisForm>,
}

impl Builder<'_> {
    fn years(&self, years: Vec<f64>, decimals: usize) -> Result<Axis, FileFault> {
        if years.iter().all(|year| year.fract().abs() <= 0.0 && year.abs() < 1e15) {
            let labels: Vec<i64> = years.iter().map(|&year| year as i64).collect();
            let mut axis = self.labels(&labels, 1, "year")?;
            if labels.contains(&-1) && labels.contains(&1) && !labels.contains(&0) {
                axis.notes.push(format!(
                    "{}: there is a year −1 and a year 1 but no year 0: if the file counts −1 as 1 BCE, \
                     add 1 to its negative years",
                    self.name
                ));
            }
            return Ok(axis);
        }
        let resolution = 10_f64.powi(-i32::try_from(decimals).unwrap_or(12).min(12));
        if years.len() > 1
            && let Some((grid, indices)) = decimal_grid(&years, resolution)
        {
            let stamped = match grid {
                Grid::PartsOfYear(1) => "decimal years at mid-year: ",
                Grid::Days => "decimal years at the middle of calendar days: ",
                Grid::PartsOfYear(_) | Grid::Blocks { .. } | Grid::DayBlocks { .. } => {
                    "decimal years at mid-step: "
                }
            };
            return Ok(self.on_grid(grid, &indices, stamped));
        }
        if self.form == Some(AxisForm::Steps) {
            return self.regular_steps(&years, resolution, true);
        }
        let what = match regular_spacing(&years, resolution) {
            Some(_) if years.len() > 2 => "regular but not at the middle of years, quarters, months or days",
            Some(_) | None => "on no regular grid",
        };
        let count = counted(years.len(), "decimal year");
        let mut axis = instants(years);
        axis.notes.push(format!("{}: {count} {what}, read as instants", self.name));
        Ok(axis)
    }

    /// Whole years or months, each the label of a calendar year or month.
    fn labels(&self, labels: &[i64], per_year: i64, unit: &str) -> Result<Axis, FileFault> {
        if mostly_consecutive(labels) {
            return Ok(self.on_grid(Grid::PartsOfYear(per_year), labels, ""));
        }
        let spacing = even_spacing(labels);
        let count = counted(labels.len(), unit);
        if self.form == Some(AxisForm::Steps) {
            let mut axis = match spacing {
                Some(length) => {
                    let first = labels.first().copied().unwrap_or(0);
                    let indices: Vec<i64> = (0..).take(labels.len()).collect();
                    filled_steps(Grid::Blocks { per_year, length, first }, &indices)
                }
                None => separate_steps(Grid::PartsOfYear(per_year), labels),
            };
            axis.notes.push(match spacing {
                Some(length) => format!(
                    "{}: {count}, {length} apart, read as steps of {length} {unit}s that begin with the \
                     {unit} named, because as: steps says so",
                    self.name
                ),
                None => format!(
                    "{}: {count}, unevenly spaced, each read as a step of one {unit}, because as: steps \
                     says so",
                    self.name
                ),
            });
            return Ok(axis);
        }
        let middle = |label: &i64| (*label as f64 + 0.5) / per_year as f64;
        let mut axis = instants(labels.iter().map(middle).collect());
        let spaced = match spacing {
            Some(length) => format!("{length} {unit}s apart"),
            None => "unevenly spaced".to_owned(),
        };
        axis.notes.push(format!(
            "{}: {count}, {spaced}, read as instants at the middle of the {unit} named; as: steps \
             overrides",
            self.name
        ));
        Ok(axis)
    }

    fn dates(&self, dates: &[(i64, f64)]) -> Result<Axis, FileFault> {
        let same_hour = dates.iter().all(|(_, fraction)| (fraction - dates[0].1).abs() < 1e-9);
        let days: Vec<i64> = dates.iter().map(|(day, _)| *day).collect();
        let count = counted(days.len(), "date");
        if same_hour && days.len() > 1 {
            if mostly_consecutive(&days) {
                return Ok(self.on_grid(Grid::Days, &days, "dates: "));
            }
            if let Some((grid, indices, stamped)) = month_grid(&days) {
                return Ok(self.on_grid(grid, &indices, stamped));
            }
        }
        if self.form == Some(AxisForm::Steps) {
            let Some(length) = even_spacing(&days).filter(|_| same_hour) else {
                return Err(self.no_step_length());
            };
            let indices: Vec<i64> = (0..).take(days.len()).collect();
            let mut axis = filled_steps(Grid::DayBlocks { length, first: days[0] }, &indices);
            axis.notes.push(format!(
                "{}: {count}, {length} days apart, read as steps that begin with the date, because as: \
                 steps says so",
                self.name
            ));
            return Ok(axis);
        }
        let time = |(day, fraction): &(i64, f64)| {
            let start = year_of_day(*day);
            start + fraction / days_in_year(start.floor() as i64) as f64
        };
        let mut axis = instants(dates.iter().map(time).collect());
        axis.notes
            .push(format!("{}: {count}, neither daily nor monthly throughout, read as instants", self.name));
        Ok(axis)
    }

    fn ages(&self, years: Vec<f64>) -> Result<Axis, FileFault> {
        if self.form == Some(AxisForm::Steps) {
            return self.regular_steps(&years, 1e-6, false);
        }
        let count = counted(years.len(), "age");
        let mut axis = instants(years);
        axis.notes.push(format!(
            "{}: {count}, read as instants; age_top and age_bottom would make steps",
            self.name
        ));
        Ok(axis)
    }

    fn layers(&self, layers: &[(f64, f64)]) -> Axis {
        let count = counted(layers.len(), "layer");
        if self.form == Some(AxisForm::Instants) {
            let mut axis = instants(layers.iter().map(|(older, younger)| (older + younger) / 2.0).collect());
            axis.notes.push(format!("{count} read as instants at mid-layer, because as: instants says so"));
            return axis;
        }
        let mut axis = Axis::steps(
            layers.iter().map(|layer| layer.0).collect(),
            layers.iter().map(|layer| layer.1).collect(),
        );
        let mut holes = 0;
        for index in 1..layers.len() {
            let apart = axis.starts[index] - axis.ends[index - 1];
            if apart > 1e-6 {
                holes += 1;
            } else {
                // Edges that touch are made the same bits, so that steps tile.
                axis.ends[index - 1] = axis.starts[index];
            }
        }
        let between =
            if holes > 0 { format!(", with {} between them", counted(holes, "hole")) } else { String::new() };
        axis.notes.push(format!(
            "{count} between age_top and age_bottom read as steps{between}; as: instants overrides"
        ));
        axis
    }

    /// Steps of a known grid, or their middles when instants were asked for.
    fn on_grid(&self, grid: Grid, indices: &[i64], stamped: &str) -> Axis {
        let step = grid.step_name();
        let count = indices.len();
        if self.form == Some(AxisForm::Instants) {
            let middle = |&index: &i64| (grid.edge(index) + grid.edge(index + 1)) / 2.0;
            let mut axis = instants(indices.iter().map(middle).collect());
            axis.notes.push(format!(
                "{}: {stamped}{}, read as instants in the middle of each, because as: instants says so",
                self.name,
                counted(count, &step)
            ));
            return axis;
        }
        let mut axis = filled_steps(grid, indices);
        let filled = axis.filled.len();
        let example = label(grid, indices[count / 2]);
        let decision = format!(
            "read as steps (the value of {example} is the mean over {example}); as: instants overrides"
        );
        axis.notes.push(if count == 1 {
            format!("{}: {stamped}1 {step}, {decision}", self.name)
        } else if filled == 0 {
            format!("{}: {stamped}{count} consecutive {step}s, {decision}", self.name)
        } else {
            let first = axis.filled.first().copied().unwrap_or(0);
            let first_missing = label(grid, indices[0] + i64::try_from(first).unwrap_or(0));
            let become_gaps = if filled == 1 {
                format!("1 has no row ({first_missing}) and becomes a gap")
            } else {
                format!("{filled} have no row (first {first_missing}) and become gaps")
            };
            format!(
                "{}: {stamped}{} {step}s of which {become_gaps}, {decision}",
                self.name,
                axis.starts.len()
            )
        });
        axis
    }

    /// Steps around evenly spaced times; or from them on, where `may_begin` and they sit on round
    /// parts of a year.
    fn regular_steps(&self, years: &[f64], resolution: f64, may_begin: bool) -> Result<Axis, FileFault> {
        let Some(spacing) = regular_spacing(years, resolution) else {
            return Err(self.no_step_length());
        };
        let step_years = round_step(spacing, 2.0 * resolution / (years.len() - 1) as f64);
        let nearest_start = |year: f64| (year / step_years).round() * step_years;
        let begins =
            may_begin && years.iter().all(|&year| (year - nearest_start(year)).abs() <= resolution.max(1e-9));
        let (first, how) = if begins {
            (nearest_start(years[0]), "that begin at")
        } else {
            (years[0] - step_years / 2.0, "around")
        };
        let edge = |index: usize| first + index as f64 * step_years;
        let mut axis =
            Axis::steps((0..years.len()).map(edge).collect(), (1..=years.len()).map(edge).collect());
        axis.notes.push(format!(
            "{}: {} read as steps of {step_years} yr {how} the times given, because as: steps says so",
            self.name,
            counted(years.len(), "time")
        ));
        Ok(axis)
    }

    fn no_step_length(&self) -> FileFault {
        FileFault::new(
            "file-steps",
            format!("`{}` is not evenly spaced, so the length of its steps is not known", self.name),
        )
        .help("leave out as: steps, or give `age_top` and `age_bottom`")
    }
}

fn instants(times: Vec<f64>) -> Axis {
    Axis { form: AxisForm::Instants, ..Axis::steps(times, Vec::new()) }
}

/// Steps from the first to the last index; those without a row are filled in.
fn filled_steps(grid: Grid, indices: &[i64]) -> Axis {
    let mut axis = Axis::steps(Vec::with_capacity(indices.len()), Vec::with_capacity(indices.len()));
    let mut end = indices.first().map_or(0.0, |&first| grid.edge(first));
    let mut next = indices.first().copied().unwrap_or(0);
    for &index in indices {
        while next <= index {
            if next < index {
                axis.filled.push(axis.starts.len());
            }
            axis.starts.push(end);
            end = grid.edge(next + 1);
            axis.ends.push(end);
            next += 1;
        }
    }
    axis
}

/// One step for each index, and nothing in between.
fn separate_steps(grid: Grid, indices: &[i64]) -> Axis {
    Axis::steps(
        indices.iter().map(|&index| grid.edge(index)).collect(),
        indices.iter().map(|&index| grid.edge(index + 1)).collect(),
    )
}

fn even_spacing(labels: &[i64]) -> Option<i64> {
    let spacing = labels.get(1)? - labels.first()?;
    labels.windows(2).all(|pair| pair[1] - pair[0] == spacing).then_some(spacing)
}

/// The mean spacing, where no spacing differs from it by more than the printed decimals allow.
fn regular_spacing(years: &[f64], resolution: f64) -> Option<f64> {
    let (first, last) = (*years.first()?, *years.last()?);
    if years.len() < 2 {
        return None;
    }
    let spacing = (last - first) / (years.len() - 1) as f64;
    let allowed = (1.01 * resolution).max(1e-9 * spacing);
    years.windows(2).all(|pair| (pair[1] - pair[0] - spacing).abs() <= allowed).then_some(spacing)
}

/// Whole years, halves, quarters or twelfths where the spacing is one within `tolerance`: printed
/// decimals hide it.
fn round_step(spacing: f64, tolerance: f64) -> f64 {
    [1.0, 2.0, 4.0, 12.0]
        .into_iter()
        .map(|parts: f64| (spacing * parts).round() / parts)
        .find(|&round| round > 0.0 && (round - spacing).abs() <= tolerance)
        .unwrap_or(spacing)
}
