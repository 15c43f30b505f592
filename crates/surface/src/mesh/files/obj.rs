//! Wavefront OBJ files.

use super::{ReadMesh, bare, too_many};
use crate::Vec3;
use tobj::{LoadError, LoadOptions};

pub(super) fn parse(bytes: &[u8], max_vertices: usize) -> Result<ReadMesh, String> {
    let text = std::str::from_utf8(bytes)
        .map_err(|error| format!("not text from byte {} on", error.valid_up_to()))?;
    // Only vertices and faces matter. Without groups and materials the parser yields one piece in which faces of
    // different groups share their vertices.
    let mut needed = String::with_capacity(text.len());
    let (mut vertices, mut faces) = (0, 0);
    for (number, line) in text.lines().enumerate() {
        let line = line.split('#').next().unwrap_or_default();
        let mut words = line.split_whitespace();
        match words.next() {
            Some("v") => vertices += 1,
            Some("f") => {
                faces += 1;
                let corners = words.count();
                if corners < 3 {
                    let line = number + 1;
                    return Err(format!(
                        "line {line}: a face has {corners} corners; it needs three"
                    ));
                }
            }
            _ => continue,
        }
        if line.trim_end().ends_with('\\') {
            let line = number + 1;
            return Err(format!(
                "line {line}: continued lines are not read; join the two lines"
            ));
        }
        needed.push_str(line);
        needed.push('\n');
    }
    if vertices > max_vertices {
        return Err(too_many(vertices, max_vertices));
    }
    if faces == 0 {
        return Err(format!(
            "no faces among {vertices} vertices: not an OBJ surface"
        ));
    }
    let options = LoadOptions {
        triangulate: true,
        ..LoadOptions::default()
    };
    // The index of a face counts from 1 (or backwards); texture and normal indices are of no interest.
    let no_materials = |_: &std::path::Path| Err(LoadError::GenericFailure);
    let (models, _) = tobj::load_obj_buf(&mut needed.as_bytes(), &options, no_materials)
        .map_err(|error| error.to_string())?;
    let (mut positions, mut triangles) = (Vec::new(), Vec::new());
    for model in models {
        let first = positions.len() as u32;
        positions.extend(
            model
                .mesh
                .positions
                .chunks_exact(3)
                .map(Vec3::from_column_slice),
        );
        triangles.extend(
            model
                .mesh
                .indices
                .chunks_exact(3)
                .map(|corners| [0, 1, 2].map(|c| first + corners[c])),
        );
    }
    Ok(bare(positions, triangles))
}
