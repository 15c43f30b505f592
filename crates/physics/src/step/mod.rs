//! One step: pattern → assembly → borders → solve → mesh motion and remap → accept or refuse.

pub mod advance;
pub mod assemble;
pub mod borders;
pub mod control;
pub mod mechanics;
pub mod pattern;
