//! Values and diagnostics as text and HTML for people, and figures as SVG.

mod chart;
mod diagnostic;
mod html;
mod lettering;
mod markup;
mod number;
mod svg;
mod terminal_chart;
mod text;
mod thinning;
mod ticks;

pub use chart::{Caption, chart, footer};
pub use diagnostic::{diagnostic, problem_line};
pub use html::{Page, diagnostic_html, html, progress_html, words_html};
pub use number::{plain, with_range};
pub use svg::svg;
pub use terminal_chart::terminal_chart;
pub use text::{line, page, table, text};
