//! Geodesic distance over triangles, from a vertex or from both sides of a loop.
//!
//! # Source
//! Kimmel & Sethian, Proc. Natl. Acad. Sci. USA 95 (1998) 8431; obtuse triangles fall back to their edges.

use crate::{Mesh, Topology};
use std::cmp::Ordering;
use std::collections::BinaryHeap;

/// Distances and the label of the start that each vertex is nearest to.
pub(super) struct Distance {
    /// Distance of each vertex.
    pub value: Vec<f64>,
    /// Label of its start.
    pub label: Vec<u8>,
    /// Vertices in the order of their distance.
    pub order: Vec<u32>,
}

struct Next {
    distance: f64,
    vertex: u32,
}

impl PartialEq for Next {
    fn eq(&self, other: &Self) -> bool {
        self.cmp(other) == Ordering::Equal
    }
}

impl Eq for Next {}

impl PartialOrd for Next {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

impl Ord for Next {
    // The nearest comes out of the heap first.
    fn cmp(&self, other: &Self) -> Ordering {
        other
            .distance
            .total_cmp(&self.distance)
            .then(other.vertex.cmp(&self.vertex))
    }
}

/// March outwards from `starts`: (vertex, distance, label).
pub(super) fn march(mesh: &Mesh, topology: &Topology, starts: &[(u32, f64, u8)]) -> Distance {
    let n = topology.n_vertices;
    let mut value = vec![f64::INFINITY; n];
    let mut label = vec![u8::MAX; n];
    let mut done = vec![false; n];
    let mut order = Vec::with_capacity(n);
    let mut heap = BinaryHeap::with_capacity(n);
    for &(vertex, distance, side) in starts {
        if distance < value[vertex as usize] {
            value[vertex as usize] = distance;
            label[vertex as usize] = side;
            heap.push(Next { distance, vertex });
        }
    }
    while let Some(Next { vertex, .. }) = heap.pop() {
        if std::mem::replace(&mut done[vertex as usize], true) {
            continue;
        }
        order.push(vertex);
        let (from, side) = (value[vertex as usize], label[vertex as usize]);
        for &t in topology.vertex_triangles.of(vertex as usize) {
            let corners = topology.triangles[t as usize];
            let Some(c) = corners.iter().position(|&v| v == vertex) else {
                continue;
            };
            let (b, d) = (corners[(c + 1) % 3], corners[(c + 2) % 3]);
            for (target, third) in [(b, d), (d, b)] {
                if done[target as usize] {
                    continue;
                }
                let edge = mesh.edge(target, vertex);
                let mut distance = from + edge.norm();
                if done[third as usize] && label[third as usize] == side {
                    let other = mesh.edge(target, third);
                    let through = across(&edge, from, &other, value[third as usize]);
                    distance = distance.min(through);
                }
                if distance < value[target as usize] {
                    value[target as usize] = distance;
                    label[target as usize] = side;
                    heap.push(Next {
                        distance,
                        vertex: target,
                    });
                }
            }
        }
    }
    Distance {
        value,
        label,
        order,
    }
}

/// Arrival time of a plane wave of unit speed at a corner, from its times `a`, `b` at the ends of the edge
/// vectors `u`, `v`; infinite unless the wave comes through the triangle.
fn across(u: &crate::Vec3, a: f64, v: &crate::Vec3, b: f64) -> f64 {
    // With G the Gram matrix of (u, v) and t = (a, b): |∇d| = 1 reads (d − t)ᵀ G⁻¹ (d − t) = 1.
    let (uu, uv, vv) = (u.norm_squared(), u.dot(v), v.norm_squared());
    let determinant = uu * vv - uv * uv;
    if determinant <= 0.0 {
        return f64::INFINITY;
    }
    let (p, q, r) = (vv / determinant, -uv / determinant, uu / determinant);
    let square = p + 2.0 * q + r;
    let half = p * a + q * (a + b) + r * b;
    let constant = p * a * a + 2.0 * q * a * b + r * b * b - 1.0;
    let discriminant = half * half - square * constant;
    if discriminant < 0.0 {
        return f64::INFINITY;
    }
    let d = (half + discriminant.sqrt()) / square;
    // The ray reaches the corner from inside the triangle when both weights are positive.
    let (x, y) = (d - a, d - b);
    if p * x + q * y > 0.0 && q * x + r * y > 0.0 {
        d
    } else {
        f64::INFINITY
    }
}
