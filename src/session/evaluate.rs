//! Shape, fingerprint and value of nodes in an environment; everything a body may ask for.

use std::collections::{HashMap, HashSet};
use std::sync::atomic::{AtomicU64, AtomicUsize, Ordering};
use std::sync::{Arc, Mutex, PoisonError};

use super::blame::placed;
use super::context::NodeContext;
use super::definitions::Definitions;
use super::environment::{DEFAULT_MEMBERS, DEFAULT_SEED, Environment};
use super::fingerprint::Fingerprint;
use super::graph::Graph;
use super::inputs::{Inputs, UNREADABLE};
use super::memo::{Memo, Notes};
use super::node::{CallNode, Node, NodeKind};
use super::prints::Names;
use super::resolve::{SETTINGS, SIZE_LIMIT};
use super::show::Progress;
use crate::base::{Cancellation, Diagnostic, Fault, INTERRUPTED, Span};
use crate::catalogue::{self, Body, Call, Path, ReadsClock, Stop, check_arguments, nearest};
use crate::value::{Quantity, Shape, Unit, Value};

/// A value with the notes made on the way to it.
pub(super) type Evaluated = (Arc<Value>, Notes);

/// For so many unknown names a near one is looked for.
const SUGGESTIONS_LIMIT: usize = 100;

/// The most clocks that the arguments of one execution may be evaluated under.
pub(super) const CLOCKS_LIMIT: usize = 2_000;

/// The most bytes that a value may take for one block of members.
const BLOCK_BYTES_LIMIT: f64 = 1e9;

/// The most values that a list may hold in all, lists inside it included.
const LIST_LIMIT: usize = 10_000;

pub(super) struct Evaluator<'s> {
    pub(super) definitions: &'s Definitions,
    pub(super) graph: &'s Graph,
    pub(super) inputs: &'s Inputs,
    pub(super) memo: &'s Memo,
    pub(super) cancellation: &'s Cancellation,
    /// Counts the bodies that were called.
    pub(super) evaluations: &'s AtomicU64,
    pub(super) progress: &'s Progress,
    pub(super) caches: Caches,
}

/// What is remembered for the length of one execution, by the place of a node in memory: nodes outlive it.
#[derive(Default)]
pub(super) struct Caches {
    pub(super) shapes: Mutex<HashMap<(usize, u64), Result<Shape, Stop>>>,
    pub(super) prints: Mutex<HashMap<(usize, u64, Names), Fingerprint>>,
    pub(super) uncertain: Mutex<HashMap<usize, bool>>,
    pub(super) items: Mutex<HashMap<(usize, usize), Arc<Node>>>,
    pub(super) expanded: AtomicUsize,
    /// How many unknown names were compared with the known ones.
    pub(super) searched: AtomicUsize,
    /// The clocks that arguments were evaluated under.
    pub(super) clocks: Mutex<HashSet<u64>>,
    /// The settings where nobody sets them.
    pub(super) defaults: Mutex<HashMap<&'static str, Arc<Node>>>,
    /// Nodes made on the way: they must outlive what is remembered by their place.
    pub(super) kept: Mutex<Vec<Arc<Node>>>,
}

pub(super) fn lock<T>(mutex: &Mutex<T>) -> std::sync::MutexGuard<'_, T> {
    mutex.lock().unwrap_or_else(PoisonError::into_inner)
}

pub(super) fn address(node: &Arc<Node>) -> usize {
    Arc::as_ptr(node) as usize
}

