//! Energies of what stands around the membrane: pressure, osmotic baths.
//!
//! # Source
//! van 't Hoff (1887): Π = c kT for dilute solutes.

use crate::parameters::VolumeCondition;

/// Pressure difference inside − outside that the surroundings offer to a piece of membrane with a volume and a share of
/// what is dissolved inside; `None` where the volume is held.
pub fn offered_pressure(condition: &VolumeCondition, volume: f64, share: f64) -> Option<f64> {
    match condition {
        VolumeCondition::Pressure(pressure) => Some(*pressure),
        VolumeCondition::Fixed(_) => None,
        VolumeCondition::Osmotic { inside, outside, .. } => Some(inside * share / volume - outside),
    }
}

/// Energy of the surroundings of a piece: −pV, or −N kT ln(V/share) + c kT V. (The share under the logarithm is the part
/// of N ln N that pieces do not have in common: parting a solution of one concentration costs nothing.)
pub fn energy(condition: &VolumeCondition, volume: f64, share: f64) -> f64 {
    match condition {
        VolumeCondition::Pressure(pressure) => -pressure * volume,
        VolumeCondition::Fixed(_) => 0.0,
        VolumeCondition::Osmotic { inside, outside, .. } => {
            -inside * share * (volume / share).ln() + outside * volume
        }
    }
}
