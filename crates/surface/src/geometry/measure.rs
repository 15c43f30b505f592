//! First-order geometry: triangle areas, normals, basis gradients, vertex areas, enclosed volume.

use crate::{Mesh, Topology, Vec3};

/// Per-triangle and per-vertex measures of a mesh in its present place.
///
/// Basis gradients g_a satisfy Σ g_a = 0 and ∇f = Σ f_a g_a for linear f on the triangle.
#[derive(Clone, Debug, Default)]
pub struct Geometry {
    /// Triangle areas.
    pub area: Vec<f64>,
    /// Unit normals of triangles.
    pub normal: Vec<Vec3>,
    /// Gradients of the three linear basis functions on each triangle.
    pub gradients: Vec<[Vec3; 3]>,
    /// One third of the area of the triangles around each vertex.
    pub vertex_area: Vec<f64>,
    /// Gradient of the enclosed volume with respect to each vertex: one third of the area vectors around it.
    pub volume_gradient: Vec<Vec3>,
    /// Unit vertex normals, along the volume gradient.
    pub vertex_normal: Vec<Vec3>,
    /// Sum of the triangle areas.
    pub total_area: f64,
    /// Enclosed volume; for a periodic tube ½ Σ (x, y, 0)·N; for an open patch the cone from the origin.
    pub volume: f64,
}

impl Geometry {
    /// Measure a mesh.
    pub fn new(mesh: &Mesh) -> Self {
        let mut geometry = Self::default();
        geometry.update(mesh);
        geometry
    }

    /// Measure again after vertices moved; storage is reused.
    pub fn update(&mut self, mesh: &Mesh) {
        let (n_vertices, n_triangles) = (mesh.n_vertices(), mesh.n_triangles());
        self.area.resize(n_triangles, 0.0);
        self.normal.resize(n_triangles, Vec3::zeros());
        self.gradients.resize(n_triangles, [Vec3::zeros(); 3]);
        self.vertex_area.clear();
        self.vertex_area.resize(n_vertices, 0.0);
        self.volume_gradient.clear();
        self.volume_gradient.resize(n_vertices, Vec3::zeros());
        self.total_area = 0.0;
        self.volume = 0.0;
        let periodic = mesh.period.is_some();
        for (t, corners) in mesh.triangles.iter().enumerate() {
            let x = mesh.corners(t);
            let (ab, ac) = (x[1] - x[0], x[2] - x[0]);
            let cross = ab.cross(&ac);
            let twice_area = cross.norm();
            let normal = cross / twice_area;
            self.area[t] = 0.5 * twice_area;
            self.normal[t] = normal;
            let sides = [x[2] - x[1], -ac, ab];
            for c in 0..3 {
                self.gradients[t][c] = normal.cross(&sides[c]) / twice_area;
            }
            self.total_area += 0.5 * twice_area;
            self.volume += under(&x, &cross, periodic);
            for &v in corners {
                self.vertex_area[v as usize] += twice_area / 6.0;
                self.volume_gradient[v as usize] += cross / 6.0;
            }
        }
        self.vertex_normal.clear();
        self.vertex_normal
            .extend(self.volume_gradient.iter().map(|g| g / g.norm()));
    }

    /// Enclosed volume of each piece; they add up to the whole.
    ///
    /// # Shapes
    /// `topology` must belong to `mesh`. One entry per piece.
    pub fn piece_volumes(&self, mesh: &Mesh, topology: &Topology) -> Vec<f64> {
        if topology.n_pieces == 1 {
            return vec![self.volume];
        }
        let mut volumes = vec![0.0; topology.n_pieces];
        for t in 0..mesh.n_triangles() {
            let x = mesh.corners(t);
            let cross = (x[1] - x[0]).cross(&(x[2] - x[0]));
            volumes[topology.piece_of_triangle(t)] += under(&x, &cross, mesh.period.is_some());
        }
        volumes
    }

    /// Area of each piece.
    ///
    /// # Shapes
    /// As [`Geometry::piece_volumes`].
    pub fn piece_areas(&self, topology: &Topology) -> Vec<f64> {
        if topology.n_pieces == 1 {
            return vec![self.total_area];
        }
        let mut areas = vec![0.0; topology.n_pieces];
        for (t, area) in self.area.iter().enumerate() {
            areas[topology.piece_of_triangle(t)] += area;
        }
        areas
    }
}

/// A triangle's share of the enclosed volume; `cross` is twice its area vector.
#[inline]
fn under(x: &[Vec3; 3], cross: &Vec3, periodic: bool) -> f64 {
    let centre = (x[0] + x[1] + x[2]) / 3.0;
    if periodic {
        0.25 * (centre.x * cross.x + centre.y * cross.y)
    } else {
        centre.dot(cross) / 6.0
    }
}
