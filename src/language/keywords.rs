/// What a keyword does, which decides how it is highlighted.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum KeywordRole {
    /// A reserved word.
    Word,
    /// An operator between two expressions.
    Operator,
    /// Brackets, commas and the like.
    Punctuation,
}

/// One fixed word or sign of the language.
#[derive(Clone, Copy, Debug)]
pub struct Keyword {
    /// How it is written.
    pub text: &'static str,
    /// What it does.
    pub role: KeywordRole,
    /// In a few words.
    pub meaning: &'static str,
}

const fn keyword(text: &'static str, role: KeywordRole, meaning: &'static str) -> Keyword {
    Keyword { text, role, meaning }
}

/// Every fixed word and sign: the lexer reads this table, and highlighting is made from it.
/// Longer signs stand before those they begin with.
pub const KEYWORDS: &[Keyword] = &[
    keyword("for", KeywordRole::Word, "the expression for each item of a list"),
    keyword("in", KeywordRole::Word, "convert to a unit; the list of a `for`"),
    keyword("by", KeywordRole::Word, "divide a span into a clock"),
    keyword("|>", KeywordRole::Operator, "hand the value on the left to the call on the right"),
    keyword("..", KeywordRole::Operator, "a span or range, both ends in"),
    keyword("±", KeywordRole::Operator, "a normal random variable: centre and one standard deviation"),
    keyword("+-", KeywordRole::Operator, "the same as ±"),
    keyword("+", KeywordRole::Operator, "sum"),
    keyword("-", KeywordRole::Operator, "difference"),
    keyword("−", KeywordRole::Operator, "the same as -"),
    keyword("*", KeywordRole::Operator, "product"),
    keyword("/", KeywordRole::Operator, "quotient"),
    keyword("^", KeywordRole::Operator, "power"),
    keyword("=", KeywordRole::Operator, "define a name"),
    keyword("(", KeywordRole::Punctuation, "begin arguments or a group"),
    keyword(")", KeywordRole::Punctuation, "end arguments or a group"),
    keyword("[", KeywordRole::Punctuation, "begin a list"),
    keyword("]", KeywordRole::Punctuation, "end a list"),
    keyword(",", KeywordRole::Punctuation, "between arguments or items"),
    keyword(":", KeywordRole::Punctuation, "after the name of an argument"),
];
