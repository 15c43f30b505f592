//! One step: pattern → assembly → borders → solve → mesh motion and remap → accept or refuse.

pub mod advance;
pub mod assemble;
pub mod borders;
pub mod connectivity;
pub mod control;
pub mod exchange;
mod fairing;
pub mod forces;
pub mod mechanics;
pub mod memory;
pub mod mesh_care;
pub mod pattern;
pub mod rezone;
mod settling;
pub mod severing;
pub mod touching;
