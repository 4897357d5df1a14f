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

/// A fault of the lexer; `incomplete` where the text ended inside a token.
pub(super) struct LexicalError {
    pub(super) diagnostic: Box<Diagnostic>,
    pub(super) incomplete: bool,
}

/// Where the lexer stands, for the rule that units follow a number, a list or `in`.
#[derive(Clone, Copy, PartialEq)]
pub(super) enum Before {
    Quantity,
    ForName,
    ForWord,
    Other,
}

impl Before {
    pub(super) fn after(self, kind: &TokenKind) -> Self {
        match (kind, self) {
            (TokenKind::Number(_) | TokenKind::Fixed("]"), _) => Before::Quantity,
            (TokenKind::Fixed("in"), Before::ForName) => Before::Other,
            (TokenKind::Fixed("in"), _) => Before::Quantity,
            (TokenKind::Fixed("for"), _) => Before::ForWord,
            (TokenKind::Name(_), Before::ForWord) => Before::ForName,
            _ => Before::Other,
        }
    }
}

/// The tokens of a text, and the innermost bracket that the text leaves open.
pub(super) struct Lexed {
    pub(super) tokens: Vec<Token>,
    pub(super) unclosed: Option<(&'static str, Span)>,
}

pub(super) fn tokens(text: &str, source: SourceId) -> Result<Lexed, LexicalError> {
    let mut found: Vec<Token> = Vec::new();
    let mut open: Vec<(&'static str, Span)> = Vec::new();
    let mut before = Before::Other;
    // Some editors begin a file with a byte order mark.
    let mut at = text.len() - text.trim_start_matches('\u{feff}').len();
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
        if let TokenKind::Number(value) = kind
            && !value.is_finite()
        {
            let fault = Fault::new("syntax", "this number is too large").help("the largest is about 1.8e308");
            return Err(LexicalError { diagnostic: fault.at(span).into(), incomplete: false });
        }
        if let TokenKind::Fixed(sign) = kind {
            match sign {
                "(" | "[" => {
                    open.push((sign, span));
                    if open.len() > NESTING_LIMIT {
                        let fault =
                            Fault::new("nesting", format!("brackets nest deeper than {NESTING_LIMIT} here"))
                                .help("give the inner parts names of their own");
                        return Err(LexicalError { diagnostic: fault.at(span).into(), incomplete: false });
                    }
                }
                ")" | "]" => {
                    let expected = if sign == ")" { "(" } else { "[" };
                    match open.pop() {
                        Some((opened, _)) if opened == expected => {}
                        Some((opened, place)) => {
                            let closing = if opened == "(" { ")" } else { "]" };
                            let mut diagnostic = Fault::new(
                                "syntax",
                                format!("found `{sign}` where `{opened}` is to be closed"),
                            )
                            .label(format!("I was expecting `{closing}`"))
                            .help(format!("close it with `{closing}` first"))
                            .at(span);
                            diagnostic
                                .secondary
                                .push(crate::base::Mark { span: place, label: "opened here".to_owned() });
                            return Err(LexicalError { diagnostic: diagnostic.into(), incomplete: false });
                        }
                        None => {
                            let fault =
                                Fault::new("syntax", format!("found `{sign}`, but no bracket is open"))
                                    .help(format!("take the `{sign}` away, or open one before it"));
                            return Err(LexicalError {
                                diagnostic: fault.at(span).into(),
                                incomplete: false,
                            });
                        }
                    }
                }
                _ => {}
            }
        }
        if kind == TokenKind::Newline && !open.is_empty() {
            // A unit stands on the line of its number; `[x for` and `e in xs]` may stand on two.
            if before == Before::Quantity {
                before = Before::Other;
            }
            continue;
        }
        before = before.after(&kind);
        if kind == TokenKind::Fixed("|>") {
            // A line continues where the next begins with `|>`.
            while found.last().is_some_and(|last| last.kind == TokenKind::Newline) {
                found.pop();
            }
        }
        found.push(Token { kind, span });
    }
    Ok(Lexed { tokens: found, unclosed: open.pop() })
}

fn is_space(letter: char) -> bool {
    matches!(letter, ' ' | '\t' | '\u{a0}')
}

/// The rest after spaces and a comment, and how many bytes those took.
pub(super) fn blank(text: &str) -> (&str, usize) {
    let mut rest = text.trim_start_matches(is_space);
    if rest.starts_with('#') {
        rest = rest.find(['\n', '\r']).and_then(|end| rest.get(end..)).unwrap_or("");
    }
    (rest, text.len() - rest.len())
}

pub(super) fn token(rest: &str, at: usize, source: SourceId) -> Result<(TokenKind, usize), LexicalError> {
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
        return open_text(rest, at, source);
    }
    let after = rest.chars().nth(1).unwrap_or(' ');
    let help = match letter {
        '\'' | '“' | '”' | '„' | '‘' | '’' | '«' | '»' => {
            "texts stand in straight double quotes: \"data/spots.csv\""
        }
        '.' if after.is_alphabetic() => "a value is handed on by `|>`: x |> scale(2)",
        '.' => "a number needs a digit on both sides of its point; a span is written with two: 1850..2020 CE",
        '…' => "a span is written with two points: 1850..2020 CE",
        '{' | '}' => "lists stand in square brackets, arguments in round ones",
        '×' | '·' | '⋅' => "to multiply, write `*`",
        '÷' => "to divide, write `/`",
        '–' | '—' => "for minus write `-`; for a span write two points: 1850..2020 CE",
        '%' => "write `percent` after a number",
        '°' => "for degrees Celsius write `degC` after a number, for degrees of arc `deg`",
        '|' => "to hand a value on, write `|>`",
        '>' | '<' | '!' | '&' | '≤' | '≥' | '≠' => {
            "the language has no comparisons: `within` takes a part of a series"
        }
        ';' => "statements stand on lines of their own",
        '\\' => "a line goes on inside brackets, and where the next line begins with `|>`",
        _ if is_superscript(letter) => "a power is written with `^`: x^2, 5 W/m^2",
        _ => "the language uses letters, digits, and the signs |> .. ± + - * / ^ = ( ) [ ] , : # \"",
    };
    let invisible = letter.is_control()
        || letter.is_whitespace()
        || unicode_normalization::char::is_combining_mark(letter);
    let fault = if invisible
        || matches!(letter, '\u{200b}'..='\u{200f}' | '\u{2028}'..='\u{202e}' | '\u{2060}' | '\u{feff}')
    {
        Fault::new("syntax", format!("found the character U+{:04X}, which cannot be seen", u32::from(letter)))
            .help("take it away, or type a space in its place")
    } else {
        Fault::new("syntax", format!("found `{letter}`, which means nothing here")).help(help)
    };
    LexicalError { diagnostic: fault.at(span).into(), incomplete: false }
}

