//! Syntax to nodes: functions looked up, choices taken, parameters put in place, random variables named.
//!
//! Longer than most files: it is one recursion over the syntax tree.

use std::sync::Arc;

use sha2::{Digest, Sha256};

use super::definitions::Function;
use super::node::{CallNode, Called, Node, NodeKind};
use super::slips::{unit_fault, wrong_choice};
use crate::base::{Diagnostic, Fault, SourceId, Span};
use crate::catalogue::{self, Entry, Given, What};
use crate::language::{
    Argument, BinaryOperator, Expression, ExpressionKind, MONTHS, Parameter, Presence, StatementKind,
    UnitText, Words, canonical, parse,
};
use crate::value::{Block, Era, Instant, Measure, Quantity, Unit, Value, instant_of_date};

/// The most nodes that one expression may have after its functions are put in.
pub(super) const SIZE_LIMIT: usize = 200_000;

/// The most levels that it may have then.
const DEPTH_LIMIT: usize = 2_000;

/// Looks functions of the user's up.
pub(super) trait Functions {
    fn function(&self, name: &str) -> Option<Arc<Function>>;
    fn names(&self) -> Vec<String>;
}

/// Where an expression stands, which names its random variables and its local names.
struct Scope {
    /// Hashes the definition's name and the path of calls to here.
    place: Sha256,
    random: u32,
    calls: u32,
    locals: Vec<(String, Arc<Node>)>,
    functions: Vec<String>,
    /// The call that the body here is put in for.
    called: Option<Arc<Called>>,
}

pub(super) struct Resolver<'a> {
    functions: &'a dyn Functions,
    budget: usize,
    loops: u32,
}

/// Resolve the expression of a definition called `name`, or of a bare expression by its canonical text, into at most
/// `room` nodes; returns how many were made, too.
pub(super) fn resolve(
    functions: &dyn Functions,
    name: Option<&str>,
    expression: &Expression,
    room: usize,
) -> (Result<Arc<Node>, Diagnostic>, usize) {
    let mut place = Sha256::new();
    match name {
        Some(name) => place.update(format!("definition\0{name}\0")),
        None => place.update(format!("shown\0{}\0", canonical(expression))),
    }
    let mut scope = Scope::new(place);
    let budget = room.min(SIZE_LIMIT);
    let mut resolver = Resolver { functions, budget, loops: 0 };
    let node = resolver.expression(expression, &mut scope);
    (node, budget - resolver.budget)
}

/// Resolve the body of a function of the user's before it is called: its parameters are variables that nothing binds.
pub(super) fn resolve_body(
    functions: &dyn Functions,
    name: &str,
    function: &Function,
    room: usize,
) -> (Result<Arc<Node>, Diagnostic>, usize) {
    let mut scope = Scope::new(Sha256::new());
    scope.functions.push(name.to_owned());
    // Loops count from one.
    for (parameter, number) in function.parameters.iter().zip((0..u32::MAX).rev()) {
        let open = Node::new(NodeKind::Variable(number), function.name_span, Arc::from(parameter.as_str()));
        scope.locals.push((parameter.clone(), open));
    }
    let budget = room.min(SIZE_LIMIT);
    let mut resolver = Resolver { functions, budget, loops: 0 };
    let node = resolver.expression(&function.body, &mut scope);
    (node, budget - resolver.budget)
}

