//! A surface from any file that the program reads, or what is wrong with it.

use crate::failure::Failure;
use pellicle_surface::mesh::check::{Report, Requirement, check};
use pellicle_surface::mesh::files::{ReadOptions, read};
use pellicle_surface::{Mesh, Topology, Vec3};
use pellicle_vtk::{Limits, read_surface};
use std::fs;
use std::path::Path;

/// A surface fit to be measured.
pub struct Loaded {
    /// The surface, turned outward, in the file's unit.
    pub mesh: Mesh,
    /// Its connectivity.
    pub topology: Topology,
    /// What the check of the mesh said.
    pub report: Report,
    /// Numbers at the vertices, by name.
    pub fields: Vec<(String, Vec<f64>)>,
}

/// Read and check a surface; all lengths times `scale`.
///
/// # Errors
/// [`Failure::Files`] for a file that cannot be opened, [`Failure::Input`] for one that holds no surface that can be
/// measured.
pub fn load(path: &Path, scale: f64) -> Result<Loaded, Failure> {
    let place = path.display();
    fs::File::open(path).map_err(|error| Failure::system("read", path, &error))?;
    if !path.is_file() {
        return Err(Failure::Files(format!("cannot read {place}: it is no regular file")));
    }
    let ending = path.extension().map(|ending| ending.to_string_lossy().to_lowercase());
    let (mut mesh, fields) = match ending.as_deref() {
        Some("vtk" | "vtu" | "vtp") => {
            let surface =
                read_surface(path, &Limits::default()).map_err(|error| Failure::Input(error.to_string()))?;
            let points = surface.points.iter().map(|point| scale * Vec3::from(*point)).collect();
            let fields = surface.point_data.into_iter().filter(|array| array.components == 1);
            (Mesh::new(points, surface.triangles), fields.map(|array| (array.name, array.values)).collect())
        }
        Some("ply" | "obj" | "stl") => {
            let options = ReadOptions { scale, ..ReadOptions::default() };
            let surface = read(path, &options).map_err(|error| Failure::Input(error.to_string()))?;
            (surface.mesh, surface.point_data.into_iter().collect::<Vec<_>>())
        }
        _ => {
            return Err(Failure::Input(format!(
                "{place}: the ending of the name tells no format; PLY, OBJ, STL, VTK, VTU and VTP are read"
            )));
        }
    };
    let wrong = |error| Failure::Input(format!("{place} cannot be measured: {error}"));
    let report = check(&mut mesh, Requirement::Any).map_err(wrong)?;
    let topology = Topology::new(mesh.n_vertices(), &mesh.triangles).map_err(wrong)?;
    Ok(Loaded { mesh, topology, report, fields })
}
