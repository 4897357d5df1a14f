use std::sync::Arc;

use super::axis::Axis;
use super::era::{Era, are_dates, date_label};
use super::measure::Measure;
use super::table::{Cell, Column, Table};

/// Things that happened at known times: eruptions, outbursts, droughts. In order of time; two may share one.
#[derive(Clone, Debug)]
pub struct Events {
    /// When each happened, in decimal years CE, ascending.
    pub years: Vec<f64>,
    /// The era in which they are shown.
    pub era: Era,
    /// What each is called; none where the events have no names. An event without one has an empty name.
    pub names: Option<Vec<Arc<str>>>,
    /// How large each was; none where they have no sizes.
    pub sizes: Option<Sizes>,
}

/// How large events were.
#[derive(Clone, Debug)]
pub struct Sizes {
    /// What was measured, as the table words it.
    pub name: Arc<str>,
    /// Unit and kind.
    pub measure: Measure,
    /// One for each event; NaN where it is not known.
    pub values: Vec<f64>,
}

impl Events {
    /// The times as a row of instants.
    pub fn axis(&self) -> Axis {
        Axis::instants(self.years.clone(), self.era)
    }

    /// How many numbers they hold.
    pub fn numbers(&self) -> usize {
        self.years.len() * (1 + usize::from(self.sizes.is_some()) + 2 * usize::from(self.names.is_some()))
    }

    /// A row for each event.
    pub fn table(&self) -> Table {
        let dates = self.era == Era::Ce && are_dates(&self.years);
        let mut columns = vec![if self.era.is_age() {
            Column::in_unit("age", self.era.symbol())
        } else if dates {
            Column::plain("date")
        } else {
            Column::plain("year CE")
        }];
        columns.extend(self.names.is_some().then(|| Column::plain("name")));
        columns.extend(self.sizes.as_ref().map(|sizes| Column::in_unit(&sizes.name, &sizes.measure.unit)));
        let shown = |year: f64| if self.era.is_age() { self.era.of_year(year) } else { year };
        let rows = self.years.iter().enumerate().map(|(index, year)| {
            let name = self.names.as_ref().map(|names| match names.get(index) {
                Some(name) if !name.is_empty() => Cell::Text(name.clone()),
                Some(_) | None => Cell::Empty,
            });
            let size = self
                .sizes
                .as_ref()
                .map(|sizes| Cell::number(sizes.values.get(index).copied().unwrap_or(f64::NAN)));
            let time = if dates { Cell::Text(date_label(*year).into()) } else { Cell::number(shown(*year)) };
            std::iter::once(time).chain(name).chain(size).collect()
        });
        Table { title: "events".to_owned(), rows: rows.collect(), columns, notes: Vec::new() }
    }
}
