use std::sync::Arc;

use crate::base::{Blame, Cancellation, Cancelled, Diagnostic, Fault, Span};
use crate::language::Parameter;
use crate::value::{Block, Clock, Measure, Quantity, Series, Shape, Spread, TimeSpan, Unit, Value};

/// Why a computation stopped.
#[derive(Clone, Debug)]
pub enum Stop {
    /// Here: still without a place.
    Fault(Fault),
    /// Inside an argument, with its place.
    Placed(Box<Diagnostic>),
}

impl From<Fault> for Stop {
    fn from(fault: Fault) -> Self {
        Stop::Fault(fault)
    }
}

impl From<Cancelled> for Stop {
    fn from(cancelled: Cancelled) -> Self {
        Stop::Fault(cancelled.into())
    }
}

impl Stop {
    /// The same stop; a fault of the whole call is blamed on the argument of `parameter`.
    #[must_use]
    pub fn blame(self, parameter: &'static str) -> Self {
        match self {
            Stop::Fault(fault) => Stop::Fault(fault.blame(parameter)),
            Stop::Placed(_) => self,
        }
    }
}

/// Which members a body is called for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Path {
    /// Every distribution at its stated best value.
    Nominal,
    /// The members `first..first + count`.
    Block {
        /// The first member.
        first: u64,
        /// How many.
        count: usize,
    },
}

/// An input file as it was when it was read.
#[derive(Debug)]
pub struct InputFile {
    /// Its path, relative to the notebook's folder.
    pub path: String,
    /// Its bytes.
    pub bytes: Vec<u8>,
    /// SHA-256 of the bytes, in hexadecimal.
    pub sha256: String,
}

/// What a body may ask of the session: arguments in an environment, files, draws.
///
/// `slot` numbers the arguments that hold a value.
pub trait Context {
    /// Kind and unit of an argument.
    ///
    /// # Errors
    /// What is wrong with the argument.
    fn shape(&self, slot: usize) -> Result<Shape, Stop>;
    /// An argument for the members in hand, evaluated in the environment in force.
    ///
    /// # Errors
    /// What stopped its evaluation.
    fn value(&self, slot: usize) -> Result<Arc<Value>, Stop>;
    /// An argument evaluated afresh under another clock.
    ///
    /// # Errors
    /// What stopped its evaluation.
    fn value_under(&self, slot: usize, clock: Arc<Clock>) -> Result<Arc<Value>, Stop>;
    /// The value of this very call, for shapes that only the data tell.
    ///
    /// # Errors
    /// What stopped its evaluation.
    fn own_value(&self) -> Result<Arc<Value>, Stop>;
    /// Medians and ranges over all members of an argument; none where it is certain.
    ///
    /// # Errors
    /// What stopped its evaluation.
    fn spread(&self, slot: usize) -> Result<Option<Arc<Spread>>, Stop>;
    /// Whether an argument has members.
    fn is_uncertain(&self, slot: usize) -> bool;
    /// What the user calls an argument: its name, or its text.
    fn label(&self, slot: usize) -> Arc<str>;
    /// What the user calls the items of an argument that is a list.
    fn item_labels(&self, slot: usize) -> Vec<Arc<str>>;
    /// The clock in force.
    fn clock(&self) -> Option<Arc<Clock>>;
    /// The members in hand.
    fn path(&self) -> Path;
    /// One standard normal number for each member in hand, of the random variable that this call is.
    fn standard_normals(&self) -> Vec<f64>;
    /// A file below the notebook's folder.
    ///
    /// # Errors
    /// Outside the folder, missing, too large, no regular file.
    fn file(&self, path: &str) -> Result<Arc<InputFile>, Fault>;
    /// Add a note to the outputs that follow from this call.
    fn note(&self, text: String);
    /// Raised when the user interrupts.
    fn cancellation(&self) -> &Cancellation;
}

/// What was given for one parameter.
#[derive(Clone, Debug)]
pub struct Given {
    /// The number of the parameter in the signature.
    pub parameter: usize,
    /// The label before the colon where a parameter is repeated with labels of the user's.
    pub label: Option<Arc<str>>,
    /// The argument.
    pub what: What,
    /// Where it stands; the call, for what is given by default.
    pub span: Span,
}

