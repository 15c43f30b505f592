//! Every exact force against finite differences of its energy, on irregular meshes.
//!
//! Fourth-order central differences with steps of 1e-3 edges leave a relative error of about 1e-9 here; the bound
//! is 1e-6 of the largest component. A wrong sign or a missing term is an error of order one.

use pellicle_physics::coupling::MaterialFields;
use pellicle_physics::energy::{bending, gaussian, interface, repulsion, stretching};
use pellicle_physics::parameters::{Blend, Parameters, Phases, Repulsion};
use pellicle_surface::contact::facing;
use pellicle_surface::geometry::{Curvature, CurvatureGradient, Geometry, RimCondition, Stencils};
use pellicle_surface::mesh::shapes;
use pellicle_surface::{Mesh, Topology, Vec3};

const BOUND: f64 = 1e-6;

/// A closed, a periodic and a framed irregular mesh with fields that vary from vertex to vertex.
fn meshes() -> Vec<(&'static str, Mesh)> {
    let mut patch = shapes::disc(1.0, 0.15).expect("disc");
    shapes::perturb(&mut patch, 0.2, 3).expect("bumps");
    let mut ellipsoid = shapes::irregular_ellipsoid([1.0, 0.8, 1.4], 200, 11).expect("ellipsoid");
    shapes::perturb(&mut ellipsoid, 0.05, 5).expect("bumps");
    vec![
        ("ellipsoid", ellipsoid),
        ("tube", shapes::irregular_tube(0.6, 3.0, 180, 7).expect("tube")),
        ("patch", patch),
    ]
}

fn parameters() -> Parameters {
    let mut p = Parameters::bare(1.0, 1.0, 1e4);
    p.bending_rigidity = Blend { at_zero: 1.0, at_one: 3.0, per_coverage: 0.7 };
    p.spontaneous_curvature = Blend { at_zero: 0.3, at_one: -1.2, per_coverage: 2.5 };
    p.gaussian_modulus = Blend { at_zero: -0.5, at_one: 1.5, per_coverage: 0.4 };
    p
}

fn wave(mesh: &Mesh, phase: f64) -> Vec<f64> {
    mesh.positions
        .iter()
        .map(|x| 0.5 + 0.35 * (2.1 * x.x + 1.3 * x.y * x.y - 1.7 * x.z + phase).sin())
        .collect()
}

/// Largest difference between a gradient and differences of the energy, relative to the largest component.
fn worst(mesh: &Mesh, skip: &dyn Fn(usize) -> bool, gradient: &[Vec3], energy: &dyn Fn(&Mesh) -> f64) -> f64 {
    worst_by_steps(mesh, 1e-3, skip, gradient, energy)
}

/// As [`worst`], with steps of a given share of the mean edge.
fn worst_by_steps(
    mesh: &Mesh,
    share: f64,
    skip: &dyn Fn(usize) -> bool,
    gradient: &[Vec3],
    energy: &dyn Fn(&Mesh) -> f64,
) -> f64 {
    let h = share * mesh.mean_edge_length();
    let scale = gradient.iter().map(|g| g.norm()).fold(0.0, f64::max);
    let mut worst: f64 = 0.0;
    let mut moved = mesh.clone();
    for i in (0..mesh.n_vertices()).step_by(3).filter(|&i| !skip(i)) {
        for axis in 0..3 {
            let mut at = |s: f64| {
                moved.positions[i][axis] = mesh.positions[i][axis] + s * h;
                let e = energy(&moved);
                moved.positions[i][axis] = mesh.positions[i][axis];
                e
            };
            let slope = (8.0 * (at(1.0) - at(-1.0)) - (at(2.0) - at(-2.0))) / (12.0 * h);
            worst = worst.max((slope - gradient[i][axis]).abs() / scale);
        }
    }
    worst
}

fn material(p: &Parameters, mesh: &Mesh) -> MaterialFields {
    let mut material = MaterialFields::default();
    material.update(p, mesh.n_vertices(), &wave(mesh, 0.0), &wave(mesh, 1.0));
    material
}

