//! The kernel and the lab extension in the front ends that people use, in the versions that
//! `tests/front_ends/requirements.txt` says.

use std::path::{Path, PathBuf};
use std::process::Command;

use crate::python_environment::{printed, python};

/// The folder of the tests that are written in Python.
pub(crate) fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/front_ends")
}

/// The Python of the one environment for all front ends.
pub(crate) fn front_end_python() -> PathBuf {
    python("front_ends", &folder().join("requirements.txt"), "drives Jupyter front ends")
        .unwrap_or_else(|error| panic!("{error}"))
}

#[test]
fn notebooks_in_a_real_browser_do_what_people_expect() {
    let pictures = Path::new(env!("CARGO_TARGET_TMPDIR")).join("pictures");
    let said = printed(
        Command::new(front_end_python())
            .arg(folder().join("notebook_in_the_browser.py"))
            .arg(env!("CARGO_BIN_EXE_rhythmite"))
            .arg(Path::new(env!("CARGO_MANIFEST_DIR")).join("notebooks-demo"))
            .arg(&pictures),
    );
    match said {
        Ok(said) => assert!(said.contains(" passed, 0 failed"), "{said}"),
        Err(failures) => panic!("{failures}\nscreenshots are in {}", pictures.display()),
    }
}
