//! Forces of a measured state, and which way each vertex may go.

use super::assemble::{Freedom, PositiveStress};
use super::connectivity::Connectivity;
use crate::energy::interface::{self, GradientEnergy};
use crate::energy::total::{Measured, rim_condition};
use crate::energy::{bending, gaussian, repulsion};
use crate::parameters::{AreaCondition, Parameters, Rim, SelfContact};
use crate::state::State;
use pellicle_surface::geometry::CurvatureGradient;
use nalgebra::Matrix3;
use pellicle_surface::{Topology, Vec3, pieces};

/// Freedom of each vertex: rims of patches slide along their conormal when lipid passes there.
pub fn freedoms(parameters: &Parameters, topology: &Topology, state: &State, measured: &Measured) -> Vec<Freedom> {
    let mut freedom = vec![Freedom::Free; topology.n_vertices];
    if topology.is_closed() {
        return freedom;
    }
    let mut along = vec![Vec3::zeros(); topology.n_vertices];
    for edge in &topology.rim_edges {
        let e = state.mesh.edge(edge.i, edge.j);
        along[edge.i as usize] += e;
        along[edge.j as usize] += e;
    }
    let open = matches!(parameters.area, AreaCondition::Reservoir(_));
    for i in (0..topology.n_vertices).filter(|&i| topology.on_rim[i]) {
        let normal = match parameters.rim {
            Some(Rim::Clamped) => state.rim_normals[i],
            _ => measured.geometry.vertex_normal[i],
        };
        freedom[i] = if open {
            Freedom::Along(along[i].cross(&normal).normalize())
        } else {
            Freedom::Pinned
        };
    }
    freedom
}

/// Gradient of all position-dependent energies except stretching (its tension is an unknown), with the rows J.
pub struct Forces {
    /// ∂F/∂x (well balanced where the interface is concerned).
    pub gradient: Vec<Vec3>,
    /// Rows J of the bending residuals.
    pub rows: Vec<Vec3>,
    /// Chemical potential μ̂ of the interface energy; empty without phases.
    pub interface_potential: Vec<f64>,
    /// Positive stress of each triangle for the implicit part.
    pub stress: Vec<PositiveStress>,
    /// Gradient of the repulsion between facing parts, which acts between pieces as well: not in `gradient`. Empty
    /// without.
    pub repulsion: Vec<Vec3>,
    /// Its positive implicit part, a block per vertex; empty without.
    pub repulsion_stiffness: Vec<Matrix3<f64>>,
}

