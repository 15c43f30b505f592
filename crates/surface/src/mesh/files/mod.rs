//! Surfaces from PLY, OBJ and STL files.
//!
//! Files are data from strangers: sizes are bounded before anything is allocated, declared counts are compared with
//! the bytes that are there, and a panic of a parsing library becomes an error.

mod obj;
mod ply;
mod stl;

use crate::{Mesh, MeshError, Vec3};
use std::collections::BTreeMap;
use std::fs::File;
use std::io::Read;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::path::Path;

pub use ply::write_ply;

/// What to accept of a file, and the unit of its lengths.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ReadOptions {
    /// Factor on all coordinates: the file's unit of length in the unit wanted (default 1).
    pub scale: f64,
    /// Largest file read, in bytes (default 512 MiB).
    pub max_bytes: u64,
    /// Largest number of vertices accepted (default two million).
    pub max_vertices: usize,
}

impl Default for ReadOptions {
    fn default() -> Self {
        Self {
            scale: 1.0,
            max_bytes: 512 << 20,
            max_vertices: 2_000_000,
        }
    }
}

/// A surface from a file.
#[derive(Clone, Debug, PartialEq)]
pub struct ReadMesh {
    /// The surface as stored: not checked beyond indices and finite coordinates (see [`super::check::check`]), never
    /// periodic.
    pub mesh: Mesh,
    /// Numbers stored with the vertices, by name; not scaled. Only PLY files have them.
    pub point_data: BTreeMap<String, Vec<f64>>,
}

/// Formats of surface files.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Format {
    /// Polygon file format, ASCII or binary; vertices and their numbers are kept in order.
    Ply,
    /// Wavefront OBJ; vertices without face are dropped, groups are joined, normals and textures ignored.
    Obj,
    /// Stereolithography, ASCII or binary; equal points are merged.
    Stl,
}

impl Format {
    /// Format told by the ending of a file's name.
    ///
    /// # Errors
    /// [`MeshError::File`] for other endings.
    pub fn of(path: &Path) -> Result<Self, MeshError> {
        let ending = path
            .extension()
            .map(|ending| ending.to_string_lossy().to_lowercase());
        match ending.as_deref() {
            Some("ply") => Ok(Self::Ply),
            Some("obj") => Ok(Self::Obj),
            Some("stl") => Ok(Self::Stl),
            _ => Err(problem(
                &path.to_string_lossy(),
                "the ending of the name tells no format read here; use .ply, .obj or .stl",
            )),
        }
    }
}

/// Read a surface; the format follows from the ending of the name. Polygons become fans of triangles.
///
/// # Errors
/// [`MeshError::File`] when the file cannot be read, is too large, or is not what its ending says;
/// [`MeshError::IndexOutOfRange`], [`MeshError::NonFinite`], [`MeshError::Empty`] for what it holds;
/// [`MeshError::Impossible`] for a scale that is not positive.
pub fn read(path: impl AsRef<Path>, options: &ReadOptions) -> Result<ReadMesh, MeshError> {
    let path = path.as_ref();
    let name = path.to_string_lossy();
    let format = Format::of(path)?;
    let mut bytes = Vec::new();
    // One byte beyond the limit tells a longer file from one that just fits.
    File::open(path)
        .and_then(|file| {
            file.take(options.max_bytes.saturating_add(1))
                .read_to_end(&mut bytes)
        })
        .map_err(|error| problem(&name, &format!("cannot be read: {error}")))?;
    read_bytes(&bytes, format, &name, options)
}

/// Read a surface from the contents of a file; `name` is for messages.
///
/// # Errors
/// As [`read`].
pub fn read_bytes(
    bytes: &[u8],
    format: Format,
    name: &str,
    options: &ReadOptions,
) -> Result<ReadMesh, MeshError> {
    if !(options.scale > 0.0 && options.scale.is_finite()) {
        return Err(MeshError::Impossible {
            quantity: "scale",
            value: options.scale,
            mend: "give a positive, finite number".into(),
        });
    }
    if bytes.len() as u64 > options.max_bytes {
        let limit = options.max_bytes;
        return Err(problem(
            name,
            &format!(
                "larger than the limit of {limit} bytes; raise the limit or use a coarser mesh"
            ),
        ));
    }
    let parse = || match format {
        Format::Ply => ply::parse(bytes, options.max_vertices),
        Format::Obj => obj::parse(bytes, options.max_vertices),
        Format::Stl => stl::parse(bytes, options.max_vertices),
    };
    // The parsers own nothing that outlives a panic.
    let mut read = catch_unwind(AssertUnwindSafe(parse))
        .unwrap_or_else(|_| Err("the file is malformed in a way its parser did not foresee".into()))
        .map_err(|what| problem(name, &what))?;
    let mesh = &mut read.mesh;
    if mesh.positions.is_empty() || mesh.triangles.is_empty() {
        return Err(MeshError::Empty {
            vertices: mesh.n_vertices(),
            triangles: mesh.n_triangles(),
        });
    }
    for (vertex, p) in mesh.positions.iter_mut().enumerate() {
        *p *= options.scale;
        if !p.iter().all(|x| x.is_finite()) {
            return Err(MeshError::NonFinite { vertex });
        }
    }
    for (triangle, corners) in mesh.triangles.iter().enumerate() {
        if let Some(&index) = corners
            .iter()
            .find(|&&corner| corner as usize >= mesh.positions.len())
        {
            return Err(MeshError::IndexOutOfRange {
                triangle,
                index: index as usize,
                vertices: mesh.positions.len(),
            });
        }
    }
    Ok(read)
}

fn problem(path: &str, what: &str) -> MeshError {
    MeshError::File {
        path: path.into(),
        problem: what.into(),
    }
}

/// A surface without numbers at its vertices.
fn bare(positions: Vec<Vec3>, triangles: Vec<[u32; 3]>) -> ReadMesh {
    ReadMesh {
        mesh: Mesh::new(positions, triangles),
        point_data: BTreeMap::new(),
    }
}

/// Message for too many vertices.
fn too_many(found: usize, limit: usize) -> String {
    format!(
        "{found} vertices are more than the limit of {limit}; raise the limit or use a coarser mesh"
    )
}

/// Cut a polygon into a fan of triangles about its first corner.
fn fan(polygon: &[u32], triangles: &mut Vec<[u32; 3]>) -> Result<(), String> {
    let [first, rest @ ..] = polygon else {
        return Err("a face has no corners".into());
    };
    if rest.len() < 2 {
        return Err(format!(
            "a face has {} corners; it needs three",
            polygon.len()
        ));
    }
    triangles.extend(rest.windows(2).map(|pair| [*first, pair[0], pair[1]]));
    Ok(())
}
