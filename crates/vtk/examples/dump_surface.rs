//! Prints what the reader finds in VTK files, one JSON object per line and file:
//! `{"file", "points", "triangles", "arrays": {name: {"components", "values"}}, "skipped",
//! "time"}`, or `{"file", "error"}`.
//!
//! `cargo run -p pellicle-vtk --example dump_surface -- FILE…`

use pellicle_vtk::{Limits, ReadSurface, read_surface};
use serde_json::{Map, Value, json};
use std::path::Path;

fn describe(surface: &ReadSurface) -> Value {
    let arrays: Map<String, Value> = surface
        .point_data
        .iter()
        .map(|array| {
            let value = json!({"components": array.components, "values": array.values});
            (array.name.clone(), value)
        })
        .collect();
    json!({
        "points": surface.points,
        "triangles": surface.triangles,
        "arrays": arrays,
        "skipped": surface.skipped_arrays,
        "time": surface.time,
    })
}

fn main() {
    for file in std::env::args().skip(1) {
        let mut line = match read_surface(Path::new(&file), &Limits::default()) {
            Ok(surface) => describe(&surface),
            Err(error) => json!({"error": error.to_string()}),
        };
        line["file"] = json!(file);
        println!("{line}");
    }
}
