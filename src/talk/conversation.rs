use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};

use super::script;
use crate::base::SourceId;
use crate::language::parse;
use crate::notebook::Report;
use crate::session::{CellReply, Session};

/// The words of the session itself, each with what it does.
pub(super) const WORDS: [(&str, &str); 5] = [
    (":help", "these lines"),
    (":names", "what is defined, of which kind, and where"),
    (":explain NAME", "what a function, a name, a unit or a sign is"),
    (":save FILE", "write what is in force as a script that runs again"),
    (":end", "end the session; Ctrl-D does, too"),
];

/// One side of a terminal session: it takes inputs and gives text.
pub(super) struct Conversation {
    pub(super) session: Session,
    folder: PathBuf,
    report: Report,
    /// Whether someone sits at a terminal, and sees what was typed.
    terminal: bool,
    inputs: Vec<Input>,
    /// Which displays show a result now, and which an error.
    shows: BTreeMap<u64, bool>,
    /// Scripts that this session wrote, which it may write again.
    saved: BTreeSet<PathBuf>,
    failed: bool,
    ended: bool,
}

/// An input that was run.
pub(super) struct Input {
    pub(super) cell: String,
    pub(super) text: String,
    /// Its displays, in order.
    pub(super) displays: Vec<u64>,
}

impl Conversation {
    pub(super) fn new(session: Session, folder: &Path, colour: bool, terminal: bool) -> Self {
        let mut report = Report::new(colour, false);
        report.brief_moves = true;
        Self {
            session,
            folder: folder.to_owned(),
            report,
            terminal,
            inputs: Vec::new(),
            shows: BTreeMap::new(),
            saved: BTreeSet::new(),
            failed: false,
            ended: false,
        }
    }

    /// The cell that the next input will be.
    fn next_cell(&self) -> String {
        format!("input {}", self.inputs.len() + 1)
    }

    /// What stands before the next input.
    pub(super) fn prompt(&self) -> String {
        format!("in {}: ", self.inputs.len() + 1)
    }

    /// How wide the terminal is.
    pub(super) fn set_columns(&mut self, columns: usize) {
        self.report.columns = Some(columns);
    }

    pub(super) fn is_over(&self) -> bool {
        self.ended
    }

    /// Whether anything went wrong, or still waits for a name that was never defined.
    pub(super) fn anything_failed(&self) -> bool {
        self.failed || self.session.in_force().iter().any(|definition| definition.fault.is_some())
    }

    /// Say that something went wrong outside the session.
    pub(super) fn fail(&mut self) {
        self.failed = true;
    }

    /// Take one input; returns what is printed for it.
    pub(super) fn take(&mut self, text: &str) -> String {
        let text = text.trim_end();
        if text.trim().is_empty() {
            return String::new();
        }
        if let Some(word) = text.trim().strip_prefix(':') {
            return self.word(word);
        }
        // A line goes on where the next begins with `|>`: it belongs to the input before.
        let before = self.inputs.last().filter(|_| text.trim_start().starts_with("|>"));
        let goes_on = before.is_some();
        let (cell, text) = match before {
            Some(last) => (last.cell.clone(), format!("{}\n{text}", last.text)),
            None => (self.next_cell(), text.to_owned()),
        };
        let reply = self.session.run_cell(&cell, &text);
        self.note(&reply);
        self.report.echo = !self.terminal || reply.outputs.len() > 1;
        self.report.add(&self.session, &reply);
        // What cannot be read installs nothing, and the input before stays what it was.
        if !goes_on || parse(&text, SourceId::default()).is_ok() {
            self.inputs.retain(|input| input.cell != cell);
            let displays = reply.outputs.iter().map(|output| output.display).collect();
            self.inputs.push(Input { cell, text, displays });
        }
        self.report.take()
    }

    fn note(&mut self, reply: &CellReply) {
        self.failed |= !reply.problems.is_empty();
        self.failed |= reply.outputs.iter().any(|output| output.result.is_err());
        for output in reply.outputs.iter().chain(&reply.moved) {
            self.shows.insert(output.display, output.result.is_ok());
        }
    }

    fn word(&mut self, word: &str) -> String {
        let (word, rest) = word.split_once(char::is_whitespace).unwrap_or((word, ""));
        let rest = rest.trim();
        let answer = match (word, rest) {
            ("help", "") => Ok(help()),
            ("names", "") => Ok(self.names()),
            ("end", "") => {
                self.ended = true;
                return String::new();
            }
            ("explain", name) if !name.is_empty() => self.explain(name),
            ("save", file) if !file.is_empty() => self.save(file),
            ("explain", _) => Err("say what: `:explain smooth`".to_owned()),
            ("save", _) => Err("say where: `:save first-look.rhy`".to_owned()),
            _ => Err(format!("there is no `:{}`; `:help` lists the words", format!("{word} {rest}").trim())),
        };
        match answer {
            Ok(text) => text + "\n",
            Err(why) => {
                self.failed = true;
                why + "\n\n"
            }
        }
    }

    fn explain(&self, name: &str) -> Result<String, String> {
        match self.session.explain(name) {
            Some(inspection) => Ok(inspection.text),
            None => Err(match self.session.nearest_word(name) {
                Some(near) => format!("there is no function or name `{name}`; did you mean `{near}`?"),
                None => format!("there is no function, name or unit `{name}`"),
            }),
        }
    }

    fn names(&self) -> String {
        let names = self.session.in_force();
        if names.is_empty() {
            return "nothing is defined yet; `x = 2 ± 0.5 degC` defines a name\n".to_owned();
        }
        let width = names.iter().map(|name| name.name.chars().count()).max().unwrap_or(0);
        let cells = names.iter().map(|name| name.cell.chars().count()).max().unwrap_or(0);
        let line = |name: &crate::session::InForce| {
            let kind = match &name.fault {
                Some(fault) => format!("not known: {fault}"),
                None => name.kind.clone(),
            };
            format!("  {:<width$}  {:<cells$}  {kind}\n", name.name, name.cell)
        };
        names.iter().map(line).collect()
    }

    fn save(&mut self, file: &str) -> Result<String, String> {
        let kept = script::compose(&self.inputs, &self.session.in_force(), &self.shows);
        if kept.statements == 0 {
            return Err("there is nothing to save yet".to_owned());
        }
        let place = script::write(&self.folder, file, &kept.text, &self.saved)?;
        self.saved.insert(place);
        let word = if kept.statements == 1 { "statement" } else { "statements" };
        let left = match kept.left_out {
            0 => String::new(),
            number => format!("; {number} that failed or were replaced are left out"),
        };
        Ok(format!("{file}: {} {word}{left}\n", kept.statements))
    }
}

fn help() -> String {
    let width = WORDS.iter().map(|(word, _)| word.len()).max().unwrap_or(0);
    let words: String =
        WORDS.iter().map(|(word, meaning)| format!("  {word:<width$}  {meaning}\n")).collect();
    format!(
        "Write `name = expression` to define, an expression alone to see it.\n\n{words}\n  Tab completes. Enter goes on while a bracket is open; a line that begins with `|>` goes on\n  from the one before. Ctrl-C stops a computation, or clears the line.\n"
    )
}
