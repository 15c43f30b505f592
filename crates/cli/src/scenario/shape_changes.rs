//! Large changes of shape: self-contact and thin necks.

use super::values::Values;
use crate::setup::Scales;
use crate::units::measure as m;
use pellicle_physics::parameters::{Fission, Repulsion, SelfContact};

/// Radius [m] of necks below which a bilayer, about 4 nm thick, has no mid-surface.
pub const THINNEST_NECK: f64 = 5e-9;

/// The radius at which a thin neck ends the run, or is severed: thinner ones are neither resolved nor membranes with a
/// mid-surface.
pub fn fill(values: &mut Values) {
    let thinnest = THINNEST_NECK.max(2.0 * values.number("mesh.shortest_edge").unwrap_or(0.0));
    let key = if values.has_section("fission") { "fission.neck_radius" } else { "stop.neck_radius" };
    values.fill(key, thinnest, "default: 5 nm or two mesh.shortest_edge, whichever is more");
}

/// What happens where the membrane meets itself.
pub fn self_contact(values: &Values, scales: &Scales) -> SelfContact {
    let get = |path: &str, measure| values.number(path).unwrap_or(0.0) / scales.of(&measure);
    match values.text("self_contact.response") {
        "repel" => SelfContact::Repel(Repulsion {
            pressure: get("self_contact.pressure", m::PRESSURE),
            decay_length: get("self_contact.decay_length", m::LENGTH),
        }),
        _ => SelfContact::Stop,
    }
}

/// Whether necks are severed.
pub fn fission(values: &Values, scales: &Scales) -> Option<Fission> {
    let radius = values.number("fission.neck_radius")?;
    values.has_section("fission").then(|| Fission { neck_radius: radius / scales.of(&m::LENGTH) })
}
