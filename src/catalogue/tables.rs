//! Tables from files, and events from tables.

use std::sync::Arc;

use super::call::{Call, Stop, wrong_kind};
use super::entry::{Body, Entry, Fails, Room, Shows};
use super::onto::counted;
use super::reading::{era_of, given_unit, placed_in_file};
use crate::base::Fault;
use crate::files::{self, EventColumns, NumberOptions, ReadCells, TimeCell, TimeRole};
use crate::language::{Choice, Parameter, Signature};
use crate::value::{Cell, Column, Events, Sizes, Table, Unit, Value};

static LOAD_TABLE: Entry = Entry {
    name: "load_table",
    room: Room::Reading,
    summary: "A table from a CSV file, all columns as they are.",
    signature: Signature {
        parameters: &[
            Parameter::required("file", &["text"], "the file, in the notebook's folder or below"),
            Parameter::optional(
                "missing",
                &["text"],
                "what stands in the file for a missing value, such as \"-999\"",
            ),
            Parameter::choice(
                "decimals",
                &[
                    Choice::plain("point", "3.14"),
                    Choice::plain("comma", "3,14, with columns apart by `;` or tabs"),
                ],
                "point",
                "the decimal mark of the file",
            ),
        ],
    },
    result: "a table; a column is numbers where all its cells are numbers or gaps, else words; units come from `name (unit)`",
    gaps: "Empty cells, NaN and infinities are gaps and are counted in a note; what makes a column of numbers one of words is noted with line and column.",
    shows: &[Shows {
        program: "load_table(\"outbursts.csv\")",
        gives: "4 rows: year, month, name, sulfate (Tg)",
    }],
    fails: &[
        Fails { program: "load_table(\"outburst.csv\")", code: "file-missing", says: "outburst.csv" },
        Fails { program: "load_table(\"../outbursts.csv\")", code: "file-outside", says: "folder" },
    ],
    search: &["read", "open", "csv", "columns", "spreadsheet", "list of eruptions"],
    reads_file: Some("file"),
    body: Body::PerMember(load_table),
    ..Entry::PLAIN
};

fn load_table(call: &Call<'_>) -> Result<Value, Stop> {
    let path = call.text("file")?.unwrap_or_default();
    let file = call.context.file(&path).map_err(|fault| fault.blame("file"))?;
    let options = NumberOptions {
        missing: call.text("missing")?.into_iter().map(|text| text.to_string()).collect(),
        decimal_comma: call.choice("decimals").is_some_and(|(word, _)| word == "comma"),
    };
    let read = files::read_whole_table(&file.bytes, &options, call.context.cancellation())
        .map_err(|fault| placed_in_file(&path, fault))?;
    for note in read.notes {
        call.context.note(format!("{path}: {note}"));
    }
    let row_count = read.columns.first().map_or(0, |column| match &column.cells {
        ReadCells::Numbers(numbers) => numbers.len(),
        ReadCells::Words(words) => words.len(),
    });
    let mut rows = vec![Vec::with_capacity(read.columns.len()); row_count];
    for column in &read.columns {
        let cells: Vec<Cell> = match &column.cells {
            ReadCells::Numbers(numbers) => numbers.iter().map(|number| Cell::number(*number)).collect(),
            ReadCells::Words(words) => words
                .iter()
                .map(|word| if word.is_empty() { Cell::Empty } else { Cell::Text(word.as_str().into()) })
                .collect(),
        };
        for (row, cell) in rows.iter_mut().zip(cells) {
            row.push(cell);
        }
    }
    // A unit that is none of ours (the `ka` of an age, a unit unknown here) stays as the file words it.
    let unit =
        |text: &String| Unit::parse_header(text).map_or_else(|_| text.clone(), |unit| unit.to_string());
    let columns = read
        .columns
        .iter()
        .map(|column| Column { name: column.name.clone(), unit: column.unit_text.as_ref().map(unit) })
        .collect();
    Ok(Value::Table(Arc::new(Table { title: path.to_string(), columns, rows, notes: Vec::new() })))
}

