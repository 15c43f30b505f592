//! Energies of what stands around the membrane: pressure, osmotic baths.
//!
//! # Source
//! van 't Hoff (1887): Π = c kT for dilute solutes.

use crate::parameters::VolumeCondition;

/// Pressure difference inside − outside that the surroundings offer at a volume; `None` where the volume is held.
pub fn offered_pressure(condition: &VolumeCondition, volume: f64) -> Option<f64> {
    match condition {
        VolumeCondition::Pressure(pressure) => Some(*pressure),
        VolumeCondition::Fixed(_) => None,
        VolumeCondition::Osmotic { inside, outside, .. } => Some(inside / volume - outside),
    }
}

/// Energy of the surroundings: −pV, or −N kT ln V + c kT V.
pub fn energy(condition: &VolumeCondition, volume: f64) -> f64 {
    match condition {
        VolumeCondition::Pressure(pressure) => -pressure * volume,
        VolumeCondition::Fixed(_) => 0.0,
        VolumeCondition::Osmotic { inside, outside, .. } => -inside * volume.ln() + outside * volume,
    }
}
