//! The few things the program does with files, as a trait, so that tests can put a layer in
//! between that fails, cuts writes short, or forgets what was not synced.

use std::fmt::Debug;
use std::fs::{self, File, OpenOptions};
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// A file open for writing.
pub trait Out: Send {
    /// Writes at the end.
    ///
    /// # Errors
    /// Whatever the system says; part of the bytes may have been written.
    fn write(&mut self, bytes: &[u8]) -> io::Result<()>;
    /// Makes what was written last.
    ///
    /// # Errors
    /// Whatever the system says; nothing may be taken for safe then.
    fn sync(&mut self) -> io::Result<()>;
    /// Cuts the file to so many bytes; the next write goes there.
    ///
    /// # Errors
    /// Whatever the system says.
    fn cut(&mut self, length: u64) -> io::Result<()>;
}

/// What is done with files.
pub trait Files: Send + Sync + Debug {
    /// Reads a whole file unless it is larger than `most` bytes.
    ///
    /// # Errors
    /// Whatever the system says, or that it is too large.
    fn read(&self, path: &Path, most: u64) -> io::Result<Vec<u8>>;
    /// Opens a file for appending, making it if need be.
    ///
    /// # Errors
    /// Whatever the system says.
    fn append(&self, path: &Path) -> io::Result<Box<dyn Out>>;
    /// Replaces a file as a whole: nobody ever finds half of it.
    ///
    /// # Errors
    /// Whatever the system says; the old file is then untouched.
    fn replace(&self, path: &Path, bytes: &[u8]) -> io::Result<()>;
    /// Renames a file; another of the new name is replaced.
    ///
    /// # Errors
    /// Whatever the system says.
    fn rename(&self, from: &Path, to: &Path) -> io::Result<()>;
    /// Removes a file; none of that name is no error.
    ///
    /// # Errors
    /// Whatever the system says.
    fn remove(&self, path: &Path) -> io::Result<()>;
    /// Whether there is something of that name.
    fn exists(&self, path: &Path) -> bool;
    /// How many bytes a file has.
    ///
    /// # Errors
    /// Whatever the system says.
    fn length(&self, path: &Path) -> io::Result<u64>;
}

/// The real ones.
#[derive(Clone, Copy, Debug, Default)]
pub struct RealFiles;

struct RealOut(File);

impl Out for RealOut {
    fn write(&mut self, bytes: &[u8]) -> io::Result<()> {
        self.0.write_all(bytes)
    }

    fn sync(&mut self) -> io::Result<()> {
        self.0.sync_data()
    }

    fn cut(&mut self, length: u64) -> io::Result<()> {
        self.0.set_len(length)
    }
}

impl Files for RealFiles {
    fn read(&self, path: &Path, most: u64) -> io::Result<Vec<u8>> {
        super::read_bounded(path, most)
    }

    fn append(&self, path: &Path) -> io::Result<Box<dyn Out>> {
        let new = !path.exists();
        let file = OpenOptions::new().append(true).create(true).open(path)?;
        if new {
            // Its name must reach the disk too.
            sync_folder(path);
        }
        Ok(Box::new(RealOut(file)))
    }

    fn replace(&self, path: &Path, bytes: &[u8]) -> io::Result<()> {
        super::write_atomically(path, bytes)
    }

    fn rename(&self, from: &Path, to: &Path) -> io::Result<()> {
        fs::rename(from, to)?;
        sync_folder(to);
        Ok(())
    }

    fn remove(&self, path: &Path) -> io::Result<()> {
        match fs::remove_file(path) {
            Err(error) if error.kind() != io::ErrorKind::NotFound => Err(error),
            _ => Ok(()),
        }
    }

    fn exists(&self, path: &Path) -> bool {
        path.exists()
    }

    fn length(&self, path: &Path) -> io::Result<u64> {
        Ok(fs::metadata(path)?.len())
    }
}

/// Makes a rename or a new name last. Where folders cannot be synced it is as safe as it can
/// be.
pub(super) fn sync_folder(path: &Path) {
    let folder = match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder.to_path_buf(),
        _ => PathBuf::from("."),
    };
    if let Ok(folder) = File::open(folder) {
        let _ = folder.sync_all();
    }
}