/// The forms of an argument.
#[derive(Clone, Debug)]
pub enum What {
    /// A value, by its slot.
    Value(usize),
    /// A choice by its number, with arguments of its own.
    Choice {
        /// The number of the choice in the parameter.
        choice: usize,
        /// What was given for its parameters.
        given: Vec<Given>,
    },
    /// Sums of labels.
    Groups(Vec<Vec<Arc<str>>>),
    /// A range of months, counted from 0 for January; it may run over the turn of the year.
    Months {
        /// The first month.
        first: usize,
        /// The last month.
        last: usize,
    },
}

/// A call as its body sees it: arguments by the names of their parameters.
#[derive(Clone, Copy)]
pub struct Call<'a> {
    parameters: &'static [Parameter],
    given: &'a [Given],
    /// What the session offers.
    pub context: &'a dyn Context,
}

impl<'a> Call<'a> {
    /// The call with the arguments `given` for `parameters`.
    pub fn new(parameters: &'static [Parameter], given: &'a [Given], context: &'a dyn Context) -> Self {
        Self { parameters, given, context }
    }

    fn all(&self, name: &str) -> impl Iterator<Item = &'a Given> + use<'a> {
        let number = self.parameters.iter().position(|parameter| parameter.name == name);
        let given = self.given;
        given.iter().filter(move |given| Some(given.parameter) == number)
    }

