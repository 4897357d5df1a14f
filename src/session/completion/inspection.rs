//! What the thing at a cursor is: help of functions, definitions with what hangs on them, units, signs.

use std::fmt::Write;
use std::sync::Arc;

use super::situation::{levels, own_names};
use super::{Parameters, floor, functions, parameter_at, setting_meaning};
use crate::base::Span;
use crate::catalogue::{self, Stop};
use crate::language::{Expression, KEYWORDS, MONTHS, Piece, PieceKind, Words, pieces};
use crate::session::Session;
use crate::session::node::Node;
use crate::session::resolve::SETTINGS;
use crate::value::{Era, Unit, unit_spellings};

/// What the thing at a cursor is.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Inspection {
    /// First byte of the thing.
    pub start: usize,
    /// One past its last byte.
    pub end: usize,
    /// What kind of thing it is.
    pub subject: Subject,
    /// One sentence.
    pub summary: String,
    /// All of it, as lines of text.
    pub text: String,
}

/// The kinds of things that can be inspected.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Subject {
    /// A function of the catalogue.
    Function,
    /// A function of the user's.
    OwnFunction,
    /// A name that is defined.
    Name,
    /// A setting that is not.
    Setting,
    /// An argument of a call.
    Argument,
    /// A word that an argument takes.
    Choice,
    /// A unit.
    Unit,
    /// An era.
    Era,
    /// An operator or a reserved word.
    Sign,
}

/// A definition in force.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct InForce {
    /// The name; with brackets and parameters for a function.
    pub name: String,
    /// The cell it has its home in.
    pub cell: Arc<str>,
    /// The statement, as it was written.
    pub text: String,
    /// Kind and unit, such as `a series in W/m2`.
    pub kind: String,
    /// What is wrong with it.
    pub fault: Option<String>,
}

type Found = (Subject, String, String);

impl Inspection {
    /// All of it in Markdown; `text` is the text that was inspected.
    pub fn markdown(&self, text: &str) -> String {
        let word = text.get(self.start..self.end).unwrap_or("");
        match (self.subject, catalogue::find(word)) {
            (Subject::Function | Subject::Sign, Some(entry)) => catalogue::markdown(entry),
            _ => format!("{}\n\n```text\n{}\n```\n", self.summary, self.text.trim_end()),
        }
    }
}

impl Session {
    /// What the thing at byte `cursor` of `text` is; where nothing is known about it, the call around it.
    pub fn inspect(&self, text: &str, cursor: usize) -> Option<Inspection> {
        let cursor = floor(text, cursor);
        let all = pieces(text).pieces;
        let touching =
            all.iter().enumerate().filter(|(_, piece)| piece.start <= cursor && cursor <= piece.end);
        // Where two touch, a word comes before a sign, and the one on the right before the one on the left.
        let (number, piece) = touching
            .max_by_key(|(_, piece)| {
                let word = matches!(piece.kind, PieceKind::Name(_) | PieceKind::Unit(_));
                (word, piece.start)
            })
            .unwrap_or((all.len(), all.last()?));
        let found = match &piece.kind {
            _ if number == all.len() => None,
            PieceKind::Comment | PieceKind::Text | PieceKind::OpenText => return None,
            PieceKind::Unit(unit) => about_unit(unit),
            PieceKind::Name(name) => {
                let next = all.get(number + 1).map(|piece| &piece.kind);
                self.about_name_here(text, &all, number, name, next)
            }
            PieceKind::Sign(sign) if !matches!(*sign, "(" | ")" | "[" | "]" | "," | ":" | "=") => {
                about_sign(sign)
            }
            PieceKind::Number | PieceKind::Sign(_) | PieceKind::Newline | PieceKind::Strange => None,
        };
        if let Some((subject, summary, text)) = found {
            return Some(Inspection { start: piece.start, end: piece.end, subject, summary, text });
        }
        // Inside the brackets of a call, the call.
        let before: Vec<_> = all.iter().filter(|piece| piece.end <= cursor).cloned().collect();
        let level = levels(&before).into_iter().rfind(|level| level.call.is_some())?;
        let name = level.call?;
        let (subject, summary, text) = self.about_function(&name)?;
        Some(Inspection { start: level.start, end: level.start + name.len(), subject, summary, text })
    }

