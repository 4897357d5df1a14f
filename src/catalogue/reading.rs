//! Reading data, and series made from lists or formulas.

use std::sync::Arc;

use super::call::{Call, Path, Stop, wrong_kind};
use super::entry::{Body, Entry, Fails, Room, Shows};
use super::onto::counted;
use super::time::clock_argument;
use crate::base::{Cancelled, Fault};
use crate::files::{self, AxisForm, FileFault, ReadEra, SeriesOptions};
use crate::language::{Choice, Parameter, Signature};
use crate::science::reduce;
use crate::value::{
    Axis, Block, Dimension, Era, Forcing, ForcingKind, Measure, Quantity, Reading, Series, Shape, Standing,
    Unit, Value,
};

static LOAD: Entry = Entry {
    name: "load",
    room: Room::Reading,
    summary: "A series from a CSV file: a column of times and a column of values.",
    signature: Signature {
        parameters: &[
            Parameter::required("file", &["text"], "the file, in the notebook's folder or below"),
            Parameter::optional("time", &["text"], "the name of the time column, where it is not plain"),
            Parameter::optional("value", &["text"], "the name of the value column, where there are several"),
            Parameter::optional("members", &["text"], "the columns that are members of an ensemble, such as \"m*\""),
            Parameter::optional("unit", &["text"], "the unit of the values, where the file does not say it or says it otherwise"),
            Parameter::optional("as", &[], "whether values are means over steps or hold at instants, where the file leaves it open")
                .or_choices(&[
                    Choice::plain("steps", "each value is the mean over a step"),
                    Choice::plain("instants", "each value holds at a point in time"),
                ]),
            Parameter::optional("missing", &["text"], "what stands in the file for a missing value, such as \"-999\""),
            Parameter::choice(
                "decimals",
                &[Choice::plain("point", "3.14"), Choice::plain("comma", "3,14, with columns apart by `;` or tabs")],
                "point",
                "the decimal mark of the file",
            ),
            Parameter::optional("longest_gap", &["duration"], "the longest gap to bridge when it is brought onto a clock; three of its own median steps by default")
                .in_unit("yr"),
        ],
    },
    result: "a series on the file's own axis, in the file's unit; a row a year with a column for each month is read as months",
    gaps: "Empty cells, NaN and infinities are gaps and are counted in a note; other oddities are errors with line and column.",
    shows: &[
        Shows { program: "load(\"spots.csv\")", gives: "6 steps, 1850 CE to 1855 CE: first 66, last 7 spots_v2" },
        Shows {
            program: "load(\"runs.csv\", members: \"m*\")",
            gives: "3 steps, 1850 CE to 1852 CE: first 0.20 [0.10, 0.30], last 0.50 [0.40, 0.60] W/m2",
        },
        Shows {
            program: "load(\"core.csv\", value: \"co2\", unit: \"ppm\")",
            gives: "4 instants, 21 ka to 18 ka: first 190, last 205 ppm",
        },
    ],
    fails: &[
        Fails { program: "load(\"sports.csv\")", code: "file-missing", says: "sports.csv" },
        Fails { program: "load(\"../spots.csv\")", code: "file-outside", says: "folder" },
        Fails { program: "load(\"core.csv\", value: \"ch4\")", code: "file-no-such-column", says: "ch4" },
    ],
    search: &["read", "open", "csv", "file", "data", "import"],
    reads_file: Some("file"),
    ensemble: Some("members"),
    shape: |call| Ok(call.context.own_value()?.shape()),
    body: Body::PerMember(load),
    ..Entry::PLAIN
};

