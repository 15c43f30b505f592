//! One step: pattern → assembly → borders → solve → mesh motion and remap → accept or refuse.

pub mod advance;
pub mod assemble;
pub mod borders;
pub mod connectivity;
pub mod control;
pub mod exchange;
mod fairing;
pub mod forces;
pub mod linear;
pub mod mechanics;
pub mod memory;
pub mod mesh_care;
mod narrowing;
pub mod pattern;
pub mod preconditioner;
pub mod rezone;
mod ring;
mod settling;
pub mod severing;
pub mod split;
pub mod touching;
