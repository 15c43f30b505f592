//! Areas, normals, volume, curvature of a mesh in its present place.

pub mod curvature;
pub mod measure;
pub mod shape_operator;
pub mod stencil;

pub use curvature::{Curvature, CurvatureGradient, RimCondition};
pub use measure::Geometry;
pub use stencil::Stencils;
