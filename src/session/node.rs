use std::sync::Arc;

use crate::base::{Mark, Span};
use crate::catalogue::{Entry, Given};
use crate::value::Value;

/// An expression with every function looked up, every parameter put in its place and every random variable named.
#[derive(Debug)]
pub(super) struct Node {
    pub(super) kind: NodeKind,
    /// Where it stands; a caret for it goes here.
    pub(super) span: Span,
    /// What the user calls it: its name, or its text.
    pub(super) label: Arc<str>,
    /// How many nodes it has, itself included.
    pub(super) size: usize,
    /// How many levels it has.
    pub(super) depth: usize,
    /// The call of a function of the user's that it was put in for.
    pub(super) called: Option<Arc<Called>>,
}

/// Where a function of the user's is called, and the call that that one was put in for.
#[derive(Debug)]
pub(super) struct Called {
    pub(super) span: Span,
    pub(super) outer: Option<Arc<Called>>,
}

/// The most calls that are told with a mistake.
const CALLS_TOLD: usize = 4;

impl Called {
    /// Marks for a mistake inside the function: this call and those around it.
    pub(super) fn marks(called: Option<&Arc<Called>>) -> Vec<Mark> {
        let calls = std::iter::successors(called, |called| called.outer.as_ref());
        calls
            .take(CALLS_TOLD)
            .map(|called| Mark { span: called.span, label: "called here".to_owned() })
            .collect()
    }
}

pub(super) enum NodeKind {
    /// A literal.
    Constant(Arc<Value>),
    /// A list.
    List(Vec<Arc<Node>>),
    /// A definition or setting by its name.
    Reference(Arc<str>),
    /// One item of a list, where a `for` stands at it.
    Item { list: Arc<Node>, index: usize },
    /// A call of a catalogue entry.
    Call(CallNode),
    /// `[body for variable in list]`; the body holds `Variable(variable)`.
    ForEach { body: Arc<Node>, variable: u32, list: Arc<Node> },
    /// The item that a `for` stands at.
    Variable(u32),
}

pub(super) struct CallNode {
    pub(super) entry: &'static Entry,
    pub(super) given: Vec<Given>,
    pub(super) slots: Vec<Arc<Node>>,
    /// The id of the random variable that this call is.
    pub(super) variable: Option<[u8; 32]>,
}

impl std::fmt::Debug for NodeKind {
    fn fmt(&self, formatter: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            NodeKind::Constant(_) => formatter.write_str("constant"),
            NodeKind::List(items) => write!(formatter, "list of {}", items.len()),
            NodeKind::Reference(name) => write!(formatter, "reference to {name}"),
            NodeKind::Item { index, .. } => write!(formatter, "item {index}"),
            NodeKind::Call(call) => write!(formatter, "call of {}", call.entry.name),
            NodeKind::ForEach { .. } => formatter.write_str("for"),
            NodeKind::Variable(number) => write!(formatter, "variable {number}"),
        }
    }
}

impl Node {
    pub(super) fn new(kind: NodeKind, span: Span, label: Arc<str>) -> Arc<Self> {
        let parts = children(&kind);
        let size = parts.iter().map(|part| part.size).fold(1, usize::saturating_add);
        let depth = parts.iter().map(|part| part.depth).max().unwrap_or(0) + 1;
        Arc::new(Self { kind, span, label, size, depth, called: None })
    }

    /// The same, put in for a call.
    pub(super) fn for_call(self: Arc<Self>, called: Option<&Arc<Called>>) -> Arc<Self> {
        let Some(called) = called else { return self };
        let mut node = self;
        if let Some(own) = Arc::get_mut(&mut node) {
            own.called = Some(called.clone());
        }
        node
    }

    /// The nodes directly beneath.
    pub(super) fn children(&self) -> Vec<&Arc<Node>> {
        children(&self.kind)
    }

    /// The names that it refers to, each once, in the order of the text.
    pub(super) fn references(&self) -> Vec<Arc<str>> {
        let mut names: Vec<Arc<str>> = Vec::new();
        let mut waiting: Vec<&Node> = vec![self];
        let mut seen: std::collections::HashSet<*const Node> = std::collections::HashSet::new();
        while let Some(node) = waiting.pop() {
            if !seen.insert(std::ptr::from_ref(node)) {
                continue;
            }
            if let NodeKind::Reference(name) = &node.kind
                && !names.contains(name)
            {
                names.push(name.clone());
            }
            waiting.extend(node.children().into_iter().map(AsRef::as_ref).rev());
        }
        names
    }

    /// The same with `item` in the place of a loop variable; what does not hold it is shared.
    pub(super) fn with_item(self: &Arc<Self>, variable: u32, item: &Arc<Node>) -> Arc<Node> {
        let replaced = |node: &Arc<Node>| node.with_item(variable, item);
        let same = |old: &Arc<Node>, new: &Arc<Node>| Arc::ptr_eq(old, new);
        let kind = match &self.kind {
            NodeKind::Variable(number) if *number == variable => return item.clone(),
            NodeKind::Constant(_) | NodeKind::Reference(_) | NodeKind::Variable(_) => return self.clone(),
            NodeKind::List(items) => {
                let new: Vec<Arc<Node>> = items.iter().map(replaced).collect();
                if items.iter().zip(&new).all(|(old, new)| same(old, new)) {
                    return self.clone();
                }
                NodeKind::List(new)
            }
            NodeKind::Item { list, index } => {
                let new = replaced(list);
                if same(list, &new) {
                    return self.clone();
                }
                NodeKind::Item { list: new, index: *index }
            }
            NodeKind::Call(call) => {
                let slots: Vec<Arc<Node>> = call.slots.iter().map(replaced).collect();
                if call.slots.iter().zip(&slots).all(|(old, new)| same(old, new)) {
                    return self.clone();
                }
                NodeKind::Call(CallNode { given: call.given.clone(), slots, ..*call })
            }
            NodeKind::ForEach { body, variable: inner, list } => {
                let (new_body, new_list) = (replaced(body), replaced(list));
                if same(body, &new_body) && same(list, &new_list) {
                    return self.clone();
                }
                NodeKind::ForEach { body: new_body, variable: *inner, list: new_list }
            }
        };
        Node::new(kind, self.span, self.label.clone()).for_call(self.called.as_ref())
    }
}

fn children(kind: &NodeKind) -> Vec<&Arc<Node>> {
    match kind {
        NodeKind::Constant(_) | NodeKind::Reference(_) | NodeKind::Variable(_) => Vec::new(),
        NodeKind::List(items) => items.iter().collect(),
        NodeKind::Item { list, .. } => vec![list],
        NodeKind::Call(call) => call.slots.iter().collect(),
        NodeKind::ForEach { body, list, .. } => vec![body, list],
    }
}
