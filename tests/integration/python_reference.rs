//! The series algebra against pandas and SciPy. The libraries come from the package registry into an environment of
//! the tests' own, in the versions that `tests/reference/requirements.txt` says; it is kept for the next run.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

fn reference_folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference")
}

/// What a command printed, or what went wrong in words.
fn printed(command: &mut Command) -> Result<String, String> {
    let run = command.output().map_err(|error| format!("{command:?} does not start: {error}"))?;
    let (out, err) = (String::from_utf8_lossy(&run.stdout), String::from_utf8_lossy(&run.stderr));
    if run.status.success() { Ok(out.into_owned()) } else { Err(format!("{command:?} failed:\n{out}{err}")) }
}

/// The Python of an environment that holds the libraries in the pinned versions.
fn python() -> Result<PathBuf, String> {
    let requirements = reference_folder().join("requirements.txt");
    let wanted = fs::read_to_string(&requirements).map_err(|error| error.to_string())?;
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("python_reference");
    let python = folder.join("bin/python");
    // Written last, so that an environment that was left half made is made anew.
    let mark = folder.join("installed.txt");
    if fs::read_to_string(&mark).is_ok_and(|installed| installed == wanted) {
        return Ok(python);
    }
    printed(Command::new("python3").args(["-m", "venv", "--clear"]).arg(&folder)).map_err(|error| {
        format!("this test compares with pandas and SciPy, and needs Python 3.11 or newer with its module venv as `python3`: {error}")
    })?;
    printed(
        Command::new(&python)
            .args(["-m", "pip", "install", "--quiet", "--no-compile", "--only-binary", ":all:", "--requirement"])
            .arg(&requirements),
    )
    .map_err(|error| {
        format!("this test compares with pandas and SciPy, and needs the package registry of Python to be reached once: {error}")
    })?;
    fs::write(&mark, wanted).map_err(|error| error.to_string())?;
    Ok(python)
}

#[test]
fn the_series_algebra_agrees_with_pandas_and_scipy() {
    let python = python().unwrap_or_else(|error| panic!("{error}"));
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("series_workshop");
    let said = printed(
        Command::new(python)
            .arg(reference_folder().join("series_workshop.py"))
            .arg(env!("CARGO_BIN_EXE_rhythmite"))
            .arg(&folder),
    );
    match said {
        Ok(said) => assert!(said.contains(" 0 failed"), "{said}"),
        Err(differences) => panic!("{differences}"),
    }
}
