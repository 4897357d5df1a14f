//! Which settings and files a result is read from, besides the names in its text.

use std::collections::HashSet;
use std::sync::Arc;

use super::environment::Environment;
use super::evaluate::{Evaluator, address, gives_ensemble};
use super::node::{Node, NodeKind};
use crate::catalogue::What;

/// The settings that a result follows from without naming them, and whether it is read from a file.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(super) struct Readings {
    clock: bool,
    members: bool,
    seed: bool,
    file: bool,
}

impl Readings {
    /// The names of the settings.
    pub(super) fn names(self) -> impl Iterator<Item = &'static str> {
        let all = [(self.clock, "clock"), (self.members, "members"), (self.seed, "seed")];
        all.into_iter().filter(|(read, _)| *read).map(|(_, name)| name)
    }
}

impl Evaluator<'_> {
    /// What a node reads under the clock in force; what is evaluated under another clock does not read that one.
    pub(super) fn readings(&self, node: &Arc<Node>, environment: &Environment) -> Readings {
        let mut readings = Readings::default();
        let mut seen = HashSet::new();
        let mut waiting = vec![(node.clone(), environment.clone())];
        while let Some((node, here)) = waiting.pop() {
            if !seen.insert((address(&node), here.key)) {
                continue;
            }
            match &node.kind {
                NodeKind::Constant(_) | NodeKind::Variable(_) => {}
                NodeKind::Reference(name) => {
                    waiting.extend(self.definition(name, node.span, &here).ok());
                }
                NodeKind::List(items) => {
                    waiting.extend(items.iter().map(|item| (item.clone(), here.clone())))
                }
                NodeKind::Item { list, .. } => waiting.push((list.clone(), here)),
                NodeKind::ForEach { .. } => {
                    let items = self.items(&node, &here).unwrap_or_default();
                    waiting.extend(items.into_iter().map(|item| (item, here.clone())));
                }
                NodeKind::Call(call) => {
                    readings.members |= call.variable.is_some() || gives_ensemble(call);
                    readings.seed |= call.variable.is_some();
                    readings.clock |= here.key == environment.key && self.reads_clock(call, &here);
                    readings.file |= call.entry.reads_file.is_some();
                    let of_first = self.environment_of_first(&node, call, &here);
                    let first = call.given.iter().find_map(|given| match given.what {
                        What::Value(slot) if given.parameter == 0 => Some(slot),
                        _ => None,
                    });
                    for (number, slot) in call.slots.iter().enumerate() {
                        let under = if Some(number) == first { &of_first } else { &here };
                        waiting.push((slot.clone(), under.clone()));
                    }
                }
            }
        }
        readings
    }
}
