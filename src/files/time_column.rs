//! Which columns tell the time, and how their numbers count.

use super::{DelimitedTable, FileFault, TextColumn, quoted_names};

/// How the times of a file were counted. Times leave this layer in years CE whatever it says; it
/// tells how to show them.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ReadEra {
    /// Years CE, astronomical, or dates.
    CommonEra,
    /// Years BCE, counted back: 1 BCE is the astronomical year 0.
    BeforeCommonEra,
    /// Thousands of years before 1950.
    Ka,
    /// Millions of years before 1950.
    Ma,
    /// Calibrated years before 1950.
    CalBp,
    /// Years (or thousands of years) before 2000.
    B2k,
}

/// Turns an age into a year: `datum_year − age · 10^unit_exponent`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct AgeScale {
    pub(super) era: ReadEra,
    pub(super) datum_year: i32,
    pub(super) unit_exponent: i32,
}

impl AgeScale {
    /// What one unit of the age is, for a note.
    pub(super) fn description(self) -> String {
        let unit = match self.unit_exponent {
            0 => "years",
            3 => "thousands of years",
            _ => "millions of years",
        };
        format!("{unit} before {}", self.datum_year)
    }
}

/// The columns that hold the time.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum TimeColumns {
    /// Years or dates, in one column.
    Calendar { column: usize, era: ReadEra },
    /// Years, months and perhaps days in columns of their own.
    Parts { year: usize, month: usize, day: Option<usize> },
    /// Ages of points.
    Ages { column: usize, scale: AgeScale },
    /// Ages of the younger and the older end of each layer.
    Layers { top: usize, bottom: usize, scale: AgeScale },
}

/// What was chosen, and which columns are times at all (and so never values).
#[derive(Debug)]
pub(super) struct TimeChoice {
    pub(super) columns: TimeColumns,
    pub(super) time_like: Vec<usize>,
    pub(super) notes: Vec<String>,
}

/// What a header says of a column.
#[derive(Debug, Clone, PartialEq, Eq)]
enum Role {
    Calendar(ReadEra),
    Month,
    Day,
    Age(AgeScale),
    Top(Option<AgeScale>),
    Bottom(Option<AgeScale>),
    /// An age whose unit is not said, not known or refused.
    BadTime(BadTime),
    Other,
}

#[derive(Debug, Clone, PartialEq, Eq)]
enum BadTime {
    NoUnit,
    UnknownUnit(String),
    PlainBp,
    /// A calendar column whose unit is neither a calendar nor an age: `time (days since 1850-01-01)`.
    NoCalendar,
}

const UNDERSTOOD_AGES: &str = "write the unit into the name, as in `age (ka)`, `age_ka`, `age (Ma)`, \
    `age (yr)`, `age (cal BP)` (all counted back from 1950), `age (b2k)` (from 2000), or `age_top (ka)` \
    and `age_bottom (ka)` for layers";

const UNDERSTOOD_TIMES: &str = "name the time column `year`, `date`, `time`, `decimal_year`, `year` and \
    `month`, `age (ka)`, `age (Ma)`, `age (cal BP)`, `age (b2k)`, or `age_top (ka)` and `age_bottom \
    (ka)`; or say time: \"the name\"";

