//! A triangulated surface as plain arrays.

use crate::Vec3;
use serde::{Deserialize, Serialize};

/// Vertex positions and triangles, counter-clockwise seen from outside.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Mesh {
    /// Positions, one per vertex.
    pub positions: Vec<Vec3>,
    /// Vertex indices of each triangle.
    pub triangles: Vec<[u32; 3]>,
    /// Period along z for tubes that close on themselves; `None` otherwise.
    pub period: Option<f64>,
}

impl Mesh {
    /// A mesh that is not periodic.
    pub fn new(positions: Vec<Vec3>, triangles: Vec<[u32; 3]>) -> Self {
        Self {
            positions,
            triangles,
            period: None,
        }
    }

    /// Number of vertices.
    pub fn n_vertices(&self) -> usize {
        self.positions.len()
    }

    /// Number of triangles.
    pub fn n_triangles(&self) -> usize {
        self.triangles.len()
    }

    /// Vector between two points, along the nearest image on a periodic tube.
    #[inline]
    pub fn nearest_image(&self, mut d: Vec3) -> Vec3 {
        if let Some(period) = self.period {
            d.z -= period * (d.z / period).round();
        }
        d
    }

    /// Vector from one vertex to another (nearest image).
    #[inline]
    pub fn edge(&self, from: u32, to: u32) -> Vec3 {
        self.nearest_image(self.positions[to as usize] - self.positions[from as usize])
    }

    /// Corners of a triangle as one connected copy: the first is where it is stored.
    #[inline]
    pub fn corners(&self, triangle: usize) -> [Vec3; 3] {
        let [a, b, c] = self.triangles[triangle];
        let origin = self.positions[a as usize];
        [
            origin,
            origin + self.edge(a, b),
            origin + self.edge(a, c),
        ]
    }

    /// Mean length of the triangles' sides.
    pub fn mean_edge_length(&self) -> f64 {
        let mut sum = 0.0;
        for &[a, b, c] in &self.triangles {
            sum += self.edge(a, b).norm() + self.edge(b, c).norm() + self.edge(c, a).norm();
        }
        sum / (3 * self.triangles.len()).max(1) as f64
    }
}