fn load(call: &Call<'_>) -> Result<Value, Stop> {
    let path = call.text("file")?.unwrap_or_default();
    let file = call.context.file(&path).map_err(|fault| fault.blame("file"))?;
    let options = SeriesOptions {
        time: call.text("time")?.map(|text| text.to_string()),
        value: call.text("value")?.map(|text| text.to_string()),
        form: call
            .choice("as")
            .map(|(word, _)| if word == "steps" { AxisForm::Steps } else { AxisForm::Instants }),
        missing: call.text("missing")?.into_iter().map(|text| text.to_string()).collect(),
        decimal_comma: call.choice("decimals").is_some_and(|(word, _)| word == "comma"),
        cancellation: call.context.cancellation().clone(),
    };
    let pattern = call.text("members")?;
    let read = match &pattern {
        None => files::read_series(&file.bytes, &options).map(Columns::of_series),
        Some(pattern) => files::read_ensemble(&file.bytes, pattern, &options).map(Columns::of_ensemble),
    }
    .map_err(|fault| placed_in_file(&path, fault))?;
    let unit = file_unit(call, read.unit_text.as_deref(), &path)?;
    let era = era_of(read.era);
    let axis = match read.form {
        AxisForm::Steps => Axis::steps(read.starts, read.ends, era),
        AxisForm::Instants => Axis::instants(read.starts, era),
    };
    for note in read.notes {
        call.context.note(format!("{path}: {note}"));
    }
    let measure = loaded_measure(unit);
    let count = read.values.len();
    let values = ensemble_rows(read.values, call.context.path());
    if pattern.is_some() && call.context.path() == Path::Nominal {
        call.context.note(format!(
            "{path}: an ensemble of {}; its mean is the nominal value, and drawn members take them in turn",
            counted(count, "members")
        ));
    }
    let mut series = Series::new(axis.into(), values, measure, Standing::Own);
    if call.slot("longest_gap").is_some() {
        series.longest_gap_years = call.certain("longest_gap")?;
    }
    Ok(Value::Series(series))
}

/// The era in which times are shown that a file counts so.
pub(super) fn era_of(era: ReadEra) -> Era {
    match era {
        ReadEra::CommonEra => Era::Ce,
        ReadEra::BeforeCommonEra => Era::Bce,
        ReadEra::Ka => Era::Ka,
        ReadEra::Ma => Era::Ma,
        ReadEra::CalBp => Era::CalBp,
        ReadEra::B2k => Era::B2k,
    }
}

/// What a file gave, one member or several.
struct Columns {
    form: AxisForm,
    starts: Vec<f64>,
    ends: Vec<f64>,
    values: Vec<Vec<f64>>,
    unit_text: Option<String>,
    era: ReadEra,
    notes: Vec<String>,
}

impl Columns {
    fn of_series(read: files::ReadSeries) -> Self {
        let files::ReadSeries { form, starts, ends, values, unit_text, era, notes, .. } = read;
        Self { form, starts, ends, values: vec![values], unit_text, era, notes }
    }

    fn of_ensemble(read: files::ReadEnsemble) -> Self {
        let files::ReadEnsemble { form, starts, ends, values, unit_text, era, notes, .. } = read;
        Self { form, starts, ends, values, unit_text, era, notes }
    }
}

/// The mean of the members on the nominal path; in a block, member `i` of the session takes the file's member
/// `i` modulo their number, so that two ensembles of one source stay paired.
fn ensemble_rows(mut members: Vec<Vec<f64>>, path: Path) -> Block {
    let columns = members.first().map_or(0, Vec::len);
    if members.len() == 1 {
        return Block::row(members.pop().unwrap_or_default());
    }
    match path {
        Path::Nominal => {
            let mut column = Vec::with_capacity(members.len());
            let mean = |index: usize| {
                column.clear();
                column.extend(members.iter().filter_map(|member| member.get(index)));
                reduce::mean(&column)
            };
            Block::row((0..columns).map(mean).collect())
        }
        Path::Block { first, count } => {
            let number = members.len() as u64;
            let rows = (0..count as u64).filter_map(|row| members.get(((first + row) % number) as usize));
            Block::new(count, columns, rows.flatten().copied().collect())
        }
    }
}

pub(super) fn placed_in_file(path: &str, fault: FileFault) -> Fault {
    if fault.is_interruption() {
        return Cancelled.into();
    }
    let place = fault.place.as_ref().map(|place| format!(", {place}")).unwrap_or_default();
    let mut placed = Fault::new(fault.code, format!("{path}{place}: {}", fault.message)).blame("file");
    placed.help = fault.help;
    placed
}

