use std::sync::Arc;

use super::attribution::Attribution;
use super::axis::{Axis, Span};
use super::clock::Clock;
use super::era::Era;
use super::events::Events;
use super::measure::Measure;
use super::model::Model;
use super::spread::Spread;
use super::table::Table;
use super::{Range, Shape};

/// A result as it is shown: nominal numbers with the members' medians and 5–95 % ranges.
#[derive(Clone, Debug)]
pub enum Shown {
    /// A quantity.
    Quantity {
        /// Unit and kind.
        measure: Measure,
        /// The nominal value.
        nominal: f64,
        /// The members, where it is uncertain.
        spread: Option<Arc<Spread>>,
    },
    /// An instant.
    Instant {
        /// The era it is shown in.
        era: Era,
        /// Whether it came as a date of the calendar.
        is_date: bool,
        /// The nominal decimal year.
        nominal: f64,
        /// The members, in decimal years.
        spread: Option<Arc<Spread>>,
    },
    /// A series.
    Series(ShownSeries),
    /// A bundle.
    Bundle {
        /// The components that are series, with their labels.
        components: Vec<(Arc<str>, ShownSeries)>,
        /// Their sum.
        total: ShownSeries,
    },
    /// A span.
    Span(Span),
    /// A range of quantities.
    Range(Range),
    /// A clock.
    Clock(Arc<Clock>),
    /// A model, with the spread of each parameter that has one.
    Model(Model, Vec<Option<Arc<Spread>>>),
    /// An attribution.
    Attribution(Arc<Attribution>),
    /// Events.
    Events(Arc<Events>),
    /// A table.
    Table(Arc<Table>),
    /// Words.
    Text(Arc<str>),
    /// A list: what its items are called (nothing where they have no name), and the items.
    List(Vec<(Arc<str>, Shown)>),
}

/// A series as it is shown.
#[derive(Clone, Debug)]
pub struct ShownSeries {
    /// Its times.
    pub axis: Arc<Axis>,
    /// Unit and kind.
    pub measure: Measure,
    /// The nominal values; gaps are NaN.
    pub nominal: Vec<f64>,
    /// The members, where it is uncertain.
    pub spread: Option<Arc<Spread>>,
}

impl Shown {
    /// The word for the kind in JSON.
    pub fn kind(&self) -> &'static str {
        match self {
            Shown::Quantity { measure, .. } => Shape::Quantity(measure.clone()).kind(),
            Shown::Instant { .. } => "instant",
            Shown::Series(_) => "series",
            Shown::Bundle { .. } => "bundle",
            Shown::Span(_) => "span",
            Shown::Range(_) => "range",
            Shown::Clock(_) => "clock",
            Shown::Model(..) => "model",
            Shown::Attribution(_) => "attribution",
            Shown::Events(_) => "events",
            Shown::Table(_) => "table",
            Shown::Text(_) => "text",
            Shown::List(_) => "list",
        }
    }
}
