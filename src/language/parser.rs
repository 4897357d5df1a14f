//! Tokens to a syntax tree, by nom. Every operator and opening bracket commits (`cut`), so that a failure is
//! reported where it happened; a failure at the end of the text is incomplete input, any other is wrong input.

use nom::branch::alt;
use nom::combinator::{cut, map, opt};
use nom::multi::separated_list0;
use nom::sequence::{preceded, terminated};
use nom::{Err as Stop, IResult, Input, Needed, Parser};

use super::explain::{LINES, Refusal, after_statement, explain};
pub use super::lexer::NESTING_LIMIT;
use super::lexer::{LexicalError, Token, TokenKind, shortened, tokens};
use super::syntax::{
    Argument, BinaryOperator, Expression, ExpressionKind, Program, Statement, StatementKind, UnitText,
};
use crate::base::{Diagnostic, Fault, Mark, SourceId, Span};

/// How deep an expression may be, chains of operators included; evaluation recurses over it.
const DEPTH_LIMIT: u32 = 400;

/// A text that is no program.
#[derive(Clone, Debug)]
pub struct SyntaxError {
    /// What is wrong, and where; one for each statement that cannot be read.
    pub diagnostics: Vec<Diagnostic>,
    /// Whether the text is right so far and only ends too early.
    pub incomplete: bool,
}

/// Read a cell or a script.
///
/// # Errors
/// [`SyntaxError`] with a diagnostic for every statement that cannot be read.
pub fn parse(text: &str, source: SourceId) -> Result<Program, SyntaxError> {
    let lexed = tokens(text, source).map_err(|LexicalError { diagnostic, incomplete }| SyntaxError {
        diagnostics: vec![*diagnostic],
        incomplete,
    })?;
    let end = Span::new(source, text.trim_end().len(), text.trim_end().len());
    let mut program = Program::default();
    let mut error = SyntaxError { diagnostics: Vec::new(), incomplete: false };
    let last = lexed.tokens.last().map(|token| token.span);
    for line in lexed.tokens.split(|token| token.kind == TokenKind::Newline).filter(|line| !line.is_empty()) {
        let Refusal { mut diagnostic, ran_out } = match statement(line, end) {
            Ok(statement) => {
                program.statements.push(statement);
                continue;
            }
            Err(refusal) => refusal,
        };
        let is_last = line.last().map(|token| token.span) == last;
        let open = lexed.unclosed.filter(|_| is_last);
        if let Some((sign, place)) = open {
            let never = format!("this `{sign}` is never closed");
            if ran_out {
                let closing = if sign == "(" { ")" } else { "]" };
                diagnostic =
                    Fault::new("syntax", never).help(format!("close it with `{closing}`")).at(place).into();
            } else {
                let before = text.get(..diagnostic.primary.span.start).unwrap_or("");
                if before.trim_end_matches([' ', '\t']).ends_with(['\n', '\r']) {
                    diagnostic.help = Some(format!("close the `{sign}` before this line"));
                }
                diagnostic.secondary.push(Mark { span: place, label: never });
            }
        } else if ran_out && !is_last {
            diagnostic.help.get_or_insert_with(|| LINES.to_owned());
        }
        // After a statement that is wrong no further text makes the whole right.
        error.incomplete = ran_out && is_last && error.diagnostics.is_empty();
        error.diagnostics.push(*diagnostic);
    }
    if error.diagnostics.is_empty() { Ok(program) } else { Err(error) }
}

/// What is left of a statement's tokens.
#[derive(Clone, Copy)]
struct Tokens<'a>(&'a [Token]);

impl<'a> Input for Tokens<'a> {
    type Item = &'a Token;
    type Iter = std::slice::Iter<'a, Token>;
    type IterIndices = std::iter::Enumerate<std::slice::Iter<'a, Token>>;

    fn input_len(&self) -> usize {
        self.0.len()
    }

    fn take(&self, index: usize) -> Self {
        Tokens(self.0.get(..index).unwrap_or(self.0))
    }

