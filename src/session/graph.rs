//! Which definitions refer to which: circles, chains that are too long, and an order to evaluate in.

use std::collections::BTreeMap;
use std::sync::Arc;

use super::definitions::Definitions;
use crate::base::{Diagnostic, Fault, Mark};

/// The most levels that a chain of definitions may have in all: evaluation recurses over them.
const CHAIN_LIMIT: usize = 20_000;

/// At most so many names of a circle are told.
const TOLD: usize = 8;

pub(super) struct Graph {
    /// Every name after those that it refers to.
    pub(super) order: Vec<Arc<str>>,
    /// What keeps a name from being evaluated at all.
    pub(super) problems: BTreeMap<Arc<str>, Diagnostic>,
}

#[derive(Clone, Copy, PartialEq)]
enum State {
    Open,
    Done,
}

impl Graph {
    pub(super) fn of(definitions: &Definitions) -> Self {
        let references: BTreeMap<Arc<str>, Vec<Arc<str>>> = definitions
            .values
            .iter()
            .map(|(name, definition)| {
                let to = definition.node.as_ref().map(|node| node.references()).unwrap_or_default();
                (name.clone(), to.into_iter().filter(|name| definitions.values.contains_key(name)).collect())
            })
            .collect();
        let mut graph = Self { order: Vec::new(), problems: BTreeMap::new() };
        let mut states: BTreeMap<Arc<str>, State> = BTreeMap::new();
        for root in references.keys() {
            graph.walk(root, &references, &mut states, definitions);
        }
        graph.measure_chains(&references, definitions);
        graph
    }

    /// Depth first without recursion: a thousand definitions may hang on each other.
    fn walk(
        &mut self,
        root: &Arc<str>,
        references: &BTreeMap<Arc<str>, Vec<Arc<str>>>,
        states: &mut BTreeMap<Arc<str>, State>,
        definitions: &Definitions,
    ) {
        if states.contains_key(root) {
            return;
        }
        let mut path: Vec<(Arc<str>, usize)> = vec![(root.clone(), 0)];
        states.insert(root.clone(), State::Open);
        while let Some((name, next)) = path.last_mut() {
            let target = references.get(name).and_then(|list| list.get(*next)).cloned();
            *next += 1;
            match target {
                None => {
                    states.insert(name.clone(), State::Done);
                    self.order.push(name.clone());
                    path.pop();
                }
                Some(target) => match states.get(&target) {
                    Some(State::Done) => {}
                    Some(State::Open) => {
                        let circle: Vec<Arc<str>> = path
                            .iter()
                            .map(|(name, _)| name.clone())
                            .skip_while(|name| *name != target)
                            .collect();
                        self.report_circle(&circle, definitions);
                    }
                    None => {
                        states.insert(target.clone(), State::Open);
                        path.push((target, 0));
                    }
                },
            }
        }
    }

    fn report_circle(&mut self, circle: &[Arc<str>], definitions: &Definitions) {
        for (index, name) in circle.iter().enumerate() {
            let Some(definition) = definitions.values.get(name) else { continue };
            if index >= TOLD {
                // A long circle is told at a few of its names; the others point there.
                if let Some(told) = circle.first().and_then(|first| self.problems.get(first)).cloned() {
                    self.problems.entry(name.clone()).or_insert(told);
                }
                continue;
            }
            let mut around: Vec<&str> =
                circle.iter().cycle().skip(index).take(circle.len().min(TOLD)).map(|name| &**name).collect();
            if circle.len() > TOLD {
                around.push("…");
            }
            around.push(name);
            let fault =
                Fault::new("circle", format!("`{name}` is defined by itself: {}", around.join(" → ")))
                    .help("break the circle: a name means its definition, not an earlier value");
            let mut diagnostic = fault.at(definition.name_span);
            for other in circle.iter().take(TOLD).filter(|other| *other != name) {
                if let Some(definition) = definitions.values.get(other) {
                    diagnostic
                        .secondary
                        .push(Mark { span: definition.name_span, label: "part of the circle".to_owned() });
                }
            }
            self.problems.entry(name.clone()).or_insert(diagnostic);
        }
    }

    fn measure_chains(&mut self, references: &BTreeMap<Arc<str>, Vec<Arc<str>>>, definitions: &Definitions) {
        let mut reach: BTreeMap<Arc<str>, usize> = BTreeMap::new();
        let mut passed: Option<Diagnostic> = None;
        for name in &self.order {
            let Some(definition) = definitions.values.get(name) else { continue };
            let below =
                references.get(name).into_iter().flatten().filter_map(|name| reach.get(name)).max().copied();
            let own = definition.node.as_ref().map_or(0, |node| node.depth);
            let whole = below.unwrap_or(0) + own;
            if whole > CHAIN_LIMIT {
                // Told once, where the limit is passed first.
                let problem = passed.get_or_insert_with(|| {
                    let message = format!(
                        "`{name}` hangs on a chain of definitions with more than {CHAIN_LIMIT} levels"
                    );
                    Fault::new("nesting", message).at(definition.name_span)
                });
                self.problems.entry(name.clone()).or_insert_with(|| problem.clone());
            }
            reach.insert(name.clone(), whole);
        }
    }
}
