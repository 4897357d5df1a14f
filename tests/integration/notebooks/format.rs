//! Written notebooks keep the rules of nbformat 4.5 and everything that was theirs.

use std::collections::BTreeSet;
use std::fs;

use serde_json::{Map, Value as Json, json};

use super::{folder, notebook, outputs, plain, rhythmite, run, run_notebook};

/// That an object has these keys and, of others, only those that may be there.
fn keys(object: &Json, required: &[&str], optional: &[&str]) {
    let object = object.as_object().unwrap_or_else(|| panic!("no object: {object}"));
    for key in required {
        assert!(object.contains_key(*key), "no `{key}` in {object:?}");
    }
    for key in object.keys() {
        assert!([required, optional].concat().contains(&key.as_str()), "`{key}` in {object:?}");
    }
}

/// A text, or a list of lines each of which but the last ends where its line ends.
fn multiline(text: &Json) {
    if let Some(lines) = text.as_array() {
        for (number, line) in lines.iter().enumerate() {
            let line = line.as_str().unwrap();
            let inner = line.strip_suffix('\n').unwrap_or(line);
            assert!(!inner.contains('\n'), "{text}");
            assert!(line.ends_with('\n') || number + 1 == lines.len(), "{text}");
        }
    } else {
        assert!(text.is_string(), "{text}");
    }
}

/// The rules of nbformat 4.5, from its published JSON schema, for what this program writes.
pub(super) fn check(written: &Json) {
    keys(written, &["metadata", "nbformat", "nbformat_minor", "cells"], &[]);
    assert_eq!((&written["nbformat"], &written["nbformat_minor"]), (&json!(4), &json!(5)));
    assert!(written["metadata"].is_object());
    let mut ids = BTreeSet::new();
    let mut counts = Vec::new();
    for cell in written["cells"].as_array().unwrap() {
        let all = ["id", "cell_type", "metadata", "source"];
        match cell["cell_type"].as_str().unwrap() {
            "code" => keys(cell, &[&all[..], &["outputs", "execution_count"]].concat(), &[]),
            "markdown" | "raw" => keys(cell, &all, &["attachments"]),
            other => panic!("cell_type {other}"),
        }
        let id = cell["id"].as_str().unwrap();
        assert!((1..=64).contains(&id.len()), "{id}");
        assert!(id.chars().all(|sign| sign.is_ascii_alphanumeric() || sign == '-' || sign == '_'), "{id}");
        assert!(ids.insert(id.to_owned()), "{id} twice");
        assert!(cell["metadata"].is_object());
        multiline(&cell["source"]);
        if cell["cell_type"] != "code" {
            continue;
        }
        assert!(cell["execution_count"].is_null() || cell["execution_count"].is_u64());
        counts.extend(cell["execution_count"].as_u64());
        for output in cell["outputs"].as_array().unwrap() {
            match output["output_type"].as_str().unwrap() {
                "display_data" => {
                    keys(output, &["output_type", "data", "metadata"], &[]);
                    assert!(output["metadata"].is_object());
                    assert!(output["data"].as_object().unwrap().contains_key("text/plain"));
                    output["data"].as_object().unwrap().values().for_each(multiline);
                }
                "error" => {
                    keys(output, &["output_type", "ename", "evalue", "traceback"], &[]);
                    assert!(output["ename"].is_string() && output["evalue"].is_string());
                    assert!(output["traceback"].as_array().unwrap().iter().all(Json::is_string));
                }
                other => panic!("output_type {other}"),
            }
        }
    }
    assert_eq!(counts, (1..=counts.len() as u64).collect::<Vec<_>>()[..counts.len()].to_vec());
}

/// Everything but what a run writes.
fn without_outputs(book: &Json) -> Json {
    let mut book = book.clone();
    for cell in book["cells"].as_array_mut().unwrap() {
        for key in ["outputs", "execution_count"] {
            cell.as_object_mut().unwrap().shift_remove(key);
        }
    }
    book
}

