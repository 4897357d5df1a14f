//! JupyterLab found or made, and opened on a folder.

use std::ffi::OsString;
use std::path::{Path, PathBuf};
use std::process::Command;

use super::environment::environment;
use super::places::absolute;
use super::{Place, Refusal, enrol};

/// The oldest JupyterLab that the extension works in.
const OLDEST: u32 = 4;

/// What is opened, and how.
#[derive(Clone, Debug, Default)]
pub struct Opening {
    /// The folder that JupyterLab shows.
    pub folder: PathBuf,
    /// The port of its server; one that is free by default.
    pub port: Option<u16>,
    /// Whether no browser is opened: the server prints its address.
    pub no_browser: bool,
    /// What is handed on to JupyterLab as it is.
    pub others: Vec<OsString>,
}

/// Open JupyterLab on a folder with the kernel that `program` is; `say` hears of what takes long and what is written.
/// On Unix this process becomes JupyterLab, so that signals and its exit code are its own; elsewhere it waits, and gives
/// the exit code.
///
/// # Errors
/// No folder, no JupyterLab and no way to make one, and those of [`enrol`].
pub fn open(opening: &Opening, program: &Path, say: &mut dyn FnMut(&str)) -> Result<i32, Refusal> {
    if !opening.folder.is_dir() {
        return Err(Refusal::new(format!("{} is no folder", opening.folder.display())));
    }
    let folder = absolute(&opening.folder)?;
    let (mut command, place) = jupyter_lab(say)?;
    for line in enrol(&place, program)? {
        say(&line);
    }
    if let Some(port) = opening.port {
        command.arg(format!("--port={port}"));
    }
    if opening.no_browser {
        command.arg("--no-browser");
    }
    command.args(&opening.others).arg(folder);
    become_command(&mut command)
}

/// The command that starts JupyterLab, and where it finds kernels.
fn jupyter_lab(say: &mut dyn FnMut(&str)) -> Result<(Command, Place), Refusal> {
    match installed() {
        Some(version) if version.major() >= Some(OLDEST) => return Ok((Command::new(COMMAND), Place::User)),
        Some(version) => say(&format!(
            "the JupyterLab on PATH is {}, and {OLDEST} or newer is needed: one of our own is used",
            version.0
        )),
        None => {}
    }
    let environment = environment(say)?;
    let mut command = Command::new(&environment.python);
    command.args(["-m", "jupyterlab"]);
    // Its own kernels go before those of the same name in the user's folder, which may start another program.
    command.env("JUPYTER_PREFER_ENV_PATH", "1");
    Ok((command, Place::Prefix(environment.prefix)))
}

const COMMAND: &str = "jupyter-lab";

/// A version as JupyterLab prints it: `4.6.6`.
struct Version(String);

impl Version {
    fn major(&self) -> Option<u32> {
        self.0.split('.').next()?.parse().ok()
    }
}

/// The version of the JupyterLab on PATH, if one is there and starts.
fn installed() -> Option<Version> {
    let run = Command::new(COMMAND).arg("--version").output().ok()?;
    let printed = String::from_utf8(run.stdout).ok()?;
    run.status.success().then(|| Version(printed.trim().to_owned()))
}

#[cfg(unix)]
fn become_command(command: &mut Command) -> Result<i32, Refusal> {
    use std::os::unix::process::CommandExt;
    Err(Refusal::new(format!("JupyterLab does not start: {}", command.exec())))
}

#[cfg(not(unix))]
fn become_command(command: &mut Command) -> Result<i32, Refusal> {
    let ended =
        command.status().map_err(|error| Refusal::new(format!("JupyterLab does not start: {error}")))?;
    Ok(ended.code().unwrap_or(1))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_first_number_of_a_version_decides() {
        let major = |text: &str| Version(text.to_owned()).major();
        assert_eq!(major("4.6.6"), Some(4));
        assert_eq!(major("10.0.0a1"), Some(10));
        assert_eq!(major("3.6.8"), Some(3));
        assert_eq!(major(""), None);
        assert!(major("unknown") < Some(OLDEST));
    }
}
