use std::sync::Arc;

use super::era::Era;
use super::measure::Measure;
use super::unit::Unit;

/// Kind and unit of a value, known before anything is computed.
#[derive(Clone, Debug, PartialEq)]
pub enum Shape {
    /// A number with a unit; a duration where the unit is one of time.
    Quantity(Measure),
    /// A point in time, with the era it is shown in.
    Instant(Era),
    /// A stretch of time.
    Span,
    /// A range of quantities.
    Range(Unit),
    /// A clock.
    Clock,
    /// A series.
    Series(Measure),
    /// Labels and measures of a bundle's components.
    Bundle(Vec<(Arc<str>, Measure)>),
    /// A response model.
    Model,
    /// An attribution.
    Attribution,
    /// Events, with the measure of their sizes where they have any.
    Events(Option<Measure>),
    /// A table.
    Table,
    /// Words.
    Text,
    /// The shapes of a list's items.
    List(Vec<Shape>),
}

impl Shape {
    /// The word for the kind in JSON.
    pub fn kind(&self) -> &'static str {
        match self {
            Shape::Quantity(measure) if measure.unit.is_time() => "duration",
            Shape::Quantity(_) => "quantity",
            Shape::Instant(_) => "instant",
            Shape::Span => "span",
            Shape::Range(_) => "range",
            Shape::Clock => "clock",
            Shape::Series(_) => "series",
            Shape::Bundle(_) => "bundle",
            Shape::Model => "model",
            Shape::Attribution => "attribution",
            Shape::Events(_) => "events",
            Shape::Table => "table",
            Shape::Text => "text",
            Shape::List(_) => "list",
        }
    }

    /// The kind with its article and unit, for messages: `a series in W/m2`.
    pub fn describe(&self) -> String {
        let kind = self.kind();
        let article = if kind.starts_with(['a', 'i']) { "an" } else { "a" };
        match self {
            Shape::Quantity(measure) | Shape::Series(measure) if measure.unit.is_bare() => {
                format!("{article} {kind} without unit")
            }
            Shape::Quantity(measure) | Shape::Series(measure) => {
                format!("{article} {kind} in {}", measure.unit)
            }
            Shape::Range(unit) if unit.is_bare() => "a range of plain numbers".to_owned(),
            Shape::Range(unit) => format!("a range in {unit}"),
            Shape::Events(_) => "events".to_owned(),
            Shape::Instant(_)
            | Shape::Span
            | Shape::Clock
            | Shape::Bundle(_)
            | Shape::Model
            | Shape::Attribution
            | Shape::Table
            | Shape::Text
            | Shape::List(_) => format!("{article} {kind}"),
        }
    }

    /// The measure of a quantity, a series, or a bundle's sum.
    pub fn measure(&self) -> Option<Measure> {
        match self {
            Shape::Quantity(measure) | Shape::Series(measure) => Some(measure.clone()),
            Shape::Bundle(parts) => {
                let mut parts = parts.iter().map(|(_, measure)| measure.clone());
                let first = parts.next()?;
                Some(parts.fold(first, |sum, next| sum.sum(&next, false).map_or(sum, |(measure, _)| measure)))
            }
            Shape::Instant(_)
            | Shape::Span
            | Shape::Range(_)
            | Shape::Clock
            | Shape::Model
            | Shape::Attribution
            | Shape::Events(_)
            | Shape::Table
            | Shape::Text
            | Shape::List(_) => None,
        }
    }
}
