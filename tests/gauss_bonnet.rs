//! ∫ K dA = 4π (1 − genus) on every closed surface, exactly: the sum of angle defects.
//!
//! # Source
//! do Carmo, Differential Geometry of Curves and Surfaces (1976).

mod evidence;

use evidence::geometry::Bare;
use evidence::record::Record;
use evidence::{Fallible, SEED};
use pellicle_surface::mesh::shapes;
use pellicle_surface::{Mesh, Vec3};
use std::collections::HashMap;
use std::f64::consts::PI;

const SOURCE: &str = "do Carmo, Differential Geometry of Curves and Surfaces (1976)";

/// A slab of 5 × 3 unit cubes with two of them missing: genus 2.
fn slab_with_two_holes() -> Mesh {
    let full = |x: i32, y: i32, z: i32| {
        (0..5).contains(&x) && (0..3).contains(&y) && z == 0 && !((x == 1 || x == 3) && y == 1)
    };
    let mut numbers: HashMap<[i32; 3], u32> = HashMap::new();
    let (mut positions, mut triangles) = (Vec::new(), Vec::new());
    for x in 0..5 {
        for y in 0..3 {
            for axis in 0..3 {
                for side in [0, 1] {
                    let mut next = [x, y, 0];
                    next[axis] += 2 * side - 1;
                    if !full(x, y, 0) || full(next[0], next[1], next[2]) {
                        continue;
                    }
                    let (p, q) = ((axis + 1) % 3, (axis + 2) % 3);
                    let corner = |a: i32, b: i32| {
                        let mut at = [x, y, 0];
                        at[axis] += side;
                        at[p] += a;
                        at[q] += b;
                        at
                    };
                    let mut square = [corner(0, 0), corner(1, 0), corner(1, 1), corner(0, 1)];
                    if side == 0 {
                        square.reverse();
                    }
                    let v = square.map(|at| {
                        *numbers.entry(at).or_insert_with(|| {
                            positions.push(Vec3::from(at.map(f64::from)));
                            positions.len() as u32 - 1
                        })
                    });
                    triangles.extend([[v[0], v[1], v[2]], [v[0], v[2], v[3]]]);
                }
            }
        }
    }
    Mesh::new(positions, triangles)
}

#[test]
fn sum_of_angle_defects_is_topological() -> Fallible {
    let mut bumpy = shapes::irregular_sphere(500, SEED)?;
    shapes::perturb(&mut bumpy, 0.3, 1)?;
    let cases = [
        ("∫K dA, sphere", shapes::sphere(1.0, 0.2)?, 0),
        ("∫K dA, bumpy irregular sphere", bumpy, 0),
        ("∫K dA, prolate", shapes::prolate(1.0, 0.7, 0.2)?, 0),
        ("∫K dA, torus", shapes::irregular_torus(2.0, 0.7, 800, SEED)?, 1),
        ("∫K dA, periodic tube", shapes::irregular_tube(1.0, 5.0, 400, SEED)?, 1),
        ("∫K dA, slab with two holes", slab_with_two_holes(), 2),
    ];
    for (name, mesh, genus) in cases {
        let bare = Bare::new(mesh)?;
        let sum: f64 = bare.curvature.angle_defect.iter().sum();
        let expected = 4.0 * PI * (1.0 - f64::from(genus));
        let n = bare.mesh.n_vertices() as f64;
        // Rounding: some 1e-16 per angle.
        Record::of("gauss_bonnet", name, SOURCE, expected, "vertices", vec![(n, sum)], 1e-10).absolute().check();
    }
    Ok(())
}
