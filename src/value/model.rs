use std::sync::Arc;

use super::block::Block;
use super::spread::Spread;
use super::table::{Cell, Column, Table};

/// A response model with a value of each parameter for every member.
#[derive(Clone, Debug)]
pub enum Model {
    /// The two-layer energy balance model with efficacy of deep-ocean heat uptake.
    TwoLayer {
        /// Heat capacity of the upper layer, W yr m⁻² K⁻¹.
        heat_capacity: Block,
        /// Heat capacity of the deep layer, W yr m⁻² K⁻¹.
        deep_heat_capacity: Block,
        /// Heat exchange between the layers, W m⁻² K⁻¹.
        exchange: Block,
        /// Radiative feedback (positive where it restores), W m⁻² K⁻¹.
        feedback: Block,
        /// Efficacy of deep-ocean heat uptake.
        heat_uptake_efficacy: Block,
    },
}

impl Model {
    /// Names, units and values of the parameters.
    pub fn parameters(&self) -> Vec<(&'static str, &'static str, &Block)> {
        match self {
            Model::TwoLayer {
                heat_capacity,
                deep_heat_capacity,
                exchange,
                feedback,
                heat_uptake_efficacy,
            } => vec![
                ("heat_capacity", "W*yr/m2/K", heat_capacity),
                ("deep_heat_capacity", "W*yr/m2/K", deep_heat_capacity),
                ("exchange", "W/m2/K", exchange),
                ("feedback", "W/m2/K", feedback),
                ("heat_uptake_efficacy", "1", heat_uptake_efficacy),
            ],
        }
    }

    /// Names, nominal values and units as a table, with medians and 5–95 % ranges where any parameter has one.
    pub fn table(&self, spreads: &[Option<Arc<Spread>>]) -> Table {
        let ranged = spreads.iter().any(Option::is_some);
        let mut columns = vec![Column::plain("parameter"), Column::plain("value")];
        if ranged {
            columns.extend(["median", "low", "high"].map(Column::plain));
        }
        columns.push(Column::plain("unit"));
        let rows = self
            .parameters()
            .into_iter()
            .enumerate()
            .map(|(index, (name, unit, values))| {
                let mut row = vec![Cell::Text(Arc::from(name)), Cell::number(values.first())];
                if ranged {
                    let spread = spreads.get(index).and_then(Option::as_deref);
                    let first = |pick: fn(&Spread) -> &Vec<f64>| {
                        spread
                            .and_then(|spread| pick(spread).first())
                            .map_or(Cell::Empty, |value| Cell::number(*value))
                    };
                    row.extend([first(|s| &s.median), first(|s| &s.low), first(|s| &s.high)]);
                }
                row.push(Cell::Text(Arc::from(unit)));
                row
            })
            .collect();
        Table { title: "two-layer model".to_owned(), columns, rows, notes: Vec::new() }
    }
}
