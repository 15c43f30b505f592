//! Diagnostics and fields on states where their values are known.
//!
//! Tolerances: vertices lie on the smooth surface, so measures are off by terms of second order in the edge; each
//! bound stands beside the error measured.

use pellicle_physics::diagnostics::{Diagnostics, chemical_potential, fields, size};
use pellicle_physics::parameters::{
    AreaCondition, BindingRegion, Blend, Load, Parameters, Phases, Protein, Pull, Rim, VolumeCondition,
};
use pellicle_physics::{Simulation, State};
use pellicle_surface::mesh::shapes;
use pellicle_surface::{Mesh, Vec3};
use std::f64::consts::{PI, TAU};

fn simulation(parameters: Parameters, mesh: Mesh, composition: &[f64], coverage: &[f64]) -> Simulation {
    let state = State::at_rest(&parameters, mesh, composition, coverage, &[]).expect("state");
    let mut simulation = Simulation::new(parameters, state.clone()).expect("simulation");
    // A simulation gives its lipids the density that suits the start shape; here values known beforehand are wanted.
    simulation.state = state;
    simulation.measure();
    simulation
}

fn near(value: f64, exact: f64, tolerance: f64) {
    assert!((value / exact - 1.0).abs() < tolerance, "{value} is not {exact} (±{tolerance})");
}

fn phases() -> Phases {
    Phases { line_tension: 1.0, interface_width: 0.1, diffusion_constant: 1.0, width_per_radius: 0.0 }
}

fn protein() -> Protein {
    Protein {
        attach_rate: 1.0,
        detach_rate: 2.0,
        site_area: 0.01,
        thermal_energy: 1.0,
        interaction: -3.0,
        gradient_energy: 0.1,
        phase_preference: 5.0,
        diffusion_constant: 1.0,
        region: BindingRegion::Everywhere,
    }
}

#[test]
fn bare_sphere() {
    let radius = 2.0;
    let mut mesh = shapes::irregular_sphere(1500, 1).expect("sphere");
    mesh.positions.iter_mut().for_each(|x| *x *= radius);
    let mut p = Parameters::bare(20.0, 3.0, 1e5);
    p.area = AreaCondition::Reservoir(4.0);
    p.volume = VolumeCondition::Pressure(0.5);
    let mut s = simulation(p, mesh, &[], &[]);
    let spin = Vec3::new(0.0, 0.0, 0.7);
    s.state.velocity = s.state.mesh.positions.iter().map(|x| spin.cross(x)).collect();
    let d = Diagnostics::measure(&s);
    // Second order: about (edge/R)²/4 = 0.3 %.
    near(d.area, 4.0 * PI * radius * radius, 5e-3);
    near(d.volume.expect("closed"), 4.0 / 3.0 * PI * radius.powi(3), 8e-3);
    near(d.reduced_volume.expect("closed"), 1.0, 2e-3);
    assert_eq!(d.pressure, Some(0.5));
    for tension in [d.tension_mean, d.tension_min, d.tension_max] {
        near(tension, 4.0, 1e-12);
    }
    // The fastest vertex lies within half an edge of the equator.
    near(d.speed_max, 0.7 * radius, 2e-3);
    near(size(&s), radius, 3e-3);
    near(d.foppl_von_karman.expect("rigid"), 4.0 * radius * radius / 20.0, 5e-3);
    near(d.scriven_love.expect("rigid"), 3.0 * 0.7 * radius * radius / 20.0, 5e-3);
    assert_eq!(d.vertex_count, 1500);
    assert!(d.quality_min > 0.3 && d.quality_min < 1.0);
    near(d.edge_length_mean, s.state.mesh.mean_edge_length(), 1e-12);
    assert_eq!(
        (d.composition_mean, d.composition_total, d.domain_count, d.interface_length),
        (None, None, None, None)
    );
    assert_eq!((d.coverage_mean, d.bound_area, d.load_force(), d.load_extension()), (None, None, None, None));
    assert_eq!((d.neck_radius, d.neck_count()), (None, 0));

    let f = fields(&s);
    let area = &s.measured.geometry.vertex_area;
    let mean = |list: &[f64]| list.iter().zip(area).map(|(v, a)| v * a).sum::<f64>() / d.area;
    near(mean(&f.mean_curvature), 1.0 / radius, 3e-3);
    near(mean(&f.gaussian_curvature), 1.0 / radius / radius, 8e-3);
    near(mean(&f.bending_density), 0.5 * 20.0 * (2.0 / radius) * (2.0 / radius), 8e-3);
    for (normal, x) in f.normal.iter().zip(&s.state.mesh.positions) {
        assert!(normal.dot(x) > 0.99 * radius);
    }
    // A spinning sphere does not shear.
    assert!(f.shear_rate.iter().all(|rate| *rate < 1e-12));
    assert!(f.dissipation.iter().all(|rate| rate.abs() < 1e-12));
    assert!(f.composition.is_none() && f.coverage.is_none() && f.chemical_potential.is_none());
}

