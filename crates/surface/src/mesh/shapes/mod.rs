//! Meshes of analytic shapes: near-equilateral ones of a wanted edge length, irregular ones for tests, and smooth
//! perturbations.
//!
//! Vertices lie exactly on the smooth surface, so area and volume of the mesh approach those of the surface as
//! (edge length)². Closed shapes are centred at the origin; axes of revolution lie along z.

mod delaunay;
mod disc;
mod ellipsoid;
mod flips;
mod irregular;
mod perturb;
mod red_cell;
mod relax;
mod rings;
mod sphere;
mod surface;
mod torus;
mod tube;

pub use disc::{disc, disc_graded};
pub use ellipsoid::{ellipsoid, oblate, prolate};
pub use irregular::{irregular_ellipsoid, irregular_sphere, irregular_torus, irregular_tube};
pub use perturb::{displace_mode_tube, perturb};
pub use red_cell::{RedCellShape, red_cell};
pub use sphere::sphere;
pub use torus::torus;
pub use tube::{capped_tube, tube};

use crate::{Mesh, MeshError, Topology};
use surface::Surface;

/// More vertices than this are refused: a run with them would not fit in memory.
const MAX_VERTICES: f64 = 2e6;

/// Refuse what is not a positive, finite number.
fn positive(quantity: &'static str, value: f64) -> Result<f64, MeshError> {
    if value > 0.0 && value.is_finite() {
        Ok(value)
    } else {
        Err(MeshError::Impossible {
            quantity,
            value,
            mend: "give a positive, finite number".into(),
        })
    }
}

/// Refuse an edge so short that the mesh would get too many vertices for its `area`.
fn affordable(edge: f64, area: f64) -> Result<f64, MeshError> {
    let vertices = area / (0.75f64.sqrt() * edge * edge);
    if vertices <= MAX_VERTICES {
        return Ok(edge);
    }
    Err(MeshError::Impossible {
        quantity: "edge length",
        value: edge,
        mend: format!(
            "the mesh would get {vertices:.2e} vertices (at most {MAX_VERTICES:.0e}); use an edge above {:.3e}",
            edge * (vertices / MAX_VERTICES).sqrt()
        ),
    })
}

/// Make sure that a generated mesh really is the wanted surface: manifold, of the right Euler characteristic, no
/// triangle turned over or degenerate.
fn finished(
    mesh: Mesh,
    surface: &dyn Surface,
    characteristic: i64,
    edge: f64,
) -> Result<Mesh, MeshError> {
    let too_coarse = |what: String| MeshError::Impossible {
        quantity: "edge length",
        value: edge,
        mend: format!("{what}: the shape is too finely curved for it; use a shorter edge"),
    };
    let found = Topology::new(mesh.n_vertices(), &mesh.triangles)
        .map_err(|error| too_coarse(error.to_string()))?
        .euler_characteristic();
    if found != characteristic {
        return Err(too_coarse(format!(
            "the Euler characteristic came out as {found} instead of {characteristic}"
        )));
    }
    for t in 0..mesh.n_triangles() {
        let [a, b, c] = mesh.corners(t);
        let cross = (b - a).cross(&(c - a));
        let normal = surface.normal(surface.project((a + b + c) / 3.0));
        let longest = (b - a).norm().max((c - b).norm()).max((a - c).norm());
        let upright = cross.dot(&normal);
        // 0.02: a triangle with an angle near one degree.
        if upright.is_nan() || upright <= 0.02 * longest * longest {
            return Err(too_coarse(format!("triangle {t} came out degenerate")));
        }
    }
    Ok(mesh)
}
