//! What every layer above may lean on: places in a source text, diagnostics, faults, and cancellation.

mod cancellation;
mod diagnostic;
mod source;

pub use cancellation::{Cancellation, Cancelled};
pub(crate) use diagnostic::INTERRUPTED;
pub use diagnostic::{Blame, Diagnostic, Fault, Mark};
pub use source::{LineIndex, Position, Source, SourceId, Span};
