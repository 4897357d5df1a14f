use super::call::{Call, Stop};
use crate::base::Fault;
use crate::language::Signature;
use crate::value::{Shape, Value};

/// One function of the language: everything about it, in one place.
pub struct Entry {
    /// Its name, or the sign of an operator.
    pub name: &'static str,
    /// The room of the reference it stands in.
    pub room: Room,
    /// One sentence: what it gives.
    pub summary: &'static str,
    /// Its parameters.
    pub signature: Signature,
    /// Kind and unit of the result, in words.
    pub result: &'static str,
    /// The equation, in LaTeX, where there is one.
    pub equation: Option<&'static str>,
    /// What it does with gaps.
    pub gaps: &'static str,
    /// Examples with what they give.
    pub shows: &'static [Shows],
    /// Examples that must be refused.
    pub fails: &'static [Fails],
    /// Where the formula comes from.
    pub citations: &'static [&'static Citation],
    /// Other words by which it is looked for.
    pub search: &'static [&'static str],
    /// Raised whenever the same call gives other numbers; part of every fingerprint.
    pub revision: u32,
    /// When the result depends on the clock in force.
    pub reads_clock: ReadsClock,
    /// The parameter that holds the clock under which the first argument is evaluated instead of the one in force.
    pub under: Option<&'static str>,
    /// The parameter that names an input file.
    pub reads_file: Option<&'static str>,
    /// The parameter that, where it is given, makes the result an ensemble of the file's own.
    pub ensemble: Option<&'static str>,
    /// Whether each call is a random variable of its own.
    pub random: bool,
    /// Whether the text of its arguments labels parts of the result.
    pub labels: bool,
    /// Kind and unit of the result, from those of the arguments.
    pub shape: fn(&Call<'_>) -> Result<Shape, Stop>,
    /// The computation.
    pub body: Body,
}

impl Entry {
    /// What most entries are: each writes only where it differs. An entry without name is no entry.
    pub(super) const PLAIN: Entry = Entry {
        name: "",
        room: Room::Algebra,
        summary: "",
        signature: Signature { parameters: &[] },
        result: "",
        equation: None,
        gaps: "A gap stays a gap.",
        shows: &[],
        fails: &[],
        citations: &[],
        search: &[],
        revision: 1,
        reads_clock: ReadsClock::Never,
        under: None,
        reads_file: None,
        ensemble: None,
        random: false,
        labels: false,
        shape: |call| Ok(call.context.own_value()?.shape()),
        body: Body::PerMember(|_| Err(Fault::new("internal", "an entry without a body").into())),
    };
}

impl Entry {
    /// How an operator is written; none for a function, which is called by its name.
    pub fn sign(&self) -> Option<&'static str> {
        (self.room == Room::Operators).then_some(if self.name == "negate" { "-" } else { self.name })
    }
}

/// How a body sees the members.
#[derive(Clone, Copy)]
pub enum Body {
    /// Called for the nominal path and for each block of members, with the arguments of that block.
    PerMember(fn(&Call<'_>) -> Result<Value, Stop>),
    /// Called once; it sees nominal arguments and asks for the members' spread.
    AcrossMembers(fn(&Call<'_>) -> Result<Value, Stop>),
}

/// When a result depends on the clock in force.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ReadsClock {
    /// Never.
    Never,
    /// Whenever an argument is a series or a bundle.
    WithSeries,
    /// Always.
    Always,
}

/// The rooms of the reference.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Room {
    /// Signs between expressions.
    Operators,
    /// Clocks, windows and bringing onto a clock.
    Time,
    /// Reading data.
    Reading,
    /// Idealised series.
    Shapes,
    /// Putting series together.
    Algebra,
    /// Greenhouse gases and people.
    Gases,
    /// Response models.
    Response,
    /// Attribution and statistics.
    Inference,
    /// Showing results.
    Showing,
}

impl Room {
    /// Its title in the reference.
    pub fn title(self) -> &'static str {
        match self {
            Room::Operators => "Operators",
            Room::Time => "Time",
            Room::Reading => "Reading",
            Room::Shapes => "Shapes",
            Room::Algebra => "Algebra",
            Room::Gases => "Gases and people",
            Room::Response => "Response",
            Room::Inference => "Inference",
            Room::Showing => "Showing",
        }
    }
}

/// A program whose last line is shown, and the short text of what it gives.
pub struct Shows {
    /// The program.
    pub program: &'static str,
    /// The line of text under its last output.
    pub gives: &'static str,
}

/// A program that must be refused.
pub struct Fails {
    /// The program.
    pub program: &'static str,
    /// The code of the diagnostic.
    pub code: &'static str,
    /// Words that the message must hold.
    pub says: &'static str,
}

/// A published source.
#[derive(Debug, PartialEq, Eq)]
pub struct Citation {
    /// Authors and year, as in running text.
    pub key: &'static str,
    /// The full reference.
    pub reference: &'static str,
}
