//! Bytes to a series: times, values, unit text, and the notes that say how they were read.

use super::delimited::{DelimitedOptions, DelimitedTable, read_table};
use super::month_layout::MonthLayout;
use super::numbers::NumberOptions;
use super::time_axis::{AxisForm, axis_from};
use super::time_column::{ReadEra, TimeChoice, TimeColumns, choose_time};
use super::time_stamps::read_stamps;
use super::{FileFault, quoted_names};
use crate::base::Cancellation;
use rayon::prelude::*;

/// What the reader of a series is told beforehand. The default finds everything out.
#[derive(Debug, Clone, Default)]
pub struct SeriesOptions {
    /// The time column, by name or whole header.
    pub time: Option<String>,
    /// The value column, by name or whole header.
    pub value: Option<String>,
    /// Overrides whether the values are means over steps or values at instants.
    pub form: Option<AxisForm>,
    /// Markers of missing values beside the customary ones (see [`NumberOptions::missing`]).
    pub missing: Vec<String>,
    /// Numbers are written `3,14`.
    pub decimal_comma: bool,
    /// Raised to stop the reading of a long file.
    pub cancellation: Cancellation,
}

/// A series as read. Starts and values are of one length, at least 1.
#[derive(Debug, Clone)]
pub struct ReadSeries {
    /// Whether the values are means over steps or values at instants.
    pub form: AxisForm,
    /// Years CE, astronomical, strictly ascending: starts of the steps, or the instants.
    pub starts: Vec<f64>,
    /// Ends of the steps, one for each and never past the next start; none for instants.
    pub ends: Vec<f64>,
    /// NaN for a gap; never infinite.
    pub values: Vec<f64>,
    /// The unit as the file words it.
    pub unit_text: Option<String>,
    /// How the file counts its times; `starts` and `ends` are years CE whatever it is.
    pub era: ReadEra,
    /// The name of the value column without its unit.
    pub value_name: String,
    /// The comment lines of the file.
    pub comments: Vec<String>,
    /// Every decision, in the order taken.
    pub notes: Vec<String>,
}

/// Several value columns on one axis, one for each member.
#[derive(Debug, Clone)]
pub struct ReadEnsemble {
    /// As in [`ReadSeries`].
    pub form: AxisForm,
    /// As in [`ReadSeries`].
    pub starts: Vec<f64>,
    /// As in [`ReadSeries`].
    pub ends: Vec<f64>,
    /// Members × times, NaN for a gap; at least one member.
    pub values: Vec<Vec<f64>>,
    /// The names of the columns, in file order, without units.
    pub member_names: Vec<String>,
    /// The unit as the file words it, the same for all members.
    pub unit_text: Option<String>,
    /// As in [`ReadSeries`].
    pub era: ReadEra,
    /// As in [`ReadSeries`].
    pub comments: Vec<String>,
    /// As in [`ReadSeries`].
    pub notes: Vec<String>,
}

/// Reads one value column against time.
///
/// # Errors
/// Whatever is wrong with the file, at its line and column: encoding, shape, times, values, names.
pub fn read_series(bytes: &[u8], options: &SeriesOptions) -> Result<ReadSeries, FileFault> {
    let opened = Opened::new(bytes, options)?;
    let layout = match &options.value {
        None => MonthLayout::find(&opened.table, opened.time.columns, &opened.candidates()),
        Some(_) => None,
    };
    let read = match layout {
        Some(layout) => read_month_columns(opened, &layout, options)?,
        None => read_columns(opened, options, value_column)?,
    };
    let value_name = read.member_names.into_iter().next().unwrap_or_default();
    Ok(ReadSeries {
        form: read.form,
        starts: read.starts,
        ends: read.ends,
        values: read.values.into_iter().next().unwrap_or_default(),
        unit_text: read.unit_text,
        era: read.era,
        value_name,
        comments: read.comments,
        notes: read.notes,
    })
}

/// Reads each column whose name matches `members` (`*` any run of characters, `?` any one) as a
/// member. `options.value` is not used.
///
/// # Errors
/// As [`read_series`]; also when no column matches, and when members disagree on their unit.
pub fn read_ensemble(
    bytes: &[u8],
    members: &str,
    options: &SeriesOptions,
) -> Result<ReadEnsemble, FileFault> {
    read_columns(Opened::new(bytes, options)?, options, |table, candidates, _, _| {
        let chosen: Vec<usize> = candidates
            .iter()
            .copied()
            .filter(|&column| matches_pattern(members, &table.columns[column].name))
            .collect();
        if chosen.is_empty() {
            let found = headers(table, candidates);
            let (which, help) = if candidates.len() == 1 {
                (format!("the only one is {found}"), "leave `members` out to read it as one series")
            } else {
                (format!("they are {found}"), "`*` stands for any characters, `?` for one: members: \"m*\"")
            };
            return Err(FileFault::new(
                "file-no-such-column",
                format!("no value column matches `{members}`; {which}"),
            )
            .help(help));
        }
        Ok(chosen)
    })
}

/// The columns of values, in file order.
type Chosen = Result<Vec<usize>, FileFault>;

