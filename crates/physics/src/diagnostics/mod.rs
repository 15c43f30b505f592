//! What is read off a state: the numbers of one row of a time series, and fields for viewing.
//!
//! Every value is in the coherent units of the run. What a run does not have is `None`.

pub mod domains;
pub mod fields;
pub mod pieces;

pub use fields::{Fields, chemical_potential, fields};
pub use pieces::{PieceReading, pieces};

use crate::parameters::{Load, Pull, VolumeCondition};
use crate::step::advance::Simulation;
use pellicle_surface::Vec3;
use pellicle_surface::necks::{self, Neck};
use pellicle_surface::remesh::quality;
use std::f64::consts::PI;

/// One load as it acts now, seen along its pull direction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LoadReading {
    /// Unit pull direction: that of the first point of the pull's path that is not zero.
    pub direction: Vec3,
    /// Force on the membrane along the direction [energy/length].
    pub force: f64,
    /// Displacement of the patch since the start along the direction [length].
    pub extension: f64,
}

/// Everything of a row that is not an energy.
#[derive(Clone, Debug, PartialEq)]
pub struct Diagnostics {
    /// Area of the surface; of one period of a tube.
    pub area: f64,
    /// Enclosed volume, of one period of a tube; `None` when the surface is open.
    pub volume: Option<f64>,
    /// 6√π V/A^(3/2), 1 for a sphere, of the piece with the largest area; `None` unless that closes in space.
    pub reduced_volume: Option<f64>,
    /// Every connected piece.
    pub pieces: Vec<PieceReading>,
    /// Pressure inside − outside [energy/volume]. `None` on an open patch without a given pressure, and before
    /// the first step where it is the multiplier of a fixed volume.
    pub pressure: Option<f64>,
    /// Area-weighted mean of the membrane's tension [energy/area].
    pub tension_mean: f64,
    /// Its smallest value.
    pub tension_min: f64,
    /// Its largest value.
    pub tension_max: f64,
    /// Largest material speed [length/time].
    pub speed_max: f64,
    /// Σ φ m / Σ m.
    pub composition_mean: Option<f64>,
    /// Σ φ m [area].
    pub composition_total: Option<f64>,
    /// Number of domains of the minority phase, see [`domains::count`].
    pub domain_count: Option<usize>,
    /// Length of the line φ = ½ [length].
    pub interface_length: Option<f64>,
    /// Σ θ m / Σ m.
    pub coverage_mean: Option<f64>,
    /// Σ θ m [area].
    pub bound_area: Option<f64>,
    /// Radius (length/2π) of the thinnest neck; `None` without necks.
    pub neck_radius: Option<f64>,
    /// All necks, thinnest first.
    pub necks: Vec<Neck>,
    /// Loads, in the order of the parameters.
    pub loads: Vec<LoadReading>,
    /// Föppl–von Kármán number |mean tension| L²/κ; `None` without rigidity.
    pub foppl_von_karman: Option<f64>,
    /// Scriven–Love number ζ V L/κ with the largest speed V; `None` without rigidity.
    pub scriven_love: Option<f64>,
    /// Number of vertices.
    pub vertex_count: usize,
    /// Least quality of a triangle, twice the inradius over the circumradius.
    pub quality_min: f64,
    /// Mean length of the edges, each counted once [length].
    pub edge_length_mean: f64,
}

