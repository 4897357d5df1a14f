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

/// Wait until something outside ends the kernel.
pub(super) async fn signalled() -> End {
    let parent = std::os::unix::process::parent_id();
    let started = std::env::var_os(PARENT).is_some();
    let orphaned = async {
        // One that was started by hand outlives the shell it was started from.
        while !started || std::os::unix::process::parent_id() == parent {
            tokio::time::sleep(BETWEEN_LOOKS).await;
        }
        End::Orphaned
    };
    tokio::select! {
        () = came(SignalKind::terminate()) => End::Signal,
        () = came(SignalKind::hangup()) => End::Signal,
        end = orphaned => end,
    }
}

/// Wait for a signal; for ever where it cannot be waited for.
pub(super) async fn came(kind: SignalKind) {
    let came = match signal(kind) {
        Ok(mut signal) => signal.recv().await,
        Err(_) => None,
    };
    if came.is_none() {
        std::future::pending::<()>().await;
    }
}