impl Evaluator<'_> {
    /// The node that a name is bound to, and the environment it is evaluated in.
    pub(super) fn definition(
        &self,
        name: &Arc<str>,
        span: Span,
        environment: &Environment,
    ) -> Result<(Arc<Node>, Environment), Stop> {
        if let Some(problem) = self.graph.problems.get(name) {
            return Err(Stop::Placed(Box::new(problem.clone())));
        }
        let setting = SETTINGS.contains(&&**name);
        let environment = if setting { Environment::empty() } else { environment.clone() };
        match self.definitions.values.get(name) {
            Some(definition) => match &definition.node {
                Ok(node) => Ok((node.clone(), environment)),
                Err(problem) => Err(Stop::Placed(Box::new(problem.clone()))),
            },
            None => match &**name {
                "members" => Ok((self.default_setting("members", DEFAULT_MEMBERS), environment)),
                "seed" => Ok((self.default_setting("seed", DEFAULT_SEED), environment)),
                _ => Err(Stop::Placed(Box::new(self.not_defined(name).at(span)))),
            },
        }
    }

    fn default_setting(&self, name: &'static str, value: u64) -> Arc<Node> {
        let make = || {
            let value = Value::Quantity(Quantity::certain(value as f64, Unit::number()));
            Node::new(NodeKind::Constant(Arc::new(value)), Span::default(), Arc::from(name))
        };
        lock(&self.caches.defaults).entry(name).or_insert_with(make).clone()
    }

    fn not_defined(&self, name: &str) -> Fault {
        let fault = Fault::new("not-defined", format!("`{name}` is not defined yet"));
        if catalogue::find(name).is_some() || self.definitions.functions.contains_key(name) {
            return Fault::new("not-defined", format!("`{name}` is a function, and no name is defined so"))
                .help(format!("a call has brackets: `{name}(…)`"));
        }
        let names = self.definitions.values.keys().map(|name| &**name);
        // Many unknown names among many known ones would take long, and nobody reads so many suggestions.
        let searched = self.caches.searched.fetch_add(1, Ordering::Relaxed);
        let near = if searched < SUGGESTIONS_LIMIT { nearest(name, names) } else { None };
        match near {
            Some(near) => fault.help(format!("did you mean `{near}`?")),
            None => fault.help(format!("define it in this cell or another: `{name} = …`")),
        }
    }

    /// Whether a node has members.
    pub(super) fn is_uncertain(&self, node: &Arc<Node>) -> bool {
        if let Some(known) = lock(&self.caches.uncertain).get(&address(node)) {
            return *known;
        }
        let result = match &node.kind {
            NodeKind::Constant(_) | NodeKind::Variable(_) => false,
            NodeKind::Reference(name) => match self.definition(name, node.span, &Environment::empty()) {
                Ok((target, _)) => self.is_uncertain(&target),
                Err(_) => false,
            },
            NodeKind::Call(call) => match call.entry.body {
                Body::AcrossMembers(_) => false,
                Body::PerMember(_) => {
                    let own = call.entry.random || gives_ensemble(call);
                    own || call.slots.iter().any(|slot| self.is_uncertain(slot))
                }
            },
            NodeKind::List(_) | NodeKind::Item { .. } | NodeKind::ForEach { .. } => {
                node.children().into_iter().any(|child| self.is_uncertain(child))
            }
        };
        lock(&self.caches.uncertain).insert(address(node), result);
        result
    }

    /// Kind and unit of a node, checked all the way down.
    pub(super) fn shape(&self, node: &Arc<Node>, environment: &Environment) -> Result<Shape, Stop> {
        let key = (address(node), environment.key);
        if let Some(known) = lock(&self.caches.shapes).get(&key) {
            return known.clone();
        }
        let result = self.find_shape(node, environment);
        lock(&self.caches.shapes).insert(key, result.clone());
        result
    }

    fn find_shape(&self, node: &Arc<Node>, environment: &Environment) -> Result<Shape, Stop> {
        match &node.kind {
            NodeKind::Constant(value) => Ok(value.shape()),
            NodeKind::List(items) => {
                let shapes =
                    items.iter().map(|item| self.shape(item, environment)).collect::<Result<Vec<_>, _>>()?;
                limited(Shape::List(shapes), node.span)
            }
            NodeKind::Reference(name) => {
                let (target, environment) = self.definition(name, node.span, environment)?;
                self.shape(&target, &environment)
            }
            NodeKind::Item { list, index } => match self.shape(list, environment)? {
                Shape::List(items) => {
                    items.get(*index).cloned().ok_or_else(|| internal("an item is missing").into())
                }
                _ => Err(internal("an item of no list").into()),
            },
            NodeKind::ForEach { .. } => {
                let items = self.items(node, environment)?;
                let shapes =
                    items.iter().map(|item| self.shape(item, environment)).collect::<Result<Vec<_>, _>>()?;
                limited(Shape::List(shapes), node.span)
            }
            NodeKind::Variable(_) => Err(internal("a loop variable stands outside its loop").into()),
            NodeKind::Call(call) => {
                let context = NodeContext::new(self, node, call, environment, Path::Nominal);
                let view = Call::new(call.entry.signature.parameters, &call.given, &context);
                check_arguments(&view, call.entry.sign())
                    .and_then(|()| (call.entry.shape)(&view))
                    .map_err(|stop| placed(stop, node, call))
            }
        }
    }

    /// The body of a `for` with each item put in.
    pub(super) fn items(&self, node: &Arc<Node>, environment: &Environment) -> Result<Vec<Arc<Node>>, Stop> {
        let NodeKind::ForEach { body, variable, list } = &node.kind else { return Ok(Vec::new()) };
        let shape = self.shape(list, environment)?;
        let Shape::List(shapes) = &shape else {
            return Err(Fault::new(
                "wrong-argument",
                format!("`for` goes over a list, not over {}", shape.describe()),
            )
            .at(list.span)
            .into_stop());
        };
        let whole = self.caches.expanded.load(Ordering::Relaxed) + shapes.len() * body.size;
        if whole > 5 * SIZE_LIMIT {
            return Err(Fault::new("too-large", "the loops of this cell grow too large")
                .help("go over fewer items, or give parts names of their own")
                .at(node.span)
                .into_stop());
        }
        let made = (0..shapes.len()).map(|index| {
            let key = (address(node), index);
            if let Some(known) = lock(&self.caches.items).get(&key) {
                return known.clone();
            }
            self.caches.expanded.fetch_add(body.size, Ordering::Relaxed);
            let item = match &list.kind {
                NodeKind::List(items) => items.get(index).cloned(),
                _ => None,
            };
            let item = item.unwrap_or_else(|| {
                let label = Arc::from(format!("{}[{index}]", list.label));
                Node::new(NodeKind::Item { list: list.clone(), index }, list.span, label)
            });
            let made = body.with_item(*variable, &item);
            lock(&self.caches.kept).push(item);
            lock(&self.caches.items).insert(key, made.clone());
            made
        });
        Ok(made.collect())
    }

    /// What the items of a shown list are called: those of a `for` by what stands at each, others by their names.
    pub(super) fn item_names(&self, node: &Arc<Node>, environment: &Environment) -> Vec<Arc<str>> {
        let mut current = node.clone();
        while let NodeKind::Reference(name) = &current.kind {
            match self.definition(name, current.span, environment) {
                Ok((target, _)) => current = target,
                Err(_) => return Vec::new(),
            }
        }
        match &current.kind {
            NodeKind::ForEach { list, .. } => self.item_labels(list, environment),
            NodeKind::List(items) => items.iter().map(|item| item.label.clone()).collect(),
            _ => Vec::new(),
        }
    }

    pub(super) fn reads_clock(&self, call: &CallNode, environment: &Environment) -> bool {
        match call.entry.reads_clock {
            ReadsClock::Always => true,
            ReadsClock::Never => false,
            ReadsClock::WithSeries => call
                .slots
                .iter()
                .any(|slot| self.shape(slot, environment).is_ok_and(|shape| holds_series(&shape))),
        }
    }

    /// The value of a node for the members in hand.
    pub(super) fn value(
        &self,
        node: &Arc<Node>,
        environment: &Environment,
        path: Path,
    ) -> Result<Evaluated, Stop> {
        match &node.kind {
            NodeKind::Constant(value) => Ok((value.clone(), Notes::default())),
            NodeKind::List(items) => self.list_value(items, environment, path),
            NodeKind::ForEach { .. } => {
                let items = self.items(node, environment)?;
                self.list_value(&items, environment, path)
            }
            NodeKind::Reference(name) => {
                let (target, environment) = self.definition(name, node.span, environment)?;
                self.value(&target, &environment, path)
            }
            NodeKind::Item { list, index } => {
                let (value, notes) = self.value(list, environment, path)?;
                match value.as_ref() {
                    Value::List(items) => {
                        let item =
                            items.get(*index).cloned().ok_or_else(|| internal("an item is missing"))?;
                        Ok((item, notes))
                    }
                    _ => Err(internal("an item of no list").into()),
                }
            }
            NodeKind::Variable(_) => Err(internal("a loop variable stands outside its loop").into()),
            NodeKind::Call(call) => self.call_value(node, call, environment, path),
        }
    }

    fn list_value(
        &self,
        items: &[Arc<Node>],
        environment: &Environment,
        path: Path,
    ) -> Result<Evaluated, Stop> {
        let mut values = Vec::with_capacity(items.len());
        let mut notes = Vec::new();
        for item in items {
            let (value, more) = self.value(item, environment, path)?;
            values.push(value);
            add_notes(&mut notes, &more);
        }
        Ok((Arc::new(Value::List(values)), Arc::new(notes)))
    }

    fn call_value(
        &self,
        node: &Arc<Node>,
        call: &CallNode,
        environment: &Environment,
        path: Path,
    ) -> Result<Evaluated, Stop> {
        // What is certain is the same for all members, and is computed once.
        let path = if self.is_uncertain(node) { path } else { Path::Nominal };
        let print = self.print(node, environment, Names::Counted);
        if let Some(remembered) = self.memo.get(print, path) {
            return remembered.map_err(|fault| placed(Stop::Fault(fault), node, call));
        }
        self.cancellation.check()?;
        let shape = self.shape(node, environment)?;
        if let Path::Block { count, .. } = path {
            let (nominal, _) = self.value(node, environment, Path::Nominal)?;
            let bytes = nominal.bytes() as f64 * count as f64;
            if bytes > BLOCK_BYTES_LIMIT {
                return Err(Fault::new(
                    "too-large",
                    format!("{count} members of this would take {:.1} GB", bytes / 1e9),
                )
                .help("take fewer `members`, or a clock with fewer steps")
                .at(node.span)
                .into_stop());
            }
        }
        if let Some(problem) = &environment.clock_problem
            && self.reads_clock(call, environment)
        {
            return Err(Stop::Placed(Box::new(Diagnostic::clone(problem))));
        }
        let context = NodeContext::new(self, node, call, environment, path);
        let view = Call::new(call.entry.signature.parameters, &call.given, &context);
        self.evaluations.fetch_add(1, Ordering::Relaxed);
        let result = match call.entry.body {
            Body::PerMember(body) | Body::AcrossMembers(body) => body(&view),
        };
        let notes = Arc::new(context.notes.into_inner());
        match result {
            Ok(value) => {
                debug_assert!(
                    path != Path::Nominal || value.shape() == shape,
                    "{} is not {shape:?}",
                    call.entry.name
                );
                let evaluated = (Arc::new(value), notes);
                self.memo.insert(print, path, Ok(evaluated.clone()));
                Ok(evaluated)
            }
            Err(stop) => {
                if let Stop::Fault(fault) = &stop
                    && fault.code != INTERRUPTED
                    && fault.code != UNREADABLE
                {
                    self.memo.insert(print, path, Err(fault.clone()));
                }
                Err(placed(stop, node, call))
            }
        }
    }
}

