//! What cells show: results told one after the other as they are computed, and what moved elsewhere.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use super::bodies;
use super::cell::{CellReply, Session};
use super::definitions::SESSION_LIMIT;
use super::environment::Environment;
use super::evaluate::{Evaluator, internal};
use super::fingerprint::{Fingerprint, Parts};
use super::graph::Graph;
use super::node::Node;
use super::outside::function_key;
use super::readings::Readings;
use super::resolve::{SETTINGS, resolve};
use super::settings::{self, environment};
use crate::base::{Diagnostic, Fault, INTERRUPTED, SourceId, Span};
use crate::catalogue::Stop;
use crate::language::{Expression, Statement, StatementKind, parse};
use crate::value::Shown;

/// One shown expression, for as long as its cell shows it.
pub(super) struct Display {
    pub(super) id: u64,
    pub(super) cell: Arc<str>,
    text: String,
    pub(super) expression: Expression,
    pub(super) node: Result<Arc<Node>, Diagnostic>,
    /// How many nodes were made for it, also in vain.
    pub(super) cost: usize,
    /// What was told last followed from this.
    fingerprint: Fingerprint,
    /// The names and files that changed since then, whether it follows from them or not.
    changes: Vec<String>,
    /// Of what it follows from, what was said to be defined in deleted cells.
    deleted: Vec<String>,
}

/// One shown result.
#[derive(Debug)]
pub struct Output {
    /// Names the display for as long as its cell shows it.
    pub display: u64,
    /// The cell it stands in.
    pub cell: Arc<str>,
    /// The expression, as it was written.
    pub expression: String,
    /// What the result follows from.
    pub fingerprint: Fingerprint,
    /// The result, or why there is none.
    pub result: Result<Shown, Diagnostic>,
    /// What was decided and done on the way.
    pub notes: Vec<Arc<str>>,
    /// The names whose change moved it; none on execution.
    pub refreshed_by: Vec<String>,
    /// Whether it follows from nothing but its own text, so that it never moves.
    pub fixed: bool,
    /// Of what it follows from, what is defined in deleted cells.
    pub deleted: Vec<String>,
}

impl Output {
    /// Whether it was interrupted before it was done.
    pub fn is_interrupted(&self) -> bool {
        self.result.as_ref().is_err_and(|problem| problem.code == INTERRUPTED)
    }
}

/// A display that is to be evaluated.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Pending {
    /// Names the display.
    pub display: u64,
    /// The cell it stands in.
    pub cell: Arc<str>,
    /// The expression, as it was written.
    pub expression: String,
}

/// Who is told what a cell gives, as soon as it is there.
pub trait Audience: Send {
    /// The definitions are in force and checked; problems, waiting definitions and notices are in the reply.
    fn checked(&mut self, session: &Session, reply: &CellReply);
    /// A display is about to be evaluated, which may take long.
    fn begun(&mut self, display: &Pending);
    /// A result of the cell is there; it is added to the reply afterwards.
    fn shown(&mut self, session: &Session, reply: &CellReply, output: &Output);
    /// All results of the cell are there. Whether those that moved elsewhere are evaluated afresh now.
    fn answered(&mut self, session: &Session, reply: &CellReply) -> bool;
    /// A result of another cell moved, and is evaluated afresh. Whether to go on with the next.
    fn refreshed(&mut self, session: &Session, reply: &CellReply, output: &Output) -> bool;
}

/// An audience that waits for the whole reply.
pub(super) struct Silent;

impl Audience for Silent {
    fn begun(&mut self, _: &Pending) {}
    fn checked(&mut self, _: &Session, _: &CellReply) {}
    fn shown(&mut self, _: &Session, _: &CellReply, _: &Output) {}
    fn answered(&mut self, _: &Session, _: &CellReply) -> bool {
        true
    }
    fn refreshed(&mut self, _: &Session, _: &CellReply, _: &Output) -> bool {
        true
    }
}

