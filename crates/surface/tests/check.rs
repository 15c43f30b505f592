//! The check of a mesh finds each defect and names its mend; the mends work when asked for.

use pellicle_surface::mesh::check::*;
use pellicle_surface::mesh::shapes::{disc, sphere, torus, tube};
use pellicle_surface::{Mesh, MeshError, Vec3};
use std::f64::consts::PI;

fn ball() -> Mesh {
    sphere(1.0, 0.3).unwrap()
}

/// Every triangle with corners of its own.
fn soup(mesh: &Mesh) -> Mesh {
    let positions = mesh
        .triangles
        .iter()
        .flatten()
        .map(|&v| mesh.positions[v as usize])
        .collect();
    let triangles = (0..mesh.n_triangles() as u32)
        .map(|t| [3 * t, 3 * t + 1, 3 * t + 2])
        .collect();
    Mesh::new(positions, triangles)
}

#[test]
fn good_meshes_pass_unchanged() {
    for (mesh, needs, rims) in [
        (ball(), Requirement::Closed, 0),
        (torus(1.0, 0.5, 0.2).unwrap(), Requirement::Closed, 0),
        (tube(1.0, 4.0, 0.3).unwrap(), Requirement::Periodic, 0),
        (disc(1.0, 0.2).unwrap(), Requirement::Framed, 31),
    ] {
        let mut checked = mesh.clone();
        let report = check(&mut checked, needs).unwrap();
        assert_eq!(mesh, checked);
        assert_eq!(
            (
                report.rim_edges,
                report.components,
                report.coincident_rim_points
            ),
            (rims, 1, 0)
        );
        assert_eq!(check(&mut checked, Requirement::Any).unwrap(), report);
        let shape = report.shape;
        assert!(shape.shortest_edge <= shape.mean_edge && shape.mean_edge <= shape.longest_edge);
        assert!(shape.smallest_angle < PI / 3.0 + 1e-12 && shape.largest_angle > PI / 3.0 - 1e-12);
    }
}

#[test]
fn an_equilateral_tetrahedron_has_quality_one() {
    let p = [
        (1.0, 1.0, 1.0),
        (1.0, -1.0, -1.0),
        (-1.0, 1.0, -1.0),
        (-1.0, -1.0, 1.0),
    ];
    let positions = p.map(|(x, y, z)| Vec3::new(x, y, z)).to_vec();
    // All inward: the volume (edge √8: 8/3) comes out negative, the check turns the surface.
    let mut mesh = Mesh::new(positions, vec![[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]]);
    let report = check(&mut mesh, Requirement::Closed).unwrap();
    assert!(report.turned_outward);
    assert!((report.volume.unwrap() - 8.0 / 3.0).abs() < 1e-14);
    assert!((report.area - 8.0 * 3f64.sqrt()).abs() < 1e-13);
    let shape = report.shape;
    for (value, exact) in [
        (shape.least_quality, 1.0),
        (shape.mean_quality, 1.0),
        (shape.smallest_angle, PI / 3.0),
        (shape.largest_angle, PI / 3.0),
        (shape.shortest_edge, 8f64.sqrt()),
        (shape.longest_edge, 8f64.sqrt()),
    ] {
        assert!((value - exact).abs() < 1e-14, "{shape:?}");
    }
    assert!(
        !check(&mut mesh, Requirement::Closed)
            .unwrap()
            .turned_outward
    );
}

