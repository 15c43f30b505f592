//! Looking after the mesh between steps: flips, splits and collapses where the shape asks for them, smoothing where
//! triangles are poor.
//!
//! Every change is booked in [`crate::state::Ledger::mesh_energy`]. A change that would raise the free energy by more
//! than a share of what the step before released is put off, unless triangles are so poor that it cannot wait.

use super::advance::Simulation;
use super::connectivity::Connectivity;
use super::fairing::{settle, touched};
use super::rezone::wrap;
use crate::PhysicsError;
use crate::energy::Energies;
use crate::energy::interface::triangle_gradient;
use crate::energy::total::Measured;
use crate::parameters::MeshCare;
use crate::state::{State, load_weights, weighted_mean};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::pieces::successors;
use pellicle_surface::remesh::{
    RemeshOptions, SizingRequest, VertexData, curvature_size, flip_to_delaunay_with, quality, remesh, sizing_field,
};
use pellicle_surface::{Mesh, Topology, Vec3};
use rayon::prelude::*;

/// Accepted steps between looks at the wanted edge lengths.
const SIZING_EVERY: u64 = 4;
/// An edge may be this many times longer, or shorter, than wanted before anything is done (hysteresis).
const LONGEST: f64 = 1.4;
const SHORTEST: f64 = 0.6;
/// Flip an edge when its opposite cotangents sum to less than minus this.
const FLIP_TOLERANCE: f64 = 0.05;
/// Triangles below this quality (2 · inradius / circumradius) get their neighbourhood smoothed.
const POOR: f64 = 0.6;
/// Below this quality care is taken whatever it costs in energy.
const URGENT: f64 = 0.4;
/// Share of the energy released by a step that care may give back.
const ALLOWANCE: f64 = 0.3;

/// Largest change of coverage or marker wanted along an edge.
const FIELD_CHANGE: f64 = 0.3;

/// What care did after a step.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct CareReport {
    /// Flips.
    pub flips: usize,
    /// Splits.
    pub splits: usize,
    /// Collapses.
    pub collapses: usize,
    /// Vertices smoothed.
    pub smoothed: usize,
    /// Change of the free energy by all this.
    pub energy_change: f64,
    /// Whether a change of the mesh was put off because it would have cost too much energy.
    pub put_off: bool,
}

/// A mesh with what its vertices carry.
struct Proposal {
    mesh: Mesh,
    data: VertexData,
    target_edge: Vec<f64>,
    old_to_new: Option<Vec<Option<u32>>>,
    counts: [usize; 3],
}

impl Simulation {
    /// Look after the mesh; `released` is the energy that the step before set free.
    pub(super) fn care(&mut self, released: f64) -> Result<CareReport, PhysicsError> {
        let mut report = CareReport::default();
        let Some(care) = self.parameters.mesh else {
            return Ok(report);
        };
        let qualities = quality(&self.state.mesh);
        let worst = qualities.iter().copied().fold(1.0, f64::min);
        let allowance = if worst < URGENT { f64::INFINITY } else {
            ALLOWANCE * released.max(0.0) + self.state.ledger.mesh_credit
        };
        let before = self.energies.total();
        if care.adapt && self.state.ledger.accepted % SIZING_EVERY == 0 {
            self.narrow_interface(&care, allowance)?;
        }
        // What is too dear as a whole may be done in part.
        let n = self.state.mesh.n_vertices();
        for most_vertices in [care.most_vertices, (n + n / 50).min(care.most_vertices)] {
            let Some(proposal) = self.propose(&care, most_vertices)? else {
                break;
            };
            let counts = proposal.counts;
            if self.adopt(proposal, allowance)? {
                [report.flips, report.splits, report.collapses] = counts;
                break;
            }
            report.put_off = true;
            if counts[1] + counts[2] == 0 {
                break;
            }
        }
        let left = allowance - (self.energies.total() - before);
        let changed = report.flips + report.splits + report.collapses > 0;
        let qualities = if changed { quality(&self.state.mesh) } else { qualities };
        report.smoothed = self.smooth_poor(&qualities, left)?;
        report.energy_change = self.energies.total() - before;
        let ledger = &mut self.state.ledger;
        ledger.mesh_energy += report.energy_change;
        ledger.mesh_debt = (ledger.mesh_debt + report.energy_change).max(0.0);
        ledger.mesh_credit = (ledger.mesh_credit - report.energy_change.max(0.0)).max(0.0);
        Ok(report)
    }

