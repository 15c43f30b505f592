//! Start meshes of tubes, discs, tori and everything round: rings of vertices along a profile, zipped together.

use crate::{Mesh, MeshError, Vec3};
use std::f64::consts::TAU;

/// A surface swept by the curve (ρ, z): its points are (s₁ ρ cos φ, s₂ ρ sin φ, z).
pub(super) struct Profile<'a> {
    /// Points (ρ, z) of a fine polyline. It runs so that (direction of rotation) × (direction of the curve) points
    /// outward: upwards on the outside.
    pub points: Vec<[f64; 2]>,
    /// Whether the last point joins the first.
    pub closed: bool,
    /// Stretch factors s₁, s₂ of the rings: [1, 1] for a surface of revolution.
    pub section: [f64; 2],
    /// Wanted edge length at (ρ, z).
    pub edge_length: &'a dyn Fn(f64, f64) -> f64,
}

/// A ring of vertices at one place of the profile.
struct Ring {
    rho: f64,
    z: f64,
    /// Number of vertices; 1 on the axis.
    count: usize,
    /// Where the first vertex lies, as a share of the circumference.
    offset: f64,
    /// Index of the first vertex.
    first: usize,
}

impl Profile<'_> {
    /// Mesh of rings: rows √3/2 edges apart, vertices one edge apart along each ring.
    ///
    /// The vertices of a profile that starts at a rim begin with that rim.
    ///
    /// # Errors
    /// [`MeshError::Impossible`] when the edge is too long for three rows or for six vertices at the widest ring.
    pub fn mesh(&self) -> Result<Mesh, MeshError> {
        let round = Circumference::new(self.section);
        let wanted = self.vertices_wanted(&round);
        // Rounding rows and rings to whole numbers changes the vertex count; try nearby sizes for the best one.
        let mut best: Option<(f64, Vec<Ring>)> = None;
        for step in 0..=40 {
            let sign = if step % 2 == 0 { 1.0 } else { -1.0 };
            let rings = self.rings(&round, 1.0 + sign * 0.0025 * f64::from((step + 1) / 2))?;
            let count: usize = rings.iter().map(|ring| ring.count).sum();
            let miss = (count as f64 / wanted - 1.0).abs();
            if best.as_ref().is_none_or(|(least, _)| miss < least - 1e-3) {
                best = Some((miss, rings));
            }
        }
        let mut rings = best.map(|(_, rings)| rings).unwrap_or_default();
        let mut positions: Vec<Vec3> = Vec::new();
        for ring in &mut rings {
            ring.first = positions.len();
            for i in 0..ring.count {
                let share = ring.offset + i as f64 / ring.count as f64;
                let (sine, cosine) = round.angle(share).sin_cos();
                positions.push(Vec3::new(
                    self.section[0] * ring.rho * cosine,
                    self.section[1] * ring.rho * sine,
                    ring.z,
                ));
            }
        }
        let mut triangles = Vec::with_capacity(2 * positions.len());
        for pair in rings.windows(2) {
            zip(&pair[0], &pair[1], &positions, &mut triangles);
        }
        if let (true, Some(first), Some(last)) = (self.closed, rings.first(), rings.last()) {
            zip(last, first, &positions, &mut triangles);
        }
        Ok(Mesh::new(positions, triangles))
    }

    /// Middle (ρ, z) and length of each segment of the polyline. On an ellipse the length is a mean round the ring
    /// such that length times circumference is the area where the surface lies flat.
    fn segments(&self, round: &Circumference) -> Vec<(f64, f64, f64)> {
        let n = self.points.len();
        let [s1, s2] = self.section;
        let stretch = TAU * s1 * s2 / round.length;
        (0..if self.closed { n } else { n - 1 })
            .map(|i| {
                let (a, b) = (self.points[i], self.points[(i + 1) % n]);
                let (along_rho, along_z) = (b[0] - a[0], b[1] - a[1]);
                let length = (stretch * along_rho).hypot(along_z);
                (0.5 * (a[0] + b[0]), 0.5 * (a[1] + b[1]), length)
            })
            .collect()
    }

    /// Vertices of an ideal mesh: two triangles of √3/4 h² for each, corrected for rim and poles.
    fn vertices_wanted(&self, round: &Circumference) -> f64 {
        let mut vertices = 0.0;
        for (rho, z, length) in self.segments(round) {
            let h = (self.edge_length)(rho, z);
            vertices += round.length * rho * length / (0.75f64.sqrt() * h * h);
        }
        if self.closed {
            return vertices;
        }
        for [rho, z] in [self.points[0], self.points[self.points.len() - 1]] {
            // V = F/2 + χ + (rim vertices)/2; an end on the axis counts as half of χ = 2.
            vertices += if rho > 0.0 {
                0.5 * round.length * rho / (self.edge_length)(rho, z)
            } else {
                1.0
            };
        }
        vertices
    }

    /// Places and counts of the rings for edges `scale` times as long as wanted.
    fn rings(&self, round: &Circumference, scale: f64) -> Result<Vec<Ring>, MeshError> {
        let row = 0.75f64.sqrt() * scale;
        let mut along = vec![0.0];
        let mut total = 0.0;
        for (rho, z, length) in self.segments(round) {
            total += length / (row * (self.edge_length)(rho, z));
            along.push(total);
        }
        let rows = total.round().max(1.0) as usize;
        let n_rings = if self.closed { rows } else { rows + 1 };
        let mut rings: Vec<Ring> = Vec::with_capacity(n_rings);
        let mut segment = 0;
        for index in 0..n_rings {
            let place = total * index as f64 / rows as f64;
            while segment + 2 < along.len() && along[segment + 1] < place {
                segment += 1;
            }
            let a = self.points[segment];
            let b = self.points[(segment + 1) % self.points.len()];
            let share = (place - along[segment]) / (along[segment + 1] - along[segment]);
            let share = share.clamp(0.0, 1.0);
            let (rho, z) = (a[0] + share * (b[0] - a[0]), a[1] + share * (b[1] - a[1]));
            let h = (self.edge_length)(rho, z) * scale;
            let count = if rho * round.length < 1e-6 * h {
                1
            } else {
                ((rho * round.length / h).round() as usize).max(3)
            };
            // Half a step further than the ring before.
            let offset = rings
                .last()
                .map_or(0.0, |before| before.offset + 0.5 / count as f64);
            rings.push(Ring {
                rho,
                z,
                count,
                offset,
                first: 0,
            });
        }
        let widest = rings.iter().map(|ring| ring.count).max().unwrap_or(0);
        if rows < 3 || widest < 6 {
            let value = (self.edge_length)(self.points[0][0], self.points[0][1]);
            return Err(MeshError::Impossible {
                quantity: "edge length",
                value,
                mend: format!(
                    "the shape would get {rows} rows of at most {widest} vertices; use an edge below {:.3e}",
                    value * (total / 3.6).min(widest as f64 / 6.6)
                ),
            });
        }
        Ok(rings)
    }
}

