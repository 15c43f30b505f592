//! Energies and forces of a bare mesh.

use pellicle_physics::coupling::MaterialFields;
use pellicle_physics::energy::bending;
use pellicle_surface::geometry::{Curvature, CurvatureGradient, Geometry, RimCondition, Stencils};
use pellicle_surface::{Mesh, MeshError, Topology, Vec3};

/// A mesh with all that is needed for its bending energy.
pub struct Bare {
    pub mesh: Mesh,
    pub topology: Topology,
    pub stencils: Stencils,
    pub geometry: Geometry,
    pub curvature: Curvature,
}

impl Bare {
    pub fn new(mesh: Mesh) -> Result<Self, MeshError> {
        let topology = Topology::new(mesh.n_vertices(), &mesh.triangles)?;
        let stencils = Stencils::new(&topology);
        let geometry = Geometry::new(&mesh);
        let curvature = Curvature::new(&mesh, &topology, &geometry, RimCondition::Free);
        Ok(Self { mesh, topology, stencils, geometry, curvature })
    }

    /// Measure again after moving vertices.
    pub fn update(&mut self) {
        self.geometry.update(&self.mesh);
        self.curvature.update(&self.mesh, &self.topology, &self.geometry, RimCondition::Free);
    }

    /// Unit rigidity, spontaneous curvature C.
    pub fn material(&self, spontaneous: f64) -> MaterialFields {
        let n = self.mesh.n_vertices();
        MaterialFields {
            bending_rigidity: vec![1.0; n],
            spontaneous_curvature: vec![spontaneous; n],
            gaussian_modulus: vec![0.0; n],
            shear_viscosity: vec![1.0; n],
        }
    }

    /// ∫ ½ (2H − C)² dA.
    pub fn bending(&self, spontaneous: f64) -> f64 {
        bending::energy(&self.curvature, &self.material(spontaneous), &vec![false; self.mesh.n_vertices()])
    }

    /// Rows of the bending residuals and gradient of the bending energy.
    pub fn bending_rows_and_gradient(&self, spontaneous: f64) -> (Vec<Vec3>, Vec<Vec3>) {
        let n = self.mesh.n_vertices();
        let mut derivative = CurvatureGradient::default();
        derivative.update(&self.mesh, &self.topology, &self.stencils, &self.geometry, RimCondition::Free);
        let (mut rows, mut gradient) = (Vec::new(), vec![Vec3::zeros(); n]);
        bending::rows_and_gradient(
            &self.stencils,
            &self.curvature,
            &derivative,
            &self.material(spontaneous),
            &vec![false; n],
            &vec![false; n],
            &mut rows,
            &mut gradient,
        );
        (rows, gradient)
    }
}
