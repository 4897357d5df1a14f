//! Python environments of the tests' own, with libraries in pinned versions from the package registry; each is made once
//! and kept below the target folder.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::Mutex;

/// What a command printed, or what went wrong in words.
pub(crate) fn printed(command: &mut Command) -> Result<String, String> {
    let run = command.output().map_err(|error| format!("{command:?} does not start: {error}"))?;
    let (out, err) = (String::from_utf8_lossy(&run.stdout), String::from_utf8_lossy(&run.stderr));
    if run.status.success() { Ok(out.into_owned()) } else { Err(format!("{command:?} failed:\n{out}{err}")) }
}

/// The Python of the environment `name`, which holds what a file of requirements lists; `need` says what for.
pub(crate) fn python(name: &str, requirements: &Path, need: &str) -> Result<PathBuf, String> {
    // Tests run side by side, and some share an environment.
    static MAKING: Mutex<()> = Mutex::new(());
    let _making = MAKING.lock();
    let wanted = fs::read_to_string(requirements).map_err(|error| error.to_string())?;
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join(name);
    let python = folder.join("bin/python");
    // Written last, so that an environment that was left half made is made anew.
    let mark = folder.join("installed.txt");
    if fs::read_to_string(&mark).is_ok_and(|installed| installed == wanted) {
        return Ok(python);
    }
    printed(Command::new("python3").args(["-m", "venv", "--clear"]).arg(&folder)).map_err(|error| {
        format!("this test {need}, and needs Python 3.11 or newer with its module venv as `python3`: {error}")
    })?;
    printed(
        Command::new(&python)
            .args([
                "-m",
                "pip",
                "install",
                "--quiet",
                "--no-compile",
                "--only-binary",
                ":all:",
                "--requirement",
            ])
            .arg(requirements),
    )
    .map_err(|error| {
        format!("this test {need}, and needs the package registry of Python to be reached once: {error}")
    })?;
    fs::write(&mark, wanted).map_err(|error| error.to_string())?;
    Ok(python)
}