    /// A better mesh, if there is something to do.
    fn propose(&mut self, care: &MeshCare, most_vertices: usize) -> Result<Option<Proposal>, PhysicsError> {
        if care.adapt && self.state.ledger.accepted % SIZING_EVERY == 0 {
            let target = self.wanted_sizes(care)?;
            let unfit = self.unfit(&target);
            self.wanted_edge.clone_from(&target);
            if unfit {
                let options = RemeshOptions {
                    split_above: LONGEST,
                    collapse_below: SHORTEST,
                    flip_tolerance: FLIP_TOLERANCE,
                    max_vertices: most_vertices,
                    ..RemeshOptions::default()
                };
                let outcome = remesh(&self.state.mesh, &self.vertex_data(), &target, &options)?;
                if outcome.changed() {
                    return Ok(Some(Proposal {
                        counts: [outcome.flips, outcome.splits, outcome.collapses],
                        mesh: outcome.mesh,
                        data: outcome.data,
                        target_edge: outcome.target_edge,
                        old_to_new: Some(outcome.old_to_new),
                    }));
                }
            }
        }
        if self.is_delaunay() {
            return Ok(None);
        }
        let outcome = flip_to_delaunay_with(&self.state.mesh, &self.vertex_data(), FLIP_TOLERANCE)?;
        Ok((outcome.flips > 0).then(|| Proposal {
            counts: [outcome.flips, 0, 0],
            mesh: outcome.mesh,
            data: outcome.data,
            target_edge: self.wanted_edge.clone(),
            old_to_new: None,
        }))
    }

    /// Whether no edge asks for a flip; most steps end here, so the answer must be cheap.
    fn is_delaunay(&self) -> bool {
        let mesh = &self.state.mesh;
        let cotangent = |apex: u32, i: u32, j: u32| {
            let (u, v) = (mesh.edge(apex, i), mesh.edge(apex, j));
            u.dot(&v) / u.cross(&v).norm().max(f64::MIN_POSITIVE)
        };
        self.connectivity
            .topology
            .hinges
            .par_iter()
            .all(|h| cotangent(h.k, h.i, h.j) + cotangent(h.l, h.j, h.i) >= -FLIP_TOLERANCE)
    }

    /// Whether some free edge is too long or too short for its wanted length.
    fn unfit(&self, target: &[f64]) -> bool {
        let topology = &self.connectivity.topology;
        let worth = |i: u32, j: u32| {
            let (a, b) = (i as usize, j as usize);
            if topology.on_rim[a] || topology.on_rim[b] {
                return false;
            }
            let ratio = self.state.mesh.edge(i, j).norm() / (0.5 * (target[a] + target[b]));
            !(SHORTEST..=LONGEST).contains(&ratio)
        };
        topology.hinges.iter().any(|h| worth(h.i, h.j))
    }