#[test]
fn every_defect_is_named() {
    let verdict = |spoil: &dyn Fn(&mut Mesh), needs| {
        let mut mesh = ball();
        spoil(&mut mesh);
        check(&mut mesh, needs).unwrap_err()
    };
    use Requirement::{Any, Closed, Framed, Periodic};
    assert!(matches!(
        verdict(&|m| m.triangles.clear(), Any),
        MeshError::Empty { .. }
    ));
    assert!(matches!(
        verdict(&|m| m.positions[7].y = f64::NAN, Any),
        MeshError::NonFinite { vertex: 7 }
    ));
    assert!(matches!(
        verdict(&|m| m.triangles[4][1] = 9999, Any),
        MeshError::IndexOutOfRange {
            triangle: 4,
            index: 9999,
            ..
        }
    ));
    assert!(matches!(
        verdict(&|m| m.triangles[4][1] = m.triangles[4][0], Any),
        MeshError::RepeatedVertex { triangle: 4, .. }
    ));
    assert!(matches!(
        verdict(&|m| m.triangles[5].swap(0, 1), Any),
        MeshError::InconsistentOrientation { .. }
    ));
    assert!(matches!(
        verdict(
            &|m| {
                let [a, b, _] = m.triangles[5];
                m.positions.push(Vec3::repeat(2.0));
                m.triangles.push([a, b, 162]);
            },
            Any
        ),
        MeshError::NonManifoldEdge { count: 3, .. }
    ));
    let unused = verdict(&|m| m.positions.extend([Vec3::zeros(), Vec3::x()]), Any);
    assert_eq!(
        unused,
        MeshError::UnusedVertices {
            count: 2,
            first: 162
        }
    );
    // Pull a corner onto the opposite edge's end: two triangles lose their area.
    let flat = |m: &mut Mesh| {
        let [a, b, _] = m.triangles[3];
        m.positions[a as usize] = m.positions[b as usize];
    };
    assert!(matches!(verdict(&flat, Any), MeshError::ZeroArea { .. }));
    assert!(matches!(
        verdict(
            &|m| {
                m.triangles.pop();
            },
            Closed
        ),
        MeshError::Open { rim_edges: 3, .. }
    ));
    assert!(
        check(
            &mut {
                let mut m = ball();
                m.triangles.pop();
                m
            },
            Framed
        )
        .is_ok()
    );
    assert!(matches!(verdict(&|_| {}, Framed), MeshError::NoRim));
    assert!(matches!(
        verdict(&|_| {}, Periodic),
        MeshError::WrongPeriodicity { period: None }
    ));
    assert!(matches!(
        verdict(&|m| m.period = Some(9.0), Closed),
        MeshError::WrongPeriodicity { period: Some(_) }
    ));
    assert!(matches!(
        verdict(&|m| m.period = Some(-1.0), Any),
        MeshError::Impossible {
            quantity: "period",
            ..
        }
    ));
    // Edges that rise by up to 0.3 cannot be told from their images in a period of 0.5.
    assert!(matches!(
        verdict(&|m| m.period = Some(0.5), Periodic),
        MeshError::SpansPeriod { .. }
    ));
    let twice = |m: &mut Mesh| {
        let far: Vec<Vec3> = m.positions.iter().map(|p| p + Vec3::x() * 5.0).collect();
        let more: Vec<[u32; 3]> = m.triangles.iter().map(|t| t.map(|v| v + 162)).collect();
        m.positions.extend(far);
        m.triangles.extend(more);
    };
    assert_eq!(
        verdict(&twice, Closed),
        MeshError::SeveralComponents {
            count: 2,
            second: 162
        }
    );
    let mut pair = ball();
    twice(&mut pair);
    assert_eq!(check(&mut pair, Any).unwrap().components, 2);
}

#[test]
fn triangle_soup_is_recognised_and_mended() {
    let mut mesh = soup(&ball());
    let verdict = check(&mut mesh, Requirement::Closed).unwrap_err();
    // 320 triangles with 3 points each at 162 places.
    assert!(
        matches!(
            verdict,
            MeshError::UnmergedPoints {
                rim_edges: 960,
                duplicates: 798,
                ..
            }
        ),
        "{verdict}"
    );
    assert!(verdict.to_string().contains("merge duplicate points"));
    assert_eq!(
        check(&mut mesh, Requirement::Any)
            .unwrap()
            .coincident_rim_points,
        798
    );
    for tolerance in [0.0, 1e-9, 1e-3] {
        let mut merged = mesh.clone();
        // Rounding as in a text file, where there is a tolerance for it.
        for (v, p) in merged.positions.iter_mut().enumerate() {
            *p += Vec3::repeat(0.4 * tolerance * ((v % 3) as f64 - 1.0) / 3f64.sqrt());
        }
        let merge = merge_duplicate_points(&mut merged, tolerance).unwrap();
        assert_eq!((merge.merged_points, merge.removed_triangles), (798, 0));
        assert_eq!(merge.new_index.len(), 960);
        assert_eq!(
            check(&mut merged, Requirement::Closed)
                .unwrap()
                .euler_characteristic,
            2
        );
    }
    for bad in [-1.0, f64::NAN, 1.0] {
        assert!(merge_duplicate_points(&mut mesh, bad).is_err());
    }
}