#[test]
fn pressure_of_a_fixed_volume_is_known_after_a_step() {
    let mesh = shapes::irregular_ellipsoid([1.0, 1.0, 1.3], 400, 2).expect("ellipsoid");
    let mut p = Parameters::bare(1.0, 1.0, 1e4);
    let volume = pellicle_surface::geometry::Geometry::new(&mesh).volume;
    p.volume = VolumeCondition::Fixed(vec![(0.0, volume)]);
    let mut s = simulation(p, mesh, &[], &[]);
    assert_eq!(Diagnostics::measure(&s).pressure, None);
    s.advance(1.0).expect("step");
    let d = Diagnostics::measure(&s);
    assert_eq!(d.pressure, Some(s.state.pressure));
    assert!(d.tension_min < d.tension_mean && d.tension_mean < d.tension_max);
    assert!(d.speed_max > 0.0);
}

#[test]
fn osmotic_pressure_at_the_start() {
    let mesh = shapes::irregular_sphere(400, 2).expect("sphere");
    let mut p = Parameters::bare(1.0, 1.0, 1e4);
    p.volume = VolumeCondition::Osmotic { inside: 8.0, outside: 1.5, permeability: None };
    let s = simulation(p, mesh, &[], &[]);
    let d = Diagnostics::measure(&s);
    near(d.pressure.expect("osmotic"), 8.0 / d.volume.expect("closed") - 1.5, 1e-12);
}

/// φ of domains: caps about the given directions, cut at cosine `cut`, with tanh profiles.
fn caps(mesh: &Mesh, centres: &[Vec3], cut: f64) -> Vec<f64> {
    let angle = cut.acos();
    mesh.positions
        .iter()
        .map(|x| {
            let inside =
                centres.iter().map(|c| angle - x.angle(c)).fold(f64::NEG_INFINITY, f64::max);
            0.5 * (1.0 + (inside / 0.1).tanh())
        })
        .collect()
}

#[test]
fn domains_and_their_lines() {
    let mesh = shapes::irregular_sphere(3000, 3).expect("sphere");
    let axes = [Vec3::x(), Vec3::y(), Vec3::z(), -Vec3::x(), -Vec3::y()];
    for (count, cut) in [(1, 0.3), (2, 0.8), (5, 0.9)] {
        let mut p = Parameters::bare(1.0, 1.0, 1e4);
        p.phases = Some(phases());
        let composition = caps(&mesh, &axes[..count], cut);
        let line = count as f64 * TAU * (1.0 - cut * cut).sqrt();
        for inverted in [false, true] {
            let composition: Vec<f64> =
                composition.iter().map(|c| if inverted { 1.0 - c } else { *c }).collect();
            let s = simulation(p.clone(), mesh.clone(), &composition, &[]);
            let d = Diagnostics::measure(&s);
            assert_eq!(d.domain_count, Some(count));
            // Chords of a circle of radius 0.44 by edges of 0.07: (0.07/0.44)²/24 = 0.1 %, and the curvature of φ.
            near(d.interface_length.expect("phases"), line, 5e-3);
            let total: f64 = composition.iter().zip(&s.state.lipid).map(|(c, m)| c * m).sum();
            near(d.composition_total.expect("phases"), total, 1e-12);
            near(d.composition_mean.expect("phases"), total / s.state.lipid.iter().sum::<f64>(), 1e-12);
        }
    }
    // One phase alone has neither domains nor lines.
    let mut p = Parameters::bare(1.0, 1.0, 1e4);
    p.phases = Some(phases());
    let s = simulation(p, mesh, &vec![0.2; 3000], &[]);
    let d = Diagnostics::measure(&s);
    assert_eq!((d.domain_count, d.interface_length), (Some(0), Some(0.0)));
}

#[test]
fn periodic_tube_with_twist_and_protein() {
    let (radius, length, rate) = (0.5, 3.0, 0.7);
    let mesh = shapes::irregular_tube(radius, length, 1500, 4).expect("tube");
    let coverage: Vec<f64> = mesh.positions.iter().map(|x| 0.3 + 0.2 * x.x).collect();
    let mut p = Parameters::bare(1.0, 3.0, 1e4);
    p.protein = Some(protein());
    p.area = AreaCondition::Reservoir(1.0);
    let mut s = simulation(p, mesh, &[], &coverage);
    let k = TAU / length;
    s.state.velocity = s
        .state
        .mesh
        .positions
        .iter()
        .map(|x| Vec3::new(-x.y, x.x, 0.0) * (rate / k * (k * x.z).sin() / radius))
        .collect();
    let d = Diagnostics::measure(&s);
    near(d.volume.expect("periodic"), PI * radius * radius * length, 1e-2);
    assert_eq!(d.reduced_volume, None);
    near(size(&s), radius, 5e-3);
    near(d.coverage_mean.expect("protein"), 0.3, 1e-3);
    near(d.bound_area.expect("protein"), 0.3 * d.area, 1e-3);
    assert_eq!(d.neck_count(), 0);
    let f = fields(&s);
    let mesh = &s.state.mesh;
    for (t, shear) in f.shear_rate.iter().enumerate() {
        let x = mesh.corners(t);
        let z = (x[0].z + x[1].z + x[2].z) / 3.0;
        // First order on triangles: half an edge (0.05) times k.
        assert!((shear - rate * (k * z).cos().abs()).abs() < 0.06 * rate, "{shear} at {z}");
        // With a lipid reservoir dilation costs nothing: ζ γ̇² is all.
        assert!((f.dissipation[t] - 3.0 * shear * shear).abs() < 1e-12);
    }
}

