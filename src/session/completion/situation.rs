//! Where a cursor stands: the word that is being written, the brackets it stands in, and what belongs there.

use crate::language::{Piece, PieceKind, pieces};

/// What may be written at the cursor.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Place {
    /// Nothing that is known: comments, other texts, new names.
    Nothing,
    /// The text that names a file, as far as it is written; its quote is open.
    File(String),
    /// A unit or an era; `first` where no part of it is written before.
    Unit {
        /// Whether it is the first part of the unit.
        first: bool,
        /// Whether it is the step of a clock.
        after_by: bool,
    },
    /// A value.
    Operand,
    /// A call, to which the value on the left is handed.
    AfterPipe,
    /// A reserved word, after a finished value.
    AfterOperand,
}

/// A bracket that is open at the cursor.
#[derive(Clone, Debug, Default)]
pub(super) struct Level {
    /// The function's name, where it is a call.
    pub(super) call: Option<String>,
    /// Whether a value is handed to the call by `|>`.
    pub(super) piped: bool,
    /// Labels of the finished arguments; nothing for one given by position.
    pub(super) finished: Vec<Option<String>>,
    /// The label of the argument at the cursor.
    pub(super) label: Option<String>,
    /// How many pieces of the argument stand before the word at the cursor.
    pub(super) pieces: usize,
    /// Whether it is a square bracket.
    pub(super) list: bool,
    /// Where the call's name, or the bracket, begins.
    pub(super) start: usize,
    first: Option<String>,
}

impl Level {
    /// The number of the parameter that stands at the cursor by position; `repeated` says which parameters take any
    /// number of arguments.
    pub(super) fn position(&self, repeated: impl Fn(usize) -> bool) -> usize {
        let given = usize::from(self.piped) + self.finished.iter().filter(|label| label.is_none()).count();
        (0..given).fold(0, |next, _| if repeated(next) { next } else { next + 1 })
    }

    fn next_argument(&mut self) {
        self.finished.push(self.label.take());
        (self.pieces, self.first) = (0, None);
    }
}

/// Where a cursor stands in a text.
#[derive(Clone, Debug)]
pub(super) struct Situation {
    /// Where the word at the cursor begins.
    pub(super) start: usize,
    /// What is written of it.
    pub(super) word: String,
    pub(super) place: Place,
    /// The open brackets, from the outermost to the innermost.
    pub(super) levels: Vec<Level>,
}

/// Where the cursor at byte `cursor` of `text` stands, by what is written before it.
pub(super) fn situation(text: &str, cursor: usize) -> Situation {
    let before = text.get(..cursor).unwrap_or(text);
    let mut found = pieces(before).pieces;
    let mut start = cursor;
    let mut place = None;
    if let Some(last) = found.last().cloned().filter(|last| last.end == cursor) {
        let reserved = |sign: &str| sign.chars().all(char::is_alphabetic);
        match &last.kind {
            PieceKind::Comment | PieceKind::Text | PieceKind::Number | PieceKind::Strange => {
                place = Some(Place::Nothing);
            }
            PieceKind::OpenText => {
                start = last.start + 1;
                place = Some(Place::File(before.get(start..).unwrap_or("").to_owned()));
                found.pop();
            }
            PieceKind::Unit(_) => {
                let written = before.get(last.start..).unwrap_or("");
                start = written.rfind(['/', '*']).map_or(last.start, |at| last.start + at + 1);
                let first = start == last.start;
                found.pop();
                place = Some(Place::Unit { first, after_by: steps(&found) });
            }
            PieceKind::Name(_) => {
                start = last.start;
                found.pop();
            }
            PieceKind::Sign(sign) if reserved(sign) => {
                start = last.start;
                found.pop();
            }
            PieceKind::Sign(_) | PieceKind::Newline => {}
        }
    }
    let word = before.get(start..).unwrap_or("").to_owned();
    let word = if matches!(place, Some(Place::File(_))) { String::new() } else { word };
    let place = place.unwrap_or_else(|| place_after(before.get(..start).unwrap_or(""), &found, start));
    Situation { start, word, place, levels: levels(&found) }
}

/// What belongs after the pieces before a word that begins at `start`.
fn place_after(before: &str, found: &[Piece], start: usize) -> Place {
    let mut back = found.iter().rev().filter(|piece| piece.kind != PieceKind::Comment);
    let Some(last) = back.next() else { return Place::Operand };
    let touches = last.end == start;
    match &last.kind {
        _ if !touches && pieces(before).unit_may_follow => {
            Place::Unit { first: true, after_by: steps(found) }
        }
        PieceKind::Sign("/" | "*") if touches => match back.next() {
            Some(Piece { kind: PieceKind::Unit(_), end, .. }) if *end == last.start => {
                Place::Unit { first: false, after_by: false }
            }
            _ => Place::Operand,
        },
        PieceKind::Name(_)
        | PieceKind::Number
        | PieceKind::Unit(_)
        | PieceKind::Text
        | PieceKind::OpenText
        | PieceKind::Sign(")" | "]") => Place::AfterOperand,
        PieceKind::Sign("|>") => Place::AfterPipe,
        PieceKind::Sign("for") | PieceKind::Comment => Place::Nothing,
        PieceKind::Sign(_) | PieceKind::Newline | PieceKind::Strange => Place::Operand,
    }
}

