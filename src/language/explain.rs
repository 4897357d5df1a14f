//! What a person reads when a statement cannot be read.

use super::lexer::{Token, TokenKind};
use super::parser::Failure;
use crate::base::{Diagnostic, Fault, Span};

/// Where a line may go on; what a line lacks that ends too early.
pub(super) const LINES: &str = "a line goes on inside brackets, and where the next line begins with `|>`";

/// A statement that cannot be read; `ran_out` where it is right so far and only ends too early.
pub(super) struct Refusal {
    pub(super) diagnostic: Box<Diagnostic>,
    pub(super) ran_out: bool,
}

/// Something stands after a whole expression; `left` tokens of the line were not read.
pub(super) fn after_statement(line: &[Token], left: usize, end: Span) -> Refusal {
    let at = line.len().saturating_sub(left);
    let found = line.get(at).map_or_else(String::new, Token::describe);
    let fault = Fault::new("syntax", format!("found {found} after a finished expression"))
        .label("I was expecting an operator or the end of the line");
    let span = line.get(at).map_or(end, |token| token.span);
    Refusal { diagnostic: with_advice(fault, line, at, Place::Outside).at(span).into(), ran_out: false }
}

/// The parser came no further.
pub(super) fn explain(line: &[Token], failure: Failure, end: Span) -> Refusal {
    if let Some(exact) = failure.fault {
        let (fault, span) = *exact;
        return Refusal { diagnostic: fault.at(span).into(), ran_out: false };
    }
    let mut choices: Vec<&str> = Vec::new();
    for choice in failure.expected {
        if !choices.contains(&choice) {
            choices.push(choice);
        }
    }
    let expected = match choices.as_slice() {
        [] => "something else".to_owned(),
        [one] => (*one).to_owned(),
        [all @ .., last] => format!("{} or {last}", all.join(", ")),
    };
    let at = line.len().saturating_sub(failure.left);
    let Some(token) = line.get(at) else {
        let last = line.last().map_or(end, |token| Span { start: token.span.end, ..token.span });
        let fault = Fault::new("syntax", format!("the line ends where {expected} belongs"))
            .label(format!("I was expecting {expected} after this"));
        return Refusal { diagnostic: fault.at(last).into(), ran_out: true };
    };
    let place = match expected.as_str() {
        "`,` or `)`" => Place::Call,
        "`,` or `]`" => Place::List,
        "`)`" => Place::Group,
        "`]`" => Place::Loop,
        "a name" => Place::Name,
        "a unit" => Place::Unit,
        _ => Place::Operand,
    };
    let fault = Fault::new("syntax", format!("found {} where {expected} belongs", token.describe()))
        .label(format!("I was expecting {expected} here"));
    Refusal { diagnostic: with_advice(fault, line, at, place).at(token.span).into(), ran_out: false }
}

/// Where the token stands that does not belong.
#[derive(Clone, Copy, PartialEq)]
enum Place {
    /// After a finished statement.
    Outside,
    /// After a finished argument.
    Call,
    /// After a finished item.
    List,
    /// After the expression of a group.
    Group,
    /// After the list of a `for`.
    Loop,
    /// Where a name belongs.
    Name,
    /// Where a unit belongs.
    Unit,
    /// Where an expression belongs.
    Operand,
}

fn with_advice(fault: Fault, line: &[Token], at: usize, place: Place) -> Fault {
    let token = line.get(at).map(|token| &token.kind);
    let previous = at.checked_sub(1).and_then(|before| line.get(before)).map(|token| &token.kind);
    match token.and_then(|token| advice(token, previous, place)) {
        Some(help) => fault.help(help),
        None => fault,
    }
}

