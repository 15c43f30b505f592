//! `series.csv`: one row per output time, whole rows only.

use super::columns::Row;
use super::plan::Plan;
use crate::failure::Failure;
use pellicle_physics::diagnostics::PieceReading;
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

/// Name of the table of pieces, beside the series where necks are severed.
pub const PIECES_FILE: &str = "pieces.csv";
/// Its columns.
pub const PIECE_COLUMNS: [&str; 14] = [
    "time_s",
    "piece",
    "parent",
    "vertex_count",
    "area_m2",
    "volume_m3",
    "reduced_volume",
    "pressure_Pa",
    "lipid_m2",
    "composition_mean",
    "coverage_mean",
    "centre_x_m",
    "centre_y_m",
    "centre_z_m",
];

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
    /// Start a table: an empty file with its header.
    ///
    /// # Errors
    /// [`Failure::Files`] when the file cannot be written.
    pub fn create(folder: &Path, name: &str, columns: &[&str]) -> Result<Self, Failure> {
        let path = folder.join(name);
        let file = File::create(&path).map_err(|error| Failure::system("create", &path, &error))?;
        let mut series = Self { file, path, bytes: 0 };
        series.append(&record(columns))?;
        Ok(series)
    }

    /// Open a table and cut it to the bytes that a checkpoint knows.
    ///
    /// # Errors
    /// [`Failure::Files`] when the file cannot be opened, or is not the one the checkpoint knows.
    pub fn open(folder: &Path, name: &str, columns: &[&str], bytes: u64) -> Result<Self, Failure> {
        let path = folder.join(name);
        let mut file = OpenOptions::new()
            .read(true)
            .write(true)
            .open(&path)
            .map_err(|error| Failure::system("open", &path, &error))?;
        let system = |error| Failure::system("read", &path, &error);
        let header = record(columns);
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

    /// Write a line for each piece.
    ///
    /// # Errors
    /// As [`SeriesFile::push`].
    pub fn push_pieces(&mut self, plan: &Plan, time: f64, pieces: &[PieceReading]) -> Result<(), Failure> {
        let scales = &plan.scales;
        let (length, area) = (scales.length, scales.length * scales.length);
        let number = |value: Option<f64>, unit: f64| value.map_or(String::new(), |value| format!("{:e}", value * unit));
        let mut lines = Vec::new();
        for piece in pieces {
            let composition = number(piece.composition_mean, 1.0);
            let centre = piece.centre * length;
            lines.extend(record([
                number(Some(time), scales.time),
                piece.id.to_string(),
                piece.parent.map_or(String::new(), |parent| parent.to_string()),
                piece.vertex_count.to_string(),
                number(Some(piece.area), area),
                number(piece.volume, area * length),
                number(piece.reduced_volume, 1.0),
                number(piece.pressure, scales.energy / (area * length)),
                number(Some(piece.lipid), area),
                composition,
                number(piece.coverage_mean, 1.0),
                number(Some(centre.x), 1.0),
                number(Some(centre.y), 1.0),
                number(Some(centre.z), 1.0),
            ]));
        }
        self.append(&lines)
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
