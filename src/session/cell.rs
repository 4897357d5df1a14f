//! The session's face: what running a cell installs, shows and moves. Longer than most files, because the steps of one
//! execution stand in it in their order.

use std::collections::{BTreeMap, BTreeSet};
use std::path::PathBuf;
use std::sync::Arc;
use std::sync::atomic::{AtomicU64, Ordering};

use super::definitions::{Definitions, Function, SESSION_LIMIT};
use super::environment::Environment;
use super::evaluate::{Caches, Evaluator};
use super::fingerprint::{Fingerprint, Parts};
use super::graph::Graph;
use super::inputs::{FILE_LIMIT, Inputs};
use super::memo::Memo;
use super::node::Node;
use super::outside::function_key;
use super::resolve::{SETTINGS, SIZE_LIMIT, resolve};
use crate::base::{Cancellation, Diagnostic, Fault, Source, SourceId, Span};
use crate::catalogue::{Path, Stop};
use crate::language::{Expression, Program, Statement, StatementKind, canonical, parse};
use crate::value::{Shown, Value};

/// How many bytes of values a session remembers where nobody says otherwise.
const MEMORY: usize = 512 * 1024 * 1024;

/// The stack of the thread that evaluates, of which only what is used becomes real: chains of definitions recurse.
const STACK: usize = 512 * 1024 * 1024;

/// A notebook's or script's definitions and displays, and everything to evaluate them.
///
/// Cells are run one after the other with [`Session::run_cell`]; what they define stays until another cell or another
/// run of the same cell replaces it. The outcome does not depend on the order of the cells.
pub struct Session {
    pub(super) definitions: Definitions,
    pub(super) displays: Vec<Display>,
    pub(super) sources: BTreeMap<SourceId, Source>,
    /// What people call a cell, where that is not its id.
    names: BTreeMap<Arc<str>, String>,
    /// The text that each cell was last run with: what was said about it may be shown later.
    newest: BTreeMap<Arc<str>, SourceId>,
    next_source: u32,
    next_display: u64,
    pub(super) inputs: Inputs,
    pub(super) memo: Memo,
    pub(super) cancellation: Cancellation,
    pub(super) evaluations: AtomicU64,
    pub(super) threads: Arc<rayon::ThreadPool>,
}

/// One shown expression, for as long as its cell shows it.
pub(super) struct Display {
    id: u64,
    pub(super) cell: Arc<str>,
    text: String,
    expression: Expression,
    pub(super) node: Result<Arc<Node>, Diagnostic>,
    /// How many nodes were made for it, also in vain.
    cost: usize,
    fingerprint: Fingerprint,
}

/// What running a cell gave.
#[derive(Debug, Default)]
pub struct CellReply {
    /// The shown expressions of the cell, in order.
    pub outputs: Vec<Output>,
    /// Displays of other cells whose results moved, in the order they were first shown.
    pub moved: Vec<Output>,
    /// What is wrong with the text or the definitions of the cell.
    pub problems: Vec<Diagnostic>,
    /// Definitions of the cell that wait for a name that is not defined yet.
    pub waiting: Vec<Diagnostic>,
    /// Names taken over from other cells, and the like.
    pub notices: Vec<String>,
    /// Whether the text is right so far and only ends too early; nothing was installed then.
    pub incomplete: bool,
    /// Whether the text could be read and its definitions are in force.
    pub installed: bool,
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
}

impl Session {
    /// A session that reads files in `folder` and below, on all processors.
    pub fn new(folder: impl Into<PathBuf>) -> Self {
        Self::with_limits(folder, None, MEMORY, FILE_LIMIT)
    }

