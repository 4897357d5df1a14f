//! What can be written at a cursor, by what stands before it. Works on texts that are unfinished or wrong.

mod files;
mod inspection;
mod situation;

pub use inspection::{InForce, Inspection, Subject};

use std::collections::BTreeSet;

use unicode_normalization::UnicodeNormalization;

use self::situation::{Level, OwnNames, Place, Situation, own_names, situation};
use super::cell::Session;
use super::resolve::SETTINGS;
use crate::catalogue::{self, Entry, Room};
use crate::language::{KEYWORDS, KeywordRole, MONTHS, Parameter, Presence, Words, canonical};
use crate::value::{Dimension, Era, UNITS, Unit, unit_spellings};

/// What can be written in the place of the bytes `start..end` of a text.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Completions {
    /// First byte of what is replaced.
    pub start: usize,
    /// One past its last byte: the cursor.
    pub end: usize,
    /// The possibilities, the most particular first.
    pub items: Vec<Completion>,
}

/// One possibility.
#[derive(Clone, Debug, PartialEq)]
pub struct Completion {
    /// What is written.
    pub text: String,
    /// What it is.
    pub kind: CompletionKind,
    /// A few words about it.
    pub detail: String,
}

/// What a possibility is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum CompletionKind {
    /// The label of an argument, with its colon.
    Argument,
    /// A word that the argument takes.
    Choice,
    /// A month.
    Month,
    /// A definition, a parameter or a loop name.
    Name,
    /// A setting.
    Setting,
    /// A function, with its opening bracket.
    Function,
    /// A unit.
    Unit,
    /// An era.
    Era,
    /// A reserved word.
    Keyword,
    /// A file.
    File,
    /// A folder, with its slash.
    Folder,
}

impl CompletionKind {
    /// The word for it.
    pub fn word(self) -> &'static str {
        match self {
            CompletionKind::Argument => "argument",
            CompletionKind::Choice => "choice",
            CompletionKind::Month => "month",
            CompletionKind::Name => "name",
            CompletionKind::Setting => "setting",
            CompletionKind::Function => "function",
            CompletionKind::Unit => "unit",
            CompletionKind::Era => "era",
            CompletionKind::Keyword => "keyword",
            CompletionKind::File => "file",
            CompletionKind::Folder => "folder",
        }
    }
}

/// The parameters of a call: those of an entry or of a choice, or the names of a user function's.
enum Parameters {
    Known(&'static [Parameter], Option<&'static Entry>),
    Own(Vec<String>),
}

impl Session {
    /// What can be written at byte `cursor` of `text`.
    ///
    /// A cursor past the end, or inside a code point, is moved back to the nearest place that exists.
    pub fn complete(&self, text: &str, cursor: usize) -> Completions {
        let cursor = floor(text, cursor);
        let here = situation(text, cursor);
        let own = own_names(text, cursor);
        let after = text.get(cursor..).unwrap_or("");
        let mut items = match &here.place {
            Place::Nothing => Vec::new(),
            Place::File(typed) => return self.files(&here, typed, after, cursor),
            Place::Unit { first, after_by } => self.units(&here, &own, *first, *after_by),
            Place::AfterOperand => keywords(&here.levels),
            Place::AfterPipe => self.functions(&own),
            Place::Operand => self.operands(&here, &own),
        };
        let word = folded(&here.word);
        let synonyms: Vec<Completion> =
            if word.chars().count() > 2 && matches!(here.place, Place::Operand | Place::AfterPipe) {
                functions().filter(|entry| is_search_word(entry, &word)).map(function_item).collect()
            } else {
                Vec::new()
            };
        // M and m are two units: only where no spelling fits exactly, case is ignored.
        let exact = |item: &Completion| item.text.starts_with(here.word.as_str());
        if matches!(here.place, Place::Unit { .. }) && items.iter().any(exact) {
            items.retain(exact);
        }
        items.retain(|item| folded(&item.text).starts_with(&word));
        if items.is_empty() {
            items = synonyms;
        }
        let mut seen = BTreeSet::new();
        items.retain(|item| seen.insert(item.text.clone()));
        let next = after.trim_start_matches([' ', '\t']).chars().next();
        for item in &mut items {
            // What stands behind the cursor already is not written twice.
            if item
                .text
                .chars()
                .next_back()
                .is_some_and(|last| matches!(last, '(' | ':') && Some(last) == next)
            {
                item.text.pop();
            }
        }
        Completions { start: here.start, end: cursor, items }
    }