/// Chooses the time columns by the name that was asked for, or by their names.
pub(super) fn choose_time(table: &DelimitedTable<'_>, wanted: Option<&str>) -> Result<TimeChoice, FileFault> {
    let mut roles: Vec<Role> = table.columns.iter().map(role_of).collect();
    let mut notes = Vec::new();
    let mut first = None;
    if let Some(wanted) = wanted {
        let column = table.column_named(wanted)?;
        if matches!(roles[column], Role::Other | Role::Month | Role::Day) {
            roles[column] = role_when_asked_for(&table.columns[column]);
            if matches!(roles[column], Role::Calendar(_)) {
                notes.push(format!(
                    "{wanted}: the name tells no unit of age, so it is read as years CE or dates"
                ));
            }
        }
        first = Some(column);
    } else if !table.has_header {
        roles[0] = Role::Calendar(ReadEra::CommonEra);
        first = Some(0);
        notes.push("column 1 is taken for the time (years CE or dates)".to_owned());
    }
    let time_like = (0..roles.len()).filter(|&i| roles[i] != Role::Other).collect::<Vec<_>>();
    let columns = match first {
        Some(column) => around(table, &roles, column)?,
        None => {
            let column = find_first(table, &roles)?;
            let chosen = around(table, &roles, column)?;
            let unused = time_like.iter().filter(|&&other| !used(chosen).contains(&Some(other)));
            let unused = quoted_names(unused.map(|&other| table.columns[other].header.as_str()));
            if !unused.is_empty() {
                notes.push(format!(
                    "{} is taken for the time; {unused} not read",
                    table.columns[column].header
                ));
            }
            chosen
        }
    };
    if let TimeColumns::Ages { scale, .. } | TimeColumns::Layers { scale, .. } = columns {
        let header = used(columns)[0].map_or("", |column| table.columns[column].header.as_str());
        let caution = if folded(header) == "age_bp" {
            ", taken as calibrated: uncalibrated radiocarbon ages are not calendar years"
        } else {
            ""
        };
        notes.push(format!("{header}: counted in {}{caution}", scale.description()));
    }
    Ok(TimeChoice { columns, time_like, notes })
}

fn used(columns: TimeColumns) -> [Option<usize>; 3] {
    match columns {
        TimeColumns::Calendar { column, .. } | TimeColumns::Ages { column, .. } => [Some(column), None, None],
        TimeColumns::Parts { year, month, day } => [Some(year), Some(month), day],
        TimeColumns::Layers { top, bottom, .. } => [Some(top), Some(bottom), None],
    }
}

/// What one column by itself tells about time.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum HeaderTime {
    Calendar(ReadEra),
    /// `datum_year − age · 10^unit_exponent`.
    Age {
        era: ReadEra,
        datum_year: i32,
        unit_exponent: i32,
    },
    Month,
    Day,
    Other,
}

/// What a column named so tells about time; `asked_for` where it was named as the time, whatever its name.
///
/// # Errors
/// An age whose unit is missing, unknown or plain BP; a calendar that is not known.
pub(super) fn time_of_header(
    name: &str,
    unit_text: Option<&str>,
    asked_for: bool,
) -> Result<HeaderTime, FileFault> {
    let column = TextColumn::headed(name, unit_text);
    let by_name = role_of(&column);
    let role = if asked_for && by_name == Role::Other { role_when_asked_for(&column) } else { by_name };
    match role {
        Role::Calendar(era) => Ok(HeaderTime::Calendar(era)),
        Role::Age(AgeScale { era, datum_year, unit_exponent }) => {
            Ok(HeaderTime::Age { era, datum_year, unit_exponent })
        }
        Role::Month => Ok(HeaderTime::Month),
        Role::Day => Ok(HeaderTime::Day),
        Role::BadTime(reason) => Err(bad_time(&column.header, &reason)),
        Role::Top(_) | Role::Bottom(_) | Role::Other => Ok(HeaderTime::Other),
    }
}