    /// A session on so many threads (all processors where none is given), which remembers so many bytes of values and
    /// reads files of up to `file_limit` bytes.
    pub fn with_limits(
        folder: impl Into<PathBuf>,
        threads: Option<usize>,
        memory: usize,
        file_limit: u64,
    ) -> Self {
        let builder = rayon::ThreadPoolBuilder::new().stack_size(STACK).num_threads(threads.unwrap_or(0));
        // Where the system gives no further threads, the calling one does the work.
        let threads = builder
            .build()
            .or_else(|_| rayon::ThreadPoolBuilder::new().num_threads(1).use_current_thread().build());
        let threads = match threads {
            Ok(threads) => Arc::new(threads),
            Err(error) => unreachable!("a pool of the current thread alone: {error}"),
        };
        Self {
            definitions: Definitions::default(),
            displays: Vec::new(),
            sources: BTreeMap::new(),
            names: BTreeMap::new(),
            newest: BTreeMap::new(),
            next_source: 1,
            next_display: 1,
            inputs: Inputs::new(folder.into(), file_limit),
            memo: Memo::new(memory),
            cancellation: Cancellation::new(),
            evaluations: AtomicU64::new(0),
            threads,
        }
    }

    /// Raise this to interrupt the cell that is running.
    pub fn cancellation(&self) -> Cancellation {
        self.cancellation.clone()
    }

    /// How many bodies of catalogue entries have been called since the session began.
    pub fn evaluations(&self) -> u64 {
        self.evaluations.load(Ordering::Relaxed)
    }

    /// How many bytes of values are remembered now.
    pub fn remembered_bytes(&self) -> usize {
        self.memo.bytes()
    }

    /// The files read so far, with the SHA-256 of their bytes.
    pub fn inputs(&self) -> Vec<(String, String)> {
        self.inputs.read()
    }

    /// The text that a span points into.
    pub fn source(&self, id: SourceId) -> Option<Source> {
        self.sources.get(&id).cloned()
    }

    /// Say what people call a cell, before it is run: messages then use that name instead of its id.
    pub fn name_cell(&mut self, cell: &str, name: &str) {
        self.names.insert(Arc::from(cell), name.to_owned());
    }

    /// What people call a cell: the name it was given, or its id.
    pub fn cell_name<'a>(&'a self, cell: &'a str) -> &'a str {
        self.names.get(cell).map_or(cell, String::as_str)
    }

    /// Say that cells are gone from the notebook: what they define stays, and what depends on it says so.
    pub fn mark_deleted(&mut self, cells: &[&str]) {
        for definition in self.definitions.values.values_mut() {
            definition.deleted |= cells.contains(&&*definition.cell);
            definition.rivals.retain(|cell| !cells.contains(&&**cell));
        }
        for function in self.definitions.functions.values_mut() {
            let function = Arc::make_mut(function);
            function.deleted |= cells.contains(&&*function.cell);
            function.rivals.retain(|cell| !cells.contains(&&**cell));
        }
        self.displays.retain(|display| !cells.contains(&&*display.cell));
    }

    /// Names that more than one cell defines, with the cell in force and the others.
    pub fn contested_names(&self) -> Vec<(String, String, Vec<String>)> {
        let values = self.definitions.values.iter();
        let values = values.map(|(name, found)| (name.to_string(), &found.cell, &found.rivals));
        let functions = self.definitions.functions.iter();
        let functions = functions.map(|(name, found)| (function_key(name), &found.cell, &found.rivals));
        values
            .chain(functions)
            .filter(|(_, _, rivals)| !rivals.is_empty())
            .map(|(name, cell, rivals)| {
                (name, cell.to_string(), rivals.iter().map(ToString::to_string).collect())
            })
            .collect()
    }

    /// Run a cell: install its definitions, show its bare expressions, and evaluate afresh what moved elsewhere.
    ///
    /// A cell with a syntax error installs nothing. A name that the cell defined before and no longer does is removed.
    pub fn run_cell(&mut self, cell: &str, text: &str) -> CellReply {
        // On a thread of the pool, whose stack is deep enough for everything that the caps let through.
        let threads = self.threads.clone();
        let run = std::panic::AssertUnwindSafe(|| threads.install(|| self.run_here(cell, text)));
        std::panic::catch_unwind(run).unwrap_or_else(|_| {
            let fault = super::evaluate::internal("this cell could not be run to its end");
            let span = Span::new(SourceId(self.next_source.saturating_sub(1)), 0, text.len());
            CellReply { problems: vec![fault.at(span)], ..CellReply::default() }
        })
    }

