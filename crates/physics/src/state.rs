//! Everything that changes in time, enough to go on bit for bit.

use crate::PhysicsError;
use crate::parameters::{AreaCondition, Parameters, Pull};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::{Mesh, Topology, Vec3};
use serde::{Deserialize, Serialize};

/// A load patch on its way.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct LoadState {
    /// Centre of the weights, carried by the membrane.
    pub centre: Vec3,
    /// Mean position of the patch at the start: displacements count from here.
    pub start: Vec3,
    /// Mean position of the patch now.
    pub position: Vec3,
    /// Force on the membrane.
    pub force: Vec3,
}

/// A connected piece of the membrane.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Piece {
    /// Name that it keeps for life.
    pub id: u32,
    /// Name of the piece that it was shed by; `None` for those of the start.
    pub parent: Option<u32>,
    /// Its share of a given volume, and of what is dissolved inside.
    pub share: f64,
    /// Pressure difference inside − outside.
    pub pressure: f64,
}

/// Cumulated bookkeeping since the start.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Ledger {
    /// Free energy at the start.
    pub start_energy: f64,
    /// Dissipated by viscosity, friction, diffusion, binding, water flux.
    pub dissipated: f64,
    /// Work done by loads and by a driven volume.
    pub work: f64,
    /// Energy changed by mesh motion, remapping and remeshing.
    pub mesh_energy: f64,
    /// Jumps of the free energy where necks were severed.
    pub severing: f64,
    /// Part of `mesh_energy` that the membrane has yet to give back by smoothing out the roughness of a changed mesh.
    pub mesh_debt: f64,
    /// Energy that care of the mesh may spend because loads have done work since it last did.
    pub mesh_credit: f64,
    /// Lipid (relaxed area) taken from the reservoir.
    pub lipid_drawn: f64,
    /// Accepted steps.
    pub accepted: u64,
    /// Refused steps.
    pub refused: u64,
}

/// State of a membrane at one time.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct State {
    /// Surface.
    pub mesh: Mesh,
    /// Time.
    pub time: f64,
    /// Next time step.
    pub step: f64,
    /// Relaxed lipid area m of each vertex.
    pub lipid: Vec<f64>,
    /// φ m of each vertex; empty without phases.
    pub composition_amount: Vec<f64>,
    /// Interface width ε at each vertex, at most the one asked for; empty without phases.
    pub interface_width: Vec<f64>,
    /// θ m of each vertex; empty without protein.
    pub bound_amount: Vec<f64>,
    /// g m of each vertex, a marker carried by the lipids; empty without a marked region.
    pub marker_amount: Vec<f64>,
    /// Tension conjugate to the lipid constraint of each vertex (see [`crate::energy::interface`]).
    pub tension: Vec<f64>,
    /// Pressure difference inside − outside; of several pieces, the mean weighted with their shares of the volume.
    pub pressure: f64,
    /// Connected pieces, in the order of [`Topology::piece`].
    pub pieces: Vec<Piece>,
    /// Name of the next piece to be shed.
    pub next_piece: u32,
    /// Material velocity of each vertex.
    pub velocity: Vec<Vec3>,
    /// Prescribed normals of clamped rim vertices (zero elsewhere); empty without a rim.
    pub rim_normals: Vec<Vec3>,
    /// Loads.
    pub loads: Vec<LoadState>,
    /// Bookkeeping.
    pub ledger: Ledger,
}

fn ratio(amount: &[f64], lipid: &[f64]) -> Vec<f64> {
    amount.iter().zip(lipid).map(|(a, m)| a / m).collect()
}

impl State {
    /// A membrane at rest on a mesh, its lipids relaxed to the start tension (the reservoir's, or zero).
    ///
    /// # Shapes
    /// `composition`, `coverage`, `marker`: one value per vertex in [0, 1], or empty.
    ///
    /// # Errors
    /// A mesh that is not a manifold; fields of wrong length or out of bounds.
    pub fn at_rest(
        parameters: &Parameters,
        mesh: Mesh,
        composition: &[f64],
        coverage: &[f64],
        marker: &[f64],
    ) -> Result<Self, PhysicsError> {
        let n = mesh.n_vertices();
        let topology = Topology::new(n, &mesh.triangles)?;
        let geometry = Geometry::new(&mesh);
        let start_tension = match parameters.area {
            AreaCondition::Reservoir(tension) => tension,
            AreaCondition::Lipid => 0.0,
        };
        let relaxed = 1.0 + start_tension / parameters.area_compression_modulus;
        let lipid: Vec<f64> = geometry.vertex_area.iter().map(|a| a / relaxed).collect();
        for (field, values) in [
            ("composition", composition),
            ("coverage", coverage),
            ("marker", marker),
        ] {
            if !values.is_empty() && values.len() != n {
                return Err(PhysicsError::Contradiction(
                    "a start field must have one value per vertex",
                ));
            }
            if let Some(vertex) = values.iter().position(|v| !(0.0..=1.0).contains(v)) {
                return Err(PhysicsError::Field {
                    field,
                    vertex,
                    value: values[vertex],
                });
            }
        }
        let times = |field: &[f64]| field.iter().zip(&lipid).map(|(f, m)| f * m).collect();
        let rim_normals = if topology.is_closed() {
            Vec::new()
        } else {
            rim_normals(&mesh, &topology, &geometry)
        };
        let loads = parameters
            .loads
            .iter()
            .map(|load| {
                let weights = load_weights(&mesh, &geometry, &topology, load.centre, load.patch_radius);
                let position = weighted_mean(&mesh, &weights, load.centre);
                LoadState {
                    centre: load.centre,
                    start: position,
                    position,
                    force: Vec3::zeros(),
                }
            })
            .collect();
        Ok(Self {
            time: 0.0,
            step: parameters.step.first,
            composition_amount: times(composition),
            interface_width: parameters.phases.map_or_else(Vec::new, |phases| vec![phases.interface_width; n]),
            bound_amount: times(coverage),
            marker_amount: times(marker),
            tension: vec![start_tension; n],
            pressure: 0.0,
            next_piece: topology.n_pieces as u32,
            pieces: first_pieces(&mesh, &topology, &geometry),
            velocity: vec![Vec3::zeros(); n],
            rim_normals,
            loads,
            ledger: Ledger::default(),
            lipid,
            mesh,
        })
    }

