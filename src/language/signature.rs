/// What a call may look like: its parameters in order.
#[derive(Clone, Copy, Debug)]
pub struct Signature {
    /// The parameters, in the order of unnamed arguments.
    pub parameters: &'static [Parameter],
}

/// One parameter of a function or of a choice.
#[derive(Clone, Copy, Debug)]
pub struct Parameter {
    /// Its name, as written before the colon.
    pub name: &'static str,
    /// The kinds of value it takes, by the words of [`crate::value::Shape::kind`]; none if it takes choices only.
    pub accepts: &'static [&'static str],
    /// The unit that a quantity or series must be convertible to; none if any will do.
    pub unit: Option<&'static str>,
    /// What it means.
    pub meaning: &'static str,
    /// Whether it may be left out.
    pub presence: Presence,
    /// The choices that it can be given by name.
    pub choices: &'static [Choice],
    /// Whether its argument is made of words that are never looked up as names.
    pub words: Words,
}

/// Arguments that are made of words, resolved by the signature.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Words {
    /// An ordinary argument.
    None,
    /// A list of sums of component labels: `[sun + sulfate, gases]`.
    Groups,
    /// A month or a range of months: `December..February`.
    Months,
}

/// The months, as they are written.
pub const MONTHS: [&str; 12] = [
    "January",
    "February",
    "March",
    "April",
    "May",
    "June",
    "July",
    "August",
    "September",
    "October",
    "November",
    "December",
];

/// Whether an argument may be left out.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Presence {
    /// It must be given.
    Required,
    /// It may be left out.
    Optional,
    /// It may be left out and is then this text.
    Default(&'static str),
    /// It is given any number of times, at least once; with `labels`, each may carry a label of the user's.
    Repeated {
        /// Whether a label before the colon names the item.
        labels: bool,
    },
}

/// A word that an argument can be, with parameters of its own.
#[derive(Clone, Copy, Debug)]
pub struct Choice {
    /// The word.
    pub name: &'static str,
    /// What it means.
    pub meaning: &'static str,
    /// Its own parameters.
    pub parameters: &'static [Parameter],
    /// Other words for it, by which it is suggested.
    pub search: &'static [&'static str],
}

impl Parameter {
    /// A required parameter of the given kinds.
    pub const fn required(
        name: &'static str,
        accepts: &'static [&'static str],
        meaning: &'static str,
    ) -> Self {
        Self {
            name,
            accepts,
            unit: None,
            meaning,
            presence: Presence::Required,
            choices: &[],
            words: Words::None,
        }
    }

    /// A parameter that may be left out.
    pub const fn optional(
        name: &'static str,
        accepts: &'static [&'static str],
        meaning: &'static str,
    ) -> Self {
        Self { presence: Presence::Optional, ..Self::required(name, accepts, meaning) }
    }

    /// A parameter that takes one of the choices, `default` where it is left out.
    pub const fn choice(
        name: &'static str,
        choices: &'static [Choice],
        default: &'static str,
        meaning: &'static str,
    ) -> Self {
        Self { choices, presence: Presence::Default(default), ..Self::required(name, &[], meaning) }
    }

    /// The same, convertible to `unit`.
    pub const fn in_unit(self, unit: &'static str) -> Self {
        Self { unit: Some(unit), ..self }
    }

    /// The same, with choices besides values.
    pub const fn or_choices(self, choices: &'static [Choice]) -> Self {
        Self { choices, ..self }
    }

    /// The same, given by `default` where it is left out.
    pub const fn by_default(self, default: &'static str) -> Self {
        Self { presence: Presence::Default(default), ..self }
    }

    /// The same, any number of times.
    pub const fn repeated(self, labels: bool) -> Self {
        Self { presence: Presence::Repeated { labels }, ..self }
    }

    /// The same, as a month or a range of months.
    pub const fn as_months(self) -> Self {
        Self { words: Words::Months, ..self }
    }

    /// The same, as a list of sums of labels.
    pub const fn as_groups(self) -> Self {
        Self { words: Words::Groups, ..self }
    }
}

impl Choice {
    /// A choice without parameters.
    pub const fn plain(name: &'static str, meaning: &'static str) -> Self {
        Self { name, meaning, parameters: &[], search: &[] }
    }

    /// The same, suggested for other words, too.
    pub const fn also(self, search: &'static [&'static str]) -> Self {
        Self { search, ..self }
    }
}
