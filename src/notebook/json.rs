use serde_json::{Map, Value as Json, json};

use super::run::Run;
use crate::base::{Diagnostic, LineIndex};
use crate::session::{Output, Session};
use crate::value::{Attribution, Axis, AxisKind, Cell, Events, Shown, ShownSeries, Spread, Table};

/// The outputs of a run as one JSON object, format 1: full-precision numbers, `null` for a gap, and only the keys that
/// a kind has. `cell` counts all cells of the file from 0; what is said of definitions from outside has `null` there.
pub fn run_to_json(session: &Session, run: &Run) -> Json {
    let inputs: Vec<Json> =
        session.inputs().into_iter().map(|(file, sha256)| json!({"file": file, "sha256": sha256})).collect();
    let mut outputs = Vec::new();
    let outside = std::iter::once((None, &run.outside));
    for (cell, reply) in outside.chain(run.cells.iter().map(|(cell, reply)| (Some(cell.index), reply))) {
        for problem in reply.problems.iter().chain(&reply.waiting) {
            outputs.push(json!({"cell": cell, "kind": "error", "error": error(session, run, problem)}));
        }
        for notice in &reply.notices {
            outputs.push(json!({"cell": cell, "kind": "text", "text": notice}));
        }
        outputs.extend(reply.outputs.iter().map(|output| self::output(session, run, output, cell)));
    }
    json!({"format": 1, "inputs": inputs, "outputs": outputs})
}

fn output(session: &Session, run: &Run, output: &Output, cell: Option<usize>) -> Json {
    let mut object = Map::new();
    object.insert("cell".to_owned(), json!(cell));
    object.insert("expression".to_owned(), json!(output.expression));
    if !output.refreshed_by.is_empty() {
        object.insert("refreshed_by".to_owned(), json!(output.refreshed_by));
    }
    match &output.result {
        Err(problem) => {
            object.insert("kind".to_owned(), json!("error"));
            object.insert("fingerprint".to_owned(), json!(output.fingerprint.to_string()));
            object.insert("error".to_owned(), error(session, run, problem));
        }
        Ok(shown) => {
            let mut rest = self::shown(shown);
            object.insert("kind".to_owned(), json!(shown.kind()));
            object.insert("fingerprint".to_owned(), json!(output.fingerprint.to_string()));
            if let Some(unit) = rest.shift_remove("unit") {
                object.insert("unit".to_owned(), unit);
            }
            object.insert(
                "notes".to_owned(),
                json!(output.notes.iter().map(|note| &**note).collect::<Vec<_>>()),
            );
            object.append(&mut rest);
        }
    }
    Json::Object(object)
}

/// A mistake with the cell, line and column where it stands, which may be another cell than the one that shows it.
fn error(session: &Session, run: &Run, problem: &Diagnostic) -> Json {
    let span = problem.primary.span;
    let mut object = Map::new();
    object.insert("code".to_owned(), json!(problem.code));
    object.insert("message".to_owned(), json!(problem.message));
    if let Some(help) = &problem.help {
        object.insert("help".to_owned(), json!(help));
    }
    object.insert("cell".to_owned(), json!(run.index_of(session, problem)));
    if let Some(source) = session.source(span.source) {
        let position = LineIndex::new(&source.text).position(span.start);
        object.insert("line".to_owned(), json!(position.line));
        object.insert("column".to_owned(), json!(position.column));
    }
    Json::Object(object)
}

/// A finite number, or null for a gap.
fn number(value: f64) -> Json {
    if value.is_finite() { json!(value) } else { Json::Null }
}

fn numbers(values: &[f64]) -> Json {
    Json::Array(values.iter().map(|value| number(*value)).collect())
}

fn object(keys: Vec<(&str, Json)>) -> Map<String, Json> {
    keys.into_iter().map(|(key, value)| (key.to_owned(), value)).collect()
}