    /// Note the pressure of each piece.
    ///
    /// # Shapes
    /// One entry per piece.
    pub fn set_pressures(&mut self, pressures: &[f64]) {
        for (piece, pressure) in self.pieces.iter_mut().zip(pressures) {
            piece.pressure = *pressure;
        }
        self.pressure = match self.pieces.as_slice() {
            [piece] => piece.pressure,
            pieces => {
                let shares: f64 = pieces.iter().map(|piece| piece.share).sum();
                pieces.iter().map(|piece| piece.share * piece.pressure).sum::<f64>() / shares
            }
        };
    }

    /// Composition φ of each vertex; empty without phases.
    pub fn composition(&self) -> Vec<f64> {
        ratio(&self.composition_amount, &self.lipid)
    }

    /// Coverage θ of each vertex; empty without protein.
    pub fn coverage(&self) -> Vec<f64> {
        ratio(&self.bound_amount, &self.lipid)
    }

    /// Marker g of each vertex; empty without a marked region.
    pub fn marker(&self) -> Vec<f64> {
        ratio(&self.marker_amount, &self.lipid)
    }
}

/// The pieces of a surface at the start.
fn first_pieces(mesh: &Mesh, topology: &Topology, geometry: &Geometry) -> Vec<Piece> {
    let volumes = geometry.piece_volumes(mesh, topology);
    let total: f64 = volumes.iter().sum();
    let share = |volume: f64| if volumes.len() == 1 { 1.0 } else { volume / total };
    volumes
        .iter()
        .zip(0..)
        .map(|(volume, id)| Piece { id, parent: None, share: share(*volume), pressure: 0.0 })
        .collect()
}

/// Area-weighted normals of the rim's triangles, kept as the clamp's normals.
fn rim_normals(mesh: &Mesh, topology: &Topology, geometry: &Geometry) -> Vec<Vec3> {
    let mut normals = vec![Vec3::zeros(); mesh.n_vertices()];
    for edge in &topology.rim_edges {
        for v in [edge.i, edge.j] {
            normals[v as usize] = geometry.vertex_normal[v as usize];
        }
    }
    normals
}

/// Weights A exp(−d²/2r²) of a load patch, normalised to 1; rim vertices carry none.
pub fn load_weights(
    mesh: &Mesh,
    geometry: &Geometry,
    topology: &Topology,
    centre: Vec3,
    radius: f64,
) -> Vec<(u32, f64)> {
    let mut weights: Vec<(u32, f64)> = (0..mesh.n_vertices())
        .filter(|&i| !topology.on_rim[i])
        .filter_map(|i| {
            let d = mesh.nearest_image(mesh.positions[i] - centre).norm_squared() / (2.0 * radius * radius);
            (d < 18.0).then(|| (i as u32, geometry.vertex_area[i] * (-d).exp()))
        })
        .collect();
    if weights.is_empty() {
        // The patch is smaller than an edge: the nearest vertex carries it.
        let nearest = (0..mesh.n_vertices()).min_by(|&a, &b| {
            let d = |i: usize| mesh.nearest_image(mesh.positions[i] - centre).norm_squared();
            d(a).total_cmp(&d(b))
        });
        weights.extend(nearest.map(|i| (i as u32, 1.0)));
    }
    let total: f64 = weights.iter().map(|(_, w)| w).sum();
    for (_, w) in &mut weights {
        *w /= total;
    }
    weights
}

/// Weighted mean position near a point.
pub fn weighted_mean(mesh: &Mesh, weights: &[(u32, f64)], near: Vec3) -> Vec3 {
    near + weights.iter().fold(Vec3::zeros(), |sum, (i, w)| {
        sum + mesh.nearest_image(mesh.positions[*i as usize] - near) * *w
    })
}

/// Force or target displacement of a pull at a time.
pub fn pull_at(pull: &Pull, time: f64) -> Vec3 {
    let path = match pull {
        Pull::Force(path) => path,
        Pull::Trap { path, .. } => path,
    };
    crate::parameters::along_path(path, time).unwrap_or_else(Vec3::zeros)
}
