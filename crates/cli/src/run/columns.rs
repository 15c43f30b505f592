//! The columns of `series.csv` and `summary.json`, in SI.

use super::cursor::Cursor;
use super::plan::Plan;
use pellicle_physics::Simulation;
use pellicle_physics::diagnostics::Diagnostics;
use pellicle_physics::parameters::{SelfContact, VolumeCondition};
use serde_json::{Map, Number, Value};

/// Names of the columns, in order.
pub const COLUMNS: [&str; 37] = [
    "time_s",
    "step_s",
    "free_energy_J",
    "bending_energy_J",
    "gaussian_energy_J",
    "phase_energy_J",
    "protein_energy_J",
    "stretching_energy_J",
    "repulsion_energy_J",
    "external_work_J",
    "dissipated_J",
    "mesh_energy_J",
    "severing_energy_J",
    "energy_balance_error",
    "area_m2",
    "volume_m3",
    "reduced_volume",
    "pressure_Pa",
    "tension_mean_N_per_m",
    "tension_min_N_per_m",
    "tension_max_N_per_m",
    "speed_max_m_per_s",
    "composition_mean",
    "composition_total_m2",
    "piece_count",
    "domain_count",
    "interface_length_m",
    "coverage_mean",
    "bound_area_m2",
    "neck_radius_m",
    "load_force_N",
    "load_extension_m",
    "foppl_von_karman",
    "scriven_love",
    "vertex_count",
    "quality_min",
    "edge_length_mean_m",
];

/// One row: a value per column; what a scenario does not have, or what is not finite, is absent.
#[derive(Clone, Debug, PartialEq)]
pub struct Row([Option<f64>; COLUMNS.len()]);

impl Row {
    /// Measure the present state of a simulation.
    pub fn measure(plan: &Plan, simulation: &Simulation, seen: &Diagnostics, cursor: &Cursor) -> Self {
        let scales = &plan.scales;
        let (length, energy, time) = (scales.length, scales.energy, scales.time);
        let area = length * length;
        let (parameters, state, energies) = (&simulation.parameters, &simulation.state, &simulation.energies);
        let ledger = &state.ledger;
        let moved = ledger.accepted > 0;
        let loaded = !parameters.loads.is_empty();
        let driven = loaded || matches!(&parameters.volume, VolumeCondition::Fixed(path) if path.len() > 1);
        let gaussian = {
            let modulus = &parameters.gaussian_modulus;
            !(modulus.is_uniform() && modulus.at_zero == 0.0)
        };
        let tension = |value: f64| value * energy / area;
        let count = |value: usize| value as f64;
        let mut row = [
            Some(state.time * time),
            cursor.last_step.map(|step| step * time),
            Some(energies.total() * energy),
            Some(energies.bending * energy),
            gaussian.then_some(energies.gaussian * energy),
            parameters.phases.map(|_| energies.phase * energy),
            parameters.protein.map(|_| energies.protein * energy),
            Some(energies.stretching * energy),
            matches!(parameters.self_contact, SelfContact::Repel(_)).then_some(energies.repulsion * energy),
            driven.then_some(ledger.work * energy),
            Some(ledger.dissipated * energy),
            Some(ledger.mesh_energy * energy),
            parameters.fission.map(|_| ledger.severing * energy),
            Some(simulation.energy_balance_error()),
            Some(seen.area * area),
            seen.volume.map(|v| v * area * length),
            seen.reduced_volume,
            seen.pressure.map(|p| p * energy / (area * length)),
            Some(tension(seen.tension_mean)),
            Some(tension(seen.tension_min)),
            Some(tension(seen.tension_max)),
            moved.then_some(seen.speed_max * length / time),
            seen.composition_mean,
            seen.composition_total.map(|a| a * area),
            Some(count(seen.pieces.len())),
            seen.domain_count.map(count),
            seen.interface_length.map(|l| l * length),
            seen.coverage_mean,
            seen.bound_area.map(|a| a * area),
            seen.neck_radius.map(|r| r * length),
            seen.load_force().filter(|_| loaded && moved).map(|f| f * energy / length),
            seen.load_extension().filter(|_| loaded).map(|x| x * length),
            seen.foppl_von_karman,
            seen.scriven_love.filter(|_| moved),
            Some(count(seen.vertex_count)),
            Some(seen.quality_min),
            Some(seen.edge_length_mean * length),
        ];
        for value in &mut row {
            *value = value.filter(|v| v.is_finite());
        }
        Self(row)
    }

    /// The value of a column.
    pub fn get(&self, column: &str) -> Option<f64> {
        COLUMNS.iter().position(|name| *name == column).and_then(|k| self.0[k])
    }

    /// The cells as text that reads back as the same numbers.
    pub fn cells(&self) -> impl Iterator<Item = String> + '_ {
        self.0.iter().zip(COLUMNS).map(|(value, name)| match value {
            None => String::new(),
            Some(value) if name.ends_with("_count") => format!("{value}"),
            Some(value) => format!("{value:e}"),
        })
    }

    /// As a JSON object; what is absent is null.
    pub fn to_json(&self) -> Value {
        let cell = |(name, value): (&str, &Option<f64>)| {
            let value = match value {
                Some(count) if name.ends_with("_count") => Value::from(*count as u64),
                Some(value) => Number::from_f64(*value).map_or(Value::Null, Value::Number),
                None => Value::Null,
            };
            (name.to_owned(), value)
        };
        Value::Object(COLUMNS.into_iter().zip(&self.0).map(cell).collect::<Map<_, _>>())
    }
}