pub(super) fn internal(message: &str) -> Fault {
    Fault::new("internal", format!("{message}: this is a mistake of the program, please report it"))
}

trait IntoStop {
    fn into_stop(self) -> Stop;
}

impl IntoStop for Diagnostic {
    fn into_stop(self) -> Stop {
        Stop::Placed(Box::new(self))
    }
}

fn limited(shape: Shape, span: Span) -> Result<Shape, Stop> {
    fn leaves(shape: &Shape) -> usize {
        match shape {
            Shape::List(items) => 1 + items.iter().map(leaves).sum::<usize>(),
            Shape::Bundle(parts) => parts.len(),
            _ => 1,
        }
    }
    // Lists that hold lists double with every name; the cap keeps the shapes themselves small too.
    if leaves(&shape) > LIST_LIMIT {
        return Err(Fault::new("too-large", format!("this list holds more than {LIST_LIMIT} values"))
            .help("load long series from a file")
            .at(span)
            .into_stop());
    }
    Ok(shape)
}

/// Whether a call reads an ensemble from a file.
pub(super) fn gives_ensemble(call: &CallNode) -> bool {
    let Some(name) = call.entry.ensemble else { return false };
    let parameters = call.entry.signature.parameters;
    call.given
        .iter()
        .any(|given| parameters.get(given.parameter).is_some_and(|parameter| parameter.name == name))
}

fn holds_series(shape: &Shape) -> bool {
    match shape {
        Shape::Series(_) | Shape::Bundle(_) => true,
        Shape::List(items) => items.iter().any(holds_series),
        Shape::Quantity(_)
        | Shape::Instant(_)
        | Shape::Span
        | Shape::Range(_)
        | Shape::Clock
        | Shape::Model
        | Shape::Attribution
        | Shape::Events(_)
        | Shape::Table
        | Shape::Text => false,
    }
}

/// Add notes that are not there yet.
pub(super) fn add_notes(notes: &mut Vec<Arc<str>>, more: &[Arc<str>]) {
    let mut known: HashSet<Arc<str>> = notes.iter().cloned().collect();
    for note in more {
        if known.insert(note.clone()) {
            notes.push(note.clone());
        }
    }
}
