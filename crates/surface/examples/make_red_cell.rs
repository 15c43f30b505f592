//! Writes `meshes/red_cell.ply`, the resting shape of a human red blood cell in micrometres:
//!
//! thickness D(ρ) = √(1−t)·(0.81 + 7.83 t − 4.39 t²) µm, t = (ρ/3.91 µm)²
//!
//! (Evans & Fung, Microvasc. Res. 4 (1972) 335; numbers from memory).
//!
//! `cargo run -p pellicle-surface --example make_red_cell [path]`

use pellicle_surface::MeshError;
use pellicle_surface::mesh::check::{Requirement, check};
use pellicle_surface::mesh::files::write_ply;
use pellicle_surface::mesh::shapes::{RedCellShape, red_cell};
use std::path::{Path, PathBuf};

/// Edge length [µm] that gives about 2,600 vertices.
const EDGE: f64 = 0.2433;

fn main() -> Result<(), MeshError> {
    let path = std::env::args().nth(1).map_or_else(
        || Path::new(env!("CARGO_MANIFEST_DIR")).join("../../meshes/red_cell.ply"),
        PathBuf::from,
    );
    let published = RedCellShape::ISOTONIC;
    let mut mesh = red_cell(published.radius, EDGE)?;
    let report = check(&mut mesh, Requirement::Closed)?;
    let comments = [
        "resting shape of a human red blood cell, lengths in micrometres",
        "profile: Evans & Fung, Microvasc. Res. 4 (1972) 335 (numbers from memory)",
        "written by crates/surface/examples/make_red_cell.rs",
    ];
    write_ply(&path, &mesh, &comments)?;
    println!(
        "{} vertices, area {:.2} µm² (published {}), volume {:.2} µm³ (published {}), least quality {:.2}",
        mesh.n_vertices(),
        report.area,
        published.published_area,
        report.volume.unwrap_or(f64::NAN),
        published.published_volume,
        report.shape.least_quality,
    );
    Ok(())
}
