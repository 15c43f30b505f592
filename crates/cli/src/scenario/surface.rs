//! The mesh at the start, from a shape or a file, in units of the surface's size.

use super::checks::is_framed;
use super::problem::{Place, Problem};
use super::values::{Value, Values};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::mesh::check::{Requirement, check};
use pellicle_surface::mesh::files::{ReadOptions, read};
use pellicle_surface::mesh::shapes;
use pellicle_surface::{Mesh, MeshError, Vec3};
use std::collections::BTreeMap;
use std::f64::consts::PI;
use std::path::Path;

/// Shapes are made, and their faults are told, in micrometres.
const MICROMETRE: f64 = 1e-6;
/// Vertices that a mesh may have.
pub const MOST_VERTICES: usize = 2_000_000;
/// Sizes that a surface can have [m].
const SIZES: std::ops::RangeInclusive<f64> = 1e-9..=0.1;

/// The surface at the start.
#[derive(Debug)]
pub struct Surface {
    /// Mesh in units of `size`.
    pub mesh: Mesh,
    /// Size [m]: the solver's unit of length.
    pub size: f64,
    /// Numbers at the points of a mesh file.
    pub point_data: BTreeMap<String, Vec<f64>>,
    /// What the user should know.
    pub warnings: Vec<String>,
}

/// Area of an ellipsoid (Thomsen's approximation, within about one per cent: common practice, no source).
fn ellipsoid_area([a, b, c]: [f64; 3]) -> f64 {
    let p = 1.6075;
    let [a, b, c] = [a.powf(p), b.powf(p), c.powf(p)];
    4.0 * PI * ((a * b + a * c + b * c) / 3.0).powf(1.0 / p)
}

/// Metres in micrometres, to twelve digits, so that messages show what was written.
fn micrometres(metres: f64) -> f64 {
    let exact = metres / MICROMETRE;
    format!("{exact:.11e}").parse().unwrap_or(exact)
}

/// Where to point for faults of the mesh.
fn place(values: &Values) -> Option<Place> {
    values
        .place("surface.file")
        .or_else(|| values.place("surface.shape"))
}

/// Make or read the mesh. Fills in `surface.edge_length`.
pub fn build(values: &mut Values) -> Result<Surface, Problem> {
    if values.text("surface.shape") == "file" {
        return from_file(values);
    }
    let um = |path: &str| micrometres(values.number(path).unwrap_or(0.0));
    let (radius, length) = (um("surface.radius"), um("surface.length"));
    let (ring, tube) = (um("surface.ring_radius"), um("surface.tube_radius"));
    let axes = values
        .vector("surface.semi_axes")
        .unwrap_or_default()
        .map(micrometres);
    let shape = values.text("surface.shape").to_string();
    let area = match shape.as_str() {
        "ellipsoid" => ellipsoid_area(axes),
        "torus" => 4.0 * PI * PI * ring * tube,
        "tube" => 2.0 * PI * radius * length,
        "capped tube" => 2.0 * PI * radius * (length + 2.0 * radius),
        "disc" => PI * radius * radius,
        _ => 4.0 * PI * radius * radius,
    };
    let natural = (area / (4.0 * PI)).sqrt();
    let size = match shape.as_str() {
        "tube" | "disc" => radius,
        _ => natural,
    };
    // The radius itself where that is the size, without rounding.
    let metres = match shape.as_str() {
        "sphere" | "prolate" | "oblate" | "tube" | "disc" => {
            values.number("surface.radius").unwrap_or(0.0)
        }
        _ => size * MICROMETRE,
    };
    check_size(metres, values)?;
    // As many vertices as a sphere of 2,600 with such edges.
    let default_edge = (0.075 * natural).min(if shape == "tube" {
        radius / 3.0
    } else {
        f64::MAX
    });
    values.fill(
        "surface.edge_length",
        default_edge * MICROMETRE,
        "default: about 2,600 vertices",
    );
    let edge = micrometres(values.number("surface.edge_length").unwrap_or(0.0));
    let count = area / (0.75f64.sqrt() * edge * edge);
    if count.is_nan() || count > MOST_VERTICES as f64 {
        let least = (area / (0.75f64.sqrt() * MOST_VERTICES as f64)).sqrt();
        return Err(Problem::new(
            values
                .place("surface.edge_length")
                .or_else(|| place(values)),
            format!(
                "surface.edge_length would make {count:.3e} vertices, more than the limit of 2,000,000"
            ),
            "too short",
            format!(
                "use an edge length of at least {least:.2e} um; about 2,600 vertices need {default_edge:.2e} um"
            ),
        ));
    }
    let seed = values.whole("seed").unwrap_or(0) as u64;
    let irregular = values.flag("surface.irregular");
    let n = count as usize;
    let reduced = values.number("surface.reduced_volume").unwrap_or(1.0);
    let made = match (shape.as_str(), irregular) {
        ("sphere", false) => shapes::sphere(radius, edge),
        ("sphere", true) => shapes::irregular_ellipsoid([radius; 3], n, seed),
        ("ellipsoid", false) => shapes::ellipsoid(axes, edge),
        ("ellipsoid", true) => shapes::irregular_ellipsoid(axes, n, seed),
        ("prolate", _) => shapes::prolate(radius, reduced, edge),
        ("oblate", _) => shapes::oblate(radius, reduced, edge),
        ("torus", false) => shapes::torus(ring, tube, edge),
        ("torus", true) => shapes::irregular_torus(ring, tube, n, seed),
        ("tube", false) => shapes::tube(radius, length, edge),
        ("tube", true) => shapes::irregular_tube(radius, length, n, seed),
        ("capped tube", _) => shapes::capped_tube(radius, length, edge),
        _ => {
            let centre = values
                .number("surface.centre_edge_length")
                .map_or(edge, micrometres);
            shapes::disc_graded(radius, &|r| edge.min(centre + 0.25 * r))
        }
    };
    let mut mesh = made.map_err(|error| mesh_problem(values, &error))?;
    let requirement = match shape.as_str() {
        "tube" => Requirement::Periodic,
        "disc" => Requirement::Framed,
        _ => Requirement::Closed,
    };
    bump(values, &mut mesh, size, seed)?;
    let report = check(&mut mesh, requirement).map_err(|error| mesh_problem(values, &error))?;
    rescale(&mut mesh, size);
    Ok(Surface {
        mesh,
        size: metres,
        point_data: BTreeMap::new(),
        warnings: quality_warning(report.shape.least_quality),
    })
}

