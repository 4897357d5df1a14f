//! Files that are no notebooks, and wrong calls: exit code 2, one line that says what is wrong, nothing printed.

use std::fs;

use rhythmite::notebook::Notebook;
use serde_json::{Value as Json, json};

use super::{folder, notebook, rhythmite, run};

/// A notebook with one value put in another's place, named by a JSON pointer.
fn with(pointer: &str, value: Json) -> Vec<u8> {
    let mut book = notebook(&["1", "2", "#!3"]);
    *book.pointer_mut(pointer).unwrap() = value;
    book.to_string().into_bytes()
}

fn lacking(pointer: &str, key: &str) -> Vec<u8> {
    let mut book = notebook(&["1", "2", "#!3"]);
    book.pointer_mut(pointer).unwrap().as_object_mut().unwrap().shift_remove(key).unwrap();
    book.to_string().into_bytes()
}

#[test]
fn a_file_that_is_no_notebook_is_told_so_in_one_line() {
    let mut latin = with("/cells/0/source", json!("x = 5 µm"));
    let micro = latin.windows(2).position(|pair| pair == "µ".as_bytes()).unwrap();
    latin.remove(micro);
    let cases: Vec<(Vec<u8>, &str)> = vec![
        (b"".to_vec(), "is empty"),
        (b"x = 1\n".to_vec(), "no JSON: expected value at line 1 column 1"),
        (b"{\"cells\": [".to_vec(), "no JSON: EOF"),
        (latin, "is not UTF-8: the first wrong byte is number"),
        (b"[1, 2]".to_vec(), "is a JSON object"),
        (b"{}".to_vec(), "has no `nbformat`"),
        (with("/nbformat", json!(3)), "old notebook format 3"),
        (with("/nbformat", json!(5)), "format 5, and this program reads format 4"),
        (with("/nbformat", json!("4")), "format \"4\""),
        (lacking("", "cells"), "has no `cells`"),
        (with("/cells", json!({})), "its `cells` are no list"),
        (with("/cells/1", json!("text")), "`cells[1]` is no object"),
        (lacking("/cells/1", "source"), "`cells[1]` has no `source`"),
        (lacking("/cells/2", "source"), "`cells[2]` has no `source`"),
        (with("/cells/1/source", json!(5)), "`cells[1]` has a `source` that is neither"),
        (with("/cells/1/source", json!(["a", 1])), "`cells[1]` has a `source` with something"),
        (lacking("/cells/0", "cell_type"), "`cells[0]` has no `cell_type`"),
        (with("/cells/0/cell_type", json!("heading")), "`cells[0]` has the cell_type `heading`"),
        (with("/cells/0/metadata", json!([])), "the `metadata` of `cells[0]` is no object"),
        (with("/cells/1/id", json!("a")), "`cells[1]` has the id `a` of another cell"),
        (with("/cells/1/id", json!("")), "the `id` of `cells[1]`"),
        (with("/cells/1/id", json!("ä b")), "the `id` of `cells[1]`"),
        (with("/cells/1/id", json!(7)), "the `id` of `cells[1]`"),
        (with("/metadata", json!(1)), "its `metadata` is no object"),
        (with("/metadata", json!({"language_info": {"name": "python"}})), "in the language `python`"),
        (with("/metadata", json!({"kernelspec": {"language": "julia", "name": "j"}})), "language `julia`"),
        (format!("{}1{}", "[".repeat(5000), "]".repeat(5000)).into_bytes(), "recursion limit"),
    ];
    for (number, (bytes, says)) in cases.into_iter().enumerate() {
        for format in ["text", "json", "ipynb"] {
            let ran = run(&format!("malformed-{number}"), "b.ipynb", &bytes, &["--format", format]);
            assert_eq!((ran.code, ran.out.as_str()), (Some(2), ""), "{says}: {ran:?}");
            assert!(ran.err.starts_with("b.ipynb ") && ran.err.contains(says), "{says}: {}", ran.err);
            assert_eq!(ran.err.lines().count(), 1, "{}", ran.err);
        }
    }
}

#[test]
fn a_byte_order_mark_and_a_name_in_capitals_do_no_harm() {
    let book = ["\u{feff}".as_bytes(), notebook(&["1 + 1"]).to_string().as_bytes()].concat();
    let ran = run("mark", "B.IPYNB", &book, &["--format", "ipynb"]);
    assert_eq!(ran.code, Some(0), "{ran:?}");
    assert!(ran.out.starts_with("{\n") && ran.out.contains("\"1 + 1\""), "{}", ran.out);
}

#[test]
fn no_prefix_of_a_notebook_and_no_value_in_anothers_place_ends_in_a_panic() {
    let whole = notebook(&["x = 1 ± 2", "#!prose"]);
    let text = whole.to_string();
    for end in 0..text.len() {
        assert!(Notebook::read(&text.as_bytes()[..end]).is_err(), "{end}");
    }
    let pointers = [
        "/nbformat",
        "/nbformat_minor",
        "/metadata",
        "/cells",
        "/cells/0",
        "/cells/1",
        "/cells/0/id",
        "/cells/0/source",
        "/cells/0/cell_type",
        "/cells/0/metadata",
        "/cells/0/outputs",
        "/cells/0/execution_count",
        "/cells/1/source",
        "/cells/1/metadata",
    ];
    let values = [
        json!(null),
        json!(true),
        json!(-1),
        json!(1e300),
        json!(""),
        json!("code"),
        json!([]),
        json!([[]]),
        json!({}),
    ];
    let mut read = 0;
    for pointer in pointers {
        for value in &values {
            let mut book = whole.clone();
            *book.pointer_mut(pointer).unwrap() = value.clone();
            read += usize::from(Notebook::read(book.to_string().as_bytes()).is_ok());
        }
    }
    assert!(read >= values.len() * 3, "outputs, counts and the minor version are replaced: {read}");
}

#[test]
fn a_script_is_not_written_as_a_notebook() {
    let ran = run("script", "s.rhy", b"1 + 1\n", &["--format", "ipynb"]);
    assert_eq!((ran.code, ran.out.as_str()), (Some(2), ""));
    assert!(ran.err.contains("is for notebooks"), "{}", ran.err);
}

#[test]
fn a_notebook_that_is_missing_or_a_folder_is_a_wrong_call() {
    let folder = folder("missing");
    fs::create_dir(folder.join("dir.ipynb")).unwrap();
    for file in ["none.ipynb", "dir.ipynb"] {
        let ran = rhythmite(&folder, &["run", file]);
        assert_eq!((ran.code, ran.out.as_str()), (Some(2), ""));
        assert!(ran.err.starts_with(&format!("{file} cannot be read: ")), "{}", ran.err);
    }
}
