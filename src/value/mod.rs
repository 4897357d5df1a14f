//! What a program computes with: quantities with units, instants with eras, series on axes, bundles, models,
//! attributions and tables. Every numeric value carries a block of members; see [`Block`].

mod attribution;
mod axis;
mod block;
mod clock;
mod dimension;
mod era;
mod events;
mod figure;
mod measure;
mod model;
mod series;
mod shape;
mod shown;
mod spread;
mod table;
mod unit;
mod unit_table;

pub use attribution::{Attribution, CAUTION, Coefficient, FitStatistics};
pub use axis::{Axis, AxisKind, Span as TimeSpan};
pub use block::Block;
pub(crate) use clock::duration_words;
pub use clock::{Clock, STEPS_LIMIT};
pub use dimension::Dimension;
pub use era::{Era, Instant, decimal_year, instant_of_date};
pub(crate) use era::{are_dates, date_label};
pub use events::{Events, Sizes};
pub use figure::{Band, Figure, Ink, Line, Mark, Panel, PlotAxis, Tick};
pub use measure::{Forcing, ForcingKind, Measure, Reading};
pub use model::Model;
pub use series::{Bundle, Component, Content, Series, Standing};
pub use shape::Shape;
pub use shown::{Shown, ShownSeries};
pub use spread::Spread;
pub use table::{Cell, Column, Table};
pub(crate) use unit::superscript;
pub use unit::{Unit, UnitFault};
pub use unit_table::{UNITS, UnitEntry, unit_spellings};

use std::sync::Arc;

/// The time dimension's scale: one mean Gregorian year of 365.2425 days of 86,400 s.
pub const SECONDS_PER_YEAR: f64 = 31_556_952.0;

/// A value of the language.
#[derive(Clone, Debug)]
pub enum Value {
    /// A number with its unit; a duration where the unit is one of time.
    Quantity(Quantity),
    /// A point in time.
    Instant(Instant),
    /// A stretch of time, or a range of quantities.
    Span(TimeSpan),
    /// A range `low..high` of quantities in one unit.
    Range(Range),
    /// A clock: the axis that formulas are evaluated on.
    Clock(Arc<Clock>),
    /// A series on an axis.
    Series(Series),
    /// Named components whose sum is the forcing.
    Bundle(Bundle),
    /// A response model with its parameters.
    Model(Model),
    /// How much each driver explains.
    Attribution(Arc<Attribution>),
    /// Things that happened at known times.
    Events(Arc<Events>),
    /// Rows and columns.
    Table(Arc<Table>),
    /// Words.
    Text(Arc<str>),
    /// Several values.
    List(Vec<Arc<Value>>),
}

/// A number (one for each member) with its unit.
#[derive(Clone, Debug)]
pub struct Quantity {
    /// One column; one row where it is certain.
    pub values: Block,
    /// Unit and kind.
    pub measure: Measure,
}

/// A range of quantities `low..high`, both ends in.
#[derive(Clone, Debug, PartialEq)]
pub struct Range {
    /// The lower end.
    pub low: f64,
    /// The upper end.
    pub high: f64,
    /// The unit of both.
    pub unit: Unit,
}

impl Quantity {
    /// A certain quantity.
    pub fn certain(value: f64, unit: Unit) -> Self {
        Self { values: Block::single(value), measure: Measure::of(unit) }
    }

    /// The value of the first row: the nominal one on the nominal path.
    pub fn first(&self) -> f64 {
        self.values.first()
    }
}

impl Value {
    /// The word for this kind of value in JSON and messages.
    pub fn kind(&self) -> &'static str {
        self.shape().kind()
    }

    /// Kind and unit, without the numbers.
    pub fn shape(&self) -> Shape {
        match self {
            Value::Quantity(quantity) => Shape::Quantity(quantity.measure.clone()),
            Value::Instant(instant) => Shape::Instant(instant.era),
            Value::Span(_) => Shape::Span,
            Value::Range(range) => Shape::Range(range.unit.clone()),
            Value::Clock(_) => Shape::Clock,
            Value::Series(series) => Shape::Series(series.measure.clone()),
            Value::Bundle(bundle) => Shape::Bundle(bundle.shapes()),
            Value::Model(_) => Shape::Model,
            Value::Attribution(_) => Shape::Attribution,
            Value::Events(events) => Shape::Events(events.sizes.as_ref().map(|sizes| sizes.measure.clone())),
            Value::Table(_) => Shape::Table,
            Value::Text(_) => Shape::Text,
            Value::List(items) => Shape::List(items.iter().map(|item| item.shape()).collect()),
        }
    }

    /// How many bytes the numbers take, for the bound on remembered values.
    pub fn bytes(&self) -> usize {
        let numbers = match self {
            Value::Quantity(quantity) => quantity.values.len(),
            Value::Instant(instant) => instant.years.len(),
            Value::Clock(clock) => clock.axis.len() * 2,
            Value::Series(series) => series.numbers(),
            Value::Bundle(bundle) => bundle.numbers(),
            Value::Model(model) => model.parameters().iter().map(|(_, _, block)| block.len()).sum(),
            Value::Attribution(attribution) => attribution.numbers(),
            Value::Events(events) => events.numbers(),
            Value::Table(table) => table.rows.len() * table.columns.len() * 4,
            Value::Text(text) => text.len() / 8,
            Value::List(items) => return items.iter().map(|item| item.bytes()).sum::<usize>() + 64,
            Value::Span(_) | Value::Range(_) => 4,
        };
        numbers * 8 + 128
    }
}
