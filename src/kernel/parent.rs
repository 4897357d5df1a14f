//! What ends a kernel from outside: signals, and the end of the program that started it.

use std::time::Duration;

use tokio::signal::unix::{SignalKind, signal};

/// Set by the program that starts kernels to its own process id.
const PARENT: &str = "JPY_PARENT_PID";

const BETWEEN_LOOKS: Duration = Duration::from_millis(500);

/// Why the kernel ends.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum End {
    /// A front end asked for it.
    Asked,
    /// A signal came.
    Signal,
    /// The program that started it is gone.
    Orphaned,
}

/// Wait until something outside ends the kernel. Signals that come after the call are heard, however late it is awaited.
pub(super) fn signalled() -> impl Future<Output = End> {
    let parent = std::os::unix::process::parent_id();
    let (terminate, hangup) = (came(SignalKind::terminate()), came(SignalKind::hangup()));
    let started = std::env::var_os(PARENT).is_some();
    let orphaned = async move {
        // One that was started by hand outlives the shell it was started from.
        while !started || std::os::unix::process::parent_id() == parent {
            tokio::time::sleep(BETWEEN_LOOKS).await;
        }
        End::Orphaned
    };
    async move {
        tokio::select! {
            () = terminate => End::Signal,
            () = hangup => End::Signal,
            end = orphaned => end,
        }
    }
}

/// Wait for a signal that comes after the call; for ever where it cannot be waited for.
pub(super) fn came(kind: SignalKind) -> impl Future<Output = ()> {
    let listening = signal(kind);
    async move {
        let came = match listening {
            Ok(mut signal) => signal.recv().await,
            Err(_) => None,
        };
        if came.is_none() {
            std::future::pending::<()>().await;
        }
    }
}
