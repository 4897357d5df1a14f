//! The session's face: what running a cell installs. What it shows and moves stands in `displays`.

use std::collections::{BTreeMap, BTreeSet};
use std::path::PathBuf;
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::{Arc, OnceLock};

use super::definitions::{Definitions, Function, SESSION_LIMIT};
use super::displays::{Audience, Display, Output, Pending, Silent};
use super::environment::Environment;
use super::evaluate::{Caches, Evaluator, internal};
use super::graph::Graph;
use super::inputs::{FILE_LIMIT, Inputs};
use super::memo::Memo;
use super::outside::function_key;
use super::resolve::{SIZE_LIMIT, resolve};
use super::settings::environment;
use super::show::Progress;
use crate::base::{Cancellation, Diagnostic, Fault, Source, SourceId, Span};
use crate::language::{Expression, Program, Statement, StatementKind, canonical, parse};

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
    /// A thread to look at definitions on while the others compute; made when it is first needed.
    desk: OnceLock<rayon::ThreadPool>,
    progress: Progress,
}

/// What running a cell gave.
#[derive(Debug, Default)]
pub struct CellReply {
    /// The shown expressions of the cell, in order.
    pub outputs: Vec<Output>,
    /// Displays of other cells whose results moved, each after those of what it follows from.
    pub moved: Vec<Output>,
    /// Displays of other cells whose results moved and are not evaluated afresh yet; the next execution does it.
    pub postponed: Vec<Pending>,
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
            threads: Arc::new(pool(threads.unwrap_or(0))),
            desk: OnceLock::new(),
            progress: Progress::default(),
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

    /// How many blocks of members are done, and of how many, of what is being computed; 0 of 0 where that is not known.
    pub fn progress(&self) -> (u64, u64) {
        self.progress.read()
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

    /// Say that cells are gone from the notebook: what they define stays, and what depends on it says so. What they
    /// show is evaluated no more.
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

    /// Forget a cell that is not run again: its displays, and its text where nothing is defined in it.
    pub fn retire_cell(&mut self, cell: &str) {
        self.displays.retain(|display| &*display.cell != cell);
        let homes = self.definitions.values.values().map(|definition| &definition.cell);
        let homes = homes.chain(self.definitions.functions.values().map(|function| &function.cell));
        if homes.into_iter().all(|home| &**home != cell) {
            self.names.remove(cell);
            self.newest.remove(cell);
        }
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
        let mut reply = self.install_cell(cell, text);
        self.show_cell(cell, &mut reply, &mut Silent);
        self.settle(&reply);
        reply
    }

    /// The first step of [`Session::run_cell`]: read the text and put its definitions in force. Takes no longer than
    /// reading; [`Session::show_cell`] and [`Session::settle`] follow.
    pub fn install_cell(&mut self, cell: &str, text: &str) -> CellReply {
        // On a thread of the pool, whose stack is deep enough for everything that the caps let through.
        let threads = self.threads.clone();
        let install = std::panic::AssertUnwindSafe(|| threads.install(|| self.install_here(cell, text)));
        std::panic::catch_unwind(install).unwrap_or_else(|_| self.broken(text.len()))
    }

    /// The second step of [`Session::run_cell`]: check the cell's definitions, evaluate what it shows and what moved
    /// elsewhere, and tell each result as soon as it is there. Whoever holds the session may look things up meanwhile.
    pub fn show_cell(&self, cell: &str, reply: &mut CellReply, audience: &mut dyn Audience) {
        if !reply.installed {
            return audience.checked(self, reply);
        }
        let show = std::panic::AssertUnwindSafe(|| {
            self.threads.install(|| self.show_here(cell, reply, audience));
        });
        if std::panic::catch_unwind(show).is_err() {
            reply.problems.extend(self.broken(0).problems);
        }
    }

    fn broken(&self, length: usize) -> CellReply {
        let fault = internal("this cell could not be run to its end");
        let span = Span::new(SourceId(self.next_source.saturating_sub(1)), 0, length);
        CellReply { problems: vec![fault.at(span)], ..CellReply::default() }
    }

    fn install_here(&mut self, cell: &str, text: &str) -> CellReply {
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
        self.displays.retain(|display| display.cell != cell);
        let changed = changed(&before, &self.bindings());
        for display in &mut self.displays {
            display.add_changes(&changed);
        }
        let mut used: usize = self.displays.iter().map(|display| display.cost).sum();
        for (expression, text) in shown {
            let (node, cost) =
                resolve(&self.definitions, None, &expression, SESSION_LIMIT.saturating_sub(used));
            used += cost;
            let id = self.next_display;
            self.next_display += 1;
            self.displays.push(Display::new(id, cell.clone(), text, expression, node, cost));
        }
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

    /// The text that a cell was last run with.
    pub(super) fn newest_source(&self, cell: &str) -> Option<SourceId> {
        self.newest.get(cell).copied()
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

    /// Look at the definitions in force with an evaluator, on a thread of its own whose stack is deep enough; nothing
    /// where that fails. A computation that is going on is not disturbed.
    pub(super) fn consult<T: Send>(
        &self,
        ask: impl FnOnce(&Evaluator<'_>, &Environment) -> T + Send,
    ) -> Option<T> {
        let desk = self.desk.get_or_init(|| pool(1));
        let consulted = std::panic::AssertUnwindSafe(|| {
            desk.install(|| {
                let graph = Graph::of(&self.definitions);
                let never = Cancellation::new();
                let evaluator = self.evaluator(&graph, &never);
                let environment = environment(&evaluator);
                evaluator.prepare(&environment);
                ask(&evaluator, &environment)
            })
        });
        std::panic::catch_unwind(consulted).ok()
    }

    pub(super) fn evaluator<'s>(&'s self, graph: &'s Graph, cancellation: &'s Cancellation) -> Evaluator<'s> {
        Evaluator {
            definitions: &self.definitions,
            graph,
            inputs: &self.inputs,
            memo: &self.memo,
            cancellation,
            evaluations: &self.evaluations,
            progress: &self.progress,
            caches: Caches::default(),
        }
    }

    /// The last step of [`Session::run_cell`]: remember what was told, so that only what differs from it moves.
    pub fn settle(&mut self, reply: &CellReply) {
        let files = self.inputs.changed();
        for display in &mut self.displays {
            display.add_changes(&files);
            let told = reply.outputs.iter().chain(&reply.moved).find(|output| output.display == display.id);
            if let Some(output) = told {
                display.settle(output);
            }
        }
        self.forget_sources(reply);
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

/// A pool of so many threads with deep stacks, one for each processor where it is 0.
fn pool(threads: usize) -> rayon::ThreadPool {
    let builder = rayon::ThreadPoolBuilder::new().stack_size(STACK).num_threads(threads);
    // Where the system gives no further threads, the calling one does the work.
    let pool = builder
        .build()
        .or_else(|_| rayon::ThreadPoolBuilder::new().num_threads(1).use_current_thread().build());
    match pool {
        Ok(pool) => pool,
        Err(error) => unreachable!("a pool of the current thread alone: {error}"),
    }
}

fn taken_over(name: &str, cell: &str) -> String {
    format!("`{name}` was defined in {cell}; this cell's definition is in force now")
}

/// Names that are bound to something else than before.
fn changed(before: &BTreeMap<String, String>, after: &BTreeMap<String, String>) -> Vec<String> {
    let names: BTreeSet<&String> = before.keys().chain(after.keys()).collect();
    names.into_iter().filter(|name| before.get(*name) != after.get(*name)).cloned().collect()
}