fn quality_warning(least: f64) -> Vec<String> {
    if least < 0.05 {
        vec![format!(
            "the worst triangle of the mesh has a quality of {least:.1e} (1 is equilateral); the first steps will be short"
        )]
    } else {
        Vec::new()
    }
}

fn check_size(size: f64, values: &Values) -> Result<(), Problem> {
    if SIZES.contains(&size) {
        return Ok(());
    }
    Err(Problem::new(
        values.place("surface.radius").or_else(|| place(values)),
        format!("the surface would have a size of {size:.3e} m"),
        "",
        "sizes from 1 nm to 10 cm are possible; check the units of [surface]",
    ))
}

fn rescale(mesh: &mut Mesh, size: f64) {
    for position in &mut mesh.positions {
        *position /= size;
    }
    mesh.period = mesh.period.map(|period| period / size);
}

/// Bumps as a share of `size`, which is in the unit of the mesh.
fn bump(values: &Values, mesh: &mut Mesh, size: f64, seed: u64) -> Result<(), Problem> {
    let bumps = values.number("surface.bumps").unwrap_or(0.0);
    if bumps == 0.0 {
        return Ok(());
    }
    match values.whole("surface.bump_waves") {
        Some(waves) => shapes::displace_mode_tube(mesh, bumps, waves as u32),
        None => shapes::perturb(mesh, bumps * size, seed),
    }
    .map_err(|error| mesh_problem(values, &error))
}

/// A fault of the mesh with its mend.
fn mesh_problem(values: &Values, error: &MeshError) -> Problem {
    let file = values.text("surface.shape") == "file";
    let mend = match error {
        MeshError::Impossible { .. } => {
            "change the sizes in [surface]; lengths in this message are in um"
        }
        MeshError::NonManifoldEdge { .. } | MeshError::NonManifoldVertex { .. } => {
            "a membrane is a simple sheet: remove inner walls and doubled triangles in a mesh editor"
        }
        MeshError::InconsistentOrientation { .. } => {
            "make all triangles run counter-clockwise seen from outside (recompute normals, orient faces)"
        }
        MeshError::ZeroArea { .. } | MeshError::RepeatedVertex { .. } => {
            "remesh the surface, or collapse the triangles without area"
        }
        MeshError::Open { .. } | MeshError::UnmergedPoints { .. } => {
            "close the holes; for a patch held at its rim add a section [frame]"
        }
        MeshError::NoRim => "remove [frame], or cut an opening into the surface",
        MeshError::File { .. } => "check the file and its format: PLY, OBJ, STL, VTK, VTU or VTP",
        MeshError::NotOrientable { .. } => "a membrane has two sides; choose another surface",
        _ if file => "mend the mesh file",
        _ => "change the sizes or the edge length in [surface]",
    };
    let here = match error {
        MeshError::Impossible {
            quantity: "edge length",
            ..
        } => values.place("surface.edge_length"),
        _ => None,
    };
    Problem::new(
        here.or_else(|| place(values)),
        format!("surface: {error}"),
        "this surface",
        mend,
    )
}