fn shown(shown: &Shown) -> Map<String, Json> {
    match shown {
        Shown::Quantity { measure, nominal, spread } => {
            scalar(*nominal, spread.as_deref(), vec![("unit", json!(measure.unit.to_string()))])
        }
        Shown::Instant { nominal, spread, .. } => {
            scalar(*nominal, spread.as_deref(), vec![("unit", json!("year CE"))])
        }
        Shown::Series(series) => self::series(series),
        Shown::Bundle { components, total } => {
            let parts: Map<String, Json> = components
                .iter()
                .map(|(label, part)| (label.to_string(), Json::Object(self::series(part))))
                .collect();
            let mut keys = object(vec![("unit", json!(total.measure.unit.to_string()))]);
            keys.insert("components".to_owned(), Json::Object(parts));
            keys.insert("total".to_owned(), Json::Object(self::series(total)));
            keys
        }
        Shown::Span(span) => object(vec![(
            "time",
            json!({"axis": "year CE", "kind": "steps", "values": [span.start], "ends": [span.end]}),
        )]),
        Shown::Range(range) => object(vec![
            ("unit", json!(range.unit.to_string())),
            ("low", number(range.low)),
            ("high", number(range.high)),
        ]),
        Shown::Clock(clock) => object(vec![("time", time(&clock.axis))]),
        Shown::Model(model, spreads) => object(vec![("table", self::table(&model.table(spreads)))]),
        Shown::Attribution(attribution) => self::attribution(attribution),
        Shown::Events(events) => self::events(events),
        Shown::Table(content) => object(vec![("table", self::table(content))]),
        Shown::Text(text) => object(vec![("text", json!(&**text))]),
        Shown::List(items) => {
            let items = items
                .iter()
                .map(|(label, item)| {
                    let mut keys = object(vec![("label", json!(&**label)), ("kind", json!(item.kind()))]);
                    if label.is_empty() {
                        keys.shift_remove("label");
                    }
                    keys.append(&mut self::shown(item));
                    Json::Object(keys)
                })
                .collect();
            object(vec![("items", Json::Array(items))])
        }
    }
}

fn scalar(nominal: f64, spread: Option<&Spread>, keys: Vec<(&str, Json)>) -> Map<String, Json> {
    let mut keys = object(keys);
    keys.insert("nominal".to_owned(), number(nominal));
    if let Some(spread) = spread {
        for (key, values) in [("median", &spread.median), ("low", &spread.low), ("high", &spread.high)] {
            keys.insert(key.to_owned(), values.first().map_or(Json::Null, |value| number(*value)));
        }
    }
    keys
}

fn series(series: &ShownSeries) -> Map<String, Json> {
    let mut keys = object(vec![
        ("unit", json!(series.measure.unit.to_string())),
        ("time", time(&series.axis)),
        ("nominal", numbers(&series.nominal)),
    ]);
    if let Some(spread) = &series.spread {
        for (key, values) in [("median", &spread.median), ("low", &spread.low), ("high", &spread.high)] {
            keys.insert(key.to_owned(), numbers(values));
        }
    }
    keys
}

/// Ages too are years CE; a step by its start and end.
fn time(axis: &Axis) -> Json {
    let mut keys = object(vec![
        ("axis", json!("year CE")),
        ("kind", json!(axis.kind.word())),
        ("values", numbers(axis.starts())),
    ]);
    if axis.kind == AxisKind::Steps {
        keys.insert("ends".to_owned(), numbers(axis.ends()));
    }
    Json::Object(keys)
}

/// The times, and names and sizes where the events have them.
fn events(events: &Events) -> Map<String, Json> {
    let mut keys = object(vec![("time", time(&events.axis()))]);
    if let Some(names) = &events.names {
        keys.insert("names".to_owned(), json!(names.iter().map(|name| &**name).collect::<Vec<_>>()));
    }
    if let Some(sizes) = &events.sizes {
        keys.insert("unit".to_owned(), json!(sizes.measure.unit.to_string()));
        keys.insert("nominal".to_owned(), numbers(&sizes.values));
    }
    keys
}

fn table(content: &Table) -> Json {
    let columns: Vec<Json> = content
        .columns
        .iter()
        .map(|column| match &column.unit {
            Some(unit) => json!({"name": column.name, "unit": unit}),
            None => json!({"name": column.name}),
        })
        .collect();
    let cell = |cell: &Cell| match cell {
        Cell::Text(text) => json!(&**text),
        Cell::Number(value) | Cell::Rounded(value, _) => number(*value),
        Cell::Empty => Json::Null,
    };
    let rows: Vec<Json> =
        content.rows.iter().map(|row| Json::Array(row.iter().map(cell).collect())).collect();
    json!({"columns": columns, "rows": rows, "notes": content.notes})
}

fn attribution(attribution: &Attribution) -> Map<String, Json> {
    let statistics = &attribution.statistics;
    let mut keys =
        object(vec![("unit", json!(attribution.unit.to_string())), ("table", table(&attribution.table()))]);
    let mut numbers = object(vec![
        ("n", json!(statistics.count)),
        ("r_squared", number(statistics.r_squared)),
        ("durbin_watson", number(statistics.durbin_watson)),
    ]);
    if let Some(rho) = statistics.rho {
        numbers.insert("rho".to_owned(), number(rho));
    }
    for (key, value) in [
        ("log_likelihood", statistics.log_likelihood),
        ("aic", statistics.akaike),
        ("residual_autocorrelation", statistics.residual_autocorrelation),
        ("condition_number", statistics.condition_number),
    ] {
        numbers.insert(key.to_owned(), number(value));
    }
    keys.insert("statistics".to_owned(), Json::Object(numbers));
    keys
}