/// Why a text that begins here is none: a backslash before another letter, or no quote at its end.
fn open_text(rest: &str, at: usize, source: SourceId) -> LexicalError {
    let mut letters = rest.char_indices().skip(1);
    while let Some((place, letter)) = letters.next() {
        if matches!(letter, '\n' | '\r') {
            break;
        }
        if letter != '\\' {
            continue;
        }
        match letters.next() {
            Some((_, '\\' | '"')) => {}
            None | Some((_, '\n' | '\r')) => break,
            Some((_, escaped)) => {
                let span = Span::new(source, at + place, at + place + 1 + escaped.len_utf8());
                let fault = Fault::new("syntax", format!("found `\\{escaped}` in a text"))
                    .help("folders are parted by `/`; a backslash is written `\\\\`, a quote `\\\"`");
                return LexicalError { diagnostic: fault.at(span).into(), incomplete: false };
            }
        }
    }
    let fault = Fault::new("syntax", "this text is never closed").help("close it with `\"` on the same line");
    let span = Span::new(source, at, at + 1);
    LexicalError { diagnostic: fault.at(span).into(), incomplete: !rest.contains(['\n', '\r']) }
}

fn date(input: &str) -> IResult<&str, TokenKind> {
    let digits = |count: usize| verify(digit1, move |text: &str| text.len() == count);
    let (rest, (year, _, month, _, day)) = terminated(
        (digits(4), char('-'), digits(2), char('-'), digits(2)),
        not(alt((recognize(char('-')), fraction))),
    )
    .parse(input)?;
    let kind = match (year.parse(), month.parse(), day.parse()) {
        (Ok(year), Ok(month), Ok(day)) => TokenKind::Date(year, month, day),
        _ => return Err(nom::Err::Error(nom::error::Error::new(input, nom::error::ErrorKind::Digit))),
    };
    Ok((rest, kind))
}

/// A point and a digit: what goes on a number, where `..` begins a span.
fn fraction(input: &str) -> IResult<&str, &str> {
    recognize((char('.'), digit1)).parse(input)
}

