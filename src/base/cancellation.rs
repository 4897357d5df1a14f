use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

/// A flag that a long computation polls; whoever holds a clone can raise it.
#[derive(Clone, Debug, Default)]
pub struct Cancellation(Arc<AtomicBool>);

/// The computation was asked to stop and did; nothing it made is kept.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Cancelled;

impl Cancellation {
    /// A flag that nobody has raised yet.
    pub fn new() -> Self {
        Self::default()
    }

    /// Ask every computation that polls this flag to stop.
    pub fn cancel(&self) {
        self.0.store(true, Ordering::Relaxed);
    }

    /// The flag itself, for a handler of signals, which may do no more than raise it.
    pub fn flag(&self) -> Arc<AtomicBool> {
        self.0.clone()
    }

    /// Lower the flag again, before the next computation.
    pub fn reset(&self) {
        self.0.store(false, Ordering::Relaxed);
    }

    /// Whether the flag is raised.
    pub fn is_cancelled(&self) -> bool {
        self.0.load(Ordering::Relaxed)
    }

    /// `Err(Cancelled)` once the flag is raised, to be passed on with `?`.
    ///
    /// # Errors
    /// [`Cancelled`] when the flag is raised.
    pub fn check(&self) -> Result<(), Cancelled> {
        if self.is_cancelled() { Err(Cancelled) } else { Ok(()) }
    }
}
