//! Second variation of the bending energy of a sphere for a normal displacement Y_l: κ (l−1) l (l+1)(l+2)/R⁴ with
//! ∫Y² = R².
//!
//! The stiffness is that of the relaxed mesh, 1/(yᵀ K⁻¹ y) with y = A Y_l and K the full second derivative of the
//! discrete energy for normal displacements: the vertices may give way at the scale of the mesh, as they do in motion.
//! K is applied by central differences of the exact gradient, and inverted by conjugate gradients preconditioned with
//! the solver's own factorised matrix.
//!
//! # Source
//! Helfrich, J. Phys. 47 (1986) 321; Milner & Safran, Phys. Rev. A 36 (1987) 4371 (from memory; checked by quadrature).

mod evidence;

use evidence::fit::order_in_vertices;
use evidence::geometry::Bare;
use evidence::harmonics::harmonic;
use evidence::record::Record;
use evidence::{Fallible, LARGE, SEED, SMALL};
use pellicle_physics::step::assemble::{Freedom, MatrixInput, PositiveStress, assemble};
use pellicle_physics::step::connectivity::Connectivity;
use pellicle_physics::step::linear::LinearSystem;
use pellicle_physics::{Parameters, State};
use pellicle_surface::Vec3;
use pellicle_surface::mesh::shapes::irregular_sphere;

const SOURCE: &str = "Helfrich, J. Phys. 47 (1986) 321; Milner & Safran, Phys. Rev. A 36 (1987) 4371, from memory; checked by quadrature";

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(x, y)| x * y).sum()
}

