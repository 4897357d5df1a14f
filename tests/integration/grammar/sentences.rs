//! Reads the grammar, and makes sentences from it.

use std::collections::{BTreeMap, BTreeSet};

/// A right-hand side of the grammar. Each `Choice` has a number of its own, to see that every branch is taken.
#[derive(Clone, Debug)]
pub(super) enum Node {
    Terminal(String),
    Rule(String),
    Special(String),
    Sequence(Vec<Node>),
    Choice(usize, Vec<Node>),
    Repeat(Box<Node>),
    Optional(Box<Node>),
    Except(Box<Node>, Box<Node>),
}

pub(super) type Grammar = BTreeMap<String, Node>;

pub(super) fn is_token_rule(name: &str) -> bool {
    name.chars().all(|letter| letter.is_ascii_uppercase())
}

/// Reads the part of ISO/IEC 14977 that the grammar uses.
pub(super) struct Reader<'a> {
    rest: &'a str,
    choices: usize,
}

impl<'a> Reader<'a> {
    pub(super) fn grammar(text: &'a str) -> Grammar {
        let mut reader = Reader { rest: text, choices: 0 };
        let mut grammar = Grammar::new();
        while !reader.peek().is_empty() {
            let name = reader.word();
            reader.expect("=");
            let node = reader.choice();
            reader.expect(";");
            assert!(grammar.insert(name.clone(), node).is_none(), "two rules are called {name}");
        }
        grammar
    }

    /// What comes after blanks and comments.
    fn peek(&mut self) -> &'a str {
        loop {
            self.rest = self.rest.trim_start();
            let Some(comment) = self.rest.strip_prefix("(*") else { return self.rest };
            self.rest = comment.split_once("*)").expect("a comment is closed").1;
        }
    }

    fn accept(&mut self, sign: &str) -> bool {
        let after = self.peek().strip_prefix(sign);
        self.rest = after.unwrap_or(self.rest);
        after.is_some()
    }

    fn expect(&mut self, sign: &str) {
        assert!(self.accept(sign), "`{sign}` belongs before: {:.40}", self.rest);
    }

    fn word(&mut self) -> String {
        let end = self.peek().find(|letter: char| !letter.is_ascii_alphabetic()).unwrap_or(self.rest.len());
        let (word, rest) = self.rest.split_at(end);
        assert!(!word.is_empty(), "a name belongs before: {rest:.40}");
        self.rest = rest;
        word.to_owned()
    }

    fn until(&mut self, close: char) -> String {
        let (inner, rest) = self.rest.split_once(close).expect("what is opened is closed");
        self.rest = rest;
        inner.to_owned()
    }

    fn choice(&mut self) -> Node {
        let mut branches = vec![self.sequence()];
        while self.accept("|") {
            branches.push(self.sequence());
        }
        if branches.len() == 1 {
            return branches.remove(0);
        }
        self.choices += 1;
        Node::Choice(self.choices, branches)
    }

    fn sequence(&mut self) -> Node {
        let mut parts = vec![self.term()];
        while self.accept(",") {
            parts.push(self.term());
        }
        if parts.len() == 1 { parts.remove(0) } else { Node::Sequence(parts) }
    }

    fn term(&mut self) -> Node {
        let node = self.factor();
        if self.accept("-") { Node::Except(Box::new(node), Box::new(self.factor())) } else { node }
    }

    fn factor(&mut self) -> Node {
        for (open, close) in [("(", ")"), ("[", "]"), ("{", "}")] {
            if self.accept(open) {
                let inner = self.choice();
                self.expect(close);
                return match open {
                    "(" => inner,
                    "[" => Node::Optional(Box::new(inner)),
                    _ => Node::Repeat(Box::new(inner)),
                };
            }
        }
        for quote in ['"', '\''] {
            if self.accept(quote.encode_utf8(&mut [0; 4])) {
                return Node::Terminal(self.until(quote));
            }
        }
        if self.accept("?") {
            Node::Special(self.until('?').trim().to_owned())
        } else {
            Node::Rule(self.word())
        }
    }
}

