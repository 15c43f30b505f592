//! Irregular meshes, perturbations, and arbitrary proportions.

use pellicle_surface::mesh::check::{Requirement, check};
use pellicle_surface::mesh::shapes::*;
use pellicle_surface::{Mesh, MeshError, Topology};
use std::f64::consts::PI;

type Made = Result<Mesh, MeshError>;

#[test]
fn irregular_meshes_are_irregular_but_sound() {
    type Maker = fn(usize, u64) -> Made;
    let cases: [(&str, Maker, Requirement, i64); 4] = [
        ("sphere", irregular_sphere, Requirement::Closed, 2),
        (
            "ellipsoid",
            |n, seed| irregular_ellipsoid([1.0, 2.0, 3.0], n, seed),
            Requirement::Closed,
            2,
        ),
        (
            "torus",
            |n, seed| irregular_torus(2f64.sqrt(), 1.0, n, seed),
            Requirement::Closed,
            0,
        ),
        (
            "tube",
            |n, seed| irregular_tube(1.0, 8.0, n, seed),
            Requirement::Periodic,
            0,
        ),
    ];
    for (name, make, needs, characteristic) in cases {
        for seed in 0..4 {
            let mut mesh = make(1200, seed).unwrap();
            assert_eq!(mesh, make(1200, seed).unwrap(), "{name}: not reproducible");
            let report = check(&mut mesh, needs).unwrap();
            assert!(!report.turned_outward);
            assert_eq!(mesh.n_vertices(), 1200);
            assert_eq!(report.euler_characteristic, characteristic);
            // No slivers, but far from regular (measured: least quality 0.5 to 0.65, 35 to 50 % of valence 6).
            assert!(
                report.shape.least_quality > 0.35,
                "{name} {:?}",
                report.shape
            );
            let topology = Topology::new(mesh.n_vertices(), &mesh.triangles).unwrap();
            let six = (0..1200)
                .filter(|&v| topology.neighbours.of(v).len() == 6)
                .count();
            assert!((350..700).contains(&six), "{name}: {six} of valence 6");
            // Delaunay: opposite angles sum to no more than π, to the margin of the flips.
            for h in &topology.hinges {
                let angle = |at: u32| mesh.edge(at, h.i).angle(&mesh.edge(at, h.j));
                assert!(angle(h.k) + angle(h.l) < PI + 1e-6, "{name}");
            }
        }
        assert_ne!(make(1200, 1).unwrap(), make(1200, 2).unwrap());
    }
}

#[test]
fn perturbations_are_smooth_seeded_and_as_large_as_asked() {
    let largest = |before: &Mesh, after: &Mesh| {
        (0..before.n_vertices())
            .map(|v| {
                after
                    .nearest_image(after.positions[v] - before.positions[v])
                    .norm()
            })
            .fold(0.0, f64::max)
    };
    let shapes = [
        (sphere(1.0, 0.15), Requirement::Closed),
        (torus(1.5, 0.5, 0.15), Requirement::Closed),
        (tube(1.0, 8.0, 0.25), Requirement::Periodic),
        (disc(1.0, 0.1), Requirement::Framed),
    ];
    for (made, needs) in shapes {
        let still = made.unwrap();
        let mut moved = still.clone();
        perturb(&mut moved, 0.05, 7).unwrap();
        assert!((largest(&still, &moved) - 0.05).abs() < 1e-12);
        let mut again = still.clone();
        perturb(&mut again, 0.05, 7).unwrap();
        assert_eq!(moved, again);
        let report = check(&mut moved, needs).unwrap();
        // Smooth: triangles are sheared by no more than amplitude times wave number, some 30 %.
        assert!(report.shape.least_quality > 0.5, "{:?}", report.shape);
        if needs == Requirement::Framed {
            for (before, after) in still.positions.iter().zip(&moved.positions) {
                assert!(
                    (before.norm() - 1.0).abs() > 1e-12 || before == after,
                    "the rim moved"
                );
            }
        }
    }
    // Modes of degree 2 to 4 change volume and area of a sphere only in second order: 4πR²·O(a²/R).
    let mut mesh = sphere(1.0, 0.1).unwrap();
    let before = check(&mut mesh, Requirement::Closed).unwrap();
    perturb(&mut mesh, 0.01, 3).unwrap();
    let after = check(&mut mesh, Requirement::Closed).unwrap();
    assert!((after.volume.unwrap() - before.volume.unwrap()).abs() < 4.0 * PI * 5e-4);
    assert!((after.area - before.area).abs() < 4.0 * PI * 2e-3);
}

#[test]
fn tube_mode_has_its_amplitude_and_volume() {
    let (a, length) = (0.1, 8.0);
    let mut mesh = tube(1.0, length, 0.1).unwrap();
    displace_mode_tube(&mut mesh, a, 2).unwrap();
    let report = check(&mut mesh, Requirement::Periodic).unwrap();
    // ∫π(1 + a cos)² dz = πL(1 + a²/2); the mesh is O(h²) below (0.3 % at h = 0.1).
    let exact = PI * length * (1.0 + 0.5 * a * a);
    assert!((report.volume.unwrap() / exact - 1.0).abs() < 4e-3);
    let most = mesh
        .positions
        .iter()
        .map(|p| p.x.hypot(p.y))
        .fold(0.0, f64::max);
    assert!((most - 1.1).abs() < 1e-12);
    assert!(displace_mode_tube(&mut sphere(1.0, 0.3).unwrap(), 0.1, 1).is_err());
    assert!(displace_mode_tube(&mut mesh, 1.0, 1).is_err());
}

proptest::proptest! {
    #![proptest_config(proptest::prelude::ProptestConfig::with_cases(60))]

    /// Whatever the proportions, a generator gives a sound mesh or refuses.
    #[test]
    fn generators_never_give_a_broken_mesh(
        a in 0.1..3.0f64, b in 0.1..3.0f64, c in 0.1..3.0f64, edge in 0.15..1.5f64, seed in 0..100u64,
    ) {
        let n = (20.0 / edge) as usize;
        let size = |r: f64| edge * (0.3 + r);
        let cases = [
            (ellipsoid([a, b, c], edge), Requirement::Closed),
            (torus(a, b, edge), Requirement::Closed),
            (tube(a, b, edge), Requirement::Periodic),
            (capped_tube(a, b, edge), Requirement::Closed),
            (disc_graded(a, &size), Requirement::Framed),
            (red_cell(a, edge), Requirement::Closed),
            (oblate(a, b.min(1.0), edge), Requirement::Closed),
            (irregular_ellipsoid([a, b, c], n, seed), Requirement::Closed),
            (irregular_torus(a + b, b, n, seed), Requirement::Closed),
            (irregular_tube(a, b, n, seed), Requirement::Periodic),
        ];
        for (made, needs) in cases {
            match made {
                Ok(mut mesh) => {
                    let report = check(&mut mesh, needs).unwrap();
                    proptest::prop_assert!(!report.turned_outward);
                }
                Err(MeshError::Impossible { .. }) => {}
                Err(other) => proptest::prop_assert!(false, "{other}"),
            }
        }
    }
}
