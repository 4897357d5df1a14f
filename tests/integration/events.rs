//! Tables from files and the events made of them, through the language.

use std::fs;
use std::path::{Path, PathBuf};

use serde_json::Value as Json;

use rhythmite::display;
use rhythmite::notebook::{CodeCell, Run, run_to_json};
use rhythmite::session::Session;
use rhythmite::value::{Cell, Era, Events, Shown, Table};

/// A folder with one file, named by the test that uses it.
fn folder(name: &str, file: &str, text: &str) -> PathBuf {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("events").join(name);
    fs::create_dir_all(&folder).unwrap();
    fs::write(folder.join(file), text).unwrap();
    folder
}

/// The last result of a program with its notes; or code, message and help of what went wrong.
fn run(folder: PathBuf, program: &str) -> Result<(Shown, Vec<String>), (String, String, String)> {
    let mut session = Session::new(folder);
    let reply = session.run_cell("events", program);
    let failed = reply.outputs.iter().filter_map(|output| output.result.as_ref().err());
    if let Some(problem) = reply.problems.iter().chain(&reply.waiting).chain(failed).next() {
        let help = problem.help.clone().unwrap_or_default();
        return Err((problem.code.to_owned(), problem.message.clone(), help));
    }
    let output = reply.outputs.into_iter().last().unwrap();
    Ok((output.result.unwrap(), output.notes.iter().map(|note| note.to_string()).collect()))
}

fn table(folder: PathBuf, program: &str) -> (Table, Vec<String>) {
    match run(folder, program).unwrap() {
        (Shown::Table(table), notes) => (Table::clone(&table), notes),
        (other, _) => panic!("{} is no table", other.kind()),
    }
}

fn events(folder: PathBuf, program: &str) -> (Events, Vec<String>) {
    match run(folder, program).unwrap() {
        (Shown::Events(events), notes) => (Events::clone(&events), notes),
        (other, _) => panic!("{} is no list of events", other.kind()),
    }
}

const MOUNTAINS: &str = "# invented\nname,age (ka),ash (km3),class\nGrauhorn,2.5,1.5,5\n\"Rot, old\",21,NA,6+\nKaltenberg,0.1,0.25,4\n";

#[test]
fn a_table_keeps_columns_units_numbers_words_and_gaps() {
    let (table, notes) = table(folder("table", "mountains.csv", MOUNTAINS), "load_table(\"mountains.csv\")");
    let heads: Vec<(&str, Option<&str>)> =
        table.columns.iter().map(|column| (column.name.as_str(), column.unit.as_deref())).collect();
    assert_eq!(heads, [("name", None), ("age", Some("ka")), ("ash", Some("km3")), ("class", None)]);
    assert_eq!(
        table.rows[1],
        [Cell::Text("Rot, old".into()), Cell::Number(21.0), Cell::Empty, Cell::Text("6+".into())]
    );
    assert!(notes.iter().any(|note| note.contains("ash: 1 of 3 values missing")), "{notes:?}");
    let words = "class: read as words, although 2 cells would be numbers: line 4, column `class`";
    assert!(notes.iter().any(|note| note.contains(words)), "{notes:?}");
}

#[test]
fn events_come_in_order_of_time_with_names_and_sizes_that_follow_them() {
    let folder = folder("ages", "mountains.csv", MOUNTAINS);
    let program = "events(load_table(\"mountains.csv\"), name: \"name\", size: \"ash\")";
    let (events, notes) = events(folder.clone(), program);
    // 21, 2.5 and 0.1 ka before 1950.
    assert_eq!(events.years, [-19_050.0, -550.0, 1850.0]);
    assert_eq!(events.era, Era::Ka);
    let names: Vec<&str> = events.names.as_ref().unwrap().iter().map(|name| &**name).collect();
    assert_eq!(names, ["Rot, old", "Grauhorn", "Kaltenberg"]);
    let sizes = events.sizes.as_ref().unwrap();
    assert!(sizes.values[0].is_nan() && sizes.values[1..] == [1.5, 0.25], "{:?}", sizes.values);
    assert_eq!(sizes.measure.unit.to_string(), "km3");
    assert!(notes.iter().any(|note| note.ends_with("2 rows put into the order of time")), "{notes:?}");
    let line = display::line(&run(folder, program).unwrap().0);
    assert_eq!(line, "3 events, 21 ka to 0.1 ka; ash 0.25 to 1.5 km3");
}

