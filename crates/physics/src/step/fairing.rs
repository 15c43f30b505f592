//! What a changed mesh needs before it may go on: its roughness smoothed out, its volume and area restored.
//!
//! New vertices lie on the surface to third order in the edge length, but curvature is a second derivative: their
//! places carry a roughness that costs bending energy out of proportion to its height.

use super::rezone::restore_volumes;
use crate::energy::bending;
use crate::energy::total::{Measured, rim_condition};
use crate::parameters::{AreaCondition, Parameters};
use crate::state::State;
use pellicle_surface::geometry::{CurvatureGradient, Geometry, Stencils};
use pellicle_surface::remap::{Carried, remap};
use pellicle_surface::{Mesh, Topology, Vec3};

/// Sweeps of fairing; the shortest waves are gone after three.
const SWEEPS: usize = 4;
/// Largest move of a vertex per sweep, in edge lengths.
const REACH: f64 = 0.03;

/// Vertices of a new mesh around which something changed, with their neighbours.
pub(super) fn touched(
    old: &Mesh,
    old_topology: &Topology,
    new: &Mesh,
    topology: &Topology,
    old_to_new: Option<&[Option<u32>]>,
) -> Vec<bool> {
    let image = |v: usize| old_to_new.map_or(Some(v as u32), |map| map[v]);
    let mut kept = vec![false; topology.n_vertices];
    let mut ring = Vec::new();
    for v in 0..old_topology.n_vertices {
        let Some(w) = image(v).map(|w| w as usize) else {
            continue;
        };
        if old.positions[v] != new.positions[w] {
            continue;
        }
        ring.clear();
        ring.extend(old_topology.neighbours.of(v).iter().filter_map(|&u| image(u as usize)));
        let now = topology.neighbours.of(w);
        kept[w] = ring.len() == now.len() && now.iter().all(|u| ring.contains(u));
    }
    let mut touched: Vec<bool> = kept.iter().map(|k| !k).collect();
    for v in (0..topology.n_vertices).filter(|&v| !kept[v]) {
        for &u in topology.neighbours.of(v) {
            touched[u as usize] = true;
        }
    }
    touched
}

/// Move the chosen vertices along their normals, a few damped Newton sweeps of the bending energy with the diagonal of
/// JᵀJ, as long as it falls.
pub(super) fn fair(parameters: &Parameters, topology: &Topology, state: &mut State, chosen: &[bool]) {
    if parameters.bending_rigidity.smallest() <= 0.0 {
        return;
    }
    let stencils = Stencils::new(topology);
    let n = topology.n_vertices;
    let mut measured = Measured::default();
    measured.update(parameters, topology, state);
    let mut energy = bending::energy(&measured.curvature, &measured.material, &measured.held);
    let mut derivative = CurvatureGradient::default();
    let mut rows = Vec::new();
    for _ in 0..SWEEPS {
        let geometry = &measured.geometry;
        derivative.update(&state.mesh, topology, &stencils, geometry, rim_condition(parameters, state));
        let mut gradient = vec![Vec3::zeros(); n];
        bending::rows_and_gradient(
            &stencils,
            &measured.curvature,
            &derivative,
            &measured.material,
            &measured.held,
            &topology.on_rim,
            &mut rows,
            &mut gradient,
        );
        let mut stiffness = vec![0.0; n];
        for i in 0..n {
            for place in stencils.range(i) {
                let member = stencils.members[place] as usize;
                stiffness[member] += rows[place].dot(&geometry.vertex_normal[member]).powi(2);
            }
        }
        let before = state.mesh.positions.clone();
        for i in (0..n).filter(|&i| chosen[i] && !topology.on_rim[i] && stiffness[i] > 0.0) {
            let normal = geometry.vertex_normal[i];
            let reach = REACH * geometry.vertex_area[i].sqrt();
            let move_by = (-0.5 * gradient[i].dot(&normal) / stiffness[i]).clamp(-reach, reach);
            state.mesh.positions[i] += normal * move_by;
        }
        measured.update(parameters, topology, state);
        let now = bending::energy(&measured.curvature, &measured.material, &measured.held);
        if now.is_nan() || now >= energy {
            state.mesh.positions = before;
            return;
        }
        energy = now;
    }
}