    fn take_from(&self, index: usize) -> Self {
        Tokens(self.0.get(index..).unwrap_or(&[]))
    }

    fn take_split(&self, index: usize) -> (Self, Self) {
        (self.take_from(index), self.take(index))
    }

    fn position<P>(&self, predicate: P) -> Option<usize>
    where
        P: Fn(Self::Item) -> bool,
    {
        self.0.iter().position(predicate)
    }

    fn iter_elements(&self) -> Self::Iter {
        self.0.iter()
    }

    fn iter_indices(&self) -> Self::IterIndices {
        self.0.iter().enumerate()
    }

    fn slice_index(&self, count: usize) -> Result<usize, Needed> {
        if self.0.len() >= count { Ok(count) } else { Err(Needed::new(count - self.0.len())) }
    }
}

/// A failure: how many tokens were left there, and what would have been right.
pub(super) struct Failure {
    pub(super) left: usize,
    pub(super) expected: Vec<&'static str>,
    /// A more exact fault than "found this, expected that".
    pub(super) fault: Option<Box<(Fault, Span)>>,
}

impl Failure {
    fn expecting(input: Tokens<'_>, expected: &'static str) -> Stop<Self> {
        Stop::Error(Failure { left: input.0.len(), expected: vec![expected], fault: None })
    }

    fn because(input: Tokens<'_>, fault: Fault, span: Span) -> Stop<Self> {
        Stop::Failure(Failure {
            left: input.0.len(),
            expected: Vec::new(),
            fault: Some(Box::new((fault, span))),
        })
    }
}

impl<'a> nom::error::ParseError<Tokens<'a>> for Failure {
    fn from_error_kind(input: Tokens<'a>, _: nom::error::ErrorKind) -> Self {
        Failure { left: input.0.len(), expected: Vec::new(), fault: None }
    }

    fn append(_: Tokens<'a>, _: nom::error::ErrorKind, other: Self) -> Self {
        other
    }

    /// The failure further on says more; at the same place all expectations count.
    fn or(mut self, mut other: Self) -> Self {
        match self.left.cmp(&other.left) {
            std::cmp::Ordering::Less => self,
            std::cmp::Ordering::Greater => other,
            std::cmp::Ordering::Equal => {
                self.expected.append(&mut other.expected);
                self
            }
        }
    }
}

type Parsed<'a, T> = IResult<Tokens<'a>, T, Failure>;

fn statement(line: &[Token], end: Span) -> Result<Statement, Refusal> {
    let whole = line.first().zip(line.last()).map_or(end, |(first, last)| first.span.to(last.span));
    let (rest, kind) =
        match alt((function, definition, map(expression, StatementKind::Show))).parse(Tokens(line)) {
            Ok(parsed) => parsed,
            Err(Stop::Error(failure) | Stop::Failure(failure)) => return Err(explain(line, failure, end)),
            Err(Stop::Incomplete(_)) => {
                return Err(Refusal {
                    diagnostic: Fault::new("syntax", "the text ends too early").at(end).into(),
                    ran_out: true,
                });
            }
        };
    if !rest.0.is_empty() {
        return Err(after_statement(line, rest.0.len(), end));
    }
    let (StatementKind::Define { expression, .. }
    | StatementKind::Function { body: expression, .. }
    | StatementKind::Show(expression)) = &kind;
    if expression.depth > DEPTH_LIMIT {
        return Err(Refusal { diagnostic: too_deep().at(expression.span).into(), ran_out: false });
    }
    Ok(Statement { kind, span: whole })
}

fn too_deep() -> Fault {
    Fault::new("nesting", "this expression has too many levels")
        .help(format!("the most is {DEPTH_LIMIT}: give parts of it names of their own"))
}

/// Refuses a chain as it grows: a tree of 500,000 levels (`1+1+1+…`) would run out of stack when it is dropped.
fn bounded<'a>(input: Tokens<'a>, whole: Expression) -> Result<Expression, Stop<Failure>> {
    if whole.depth > DEPTH_LIMIT { Err(Failure::because(input, too_deep(), whole.span)) } else { Ok(whole) }
}

