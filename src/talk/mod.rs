//! The terminal session: inputs are cells `in 1`, `in 2`, …, and their results are printed. Without a terminal it reads
//! lines and prints results all the same.

mod conversation;
mod lines;
mod progress;
mod script;
mod terminal;

pub use progress::Progress;

use std::io::{IsTerminal, Write};
use std::path::Path;

use self::conversation::Conversation;
use crate::session::Session;

/// How a terminal session ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ending {
    /// It was ended, and nothing went wrong in what it was given.
    Well,
    /// Lines were piped into it, and something in them failed.
    Failed,
}

/// Talk with whoever sits at the terminal, or run the lines that are piped in.
///
/// # Errors
/// When the terminal or standard input cannot be read.
pub fn talk(session: Session, folder: &Path) -> std::io::Result<Ending> {
    let terminal = std::io::stdin().is_terminal() && std::io::stdout().is_terminal();
    if terminal {
        let colour = std::env::var_os("NO_COLOR").is_none();
        terminal::talk(Conversation::new(session, folder, colour, true), folder, colour)?;
        return Ok(Ending::Well);
    }
    let mut conversation = Conversation::new(session, folder, false, false);
    lines::talk(&mut conversation, &mut std::io::stdin().lock())?;
    Ok(if conversation.anything_failed() { Ending::Failed } else { Ending::Well })
}

/// Print to standard output; a reader that has gone is no mistake.
fn print(text: &str) {
    let mut out = std::io::stdout().lock();
    let _ = out.write_all(text.as_bytes());
    let _ = out.flush();
}
