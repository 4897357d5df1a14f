//! The science: f64 in, f64 out. Nothing here knows the language, a unit, a span or text meant for a user; times are in
//! years, and the unit of every number stands in its name or its documentation.

pub mod draws;
pub mod gases;
mod least_squares;
mod matrix_functions;
pub mod reduce;
pub mod regression;
pub mod resample;
pub mod smoothing;
pub mod student;
pub mod two_layer;
