//! Self-contact, against brute force and on shapes where the answer is known.

use pellicle_surface::contact::{approaches, closest, intersections};
use pellicle_surface::mesh::shapes::*;
use pellicle_surface::{Mesh, Topology, Vec3};

/// Two unit spheres with centres `apart` along a skew direction, as one mesh.
fn two_spheres(apart: f64) -> Mesh {
    let (one, other) = (irregular_sphere(400, 1).unwrap(), irregular_sphere(500, 2).unwrap());
    let shift = Vec3::new(1.0, 2.0, -0.7).normalize() * apart;
    let offset = one.n_vertices() as u32;
    let mut positions = one.positions;
    positions.extend(other.positions.iter().map(|x| x + shift));
    let mut triangles = one.triangles;
    triangles.extend(other.triangles.iter().map(|t| t.map(|v| v + offset)));
    Mesh::new(positions, triangles)
}

fn topology(mesh: &Mesh) -> Topology {
    Topology::new(mesh.n_vertices(), &mesh.triangles).unwrap()
}

#[test]
fn sound_surfaces_have_no_intersections() {
    let mut patch = disc(1.0, 0.1).unwrap();
    perturb(&mut patch, 0.2, 5).unwrap();
    for (name, mesh) in [
        ("sphere", irregular_sphere(1000, 3).unwrap()),
        ("torus", irregular_torus(2.0, 0.6, 1000, 3).unwrap()),
        ("red cell", red_cell(3.91, 0.3).unwrap()),
        ("tube", irregular_tube(1.0, 5.0, 1000, 3).unwrap()),
        ("patch", patch),
        ("two spheres", two_spheres(2.05)),
    ] {
        assert_eq!(intersections(&mesh), [], "{name}");
    }
}

#[test]
fn crossing_lobes_are_found() {
    let mesh = two_spheres(1.5);
    let pairs = intersections(&mesh);
    // The spheres cross along a circle of radius √(1 − 0.75²) = 0.66, about 24 edges of 0.17 long.
    assert!((40..200).contains(&pairs.len()), "{}", pairs.len());
    for &(s, t) in &pairs {
        assert!(s < 760 + 40 && t >= 796, "both in one sphere: {s} {t}");
        // Both lie near the circle: distances 1 from both centres, to a facet's depth and size.
        let centre = Vec3::new(1.0, 2.0, -0.7).normalize() * 1.5;
        for triangle in [s, t] {
            let x = mesh.corners(triangle as usize);
            let middle = (x[0] + x[1] + x[2]) / 3.0;
            assert!((middle.norm() - 1.0).abs() < 0.2 && ((middle - centre).norm() - 1.0).abs() < 0.2);
        }
    }
    // A lobe pushed through its own surface: one pole of a sphere drawn out through the other.
    let mut folded = irregular_sphere(800, 4).unwrap();
    for x in &mut folded.positions {
        if x.z > 0.8 {
            x.z -= 2.2 * (x.z - 0.8) / 0.2;
        }
    }
    let pairs = intersections(&folded);
    assert!(!pairs.is_empty());
    for (s, t) in pairs {
        let (s, t) = (folded.triangles[s as usize], folded.triangles[t as usize]);
        assert!(!s.iter().any(|v| t.contains(v)), "neighbours reported");
    }
}

#[test]
fn intersections_agree_with_all_pairs() {
    // Segment against triangle by solving for the crossing point, for every pair.
    let hits = |a: &[Vec3; 3], b: &[Vec3; 3]| {
        (0..3).any(|k| {
            let (p, d) = (a[k], a[(k + 1) % 3] - a[k]);
            let m = nalgebra::Matrix3::from_columns(&[b[1] - b[0], b[2] - b[0], -d]);
            m.lu().solve(&(p - b[0])).is_some_and(|s| {
                s.x >= 0.0 && s.y >= 0.0 && s.x + s.y <= 1.0 && (0.0..=1.0).contains(&s.z)
            })
        })
    };
    let mesh = two_spheres(1.2);
    let mut expected = Vec::new();
    for s in 0..mesh.n_triangles() {
        for t in s + 1..mesh.n_triangles() {
            if mesh.triangles[s].iter().any(|v| mesh.triangles[t].contains(v)) {
                continue;
            }
            let (a, b) = (mesh.corners(s), mesh.corners(t));
            if hits(&a, &b) || hits(&b, &a) {
                expected.push((s as u32, t as u32));
            }
        }
    }
    assert_eq!(intersections(&mesh), expected);
}

#[test]
fn crossings_through_the_period_are_found() {
    // A tube sheared so far in one place that it runs into its own image one period on.
    let mut mesh = tube(1.0, 4.0, 0.3).unwrap();
    for x in &mut mesh.positions {
        if x.x > 0.9 && (x.z - 3.2).abs() < 0.5 {
            x.x -= 3.0;
        }
    }
    let pairs = intersections(&mesh);
    assert!(!pairs.is_empty());
    // The same shape, shifted by half a period and wrapped, has the same crossings.
    for x in &mut mesh.positions {
        x.z = (x.z + 2.0).rem_euclid(4.0);
    }
    assert_eq!(intersections(&mesh), pairs);
}

#[test]
fn approaches_find_the_gap_and_leave_neighbours_out() {
    let gap = 0.1;
    let mesh = two_spheres(2.0 + gap);
    let sphere_of = |v: u32| v >= 400;
    let near = closest(&mesh, &topology(&mesh), 0.6, 6).unwrap();
    assert_ne!(sphere_of(near.a), sphere_of(near.b));
    // Vertices are not opposite to each other: at most half an edge (0.1) aside on each sphere.
    assert!(near.distance > gap && near.distance < 0.3, "{near:?}");

    // Against all pairs, on a tube through its period.
    let mesh = irregular_tube(0.4, 3.0, 400, 5).unwrap();
    let connected = topology(&mesh);
    let cutoff = 0.25;
    let found = approaches(&mesh, &connected, cutoff, 1);
    let mut expected = Vec::new();
    for a in 0..mesh.n_vertices() as u32 {
        for b in a + 1..mesh.n_vertices() as u32 {
            let distance = mesh.edge(a, b).norm();
            if distance < cutoff && !connected.neighbours.of(a as usize).contains(&b) {
                expected.push((a, b));
            }
        }
    }
    assert!(!expected.is_empty());
    assert_eq!(found.iter().map(|p| (p.a, p.b)).collect::<Vec<_>>(), expected);
    for p in &found {
        assert!((p.distance - mesh.edge(p.a, p.b).norm()).abs() < 1e-12);
    }
}