    fn first(&self, name: &str) -> Option<&'a Given> {
        self.all(name).next()
    }

    /// The slot of the value given for a parameter.
    pub fn slot(&self, name: &str) -> Option<usize> {
        self.first(name).and_then(|given| match &given.what {
            What::Value(slot) => Some(*slot),
            What::Choice { .. } | What::Groups(_) | What::Months { .. } => None,
        })
    }

    /// The slots and labels of all values given for a repeated parameter.
    pub fn repeated(&self, name: &str) -> Vec<(Option<Arc<str>>, usize)> {
        self.all(name)
            .filter_map(|given| match &given.what {
                What::Value(slot) => Some((given.label.clone(), *slot)),
                What::Choice { .. } | What::Groups(_) | What::Months { .. } => None,
            })
            .collect()
    }

    /// The choice made for a parameter: its word, and its own arguments.
    pub fn choice(&self, name: &str) -> Option<(&'static str, Call<'a>)> {
        let given = self.first(name)?;
        let What::Choice { choice, given: inner } = &given.what else { return None };
        let choice = self.parameters.get(given.parameter)?.choices.get(*choice)?;
        Some((choice.name, Call { parameters: choice.parameters, given: inner, context: self.context }))
    }

    /// The months given for a parameter, first and last, from 0 for January.
    pub fn months(&self, name: &str) -> Option<(usize, usize)> {
        match &self.first(name)?.what {
            What::Months { first, last } => Some((*first, *last)),
            What::Value(_) | What::Choice { .. } | What::Groups(_) => None,
        }
    }

    /// The sums of labels given for a parameter.
    pub fn groups(&self, name: &str) -> Option<&'a [Vec<Arc<str>>]> {
        match &self.first(name)?.what {
            What::Groups(groups) => Some(groups),
            What::Value(_) | What::Choice { .. } | What::Months { .. } => None,
        }
    }

    /// Kind and unit of an argument that must be there.
    ///
    /// # Errors
    /// What is wrong with it.
    pub fn shape(&self, name: &'static str) -> Result<Shape, Stop> {
        match self.slot(name) {
            Some(slot) => self.context.shape(slot),
            None => Err(missing(name).into()),
        }
    }

    /// An argument that must be there.
    ///
    /// # Errors
    /// What stopped its evaluation.
    pub fn value(&self, name: &'static str) -> Result<Arc<Value>, Stop> {
        match self.slot(name) {
            Some(slot) => self.context.value(slot),
            None => Err(missing(name).into()),
        }
    }

    /// An argument that may have been left out.
    ///
    /// # Errors
    /// What stopped its evaluation.
    pub fn maybe(&self, name: &'static str) -> Result<Option<Arc<Value>>, Stop> {
        self.slot(name).map(|slot| self.context.value(slot)).transpose()
    }

    /// The numbers of a quantity, converted to the unit of its parameter.
    ///
    /// # Errors
    /// What stopped its evaluation.
    pub fn numbers(&self, name: &'static str) -> Result<Block, Stop> {
        let value = self.value(name)?;
        let Value::Quantity(quantity) = value.as_ref() else { return Err(wrong_kind(name, &value).into()) };
        let unit =
            self.parameters.iter().find(|parameter| parameter.name == name).and_then(|found| found.unit);
        let Some(Ok(unit)) = unit.map(Unit::parse) else { return Ok(quantity.values.clone()) };
        let factor = quantity.measure.unit.factor_to(&unit).map_err(|fault| fault.blame(name))?;
        Ok(quantity.values.times(factor))
    }

    /// One certain number, converted to the unit of its parameter.
    ///
    /// # Errors
    /// `must-be-certain` where it has members.
    pub fn certain(&self, name: &'static str) -> Result<f64, Stop> {
        if self.slot(name).is_some_and(|slot| self.context.is_uncertain(slot)) {
            return Err(Fault::new("must-be-certain", format!("`{name}` cannot carry an uncertainty"))
                .blame(name)
                .help("give it without ±")
                .into());
        }
        Ok(self.numbers(name)?.first())
    }

    /// A text.
    ///
    /// # Errors
    /// What stopped its evaluation.
    pub fn text(&self, name: &'static str) -> Result<Option<Arc<str>>, Stop> {
        match self.maybe(name)? {
            None => Ok(None),
            Some(value) => match value.as_ref() {
                Value::Text(text) => Ok(Some(text.clone())),
                _ => Err(wrong_kind(name, &value).into()),
            },
        }
    }

    /// A span.
    ///
    /// # Errors
    /// What stopped its evaluation.
    pub fn span(&self, name: &'static str) -> Result<Option<TimeSpan>, Stop> {
        match self.maybe(name)? {
            None => Ok(None),
            Some(value) => match value.as_ref() {
                Value::Span(span) => Ok(Some(span.clone())),
                _ => Err(wrong_kind(name, &value).into()),
            },
        }
    }

    /// The measure of an argument that has one: a quantity, a series, a bundle's sum.
    ///
    /// # Errors
    /// What is wrong with the argument.
    pub fn measure(&self, name: &'static str) -> Result<Measure, Stop> {
        let shape = self.shape(name)?;
        shape.measure().ok_or_else(|| {
            Fault::new("wrong-argument", format!("found {}", shape.describe())).blame(name).into()
        })
    }

    /// What the user calls an argument.
    pub fn label(&self, name: &str) -> Arc<str> {
        self.slot(name).map_or_else(|| Arc::from(name), |slot| self.context.label(slot))
    }
}

fn missing(name: &'static str) -> Fault {
    Fault::new("missing-argument", format!("`{name}` is missing"))
}

/// Only reached where the check of a signature let something through that the body does not take.
pub(super) fn wrong_kind(name: &'static str, value: &Value) -> Fault {
    Fault::new("wrong-argument", format!("found {} for `{name}`", value.shape().describe())).blame(name)
}

/// A quantity or a series, as the operators meet them.
pub(super) enum Numeric {
    Quantity(Quantity),
    Series(Series),
}

/// Check what was given against the signature: kinds and units. The names of an operator's parameters are written
/// nowhere, so that messages about one, whose `sign` it is, quote the operand instead.
///
/// # Errors
/// `wrong-argument` or `unit-mismatch`, blamed on the argument.
pub fn check_arguments(call: &Call<'_>, sign: Option<&str>) -> Result<(), Stop> {
    for given in call.given {
        let Some(parameter) = call.parameters.get(given.parameter) else { continue };
        match &given.what {
            What::Groups(_) | What::Months { .. } => {}
            What::Choice { choice, given } => {
                if let Some(choice) = parameter.choices.get(*choice) {
                    check_arguments(&Call::new(choice.parameters, given, call.context), None)?;
                }
            }
            What::Value(slot) => {
                let shape = call.context.shape(*slot)?;
                let (subject, takes) = match sign {
                    Some(sign) => (operand(&call.context.label(*slot)), format!("`{sign}` takes")),
                    None => (format!("`{}`", parameter.name), "it takes".to_owned()),
                };
                check_shape(parameter, &shape, &subject, &takes).map_err(|mut fault| {
                    fault.blame = blame_for(call, parameter, given);
                    fault
                })?;
            }
        }
    }
    Ok(())
}

