//! Values and diagnostics as text for people, and figures as SVG.

mod chart;
mod diagnostic;
mod lettering;
mod markup;
mod number;
mod svg;
mod terminal_chart;
mod text;
mod thinning;
mod ticks;

pub use chart::{Caption, chart};
pub use diagnostic::{diagnostic, problem_line};
pub use number::{plain, with_range};
pub use svg::svg;
pub use terminal_chart::terminal_chart;
pub use text::{line, table, text};