    /// Wanted edge length of each vertex, from curvature, interface and loads, within the vertex budget.
    fn wanted_sizes(&self, care: &MeshCare) -> Result<Vec<f64>, PhysicsError> {
        let (mesh, geometry) = (&self.state.mesh, &self.measured.geometry);
        let mut wanted = curvature_size(mesh, &self.connectivity.topology, geometry, care.edges_per_radius)?;
        if self.parameters.phases.is_some() {
            for (t, corners) in mesh.triangles.iter().enumerate() {
                // tanh(x/ε) has the slope 1/ε in its middle; a third of it is where u = ±0.8. Noise must stay below.
                let slope = triangle_gradient(geometry, t, corners, &self.measured.order).norm();
                let width = corners.iter().map(|&v| self.state.interface_width[v as usize]).sum::<f64>() / 3.0;
                if slope * width > 0.35 {
                    let across = 2.0 * width / care.edges_per_interface;
                    for &v in corners {
                        let w = &mut wanted[v as usize];
                        *w = w.min(across);
                    }
                }
            }
        }
        for field in [self.state.coverage(), self.state.marker()] {
            if field.is_empty() {
                continue;
            }
            for (t, corners) in mesh.triangles.iter().enumerate() {
                let slope = triangle_gradient(geometry, t, corners, &field).norm();
                for &v in corners {
                    let w = &mut wanted[v as usize];
                    *w = w.min(FIELD_CHANGE / slope.max(f64::MIN_POSITIVE));
                }
            }
        }
        for (load, place) in self.parameters.loads.iter().zip(&self.state.loads) {
            for (w, x) in wanted.iter_mut().zip(&mesh.positions) {
                if mesh.nearest_image(x - place.centre).norm() < 2.5 * load.patch_radius {
                    *w = w.min(load.patch_radius / 1.5);
                }
            }
        }
        let request = |wanted: Vec<f64>, shortest: f64| SizingRequest::new(wanted, shortest, care.edge.max(shortest));
        let mut sizes = sizing_field(mesh, &self.connectivity.topology, &request(wanted.clone(), care.shortest))?;
        // An equilateral mesh of edge h has 2/√3 h⁻² vertices per area.
        let count: f64 = sizes.iter().zip(&geometry.vertex_area).map(|(h, a)| 1.1547 * a / (h * h)).sum();
        let excess = count / (0.9 * care.most_vertices as f64);
        if excess > 1.0 {
            let factor = excess.sqrt();
            let coarser = wanted.iter().map(|w| w * factor).collect();
            sizes = sizing_field(mesh, &self.connectivity.topology, &request(coarser, care.shortest * factor))?;
        }
        Ok(sizes)
    }

    /// Adopt a proposal unless it raises the free energy by more than `allowance`.
    fn adopt(&mut self, proposal: Proposal, allowance: f64) -> Result<bool, PhysicsError> {
        let mut state = self.carried_to(proposal.mesh, proposal.data, proposal.old_to_new.as_deref());
        let topology = Topology::new(state.mesh.n_vertices(), &state.mesh.triangles)?;
        let old = &self.connectivity.topology;
        let was = successors(old, &topology, proposal.old_to_new.as_deref());
        let Some(was) = was.into_iter().collect::<Option<Vec<u32>>>() else {
            return Ok(false);
        };
        state.pieces = was.iter().map(|&p| self.state.pieces[p as usize]).collect();
        let in_order = |values: Vec<f64>| -> Vec<f64> { was.iter().map(|&p| values[p as usize]).collect() };
        let chosen = touched(
            &self.state.mesh,
            &self.connectivity.topology,
            &state.mesh,
            &topology,
            proposal.old_to_new.as_deref(),
        );
        let volumes = in_order(self.measured.piece_volume.clone());
        let areas = in_order(self.measured.geometry.piece_areas(old));
        let drawn = settle(&self.parameters, &topology, &mut state, &chosen, &volumes, &areas);
        state.ledger.lipid_drawn += drawn;
        let geometry = Geometry::new(&state.mesh);
        wrap(&mut state.mesh);
        for (load, parameters) in state.loads.iter_mut().zip(&self.parameters.loads) {
            let weights =
                load_weights(&state.mesh, &geometry, &topology, load.centre, parameters.patch_radius);
            load.position = weighted_mean(&state.mesh, &weights, load.position);
        }
        let mut measured = Measured::default();
        measured.update(&self.parameters, &topology, &state);
        let energies: Energies = measured.energies(&self.parameters, &topology, &state);
        let change = energies.total() - self.energies.total();
        if change.is_nan() || change > allowance {
            return Ok(false);
        }
        self.take_over(state, measured, energies, proposal.target_edge)?;
        Ok(true)
    }

