//! `run.log`: what happened when, in lines.

use crate::failure::Failure;
use std::fmt::Display;
use std::fs::{File, OpenOptions};
use std::io::Write;
use std::path::Path;
use std::time::SystemTime;

/// Name of the file.
pub const LOG_FILE: &str = "run.log";

/// The log of a run; lines are added to those of earlier starts.
#[derive(Debug)]
pub struct Log {
    file: File,
}

impl Log {
    /// Open the log of a directory.
    ///
    /// # Errors
    /// [`Failure::Files`].
    pub fn open(folder: &Path) -> Result<Self, Failure> {
        let path = folder.join(LOG_FILE);
        OpenOptions::new()
            .create(true)
            .append(true)
            .open(&path)
            .map(|file| Self { file })
            .map_err(|error| Failure::system("open", &path, &error))
    }

    /// Add a line. A log that cannot be written (a full disc) does not end a run; results that cannot, do.
    pub fn line(&mut self, text: impl Display) {
        let line = format!("{}  {text}\n", now());
        let _ = self.file.write_all(line.as_bytes());
    }
}

/// The wall time in UTC, as RFC 3339 has it.
pub fn now() -> String {
    humantime::format_rfc3339_seconds(SystemTime::now()).to_string()
}
