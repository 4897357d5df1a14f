//! Text to tokens. Units are told from names here, by what stands before them on the line.

use nom::branch::alt;
use nom::bytes::complete::{tag, take_while, take_while1};
use nom::character::complete::{char, digit1, one_of, satisfy};
use nom::combinator::{map, not, opt, peek, recognize, verify};
use nom::multi::many0_count;
use nom::sequence::{preceded, terminated};
use nom::{IResult, Parser};
use unicode_normalization::UnicodeNormalization;

use super::keywords::{KEYWORDS, KeywordRole};
use super::syntax::UnitText;
use crate::base::{Diagnostic, Fault, SourceId, Span};

/// How deep brackets may nest; the parser's recursion is bounded by it.
pub const NESTING_LIMIT: usize = 64;

#[derive(Clone, Debug, PartialEq)]
pub(super) enum TokenKind {
    Number(f64),
    Unit(String),
    Date(i64, u32, u32),
    Name(String),
    Text(String),
    /// A keyword or sign of the one table.
    Fixed(&'static str),
    Newline,
}

#[derive(Clone, Debug, PartialEq)]
pub(super) struct Token {
    pub(super) kind: TokenKind,
    pub(super) span: Span,
}

/// A fault of the lexer; `incomplete` where the text ended inside a token or a bracket.
pub(super) struct LexicalError {
    pub(super) diagnostic: Diagnostic,
    pub(super) incomplete: bool,
}

/// Where the lexer stands, for the rule that units follow a number, a list or `in`.
#[derive(Clone, Copy, PartialEq)]
enum Before {
    Quantity,
    ForName,
    ForWord,
    Other,
}

pub(super) fn tokens(text: &str, source: SourceId) -> Result<Vec<Token>, LexicalError> {
    let mut found: Vec<Token> = Vec::new();
    let mut open: Vec<(&'static str, Span)> = Vec::new();
    let mut before = Before::Other;
    let mut at = 0;
    loop {
        let rest = text.get(at..).unwrap_or("");
        let (rest, skipped) = blank(rest);
        at += skipped;
        if rest.is_empty() {
            break;
        }
        if before == Before::Quantity
            && let Ok((_, unit)) = unit_text(rest)
        {
            let span = Span::new(source, at, at + unit.len());
            found.push(Token { kind: TokenKind::Unit(tidy_unit(unit)), span });
            at += unit.len();
            before = Before::Other;
            continue;
        }
        let (kind, length) = token(rest, at, source)?;
        let span = Span::new(source, at, at + length);
        at += length;
        if let TokenKind::Fixed(sign) = kind {
            match sign {
                "(" | "[" => {
                    open.push((sign, span));
                    if open.len() > NESTING_LIMIT {
                        let fault = Fault::new("nesting", format!("brackets nest deeper than {NESTING_LIMIT} here"))
                            .help("give the inner parts names of their own");
                        return Err(LexicalError { diagnostic: fault.at(span), incomplete: false });
                    }
                }
                ")" | "]" => {
                    let expected = if sign == ")" { "(" } else { "[" };
                    match open.pop() {
                        Some((opened, _)) if opened == expected => {}
                        Some((opened, place)) => {
                            let closing = if opened == "(" { ")" } else { "]" };
                            let mut diagnostic = Fault::new("syntax", format!("found `{sign}` where `{opened}` is to be closed"))
                                .label(format!("I was expecting `{closing}`"))
                                .at(span);
                            diagnostic.secondary.push(crate::base::Mark { span: place, label: "opened here".to_owned() });
                            return Err(LexicalError { diagnostic, incomplete: false });
                        }
                        None => {
                            let fault = Fault::new("syntax", format!("found `{sign}`, but no bracket is open"))
                                .help(format!("take the `{sign}` away, or open one before it"));
                            return Err(LexicalError { diagnostic: fault.at(span), incomplete: false });
                        }
                    }
                }
                _ => {}
            }
        }
        if kind == TokenKind::Newline && !open.is_empty() {
            before = Before::Other;
            continue;
        }
        before = match (&kind, before) {
            (TokenKind::Number(_) | TokenKind::Fixed("]"), _) => Before::Quantity,
            (TokenKind::Fixed("in"), Before::ForName) => Before::Other,
            (TokenKind::Fixed("in"), _) => Before::Quantity,
            (TokenKind::Fixed("for"), _) => Before::ForWord,
            (TokenKind::Name(_), Before::ForWord) => Before::ForName,
            _ => Before::Other,
        };
        if kind == TokenKind::Fixed("|>") {
            // A line continues where the next begins with `|>`.
            while found.last().is_some_and(|last| last.kind == TokenKind::Newline) {
                found.pop();
            }
        }
        found.push(Token { kind, span });
    }
    if let Some((sign, span)) = open.pop() {
        let closing = if sign == "(" { ")" } else { "]" };
        let fault = Fault::new("syntax", format!("this `{sign}` is never closed")).help(format!("close it with `{closing}`"));
        return Err(LexicalError { diagnostic: fault.at(span), incomplete: true });
    }
    Ok(found)
}

/// The rest after spaces and a comment, and how many bytes those took.
fn blank(text: &str) -> (&str, usize) {
    let mut rest = text.trim_start_matches([' ', '\t', '\u{a0}']);
    if rest.starts_with('#') {
        rest = rest.find('\n').and_then(|end| rest.get(end..)).unwrap_or("");
    }
    (rest, text.len() - rest.len())
}

fn token(rest: &str, at: usize, source: SourceId) -> Result<(TokenKind, usize), LexicalError> {
    let parsed = alt((
        map(alt((tag("\r\n"), tag("\n"), tag("\r"))), |_| TokenKind::Newline),
        date,
        map(number, TokenKind::Number),
        fixed,
        map(name, TokenKind::Name),
        map(quoted, TokenKind::Text),
    ))
    .parse(rest);
    match parsed {
        Ok((after, kind)) => Ok((kind, rest.len() - after.len())),
        Err(_) => Err(strange(rest, at, source)),
    }
}

fn strange(rest: &str, at: usize, source: SourceId) -> LexicalError {
    let letter = rest.chars().next().unwrap_or(' ');
    let span = Span::new(source, at, at + letter.len_utf8());
    if letter == '"' {
        let incomplete = !rest.contains('\n');
        let fault = Fault::new("syntax", "this text is never closed").help("close it with `\"` on the same line");
        return LexicalError { diagnostic: fault.at(span), incomplete };
    }
    let help = match letter {
        '\'' | '“' | '”' | '‘' | '’' => "texts stand in straight double quotes: \"data/spots.csv\"",
        '.' => "a number needs a digit on both sides of its point; a span is written with two: 1850..2020 CE",
        '{' | '}' => "lists stand in square brackets, arguments in round ones",
        '×' | '·' => "to multiply, write `*`",
        '÷' => "to divide, write `/`",
        '–' | '—' => "for minus write `-`; for a span write two points: 1850..2020 CE",
        '%' => "write `percent` after a number",
        '|' => "to hand a value on, write `|>`",
        '>' | '<' | '!' | '&' => "the language has no comparisons: `within` takes a part of a series",
        _ => "the language uses letters, digits, and the signs |> .. ± + - * / ^ = ( ) [ ] , : #",
    };
    let fault = Fault::new("syntax", format!("found `{letter}`, which means nothing here")).help(help);
    LexicalError { diagnostic: fault.at(span), incomplete: false }
}

fn date(input: &str) -> IResult<&str, TokenKind> {
    let digits = |count: usize| verify(digit1, move |text: &str| text.len() == count);
    let (rest, (year, _, month, _, day)) =
        terminated((digits(4), char('-'), digits(2), char('-'), digits(2)), not(peek(one_of("-0123456789."))))
            .parse(input)?;
    let kind = match (year.parse(), month.parse(), day.parse()) {
        (Ok(year), Ok(month), Ok(day)) => TokenKind::Date(year, month, day),
        _ => return Err(nom::Err::Error(nom::error::Error::new(input, nom::error::ErrorKind::Digit))),
    };
    Ok((rest, kind))
}

fn number(input: &str) -> IResult<&str, f64> {
    let exponent = (one_of("eE"), opt(one_of("+-")), digit1);
    let (rest, text) = recognize((digit1, opt((char('.'), digit1)), opt(exponent))).parse(input)?;
    match text.parse::<f64>() {
        Ok(value) => Ok((rest, value)),
        Err(_) => Err(nom::Err::Error(nom::error::Error::new(input, nom::error::ErrorKind::Float))),
    }
}

fn fixed(input: &str) -> IResult<&str, TokenKind> {
    for keyword in KEYWORDS {
        if let Some(rest) = input.strip_prefix(keyword.text) {
            let whole_word = keyword.role != KeywordRole::Word || !rest.starts_with(is_name_letter);
            if whole_word {
                let text = match keyword.text {
                    "+-" => "±",
                    "−" => "-",
                    other => other,
                };
                return Ok((rest, TokenKind::Fixed(text)));
            }
        }
    }
    Err(nom::Err::Error(nom::error::Error::new(input, nom::error::ErrorKind::Tag)))
}

fn is_name_letter(letter: char) -> bool {
    letter.is_alphanumeric() || letter == '_'
}

fn name(input: &str) -> IResult<&str, String> {
    // Combining marks are letters of a name that is not in NFC yet.
    let tail = |letter: char| is_name_letter(letter) || unicode_normalization::char::is_combining_mark(letter);
    let (rest, text) =
        recognize((satisfy(|letter| letter.is_alphabetic() || letter == '_'), take_while(tail))).parse(input)?;
    Ok((rest, text.nfc().map(|letter| if letter == '\u{3bc}' { 'µ' } else { letter }).collect()))
}

fn quoted(input: &str) -> IResult<&str, String> {
    let escaped = preceded(char('\\'), one_of("\\\""));
    let plain = satisfy(|letter| !matches!(letter, '"' | '\\' | '\n'));
    let (rest, inner) =
        recognize((char('"'), many0_count(alt((escaped, plain))), char('"'))).parse(input)?;
    let inner = inner.get(1..inner.len() - 1).unwrap_or("");
    Ok((rest, inner.replace("\\\"", "\"").replace("\\\\", "\\").nfc().collect()))
}

/// A unit or era: `W/m2`, `kg/m^2/s`, `W*yr/m2/K`, `1/yr`, `cal BP`. A tight `/` or `*` goes on only before a
/// letter, so that `W/m2/4` divides.
fn unit_text(input: &str) -> IResult<&str, &str> {
    let letter = |letter: char| letter.is_alphabetic() || matches!(letter, '°' | '%' | '‰');
    let inner = |letter: char| is_name_letter(letter) || matches!(letter, '°' | '%' | '‰');
    let power = || opt((char('^'), opt(char('-')), digit1));
    let word = || recognize((satisfy(letter), take_while(inner), power()));
    let more = recognize((one_of("/*"), word()));
    let reciprocal = recognize((tag("1/"), peek(satisfy(letter))));
    let product = recognize((opt(reciprocal), word(), many0_count(more)));
    let calibrated = recognize((tag("cal"), take_while1(|letter| letter == ' '), tag("BP"), not(peek(satisfy(is_name_letter)))));
    let (rest, text) = alt((calibrated, product)).parse(input)?;
    let reserved = KEYWORDS.iter().any(|keyword| keyword.role == KeywordRole::Word && keyword.text == text);
    if reserved {
        return Err(nom::Err::Error(nom::error::Error::new(input, nom::error::ErrorKind::Tag)));
    }
    Ok((rest, text))
}

fn tidy_unit(text: &str) -> String {
    if text.starts_with("cal ") { "cal BP".to_owned() } else { text.nfc().collect() }
}

impl Token {
    /// How a message names the token.
    pub(super) fn describe(&self) -> String {
        match &self.kind {
            TokenKind::Number(value) => format!("the number {value}"),
            TokenKind::Unit(unit) => format!("the unit `{unit}`"),
            TokenKind::Date(year, month, day) => format!("the date {year:04}-{month:02}-{day:02}"),
            TokenKind::Name(name) => format!("the name `{name}`"),
            TokenKind::Text(_) => "a text".to_owned(),
            TokenKind::Fixed(sign) => format!("`{sign}`"),
            TokenKind::Newline => "the end of the line".to_owned(),
        }
    }

    pub(super) fn as_unit(&self) -> Option<UnitText> {
        match &self.kind {
            TokenKind::Unit(text) => Some(UnitText { text: text.clone(), span: self.span }),
            TokenKind::Number(_)
            | TokenKind::Date(..)
            | TokenKind::Name(_)
            | TokenKind::Text(_)
            | TokenKind::Fixed(_)
            | TokenKind::Newline => None,
        }
    }
}