#[test]
fn bending_force_is_the_exact_gradient() {
    let p = parameters();
    for (name, mesh) in meshes() {
        let topology = Topology::new(mesh.n_vertices(), &mesh.triangles).expect("manifold");
        let material = material(&p, &mesh);
        let normals: Vec<Vec3> = (0..mesh.n_vertices()).map(|i| Vec3::new(0.1 * (i as f64).sin(), 0.05, 1.0).normalize()).collect();
        for clamped in [false, true] {
            if clamped && topology.is_closed() {
                continue;
            }
            let rim = || if clamped { RimCondition::Clamped(&normals) } else { RimCondition::Free };
            let held: Vec<bool> = topology.on_rim.iter().map(|r| *r && !clamped).collect();
            let energy = |m: &Mesh| {
                bending::energy(&Curvature::new(m, &topology, &Geometry::new(m), rim()), &material, &held)
            };
            let geometry = Geometry::new(&mesh);
            let curvature = Curvature::new(&mesh, &topology, &geometry, rim());
            let stencils = Stencils::new(&topology);
            let mut derivative = CurvatureGradient::default();
            derivative.update(&mesh, &topology, &stencils, &geometry, rim());
            let mut gradient = vec![Vec3::zeros(); mesh.n_vertices()];
            let free = vec![false; mesh.n_vertices()];
            bending::rows_and_gradient(
                &stencils, &curvature, &derivative, &material, &held, &free, &mut Vec::new(), &mut gradient,
            );
            // A clamped rim does not move.
            let error = worst(&mesh, &|i| clamped && topology.on_rim[i], &gradient, &energy);
            println!("bending, {name}, clamped {clamped}: {error:.1e}");
            assert!(error < BOUND, "{name}, clamped {clamped}: {error:e}");
        }
    }
}

#[test]
fn gaussian_force_is_the_exact_gradient() {
    let p = parameters();
    for (name, mesh) in meshes() {
        let topology = Topology::new(mesh.n_vertices(), &mesh.triangles).expect("manifold");
        let material = material(&p, &mesh);
        let energy = |m: &Mesh| {
            gaussian::energy(&topology, &Curvature::new(m, &topology, &Geometry::new(m), RimCondition::Free), &material)
        };
        let mut gradient = vec![Vec3::zeros(); mesh.n_vertices()];
        gaussian::add_gradient(&mesh, &topology, &Geometry::new(&mesh), &material, &mut gradient);
        let error = worst(&mesh, &|_| false, &gradient, &energy);
        println!("Gaussian, {name}: {error:.1e}");
        assert!(error < BOUND, "{name}: {error:e}");
    }
}

#[test]
fn stretching_and_volume_forces_are_exact_gradients() {
    for (name, mesh) in meshes() {
        let geometry = Geometry::new(&mesh);
        let lipid: Vec<f64> = geometry.vertex_area.iter().zip(wave(&mesh, 2.0)).map(|(a, w)| a * (0.8 + 0.3 * w)).collect();
        let energy = |m: &Mesh| stretching::energy(3.0, &Geometry::new(m).vertex_area, &lipid);
        let tension = stretching::tension(3.0, &geometry.vertex_area, &lipid);
        let mut gradient = vec![Vec3::zeros(); mesh.n_vertices()];
        for (t, corners) in mesh.triangles.iter().enumerate() {
            let mean = corners.iter().map(|&v| tension[v as usize]).sum::<f64>() / 3.0;
            for c in 0..3 {
                gradient[corners[c] as usize] += geometry.gradients[t][c] * (geometry.area[t] * mean);
            }
        }
        let error = worst(&mesh, &|_| false, &gradient, &energy);
        println!("stretching, {name}: {error:.1e}");
        assert!(error < BOUND, "{name}: {error:e}");
        let volume = |m: &Mesh| Geometry::new(m).volume;
        // Under a patch the volume counts from the origin; only interior vertices change it by their own motion.
        let rim = Topology::new(mesh.n_vertices(), &mesh.triangles).expect("manifold").on_rim;
        let error = worst(&mesh, &|i| rim[i], &geometry.volume_gradient, &volume);
        println!("volume, {name}: {error:.1e}");
        assert!(error < BOUND, "{name}: {error:e}");
    }
}

#[test]
fn interface_force_is_the_exact_gradient() {
    let phases = Phases { line_tension: 2.0, interface_width: 0.3, diffusion_constant: 1.0, width_per_radius: 0.0 };
    for (name, mesh) in meshes() {
        let u: Vec<f64> = wave(&mesh, 0.4).iter().map(|f| 2.0 * f - 1.0).collect();
        // The width belongs to the vertices and stays with them.
        let width: Vec<f64> = wave(&mesh, 0.1).iter().map(|f| 0.6 * f).collect();
        let mut fields = interface::InterfaceFields::default();
        fields.update(&mesh, &phases, &width);
        let local = fields.local_energy(&u);
        let energy = |m: &Mesh| interface::energy(m, &Geometry::new(m), &fields, &u);
        let mut gradient = vec![Vec3::zeros(); mesh.n_vertices()];
        interface::add_exact_gradient(&mesh, &Geometry::new(&mesh), &local, fields.gamma(), &u, &mut gradient);
        let error = worst(&mesh, &|_| false, &gradient, &energy);
        println!("interface, {name}: {error:.1e}");
        assert!(error < BOUND, "{name}: {error:e}");
    }
}

