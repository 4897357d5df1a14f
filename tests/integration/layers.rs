//! The walls of the one crate: a layer uses only those before it.

use std::fs;
use std::path::{Path, PathBuf};

/// The layers in order, as DEVELOPERS.md has them.
const LAYERS: [&str; 12] = [
    "base",
    "science",
    "value",
    "files",
    "display",
    "language",
    "catalogue",
    "session",
    "notebook",
    "kernel",
    "lab",
    "talk",
];

/// Crates that only some layers may use.
const KEPT_INSIDE: [(&str, &[&str]); 14] = [
    ("nom::", &["language"]),
    ("annotate_snippets::", &["display"]),
    ("pdf_writer::", &["display"]),
    ("subsetter::", &["display"]),
    ("miniz_oxide::", &["display"]),
    ("tiny_skia::", &["display"]),
    ("ttf_parser::", &["display"]),
    ("base64::", &["notebook"]),
    ("csv::", &["files"]),
    ("serde_json::", &["notebook", "kernel", "lab"]),
    ("rustyline::", &["talk"]),
    ("signal_hook::", &["talk"]),
    ("zeromq::", &["kernel"]),
    ("tokio::", &["kernel"]),
];

fn rust_files(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in fs::read_dir(folder).unwrap() {
        let path = entry.unwrap().path();
        if path.is_dir() {
            rust_files(&path, found);
        } else if path.extension().is_some_and(|extension| extension == "rs") {
            found.push(path);
        }
    }
}

/// What is wrong with one line of a file in `layer`.
fn complaint(layer: &str, line: &str) -> Option<String> {
    let code = line.split("//").next().unwrap_or("");
    let own = LAYERS.iter().position(|name| *name == layer)?;
    for part in code.split("crate::").skip(1) {
        let target: String =
            part.chars().take_while(|letter| letter.is_alphanumeric() || *letter == '_').collect();
        match LAYERS.iter().position(|name| *name == target) {
            Some(position) if position <= own => {}
            Some(_) => return Some(format!("{layer} uses {target}, which stands after it")),
            None => return Some(format!("{layer} uses crate::{target}, which is no layer")),
        }
    }
    if code.contains("super::super") {
        return Some("super::super hides which layer is meant".to_owned());
    }
    KEPT_INSIDE
        .iter()
        .find(|(name, homes)| !homes.contains(&layer) && code.contains(name))
        .map(|(name, homes)| format!("{name} belongs into {}", homes.join(" and ")))
}

#[test]
fn every_layer_uses_only_those_before_it() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut complaints = Vec::new();
    let mut lines = 0;
    for layer in LAYERS {
        let mut files = Vec::new();
        rust_files(&root.join(layer), &mut files);
        for file in files {
            for (number, line) in fs::read_to_string(&file).unwrap().lines().enumerate() {
                lines += 1;
                if let Some(complaint) = complaint(layer, line) {
                    complaints.push(format!("{}:{}: {complaint}", file.display(), number + 1));
                }
            }
        }
    }
    assert!(lines > 3000, "only {lines} lines were read");
    assert!(complaints.is_empty(), "\n{}", complaints.join("\n"));
}

#[test]
fn a_use_that_looks_up_is_caught() {
    assert!(complaint("value", "use crate::session::Session;").is_some());
    assert!(complaint("science", "use crate::value::{Block};").is_some());
    assert!(complaint("session", "use nom::branch::alt;").is_some());
    assert!(complaint("session", "use super::super::value::Block;").is_some());
    assert!(complaint("session", "use crate::value::Block; // not crate::kernel").is_none());
}

#[test]
fn developers_page_has_the_same_layers() {
    let page = fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("DEVELOPERS.md")).unwrap();
    let named: Vec<&str> = page
        .lines()
        .filter_map(|line| line.strip_prefix("| `")?.split_once("/`").map(|(layer, _)| layer))
        .filter(|layer| LAYERS.contains(layer))
        .collect();
    assert_eq!(named, LAYERS);
}

#[test]
fn every_folder_of_the_source_is_a_layer() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    for entry in fs::read_dir(root).unwrap() {
        let path = entry.unwrap().path();
        let name = path.file_name().unwrap().to_string_lossy().into_owned();
        assert!(LAYERS.contains(&name.as_str()) || ["lib.rs", "main.rs"].contains(&name.as_str()), "{name}");
    }
}
