//! Self-contact: triangles that pass through each other, and vertices that come close without being neighbours.
//!
//! Boxes of triangles and points of vertices are kept in R-trees; a periodic tube's are repeated one period up and
//! down.

mod facing;

pub use facing::{Facing, facing};

use crate::{Mesh, Topology, Vec3};
use rstar::primitives::GeomWithData;
use rstar::{AABB, RTree, RTreeObject};

/// A box with the index of what is in it.
struct Boxed {
    low: [f64; 3],
    high: [f64; 3],
    index: u32,
}

impl RTreeObject for Boxed {
    type Envelope = AABB<[f64; 3]>;

    fn envelope(&self) -> Self::Envelope {
        AABB::from_corners(self.low, self.high)
    }
}

/// Two vertices that are close in space but not on the surface.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Approach {
    /// One vertex.
    pub a: u32,
    /// The other.
    pub b: u32,
    /// Distance [length].
    pub distance: f64,
}

/// Shifts along z under which a mesh must be looked at.
fn images(mesh: &Mesh) -> Vec<Vec3> {
    match mesh.period {
        None => vec![Vec3::zeros()],
        Some(period) => [-period, 0.0, period].map(|z| Vec3::new(0.0, 0.0, z)).to_vec(),
    }
}

/// Pairs of triangles without a common vertex that pass through each other, each pair once, ascending.
///
/// Triangles that only touch, within rounding, may or may not be reported.
pub fn intersections(mesh: &Mesh) -> Vec<(u32, u32)> {
    let corners: Vec<[Vec3; 3]> = (0..mesh.n_triangles()).map(|t| mesh.corners(t)).collect();
    let boxed = |x: &[Vec3; 3], index: usize, shift: &Vec3| {
        let (low, high) = (x[0].inf(&x[1]).inf(&x[2]) + shift, x[0].sup(&x[1]).sup(&x[2]) + shift);
        Boxed {
            low: low.into(),
            high: high.into(),
            index: index as u32,
        }
    };
    let here = Vec3::zeros();
    let tree = RTree::bulk_load(
        corners.iter().enumerate().map(|(t, x)| boxed(x, t, &here)).collect(),
    );
    let mut pairs = Vec::new();
    for shift in images(mesh) {
        let shifted = RTree::bulk_load(
            corners.iter().enumerate().map(|(t, x)| boxed(x, t, &shift)).collect(),
        );
        for (one, other) in tree.intersection_candidates_with_other_tree(&shifted) {
            let (s, t) = (one.index as usize, other.index as usize);
            if s >= t || mesh.triangles[s].iter().any(|v| mesh.triangles[t].contains(v)) {
                continue;
            }
            let moved = corners[t].map(|x| x + shift);
            if pierces(&corners[s], &moved) || pierces(&moved, &corners[s]) {
                pairs.push((s as u32, t as u32));
            }
        }
    }
    pairs.sort_unstable();
    pairs.dedup();
    pairs
}

/// Whether a side of `first` passes through `second`.
///
/// Triangles that cross do so along a segment, whose ends are such passages. (Coplanar overlap does not count: the
/// signs of the volumes are then zero.)
fn pierces(first: &[Vec3; 3], second: &[Vec3; 3]) -> bool {
    let volume = |a: &Vec3, b: &Vec3, c: &Vec3, d: &Vec3| (b - a).cross(&(c - a)).dot(&(d - a));
    let [a, b, c] = second;
    (0..3).any(|k| {
        let (p, q) = (&first[k], &first[(k + 1) % 3]);
        let (over, under) = (volume(a, b, c, p), volume(a, b, c, q));
        if over * under >= 0.0 {
            return false;
        }
        // The line through p and q passes the three sides of the triangle on the same hand.
        let hands = [volume(p, q, a, b), volume(p, q, b, c), volume(p, q, c, a)];
        hands.iter().all(|h| *h >= 0.0) || hands.iter().all(|h| *h <= 0.0)
    })
}

/// Pairs of vertices nearer than `cutoff` that are at least `rings` + 1 edges apart on the surface (`rings` = 1:
/// only edges are left out), each pair once, ascending.
///
/// # Shapes and units
/// `cutoff`: length, less than half of a tube's period.
pub fn approaches(mesh: &Mesh, topology: &Topology, cutoff: f64, rings: usize) -> Vec<Approach> {
    let mut points = Vec::with_capacity(mesh.n_vertices());
    for shift in images(mesh) {
        for (v, x) in mesh.positions.iter().enumerate() {
            points.push(GeomWithData::new(<[f64; 3]>::from(x + shift), v as u32));
        }
    }
    let tree = RTree::bulk_load(points);
    let mut found = Vec::new();
    let mut near = Near {
        stamp: vec![0; topology.n_vertices],
        members: Vec::new(),
    };
    for (v, x) in mesh.positions.iter().enumerate() {
        near.collect(topology, v as u32, rings);
        for other in tree.locate_within_distance(<[f64; 3]>::from(*x), cutoff * cutoff) {
            let b = other.data;
            if b as usize > v && near.stamp[b as usize] != v as u32 + 1 {
                found.push(Approach {
                    a: v as u32,
                    b,
                    distance: (Vec3::from(*other.geom()) - x).norm(),
                });
            }
        }
    }
    found.sort_by(|p, q| (p.a, p.b).cmp(&(q.a, q.b)).then(p.distance.total_cmp(&q.distance)));
    found.dedup_by_key(|p| (p.a, p.b));
    found
}

/// Closest of the [`approaches`]; `None` when there is none within the cutoff.
pub fn closest(mesh: &Mesh, topology: &Topology, cutoff: f64, rings: usize) -> Option<Approach> {
    approaches(mesh, topology, cutoff, rings)
        .into_iter()
        .min_by(|p, q| p.distance.total_cmp(&q.distance))
}

/// Vertices within some edges of a vertex, storage reused.
struct Near {
    /// 1 + the vertex whose surroundings another was last found in.
    stamp: Vec<u32>,
    members: Vec<u32>,
}

impl Near {
    fn collect(&mut self, topology: &Topology, vertex: u32, rings: usize) {
        self.members.clear();
        self.members.push(vertex);
        self.stamp[vertex as usize] = vertex + 1;
        let mut done = 0;
        for _ in 0..rings {
            let end = self.members.len();
            for k in done..end {
                for &u in topology.neighbours.of(self.members[k] as usize) {
                    if self.stamp[u as usize] != vertex + 1 {
                        self.stamp[u as usize] = vertex + 1;
                        self.members.push(u);
                    }
                }
            }
            done = end;
        }
    }
}
