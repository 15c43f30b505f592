//! Writes the operators of a surface as Matrix Market files, for other programs to compare with or to use.
//!
//! `cargo run -p pellicle-surface --example write_operators -- SURFACE FOLDER`
//!
//! SURFACE is a PLY, OBJ or STL file, or the name of an irregular mesh with its number of vertices: `sphere:1000`,
//! `ellipsoid:1000` (axes 1, 1, 2), `torus:1000` (radii √2, 1). FOLDER receives, in the unit of the surface,
//!
//! | file | what |
//! |---|---|
//! | `vertices.mtx`, `triangles.mtx` | positions; corners counted from 0 |
//! | `stiffness.mtx` | ∫ ∇f·∇g |
//! | `lumped_mass.mtx`, `consistent_mass.mtx` | ∫ f g |
//! | `laplace_beltrami.mtx` | values of Δf at vertices |
//! | `cell_area.mtx` | mixed circumcentric areas |
//! | `mean_curvature.mtx` | H at vertices |
//! | `angle_defect.mtx` | integrated Gaussian curvature of vertices |

use nalgebra_sparse::CsrMatrix;
use pellicle_surface::geometry::curvature::RimCondition;
use pellicle_surface::geometry::{Curvature, Geometry};
use pellicle_surface::mesh::files::{ReadOptions, read};
use pellicle_surface::mesh::shapes::{irregular_ellipsoid, irregular_sphere, irregular_torus};
use pellicle_surface::operators::laplace_beltrami::{laplace_beltrami, stiffness};
use pellicle_surface::operators::mass::{consistent_mass, lumped_mass};
use pellicle_surface::{Mesh, MeshError, Topology};
use std::fmt::Write as _;
use std::path::Path;

/// Seed of the irregular meshes.
const SEED: u64 = 20;

fn surface(text: &str) -> Result<Mesh, MeshError> {
    let named = text.split_once(':').and_then(|(name, count)| Some((name, count.parse().ok()?)));
    match named {
        Some(("sphere", count)) => irregular_sphere(count, SEED),
        Some(("ellipsoid", count)) => irregular_ellipsoid([1.0, 1.0, 2.0], count, SEED),
        Some(("torus", count)) => irregular_torus(2f64.sqrt(), 1.0, count, SEED),
        _ => Ok(read(text, &ReadOptions::default())?.mesh),
    }
}

/// A sparse matrix; seventeen digits give every number back exactly.
fn sparse(matrix: &CsrMatrix<f64>) -> String {
    let mut text = String::from("%%MatrixMarket matrix coordinate real general\n");
    let _ = writeln!(text, "{} {} {}", matrix.nrows(), matrix.ncols(), matrix.nnz());
    for (row, column, value) in matrix.triplet_iter() {
        let _ = writeln!(text, "{} {} {value:.16e}", row + 1, column + 1);
    }
    text
}

/// A full array; Matrix Market lists it column by column.
fn full<const N: usize>(rows: &[[f64; N]]) -> String {
    let mut text = format!("%%MatrixMarket matrix array real general\n{} {N}\n", rows.len());
    for column in 0..N {
        for row in rows {
            let _ = writeln!(text, "{:.16e}", row[column]);
        }
    }
    text
}

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    let [source, folder] = arguments.as_slice() else {
        return Err("give a surface and a folder".into());
    };
    let folder = Path::new(folder);
    let mesh = surface(source)?;
    let topology = Topology::new(mesh.n_vertices(), &mesh.triangles)?;
    let geometry = Geometry::new(&mesh);
    let curvature = Curvature::new(&mesh, &topology, &geometry, RimCondition::Free);
    let column = |values: &[f64]| full(&values.iter().map(|x| [*x]).collect::<Vec<_>>());
    let mean: Vec<f64> = curvature.twice_mean().iter().map(|h| 0.5 * h).collect();
    std::fs::create_dir_all(folder)?;
    for (name, text) in [
        ("vertices", full(&mesh.positions.iter().map(|x| [x.x, x.y, x.z]).collect::<Vec<_>>())),
        ("triangles", full(&mesh.triangles.iter().map(|t| t.map(f64::from)).collect::<Vec<_>>())),
        ("stiffness", sparse(&stiffness(&mesh, &geometry))),
        ("lumped_mass", sparse(&lumped_mass(&geometry))),
        ("consistent_mass", sparse(&consistent_mass(&mesh, &geometry))),
        ("laplace_beltrami", sparse(&laplace_beltrami(&mesh, &geometry))),
        ("cell_area", column(&curvature.area)),
        ("mean_curvature", column(&mean)),
        ("angle_defect", column(&curvature.angle_defect)),
    ] {
        std::fs::write(folder.join(name).with_extension("mtx"), text)?;
    }
    Ok(())
}
