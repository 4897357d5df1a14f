//! Notebook files: nbformat 4, read as any 4.x and written as 4.5 (4.x above that as it was found).
//!
//! Everything that is not an output stays as it was found: metadata, fields this program does not know, the order of
//! keys, a source as one string or as a list of lines.

use std::collections::BTreeSet;
use std::fmt;

use serde_json::{Map, Value as Json, json};

use super::bundle::{Bundle, Media, Pieces, pieces, result_metadata, words_bundle};
use super::run::{CodeCell, Run, is_told};
use crate::base::Diagnostic;
use crate::display;
use crate::session::{CellReply, Session};

/// The language of the code cells, as a notebook's metadata names it.
const LANGUAGE: &str = "rhythmite";

/// The minor version of nbformat 4 that gave cells their ids.
const MINOR_WITH_IDS: u64 = 5;

/// A notebook file.
#[derive(Debug)]
pub struct Notebook {
    whole: Map<String, Json>,
    code: Vec<CodeCell>,
}

/// Why a file is no notebook that this program can run: one sentence that goes on after the file's name.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Unreadable(String);

impl fmt::Display for Unreadable {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.write_str(&self.0)
    }
}

impl std::error::Error for Unreadable {}

fn unreadable<T>(why: impl Into<String>) -> Result<T, Unreadable> {
    Err(Unreadable(why.into()))
}

impl Notebook {
    /// Read the bytes of a notebook file.
    ///
    /// # Errors
    /// What is wrong, where the bytes are not UTF-8 or no JSON, the format is not 4, cells lack what the format asks
    /// for, or the notebook is in another language.
    pub fn read(bytes: &[u8]) -> Result<Self, Unreadable> {
        let text = match std::str::from_utf8(bytes) {
            Ok(text) => text.strip_prefix('\u{feff}').unwrap_or(text),
            Err(error) => {
                return unreadable(format!(
                    "is not UTF-8: the first wrong byte is number {}",
                    error.valid_up_to() + 1
                ));
            }
        };
        if text.trim().is_empty() {
            return unreadable("is empty: a notebook is a JSON object with `nbformat` and `cells`");
        }
        let whole: Json = match serde_json::from_str(text) {
            Ok(whole) => whole,
            Err(error) => return unreadable(format!("is no notebook, as it is no JSON: {error}")),
        };
        let Json::Object(mut whole) = whole else {
            return unreadable("is no notebook: a notebook is a JSON object with `nbformat` and `cells`");
        };
        check_format(&whole)?;
        check_language(&whole)?;
        let cells = match whole.get_mut("cells") {
            Some(Json::Array(cells)) => cells,
            Some(_) => return unreadable("is no notebook: its `cells` are no list"),
            None => return unreadable("is no notebook: it has no `cells`"),
        };
        complete(cells)?;
        let mut code: Vec<CodeCell> = Vec::new();
        for (index, cell) in cells.iter().enumerate() {
            let source = source(cell, index)?;
            // As in other programs, an empty cell is not run and has no number.
            if cell.get("cell_type") == Some(&json!("code")) && !source.trim().is_empty() {
                let id = cell.get("id").and_then(Json::as_str).unwrap_or_default().to_owned();
                code.push(CodeCell { index, id, name: format!("cell {}", code.len() + 1), source });
            }
        }
        if whole.get("nbformat_minor").and_then(Json::as_u64).is_none_or(|minor| minor < MINOR_WITH_IDS) {
            whole.insert("nbformat_minor".to_owned(), json!(MINOR_WITH_IDS));
        }
        whole.entry("metadata").or_insert_with(|| json!({}));
        Ok(Self { whole, code })
    }

    /// The code cells that hold something, in order; `cell 3` is the third of them.
    pub fn code_cells(&self) -> &[CodeCell] {
        &self.code
    }

