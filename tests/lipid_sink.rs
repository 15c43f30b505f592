//! Lipid that appears in the middle of a flat framed patch flows out through the rim: v = c/r and
//! λ = σ + 2ζc/R² everywhere outside the source, with 2πc the area that appears per time.
//!
//! The source is an excess of lipid at the central vertices which one step without compressibility lets out.
//!
//! # Source
//! Elementary: plane incompressible flow with ∇λ = 0 and the reservoir's traction σ = λ + 2ζ ∂v/∂r at the rim.

mod evidence;

use evidence::record::Record;
use evidence::Fallible;
use pellicle_physics::parameters::{AreaCondition, Blend, Rim};
use pellicle_physics::step::mechanics::{self, Timings};
use pellicle_physics::{Parameters, Simulation, State};
use pellicle_surface::mesh::shapes::disc;
use std::f64::consts::PI;

const SOURCE: &str = "elementary";
/// c of a sink is −0.1, as in most such tests.
const STRENGTH: f64 = -0.1;
const SIGMA: f64 = 1.0;

/// Relative error of v (largest outside r = 0.4) and λ (mean outside r = 0.4).
fn measure(edge: f64) -> Result<(f64, f64, f64), Box<dyn std::error::Error>> {
    let parameters = Parameters {
        bending_rigidity: Blend::uniform(0.0),
        area: AreaCondition::Reservoir(SIGMA),
        rim: Some(Rim::Clamped),
        friction: 1e-6,
        ..Parameters::bare(1.0, 1.0, 1e9)
    };
    let mesh = disc(1.0, edge)?;
    let mut state = State::at_rest(&parameters, mesh, &[], &[], &[])?;
    let step = 1e-3;
    // A smooth spot of radius 0.15.
    let weight: Vec<f64> = state
        .mesh
        .positions
        .iter()
        .zip(&state.lipid)
        .map(|(x, m)| if x.norm() < 0.3 { m * (1.0 - (x.norm() / 0.3).powi(2)).powi(2) } else { 0.0 })
        .collect();
    let total: f64 = weight.iter().sum();
    for (m, w) in state.lipid.iter_mut().zip(&weight) {
        *m += 2.0 * PI * STRENGTH * step * w / total;
    }
    let mut s = Simulation::new(parameters.clone(), state)?;
    let motion =
        mechanics::solve(&parameters, &mut s.connectivity, &s.state, &s.measured, step, &mut Timings::default())?;
    let (mut worst, mut sum, mut area) = (0.0f64, 0.0, 0.0);
    for i in 0..s.state.mesh.n_vertices() {
        let x = s.state.mesh.positions[i];
        let r = x.norm();
        if r < 0.4 {
            continue;
        }
        let radial = motion.velocity[i].dot(&x) / r;
        worst = worst.max((radial * r / STRENGTH - 1.0).abs());
        sum += s.measured.geometry.vertex_area[i] * motion.tension[i];
        area += s.measured.geometry.vertex_area[i];
    }
    Ok((s.state.mesh.n_vertices() as f64, worst, sum / area))
}

fn check(edges: &[f64], limits: [f64; 2]) -> Fallible {
    let found = edges.iter().map(|&e| measure(e)).collect::<Result<Vec<_>, _>>()?;
    let measured = found.iter().map(|(n, worst, _)| (*n, 1.0 + worst)).collect();
    let velocity = Record::of("lipid_sink", "largest error of v r/c outside the sink", SOURCE, 1.0, "vertices", measured, limits[0]).with_order();
    let measured = found.iter().map(|(n, _, tension)| (*n, *tension)).collect();
    let tension = Record::of("lipid_sink", "tension outside the sink", SOURCE, SIGMA + 2.0 * STRENGTH, "vertices", measured, limits[1]).with_order();
    velocity.write();
    tension.check();
    velocity.assert_with_order(1.5);
    Ok(())
}

#[test]
fn flow_into_a_sink() -> Fallible {
    check(&[0.14, 0.07, 0.035], [0.01, 0.004])
}