impl Resolver<'_> {
    fn expression(&mut self, expression: &Expression, scope: &mut Scope) -> Result<Arc<Node>, Diagnostic> {
        let span = expression.span;
        if self.budget == 0 {
            return Err(too_large(span));
        }
        self.budget -= 1;
        let label = || Arc::<str>::from(canonical(expression));
        let constant = |value: Value| Node::new(NodeKind::Constant(Arc::new(value)), span, label());
        match &expression.kind {
            ExpressionKind::Group(inner) => self.expression(inner, scope),
            ExpressionKind::Number { value, unit } => number(*value, unit.as_ref(), span).map(constant),
            ExpressionKind::Date { year, month, day } => instant_of_date(*year, *month, *day)
                .map(Value::Instant)
                .map(constant)
                .map_err(|fault| fault.at(span)),
            ExpressionKind::Text(text) => Ok(constant(Value::Text(Arc::from(text.as_str())))),
            ExpressionKind::Name(name) => {
                if let Some((_, node)) = scope.locals.iter().rev().find(|(local, _)| local == name) {
                    return Ok(node.clone());
                }
                let name: Arc<str> = Arc::from(name.as_str());
                Ok(Node::new(NodeKind::Reference(name.clone()), span, name))
            }
            ExpressionKind::List(items) => {
                let items =
                    items.iter().map(|item| self.expression(item, scope)).collect::<Result<Vec<_>, _>>()?;
                self.sized(Node::new(NodeKind::List(items), span, label()))
            }
            ExpressionKind::For { body, variable, variable_span, list } => {
                check_local_name(variable, *variable_span)?;
                let list = self.expression(list, scope)?;
                self.loops += 1;
                let number = self.loops;
                let item =
                    Node::new(NodeKind::Variable(number), *variable_span, Arc::from(variable.as_str()));
                scope.locals.push((variable.clone(), item));
                let body = self.expression(body, scope);
                scope.locals.pop();
                self.sized(Node::new(
                    NodeKind::ForEach { body: body?, variable: number, list },
                    span,
                    label(),
                ))
            }
            ExpressionKind::Negate(inner) => {
                let inner = self.expression(inner, scope)?;
                self.operator("negate", vec![inner], span, label(), scope)
            }
            ExpressionKind::Convert { value, unit } => {
                let value = self.expression(value, scope)?;
                let unit_node = target_unit(unit)?;
                self.operator("in", vec![value, unit_node], span, label(), scope)
            }
            ExpressionKind::Binary { operator, left, right } => {
                let left = self.expression(left, scope)?;
                let right = match (operator, spread_in_era(right)) {
                    (BinaryOperator::PlusMinus, Some(duration)) => Node::new(
                        NodeKind::Constant(Arc::new(duration)),
                        right.span,
                        Arc::from(canonical(right)),
                    ),
                    _ => self.expression(right, scope)?,
                };
                self.operator(operator.symbol(), vec![left, right], span, label(), scope)
            }
            ExpressionKind::Call { name, name_span, arguments, .. } => {
                let node = match self.functions.function(name) {
                    Some(function) => self.user_call(&function, name, *name_span, arguments, span, scope)?,
                    None => match catalogue::find(name).filter(|_| is_word(name)) {
                        Some(entry) => self.entry_call(entry, arguments, span, label(), scope)?,
                        None => return Err(self.unknown_function(name, *name_span)),
                    },
                };
                self.sized(node)
            }
        }
    }

    fn sized(&self, node: Arc<Node>) -> Result<Arc<Node>, Diagnostic> {
        if node.size > SIZE_LIMIT || node.depth > DEPTH_LIMIT { Err(too_large(node.span)) } else { Ok(node) }
    }

    fn unknown_function(&self, name: &str, span: Span) -> Diagnostic {
        let own = self.functions.names();
        let near = catalogue::nearest(name, own.iter().map(String::as_str))
            .map(str::to_owned)
            .or_else(|| catalogue::nearest_function(name).filter(|near| is_word(near)).map(str::to_owned));
        let fault = Fault::new("unknown-function", format!("there is no function `{name}`"));
        match near {
            Some(near) => fault.help(format!("did you mean `{near}`?")),
            None => fault.help(
                "define it as `name(parameters) = expression`, or see the reference for those there are",
            ),
        }
        .at(span)
    }

    fn operator(
        &mut self,
        symbol: &str,
        slots: Vec<Arc<Node>>,
        span: Span,
        label: Arc<str>,
        scope: &mut Scope,
    ) -> Result<Arc<Node>, Diagnostic> {
        let Some(entry) = catalogue::find(symbol) else {
            return Err(Fault::new("internal", format!("the operator {symbol} has no entry")).at(span));
        };
        let given = (0..slots.len())
            .map(|slot| Given { parameter: slot, label: None, what: What::Value(slot), span })
            .collect();
        let variable = entry.random.then(|| scope.next_variable());
        let call = NodeKind::Call(CallNode { entry, given, slots, variable });
        self.sized(Node::new(call, span, label).for_call(scope.called.as_ref()))
    }

    fn user_call(
        &mut self,
        function: &Function,
        name: &str,
        name_span: Span,
        arguments: &[Argument],
        span: Span,
        scope: &mut Scope,
    ) -> Result<Arc<Node>, Diagnostic> {
        if scope.functions.iter().any(|outer| outer == name) {
            return Err(Fault::new("circle", format!("`{name}` calls itself"))
                .help("functions cannot be recursive, so that every program ends")
                .at(name_span));
        }
        let mut bound: Vec<Option<Arc<Node>>> = vec![None; function.parameters.len()];
        let mut next = 0;
        for argument in arguments {
            let index = match &argument.label {
                Some((label, label_span)) => {
                    function.parameters.iter().position(|parameter| parameter == label).ok_or_else(|| {
                        let list = function.parameters.join(", ");
                        Fault::new("unknown-argument", format!("`{name}` has no parameter `{label}`"))
                            .help(format!("its parameters are {list}"))
                            .at(*label_span)
                    })?
                }
                None => {
                    next += 1;
                    next - 1
                }
            };
            let node = self.expression(&argument.value, scope)?;
            match bound.get_mut(index) {
                Some(slot @ None) => *slot = Some(node),
                Some(Some(_)) => {
                    return Err(
                        Fault::new("argument-twice", "this argument is given twice").at(argument.value.span)
                    );
                }
                None => {
                    let fault =
                        Fault::new("too-many-arguments", format!("`{name}` takes {} arguments", bound.len()));
                    return Err(fault.at(argument.value.span));
                }
            }
        }
        let mut locals = Vec::with_capacity(bound.len());
        for (parameter, node) in function.parameters.iter().zip(bound) {
            let Some(node) = node else {
                return Err(Fault::new("missing-argument", format!("`{parameter}` is missing"))
                    .help(format!("`{name}` takes {}", function.parameters.join(", ")))
                    .at(span));
            };
            locals.push((parameter.clone(), node));
        }
        // Random variables inside are drawn anew for each call: the path of calls is part of their names.
        let mut place = scope.place.clone();
        place.update(format!("call\0{name}\0{}\0", scope.calls));
        scope.calls += 1;
        let mut functions = scope.functions.clone();
        functions.push(name.to_owned());
        let called = Some(Arc::new(Called { span, outer: scope.called.clone() }));
        let mut inner = Scope { locals, functions, called, ..Scope::new(place) };
        // What grows too large is told at the outermost call.
        self.expression(&function.body, &mut inner).map_err(|mut problem| {
            if problem.code == TOO_LARGE {
                return too_large(span);
            }
            // Calls inside have told the whole way already.
            if problem.secondary.is_empty() {
                problem.secondary = Called::marks(inner.called.as_ref());
            }
            problem
        })
    }

    fn entry_call(
        &mut self,
        entry: &'static Entry,
        arguments: &[Argument],
        span: Span,
        label: Arc<str>,
        scope: &mut Scope,
    ) -> Result<Arc<Node>, Diagnostic> {
        let mut slots = Vec::new();
        let variable = entry.random.then(|| scope.next_variable());
        let given = self.bind(entry.name, entry.signature.parameters, arguments, span, &mut slots, scope)?;
        let call = NodeKind::Call(CallNode { entry, given, slots, variable });
        Ok(Node::new(call, span, label).for_call(scope.called.as_ref()))
    }

    /// Put arguments to parameters, of an entry or of a choice.
    fn bind(
        &mut self,
        owner: &str,
        parameters: &'static [Parameter],
        arguments: &[Argument],
        span: Span,
        slots: &mut Vec<Arc<Node>>,
        scope: &mut Scope,
    ) -> Result<Vec<Given>, Diagnostic> {
        let mut given: Vec<Given> = Vec::new();
        let mut next = 0;
        for argument in arguments {
            let (number, own_label) = self.parameter_of(owner, parameters, argument, &mut next)?;
            let Some(parameter) = parameters.get(number) else { continue };
            let repeated = matches!(parameter.presence, Presence::Repeated { .. });
            if !repeated && given.iter().any(|other| other.parameter == number) {
                return Err(Fault::new("argument-twice", format!("`{}` is given twice", parameter.name))
                    .at(argument.value.span));
            }
            let what = self.what(parameter, &argument.value, slots, scope)?;
            given.push(Given { parameter: number, label: own_label, what, span: argument.value.span });
        }
        for (number, parameter) in parameters.iter().enumerate() {
            if given.iter().any(|other| other.parameter == number) {
                continue;
            }
            match parameter.presence {
                Presence::Optional => {}
                Presence::Required | Presence::Repeated { .. } => {
                    let names: Vec<&str> = parameters.iter().map(|parameter| parameter.name).collect();
                    return Err(Fault::new(
                        "missing-argument",
                        format!("`{owner}` needs `{}`: {}", parameter.name, parameter.meaning),
                    )
                    .help(format!("its parameters are {}", names.join(", ")))
                    .at(span));
                }
                Presence::Default(text) => {
                    let what = self.default(owner, parameter, text, span, slots)?;
                    given.push(Given { parameter: number, label: None, what, span });
                }
            }
        }
        Ok(given)
    }

    fn parameter_of(
        &self,
        owner: &str,
        parameters: &'static [Parameter],
        argument: &Argument,
        next: &mut usize,
    ) -> Result<(usize, Option<Arc<str>>), Diagnostic> {
        let Some((label, label_span)) = &argument.label else {
            let number = *next;
            let Some(parameter) = parameters.get(number) else {
                let most = parameters.len();
                let word = if most == 1 { "argument" } else { "arguments" };
                return Err(Fault::new(
                    "too-many-arguments",
                    format!("`{owner}` takes at most {most} {word}"),
                )
                .at(argument.value.span));
            };
            if !matches!(parameter.presence, Presence::Repeated { .. }) {
                *next += 1;
            }
            return Ok((number, None));
        };
        if let Some(number) = parameters.iter().position(|parameter| {
            parameter.name == label && !matches!(parameter.presence, Presence::Repeated { .. })
        }) {
            return Ok((number, None));
        }
        let free =
            parameters.iter().position(|parameter| parameter.presence == Presence::Repeated { labels: true });
        if let Some(number) = free {
            return Ok((number, Some(Arc::from(label.as_str()))));
        }
        let names: Vec<&str> = parameters.iter().map(|parameter| parameter.name).collect();
        let fault = Fault::new("unknown-argument", format!("`{owner}` has no argument `{label}`"));
        let help = match catalogue::nearest(label, names.iter().copied()) {
            Some(near) => format!("did you mean `{near}:`? Its arguments are {}", names.join(", ")),
            None if names.is_empty() => "it has none".to_owned(),
            None => format!("its arguments are {}", names.join(", ")),
        };
        Err(fault.help(help).at(*label_span))
    }

    fn what(
        &mut self,
        parameter: &'static Parameter,
        value: &Expression,
        slots: &mut Vec<Arc<Node>>,
        scope: &mut Scope,
    ) -> Result<What, Diagnostic> {
        match parameter.words {
            Words::None => {}
            Words::Groups => return groups(value).map(What::Groups),
            Words::Months => return months(value).map(|(first, last)| What::Months { first, last }),
        }
        if !parameter.choices.is_empty()
            && let Some(what) = self.chosen(parameter, value, slots, scope)?
        {
            return Ok(what);
        }
        let node = self.expression(value, scope)?;
        slots.push(node);
        Ok(What::Value(slots.len() - 1))
    }

    /// The choice that a name or a call names; none where the parameter takes values too and it names no choice.
    fn chosen(
        &mut self,
        parameter: &'static Parameter,
        value: &Expression,
        slots: &mut Vec<Arc<Node>>,
        scope: &mut Scope,
    ) -> Result<Option<What>, Diagnostic> {
        let (word, arguments): (&str, &[Argument]) = if let ExpressionKind::Name(name) = &value.kind {
            (name, &[])
        } else if let ExpressionKind::Call { name, arguments, piped: false, .. } = &value.kind {
            (name, arguments)
        } else if parameter.accepts.is_empty() {
            return Err(wrong_choice(parameter, &canonical(value)).at(value.span));
        } else {
            return Ok(None);
        };
        let found = parameter.choices.iter().enumerate().find(|(_, choice)| choice.name == word);
        match found {
            Some((choice, entry)) => {
                let given = self.bind(word, entry.parameters, arguments, value.span, slots, scope)?;
                Ok(Some(What::Choice { choice, given }))
            }
            None if parameter.accepts.is_empty() => Err(wrong_choice(parameter, word).at(value.span)),
            None => Ok(None),
        }
    }

    /// A published default: an expression of its own, one for the whole notebook.
    fn default(
        &mut self,
        owner: &str,
        parameter: &'static Parameter,
        text: &'static str,
        span: Span,
        slots: &mut Vec<Arc<Node>>,
    ) -> Result<What, Diagnostic> {
        let program = parse(text, SourceId::default());
        let statement =
            program.ok().and_then(|mut program| program.statements.pop()).map(|statement| statement.kind);
        let Some(StatementKind::Show(mut expression)) = statement else {
            return Err(Fault::new(
                "internal",
                format!("the default of `{}` cannot be read", parameter.name),
            )
            .at(span));
        };
        move_to(&mut expression, span);
        let mut place = Sha256::new();
        place.update(format!("default\0{owner}\0{}\0", parameter.name));
        let mut scope = Scope::new(place);
        self.what(parameter, &expression, slots, &mut scope)
    }
}