    /// Everything the vertices carry.
    pub(super) fn vertex_data(&self) -> VertexData {
        let state = &self.state;
        let n = state.mesh.n_vertices();
        let mut amounts = vec![state.lipid.clone()];
        for list in [&state.composition_amount, &state.bound_amount, &state.marker_amount] {
            if list.len() == n {
                amounts.push(list.clone());
            }
        }
        let mut fields = vec![state.tension.clone()];
        if !state.interface_width.is_empty() {
            fields.push(state.interface_width.clone());
        }
        fields.extend((0..3).map(|axis| state.velocity.iter().map(|v| v[axis]).collect()));
        VertexData { amounts, fields }
    }

    /// The present state with another mesh and what its vertices carry; `pieces` are still the old ones.
    pub(super) fn carried_to(&self, mesh: Mesh, data: VertexData, old_to_new: Option<&[Option<u32>]>) -> State {
        let mut state = State { mesh, ..self.state.clone() };
        let mut amounts = data.amounts.into_iter();
        state.lipid = amounts.next().unwrap_or_default();
        for list in [&mut state.composition_amount, &mut state.bound_amount, &mut state.marker_amount] {
            if !list.is_empty() {
                *list = amounts.next().unwrap_or_default();
            }
        }
        let mut fields = data.fields.into_iter();
        state.tension = fields.next().unwrap_or_default();
        if !state.interface_width.is_empty() {
            state.interface_width = fields.next().unwrap_or_default();
        }
        state.velocity = vec![Vec3::zeros(); state.mesh.n_vertices()];
        for (axis, list) in fields.enumerate() {
            for (v, value) in state.velocity.iter_mut().zip(list) {
                v[axis] = value;
            }
        }
        if let Some(old_to_new) = old_to_new
            && !state.rim_normals.is_empty()
        {
            let mut normals = vec![Vec3::zeros(); state.mesh.n_vertices()];
            for (old, new) in old_to_new.iter().enumerate() {
                if let Some(new) = new {
                    normals[*new as usize] = state.rim_normals[old];
                }
            }
            state.rim_normals = normals;
        }
        state
    }

    /// Go on from a measured state with another connectivity.
    pub(super) fn take_over(
        &mut self,
        state: State,
        measured: Measured,
        energies: Energies,
        wanted_edge: Vec<f64>,
    ) -> Result<(), PhysicsError> {
        // The old factor makes room before the new one is laid out.
        self.connectivity.solver.release();
        self.connectivity.values = Vec::new();
        self.diffusion = None;
        self.connectivity = Connectivity::new(&state)?;
        self.timings.analyses += 1;
        self.state = state;
        self.wanted_edge = wanted_edge;
        self.forget_connectivity();
        self.measured = measured;
        self.energies = energies;
        Ok(())
    }

    /// Smooth around poor triangles. Returns how many vertices were chosen.
    fn smooth_poor(&mut self, qualities: &[f64], allowance: f64) -> Result<usize, PhysicsError> {
        let topology = &self.connectivity.topology;
        let mut chosen = vec![false; topology.n_vertices];
        for (q, corners) in qualities.iter().zip(&topology.triangles) {
            if *q < POOR {
                for &v in corners {
                    chosen[v as usize] = true;
                    for &w in topology.neighbours.of(v as usize) {
                        chosen[w as usize] = true;
                    }
                }
            }
        }
        let count = chosen.iter().filter(|c| **c).count();
        if count == 0 {
            return Ok(0);
        }
        let before = self.state.clone();
        let energy = self.energies.total();
        let done = self.smooth(0.3, &chosen).is_ok();
        if done && self.energies.total() - energy <= allowance {
            return Ok(count);
        }
        self.state = before;
        self.measure();
        Ok(0)
    }
}