/// Points, triangles and numbers of a file.
fn read_file(values: &Values, path: &Path) -> Result<(Mesh, BTreeMap<String, Vec<f64>>), Problem> {
    let here = place(values);
    if let Err(error) = std::fs::File::open(path).and_then(|file| {
        if file.metadata()?.is_dir() {
            Err(std::io::Error::other("it is a folder"))
        } else {
            Ok(())
        }
    }) {
        return Err(Problem::unreadable(
            here,
            format!("surface.file: cannot read {}: {error}", path.display()),
            "check the path; it is relative to the folder of the scenario",
        ));
    }
    let ending = path
        .extension()
        .map(|ending| ending.to_string_lossy().to_lowercase())
        .unwrap_or_default();
    if matches!(ending.as_str(), "vtk" | "vtu" | "vtp") {
        let limits = pellicle_vtk::Limits {
            max_points: MOST_VERTICES as u64,
            max_file_bytes: 512 << 20,
            ..pellicle_vtk::Limits::default()
        };
        let surface = pellicle_vtk::read_surface(path, &limits).map_err(|error| {
            Problem::new(
                here,
                format!("surface.file: {error}"),
                "this surface",
                "check the file and its format: PLY, OBJ, STL, VTK, VTU or VTP",
            )
        })?;
        let points = surface.points.iter().map(|p| Vec3::from(*p)).collect();
        let data = surface
            .point_data
            .into_iter()
            .filter(|array| array.components == 1)
            .map(|array| (array.name, array.values))
            .collect();
        return Ok((Mesh::new(points, surface.triangles), data));
    }
    let options = ReadOptions {
        max_vertices: MOST_VERTICES,
        ..ReadOptions::default()
    };
    let read = read(path, &options).map_err(|error| mesh_problem(values, &error))?;
    Ok((read.mesh, read.point_data))
}

fn from_file(values: &mut Values) -> Result<Surface, Problem> {
    let path = values.text("surface.file").to_string();
    let unit = values.number("surface.unit").unwrap_or(1.0);
    let (mut mesh, point_data) = read_file(values, Path::new(&path))?;
    let mut requirement = Requirement::Closed;
    if is_framed(values) {
        requirement = Requirement::Framed;
    }
    if let Some(period) = values.number("surface.period") {
        requirement = Requirement::Periodic;
        mesh.period = Some(period / unit);
    }
    let report = check(&mut mesh, requirement).map_err(|error| mesh_problem(values, &error))?;
    let size = (report.area / (4.0 * PI)).sqrt();
    check_size(size * unit, values)?;
    let mut warnings = quality_warning(report.shape.least_quality);
    if report.turned_outward {
        warnings.push("all triangles of the mesh pointed inwards and have been turned".into());
    }
    values.fill(
        "surface.edge_length",
        report.shape.mean_edge * unit,
        "default: mean edge of the file",
    );
    let seed = values.whole("seed").unwrap_or(0) as u64;
    bump(values, &mut mesh, size, seed)?;
    rescale(&mut mesh, size);
    Ok(Surface {
        mesh,
        size: size * unit,
        point_data,
        warnings,
    })
}

/// Point of the surface that an item names by `centre` or `direction`, in units of the size.
pub fn locate(
    item: &Values,
    prefix: &str,
    shown: &str,
    reach: f64,
    surface: &Surface,
) -> Result<Vec3, Problem> {
    let mesh = &surface.mesh;
    let centre_key = format!("{prefix}centre");
    let direction_key = format!("{prefix}direction");
    if let Some(direction) = item.vector(&direction_key) {
        let geometry = Geometry::new(mesh);
        let middle = mesh
            .positions
            .iter()
            .zip(&geometry.vertex_area)
            .fold(Vec3::zeros(), |sum, (x, a)| sum + x * *a)
            / geometry.total_area;
        let direction = Vec3::from(direction).normalize();
        let cosine = |x: &Vec3| {
            let d = x - middle;
            d.dot(&direction) / d.norm().max(1e-9)
        };
        return Ok(mesh
            .positions
            .iter()
            .fold(None, |best: Option<(f64, Vec3)>, x| match best {
                Some((most, _)) if most >= cosine(x) => best,
                _ => Some((cosine(x), *x)),
            })
            .map_or(middle, |(_, x)| x));
    }
    let point = Vec3::from(item.vector(&centre_key).unwrap_or_default()) / surface.size;
    let nearest = mesh
        .positions
        .iter()
        .map(|x| mesh.nearest_image(x - point).norm())
        .fold(f64::INFINITY, f64::min);
    let reach = reach.max(2.0 * mesh.mean_edge_length());
    if nearest <= reach {
        return Ok(point);
    }
    let um = surface.size / MICROMETRE;
    Err(Problem::new(
        item.place(&centre_key),
        format!(
            "{shown}centre lies {:.3} um away from the surface",
            nearest * um
        ),
        "not on the surface",
        format!(
            "give a point within {:.3} um of the surface, or on a closed one a direction from its middle",
            reach * um
        ),
    ))
}

/// Give the path of a file its full form, so that the scenario can be read from another folder.
pub fn resolve_path(values: &mut Values, key: &str, folders: &[std::path::PathBuf]) {
    let Some(entry) = values.entry(key) else {
        return;
    };
    let folder = entry
        .place
        .as_ref()
        .and_then(|place| folders.get(place.source))
        .cloned()
        .unwrap_or_default();
    let path = folder.join(values.text(key));
    let full = std::fs::canonicalize(&path)
        .or_else(|_| std::path::absolute(&path))
        .unwrap_or(path);
    // A path that is no UTF-8 cannot be written down; the relative one stays.
    if let Some(text) = full.to_str() {
        values.rewrite(
            key,
            Value::Text(text.into()),
            toml::Value::String(text.into()),
        );
    }
}
