//! What is measured of a surface.

use super::load::Loaded;
use super::spectrum::{Spectrum, spectrum};
use pellicle_physics::diagnostics::domains;
use pellicle_surface::geometry::{Curvature, Geometry, RimCondition};
use pellicle_surface::mesh::check::ShapeSummary;
use pellicle_surface::{Topology, contact, necks};
use std::f64::consts::PI;

/// How a value is spread over the surface.
#[derive(Clone, Copy, Debug)]
pub struct Spread {
    /// Least value.
    pub min: f64,
    /// A quarter of the area has less.
    pub lower_quartile: f64,
    /// Half of the area has less.
    pub median: f64,
    /// A quarter of the area has more.
    pub upper_quartile: f64,
    /// Largest value.
    pub max: f64,
    /// Mean over the area.
    pub mean: f64,
}

/// Phases, where the file has a composition.
#[derive(Clone, Debug)]
pub struct Phases {
    /// Name of the array.
    pub array: String,
    /// Mean over the area.
    pub mean: f64,
    /// Domains of the minority phase.
    pub domains: usize,
    /// Length of the line φ = ½.
    pub interface_length: f64,
}

/// Everything measured. Lengths in one unit throughout.
#[derive(Debug)]
pub struct Measures {
    /// Vertices.
    pub vertices: usize,
    /// Triangles.
    pub triangles: usize,
    /// Connected pieces.
    pub pieces: usize,
    /// Rims.
    pub rims: usize,
    /// Handles, of all pieces together.
    pub genus: i64,
    /// Area.
    pub area: f64,
    /// Enclosed volume of a closed surface.
    pub volume: Option<f64>,
    /// 6√π V/A^(3/2) of a closed surface in one piece.
    pub reduced_volume: Option<f64>,
    /// ½∫(2H)² dA: bending energy over the rigidity.
    pub bending: f64,
    /// ∫H dA [length].
    pub integrated_mean_curvature: f64,
    /// ∫K dA.
    pub integrated_gaussian_curvature: f64,
    /// H away from rims; `None` when every vertex is on a rim.
    pub mean_curvature: Option<Spread>,
    /// Radii of necks, thinnest first.
    pub necks: Vec<f64>,
    /// Pairs of triangles that pass through each other, and the first of them.
    pub intersections: usize,
    /// The first such pair.
    pub first_intersection: Option<(u32, u32)>,
    /// Shape of triangles and edges.
    pub shape: ShapeSummary,
    /// Phases.
    pub phases: Option<Phases>,
    /// Shape as spherical harmonics, or why there are none.
    pub spectrum: Result<Spectrum, String>,
    /// Mean curvature H of the vertices.
    pub mean_curvature_field: Vec<f64>,
    /// Gaussian curvature of the vertices.
    pub gaussian_curvature_field: Vec<f64>,
    /// What is doubtful.
    pub doubts: Vec<String>,
}

