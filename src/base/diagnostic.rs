use super::{Cancelled, Span};

/// A message with a place: what was found, what was expected, and what to write instead.
#[derive(Clone, Debug, PartialEq)]
pub struct Diagnostic {
    /// A short stable word for the kind of mistake, such as `unit-mismatch`.
    pub code: &'static str,
    /// One sentence: what is wrong.
    pub message: String,
    /// Where it is wrong; the caret stands here.
    pub primary: Mark,
    /// Other places that explain it.
    pub secondary: Vec<Mark>,
    /// Lines beneath the source, for instance two dimensions side by side.
    pub details: Vec<String>,
    /// What to write instead.
    pub help: Option<String>,
}

/// A span with the words that stand at its caret (none for a bare caret).
#[derive(Clone, Debug, PartialEq)]
pub struct Mark {
    /// The place.
    pub span: Span,
    /// What is said there.
    pub label: String,
}

/// What went wrong, without a place: made where it is found, placed by the session on the way out.
#[derive(Clone, Debug, PartialEq)]
pub struct Fault {
    /// A short stable word for the kind of mistake.
    pub code: &'static str,
    /// One sentence: what is wrong.
    pub message: String,
    /// Which part of the call is to blame.
    pub blame: Blame,
    /// The words at the caret.
    pub label: String,
    /// Lines beneath the source.
    pub details: Vec<String>,
    /// What to write instead.
    pub help: Option<String>,
}

/// The part of a call that a fault points at.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Blame {
    /// The whole call.
    Call,
    /// The argument given for this parameter (the call, where it was left out).
    Argument(&'static str),
    /// The argument number `n` of those given for a repeated parameter.
    Item(usize),
}

impl Diagnostic {
    /// Whether another is the same mistake at the same place, whichever way led there.
    pub fn is_same_mistake(&self, other: &Diagnostic) -> bool {
        self.code == other.code && self.primary.span == other.primary.span && self.message == other.message
    }
}

impl Fault {
    /// A fault of the whole call.
    pub fn new(code: &'static str, message: impl Into<String>) -> Self {
        Self {
            code,
            message: message.into(),
            blame: Blame::Call,
            label: String::new(),
            details: Vec::new(),
            help: None,
        }
    }

    /// The same fault, blamed on the argument of `parameter`, unless something narrower is blamed already.
    #[must_use]
    pub fn blame(mut self, parameter: &'static str) -> Self {
        if self.blame == Blame::Call {
            self.blame = Blame::Argument(parameter);
        }
        self
    }

    /// The same fault, blamed on the argument number `item` of a repeated parameter.
    #[must_use]
    pub fn blame_item(mut self, item: usize) -> Self {
        self.blame = Blame::Item(item);
        self
    }

    /// With what to write instead.
    #[must_use]
    pub fn help(mut self, help: impl Into<String>) -> Self {
        self.help = Some(help.into());
        self
    }

    /// With words at the caret.
    #[must_use]
    pub fn label(mut self, label: impl Into<String>) -> Self {
        self.label = label.into();
        self
    }

    /// With one more line beneath the source.
    #[must_use]
    pub fn detail(mut self, line: impl Into<String>) -> Self {
        self.details.push(line.into());
        self
    }

    /// Put the fault at a place.
    pub fn at(self, span: Span) -> Diagnostic {
        Diagnostic {
            code: self.code,
            message: self.message,
            primary: Mark { span, label: self.label },
            secondary: Vec::new(),
            details: self.details,
            help: self.help,
        }
    }
}

/// The code of the fault that an interrupt makes; such a fault is never remembered.
pub(crate) const INTERRUPTED: &str = "interrupted";

impl From<Cancelled> for Fault {
    fn from(_: Cancelled) -> Self {
        Fault::new(INTERRUPTED, "interrupted before it was done")
    }
}