/// The unit that the call says, if it does.
pub(super) fn given_unit(call: &Call<'_>) -> Result<Option<Unit>, Stop> {
    let Some(text) = call.text("unit")? else { return Ok(None) };
    let unit = Unit::parse(&text).map_err(|fault| {
        let near = fault.near.map(|near| format!("did you mean `{near}`?"));
        let fault = Fault::new("unknown-unit", format!("`{}` is no unit", fault.word)).blame("unit");
        match near {
            Some(near) => fault.help(near),
            None => {
                fault.help("units are written such as \"W/m2\", \"ppm\", \"degC\"; \"1\" is a plain number")
            }
        }
    })?;
    Ok(Some(unit))
}

/// The unit that the call says, else the one that the file says, else none, with a note.
fn file_unit(call: &Call<'_>, in_file: Option<&str>, path: &str) -> Result<Unit, Stop> {
    if let Some(unit) = given_unit(call)? {
        if let Some(other) =
            in_file.and_then(|text| Unit::parse_header(text).ok()).filter(|other| *other != unit)
        {
            call.context.note(format!("{path}: the file says {other}; read as {unit}, as told"));
        }
        return Ok(unit);
    }
    match in_file {
        None => {
            call.context
                .note(format!("{path}: no unit is given, so its values are plain numbers; `unit:` says it"));
            Ok(Unit::number())
        }
        Some(text) => Unit::parse_header(text).map_err(|_| {
            Fault::new(
                "unknown-unit",
                format!("{path} gives its unit as \"{text}\", which is no unit known here"),
            )
            .blame("file")
            .help("say the unit: `load(…, unit: \"W/m2\")`")
            .into()
        }),
    }
}

/// What a loaded or hand-made number measures: nobody has said whether a temperature is absolute, or of which
/// kind a forcing is.
pub(super) fn loaded_measure(unit: Unit) -> Measure {
    let reading =
        if unit.dimension() == Dimension::TEMPERATURE { Reading::Undeclared } else { Reading::Difference };
    Measure { reading, ..made_measure(unit) }
}

pub(super) fn made_measure(unit: Unit) -> Measure {
    let forcing =
        (unit.to_string() == "W/m2").then_some(Forcing { kind: ForcingKind::Undeclared, reference: None });
    Measure { forcing, ..Measure::of(unit) }
}

static SERIES: Entry = Entry {
    name: "series",
    room: Room::Reading,
    summary: "A series from a list of values.",
    signature: Signature {
        parameters: &[
            Parameter::required("values", &["list"], "the values, all in one unit; each may carry its own ±"),
            Parameter::optional(
                "along",
                &["clock"],
                "the clock they stand on, as many steps as there are values",
            ),
            Parameter::optional("at", &["list"], "the instants they stand at, instead of `along`"),
        ],
    },
    result: "a series on an axis of its own, in the unit of the values",
    gaps: "A list has none; leave the instant out.",
    shows: &[
        Shows {
            program: "series([280, 285 ± 1, 290] ppm, along: 1850..1852 CE by 1 yr)",
            gives: "3 steps, 1850 CE to 1852 CE: first 280, last 290 ppm",
        },
        Shows {
            program: "series([190, 265] ppm, at: [21 ka, 11 ka])",
            gives: "2 instants, 21 ka to 11 ka: first 190, last 265 ppm",
        },
    ],
    fails: &[
        Fails {
            program: "series([1, 2, 3] ppm, along: 1850..1851 CE by 1 yr)",
            code: "length-mismatch",
            says: "3 values",
        },
        Fails {
            program: "series([1 ppm, 2 degC], at: [1 ka, 2 ka])",
            code: "unit-mismatch",
            says: "measure different",
        },
        Fails { program: "series([1, 2] ppm)", code: "missing-argument", says: "along" },
    ],
    search: &["list", "vector", "by hand"],
    shape: |call| {
        let Shape::List(items) = call.shape("values")? else {
            return Err(Fault::new("wrong-argument", "the values are no list").blame("values").into());
        };
        let mut unit: Option<Unit> = None;
        for item in &items {
            let Shape::Quantity(measure) = item else {
                return Err(Fault::new(
                    "wrong-argument",
                    format!("{} stands in the list of values", item.describe()),
                )
                .blame("values")
                .into());
            };
            match &unit {
                None => unit = Some(measure.unit.clone()),
                Some(unit) => {
                    measure.unit.factor_to(unit).map_err(|fault| fault.blame("values"))?;
                }
            }
        }
        if call.slot("along").is_some() == call.slot("at").is_some() {
            return Err(Fault::new(
                "missing-argument",
                "say where the values stand: either `along:` a clock or `at:` a list of instants",
            )
            .help("for instance `series([1, 2] ppm, along: 1850..1851 CE by 1 yr)`")
            .into());
        }
        let unit =
            unit.ok_or_else(|| Fault::new("wrong-argument", "the list of values is empty").blame("values"))?;
        Ok(Shape::Series(made_measure(unit)))
    },
    body: Body::PerMember(series),
    ..Entry::PLAIN
};