    /// What a word is by itself: a name, a function, a unit, an era or a sign.
    pub fn explain(&self, word: &str) -> Option<Inspection> {
        let word = word.trim().trim_end_matches("()");
        let (subject, summary, text) = self
            .about_definition(word)
            .or_else(|| self.about_function(word))
            .or_else(|| about_unit(word))
            .or_else(|| about_sign(word))?;
        Some(Inspection { start: 0, end: word.len(), subject, summary, text })
    }

    /// A name or function that a word may have meant.
    pub fn nearest_word(&self, word: &str) -> Option<String> {
        let names = self.definitions.values.keys().map(|name| name.to_string());
        let names: Vec<String> = names.chain(self.definitions.functions.keys().cloned()).collect();
        catalogue::nearest(word, names.iter().map(String::as_str))
            .or_else(|| catalogue::nearest_function(word))
            .map(str::to_owned)
    }

    /// The definitions in force by name, functions last.
    pub fn in_force(&self) -> Vec<InForce> {
        let names: Vec<Arc<str>> = self.definitions.values.keys().cloned().collect();
        let kinds = self.consult(|evaluator, environment| {
            names
                .iter()
                .map(|name| {
                    let definition = evaluator.definitions.values.get(name)?;
                    if let Some(problem) = evaluator.graph.problems.get(name) {
                        return Some(Err(problem.message.clone()));
                    }
                    Some(match &definition.node {
                        Err(problem) => Err(problem.message.clone()),
                        Ok(node) => match evaluator.shape(node, environment) {
                            Ok(shape) => Ok(shape.describe()),
                            Err(Stop::Placed(problem)) => Err(problem.message.clone()),
                            Err(Stop::Fault(fault)) => Err(fault.message),
                        },
                    })
                })
                .collect::<Vec<_>>()
        });
        let kinds = kinds.unwrap_or_default();
        let mut found: Vec<InForce> = Vec::new();
        for (name, kind) in names.iter().zip(kinds) {
            let Some(definition) = self.definitions.values.get(name) else { continue };
            let (kind, fault) = match kind {
                Some(Ok(kind)) => (kind, None),
                Some(Err(fault)) => (String::new(), Some(fault)),
                None => (String::new(), None),
            };
            let text = self.statement(definition.name_span, definition.expression.span);
            found.push(InForce { name: name.to_string(), cell: definition.cell.clone(), text, kind, fault });
        }
        for (name, function) in &self.definitions.functions {
            found.push(InForce {
                name: format!("{name}({})", function.parameters.join(", ")),
                cell: function.cell.clone(),
                text: self.statement(function.name_span, function.body.span),
                kind: "a function".to_owned(),
                fault: None,
            });
        }
        found
    }

    /// The text from a name to the end of what it is bound to.
    fn statement(&self, name: Span, expression: Span) -> String {
        let source = self.sources.get(&name.source);
        let text = source.and_then(|source| source.text.get(name.start..expression.end));
        text.unwrap_or("").replace("\r\n", "\n")
    }

    /// What a name is where it stands: a label, a choice, a function or a definition.
    fn about_name_here(
        &self,
        text: &str,
        all: &[Piece],
        number: usize,
        name: &str,
        next: Option<&PieceKind>,
    ) -> Option<Found> {
        let before = all.get(..number).unwrap_or(&[]);
        let around = levels(before);
        let own = own_names(text, before.last().map_or(0, |piece| piece.end));
        if let Some(level) = around.last().filter(|level| level.call.is_some() && level.pieces == 0)
            && let Some(parameters) = self.parameters(&around, &own)
        {
            if next == Some(&PieceKind::Sign(":")) {
                return about_argument(level.call.as_deref().unwrap_or(""), name, &parameters);
            }
            if let Some(parameter) = parameter_at(level, &parameters) {
                if let Some(choice) = parameter.choices.iter().find(|choice| choice.name == name) {
                    let mut text = format!("{}: {}\n", choice.name, choice.meaning);
                    for inner in choice.parameters {
                        let _ = writeln!(text, "  {}: {}", inner.name, inner.meaning);
                    }
                    return Some((Subject::Choice, choice.meaning.to_owned(), text));
                }
                if MONTHS.contains(&name) && parameter.words == Words::Months {
                    return None;
                }
            }
        }
        if own.locals.iter().any(|local| local == name) {
            return None;
        }
        if next == Some(&PieceKind::Sign("(")) {
            return self.about_function(name);
        }
        self.about_definition(name).or_else(|| self.about_function(name))
    }

