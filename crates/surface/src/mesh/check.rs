//! Whether a mesh is fit for a run, and what it is like.

pub use super::mend::{
    Merge, merge_duplicate_points, orient_consistently, remove_unused_vertices, turn_inside_out,
};

use super::mend::coincident;
use crate::geometry::Geometry;
use crate::remesh::quality;
use crate::{Mesh, MeshError, Topology};

/// Triangles with less than this share of the mean area count as having none: their angles, and with them all
/// derivatives on them, would be lost to rounding.
const LEAST_AREA: f64 = 1e-8;

/// Points closer than this share of the mean edge coincide: far above the rounding of files with seven digits, far
/// below any edge that can be meant.
const COINCIDENCE: f64 = 1e-5;

/// What kind of surface a run needs.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Requirement {
    /// One closed piece, not periodic.
    Closed,
    /// One piece without rim that continues itself along z.
    Periodic,
    /// One piece with at least one rim.
    Framed,
    /// Any manifold surface, rims and pieces allowed.
    Any,
}

/// What a checked mesh is like.
#[derive(Clone, Debug, PartialEq)]
pub struct Report {
    /// V − E + F.
    pub euler_characteristic: i64,
    /// Number of connected pieces.
    pub components: usize,
    /// Number of rim edges.
    pub rim_edges: usize,
    /// Rim points that coincide with other rim points: a hint that duplicate points were not merged.
    pub coincident_rim_points: usize,
    /// Whether all triangles pointed inward and have been turned.
    pub turned_outward: bool,
    /// Total area.
    pub area: f64,
    /// Enclosed volume; `None` for a surface with a rim.
    pub volume: Option<f64>,
    /// Shape of triangles and edges.
    pub shape: ShapeSummary,
}

/// Shape of triangles and edges.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ShapeSummary {
    /// Smallest ratio 2·inradius/circumradius (1 for an equilateral triangle).
    pub least_quality: f64,
    /// Mean of that ratio.
    pub mean_quality: f64,
    /// Smallest angle in rad.
    pub smallest_angle: f64,
    /// Largest angle in rad.
    pub largest_angle: f64,
    /// Shortest edge.
    pub shortest_edge: f64,
    /// Mean edge.
    pub mean_edge: f64,
    /// Longest edge.
    pub longest_edge: f64,
}

/// Check a mesh against what a run needs.
///
/// A closed or periodic surface whose triangles all point inward is turned, and the report says so; nothing else is
/// changed. Defects are errors that say where they are and what mends them.
///
/// # Errors
/// The first of: no vertices or triangles, coordinates that are not finite, a wrong period, indices out of range,
/// unused vertices, the defects of [`Topology::new`], triangles without area or half a period long, a rim (or none),
/// several pieces.
pub fn check(mesh: &mut Mesh, requirement: Requirement) -> Result<Report, MeshError> {
    check_points(mesh, requirement)?;
    check_use(mesh)?;
    let topology = Topology::new(mesh.n_vertices(), &mesh.triangles)?;
    let mut geometry = Geometry::new(mesh);
    check_triangles(mesh, &geometry)?;
    let coincident_rim_points = check_rim(mesh, &topology, requirement)?;
    let (piece, components) = topology.components();
    if components > 1 && requirement != Requirement::Any {
        return Err(MeshError::SeveralComponents {
            count: components,
            second: piece.iter().position(|&p| p == 1).unwrap_or(0),
        });
    }
    let inward = topology.is_closed() && geometry.volume < 0.0;
    // Turning several pieces at once could spoil one that is right.
    let turned_outward = inward && components == 1;
    if turned_outward {
        turn_inside_out(mesh);
        geometry.update(mesh);
    }
    Ok(Report {
        euler_characteristic: topology.euler_characteristic(),
        components,
        rim_edges: topology.rim_edges.len(),
        coincident_rim_points,
        turned_outward,
        area: geometry.total_area,
        volume: topology.is_closed().then_some(geometry.volume),
        shape: summarize(mesh, &topology),
    })
}

fn check_points(mesh: &Mesh, requirement: Requirement) -> Result<(), MeshError> {
    if mesh.positions.is_empty() || mesh.triangles.is_empty() {
        return Err(MeshError::Empty {
            vertices: mesh.n_vertices(),
            triangles: mesh.n_triangles(),
        });
    }
    let finite = |p: &crate::Vec3| p.iter().all(|x| x.is_finite());
    if let Some(vertex) = mesh.positions.iter().position(|p| !finite(p)) {
        return Err(MeshError::NonFinite { vertex });
    }
    match (mesh.period, requirement) {
        (Some(_), Requirement::Closed) | (None, Requirement::Periodic) => {
            Err(MeshError::WrongPeriodicity {
                period: mesh.period,
            })
        }
        (Some(period), _) if !(period > 0.0 && period.is_finite()) => Err(MeshError::Impossible {
            quantity: "period",
            value: period,
            mend: "give a positive, finite length".into(),
        }),
        _ => Ok(()),
    }
}

