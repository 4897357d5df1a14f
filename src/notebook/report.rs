use std::collections::HashSet;
use std::sync::Arc;

use super::run::{Run, is_told};
use crate::display;
use crate::session::{CellReply, Output, Session};
use crate::value::Shown;

/// How many columns the line over a cell takes.
const HEADING_WIDTH: usize = 80;

/// What cells gave, as text for a terminal or a page: results, notes, diagnostics.
///
/// A note is printed where it first comes up and not again, so that a long script does not repeat how a file was read.
#[derive(Default)]
pub struct Report {
    /// Whether ANSI colours are used.
    pub colour: bool,
    /// Whether each result is followed by its fingerprint.
    pub fingerprints: bool,
    /// Whether a result stands under the expression it is of; a terminal shows what was typed anyway.
    pub echo: bool,
    /// How many columns the terminal has that this is for: series have charts then, and lines are broken between words.
    pub columns: Option<usize>,
    /// Whether a result of another cell that moved is told in one line.
    pub brief_moves: bool,
    said: HashSet<Arc<str>>,
    text: String,
}

impl Report {
    /// An empty report.
    pub fn new(colour: bool, fingerprints: bool) -> Self {
        Self { colour, fingerprints, echo: true, ..Self::default() }
    }

    /// The text so far; the report is empty afterwards, but remembers the notes it printed.
    pub fn take(&mut self) -> String {
        std::mem::take(&mut self.text)
    }

    /// Add what a program gave in the end; where it has cells, each that says something under a line with its name.
    pub fn add_run(&mut self, session: &Session, run: &Run, headings: bool) {
        let (bold, plain) = if self.colour { ("\x1b[1m", "\x1b[0m") } else { ("", "") };
        self.add(session, &run.outside);
        for (cell, reply) in &run.cells {
            let before = self.text.len();
            self.add(session, reply);
            if headings && self.text.len() > before {
                let line = "─".repeat(HEADING_WIDTH.saturating_sub(cell.name.chars().count() + 4));
                self.text.insert_str(before, &format!("{bold}── {} {line}{plain}\n\n", cell.name));
            }
        }
    }

    /// Add what a cell gave.
    pub fn add(&mut self, session: &Session, reply: &CellReply) {
        let sources = |id| session.source(id);
        for problem in reply.problems.iter().chain(&reply.waiting) {
            self.text += &display::diagnostic(problem, &sources, self.colour);
            self.text.push('\n');
        }
        for notice in &reply.notices {
            self.text += &format!("{notice}\n\n");
        }
        for output in &reply.outputs {
            self.output(session, reply, output);
        }
        if self.brief_moves {
            return self.moves(session, reply);
        }
        for output in &reply.moved {
            let by = output.refreshed_by.join(", ");
            self.text += &format!("{}, refreshed by {by}:\n", session.cell_name(&output.cell));
            self.output(session, reply, output);
        }
    }

    /// What moved in other cells, one line each: the last result of an expression that was shown more than once.
    fn moves(&mut self, session: &Session, reply: &CellReply) {
        let (bold, plain) = if self.colour { ("\x1b[1m", "\x1b[0m") } else { ("", "") };
        let sources = |id| session.source(id);
        for (number, output) in reply.moved.iter().enumerate() {
            let later = reply.moved.get(number + 1..).unwrap_or(&[]);
            if later.iter().any(|other| other.expression == output.expression) {
                continue;
            }
            let by = output.refreshed_by.join(", ");
            let (cell, expression) = (session.cell_name(&output.cell), &output.expression);
            self.text += &format!("{bold}{expression}{plain}, shown in {cell}, refreshed by {by}:\n");
            self.text += &match &output.result {
                Ok(shown) => {
                    let line = display::line(shown);
                    let line = self.columns.map_or(line.clone(), |most| wrapped(&line, 2, most));
                    format!("  {line}\n")
                }
                Err(problem) => {
                    let line = display::problem_line(problem, &sources);
                    format!("  an error now, at {line}: {}\n", problem.message)
                }
            };
        }
        if !reply.moved.is_empty() {
            self.text.push('\n');
        }
    }

