//! Severed necks: closed, oriented, sound pieces that hold what was there before.

use pellicle_surface::contact::intersections;
use pellicle_surface::geometry::Geometry;
use pellicle_surface::mesh::shapes::*;
use pellicle_surface::necks::{self, Severed, sever};
use pellicle_surface::remesh::{RemeshOptions, VertexData, quality, remesh};
use pellicle_surface::{Mesh, Topology, Vec3, pieces};
use std::f64::consts::PI;

const EDGE: f64 = 0.11;

fn topology(mesh: &Mesh) -> Topology {
    Topology::new(mesh.n_vertices(), &mesh.triangles).unwrap()
}

/// Squeeze a body round z = `at` to a waist, and mesh it evenly again.
fn waist(mut mesh: Mesh, at: f64, share: f64) -> Mesh {
    for x in &mut mesh.positions {
        let factor = 1.0 - (1.0 - share) * (-(x.z - at).powi(2) / 0.3).exp();
        x.x *= factor;
        x.y *= factor;
    }
    let n = mesh.n_vertices();
    remesh(&mesh, &VertexData::default(), &vec![EDGE; n], &RemeshOptions::default()).unwrap().mesh
}

/// Lipids, a composition that varies, a coverage that does not, and a field.
fn carried(mesh: &Mesh) -> VertexData {
    let area = Geometry::new(mesh).vertex_area;
    let lipids: Vec<f64> = area.iter().map(|a| 0.99 * a).collect();
    let wave = |x: &Vec3| 0.5 + 0.45 * (1.3 * x.x + 2.1 * x.z).sin();
    VertexData {
        amounts: vec![
            lipids.clone(),
            mesh.positions.iter().zip(&lipids).map(|(x, m)| wave(x) * m).collect(),
            lipids.iter().map(|m| 0.25 * m).collect(),
        ],
        fields: vec![mesh.positions.iter().map(|x| x.z).collect()],
    }
}

fn cut(mesh: &Mesh, data: &VertexData) -> (f64, Severed) {
    let (topology, geometry) = (topology(mesh), Geometry::new(mesh));
    let neck = necks::find(mesh, &topology, &geometry).into_iter().next().expect("a neck");
    (neck.radius, sever(mesh, &topology, &geometry, &neck, data).unwrap().expect("severed"))
}

/// What must hold whatever was severed.
fn assert_sound(name: &str, mesh: &Mesh, data: &VertexData, radius: f64, severed: &Severed) {
    let (before, after) = (topology(mesh), topology(&severed.mesh));
    assert_eq!(after.euler_characteristic(), before.euler_characteristic() + 2, "{name}");
    assert!(after.is_closed(), "{name}");
    assert_eq!(intersections(&severed.mesh), [], "{name}");
    for (old, new) in data.amounts.iter().zip(&severed.data.amounts) {
        let (old, new): (f64, f64) = (old.iter().sum(), new.iter().sum());
        assert!((old - new).abs() <= 1e-12 * old, "{name}: {old} became {new}");
    }
    let ratio = |data: &VertexData, list: usize| -> (f64, f64) {
        let ratios = data.amounts[list].iter().zip(&data.amounts[0]).map(|(n, m)| n / m);
        ratios.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), r| (low.min(r), high.max(r)))
    };
    for list in [1, 2] {
        let (old, new) = (ratio(data, list), ratio(&severed.data, list));
        assert!(new.0 >= old.0 - 1e-12 && new.1 <= old.1 + 1e-12, "{name}: {old:?} became {new:?}");
    }
    let geometry = Geometry::new(&severed.mesh);
    let old = Geometry::new(mesh);
    // The band and both domes have about the area of a sphere of the neck's radius, and a sixth of its volume differs.
    let (area, volume) = (4.0 * PI * radius.powi(2), 4.0 / 3.0 * PI * radius.powi(3));
    assert!((geometry.total_area - old.total_area).abs() < 0.7 * area, "{name}: area {} to {}", old.total_area, geometry.total_area);
    assert!((geometry.volume - old.volume).abs() < 1.5 * volume, "{name}: volume {} to {}", old.volume, geometry.volume);
    assert!(geometry.piece_volumes(&severed.mesh, &after).iter().all(|v| *v > 0.0), "{name}: turned inside out");
    // Measured 0.37 and more; triangles below 0.3 would stop flips and smoothing.
    let worst = quality(&severed.mesh).into_iter().fold(1.0, f64::min);
    println!("{name}: neck {radius:.3}, worst quality {worst:.2}, area {:+.1e}, volume {:+.1e}",
        geometry.total_area - old.total_area, geometry.volume - old.volume);
    assert!(worst > 0.3, "{name}: a triangle of quality {worst}");
}

