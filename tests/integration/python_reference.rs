//! The series algebra against pandas and SciPy.

#[path = "../reference/environment.rs"]
mod environment;

use std::path::Path;
use std::process::Command;

use environment::{printed, python, reference_file};

#[test]
fn the_series_algebra_agrees_with_pandas_and_scipy() {
    let python = python().unwrap_or_else(|error| panic!("{error}"));
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("series_workshop");
    let said = printed(
        Command::new(python)
            .arg(reference_file("series_workshop.py"))
            .arg(env!("CARGO_BIN_EXE_rhythmite"))
            .arg(&folder),
    );
    match said {
        Ok(said) => assert!(said.contains(" 0 failed"), "{said}"),
        Err(differences) => panic!("{differences}"),
    }
}