/// A notebook with everything that a run must leave alone.
fn rich() -> Json {
    let mut book =
        notebook(&["#!# Prose\n$x^2$", "x = 1 ± 0.5\nx\nx + 1 m", "", "y = = 1", "[x, 2]\n\"µ°±\""]);
    book["metadata"] = json!({"zeta": 1.0, "alpha": {"nested": [null, true, 1e-7, "ü"]},
        "kernelspec": {"name": "mine", "language": "Rhythmite", "display_name": "R"}});
    let cells = book["cells"].as_array_mut().unwrap();
    cells[0]["attachments"] = json!({"a.png": {"image/png": "aGk="}});
    cells[1]["metadata"] = json!({"tags": ["b", "a"], "collapsed": true});
    cells[1]["outputs"] = json!([{"output_type": "stream", "name": "stdout", "text": "old"}]);
    cells[1]["execution_count"] = json!(99);
    cells[2]["execution_count"] = json!(98);
    cells[4]["source"] = json!(["[x, 2]\n", "\"µ°±\""]);
    cells.push(
        json!({"cell_type": "raw", "id": "raw_-9", "metadata": {"format": "text/x"}, "source": ["x\n", "y"]}),
    );
    book
}

#[test]
fn a_written_notebook_keeps_the_rules_of_its_format() {
    let ran = run("rules", "b.ipynb", rich().to_string().as_bytes(), &["--format", "ipynb"]);
    assert_eq!((ran.code, ran.err.as_str()), (Some(1), ""));
    check(&ran.json());
    assert!(ran.out.ends_with("}\n") && ran.out.starts_with("{\n \"cells\": [\n  {\n   \""), "{}", ran.out);
}

#[test]
fn everything_but_outputs_stays_as_it_was() {
    let mut book = rich();
    book["unknown"] = json!({"of": ["another", "program"]});
    book["cells"][1]["unknown"] = json!(7);
    let ran = run("kept", "b.ipynb", book.to_string().as_bytes(), &["--format", "ipynb"]);
    // As texts, so that the order of keys counts too.
    assert_eq!(without_outputs(&ran.json()).to_string(), without_outputs(&book).to_string());
    let place =
        |book: &Json| -> Vec<String> { book["cells"][1].as_object().unwrap().keys().cloned().collect() };
    assert_eq!(place(&ran.json()), place(&book));
}

#[test]
fn old_outputs_give_way_and_empty_cells_have_none() {
    let written = run("old", "b.ipynb", rich().to_string().as_bytes(), &["--format", "ipynb"]).json();
    let counts: Vec<&Json> =
        [1, 2, 3, 4].iter().map(|index| &written["cells"][index]["execution_count"]).collect();
    assert_eq!(counts, [&json!(1), &Json::Null, &json!(2), &json!(3)]);
    assert!(!written.to_string().contains("\"old\""));
    let outputs = outputs(&written);
    assert_eq!(outputs.iter().map(Vec::len).collect::<Vec<_>>(), [0, 2, 0, 1, 2, 0]);
}

#[test]
fn a_result_is_display_data_and_a_mistake_is_an_error_with_its_place() {
    let written = run_notebook("kinds", &["1 m + 1 s\n3 ± 1", "1 m + q"], &["--format", "ipynb"]).json();
    let outputs = outputs(&written);
    let error = &outputs[0][0];
    assert_eq!((&error["output_type"], &error["ename"]), (&json!("error"), &json!("unit-mismatch")));
    assert_eq!(error["evalue"], "m and s measure different things");
    let traceback: Vec<&str> =
        error["traceback"].as_array().unwrap().iter().map(|line| line.as_str().unwrap()).collect();
    assert!(traceback.contains(&" --> cell 1:1:1") && traceback.contains(&"1 | 1 m + 1 s"), "{traceback:?}");
    let shown = &outputs[0][1];
    assert_eq!(shown["output_type"], "display_data");
    assert!(plain(shown).starts_with("3 ± 1\n3"), "{}", plain(shown));
    assert!(shown["data"]["text/html"].is_array());
    let own = &shown["metadata"]["rhythmite"];
    assert_eq!(own["expression"], "3 ± 1");
    assert_eq!(own["fingerprint"].as_str().unwrap().len(), 64);
    assert_eq!(outputs[1][0]["ename"], "not-defined");
}

#[test]
fn what_waits_for_the_mistake_of_its_own_cell_points_to_it() {
    let written = run_notebook("points", &["x = 1 m + 1 s\nx"], &["--format", "ipynb"]).json();
    let outputs = outputs(&written);
    assert_eq!(outputs[0].len(), 2);
    assert_eq!(outputs[0][0]["output_type"], "error");
    assert_eq!(plain(&outputs[0][1]), "x\nnot shown, because of the error at cell 1:1:5");
}

