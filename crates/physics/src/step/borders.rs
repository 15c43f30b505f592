//! Scalar unknowns beside the mesh: pressure, exchange with a lipid reservoir, load forces.
//!
//! A border adds a column and a row c: A y + Σ c_k z_k = f, c_k·y + D_k z_k = g_k. The dense rows never enter the
//! factorisation: each border costs one back-solve when a factor is made.

use super::assemble::Freedom;
use super::forces::Forces;
use crate::energy::reservoirs::offered_pressure;
use crate::energy::total::Measured;
use crate::parameters::{Parameters, VolumeCondition};
use crate::state::State;
use pellicle_surface::{Topology, Vec3};

/// One scalar unknown with its equation.
#[derive(Clone, Debug)]
pub struct Border {
    /// Column and row (all borders here are symmetric), one entry per unknown of the mesh.
    pub column: Vec<f64>,
    /// Diagonal entry.
    pub diagonal: f64,
    /// Right-hand side.
    pub target: f64,
}

/// A piece of membrane, as its borders need it.
#[derive(Clone, Copy, Debug)]
pub(super) struct PieceMeasure {
    pub index: u32,
    pub volume: f64,
    pub area: f64,
    pub share: f64,
}

/// The volume of a piece and its pressure; `target`: the volume held at the end of the step.
pub(super) fn volume_border(
    parameters: &Parameters,
    topology: &Topology,
    geometry: &pellicle_surface::geometry::Geometry,
    freedom: &[Freedom],
    piece: PieceMeasure,
    target: Option<f64>,
    step: f64,
) -> Option<Border> {
    let (diagonal, right) = match (&parameters.volume, target) {
        (VolumeCondition::Fixed(_), Some(target)) => (0.0, -(target - piece.volume) / step),
        (
            VolumeCondition::Osmotic {
                inside,
                permeability,
                ..
            },
            _,
        ) => {
            // ∇V·v (1/(A L_p) − dt dΠ/dV) + p = Π(V).
            let slope = -inside * piece.share / (piece.volume * piece.volume);
            let resistance = permeability.map_or(0.0, |l| 1.0 / (l * piece.area)) - step * slope;
            let offered = offered_pressure(&parameters.volume, piece.volume, piece.share).unwrap_or(0.0);
            (-1.0 / resistance, -offered / resistance)
        }
        _ => return None,
    };
    let mut column = vec![0.0; 4 * freedom.len()];
    for (i, (f, g)) in freedom.iter().zip(&geometry.volume_gradient).enumerate() {
        if topology.piece[i] == piece.index {
            column[4 * i..4 * i + 3].copy_from_slice(&f.reduce(&-g));
        }
    }
    Some(Border {
        column,
        diagonal,
        target: right,
    })
}

/// Mean tension of a closed piece equals the reservoir's; the interface's share μ̂u is taken off.
pub(super) fn reservoir_border(
    state: &State,
    topology: &Topology,
    measured: &Measured,
    forces: &Forces,
    tension: f64,
    piece: u32,
) -> Border {
    let n = state.lipid.len();
    let mut column = vec![0.0; 4 * n];
    let mut target = 0.0;
    for i in (0..n).filter(|&i| topology.piece[i] == piece) {
        column[4 * i + 3] = -state.lipid[i];
        let shift = forces
            .interface_potential
            .get(i)
            .map_or(0.0, |p| p * measured.order[i]);
        target -= state.lipid[i] * (tension + shift);
    }
    Border {
        column,
        diagonal: 0.0,
        target,
    }
}

/// f = k (gap − dt w·v) along one axis.
pub(super) fn trap_border(
    patch: &[(u32, f64)],
    freedom: &[Freedom],
    n: usize,
    axis: usize,
    stiffness: f64,
    gap: f64,
    step: f64,
) -> Border {
    let mut column = vec![0.0; 4 * n];
    let mut unit = Vec3::zeros();
    unit[axis] = -1.0;
    for (i, w) in patch {
        let i = *i as usize;
        let reduced = freedom[i].reduce(&(unit * *w));
        column[4 * i..4 * i + 3].copy_from_slice(&reduced);
    }
    Border {
        column,
        diagonal: -1.0 / (stiffness * step),
        target: -gap / step,
    }
}