/// Whether the pieces end in `by` and a number.
fn steps(found: &[Piece]) -> bool {
    let mut back = found.iter().rev();
    back.next().is_some_and(|piece| piece.kind == PieceKind::Number)
        && back.next().is_some_and(|piece| piece.kind == PieceKind::Sign("by"))
}

/// The brackets that pieces leave open.
pub(super) fn levels(found: &[Piece]) -> Vec<Level> {
    let mut levels: Vec<Level> = Vec::new();
    let mut before: [Option<&Piece>; 2] = [None, None];
    for piece in found.iter().filter(|piece| piece.kind != PieceKind::Comment) {
        match &piece.kind {
            PieceKind::Newline => levels.clear(),
            PieceKind::Sign(sign @ ("(" | "[")) => {
                if let Some(level) = levels.last_mut() {
                    level.pieces += 1;
                }
                let name = match before[1].map(|piece| &piece.kind) {
                    Some(PieceKind::Name(name)) if *sign == "(" => Some(name.clone()),
                    _ => None,
                };
                let piped =
                    name.is_some() && before[0].is_some_and(|piece| piece.kind == PieceKind::Sign("|>"));
                let start = before[1].filter(|_| name.is_some()).map_or(piece.start, |piece| piece.start);
                levels.push(Level { call: name, piped, list: *sign == "[", start, ..Level::default() });
            }
            PieceKind::Sign(")" | "]") => {
                levels.pop();
            }
            PieceKind::Sign(",") => {
                if let Some(level) = levels.last_mut() {
                    level.next_argument();
                }
            }
            PieceKind::Sign(":") => {
                if let Some(level) = levels.last_mut()
                    && level.pieces == 1
                    && level.call.is_some()
                {
                    level.label = level.first.take();
                    level.pieces = 0;
                }
            }
            kind => {
                if let Some(level) = levels.last_mut() {
                    if let (PieceKind::Name(name), 0) = (kind, level.pieces) {
                        level.first = Some(name.clone());
                    }
                    level.pieces += 1;
                }
            }
        }
        before = [before[1], Some(piece)];
    }
    levels
}

/// Names that a text gives itself: its definitions, its functions with their parameters, and what is local at the
/// cursor: parameters of the function being defined and loop names.
#[derive(Clone, Debug, Default)]
pub(super) struct OwnNames {
    pub(super) names: Vec<String>,
    pub(super) functions: Vec<(String, Vec<String>)>,
    pub(super) locals: Vec<String>,
}

/// The names that a text gives, seen from `cursor`.
pub(super) fn own_names(text: &str, cursor: usize) -> OwnNames {
    let found = pieces(text).pieces;
    let mut own = OwnNames::default();
    let statements: Vec<&[Piece]> = found.split(|piece| piece.kind == PieceKind::Newline).collect();
    let here =
        statements.iter().rposition(|statement| statement.first().is_some_and(|first| first.start <= cursor));
    for (number, statement) in statements.iter().enumerate() {
        let kinds: Vec<&PieceKind> =
            statement.iter().map(|piece| &piece.kind).filter(|kind| **kind != PieceKind::Comment).collect();
        match kinds.as_slice() {
            [PieceKind::Name(name), PieceKind::Sign("="), ..] => own.names.push(name.clone()),
            [PieceKind::Name(name), PieceKind::Sign("("), rest @ ..] => {
                let parameters: Vec<String> = rest
                    .iter()
                    .take_while(|kind| matches!(kind, PieceKind::Name(_) | PieceKind::Sign(",")))
                    .filter_map(|kind| match kind {
                        PieceKind::Name(name) => Some(name.clone()),
                        _ => None,
                    })
                    .collect();
                let head = (2 * parameters.len()).saturating_sub(1);
                if let [PieceKind::Sign(")"), PieceKind::Sign("="), ..] = rest.get(head..).unwrap_or(&[]) {
                    if Some(number) == here {
                        own.locals.extend(parameters.iter().cloned());
                    }
                    own.functions.push((name.clone(), parameters));
                }
            }
            _ => {}
        }
        if Some(number) == here {
            own.locals.extend(kinds.windows(2).filter_map(|pair| match pair {
                [PieceKind::Sign("for"), PieceKind::Name(name)] => Some(name.clone()),
                _ => None,
            }));
        }
    }
    own
}
