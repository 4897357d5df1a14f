//! What the body of an entry may ask of the session.

use std::cell::RefCell;
use std::sync::Arc;
use std::sync::atomic::Ordering;

use super::environment::Environment;
use super::evaluate::{CLOCKS_LIMIT, Evaluated, Evaluator, add_notes, internal, lock};
use super::node::{CallNode, Node};
use super::prints::Names;
use crate::base::{Cancellation, Fault};
use crate::catalogue::{Body, Call, Context, InputFile, Path, Stop};
use crate::science::draws;
use crate::value::{Clock, Shape, Spread, Value};

/// What the body of one node sees of the session.
pub(super) struct NodeContext<'e> {
    evaluator: &'e Evaluator<'e>,
    node: &'e Arc<Node>,
    call: Option<&'e CallNode>,
    environment: &'e Environment,
    path: Path,
    pub(super) notes: RefCell<Vec<Arc<str>>>,
}

impl<'e> NodeContext<'e> {
    pub(super) fn new(
        evaluator: &'e Evaluator<'e>,
        node: &'e Arc<Node>,
        call: &'e CallNode,
        environment: &'e Environment,
        path: Path,
    ) -> Self {
        Self { evaluator, node, call: Some(call), environment, path, notes: RefCell::default() }
    }

    /// The context in which a finished value is shown.
    pub(super) fn showing(
        evaluator: &'e Evaluator<'e>,
        node: &'e Arc<Node>,
        environment: &'e Environment,
        path: Path,
    ) -> Self {
        Self { evaluator, node, call: None, environment, path, notes: RefCell::default() }
    }

    fn slot(&self, slot: usize) -> Result<&'e Arc<Node>, Stop> {
        self.call
            .and_then(|call| call.slots.get(slot))
            .ok_or_else(|| internal("an argument is missing").into())
    }

    fn take(&self, (value, notes): Evaluated) -> Arc<Value> {
        add_notes(&mut self.notes.borrow_mut(), &notes);
        value
    }
}

impl Context for NodeContext<'_> {
    fn shape(&self, slot: usize) -> Result<Shape, Stop> {
        self.evaluator.shape(self.slot(slot)?, self.environment)
    }

    fn value(&self, slot: usize) -> Result<Arc<Value>, Stop> {
        self.evaluator
            .value(self.slot(slot)?, self.environment, self.path)
            .map(|evaluated| self.take(evaluated))
    }

    fn value_under(&self, slot: usize, clock: Arc<Clock>) -> Result<Arc<Value>, Stop> {
        let environment = self.environment.with_clock(clock);
        let node = self.slot(slot)?;
        let mut clocks = lock(&self.evaluator.caches.clocks);
        clocks.insert(environment.key);
        if clocks.len() > CLOCKS_LIMIT {
            return Err(Fault::new(
                "too-large",
                format!("this cell asks for more than {CLOCKS_LIMIT} different clocks"),
            )
            .help(
                "lags of lags make a clock for each combination: bring parts onto the clock with `on` first",
            )
            .into());
        }
        drop(clocks);
        self.evaluator.shape(node, &environment)?;
        self.evaluator.value(node, &environment, self.path).map(|evaluated| self.take(evaluated))
    }

    fn own_value(&self) -> Result<Arc<Value>, Stop> {
        let call = self.call.ok_or_else(|| internal("no call"))?;
        // The shape is being asked for, so the body must not ask for it again.
        let print = self.evaluator.print(self.node, self.environment, Names::Counted);
        if let Some(remembered) = self.evaluator.memo.get(print, Path::Nominal) {
            return Ok(remembered?.0);
        }
        let view = Call::new(call.entry.signature.parameters, &call.given, self);
        self.evaluator.evaluations.fetch_add(1, Ordering::Relaxed);
        let Body::PerMember(body) = call.entry.body else {
            return Err(internal("no value of its own").into());
        };
        let value = Arc::new(body(&view)?);
        let notes = Arc::new(self.notes.borrow().clone());
        if !self.evaluator.is_uncertain(self.node) {
            self.evaluator.memo.insert(print, Path::Nominal, Ok((value.clone(), notes)));
        }
        Ok(value)
    }

    fn spread(&self, slot: usize) -> Result<Option<Arc<Spread>>, Stop> {
        self.evaluator.spread_of(self.slot(slot)?, self.environment)
    }

    fn is_uncertain(&self, slot: usize) -> bool {
        self.slot(slot).is_ok_and(|node| self.evaluator.is_uncertain(node))
    }

    fn label(&self, slot: usize) -> Arc<str> {
        self.slot(slot).map_or_else(|_| Arc::from("it"), |node| node.label.clone())
    }

    fn item_labels(&self, slot: usize) -> Vec<Arc<str>> {
        self.slot(slot).map_or_else(|_| Vec::new(), |node| self.evaluator.item_labels(node, self.environment))
    }

    fn clock(&self) -> Option<Arc<Clock>> {
        self.environment.clock.clone()
    }

    fn path(&self) -> Path {
        self.path
    }

    fn standard_normals(&self) -> Vec<f64> {
        let (Path::Block { first, count }, Some(variable)) =
            (self.path, self.call.and_then(|call| call.variable))
        else {
            return vec![0.0];
        };
        let mut numbers = vec![0.0; count];
        draws::normals(self.environment.seed, &variable, first, &mut numbers);
        numbers
    }

    fn file(&self, path: &str) -> Result<Arc<InputFile>, Fault> {
        self.evaluator.inputs.file(path)
    }

    fn note(&self, text: String) {
        add_notes(&mut self.notes.borrow_mut(), &[Arc::from(text)]);
    }

    fn cancellation(&self) -> &Cancellation {
        self.evaluator.cancellation
    }
}