    fn about_function(&self, name: &str) -> Option<Found> {
        if let Some(entry) = functions().find(|entry| entry.name == name) {
            return Some((Subject::Function, entry.summary.to_owned(), catalogue::explain(entry)));
        }
        let function = self.definitions.functions.get(name)?;
        let statement = self.statement(function.name_span, function.body.span);
        let mut words = Vec::new();
        function.body.words(&mut words);
        let uses = self.defined(&words, &function.parameters);
        let used_by = self.users_of_function(name);
        let mut text = format!("{statement}\n\n");
        rows(
            &mut text,
            &[
                ("kind", "a function of yours".to_owned()),
                ("home", self.home(&function.cell, function.deleted, &function.rivals)),
                ("depends on", listed(&uses)),
                ("used by", listed(&used_by)),
            ],
        );
        Some((
            Subject::OwnFunction,
            format!("a function of yours, defined in {}", self.cell_name(&function.cell)),
            text,
        ))
    }

    fn about_definition(&self, name: &str) -> Option<Found> {
        let Some(definition) = self.definitions.values.get(name) else {
            let setting = SETTINGS.contains(&name).then(|| setting_meaning(name))?;
            return Some((
                Subject::Setting,
                setting.to_owned(),
                format!("{name}: {setting}; not set here\n"),
            ));
        };
        let asked = self.consult(|evaluator, environment| {
            if let Some(problem) = evaluator.graph.problems.get(name) {
                return (Err(problem.message.clone()), None);
            }
            match &definition.node {
                Err(problem) => (Err(problem.message.clone()), None),
                Ok(node) => match evaluator.shape(node, environment) {
                    Ok(shape) => {
                        (Ok(shape.describe()), Some(evaluator.fingerprint(node, environment).to_string()))
                    }
                    Err(Stop::Placed(problem)) => (Err(problem.message.clone()), None),
                    Err(Stop::Fault(fault)) => (Err(fault.message), None),
                },
            }
        });
        let (kind, fingerprint) = asked.unwrap_or((Err("it cannot be looked at".to_owned()), None));
        let kind = kind.unwrap_or_else(|fault| format!("not known: {fault}"));
        let mut words = Vec::new();
        definition.expression.words(&mut words);
        let mut depends: Vec<String> = self.defined(&words, &[]);
        depends.retain(|other| other != name);
        let mut used_by: Vec<String> = self
            .definitions
            .values
            .iter()
            .filter(|(other, _)| &***other != name)
            .filter(|(_, other)| {
                other.node.as_ref().is_ok_and(|node| node.references().iter().any(|found| &**found == name))
            })
            .map(|(other, _)| other.to_string())
            .collect();
        used_by.extend(self.displays.iter().filter_map(|display| {
            let shows = |node: &Arc<Node>| node.references().iter().any(|found| &**found == name);
            display
                .node
                .as_ref()
                .is_ok_and(shows)
                .then(|| format!("what {} shows", self.cell_name(&display.cell)))
        }));
        used_by.dedup();
        let mut text = format!("{}\n\n", self.statement(definition.name_span, definition.expression.span));
        rows(
            &mut text,
            &[
                ("kind", kind.clone()),
                ("home", self.home(&definition.cell, definition.deleted, &definition.rivals)),
                ("depends on", listed(&depends)),
                ("used by", listed(&used_by)),
                (
                    "fingerprint",
                    fingerprint.map_or_else(|| "none".to_owned(), |print| print.chars().take(12).collect()),
                ),
            ],
        );
        Some((Subject::Name, format!("{kind}, defined in {}", self.cell_name(&definition.cell)), text))
    }