/// Stiffness of relaxed modes over several orders m of each degree.
fn stiffness(n: usize, degrees: &[usize]) -> Result<Vec<f64>, Box<dyn std::error::Error>> {
    let mut bare = Bare::new(irregular_sphere(n, SEED)?)?;
    let places = bare.mesh.positions.clone();
    let area = bare.geometry.vertex_area.clone();
    // Normals of the sphere.
    let mut apply = |f: &[f64]| -> Vec<f64> {
        let largest = f.iter().fold(0.0f64, |m, x| m.max(x.abs())).max(1e-300);
        let h = 1e-5 / largest;
        let mut out = vec![0.0; n];
        for sign in [1.0, -1.0] {
            for i in 0..n {
                bare.mesh.positions[i] = places[i] * (1.0 + sign * h * f[i]);
            }
            bare.update();
            let (_, gradient) = bare.bending_rows_and_gradient(0.0);
            for i in 0..n {
                out[i] += sign * gradient[i].dot(&places[i]) / (2.0 * h);
            }
        }
        out
    };
    // Preconditioner: bending rows, a little viscosity and friction, restricted to normal motion.
    let still = Bare::new(irregular_sphere(n, SEED)?)?;
    let (mut rows, _) = still.bending_rows_and_gradient(0.0);
    // The assembly takes rows in the unknowns of each vertex: here the normal velocity comes first and alone.
    for (row, member) in rows.iter_mut().zip(&still.stencils.members) {
        *row = Vec3::new(row.dot(&places[*member as usize]), 0.0, 0.0);
    }
    let parameters = Parameters::bare(1.0, 1.0, 1.0);
    let state = State::at_rest(&parameters, still.mesh.clone(), &[], &[], &[])?;
    let mut connectivity = Connectivity::new(&state)?;
    let none = PositiveStress { along: 0.0, across: 0.0, direction: Vec3::zeros() };
    // Tangential motion is pinned to the normal, so that the factor is that of the normal block.
    let freedom: Vec<Freedom> = places.iter().map(|x| Freedom::Along(*x)).collect();
    let Connectivity { pattern, values, solver, .. } = &mut connectivity;
    let input = MatrixInput {
        topology: &still.topology,
        positions: &still.mesh.positions,
        geometry: &still.geometry,
        pattern,
        bending_rows: &rows,
        bending_rigidity: &vec![1.0; n],
        stress: &vec![none; still.mesh.n_triangles()],
        viscosity: &vec![1e-3; n],
        friction: &area.iter().map(|a| 1e-2 * a).collect::<Vec<_>>(),
        lipid: &vec![1e6; n],
        area_compression_modulus: 1e-6,
        step: 1.0,
        deviatoric: true,
        freedom: &freedom,
        repulsion: &[],
    };
    assemble(&input, values);
    let system = LinearSystem { values, borders: &[], input: &input };
    solver.factorise(&system)?;
    let rigid: Vec<Vec<f64>> = [(0, 0), (1, -1), (1, 0), (1, 1)]
        .iter()
        .map(|(l, m)| {
            let y: Vec<f64> = places.iter().map(|x| harmonic(*l, *m, x)).collect();
            let size: f64 = y.iter().zip(&area).map(|(y, a)| a * y * y).sum::<f64>().sqrt();
            y.iter().map(|y| y / size).collect()
        })
        .collect();
    // Displacements without sizes and shifts (area-weighted), loads without their work on them.
    let project_load = |f: &mut Vec<f64>| {
        for y in &rigid {
            let amount = dot(f, y);
            f.iter_mut().zip(y.iter().zip(&area)).for_each(|(f, (y, a))| *f -= amount * a * y);
        }
    };
    let project_motion = |u: &mut Vec<f64>| {
        for y in &rigid {
            let amount: f64 = u.iter().zip(y.iter().zip(&area)).map(|(u, (y, a))| u * y * a).sum();
            u.iter_mut().zip(y).for_each(|(u, y)| *u -= amount * y);
        }
    };
    let mut means = Vec::new();
    for &l in degrees {
        let orders = [0, 1, -2];
        let mut sum = 0.0;
        for m in orders {
            let load: Vec<f64> = places.iter().zip(&area).map(|(x, a)| a * harmonic(l, m, x)).collect();
            let mut residual = load.clone();
            project_load(&mut residual);
            let wanted = residual.clone();
            let mut precondition = |r: &[f64]| -> Vec<f64> {
                let mut y = vec![0.0; 4 * n];
                for i in 0..n {
                    y[4 * i] = r[i];
                }
                solver.apply_inverse(&system, &mut y);
                let mut u: Vec<f64> = (0..n).map(|i| y[4 * i]).collect();
                project_motion(&mut u);
                u
            };
            let mut u = vec![0.0; n];
            let mut z = precondition(&residual);
            let mut p = z.clone();
            let mut rz = dot(&residual, &z);
            let size = rz;
            let mut iterations = 0;
            for _ in 0..60 {
                let mut q = apply(&p);
                project_load(&mut q);
                let alpha = rz / dot(&p, &q);
                for i in 0..n {
                    u[i] += alpha * p[i];
                    residual[i] -= alpha * q[i];
                }
                z = precondition(&residual);
                let next = dot(&residual, &z);
                iterations += 1;
                if next.abs() < 1e-9 * size {
                    break;
                }
                let beta = next / rz;
                rz = next;
                for i in 0..n {
                    p[i] = z[i] + beta * p[i];
                }
            }
            let found = 1.0 / dot(&wanted, &u);
            println!("{n} vertices, l = {l}, m = {m}: {found:.4} after {iterations} iterations");
            sum += found;
        }
        means.push(sum / orders.len() as f64);
    }
    Ok(means)
}

fn check(levels: &[usize], limits: [f64; 3]) -> Fallible {
    let degrees = [2, 4, 8];
    let found = levels.iter().map(|&n| stiffness(n, &degrees)).collect::<Result<Vec<_>, _>>()?;
    let vertices: Vec<f64> = levels.iter().map(|n| *n as f64).collect();
    let quantities = degrees.map(|l| format!("second variation of a sphere, l = {l}"));
    let mut records = Vec::new();
    for k in 0..3 {
        let l = degrees[k] as f64;
        let expected = (l - 1.0) * l * (l + 1.0) * (l + 2.0);
        let measured = vertices.iter().zip(&found).map(|(n, f)| (*n, f[k])).collect();
        let mut record = Record::of("shape_modes", &quantities[k], SOURCE, expected, "vertices", measured, limits[k]);
        record.order = Some(order_in_vertices(&vertices, &record.errors));
        record.write();
        records.push(record);
    }
    for record in &records {
        record.assert_with_order(1.6);
    }
    Ok(())
}

#[test]
fn modes_of_spheres_up_to_2500_vertices() -> Fallible {
    check(&SMALL, [0.005, 0.01, 0.05])
}

#[test]
#[ignore = "long: run with --ignored"]
fn modes_of_spheres_up_to_10000_vertices() -> Fallible {
    check(&LARGE, [0.0015, 0.003, 0.013])
}
