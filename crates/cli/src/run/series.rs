//! `series.csv`: one row per output time, whole rows only.

use super::columns::{COLUMNS, Row};
use crate::failure::Failure;
use std::fs::{File, OpenOptions};
use std::io::{Read, Seek, SeekFrom, Write};
use std::path::{Path, PathBuf};

/// Name of the file.
pub const SERIES_FILE: &str = "series.csv";

/// The series on the disk.
#[derive(Debug)]
pub struct SeriesFile {
    file: File,
    path: PathBuf,
    bytes: u64,
}

/// One record as RFC 4180 has it.
fn record<I, T>(fields: I) -> Vec<u8>
where
    I: IntoIterator<Item = T>,
    T: AsRef<[u8]>,
{
    let mut writer = csv::WriterBuilder::new().terminator(csv::Terminator::CRLF).from_writer(Vec::new());
    // Writing to memory does not fail, and a record of another length cannot occur with one record.
    let _ = writer.write_record(fields);
    writer.into_inner().unwrap_or_default()
}

impl SeriesFile {
    /// Start a series: an empty file with its header.
    ///
    /// # Errors
    /// [`Failure::Files`] when the file cannot be written.
    pub fn create(folder: &Path) -> Result<Self, Failure> {
        let path = folder.join(SERIES_FILE);
        let file = File::create(&path).map_err(|error| Failure::system("create", &path, &error))?;
        let mut series = Self { file, path, bytes: 0 };
        series.append(&record(COLUMNS))?;
        Ok(series)
    }

    /// Open a series and cut it to the bytes that a checkpoint knows.
    ///
    /// # Errors
    /// [`Failure::Files`] when the file cannot be opened, or is not the one the checkpoint knows.
    pub fn open(folder: &Path, bytes: u64) -> Result<Self, Failure> {
        let path = folder.join(SERIES_FILE);
        let mut file = OpenOptions::new()
            .read(true)
            .write(true)
            .open(&path)
            .map_err(|error| Failure::system("open", &path, &error))?;
        let system = |error| Failure::system("read", &path, &error);
        let header = record(COLUMNS);
        let mut start = vec![0; header.len()];
        let length = file.metadata().map_err(system)?.len();
        let mut end = [0; 1];
        let known = length >= bytes && bytes >= header.len() as u64 && {
            file.read_exact(&mut start).map_err(system)?;
            file.seek(SeekFrom::Start(bytes - 1)).map_err(system)?;
            file.read_exact(&mut end).map_err(system)?;
            start == header && end == *b"\n"
        };
        if !known {
            return Err(Failure::Files(format!(
                "{} is not as the checkpoint knows it: it was edited or cut; start again with `pellicle run`",
                path.display()
            )));
        }
        file.set_len(bytes).map_err(|error| Failure::system("cut", &path, &error))?;
        file.seek(SeekFrom::Start(bytes)).map_err(|error| Failure::system("read", &path, &error))?;
        Ok(Self { file, path, bytes })
    }

    /// Bytes written so far.
    pub fn bytes(&self) -> u64 {
        self.bytes
    }

    /// Write a row; returns its bytes.
    ///
    /// # Errors
    /// [`Failure::Files`]; the file then ends with the row before.
    pub fn push(&mut self, row: &Row) -> Result<u64, Failure> {
        let record = record(row.cells());
        self.append(&record)?;
        Ok(record.len() as u64)
    }

    fn append(&mut self, record: &[u8]) -> Result<(), Failure> {
        // One write per row, so that another program sees whole rows.
        if let Err(error) = self.file.write_all(record) {
            // Half a row would break readers; the cut needs no room on the disk.
            let _ = self.file.set_len(self.bytes);
            let _ = self.file.seek(SeekFrom::Start(self.bytes));
            return Err(Failure::system("write", &self.path, &error));
        }
        self.bytes += record.len() as u64;
        Ok(())
    }

    /// Bring everything onto the disk, before a checkpoint counts it.
    ///
    /// # Errors
    /// [`Failure::Files`].
    pub fn sync(&self) -> Result<(), Failure> {
        self.file.sync_data().map_err(|error| Failure::system("flush to the disk", &self.path, &error))
    }
}