    /// The file with what its cells gave, in place of the outputs it had.
    pub fn with_outputs(&self, session: &Session, run: &Run, media: Media) -> String {
        let mut whole = self.whole.clone();
        let mut ran = run.cells.iter().enumerate().peekable();
        let cells = whole.get_mut("cells").and_then(Json::as_array_mut);
        for (index, cell) in cells.into_iter().flatten().enumerate() {
            if cell.get("cell_type") != Some(&json!("code")) {
                continue;
            }
            let Some(cell) = cell.as_object_mut() else { continue };
            let (count, outputs) = match ran.next_if(|(_, (code, _))| code.index == index) {
                Some((number, (_, reply))) => (json!(number + 1), outputs(session, reply, media)),
                None => (Json::Null, Vec::new()),
            };
            cell.insert("execution_count".to_owned(), count);
            cell.insert("outputs".to_owned(), Json::Array(outputs));
        }
        written(&Json::Object(whole))
    }
}

/// JSON as notebook files have it: indented by one space, so that differences between versions read well.
fn written(json: &Json) -> String {
    // A text of JSON holds no line breaks but those between its parts, so that two spaces at a line's head are a level.
    let two = serde_json::to_string_pretty(json).unwrap_or_default();
    two.lines()
        .map(|line| {
            let rest = line.trim_start_matches(' ');
            format!("{}{rest}\n", " ".repeat((line.len() - rest.len()) / 2))
        })
        .collect()
}

fn check_format(whole: &Map<String, Json>) -> Result<(), Unreadable> {
    match whole.get("nbformat") {
        None => unreadable("is no notebook: it has no `nbformat`"),
        Some(version) => match version.as_u64() {
            Some(4) => Ok(()),
            Some(old @ 1..=3) => unreadable(format!(
                "has the old notebook format {old}, and this program reads format 4; save it from Jupyter as a new notebook"
            )),
            _ => unreadable(format!("has the notebook format {version}, and this program reads format 4")),
        },
    }
}

/// A notebook that says nothing about its language is taken to be in this one.
fn check_language(whole: &Map<String, Json>) -> Result<(), Unreadable> {
    let metadata = match whole.get("metadata") {
        None => return Ok(()),
        Some(Json::Object(metadata)) => metadata,
        Some(_) => return unreadable("is no notebook: its `metadata` is no object"),
    };
    for (key, field) in [("language_info", "name"), ("kernelspec", "language")] {
        if let Some(language) = metadata.get(key).and_then(|info| info.get(field)).and_then(Json::as_str)
            && !language.eq_ignore_ascii_case(LANGUAGE)
        {
            return unreadable(format!(
                "is a notebook in the language `{language}` (`{key}` in its metadata), and this program runs `{LANGUAGE}`"
            ));
        }
    }
    Ok(())
}

/// Check what the format asks of every cell, and give an id to those without one.
fn complete(cells: &mut [Json]) -> Result<(), Unreadable> {
    let mut ids: BTreeSet<String> = BTreeSet::new();
    for (index, cell) in cells.iter_mut().enumerate() {
        let Json::Object(cell) = cell else {
            return unreadable(format!("is no notebook: `cells[{index}]` is no object"));
        };
        match cell.get("cell_type").and_then(Json::as_str) {
            Some("code" | "markdown" | "raw") => {}
            Some(other) => {
                return unreadable(format!(
                    "is no notebook: `cells[{index}]` has the cell_type `{other}`, and there are `code`, `markdown` and `raw`"
                ));
            }
            None => return unreadable(format!("is no notebook: `cells[{index}]` has no `cell_type`")),
        }
        if !cell.entry("metadata").or_insert_with(|| json!({})).is_object() {
            return unreadable(format!("is no notebook: the `metadata` of `cells[{index}]` is no object"));
        }
        let id = match cell.get("id") {
            None => continue,
            Some(id) => id.as_str().filter(|id| is_id(id)),
        };
        match id {
            None => {
                return unreadable(format!(
                    "is no notebook: the `id` of `cells[{index}]` is not 1 to 64 letters, digits, `-` or `_`"
                ));
            }
            Some(id) if !ids.insert(id.to_owned()) => {
                return unreadable(format!(
                    "is no notebook: `cells[{index}]` has the id `{id}` of another cell; remove its `id`, and it gets a new one"
                ));
            }
            Some(_) => {}
        }
    }
    for (index, cell) in cells.iter_mut().enumerate() {
        if let Json::Object(cell) = cell
            && !cell.contains_key("id")
        {
            // The same id in every run, and none that another cell has.
            let mut id = format!("cell-{}", index + 1);
            while !ids.insert(id.clone()) {
                id.push('-');
            }
            cell.insert("id".to_owned(), json!(id));
        }
    }
    Ok(())
}