    /// What a value can begin with: labels and choices of the argument first, then names, then functions.
    fn operands(&self, here: &Situation, own: &OwnNames) -> Vec<Completion> {
        let mut items = Vec::new();
        let mut values = true;
        if let Some(level) = here.levels.last().filter(|level| level.call.is_some())
            && let Some(parameters) = self.parameters(&here.levels, own)
        {
            if level.pieces == 0 && level.label.is_none() {
                items.extend(labels(level, &parameters));
            }
            if let Some(parameter) = parameter_at(level, &parameters) {
                if level.pieces == 0 {
                    items.extend(parameter.choices.iter().map(|choice| Completion {
                        text: format!(
                            "{}{}",
                            choice.name,
                            if choice.parameters.is_empty() { "" } else { "(" }
                        ),
                        kind: CompletionKind::Choice,
                        detail: choice.meaning.to_owned(),
                    }));
                }
                if parameter.words == Words::Months {
                    items.extend(MONTHS.iter().map(|month| Completion {
                        text: (*month).to_owned(),
                        kind: CompletionKind::Month,
                        detail: "month".to_owned(),
                    }));
                }
                values = !parameter.accepts.is_empty() && parameter.words != Words::Months;
            }
        }
        if values {
            items.extend(self.names(own));
            items.extend(self.functions(own));
        }
        items
    }

    /// The parameters of the innermost call.
    fn parameters(&self, levels: &[Level], own: &OwnNames) -> Option<Parameters> {
        let (level, outer) = levels.split_last()?;
        let name = level.call.as_deref()?;
        // A choice with parameters of its own, such as `noise: ar1(…)`, comes before a function of that name.
        if let Some(around) = outer.last().filter(|around| around.call.is_some())
            && let Some(parameters) = self.parameters(outer, own)
            && let Some(parameter) = parameter_at(around, &parameters)
            && let Some(choice) = parameter.choices.iter().find(|choice| choice.name == name)
        {
            return Some(Parameters::Known(choice.parameters, None));
        }
        if let Some(entry) = catalogue::find(name) {
            return Some(Parameters::Known(entry.signature.parameters, Some(entry)));
        }
        if let Some((_, parameters)) = own.functions.iter().find(|(function, _)| function == name) {
            return Some(Parameters::Own(parameters.clone()));
        }
        let function = self.definitions.functions.get(name)?;
        Some(Parameters::Own(function.parameters.clone()))
    }

    fn names(&self, own: &OwnNames) -> Vec<Completion> {
        let item = |name: &str, kind, detail: String| Completion { text: name.to_owned(), kind, detail };
        let mut items: Vec<Completion> = own
            .locals
            .iter()
            .map(|name| item(name, CompletionKind::Name, "stands for a value in this line".to_owned()))
            .collect();
        let mut named: Vec<Completion> = self
            .definitions
            .values
            .iter()
            .map(|(name, definition)| {
                item(name, CompletionKind::Name, shortened(&canonical(&definition.expression)))
            })
            .collect();
        let known = |name: &str| self.definitions.values.contains_key(name);
        for name in own.names.iter().filter(|name| !known(name)) {
            named.push(item(name, CompletionKind::Name, "defined in this text".to_owned()));
        }
        for name in SETTINGS.into_iter().filter(|name| !known(name)) {
            named.push(item(name, CompletionKind::Setting, setting_meaning(name).to_owned()));
        }
        named.sort_by(|left, right| left.text.cmp(&right.text));
        items.extend(named);
        items
    }

    fn functions(&self, own: &OwnNames) -> Vec<Completion> {
        let mut items: Vec<Completion> = functions().map(function_item).collect();
        let item = |name: &str, parameters: &[String], detail: String| Completion {
            text: format!("{name}("),
            kind: CompletionKind::Function,
            detail: format!("{name}({}){detail}", parameters.join(", ")),
        };
        for (name, function) in &self.definitions.functions {
            let body = format!(" = {}", shortened(&canonical(&function.body)));
            items.push(item(name, &function.parameters, body));
        }
        for (name, parameters) in &own.functions {
            items.push(item(name, parameters, ", defined in this text".to_owned()));
        }
        items.sort_by(|left, right| left.text.cmp(&right.text));
        items
    }

    fn units(&self, here: &Situation, own: &OwnNames, first: bool, after_by: bool) -> Vec<Completion> {
        let call = here.levels.iter().rposition(|level| !level.list);
        let parameter = call.and_then(|call| {
            let levels = here.levels.get(..=call)?;
            parameter_at(levels.last()?, &self.parameters(levels, own)?).copied()
        });
        let mut items = all_units(&here.word);
        let eras = Era::ALL.into_iter().map(|era| Completion {
            text: era.symbol().to_owned(),
            kind: CompletionKind::Era,
            detail: era.meaning().to_owned(),
        });
        if !first {
            return items;
        }
        let wanted = if after_by { Some("yr") } else { parameter.and_then(|parameter| parameter.unit) };
        let takes = |kinds: &[&str]| {
            parameter.is_some_and(|parameter| parameter.accepts.iter().any(|kind| kinds.contains(kind)))
        };
        let times = takes(&["instant", "span", "clock"]);
        let wanted = wanted.or_else(|| (takes(&["duration"]) && !takes(&["quantity"])).then_some("yr"));
        if let Some(unit) = wanted.and_then(|unit| Unit::parse(unit).ok()) {
            let narrow = of_dimension(&items, unit.dimension());
            let usual = wanted.filter(|unit| unit.contains(['/', '*'])).map(|unit| Completion {
                text: unit.to_owned(),
                kind: CompletionKind::Unit,
                detail: "the unit of this argument".to_owned(),
            });
            let fits = |item: &Completion| folded(&item.text).starts_with(&folded(&here.word));
            if narrow.iter().chain(&usual).any(fits) {
                return usual.into_iter().chain(narrow).collect();
            }
        } else if times && !takes(&["quantity", "series", "duration"]) {
            return eras.collect();
        }
        let compounds = compound_units().into_iter().map(|unit| Completion {
            text: unit.to_owned(),
            kind: CompletionKind::Unit,
            detail: "a unit of the catalogue's arguments".to_owned(),
        });
        items.extend(compounds);
        items.extend(eras);
        if !here.word.is_empty() {
            items.extend(keywords(&here.levels));
        }
        items
    }
}