/// A file taken apart into cells, with its time columns chosen.
struct Opened<'t> {
    table: DelimitedTable<'t>,
    time: TimeChoice,
    notes: Vec<String>,
}

impl<'t> Opened<'t> {
    fn new(bytes: &'t [u8], options: &SeriesOptions) -> Result<Self, FileFault> {
        let delimited = DelimitedOptions {
            decimal_comma: options.decimal_comma,
            cancellation: options.cancellation.clone(),
        };
        let table = read_table(bytes, &delimited)?;
        let time = choose_time(&table, options.time.as_deref())?;
        let notes = table.notes.iter().chain(&time.notes).cloned().collect();
        Ok(Self { table, time, notes })
    }

    /// The columns that tell no time; those without a single cell only where there are no others.
    fn candidates(&self) -> Vec<usize> {
        let table = &self.table;
        let others = (0..table.columns.len()).filter(|column| !self.time.time_like.contains(column));
        let (filled, empty): (Vec<usize>, Vec<usize>) =
            others.partition(|&column| (0..table.row_count()).any(|row| !table.cell(row, column).is_empty()));
        if filled.is_empty() { empty } else { filled }
    }

    /// The columns that hold nothing, in words.
    fn empty_columns(&self, candidates: &[usize]) -> Option<String> {
        let columns = (0..self.table.columns.len())
            .filter(|column| !self.time.time_like.contains(column) && !candidates.contains(column));
        let names = quoted_names(columns.map(|column| self.table.columns[column].header.as_str()));
        (!names.is_empty()).then(|| format!("no row has anything in {names}, which is not read"))
    }
}

/// A row a year with a column for each month, as one series of months.
fn read_month_columns(
    opened: Opened<'_>,
    layout: &MonthLayout,
    options: &SeriesOptions,
) -> Result<ReadEnsemble, FileFault> {
    let Opened { table, time, mut notes } = opened;
    let unit_text = unit_of(&table, &layout.months, true, &mut notes)?;
    notes.push(layout.note(&table));
    let number_options =
        NumberOptions { missing: options.missing.clone(), decimal_comma: options.decimal_comma };
    let unfolded = layout.unfold(&table, time.columns, &number_options)?;
    let axis = axis_from(unfolded.stamps, &table.columns[layout.year].header, options.form)?;
    notes.extend(axis.notes.iter().cloned());
    notes.extend(unfolded.numbers.notes);
    Ok(ReadEnsemble {
        values: vec![axis.place(unfolded.numbers.values)],
        form: axis.form,
        starts: axis.starts,
        ends: axis.ends,
        member_names: vec!["value".to_owned()],
        unit_text,
        era: ReadEra::CommonEra,
        comments: table.comments,
        notes,
    })
}