fn blame_for(call: &Call<'_>, parameter: &'static Parameter, given: &Given) -> Blame {
    let place = call.all(parameter.name).position(|other| std::ptr::eq(other, given));
    match (parameter.presence, place) {
        (crate::language::Presence::Repeated { .. }, Some(place)) => Blame::Item(place),
        _ => Blame::Argument(parameter.name),
    }
}

/// An operand as a message names it: its text, where that is short enough to be read.
fn operand(text: &str) -> String {
    const MOST: usize = 40;
    if text.chars().count() <= MOST { format!("`{text}`") } else { "this operand".to_owned() }
}

fn check_shape(parameter: &Parameter, shape: &Shape, subject: &str, takes: &str) -> Result<(), Fault> {
    let kind = shape.kind();
    // A duration is a quantity too, and a list of acceptable kinds says "quantity" for both.
    let accepted = parameter.accepts.iter().any(|accepted| {
        *accepted == "any" || *accepted == kind || (*accepted == "quantity" && kind == "duration")
    });
    if !accepted {
        let expected = expected_words(parameter);
        let help = slip(parameter, shape);
        let message = format!("{subject} is {}; {takes} {expected}", shape.describe());
        let fault = Fault::new("wrong-argument", message).label(format!("I was expecting {expected}"));
        return Err(match help {
            Some(help) => fault.help(help),
            None => fault,
        });
    }
    if let (Some(Ok(unit)), Some(measure)) = (parameter.unit.map(Unit::parse), shape.measure()) {
        measure.unit.factor_to(&unit).map_err(|fault| {
            let expected = format!("{subject} must be convertible to {unit}");
            let mut fault = fault.label(expected);
            fault.message = format!("{subject} is {}, which does not convert to {unit}", shape.describe());
            fault
        })?;
    }
    Ok(())
}

/// What to write instead, for the commonest slips.
fn slip(parameter: &Parameter, shape: &Shape) -> Option<&'static str> {
    let takes = |kind: &str| parameter.accepts.contains(&kind);
    match shape {
        Shape::Range(unit) if unit.is_bare() && takes("span") => {
            Some("a span of time carries its era: `1850..1900 CE`")
        }
        Shape::Span if takes("clock") => Some("a clock is a span and a step: `1850..1900 CE by 1 yr`"),
        Shape::Instant(_) if takes("span") => Some("a span has two ends: `1850..1900 CE`"),
        Shape::Quantity(measure) if measure.unit.is_bare() && takes("instant") => {
            Some("an instant carries its era: `1962 CE`, `21 ka`")
        }
        Shape::Quantity(measure) if measure.unit.is_bare() && takes("duration") => {
            Some("a duration carries its unit: `4 yr`, `6 month`, `41 kyr`")
        }
        _ => None,
    }
}

fn expected_words(parameter: &Parameter) -> String {
    let mut words: Vec<String> = parameter
        .accepts
        .iter()
        .map(|kind| match *kind {
            "events" => "events".to_owned(),
            kind => format!("{} {kind}", if kind.starts_with(['a', 'i']) { "an" } else { "a" }),
        })
        .collect();
    words.extend(parameter.choices.iter().map(|choice| format!("`{}`", choice.name)));
    let unit =
        parameter.unit.filter(|unit| *unit != "1").map(|unit| format!(" in {unit}")).unwrap_or_default();
    let list = match words.as_slice() {
        [] => "something else".to_owned(),
        [one] => one.clone(),
        [all @ .., last] => format!("{} or {last}", all.join(", ")),
    };
    list + &unit
}