fn series(call: &Call<'_>) -> Result<Value, Stop> {
    let values = call.value("values")?;
    let Value::List(items) = values.as_ref() else { return Err(wrong_kind("values", &values).into()) };
    let quantities: Vec<&Quantity> = items
        .iter()
        .filter_map(|item| if let Value::Quantity(quantity) = item.as_ref() { Some(quantity) } else { None })
        .collect();
    let unit = quantities.first().map_or_else(Unit::number, |first| first.measure.unit.clone());
    let rows = quantities.iter().map(|quantity| quantity.values.rows()).max().unwrap_or(1);
    let mut order: Vec<usize> = (0..quantities.len()).collect();
    let axis = if call.slot("along").is_some() {
        clock_argument(call, "along")?.axis.clone()
    } else {
        let times = instants(call)?;
        order.sort_by(|left, right| f64::total_cmp(&years(&times, *left), &years(&times, *right)));
        let sorted: Vec<f64> = order.iter().map(|index| years(&times, *index)).collect();
        if sorted.iter().zip(sorted.iter().skip(1)).any(|(before, after)| before >= after) {
            return Err(Fault::new("two-values-at-once", "the same instant stands twice in `at`")
                .blame("at")
                .into());
        }
        let era = times.first().map_or(Era::Ce, |(_, era)| *era);
        if times.len() != quantities.len() {
            return Err(lengths(quantities.len(), counted(times.len(), "instants"), "at").into());
        }
        Arc::new(Axis::instants(sorted, era))
    };
    if axis.len() != quantities.len() {
        return Err(lengths(quantities.len(), counted(axis.len(), axis.kind.word()), "along").into());
    }
    let mut data = Vec::with_capacity(rows * axis.len());
    for member in 0..rows {
        for index in &order {
            let Some(quantity) = quantities.get(*index) else { continue };
            data.push(quantity.values.scalar(member) * quantity.measure.unit.factor_to(&unit)?);
        }
    }
    let values = Block::new(rows, axis.len(), data);
    Ok(Value::Series(Series::new(axis, values, made_measure(unit), Standing::Own)))
}

fn lengths(values: usize, places: String, parameter: &'static str) -> Fault {
    Fault::new("length-mismatch", format!("there are {} for {places}", counted(values, "values")))
        .blame(parameter)
}

fn years(times: &[(f64, Era)], index: usize) -> f64 {
    times.get(index).map_or(f64::NAN, |(year, _)| *year)
}

fn instants(call: &Call<'_>) -> Result<Vec<(f64, Era)>, Stop> {
    let at = call.value("at")?;
    let Value::List(items) = at.as_ref() else { return Err(wrong_kind("at", &at).into()) };
    items
        .iter()
        .map(|item| match item.as_ref() {
            Value::Instant(instant) if instant.years.rows() == 1 => {
                // A whole calendar year stands at its middle, as in files.
                Ok((instant.year() + 0.5 * instant.width_years, instant.era))
            }
            Value::Instant(_) => {
                Err(Fault::new("must-be-certain", "the instants of a series cannot be uncertain")
                    .blame("at")
                    .into())
            }
            other => Err(Fault::new(
                "wrong-argument",
                format!("{} stands in the list of instants", other.shape().describe()),
            )
            .blame("at")
            .into()),
        })
        .collect()
}

pub(super) const FAMILY: &[&Entry] = &[&LOAD, &SERIES];
