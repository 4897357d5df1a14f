//! Results out: one JSON object for a whole run. Notebooks in and out will stand here too.

mod json;

pub use json::run_to_json;
