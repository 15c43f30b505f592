//! Reading surfaces from VTK files of any origin.
//!
//! The kind of file is told by its content, not by its name. What a surface cannot use is
//! refused by name (lines, volumes, several pieces) rather than dropped, except for cell and
//! field arrays, and point arrays without numbers, which are listed in
//! [`ReadSurface::skipped_arrays`].

mod cells;
mod cursor;
mod legacy;
mod numbers;
mod payload;
mod xml;

use quick_xml::events::BytesStart;
use std::borrow::Cow;
use std::fs::{self, File};
use std::io::Read as _;
use std::path::Path;

use crate::VtkError;

/// What a file may ask of memory. The defaults suit surfaces up to a few million points.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Limits {
    /// Size of the file, bytes. Default 1 GiB.
    pub max_file_bytes: u64,
    /// Number of points. Default 10 million.
    pub max_points: u64,
    /// Number of triangles, after polygons are cut up. Default 20 million.
    pub max_cells: u64,
    /// Size of all decoded arrays together, bytes. Default 4 GiB.
    pub max_decoded_bytes: u64,
}

impl Default for Limits {
    fn default() -> Self {
        Self {
            max_file_bytes: 1 << 30,
            max_points: 10_000_000,
            max_cells: 20_000_000,
            max_decoded_bytes: 4 << 30,
        }
    }
}

/// A numeric point array.
#[derive(Clone, Debug, PartialEq)]
pub struct ReadArray {
    /// Name in the file.
    pub name: String,
    /// Numbers per point.
    pub components: usize,
    /// The numbers, point by point: \[n_points × components\]. Whole numbers beyond 2⁵³ are
    /// rounded.
    pub values: Vec<f64>,
}

/// A triangulated surface read from a file.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct ReadSurface {
    /// Positions, finite, in the file's unit of length.
    pub points: Vec<[f64; 3]>,
    /// Triangles, indices into `points`, oriented as in the file. A polygon becomes a fan
    /// around its first corner, which is right for convex polygons.
    pub triangles: Vec<[u32; 3]>,
    /// Point arrays in the order of the file.
    pub point_data: Vec<ReadArray>,
    /// The field array `TimeValue`, s, if there is one with a single value.
    pub time: Option<f64>,
    /// Names of point arrays left out because they hold texts or bits.
    pub skipped_arrays: Vec<String>,
}

impl ReadSurface {
    /// The point array of that name.
    pub fn point_array(&self, name: &str) -> Option<&ReadArray> {
        self.point_data.iter().find(|array| array.name == name)
    }
}

/// Reads a surface from a VTU, VTP or legacy VTK file (versions 1 to 5).
///
/// XML files may be ascii, inline binary or appended (base64 and raw), of either byte order and
/// header width, uncompressed or compressed with zlib, LZ4 or LZMA; legacy files may be ascii
/// or binary.
///
/// # Errors
/// `Io` if the file cannot be read; else `InFile` with the reason: `LimitExceeded`,
/// `Malformed`, `Unsupported`, `UnsupportedCell`, `PointIndex` or `NonFinitePoint`.
pub fn read_surface(path: &Path, limits: &Limits) -> Result<ReadSurface, VtkError> {
    let bytes = read_file(path, limits)?;
    parse_surface(&bytes, limits).map_err(|error| error.in_file(path))
}

/// Reads a surface from the bytes of a file; see [`read_surface`].
///
/// # Errors
/// The reasons given there.
pub fn parse_surface(bytes: &[u8], limits: &Limits) -> Result<ReadSurface, VtkError> {
    check_limit(
        "file size in bytes",
        bytes.len() as u64,
        limits.max_file_bytes,
    )?;
    let budget = Budget {
        left: limits.max_decoded_bytes,
        limit: limits.max_decoded_bytes,
    };
    let surface = if bytes.starts_with(b"# vtk DataFile") {
        legacy::parse(bytes, limits, budget)?
    } else {
        xml::parse(bytes, limits, budget)?
    };
    for (index, &position) in surface.points.iter().enumerate() {
        if !position.iter().all(|x| x.is_finite()) {
            return Err(VtkError::NonFinitePoint { index, position });
        }
    }
    Ok(surface)
}

/// Reads a regular file of bounded size.
pub(crate) fn read_file(path: &Path, limits: &Limits) -> Result<Vec<u8>, VtkError> {
    let failed = |action| {
        move |source| VtkError::Io {
            action,
            path: path.to_owned(),
            source,
        }
    };
    // A pipe or device may never end; it is refused before opening could wait for it.
    let metadata = fs::metadata(path).map_err(failed("look at"))?;
    if !metadata.is_file() {
        let error = VtkError::malformed("file", "this is not a regular file");
        return Err(error.in_file(path));
    }
    let limit = limits.max_file_bytes;
    let check =
        |size| check_limit("file size in bytes", size, limit).map_err(|error| error.in_file(path));
    check(metadata.len())?;
    let file = File::open(path).map_err(failed("open"))?;
    let mut bytes = Vec::new();
    file.take(limit.saturating_add(1))
        .read_to_end(&mut bytes)
        .map_err(failed("read"))?;
    check(bytes.len() as u64)?;
    Ok(bytes)
}

/// Bytes that may still be decoded.
#[derive(Clone, Copy, Debug)]
struct Budget {
    left: u64,
    limit: u64,
}

impl Budget {
    /// Books `count` values at the 8 bytes each takes in memory.
    fn book(&mut self, count: u64) -> Result<(), VtkError> {
        let bytes = count.saturating_mul(8);
        match self.left.checked_sub(bytes) {
            Some(left) => {
                self.left = left;
                Ok(())
            }
            None => Err(VtkError::LimitExceeded {
                what: "size of the decoded arrays in bytes",
                found: bytes.saturating_add(self.limit - self.left),
                limit: self.limit,
            }),
        }
    }
}

fn check_limit(what: &'static str, found: u64, limit: u64) -> Result<(), VtkError> {
    if found > limit {
        return Err(VtkError::LimitExceeded { what, found, limit });
    }
    Ok(())
}

/// Points from a flat list of coordinates, whose length is a multiple of 3.
fn to_points(values: &[f64]) -> Vec<[f64; 3]> {
    values.as_chunks::<3>().0.to_vec()
}

/// An attribute of an XML element, unescaped.
pub(crate) fn attribute<'t>(
    tag: &'t BytesStart<'_>,
    name: &str,
) -> Result<Option<Cow<'t, str>>, VtkError> {
    // Without the check for repeated names, which takes quadratic time on a hostile tag.
    for attribute in tag.attributes().with_checks(false) {
        let attribute = attribute.map_err(|error| xml_error(error.into()))?;
        if attribute.key.as_ref() == name {
            let value = attribute
                .normalized_value(quick_xml::XmlVersion::Implicit1_0)
                .map_err(xml_error)?;
            return Ok(Some(value));
        }
    }
    Ok(None)
}

pub(crate) fn xml_error(error: quick_xml::Error) -> VtkError {
    VtkError::malformed("XML", error.to_string())
}
