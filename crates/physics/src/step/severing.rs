//! Thin necks severed into closed pieces that go on side by side.
//!
//! Below a radius of some nanometres a neck is no membrane with a mid-surface any more; what happens there is not
//! resolved but taken as done: the neck is cut, both ends are closed, and the jump of the free energy (with that of the
//! Gaussian term, 4πκ_G when a closed surface is parted) is an entry of its own in the ledger.

use super::advance::Simulation;
use super::fairing::{settle, touched};
use super::rezone::wrap;
use super::touching::Clearance;
use crate::PhysicsError;
use crate::energy::total::Measured;
use crate::state::{Piece, State, load_weights, weighted_mean};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::necks::{self, Neck, sever};
use pellicle_surface::{Topology, Vec3};

/// Accepted steps between looks for thin necks.
const LOOK_EVERY: u64 = 4;
/// Most necks severed at a time.
const MOST_AT_ONCE: usize = 8;
/// Rounds of care of the mesh after a severing.
const TIDY_ROUNDS: usize = 4;
/// Share of the step before that the first one afterwards has.
const SLOWER: f64 = 0.01;

/// A neck that was severed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Severing {
    /// Its radius (length round/2π).
    pub radius: f64,
    /// Its middle.
    pub place: Vec3,
    /// Jump of the free energy.
    pub energy_change: f64,
    /// Name of the piece that was shed; `None` when the surface stays in one piece (a ring or a tube cut open).
    pub shed: Option<u32>,
}

impl Simulation {
    /// Sever necks that are as thin as the parameters say.
    pub(super) fn sever_thin_necks(&mut self) -> Result<Vec<Severing>, PhysicsError> {
        let mut severed = Vec::new();
        let Some(fission) = self.parameters.fission else {
            return Ok(severed);
        };
        if self.state.ledger.accepted % LOOK_EVERY != 0 {
            return Ok(severed);
        }
        while severed.len() < MOST_AT_ONCE {
            let found = necks::find(&self.state.mesh, &self.connectivity.topology, &self.measured.geometry);
            let mut done = None;
            for neck in found.iter().take_while(|neck| neck.radius <= fission.neck_radius) {
                done = self.sever(neck)?;
                if done.is_some() {
                    break;
                }
            }
            match done {
                Some(mut one) => {
                    one.energy_change += self.tidy()?;
                    severed.push(one);
                }
                None => break,
            }
        }
        if !severed.is_empty() {
            self.state.step *= SLOWER;
            self.clearance = Clearance::default();
        }
        Ok(severed)
    }

    /// Look after the mesh of fresh ends at once: what that changes in energy belongs to the severing.
    fn tidy(&mut self) -> Result<f64, PhysicsError> {
        let (start, before) = (self.energies.total(), self.state.ledger);
        for _ in 0..TIDY_ROUNDS {
            let care = self.care(f64::INFINITY)?;
            if care.flips + care.splits + care.collapses == 0 {
                break;
            }
        }
        let change = self.energies.total() - start;
        let ledger = &mut self.state.ledger;
        ledger.severing += change;
        (ledger.mesh_energy, ledger.mesh_debt, ledger.mesh_credit) =
            (before.mesh_energy, before.mesh_debt, before.mesh_credit);
        Ok(change)
    }

