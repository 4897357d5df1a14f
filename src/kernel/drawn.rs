//! Which results stand where in the notebook, and which of them a front end can no longer be reached by.

use std::collections::{BTreeMap, BTreeSet, VecDeque};
use std::path::{Path, PathBuf};

use serde_json::{Value as Json, json};

/// Cells without a name of their own are remembered up to this number; the displays of older ones are left as they are.
const NAMELESS: usize = 1_000;

/// A result that stands in the notebook.
pub(super) struct Drawn {
    pub(super) cell: String,
    /// The output with the figure, where there is one.
    pub(super) figure: Option<String>,
    /// The output with the numbers.
    pub(super) words: String,
    /// The front end whose page it was drawn on.
    client: String,
    /// Whether its cell was said to be gone; one that was moved is said to be gone, too.
    gone: bool,
}

/// A cell that was run.
#[derive(Default)]
struct Cell {
    /// The number in its prompt.
    number: u64,
    /// Whether it shows mistakes, whose place nothing can take: put right, it is to be run again.
    failed: bool,
    /// Its displays that are mistakes now.
    failing: BTreeSet<u64>,
    /// The display that says what it waits for, and what it says.
    waiting: Option<(String, String)>,
}

/// What was drawn so far.
pub(super) struct Board {
    results: BTreeMap<u64, Drawn>,
    cells: BTreeMap<String, Cell>,
    nameless: VecDeque<String>,
    /// Cells whose results an earlier kernel of this notebook drew, with their numbers.
    former: BTreeMap<String, u64>,
    /// Where the next kernel of this notebook finds them.
    file: PathBuf,
    kept: String,
}

impl Board {
    /// A board for the kernel of this connection; what an earlier one left there is taken over.
    pub(super) fn new(connection_file: &Path) -> Self {
        let file = connection_file.with_extension("rhythmite.json");
        let text = std::fs::read_to_string(&file).unwrap_or_default();
        let left: Json = serde_json::from_str(&text).unwrap_or_default();
        let former = left.as_object().into_iter().flatten();
        let former = former.filter_map(|(cell, number)| Some((cell.clone(), number.as_u64()?))).collect();
        Self {
            results: BTreeMap::new(),
            cells: BTreeMap::new(),
            nameless: VecDeque::new(),
            former,
            file,
            kept: String::new(),
        }
    }

    /// A cell is run, under this number: what stood in it is gone.
    pub(super) fn begin(&mut self, cell: &str, number: u64) {
        self.results.retain(|_, drawn| drawn.cell != cell);
        self.cells.insert(cell.to_owned(), Cell { number, ..Cell::default() });
        self.former.remove(cell);
    }

    /// A cell that has no name in the notebook is run; returns one that is forgotten for it.
    pub(super) fn begin_nameless(&mut self, cell: &str, number: u64) -> Option<String> {
        self.begin(cell, number);
        self.nameless.push_back(cell.to_owned());
        if self.nameless.len() <= NAMELESS {
            return None;
        }
        let oldest = self.nameless.pop_front()?;
        self.results.retain(|_, drawn| drawn.cell != oldest);
        self.cells.remove(&oldest);
        Some(oldest)
    }

    /// Cells are said to be gone from the notebook.
    pub(super) fn lose(&mut self, cells: &[&str]) {
        for drawn in self.results.values_mut().filter(|drawn| cells.contains(&&*drawn.cell)) {
            drawn.gone = true;
        }
        self.cells.retain(|cell, _| !cells.contains(&&**cell));
        self.former.retain(|cell, _| !cells.contains(&&**cell));
    }

    pub(super) fn draw(&mut self, display: u64, drawn: Drawn) {
        self.results.insert(display, drawn);
    }

    pub(super) fn find(&self, display: u64) -> Option<&Drawn> {
        self.results.get(&display)
    }

    /// A mistake is shown in a cell: in place of one of its results, or for a definition of its.
    pub(super) fn fail(&mut self, cell: &str, display: Option<u64>) {
        if let Some(cell) = self.cells.get_mut(cell) {
            cell.failed = true;
            cell.failing.extend(display);
        }
    }

