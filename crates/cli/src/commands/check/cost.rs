//! What a run will take of memory and time.

use pellicle_physics::step::preconditioner::Way;

/// Memory per vertex with a factor of the coupled matrix [byte]: factors, fields, copies for refused steps.
const DIRECT_BYTES: f64 = 40e3;
/// The same with iterations.
const ITERATIVE_BYTES: f64 = 17e3;
/// Vertices of the run that [`SECONDS_PER_STEP`] was measured on.
const MEASURED_VERTICES: f64 = 2562.0;
/// Time of a step at [`MEASURED_VERTICES`] on one thread of a two-core machine [s]; refused steps, changes of the mesh
/// and files come on top.
const SECONDS_PER_STEP: f64 = 0.13;
/// How the time grows with the number of vertices: factorisation of a planar graph (V^1.5 in the limit) and parts
/// that are linear; with iterations nearly linear.
const GROWTH: f64 = 1.3;

/// What the estimate rests on, for people.
pub const BASIS: &str = "from 0.13 s per step at 2562 vertices on one thread of a two-core machine, growing as V^1.3";

/// Memory and time of a mesh.
#[derive(Clone, Copy, Debug)]
pub struct Cost {
    /// Vertices.
    pub vertices: usize,
    /// How linear systems are solved.
    pub way: Way,
    /// Memory [byte].
    pub bytes: f64,
    /// Time of a step [s].
    pub seconds_per_step: f64,
}

/// Estimate memory and time of a mesh.
pub fn cost(vertices: usize) -> Cost {
    let v = vertices as f64;
    let way = Way::for_vertices(vertices);
    let bytes = match way {
        Way::Direct => DIRECT_BYTES,
        Way::Iterative => ITERATIVE_BYTES,
    };
    Cost {
        vertices,
        way,
        bytes: bytes * v,
        seconds_per_step: SECONDS_PER_STEP * (v / MEASURED_VERTICES).powf(GROWTH),
    }
}
