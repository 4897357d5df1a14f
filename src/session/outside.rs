//! Definitions given from outside the program, and what is wrong with cells once all have been run.

use std::collections::BTreeMap;
use std::sync::Arc;

use super::cell::Session;
use super::definitions::Definitions;
use super::evaluate::internal;
use super::resolve::SETTINGS;
use crate::base::{Diagnostic, Fault, SourceId, Span};
use crate::catalogue::nearest;
use crate::language::{StatementKind, parse};

/// The id of the cell that holds the definitions from outside; no cell of a notebook has an empty one.
pub const OUTSIDE: &str = "";

/// A definition from outside, as it was written.
pub(super) struct Given {
    text: String,
    /// Whether a cell defines the name, too.
    overrules: bool,
}

/// Definitions from outside by name, functions as `name(…)`.
pub(super) type Outside = BTreeMap<String, Given>;

/// The key of a function among names.
pub(super) fn function_key(name: &str) -> String {
    format!("{name}(…)")
}

/// What is wrong with the definitions of a cell that are in force.
#[derive(Debug, Default)]
pub struct Standing {
    /// Mistakes.
    pub problems: Vec<Diagnostic>,
    /// Definitions that wait for a name that is not defined.
    pub waiting: Vec<Diagnostic>,
}

impl Session {
    /// Give definitions from outside, before the first cell: each wins over the definition of that name wherever a
    /// cell makes one, and the cell's notices say so. They are expressions like any other and may refer to names that
    /// cells define. Messages call them by the name of the cell [`OUTSIDE`].
    ///
    /// # Errors
    /// Mistakes of syntax, expressions without a name, and names given twice; nothing is in force then.
    pub fn define_from_outside(&mut self, texts: &[String]) -> Result<(), Vec<Diagnostic>> {
        let mut given = Outside::new();
        let mut statements = Vec::new();
        let mut problems = Vec::new();
        for text in texts {
            let source = self.add_source(OUTSIDE, text);
            match parse(text, source) {
                Err(error) => problems.extend(error.diagnostics),
                Ok(program) if program.statements.is_empty() => {
                    problems.push(no_definition(Span::new(source, 0, text.len())))
                }
                Ok(program) => statements.extend(program.statements.into_iter().map(|line| (text, line))),
            }
        }
        for (text, statement) in &statements {
            let (key, name_span) = match &statement.kind {
                StatementKind::Define { name, name_span, .. } => (name.clone(), *name_span),
                StatementKind::Function { name, name_span, parameters, .. } => {
                    if let Err(problem) = Definitions::check_function(name, *name_span, parameters) {
                        problems.push(problem);
                    }
                    (function_key(name), *name_span)
                }
                StatementKind::Show(_) => {
                    problems.push(no_definition(statement.span));
                    continue;
                }
            };
            let written = text.get(statement.span.start..statement.span.end).unwrap_or("");
            let written = written.split_whitespace().collect::<Vec<_>>().join(" ");
            if given.insert(key.clone(), Given { text: written, overrules: false }).is_some() {
                let fault = Fault::new("defined-twice", format!("`{key}` is given twice"))
                    .help("a name is bound once: leave one of them out");
                problems.push(fault.at(name_span));
            }
        }
        if !problems.is_empty() {
            return Err(problems);
        }
        // On a thread of the pool, whose stack is deep enough for everything that the caps let through.
        let threads = self.threads.clone();
        let home: Arc<str> = Arc::from(OUTSIDE);
        let definitions = &mut self.definitions;
        threads.install(|| {
            for (_, statement) in statements {
                match statement.kind {
                    StatementKind::Define { name, name_span, expression } => {
                        definitions.define(&name, &home, name_span, expression);
                    }
                    StatementKind::Function { name, name_span, parameters, body } => {
                        let parameters = parameters.into_iter().map(|(name, _)| name).collect();
                        definitions.define_function(&name, &home, name_span, parameters, body);
                    }
                    StatementKind::Show(_) => {}
                }
            }
            definitions.resolve_again();
        });
        definitions.outside = given;
        Ok(())
    }

    /// Definitions from outside whose names no cell has defined so far, with a near name that one did.
    pub fn unmet_from_outside(&self) -> Vec<String> {
        let home = self.cell_name(OUTSIDE);
        let unmet = self.definitions.outside.iter().filter(|(_, given)| !given.overrules);
        let values = self.definitions.values.iter();
        let values = values.filter(|(_, found)| &*found.cell != OUTSIDE).map(|(name, _)| name.to_string());
        let functions = self.definitions.functions.iter();
        let functions = functions.filter(|(_, found)| &*found.cell != OUTSIDE).map(|(name, _)| name);
        let known: Vec<String> = values.chain(functions.map(|name| function_key(name))).collect();
        unmet
            .map(|(key, given)| {
                let near = nearest(key, known.iter().map(String::as_str))
                    .or_else(|| nearest(key, SETTINGS.iter().copied()));
                let near = match near {
                    Some(near) if near != key => format!("; did you mean `{near}`?"),
                    _ => String::new(),
                };
                format!("`{}` comes from {home} alone: nothing else defines `{key}`{near}", given.text)
            })
            .collect()
    }

    /// What is wrong with cells now, which may be less than when they were run: a name they waited for has come, or
    /// another cell has put a definition right. The mistakes of a cell that was not installed are not among them.
    pub fn standing(&self, cells: &[&str]) -> Vec<Standing> {
        let standing = self.consult(|evaluator, environment| {
            let stand = |cell: &&str| {
                let mut reply = super::CellReply::default();
                evaluator.check(cell, environment, &mut reply);
                Standing { problems: reply.problems, waiting: reply.waiting }
            };
            cells.iter().map(stand).collect()
        });
        standing.map(|standing| self.each_told_once(cells, standing)).unwrap_or_else(|| {
            let problem = internal("these cells could not be checked").at(Span::new(SourceId(0), 0, 0));
            cells
                .iter()
                .map(|_| Standing { problems: vec![problem.clone()], ..Standing::default() })
                .collect()
        })
    }

    /// What is wrong in one cell is told there, and not again with all that depends on it.
    fn each_told_once(&self, cells: &[&str], mut standing: Vec<Standing>) -> Vec<Standing> {
        let homes: Vec<Option<SourceId>> = cells.iter().map(|cell| self.newest_source(cell)).collect();
        let told: Vec<Vec<Diagnostic>> = standing
            .iter()
            .map(|cell| cell.problems.iter().chain(&cell.waiting).cloned().collect())
            .collect();
        for (place, cell) in standing.iter_mut().enumerate() {
            let elsewhere = |problem: &Diagnostic| {
                let home = homes.iter().position(|home| *home == Some(problem.primary.span.source));
                home.filter(|home| *home != place)
                    .and_then(|home| told.get(home))
                    .is_some_and(|told| told.iter().any(|other| other.is_same_mistake(problem)))
            };
            cell.problems.retain(|problem| !elsewhere(problem));
            cell.waiting.retain(|problem| !elsewhere(problem));
        }
        standing
    }

    /// Whether a definition from outside wins over one that a cell makes for this key: says so.
    pub(super) fn overruled(&mut self, key: &str) -> Option<String> {
        let home = self.cell_name(OUTSIDE).to_owned();
        let given = self.definitions.outside.get_mut(key)?;
        given.overrules = true;
        Some(format!("`{}` comes from {home}; it is in force instead of the definition here", given.text))
    }
}

fn no_definition(span: Span) -> Diagnostic {
    Fault::new("no-definition", "this defines no name")
        .help("give a definition, such as `members = 500`")
        .at(span)
}
