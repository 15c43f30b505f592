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

/// Profile (ρ, z) of two unit balls that a catenoid of waist `waist` joins smoothly.
fn dumbbell(waist: f64) -> Vec<[f64; 2]> {
    // ρ = w cosh(z/w) touches a unit sphere where both have the same slope and radius: ρ = √w.
    let touch = waist * (1.0 / waist.sqrt()).acosh();
    let centre = touch + (1.0 - waist).sqrt();
    (0..=8000)
        .map(|i| {
            let z = -(centre + 1.0) * (PI * i as f64 / 8000.0).cos();
            let rho = if z.abs() < touch {
                waist * (z / waist).cosh()
            } else {
                (1.0 - (z.abs() - centre).powi(2)).max(0.0).sqrt()
            };
            [if i == 0 || i == 8000 { 0.0 } else { rho }, z]
        })
        .collect()
}

/// Profile of a flat patch of radius `rim` from which, over a fillet of radius `fillet`, a tube of the given radius
/// rises to `length`; a ball of radius `ball` (at least that of the tube) closes it.
fn patch_with_tube(rim: f64, fillet: f64, radius: f64, length: f64, ball: f64) -> Vec<[f64; 2]> {
    let mut points = Vec::new();
    let steps = 4000;
    let foot = radius + fillet;
    points.extend((0..steps).map(|i| [rim + (foot - rim) * i as f64 / steps as f64, 0.0]));
    points.extend((0..steps).map(|i| {
        let (sine, cosine) = (0.5 * PI * i as f64 / steps as f64).sin_cos();
        [foot - fillet * sine, fillet * (1.0 - cosine)]
    }));
    points.extend((0..steps).map(|i| [radius, fillet + length * i as f64 / steps as f64]));
    let open = (radius / ball).asin();
    let centre = fillet + length + ball * open.cos();
    points.extend((0..=steps).map(|i| {
        let angle = open + (PI - open) * i as f64 / steps as f64;
        [if i == steps { 0.0 } else { ball * angle.sin() }, centre - ball * angle.cos()]
    }));
    points
}

/// Irregular mesh of the surface of revolution about z of a profile: rings at random phases, their vertices moved at
/// random along and around, made Delaunay. Ends of the profile with ρ = 0 are poles, others rims.
fn revolved(profile: &[[f64; 2]], edge: impl Fn(f64) -> f64, seed: u64) -> Mesh {
    let mut random = seed.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
    let mut uniform = move || {
        random = random.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
        (random >> 11) as f64 / (1u64 << 53) as f64 - 0.5
    };
    let mut arc = vec![0.0];
    let mut rows = vec![0.0];
    for pair in profile.windows(2) {
        let step = (pair[1][0] - pair[0][0]).hypot(pair[1][1] - pair[0][1]);
        arc.push(arc[arc.len() - 1] + step);
        rows.push(rows[rows.len() - 1] + step / (0.75f64.sqrt() * edge(pair[1][0])));
    }
    let (last, whole) = (profile.len() - 1, arc[profile.len() - 1]);
    let on_profile = |s: f64| {
        let i = arc.partition_point(|a| *a <= s).clamp(1, last);
        let share = (s - arc[i - 1]) / (arc[i] - arc[i - 1]);
        [0, 1].map(|k| profile[i - 1][k] + share * (profile[i][k] - profile[i - 1][k]))
    };
    let count = rows[last].round() as usize;
    let mut positions: Vec<Vec3> = Vec::new();
    let mut rings: Vec<Vec<u32>> = Vec::new();
    for row in 0..=count {
        let i = rows.partition_point(|r| *r < row as f64 * rows[last] / count as f64 * (1.0 - 1e-12)).min(last);
        let (rho, h) = (profile[i][0], edge(profile[i][0]));
        let pole = rho == 0.0;
        let end = row == 0 || row == count;
        let number = if pole { 1 } else { ((TAU * rho / h).round() as usize).max(5) };
        let phase = uniform();
        let mut ring = Vec::new();
        for k in 0..number {
            let jitter = if end { 0.0 } else { 0.35 };
            let angle = TAU * (k as f64 + jitter * uniform()) / number as f64 + phase;
            let s = (arc[i] + jitter * h.min(rho) * uniform()).clamp(0.0, whole);
            let [rho, z] = on_profile(s);
            ring.push(positions.len() as u32);
            positions.push(Vec3::new(rho * angle.cos(), rho * angle.sin(), z));
        }
        rings.push(ring);
    }
    let mut triangles = Vec::new();
    for pair in rings.windows(2) {
        zip(&pair[0], &pair[1], &positions, &mut triangles);
    }
    flip_to_delaunay(&Mesh::new(positions, triangles), 1e-9).unwrap().0
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
    flip_to_delaunay(&mesh, 1e-9).unwrap().0
}