/// Two facing bodies, a thin body whose walls face each other, and a tube that faces its image across the period.
#[test]
fn repulsion_force_is_the_exact_gradient() {
    let joined = |one: &Mesh, other: &Mesh, shift: Vec3| {
        let offset = one.n_vertices() as u32;
        let mut both = one.clone();
        both.positions.extend(other.positions.iter().map(|x| x + shift));
        both.triangles.extend(other.triangles.iter().map(|t| t.map(|v| v + offset)));
        both
    };
    let ball = |n, seed| shapes::irregular_ellipsoid([1.0, 1.0, 0.9], n, seed).expect("ball");
    let mut seam = shapes::irregular_ellipsoid([0.8, 0.8, 1.0], 140, 3).expect("body");
    seam.period = Some(2.3);
    let mut flat = ball(160, 4);
    flat.positions.iter_mut().for_each(|x| x.z *= 0.15);
    for (name, mesh) in [
        ("two bodies", joined(&ball(120, 1), &ball(140, 2), Vec3::new(0.3, 0.2, 1.95))),
        ("thin body", flat),
        ("across the period", seam),
    ] {
        let topology = Topology::new(mesh.n_vertices(), &mesh.triangles).expect("manifold");
        let law = Repulsion { pressure: 7.0, decay_length: 0.04 };
        let reach = repulsion::REACH * law.decay_length;
        let reach = mesh.period.map_or(reach, |period| reach.min(0.4 * period));
        let contacts = |m: &Mesh| facing(m, &topology, &Geometry::new(m), reach);
        let energy = |m: &Mesh| repulsion::energy(&law, &Geometry::new(m).vertex_area, &contacts(m));
        let found = contacts(&mesh);
        assert!(found.len() > 20, "{name}: {} contacts", found.len());
        let mut gradient = vec![Vec3::zeros(); mesh.n_vertices()];
        repulsion::add_gradient(&law, &topology, &Geometry::new(&mesh), &found, &mut gradient);
        // Second derivatives jump where the nearest place passes from one triangle, side or corner to the next; steps
        // this short seldom straddle such a place, and rounding leaves 1e-10.
        let error = worst_by_steps(&mesh, 1e-5, &|_| false, &gradient, &energy);
        println!("repulsion, {name}: {error:.1e}");
        assert!(error < BOUND, "{name}: {error:e}");
        // Action and reaction.
        let net = gradient.iter().fold(Vec3::zeros(), |sum, g| sum + g);
        let size: f64 = gradient.iter().map(|g| g.norm()).sum();
        assert!(net.norm() < 1e-12 * size, "{name}: a net force of {net:?}");
    }
}

/// Derivatives with respect to composition and coverage at fixed shape, by which bending drives diffusion and
/// binding.
#[test]
fn field_derivatives_are_exact() {
    let p = parameters();
    for (name, mesh) in meshes() {
        let topology = Topology::new(mesh.n_vertices(), &mesh.triangles).expect("manifold");
        let curvature = Curvature::new(&mesh, &topology, &Geometry::new(&mesh), RimCondition::Free);
        let held = topology.on_rim.clone();
        let (phi, theta) = (wave(&mesh, 0.0), wave(&mesh, 1.0));
        let n = mesh.n_vertices();
        let energy = |phi: &[f64], theta: &[f64]| {
            let mut m = MaterialFields::default();
            m.update(&p, n, phi, theta);
            bending::energy(&curvature, &m, &held) + gaussian::energy(&topology, &curvature, &m)
        };
        let mut m = MaterialFields::default();
        m.update(&p, n, &phi, &theta);
        let (mut by_phi, mut by_theta) = (vec![0.0; n], vec![0.0; n]);
        bending::add_field_derivatives(&p, &curvature, &m, &held, &phi, Some(&mut by_phi), Some(&mut by_theta));
        gaussian::add_field_derivatives(&p, &topology, &curvature, &phi, Some(&mut by_phi), Some(&mut by_theta));
        let scale = by_phi.iter().chain(&by_theta).map(|x| x.abs()).fold(0.0, f64::max);
        let h = 1e-3;
        for i in (0..n).step_by(7) {
            let slope = |which: usize| {
                let at = |s: f64| {
                    let (mut a, mut b) = (phi.clone(), theta.clone());
                    if which == 0 { a[i] += s * h } else { b[i] += s * h };
                    energy(&a, &b)
                };
                (8.0 * (at(1.0) - at(-1.0)) - (at(2.0) - at(-2.0))) / (12.0 * h)
            };
            for (found, wanted) in [(by_phi[i], slope(0)), (by_theta[i], slope(1))] {
                assert!((found - wanted).abs() < BOUND * scale, "{name}, vertex {i}: {found} against {wanted}");
            }
        }
    }
}
