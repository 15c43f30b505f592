//! Lipid, composition, bound protein and volume stay what they were through steps, flips, splits and collapses.
//!
//! # Source
//! Conservation laws; common practice, no source. Limits: rounding, 1e-12 relative; volume 1e-10.

mod evidence;

use evidence::motion::vesicle;
use evidence::record::Record;
use evidence::{Fallible, SEED};
use pellicle_physics::parameters::{BindingRegion, Blend, MeshCare, Phases, Protein};
use pellicle_physics::{Simulation, State};
use pellicle_surface::mesh::shapes::irregular_ellipsoid;

const STEPS: usize = 150;

#[test]
fn amounts_through_motion_and_remeshing() -> Fallible {
    let mesh = irregular_ellipsoid([1.0, 1.0, 3.5], 400, SEED)?;
    let n = mesh.n_vertices();
    let mut parameters = vesicle(&mesh);
    parameters.phases = Some(Phases { line_tension: 2.0, interface_width: 0.6, diffusion_constant: 0.2, width_per_radius: 0.0 });
    parameters.protein = Some(Protein {
        attach_rate: 0.0,
        detach_rate: 0.0,
        site_area: 0.05,
        thermal_energy: 0.05,
        interaction: 0.0,
        gradient_energy: 0.05,
        phase_preference: 0.1,
        diffusion_constant: 0.1,
        region: BindingRegion::Everywhere,
    });
    parameters.spontaneous_curvature = Blend { per_coverage: 1.0, ..Blend::uniform(0.0) };
    parameters.mesh = Some(MeshCare {
        adapt: true,
        edge: 0.4,
        shortest: 0.1,
        edges_per_radius: 3.0,
        edges_per_interface: 3.0,
        most_vertices: 3000,
    });
    let composition: Vec<f64> =
        mesh.positions.iter().map(|x| 0.5 + 0.45 * ((x.z - 0.4) / 0.6).tanh()).collect();
    let coverage: Vec<f64> = mesh.positions.iter().map(|x| 0.3 + 0.2 * x.x).collect();
    let state = State::at_rest(&parameters, mesh, &composition, &coverage, &vec![0.5; n])?;
    let mut s = Simulation::new(parameters, state)?;
    let sums = |s: &Simulation| -> [f64; 5] {
        let sum = |list: &[f64]| list.iter().sum::<f64>();
        [
            sum(&s.state.lipid),
            sum(&s.state.composition_amount),
            sum(&s.state.bound_amount),
            sum(&s.state.marker_amount),
            s.measured.geometry.volume,
        ]
    };
    let before = sums(&s);
    let mut changes = 0;
    let mut put_off = 0;
    for _ in 0..STEPS {
        let report = s.advance(f64::INFINITY)?;
        changes += report.care.flips + report.care.splits + report.care.collapses;
        put_off += usize::from(report.care.put_off);
    }
    println!("{changes} changes of the mesh, {put_off} put off, t = {:.3}, {} vertices", s.state.time, s.state.mesh.n_vertices());
    assert!(changes > 0, "the mesh never changed, so nothing was tested");
    let names = ["lipid", "composition", "bound protein", "marker", "enclosed volume"];
    let after = sums(&s);
    for k in 0..5 {
        let quantity = format!("relative change of {} in 150 steps with flips, splits and collapses", names[k]);
        let limit = if k == 4 { 1e-10 } else { 1e-12 };
        Record::of("conservation", &quantity, "conservation law; common practice, no source", 0.0, "steps", vec![(STEPS as f64, after[k] / before[k] - 1.0)], limit).absolute().write();
    }
    for k in 0..5 {
        let limit = if k == 4 { 1e-10 } else { 1e-12 };
        let change = (after[k] / before[k] - 1.0).abs();
        assert!(change < limit, "{}: {change:e}", names[k]);
    }
    Ok(())
}