#[test]
fn patch_with_loads() {
    let mesh = shapes::disc(1.0, 0.1).expect("disc");
    let mut p = Parameters::bare(1.0, 1.0, 1e4);
    p.rim = Some(Rim::Hinged);
    p.spontaneous_curvature = Blend::uniform(0.6);
    p.area = AreaCondition::Reservoir(2.0);
    let up = Vec3::new(0.0, 0.0, 2.0);
    let rest = Vec3::zeros();
    for (pull, direction) in [
        (Pull::Force(vec![(0.0, rest), (1.0, up), (2.0, Vec3::x())]), Vec3::z()),
        (Pull::Trap { stiffness: 5.0, path: vec![(0.0, rest), (1.0, -up)] }, -Vec3::z()),
    ] {
        p.loads = vec![Load { centre: rest, patch_radius: 0.2, pull }];
        let mut s = simulation(p.clone(), mesh.clone(), &[], &[]);
        s.state.loads[0].force = Vec3::new(1.0, 0.0, 3.0);
        s.state.loads[0].position = s.state.loads[0].start + Vec3::new(0.3, 0.0, 0.4);
        let d = Diagnostics::measure(&s);
        assert_eq!((d.volume, d.reduced_volume, d.pressure), (None, None, None));
        near(d.load_force().expect("load"), 3.0 * direction.z, 1e-12);
        near(d.load_extension().expect("load"), 0.4 * direction.z, 1e-9);
        near(size(&s), 1.0, 5e-3);
        near(d.foppl_von_karman.expect("rigid"), 2.0, 1e-2);
        let f = fields(&s);
        for i in 0..s.state.mesh.n_vertices() {
            let rim = s.connectivity.topology.on_rim[i];
            let (h, density) = if rim { (0.3, 0.0) } else { (0.0, 0.18) };
            assert!((f.mean_curvature[i] - h).abs() < 1e-12 && (f.bending_density[i] - density).abs() < 1e-12);
            assert!(f.gaussian_curvature[i].abs() < 1e-9);
        }
    }
    // A load that never pulls has no direction.
    p.loads = vec![Load { centre: rest, patch_radius: 0.2, pull: Pull::Force(vec![(0.0, rest)]) }];
    let s = simulation(p, mesh, &[], &[]);
    assert!(Diagnostics::measure(&s).loads.is_empty());
}

/// The chemical potential is ∂F/∂(φ m), every coupling included.
#[test]
fn chemical_potential_is_the_derivative_of_the_free_energy() {
    let mut mesh = shapes::irregular_ellipsoid([1.0, 0.8, 1.4], 300, 5).expect("ellipsoid");
    shapes::perturb(&mut mesh, 0.05, 5).expect("bumps");
    let composition: Vec<f64> = mesh.positions.iter().map(|x| 0.5 + 0.3 * (3.0 * x.z).sin()).collect();
    let coverage: Vec<f64> = mesh.positions.iter().map(|x| 0.4 + 0.2 * x.x).collect();
    let mut p = Parameters::bare(1.0, 1.0, 1e4);
    p.bending_rigidity = Blend { at_zero: 1.0, at_one: 3.0, per_coverage: 0.7 };
    p.spontaneous_curvature = Blend { at_zero: 0.3, at_one: -1.2, per_coverage: 2.5 };
    p.gaussian_modulus = Blend { at_zero: -0.5, at_one: 1.5, per_coverage: 0.4 };
    p.phases = Some(phases());
    p.protein = Some(protein());
    let mut s = simulation(p, mesh, &composition, &coverage);
    let potential = chemical_potential(&s).expect("phases");
    let scale = potential.iter().map(|v| v.abs()).fold(0.0, f64::max);
    for i in (0..300).step_by(7) {
        let amount = s.state.composition_amount[i];
        let h = 1e-4 * s.state.lipid[i];
        let mut at = |shift: f64| {
            s.state.composition_amount[i] = amount + shift;
            s.measure();
            s.energies.total()
        };
        let slope = (at(h) - at(-h)) / (2.0 * h);
        at(0.0);
        // Central differences: 1e-8 from the step, 1e-8 from rounding.
        assert!((slope - potential[i]).abs() < 1e-5 * scale, "{slope} {}", potential[i]);
    }
}
