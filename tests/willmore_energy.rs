//! Bending energy of surfaces on which it is known: sphere, spheroid, ring tori.
//!
//! Vertices lie exactly on the surface, triangles are irregular. Where the two curvatures differ, the discrete energy
//! of such a mesh carries mesh-scale noise that does not vanish under refinement (it relaxes at once when vertices may
//! move), so only the sphere has an order.

mod evidence;

use evidence::fit::simpson;
use evidence::geometry::Bare;
use evidence::record::Record;
use evidence::{Fallible, LARGE, SEED, SMALL};
use pellicle_surface::mesh::shapes::{irregular_ellipsoid, irregular_sphere, irregular_torus};
use pellicle_surface::{Mesh, MeshError};
use std::f64::consts::PI;

const LAW: &str = "willmore_energy";

fn energies(
    levels: &[usize],
    spontaneous: f64,
    mesh: impl Fn(usize) -> Result<Mesh, MeshError>,
) -> Result<Vec<(f64, f64)>, MeshError> {
    levels.iter().map(|&n| Ok((n as f64, Bare::new(mesh(n)?)?.bending(spontaneous)))).collect()
}

/// ∫ ½ (2H)² dA of the spheroid with semi-axes (a, a, c), by quadrature of its curvatures.
fn spheroid_energy(a: f64, c: f64) -> f64 {
    simpson(
        |u| {
            let stretch = (a * a * u.cos().powi(2) + c * c * u.sin().powi(2)).sqrt();
            let twice_h = a * c / stretch.powi(3) + c / (a * stretch);
            0.5 * twice_h * twice_h * 2.0 * PI * a * u.sin() * stretch
        },
        0.0,
        PI,
        2000,
    )
}

/// Sphere, C = 0: 8π, second order. Measured 0.052 % at 2562 and 0.023 % at 10242 vertices.
fn sphere(levels: &[usize], limit: f64, least_order: f64) -> Fallible {
    let measured = energies(levels, 0.0, |n| irregular_sphere(n, SEED))?;
    Record::of(LAW, "bending energy of a sphere", "Helfrich, Z. Naturforsch. C 28 (1973) 693", 8.0 * PI, "vertices", measured, limit)
        .with_order()
        .check_with_order(least_order);
    Ok(())
}

/// Sphere with spontaneous curvature: 8π(1 − C/2)². The error is that of 2H, so it counts relative to 8π.
/// Measured 0.053 % at 2562 vertices.
fn curved_sphere(levels: &[usize], limit: f64) -> Fallible {
    let measured = energies(levels, 1.3, |n| irregular_sphere(n, SEED))?;
    let expected = 8.0 * PI * (1.0f64 - 0.65).powi(2);
    let source = "Helfrich, Z. Naturforsch. C 28 (1973) 693";
    let quantity = "bending energy of a sphere, C R = 1.3 (error relative to 8π)";
    let mut record = Record::of(LAW, quantity, source, expected, "vertices", measured, limit);
    for error in &mut record.errors {
        *error *= expected / (8.0 * PI);
    }
    record.with_order().check_with_order(1.7);
    Ok(())
}

fn spheroid(levels: &[usize], limit: f64) -> Fallible {
    let expected = spheroid_energy(1.0, 2.0);
    let measured = energies(levels, 0.0, |n| irregular_ellipsoid([1.0, 1.0, 2.0], n, SEED))?;
    Record::of(LAW, "bending energy of a 2:1 spheroid", "computed: quadrature of its curvatures", expected, "vertices", measured, limit).check();
    Ok(())
}

fn tori(levels: &[usize], limit: f64) -> Fallible {
    let source = "Willmore 1965; minimum proved by Marques & Neves, Ann. Math. 179 (2014) 683";
    for (ratio, name) in [(2f64.sqrt(), "bending energy of the Clifford torus"), (2.0, "bending energy of a torus, R/r = 2")] {
        let expected = 2.0 * PI * PI * ratio * ratio / (ratio * ratio - 1.0).sqrt();
        let measured = energies(levels, 0.0, |n| irregular_torus(ratio, 1.0, n, SEED))?;
        Record::of(LAW, name, source, expected, "vertices", measured, limit).check();
    }
    Ok(())
}

#[test]
fn sphere_of_2500_vertices() -> Fallible {
    sphere(&SMALL, 0.001, 1.8)
}

#[test]
fn curved_sphere_of_2500_vertices() -> Fallible {
    curved_sphere(&SMALL, 0.001)
}

#[test]
fn spheroid_of_2500_vertices() -> Fallible {
    spheroid(&SMALL, 0.002)
}

#[test]
fn tori_of_2500_vertices() -> Fallible {
    tori(&SMALL, 0.004)
}

#[test]
#[ignore = "long: run with --ignored"]
fn sphere_of_10000_vertices() -> Fallible {
    // Areas of obtuse triangles are mixed, not circumcentric; that leaves some 0.02 % at this size: order 1.49 measured.
    sphere(&LARGE, 0.0004, 1.4)
}

#[test]
#[ignore = "long: run with --ignored"]
fn spheroid_of_10000_vertices() -> Fallible {
    spheroid(&LARGE, 0.001)
}

#[test]
#[ignore = "long: run with --ignored"]
fn tori_of_10000_vertices() -> Fallible {
    tori(&LARGE, 0.003)
}
