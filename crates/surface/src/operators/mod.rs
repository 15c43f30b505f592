//! Discrete differential operators on the surface, for linear triangles with fields at vertices.
//!
//! Matrices are sparse and act on vertex fields; fields of vectors are stacked vertex by vertex, (x, y, z) of
//! vertex i in rows 3i, 3i + 1, 3i + 2. Periodic meshes need no care: basis gradients and areas come from
//! nearest images. `geometry` must belong to `mesh`.

pub mod gradient;
pub mod laplace_beltrami;
pub mod mass;
pub mod strain;

pub use gradient::{divergence, gradient, gradient_matrix};
pub use laplace_beltrami::{laplace_beltrami, stiffness};
pub use mass::{consistent_mass, lumped_mass};
pub use strain::{strain_rate, strain_rates};

use crate::Mesh;
use nalgebra_sparse::{CooMatrix, CsrMatrix};

/// Sum a 3×3 block per triangle, `block(t)[a][b]` for corners a (row) and b (column).
fn assemble(mesh: &Mesh, block: impl Fn(usize) -> [[f64; 3]; 3]) -> CsrMatrix<f64> {
    let n = mesh.n_vertices();
    let mut sum = CooMatrix::new(n, n);
    for (t, corners) in mesh.triangles.iter().enumerate() {
        let entries = block(t);
        for a in 0..3 {
            for b in 0..3 {
                sum.push(corners[a] as usize, corners[b] as usize, entries[a][b]);
            }
        }
    }
    CsrMatrix::from(&sum)
}
