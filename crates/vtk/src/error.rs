//! Everything that can go wrong with a VTK file, with the mend in the message.

use std::io;
use std::path::PathBuf;
use std::sync::Arc;

/// Error of this crate.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum VtkError {
    /// The operating system refused an operation on a file.
    #[error("cannot {action} {}: {source}", path.display())]
    Io {
        /// What was being done, in the infinitive ("create", "read", …).
        action: &'static str,
        /// File or folder concerned.
        path: PathBuf,
        /// The system's answer.
        source: io::Error,
    },
    /// An error found inside a file, with the file's name.
    #[error("{}: {source}", path.display())]
    InFile {
        /// File concerned.
        path: PathBuf,
        /// What is wrong with it.
        source: Box<VtkError>,
    },

    /// A coordinate is NaN or infinite.
    #[error(
        "point {index} is not finite: {position:?}; drop the frame or mend the state before writing"
    )]
    NonFinitePoint {
        /// Index of the point.
        index: usize,
        /// Its coordinates, in the frame's unit of length.
        position: [f64; 3],
    },
    /// A cell refers to a point that does not exist.
    #[error(
        "cell {cell} refers to point {point}, but there are only {points} points (counted from 0)"
    )]
    PointIndex {
        /// Index of the triangle or polygon.
        cell: usize,
        /// The point index it holds.
        point: u64,
        /// Number of points.
        points: usize,
    },
    /// An array has not one entry per point or cell.
    #[error(
        "array \"{name}\" has {found} entries, but there are {expected} {per}s; give one entry per {per}"
    )]
    ArrayLength {
        /// Name of the array.
        name: String,
        /// "point" or "cell".
        per: &'static str,
        /// Entries wanted.
        expected: usize,
        /// Entries given.
        found: usize,
    },
    /// A finite value does not fit into single precision.
    #[error(
        "array \"{name}\", entry {index}: {value:e} exceeds single precision (3.4e38); scale it or use Precision::Double"
    )]
    SinglePrecisionRange {
        /// Name of the array.
        name: String,
        /// Entry (point or cell).
        index: usize,
        /// The value, in the array's unit.
        value: f64,
    },
    /// A name or text cannot be stored.
    #[error("the name or text {text:?} {problem}")]
    Text {
        /// The text refused.
        text: String,
        /// Why, as the end of the sentence.
        problem: &'static str,
    },
    /// A time is NaN or infinite.
    #[error("the time {time} is not finite")]
    NonFiniteTime {
        /// The time given, s.
        time: f64,
    },

    /// A frame does not come after the last one of its series.
    #[error(
        "time {time:e} does not come after {last:e}, the last of the series; truncate the series before you go back"
    )]
    TimeOrder {
        /// Time of the new entry, s.
        time: f64,
        /// Time of the last entry, s.
        last: f64,
    },
    /// More entries were to be kept than the series has.
    #[error("cannot keep {wanted} entries of a series that has {present}")]
    SeriesTooShort {
        /// Entries to keep.
        wanted: usize,
        /// Entries present.
        present: usize,
    },
    /// A series entry must name a file in the folder of the collection or below.
    #[error(
        "{file_name:?} is not a plain relative file name; frames stand beside their collection file"
    )]
    FileName {
        /// The name refused.
        file_name: String,
    },

    /// The thread that writes frames could not be started.
    #[error("cannot start the writing thread: {source}")]
    Thread {
        /// The system's answer.
        source: io::Error,
    },
    /// An earlier frame could not be written in the background.
    #[error("frame {file_name:?} could not be written: {source}")]
    Background {
        /// File name of that frame.
        file_name: String,
        /// Why. Shared, as every later `submit`, `flush` and `finish` reports it.
        source: Arc<VtkError>,
    },
    /// Writing a frame panicked: a defect of this program.
    #[error("writing stopped by an internal error: {message}")]
    WriterPanicked {
        /// The panic's message.
        message: String,
    },

    /// A file is larger than the caller allows.
    #[error("{what}: {found} exceeds the limit {limit}; raise the limit if the file is trusted")]
    LimitExceeded {
        /// What is too large, with its unit.
        what: &'static str,
        /// Size found or declared.
        found: u64,
        /// Limit, in the same unit.
        limit: u64,
    },
    /// A file breaks the rules of its format.
    #[error("{at}: {problem}")]
    Malformed {
        /// Where: element, keyword or array.
        at: String,
        /// What is wrong there.
        problem: String,
    },
    /// A file is in order, but holds something this reader leaves out.
    #[error("{what} is not supported; {mend}")]
    Unsupported {
        /// What was met.
        what: String,
        /// How to get the data in.
        mend: &'static str,
    },
    /// A cell is no triangle or polygon.
    #[error(
        "cell {cell} is {kind}; only triangles and polygons make a surface: extract the surface and triangulate it first"
    )]
    UnsupportedCell {
        /// Index of the cell.
        cell: usize,
        /// Kind of cell, in VTK's words.
        kind: String,
    },
}

impl VtkError {
    /// Shorthand for [`VtkError::Malformed`].
    pub(crate) fn malformed(at: impl Into<String>, problem: impl Into<String>) -> Self {
        Self::Malformed {
            at: at.into(),
            problem: problem.into(),
        }
    }

    /// Adds the name of the file in which the error was found.
    pub(crate) fn in_file(self, path: impl Into<PathBuf>) -> Self {
        Self::InFile {
            path: path.into(),
            source: Box::new(self),
        }
    }
}
