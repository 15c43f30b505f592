//! Coupled motion of a curved fluid membrane on one page.
//!
//! The free energy F(shape, lipids, composition, coverage) is bending (Helfrich), phases (Cahn–Hilliard), bound
//! protein (lattice gas), lipid stretching, and the reservoirs around. The dissipation is in-plane viscosity
//! (Boussinesq–Scriven), drag of the surroundings, diffusion and binding. Minimising dissipation + dF/dt over all
//! rates (Onsager's principle) gives every balance at once:
//!
//! - K v + ξ v + ∂F/∂x + Bᵀ λ − p ∇V = load,    momentum; λ keeps the lipids' area
//! - d(area)/dt = B v = d(lipid)/dt (1 + λ/K_A),    nearly incompressible lipids
//! - m dφ/dt = ∇·(M ∇μ),  μ = ∂F/∂φ,    conserved composition
//! - dθ/dt = attach (1 − θ) − detach θ exp(∂f/∂θ a_p/kT) + diffusion,    bound protein
//!
//! One [`step`] takes them in turn: composition and protein on the frozen shape, then one linearised solve for
//! velocity, tension and pressure, then the mesh slides along the moved surface and everything carried by the
//! lipids is remapped. Data flow: parameters + state → energy and dissipation → step → diagnostics.
//!
//! Coherent units throughout; nothing here knows about metres or joules.

#![deny(missing_docs)]
#![allow(clippy::needless_range_loop, clippy::too_many_arguments)]

pub mod coupling;
pub mod diagnostics;
pub mod dissipation;
pub mod energy;
pub mod error;
pub mod parameters;
pub mod state;
pub mod step;
pub mod transport;

pub use energy::Energies;
pub use error::PhysicsError;
pub use parameters::Parameters;
pub use state::State;
pub use step::advance::{Simulation, StepReport};
