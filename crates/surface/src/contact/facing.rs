//! For every vertex, the nearest place of the surface that it faces: across a gap outside, or across a thin part inside.

use super::{Boxed, images};
use crate::geometry::Geometry;
use crate::{Mesh, Topology, Vec3};
use rstar::{AABB, RTree};

/// A vertex and the nearest point of the surface that faces it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Facing {
    /// Vertex.
    pub vertex: u32,
    /// Triangle that the point lies on.
    pub triangle: u32,
    /// Barycentric coordinates of the point.
    pub share: [f64; 3],
    /// Distance [length].
    pub distance: f64,
    /// Unit vector from the point to the vertex.
    pub direction: Vec3,
}

/// The nearest facing point of every vertex that has one within `reach`, by ascending vertex.
///
/// A triangle faces a vertex when their normals point against each other, both into the gap or both away from it. The
/// vertex and its neighbours belong to no triangle that it faces.
///
/// # Shapes and units
/// `topology` and `geometry` must belong to `mesh`; `reach`: length, less than half of a tube's period.
pub fn facing(mesh: &Mesh, topology: &Topology, geometry: &Geometry, reach: f64) -> Vec<Facing> {
    let mut boxes = Vec::with_capacity(mesh.n_triangles());
    for shift in images(mesh) {
        for t in 0..mesh.n_triangles() {
            let x = mesh.corners(t);
            boxes.push(Boxed {
                low: (x[0].inf(&x[1]).inf(&x[2]) + shift).into(),
                high: (x[0].sup(&x[1]).sup(&x[2]) + shift).into(),
                index: t as u32,
            });
        }
    }
    let tree = RTree::bulk_load(boxes);
    let mut found = Vec::new();
    for (v, x) in mesh.positions.iter().enumerate() {
        let normal = geometry.vertex_normal[v];
        let around = topology.neighbours.of(v);
        let corner = Vec3::repeat(reach);
        let window = AABB::from_corners((x - corner).into(), (x + corner).into());
        let mut nearest: Option<Facing> = None;
        for candidate in tree.locate_in_envelope_intersecting(window) {
            let t = candidate.index as usize;
            let against = &geometry.normal[t];
            if normal.dot(against) >= 0.0 {
                continue;
            }
            let corners = &topology.triangles[t];
            if corners.iter().any(|c| *c as usize == v || around.binary_search(c).is_ok()) {
                continue;
            }
            let mut y = mesh.corners(t);
            let shift = mesh.nearest_image(y[0] - x) - (y[0] - x);
            y.iter_mut().for_each(|p| *p += shift);
            let share = closest(x, &y);
            let way = x - (y[0] * share[0] + y[1] * share[1] + y[2] * share[2]);
            // Both normals into the gap, or both away from it.
            if -way.dot(&normal) * way.dot(against) <= 0.0 {
                continue;
            }
            let distance = way.norm();
            let nearer = nearest.is_none_or(|n| {
                distance < n.distance || (distance == n.distance && candidate.index < n.triangle)
            });
            if distance <= reach && distance > 0.0 && nearer {
                nearest = Some(Facing {
                    vertex: v as u32,
                    triangle: candidate.index,
                    share,
                    distance,
                    direction: way / distance,
                });
            }
        }
        found.extend(nearest);
    }
    found
}

/// Barycentric coordinates of the point of a triangle that is nearest to `p`.
///
/// # Source
/// Ericson, Real-Time Collision Detection, Morgan Kaufmann (2005), § 5.1.5.
fn closest(p: &Vec3, [a, b, c]: &[Vec3; 3]) -> [f64; 3] {
    let (ab, ac, ap) = (b - a, c - a, p - a);
    let (d1, d2) = (ab.dot(&ap), ac.dot(&ap));
    if d1 <= 0.0 && d2 <= 0.0 {
        return [1.0, 0.0, 0.0];
    }
    let bp = p - b;
    let (d3, d4) = (ab.dot(&bp), ac.dot(&bp));
    if d3 >= 0.0 && d4 <= d3 {
        return [0.0, 1.0, 0.0];
    }
    let vc = d1 * d4 - d3 * d2;
    if vc <= 0.0 && d1 >= 0.0 && d3 <= 0.0 {
        let s = d1 / (d1 - d3);
        return [1.0 - s, s, 0.0];
    }
    let cp = p - c;
    let (d5, d6) = (ab.dot(&cp), ac.dot(&cp));
    if d6 >= 0.0 && d5 <= d6 {
        return [0.0, 0.0, 1.0];
    }
    let vb = d5 * d2 - d1 * d6;
    if vb <= 0.0 && d2 >= 0.0 && d6 <= 0.0 {
        let s = d2 / (d2 - d6);
        return [1.0 - s, 0.0, s];
    }
    let va = d3 * d6 - d5 * d4;
    if va <= 0.0 && d4 >= d3 && d5 >= d6 {
        let s = (d4 - d3) / ((d4 - d3) + (d5 - d6));
        return [0.0, 1.0 - s, s];
    }
    let total = va + vb + vc;
    [va / total, vb / total, vc / total]
}
