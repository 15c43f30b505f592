//! Necks: places where a surface is thinner than on both sides of them.
//!
//! Fronts of equal geodesic distance from extremal points sweep over the surface; a front whose length has a
//! minimum is pulled tight to a closed geodesic. The geodesic is a neck when fronts of equal distance from it become
//! longer than it is by [`PROMINENCE`] on both sides before any becomes shorter by [`DIP`], not just by leaning over in
//! a bend (they go on to [`FLARE`] or lie along its axis), and when its radius is at most [`BREADTH`] of the radius of the sphere with the area of the smaller side.
//!
//! A long tube that ends in a cap (a tether) has no wider place at its end. It counts as one neck, where its length
//! round is least, when it flares to [`FLARE`] on one side and the other has the area of a sphere of at least
//! [`TUBE`] neck radii. A cylinder alone is no neck, nor is anything convex.

mod cap;
mod distance;
mod sever;
mod sweep;
mod verify;
mod walk;

use crate::geometry::Geometry;
use crate::{Mesh, Topology, Vec3, pieces};
pub use sever::{Severed, sever};
use distance::march;
use serde::{Deserialize, Serialize};
use std::f64::consts::TAU;
use verify::{Verdict, verify};
use walk::{Loop, ends};

/// Share by which fronts on both sides become longer than a neck.
pub const PROMINENCE: f64 = 0.05;
/// Share by which fronts near a neck may be shorter than it: what an irregular mesh does to a cylinder.
pub const DIP: f64 = 0.02;
/// Largest ratio of a neck's radius to that of the sphere with the area of its smaller side.
pub const BREADTH: f64 = 0.8;
/// Length of the fronts, relative to the neck, that makes a tube's end a flare.
pub const FLARE: f64 = 1.5;
/// Least radius of the sphere with the area of a tube, in units of the tube's radius.
pub const TUBE: f64 = 2.0;
/// Fewest crossings of edges by a loop that is still resolved.
const LEAST_CROSSINGS: usize = 6;
/// Most moves of a loop to a shorter one beside it.
const MOST_SLIDES: usize = 6;
/// Most extremal points that fronts start from.
const MOST_SOURCES: usize = 12;

/// Where a neck's loop crosses an edge of the mesh.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Crossing {
    /// End of the edge to the right of the loop (outward normal up).
    pub right: u32,
    /// End of the edge to its left.
    pub left: u32,
    /// Where the edge is crossed, as a share of its way from `right` to `left`.
    pub share: f64,
}

/// A shortest closed loop round a neck.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Neck {
    /// Length of the loop [length].
    pub length: f64,
    /// Length/2π.
    pub radius: f64,
    /// Edges crossed, in order round the loop; consecutive ones belong to one triangle.
    pub crossings: Vec<Crossing>,
    /// Their points.
    pub points: Vec<Vec3>,
    /// Area on the left and on the right; infinite where there is a rim. On a surface that the loop does not cut
    /// in two, the parts nearer to its left and to its right.
    pub side_area: [f64; 2],
}

/// A loop that might be a neck.
struct Candidate {
    curve: Loop,
    /// Whether it stands for a tube, whose end may be thinner than itself.
    tube: bool,
}

/// All necks, thinnest first.
///
/// # Shapes and units
/// `topology` and `geometry` must belong to `mesh`; lengths and areas in its units.
pub fn find(mesh: &Mesh, topology: &Topology, geometry: &Geometry) -> Vec<Neck> {
    if topology.n_pieces == 1 {
        return find_in_piece(mesh, topology, geometry);
    }
    let mut necks = Vec::new();
    for piece in 0..topology.n_pieces {
        let (part, vertices) = pieces::extract(mesh, topology, piece);
        let Ok(around) = Topology::new(part.n_vertices(), &part.triangles) else {
            continue;
        };
        let found = find_in_piece(&part, &around, &Geometry::new(&part));
        necks.extend(found.into_iter().map(|mut neck| {
            for crossing in &mut neck.crossings {
                crossing.right = vertices[crossing.right as usize];
                crossing.left = vertices[crossing.left as usize];
            }
            neck
        }));
    }
    necks.sort_by(|a, b| a.length.total_cmp(&b.length));
    necks
}