/// What stands for the words between question marks.
fn samples(words: &str) -> &'static [&'static str] {
    match words {
        "letter of any script" => {
            &["a", "b", "e", "E", "x", "T", "n", "é", "\u{b5}", "\u{3bc}", "Ω", "ж", "年"]
        }
        "digit of any script but a raised one" => &["0", "7", "₂", "٣"],
        "combining mark" => &["\u{301}", "\u{93c}"],
        "any character but line feed and carriage return" => {
            &["a", " ", "#", "±", "\"", "\\", "|>", "年", "\u{301}", "\t", "(", "]", "'", "\u{1f30b}", "="]
        }
        "tab" => &["\t"],
        "no-break space" => &["\u{a0}"],
        "line feed" => &["\n"],
        "carriage return" => &["\r"],
        "carriage return and line feed" => &["\r\n"],
        _ => panic!("nobody says what ? {words} ? is"),
    }
}

/// A generator that gives the same numbers for the same seed everywhere.
pub(super) struct Dice(u64);

impl Dice {
    pub(super) fn roll(&mut self, sides: usize) -> usize {
        // SplitMix64: Steele, Lea and Flood (2014), doi:10.1145/2660193.2660195.
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut mixed = self.0;
        mixed = (mixed ^ (mixed >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        mixed = (mixed ^ (mixed >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        ((mixed ^ (mixed >> 31)) % sides as u64) as usize
    }
}

#[derive(Clone, Debug)]
pub(super) struct Token {
    pub(super) rule: String,
    pub(super) text: String,
}

pub(super) struct Generator<'a> {
    grammar: &'a Grammar,
    /// How many rules deep the shortest sentence of each rule is.
    heights: BTreeMap<String, usize>,
    pub(super) dice: Dice,
    depth: usize,
    pub(super) rules_used: BTreeSet<String>,
    pub(super) branches_used: BTreeSet<(usize, usize)>,
}

const DEEPEST: usize = 26;
const LONGEST: usize = 150;

impl<'a> Generator<'a> {
    pub(super) fn new(grammar: &'a Grammar, seed: u64) -> Self {
        let mut heights: BTreeMap<String, usize> =
            grammar.keys().map(|name| (name.clone(), usize::MAX)).collect();
        for _ in grammar {
            for (name, node) in grammar {
                let height = height(node, &heights).saturating_add(1);
                heights.insert(name.clone(), height);
            }
        }
        for (name, height) in &heights {
            assert!(*height < usize::MAX, "{name} never ends, or uses a rule that is not there");
        }
        let (rules_used, branches_used) = (BTreeSet::new(), BTreeSet::new());
        Self { grammar, heights, dice: Dice(seed), depth: 0, rules_used, branches_used }
    }

    pub(super) fn sentence(&mut self) -> Vec<Token> {
        let mut tokens = Vec::new();
        self.depth = 0;
        self.expand(&Node::Rule("program".to_owned()), &mut tokens);
        tokens
    }

    fn is_tired(&self, tokens: &[Token]) -> bool {
        self.depth > DEEPEST || tokens.len() > LONGEST
    }

    fn expand(&mut self, node: &Node, tokens: &mut Vec<Token>) {
        match node {
            Node::Terminal(text) => tokens.push(Token { rule: String::new(), text: text.clone() }),
            Node::Rule(name) if is_token_rule(name) => {
                let mut text = self.text(node);
                while name == "NUMBER" && text.replace('−', "-").parse::<f64>().is_ok_and(f64::is_infinite)
                {
                    text = self.text(node);
                }
                tokens.push(Token { rule: name.clone(), text });
            }
            Node::Rule(name) => {
                self.rules_used.insert(name.clone());
                self.depth += 1;
                let grammar = self.grammar;
                self.expand(&grammar[name], tokens);
                self.depth -= 1;
            }
            Node::Sequence(parts) => parts.iter().for_each(|part| self.expand(part, tokens)),
            Node::Choice(number, branches) => {
                let tired = self.is_tired(tokens);
                let branch = self.branch(*number, branches, tired);
                self.expand(branch, tokens);
            }
            Node::Repeat(inner) => {
                while !self.is_tired(tokens) && self.dice.roll(5) == 0 {
                    self.expand(inner, tokens);
                }
            }
            Node::Optional(inner) => {
                if !self.is_tired(tokens) && self.dice.roll(3) == 0 {
                    self.expand(inner, tokens);
                }
            }
            Node::Special(_) | Node::Except(..) => panic!("only tokens are made of characters: {node:?}"),
        }
    }

    fn branch<'n>(&mut self, number: usize, branches: &'n [Node], tired: bool) -> &'n Node {
        let chosen = if tired {
            (0..branches.len()).min_by_key(|at| height(&branches[*at], &self.heights)).unwrap_or(0)
        } else {
            self.dice.roll(branches.len())
        };
        self.branches_used.insert((number, chosen));
        &branches[chosen]
    }

    /// The characters of one token.
    fn text(&mut self, node: &Node) -> String {
        match node {
            Node::Terminal(text) => text.clone(),
            Node::Rule(name) => {
                self.rules_used.insert(name.clone());
                let grammar = self.grammar;
                self.text(&grammar[name])
            }
            Node::Special(words) => {
                let samples = samples(words);
                samples[self.dice.roll(samples.len())].to_owned()
            }
            Node::Sequence(parts) => parts.iter().map(|part| self.text(part)).collect(),
            Node::Choice(number, branches) => {
                let branch = self.branch(*number, branches, false);
                self.text(branch)
            }
            Node::Repeat(inner) => {
                let mut text = String::new();
                while self.dice.roll(3) == 0 {
                    text.push_str(&self.text(inner));
                }
                text
            }
            Node::Optional(inner) => {
                if self.dice.roll(3) == 0 {
                    self.text(inner)
                } else {
                    String::new()
                }
            }
            Node::Except(inner, excluded) => loop {
                let text = self.text(inner);
                if !self.words_of(excluded).contains(&text) {
                    return text;
                }
            },
        }
    }

    /// The words of an exception, which are few.
    fn words_of(&mut self, node: &Node) -> Vec<String> {
        match node {
            Node::Terminal(text) => vec![text.clone()],
            Node::Rule(name) => {
                self.rules_used.insert(name.clone());
                let grammar = self.grammar;
                self.words_of(&grammar[name])
            }
            Node::Choice(number, branches) => {
                self.branches_used.extend((0..branches.len()).map(|branch| (*number, branch)));
                branches.iter().flat_map(|branch| self.words_of(branch)).collect()
            }
            _ => panic!("an exception is a choice of words: {node:?}"),
        }
    }

    /// The tokens as text, with blanks where they must stand and here and there where they may.
    pub(super) fn spaced(&mut self, tokens: &[Token]) -> String {
        const APART: [&str; 9] = ["(", ")", "[", "]", ",", ":", "..", "|>", "="];
        let keeps_apart = |token: &Token| APART.contains(&token.text.as_str()) || token.rule == "NEWLINE";
        let mut text = String::new();
        let mut open = 0usize;
        for (at, token) in tokens.iter().enumerate() {
            let before = at.checked_sub(1).and_then(|before| tokens.get(before));
            text.push_str(&self.text(&Node::Rule("BLANK".to_owned())));
            if open > 0 && token.rule != "UNIT" && self.dice.roll(8) == 0 {
                text.push_str(&self.text(&Node::Rule("NEWLINE".to_owned())));
            } else if before.is_some_and(|before| !keeps_apart(before) && !keeps_apart(token)) {
                text.push_str(&self.text(&Node::Rule("SPACE".to_owned())));
            }
            text.push_str(&token.text);
            match token.text.as_str() {
                "(" | "[" => open += 1,
                ")" | "]" => open = open.saturating_sub(1),
                _ => {}
            }
        }
        text
    }
}

fn height(node: &Node, heights: &BTreeMap<String, usize>) -> usize {
    match node {
        Node::Terminal(_) | Node::Special(_) | Node::Repeat(_) | Node::Optional(_) => 0,
        Node::Rule(name) => heights.get(name).copied().unwrap_or(usize::MAX),
        Node::Sequence(parts) => parts.iter().map(|part| height(part, heights)).max().unwrap_or(0),
        Node::Choice(_, branches) => branches.iter().map(|branch| height(branch, heights)).min().unwrap_or(0),
        Node::Except(inner, _) => height(inner, heights),
    }
}

pub(super) fn each_node<'n>(node: &'n Node, visit: &mut impl FnMut(&'n Node)) {
    visit(node);
    match node {
        Node::Terminal(_) | Node::Rule(_) | Node::Special(_) => {}
        Node::Sequence(parts) | Node::Choice(_, parts) => {
            parts.iter().for_each(|part| each_node(part, visit))
        }
        Node::Repeat(inner) | Node::Optional(inner) => each_node(inner, visit),
        Node::Except(inner, excluded) => {
            each_node(inner, visit);
            each_node(excluded, visit);
        }
    }
}
