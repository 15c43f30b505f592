//! PLY files.

use super::{ReadMesh, fan, problem, too_many};
use crate::{Mesh, MeshError, Vec3};
use ply_rs_bw::parser::{Parser, Reader};
use ply_rs_bw::ply::{
    Addable, ElementDef, Encoding, Header, Property, PropertyAccess, PropertyAccessResult,
    PropertyDef, PropertyType, ScalarType, Version,
};
use ply_rs_bw::writer::Writer;
use std::collections::BTreeMap;
use std::io::Write;
use std::path::Path;

/// Elements read at a time.
const PIECE: usize = 4096;

/// One element of a file: its numbers in the order of the header, and the corners if it is a face.
#[derive(Default)]
struct Row {
    numbers: Vec<f64>,
    corners: Vec<u32>,
}

/// The two names in use for the corners of a face.
fn names_corners(name: &str) -> bool {
    matches!(name, "vertex_indices" | "vertex_index")
}

impl PropertyAccess for Row {
    fn new() -> Self {
        Self::default()
    }

    fn set_property(&mut self, name: &str, property: Property) -> PropertyAccessResult {
        let number = match property {
            Property::Char(x) => x.into(),
            Property::UChar(x) => x.into(),
            Property::Short(x) => x.into(),
            Property::UShort(x) => x.into(),
            Property::Int(x) => x.into(),
            Property::UInt(x) => x.into(),
            Property::Float(x) => x.into(),
            Property::Double(x) => x,
            list if names_corners(name) => match list.to_u32_list() {
                Some(corners) => {
                    self.corners = corners;
                    return PropertyAccessResult::Set;
                }
                // Negative indices or fractions.
                None => return PropertyAccessResult::UnsupportedType,
            },
            _ => return PropertyAccessResult::Ignored,
        };
        self.numbers.push(number);
        PropertyAccessResult::Set
    }

    fn get_float(&self, name: &str) -> Option<f32> {
        let place = ["x", "y", "z"].iter().position(|&axis| axis == name)?;
        self.numbers.get(place).map(|&x| x as f32)
    }

    fn get_list_uint(&self, name: &str) -> Option<&[u32]> {
        names_corners(name).then_some(&self.corners[..])
    }
}

/// Names of the scalar properties, in order.
fn scalars(element: &ElementDef) -> Vec<&str> {
    element
        .properties
        .iter()
        .filter(|(_, property)| matches!(property.data_type, PropertyType::Scalar(_)))
        .map(|(name, _)| name.as_str())
        .collect()
}

pub(super) fn parse(bytes: &[u8], max_vertices: usize) -> Result<ReadMesh, String> {
    let parser = Parser::<Row>::new();
    let mut reader = Reader::new(bytes);
    let header = parser
        .read_header(&mut reader)
        .map_err(|error| format!("not a PLY header: {error}"))?;
    for element in header.elements.values() {
        // Whatever its properties, an element takes at least a byte.
        if element.count > bytes.len() {
            return Err(format!(
                "the header promises {} elements \"{}\", more than a file of {} bytes can hold",
                element.count,
                element.name,
                bytes.len()
            ));
        }
    }
    let mut surface = Surface::default();
    for (name, element) in &header.elements {
        if name == "vertex" && element.count > max_vertices {
            return Err(too_many(element.count, max_vertices));
        }
        // Piece by piece, so that rows of foreign elements do not pile up.
        let mut piece = element.clone();
        let mut done = 0;
        while done < element.count {
            piece.count = (element.count - done).min(PIECE);
            let rows = parser
                .read_payload_for_element(&mut reader, &piece, &header)
                .map_err(|error| {
                    let total = element.count;
                    format!("among the {total} elements \"{name}\", from number {done} on: {error}")
                })?;
            match name.as_str() {
                "vertex" => surface.add_vertices(&scalars(element), &rows)?,
                "face" => rows
                    .iter()
                    .try_for_each(|row| fan(&row.corners, &mut surface.triangles))?,
                _ => {}
            }
            done += piece.count;
        }
    }
    Ok(ReadMesh {
        mesh: Mesh::new(surface.positions, surface.triangles),
        point_data: surface.point_data,
    })
}

/// What has been read so far.
#[derive(Default)]
struct Surface {
    positions: Vec<Vec3>,
    triangles: Vec<[u32; 3]>,
    point_data: BTreeMap<String, Vec<f64>>,
}

impl Surface {
    fn add_vertices(&mut self, names: &[&str], rows: &[Row]) -> Result<(), String> {
        let axes = ["x", "y", "z"].map(|axis| names.iter().position(|&name| name == axis));
        let [Some(x), Some(y), Some(z)] = axes else {
            return Err("the vertices lack one of the properties x, y, z".into());
        };
        for row in rows {
            let n = &row.numbers;
            self.positions.push(Vec3::new(n[x], n[y], n[z]));
        }
        for (place, &name) in names.iter().enumerate() {
            if ![x, y, z].contains(&place) {
                let values = self.point_data.entry(name.to_owned()).or_default();
                values.extend(rows.iter().map(|row| row.numbers[place]));
            }
        }
        Ok(())
    }
}

/// Write a surface as binary little-endian PLY with coordinates of single precision.
///
/// # Errors
/// [`MeshError::File`] when the file cannot be written.
pub fn write_ply(path: impl AsRef<Path>, mesh: &Mesh, comments: &[&str]) -> Result<(), MeshError> {
    let path = path.as_ref();
    let failed = |error: std::io::Error| {
        problem(
            &path.to_string_lossy(),
            &format!("cannot be written: {error}"),
        )
    };
    let mut vertex = ElementDef::new("vertex".into());
    vertex.count = mesh.n_vertices();
    for axis in ["x", "y", "z"] {
        let kind = PropertyType::Scalar(ScalarType::Float);
        vertex.properties.add(PropertyDef::new(axis.into(), kind));
    }
    let mut face = ElementDef::new("face".into());
    face.count = mesh.n_triangles();
    face.properties.add(PropertyDef::new(
        "vertex_indices".into(),
        PropertyType::List(ScalarType::UChar, ScalarType::UInt),
    ));
    let mut header = Header::new();
    header.encoding = Encoding::BinaryLittleEndian;
    header.version = Version { major: 1, minor: 0 };
    header.comments = comments.iter().map(|&line| line.to_owned()).collect();
    header.elements.add(vertex.clone());
    header.elements.add(face.clone());
    let points: Vec<Row> = mesh
        .positions
        .iter()
        .map(|p| Row {
            numbers: vec![p.x, p.y, p.z],
            corners: Vec::new(),
        })
        .collect();
    let faces: Vec<Row> = mesh
        .triangles
        .iter()
        .map(|corners| Row {
            numbers: Vec::new(),
            corners: corners.to_vec(),
        })
        .collect();
    let writer = Writer::<Row>::new();
    let mut bytes = Vec::new();
    writer.write_header(&mut bytes, &header).map_err(failed)?;
    for (element, rows) in [(&vertex, &points), (&face, &faces)] {
        writer
            .write_payload_of_element(&mut bytes, rows, element, &header)
            .map_err(failed)?;
    }
    std::fs::File::create(path)
        .and_then(|mut file| file.write_all(&bytes))
        .map_err(failed)
}