#[test]
fn events_are_one_object_in_json_and_rows_in_text() {
    let folder = folder("forms", "mountains.csv", MOUNTAINS);
    let mut session = Session::new(&folder);
    let program = "e = load_table(\"mountains.csv\") |> events(name: \"name\", size: \"ash\", unit: \"m3\")\ne\ntable(e)";
    let reply = session.run_cell("events", program);
    let text = display::text(reply.outputs[0].result.as_ref().unwrap());
    assert!(text.contains("Kaltenberg") && text.contains("ash (m3)") && text.contains("age (ka)"), "{text}");
    assert_eq!(text, display::text(reply.outputs[1].result.as_ref().unwrap()));
    let cell = CodeCell { index: 0, id: "again".into(), name: "again".into(), source: "e".into() };
    let run = Run::of(&mut session, &[cell]);
    let json = run_to_json(&session, &run);
    let output = &json["outputs"][0];
    assert_eq!(output["kind"], "events");
    assert_eq!(output["unit"], "m3");
    assert_eq!(output["time"]["kind"], "instants");
    assert_eq!(output["time"]["values"], serde_json::json!([-19_050.0, -550.0, 1850.0]));
    assert_eq!(output["nominal"], serde_json::json!([Json::Null, 1.5, 0.25]));
    assert_eq!(output["names"], serde_json::json!(["Rot, old", "Grauhorn", "Kaltenberg"]));
}

#[test]
fn two_events_may_share_a_time_and_keep_their_order() {
    let text = "year,name\n1902,b\n1815,a\n1902,c\n";
    let (events, notes) =
        events(folder("shared", "e.csv", text), "load_table(\"e.csv\") |> events(name: \"name\")");
    assert_eq!(events.years, [1815.5, 1902.5, 1902.5]);
    let names: Vec<&str> = events.names.as_ref().unwrap().iter().map(|name| &**name).collect();
    assert_eq!(names, ["a", "b", "c"]);
    assert!(notes.iter().any(|note| note.contains("each taken at its middle")), "{notes:?}");
}

#[test]
fn events_that_cannot_be_made_say_what_to_write_instead() {
    let text = "when,label,size (Zonk)\n1815,a,1\n1816,b,2\n";
    let fault = |program: &str| run(folder("faults", "e.csv", text), program).unwrap_err();
    let (code, _, help) = fault("load_table(\"e.csv\") |> events()");
    assert_eq!(
        (code.as_str(), help.as_str()),
        ("no-time-column", "say which one does, as in `time: \"year\"`")
    );
    let (code, message, help) = fault("load_table(\"e.csv\") |> events(time: \"wehn\")");
    assert_eq!(code, "no-such-column", "{message}");
    assert_eq!(help, "did you mean \"when\"?");
    let (code, message, _) = fault("load_table(\"e.csv\") |> events(time: \"when\", size: \"size\")");
    assert!(code == "unknown-unit" && message.contains("Zonk"), "{message}");
    let (code, ..) = fault("load_table(\"e.csv\") |> events(time: \"when\", unit: \"Tg\")");
    assert_eq!(code, "missing-argument");
    let plain = folder("bp", "e.csv", "age (BP),label\n450,a\n");
    let (code, message, _) = run(plain, "load_table(\"e.csv\") |> events()").unwrap_err();
    assert!(code == "file-age-bp" && message.contains("uncalibrated"), "{message}");
    let missing = folder("missing", "e.csv", "year,label\n1815,a\n,b\n");
    let (code, message, _) = run(missing, "load_table(\"e.csv\") |> events()").unwrap_err();
    assert!(code == "file-time" && message.contains("row 2: the time is missing"), "{message}");
}