    /// Add one result with its notes.
    pub(super) fn output(&mut self, session: &Session, reply: &CellReply, output: &Output) {
        let (bold, dim, plain) = if self.colour { ("\x1b[1m", "\x1b[2m", "\x1b[0m") } else { ("", "", "") };
        let sources = |id| session.source(id);
        match &output.result {
            Ok(shown) => {
                if self.echo {
                    self.text += &format!("{bold}{}{plain}\n", output.expression);
                }
                let text = display::text(shown);
                for line in text.lines().map(|line| line.strip_prefix("  ").unwrap_or(line)) {
                    let line = self.columns.map_or_else(|| line.to_owned(), |most| wrapped(line, 2, most));
                    self.text += &format!("  {line}\n");
                }
                self.chart(shown);
                for note in &output.notes {
                    if self.said.insert(note.clone()) {
                        let note =
                            self.columns.map_or_else(|| note.to_string(), |most| wrapped(note, 4, most));
                        self.text += &format!("  {dim}– {note}{plain}\n");
                    }
                }
                if self.fingerprints {
                    let by = match &output.refreshed_by[..] {
                        [] => String::new(),
                        names => format!(", refreshed by {}", names.join(", ")),
                    };
                    self.text += &format!("  {dim}{}{by}{plain}\n", output.fingerprint.short());
                }
                self.text.push('\n');
            }
            Err(problem) if is_told(reply, problem) => {
                let line = display::problem_line(problem, &sources);
                self.text += &format!(
                    "{bold}{}{plain}\n  not shown, because of the error at {line}\n\n",
                    output.expression
                );
            }
            Err(problem) => {
                self.text += &display::diagnostic(problem, &sources, self.colour);
                self.text.push('\n');
            }
        }
    }

    /// The chart of a series, or of a bundle's sum.
    fn chart(&mut self, shown: &Shown) {
        let Some(columns) = self.columns else { return };
        let (title, series) = match shown {
            Shown::Series(series) => ("", series),
            Shown::Bundle { total, .. } => ("  total\n", total),
            Shown::Quantity { .. }
            | Shown::Instant { .. }
            | Shown::Events(_)
            | Shown::Span(_)
            | Shown::Range(_)
            | Shown::Clock(_)
            | Shown::Model(..)
            | Shown::Attribution(_)
            | Shown::Table(_)
            | Shown::Text(_)
            | Shown::List(_) => return,
        };
        if let Some(chart) = display::terminal_chart(series, columns.saturating_sub(2), self.colour) {
            self.text += title;
            self.text.extend(chart.lines().map(|line| format!("  {line}\n")));
        }
    }
}

/// Words on lines of at most `columns`, of which `begun` are taken on the first; the others begin with four blanks.
fn wrapped(words: &str, begun: usize, columns: usize) -> String {
    const INDENT: usize = 4;
    let mut out = String::new();
    let mut used = begun;
    for word in words.split(' ') {
        let length = word.chars().count();
        if !out.is_empty() && used + 1 + length > columns {
            out += "\n    ";
            used = INDENT;
        } else if !out.is_empty() {
            out.push(' ');
            used += 1;
        }
        out += word;
        used += length;
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_long_note_is_broken_between_words_and_indented_under_its_dash() {
        let text = wrapped("means over the steps of the clock, gaps left out", 4, 24);
        assert_eq!(text, "means over the steps\n    of the clock, gaps\n    left out");
        assert!(text.lines().all(|line| line.chars().count() <= 24));
        // A word is never broken, and a note that fits stays on its line.
        assert_eq!(
            wrapped("data/observations/eastern-basin.csv read", 4, 20),
            "data/observations/eastern-basin.csv\n    read"
        );
        assert_eq!(wrapped("a short note", 4, 80), "a short note");
        // Blanks between columns stay where a line is not broken.
        assert_eq!(wrapped("sun    1.5   2", 2, 80), "sun    1.5   2");
    }
}