impl Scope {
    /// A scope at a place, without local names and outside all functions.
    fn new(place: Sha256) -> Self {
        Self { place, random: 0, calls: 0, locals: Vec::new(), functions: Vec::new(), called: None }
    }

    /// The id of the next random variable of this definition or call.
    fn next_variable(&mut self) -> [u8; 32] {
        let mut hash = self.place.clone();
        hash.update(format!("variable\0{}\0", self.random));
        self.random += 1;
        hash.finalize().into()
    }
}

/// A function is called by a word; operators have entries too, which no call reaches.
fn is_word(name: &str) -> bool {
    name.chars().all(|letter| letter.is_alphanumeric() || letter == '_')
        && !matches!(name, "in" | "by" | "negate")
}

pub(super) const TOO_LARGE: &str = "too-large";

fn too_large(span: Span) -> Diagnostic {
    Fault::new(TOO_LARGE, "this expression grows too large when its functions are put in")
        .help(format!("the most is {SIZE_LIMIT} parts: give intermediate results names of their own"))
        .at(span)
}

/// The names that the language keeps for itself as settings.
pub(super) const SETTINGS: [&str; 3] = ["clock", "members", "seed"];

/// A parameter or a loop name cannot be a setting.
pub(super) fn check_local_name(name: &str, span: Span) -> Result<(), Diagnostic> {
    if SETTINGS.contains(&name) {
        return Err(Fault::new(
            "setting-name",
            format!("`{name}` is a setting of the notebook, and cannot be a local name"),
        )
        .help("take another name")
        .at(span));
    }
    Ok(())
}