#[test]
fn merging_closes_a_cut_tube_through_its_period() {
    // A tube stored with its first ring repeated at the other end.
    let whole = tube(1.0, 6.0, 0.3).unwrap();
    let ring = whole.positions.iter().filter(|p| p.z == 0.0).count();
    let n = whole.n_vertices();
    let mut cut = whole.clone();
    cut.positions.extend_from_within(..ring);
    for p in &mut cut.positions[n..] {
        p.z = 6.0;
    }
    for corners in &mut cut.triangles {
        if corners.iter().any(|&v| whole.positions[v as usize].z > 3.0) {
            for v in corners.iter_mut().filter(|v| (**v as usize) < ring) {
                *v += n as u32;
            }
        }
    }
    assert!(matches!(
        check(&mut cut, Requirement::Periodic),
        Err(MeshError::UnmergedPoints { .. })
    ));
    let merge = merge_duplicate_points(&mut cut, 1e-9).unwrap();
    assert_eq!(merge.merged_points, ring);
    assert_eq!(cut, whole);
    // Collapsing a triangle removes it and the one beside it.
    let mut mesh = ball();
    let [a, b, _] = mesh.triangles[0];
    mesh.positions[a as usize] = mesh.positions[b as usize] + Vec3::repeat(1e-12);
    let merge = merge_duplicate_points(&mut mesh, 1e-9).unwrap();
    assert_eq!((merge.merged_points, merge.removed_triangles), (1, 2));
    assert_eq!(
        check(&mut mesh, Requirement::Closed)
            .unwrap()
            .euler_characteristic,
        2
    );
}

#[test]
fn flipped_triangles_are_turned_back_only_when_asked() {
    let good = ball();
    let mut mesh = good.clone();
    for t in [3, 17, 200] {
        mesh.triangles[t].swap(1, 2);
    }
    assert!(check(&mut mesh.clone(), Requirement::Closed).is_err());
    assert_eq!(orient_consistently(&mut mesh).unwrap(), 3);
    let report = check(&mut mesh, Requirement::Closed).unwrap();
    assert!(!report.turned_outward);
    assert_eq!(mesh, good);
    assert_eq!(orient_consistently(&mut mesh).unwrap(), 0);
    // Möbius strip of five triangles.
    let positions = (0..5)
        .map(|i| Vec3::new((i as f64).cos(), (i as f64).sin(), i as f64 % 2.0))
        .collect();
    let mut strip = Mesh::new(
        positions,
        (0..5).map(|i| [i, (i + 1) % 5, (i + 2) % 5]).collect(),
    );
    assert!(matches!(
        orient_consistently(&mut strip),
        Err(MeshError::NotOrientable { .. })
    ));
    let mut fan = Mesh::new(
        vec![Vec3::zeros(); 5],
        vec![[0, 1, 2], [0, 1, 3], [0, 1, 4]],
    );
    assert!(matches!(
        orient_consistently(&mut fan),
        Err(MeshError::NonManifoldEdge {
            a: 0,
            b: 1,
            count: 3
        })
    ));
}

#[test]
fn unused_vertices_can_be_removed() {
    let good = ball();
    let mut mesh = good.clone();
    mesh.positions.insert(10, Vec3::repeat(9.0));
    for corner in mesh.triangles.iter_mut().flatten().filter(|v| **v >= 10) {
        *corner += 1;
    }
    let kept = remove_unused_vertices(&mut mesh).unwrap();
    assert_eq!(mesh, good);
    assert_eq!((kept[9], kept[10], kept.len()), (9, 11, good.n_vertices()));
    mesh.triangles[0][0] = 4000;
    assert!(remove_unused_vertices(&mut mesh).is_err());
}
