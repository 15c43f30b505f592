//! Necks: found where there are some, with their radius, and nowhere else.

use pellicle_surface::geometry::Geometry;
use pellicle_surface::mesh::shapes::*;
use pellicle_surface::necks::{self, Neck};
use pellicle_surface::remesh::flip_to_delaunay;
use pellicle_surface::{Mesh, Topology, Vec3};
use std::f64::consts::{PI, TAU};

fn find(mesh: &Mesh) -> Vec<Neck> {
    let topology = Topology::new(mesh.n_vertices(), &mesh.triangles).unwrap();
    necks::find(mesh, &topology, &Geometry::new(mesh))
}

/// Profile ρ(z) of two balls of radius 1 that a catenary of revolution of waist `waist` joins smoothly, centred at
/// z = 0: half-length of the whole, and the profile.
fn dumbbell(waist: f64) -> (f64, impl Fn(f64) -> f64) {
    // Catenoid ρ = w cosh(z/w) touches the unit sphere centred at z = c where radius and slope agree:
    // normal of the sphere at polar angle t: ρ = sin t, dρ/dz = cot t with z = c − cos t; slope sinh(z/w) = cot t,
    // so cosh(z/w) = 1/sin t and w/sin t = sin t.
    let sine = waist.sqrt();
    let touch = waist * (1.0 / sine).acosh();
    let centre = touch + (1.0 - waist).sqrt();
    (centre + 1.0, move |z: f64| {
        let z = z.abs();
        if z < touch {
            waist * (z / waist).cosh()
        } else {
            (1.0 - (z - centre).powi(2)).max(0.0).sqrt()
        }
    })
}

/// Irregular mesh of a surface of revolution about z with the poles on its axis: rings of random phase and random
/// displacement along the surface, zipped and made Delaunay. `edge(ρ, z)`: edge length.
fn revolved(half: f64, profile: impl Fn(f64) -> f64, edge: impl Fn(f64, f64) -> f64, seed: u64) -> Mesh {
    let mut random = seed.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
    let mut uniform = move || {
        random = random.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
        (random >> 11) as f64 / (1u64 << 53) as f64 - 0.5
    };
    // Arc length of the profile, finely, by polar angle of z so that the poles are resolved.
    let n = 4000;
    let at = |i: usize| {
        let z = -half * (PI * i as f64 / n as f64).cos();
        (profile(z), z)
    };
    let mut positions = vec![Vec3::new(0.0, 0.0, -half)];
    let mut rings: Vec<Vec<u32>> = vec![vec![0]];
    let mut due = 0.0;
    for i in 1..n {
        let (a, b) = (at(i - 1), at(i));
        due += (b.0 - a.0).hypot(b.1 - a.1) / (0.75f64.sqrt() * edge(b.0, b.1));
        if due < 1.0 || at(n).1 - b.1 < 0.0 {
            continue;
        }
        due -= 1.0;
        let h = edge(b.0, b.1);
        let count = ((TAU * b.0 / h).round() as usize).max(3);
        let phase = uniform();
        let mut ring = Vec::new();
        for k in 0..count {
            let angle = TAU * (k as f64 + 0.5 * uniform()) / count as f64 + phase;
            let z = (b.1 + 0.3 * h * uniform() * (b.0 / (b.0 + h))).clamp(-half * 0.9999, half * 0.9999);
            let rho = profile(z);
            ring.push(positions.len() as u32);
            positions.push(Vec3::new(rho * angle.cos(), rho * angle.sin(), z));
        }
        rings.push(ring);
    }
    // The last ring may crowd the pole.
    let top = edge(0.0, half);
    if rings.last().is_some_and(|r| (positions[r[0] as usize] - Vec3::new(0.0, 0.0, half)).norm() < 0.5 * top) {
        let removed = rings.pop().unwrap();
        positions.truncate(removed[0] as usize);
    }
    rings.push(vec![positions.len() as u32]);
    positions.push(Vec3::new(0.0, 0.0, half));
    let mut triangles = Vec::new();
    for pair in rings.windows(2) {
        zip(&pair[0], &pair[1], &positions, &mut triangles);
    }
    let mut mesh = Mesh::new(positions, triangles);
    flip_to_delaunay(&mut mesh).unwrap();
    mesh
}

