//! Meshes and matrices shared by tests and benchmarks.
#![allow(dead_code)]

use std::collections::BTreeMap;

use pellicle_sparse::Pattern;
use rand::Rng;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;

pub struct Mesh {
    pub points: Vec<[f64; 3]>,
    pub triangles: Vec<[usize; 3]>,
}

/// Sphere from an icosahedron refined `levels` times: 10·4^levels + 2 vertices.
pub fn icosphere(levels: usize) -> Mesh {
    let g = (1.0 + 5.0_f64.sqrt()) / 2.0;
    let mut points: Vec<[f64; 3]> = Vec::new();
    for (a, b) in [(1.0, g), (1.0, -g), (-1.0, g), (-1.0, -g)] {
        points.extend([[0.0, a, b], [a, b, 0.0], [b, 0.0, a]]);
    }
    // Corners at mutual distance 2 are neighbours.
    let near = |a: [f64; 3], b: [f64; 3]| (0..3).map(|k| (a[k] - b[k]).powi(2)).sum::<f64>() < 4.1;
    let mut triangles = Vec::new();
    for i in 0..12 {
        for j in i + 1..12 {
            for k in j + 1..12 {
                let (a, b, c) = (points[i], points[j], points[k]);
                if near(a, b) && near(b, c) && near(c, a) {
                    triangles.push([i, j, k]);
                }
            }
        }
    }
    for _ in 0..levels {
        let mut middle = BTreeMap::new();
        let mut refined = Vec::new();
        for &[a, b, c] in &triangles {
            let mut mid = |i: usize, j: usize| {
                *middle.entry((i.min(j), i.max(j))).or_insert_with(|| {
                    let (p, q) = (points[i], points[j]);
                    points.push([0, 1, 2].map(|k| (p[k] + q[k]) / 2.0));
                    points.len() - 1
                })
            };
            let (ab, bc, ca) = (mid(a, b), mid(b, c), mid(c, a));
            refined.extend([[a, ab, ca], [b, bc, ab], [c, ca, bc], [ab, bc, ca]]);
        }
        triangles = refined;
    }
    for p in &mut points {
        let r = p.iter().map(|x| x * x).sum::<f64>().sqrt();
        p.iter_mut().for_each(|x| *x /= r);
    }
    Mesh { points, triangles }
}

/// Cylinder of `around` × `along` vertices with edges of length one; closed along z if periodic.
pub fn tube(around: usize, along: usize, periodic: bool) -> Mesh {
    let radius = around as f64 / std::f64::consts::TAU;
    let mut points = Vec::new();
    for k in 0..along {
        for j in 0..around {
            let angle = std::f64::consts::TAU * (j as f64 + 0.5 * (k % 2) as f64) / around as f64;
            points.push([
                radius * angle.cos(),
                radius * angle.sin(),
                k as f64 * 3.0_f64.sqrt() / 2.0,
            ]);
        }
    }
    let mut triangles = Vec::new();
    for k in 0..if periodic { along } else { along - 1 } {
        let shift = k % 2;
        for j in 0..around {
            let at = |j: usize, k: usize| (k % along) * around + j % around;
            let (a, b) = (at(j, k), at(j + 1, k));
            let (c, d) = (at(j + shift, k + 1), at(j + shift + around - 1, k + 1));
            triangles.extend([[a, b, c], [a, c, d]]);
        }
    }
    Mesh { points, triangles }
}

/// Every vertex with its neighbours, itself first.
pub fn stars(mesh: &Mesh) -> Vec<Vec<usize>> {
    let mut stars: Vec<Vec<usize>> = (0..mesh.points.len()).map(|k| vec![k]).collect();
    for t in &mesh.triangles {
        for &a in t {
            for &b in t {
                if !stars[a].contains(&b) {
                    stars[a].push(b);
                }
            }
        }
    }
    stars
}

/// Upper triangle gathered entry by entry.
#[derive(Default)]
pub struct Builder {
    columns: Vec<BTreeMap<usize, f64>>,
}

impl Builder {
    pub fn new(n: usize) -> Self {
        Self { columns: vec![BTreeMap::new(); n] }
    }