/// Bring a closed piece back to a volume and an area by the smooth displacement (a + b H) along the normals, H
/// clipped to what the whole piece has. Where that is not possible (a sphere), only the volume is restored.
fn restore_volume_and_area(
    parameters: &Parameters,
    topology: &Topology,
    state: &mut State,
    piece: usize,
    volume: f64,
    area: f64,
) {
    let mut measured = Measured::default();
    measured.update(parameters, topology, state);
    let members: Vec<usize> = (0..topology.n_vertices).filter(|&i| topology.piece[i] as usize == piece).collect();
    let radius = (area / (4.0 * std::f64::consts::PI)).sqrt();
    let shape: Vec<f64> = members
        .iter()
        .map(|&i| (measured.curvature.integrated[i] / measured.curvature.area[i] * radius).clamp(-1.0, 4.0))
        .collect();
    let start = state.mesh.positions.clone();
    let mut geometry = measured.geometry;
    for _ in 0..3 {
        let gap = [
            volume - geometry.piece_volumes(&state.mesh, topology)[piece],
            area - geometry.piece_areas(topology)[piece],
        ];
        let area_gradient = area_gradient(&state.mesh, &geometry);
        let mut m = nalgebra::Matrix2::<f64>::zeros();
        for (&i, shape) in members.iter().zip(&shape) {
            let normal = geometry.vertex_normal[i];
            let (v, a) = (geometry.volume_gradient[i].dot(&normal), area_gradient[i].dot(&normal));
            m += nalgebra::Matrix2::new(v, v * shape, a, a * shape);
        }
        // Both displacements alike in their effect: the shape has no room to give the area back.
        let scale = m.row(0).norm() * m.row(1).norm();
        let Some(inverse) = m.try_inverse().filter(|_| m.determinant().abs() > 0.02 * scale) else {
            state.mesh.positions = start;
            return;
        };
        let step = inverse * nalgebra::Vector2::new(gap[0], gap[1]);
        if step.amax() > 0.01 * radius {
            state.mesh.positions = start;
            return;
        }
        for (&i, shape) in members.iter().zip(&shape) {
            state.mesh.positions[i] += geometry.vertex_normal[i] * (step[0] + step[1] * shape);
        }
        geometry.update(&state.mesh);
    }
}

/// ∂(area)/∂x of every vertex.
fn area_gradient(mesh: &Mesh, geometry: &Geometry) -> Vec<Vec3> {
    let mut gradient = vec![Vec3::zeros(); mesh.n_vertices()];
    for (t, corners) in mesh.triangles.iter().enumerate() {
        for c in 0..3 {
            gradient[corners[c] as usize] += geometry.gradients[t][c] * geometry.area[t];
        }
    }
    gradient
}

/// Fair a changed mesh and restore what its closed pieces must enclose and cover; lipids keep their density.
///
/// # Shapes
/// `chosen`: one entry per vertex, see [`touched`]; `volumes`, `areas`: one per piece. Returns the lipid drawn from a
/// reservoir.
pub(super) fn settle(
    parameters: &Parameters,
    topology: &Topology,
    state: &mut State,
    chosen: &[bool],
    volumes: &[f64],
    areas: &[f64],
) -> f64 {
    let before = state.mesh.clone();
    let geometry_before = Geometry::new(&before);
    fair(parameters, topology, state, chosen);
    let mut geometry = Geometry::new(&state.mesh);
    let closed = topology.closed_pieces();
    if closed.contains(&true) {
        let holds_lipid = parameters.area == AreaCondition::Lipid || parameters.rim.is_some();
        if holds_lipid && state.mesh.period.is_none() {
            for piece in (0..closed.len()).filter(|&piece| closed[piece]) {
                restore_volume_and_area(parameters, topology, state, piece, volumes[piece], areas[piece]);
            }
        }
        geometry.update(&state.mesh);
        let present = geometry.piece_volumes(&state.mesh, topology);
        let wanted: Vec<f64> =
            (0..closed.len()).map(|piece| if closed[piece] { volumes[piece] } else { present[piece] }).collect();
        restore_volumes(&mut state.mesh, &mut geometry, topology, &wanted);
    }
    let State { mesh, lipid, composition_amount, bound_amount, marker_amount, .. } = state;
    remap(
        &before,
        mesh,
        topology,
        &geometry_before,
        &geometry,
        None,
        Carried { lipid, amounts: vec![composition_amount, bound_amount, marker_amount] },
    );
    let AreaCondition::Reservoir(_) = parameters.area else {
        return 0.0;
    };
    if !topology.is_closed() {
        return 0.0;
    }
    // The reservoir keeps the density: the polyhedron's area changed, not the membrane's.
    let now = geometry.piece_areas(topology);
    let held: f64 = lipid.iter().sum();
    let factor = |i: usize| now[topology.piece[i] as usize] / areas[topology.piece[i] as usize];
    for list in [&mut *lipid, composition_amount, bound_amount, marker_amount] {
        list.iter_mut().enumerate().for_each(|(i, m)| *m *= factor(i));
    }
    lipid.iter().sum::<f64>() - held
}