/// Evaluate forces of a measured state.
pub fn forces(
    parameters: &Parameters,
    connectivity: &Connectivity,
    state: &State,
    measured: &Measured,
) -> Forces {
    let (topology, mesh, geometry) = (&connectivity.topology, &state.mesh, &measured.geometry);
    let n = topology.n_vertices;
    let mut gradient = vec![Vec3::zeros(); n];
    let mut rows = Vec::new();
    let mut derivative = CurvatureGradient::default();
    derivative.update(
        mesh,
        topology,
        &connectivity.stencils,
        geometry,
        rim_condition(parameters, state),
    );
    // Rim vertices slide only as lipid: the frame itself does not move, so bending does no work there.
    bending::rows_and_gradient(
        &connectivity.stencils,
        &measured.curvature,
        &derivative,
        &measured.material,
        &measured.held,
        &topology.on_rim,
        &mut rows,
        &mut gradient,
    );
    if gaussian::acts(parameters, topology) {
        gaussian::add_gradient(mesh, topology, geometry, &measured.material, &mut gradient);
    }
    let mut stress: Vec<PositiveStress> = mesh
        .triangles
        .iter()
        .map(|corners| {
            let tension = corners.iter().map(|&v| state.tension[v as usize]).sum::<f64>() / 3.0;
            PositiveStress {
                along: tension,
                across: tension,
                direction: Vec3::zeros(),
            }
        })
        .collect();
    let mut interface_potential = Vec::new();
    let mut soft = vec![Vec3::zeros(); n];
    if parameters.phases.is_some() {
        let u = &measured.order;
        let local = measured.interface.local_energy(u);
        interface_potential = interface::potential(mesh, geometry, &measured.interface, u);
        let gamma = measured.interface.gamma();
        interface::add_balanced_gradient(
            mesh, geometry, &local, gamma, u, &interface_potential, &mut soft,
        );
        for (t, corners) in mesh.triangles.iter().enumerate() {
            let (isotropic, slope) = interface::triangle_stress(geometry, t, corners, &local, gamma.of(t), u);
            let steep = slope.norm_squared();
            stress[t].along += isotropic;
            stress[t].across += isotropic - gamma.of(t) * steep;
            if steep > 0.0 {
                stress[t].direction = slope / steep.sqrt();
            }
        }
    }
    if let Some(protein) = &parameters.protein
        && protein.gradient_energy > 0.0
    {
        let theta = &measured.coverage;
        let gamma = GradientEnergy::Uniform(protein.gradient_energy);
        let potential: Vec<f64> = interface::stiffness_times(mesh, geometry, gamma, theta)
            .iter()
            .zip(&geometry.vertex_area)
            .map(|(k, a)| k / a)
            .collect();
        let local = vec![0.0; n];
        interface::add_balanced_gradient(
            mesh,
            geometry,
            &local,
            gamma,
            theta,
            &potential,
            &mut soft,
        );
    }
    if parameters.phases.is_some() || parameters.protein.is_some() {
        remove_rigid_load(topology, state, measured, &mut soft);
    }
    for (g, s) in gradient.iter_mut().zip(&soft) {
        *g += s;
    }
    for s in &mut stress {
        s.along = s.along.max(0.0);
        s.across = s.across.max(0.0);
    }
    let (mut apart, mut apart_stiffness) = (Vec::new(), Vec::new());
    if let SelfContact::Repel(law) = &parameters.self_contact
        && !measured.contacts.is_empty()
    {
        apart = vec![Vec3::zeros(); n];
        repulsion::add_gradient(law, topology, geometry, &measured.contacts, &mut apart);
        apart_stiffness = repulsion::stiffness(law, topology, geometry, &measured.contacts);
    }
    Forces {
        repulsion: apart,
        repulsion_stiffness: apart_stiffness,
        gradient,
        rows,
        interface_potential,
        stress,
    }
}

/// Subtract, from each closed piece, the rigid load A (c + ω × x) that carries a load's net force and torque: forces
/// within the membrane have neither, and without drag the smallest net force would make the whole piece drift.
pub fn remove_rigid_load(topology: &Topology, state: &State, measured: &Measured, load: &mut [Vec3]) {
    let closed = topology.closed_pieces();
    if !closed.contains(&true) {
        return;
    }
    let (positions, endless) = pieces::unwrapped(&state.mesh, topology);
    for (piece, endless) in endless.iter().enumerate().filter(|(piece, _)| closed[*piece]) {
        let members: Vec<usize> =
            (0..topology.n_vertices).filter(|&v| topology.piece[v] as usize == piece).collect();
        remove_from_piece(&members, &positions, &measured.geometry.vertex_area, *endless, load);
    }
}

fn remove_from_piece(members: &[usize], positions: &[Vec3], area: &[f64], endless: bool, load: &mut [Vec3]) {
    let total: f64 = members.iter().map(|&v| area[v]).sum();
    let centre = members.iter().fold(Vec3::zeros(), |s, &v| s + positions[v] * area[v]) / total;
    // Columns: three translations and the rotations the surface has (only about its axis when it is endless).
    let rotations: Vec<Vec3> = if endless {
        vec![Vec3::z()]
    } else {
        vec![Vec3::x(), Vec3::y(), Vec3::z()]
    };
    let motion = |k: usize, x: &Vec3| -> Vec3 {
        if k < 3 {
            let mut e = Vec3::zeros();
            e[k] = 1.0;
            e
        } else {
            rotations[k - 3].cross(&(x - centre))
        }
    };
    let m = 3 + rotations.len();
    let mut gram = nalgebra::DMatrix::<f64>::zeros(m, m);
    let mut right = nalgebra::DVector::<f64>::zeros(m);
    for &v in members {
        for r in 0..m {
            let mr = motion(r, &positions[v]);
            right[r] += mr.dot(&load[v]);
            for c in 0..=r {
                gram[(r, c)] += area[v] * mr.dot(&motion(c, &positions[v]));
            }
        }
    }
    for r in 0..m {
        for c in 0..r {
            gram[(c, r)] = gram[(r, c)];
        }
    }
    if let Some(amount) = gram.cholesky().map(|c| c.solve(&right)) {
        for &v in members {
            for r in 0..m {
                load[v] -= motion(r, &positions[v]) * (area[v] * amount[r]);
            }
        }
    }
}
