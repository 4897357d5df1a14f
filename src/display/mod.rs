//! Values and diagnostics as text for people.

mod diagnostic;
mod number;
mod text;

pub use diagnostic::{diagnostic, problem_line};
pub use number::{plain, with_range};
pub use text::{line, table, text};
