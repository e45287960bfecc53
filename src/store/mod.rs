//! Files so that nobody ever finds half of one and no edit is lost: atomic writing, the
//! journal, the lock, and the layer that can fail on purpose in tests.
//!
//! Imports `text`.

mod files;
pub mod journal;
mod lock;
mod scribe;

pub use files::{Files, Out, RealFiles};
pub use lock::{Lock, Locking, lock, lock_path};
pub use scribe::{Scribe, Written};

use std::fs::{self, File};
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// Replaces a file as a whole: a temporary file beside it, sync, rename, sync of the folder.
/// Permissions of an existing file stay; a link is followed, not replaced.
///
/// # Errors
/// Whatever the system says; the old file is then untouched.
pub fn write_atomically(path: &Path, bytes: &[u8]) -> io::Result<()> {
    write_beside(path, bytes).map_err(|error| match error.raw_os_error() {
        // Without the name of the temporary file, which tells nobody anything.
        Some(code) => io::Error::from_raw_os_error(code),
        None => error,
    })
}

fn write_beside(path: &Path, bytes: &[u8]) -> io::Result<()> {
    let path = fs::canonicalize(path).unwrap_or_else(|_| path.to_path_buf());
    let folder = match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder.to_path_buf(),
        _ => PathBuf::from("."),
    };
    let mut file = tempfile::Builder::new()
        .prefix(&temporary_prefix(&path))
        .tempfile_in(&folder)?;
    file.write_all(bytes)?;
    match fs::metadata(&path) {
        Ok(there) => file.as_file().set_permissions(there.permissions())?,
        Err(_) => set_usual_permissions(file.as_file(), &folder)?,
    }
    file.as_file().sync_all()?;
    file.persist(&path).map_err(|error| error.error)?;
    files::sync_folder(&path);
    Ok(())
}

/// How temporary files for a path begin.
fn temporary_prefix(path: &Path) -> String {
    let name = path.file_name().unwrap_or_default().to_string_lossy();
    format!(".fewest-{name}-")
}

/// Removes temporary files that a crash while writing a path left behind. Only whoever holds
/// the lock may do so.
pub fn remove_leftovers(path: &Path) {
    let (prefix, folder) = (
        temporary_prefix(path),
        path.parent().unwrap_or(Path::new(".")),
    );
    let folder = if folder.as_os_str().is_empty() {
        Path::new(".")
    } else {
        folder
    };
    for entry in fs::read_dir(folder).into_iter().flatten().flatten() {
        if entry.file_name().to_string_lossy().starts_with(&prefix) {
            let _ = fs::remove_file(entry.path());
        }
    }
}

/// A temporary file is private; a new timetable is as readable as files usually are here.
fn set_usual_permissions(file: &File, folder: &Path) -> io::Result<()> {
    let probe = folder.join(format!(".fewest-mode-{}", std::process::id()));
    let made = File::create_new(&probe).and_then(|file| file.metadata());
    let _ = fs::remove_file(&probe);
    file.set_permissions(made?.permissions())
}

/// Reads a whole file unless it is larger than `most` bytes.
///
/// # Errors
/// Whatever the system says, or that it is too large.
pub fn read_bounded(path: &Path, most: u64) -> io::Result<Vec<u8>> {
    let there = fs::metadata(path)?;
    if there.is_dir() {
        return Err(io::Error::new(
            io::ErrorKind::IsADirectory,
            "this is a folder, not a file",
        ));
    }
    if there.len() > most {
        let message = format!("this file is larger than {} MiB", most >> 20);
        return Err(io::Error::new(io::ErrorKind::FileTooLarge, message));
    }
    fs::read(path)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_file_is_replaced_whole_and_keeps_its_permissions() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("a.toml");
        write_atomically(&path, b"one").unwrap();
        let mut permissions = fs::metadata(&path).unwrap().permissions();
        std::os::unix::fs::PermissionsExt::set_mode(&mut permissions, 0o640);
        fs::set_permissions(&path, permissions).unwrap();
        write_atomically(&path, b"two").unwrap();
        assert_eq!(fs::read(&path).unwrap(), b"two");
        let mode =
            std::os::unix::fs::PermissionsExt::mode(&fs::metadata(&path).unwrap().permissions());
        assert_eq!(mode & 0o777, 0o640);
        assert_eq!(
            fs::read_dir(folder.path()).unwrap().count(),
            1,
            "nothing is left behind"
        );
    }

    #[test]
    fn a_link_is_followed() {
        let folder = tempfile::tempdir().unwrap();
        let (real, link) = (folder.path().join("real"), folder.path().join("link"));
        fs::write(&real, "one").unwrap();
        std::os::unix::fs::symlink(&real, &link).unwrap();
        write_atomically(&link, b"two").unwrap();
        assert!(fs::symlink_metadata(&link).unwrap().is_symlink());
        assert_eq!(fs::read(&real).unwrap(), b"two");
    }

    #[test]
    fn a_vanished_folder_is_an_error_and_too_large_a_file_is_not_read() {
        let folder = tempfile::tempdir().unwrap();
        assert!(write_atomically(&folder.path().join("no/a.toml"), b"x").is_err());
        let path = folder.path().join("large");
        fs::write(&path, [0; 100]).unwrap();
        assert_eq!(
            read_bounded(&path, 99).unwrap_err().kind(),
            io::ErrorKind::FileTooLarge
        );
        assert_eq!(read_bounded(&path, 100).unwrap().len(), 100);
    }
}
