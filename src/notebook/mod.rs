//! Programs in and results out: scripts and notebook files, as text, as one JSON object, or as the notebook with its
//! outputs.

mod bundle;
mod figures;
mod ipynb;
mod json;
mod report;
mod run;
mod whole_file;

pub use bundle::{Bundle, Media, Pieces, pieces, result_metadata, words_bundle};
pub use figures::{FigureFile, FigureFormat, figure_files};
pub use ipynb::{Notebook, Unreadable};
pub use json::run_to_json;
pub use report::Report;
pub use run::{CodeCell, Run};
pub use whole_file::{same_file, write_whole};
