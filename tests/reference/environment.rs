//! The Python that holds the libraries we compare with. They come from the package registry into an environment under
//! `target`, in the versions that `requirements.txt` says; it is kept for the next run.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

/// A file of this folder.
pub(crate) fn reference_file(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference").join(name)
}

/// What a command printed, or what went wrong in words.
pub(crate) fn printed(command: &mut Command) -> Result<String, String> {
    let run = command.output().map_err(|error| format!("{command:?} does not start: {error}"))?;
    let (out, err) = (String::from_utf8_lossy(&run.stdout), String::from_utf8_lossy(&run.stderr));
    if run.status.success() { Ok(out.into_owned()) } else { Err(format!("{command:?} failed:\n{out}{err}")) }
}

/// The Python of an environment that holds the libraries in the pinned versions.
pub(crate) fn python() -> Result<PathBuf, String> {
    let requirements = reference_file("requirements.txt");
    let wanted = fs::read_to_string(&requirements).map_err(|error| error.to_string())?;
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("python_reference");
    let python = folder.join("bin/python");
    // Written last, so that an environment that was left half made is made anew.
    let mark = folder.join("installed.txt");
    if fs::read_to_string(&mark).is_ok_and(|installed| installed == wanted) {
        return Ok(python);
    }
    printed(Command::new("python3").args(["-m", "venv", "--clear"]).arg(&folder)).map_err(|error| {
        format!(
            "to compare with pandas and SciPy needs Python 3.11 or newer with its module venv as `python3`: {error}"
        )
    })?;
    printed(
        Command::new(&python)
            .args(["-m", "pip", "install", "--quiet", "--no-compile", "--only-binary", ":all:", "--requirement"])
            .arg(&requirements),
    )
    .map_err(|error| {
        format!("to compare with pandas and SciPy needs the package registry of Python to be reached once: {error}")
    })?;
    fs::write(&mark, wanted).map_err(|error| error.to_string())?;
    Ok(python)
}