/// Measure a surface.
pub fn measure(loaded: &Loaded) -> Measures {
    let Loaded { mesh, topology, report, .. } = loaded;
    let geometry = Geometry::new(mesh);
    let curvature = Curvature::new(mesh, topology, &geometry, RimCondition::Free);
    let bending = curvature.integrated.iter().zip(&curvature.area).map(|(b, a)| 0.5 * b * b / a).sum();
    let mean_curvature_field: Vec<f64> = curvature.twice_mean().iter().map(|twice| 0.5 * twice).collect();
    let gaussian_curvature_field = curvature.gaussian();
    let inner: Vec<(f64, f64)> = (0..mesh.n_vertices())
        .filter(|&v| !topology.on_rim[v])
        .map(|v| (mean_curvature_field[v], curvature.area[v]))
        .collect();
    let rims = count_rims(topology);
    let single = report.components == 1;
    let closed = topology.is_closed();
    let intersections = contact::intersections(mesh);
    let mut doubts = Vec::new();
    if report.turned_outward {
        doubts.push("all triangles pointed inwards and have been turned".to_owned());
    }
    if report.coincident_rim_points > 0 {
        doubts.push(format!(
            "{} points on rims coincide with others: the surface is cut open there; merge duplicate points",
            report.coincident_rim_points
        ));
    }
    if let Some((first, second)) = intersections.first() {
        doubts.push(format!(
            "the surface passes through itself ({} pairs of triangles, {first} and {second} the first): volume and \
             necks have no clear meaning",
            intersections.len()
        ));
    }
    if !single {
        doubts.push(format!("there are {} separate pieces; they are measured together", report.components));
    }
    if report.shape.least_quality < 0.1 {
        doubts.push(format!(
            "the worst triangle is a sliver (quality {:.3}): curvature there is unreliable",
            report.shape.least_quality
        ));
    }
    let spectrum = match (closed && single, topology.euler_characteristic()) {
        (true, 2) => spectrum(mesh),
        _ => Err("it is no closed surface without handles".to_owned()),
    };
    Measures {
        vertices: mesh.n_vertices(),
        triangles: mesh.n_triangles(),
        pieces: report.components,
        rims,
        genus: (2 * report.components as i64 - rims as i64 - report.euler_characteristic) / 2,
        area: geometry.total_area,
        volume: report.volume,
        reduced_volume: report
            .volume
            .filter(|_| single)
            .map(|volume| 6.0 * PI.sqrt() * volume / geometry.total_area.powf(1.5)),
        bending,
        integrated_mean_curvature: 0.5 * curvature.integrated.iter().sum::<f64>(),
        integrated_gaussian_curvature: curvature.angle_defect.iter().sum(),
        mean_curvature: spread(inner),
        // Fronts start from one point, so necks of other pieces would be missed.
        necks: if single {
            necks::find(mesh, topology, &geometry).iter().map(|neck| neck.radius).collect()
        } else {
            Vec::new()
        },
        intersections: intersections.len(),
        first_intersection: intersections.first().copied(),
        shape: report.shape,
        phases: phases(loaded, &geometry),
        spectrum,
        mean_curvature_field,
        gaussian_curvature_field,
        doubts,
    }
}

/// Number of closed lines of rim edges.
fn count_rims(topology: &Topology) -> usize {
    let mut root: Vec<u32> = (0..topology.n_vertices as u32).collect();
    fn find(root: &mut [u32], mut v: u32) -> u32 {
        while root[v as usize] != v {
            root[v as usize] = root[root[v as usize] as usize];
            v = root[v as usize];
        }
        v
    }
    for edge in &topology.rim_edges {
        let (a, b) = (find(&mut root, edge.i), find(&mut root, edge.j));
        root[a as usize] = b;
    }
    (0..topology.n_vertices).filter(|&v| topology.on_rim[v] && root[v] == v as u32).count()
}

/// Spread of values with their areas.
fn spread(mut values: Vec<(f64, f64)>) -> Option<Spread> {
    values.sort_by(|a, b| a.0.total_cmp(&b.0));
    let (min, max) = (values.first()?.0, values.last()?.0);
    let total: f64 = values.iter().map(|(_, area)| area).sum();
    let mean = values.iter().map(|(value, area)| value * area).sum::<f64>() / total;
    let at = |share: f64| {
        let mut sum = 0.0;
        let found = values.iter().find(|(_, area)| {
            sum += area;
            sum >= share * total
        });
        found.map_or(max, |(value, _)| *value)
    };
    Some(Spread { min, lower_quartile: at(0.25), median: at(0.5), upper_quartile: at(0.75), max, mean })
}

fn phases(loaded: &Loaded, geometry: &Geometry) -> Option<Phases> {
    let (name, values) = loaded.fields.iter().find(|(name, values)| {
        name.to_lowercase().starts_with("composition") && values.iter().all(|value| value.is_finite())
    })?;
    let weighted: f64 = values.iter().zip(&geometry.vertex_area).map(|(value, area)| value * area).sum();
    let mean = weighted / geometry.total_area;
    Some(Phases {
        array: name.clone(),
        mean,
        domains: domains::count(&loaded.topology, values, mean),
        interface_length: domains::interface_length(&loaded.mesh, values),
    })
}
