//! The Jupyter protocol: a session served to front ends.
//!
//! Frames come in by `sockets` (past a `guard`) and become `message`s. `answers` takes each request: what can be looked
//! up is answered at once, cells wait in the `queue` for the `executor`, the one thread that changes the session. What it
//! shows, and where, is remembered in `drawn`.

mod answers;
mod comms;
mod connection;
mod drawn;
mod executor;
mod guard;
mod history;
mod lookups;
mod message;
mod parent;
mod progress;
mod queue;
mod sockets;

use std::io::Write;
use std::path::Path;
use std::sync::Arc;

use self::answers::Kernel;
use self::connection::Connection;
pub use self::connection::Refusal;
use self::message::Seal;
use crate::notebook::Media;
use crate::session::Session;

/// Serve a session to the front ends that the connection file names, until one of them, a signal or the end of the
/// process that started it ends it.
///
/// # Errors
/// What is wrong with the connection file, or why the kernel cannot listen.
pub fn serve(connection_file: &Path, session: Session, media: Media) -> Result<(), Refusal> {
    let connection = Connection::read(connection_file)?;
    let runtime = tokio::runtime::Builder::new_multi_thread()
        .worker_threads(2)
        .enable_all()
        .build()
        .map_err(|error| Refusal(format!("no threads to listen on: {error}")))?;
    runtime.block_on(async {
        // Before anything is made that a signal would leave behind.
        let ending = parent::signalled();
        let seal = Arc::new(Seal::new(connection.key.clone()));
        let (arrivals, mut requests) = tokio::sync::mpsc::unbounded_channel();
        let arrive = move |channel, request| {
            // Nobody takes requests any more only while the kernel ends.
            let _ = arrivals.send((channel, request));
        };
        let (departures, guards) = sockets::open(&connection, &seal, arrive).await?;
        let kernel = Kernel::start(seal, departures, session, media, connection_file);
        tokio::spawn(progress::watch(kernel.clone()));
        let taken = kernel.clone();
        tokio::spawn(async move {
            while let Some((channel, request)) = requests.recv().await {
                taken.take(channel, request);
            }
        });
        kernel.ended(ending).await;
        drop(guards);
        Ok(())
    })?;
    // A computation that is still going on is left behind.
    runtime.shutdown_background();
    Ok(())
}

/// Say something to whoever reads the log of the program that started the kernel.
fn log(words: &str) {
    // Where nobody reads, nothing is lost.
    let _ = writeln!(std::io::stderr(), "rhythmite kernel: {words}");
}
