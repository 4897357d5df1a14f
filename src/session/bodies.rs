//! The bodies of functions, checked where they are defined, as far as that goes before anybody calls them.
//!
//! A body is resolved with its parameters left open. What does not hold a parameter is checked like a definition; of a
//! call that holds one, those arguments are that do not.

use std::collections::{BTreeSet, HashMap, HashSet};
use std::rc::Rc;
use std::sync::Arc;

use super::blame::placed;
use super::context::NodeContext;
use super::definitions::SESSION_LIMIT;
use super::environment::Environment;
use super::evaluate::{Evaluator, address, lock};
use super::node::{CallNode, Node, NodeKind};
use super::resolve::{TOO_LARGE, resolve_body};
use crate::base::{Diagnostic, Span};
use crate::catalogue::{Call, Given, Path, Stop, What, check_arguments};
use crate::language::Presence;

/// Faults that come of the clock a body is evaluated under, which its caller chooses.
const OF_THE_CLOCK: [&str; 3] = ["no-clock", "no-overlap", "two-axes"];

/// What is wrong in the bodies of the functions whose home is `cell`, one mistake for each, those that only wait for a
/// name last.
pub(super) fn problems(evaluator: &Evaluator<'_>, cell: &str, environment: &Environment) -> Vec<Diagnostic> {
    let mut room = SESSION_LIMIT;
    let mut problems = Vec::new();
    for (name, function) in &evaluator.definitions.functions {
        if &*function.cell != cell {
            continue;
        }
        let (node, cost) = resolve_body(evaluator.definitions, name, function, room);
        room = room.saturating_sub(cost);
        let here = |span: Span| {
            let body = function.body.span;
            span.source == body.source && body.start <= span.start && span.end <= body.end
        };
        match node {
            // What grows too large is told where it is called; what is wrong in another body, with that.
            Err(problem) if problem.code == TOO_LARGE || !here(problem.primary.span) => {}
            Err(problem) => problems.push(problem),
            Ok(node) => {
                // What is remembered by the place of a node must not outlive it.
                lock(&evaluator.caches.kept).push(node.clone());
                let mut check = Check {
                    evaluator,
                    environment,
                    free: HashMap::new(),
                    seen: HashSet::new(),
                    found: Vec::new(),
                };
                check.node(&node);
                let mut found: Vec<Diagnostic> =
                    check.found.into_iter().filter(|problem| here(problem.primary.span)).collect();
                found.sort_by_key(|problem| (problem.code == "not-defined", problem.primary.span.start));
                problems.extend(found.into_iter().next());
            }
        }
    }
    problems
}

struct Check<'a> {
    evaluator: &'a Evaluator<'a>,
    environment: &'a Environment,
    /// The parameters and loop variables that a node holds and does not bind itself.
    free: HashMap<usize, Rc<BTreeSet<u32>>>,
    seen: HashSet<usize>,
    found: Vec<Diagnostic>,
}

impl Check<'_> {
    fn node(&mut self, node: &Arc<Node>) {
        if !self.seen.insert(address(node)) {
            return;
        }
        if self.free(node).is_empty() {
            if let Err(stop) = self.evaluator.shape(node, self.environment) {
                self.add(stop, node);
            }
            return;
        }
        for child in node.children() {
            self.node(child);
        }
        if let NodeKind::Call(call) = &node.kind {
            self.arguments(node, call);
        }
    }

    /// Check the arguments of a call that hold nothing open.
    fn arguments(&mut self, node: &Arc<Node>, call: &CallNode) {
        let parameters = call.entry.signature.parameters;
        let mut known = Vec::new();
        for given in &call.given {
            // The items of a repeated parameter are blamed by their number.
            let repeated = parameters
                .get(given.parameter)
                .is_some_and(|parameter| matches!(parameter.presence, Presence::Repeated { .. }));
            if !repeated && self.is_known(given, call) {
                known.push(given.clone());
            }
        }
        let context = NodeContext::new(self.evaluator, node, call, self.environment, Path::Nominal);
        if let Err(stop) = check_arguments(&Call::new(parameters, &known, &context), call.entry.sign()) {
            self.add(placed(stop, node, call), node);
        }
    }

    /// Whether an argument holds nothing open and is right in itself.
    fn is_known(&mut self, given: &Given, call: &CallNode) -> bool {
        match &given.what {
            What::Value(slot) => call.slots.get(*slot).is_some_and(|slot| {
                self.free(slot).is_empty() && self.evaluator.shape(slot, self.environment).is_ok()
            }),
            What::Choice { given, .. } => given.iter().all(|given| self.is_known(given, call)),
            What::Groups(_) | What::Months { .. } => true,
        }
    }

    fn add(&mut self, stop: Stop, node: &Arc<Node>) {
        let problem = match stop {
            Stop::Placed(problem) => *problem,
            Stop::Fault(fault) => fault.at(node.span),
        };
        if !OF_THE_CLOCK.contains(&problem.code) {
            self.found.push(problem);
        }
    }

    fn free(&mut self, node: &Arc<Node>) -> Rc<BTreeSet<u32>> {
        if let Some(known) = self.free.get(&address(node)) {
            return known.clone();
        }
        let mut free = BTreeSet::new();
        for child in node.children() {
            free.extend(self.free(child).iter().copied());
        }
        match &node.kind {
            NodeKind::Variable(number) => {
                free.insert(*number);
            }
            NodeKind::ForEach { variable, list, .. } => {
                // Numbers of loops are their own, so that only the body holds this one.
                if !self.free(list).contains(variable) {
                    free.remove(variable);
                }
            }
            NodeKind::Constant(_)
            | NodeKind::List(_)
            | NodeKind::Reference(_)
            | NodeKind::Item { .. }
            | NodeKind::Call(_) => {}
        }
        let free = Rc::new(free);
        self.free.insert(address(node), free.clone());
        free
    }
}
