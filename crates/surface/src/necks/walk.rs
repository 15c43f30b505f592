//! Closed curves over triangles: followed along a level of a vertex field, and pulled tight.

use crate::mesh::topology::NONE;
use crate::{Mesh, Topology, Vec3};

/// A closed curve as the half-edges it leaves triangles through, in order. With outward normals up, the end of each
/// half-edge lies to the left of the curve, its start to the right.
#[derive(Clone, Debug, Default)]
pub(super) struct Loop {
    /// Half-edges.
    pub through: Vec<u32>,
    /// Where each is crossed, as a share of its way from start to end.
    pub at: Vec<f64>,
}

/// Curves keep this share of an edge away from vertices, so that no two crossings coincide and stick.
const MARGIN: f64 = 1e-3;
/// Rounds of straightening and passing over vertices.
const ROUNDS: usize = 120;
/// Relative shortening per round below which a curve is tight.
const SETTLED: f64 = 1e-5;
/// Straightening sweeps per round.
const SWEEPS: usize = 12;

/// Start and end of a half-edge.
#[inline]
pub(super) fn ends(topology: &Topology, half_edge: u32) -> (u32, u32) {
    let corners = &topology.triangles[half_edge as usize / 3];
    let c = half_edge as usize % 3;
    (corners[c], corners[(c + 1) % 3])
}

#[inline]
pub(super) fn next(half_edge: u32) -> u32 {
    if half_edge % 3 == 2 { half_edge - 2 } else { half_edge + 1 }
}

#[inline]
pub(super) fn before(half_edge: u32) -> u32 {
    if half_edge % 3 == 0 { half_edge + 2 } else { half_edge - 1 }
}

/// Follow the level of a field from a half-edge that starts below it and ends at or above it. `None` where the
/// curve runs into a rim.
pub(super) fn follow(topology: &Topology, field: &[f64], level: f64, first: u32) -> Option<Loop> {
    let mut curve = Loop::default();
    let mut h = first;
    loop {
        let (a, b) = ends(topology, h);
        let (low, high) = (field[a as usize], field[b as usize]);
        curve.through.push(h);
        curve.at.push(((level - low) / (high - low)).clamp(MARGIN, 1.0 - MARGIN));
        let twin = topology.twin[h as usize];
        if twin == NONE || curve.through.len() > topology.triangles.len() {
            return None;
        }
        let tip = ends(topology, before(twin)).0;
        h = if field[tip as usize] >= level { next(twin) } else { before(twin) };
        if h == first {
            return Some(curve);
        }
    }
}

impl Loop {
    /// Point of a crossing.
    #[inline]
    pub fn point(&self, mesh: &Mesh, topology: &Topology, k: usize) -> Vec3 {
        let (a, b) = ends(topology, self.through[k]);
        mesh.positions[a as usize] + mesh.edge(a, b) * self.at[k]
    }

    /// Length.
    pub fn length(&self, mesh: &Mesh, topology: &Topology) -> f64 {
        let n = self.through.len();
        let points: Vec<Vec3> = (0..n).map(|k| self.point(mesh, topology, k)).collect();
        (0..n)
            .map(|k| mesh.nearest_image(points[(k + 1) % n] - points[k]).norm())
            .sum()
    }

    /// Mean of its points weighted with length, and twice its vector area (along its axis).
    pub fn centre_and_axis(&self, mesh: &Mesh, topology: &Topology) -> (Vec3, Vec3) {
        let n = self.through.len();
        let origin = self.point(mesh, topology, 0);
        let (mut centre, mut axis, mut from, mut length) = (Vec3::zeros(), Vec3::zeros(), Vec3::zeros(), 0.0);
        for k in 0..n {
            let to = from
                + mesh.nearest_image(
                    self.point(mesh, topology, (k + 1) % n) - self.point(mesh, topology, k),
                );
            let step = (to - from).norm();
            axis += from.cross(&to);
            centre += (from + to) * (0.5 * step);
            length += step;
            from = to;
        }
        (origin + centre / length, axis)
    }

    /// Shorten to a closed geodesic. `None` when the curve shrinks onto a vertex or to fewer than `least` crossings.
    pub fn tighten(mut self, mesh: &Mesh, topology: &Topology, least: usize) -> Option<Self> {
        let mut length = self.length(mesh, topology);
        for _ in 0..ROUNDS {
            for _ in 0..SWEEPS {
                self.straighten(mesh, topology);
            }
            let passed = self.pass_vertices(mesh, topology)?;
            if self.through.len() < least || self.surrounds_vertex(topology) {
                return None;
            }
            let shorter = self.length(mesh, topology);
            if !passed && (length - shorter).abs() < SETTLED * length {
                return Some(self);
            }
            length = shorter;
        }
        Some(self)
    }

    /// Whether every edge crossed ends in one and the same vertex.
    pub fn surrounds_vertex(&self, topology: &Topology) -> bool {
        let Some(&first) = self.through.first() else {
            return true;
        };
        let (right, left) = ends(topology, first);
        self.through.iter().all(|&h| ends(topology, h).0 == right)
            || self.through.iter().all(|&h| ends(topology, h).1 == left)
    }