/// The column to begin with when none was named: a date before a year, a decimal year before other
/// calendars unless a `month` column stands by, then layers, then ages.
fn find_first(table: &DelimitedTable<'_>, roles: &[Role]) -> Result<usize, FileFault> {
    let has_month = roles.contains(&Role::Month);
    let rank = |column: usize| -> Option<usize> {
        match &roles[column] {
            Role::Calendar(_) => {
                let name = folded(&table.columns[column].name);
                Some(match name.as_str() {
                    "year" | "years" if has_month => 0,
                    "date" => 1,
                    name if name.starts_with("decimal") => 2,
                    "time" => 3,
                    _ => 4,
                })
            }
            Role::Top(_) | Role::Bottom(_) => Some(5),
            Role::Age(_) => Some(6),
            Role::BadTime(_) => Some(7),
            Role::Month | Role::Day | Role::Other => None,
        }
    };
    (0..roles.len())
        .filter_map(|column| rank(column).map(|rank| (rank, column)))
        .min()
        .map(|(_, column)| column)
        .ok_or_else(|| {
            let list = quoted_names(table.columns.iter().map(|column| column.header.as_str()));
            let spaced = table.columns.len() == 1 && table.columns[0].header.contains(char::is_whitespace);
            let help = if spaced {
                "columns are separated by commas, semicolons or tabs, not by spaces"
            } else {
                UNDERSTOOD_TIMES
            };
            FileFault::new("file-no-time-column", format!("no column tells the time; the columns are {list}"))
                .help(help)
        })
}

/// The time columns that belong with `column`.
fn around(table: &DelimitedTable<'_>, roles: &[Role], column: usize) -> Result<TimeColumns, FileFault> {
    let position = |wanted: fn(&Role) -> bool| roles.iter().position(wanted);
    let header = &table.columns[column].header;
    match &roles[column] {
        Role::Calendar(ReadEra::CommonEra)
            if matches!(folded(&table.columns[column].name).as_str(), "year" | "years") =>
        {
            match position(|role| *role == Role::Month) {
                Some(month) => {
                    Ok(TimeColumns::Parts { year: column, month, day: position(|role| *role == Role::Day) })
                }
                None => Ok(TimeColumns::Calendar { column, era: ReadEra::CommonEra }),
            }
        }
        Role::Calendar(era) => Ok(TimeColumns::Calendar { column, era: *era }),
        Role::Age(scale) => Ok(TimeColumns::Ages { column, scale: *scale }),
        Role::Top(_) | Role::Bottom(_) => {
            let top = position(|role| matches!(role, Role::Top(_)));
            let bottom = position(|role| matches!(role, Role::Bottom(_)));
            let (Some(top), Some(bottom)) = (top, bottom) else {
                return Err(FileFault::new("file-age-layers", format!("`{header}` has no partner"))
                    .help("layers need both `age_top` and `age_bottom`"));
            };
            match (&roles[top], &roles[bottom]) {
                (Role::Top(Some(upper)), Role::Bottom(Some(lower))) if upper == lower => {
                    Ok(TimeColumns::Layers { top, bottom, scale: *upper })
                }
                (Role::Top(Some(_)), Role::Bottom(Some(_))) => Err(FileFault::new(
                    "file-age-layers",
                    format!(
                        "`{}` and `{}` are in different units",
                        table.columns[top].header, table.columns[bottom].header
                    ),
                )
                .help("write both in the same unit")),
                _ => Err(bad_time(header, &BadTime::NoUnit)),
            }
        }
        Role::BadTime(reason) => Err(bad_time(header, reason)),
        Role::Month | Role::Day | Role::Other => {
            Err(FileFault::new("file-no-time-column", format!("`{header}` tells no time")))
        }
    }
}

fn bad_time(header: &str, reason: &BadTime) -> FileFault {
    match reason {
        BadTime::NoUnit => {
            FileFault::new("file-age-unit", format!("the age column `{header}` does not say its unit"))
                .help(UNDERSTOOD_AGES)
        }
        BadTime::UnknownUnit(unit) => FileFault::new(
            "file-age-unit",
            format!("the unit `{unit}` of the age column `{header}` is not known"),
        )
        .help(UNDERSTOOD_AGES),
        BadTime::PlainBp => FileFault::new(
            "file-age-bp",
            format!(
                "`{header}` counts in BP or radiocarbon years: uncalibrated ages are not calendar years, \
                 and are not read"
            ),
        )
        .help("write `cal BP` if the ages are calibrated, as in `age (cal BP)`"),
        BadTime::NoCalendar => {
            FileFault::new("file-time-unit", format!("the unit of the time column `{header}` is not known"))
                .help(UNDERSTOOD_TIMES)
        }
    }
}