    fn home(&self, cell: &str, deleted: bool, rivals: &std::collections::BTreeSet<Arc<str>>) -> String {
        let mut words = self.cell_name(cell).to_owned();
        if deleted {
            words += ", which was deleted";
        }
        if !rivals.is_empty() {
            let others: Vec<&str> = rivals.iter().map(|cell| self.cell_name(cell)).collect();
            words += &format!("; also defined in {}", others.join(", "));
        }
        words
    }

    /// Which of the words are defined, each once, in their order.
    fn defined(&self, words: &[String], parameters: &[String]) -> Vec<String> {
        let mut found: Vec<String> = Vec::new();
        for word in words.iter().filter(|word| !parameters.contains(word)) {
            let known = if self.definitions.values.contains_key(&**word) {
                word.clone()
            } else if self.definitions.functions.contains_key(word) {
                format!("{word}(…)")
            } else {
                continue;
            };
            if !found.contains(&known) {
                found.push(known);
            }
        }
        found
    }

    fn users_of_function(&self, name: &str) -> Vec<String> {
        let uses = |expression: &Expression| {
            let mut words = Vec::new();
            expression.words(&mut words);
            words.iter().any(|word| word == name)
        };
        let values = self.definitions.values.iter().filter(|(_, found)| uses(&found.expression));
        let functions = self.definitions.functions.iter().filter(|(_, found)| uses(&found.body));
        values
            .map(|(name, _)| name.to_string())
            .chain(functions.map(|(name, _)| format!("{name}(…)")))
            .collect()
    }
}

fn rows(text: &mut String, rows: &[(&str, String)]) {
    for (name, content) in rows.iter().filter(|(_, content)| !content.is_empty()) {
        let _ = writeln!(text, "  {name:<12} {content}");
    }
}

fn listed(names: &[String]) -> String {
    const MOST: usize = 12;
    let more = names.len().saturating_sub(MOST);
    let shown = names.iter().take(MOST).cloned().collect::<Vec<_>>().join(", ");
    match (names.len(), more) {
        (0, _) => "nothing".to_owned(),
        (_, 0) => shown,
        _ => format!("{shown} and {more} more"),
    }
}

fn about_argument(call: &str, name: &str, parameters: &Parameters) -> Option<Found> {
    match parameters {
        Parameters::Known(parameters, _) => {
            let parameter = parameters.iter().find(|parameter| parameter.name == name)?;
            let text = format!("{call}({name}: …)\n\n{}", catalogue::explain_parameter(parameter));
            Some((Subject::Argument, parameter.meaning.to_owned(), text))
        }
        Parameters::Own(names) => names.iter().any(|own| own == name).then(|| {
            let summary = format!("a parameter of `{call}`");
            (Subject::Argument, summary.clone(), summary + "\n")
        }),
    }
}

fn about_unit(written: &str) -> Option<Found> {
    if let Some(era) = Era::parse(written) {
        let meaning = era.meaning().to_owned();
        return Some((Subject::Era, meaning.clone(), format!("{written}: {meaning}\n")));
    }
    let unit = Unit::parse(written).ok().filter(|unit| !unit.is_bare())?;
    let spellings = unit_spellings();
    let meaning_of = |symbol: &str| {
        let found = spellings.iter().find(|(spelling, _, _)| spelling == symbol);
        found.map_or_else(String::new, |(_, meaning, _)| meaning.clone())
    };
    let symbols: Vec<&str> = unit.symbols().collect();
    let dimension = unit.dimension();
    let summary = match symbols.as_slice() {
        [one] if *one == written => meaning_of(one),
        _ => format!("a unit of {dimension}"),
    };
    let mut text = format!("{written}: {summary}\n\n");
    rows(&mut text, &[("dimension", dimension.to_string())]);
    if symbols.len() > 1 || symbols.first() != Some(&written) {
        for symbol in symbols {
            rows(&mut text, &[(symbol, meaning_of(symbol))]);
        }
    }
    Some((Subject::Unit, summary, text))
}

fn about_sign(sign: &str) -> Option<Found> {
    if let Some(entry) = catalogue::find(sign) {
        return Some((Subject::Sign, entry.summary.to_owned(), catalogue::explain(entry)));
    }
    let keyword = KEYWORDS.iter().find(|keyword| keyword.text == sign)?;
    Some((Subject::Sign, keyword.meaning.to_owned(), format!("{sign}: {}\n", keyword.meaning)))
}