#[test]
fn running_what_was_written_writes_the_same_bytes() {
    let folder = folder("again");
    fs::write(folder.join("b.ipynb"), rich().to_string()).unwrap();
    let first = rhythmite(&folder, &["run", "b.ipynb", "--format", "ipynb", "--out", "b.ipynb"]);
    assert_eq!((first.code, first.out.as_str()), (Some(1), ""));
    let written = fs::read_to_string(folder.join("b.ipynb")).unwrap();
    check(&serde_json::from_str(&written).unwrap());
    let second = rhythmite(&folder, &["run", "b.ipynb", "--format", "ipynb", "--threads", "1"]);
    assert!(second.out == written, "{}\n{written}", second.out);
}

#[test]
fn cells_of_an_older_minor_format_get_ids_that_no_other_cell_has() {
    let mut book = notebook(&["1", "2", "#!3"]);
    book["nbformat_minor"] = json!(2);
    for index in [0, 2] {
        book["cells"][index].as_object_mut().unwrap().shift_remove("id");
    }
    book["cells"][1]["id"] = json!("cell-1");
    book.as_object_mut().unwrap().shift_remove("metadata");
    let ran = run("minor", "b.ipynb", book.to_string().as_bytes(), &["--format", "ipynb"]);
    check(&ran.json());
    let ids: Vec<Json> =
        ran.json()["cells"].as_array().unwrap().iter().map(|cell| cell["id"].clone()).collect();
    assert_eq!(ids, ["cell-1-", "cell-1", "cell-3"]);
}

#[test]
fn a_newer_minor_format_is_kept() {
    let mut book = notebook(&["1"]);
    book["nbformat_minor"] = json!(9);
    let ran = run("newer", "b.ipynb", book.to_string().as_bytes(), &["--format", "ipynb"]);
    assert_eq!((ran.code, &ran.json()["nbformat_minor"]), (Some(0), &json!(9)));
}

#[test]
fn a_notebook_without_cells_or_with_prose_alone_is_written_back() {
    for (name, cells) in [("none", &[][..]), ("prose", &["#!only words"])] {
        let text = run_notebook(name, cells, &[]);
        assert_eq!((text.code, text.out.as_str()), (Some(0), ""));
        let written = run_notebook(name, cells, &["--format", "ipynb"]).json();
        check(&written);
        assert_eq!(written, notebook(cells));
    }
}

#[test]
fn the_checker_itself_refuses_what_is_wrong() {
    type Change = fn(&mut Map<String, Json>);
    let changes: [Change; 6] = [
        |cell| drop(cell.shift_remove("id")),
        |cell| drop(cell.shift_remove("outputs")),
        |cell| drop(cell.insert("execution_count".to_owned(), json!(2))),
        |cell| drop(cell.insert("outputs".to_owned(), json!([{"output_type": "display_data", "data": {}}]))),
        |cell| drop(cell.insert("source".to_owned(), json!(["a", "b"]))),
        |cell| drop(cell.insert("more".to_owned(), json!(1))),
    ];
    for (number, change) in changes.into_iter().enumerate() {
        let mut book = notebook(&["1"]);
        book["cells"][0]["execution_count"] = json!(1);
        check(&book);
        change(book["cells"][0].as_object_mut().unwrap());
        assert!(std::panic::catch_unwind(|| check(&book)).is_err(), "change {number}");
    }
}

#[test]
fn a_figure_is_there_for_pages_and_for_papers_and_as_pixels_where_asked() {
    let book = notebook(&["clock = 1850..1900 CE by 1 yr\nconstant(1 ± 0.2 W/m2)"]).to_string();
    let mut formats = Vec::new();
    for arguments in [&["--format", "ipynb"][..], &["--format", "ipynb", "--png"]] {
        let ran = run("media", "b.ipynb", book.as_bytes(), arguments);
        assert_eq!(ran.code, Some(0), "{ran:?}");
        check(&ran.json());
        let figure = outputs(&ran.json())[0][0].clone();
        let data = figure["data"].as_object().unwrap().clone();
        let encoded = |kind: &str| data[kind].as_array().unwrap()[0].as_str().unwrap().to_owned();
        assert!(encoded("application/pdf").starts_with("JVBERi0xLjcK"), "%PDF-1.7 in base64");
        if data.contains_key("image/png") {
            assert!(encoded("image/png").starts_with("iVBORw0KGgo"));
            assert_eq!(figure["metadata"]["image/png"]["width"], json!(720.0));
        }
        assert!(figure["metadata"]["rhythmite"]["fingerprint"].is_string());
        formats.push(data.keys().cloned().collect::<Vec<_>>());
    }
    let always = ["text/plain", "image/svg+xml", "application/pdf"];
    assert_eq!(formats, [&always[..], &[&always[..], &["image/png"]].concat()]);
}
