//! One program per directory.

use crate::failure::Failure;
use std::fs::{File, OpenOptions, TryLockError};
use std::path::Path;

/// Name of the lock file. It stays in the directory: only the system's lock on it counts, which ends with the process
/// however that ends.
pub const LOCK_FILE: &str = "run.lock";

/// The right to write into a directory, given back when dropped.
#[derive(Debug)]
pub struct Lock {
    _file: File,
}

impl Lock {
    /// Take the lock of a directory.
    ///
    /// # Errors
    /// [`Failure::Files`] when another program holds it, or the file cannot be made.
    pub fn take(folder: &Path) -> Result<Self, Failure> {
        let path = folder.join(LOCK_FILE);
        let file = OpenOptions::new()
            .create(true)
            .truncate(false)
            .write(true)
            .open(&path)
            .map_err(|error| Failure::system("create", &path, &error))?;
        match file.try_lock() {
            Ok(()) => {}
            Err(TryLockError::WouldBlock) => {
                return Err(Failure::Files(format!(
                    "another run is at work in {}; wait for it to end, or interrupt it",
                    folder.display()
                )));
            }
            // Some network file systems have no locks; a run there is better than none.
            Err(TryLockError::Error(error)) if error.kind() == std::io::ErrorKind::Unsupported => {}
            Err(TryLockError::Error(error)) => return Err(Failure::system("lock", &path, &error)),
        }
        Ok(Self { _file: file })
    }
}