#[test]
#[ignore = "prints"]
fn survey() {
    let show = |name: &str, mesh: &Mesh, exact: f64| {
        let topology = Topology::new(mesh.n_vertices(), &mesh.triangles).unwrap();
        let geometry = Geometry::new(mesh);
        let mut ms = f64::INFINITY;
        let mut found = Vec::new();
        for _ in 0..5 {
            let clock = || -> f64 {
                let stat = std::fs::read_to_string("/proc/thread-self/schedstat").unwrap();
                stat.split_whitespace().next().unwrap().parse::<f64>().unwrap() * 1e-6
            };
            let start = clock();
            found = necks::find(mesh, &topology, &geometry);
            ms = ms.min(clock() - start);
        }
        let radii: Vec<String> = found
            .iter()
            .map(|n| format!("{:.4}({:+.1}% {})", n.radius, 100.0 * (n.radius / exact - 1.0), n.crossings.len()))
            .collect();
        println!("{name:28} V {:6} {ms:7.2} ms  {} necks {radii:?}", mesh.n_vertices(), found.len());
    };
    for n in [600, 1200, 2500] {
        show("sphere", &irregular_sphere(n, 1).unwrap(), 1.0);
        for axes in [[1.0, 2.0, 3.0], [1.0, 1.0, 5.0], [3.0, 3.0, 1.0], [1.0, 1.0, 8.0]] {
            show(&format!("ellipsoid {axes:?}"), &irregular_ellipsoid(axes, n, 2).unwrap(), 1.0);
        }
        show("torus", &irregular_torus(2.0, 0.5, n, 3).unwrap(), 1.0);
        show("fat torus", &irregular_torus(2f64.sqrt(), 1.0, n, 3).unwrap(), 1.0);
        show("plain tube", &irregular_tube(1.0, 20.0, n, 4).unwrap(), 1.0);
    }
    show("capped tube", &capped_tube(1.0, 20.0, 0.3).unwrap(), 1.0);
    show("red cell", &red_cell(3.91, 0.25).unwrap(), 1.0);
    show("regular sphere", &sphere(1.0, 0.08).unwrap(), 1.0);
    for waves in [1, 2, 5, 8] {
        for seed in 0..2 {
            show(&format!("pearled {waves}"), &pearled(waves, 500 * waves, seed), 0.4);
        }
    }
    for waist in [0.7, 0.5, 0.3, 0.2, 0.1, 0.05] {
        for around in [8.0, 12.0, 20.0] {
            for seed in 0..3 {
                let edge = |rho: f64| (TAU * rho.max(waist) / around).min(0.2);
                show(&format!("dumbbell {waist} /{around}"), &revolved(&dumbbell(waist), edge, seed), waist);
            }
        }
    }
    for around in [8.0, 12.0, 20.0] {
        for seed in 0..2 {
            let edge = |rho: f64| (TAU * rho.max(0.1) / around).min(0.2);
            let bud = patch_with_tube(1.5, 0.1, 0.1, 0.01, 0.5);
            show(&format!("bud /{around}"), &revolved(&bud, edge, seed), 0.1);
            let tether = patch_with_tube(1.0, 0.2, 0.1, 2.0, 0.1);
            show(&format!("tether /{around}"), &revolved(&tether, edge, seed), 0.1);
            let mut bent = revolved(&tether, edge, seed);
            for x in &mut bent.positions {
                x.x += 0.3 * x.z * x.z;
            }
            show(&format!("bent tether /{around}"), &bent, 0.1);
        }
    }
}