fn advice(token: &TokenKind, previous: Option<&TokenKind>, place: Place) -> Option<String> {
    let sign = match token {
        TokenKind::Fixed(sign) => *sign,
        TokenKind::Unit(_) => {
            return Some(
                "a unit follows a number or a list that is written out; in a loop it stands inside"
                    .to_owned(),
            );
        }
        TokenKind::Number(_)
        | TokenKind::Date(..)
        | TokenKind::Name(_)
        | TokenKind::Text(_)
        | TokenKind::Newline => "",
    };
    let finished = !matches!(place, Place::Name | Place::Unit | Place::Operand);
    let help = match (sign, previous) {
        ("" | "(" | "[", Some(previous)) if finished => return two_values(token, previous, place),
        ("=", Some(TokenKind::Fixed("="))) => "a definition has one `=`, and the language has no comparisons",
        ("=", _) if place == Place::Call => "an argument's name is followed by a colon: `name: value`",
        ("=", _) => "only a name, or a name with parameters, can stand before `=`: `damped(x, tau) = …`",
        ("*", Some(TokenKind::Fixed("*"))) => "a power is written `^`",
        ("for", _) if place == Place::List => {
            "a loop has one expression before `for`: `[expression for item in list]`"
        }
        ("", _) if place == Place::Unit => {
            "a unit stands on the line of its `in`, without a number: x in W/m2"
        }
        ("for", _) if finished => "a loop is written `[expression for item in list]`",
        ("for", _) if place == Place::Operand => {
            "`for` is a reserved word: a loop is written `[expression for item in list]`"
        }
        ("in" | "by" | "for", _) if !finished => {
            return Some(format!("`{sign}` is a reserved word and cannot be a name"));
        }
        ("..", _) if finished => "a span has two ends: 1850..2020 CE",
        ("..", _) => "a span needs both its ends: 1850..2020 CE",
        ("by", _) => "a clock has one step: 1850..2020 CE by 1 yr",
        ("±", _) if finished => "a number has one `±`: put brackets round what is to be the centre",
        ("*" | "/", Some(TokenKind::Unit(_))) if finished => {
            "a unit has no inner spaces: W/m2; `in` comes last: put brackets round `x in unit` to go on"
        }
        ("+" | "-" | "*" | "/" | "^", _) if finished => {
            "`|>` and `in` come last: put brackets round them to go on: (x |> scale(2)) + y"
        }
        ("+" | "*" | "/" | "^" | "±", None) => LINES,
        ("|>", None) => "the value to hand on stands before `|>`",
        (",", _) if place == Place::Outside => {
            "several values stand on lines of their own, or in a list: `[a, b]`"
        }
        (",", _) if place == Place::Group => "a list stands in square brackets: `[a, b]`",
        (":", _) if finished => {
            "a colon stands after the name of an argument, inside a call: `f(name: value)`"
        }
        _ => return None,
    };
    Some(help.to_owned())
}

/// Two values side by side.
fn two_values(token: &TokenKind, previous: &TokenKind, place: Place) -> Option<String> {
    if let (TokenKind::Name(name), TokenKind::Number(number)) = (previous, token) {
        let era = match name.as_str() {
            "AD" | "CE" => Some("CE"),
            "BC" | "BCE" => Some("BCE"),
            _ => None,
        };
        if let Some(era) = era {
            return Some(format!("an era stands after its number: {number} {era}"));
        }
    }
    let help = match (previous, token) {
        (TokenKind::Unit(unit), TokenKind::Name(name)) if name == "BP" && unit.ends_with("yr") => {
            "an age is written such as 21 ka, 2.7 Ma or 450 cal BP"
        }
        (TokenKind::Number(_), TokenKind::Name(name)) if name.starts_with('_') => {
            "the digits of a number stand together: 11700"
        }
        (TokenKind::Unit(_), TokenKind::Name(_)) => {
            "to multiply, write `*`; a unit has no inner spaces: W/m2"
        }
        (TokenKind::Fixed(")"), TokenKind::Name(_)) => {
            "a unit follows a number, a list or `in`: write `(…) * 1 W/m2`, or `… in W/m2` to convert"
        }
        (TokenKind::Date(..), TokenKind::Name(_)) => "a date has no era and no time of day: 2015-06-15",
        (TokenKind::Text(_), _) | (_, TokenKind::Text(_)) if place == Place::Outside => {
            "statements stand on lines of their own, several values in a list: `[a, b]`"
        }
        (TokenKind::Text(_), _) | (_, TokenKind::Text(_)) => "a comma parts two values",
        _ if place == Place::Outside => {
            "to multiply, write `*` between them; statements stand on lines of their own"
        }
        _ if matches!(place, Place::Call | Place::List) => {
            "to multiply, write `*` between them; a comma parts two values"
        }
        _ => "to multiply, write `*` between them",
    };
    Some(help.to_owned())
}