impl Ring {
    fn vertex(&self, i: usize) -> u32 {
        (self.first + i % self.count) as u32
    }
}

/// Arc length round the ellipse (s₁ cos φ, s₂ sin φ).
struct Circumference {
    /// Arc length up to φ = 2π i/(n − 1), as a share of the whole.
    share: Vec<f64>,
    /// Whole length.
    length: f64,
}

impl Circumference {
    fn new([s1, s2]: [f64; 2]) -> Self {
        // Midpoint sums of a smooth periodic integrand converge faster than any power.
        const N: usize = 2048;
        let mut share = vec![0.0];
        let mut length = 0.0;
        for i in 0..N {
            let (sine, cosine) = (TAU * (i as f64 + 0.5) / N as f64).sin_cos();
            length += (s1 * sine).hypot(s2 * cosine) * TAU / N as f64;
            share.push(length);
        }
        share.iter_mut().for_each(|s| *s /= length);
        Self { share, length }
    }

    /// Angle φ at which a share of the circumference is covered.
    fn angle(&self, share: f64) -> f64 {
        let turns = share.floor();
        let rest = share - turns;
        let n = self.share.len() - 1;
        let i = self.share.partition_point(|&s| s <= rest).clamp(1, n) - 1;
        let part = (rest - self.share[i]) / (self.share[i + 1] - self.share[i]);
        TAU * (turns + (i as f64 + part) / n as f64)
    }
}

/// Fill the band between two rings with triangles, always taking the shorter diagonal.
fn zip(lower: &Ring, upper: &Ring, positions: &[Vec3], triangles: &mut Vec<[u32; 3]>) {
    let steps = |ring: &Ring| if ring.count == 1 { 0 } else { ring.count };
    let distance = |a: u32, b: u32| (positions[a as usize] - positions[b as usize]).norm();
    let start = (0..upper.count)
        .min_by(|&a, &b| {
            let of = |j| distance(lower.vertex(0), upper.vertex(j));
            of(a).total_cmp(&of(b))
        })
        .unwrap_or(0);
    let (mut i, mut j) = (0, 0);
    while i < steps(lower) || j < steps(upper) {
        let (a, b) = (lower.vertex(i), upper.vertex(start + j));
        let (next_a, next_b) = (lower.vertex(i + 1), upper.vertex(start + j + 1));
        let lower_next =
            i < steps(lower) && (j == steps(upper) || distance(next_a, b) <= distance(a, next_b));
        if lower_next {
            triangles.push([a, next_a, b]);
            i += 1;
        } else {
            triangles.push([a, next_b, b]);
            j += 1;
        }
    }
}
