//! The lab extension: one script, put together when it is installed. JupyterLab reads `package.json` and loads what it
//! names; nothing is built.

use serde_json::json;
use sha2::{Digest, Sha256};

use super::install::Parcel;
use super::words::words;

/// The name by which JupyterLab knows the extension; the script registers itself by it.
const NAME: &str = "rhythmite";

/// The script with the words of the language in it.
pub fn script() -> String {
    include_str!("assets/extension.js").replacen("__WORDS__", &words().to_string(), 1)
}

/// The files of the extension.
pub(super) fn parcel() -> Parcel {
    let script = script();
    // Browsers keep a script by its address: another content gets another one.
    let hash: String = Sha256::digest(&script).iter().take(6).map(|byte| format!("{byte:02x}")).collect();
    let entry = format!("static/remoteEntry.{hash}.js");
    let package = json!({
        "name": NAME,
        "version": env!("CARGO_PKG_VERSION"),
        "description": "Rhythmite: highlighting, and outputs that go on being refreshed after a reload",
        "license": env!("CARGO_PKG_LICENSE"),
        "jupyterlab": {
            "extension": true,
            "_build": { "load": &entry, "extension": "./extension" },
        },
    });
    // What JupyterLab's list of extensions says about where it came from.
    let origin = json!({
        "packageManager": "rhythmite",
        "packageName": NAME,
        "uninstallInstructions": "Run: rhythmite enrol --remove",
    });
    Parcel {
        what: "lab extension",
        folder: format!("labextensions/{NAME}"),
        files: vec![
            (entry, script.into_bytes()),
            ("package.json".to_owned(), super::install::pretty(&package)),
            ("install.json".to_owned(), super::install::pretty(&origin)),
        ],
    }
}