impl Diagnostics {
    /// Measure the present state of a simulation, whose own measures must be up to date.
    ///
    /// Rigidity κ and viscosity ζ of the dimensionless numbers are area-weighted means; see [`size`] for L.
    pub fn measure(simulation: &Simulation) -> Self {
        let (state, measured) = (&simulation.state, &simulation.measured);
        let topology = &simulation.connectivity.topology;
        let (mesh, geometry) = (&state.mesh, &measured.geometry);
        let area = geometry.total_area;
        let volume = topology.is_closed().then_some(geometry.volume);
        let tension = simulation.membrane_tension();
        let mean = |values: &[f64]| weighted_mean(values, &geometry.vertex_area);
        let tension_mean = mean(&tension);
        let speed_max = state.velocity.iter().map(|v| v.norm()).fold(0.0, f64::max);
        let rigidity = mean(&measured.material.bending_rigidity);
        let viscosity = mean(&measured.material.shear_viscosity);
        let length = size(simulation);
        let per_rigidity = |value: f64| (rigidity > 0.0).then(|| value / rigidity);
        let lipid: f64 = state.lipid.iter().sum();
        let total = |amount: &[f64]| (!amount.is_empty()).then(|| amount.iter().sum::<f64>());
        let (composition_total, bound_area) =
            (total(&state.composition_amount), total(&state.bound_amount));
        let composition_mean = composition_total.map(|n| n / lipid);
        let necks = necks::find(mesh, topology, geometry);
        let pieces = pieces(simulation);
        Self {
            area,
            volume,
            reduced_volume: pieces
                .iter()
                .reduce(|a, b| if b.area > a.area { b } else { a })
                .and_then(|piece| piece.reduced_volume),
            pieces,
            pressure: pressure(simulation),
            tension_mean,
            tension_min: tension.iter().copied().fold(f64::INFINITY, f64::min),
            tension_max: tension.iter().copied().fold(f64::NEG_INFINITY, f64::max),
            speed_max,
            composition_mean,
            composition_total,
            domain_count: composition_mean
                .map(|share| domains::count(topology, &measured.composition, share)),
            interface_length: composition_mean
                .map(|_| domains::interface_length(mesh, &measured.composition)),
            coverage_mean: bound_area.map(|n| n / lipid),
            bound_area,
            neck_radius: necks.first().map(|neck| neck.radius),
            necks,
            loads: read_loads(simulation),
            foppl_von_karman: per_rigidity(tension_mean.abs() * length * length),
            scriven_love: per_rigidity(viscosity * speed_max * length),
            vertex_count: mesh.n_vertices(),
            quality_min: quality(mesh).into_iter().fold(f64::INFINITY, f64::min),
            edge_length_mean: topology.edges().map(|(i, j)| mesh.edge(i, j).norm()).sum::<f64>()
                / topology.n_edges() as f64,
        }
    }

    /// Number of necks.
    pub fn neck_count(&self) -> usize {
        self.necks.len()
    }

    /// Force of the first load along its pull direction.
    pub fn load_force(&self) -> Option<f64> {
        self.loads.first().map(|load| load.force)
    }

    /// Extension of the first load along its pull direction.
    pub fn load_extension(&self) -> Option<f64> {
        self.loads.first().map(|load| load.extension)
    }
}

/// Σ w f / Σ w.
fn weighted_mean(values: &[f64], weights: &[f64]) -> f64 {
    let sum: f64 = values.iter().zip(weights).map(|(v, w)| v * w).sum();
    sum / weights.iter().sum::<f64>()
}

/// Size L of a surface: √(A/4π) where it closes in space (radius of the sphere of its area), A/(2π period) for
/// a periodic tube (radius of the cylinder of its area), √(A/π) for an open patch (radius of the flat disc).
pub fn size(simulation: &Simulation) -> f64 {
    let area = simulation.measured.geometry.total_area;
    match simulation.state.mesh.period {
        Some(period) => area / (2.0 * PI * period),
        None if simulation.connectivity.topology.is_closed() => (area / (4.0 * PI)).sqrt(),
        None => (area / PI).sqrt(),
    }
}

fn pressure(simulation: &Simulation) -> Option<f64> {
    let volume = simulation.measured.geometry.volume;
    match &simulation.parameters.volume {
        VolumeCondition::Pressure(given) => {
            (*given != 0.0 || simulation.connectivity.topology.is_closed()).then_some(*given)
        }
        // The difference of osmotic pressures until a step has solved for the true one.
        VolumeCondition::Osmotic { inside, outside, .. } if simulation.state.ledger.accepted == 0 => {
            Some(inside / volume - outside)
        }
        VolumeCondition::Fixed(_) if simulation.state.ledger.accepted == 0 => None,
        _ => Some(simulation.state.pressure),
    }
}

fn read_loads(simulation: &Simulation) -> Vec<LoadReading> {
    simulation
        .parameters
        .loads
        .iter()
        .zip(&simulation.state.loads)
        .filter_map(|(load, state)| {
            let direction = pull_direction(load)?;
            Some(LoadReading {
                direction,
                force: state.force.dot(&direction),
                extension: (state.position - state.start).dot(&direction),
            })
        })
        .collect()
}

/// Direction of the first point of a pull's path that is not zero; `None` for a pull that never pulls.
pub fn pull_direction(load: &Load) -> Option<Vec3> {
    let (Pull::Force(path) | Pull::Trap { path, .. }) = &load.pull;
    path.iter().find_map(|(_, pull)| pull.try_normalize(0.0))
}