    fn run_here(&mut self, cell: &str, text: &str) -> CellReply {
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        let source = self.add_source(cell, text);
        self.cancellation.reset();
        self.inputs.look_again();
        let program = match parse(text, source) {
            Ok(program) => program,
            Err(error) => {
                return CellReply {
                    problems: error.diagnostics,
                    incomplete: error.incomplete,
                    ..CellReply::default()
                };
            }
        };
        let cell: Arc<str> = Arc::from(cell);
        let mut reply = CellReply::default();
        let before = self.bindings();
        let shown = match self.install(&cell, program, &mut reply) {
            Ok(shown) => shown,
            Err(problems) => {
                reply.problems = problems;
                return reply;
            }
        };
        reply.installed = true;
        let changed = changed(&before, &self.bindings());
        self.displays.retain(|display| display.cell != cell);
        let mut used: usize = self.displays.iter().map(|display| display.cost).sum();
        for (expression, span_text) in shown {
            let (node, cost) =
                resolve(&self.definitions, None, &expression, SESSION_LIMIT.saturating_sub(used));
            used += cost;
            let fingerprint = Parts::new("not evaluated").finish();
            let id = self.next_display;
            self.next_display += 1;
            self.displays.push(Display {
                id,
                cell: cell.clone(),
                text: span_text,
                expression,
                node,
                cost,
                fingerprint,
            });
        }
        self.evaluate(&cell, &changed, &mut reply);
        self.forget_sources(&reply);
        reply
    }

    /// Keep a text that spans will point into, under the name of its cell.
    pub(super) fn add_source(&mut self, cell: &str, text: &str) -> SourceId {
        let id = SourceId(self.next_source);
        self.next_source += 1;
        let name = self.cell_name(cell).to_owned();
        self.sources.insert(id, Source { id, name, text: Arc::from(text) });
        self.newest.insert(Arc::from(cell), id);
        id
    }

    /// Names with what they are bound to, to tell what a cell changed.
    fn bindings(&self) -> BTreeMap<String, String> {
        let values = self
            .definitions
            .values
            .iter()
            .map(|(name, definition)| (name.to_string(), canonical(&definition.expression)));
        let functions = self.definitions.functions.iter().map(|(name, function)| {
            (format!("{name}({})", function.parameters.join(", ")), canonical(&function.body))
        });
        values.chain(functions).collect()
    }

