//! Values and diagnostics as text for people.

mod diagnostic;
mod number;
mod terminal_chart;
mod text;

pub use diagnostic::{diagnostic, problem_line};
pub use number::{plain, with_range};
pub use terminal_chart::terminal_chart;
pub use text::{line, table, text};