static EVENTS: Entry = Entry {
    name: "events",
    room: Room::Reading,
    summary: "Events from the rows of a table: when, and where the table says it, what they are called and how large they were.",
    signature: Signature {
        parameters: &[
            Parameter::required("table", &["table"], "a table with a row for each event"),
            Parameter::optional(
                "time",
                &["text"],
                "the column of times; by default the first that is named as one, such as `year`, `date`, `age (ka)`",
            ),
            Parameter::optional("name", &["text"], "the column of names"),
            Parameter::optional("size", &["text"], "the column of sizes"),
            Parameter::optional(
                "unit",
                &["text"],
                "the unit of the sizes, where the table does not say it or says it otherwise",
            ),
        ],
    },
    result: "events in order of time; a year without a month is taken at its middle, columns `month` and `day` beside it are used",
    gaps: "An event may lack name or size, but not its time.",
    shows: &[
        Shows {
            program: "outbursts = load_table(\"outbursts.csv\")\nevents(outbursts, time: \"year\", name: \"name\", size: \"sulfate\")",
            gives: "4 events, 1257.5 CE to 1963.208 CE; sulfate 3.5 to 60 Tg",
        },
        Shows {
            program: "load_table(\"outbursts.csv\") |> events()",
            gives: "4 events, 1257.5 CE to 1963.208 CE",
        },
    ],
    fails: &[
        Fails {
            program: "load_table(\"outbursts.csv\") |> events(size: \"sulphate\")",
            code: "no-such-column",
            says: "`sulphate`",
        },
        Fails {
            program: "load_table(\"outbursts.csv\") |> events(size: \"name\")",
            code: "not-a-number",
            says: "row 1 holds `Kaltenberg`",
        },
    ],
    search: &["eruptions", "list", "dates", "epochs", "key dates"],
    body: Body::PerMember(events),
    ..Entry::PLAIN
};

pub(super) const FAMILY: &[&Entry] = &[&LOAD_TABLE, &EVENTS];

fn events(call: &Call<'_>) -> Result<Value, Stop> {
    let value = call.value("table")?;
    let Value::Table(table) = value.as_ref() else { return Err(wrong_kind("table", &value).into()) };
    let label = call.label("table");
    let asked = |parameter: &'static str| -> Result<Option<usize>, Stop> {
        match call.text(parameter)? {
            Some(name) => Ok(Some(column_named(table, &name).map_err(|fault| fault.blame(parameter))?)),
            None => Ok(None),
        }
    };
    let (time, name, size) = (asked("time")?, asked("name")?, asked("size")?);
    let time = match time {
        Some(column) => column,
        None => first_of_role(table, TimeRole::Time).ok_or_else(|| no_time_column(table))?,
    };
    let times = times(table, time).map_err(|fault| {
        let mut placed = Fault::new(fault.code, format!("{label}: {}", fault.message)).blame("table");
        placed.help = fault.help;
        placed
    })?;
    let mut order: Vec<usize> = (0..times.years.len()).collect();
    order.sort_by(|left, right| f64::total_cmp(&at(&times.years, *left), &at(&times.years, *right)));
    let moved = order.iter().enumerate().filter(|(place, row)| place != *row).count();
    let names = name.map(|column| order.iter().map(|row| word(table, *row, column)).collect());
    let sizes = size.map(|column| sizes(call, table, column, &order)).transpose()?;
    let unnamed = call.slot("unit").is_some() && sizes.is_none();
    if unnamed {
        return Err(Fault::new("missing-argument", "a unit is given, but no column of sizes")
            .blame("unit")
            .help("name the column, as in `size: \"sulfate\"`")
            .into());
    }
    for note in &times.notes {
        call.context.note(format!("{label}: {note}"));
    }
    if moved > 0 {
        call.context.note(format!("{label}: {} put into the order of time", counted(moved, "rows")));
    }
    let events = Events {
        years: order.iter().map(|row| at(&times.years, *row)).collect(),
        era: era_of(times.era),
        names,
        sizes,
    };
    Ok(Value::Events(Arc::new(events)))
}

fn at(years: &[f64], row: usize) -> f64 {
    years.get(row).copied().unwrap_or(f64::NAN)
}

