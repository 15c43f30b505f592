//! The mesh slides along the moved surface: quality kept, everything carried by the lipids remapped.

use super::advance::Simulation;
use super::control::Reason;
use super::mechanics::Motion;
use crate::parameters::{AreaCondition, VolumeCondition, along_path};
use crate::state::{State, weighted_mean};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::geometry::shape_operator::{second_form, shape_operators};
use pellicle_surface::mesh_motion::{smoothest_velocity, smoothing_target};
use pellicle_surface::remap::{Carried, remap};
use pellicle_surface::{Mesh, Topology, Vec3};

/// Smallest cosine between a triangle's normals before and after a step.
const SMALLEST_TURN: f64 = 0.5;

impl Simulation {
    /// Velocity of the mesh: the smoothest field with the membrane's normal velocity.
    pub(super) fn mesh_velocity(&self, velocity: &[Vec3]) -> Vec<Vec3> {
        let normals = &self.measured.geometry.vertex_normal;
        let speed: Vec<f64> = velocity.iter().zip(normals).map(|(v, n)| v.dot(n)).collect();
        smoothest_velocity(
            &self.connectivity.topology,
            normals,
            &speed,
            &self.connectivity.topology.on_rim,
            &self.mesh_velocity,
            1e-4,
        )
    }

    /// Largest way of a vertex, and of lipid past it, per local edge length, relative to the limit.
    pub(super) fn travel(&self, velocity: &[Vec3], mesh_velocity: &[Vec3], step: f64) -> f64 {
        let size = &self.measured.geometry.vertex_area;
        velocity
            .iter()
            .zip(mesh_velocity)
            .zip(size)
            .map(|((v, w), a)| {
                let way = (v - w).norm().max(0.5 * w.norm());
                way * step / a.sqrt()
            })
            .fold(0.0, f64::max)
            / self.parameters.step.travel
    }

    /// Slide the mesh along the moved surface: against the lipid flow, with the mesh velocity.
    pub(super) fn slide(&mut self, motion: &Motion, mesh_velocity: &[Vec3], step: f64) -> Result<(), Reason> {
        let geometry = Geometry::new(&self.state.mesh);
        let slide: Vec<Vec3> = (0..self.state.mesh.n_vertices())
            .map(|i| (mesh_velocity[i] - motion.velocity[i]) * step)
            .collect();
        let topology = &self.connectivity.topology;
        let fixed = match &self.parameters.volume {
            VolumeCondition::Fixed(path) => along_path(path, self.state.time + step),
            _ => None,
        };
        let volumes = match (fixed, &self.parameters.volume) {
            (Some(volume), _) => self.state.pieces.iter().map(|piece| volume * piece.share).collect(),
            // As much as the step let through. What the moved surface encloses differs from it in second order, which
            // against the pressure of osmolytes is a lot.
            (None, VolumeCondition::Osmotic { .. }) => {
                let mut volumes = self.measured.piece_volume.clone();
                let gradient = &self.measured.geometry.volume_gradient;
                for ((g, v), piece) in gradient.iter().zip(&motion.velocity).zip(&topology.piece) {
                    volumes[*piece as usize] += step * g.dot(v);
                }
                volumes
            }
            _ => geometry.piece_volumes(&self.state.mesh, topology),
        };
        self.move_vertices(&geometry, &slide, &volumes)
    }

    /// Smooth the mesh by `share` of the way to its neighbours' mean at vertices where `chosen`.
    ///
    /// # Errors
    /// The reason why the moved mesh would not do; the state is then unchanged.
    pub fn smooth(&mut self, share: f64, chosen: &[bool]) -> Result<(), Reason> {
        let geometry = Geometry::new(&self.state.mesh);
        let mut target =
            smoothing_target(&self.state.mesh, &self.connectivity.topology, &geometry, &self.wanted_edge);
        for (t, chosen) in target.iter_mut().zip(chosen) {
            *t *= if *chosen { share } else { 0.0 };
        }
        let saved = self.state.clone();
        let volumes = geometry.piece_volumes(&self.state.mesh, &self.connectivity.topology);
        let outcome = self.move_vertices(&geometry, &target, &volumes);
        if outcome.is_err() {
            self.state = saved;
        }
        self.measure();
        outcome
    }

