//! Amounts on the move: diffusion down chemical potentials, binding and unbinding.

pub mod binding;
pub mod diffusion;