fn cell(table: &Table, row: usize, column: usize) -> &Cell {
    table.rows.get(row).and_then(|row| row.get(column)).unwrap_or(&Cell::Empty)
}

/// A name; a number is one too where a table names its events by numbers.
fn word(table: &Table, row: usize, column: usize) -> Arc<str> {
    match cell(table, row, column) {
        Cell::Text(text) => text.clone(),
        Cell::Number(number) | Cell::Rounded(number, _) => format!("{number}").into(),
        Cell::Empty => Arc::from(""),
    }
}

fn column_named(table: &Table, wanted: &str) -> Result<usize, Fault> {
    let wanted = wanted.trim();
    let heading = |column: &Column| match &column.unit {
        Some(unit) => format!("{} ({unit})", column.name),
        None => column.name.clone(),
    };
    let found = table.columns.iter().position(|column| column.name == wanted || heading(column) == wanted);
    found.ok_or_else(|| {
        let names: Vec<&str> = table.columns.iter().map(|column| column.name.as_str()).collect();
        let fault = Fault::new("no-such-column", format!("the table has no column `{wanted}`"))
            .detail(format!("its columns are {}", names.join(", ")));
        match super::nearest(wanted, names.iter().copied()) {
            Some(near) => fault.help(format!("did you mean \"{near}\"?")),
            None => fault,
        }
    })
}

fn first_of_role(table: &Table, role: TimeRole) -> Option<usize> {
    table.columns.iter().position(|column| files::time_role(&column.name, column.unit.as_deref()) == role)
}

fn no_time_column(table: &Table) -> Fault {
    let names: Vec<&str> = table.columns.iter().map(|column| column.name.as_str()).collect();
    Fault::new("no-time-column", "no column of the table tells a time by its name")
        .detail(format!("its columns are {}", names.join(", ")))
        .blame("table")
        .help("say which one does, as in `time: \"year\"`")
}

fn times(table: &Table, time: usize) -> Result<files::EventTimes, files::FileFault> {
    let cells = |column: usize| -> Vec<TimeCell<'_>> {
        (0..table.rows.len())
            .map(|row| match cell(table, row, column) {
                Cell::Number(number) | Cell::Rounded(number, _) => TimeCell::Number(*number),
                Cell::Text(text) => TimeCell::Words(text),
                Cell::Empty => TimeCell::Missing,
            })
            .collect()
    };
    let head = table.columns.get(time);
    files::event_times(&EventColumns {
        name: head.map_or("", |column| &column.name),
        unit_text: head.and_then(|column| column.unit.as_deref()),
        times: cells(time),
        months: first_of_role(table, TimeRole::Month).map(&cells),
        days: first_of_role(table, TimeRole::Day).map(&cells),
    })
}

fn sizes(call: &Call<'_>, table: &Table, column: usize, order: &[usize]) -> Result<Sizes, Stop> {
    let Some(head) = table.columns.get(column) else {
        return Err(Fault::new("internal", "no column").into());
    };
    let unit = match (given_unit(call)?, &head.unit) {
        (Some(unit), _) => unit,
        (None, None) => Unit::number(),
        (None, Some(text)) => Unit::parse_header(text).map_err(|_| {
            Fault::new(
                "unknown-unit",
                format!("`{}` is in \"{text}\", which is no unit known here", head.name),
            )
            .blame("size")
            .help("say the unit, as in `unit: \"Tg\"`")
        })?,
    };
    let number = |row: &usize| match cell(table, *row, column) {
        Cell::Number(number) | Cell::Rounded(number, _) => Ok(*number),
        Cell::Empty => Ok(f64::NAN),
        Cell::Text(text) => Err(Fault::new(
            "not-a-number",
            format!("`{}` is no column of sizes: row {} holds `{text}`", head.name, row + 1),
        )
        .blame("size")),
    };
    // The first row to blame is the first of the table, whatever the order of time.
    for row in 0..table.rows.len() {
        number(&row)?;
    }
    let values = order.iter().map(number).collect::<Result<_, Fault>>()?;
    Ok(Sizes { name: head.name.as_str().into(), measure: super::reading::loaded_measure(unit), values })
}