    pub fn add(&mut self, i: usize, j: usize, value: f64) {
        *self.columns[i.max(j)].entry(i.min(j)).or_insert(0.0) += value;
    }

    pub fn finish(self) -> (Pattern, Vec<f64>) {
        let mut pattern = Pattern { n: self.columns.len(), col_ptr: vec![0], row_idx: Vec::new() };
        let mut values = Vec::new();
        for column in self.columns {
            pattern.row_idx.extend(column.keys());
            values.extend(column.values());
            pattern.col_ptr.push(values.len());
        }
        (pattern, values)
    }
}

/// Random quasi-definite matrix with the couplings of a membrane step: velocities over two rings,
/// tension with the velocities of one ring, tension diagonal −`compressibility`.
pub fn membrane_matrix(mesh: &Mesh, compressibility: f64, seed: u64) -> (Pattern, Vec<f64>) {
    membrane_builder(mesh, 1.0, compressibility, seed).finish()
}

/// As [`membrane_matrix`], with the two-ring part scaled by the time `step`, a viscous one-ring
/// part that is not, and the tension diagonal of area / (`modulus` · `step`).
pub fn step_matrix(mesh: &Mesh, modulus: f64, step: f64, seed: u64) -> (Pattern, Vec<f64>) {
    let area = 4.0 * std::f64::consts::PI / mesh.points.len() as f64;
    let mut a = membrane_builder(mesh, step, area / (modulus * step), seed);
    let mut rng = ChaCha8Rng::seed_from_u64(seed + 1);
    for triangle in &mesh.triangles {
        let row: Vec<(usize, f64)> = triangle
            .iter()
            .flat_map(|&k| [4 * k, 4 * k + 1, 4 * k + 2])
            .map(|unknown| (unknown, rng.random_range(-1.0..1.0)))
            .collect();
        for (p, &(i, x)) in row.iter().enumerate() {
            for &(j, y) in &row[..=p] {
                a.add(i, j, x * y);
            }
        }
    }
    a.finish()
}

fn membrane_builder(mesh: &Mesh, bending: f64, compressibility: f64, seed: u64) -> Builder {
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    let mut random = || rng.random_range(-1.0..1.0);
    let mut a = Builder::new(4 * mesh.points.len());
    for (vertex, star) in stars(mesh).iter().enumerate() {
        // Two random squares per star make a positive semi-definite two-ring coupling.
        for _ in 0..2 {
            let row: Vec<(usize, f64)> = star
                .iter()
                .flat_map(|&k| [4 * k, 4 * k + 1, 4 * k + 2])
                .map(|unknown| (unknown, random()))
                .collect();
            for (p, &(i, x)) in row.iter().enumerate() {
                for &(j, y) in &row[..=p] {
                    a.add(i, j, bending * x * y);
                }
            }
        }
        for k in 0..3 {
            a.add(4 * vertex + k, 4 * vertex + k, 0.1);
        }
        let tension = 4 * vertex + 3;
        for &k in star {
            for component in 0..3 {
                a.add(4 * k + component, tension, random());
            }
        }
        a.add(tension, tension, -compressibility);
        for &k in &star[1..] {
            a.add(tension, tension, -0.1 * compressibility);
            a.add(tension, 4 * k + 3, 0.05 * compressibility);
        }
    }
    a
}

/// Positive definite one-ring matrix with `block` unknowns per vertex.
pub fn laplacian(mesh: &Mesh, block: usize, shift: f64) -> (Pattern, Vec<f64>) {
    let mut a = Builder::new(block * mesh.points.len());
    for (vertex, star) in stars(mesh).iter().enumerate() {
        for i in 0..block {
            a.add(block * vertex + i, block * vertex + i, shift + (star.len() - 1) as f64);
            for j in 0..i {
                a.add(block * vertex + j, block * vertex + i, 0.1 * shift);
            }
            for &k in star[1..].iter().filter(|&&k| k < vertex) {
                a.add(block * k + i, block * vertex + i, -1.0);
            }
        }
    }
    a.finish()
}

pub fn random_vector(n: usize, seed: u64) -> Vec<f64> {
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    (0..n).map(|_| rng.random_range(-1.0..1.0)).collect()
}
