//! From text to a syntax tree, and the signatures that say what a call may look like.

mod canonical;
mod explain;
mod keywords;
mod lexer;
mod parser;
mod pieces;
mod signature;
mod syntax;

pub use canonical::canonical;
pub use keywords::{KEYWORDS, Keyword, KeywordRole};
pub use parser::{NESTING_LIMIT, SyntaxError, parse};
pub use pieces::{Piece, PieceKind, Pieces, pieces};
pub use signature::{Choice, MONTHS, Parameter, Presence, Signature, Words};
pub use syntax::{
    Argument, BinaryOperator, Expression, ExpressionKind, Program, Statement, StatementKind, UnitText,
};
