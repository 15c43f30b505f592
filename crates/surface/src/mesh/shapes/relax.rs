//! Tangential relaxation of generated vertices towards equilateral triangles of a wanted size.

use super::flips::flip_to_delaunay;
use super::surface::Surface;
use crate::{Mesh, MeshError, Topology, Vec3};

/// How vertices move in one relaxation step.
#[derive(Clone, Copy, PartialEq)]
pub(super) enum Rule {
    /// To the area-weighted mean of the circumcentres around (optimal Delaunay triangulation).
    Circumcentres,
    /// To the area-weighted mean of the centroids around (close to Lloyd's method).
    Centroids,
}

/// Everything that keeps a relaxation on course.
pub(super) struct Relaxation<'a> {
    /// Where the vertices belong.
    pub surface: &'a dyn Surface,
    /// Vertices that stay where they are; empty for none.
    pub fixed: &'a [bool],
    /// Wanted edge length at a point; `None` for the same everywhere.
    pub edge_length: Option<&'a dyn Fn(&Vec3) -> f64>,
    /// Whether edges may flip to keep the mesh Delaunay.
    pub flip: bool,
}

impl Relaxation<'_> {
    /// Do `steps` steps of `rule`.
    ///
    /// # Errors
    /// Those of [`Topology::new`].
    /// # Source
    /// Circumcentres: Chen & Xu, J. Comput. Math. 22 (2004) 299; Alliez, Cohen-Steiner, Yvinec & Desbrun, ACM
    /// Trans. Graph. 24 (2005) 617. Centroids: Du, Faber & Gunzburger, SIAM Rev. 41 (1999) 637.
    pub fn run(&self, mesh: &mut Mesh, rule: Rule, steps: usize) -> Result<(), MeshError> {
        for vertex in 0..mesh.n_vertices() {
            if !self.is_fixed(vertex) {
                mesh.positions[vertex] = self.surface.project(mesh.positions[vertex]);
            }
        }
        let mut twin = Topology::new(mesh.n_vertices(), &mesh.triangles)?.twin;
        for step in 0..=steps {
            if step > 0 {
                self.step(mesh, rule);
            }
            if self.flip {
                flip_to_delaunay(mesh, &mut twin);
            }
        }
        Ok(())
    }

    fn is_fixed(&self, vertex: usize) -> bool {
        self.fixed.get(vertex).copied().unwrap_or(false)
    }

    fn step(&self, mesh: &mut Mesh, rule: Rule) {
        let mut shift = vec![Vec3::zeros(); mesh.n_vertices()];
        let mut weight = vec![0.0; mesh.n_vertices()];
        for (t, &triangle) in mesh.triangles.iter().enumerate() {
            let [a, b, c] = mesh.corners(t);
            let centroid = (a + b + c) / 3.0;
            let (ab, ac) = (b - a, c - a);
            let cross = ab.cross(&ac);
            let square = cross.norm_squared();
            if square == 0.0 {
                continue;
            }
            let target = match rule {
                Rule::Centroids => centroid,
                Rule::Circumcentres => {
                    let centre = (ac.cross(&cross) * ab.norm_squared()
                        + cross.cross(&ab) * ac.norm_squared())
                        / (2.0 * square);
                    a + centre
                }
            };
            // In two dimensions the density h⁻⁴ makes the spacing follow h for both rules.
            let density = self.edge_length.map_or(1.0, |h| h(&centroid).powi(-4));
            let mass = square.sqrt() * density;
            for (vertex, corner) in triangle.into_iter().zip([a, b, c]) {
                shift[vertex as usize] += (target - corner) * mass;
                weight[vertex as usize] += mass;
            }
        }
        for vertex in 0..mesh.n_vertices() {
            if self.is_fixed(vertex) || weight[vertex] == 0.0 {
                continue;
            }
            let place = mesh.positions[vertex];
            let normal = self.surface.normal(place);
            let full = shift[vertex] / weight[vertex];
            let tangential = full - normal * full.dot(&normal);
            mesh.positions[vertex] = self.surface.project(place + tangential);
        }
    }
}

/// The relaxation that all near-equilateral closed shapes get.
///
/// # Errors
/// Those of [`Topology::new`].
pub(super) fn settle(mesh: &mut Mesh, surface: &dyn Surface) -> Result<(), MeshError> {
    let relaxation = Relaxation {
        surface,
        fixed: &[],
        edge_length: None,
        flip: true,
    };
    relaxation.run(mesh, Rule::Circumcentres, 60)
}
