//! The folders of Jupyter and of this program, by the rules of each system.

use std::ffi::OsString;
use std::path::{Path, PathBuf};

use super::{Place, Refusal};

/// A variable of the environment that is set to something.
fn variable(name: &str) -> Option<OsString> {
    std::env::var_os(name).filter(|value| !value.is_empty())
}

fn home() -> Result<PathBuf, Refusal> {
    std::env::home_dir()
        .filter(|home| !home.as_os_str().is_empty())
        .ok_or_else(|| Refusal::new("this user has no home folder: say where with `--prefix FOLDER`"))
}

/// `path` from the root: a kernelspec is read from anywhere.
pub(super) fn absolute(path: &Path) -> Result<PathBuf, Refusal> {
    std::path::absolute(path).map_err(|error| Refusal::new(format!("{} is no path: {error}", path.display())))
}

/// Where programs of this user keep data.
fn user_data(macos: &str) -> Result<PathBuf, Refusal> {
    if cfg!(target_os = "macos") {
        return Ok(home()?.join(macos));
    }
    if cfg!(windows) {
        return match variable("APPDATA") {
            Some(folder) => Ok(folder.into()),
            None => Ok(home()?.join("AppData").join("Roaming")),
        };
    }
    match variable("XDG_DATA_HOME") {
        Some(folder) => Ok(folder.into()),
        None => Ok(home()?.join(".local").join("share")),
    }
}

/// The data folder of Jupyter at a place: `kernels` and `labextensions` lie in it.
///
/// # Errors
/// Where the user has no home folder.
pub(super) fn jupyter_data(place: &Place) -> Result<PathBuf, Refusal> {
    let folder = match place {
        Place::Prefix(prefix) => prefix.join("share").join("jupyter"),
        Place::User => match variable("JUPYTER_DATA_DIR") {
            Some(folder) => folder.into(),
            None if cfg!(target_os = "macos") => user_data("Library")?.join("Jupyter"),
            None => user_data("")?.join("jupyter"),
        },
    };
    absolute(&folder)
}

/// Where the environment for JupyterLab is made.
///
/// # Errors
/// Where the user has no home folder.
pub(super) fn own_environment() -> Result<PathBuf, Refusal> {
    absolute(&user_data("Library/Application Support")?.join("rhythmite").join("jupyterlab"))
}
