//! Free energy: one law per file, each with its exact derivatives.

pub mod bending;
pub mod gaussian;
pub mod interface;
pub mod protein;
pub mod repulsion;
pub mod reservoirs;
pub mod stretching;
pub mod total;

pub use total::Energies;