/// A literal number: an instant with an era, else a quantity.
fn number(value: f64, unit: Option<&UnitText>, span: Span) -> Result<Value, Diagnostic> {
    let Some(written) = unit else {
        return Ok(Value::Quantity(Quantity::certain(value, Unit::number())));
    };
    if let Some(era) = Era::parse(&written.text) {
        return Instant::new(value, era).map(Value::Instant).map_err(|fault| fault.at(span));
    }
    // The unit of `800..0 ka` is that of both, and stands after one of them.
    let number = Some(value).filter(|_| span.end == written.span.end);
    let unit =
        Unit::parse(&written.text).map_err(|fault| unit_fault(&fault, written, number).at(written.span))?;
    Ok(Value::Quantity(Quantity { values: Block::single(value), measure: Measure::of(unit) }))
}

fn target_unit(unit: &UnitText) -> Result<Arc<Node>, Diagnostic> {
    if Era::parse(&unit.text).is_none() {
        Unit::parse(&unit.text).map_err(|fault| unit_fault(&fault, unit, None).at(unit.span))?;
    }
    let text: Arc<str> = Arc::from(unit.text.as_str());
    Ok(Node::new(NodeKind::Constant(Arc::new(Value::Text(text.clone()))), unit.span, text))
}

/// `± 0.3 ka`: the spread of an instant written in an era is a duration.
fn spread_in_era(spread: &Expression) -> Option<Value> {
    let ExpressionKind::Number { value, unit: Some(unit) } = &spread.kind else { return None };
    let era = Era::parse(&unit.text)?;
    let years = Unit::parse("yr").ok()?;
    Some(Value::Quantity(Quantity::certain(value * era.years_per_unit(), years)))
}

