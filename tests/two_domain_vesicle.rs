//! A vesicle of two phases with line tension λ, pressure zero, area fixed: energy and radius of the junction at rest,
//! against the sharp-interface solution, extrapolated in the interface width.
//!
//! # Source
//! Jülicher & Lipowsky, Phys. Rev. Lett. 70 (1993) 2964 and Phys. Rev. E 53 (1996) 2670 (conditions from memory);
//! values computed: axisymmetric shape equations solved by collocation.

mod evidence;

use evidence::fit::extrapolate;
use evidence::record::Record;
use evidence::Fallible;
use pellicle_physics::diagnostics::domains::interface_length;
use pellicle_physics::parameters::{MeshCare, Phases};
use pellicle_physics::{Parameters, Simulation, State};
use pellicle_surface::mesh::shapes::sphere;
use std::f64::consts::{PI, TAU};

const SOURCE: &str = "Jülicher & Lipowsky, Phys. Rev. E 53 (1996) 2670; computed: shape equations solved by collocation";
/// Area fraction of the smaller phase.
const SHARE: f64 = 0.25;

struct Case {
    line_tension: f64,
    free: f64,
    junction: f64,
}

const CASES: [Case; 2] = [
    Case { line_tension: 1.0, free: 30.516807813432976, junction: 0.8470389121752534 },
    Case { line_tension: 2.0, free: 35.7656, junction: 0.822577 },
];

/// Vertices, F and junction radius scaled to area 4π, interface width ε at `across` edges over 2ε.
fn rest(case: &Case, width: f64, across: f64) -> Result<[f64; 3], Box<dyn std::error::Error>> {
    let edge = 2.0 * width / across;
    let mesh = sphere(1.0, edge)?;
    let mut parameters = Parameters {
        phases: Some(Phases { line_tension: case.line_tension, interface_width: width, diffusion_constant: 1.0, width_per_radius: 0.0 }),
        ..Parameters::bare(1.0, 1.0, 1e4)
    };
    parameters.mesh = Some(MeshCare {
        adapt: false,
        edge,
        shortest: 0.3 * edge,
        edges_per_radius: 4.0,
        edges_per_interface: across,
        most_vertices: 4 * mesh.n_vertices(),
    });
    let angle = (1.0 - 2.0 * SHARE).acos();
    let mut composition: Vec<f64> =
        mesh.positions.iter().map(|x| 0.5 * (1.0 + ((angle - x.z.acos()) / width).tanh())).collect();
    // The amount is that of the sharp cap, whatever the width.
    let area = pellicle_surface::geometry::Geometry::new(&mesh).vertex_area;
    let total: f64 = area.iter().sum();
    for _ in 0..20 {
        let have = composition.iter().zip(&area).map(|(c, a)| c * a).sum::<f64>() / total;
        let room: f64 = composition.iter().zip(&area).map(|(c, a)| a * c * (1.0 - c)).sum::<f64>() / total;
        let push = (SHARE - have) / room;
        for c in &mut composition {
            *c = (*c + push * *c * (1.0 - *c)).clamp(0.0, 1.0);
        }
    }
    let state = State::at_rest(&parameters, mesh, &composition, &[], &[])?;
    let mut s = Simulation::new(parameters, state)?;
    let mut quiet = 0;
    for _ in 0..400 {
        let report = s.advance(f64::INFINITY)?;
        quiet = if report.dissipated / report.step < 1e-4 { quiet + 1 } else { 0 };
        if quiet > 3 {
            break;
        }
    }
    let scale = (s.measured.geometry.total_area / (4.0 * PI)).sqrt();
    let junction = interface_length(&s.state.mesh, &s.measured.composition) / TAU / scale;
    // Line energy scales with length, bending not at all.
    let free = s.energies.bending + s.energies.phase / scale;
    println!(
        "λ = {}, ε = {width}: {} vertices, {} steps, t = {:.2}, F = {free:.4}, r = {junction:.4}",
        case.line_tension,
        s.state.mesh.n_vertices(),
        s.state.ledger.accepted,
        s.state.time
    );
    Ok([s.state.mesh.n_vertices() as f64, free, junction])
}

fn check(case: &Case, widths: &[f64], across: f64, limits: [f64; 2]) -> Fallible {
    let found = widths.iter().map(|&w| rest(case, w, across)).collect::<Result<Vec<_>, _>>()?;
    let last = widths.len() - 1;
    for (k, name, wanted) in [(1, "F", case.free), (2, "junction radius", case.junction)] {
        // At a fixed number of edges across, mesh and width errors both fall with ε².
        let settled = if last > 0 {
            extrapolate((widths[last], found[last][k]), (widths[last - 1], found[last - 1][k]), 2.0)
        } else {
            found[0][k]
        };
        let mut measured: Vec<(f64, f64)> = widths.iter().zip(&found).map(|(w, f)| (*w, f[k])).collect();
        measured.push((0.0, settled));
        let quantity = format!("two-domain vesicle, x = 0.25, λ = {}: {name}", case.line_tension);
        Record::of("two_domain_vesicle", &quantity, SOURCE, wanted, "ε", measured, limits[k - 1]).check();
    }
    Ok(())
}

/// One wide interface: its own error is part of the limit.
#[test]
fn two_domains_with_a_wide_interface() -> Fallible {
    check(&CASES[1], &[0.25], 3.0, [0.03, 0.03])
}

#[test]
#[ignore = "long: run with --ignored"]
fn two_domains_extrapolated_in_interface_width() -> Fallible {
    for case in &CASES {
        check(case, &[0.28, 0.2, 0.14], 4.0, [0.005, 0.01])?;
    }
    Ok(())
}
