//! The solver's own matrix on a unit sphere under a given load: flow and tension.

use super::geometry::Bare;
use nalgebra::{Matrix6, Vector6};
use pellicle_physics::parameters::{AreaCondition, VolumeCondition};
use pellicle_physics::step::assemble::{Freedom, MatrixInput, PositiveStress, assemble};
use pellicle_physics::step::connectivity::Connectivity;
use pellicle_physics::step::linear::{LinearSystem, Origin};
use pellicle_physics::step::mechanics::Timings;
use pellicle_physics::{Parameters, PhysicsError, State};
use pellicle_surface::Vec3;

/// Velocity and tension under a load per area at each vertex; unit viscosity, incompressible lipids. Bending is at
/// ease (C R = 2) and enters implicitly over a short step, as in the solver: it keeps facets from moving normally at the
/// scale of the mesh and is blind to smooth flow within a sphere. `resistance` is
/// the friction that fixes rigid motions, which are removed from load and answer.
pub fn flow(bare: &Bare, load: &[Vec3], resistance: f64) -> Result<(Vec<Vec3>, Vec<f64>), PhysicsError> {
    let n = bare.mesh.n_vertices();
    let parameters = Parameters {
        area: AreaCondition::Reservoir(0.0),
        volume: VolumeCondition::Pressure(0.0),
        ..Parameters::bare(1.0, 1.0, 1e6)
    };
    let state = State::at_rest(&parameters, bare.mesh.clone(), &[], &[], &[])?;
    let mut connectivity = Connectivity::new(&state)?;
    let area = &bare.geometry.vertex_area;
    let none = PositiveStress { along: 0.0, across: 0.0, direction: Vec3::zeros() };
    let friction: Vec<f64> = area.iter().map(|a| a * resistance).collect();
    let Connectivity { pattern, values, solver, .. } = &mut connectivity;
    let input = MatrixInput {
        topology: &bare.topology,
        positions: &bare.mesh.positions,
        geometry: &bare.geometry,
        pattern,
        bending_rows: &bare.bending_rows_and_gradient(2.0).0,
        bending_rigidity: &vec![1.0; n],
        stress: &vec![none; bare.mesh.n_triangles()],
        viscosity: &vec![1.0; n],
        friction: &friction,
        lipid: &state.lipid,
        area_compression_modulus: 1e12,
        step: 1e-3,
        deviatoric: false,
        freedom: &vec![Freedom::Free; n],
        repulsion: &[],
    };
    assemble(&input, values);
    let load = without_rigid(bare, load);
    let mut y = vec![0.0; 4 * n];
    for i in 0..n {
        let force = load[i] * area[i];
        y[4 * i..4 * i + 3].copy_from_slice(&[force.x, force.y, force.z]);
    }
    let system = LinearSystem { values, borders: &[], input: &input };
    solver.solve(&system, &vec![0.0; 4 * n], &mut y, Origin::default, &mut Timings::default())?;
    let velocity: Vec<Vec3> = (0..n).map(|i| Vec3::new(y[4 * i], y[4 * i + 1], y[4 * i + 2])).collect();
    let tension: Vec<f64> = (0..n).map(|i| y[4 * i + 3]).collect();
    let mean = tension.iter().zip(area).map(|(t, a)| t * a).sum::<f64>() / bare.geometry.total_area;
    Ok((without_rigid(bare, &velocity), tension.iter().map(|t| t - mean).collect()))
}

/// A vector field without its rigid part (area-weighted).
pub fn without_rigid(bare: &Bare, field: &[Vec3]) -> Vec<Vec3> {
    let motion = |k: usize, x: &Vec3| {
        let mut unit = Vec3::zeros();
        unit[k % 3] = 1.0;
        if k < 3 { unit } else { unit.cross(x) }
    };
    let (mut gram, mut right) = (Matrix6::<f64>::zeros(), Vector6::<f64>::zeros());
    for ((x, a), f) in bare.mesh.positions.iter().zip(&bare.geometry.vertex_area).zip(field) {
        for r in 0..6 {
            right[r] += a * motion(r, x).dot(f);
            for c in 0..6 {
                gram[(r, c)] += a * motion(r, x).dot(&motion(c, x));
            }
        }
    }
    let amount = gram.lu().solve(&right).unwrap_or_else(Vector6::zeros);
    bare.mesh
        .positions
        .iter()
        .zip(field)
        .map(|(x, f)| (0..6).fold(*f, |f, k| f - motion(k, x) * amount[k]))
        .collect()
}

/// √(Σ A |f|²).
pub fn norm(bare: &Bare, field: &[Vec3]) -> f64 {
    field.iter().zip(&bare.geometry.vertex_area).map(|(f, a)| a * f.norm_squared()).sum::<f64>().sqrt()
}
