//! STL files.

use super::{ReadMesh, bare, too_many};
use crate::Vec3;
use std::collections::HashMap;
use std::io::Cursor;

/// Bytes of a binary file before its triangles: free text and their number.
const HEADER: usize = 84;

/// Bytes of a triangle in a binary file.
const RECORD: usize = 50;

pub(super) fn parse(bytes: &[u8], max_vertices: usize) -> Result<ReadMesh, String> {
    let mut bytes = bytes.to_vec();
    let promised = bytes
        .get(HEADER - 4..HEADER)
        .map(|four| u32::from_le_bytes([four[0], four[1], four[2], four[3]]) as usize);
    // The size tells the kinds apart safely: many binary files start with the word "solid", too.
    let binary = promised.is_some_and(|n| bytes.len() == HEADER + n * RECORD);
    if binary {
        bytes[0] = b' ';
    } else if !starts_with_solid(&bytes) {
        return Err(match promised {
            Some(n) => format!(
                "a binary STL file of {n} triangles has {} bytes, this one has {}: cut off or not STL",
                HEADER + n * RECORD,
                bytes.len()
            ),
            None => "too short for a binary STL file, and no ASCII one (no \"solid\")".into(),
        });
    } else {
        bytes = facets_only(&bytes)?;
    }
    let mut cursor = Cursor::new(bytes);
    let triangles_in_file =
        stl_io::create_stl_reader(&mut cursor).map_err(|error| error.to_string())?;
    let mut numbers: HashMap<[u32; 3], u32> = HashMap::new();
    let (mut positions, mut triangles) = (Vec::new(), Vec::new());
    for triangle in triangles_in_file {
        let triangle = triangle.map_err(|error| error.to_string())?;
        triangles.push(triangle.vertices.map(|vertex| {
            // Adding 0 makes −0 equal to 0.
            let place = vertex.0.map(|x| x + 0.0);
            *numbers.entry(place.map(f32::to_bits)).or_insert_with(|| {
                positions.push(Vec3::from(place.map(f64::from)));
                positions.len() as u32 - 1
            })
        }));
        if positions.len() > max_vertices {
            return Err(too_many(positions.len(), max_vertices));
        }
    }
    Ok(bare(positions, triangles))
}

fn starts_with_solid(bytes: &[u8]) -> bool {
    let start = bytes.trim_ascii_start();
    start.len() >= 5 && start[..5].eq_ignore_ascii_case(b"solid")
}

/// The facets of an ASCII file as the parser wants them: lower case, in one solid. Several solids make one surface.
fn facets_only(bytes: &[u8]) -> Result<Vec<u8>, String> {
    let text = std::str::from_utf8(bytes)
        .map_err(|error| format!("not text from byte {} on", error.valid_up_to()))?
        .to_ascii_lowercase();
    let mut body = String::with_capacity(text.len() + 8);
    body.push_str("solid \n");
    for line in text.lines() {
        if !matches!(
            line.split_whitespace().next(),
            Some("solid" | "endsolid") | None
        ) {
            body.push_str(line);
            body.push('\n');
        }
    }
    body.push_str("endsolid\n");
    Ok(body.into_bytes())
}
