//! How the mesh moves when the membrane does: w·n = v·n, and a tangential part chosen for the mesh.
//!
//! [`smoothest_velocity`] takes, of all fields with the material's normal velocity, the one that varies least from
//! vertex to vertex. A translation of the whole surface then carries the mesh along, a tube that is drawn out or
//! dragged sideways stretches its mesh evenly, and a flow within a surface at rest moves no vertex at all, so that
//! shear never distorts triangles. [`smoothing_target`] relaxes vertices towards evenly spread neighbours.

use crate::geometry::Geometry;
use crate::{Mesh, Topology, Vec3};

/// Smoothest velocity field with given normal parts.
///
/// Minimises Σ_edges |w_i − w_j|² over the tangential parts by conjugate gradients, from `guess` (its tangential part
/// is used). Vertices with `fixed` keep w = 0.
///
/// # Shapes
/// `normal_speed`, `fixed`: one per vertex. Relative residual `tolerance`.
pub fn smoothest_velocity(
    topology: &Topology,
    normals: &[Vec3],
    normal_speed: &[f64],
    fixed: &[bool],
    guess: &[Vec3],
    tolerance: f64,
) -> Vec<Vec3> {
    let n = topology.n_vertices;
    let tangential = |i: usize, x: Vec3| -> Vec3 {
        if fixed[i] {
            Vec3::zeros()
        } else {
            x - normals[i] * x.dot(&normals[i])
        }
    };
    let laplacian = |field: &[Vec3], out: &mut [Vec3]| {
        for i in 0..n {
            let mut sum = Vec3::zeros();
            let around = topology.neighbours.of(i);
            for &j in around {
                sum += field[j as usize];
            }
            out[i] = field[i] * around.len() as f64 - sum;
        }
    };
    let given: Vec<Vec3> = (0..n)
        .map(|i| if fixed[i] { Vec3::zeros() } else { normals[i] * normal_speed[i] })
        .collect();
    let mut work = vec![Vec3::zeros(); n];
    laplacian(&given, &mut work);
    let right: Vec<Vec3> = (0..n).map(|i| tangential(i, -work[i])).collect();
    let mut x: Vec<Vec3> = (0..n)
        .map(|i| tangential(i, guess.get(i).copied().unwrap_or_else(Vec3::zeros)))
        .collect();
    laplacian(&x, &mut work);
    let mut residual: Vec<Vec3> = (0..n).map(|i| right[i] - tangential(i, work[i])).collect();
    let valence = |i: usize| topology.neighbours.of(i).len() as f64;
    let mut direction: Vec<Vec3> = (0..n).map(|i| residual[i] / valence(i)).collect();
    let dot = |a: &[Vec3], b: &[Vec3]| a.iter().zip(b).map(|(x, y)| x.dot(y)).sum::<f64>();
    let scaled = |r: &[Vec3]| (0..n).map(|i| r[i].norm_squared() / valence(i)).sum::<f64>();
    let goal = tolerance * tolerance * scaled(&right);
    let mut rho = scaled(&residual);
    for _ in 0..400 {
        if rho <= goal || rho == 0.0 {
            break;
        }
        laplacian(&direction, &mut work);
        for i in 0..n {
            work[i] = tangential(i, work[i]);
        }
        let curvature = dot(&direction, &work);
        if curvature <= 0.0 {
            break;
        }
        let alpha = rho / curvature;
        for i in 0..n {
            x[i] += direction[i] * alpha;
            residual[i] -= work[i] * alpha;
        }
        let next = scaled(&residual);
        let beta = next / rho;
        for i in 0..n {
            direction[i] = residual[i] / valence(i) + direction[i] * beta;
        }
        rho = next;
    }
    x.iter().zip(&given).map(|(t, g)| t + g).collect()
}

/// Tangential displacement of each vertex towards the weighted mean of its neighbours, weights 1/(h_i + h_j), so that
/// a wanted grading h of the edge length is kept.
pub fn smoothing_target(mesh: &Mesh, topology: &Topology, geometry: &Geometry, wanted_edge: &[f64]) -> Vec<Vec3> {
    (0..topology.n_vertices)
        .map(|i| {
            if topology.on_rim[i] {
                return Vec3::zeros();
            }
            let mut sum = Vec3::zeros();
            let mut total = 0.0;
            for &j in topology.neighbours.of(i) {
                let weight = 1.0 / (wanted_edge[i] + wanted_edge[j as usize]);
                sum += mesh.edge(i as u32, j) * weight;
                total += weight;
            }
            let t = sum / total;
            let normal = geometry.vertex_normal[i];
            t - normal * t.dot(&normal)
        })
        .collect()
}