/// Every unit; with prefixes only once a letter is written, since there are hundreds.
fn all_units(word: &str) -> Vec<Completion> {
    let plain = if word.is_empty() { UNITS.len() } else { usize::MAX };
    unit_spellings()
        .into_iter()
        .take(plain)
        .map(|(text, detail, _)| Completion { text, kind: CompletionKind::Unit, detail })
        .collect()
}

fn of_dimension(items: &[Completion], dimension: Dimension) -> Vec<Completion> {
    let same = |item: &&Completion| Unit::parse(&item.text).is_ok_and(|unit| unit.dimension() == dimension);
    items.iter().filter(same).cloned().collect()
}

/// The compound units that arguments are measured in.
fn compound_units() -> BTreeSet<&'static str> {
    let parameters = catalogue::entries().flat_map(|entry| entry.signature.parameters);
    parameters.filter_map(|parameter| parameter.unit).filter(|unit| unit.contains(['/', '*'])).collect()
}

/// The reserved words that may follow a finished value.
fn keywords(levels: &[Level]) -> Vec<Completion> {
    let in_list = levels.last().is_some_and(|level| level.list);
    KEYWORDS
        .iter()
        .filter(|keyword| keyword.role == KeywordRole::Word && (keyword.text != "for" || in_list))
        .map(|keyword| Completion {
            text: keyword.text.to_owned(),
            kind: CompletionKind::Keyword,
            detail: keyword.meaning.to_owned(),
        })
        .collect()
}

/// Labels of the arguments that are not given yet.
fn labels(level: &Level, parameters: &Parameters) -> Vec<Completion> {
    let label = |name: &str, detail: &str| Completion {
        text: format!("{name}:"),
        kind: CompletionKind::Argument,
        detail: detail.to_owned(),
    };
    let labelled = |name: &str| level.finished.iter().flatten().any(|label| label == name);
    match parameters {
        Parameters::Known(parameters, _) => {
            let taken = level.position(|number| is_repeated(parameters, number));
            let free = parameters.iter().enumerate().filter(|(number, parameter)| {
                let repeated = matches!(parameter.presence, Presence::Repeated { .. });
                !repeated && *number >= taken && !labelled(parameter.name)
            });
            free.map(|(_, parameter)| label(parameter.name, parameter.meaning)).collect()
        }
        Parameters::Own(names) => {
            let taken = level.position(|_| false);
            let free = names.iter().skip(taken).filter(|name| !labelled(name));
            free.map(|name| label(name, "a parameter of the function")).collect()
        }
    }
}

fn is_repeated(parameters: &[Parameter], number: usize) -> bool {
    parameters.get(number).is_some_and(|parameter| matches!(parameter.presence, Presence::Repeated { .. }))
}

/// The parameter that the argument at the cursor is for.
fn parameter_at(level: &Level, parameters: &Parameters) -> Option<&'static Parameter> {
    let Parameters::Known(parameters, _) = parameters else { return None };
    match &level.label {
        Some(label) => parameters.iter().find(|parameter| parameter.name == label),
        None => parameters.get(level.position(|number| is_repeated(parameters, number))),
    }
}

/// The functions of the catalogue, without the operators.
fn functions() -> impl Iterator<Item = &'static Entry> {
    catalogue::entries().filter(|entry| entry.room != Room::Operators)
}

fn function_item(entry: &'static Entry) -> Completion {
    Completion {
        text: format!("{}(", entry.name),
        kind: CompletionKind::Function,
        detail: entry.summary.to_owned(),
    }
}

fn is_search_word(entry: &Entry, word: &str) -> bool {
    entry.search.iter().any(|other| other.starts_with(word))
}

/// What a setting is for.
fn setting_meaning(name: &str) -> &'static str {
    match name {
        "clock" => "the axis that everything is brought onto",
        "members" => "the size of the ensemble that carries every ±",
        _ => "the number that the draws begin from",
    }
}

/// How words are compared: in NFC, without case.
fn folded(word: &str) -> String {
    word.nfc().collect::<String>().to_lowercase()
}

fn shortened(text: &str) -> String {
    const MOST: usize = 60;
    match text.char_indices().nth(MOST) {
        Some((end, _)) => format!("{}…", text.get(..end).unwrap_or(text)),
        None => text.to_owned(),
    }
}

/// The nearest place at or before `cursor` that lies between two code points.
fn floor(text: &str, cursor: usize) -> usize {
    let cursor = cursor.min(text.len());
    (0..=cursor).rev().find(|at| text.is_char_boundary(*at)).unwrap_or(0)
}
