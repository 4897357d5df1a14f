use crate::base::Span;

/// The statements of one cell or script, in order.
#[derive(Clone, Debug, Default)]
pub struct Program {
    /// The statements.
    pub statements: Vec<Statement>,
}

/// One line of a program.
#[derive(Clone, Debug)]
pub struct Statement {
    /// What it says.
    pub kind: StatementKind,
    /// All of it.
    pub span: Span,
}

/// The three things that a line can say.
#[derive(Clone, Debug)]
pub enum StatementKind {
    /// `name = expression`.
    Define {
        /// The name.
        name: String,
        /// Where it stands.
        name_span: Span,
        /// What it is bound to.
        expression: Expression,
    },
    /// `name(parameters) = expression`.
    Function {
        /// The function's name.
        name: String,
        /// Where it stands.
        name_span: Span,
        /// The parameters with their places.
        parameters: Vec<(String, Span)>,
        /// What it stands for.
        body: Expression,
    },
    /// A bare expression, which is shown.
    Show(Expression),
}

/// An expression with its place.
#[derive(Clone, Debug)]
pub struct Expression {
    /// What it is.
    pub kind: ExpressionKind,
    /// Where it stands.
    pub span: Span,
    /// How many levels lie beneath it, for the cap on nesting.
    pub depth: u32,
}

/// A unit or an era as it was written.
#[derive(Clone, Debug, PartialEq)]
pub struct UnitText {
    /// The text, in NFC and without inner spaces (but for `cal BP`).
    pub text: String,
    /// Where it stands.
    pub span: Span,
}

/// One argument of a call.
#[derive(Clone, Debug)]
pub struct Argument {
    /// `name:` before it.
    pub label: Option<(String, Span)>,
    /// What is given.
    pub value: Expression,
}

/// The operators between two expressions.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum BinaryOperator {
    /// `..`
    To,
    /// `by`
    By,
    /// `+`
    Plus,
    /// `-`
    Minus,
    /// `*`
    Times,
    /// `/`
    Over,
    /// `±`
    PlusMinus,
    /// `^`
    Power,
}

impl BinaryOperator {
    /// As it is written, which is also the name of its catalogue entry.
    pub fn symbol(self) -> &'static str {
        match self {
            BinaryOperator::To => "..",
            BinaryOperator::By => "by",
            BinaryOperator::Plus => "+",
            BinaryOperator::Minus => "-",
            BinaryOperator::Times => "*",
            BinaryOperator::Over => "/",
            BinaryOperator::PlusMinus => "±",
            BinaryOperator::Power => "^",
        }
    }
}

/// The forms of an expression.
#[derive(Clone, Debug)]
pub enum ExpressionKind {
    /// A number with a unit or an era, or without.
    Number {
        /// The number, with its sign.
        value: f64,
        /// The unit or era that follows it.
        unit: Option<UnitText>,
    },
    /// `2015-06-15`.
    Date {
        /// Year.
        year: i64,
        /// Month from 1.
        month: u32,
        /// Day from 1.
        day: u32,
    },
    /// Words in double quotes.
    Text(String),
    /// `[a, b, c]`.
    List(Vec<Expression>),
    /// A name.
    Name(String),
    /// `name(arguments)`; what is handed on by `|>` is the first argument.
    Call {
        /// The function's name.
        name: String,
        /// Where the name stands.
        name_span: Span,
        /// The arguments.
        arguments: Vec<Argument>,
        /// Whether the first argument came by `|>`.
        piped: bool,
    },
    /// A minus sign before something that is no literal.
    Negate(Box<Expression>),
    /// Two expressions with an operator between.
    Binary {
        /// The operator.
        operator: BinaryOperator,
        /// Left of it.
        left: Box<Expression>,
        /// Right of it.
        right: Box<Expression>,
    },
    /// `value in unit`.
    Convert {
        /// What is converted.
        value: Box<Expression>,
        /// The unit or era.
        unit: UnitText,
    },
    /// `[body for variable in list]`.
    For {
        /// Evaluated for each item.
        body: Box<Expression>,
        /// The name that stands for the item.
        variable: String,
        /// Where that name stands.
        variable_span: Span,
        /// The list.
        list: Box<Expression>,
    },
    /// `(expression)`, which keeps a name from being read as a choice.
    Group(Box<Expression>),
}

impl Expression {
    /// Every name, function and text in it, as often as it stands there.
    pub fn words(&self, found: &mut Vec<String>) {
        match &self.kind {
            ExpressionKind::Number { .. } | ExpressionKind::Date { .. } => {}
            ExpressionKind::Text(word) | ExpressionKind::Name(word) => found.push(word.clone()),
            ExpressionKind::List(items) => items.iter().for_each(|item| item.words(found)),
            ExpressionKind::Call { name, arguments, .. } => {
                found.push(name.clone());
                arguments.iter().for_each(|argument| argument.value.words(found));
            }
            ExpressionKind::Negate(inner)
            | ExpressionKind::Group(inner)
            | ExpressionKind::Convert { value: inner, .. } => inner.words(found),
            ExpressionKind::Binary { left, right, .. } => {
                left.words(found);
                right.words(found);
            }
            ExpressionKind::For { body, list, .. } => {
                body.words(found);
                list.words(found);
            }
        }
    }

    /// An expression whose depth follows from its parts.
    pub(crate) fn new(kind: ExpressionKind, span: Span) -> Self {
        let deepest =
            |parts: &mut dyn Iterator<Item = &Expression>| parts.map(|part| part.depth).max().unwrap_or(0);
        let below = match &kind {
            ExpressionKind::Number { .. }
            | ExpressionKind::Date { .. }
            | ExpressionKind::Text(_)
            | ExpressionKind::Name(_) => 0,
            ExpressionKind::List(items) => deepest(&mut items.iter()),
            ExpressionKind::Call { arguments, .. } => {
                deepest(&mut arguments.iter().map(|given| &given.value))
            }
            ExpressionKind::Negate(inner)
            | ExpressionKind::Group(inner)
            | ExpressionKind::Convert { value: inner, .. } => inner.depth,
            ExpressionKind::Binary { left, right, .. } => left.depth.max(right.depth),
            ExpressionKind::For { body, list, .. } => body.depth.max(list.depth),
        };
        Self { kind, span, depth: below + 1 }
    }
}
