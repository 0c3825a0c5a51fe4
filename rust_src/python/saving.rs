//! A file that is either the old one or the new one, whatever happens in between.
//!
//! The bytes go into a file of their own in the same folder, are synced to the disk, and only then take the name; then the
//! folder is synced. Until the name changes, nothing has happened to the old file; from then on all of the new one is there.

use std::fs::{self, File};
use std::io::{self, ErrorKind, Read, Write};
use std::path::{Path, PathBuf};

use pyo3::exceptions::PyOSError;
use pyo3::prelude::*;

use super::beside::{Beside, folder};

/// Links followed before they count as a circle, as the kernels of operating systems do.
const MOST_LINKS: usize = 40;

/// Puts `bytes` in place of what `path` names; a link stays a link. Mode and, where permitted, owner of an old file are
/// kept. On an error the old file is as it was, except where only the last sync, that of the folder, has failed.
pub(super) fn replace(path: &Path, bytes: &[u8]) -> io::Result<()> {
    let target = follow(path)?;
    let old = match fs::metadata(&target) {
        Ok(old) if old.is_file() => Some(old),
        Ok(_) => return Err(no_file()),
        Err(error) if error.kind() == ErrorKind::NotFound => None,
        Err(error) => return Err(error),
    };
    let beside = Beside::create(&target)?;
    if let Err(error) = fill(&beside.file, bytes, old.as_ref()) {
        beside.remove();
        return Err(error);
    }
    beside.take_name(&target)?;
    sync_folder(folder(&target))
}

/// All of the file that `path` names.
pub(super) fn read(path: &Path) -> io::Result<Vec<u8>> {
    let mut file = File::open(path)?;
    // A pipe or a device may never end.
    if !file.metadata()?.is_file() {
        return Err(no_file());
    }
    let mut bytes = Vec::new();
    file.read_to_end(&mut bytes)?;
    Ok(bytes)
}

/// The exception for an error at `path`: the `OSError` that Python itself would raise there.
pub(super) fn exception(py: Python<'_>, path: &Path, error: &io::Error) -> PyErr {
    let Some(number) = error.raw_os_error() else {
        return io::Error::new(error.kind(), format!("{}: {error}", path.display())).into();
    };
    match py.import("os").and_then(|os| os.call_method1("strerror", (number,))) {
        Ok(words) => PyOSError::new_err((number, words.unbind(), path.as_os_str().to_owned())),
        Err(error) => error,
    }
}

fn no_file() -> io::Error {
    io::Error::new(ErrorKind::InvalidInput, "expected a regular file, got a folder, pipe or device")
}

/// Where a link, or a link to a link, points.
fn follow(path: &Path) -> io::Result<PathBuf> {
    let mut target = path.to_path_buf();
    for _ in 0..MOST_LINKS {
        match fs::read_link(&target) {
            Ok(next) => target = folder(&target).join(next),
            // No link, or one that the next step will find to be unreadable.
            Err(_) => return Ok(target),
        }
    }
    Err(io::Error::other("expected a file, got links in a circle"))
}

/// Writes and syncs; then gives the file the owner and mode of the old one.
fn fill(mut file: &File, bytes: &[u8], old: Option<&fs::Metadata>) -> io::Result<()> {
    file.write_all(bytes)?;
    if let Some(old) = old {
        keep_owner(file, old);
        file.set_permissions(old.permissions())?;
    }
    file.sync_all()
}

/// Only the superuser may give files away: where it is not permitted, the file belongs to who wrote it.
#[cfg(unix)]
fn keep_owner(file: &File, old: &fs::Metadata) {
    use std::os::unix::fs::{MetadataExt, fchown};
    let _ = fchown(file, Some(old.uid()), Some(old.gid()));
}

#[cfg(not(unix))]
fn keep_owner(_: &File, _: &fs::Metadata) {}

/// Makes the new name last.
#[cfg(unix)]
fn sync_folder(folder: &Path) -> io::Result<()> {
    match File::open(folder)?.sync_all() {
        // Some file systems do not sync folders.
        Err(error) if error.kind() == ErrorKind::InvalidInput => Ok(()),
        outcome => outcome,
    }
}

/// A folder cannot be opened here.
#[cfg(not(unix))]
fn sync_folder(_: &Path) -> io::Result<()> {
    Ok(())
}
