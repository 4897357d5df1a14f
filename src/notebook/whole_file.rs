//! Results written to files: whole or not at all, and never onto what they were made from.

use std::ffi::OsString;
use std::fs::{self, File, OpenOptions};
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// How many names are tried for the file that is written first.
const NAMES: u32 = 100;

/// Write a file as a whole: first under another name beside it, which then takes its place. A run that fails or is
/// interrupted leaves the file as it was before, never half of it. What is no regular file (a pipe, a device) is written
/// into directly, and a link is followed.
///
/// # Errors
/// The folder is missing or cannot be written into, the file is write-protected, or the disk is full.
pub fn write_whole(path: &Path, contents: &[u8]) -> io::Result<()> {
    let before = fs::metadata(path).ok();
    if before.as_ref().is_some_and(|found| !found.is_file()) {
        return fs::write(path, contents);
    }
    // A new name would not ask whether the old file may be written.
    if before.as_ref().is_some_and(|found| found.permissions().readonly()) {
        return Err(io::Error::new(io::ErrorKind::PermissionDenied, "it is write-protected"));
    }
    let place = if before.is_some() { path.canonicalize()? } else { path.to_owned() };
    let (first, mut file) = beside(&place)?;
    let written = file
        .write_all(contents)
        .and_then(|()| before.map_or(Ok(()), |found| file.set_permissions(found.permissions())))
        .and_then(|()| file.sync_all())
        .and_then(|()| fs::rename(&first, &place));
    if written.is_err() {
        let _ = fs::remove_file(&first);
    }
    written
}

/// A new file in the same folder, with a name that no other has.
fn beside(place: &Path) -> io::Result<(PathBuf, File)> {
    let Some(name) = place.file_name() else {
        return Err(io::Error::new(io::ErrorKind::InvalidInput, "this names no file"));
    };
    for number in 0..NAMES {
        let mut other = OsString::from(".");
        other.push(name);
        other.push(format!(".{}-{number}.part", std::process::id()));
        let other = place.with_file_name(other);
        match OpenOptions::new().write(true).create_new(true).open(&other) {
            Ok(file) => return Ok((other, file)),
            Err(error) if error.kind() == io::ErrorKind::AlreadyExists => {}
            Err(error) => return Err(error),
        }
    }
    Err(io::Error::new(io::ErrorKind::AlreadyExists, "no free name was found beside it"))
}

/// Whether two paths lead to one file that exists, links followed.
pub fn same_file(one: &Path, other: &Path) -> bool {
    match (one.canonicalize(), other.canonicalize()) {
        (Ok(one), Ok(other)) => one == other,
        (Ok(_) | Err(_), _) => false,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn folder(name: &str) -> PathBuf {
        let folder = std::env::temp_dir().join(format!("rhythmite-whole-{name}-{}", std::process::id()));
        let _ = fs::remove_dir_all(&folder);
        fs::create_dir_all(&folder).unwrap();
        folder
    }

    fn names(folder: &Path) -> Vec<String> {
        let entries = fs::read_dir(folder).unwrap();
        let mut names: Vec<String> =
            entries.map(|entry| entry.unwrap().file_name().into_string().unwrap()).collect();
        names.sort();
        names
    }

    #[test]
    fn a_file_is_replaced_and_nothing_else_is_left() {
        let folder = folder("replaced");
        let path = folder.join("out.txt");
        write_whole(&path, b"a long first text").unwrap();
        write_whole(&path, b"second").unwrap();
        assert_eq!(fs::read(&path).unwrap(), b"second");
        assert_eq!(names(&folder), ["out.txt"]);
    }

    #[test]
    fn what_cannot_take_its_place_is_taken_away_again() {
        let folder = folder("failed");
        assert!(write_whole(&folder.join("none/out.txt"), b"x").is_err());
        assert!(write_whole(&folder, b"x").is_err());
        assert_eq!(names(&folder), [] as [&str; 0]);
    }

    #[cfg(unix)]
    #[test]
    fn a_link_stays_a_link_and_permissions_stay() {
        use std::os::unix::fs::PermissionsExt;
        let folder = folder("link");
        fs::create_dir(folder.join("deep")).unwrap();
        let (path, link) = (folder.join("deep/out.txt"), folder.join("link.txt"));
        fs::write(&path, "old").unwrap();
        fs::set_permissions(&path, fs::Permissions::from_mode(0o640)).unwrap();
        std::os::unix::fs::symlink(&path, &link).unwrap();
        write_whole(&link, b"new").unwrap();
        assert!(link.symlink_metadata().unwrap().is_symlink());
        assert_eq!(fs::read(&path).unwrap(), b"new");
        assert_eq!(path.metadata().unwrap().permissions().mode() & 0o777, 0o640);
        assert!(same_file(&link, &path) && !same_file(&link, &folder.join("other.txt")));
    }

    #[test]
    fn a_file_that_is_write_protected_stays_as_it_was() {
        let folder = folder("protected");
        let path = folder.join("out.txt");
        fs::write(&path, "old").unwrap();
        let mut permissions = path.metadata().unwrap().permissions();
        permissions.set_readonly(true);
        fs::set_permissions(&path, permissions).unwrap();
        assert_eq!(write_whole(&path, b"new").unwrap_err().kind(), io::ErrorKind::PermissionDenied);
        assert_eq!(fs::read(&path).unwrap(), b"old");
    }
}