    /// Check and install the definitions of a cell; returns its bare expressions with their text.
    fn install(
        &mut self,
        cell: &Arc<str>,
        program: Program,
        reply: &mut CellReply,
    ) -> Result<Vec<(Expression, String)>, Vec<Diagnostic>> {
        let mut problems = Vec::new();
        let (mut names, mut functions) = (BTreeSet::new(), BTreeSet::new());
        for statement in &program.statements {
            let (name, span, first) = match &statement.kind {
                StatementKind::Define { name, name_span, .. } => {
                    (name, *name_span, names.insert(name.clone()))
                }
                StatementKind::Function { name, name_span, parameters, .. } => {
                    if let Err(problem) = Definitions::check_function(name, *name_span, parameters) {
                        problems.push(problem);
                    }
                    (name, *name_span, functions.insert(name.clone()))
                }
                StatementKind::Show(_) => continue,
            };
            if !first {
                let fault = Fault::new("defined-twice", format!("`{name}` is defined twice in this cell"))
                    .help("a name is bound once: give the second another name");
                problems.push(fault.at(span));
            }
        }
        if !problems.is_empty() {
            return Err(problems);
        }
        self.definitions.leave_cell(cell, &names, &functions);
        let functions_before: Vec<(String, String)> = self.function_texts();
        let mut shown = Vec::new();
        let mut values = Vec::new();
        for Statement { kind, span } in program.statements {
            match kind {
                StatementKind::Show(expression) => {
                    let text = self
                        .sources
                        .get(&span.source)
                        .and_then(|source| source.text.get(span.start..span.end));
                    shown.push((expression, text.unwrap_or("").replace("\r\n", "\n")));
                }
                StatementKind::Function { name, name_span, parameters, body } => {
                    if let Some(notice) = self.overruled(&function_key(&name)) {
                        reply.notices.push(notice);
                        continue;
                    }
                    let parameters = parameters.into_iter().map(|(name, _)| name).collect();
                    if let Some(old) =
                        self.definitions.define_function(&name, cell, name_span, parameters, body)
                    {
                        reply.notices.push(taken_over(&function_key(&name), self.cell_name(&old)));
                    }
                }
                StatementKind::Define { name, name_span, expression } => match self.overruled(&name) {
                    Some(notice) => reply.notices.push(notice),
                    None => values.push((name, name_span, expression)),
                },
            }
        }
        // Functions first: the order of lines in a cell is free.
        for (name, name_span, expression) in values {
            if let Some(old) = self.definitions.define(&name, cell, name_span, expression) {
                reply.notices.push(taken_over(&name, self.cell_name(&old)));
            }
        }
        if self.function_texts() != functions_before {
            self.definitions.resolve_again();
            for display in &mut self.displays {
                (display.node, display.cost) =
                    resolve(&self.definitions, None, &display.expression, SIZE_LIMIT);
            }
        }
        Ok(shown)
    }

    fn function_texts(&self) -> Vec<(String, String)> {
        let text = |function: &Function| {
            format!("({}) = {}", function.parameters.join(", "), canonical(&function.body))
        };
        self.definitions.functions.iter().map(|(name, function)| (name.clone(), text(function))).collect()
    }

