use std::sync::Arc;

use super::axis::Axis;
use super::block::Block;
use super::measure::Measure;

/// A value for every step or instant of an axis, for every member.
#[derive(Clone, Debug)]
pub struct Series {
    /// Its times.
    pub axis: Arc<Axis>,
    /// Members × times; gaps are NaN.
    pub values: Block,
    /// Unit and kind.
    pub measure: Measure,
    /// Whose axis it is on.
    pub standing: Standing,
    /// The longest gap in time that is bridged when it is brought onto another axis, in years.
    pub longest_gap_years: f64,
}

/// Whose axis a series is on, which decides what happens when it meets another.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Standing {
    /// Its own, from the data: it is brought onto the clock when it is combined.
    Own,
    /// The clock in force.
    OnClock,
    /// An axis that the program asked for with `on`: it meets no other.
    Pinned,
}

/// Named components whose sum is the forcing.
#[derive(Clone, Debug)]
pub struct Bundle {
    /// The components, in the order they were composed.
    pub components: Vec<Component>,
}

/// One component of a bundle.
#[derive(Clone, Debug)]
pub struct Component {
    /// Its label.
    pub label: Arc<str>,
    /// What it is.
    pub content: Content,
}

/// A component is a series, or a bundle composed before.
#[derive(Clone, Debug)]
pub enum Content {
    /// One driver.
    Series(Series),
    /// Several drivers that go by one name.
    Bundle(Bundle),
}

impl Series {
    /// A series on `axis`; gaps of up to three of its median steps are bridged, as is the rule for data.
    pub fn new(axis: Arc<Axis>, values: Block, measure: Measure, standing: Standing) -> Self {
        let longest_gap_years = 3.0 * axis.median_step();
        Self { axis, values, measure, standing, longest_gap_years }
    }

    /// How many numbers it holds.
    pub fn numbers(&self) -> usize {
        self.values.len() + 2 * self.axis.len()
    }

    /// The same times and standing with other values and measure.
    #[must_use]
    pub fn with(&self, values: Block, measure: Measure) -> Self {
        Self { axis: self.axis.clone(), values, measure, ..*self }
    }
}

impl Bundle {
    /// Labels and measures of the components; a component that is a bundle counts by its sum.
    pub fn shapes(&self) -> Vec<(Arc<str>, Measure)> {
        self.components.iter().map(|part| (part.label.clone(), part.content.measure())).collect()
    }

    /// How many numbers it holds.
    pub fn numbers(&self) -> usize {
        self.leaves().iter().map(|(_, series)| series.numbers()).sum()
    }

    /// The series at the ends of all branches, with their labels.
    pub fn leaves(&self) -> Vec<(Arc<str>, &Series)> {
        self.components
            .iter()
            .flat_map(|part| match &part.content {
                Content::Series(series) => vec![(part.label.clone(), series)],
                Content::Bundle(bundle) => bundle.leaves(),
            })
            .collect()
    }
}

impl Content {
    /// The measure of the component, of its sum where it is a bundle.
    pub fn measure(&self) -> Measure {
        match self {
            Content::Series(series) => series.measure.clone(),
            Content::Bundle(bundle) => {
                let mut measures = bundle.components.iter().map(|part| part.content.measure());
                let first = measures.next().unwrap_or_else(Measure::number);
                measures.fold(first, |sum, next| sum.sum(&next, false).map_or(sum, |(measure, _)| measure))
            }
        }
    }
}
