//! The fingerprints of nodes.

use std::sync::Arc;

use super::context::NodeContext;
use super::environment::Environment;
use super::evaluate::{Evaluator, address, gives_ensemble, lock};
use super::fingerprint::{Fingerprint, Parts};
use super::node::{CallNode, Node, NodeKind};
use crate::catalogue::{Call, Given, Path, What};
use crate::value::{Instant, Quantity, TimeSpan, Value};

/// Whether a hash tells apart what things are called.
///
/// The fingerprint of a result does not: it is the same whatever its parts are called. What is remembered does,
/// since notes and faults name things as the user does.
#[derive(Clone, Copy, PartialEq, Eq, Hash)]
pub(super) enum Names {
    Ignored,
    Counted,
}

impl Evaluator<'_> {
    /// The fingerprint of a node in an environment.
    pub(super) fn fingerprint(&self, node: &Arc<Node>, environment: &Environment) -> Fingerprint {
        self.print(node, environment, Names::Ignored)
    }

    pub(super) fn print(&self, node: &Arc<Node>, environment: &Environment, names: Names) -> Fingerprint {
        let key = (address(node), environment.key, names);
        if let Some(known) = lock(&self.caches.prints).get(&key) {
            return *known;
        }
        let print = self.find_print(node, environment, names);
        lock(&self.caches.prints).insert(key, print);
        print
    }

    fn find_print(&self, node: &Arc<Node>, environment: &Environment, names: Names) -> Fingerprint {
        match &node.kind {
            NodeKind::Constant(value) => {
                let mut parts = Parts::new("constant");
                constant(&mut parts, value);
                parts.finish()
            }
            NodeKind::List(items) => self.list_print(items, environment, names),
            NodeKind::ForEach { .. } => match self.items(node, environment) {
                Ok(items) => self.list_print(&items, environment, names),
                Err(_) => Parts::new("broken loop").finish(),
            },
            NodeKind::Reference(name) => match self.definition(name, node.span, environment) {
                Ok((target, environment)) => self.print(&target, &environment, names),
                Err(_) => {
                    let mut parts = Parts::new("missing");
                    parts.text(name);
                    parts.finish()
                }
            },
            NodeKind::Item { list, index } => {
                let mut parts = Parts::new("item");
                parts.print(self.print(list, environment, names));
                parts.number(*index as u64);
                parts.finish()
            }
            NodeKind::Variable(number) => {
                let mut parts = Parts::new("variable");
                parts.number(u64::from(*number));
                parts.finish()
            }
            NodeKind::Call(call) => {
                let mut parts = Parts::new("call");
                parts.text(call.entry.name);
                parts.number(u64::from(call.entry.revision));
                let under = self.environment_of_first(node, call, environment);
                self.given_parts(&mut parts, &call.given, call, environment, &under, names);
                if let Some(variable) = call.variable {
                    parts.bytes(&variable);
                    parts.number(environment.members);
                    parts.number(environment.seed);
                }
                if gives_ensemble(call) {
                    parts.number(environment.members);
                }
                if self.reads_clock(call, environment) {
                    parts.number(environment.key);
                }
                if let Some(parameter) = call.entry.reads_file {
                    let context = NodeContext::new(self, node, call, environment, Path::Nominal);
                    let view = Call::new(call.entry.signature.parameters, &call.given, &context);
                    if let Ok(Some(path)) = view.text(parameter) {
                        parts.text(
                            &self
                                .inputs
                                .file(&path)
                                .map_or_else(|fault| fault.message, |file| file.sha256.clone()),
                        );
                    }
                }
                parts.finish()
            }
        }
    }

    fn list_print(&self, items: &[Arc<Node>], environment: &Environment, names: Names) -> Fingerprint {
        let mut parts = Parts::new("list");
        for item in items {
            parts.print(self.print(item, environment, names));
        }
        parts.finish()
    }

    /// The environment of the first argument: another clock, where the entry says that it is evaluated under one.
    pub(super) fn environment_of_first(
        &self,
        node: &Arc<Node>,
        call: &CallNode,
        environment: &Environment,
    ) -> Environment {
        let context = NodeContext::new(self, node, call, environment, Path::Nominal);
        let view = Call::new(call.entry.signature.parameters, &call.given, &context);
        let clock = call.entry.under.and_then(|parameter| view.value(parameter).ok());
        match clock.as_deref() {
            Some(Value::Clock(clock)) => environment.with_clock(clock.clone()),
            _ => environment.clone(),
        }
    }

    fn given_parts(
        &self,
        parts: &mut Parts,
        given: &[Given],
        call: &CallNode,
        environment: &Environment,
        of_first: &Environment,
        names: Names,
    ) {
        parts.number(given.len() as u64);
        // The order of named arguments is no part of what a call means.
        let mut order: Vec<&Given> = given.iter().collect();
        order.sort_by_key(|given| given.parameter);
        for given in order {
            parts.number(given.parameter as u64);
            parts.text(given.label.as_deref().unwrap_or(""));
            match &given.what {
                What::Value(slot) => {
                    let Some(slot) = call.slots.get(*slot) else { continue };
                    let environment = if given.parameter == 0 { of_first } else { environment };
                    parts.print(self.print(slot, environment, names));
                    if call.entry.labels || names == Names::Counted {
                        parts.text(&slot.label);
                        for label in self.item_labels(slot, environment) {
                            parts.text(&label);
                        }
                    }
                }
                What::Choice { choice, given } => {
                    parts.number(*choice as u64);
                    self.given_parts(parts, given, call, environment, environment, names);
                }
                What::Months { first, last } => {
                    parts.number(*first as u64);
                    parts.number(*last as u64);
                }
                What::Groups(groups) => {
                    for group in groups {
                        parts.number(group.len() as u64);
                        group.iter().for_each(|label| parts.text(label));
                    }
                }
            }
        }
    }

    /// What the items of a list are called; those of a list that goes by a name, as they are called where it is
    /// defined.
    pub(super) fn item_labels(&self, node: &Arc<Node>, environment: &Environment) -> Vec<Arc<str>> {
        let mut current = node.clone();
        loop {
            let next = match &current.kind {
                NodeKind::Reference(name) => self.definition(name, current.span, environment),
                NodeKind::List(items) => return items.iter().map(|item| item.label.clone()).collect(),
                _ => return Vec::new(),
            };
            match next {
                Ok((target, _)) => current = target,
                Err(_) => return Vec::new(),
            }
        }
    }
}

/// The bytes of a literal.
fn constant(parts: &mut Parts, value: &Value) {
    parts.text(value.kind());
    match value {
        Value::Quantity(Quantity { values, measure }) => {
            values.data().iter().for_each(|number| parts.float(*number));
            parts.text(&measure.unit.to_string());
        }
        Value::Instant(Instant { years, era, width_years, .. }) => {
            years.data().iter().for_each(|number| parts.float(*number));
            parts.text(era.symbol());
            parts.float(*width_years);
        }
        Value::Text(text) => parts.text(text),
        Value::Span(TimeSpan { start, end, .. }) => {
            parts.float(*start);
            parts.float(*end);
        }
        Value::Range(_)
        | Value::Clock(_)
        | Value::Series(_)
        | Value::Bundle(_)
        | Value::Model(_)
        | Value::Attribution(_)
        | Value::Events(_)
        | Value::Table(_)
        | Value::List(_) => parts.text("no literal"),
    }
}
