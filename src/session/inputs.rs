//! Input files: read only below the notebook's folder, hashed as read, looked at again at each execution.

use std::collections::BTreeMap;
use std::fs::File;
use std::io::Read;
use std::path::{Component, Path, PathBuf};
use std::sync::{Arc, Mutex, PoisonError};
use std::time::SystemTime;

use sha2::{Digest, Sha256};

use crate::base::Fault;
use crate::catalogue::{InputFile, nearest};

/// The largest file that is read where nobody raises the limit.
pub(super) const FILE_LIMIT: u64 = 256 * 1024 * 1024;

pub(super) struct Inputs {
    folder: PathBuf,
    limit: u64,
    seen: Mutex<BTreeMap<String, Seen>>,
    /// Files that were found changed during this execution.
    changed: Mutex<Vec<String>>,
}

#[derive(Clone)]
struct Seen {
    modified: Option<SystemTime>,
    length: u64,
    /// Whether it was looked at during this execution: within one, a file is read once.
    fresh: bool,
    file: Arc<InputFile>,
}

impl Inputs {
    pub(super) fn new(folder: PathBuf, limit: u64) -> Self {
        Self { folder, limit, seen: Mutex::default(), changed: Mutex::default() }
    }

    /// The folder that files are read from.
    pub(super) fn folder(&self) -> &Path {
        &self.folder
    }

    /// Look at every file again when it is next asked for.
    pub(super) fn look_again(&self) {
        for seen in self.seen.lock().unwrap_or_else(PoisonError::into_inner).values_mut() {
            seen.fresh = false;
        }
        self.changed.lock().unwrap_or_else(PoisonError::into_inner).clear();
    }

    /// The files that were found changed since the execution began.
    pub(super) fn changed(&self) -> Vec<String> {
        self.changed.lock().unwrap_or_else(PoisonError::into_inner).clone()
    }

    /// Every file that was read, with its hash.
    pub(super) fn read(&self) -> Vec<(String, String)> {
        let seen = self.seen.lock().unwrap_or_else(PoisonError::into_inner);
        seen.iter().map(|(path, seen)| (path.clone(), seen.file.sha256.clone())).collect()
    }

    pub(super) fn file(&self, path: &str) -> Result<Arc<InputFile>, Fault> {
        let mut seen = self.seen.lock().unwrap_or_else(PoisonError::into_inner);
        if let Some(found) = seen.get(path).filter(|found| found.fresh) {
            return Ok(found.file.clone());
        }
        let place = self.place(path)?;
        let metadata = place.metadata().map_err(|error| unreadable(path, &error))?;
        if !metadata.is_file() {
            return Err(Fault::new("file-kind", format!("\"{path}\" is no regular file"))
                .help("name a file, not a folder or a device"));
        }
        if metadata.len() > self.limit {
            let size = metadata.len() / (1024 * 1024);
            return Err(Fault::new(
                "file-size",
                format!("\"{path}\" has {size} MiB; the most is {} MiB", self.limit / (1024 * 1024)),
            )
            .help("raise the limit with `--file-limit`, or take the columns that are needed"));
        }
        let modified = metadata.modified().ok();
        if let Some(found) = seen.get_mut(path)
            && found.modified.is_some()
            && found.modified == modified
            && found.length == metadata.len()
        {
            found.fresh = true;
            return Ok(found.file.clone());
        }
        let (bytes, digest) =
            read_and_hash(&place, metadata.len()).map_err(|error| unreadable(path, &error))?;
        let sha256 = digest.iter().map(|byte| format!("{byte:02x}")).collect();
        let file = Arc::new(InputFile { path: path.to_owned(), bytes, sha256 });
        if seen.get(path).is_some_and(|old| old.file.sha256 != file.sha256) {
            self.changed.lock().unwrap_or_else(PoisonError::into_inner).push(path.to_owned());
        }
        seen.insert(
            path.to_owned(),
            Seen { modified, length: metadata.len(), fresh: true, file: file.clone() },
        );
        Ok(file)
    }

    /// Where a path leads, if it stays below the folder, links included.
    fn place(&self, path: &str) -> Result<PathBuf, Fault> {
        let outside = || {
            Fault::new("file-outside", format!("\"{path}\" lies outside the notebook's folder"))
                .help("a notebook reads only its own folder and those below: copy the file there")
        };
        let relative = Path::new(path);
        let plain =
            relative.components().all(|part| matches!(part, Component::Normal(_) | Component::CurDir));
        if !plain {
            return Err(outside());
        }
        let whole = self.folder.join(relative);
        let folder = self.folder.canonicalize().map_err(|error| unreadable(path, &error))?;
        let real = match whole.canonicalize() {
            Ok(real) => real,
            Err(error) if error.kind() == std::io::ErrorKind::NotFound => {
                return Err(self.missing(path, &whole));
            }
            Err(error) => return Err(unreadable(path, &error)),
        };
        if real.starts_with(&folder) { Ok(real) } else { Err(outside()) }
    }

    fn missing(&self, path: &str, whole: &Path) -> Fault {
        let fault = Fault::new("file-missing", format!("there is no file \"{path}\""));
        let (Some(parent), Some(name)) = (whole.parent(), whole.file_name().and_then(|name| name.to_str()))
        else {
            return fault;
        };
        let Ok(entries) = parent.read_dir() else {
            return fault.help("its folder does not exist either: paths begin at the notebook's folder");
        };
        let mut names: Vec<String> =
            entries.flatten().filter_map(|entry| entry.file_name().into_string().ok()).collect();
        names.sort();
        match nearest(name, names.iter().map(String::as_str)) {
            Some(near) => {
                let near = Path::new(path).with_file_name(near);
                fault.help(format!("did you mean \"{}\"?", near.display()))
            }
            None => fault.help("paths begin at the notebook's folder"),
        }
    }
}

/// Reads a file of this length; each part of it is hashed while the next is read.
fn read_and_hash(place: &Path, length: u64) -> std::io::Result<(Vec<u8>, [u8; 32])> {
    const PART: usize = 1 << 20;
    let mut file = File::open(place)?;
    let mut bytes = vec![0; usize::try_from(length).map_err(std::io::Error::other)?];
    let mut hash = Sha256::new();
    let (sender, parts) = std::sync::mpsc::channel::<&[u8]>();
    // A thread of its own: one that waits in the pool may take up work that asks for a file, which is locked here.
    std::thread::scope(|scope| {
        scope.spawn(|| parts.into_iter().for_each(|part| hash.update(part)));
        // The hashing ends when the sender is gone, however this ends.
        let sender = sender;
        bytes.chunks_mut(PART).try_for_each(|part| {
            file.read_exact(part)?;
            sender.send(part).map_err(|_| std::io::Error::other("hashing has ended"))
        })
    })?;
    // What was written to the file since its length was looked at.
    let known = bytes.len();
    file.read_to_end(&mut bytes)?;
    hash.update(&bytes[known..]);
    Ok((bytes, hash.finalize().into()))
}

/// The code of faults that the next look may not find any more; they are never remembered.
pub(super) const UNREADABLE: &str = "file-unreadable";

fn unreadable(path: &str, error: &std::io::Error) -> Fault {
    Fault::new(UNREADABLE, format!("\"{path}\" cannot be read: {error}"))
}
