//! VTK files of triangulated surfaces: frames, time series, and a guarded reader.
//!
//! Knows nothing of membranes: it takes points, triangles and named arrays. Lengths, fields and
//! their units are the caller's; units belong into array names.
//!
//! * [`write_vtu`] writes one [`Frame`] as a VTU file, whole or not at all.
//! * [`Series`] keeps the PVD collection that gives each frame its time.
//! * [`BackgroundWriter`] does both in a second thread, with bounded memory.
//! * [`read_surface`] reads surfaces from VTU, VTP and legacy VTK files of any origin.
//!
//! # Design choices
//! * **Written with an XML writer and the codecs directly.** The general VTK crate tried first
//!   can store neither texts nor a time with a frame, and of 136 files that VTK 9.7 writes of
//!   one surface (every encoding, compressor, byte order and header width) it refused 40
//!   and panicked on 24.
//! * **Inline base64.** Raw appended data would make files a quarter smaller, but they would be
//!   no well-formed XML any more.
//! * **Coordinates in double precision, fields in single** unless the frame says otherwise.
//!   Mesh differences need the digits; a picture does not.
//! * **The reader trusts nothing.** [`Limits`] bound the file, the counts and the decoded
//!   bytes, and no declared size is allocated before the file has shown to be able to fill it.
//!   It reads the whole file into memory first, so `max_file_bytes` bounds that as well.
//!
//! What a frame costs to write stands at [`Compression`].
//!
//! # Example
//! ```
//! use pellicle_vtk::{Array, Compression, Frame, Limits, Series, frame_file_name};
//!
//! # fn main() -> Result<(), Box<dyn std::error::Error>> {
//! # let folder = tempfile::tempdir()?;
//! # let folder = folder.path();
//! let points = [[0.0, 0.0, 0.0], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0]];
//! let frame = Frame {
//!     points: &points,
//!     triangles: &[[0, 1, 2]],
//!     time: Some(0.0),
//!     point_data: vec![Array::scalar("tension [mN/m]", &[1.0, 2.0, 3.0])],
//!     ..Frame::default()
//! };
//! let mut series = Series::create(folder.join("fields.pvd"))?;
//! let name = frame_file_name("surface", 0);
//! pellicle_vtk::write_vtu(&series.frame_path(&name), &frame, Compression::Zlib)?;
//! series.push(0.0, name)?;
//!
//! let back = pellicle_vtk::read_surface(&folder.join("surface_000000.vtu"), &Limits::default())?;
//! assert_eq!(back.points, points);
//! # Ok(())
//! # }
//! ```
#![deny(missing_docs)]
#![forbid(unsafe_code)]

mod atomic;
mod background;
mod dataset;
mod encode;
mod error;
mod read;
mod series;
mod vtu;

pub use background::{BackgroundWriter, Rejected, Unfinished};
pub use dataset::{
    Array, Compression, FieldText, Frame, OwnedArray, OwnedFrame, OwnedValues, Precision, Values,
};
pub use error::VtkError;
pub use read::{Limits, ReadArray, ReadSurface, parse_surface, read_surface};
pub use series::{Series, SeriesEntry, frame_file_name};
pub use vtu::write_vtu;