fn number(input: &str) -> IResult<&str, f64> {
    let exponent = (one_of("eE"), opt(one_of("+-−")), digit1);
    let (rest, text) = recognize((digit1, opt(fraction), opt(exponent))).parse(input)?;
    match text.replace('−', "-").parse::<f64>() {
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

/// Combining marks are letters of a name that is not in NFC yet; `x²` would be taken for a power and is no name.
fn is_name_letter(letter: char) -> bool {
    (letter.is_alphanumeric() && !is_superscript(letter))
        || letter == '_'
        || unicode_normalization::char::is_combining_mark(letter)
}

/// Some combining marks count as letters by themselves; they stand on a letter all the same.
fn is_first_name_letter(letter: char) -> bool {
    let combining = unicode_normalization::char::is_combining_mark(letter);
    letter == '_' || (letter.is_alphabetic() && !combining)
}

fn is_superscript(letter: char) -> bool {
    matches!(letter, '²' | '³' | '¹' | '⁰' | '⁴'..='⁹' | '⁻')
}

/// NFC, with both micro signs as one.
fn normal(text: &str) -> String {
    text.nfc().map(|letter| if letter == '\u{3bc}' { 'µ' } else { letter }).collect()
}

fn name(input: &str) -> IResult<&str, String> {
    let (rest, text) = recognize((satisfy(is_first_name_letter), take_while(is_name_letter))).parse(input)?;
    Ok((rest, normal(text)))
}

fn quoted(input: &str) -> IResult<&str, String> {
    let escaped = preceded(char('\\'), one_of("\\\""));
    let plain = satisfy(|letter| !matches!(letter, '"' | '\\' | '\n' | '\r'));
    let (rest, inner) = recognize((char('"'), many0_count(alt((escaped, plain))), char('"'))).parse(input)?;
    let inner = inner.get(1..inner.len() - 1).unwrap_or("");
    Ok((rest, inner.replace("\\\"", "\"").replace("\\\\", "\\").nfc().collect()))
}

/// A unit or era: `W/m2`, `kg/m^2/s`, `W*yr/m2/K`, `1/yr`, `cal BP`. A tight `/` or `*` goes on only before a
/// letter, so that `W/m2/4` divides. The reserved words are no units.
pub(super) fn unit_text(input: &str) -> IResult<&str, &str> {
    let letter = |letter: char| letter.is_alphabetic() || matches!(letter, '°' | '%' | '‰');
    let inner = |letter: char| is_name_letter(letter) || matches!(letter, '°' | '%' | '‰');
    let power = || opt((char('^'), opt(one_of("-−")), digit1));
    let reserved = |text: &&str| {
        KEYWORDS.iter().any(|keyword| keyword.role == KeywordRole::Word && keyword.text == *text)
    };
    let symbol =
        move || verify(recognize((satisfy(letter), take_while(inner))), move |text| !reserved(&text));
    let word = || recognize((symbol(), power()));
    let more = recognize((one_of("/*"), word()));
    let reciprocal = recognize((tag("1/"), peek(satisfy(letter))));
    let product = recognize((opt(reciprocal), word(), many0_count(more)));
    let calibrated =
        recognize((tag("cal"), take_while1(is_space), tag("BP"), not(peek(satisfy(is_name_letter)))));
    alt((calibrated, product)).parse(input)
}

pub(super) fn tidy_unit(text: &str) -> String {
    if text.contains(is_space) { "cal BP".to_owned() } else { normal(text).replace('−', "-") }
}

impl Token {
    /// How a message names the token.
    pub(super) fn describe(&self) -> String {
        match &self.kind {
            TokenKind::Number(value) if (1e-6..1e16).contains(value) => format!("the number {value}"),
            TokenKind::Number(value) => format!("the number {value:e}").replace("e0", ""),
            TokenKind::Unit(unit) => format!("the unit `{}`", shortened(unit)),
            TokenKind::Date(year, month, day) => format!("the date {year:04}-{month:02}-{day:02}"),
            TokenKind::Name(name) => format!("the name `{}`", shortened(name)),
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

/// Enough of a long name to know it by.
pub(super) fn shortened(name: &str) -> String {
    const MOST: usize = 40;
    match name.char_indices().nth(MOST) {
        Some((end, _)) => format!("{}…", name.get(..end).unwrap_or(name)),
        None => name.to_owned(),
    }
}
