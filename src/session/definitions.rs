use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use super::node::Node;
use super::outside::Outside;
use super::resolve::{Functions, check_local_name, resolve};
use crate::base::{Diagnostic, Fault, SourceId, Span};
use crate::catalogue;
use crate::language::Expression;

/// The most nodes that all definitions may have together.
pub(super) const SESSION_LIMIT: usize = 600_000;

/// The definitions in force, by name.
#[derive(Default)]
pub(super) struct Definitions {
    pub(super) values: BTreeMap<Arc<str>, Definition>,
    pub(super) functions: BTreeMap<String, Arc<Function>>,
    /// Those that were given from outside, which no cell replaces.
    pub(super) outside: Outside,
    /// How many nodes were made for the definitions in force, also in vain.
    expanded: usize,
}

/// A name and the expression it is bound to.
pub(super) struct Definition {
    /// The cell it has its home in.
    pub(super) cell: Arc<str>,
    /// Other cells that define the name too; the last one run is in force.
    pub(super) rivals: BTreeSet<Arc<str>>,
    /// Whether the front end said that its cell is gone.
    pub(super) deleted: bool,
    pub(super) name_span: Span,
    pub(super) expression: Expression,
    /// How many nodes were made for it, also in vain.
    cost: usize,
    /// The expression with its functions put in, or why that cannot be.
    pub(super) node: Result<Arc<Node>, Diagnostic>,
}

/// A function of the user's: an expression with parameters.
#[derive(Clone, Debug)]
pub(super) struct Function {
    /// The cell it has its home in.
    pub(super) cell: Arc<str>,
    /// Other cells that define the function too.
    pub(super) rivals: BTreeSet<Arc<str>>,
    /// Whether the front end said that its cell is gone.
    pub(super) deleted: bool,
    pub(super) parameters: Vec<String>,
    pub(super) name_span: Span,
    pub(super) body: Expression,
}

impl Functions for Definitions {
    fn function(&self, name: &str) -> Option<Arc<Function>> {
        self.functions.get(name).cloned()
    }

    fn names(&self) -> Vec<String> {
        self.functions.keys().cloned().collect()
    }
}

impl Definitions {
    /// Whether a function may be defined so.
    pub(super) fn check_function(
        name: &str,
        name_span: Span,
        parameters: &[(String, Span)],
    ) -> Result<(), Diagnostic> {
        if catalogue::find(name).is_some() {
            return Err(Fault::new(
                "catalogue-name",
                format!("`{name}` is a function of the language already"),
            )
            .help("give yours another name; a plain name (without brackets) may be the same")
            .at(name_span));
        }
        for (index, (parameter, span)) in parameters.iter().enumerate() {
            check_local_name(parameter, *span)?;
            if parameters.iter().take(index).any(|(other, _)| other == parameter) {
                return Err(
                    Fault::new("argument-twice", format!("`{parameter}` is a parameter twice")).at(*span)
                );
            }
        }
        Ok(())
    }

    /// Bind a name; returns the cell that it is taken from, where that is another.
    pub(super) fn define(
        &mut self,
        name: &str,
        cell: &Arc<str>,
        name_span: Span,
        expression: Expression,
    ) -> Option<Arc<str>> {
        let mut rivals = BTreeSet::new();
        let mut from = None;
        if let Some(old) = self.values.get(name) {
            rivals.clone_from(&old.rivals);
            rivals.remove(cell);
            if old.cell != *cell {
                rivals.insert(old.cell.clone());
                from = Some(old.cell.clone());
            }
        }
        if let Some(old) = self.values.remove(name) {
            self.expanded -= old.cost;
        }
        let (node, cost) = resolve(self, Some(name), &expression, self.room());
        self.expanded += cost;
        let definition =
            Definition { cell: cell.clone(), rivals, deleted: false, name_span, expression, cost, node };
        self.values.insert(Arc::from(name), definition);
        from
    }

    /// Bind a function; returns the cell that it is taken from, where that is another.
    pub(super) fn define_function(
        &mut self,
        name: &str,
        cell: &Arc<str>,
        name_span: Span,
        parameters: Vec<String>,
        body: Expression,
    ) -> Option<Arc<str>> {
        let mut rivals = BTreeSet::new();
        let mut from = None;
        if let Some(old) = self.functions.get(name) {
            rivals.clone_from(&old.rivals);
            rivals.remove(cell);
            if old.cell != *cell {
                rivals.insert(old.cell.clone());
                from = Some(old.cell.clone());
            }
        }
        let function = Function { cell: cell.clone(), rivals, deleted: false, parameters, name_span, body };
        self.functions.insert(name.to_owned(), Arc::new(function));
        from
    }

    /// Put functions into every definition again, after a function has changed.
    pub(super) fn resolve_again(&mut self) {
        let names: Vec<Arc<str>> = self.values.keys().cloned().collect();
        for name in names {
            let Some(mut definition) = self.values.remove(&name) else { continue };
            self.expanded -= definition.cost;
            (definition.node, definition.cost) =
                resolve(&*self, Some(&name), &definition.expression, self.room());
            self.expanded += definition.cost;
            self.values.insert(name, definition);
        }
    }

    /// Take the names away whose home is `cell`, but for those in `kept`; what a rival cell defined does not come back
    /// until that cell is run. Returns the names.
    pub(super) fn leave_cell(
        &mut self,
        cell: &str,
        kept: &BTreeSet<String>,
        kept_functions: &BTreeSet<String>,
    ) -> Vec<String> {
        let gone: Vec<Arc<str>> = self
            .values
            .iter()
            .filter(|(name, definition)| &*definition.cell == cell && !kept.contains(&***name))
            .map(|(name, _)| name.clone())
            .collect();
        for name in &gone {
            if let Some(old) = self.values.remove(name) {
                self.expanded -= old.cost;
            }
        }
        for definition in self.values.values_mut() {
            definition.rivals.remove(cell);
        }
        self.functions.retain(|name, function| &*function.cell != cell || kept_functions.contains(name));
        gone.iter().map(|name| name.to_string()).collect()
    }

    /// How many nodes a further definition may have.
    fn room(&self) -> usize {
        SESSION_LIMIT.saturating_sub(self.expanded)
    }

    /// The texts that spans of definitions point into.
    pub(super) fn sources(&self) -> BTreeSet<SourceId> {
        let values = self.values.values().map(|definition| definition.name_span.source);
        values.chain(self.functions.values().map(|function| function.name_span.source)).collect()
    }
}
