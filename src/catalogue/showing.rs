//! Tables of results.

use std::sync::Arc;

use super::attribution::contribute;
use super::call::{Call, Stop};
use super::entry::{Body, Entry, Fails, ReadsClock, Room, Shows};
use super::onto::{onto_clock, total};
use crate::base::Fault;
use crate::language::{Parameter, Signature};
use crate::value::{
    Attribution, AxisKind, Cell, Column, Era, Series, Shape, Table, Value, are_dates, date_label,
};

static TABLE: Entry = Entry {
    name: "table",
    room: Room::Showing,
    summary: "The numbers of a result in rows and columns.",
    signature: Signature {
        parameters: &[
            Parameter::required(
                "value",
                &["attribution", "series", "bundle", "model", "quantity", "events"],
                "what to show",
            ),
            Parameter::optional(
                "change",
                &["span"],
                "for an attribution: the later window of the change to explain",
            ),
            Parameter::optional("from", &["span"], "for an attribution: the earlier window"),
        ],
    },
    result: "a table; values of an uncertain series with median and 5–95 % range",
    gaps: "A gap is an empty cell.",
    shows: &[Shows {
        program: "table(series([1, 2] ppm, along: 1850..1851 CE by 1 yr))",
        gives: "2 rows: year CE, value (ppm)",
    }],
    fails: &[
        Fails { program: "table(1850 CE)", code: "wrong-argument", says: "it takes" },
        Fails {
            program: "table(series([1, 2] ppm, along: 1850..1851 CE by 1 yr), change: 1850..1851 CE, from: 1850..1851 CE)",
            code: "wrong-argument",
            says: "attribution",
        },
    ],
    search: &["show", "print", "numbers", "rows"],
    reads_clock: ReadsClock::WithSeries,
    labels: true,
    shape: |call| {
        let windows = call.slot("change").is_some() || call.slot("from").is_some();
        if windows && call.shape("value")? != Shape::Attribution {
            return Err(Fault::new("wrong-argument", "only the table of an attribution takes windows")
                .blame("change")
                .into());
        }
        if call.slot("change").is_some() != call.slot("from").is_some() {
            return Err(Fault::new(
                "missing-argument",
                "a change needs both its windows, `change:` and `from:`",
            )
            .into());
        }
        Ok(Shape::Table)
    },
    body: Body::AcrossMembers(|call| Ok(Value::Table(Arc::new(table(call)?)))),
    ..Entry::PLAIN
};

pub(super) const FAMILY: &[&Entry] = &[&TABLE];

fn table(call: &Call<'_>) -> Result<Table, Stop> {
    let label = call.label("value");
    match call.value("value")?.as_ref() {
        Value::Attribution(attribution) => {
            let mut attribution = Attribution::clone(attribution);
            if let (Some(later), Some(earlier)) = (call.span("change")?, call.span("from")?) {
                contribute(&mut attribution, later, earlier)?;
            }
            Ok(attribution.table())
        }
        Value::Series(series) => series_table(call, series, &label),
        Value::Bundle(bundle) => {
            let sum = total(call.context, bundle)?;
            let mut columns = vec![time_column(&sum)];
            let mut values = Vec::new();
            for (label, series) in bundle.leaves() {
                let series = onto_clock(call.context, series, &label)?;
                columns.push(Column::in_unit(&label, &series.measure.unit));
                values.push(numbers(series.values.member(0)));
            }
            columns.push(Column::in_unit("total", &sum.measure.unit));
            values.push(numbers(sum.values.member(0)));
            Ok(Table { title: label.to_string(), rows: time_rows(&sum, &values), columns, notes: Vec::new() })
        }
        Value::Model(model) => Ok(model.table(&[])),
        Value::Events(events) => Ok(events.table()),
        Value::Quantity(quantity) => {
            let mut columns = vec![Column::in_unit("value", &quantity.measure.unit)];
            let mut row = vec![Cell::number(quantity.first())];
            if let Some(spread) =
                call.slot("value").map(|slot| call.context.spread(slot)).transpose()?.flatten()
            {
                for (name, values) in
                    [("median", &spread.median), ("low", &spread.low), ("high", &spread.high)]
                {
                    columns.push(Column::in_unit(name, &quantity.measure.unit));
                    row.push(Cell::number(values.first().copied().unwrap_or(f64::NAN)));
                }
            }
            Ok(Table { title: label.to_string(), columns, rows: vec![row], notes: Vec::new() })
        }
        other => Err(Fault::new("wrong-argument", format!("found {}", other.shape().describe()))
            .blame("value")
            .into()),
    }
}

fn time_column(series: &Series) -> Column {
    if series.axis.era.is_age() {
        Column::in_unit("age", series.axis.era.symbol())
    } else if has_dates(series) {
        Column::plain("date")
    } else {
        Column::plain("year CE")
    }
}

/// Whether the times of a series are days of the calendar.
fn has_dates(series: &Series) -> bool {
    series.axis.era == Era::Ce && are_dates(series.axis.starts())
}

/// Calendar steps are named by the year they begin in, as they were written, or by their date; ages by their number.
/// They show as many decimals as tell them exactly, three at most.
fn time_rows(series: &Series, values: &[Vec<Cell>]) -> Vec<Vec<Cell>> {
    let axis = &series.axis;
    let named = |start: &f64| if axis.era.is_age() { axis.era.of_year(*start) } else { *start };
    let exact = |decimals: &i32| {
        let scale = 10f64.powi(*decimals);
        axis.starts().iter().all(|start| (named(start) * scale - (named(start) * scale).round()).abs() < 1e-4)
    };
    let decimals = (0..3).find(exact).unwrap_or(3);
    let dates = has_dates(series);
    let time = |start: &f64| {
        if dates { Cell::Text(date_label(*start).into()) } else { Cell::Rounded(named(start), decimals) }
    };
    axis.starts()
        .iter()
        .enumerate()
        .map(|(row, start)| {
            let numbers = values.iter().map(|column| column.get(row).cloned().unwrap_or(Cell::Empty));
            std::iter::once(time(start)).chain(numbers).collect()
        })
        .collect()
}

fn numbers(values: &[f64]) -> Vec<Cell> {
    values.iter().map(|value| Cell::number(*value)).collect()
}

fn series_table(call: &Call<'_>, series: &Series, label: &str) -> Result<Table, Stop> {
    let unit = &series.measure.unit;
    let mut columns = vec![time_column(series), Column::in_unit("value", unit)];
    let mut values = vec![numbers(series.values.member(0))];
    let mut notes = Vec::new();
    if let Some(spread) = call.slot("value").map(|slot| call.context.spread(slot)).transpose()?.flatten() {
        let half: Vec<f64> =
            spread.low.iter().zip(&spread.high).map(|(low, high)| 0.5 * (high - low)).collect();
        let to_spread = |column: &[f64]| -> Vec<Cell> {
            column.iter().zip(&half).map(|(value, half)| Cell::to_uncertainty(*value, *half)).collect()
        };
        values = vec![to_spread(series.values.member(0))];
        for (name, column) in [("median", &spread.median), ("low", &spread.low), ("high", &spread.high)] {
            columns.push(Column::in_unit(name, unit));
            values.push(to_spread(column));
        }
        notes.push(format!("low and high are the 5–95 % range of {} members", spread.members));
    }
    if series.axis.kind == AxisKind::Steps {
        notes.push("each row is the mean over the step that begins there".to_owned());
    }
    Ok(Table { title: label.to_owned(), rows: time_rows(series, &values), columns, notes })
}