    /// A result is there now that was a mistake when its cell was run.
    pub(super) fn heal(&mut self, cell: &str, display: u64) {
        if let Some(cell) = self.cells.get_mut(cell) {
            cell.failing.remove(&display);
        }
    }

    /// The cells that show mistakes and whose results are all there now.
    pub(super) fn perhaps_healed(&self) -> Vec<String> {
        let healed = |cell: &Cell| cell.failed && cell.failing.is_empty();
        self.cells.iter().filter(|(_, cell)| healed(cell)).map(|(name, _)| name.clone()).collect()
    }

    /// It was said that a cell should be run again.
    pub(super) fn forgive(&mut self, cell: &str) {
        if let Some(cell) = self.cells.get_mut(cell) {
            cell.failed = false;
        }
    }

    /// A cell waits for a name, and this display says so in these words.
    pub(super) fn set_waiting(&mut self, cell: &str, display: String, words: String) {
        if let Some(cell) = self.cells.get_mut(cell) {
            cell.waiting = Some((display, words));
        }
    }

    /// What a cell waits for is said in these words now, or it waits for nothing any more; returns the display to say so
    /// in, if that is news.
    pub(super) fn change_waiting(&mut self, cell: &str, words: Option<&str>) -> Option<String> {
        let waiting = &mut self.cells.get_mut(cell)?.waiting;
        let (display, said) = waiting.as_mut()?;
        let display = display.clone();
        match words {
            Some(words) if words == said => return None,
            Some(words) => words.clone_into(said),
            None => *waiting = None,
        }
        Some(display)
    }

    /// The cells that wait for a name.
    pub(super) fn waiting(&self) -> Vec<String> {
        self.cells.iter().filter(|(_, cell)| cell.waiting.is_some()).map(|(name, _)| name.clone()).collect()
    }

    /// What a person calls some cells, by the numbers in their prompts: `cells [3], [5]`.
    pub(super) fn call<'a>(&self, cells: impl IntoIterator<Item = &'a str>) -> String {
        let numbers: BTreeSet<u64> =
            cells.into_iter().filter_map(|cell| self.cells.get(cell)).map(|cell| cell.number).collect();
        numbered(&numbers)
    }

    /// Cells with results of an earlier kernel that were not run since, in words; told once.
    pub(super) fn take_former(&mut self) -> Option<(usize, String)> {
        let former = std::mem::take(&mut self.former);
        let numbers: BTreeSet<u64> = former.values().copied().collect();
        (!former.is_empty()).then(|| (former.len(), numbered(&numbers)))
    }

    /// Keep for the next kernel which cells hold results.
    pub(super) fn keep(&mut self) {
        let mut cells = self.former.clone();
        for drawn in self.results.values().filter(|drawn| !drawn.gone) {
            if let Some(cell) = self.cells.get(&drawn.cell)
                && !self.nameless.contains(&drawn.cell)
            {
                cells.insert(drawn.cell.clone(), cell.number);
            }
        }
        let text = if cells.is_empty() { String::new() } else { json!(cells).to_string() };
        if text == self.kept {
            return;
        }
        // Without the file the next kernel says less; this one goes on.
        let _ = if text.is_empty() {
            std::fs::remove_file(&self.file)
        } else {
            std::fs::write(&self.file, &text)
        };
        self.kept = text;
    }

    /// Nobody will ask for this notebook's results again.
    pub(super) fn drop_kept(&self) {
        let _ = std::fs::remove_file(&self.file);
    }
}

impl Drawn {
    pub(super) fn new(cell: &str, figure: Option<String>, words: String, client: &str) -> Self {
        Self { cell: cell.to_owned(), figure, words, client: client.to_owned(), gone: false }
    }

    /// Whether a page of this front end still knows its outputs.
    pub(super) fn is_within_reach(&self, client: &str) -> bool {
        self.client == client && !self.gone
    }

    pub(super) fn is_gone(&self) -> bool {
        self.gone
    }
}

fn numbered(numbers: &BTreeSet<u64>) -> String {
    let word = if numbers.len() == 1 { "cell" } else { "cells" };
    let numbers: Vec<String> = numbers.iter().map(|number| format!("[{number}]")).collect();
    format!("{word} {}", numbers.join(", "))
}