    /// Displace vertices along the surface, keep the given volume of each piece, remap everything carried.
    pub(super) fn move_vertices(&mut self, geometry: &Geometry, slide: &[Vec3], volumes: &[f64]) -> Result<(), Reason> {
        let topology = &self.connectivity.topology;
        let before = self.state.mesh.clone();
        let shape = shape_operators(&before, geometry);
        let mut after = before.clone();
        let open = topology.on_rim.iter().any(|r| *r);
        for i in 0..topology.n_vertices {
            if topology.on_rim[i] {
                // Back onto the frame: exactly where the vertex was before the material moved.
                after.positions[i] += slide[i];
                continue;
            }
            let normal = geometry.vertex_normal[i];
            let mut t = slide[i] - normal * slide[i].dot(&normal);
            let cap = 0.5 * geometry.vertex_area[i].sqrt();
            let length = t.norm();
            if length > cap {
                t *= cap / length;
            }
            after.positions[i] += t - normal * (0.5 * second_form(&shape[i], &t));
        }
        let mut after_geometry = Geometry::new(&after);
        if !(open && volumes.iter().all(|volume| *volume == 0.0)) {
            restore_volumes(&mut after, &mut after_geometry, topology, volumes);
        }
        if !keeps_orientation(&after, geometry) {
            return Err(Reason::Inversion);
        }
        let density = match self.parameters.area {
            AreaCondition::Reservoir(tension) if open => {
                Some(1.0 / (1.0 + tension / self.parameters.area_compression_modulus))
            }
            _ => None,
        };
        let State {
            lipid,
            composition_amount,
            bound_amount,
            marker_amount,
            ..
        } = &mut self.state;
        let drawn = remap(
            &before,
            &after,
            topology,
            geometry,
            &after_geometry,
            density,
            Carried {
                lipid,
                amounts: vec![composition_amount, bound_amount, marker_amount],
            },
        );
        self.state.ledger.lipid_drawn += drawn;
        if self.state.lipid.iter().any(|m| !(*m > 0.0)) {
            return Err(Reason::Bounds);
        }
        self.state.mesh = after;
        wrap(&mut self.state.mesh);
        for (load, parameters) in self.state.loads.iter_mut().zip(&self.parameters.loads) {
            let weights = crate::state::load_weights(
                &self.state.mesh,
                &after_geometry,
                topology,
                load.centre,
                parameters.patch_radius,
            );
            load.position = weighted_mean(&self.state.mesh, &weights, load.position);
        }
        Ok(())
    }
}

/// Shift the vertices of each piece that are off the rim along their normals, alike, until it encloses its volume.
pub(super) fn restore_volumes(mesh: &mut Mesh, geometry: &mut Geometry, topology: &Topology, volumes: &[f64]) {
    for _ in 0..4 {
        let mut gap: Vec<f64> =
            geometry.piece_volumes(mesh, topology).iter().zip(volumes).map(|(now, wanted)| wanted - now).collect();
        for (gap, wanted) in gap.iter_mut().zip(volumes) {
            if gap.abs() <= 1e-13 * wanted.abs() {
                *gap = 0.0;
            }
        }
        if gap.iter().all(|gap| *gap == 0.0) {
            break;
        }
        let mut sweep = vec![0.0; gap.len()];
        for (i, g) in geometry.volume_gradient.iter().enumerate().filter(|(i, _)| !topology.on_rim[*i]) {
            sweep[topology.piece[i] as usize] += g.norm();
        }
        for (i, x) in mesh.positions.iter_mut().enumerate().filter(|(i, _)| !topology.on_rim[*i]) {
            let piece = topology.piece[i] as usize;
            if gap[piece] != 0.0 {
                *x += geometry.vertex_normal[i] * (gap[piece] / sweep[piece]);
            }
        }
        geometry.update(mesh);
    }
}

/// Keep z of a periodic tube within one period.
pub(super) fn wrap(mesh: &mut Mesh) {
    if let Some(period) = mesh.period {
        for x in &mut mesh.positions {
            x.z -= period * (x.z / period).floor();
        }
    }
}

/// Whether every triangle still faces the way it did and has not vanished.
pub(super) fn keeps_orientation(mesh: &Mesh, before: &Geometry) -> bool {
    (0..mesh.n_triangles()).all(|t| {
        let x = mesh.corners(t);
        let cross = (x[1] - x[0]).cross(&(x[2] - x[0]));
        let length = cross.norm();
        length > 0.2 * before.area[t] && cross.dot(&before.normal[t]) > SMALLEST_TURN * length
    })
}