impl Display {
    pub(super) fn new(
        id: u64,
        cell: Arc<str>,
        text: String,
        expression: Expression,
        node: Result<Arc<Node>, Diagnostic>,
        cost: usize,
    ) -> Self {
        let fingerprint = Parts::new("not evaluated").finish();
        Self { id, cell, text, expression, node, cost, fingerprint, changes: Vec::new(), deleted: Vec::new() }
    }

    /// Note names and files that changed.
    pub(super) fn add_changes(&mut self, names: &[String]) {
        for name in names {
            if !self.changes.contains(name) {
                self.changes.push(name.clone());
            }
        }
    }

    fn pending(&self) -> Pending {
        Pending { display: self.id, cell: self.cell.clone(), expression: self.text.clone() }
    }

    /// Note what was told.
    pub(super) fn settle(&mut self, output: &Output) {
        self.fingerprint = output.fingerprint;
        self.deleted.clone_from(&output.deleted);
        self.changes.clear();
    }
}

impl Session {
    pub(super) fn show_here(&self, cell: &str, reply: &mut CellReply, audience: &mut dyn Audience) {
        let graph = Graph::of(&self.definitions);
        let evaluator = self.evaluator(&graph, &self.cancellation);
        let environment = environment(&evaluator);
        evaluator.prepare(&environment);
        evaluator.check(cell, &environment, reply);
        audience.checked(self, reply);
        for display in self.displays.iter().filter(|display| &*display.cell == cell) {
            audience.begun(&display.pending());
            let output = evaluator.output(display, &environment, Vec::new());
            audience.shown(self, reply, &output);
            let interrupted = output.is_interrupted();
            reply.outputs.push(output);
            if interrupted {
                break;
            }
        }
        let mut go_on = audience.answered(self, reply);
        let files = self.inputs.changed();
        for display in evaluator.moved(&self.displays, cell, &environment) {
            if go_on && !self.cancellation.is_cancelled() {
                audience.begun(&display.pending());
                let by = evaluator.moved_by(display, &files, &environment);
                let output = evaluator.output(display, &environment, by);
                if !output.is_interrupted() {
                    go_on = audience.refreshed(self, reply, &output);
                    reply.moved.push(output);
                    continue;
                }
            }
            reply.postponed.push(display.pending());
        }
    }
}

impl Session {
    /// How many bare expressions a cell shows.
    pub fn shown_in(&self, cell: &str) -> usize {
        self.displays.iter().filter(|display| &*display.cell == cell).count()
    }

    /// The result of an expression on the definitions in force, which nothing follows from and nobody remembers.
    ///
    /// # Errors
    /// What is wrong with the text, or why it has no result. Spans point into a text that the session does not keep.
    pub fn peek(&self, text: &str) -> Result<Output, Diagnostic> {
        let source = SourceId::default();
        let whole = Span::new(source, 0, text.len());
        let nothing = || Fault::new("no-expression", "this is no single expression").at(whole);
        let program = parse(text, source)
            .map_err(|error| error.diagnostics.into_iter().next().unwrap_or_else(nothing))?;
        let mut statements = program.statements.into_iter();
        let (Some(Statement { kind: StatementKind::Show(expression), .. }), None) =
            (statements.next(), statements.next())
        else {
            return Err(nothing());
        };
        let output = self.consult(|evaluator, environment| {
            let (node, cost) = resolve(&self.definitions, None, &expression, SESSION_LIMIT);
            let display = Display::new(0, Arc::from(""), text.to_owned(), expression, node, cost);
            evaluator.output(&display, environment, Vec::new())
        });
        output.ok_or_else(|| internal("this expression could not be evaluated").at(whole))
    }
}