/// `[sun + sulfate, gases]` as labels, which are never looked up.
fn groups(value: &Expression) -> Result<Vec<Vec<Arc<str>>>, Diagnostic> {
    let ExpressionKind::List(items) = &value.kind else {
        return Err(Fault::new("wrong-argument", "labels are expected in a list")
            .help("write for instance `[sun + sulfate, gases]`")
            .at(value.span));
    };
    items.iter().map(group).collect()
}

/// `December..February`, or one month.
fn months(value: &Expression) -> Result<(usize, usize), Diagnostic> {
    let month = |part: &Expression| -> Result<usize, Diagnostic> {
        let word = canonical(part);
        MONTHS.iter().position(|month| *month == word).ok_or_else(|| {
            let fault = Fault::new("unknown-choice", format!("`{word}` is no month"));
            let help = catalogue::nearest(&word, MONTHS.iter().copied())
                .or_else(|| MONTHS.iter().copied().find(|month| word.len() > 2 && month.starts_with(&word)));
            match help {
                Some(near) => fault.help(format!("did you mean `{near}`?")),
                None => fault.help("months are written out, such as `December..February`"),
            }
            .at(part.span)
        })
    };
    match &value.kind {
        ExpressionKind::Binary { operator: BinaryOperator::To, left, right } => {
            Ok((month(left)?, month(right)?))
        }
        _ => month(value).map(|only| (only, only)),
    }
}