fn is_id(id: &str) -> bool {
    (1..=64).contains(&id.len())
        && id.bytes().all(|byte| byte.is_ascii_alphanumeric() || byte == b'-' || byte == b'_')
}

fn source(cell: &Json, index: usize) -> Result<String, Unreadable> {
    let wrong = |what: &str| unreadable(format!("is no notebook: `cells[{index}]` {what}"));
    match cell.get("source") {
        None => wrong("has no `source`"),
        Some(Json::String(text)) => Ok(text.clone()),
        Some(Json::Array(lines)) => match lines.iter().map(Json::as_str).collect::<Option<String>>() {
            Some(text) => Ok(text),
            None => wrong("has a `source` with something that is no text"),
        },
        Some(Json::Null | Json::Bool(_) | Json::Number(_) | Json::Object(_)) => {
            wrong("has a `source` that is neither text nor a list of lines")
        }
    }
}

fn outputs(session: &Session, reply: &CellReply, media: Media) -> Vec<Json> {
    let mut outputs = Vec::new();
    for problem in reply.problems.iter().chain(&reply.waiting) {
        outputs.push(error(session, problem));
    }
    for notice in &reply.notices {
        outputs.push(display_data(words_bundle(notice), &json!({"rhythmite": {"kind": "notice"}})));
    }
    let several = reply.outputs.len() > 1;
    for output in &reply.outputs {
        match &output.result {
            Err(problem) if !is_told(reply, problem) => outputs.push(error(session, problem)),
            Err(problem) => {
                let place = display::problem_line(problem, &|id| session.source(id));
                let expression = &output.expression;
                let words =
                    words_bundle(&format!("{expression}\nnot shown, because of the error at {place}"));
                outputs.push(display_data(words, &json!({"rhythmite": result_metadata(output)})));
            }
            Ok(_) => {
                let metadata = json!({"rhythmite": result_metadata(output)});
                let Pieces { figure, figure_metadata, words } = pieces(session, output, several, media);
                if let Some(figure) = figure {
                    let mut metadata = metadata.clone();
                    metadata.as_object_mut().into_iter().for_each(|all| all.extend(figure_metadata.clone()));
                    outputs.push(display_data(figure, &metadata));
                }
                outputs.push(display_data(words, &metadata));
            }
        }
    }
    outputs
}

/// An output; long texts are lists of lines, as notebook files have them.
fn display_data(bundle: Bundle, metadata: &Json) -> Json {
    let lines = |text: Json| match text.as_str() {
        Some(text) => json!(text.split_inclusive('\n').collect::<Vec<_>>()),
        None => text,
    };
    let data: Map<String, Json> = bundle.into_iter().map(|(kind, text)| (kind, lines(text))).collect();
    json!({"data": data, "metadata": metadata, "output_type": "display_data"})
}

fn error(session: &Session, problem: &Diagnostic) -> Json {
    let text = display::diagnostic(problem, &|id| session.source(id), false);
    let traceback: Vec<&str> = text.lines().collect();
    json!({
        "ename": problem.code,
        "evalue": problem.message,
        "output_type": "error",
        "traceback": traceback,
    })
}