fn role_of(column: &TextColumn) -> Role {
    let name = folded(&column.name);
    let unit = column.unit_text.as_deref().map(folded);
    for (prefixes, is_top) in [(["age_top", "top_age"], true), (["age_bottom", "bottom_age"], false)] {
        let Some(rest) = prefixes.iter().find_map(|prefix| name.strip_prefix(prefix)) else {
            continue;
        };
        let unit = unit.clone().unwrap_or_else(|| rest.trim_start_matches('_').to_owned());
        let scale = match age_unit(&unit) {
            Ok(scale) => Some(scale),
            Err(BadTime::NoUnit) => None,
            Err(reason) => return Role::BadTime(reason),
        };
        return if is_top { Role::Top(scale) } else { Role::Bottom(scale) };
    }
    if name == "age_bp" && unit.is_none() {
        // A customary header for calibrated ages; the axis notes how it was read.
        return Role::Age(AgeScale { era: ReadEra::CalBp, datum_year: 1950, unit_exponent: 0 });
    }
    let is_age = name == "age" || name == "ages" || name.starts_with("age_") || name.ends_with("_age");
    if is_age {
        let suffix = match name.strip_prefix("ages").or(name.strip_prefix("age")) {
            Some(suffix) => suffix.trim_start_matches('_').to_owned(),
            None => String::new(),
        };
        let words = format!("{suffix}_{}", unit.clone().unwrap_or_default());
        // `age_error_ka` or `age_model (1)` is not the age: whatever follows must be a unit.
        return match age_unit(&words) {
            Ok(scale) => Role::Age(scale),
            Err(BadTime::UnknownUnit(_)) if !suffix.is_empty() => Role::Other,
            Err(reason) => Role::BadTime(reason),
        };
    }
    match name.as_str() {
        "year" | "years" | "yr" | "date" | "time" | "decimal_year" | "decimal_date" | "year_decimal"
        | "year_ce" | "year_ad" | "calendar_year" => match unit {
            None => Role::Calendar(ReadEra::CommonEra),
            Some(unit) => match (calendar_unit(&unit), age_unit(&unit)) {
                (Some(era), _) => Role::Calendar(era),
                (None, Ok(scale)) => Role::Age(scale),
                (None, Err(BadTime::PlainBp)) => Role::BadTime(BadTime::PlainBp),
                (None, Err(_)) => Role::BadTime(BadTime::NoCalendar),
            },
        },
        "year_bce" | "year_bc" | "bce" => Role::Calendar(ReadEra::BeforeCommonEra),
        "month" | "mon" => Role::Month,
        "day" => Role::Day,
        // A bare unit of age as a name: `ka`, `Ma`, `cal BP`, `b2k`, `time_ka`.
        other => {
            let unit = other.strip_prefix("time_").unwrap_or(other);
            let is_year = matches!(unit, "a" | "year" | "years" | "yr" | "yrs" | "yr_ago");
            // `MA` is more often a moving average.
            let is_other = unit == "ma" && column.name != "Ma";
            match age_unit(unit) {
                Ok(scale) if !is_year && !is_other => Role::Age(scale),
                Err(BadTime::PlainBp) => Role::BadTime(BadTime::PlainBp),
                Ok(_) | Err(_) => Role::Other,
            }
        }
    }
}

/// Understands what stands in brackets behind a year or a date, folded.
fn calendar_unit(unit: &str) -> Option<ReadEra> {
    match unit {
        "ce" | "ad" | "yr" | "year" | "years" | "year_ce" | "yr_ce" | "years_ce" | "a" | "decimal"
        | "calendar" | "gregorian" | "iso" | "iso_8601" | "utc" | "yyyy" | "yyyy_mm" | "yyyy_mm_dd" => {
            Some(ReadEra::CommonEra)
        }
        "bce" | "bc" => Some(ReadEra::BeforeCommonEra),
        _ => None,
    }
}

