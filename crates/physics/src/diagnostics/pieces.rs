//! The connected pieces of a membrane, one by one.

use crate::parameters::VolumeCondition;
use crate::step::advance::Simulation;
use pellicle_surface::{Vec3, pieces::unwrapped};
use std::f64::consts::PI;

/// One piece as it is now.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PieceReading {
    /// Name that it keeps for life.
    pub id: u32,
    /// Name of the piece that it was shed by.
    pub parent: Option<u32>,
    /// Number of vertices.
    pub vertex_count: usize,
    /// Area; of one period of a tube.
    pub area: f64,
    /// Enclosed volume, of one period of a tube; `None` for a patch.
    pub volume: Option<f64>,
    /// 6√π V/A^(3/2), 1 for a sphere; `None` unless the piece closes in space.
    pub reduced_volume: Option<f64>,
    /// Pressure inside − outside [energy/volume], after the first step; `None` for a patch.
    pub pressure: Option<f64>,
    /// Relaxed area of its lipids.
    pub lipid: f64,
    /// Σ φ m / Σ m.
    pub composition_mean: Option<f64>,
    /// Σ θ m / Σ m.
    pub coverage_mean: Option<f64>,
    /// Mean position of its area; of a piece that goes on endlessly, of one period.
    pub centre: Vec3,
}

/// Read every piece, in the order of [`crate::State::pieces`].
pub fn pieces(simulation: &Simulation) -> Vec<PieceReading> {
    let (state, measured) = (&simulation.state, &simulation.measured);
    let topology = &simulation.connectivity.topology;
    let closed = topology.closed_pieces();
    let (places, endless) = unwrapped(&state.mesh, topology);
    let areas = measured.geometry.piece_areas(topology);
    let sums = |values: &[f64]| {
        let mut sums = vec![0.0; topology.n_pieces];
        values.iter().zip(&topology.piece).for_each(|(value, piece)| sums[*piece as usize] += value);
        sums
    };
    let lipid = sums(&state.lipid);
    let mean = |amount: &[f64], piece: usize| (!amount.is_empty()).then(|| sums(amount)[piece] / lipid[piece]);
    let counts = sums(&vec![1.0; topology.n_vertices]);
    let mut centres = vec![Vec3::zeros(); topology.n_pieces];
    for ((x, area), piece) in places.iter().zip(&measured.geometry.vertex_area).zip(&topology.piece) {
        centres[*piece as usize] += x * *area;
    }
    let known = state.ledger.accepted > 0 || matches!(simulation.parameters.volume, VolumeCondition::Pressure(_));
    state
        .pieces
        .iter()
        .enumerate()
        .map(|(k, piece)| {
            let volume = closed[k].then(|| measured.piece_volume[k]);
            PieceReading {
                id: piece.id,
                parent: piece.parent,
                vertex_count: counts[k] as usize,
                area: areas[k],
                volume,
                reduced_volume: volume
                    .filter(|_| !endless[k])
                    .map(|volume| 6.0 * PI.sqrt() * volume / areas[k].powf(1.5)),
                pressure: (known && closed[k]).then_some(piece.pressure),
                lipid: lipid[k],
                composition_mean: mean(&state.composition_amount, k),
                coverage_mean: mean(&state.bound_amount, k),
                centre: centres[k] / areas[k],
            }
        })
        .collect()
}
