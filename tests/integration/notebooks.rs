//! Notebooks without Jupyter: what is run, what is written, what stays as it was, and files that are no notebooks.

mod define;
mod format;
mod malformed;

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};

use serde_json::{Value as Json, json};

/// What a run of the program gave.
#[derive(Debug)]
struct Ran {
    code: Option<i32>,
    out: String,
    err: String,
}

impl Ran {
    fn json(&self) -> Json {
        serde_json::from_str(&self.out).unwrap_or_else(|error| panic!("{error}\n{self:?}"))
    }
}

/// An empty folder of its own for a test.
fn folder(name: &str) -> PathBuf {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join(format!("notebooks-{name}"));
    let _ = fs::remove_dir_all(&folder);
    fs::create_dir_all(&folder).unwrap();
    folder
}

fn rhythmite(folder: &Path, arguments: &[&str]) -> Ran {
    let output = Command::new(env!("CARGO_BIN_EXE_rhythmite"))
        .current_dir(folder)
        .args(arguments)
        .stdin(Stdio::null())
        .output()
        .unwrap();
    Ran {
        code: output.status.code(),
        out: String::from_utf8(output.stdout).unwrap(),
        err: String::from_utf8(output.stderr).unwrap(),
    }
}

/// Write a file and run it with further arguments.
fn run(name: &str, file: &str, bytes: &[u8], arguments: &[&str]) -> Ran {
    let folder = folder(name);
    fs::write(folder.join(file), bytes).unwrap();
    rhythmite(&folder, &[&["run", file], arguments].concat())
}

/// A notebook of code cells with the ids `a`, `b` and so on; a text that begins with `#!` is a markdown cell.
fn notebook(cells: &[&str]) -> Json {
    let cells: Vec<Json> = cells
        .iter()
        .zip('a'..)
        .map(|(source, id)| match source.strip_prefix("#!") {
            Some(prose) => json!({"cell_type": "markdown", "id": id, "metadata": {}, "source": prose}),
            None => json!({"cell_type": "code", "execution_count": null, "id": id, "metadata": {},
                "outputs": [], "source": source}),
        })
        .collect();
    json!({"cells": cells, "metadata": {}, "nbformat": 4, "nbformat_minor": 5})
}

fn run_notebook(name: &str, cells: &[&str], arguments: &[&str]) -> Ran {
    run(name, "book.ipynb", notebook(cells).to_string().as_bytes(), arguments)
}

/// The outputs of every cell, in order; none for a cell without.
fn outputs(written: &Json) -> Vec<Vec<Json>> {
    let cells = written["cells"].as_array().unwrap();
    cells.iter().map(|cell| cell["outputs"].as_array().cloned().unwrap_or_default()).collect()
}

/// The text of an output that is shown.
fn plain(output: &Json) -> String {
    let lines = output["data"]["text/plain"].as_array().unwrap();
    lines.iter().map(|line| line.as_str().unwrap()).collect()
}

#[test]
fn cells_run_in_order_in_one_session_and_are_headed_by_their_names() {
    let ran = run_notebook("order", &["x = 2 m", "#! prose", "y = x * 3", "y\nx"], &[]);
    assert_eq!((ran.code, ran.err.as_str()), (Some(0), ""));
    assert!(ran.out.starts_with("── cell 3 ──"), "cells that show nothing have no heading\n{}", ran.out);
    assert!(ran.out.contains("\ny\n  6 m\n") && ran.out.contains("\nx\n  2 m\n"), "{}", ran.out);
}

#[test]
fn a_cell_with_a_syntax_error_stops_no_later_cell_and_is_shown_with_its_caret() {
    let ran = run_notebook("syntax", &["x = 2", "bad = = 1\nx = 7", "", "x + 1", "oh +"], &[]);
    assert_eq!(ran.code, Some(1));
    assert!(ran.out.contains("--> cell 2:1:7") && ran.out.contains("1 | bad = = 1"), "{}", ran.out);
    assert!(ran.out.contains("cell 3 ──") && ran.out.contains("x + 1\n  3\n"), "{}", ran.out);
    assert!(ran.out.contains("--> cell 4:1:"), "an empty cell has no number\n{}", ran.out);
}

#[test]
fn json_counts_all_cells_and_blames_the_cell_where_a_mistake_stands() {
    let ran = run_notebook("json", &["#! prose", "x = 1 m + 2 s", "", "7\nx"], &["--format", "json"]);
    assert_eq!(ran.code, Some(1));
    let outputs = ran.json()["outputs"].as_array().unwrap().clone();
    let cells: Vec<u64> = outputs.iter().map(|output| output["cell"].as_u64().unwrap()).collect();
    assert_eq!(cells, [1, 3, 3]);
    assert_eq!(outputs[1]["nominal"], json!(7.0));
    assert_eq!(outputs[2]["kind"], "error");
    assert_eq!(outputs[2]["error"]["cell"], json!(1), "it is shown in cell 3 and stands in cell 1");
    assert_eq!((&outputs[2]["error"]["line"], &outputs[2]["error"]["column"]), (&json!(1), &json!(5)));
}

