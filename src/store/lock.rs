//! One desk writes, others read: a lock file of its own, held by the operating system, with
//! a line about who holds it.

use std::fs::{File, OpenOptions, TryLockError};
use std::io::{self, Read, Seek, Write};
use std::os::unix::fs::MetadataExt;
use std::path::{Path, PathBuf};

/// `NAME.lock` beside `NAME.toml`.
pub fn lock_path(timetable: &Path) -> PathBuf {
    timetable.with_extension("lock")
}

/// The right to write; given back when dropped.
#[derive(Debug)]
pub struct Lock {
    path: PathBuf,
    /// Held open: the lock lives as long as this.
    file: File,
}

impl Lock {
    /// Whether the lock file that others would find is still this one.
    pub fn is_held(&self) -> bool {
        is_at(&self.file, &self.path)
    }
}

/// What came of asking for the lock.
#[derive(Debug)]
pub enum Locking {
    /// It is ours.
    Ours(Lock),
    /// Somebody else has it; what they wrote about themselves.
    Theirs(String),
}

/// Asks for the lock of a timetable; `who` is what others will read.
///
/// # Errors
/// Whatever the system says, such as that the folder cannot be written.
pub fn lock(timetable: &Path, who: &str) -> io::Result<Locking> {
    let path = lock_path(timetable);
    // A holder that leaves removes its file; whoever opened that in between tries again.
    for _ in 0..100 {
        let mut file = OpenOptions::new()
            .read(true)
            .write(true)
            .create(true)
            .truncate(false)
            .open(&path)?;
        match file.try_lock() {
            Ok(()) => {
                if !is_at(&file, &path) {
                    continue;
                }
                file.set_len(0)?;
                file.rewind()?;
                file.write_all(who.as_bytes())?;
                return Ok(Locking::Ours(Lock { path, file }));
            }
            Err(TryLockError::WouldBlock) => {
                let mut said = String::new();
                let _ = file.take(1_000).read_to_string(&mut said);
                let said = crate::text::clean(said.trim()).into_owned();
                return Ok(Locking::Theirs(if said.is_empty() {
                    "someone".into()
                } else {
                    said
                }));
            }
            Err(TryLockError::Error(error)) => return Err(error),
        }
    }
    Err(io::Error::other("the lock file keeps changing"))
}

/// Whether the open file is still the one of that name.
fn is_at(file: &File, path: &Path) -> bool {
    let same = || {
        let (open, there) = (file.metadata().ok()?, std::fs::metadata(path).ok()?);
        Some(open.dev() == there.dev() && open.ino() == there.ino())
    };
    same().unwrap_or(false)
}

impl Drop for Lock {
    fn drop(&mut self) {
        // Still locked: nobody can hold the file that goes away. Another of the same name is
        // somebody else's.
        if self.is_held() {
            let _ = std::fs::remove_file(&self.path);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn one_holds_it_and_others_learn_who() {
        let folder = tempfile::tempdir().unwrap();
        let timetable = folder.path().join("a.toml");
        let Locking::Ours(ours) = lock(&timetable, "ann on desk-1").unwrap() else {
            panic!("it is free")
        };
        let Locking::Theirs(who) = lock(&timetable, "bo").unwrap() else {
            panic!("it is taken")
        };
        assert_eq!(who, "ann on desk-1");
        drop(ours);
        assert!(!lock_path(&timetable).exists());
        assert!(matches!(lock(&timetable, "bo").unwrap(), Locking::Ours(_)));
    }

    #[test]
    fn a_file_that_a_crash_left_is_no_lock() {
        let folder = tempfile::tempdir().unwrap();
        let timetable = folder.path().join("a.toml");
        std::fs::write(lock_path(&timetable), "long gone").unwrap();
        assert!(matches!(lock(&timetable, "bo").unwrap(), Locking::Ours(_)));
    }
}
