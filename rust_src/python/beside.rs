//! The file beside another that is written before it takes its name, and what a killed process has left of one.
//!
//! Names are slots, `.perpend-` with the checksum of the target's name and a number: the same few for all who save to that
//! target. Whoever writes to one holds a lock on it, which the system takes back when the process ends, however it ends. So a
//! slot that can be locked is a leftover, whoever it was from, and is removed. Where a file system knows no locks nothing is
//! removed, and the next slot is taken.

use std::ffi::OsStr;
use std::fs::{self, File, OpenOptions, TryLockError};
use std::io::{self, ErrorKind};
use std::path::{Path, PathBuf};

/// Slots tried: more than there are threads that save to one file at a time.
const MOST_SLOTS: u32 = 1000;
/// Slots looked at for leftovers. Those beyond have only been in use while as many saves were under way at a time.
const SWEPT_SLOTS: u32 = 8;

/// A new file in the folder of the target, whose name no one else has.
pub(super) struct Beside {
    pub file: File,
    path: PathBuf,
}

impl Beside {
    /// Creates it, in the first slot that is free or a leftover.
    pub fn create(target: &Path) -> io::Result<Self> {
        for number in 0..MOST_SLOTS {
            let path = slot(target, number);
            let mut opened = open_new(&path);
            if is_taken(&opened) && remove_leftover(&path) {
                opened = open_new(&path);
            }
            if is_taken(&opened) {
                continue;
            }
            let file = opened?;
            // Someone may have taken it for a leftover before it was locked.
            if claim(&file, &path) {
                return Ok(Self { file, path });
            }
        }
        Err(ErrorKind::AlreadyExists.into())
    }

    /// Gives it the name of the target, in place of what was there, and removes leftovers.
    pub fn take_name(self, target: &Path) -> io::Result<()> {
        if let Err(error) = fs::rename(&self.path, target) {
            self.remove();
            return Err(error);
        }
        for number in 0..SWEPT_SLOTS {
            remove_leftover(&slot(target, number));
        }
        Ok(())
    }

    /// Removes it. The error that counts is the one before.
    pub fn remove(self) {
        let _ = fs::remove_file(&self.path);
    }
}

/// The folder that `path` is in.
pub(super) fn folder(path: &Path) -> &Path {
    match path.parent() {
        Some(folder) if folder != Path::new("") => folder,
        _ => Path::new("."),
    }
}

/// A name as long for a short target as for one whose name is as long as can be.
fn slot(target: &Path, number: u32) -> PathBuf {
    let name = target.file_name().unwrap_or(OsStr::new(""));
    let name = crc32fast::hash(name.as_encoded_bytes());
    folder(target).join(format!(".perpend-{name:08x}-{number}"))
}

fn open_new(path: &Path) -> io::Result<File> {
    OpenOptions::new().write(true).create_new(true).open(path)
}

fn is_taken(opened: &io::Result<File>) -> bool {
    matches!(opened, Err(error) if error.kind() == ErrorKind::AlreadyExists)
}

/// Locks a file just made; false where someone has already taken it for a leftover.
fn claim(file: &File, path: &Path) -> bool {
    match file.try_lock() {
        Ok(()) => is_at(file, path),
        Err(TryLockError::WouldBlock) => false,
        // No locks here: no one can take it for a leftover.
        Err(TryLockError::Error(_)) => true,
    }
}

/// Removes the file at `path` if nobody writes to it; whether it is gone.
fn remove_leftover(path: &Path) -> bool {
    // Only a plain file is one of ours; a pipe would not even open.
    if !fs::symlink_metadata(path).is_ok_and(|found| found.is_file()) {
        return false;
    }
    let Ok(file) = File::open(path) else { return false };
    // While it is locked nobody else removes it, or puts another in its place.
    file.try_lock().is_ok() && is_at(&file, path) && fs::remove_file(path).is_ok()
}

/// Whether `path` still names `file`.
#[cfg(unix)]
fn is_at(file: &File, path: &Path) -> bool {
    use std::os::unix::fs::MetadataExt;
    match (file.metadata(), fs::symlink_metadata(path)) {
        (Ok(one), Ok(other)) => (one.dev(), one.ino()) == (other.dev(), other.ino()),
        _ => false,
    }
}

/// An open file keeps its name here.
#[cfg(not(unix))]
fn is_at(_: &File, _: &Path) -> bool {
    true
}
