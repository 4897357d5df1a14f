//! Folders of files that are written, replaced and taken away again as a whole, and nothing else with them.
//!
//! Each folder holds a receipt that names the files we wrote there. What it does not name is not ours.

use std::fs;
use std::io;
use std::path::{Component, Path, PathBuf};

use serde_json::{Value, json};

use super::Refusal;

/// The receipt in each folder.
const RECEIPT: &str = "enrolled.json";

/// Files that belong together in one folder.
pub(super) struct Parcel {
    /// What it is, for people.
    pub(super) what: &'static str,
    /// Its folder, below the data folder of Jupyter.
    pub(super) folder: String,
    /// The names of its files, and what is in them.
    pub(super) files: Vec<(String, Vec<u8>)>,
}

/// JSON as a file that people may read.
pub(super) fn pretty(value: &Value) -> Vec<u8> {
    (serde_json::to_string_pretty(value).unwrap_or_default() + "\n").into_bytes()
}

impl Parcel {
    fn names(&self) -> Vec<String> {
        self.files.iter().map(|(name, _)| name.clone()).collect()
    }

    /// Refuse where a file of somebody else's stands in the place of one of ours.
    pub(super) fn check(&self, data: &Path) -> Result<(), Refusal> {
        let folder = data.join(&self.folder);
        let ours = receipt(&folder)?.unwrap_or_default();
        for (name, content) in &self.files {
            let path = folder.join(name);
            let there = fs::symlink_metadata(&path).is_ok();
            if there && !ours.contains(name) && fs::read(&path).ok().as_ref() != Some(content) {
                return Err(Refusal::new(format!(
                    "{} is there already and was not written by `rhythmite enrol`: move it away, then enrol again",
                    path.display()
                )));
            }
        }
        Ok(())
    }

    /// Write what differs from what is there; files of an older one that are no longer wanted go. Whether anything was
    /// written.
    pub(super) fn write(&self, data: &Path) -> Result<bool, Refusal> {
        let folder = data.join(&self.folder);
        let names = self.names();
        let before = receipt(&folder)?;
        let same = |(name, content): &(String, Vec<u8>)| {
            fs::read(folder.join(name)).is_ok_and(|there| there == *content)
        };
        if before.as_ref() == Some(&names) && self.files.iter().all(same) {
            return Ok(false);
        }
        let stale: Vec<String> =
            before.unwrap_or_default().into_iter().filter(|name| !names.contains(name)).collect();
        // The receipt comes first: a file that is written is never without one, whatever happens in between.
        let both: Vec<&String> = names.iter().chain(&stale).collect();
        write_whole(&folder.join(RECEIPT), &receipt_text(&both))?;
        for (name, content) in &self.files {
            write_whole(&folder.join(name), content)?;
        }
        for name in &stale {
            remove(&folder.join(name))?;
        }
        write_whole(&folder.join(RECEIPT), &receipt_text(&names.iter().collect::<Vec<_>>()))?;
        Ok(true)
    }

    /// Take away what was written there, and the folder if nothing else is in it; what was done, in a line.
    pub(super) fn remove(&self, data: &Path) -> Result<Option<String>, Refusal> {
        let folder = data.join(&self.folder);
        let Some(ours) = receipt(&folder)? else {
            return Ok(fs::symlink_metadata(&folder)
                .is_ok()
                .then(|| format!("left {}: it was not written by `rhythmite enrol`", folder.display())));
        };
        for name in &ours {
            remove(&folder.join(name))?;
        }
        remove(&folder.join(RECEIPT))?;
        for name in &ours {
            // A folder that is not empty stays.
            if let Some(inner) = Path::new(name).parent().filter(|inner| !inner.as_os_str().is_empty()) {
                let _ = fs::remove_dir(folder.join(inner));
            }
        }
        let whole = fs::remove_dir(&folder).is_ok();
        let rest = if whole { "" } else { ", but for files in it that are not ours" };
        Ok(Some(format!("removed the {} {}{rest}", self.what, folder.display())))
    }
}

fn receipt_text(names: &[&String]) -> Vec<u8> {
    pretty(&json!({
        "by": "rhythmite enrol",
        "version": env!("CARGO_PKG_VERSION"),
        "files": names,
    }))
}

/// The files that we wrote into a folder, if we did.
fn receipt(folder: &Path) -> Result<Option<Vec<String>>, Refusal> {
    let path = folder.join(RECEIPT);
    let bytes = match fs::read(&path) {
        Ok(bytes) => bytes,
        Err(error) if matches!(error.kind(), io::ErrorKind::NotFound | io::ErrorKind::NotADirectory) => {
            return Ok(None);
        }
        Err(error) => return Err(Refusal::new(format!("{} cannot be read: {error}", path.display()))),
    };
    let inside = |name: &str| Path::new(name).components().all(|part| matches!(part, Component::Normal(_)));
    let names = serde_json::from_slice::<Value>(&bytes).ok().and_then(|receipt| {
        let files = receipt.get("files")?.as_array()?;
        let names: Option<Vec<String>> = files.iter().map(|name| name.as_str().map(str::to_owned)).collect();
        names.filter(|names| names.iter().all(|name| !name.is_empty() && inside(name)))
    });
    names.map(Some).ok_or_else(|| {
        Refusal::new(format!(
            "{} is not as `rhythmite enrol` writes it: look at that folder and remove it yourself",
            path.display()
        ))
    })
}

fn refused(what: &str, path: &Path, error: &io::Error) -> Refusal {
    let help = if error.kind() == io::ErrorKind::PermissionDenied {
        "; another place is chosen with `--prefix FOLDER`"
    } else {
        ""
    };
    Refusal::new(format!("{} cannot be {what}: {error}{help}", path.display()))
}

/// Write a file so that nobody ever sees half of it.
fn write_whole(path: &Path, content: &[u8]) -> Result<(), Refusal> {
    let folder = path.parent().unwrap_or(path);
    fs::create_dir_all(folder).map_err(|error| refused("made", folder, &error))?;
    let mut part = path.as_os_str().to_owned();
    part.push(format!(".{}.part", std::process::id()));
    let part = PathBuf::from(part);
    let written = fs::write(&part, content).and_then(|()| fs::rename(&part, path));
    written.map_err(|error| {
        let _ = fs::remove_file(&part);
        refused("written", path, &error)
    })
}

fn remove(path: &Path) -> Result<(), Refusal> {
    match fs::remove_file(path) {
        Err(error) if error.kind() != io::ErrorKind::NotFound => Err(refused("removed", path, &error)),
        _ => Ok(()),
    }
}