/// As [`find`], on a surface in one piece.
fn find_in_piece(mesh: &Mesh, topology: &Topology, geometry: &Geometry) -> Vec<Neck> {
    let mut found = Found {
        mesh,
        topology,
        geometry,
        necks: Vec::new(),
        settled: vec![false; topology.n_vertices],
        refused: vec![false; topology.n_vertices],
    };
    if let Some(period) = mesh.period {
        found.consider(sweep::cross_sections(mesh, topology, period));
    }
    // Fronts from the rim of a patch, or from the point farthest from an arbitrary one.
    let mut starts: Vec<(u32, f64, u8)> = (0..topology.n_vertices)
        .filter(|&v| topology.on_rim[v])
        .map(|v| (v as u32, 0.0, 0))
        .collect();
    let mut visited = Vec::new();
    if starts.is_empty() {
        let far = march(mesh, topology, &[(0, 0.0, 0)]).order.last().copied().unwrap_or(0);
        starts.push((far, 0.0, 0));
        visited.push(far);
    }
    let first = march(mesh, topology, &starts);
    if !visited.is_empty() {
        found.consider(sweep::candidates(mesh, topology, geometry, &first));
    }
    let tips = sweep::summits(mesh, topology, &first);
    for tip in tips {
        if visited.len() >= MOST_SOURCES {
            break;
        }
        if visited.contains(&tip) {
            continue;
        }
        visited.push(tip);
        let distance = march(mesh, topology, &[(tip, 0.0, 0)]);
        found.consider(sweep::candidates(mesh, topology, geometry, &distance));
    }
    found.necks.sort_by(|a, b| a.length.total_cmp(&b.length));
    found.necks
}

/// Necks so far, and the vertices whose surroundings are settled.
struct Found<'a> {
    mesh: &'a Mesh,
    topology: &'a Topology,
    geometry: &'a Geometry,
    necks: Vec<Neck>,
    settled: Vec<bool>,
    /// Vertices beside loops that turned out to be no necks.
    refused: Vec<bool>,
}

impl Found<'_> {
    fn consider(&mut self, candidates: Vec<Candidate>) {
        for Candidate { curve, tube } in candidates {
            if self.beside(&self.settled, &curve, 0.5) {
                continue;
            }
            let found = self.slide(curve.clone(), tube);
            // A tube slightly thinner towards its end lets the loop slip off: it stays where it was found.
            if !found && tube {
                let length = curve.length(self.mesh, self.topology);
                let verdict = verify(self.mesh, self.topology, self.geometry, &curve, length, true);
                self.keep(curve, length, verdict);
            }
        }
    }

    /// Pull a loop tight, and go on to shorter ones beside it, until a neck is found (or known) or nothing is left.
    fn slide(&mut self, mut curve: Loop, tube: bool) -> bool {
        let mut shortest = f64::INFINITY;
        for _ in 0..MOST_SLIDES {
            let Some(tight) = curve.tighten(self.mesh, self.topology, LEAST_CROSSINGS) else {
                return false;
            };
            if self.beside(&self.settled, &tight, 0.5) {
                return true;
            }
            let length = tight.length(self.mesh, self.topology);
            if length >= shortest || (!tube && self.beside(&self.refused, &tight, 0.8)) {
                return false;
            }
            shortest = length;
            match verify(self.mesh, self.topology, self.geometry, &tight, length, tube) {
                Verdict::Shorter(front) => curve = front,
                verdict => return self.keep(tight, length, verdict),
            }
        }
        false
    }

    /// Whether more than `share` of the edges that a loop crosses have both ends marked.
    fn beside(&self, marked: &[bool], curve: &Loop, share: f64) -> bool {
        let both = |h: &&u32| {
            let (a, b) = ends(self.topology, **h);
            marked[a as usize] && marked[b as usize]
        };
        curve.through.iter().filter(both).count() as f64 > share * curve.through.len() as f64
    }

    /// Put down what became of a loop; whether it is a neck.
    fn keep(&mut self, curve: Loop, length: f64, verdict: Verdict) -> bool {
        let Verdict::Neck { side_area, region } = verdict else {
            for &h in &curve.through {
                let (a, b) = ends(self.topology, h);
                self.refused[a as usize] = true;
                self.refused[b as usize] = true;
            }
            return false;
        };
        for vertex in region {
            self.settled[vertex as usize] = true;
        }
        self.necks.push(Neck {
            length,
            radius: length / TAU,
            points: (0..curve.through.len())
                .map(|k| curve.point(self.mesh, self.topology, k))
                .collect(),
            crossings: curve
                .through
                .iter()
                .zip(&curve.at)
                .map(|(&h, &share)| {
                    let (right, left) = ends(self.topology, h);
                    Crossing { right, left, share }
                })
                .collect(),
            side_area,
        });
        true
    }
}
