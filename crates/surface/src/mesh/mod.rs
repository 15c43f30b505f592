//! Meshes: arrays, connectivity, analytic shapes, files.

pub mod check;
pub mod files;
mod mend;
pub mod shapes;
pub mod topology;
pub mod triangles;