    /// Put every crossing on the straight line between its neighbours, the two triangles unfolded.
    fn straighten(&mut self, mesh: &Mesh, topology: &Topology) {
        let n = self.through.len();
        for k in 0..n {
            let (a, b) = ends(topology, self.through[k]);
            let origin = mesh.positions[a as usize];
            let edge = mesh.edge(a, b);
            let length = edge.norm();
            let unit = edge / length;
            let place = |other: usize| {
                let d = mesh.nearest_image(self.point(mesh, topology, other) - origin);
                let along = d.dot(&unit);
                (along, (d - unit * along).norm())
            };
            let (x1, h1) = place((k + n - 1) % n);
            let (x2, h2) = place((k + 1) % n);
            let x = if h1 + h2 > 0.0 { (x1 * h2 + x2 * h1) / (h1 + h2) } else { 0.5 * (x1 + x2) };
            self.at[k] = (x / length).clamp(MARGIN, 1.0 - MARGIN);
        }
    }

    /// The vertex that crossing k is held up by.
    fn held_by(&self, topology: &Topology, k: usize) -> Option<u32> {
        let (a, b) = ends(topology, self.through[k]);
        if self.at[k] <= 1.5 * MARGIN {
            Some(a)
        } else if self.at[k] >= 1.0 - 1.5 * MARGIN {
            Some(b)
        } else {
            None
        }
    }

    /// Pass over every vertex that holds the curve up and has less angle on its other side. Whether any was passed;
    /// `None` when nothing is left of the curve.
    fn pass_vertices(&mut self, mesh: &Mesh, topology: &Topology) -> Option<bool> {
        let mut passed = false;
        let mut k = 0;
        while k < self.through.len() {
            let n = self.through.len();
            let Some(vertex) = self.held_by(topology, k) else {
                k += 1;
                continue;
            };
            let same = |j: usize| self.held_by(topology, j % n) == Some(vertex);
            let mut first = k;
            let mut count = 1;
            while count < n && same(first + n - 1) {
                first = (first + n - 1) % n;
                count += 1;
            }
            while count < n && same(first + count) {
                count += 1;
            }
            if count == n {
                return None;
            }
            match self.detour(mesh, topology, vertex, first, count) {
                Some(other) => {
                    self.replace(first, count, other);
                    self.cancel(topology);
                    if self.through.len() < 3 {
                        return None;
                    }
                    passed = true;
                    // Indices have moved; look at everything after the next straightening.
                    k = k.max(first) + 1;
                }
                None => k += count.max(1),
            }
        }
        Some(passed)
    }

    /// The crossings of the way round `vertex` on its other side, if it is the shorter one.
    fn detour(
        &self,
        mesh: &Mesh,
        topology: &Topology,
        vertex: u32,
        first: usize,
        count: usize,
    ) -> Option<Loop> {
        let n = self.through.len();
        let origin = mesh.positions[vertex as usize];
        let seen = |k: usize| mesh.nearest_image(self.point(mesh, topology, k % n) - origin);
        let on_left = ends(topology, self.through[first]).1 == vertex;
        let last = topology.twin[self.through[(first + count - 1) % n] as usize];
        let (enter, leave) = (self.through[first] / 3, last / 3);
        let (from, to) = (seen(first + n - 1), seen(first + count));
        let far_end = |h: u32| {
            let (a, b) = ends(topology, h);
            mesh.edge(vertex, if a == vertex { b } else { a })
        };
        let mut here = 0.0;
        let mut ray = from;
        for k in first..first + count {
            let edge = far_end(self.through[k % n]);
            here += ray.angle(&edge);
            ray = edge;
        }
        here += ray.angle(&to);

        let mut other = Loop::default();
        let mut there = 0.0;
        let (mut t, mut ray) = (enter, from);
        while t != leave {
            let corner = topology.triangles[t as usize].iter().position(|&v| v == vertex)? as u32;
            // The half-edge out of the vertex has it on the right, the one into it on the left.
            let h = if on_left { 3 * t + corner } else { before(3 * t + corner) };
            let twin = topology.twin[h as usize];
            if twin == NONE || other.through.len() > 64 {
                return None;
            }
            let edge = far_end(h);
            there += ray.angle(&edge);
            ray = edge;
            other.through.push(h);
            other.at.push(if on_left { 2.0 * MARGIN } else { 1.0 - 2.0 * MARGIN });
            t = twin / 3;
        }
        there += ray.angle(&to);
        (there < std::f64::consts::PI - 1e-6 && there < here).then_some(other)
    }

    fn replace(&mut self, first: usize, count: usize, other: Loop) {
        let n = self.through.len();
        self.through.rotate_left(first % n);
        self.at.rotate_left(first % n);
        self.through.splice(0..count, other.through);
        self.at.splice(0..count, other.at);
    }

    /// Remove crossings that go through an edge and straight back.
    fn cancel(&mut self, topology: &Topology) {
        let mut k = 0;
        while self.through.len() >= 2 && k < self.through.len() {
            let n = self.through.len();
            let j = (k + 1) % n;
            if topology.twin[self.through[k] as usize] == self.through[j] {
                for index in [k.max(j), k.min(j)] {
                    self.through.remove(index);
                    self.at.remove(index);
                }
                k = 0;
            } else {
                k += 1;
            }
        }
    }
}
