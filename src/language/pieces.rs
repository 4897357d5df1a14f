//! The lexer's tokens of a text that may be wrong or unfinished, for completion and inspection.

use super::lexer::{Before, TokenKind, blank, tidy_unit, token, unit_text};
use crate::base::SourceId;

/// One token of a text in which anything may be wrong, with the bytes it takes.
#[derive(Clone, Debug, PartialEq)]
pub struct Piece {
    /// What it is.
    pub kind: PieceKind,
    /// First byte.
    pub start: usize,
    /// One past the last byte.
    pub end: usize,
}

/// The kinds of tokens, as far as completion tells them apart.
#[derive(Clone, Debug, PartialEq)]
pub enum PieceKind {
    /// A number or a date.
    Number,
    /// A unit or an era, where one may stand.
    Unit(String),
    /// A name, in NFC.
    Name(String),
    /// A text in quotes.
    Text,
    /// A text that is not closed on its line.
    OpenText,
    /// A comment, with its `#`.
    Comment,
    /// A keyword or sign.
    Sign(&'static str),
    /// The end of a line outside brackets.
    Newline,
    /// What means nothing in the language.
    Strange,
}

/// A text as pieces, and what may come next.
#[derive(Clone, Debug, Default)]
pub struct Pieces {
    /// The pieces, in order.
    pub pieces: Vec<Piece>,
    /// Whether a unit or an era may stand at the end: after a number, a list or `in`, on the same line.
    pub unit_may_follow: bool,
}

/// The pieces of a text, whatever is wrong with it: brackets need not match, texts need not end.
pub fn pieces(text: &str) -> Pieces {
    let mut found: Vec<Piece> = Vec::new();
    let mut before = Before::Other;
    let mut open = 0usize;
    let mut at = text.len() - text.trim_start_matches('\u{feff}').len();
    while let Some(rest) = text.get(at..) {
        let (after_blank, skipped) = blank(rest);
        let blank_text = rest.get(..skipped).unwrap_or("");
        if let Some(comment) = blank_text.find('#') {
            found.push(Piece { kind: PieceKind::Comment, start: at + comment, end: at + skipped });
        }
        at += skipped;
        if after_blank.is_empty() {
            break;
        }
        if before == Before::Quantity
            && let Ok((_, unit)) = unit_text(after_blank)
        {
            let end = at + unit.len();
            found.push(Piece { kind: PieceKind::Unit(tidy_unit(unit)), start: at, end });
            (at, before) = (end, Before::Other);
            continue;
        }
        let letter = after_blank.chars().next().map_or(1, char::len_utf8);
        let (kind, length) = match token(after_blank, at, SourceId::default()) {
            Ok((token, length)) => {
                if !(token == TokenKind::Newline && open > 0 && before != Before::Quantity) {
                    before = before.after(&token);
                }
                (kind_of(token), length)
            }
            Err(_) if after_blank.starts_with('"') => {
                before = Before::Other;
                let line = after_blank.find(['\n', '\r']).unwrap_or(after_blank.len());
                (PieceKind::OpenText, line)
            }
            Err(_) => {
                before = Before::Other;
                (PieceKind::Strange, letter)
            }
        };
        match kind {
            PieceKind::Sign("(" | "[") => open += 1,
            PieceKind::Sign(")" | "]") => open = open.saturating_sub(1),
            PieceKind::Sign("|>") => {
                // A line continues where the next begins with `|>`.
                while found.last().is_some_and(|last| last.kind == PieceKind::Newline) {
                    found.pop();
                }
            }
            PieceKind::Number
            | PieceKind::Unit(_)
            | PieceKind::Name(_)
            | PieceKind::Text
            | PieceKind::OpenText
            | PieceKind::Comment
            | PieceKind::Sign(_)
            | PieceKind::Newline
            | PieceKind::Strange => {}
        }
        if !(kind == PieceKind::Newline && open > 0) {
            found.push(Piece { kind, start: at, end: at + length });
        }
        at += length;
    }
    Pieces { pieces: found, unit_may_follow: before == Before::Quantity }
}

fn kind_of(token: TokenKind) -> PieceKind {
    match token {
        TokenKind::Number(_) | TokenKind::Date(..) => PieceKind::Number,
        TokenKind::Unit(unit) => PieceKind::Unit(unit),
        TokenKind::Name(name) => PieceKind::Name(name),
        TokenKind::Text(_) => PieceKind::Text,
        TokenKind::Fixed(sign) => PieceKind::Sign(sign),
        TokenKind::Newline => PieceKind::Newline,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn kinds(text: &str) -> Vec<PieceKind> {
        pieces(text).pieces.into_iter().map(|piece| piece.kind).collect()
    }

    #[test]
    fn a_text_with_mistakes_everywhere_still_has_pieces_that_lie_one_after_the_other() {
        let text = "x = )) smooth(5 µm, ? \"open\ny = 3 W/m2 # ± \"no text\"\nf(1e999, [";
        let found = pieces(text).pieces;
        assert!(found.windows(2).all(|pair| pair[0].end <= pair[1].start));
        assert!(
            found.iter().all(|piece| text.get(piece.start..piece.end).is_some_and(|text| !text.is_empty()))
        );
        assert!(found.iter().any(|piece| piece.kind == PieceKind::Unit("µm".to_owned())));
        assert!(found.iter().any(|piece| piece.kind == PieceKind::OpenText));
        let comment = found.iter().find(|piece| piece.kind == PieceKind::Comment).unwrap();
        assert_eq!(text.get(comment.start..comment.end), Some("# ± \"no text\""));
    }

    #[test]
    fn units_may_follow_numbers_lists_and_in_but_not_the_in_of_a_loop() {
        for (text, may) in [
            ("5 ", true),
            ("[1, 2] ", true),
            ("x in ", true),
            ("[e for e in ", false),
            ("x ", false),
            ("5\n", false),
            ("f(5\n", false),
            ("5 m ", false),
            ("", false),
        ] {
            assert_eq!(pieces(text).unit_may_follow, may, "{text:?}");
        }
    }

    #[test]
    fn a_line_that_begins_with_a_pipe_belongs_to_the_one_before() {
        assert!(!kinds("x\n  |> scale(2)").contains(&PieceKind::Newline));
        assert!(kinds("x\ny").contains(&PieceKind::Newline));
    }
}
