//! Values and diagnostics as text and HTML for people; figures laid out as a drawing, and that as SVG, PDF and PNG.

mod chart;
mod diagnostic;
mod drawing;
mod html;
mod lettering;
mod markup;
mod number;
mod pdf;
mod png;
mod svg;
mod terminal_chart;
mod text;
mod thinning;
mod ticks;
mod typeface;

pub use chart::{Caption, chart, footer};
pub use diagnostic::{diagnostic, problem_line};
pub use drawing::figure_size;
pub use html::{Page, diagnostic_html, html, progress_html, words_html};
pub use number::{plain, with_range};
pub use pdf::pdf;
pub use png::png;
pub use svg::svg;
pub use terminal_chart::terminal_chart;
pub use text::{line, page, table, text};
