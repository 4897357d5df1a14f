//! The series algebra against pandas and SciPy, in the versions that `tests/reference/requirements.txt` says.

use std::path::Path;
use std::process::Command;

use crate::python_environment::{printed, python};

#[test]
fn the_series_algebra_agrees_with_pandas_and_scipy() {
    let reference = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference");
    let requirements = reference.join("requirements.txt");
    let python = python("python_reference", &requirements, "compares with pandas and SciPy")
        .unwrap_or_else(|error| panic!("{error}"));
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("series_workshop");
    let said = printed(
        Command::new(python)
            .arg(reference.join("series_workshop.py"))
            .arg(env!("CARGO_BIN_EXE_rhythmite"))
            .arg(&folder),
    );
    match said {
        Ok(said) => assert!(said.contains(" 0 failed"), "{said}"),
        Err(differences) => panic!("{differences}"),
    }
}