fn any_token<'a>(input: Tokens<'a>, expected: &'static str) -> Parsed<'a, &'a Token> {
    match input.0.split_first() {
        Some((token, rest)) => Ok((Tokens(rest), token)),
        None => Err(Failure::expecting(input, expected)),
    }
}

fn fixed<'a>(sign: &'static str, expected: &'static str) -> impl FnMut(Tokens<'a>) -> Parsed<'a, Span> {
    move |input| {
        let (rest, token) = any_token(input, expected)?;
        if token.kind == TokenKind::Fixed(sign) {
            Ok((rest, token.span))
        } else {
            Err(Failure::expecting(input, expected))
        }
    }
}

fn name(input: Tokens<'_>) -> Parsed<'_, (String, Span)> {
    let (rest, token) = any_token(input, "a name")?;
    if let TokenKind::Name(name) = &token.kind {
        Ok((rest, (name.clone(), token.span)))
    } else {
        Err(Failure::expecting(input, "a name"))
    }
}

fn unit(input: Tokens<'_>) -> Parsed<'_, UnitText> {
    let (rest, token) = any_token(input, "a unit")?;
    token.as_unit().map(|unit| (rest, unit)).ok_or_else(|| Failure::expecting(input, "a unit"))
}

fn definition(input: Tokens<'_>) -> Parsed<'_, StatementKind> {
    let (rest, (name, name_span)) = terminated(name, fixed("=", "`=`")).parse(input)?;
    let (rest, expression) = cut(expression).parse(rest)?;
    Ok((rest, StatementKind::Define { name, name_span, expression }))
}

fn function(input: Tokens<'_>) -> Parsed<'_, StatementKind> {
    let (rest, (name, name_span)) = terminated(name, fixed("(", "`(`")).parse(input)?;
    let parameters = separated_list0(fixed(",", "`,`"), self::name);
    let (rest, parameters) = terminated(parameters, (fixed(")", "`)`"), fixed("=", "`=`"))).parse(rest)?;
    let (rest, body) = cut(expression).parse(rest)?;
    Ok((rest, StatementKind::Function { name, name_span, parameters, body }))
}

/// `span { "|>" call | "in" unit }`, the loosest of all.
fn expression(input: Tokens<'_>) -> Parsed<'_, Expression> {
    let (mut rest, mut whole) = span(input)?;
    loop {
        if let Ok((after, _)) = fixed("|>", "`|>`")(rest) {
            let (after, mut call) = cut(pipe_target).parse(after)?;
            let span = whole.span.to(call.span);
            if let ExpressionKind::Call { arguments, piped, .. } = &mut call.kind {
                arguments.insert(0, Argument { label: None, value: whole });
                *piped = true;
            }
            whole = bounded(input, Expression::new(call.kind, span))?;
            rest = after;
        } else if let Ok((after, _)) = fixed("in", "`in`")(rest) {
            let (after, unit) = cut(unit).parse(after)?;
            let span = whole.span.to(unit.span);
            whole = bounded(
                input,
                Expression::new(ExpressionKind::Convert { value: Box::new(whole), unit }, span),
            )?;
            rest = after;
        } else {
            return Ok((rest, whole));
        }
    }
}

fn pipe_target(input: Tokens<'_>) -> Parsed<'_, Expression> {
    const EXPECTED: &str = "a call such as `scale(0.8)`";
    let (rest, primary) = call_or_name(input).map_err(|stop| match stop {
        Stop::Error(_) => Failure::expecting(input, EXPECTED),
        Stop::Failure(_) | Stop::Incomplete(_) => stop,
    })?;
    if let ExpressionKind::Name(name) = &primary.kind {
        let fault =
            Fault::new("syntax", format!("found the name `{}` where {EXPECTED} belongs", shortened(name)))
                .help(format!("a call has brackets, even empty ones: `|> {}()`", shortened(name)));
        return Err(Failure::because(input, fault, primary.span));
    }
    Ok((rest, primary))
}

fn binary(operator: BinaryOperator, left: Expression, right: Expression) -> Expression {
    let span = left.span.to(right.span);
    Expression::new(ExpressionKind::Binary { operator, left: Box::new(left), right: Box::new(right) }, span)
}

/// `sum [".." sum] ["by" sum]`.
fn span(input: Tokens<'_>) -> Parsed<'_, Expression> {
    let (rest, mut whole) = sum(input)?;
    let (rest, end) = opt(preceded(fixed("..", "`..`"), cut(sum))).parse(rest)?;
    if let Some(end) = end {
        lend_unit(&mut whole, &end);
        whole = binary(BinaryOperator::To, whole, end);
    }
    let (rest, step) = opt(preceded(fixed("by", "`by`"), cut(sum))).parse(rest)?;
    if let Some(step) = step {
        whole = binary(BinaryOperator::By, whole, step);
    }
    Ok((rest, whole))
}

/// A chain of operators of one rank, left to right.
fn chain<'a>(
    input: Tokens<'a>,
    ranks: &'static [(&'static str, BinaryOperator)],
    operand: fn(Tokens<'a>) -> Parsed<'a, Expression>,
) -> Parsed<'a, Expression> {
    let (mut rest, mut whole) = operand(input)?;
    loop {
        let operator = rest.0.first().and_then(|token| {
            ranks.iter().find(|(sign, _)| token.kind == TokenKind::Fixed(sign)).map(|(_, operator)| *operator)
        });
        let Some(operator) = operator else { return Ok((rest, whole)) };
        let (after, right) = cut(operand).parse(rest.take_from(1))?;
        whole = bounded(input, binary(operator, whole, right))?;
        rest = after;
    }
}

fn sum(input: Tokens<'_>) -> Parsed<'_, Expression> {
    chain(input, &[("+", BinaryOperator::Plus), ("-", BinaryOperator::Minus)], product)
}

fn product(input: Tokens<'_>) -> Parsed<'_, Expression> {
    chain(input, &[("*", BinaryOperator::Times), ("/", BinaryOperator::Over)], measured)
}

/// `signed ["±" signed]`; a bare centre takes the unit of its spread.
fn measured(input: Tokens<'_>) -> Parsed<'_, Expression> {
    let (rest, mut centre) = signed(input)?;
    let (rest, spread) = opt(preceded(fixed("±", "`±`"), cut(signed))).parse(rest)?;
    match spread {
        None => Ok((rest, centre)),
        Some(spread) => {
            lend_unit(&mut centre, &spread);
            Ok((rest, binary(BinaryOperator::PlusMinus, centre, spread)))
        }
    }
}

/// A sign before a literal belongs to it unless `^` follows.
fn signed(input: Tokens<'_>) -> Parsed<'_, Expression> {
    let mut rest = input;
    let mut signs = Vec::new();
    while let Ok((after, span)) = fixed("-", "`-`")(rest) {
        signs.push(span);
        rest = after;
    }
    let committed = !signs.is_empty();
    let (rest, mut whole) = if committed { cut(power).parse(rest)? } else { power(rest)? };
    if signs.len() as u32 > DEPTH_LIMIT / 2 {
        let fault = Fault::new("nesting", "too many minus signs in a row").help("two minus signs make none");
        return Err(Failure::because(input, fault, whole.span));
    }
    for sign in signs.into_iter().rev() {
        whole = bounded(input, negative(sign, whole))?;
    }
    Ok((rest, whole))
}

fn negative(sign: Span, mut whole: Expression) -> Expression {
    let span = sign.to(whole.span);
    if let ExpressionKind::Number { value, .. } = &mut whole.kind {
        *value = -*value;
        return Expression { span, ..whole };
    }
    Expression::new(ExpressionKind::Negate(Box::new(whole)), span)
}

/// `primary ["^" ["-"] power]`: right to left, and `2^-3^2` is 2^(-9), as `-3^2` is -9.
fn power(input: Tokens<'_>) -> Parsed<'_, Expression> {
    let (mut rest, mut top) = primary(input)?;
    let mut below = Vec::new();
    while let Ok((after, _)) = fixed("^", "`^`")(rest) {
        let (after, sign) = opt(fixed("-", "`-`")).parse(after)?;
        let (after, next) = cut(primary).parse(after)?;
        below.push((std::mem::replace(&mut top, next), sign));
        rest = after;
    }
    for (base, sign) in below.into_iter().rev() {
        let exponent = match sign {
            Some(sign) => negative(sign, top),
            None => top,
        };
        top = bounded(input, binary(BinaryOperator::Power, base, exponent))?;
    }
    Ok((rest, top))
}

fn primary(input: Tokens<'_>) -> Parsed<'_, Expression> {
    let (rest, token) = any_token(input, "an expression")?;
    match &token.kind {
        TokenKind::Number(value) => {
            let (rest, unit) = opt(unit).parse(rest)?;
            let span = unit.as_ref().map_or(token.span, |unit| token.span.to(unit.span));
            Ok((rest, Expression::new(ExpressionKind::Number { value: *value, unit }, span)))
        }
        TokenKind::Date(year, month, day) => {
            let kind = ExpressionKind::Date { year: *year, month: *month, day: *day };
            Ok((rest, Expression::new(kind, token.span)))
        }
        TokenKind::Text(text) => Ok((rest, Expression::new(ExpressionKind::Text(text.clone()), token.span))),
        TokenKind::Name(_) => call_or_name(input),
        TokenKind::Fixed("(") => {
            let (rest, inner) = cut(expression).parse(rest)?;
            let (rest, close) = cut(fixed(")", "`)`")).parse(rest)?;
            Ok((rest, Expression::new(ExpressionKind::Group(Box::new(inner)), token.span.to(close))))
        }
        TokenKind::Fixed("[") => list(rest, token.span),
        TokenKind::Fixed(_) | TokenKind::Unit(_) | TokenKind::Newline => {
            Err(Failure::expecting(input, "an expression"))
        }
    }
}

fn list(rest: Tokens<'_>, open: Span) -> Parsed<'_, Expression> {
    let (rest, mut items) = items(rest, "]", expression)?;
    if let ([_], Ok((after, _))) = (items.as_slice(), fixed("for", "`for`")(rest)) {
        let (rest, (variable, variable_span)) = cut(name).parse(after)?;
        let (rest, _) = cut(fixed("in", "`in`")).parse(rest)?;
        let (rest, list) = cut(expression).parse(rest)?;
        let (rest, close) = cut(fixed("]", "`]`")).parse(rest)?;
        let body = Box::new(items.remove(0));
        let kind = ExpressionKind::For { body, variable, variable_span, list: Box::new(list) };
        return Ok((rest, Expression::new(kind, open.to(close))));
    }
    let (rest, close) = cut(fixed("]", "`,` or `]`")).parse(rest)?;
    let (rest, unit) = opt(unit).parse(rest)?;
    if let Some(unit) = &unit {
        for item in &mut items {
            give_unit(item, unit).map_err(|span| {
                let fault = Fault::new(
                    "syntax",
                    format!("the unit `{}` after the list cannot go to this item", unit.text),
                )
                .help("it goes to numbers; write the unit inside the other items, or leave it away");
                Failure::because(rest, fault, span)
            })?;
        }
    }
    let span = open.to(unit.map_or(close, |unit| unit.span));
    Ok((rest, Expression::new(ExpressionKind::List(items), span)))
}

/// Items with a comma between two, and one after the last if one likes; stops before `closing`.
fn items<'a, T>(
    input: Tokens<'a>,
    closing: &'static str,
    item: fn(Tokens<'a>) -> Parsed<'a, T>,
) -> Parsed<'a, Vec<T>> {
    let mut found = Vec::new();
    let mut rest = input;
    while fixed(closing, closing)(rest).is_err() {
        let (after, one) = cut(item).parse(rest)?;
        found.push(one);
        match fixed(",", "`,`")(after) {
            Ok((after, _)) => rest = after,
            Err(_) => return Ok((after, found)),
        }
    }
    Ok((rest, found))
}

fn call_or_name(input: Tokens<'_>) -> Parsed<'_, Expression> {
    let (rest, (name, name_span)) = name(input)?;
    let Ok((rest, _)) = fixed("(", "`(`")(rest) else {
        return Ok((rest, Expression::new(ExpressionKind::Name(name), name_span)));
    };
    let (rest, arguments) = items(rest, ")", argument)?;
    let (rest, close) = cut(fixed(")", "`,` or `)`")).parse(rest)?;
    let kind = ExpressionKind::Call { name, name_span, arguments, piped: false };
    Ok((rest, Expression::new(kind, name_span.to(close))))
}

fn argument(input: Tokens<'_>) -> Parsed<'_, Argument> {
    let (rest, label) = opt(terminated(name, fixed(":", "`:`"))).parse(input)?;
    let (rest, value) = if label.is_some() { cut(expression).parse(rest)? } else { expression(rest)? };
    Ok((rest, Argument { label, value }))
}

/// Bare numbers across `±` and `..` take the unit that follows.
fn lend_unit(bare: &mut Expression, from: &Expression) {
    if let Some(unit) = trailing_unit(from) {
        // What is no number keeps the unit that it has.
        let _ = give_unit(bare, &unit);
    }
}

fn trailing_unit(expression: &Expression) -> Option<UnitText> {
    if let ExpressionKind::Number { unit, .. } = &expression.kind {
        return unit.clone();
    }
    if let ExpressionKind::Binary { operator: BinaryOperator::PlusMinus, right, .. } = &expression.kind {
        return trailing_unit(right);
    }
    None
}

/// Every bare number takes the unit; fails with the place of the first part that is no number.
fn give_unit(expression: &mut Expression, given: &UnitText) -> Result<(), Span> {
    if let ExpressionKind::Number { unit, .. } = &mut expression.kind {
        unit.get_or_insert_with(|| given.clone());
        return Ok(());
    }
    if let ExpressionKind::Binary { operator: BinaryOperator::PlusMinus | BinaryOperator::To, left, right } =
        &mut expression.kind
    {
        let left = give_unit(left, given);
        return left.and(give_unit(right, given));
    }
    if let ExpressionKind::List(items) = &mut expression.kind {
        let mut first = Ok(());
        for item in items {
            first = first.and(give_unit(item, given));
        }
        return first;
    }
    Err(expression.span)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::language::canonical;

    fn shown(text: &str) -> String {
        let program =
            parse(text, SourceId(0)).unwrap_or_else(|error| panic!("{text}: {:?}", error.diagnostics));
        match &program.statements[0].kind {
            StatementKind::Show(expression) | StatementKind::Define { expression, .. } => grouped(expression),
            StatementKind::Function { body, .. } => grouped(body),
        }
    }

    /// The tree with a bracket round every operation.
    fn grouped(expression: &Expression) -> String {
        match &expression.kind {
            ExpressionKind::Binary { operator, left, right } => {
                format!("({} {} {})", grouped(left), operator.symbol(), grouped(right))
            }
            ExpressionKind::Negate(inner) => format!("(-{})", grouped(inner)),
            ExpressionKind::Convert { value, unit } => format!("({} in {})", grouped(value), unit.text),
            ExpressionKind::Group(inner) => grouped(inner),
            ExpressionKind::Number { .. }
            | ExpressionKind::Date { .. }
            | ExpressionKind::Text(_)
            | ExpressionKind::List(_)
            | ExpressionKind::Name(_)
            | ExpressionKind::Call { .. }
            | ExpressionKind::For { .. } => canonical(expression),
        }
    }

    fn refused(text: &str) -> SyntaxError {
        parse(text, SourceId(0)).expect_err(text)
    }

    #[test]
    fn operators_bind_as_the_rules_say() {
        assert_eq!(shown("-2^2"), "(-(2 ^ 2))");
        assert_eq!(shown("2^3^2"), "(2 ^ (3 ^ 2))");
        assert_eq!(shown("2^-3^2"), "(2 ^ (-(3 ^ 2)))");
        assert_eq!(shown("2^-3"), "(2 ^ -3)");
        assert_eq!(shown("-20 ± 3 W/m2"), "(-20 W/m2 ± 3 W/m2)");
        assert_eq!(shown("1 - 2 * 3 ± 1 - 4"), "((1 - (2 * (3 ± 1))) - 4)");
        assert_eq!(shown("1750..2020 CE by 1 yr"), "((1750 CE .. 2020 CE) by 1 yr)");
        assert_eq!(shown("a + b in ppb"), "((a + b) in ppb)");
        assert_eq!(shown("-10 ka"), "-10 ka");
    }

    #[test]
    fn units_follow_numbers_lists_and_in_and_nothing_else() {
        assert_eq!(shown("8 W/m2/4"), "(8 W/m2 / 4)");
        assert_eq!(shown("8 W / m2"), "(8 W / m2)");
        assert_eq!(shown("0.3 1/yr"), "0.3 1/yr");
        assert_eq!(shown("450 cal BP"), "450 cal BP");
        assert_eq!(shown("[2, 3 ± 1, 4 ppm] degC"), "[2 degC, 3 degC ± 1 degC, 4 ppm]");
        assert_eq!(shown("x in 1/yr"), "(x in 1/yr)");
        assert_eq!(shown("[e * 2 for e in xs]"), "[e * 2 for e in xs]");
        assert_eq!(shown("7 kg/m^2/s"), "7 kg/m^2/s");
    }

    #[test]
    fn a_line_goes_on_inside_brackets_and_before_a_pipe() {
        let text = "x = load(\"a.csv\",\n  time: \"year\") # a comment\n\n  |> scale(2)\n\ny = 3";
        let program = parse(text, SourceId(0)).unwrap();
        assert_eq!(program.statements.len(), 2);
        assert_eq!(shown(text), "load(\"a.csv\", time: \"year\") |> scale(2)");
    }

    #[test]
    fn running_out_of_text_is_told_apart_from_being_wrong() {
        for text in ["x =", "f(1,", "f(1", "a +", "[1, 2", "x |>", "\"abc", "1850..", "f(x, method:"] {
            assert!(refused(text).incomplete, "{text}");
        }
        for text in ["x = )", "f(1,, 2)", "a + * b", "1 2", "x |> y", "x =\ny = 2", "= 3", "a b", "5 5"] {
            assert!(!refused(text).incomplete, "{text}");
        }
    }

    #[test]
    fn deep_nesting_is_refused_and_not_run_into() {
        let deep = format!("{}1{}", "(".repeat(5000), ")".repeat(5000));
        assert_eq!(refused(&deep).diagnostics[0].code, "nesting");
        let long = vec!["1"; 5000].join("+");
        assert_eq!(refused(&long).diagnostics[0].code, "nesting");
        assert_eq!(refused(&format!("{}1", "-".repeat(5000))).diagnostics[0].code, "nesting");
        let tower = vec!["2"; 5000].join("^");
        assert_eq!(refused(&tower).diagnostics[0].code, "nesting");
    }

    #[test]
    fn names_are_in_one_normal_form_and_both_micro_signs_are_one() {
        assert_eq!(shown("e\u{301}te\u{301}"), "été");
        assert_eq!(shown("\u{3bc}"), "\u{b5}");
        assert_eq!(shown("5 \u{2212} 3"), "(5 - 3)");
    }

    #[test]
    fn every_statement_that_cannot_be_read_is_reported() {
        assert_eq!(refused("a = )\nb = 3\nc = = 4").diagnostics.len(), 1);
        assert_eq!(refused("a = *\nb = 3\nc = = 4").diagnostics.len(), 2);
    }
}