/// What a column is that was named as the time, while its name is none of the customary ones:
/// `gas_age_ka`, `composite age (ka)`, `when`.
fn role_when_asked_for(column: &TextColumn) -> Role {
    let name = folded(&column.name);
    let words: Vec<&str> = name.split('_').collect();
    let is_age = words.contains(&"age") || words.contains(&"ages");
    let mut candidates: Vec<String> = column.unit_text.iter().map(|unit| folded(unit)).collect();
    candidates.extend((1..words.len()).map(|start| words[start..].join("_")));
    for unit in candidates {
        match age_unit(&unit) {
            Ok(scale) if is_age || scale.era != ReadEra::CalBp || unit.contains("cal") => {
                return Role::Age(scale);
            }
            Err(BadTime::PlainBp) => return Role::BadTime(BadTime::PlainBp),
            Ok(_) | Err(_) => {}
        }
    }
    match column.unit_text.as_deref().map(folded) {
        _ if is_age => Role::BadTime(BadTime::NoUnit),
        None => Role::Calendar(ReadEra::CommonEra),
        Some(unit) => match calendar_unit(&unit) {
            Some(era) => Role::Calendar(era),
            None => Role::BadTime(BadTime::NoCalendar),
        },
    }
}

/// Lower case, with one underscore for each run of spaces, points, hyphens and underscores.
fn folded(text: &str) -> String {
    let lower = text.to_lowercase();
    let words = lower.split(|c: char| c.is_whitespace() || "_-.".contains(c));
    words.filter(|word| !word.is_empty()).collect::<Vec<_>>().join("_")
}

/// Understands the unit of an age, folded.
fn age_unit(unit: &str) -> Result<AgeScale, BadTime> {
    let words: Vec<&str> = unit.split('_').filter(|word| !word.is_empty()).collect();
    let mut exponent = None;
    let (mut b2k, mut calibrated, mut bp, mut ago) = (false, false, false, false);
    for word in &words {
        match *word {
            "ka" | "kyr" | "kyrs" | "kiloyears" => exponent = Some(3),
            "ma" | "myr" | "myrs" => exponent = Some(6),
            "yr" | "yrs" | "year" | "years" | "a" => exponent = Some(0),
            "b2k" => b2k = true,
            "cal" | "calibrated" => calibrated = true,
            "bp" => bp = true,
            "calbp" => (calibrated, bp) = (true, true),
            "calyr" => (calibrated, exponent) = (true, Some(0)),
            "calka" | "calkyr" => (calibrated, exponent) = (true, Some(3)),
            "14c" | "c14" | "radiocarbon" | "uncal" | "uncalibrated" => {
                return Err(BadTime::PlainBp);
            }
            "ago" | "before" | "1950" => ago = true,
            _ => return Err(BadTime::UnknownUnit(words.join(" "))),
        }
    }
    let scale = |era, datum_year, unit_exponent| Ok(AgeScale { era, datum_year, unit_exponent });
    match (exponent, b2k) {
        (exponent, true) if !bp => scale(ReadEra::B2k, 2000, exponent.unwrap_or(0)),
        // Thousands of years are never counted in radiocarbon years without saying so (common
        // practice).
        (Some(3), false) => scale(ReadEra::Ka, 1950, 3),
        (Some(6), false) => scale(ReadEra::Ma, 1950, 6),
        (exponent, false) if calibrated && (bp || exponent.is_some()) => scale(ReadEra::CalBp, 1950, 0),
        (_, false) if bp => Err(BadTime::PlainBp),
        (Some(0), false) => scale(ReadEra::CalBp, 1950, 0),
        _ if words.is_empty() || ago => Err(BadTime::NoUnit),
        _ => Err(BadTime::UnknownUnit(words.join(" "))),
    }
}