#[test]
fn a_result_that_a_later_cell_moves_is_written_as_the_later_cell_left_it() {
    let cells = ["x = 1\nx * 10", "2 + 2", "x = 5", "x = 6"];
    let text = run_notebook("moved", &cells, &[]);
    assert_eq!(text.code, Some(0));
    assert!(text.out.contains("x * 10\n  60\n") && !text.out.contains("  10\n"), "{}", text.out);
    let json = run_notebook("moved", &cells, &["--format", "json"]).json();
    assert_eq!(json["outputs"][0]["nominal"], json!(60.0));
    let written = run_notebook("moved", &cells, &["--format", "ipynb"]).json();
    let outputs = outputs(&written);
    assert_eq!(outputs[0].len(), 1, "it takes the place of the old one");
    assert!(plain(&outputs[0][0]).starts_with("60\n"), "{}", plain(&outputs[0][0]));
    assert!(plain(&outputs[0][0]).ends_with(", refreshed by x"), "{}", plain(&outputs[0][0]));
    let own = &outputs[0][0]["metadata"]["rhythmite"];
    assert_eq!(own["refreshed_by"], json!(["x"]));
    assert_eq!(own["fingerprint"], json["outputs"][0]["fingerprint"]);
    assert!(outputs[1][0]["metadata"]["rhythmite"].get("refreshed_by").is_none());
}

#[test]
fn json_says_what_a_result_was_refreshed_by() {
    let ran = run_notebook("moved-json", &["x = 1 m\nx * 2\n3 m", "x = 5 m"], &["--format", "json"]);
    let outputs = ran.json()["outputs"].as_array().unwrap().clone();
    let shown =
        |expression: &str| outputs.iter().find(|output| output["expression"] == expression).unwrap().clone();
    assert_eq!((&shown("x * 2")["nominal"], &shown("x * 2")["refreshed_by"]), (&json!(10.0), &json!(["x"])));
    assert!(shown("3 m").get("refreshed_by").is_none());
}

#[test]
fn a_name_that_comes_later_is_no_mistake_in_the_end() {
    let cells = ["y = x + 1\ny", "x = 1 m + 1 s", "x = 4"];
    let ran = run_notebook("forward", &cells, &[]);
    assert_eq!(ran.code, Some(0), "{}", ran.out);
    assert!(ran.out.contains("y\n  5\n") && !ran.out.contains("error"), "{}", ran.out);
    let written = run_notebook("forward", &cells, &["--format", "ipynb"]).json();
    assert!(outputs(&written).iter().flatten().all(|output| output["output_type"] == "display_data"));
    assert_eq!(run_notebook("forward", &cells[..1], &[]).code, Some(1), "a name that never comes is");
    assert_eq!(run_notebook("forward", &cells[..2], &[]).code, Some(1), "and so is one that comes wrong");
}

#[test]
fn a_cell_that_takes_a_name_over_calls_the_other_by_its_number() {
    let ran = run_notebook("taken", &["#! prose", "x = 1", "x = 2"], &[]);
    assert!(ran.out.contains("`x` was defined in cell 1"), "{}", ran.out);
}

#[test]
fn a_notebook_reads_the_files_of_its_folder_from_wherever_it_is_run() {
    let folder = folder("files");
    fs::create_dir_all(folder.join("in/data")).unwrap();
    fs::write(folder.join("in/data/a.csv"), "year,value\n1850,1\n1851,2\n").unwrap();
    fs::write(folder.join("outside.csv"), "year,value\n1850,1\n1851,2\n").unwrap();
    let cells = notebook(&["load(\"data/a.csv\")", "load(\"../outside.csv\")"]);
    fs::write(folder.join("in/book.ipynb"), cells.to_string()).unwrap();
    let ran = rhythmite(&folder, &["run", "in/book.ipynb"]);
    assert_eq!(ran.code, Some(1));
    assert!(ran.out.contains("2 steps, 1850 CE to 1851 CE") && ran.out.contains("--> cell 2"), "{}", ran.out);
}

#[test]
fn the_demo_notebook_gives_what_the_demo_script_gives() {
    let demos = Path::new(env!("CARGO_MANIFEST_DIR")).join("notebooks-demo");
    let results = |file: &str| -> Vec<(String, String)> {
        let ran = rhythmite(&demos, &["run", file, "--format", "json"]);
        assert_eq!((ran.code, ran.err.as_str()), (Some(0), ""), "{file}");
        let field = |output: &Json, key: &str| output[key].as_str().unwrap().to_owned();
        let outputs = ran.json()["outputs"].as_array().unwrap().clone();
        outputs.iter().map(|output| (field(output, "expression"), field(output, "fingerprint"))).collect()
    };
    let script = results("lake.rhy");
    assert!(script.len() >= 10);
    assert_eq!(results("lake.ipynb"), script);
    let stored: Json = serde_json::from_str(&fs::read_to_string(demos.join("lake.ipynb")).unwrap()).unwrap();
    format::check(&stored);
    assert!(outputs(&stored).iter().all(Vec::is_empty), "no outputs are stored in the demo");
    let written = rhythmite(&demos, &["run", "lake.ipynb", "--format", "ipynb"]).json();
    format::check(&written);
    let outputs = outputs(&written);
    let figures = |output: &&Json| output["data"].get("image/svg+xml").is_some();
    let drawn = outputs.iter().flatten().filter(figures).count();
    assert!(drawn >= 4, "{drawn} figures");
    assert_eq!(outputs.iter().flatten().count(), script.len() + drawn, "words stand under each figure");
}