#[test]
fn a_dumbbell_becomes_two_closed_pieces() {
    for (name, at, share) in [("even", 0.0, 0.25), ("uneven", 0.8, 0.3), ("thin", -0.5, 0.15)] {
        let mesh = waist(capped_tube(1.0, 3.0, EDGE).unwrap(), at, share);
        let data = carried(&mesh);
        let (radius, severed) = cut(&mesh, &data);
        assert_sound(name, &mesh, &data, radius, &severed);
        let after = topology(&severed.mesh);
        assert_eq!(after.n_pieces, 2, "{name}");
        for piece in 0..2 {
            let (part, _) = pieces::extract(&severed.mesh, &after, piece);
            assert_eq!(topology(&part).euler_characteristic(), 2, "{name}");
        }
        // Each side keeps what it had: the loop lies at z = `at`, to half an edge.
        let side = |mesh: &Mesh, data: &VertexData, up: bool| -> f64 {
            mesh.positions.iter().zip(&data.amounts[0]).filter(|(x, _)| (x.z > at) == up).map(|(_, m)| m).sum()
        };
        let (old, new) = (side(&mesh, &data, true), side(&severed.mesh, &severed.data, true));
        assert!((old - new).abs() < 2.0 * PI * radius * EDGE, "{name}: {old} became {new}");
    }
}

#[test]
fn a_periodic_tube_is_severed_into_one_closed_piece_then_two() {
    let two_waists = |mut mesh: Mesh| {
        for x in &mut mesh.positions {
            let near = |at: f64| (-((x.z - at + 4.0).rem_euclid(8.0) - 4.0).powi(2) / 0.3).exp();
            let factor = 1.0 - 0.75 * near(0.3) - 0.7 * near(4.2);
            x.x *= factor;
            x.y *= factor;
        }
        let n = mesh.n_vertices();
        remesh(&mesh, &VertexData::default(), &vec![EDGE; n], &RemeshOptions::default()).unwrap().mesh
    };
    let mesh = two_waists(tube(1.0, 8.0, EDGE).unwrap());
    let data = carried(&mesh);
    let (radius, severed) = cut(&mesh, &data);
    assert_sound("tube", &mesh, &data, radius, &severed);
    let after = topology(&severed.mesh);
    assert_eq!((after.n_pieces, after.euler_characteristic()), (1, 2));
    let (_, endless) = pieces::unwrapped(&mesh, &topology(&mesh));
    assert_eq!(endless, [true]);
    let (places, endless) = pieces::unwrapped(&severed.mesh, &after);
    assert_eq!(endless, [false]);
    // In one part it is nearly a period long.
    let z = |sign: f64| places.iter().map(|x| sign * x.z).fold(f64::NEG_INFINITY, f64::max);
    assert!((7.0..8.0).contains(&(z(1.0) + z(-1.0))));

    let (radius, again) = cut(&severed.mesh, &severed.data);
    assert_sound("tube again", &severed.mesh, &severed.data, radius, &again);
    assert_eq!(topology(&again.mesh).n_pieces, 2);
}

#[test]
fn a_ring_is_severed_into_one_piece() {
    let mut mesh = torus(2.0, 0.8, EDGE).unwrap();
    for x in &mut mesh.positions {
        // Thin where the ring crosses the positive x axis.
        let centre = Vec3::new(x.x, x.y, 0.0).normalize() * 2.0;
        let angle = x.y.atan2(x.x);
        let factor = 1.0 - 0.7 * (-angle.powi(2) / 0.1).exp();
        *x = centre + (*x - centre) * factor;
    }
    let n = mesh.n_vertices();
    let mesh = remesh(&mesh, &VertexData::default(), &vec![EDGE; n], &RemeshOptions::default()).unwrap().mesh;
    let data = carried(&mesh);
    let (radius, severed) = cut(&mesh, &data);
    assert_sound("ring", &mesh, &data, radius, &severed);
    let after = topology(&severed.mesh);
    assert_eq!((after.n_pieces, after.euler_characteristic()), (1, 2));
}

/// Necks are found in every piece.
#[test]
fn necks_of_several_pieces_are_found() {
    let one = waist(capped_tube(1.0, 3.0, EDGE).unwrap(), 0.0, 0.25);
    let offset = one.n_vertices() as u32;
    let mut both = one.clone();
    both.positions.extend(one.positions.iter().map(|x| x + Vec3::new(5.0, 0.0, 0.0)));
    both.triangles.extend(one.triangles.iter().map(|t| t.map(|v| v + offset)));
    let found = |mesh: &Mesh| necks::find(mesh, &topology(mesh), &Geometry::new(mesh));
    let (single, double) = (found(&one), found(&both));
    assert_eq!((single.len(), double.len()), (1, 2));
    for neck in &double {
        assert!((neck.radius - single[0].radius).abs() < 1e-12);
    }
    assert!(double[0].crossings.iter().any(|c| c.right >= offset) || double[1].crossings.iter().any(|c| c.right >= offset));
}
