use std::sync::Arc;

use super::block::Block;
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

    /// Names, nominal values and units as a table.
    pub fn table(&self) -> Table {
        let rows = self
            .parameters()
            .into_iter()
            .map(|(name, unit, values)| {
                vec![Cell::Text(Arc::from(name)), Cell::number(values.first()), Cell::Text(Arc::from(unit))]
            })
            .collect();
        let columns = vec![Column::plain("parameter"), Column::plain("value"), Column::plain("unit")];
        Table { title: "two-layer model".to_owned(), columns, rows, notes: Vec::new() }
    }
}
