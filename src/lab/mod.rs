//! Rhythmite in JupyterLab: the kernel and the lab extension written where Jupyter finds them (`enrol`), and JupyterLab
//! opened on a folder (`lab`), in an environment of our own where none is installed.

mod enrolment;
mod environment;
mod extension;
mod install;
mod jupyter;
mod kernelspec;
mod places;
mod words;

use std::fmt;
use std::path::PathBuf;

pub use enrolment::{enrol, withdraw};
pub use extension::script;
pub use jupyter::{Opening, open};
pub use words::words;

/// Where Jupyter looks for kernels and extensions.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Place {
    /// The user's own data folder of Jupyter.
    User,
    /// An environment: its `share/jupyter`.
    Prefix(PathBuf),
}

/// Why something could not be done: a sentence for people, which says what helps.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Refusal(String);

impl Refusal {
    fn new(why: impl Into<String>) -> Self {
        Self(why.into())
    }
}

impl fmt::Display for Refusal {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.write_str(&self.0)
    }
}

impl std::error::Error for Refusal {}

/// The program that runs, which the kernelspec names.
///
/// # Errors
/// Where the system does not say, or the file has been moved or deleted since it was started.
pub fn running_program() -> Result<PathBuf, Refusal> {
    let program = std::env::current_exe()
        .map_err(|error| Refusal::new(format!("the system does not say where this program lies: {error}")))?;
    if program.is_file() {
        Ok(program)
    } else {
        Err(Refusal::new(format!(
            "this program is no longer at {}: it was moved or built anew; start it again",
            program.display()
        )))
    }
}

/// What one needs to know of a kernel that starts `program`: that a build folder is emptied now and then.
pub fn build_folder_note(program: &std::path::Path) -> Option<String> {
    let parts: Vec<_> = program.iter().map(|part| part.to_string_lossy()).collect();
    let built =
        parts.windows(2).any(|pair| pair[0] == "target" && (pair[1] == "debug" || pair[1] == "release"));
    built.then(|| {
        format!(
            "note: {} lies in a build folder; when that is emptied or moved, the kernel no longer starts. `cargo install --path .` puts the program into a lasting place; then enrol again",
            program.display()
        )
    })
}