fn check_use(mesh: &Mesh) -> Result<(), MeshError> {
    let mut used = vec![false; mesh.n_vertices()];
    for (triangle, corners) in mesh.triangles.iter().enumerate() {
        for &vertex in corners {
            *used
                .get_mut(vertex as usize)
                .ok_or(MeshError::IndexOutOfRange {
                    triangle,
                    index: vertex as usize,
                    vertices: mesh.n_vertices(),
                })? = true;
        }
    }
    match used.iter().position(|&u| !u) {
        None => Ok(()),
        Some(first) => Err(MeshError::UnusedVertices {
            count: used.iter().filter(|&&u| !u).count(),
            first,
        }),
    }
}

fn check_triangles(mesh: &Mesh, geometry: &Geometry) -> Result<(), MeshError> {
    let mean = geometry.total_area / mesh.n_triangles() as f64;
    for (triangle, &area) in geometry.area.iter().enumerate() {
        if area.is_nan() || area <= LEAST_AREA * mean {
            return Err(MeshError::ZeroArea {
                triangle,
                area,
                mean,
            });
        }
        let Some(period) = mesh.period else { continue };
        let [a, b, c] = mesh.triangles[triangle];
        let edges = [mesh.edge(a, b), mesh.edge(b, c), mesh.edge(c, a)];
        // Nearest images that do not close up belong to different copies of a corner.
        let gap: f64 = edges.iter().map(|e| e.z).sum();
        let longest = edges.iter().fold(0.0f64, |most, e| most.max(e.z.abs()));
        if gap.abs() > 0.5 * period || longest > 0.4999 * period {
            return Err(MeshError::SpansPeriod { triangle, period });
        }
    }
    Ok(())
}

/// Compare the rim with the requirement; returns the number of coincident rim points.
fn check_rim(
    mesh: &Mesh,
    topology: &Topology,
    requirement: Requirement,
) -> Result<usize, MeshError> {
    let Some(edge) = topology.rim_edges.first() else {
        return if requirement == Requirement::Framed {
            Err(MeshError::NoRim)
        } else {
            Ok(0)
        };
    };
    let rim: Vec<u32> = (0..mesh.n_vertices() as u32)
        .filter(|&v| topology.on_rim[v as usize])
        .collect();
    let tolerance = COINCIDENCE * mesh.mean_edge_length();
    let duplicates = coincident(mesh, &rim, tolerance)
        .into_iter()
        .enumerate()
        .filter(|&(place, first)| place != first as usize)
        .count();
    if matches!(requirement, Requirement::Framed | Requirement::Any) {
        return Ok(duplicates);
    }
    let (a, b) = (edge.i as usize, edge.j as usize);
    let rim_edges = topology.rim_edges.len();
    Err(if duplicates > 0 {
        MeshError::UnmergedPoints {
            a,
            b,
            rim_edges,
            duplicates,
        }
    } else {
        MeshError::Open { a, b, rim_edges }
    })
}

fn summarize(mesh: &Mesh, topology: &Topology) -> ShapeSummary {
    let quality = quality(mesh);
    let lengths: Vec<f64> = topology
        .edges()
        .map(|(a, b)| mesh.edge(a, b).norm())
        .collect();
    let mean = |values: &[f64]| values.iter().sum::<f64>() / values.len().max(1) as f64;
    let least = |values: &[f64]| values.iter().copied().fold(f64::INFINITY, f64::min);
    let (mut smallest_angle, mut largest_angle) = (f64::INFINITY, 0.0f64);
    for t in 0..mesh.n_triangles() {
        let x = mesh.corners(t);
        for c in 0..3 {
            let angle = (x[(c + 1) % 3] - x[c]).angle(&(x[(c + 2) % 3] - x[c]));
            smallest_angle = smallest_angle.min(angle);
            largest_angle = largest_angle.max(angle);
        }
    }
    ShapeSummary {
        least_quality: least(&quality),
        mean_quality: mean(&quality),
        smallest_angle,
        largest_angle,
        shortest_edge: least(&lengths),
        mean_edge: mean(&lengths),
        longest_edge: lengths.iter().copied().fold(0.0, f64::max),
    }
}
