//! Triangulated surfaces of fluid membranes: connectivity, generators and readers, discrete curvature and
//! differential operators, quality, remeshing and conservative remapping.
//!
//! Design choices
//! - Plain arrays: a [`Mesh`] is positions plus triangles; a [`Topology`] is derived from the triangles once
//!   per connectivity; a [`geometry::Geometry`] is computed from both whenever vertices have moved.
//! - `f64`, three dimensions, triangles. No generic scalar, no generic element.
//! - Outward normals; mean curvature H = ½(c₁+c₂), positive on a sphere (2H = 2/R).
//! - Coherent units: nothing here knows about metres or joules.
//! - Tubes periodic along z store wrapped coordinates and a `period`; every edge vector is the nearest image.

#![deny(missing_docs)]

pub mod contact;
pub mod error;
pub mod geometry;
pub mod mesh;
pub mod operators;
pub mod mesh_motion;
pub mod necks;
pub mod pieces;
pub mod remap;
pub mod remesh;

pub use error::MeshError;
pub use mesh::topology::Topology;
pub use mesh::triangles::Mesh;

/// A point or vector in space.
pub type Vec3 = nalgebra::Vector3<f64>;
