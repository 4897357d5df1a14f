//! The kernelspec: how Jupyter starts the kernel, and what it calls it.

use std::path::Path;

use serde_json::json;

use super::Refusal;
use super::install::{Parcel, pretty};

/// What Jupyter replaces in the words of a command line, wherever they stand.
const REPLACED_BY_JUPYTER: [&str; 3] = ["{connection_file}", "{prefix}", "{resource_dir}"];

/// The files of the kernelspec for `program`.
///
/// # Errors
/// A path that a kernelspec cannot hold.
pub(super) fn parcel(program: &Path) -> Result<Parcel, Refusal> {
    let Some(path) = program.to_str() else {
        return Err(Refusal::new(format!(
            "the path of this program, {}, is not UTF-8, and Jupyter can start no such program: move it",
            program.display()
        )));
    };
    if let Some(word) = REPLACED_BY_JUPYTER.iter().find(|word| path.contains(*word)) {
        return Err(Refusal::new(format!(
            "the path of this program, {path}, holds `{word}`, which Jupyter would replace by something else: move it"
        )));
    }
    let spec = json!({
        "argv": [path, "kernel", "{connection_file}"],
        "display_name": "Rhythmite",
        "language": "rhythmite",
        "interrupt_mode": "message",
        "metadata": { "debugger": false },
    });
    Ok(Parcel {
        what: "kernel",
        folder: "kernels/rhythmite".to_owned(),
        files: vec![
            ("kernel.json".to_owned(), pretty(&spec)),
            ("logo-svg.svg".to_owned(), include_bytes!("assets/logo-svg.svg").to_vec()),
            ("logo-64x64.png".to_owned(), include_bytes!("assets/logo-64x64.png").to_vec()),
            ("logo-32x32.png".to_owned(), include_bytes!("assets/logo-32x32.png").to_vec()),
        ],
    })
}