    /// Sever a neck of the present surface. `None` when the mesh does not allow it (yet).
    ///
    /// # Errors
    /// Those of the surface and of a new analysis.
    pub fn sever(&mut self, neck: &Neck) -> Result<Option<Severing>, PhysicsError> {
        let (mesh, old) = (&self.state.mesh, &self.connectivity.topology);
        let Some(outcome) = sever(mesh, old, &self.measured.geometry, neck, &self.vertex_data())? else {
            return Ok(None);
        };
        let mut state = self.carried_to(outcome.mesh, outcome.data, Some(&outcome.old_to_new));
        let topology = Topology::new(state.mesh.n_vertices(), &state.mesh.triangles)?;
        // The old piece that each new one is a part of.
        let mut parent = vec![0usize; topology.n_pieces];
        for (new, &old_vertex) in outcome.model.iter().enumerate() {
            parent[topology.piece[new] as usize] = old.piece[old_vertex as usize] as usize;
        }
        let geometry = Geometry::new(&state.mesh);
        let (volumes, areas) = self.targets(&state, &topology, &geometry, &parent);
        let shed = self.name_pieces(&mut state, &topology, &geometry, &parent, &volumes);
        let chosen = touched(mesh, old, &state.mesh, &topology, Some(&outcome.old_to_new));
        let drawn = settle(&self.parameters, &topology, &mut state, &chosen, &volumes, &areas);
        state.ledger.lipid_drawn += drawn;
        wrap(&mut state.mesh);
        let geometry = Geometry::new(&state.mesh);
        for (load, parameters) in state.loads.iter_mut().zip(&self.parameters.loads) {
            let weights = load_weights(&state.mesh, &geometry, &topology, load.centre, parameters.patch_radius);
            load.position = weighted_mean(&state.mesh, &weights, load.position);
        }
        let mut measured = Measured::default();
        measured.update(&self.parameters, &topology, &state);
        let energies = measured.energies(&self.parameters, &topology, &state);
        let energy_change = energies.total() - self.energies.total();
        if !energy_change.is_finite() {
            return Ok(None);
        }
        state.ledger.severing += energy_change;
        let wanted = outcome.model.iter().map(|&v| self.wanted_edge[v as usize]).collect();
        let first = neck.points.first().copied().unwrap_or_default();
        let sum = neck.points.iter().fold(Vec3::zeros(), |sum, p| sum + mesh.nearest_image(p - first));
        let place = first + sum / neck.points.len().max(1) as f64;
        self.take_over(state, measured, energies, wanted)?;
        Ok(Some(Severing { radius: neck.radius, place, energy_change, shed }))
    }

    /// Volume and area that each new piece goes on with. Closed parts of a closed piece enclose together what it
    /// enclosed; their areas are those of their lipids at the density before.
    fn targets(
        &self,
        state: &State,
        topology: &Topology,
        geometry: &Geometry,
        parent: &[usize],
    ) -> (Vec<f64>, Vec<f64>) {
        let old = &self.connectivity.topology;
        let sum = |topology: &Topology, lipid: &[f64]| {
            let mut sums = vec![0.0; topology.n_pieces];
            lipid.iter().zip(&topology.piece).for_each(|(m, piece)| sums[*piece as usize] += m);
            sums
        };
        let (lipid_before, lipid) = (sum(old, &self.state.lipid), sum(topology, &state.lipid));
        let areas_before = self.measured.geometry.piece_areas(old);
        let closed_before = old.closed_pieces();
        let mut volumes = geometry.piece_volumes(&state.mesh, topology);
        let mut together = vec![0.0; old.n_pieces];
        volumes.iter().zip(parent).for_each(|(volume, p)| together[*p] += volume);
        for (volume, &p) in volumes.iter_mut().zip(parent) {
            if closed_before[p] {
                *volume *= self.measured.piece_volume[p] / together[p];
            }
        }
        let areas = lipid.iter().zip(parent).map(|(m, &p)| m * areas_before[p] / lipid_before[p]).collect();
        (volumes, areas)
    }

    /// The largest part of a piece keeps its name, others get new ones; volumes set the shares. The last new name.
    fn name_pieces(
        &self,
        state: &mut State,
        topology: &Topology,
        geometry: &Geometry,
        parent: &[usize],
        volumes: &[f64],
    ) -> Option<u32> {
        let areas = geometry.piece_areas(topology);
        let closed = self.connectivity.topology.closed_pieces();
        let mut shed = None;
        state.pieces = (0..parent.len())
            .map(|k| {
                let whole = self.state.pieces[parent[k]];
                let kin = (0..parent.len()).filter(|&j| parent[j] == parent[k]);
                let together: f64 = kin.clone().map(|j| volumes[j]).sum();
                let first = kin.reduce(|a, b| if areas[b] > areas[a] { b } else { a });
                let share = if closed[parent[k]] && parent.iter().filter(|p| **p == parent[k]).count() > 1 {
                    whole.share * volumes[k] / together
                } else {
                    whole.share
                };
                if first == Some(k) {
                    return Piece { share, ..whole };
                }
                let id = state.next_piece;
                state.next_piece = state.next_piece.saturating_add(1);
                shed = Some(id);
                Piece { id, parent: Some(whole.id), share, pressure: whole.pressure }
            })
            .collect();
        shed
    }
}