impl Evaluator<'_> {
    /// Evaluate shapes along the order of references, so that no chain of definitions is walked by recursion.
    pub(super) fn prepare(&self, environment: &Environment) {
        for name in &self.graph.order {
            let Some(definition) = self.definitions.values.get(name) else { continue };
            if let (Ok(node), false) = (&definition.node, self.graph.problems.contains_key(name)) {
                // What is wrong is told where the name is defined or shown.
                let _ = self.shape(node, environment);
                let _ = self.fingerprint(node, environment);
            }
        }
    }

    /// Check the definitions of a cell, so that their errors do not wait to be shown.
    pub(super) fn check(&self, cell: &str, environment: &Environment, reply: &mut CellReply) {
        for problem in bodies::problems(self, cell, environment) {
            tell(problem, reply);
        }
        for (name, definition) in &self.definitions.values {
            if &*definition.cell != cell {
                continue;
            }
            let stem = |name: &str| name.to_lowercase().trim_end_matches('s').to_owned();
            if let Some(setting) =
                SETTINGS.iter().find(|setting| **setting != &**name && stem(setting) == stem(name))
            {
                reply.notices.push(format!("`{name}` is a name of yours; the setting is called `{setting}`"));
            }
            let problem = match (&definition.node, self.graph.problems.get(name)) {
                (_, Some(problem)) | (Err(problem), None) => Some(problem.clone()),
                (Ok(node), None) => match settings::check(self, name, node) {
                    Some(problem) => Some(problem),
                    None => match self.shape(node, environment) {
                        Ok(_) => None,
                        Err(Stop::Placed(problem)) => Some(*problem),
                        Err(Stop::Fault(fault)) => Some(fault.at(node.span)),
                    },
                },
            };
            if let Some(problem) = problem {
                tell(problem, reply);
            }
        }
    }

    /// The displays of other cells whose results moved, each after those of what it follows from.
    fn moved<'d>(&self, displays: &'d [Display], cell: &str, environment: &Environment) -> Vec<&'d Display> {
        let others = displays.iter().filter(|display| &*display.cell != cell);
        let mut moved: Vec<&Display> =
            others.filter(|display| self.has_moved(display, environment)).collect();
        if moved.len() > 1 {
            let levels = self.levels();
            moved.sort_by_cached_key(|display| (level(display.node.as_ref().ok(), &levels), display.id));
        }
        moved
    }

    /// Whether a display's result is another, or what is said of it.
    fn has_moved(&self, display: &Display, environment: &Environment) -> bool {
        self.print_of(display, environment) != display.fingerprint
            || self.deleted_behind(&self.words_behind(display, environment)) != display.deleted
    }

    /// Of some words, those that are defined in deleted cells.
    fn deleted_behind(&self, words: &BTreeSet<String>) -> Vec<String> {
        words.iter().filter_map(|word| self.deleted(word)).collect()
    }

    /// How many definitions stand one upon the other below each name, itself included.
    fn levels(&self) -> BTreeMap<&str, usize> {
        let mut levels = BTreeMap::new();
        for name in &self.graph.order {
            let node = self.definitions.values.get(name).and_then(|definition| definition.node.as_ref().ok());
            let level = level(node, &levels) + 1;
            levels.insert(&**name, level);
        }
        levels
    }

    fn print_of(&self, display: &Display, environment: &Environment) -> Fingerprint {
        match &display.node {
            Ok(node) => match self.shape(node, environment) {
                Ok(_) => self.fingerprint(node, environment),
                Err(stop) => broken(&stop),
            },
            Err(problem) => broken(&Stop::Placed(Box::new(problem.clone()))),
        }
    }

    /// Of what changed, the names and files that a display's result follows from.
    fn moved_by(&self, display: &Display, files: &[String], environment: &Environment) -> Vec<String> {
        let used = self.words_behind(display, environment);
        let mut by: Vec<String> = Vec::new();
        for name in display.changes.iter().chain(files) {
            if used.contains(bare(name)) && !by.contains(name) {
                by.push(name.clone());
            }
        }
        by
    }

    /// Every name, function and text that a display's result can follow from, and the settings that it reads.
    fn words_behind(&self, display: &Display, environment: &Environment) -> BTreeSet<String> {
        let readings = display.node.as_ref().map(|node| self.readings(node, environment)).unwrap_or_default();
        let mut words = BTreeSet::new();
        let mut waiting: Vec<&Expression> = vec![&display.expression];
        let mut found: Vec<String> = readings.names().map(str::to_owned).collect();
        loop {
            for word in found.drain(..) {
                if words.insert(word.clone()) {
                    let values = self.definitions.values.get(&*word);
                    waiting.extend(values.map(|definition| &definition.expression));
                    waiting.extend(self.definitions.functions.get(&word).map(|function| &function.body));
                }
            }
            let Some(expression) = waiting.pop() else { return words };
            expression.words(&mut found);
        }
    }

    /// The result of a display, or why there is none.
    fn output(&self, display: &Display, environment: &Environment, refreshed_by: Vec<String>) -> Output {
        let result = match &display.node {
            Ok(node) => self.shape(node, environment).and_then(|_| self.shown(node, environment)),
            Err(problem) => Err(Stop::Placed(Box::new(problem.clone()))),
        };
        let (result, mut notes) = match result {
            Ok((shown, notes)) => (Ok(shown), notes.to_vec()),
            Err(Stop::Placed(problem)) => (Err(*problem), Vec::new()),
            Err(Stop::Fault(fault)) => (Err(fault.at(display.expression.span)), Vec::new()),
        };
        let fixed = result.is_ok() && self.is_fixed(display, environment);
        let words = self.words_behind(display, environment);
        let deleted = self.deleted_behind(&words);
        let told = |word: &String| Arc::from(format!("`{word}` is defined in a cell that was deleted"));
        notes.extend(deleted.iter().map(told));
        Output {
            display: display.id,
            cell: display.cell.clone(),
            expression: display.text.clone(),
            fingerprint: self.print_of(display, environment),
            fixed,
            deleted,
            result,
            notes,
            refreshed_by,
        }
    }

    /// Whether nothing that anybody defines can move a display.
    fn is_fixed(&self, display: &Display, environment: &Environment) -> bool {
        let mut words = Vec::new();
        display.expression.words(&mut words);
        let Ok(node) = &display.node else { return false };
        node.references().is_empty()
            && self.readings(node, environment) == Readings::default()
            && words.iter().all(|word| !self.definitions.functions.contains_key(word))
    }

    /// What a word stands for, if the cell that defines it was deleted.
    fn deleted(&self, word: &str) -> Option<String> {
        let function = self.definitions.functions.get(word).filter(|function| function.deleted);
        let value = self.definitions.values.get(word).filter(|definition| definition.deleted);
        function.map(|_| function_key(word)).or_else(|| value.map(|_| word.to_owned()))
    }
}

/// The highest level of the names that a node refers to.
fn level(node: Option<&Arc<Node>>, levels: &BTreeMap<&str, usize>) -> usize {
    let names = node.map(|node| node.references()).unwrap_or_default();
    names.iter().filter_map(|name| levels.get(&**name)).max().copied().unwrap_or(0)
}

/// A function's name without its parameters.
fn bare(name: &str) -> &str {
    name.split('(').next().unwrap_or(name)
}

/// The fingerprint of a display that shows an error.
fn broken(stop: &Stop) -> Fingerprint {
    let mut parts = Parts::new("error");
    match stop {
        Stop::Placed(problem) => {
            parts.text(problem.code);
            parts.text(&problem.message);
        }
        Stop::Fault(fault) => {
            parts.text(fault.code);
            parts.text(&fault.message);
        }
    }
    parts.finish()
}

/// Add a mistake to a reply, once however many definitions depend on it.
fn tell(problem: Diagnostic, reply: &mut CellReply) {
    let told = if problem.code == "not-defined" { &mut reply.waiting } else { &mut reply.problems };
    if !told.iter().any(|other| other.is_same_mistake(&problem)) {
        told.push(problem);
    }
}