fn zip(lower: &[u32], upper: &[u32], x: &[Vec3], triangles: &mut Vec<[u32; 3]>) {
    let distance = |a: u32, b: u32| (x[a as usize] - x[b as usize]).norm();
    let (nl, nu) = (lower.len(), upper.len());
    let start = (0..nu)
        .min_by(|&a, &b| distance(lower[0], upper[a]).total_cmp(&distance(lower[0], upper[b])))
        .unwrap();
    let (mut i, mut j) = (0, 0);
    let steps = |n: usize| if n == 1 { 0 } else { n };
    while i < steps(nl) || j < steps(nu) {
        let (a, b) = (lower[i % nl], upper[(start + j) % nu]);
        let (next_a, next_b) = (lower[(i + 1) % nl], upper[(start + j + 1) % nu]);
        if j >= steps(nu) || (i < steps(nl) && distance(next_a, b) <= distance(a, next_b)) {
            triangles.push([a, next_a, b]);
            i += 1;
        } else {
            triangles.push([a, next_b, b]);
            j += 1;
        }
    }
}

/// Periodic tube r(z) = r₀(1 + 0.6 cos kz) of `waves` waves.
fn pearled(waves: usize, n_vertices: usize, seed: u64) -> Mesh {
    let length = 6.0 * waves as f64;
    let mut mesh = irregular_tube(1.0, length, n_vertices, seed).unwrap();
    for x in &mut mesh.positions {
        let r = 1.0 + 0.6 * (TAU * waves as f64 * x.z / length).cos();
        x.x *= r;
        x.y *= r;
    }
    flip_to_delaunay(&mut mesh).unwrap();
    mesh
}

#[test]
#[ignore = "prints"]
fn survey() {
    let show = |name: &str, mesh: &Mesh, exact: f64| {
        let topology = Topology::new(mesh.n_vertices(), &mesh.triangles).unwrap();
        let geometry = Geometry::new(mesh);
        let clock = std::time::Instant::now();
        let found = necks::find(mesh, &topology, &geometry);
        let ms = clock.elapsed().as_secs_f64() * 1e3;
        let radii: Vec<String> = found
            .iter()
            .map(|n| format!("{:.4}({:+.1}% {})", n.radius, 100.0 * (n.radius / exact - 1.0), n.crossings.len()))
            .collect();
        println!("{name:28} V {:6} {ms:7.2} ms  {} necks {radii:?}", mesh.n_vertices(), found.len());
    };
    for n in [300, 1200, 2500] {
        show("sphere", &irregular_sphere(n, 1).unwrap(), 1.0);
        for axes in [[1.0, 2.0, 3.0], [1.0, 1.0, 5.0], [3.0, 3.0, 1.0], [1.0, 1.0, 10.0]] {
            show(&format!("ellipsoid {axes:?}"), &irregular_ellipsoid(axes, n, 2).unwrap(), 1.0);
        }
        show("torus", &irregular_torus(2.0, 0.5, n, 3).unwrap(), 1.0);
        show("plain tube", &irregular_tube(1.0, 20.0, n, 4).unwrap(), 1.0);
    }
    show("capped tube", &capped_tube(1.0, 20.0, 0.3).unwrap(), 1.0);
    show("red cell", &red_cell(&RedCellShape::default(), 0.25).unwrap(), 1.0);
    show("regular sphere", &sphere(1.0, 0.08).unwrap(), 1.0);
    for waves in [1, 2, 5, 8] {
        for seed in 0..2 {
            show(&format!("pearled {waves}"), &pearled(waves, 500 * waves, seed), 0.4);
        }
    }
    for waist in [0.5, 0.3, 0.2, 0.1, 0.05] {
        let (half, profile) = dumbbell(waist);
        for around in [8.0, 12.0, 20.0] {
            for seed in 0..3 {
                let edge = |rho: f64, _| (TAU * rho.max(waist) / around).min(0.2);
                show(&format!("dumbbell {waist} /{around}"), &revolved(half, &profile, edge, seed), waist);
            }
        }
    }
}