    /// Look at the definitions in force with an evaluator, on a thread whose stack is deep enough; nothing where
    /// that fails.
    pub(super) fn consult<T: Send>(
        &self,
        ask: impl FnOnce(&Evaluator<'_>, &Environment) -> T + Send,
    ) -> Option<T> {
        self.cancellation.reset();
        let graph = Graph::of(&self.definitions);
        let consulted = std::panic::AssertUnwindSafe(|| {
            self.threads.install(|| {
                let evaluator = Evaluator {
                    definitions: &self.definitions,
                    graph: &graph,
                    inputs: &self.inputs,
                    memo: &self.memo,
                    cancellation: &self.cancellation,
                    evaluations: &self.evaluations,
                    caches: Caches::default(),
                };
                let environment = environment(&evaluator);
                prepare(&evaluator, &environment);
                ask(&evaluator, &environment)
            })
        });
        std::panic::catch_unwind(consulted).ok()
    }

    fn evaluate(&mut self, cell: &Arc<str>, changed: &[String], reply: &mut CellReply) {
        let graph = Graph::of(&self.definitions);
        let evaluator = Evaluator {
            definitions: &self.definitions,
            graph: &graph,
            inputs: &self.inputs,
            memo: &self.memo,
            cancellation: &self.cancellation,
            evaluations: &self.evaluations,
            caches: Caches::default(),
        };
        let (own, others): (Vec<&mut Display>, Vec<&mut Display>) =
            self.displays.iter_mut().partition(|display| display.cell == *cell);
        let environment = environment(&evaluator);
        prepare(&evaluator, &environment);
        check(&evaluator, cell, &environment, reply);
        for display in own {
            let output = show(&evaluator, display, &environment, &[]);
            reply.outputs.push(output);
        }
        for display in others {
            let print = print_of(&evaluator, display, &environment);
            if print != display.fingerprint {
                let used = words_behind(&self.definitions, display);
                let files = self.inputs.changed();
                let by: Vec<String> =
                    changed.iter().chain(&files).filter(|name| used.contains(bare(name))).cloned().collect();
                reply.moved.push(show(&evaluator, display, &environment, &by));
            }
        }
    }

    /// Keep the texts that definitions, displays or the reply still point into.
    fn forget_sources(&mut self, reply: &CellReply) {
        let mut kept = self.definitions.sources();
        kept.extend(self.displays.iter().map(|display| display.expression.span.source));
        let outputs = reply.outputs.iter().chain(&reply.moved);
        let failed = outputs.filter_map(|output| output.result.as_ref().err());
        for diagnostic in failed.chain(&reply.problems).chain(&reply.waiting) {
            kept.insert(diagnostic.primary.span.source);
            kept.extend(diagnostic.secondary.iter().map(|mark| mark.span.source));
        }
        kept.extend(self.newest.values());
        self.sources.retain(|id, _| kept.contains(id));
    }
}

/// A function's name without its parameters.
fn bare(name: &str) -> &str {
    name.split('(').next().unwrap_or(name)
}

/// Every name, function and text that a display's result can follow from, and the settings.
fn words_behind(definitions: &Definitions, display: &Display) -> BTreeSet<String> {
    let mut words: BTreeSet<String> = SETTINGS.iter().map(|name| (*name).to_owned()).collect();
    let mut waiting: Vec<&Expression> = vec![&display.expression];
    while let Some(expression) = waiting.pop() {
        let mut found = Vec::new();
        expression.words(&mut found);
        for word in found {
            if words.insert(word.clone()) {
                waiting.extend(definitions.values.get(&*word).map(|definition| &definition.expression));
                waiting.extend(definitions.functions.get(&word).map(|function| &function.body));
            }
        }
    }
    words
}

fn taken_over(name: &str, cell: &str) -> String {
    format!("`{name}` was defined in {cell}; this cell's definition is in force now")
}

/// Names that are bound to something else than before.
fn changed(before: &BTreeMap<String, String>, after: &BTreeMap<String, String>) -> Vec<String> {
    let names: BTreeSet<&String> = before.keys().chain(after.keys()).collect();
    names.into_iter().filter(|name| before.get(*name) != after.get(*name)).cloned().collect()
}

/// The settings in force.
pub(super) fn environment(evaluator: &Evaluator<'_>) -> Environment {
    let mut environment = Environment::empty();
    let setting = |name: &str| -> Option<Result<Arc<Value>, Stop>> {
        let definition = evaluator.definitions.values.get(name)?;
        if let Some(problem) = evaluator.graph.problems.get(name) {
            return Some(Err(Stop::Placed(Box::new(problem.clone()))));
        }
        let node = match &definition.node {
            Ok(node) => node,
            Err(problem) => return Some(Err(Stop::Placed(Box::new(problem.clone())))),
        };
        Some(evaluator.shape(node, &Environment::empty()).and_then(|_| {
            evaluator.value(node, &Environment::empty(), Path::Nominal).map(|(value, _)| value)
        }))
    };
    for name in ["members", "seed"] {
        let problem = evaluator.definitions.values.get(name).and_then(|definition| match &definition.node {
            Ok(node) => super::settings::check(evaluator, name, node),
            Err(problem) => Some(problem.clone()),
        });
        if let Some(problem) = problem {
            environment.members_problem = Some(Arc::new(problem));
            continue;
        }
        if let Some(Ok(value)) = setting(name)
            && let Value::Quantity(number) = value.as_ref()
        {
            match name {
                "members" => environment.members = number.first() as u64,
                _ => environment.seed = number.first() as u64,
            }
        }
    }
    match setting("clock") {
        None => {}
        Some(Ok(value)) => {
            if let Value::Clock(clock) = value.as_ref() {
                environment = environment.with_clock(clock.clone());
            }
        }
        Some(Err(Stop::Placed(problem))) => environment = environment.without_clock(Arc::from(problem)),
        Some(Err(Stop::Fault(_))) => {}
    }
    environment
}

/// Evaluate shapes along the order of references, so that no chain of definitions is walked by recursion.
pub(super) fn prepare(evaluator: &Evaluator<'_>, environment: &Environment) {
    for name in &evaluator.graph.order {
        let Some(definition) = evaluator.definitions.values.get(name) else { continue };
        if let (Ok(node), false) = (&definition.node, evaluator.graph.problems.contains_key(name)) {
            // What is wrong is told where the name is defined or shown.
            let _ = evaluator.shape(node, environment);
            let _ = evaluator.fingerprint(node, environment);
        }
    }
}

/// Check the definitions of a cell, so that their errors do not wait to be shown.
pub(super) fn check(evaluator: &Evaluator<'_>, cell: &str, environment: &Environment, reply: &mut CellReply) {
    for (name, definition) in &evaluator.definitions.values {
        if &*definition.cell != cell {
            continue;
        }
        let stem = |name: &str| name.to_lowercase().trim_end_matches('s').to_owned();
        if let Some(setting) =
            SETTINGS.iter().find(|setting| **setting != &**name && stem(setting) == stem(name))
        {
            reply.notices.push(format!("`{name}` is a name of yours; the setting is called `{setting}`"));
        }
        let problem = match (&definition.node, evaluator.graph.problems.get(name)) {
            (_, Some(problem)) | (Err(problem), None) => Some(problem.clone()),
            (Ok(node), None) => match super::settings::check(evaluator, name, node) {
                Some(problem) => Some(problem),
                None => match evaluator.shape(node, environment) {
                    Ok(_) => None,
                    Err(Stop::Placed(problem)) => Some(*problem),
                    Err(Stop::Fault(fault)) => Some(fault.at(node.span)),
                },
            },
        };
        match problem {
            Some(problem) if problem.code == "not-defined" => reply.waiting.push(problem),
            // A fault in another cell's definition is told there.
            Some(problem) if reply.problems.contains(&problem) => {}
            Some(problem) => reply.problems.push(problem),
            None => {}
        }
    }
}

fn print_of(evaluator: &Evaluator<'_>, display: &Display, environment: &Environment) -> Fingerprint {
    match &display.node {
        Ok(node) => {
            let shape = evaluator.shape(node, environment);
            match shape {
                Ok(_) => evaluator.fingerprint(node, environment),
                Err(stop) => broken(&stop),
            }
        }
        Err(problem) => broken(&Stop::Placed(Box::new(problem.clone()))),
    }
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

fn show(
    evaluator: &Evaluator<'_>,
    display: &mut Display,
    environment: &Environment,
    changed: &[String],
) -> Output {
    display.fingerprint = print_of(evaluator, display, environment);
    let result = match &display.node {
        Ok(node) => evaluator.shape(node, environment).and_then(|_| evaluator.shown(node, environment)),
        Err(problem) => Err(Stop::Placed(Box::new(problem.clone()))),
    };
    let (result, mut notes) = match result {
        Ok((shown, notes)) => (Ok(shown), notes.to_vec()),
        Err(Stop::Placed(problem)) => (Err(*problem), Vec::new()),
        Err(Stop::Fault(fault)) => (Err(fault.at(display.expression.span)), Vec::new()),
    };
    for word in words_behind(evaluator.definitions, display) {
        let name = evaluator.definitions.values.get(&*word).filter(|definition| definition.deleted);
        let function = evaluator.definitions.functions.get(&word).filter(|function| function.deleted);
        let word = if function.is_some() { function_key(&word) } else { word };
        if name.is_some() || function.is_some() {
            notes.push(Arc::from(format!("`{word}` is defined in a cell that was deleted")));
        }
    }
    Output {
        display: display.id,
        cell: display.cell.clone(),
        expression: display.text.clone(),
        fingerprint: display.fingerprint,
        result,
        notes,
        refreshed_by: changed.to_vec(),
    }
}
