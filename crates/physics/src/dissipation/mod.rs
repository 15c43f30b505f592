//! What resists motion: in-plane viscosity, the surroundings, and the lipid exchange that stabilises tension.

pub mod boussinesq_scriven;
pub mod surroundings;
pub mod tension_stabilisation;