fn group(item: &Expression) -> Result<Vec<Arc<str>>, Diagnostic> {
    match &item.kind {
        ExpressionKind::Name(name) => Ok(vec![Arc::from(name.as_str())]),
        ExpressionKind::Text(text) => Ok(vec![Arc::from(text.as_str())]),
        ExpressionKind::Group(inner) => group(inner),
        ExpressionKind::Binary { operator: BinaryOperator::Plus, left, right } => {
            let mut labels = group(left)?;
            labels.extend(group(right)?);
            Ok(labels)
        }
        ExpressionKind::Number { .. }
        | ExpressionKind::Date { .. }
        | ExpressionKind::List(_)
        | ExpressionKind::Call { .. }
        | ExpressionKind::Negate(_)
        | ExpressionKind::Binary { .. }
        | ExpressionKind::Convert { .. }
        | ExpressionKind::For { .. } => Err(Fault::new("wrong-argument", "a label, or a sum of labels, is expected here")
            .help("write the labels of components, such as `sun + sulfate`; a label that is no name stands in quotes")
            .at(item.span)),
    }
}

/// The spans of a default's text are those of the call that leaves it out.
fn move_to(expression: &mut Expression, span: Span) {
    expression.span = span;
    match &mut expression.kind {
        ExpressionKind::Number { unit, .. } => {
            if let Some(unit) = unit {
                unit.span = span;
            }
        }
        ExpressionKind::Date { .. } | ExpressionKind::Text(_) | ExpressionKind::Name(_) => {}
        ExpressionKind::List(items) => items.iter_mut().for_each(|item| move_to(item, span)),
        ExpressionKind::Call { arguments, .. } => {
            arguments.iter_mut().for_each(|argument| move_to(&mut argument.value, span));
        }
        ExpressionKind::Negate(inner)
        | ExpressionKind::Group(inner)
        | ExpressionKind::Convert { value: inner, .. } => {
            move_to(inner, span);
        }
        ExpressionKind::Binary { left, right, .. } => {
            move_to(left, span);
            move_to(right, span);
        }
        ExpressionKind::For { body, list, .. } => {
            move_to(body, span);
            move_to(list, span);
        }
    }
}