fn read_columns(
    opened: Opened<'_>,
    options: &SeriesOptions,
    choose: impl Fn(&DelimitedTable<'_>, &[usize], &SeriesOptions, &mut Vec<String>) -> Chosen,
) -> Result<ReadEnsemble, FileFault> {
    let decimal_comma = options.decimal_comma;
    let candidates = opened.candidates();
    let empty = opened.empty_columns(&candidates);
    let Opened { table, time, mut notes } = opened;
    notes.extend(empty);
    let chosen = choose(&table, &candidates, options, &mut notes)?;
    let unit_text = unit_of(&table, &chosen, candidates.len() == chosen.len(), &mut notes)?;
    let (era, time_name) = match time.columns {
        TimeColumns::Calendar { column, era } => (era, &table.columns[column].header),
        TimeColumns::Parts { year, .. } => (ReadEra::CommonEra, &table.columns[year].header),
        TimeColumns::Ages { column, scale } => (scale.era, &table.columns[column].header),
        TimeColumns::Layers { top, scale, .. } => (scale.era, &table.columns[top].header),
    };
    let number_options = NumberOptions { missing: options.missing.clone(), decimal_comma };
    // Times and columns are read at the same time; of several faults, the first in this order is told.
    let (axis, columns) = rayon::join(
        || axis_from(read_stamps(&table, time.columns, decimal_comma)?, time_name, options.form),
        || -> Vec<_> { chosen.par_iter().map(|&column| table.numbers(column, &number_options)).collect() },
    );
    let axis = axis?;
    notes.extend(axis.notes.iter().cloned());
    let mut values = Vec::with_capacity(chosen.len());
    for read in columns {
        let read = read?;
        notes.extend(read.notes);
        values.push(axis.place(read.values));
    }
    Ok(ReadEnsemble {
        form: axis.form,
        starts: axis.starts,
        ends: axis.ends,
        values,
        member_names: chosen.iter().map(|&column| table.columns[column].name.clone()).collect(),
        unit_text,
        era,
        comments: table.comments,
        notes,
    })
}

fn headers(table: &DelimitedTable<'_>, columns: &[usize]) -> String {
    quoted_names(columns.iter().map(|&column| table.columns[column].header.as_str()))
}

/// The value column: the one named, the only one, or the one called `value`.
fn value_column(
    table: &DelimitedTable<'_>,
    candidates: &[usize],
    options: &SeriesOptions,
    notes: &mut Vec<String>,
) -> Result<Vec<usize>, FileFault> {
    if let Some(wanted) = &options.value {
        return Ok(vec![table.column_named(wanted)?]);
    }
    match candidates {
        [only] => Ok(vec![*only]),
        [] => {
            let list = quoted_names(table.columns.iter().map(|column| column.header.as_str()));
            Err(FileFault::new(
                "file-no-value-column",
                format!("there is no column of values beside the time; the columns are {list}"),
            )
            .help(
                "columns are separated by commas, semicolons or tabs; a value column with a name that \
                 tells time is named by value: \"the name\"",
            ))
        }
        several => {
            let named = |&&column: &&usize| table.columns[column].name == "value";
            if let [column] = several.iter().filter(named).collect::<Vec<_>>().as_slice() {
                let list = headers(table, several);
                notes.push(format!("`value` is taken of the columns {list}"));
                return Ok(vec![**column]);
            }
            let header = |column: usize| table.columns[column].header.as_str();
            if let Some(twice) = several.iter().find(|&&column| {
                several.iter().any(|&other| other < column && header(other) == header(column))
            }) {
                table.column_named(header(*twice))?;
            }
            // A column with a unit is the likelier example.
            let example = several
                .iter()
                .find(|&&column| table.columns[column].unit_text.is_some())
                .unwrap_or(&several[0]);
            let list = headers(table, several);
            Err(FileFault::new(
                "file-which-value-column",
                format!("several columns could hold the values: {list}"),
            )
            .help(format!(
                "say which, as in value: \"{}\"; members: \"m*\" takes several as an ensemble",
                table.columns[*example].name
            )))
        }
    }
}

/// The unit of the chosen columns: from their headers, or from a comment where there is one value
/// column.
fn unit_of(
    table: &DelimitedTable<'_>,
    chosen: &[usize],
    only_value_column: bool,
    notes: &mut Vec<String>,
) -> Result<Option<String>, FileFault> {
    let from_header = chosen.first().and_then(|&column| table.columns[column].unit_text.clone());
    let different = chosen.iter().find(|&&column| table.columns[column].unit_text != from_header);
    if let (Some(&first), Some(&other)) = (chosen.first(), different) {
        return Err(FileFault::new(
            "file-member-units",
            format!(
                "the members are not in one unit: `{}` and `{}`",
                table.columns[first].header, table.columns[other].header
            ),
        ));
    }
    let from_comment =
        if only_value_column { table.comments.iter().find_map(|line| unit_in_comment(line)) } else { None };
    match (from_header, from_comment) {
        (Some(header), Some(comment)) if header != comment => {
            notes.push(format!(
                "the header says the unit is `{header}`, a comment says `{comment}`: the header is taken"
            ));
            Ok(Some(header))
        }
        (Some(unit), _) => Ok(Some(unit)),
        (None, Some(unit)) => {
            notes.push(format!("the unit `{unit}` is taken from a comment of the file"));
            Ok(Some(unit))
        }
        (None, None) => Ok(None),
    }
}

/// Words that begin what a value is counted against, and so end its unit.
const REFERENCE_WORDS: [&str; 12] = [
    "anomaly",
    "anomalies",
    "vs",
    "vs.",
    "versus",
    "relative",
    "above",
    "change",
    "departure",
    "difference",
    "since",
    "with",
];

/// `units: degC anomaly vs 1951-1980; …` is `degC`: the words up to a semicolon or comma, without
/// what tells against which reference they count.
fn unit_in_comment(comment: &str) -> Option<String> {
    let (key, rest) = comment.split_once(':')?;
    if !matches!(key.trim().to_ascii_lowercase().as_str(), "unit" | "units") {
        return None;
    }
    let text = rest.split([';', ',']).next().unwrap_or("").trim();
    let words: Vec<&str> = text.split_whitespace().collect();
    let end = words
        .iter()
        .position(|word| REFERENCE_WORDS.contains(&word.to_ascii_lowercase().as_str()))
        .filter(|&at| at > 0)
        .unwrap_or(words.len());
    let unit = words[..end].join(" ");
    (!unit.is_empty()).then_some(unit)
}

/// `*` stands for any run of characters, `?` for any one.
fn matches_pattern(pattern: &str, name: &str) -> bool {
    let (pattern, name): (Vec<char>, Vec<char>) = (pattern.chars().collect(), name.chars().collect());
    let (mut at_pattern, mut at_name) = (0, 0);
    let mut star: Option<(usize, usize)> = None;
    while at_name < name.len() {
        match pattern.get(at_pattern) {
            Some('*') => {
                star = Some((at_pattern, at_name));
                at_pattern += 1;
            }
            Some(&character) if character == '?' || character == name[at_name] => {
                at_pattern += 1;
                at_name += 1;
            }
            // Let the last star swallow one character more.
            Some(_) | None => match star {
                Some((star_pattern, star_name)) => {
                    star = Some((star_pattern, star_name + 1));
                    at_pattern = star_pattern + 1;
                    at_name = star_name + 1;
                }
                None => return false,
            },
        }
    }
    pattern[at_pattern..].iter().all(|&character| character == '*')
}
