//! How long edges should be: wishes of the callers, limited in how fast they change along the surface.

use crate::geometry::Geometry;
use crate::geometry::shape_operator::{second_form, shape_operators};
use crate::mesh::topology::Topology;
use crate::{Mesh, MeshError, Vec3};
use std::cmp::Ordering;
use std::collections::BinaryHeap;

/// Wishes for the edge length.
#[derive(Clone, Debug, PartialEq)]
pub struct SizingRequest {
    /// Wanted edge length at each vertex (the smallest of all callers' wishes); may be infinite.
    pub wanted: Vec<f64>,
    /// Largest change of the edge length per length along the surface, dimensionless. 0.25 keeps triangles
    /// good.
    pub gradation: f64,
    /// Never ask for less than this length.
    pub shortest: f64,
    /// Never ask for more than this length.
    pub longest: f64,
}

impl SizingRequest {
    /// Wishes with the default gradation of 0.25.
    pub fn new(wanted: Vec<f64>, shortest: f64, longest: f64) -> Self {
        Self {
            wanted,
            gradation: 0.25,
            shortest,
            longest,
        }
    }
}

/// Wanted edge length at each vertex: the largest field that stays within [shortest, longest], below the
/// wishes, and changes by no more than gradation × edge length along any edge.
///
/// # Errors
/// [`MeshError::Impossible`] for a list of a wrong length, a wish that is not positive, a negative gradation,
/// or bounds that are not positive and in order.
pub fn sizing_field(
    mesh: &Mesh,
    topology: &Topology,
    request: &SizingRequest,
) -> Result<Vec<f64>, MeshError> {
    check(mesh, request)?;
    let mut size: Vec<f64> = request
        .wanted
        .iter()
        .map(|h| h.clamp(request.shortest, request.longest))
        .collect();
    let limit = |size: &[f64], from: u32, to: u32| {
        size[from as usize] + request.gradation * mesh.edge(from, to).norm()
    };
    // Shortest paths from every vertex that holds a neighbour down; most meshes have few.
    let mut heap = BinaryHeap::new();
    for (a, b) in topology.edges() {
        for (from, to) in [(a, b), (b, a)] {
            if limit(&size, from, to) < size[to as usize] {
                heap.push(Entry {
                    size: size[from as usize],
                    vertex: from,
                });
            }
        }
    }
    while let Some(Entry {
        size: known,
        vertex,
    }) = heap.pop()
    {
        if known > size[vertex as usize] {
            continue;
        }
        for &to in topology.neighbours.of(vertex as usize) {
            let bound = limit(&size, vertex, to);
            if bound < size[to as usize] {
                size[to as usize] = bound;
                heap.push(Entry {
                    size: bound,
                    vertex: to,
                });
            }
        }
    }
    Ok(size)
}

fn check(mesh: &Mesh, request: &SizingRequest) -> Result<(), MeshError> {
    let refuse = |quantity, value, mend: &str| {
        Err(MeshError::Impossible {
            quantity,
            value,
            mend: mend.into(),
        })
    };
    if request.wanted.len() != mesh.n_vertices() {
        return refuse(
            "number of wanted edge lengths",
            request.wanted.len() as f64,
            "give one for each vertex",
        );
    }
    if let Some(&value) = request.wanted.iter().find(|h| h.is_nan() || **h <= 0.0) {
        return refuse("wanted edge length", value, "it must be positive");
    }
    if !(request.shortest > 0.0 && request.shortest.is_finite()) {
        return refuse(
            "shortest edge length",
            request.shortest,
            "it must be positive",
        );
    }
    if !(request.longest >= request.shortest && request.longest.is_finite()) {
        return refuse(
            "longest edge length",
            request.longest,
            "it must be finite and not below the shortest",
        );
    }
    if request.gradation.is_nan() || request.gradation < 0.0 {
        return refuse("gradation", request.gradation, "it must not be negative");
    }
    Ok(())
}

/// Heap entry, smallest size on top.
struct Entry {
    size: f64,
    vertex: u32,
}

impl Ord for Entry {
    fn cmp(&self, other: &Self) -> Ordering {
        other
            .size
            .total_cmp(&self.size)
            .then_with(|| other.vertex.cmp(&self.vertex))
    }
}

impl PartialOrd for Entry {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

impl PartialEq for Entry {
    fn eq(&self, other: &Self) -> bool {
        self.cmp(other) == Ordering::Equal
    }
}

impl Eq for Entry {}

/// Edge length that gives `edges_per_radius` edges per smallest radius of curvature:
/// 1 / (edges_per_radius |c|), c the larger principal curvature at the vertex or, if larger, its mean over the
/// neighbours. Infinite where the surface is flat.
///
/// Curvatures are those of [`shape_operators`] in the tangent plane.
///
/// # Errors
/// [`MeshError::Impossible`] if `edges_per_radius` is not positive.
pub fn curvature_size(
    mesh: &Mesh,
    topology: &Topology,
    geometry: &Geometry,
    edges_per_radius: f64,
) -> Result<Vec<f64>, MeshError> {
    if !(edges_per_radius > 0.0 && edges_per_radius.is_finite()) {
        return Err(MeshError::Impossible {
            quantity: "edges per radius of curvature",
            value: edges_per_radius,
            mend: "it must be positive; 2 is a common choice".into(),
        });
    }
    let curvature = largest_curvature(mesh, geometry);
    Ok((0..mesh.n_vertices())
        .map(|v| {
            let around = topology.neighbours.of(v);
            let sum: f64 = around.iter().map(|&w| curvature[w as usize]).sum();
            let mean = sum / around.len().max(1) as f64;
            1.0 / (edges_per_radius * curvature[v].max(mean))
        })
        .collect())
}

/// Larger absolute principal curvature at each vertex.
fn largest_curvature(mesh: &Mesh, geometry: &Geometry) -> Vec<f64> {
    shape_operators(mesh, geometry)
        .iter()
        .zip(&geometry.vertex_normal)
        .map(|(operator, normal)| {
            let (u, v) = tangents(normal);
            let (uu, vv) = (second_form(operator, &u), second_form(operator, &v));
            let uv = u.dot(&(operator * v));
            0.5 * (uu + vv).abs() + (0.25 * (uu - vv) * (uu - vv) + uv * uv).sqrt()
        })
        .collect()
}

/// Two unit vectors across a unit normal and each other.
fn tangents(normal: &Vec3) -> (Vec3, Vec3) {
    let axis = Vec3::ith(normal.iamin(), 1.0);
    let u = normal.cross(&axis);
    let u = u / u.norm();
    (u, normal.cross(&u))
}
