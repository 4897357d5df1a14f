//! Results out: as text, and as one JSON object for a whole run. Notebooks in and out will stand here too.

mod figures;
mod json;
mod report;

pub use figures::{FigureFile, figure_files};
pub use json::run_to_json;
pub use report::Report;
