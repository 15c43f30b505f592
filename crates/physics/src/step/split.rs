//! An approximate inverse of the coupled matrix whose memory and time grow almost like the number of vertices.
//!
//! The tension is found from the lipid rows alone, with the viscous resistance to dilation in place of the flow:
//! λ̂ = −Ŝ⁻¹ b_λ, Ŝ = m/(K_A dt) + S + M/(2ζ). Then one sweep for the velocity, each part acting on what the parts
//! before have left: along the normals, within the surface, along the normals again, and in the cubic polynomials of
//! the position, which hold rigid motions and everything long-waved.
//!
//! - Along the normals bending rules: dt κ L M⁻¹ L with the cotangent matrix L, and the resistance c to normal motion.
//!   Both together are F (dt κ / M) F with F = L + M √(c/(dt κ)), so one factor of a matrix with one unknown per vertex
//!   is used twice.
//! - Within the surface the viscous matrix and friction rule; bending is left out, as its tangential part only looks
//!   stiff on facets and the normal sweep takes care of it.
//!
//! Two factors with nearest neighbours only: about 150 numbers per vertex, where the coupled matrix takes 1,800.

use super::assemble::{Freedom, MatrixInput};
use super::ring::RingLayout;
use crate::PhysicsError;
use crate::dissipation::{boussinesq_scriven, tension_stabilisation};
use nalgebra::{DMatrix, Matrix3};
use pellicle_sparse::{Analysis, Factor};
use pellicle_surface::{Topology, Vec3};
use std::sync::Arc;

/// Damped Jacobi sweeps for the tension, and their damping.
const JACOBI_SWEEPS: usize = 3;
const DAMPING: f64 = 0.8;
/// Least resistance to normal motion, in units of viscosity over mean radius squared.
const LEAST_RESISTANCE: f64 = 0.02;
/// Cubic polynomials in three coordinates.
const MONOMIALS: usize = 20;

/// Normal, two tangents, as rows of what turns a vertex's unknowns into them.
type Frame = [Vec3; 3];

/// See the head of this file.
pub struct Split {
    scalar_layout: RingLayout,
    pair_layout: RingLayout,
    /// F.
    normal: Factor,
    /// Viscosity and friction within the surface.
    tangential: Factor,
    frames: Vec<Frame>,
    /// M/(dt κ).
    between: Vec<f64>,
    /// Ŝ, and the inverse of its diagonal.
    tension: Vec<f64>,
    tension_inverse: Vec<f64>,
    /// Monomials of each vertex, and the inverse of the matrix they see.
    monomials: Vec<[f64; MONOMIALS]>,
    coarse: DMatrix<f64>,
    work: Work,
}

#[derive(Default)]
struct Work {
    solution: Vec<f64>,
    residual: Vec<f64>,
    scalar: Vec<f64>,
    pair: Vec<f64>,
    product: Vec<f64>,
}

impl Split {
    /// Analyse a connectivity.
    ///
    /// # Errors
    /// Those of the symbolic factorisation.
    pub fn new(topology: &Topology, coordinates: &[[f64; 3]]) -> Result<Self, PhysicsError> {
        let scalar_layout = RingLayout::new(topology, 1);
        let pair_layout = RingLayout::new(topology, 2);
        let factor = |layout: &RingLayout, block| -> Result<Factor, PhysicsError> {
            Ok(Factor::new(&Arc::new(Analysis::new(layout.pattern(topology), block, coordinates)?)))
        };
        Ok(Self {
            normal: factor(&scalar_layout, 1)?,
            tangential: factor(&pair_layout, 2)?,
            scalar_layout,
            pair_layout,
            frames: Vec::new(),
            between: Vec::new(),
            tension: Vec::new(),
            tension_inverse: Vec::new(),
            monomials: Vec::new(),
            coarse: DMatrix::zeros(0, 0),
            work: Work::default(),
        })
    }

    /// Numbers held by the two factors.
    pub fn factor_entries(&self) -> usize {
        self.normal.analysis().factor_entries() + self.tangential.analysis().factor_entries()
    }

    /// Give the memory of the factors back.
    pub(super) fn release(&mut self) {
        self.normal.release();
        self.tangential.release();
    }

    /// Fill it.
    ///
    /// # Errors
    /// A singular block.
    pub fn prepare(&mut self, input: &MatrixInput, values: &[f64]) -> Result<(), PhysicsError> {
        self.frames = input.freedom.iter().zip(&input.geometry.vertex_normal).map(frame).collect();
        self.prepare_tension(input);
        self.prepare_velocity(input)?;
        self.prepare_coarse(input, values);
        Ok(())
    }

    fn prepare_tension(&mut self, input: &MatrixInput) {
        let (topology, layout) = (input.topology, &self.scalar_layout);
        self.tension.clear();
        self.tension.resize(layout.entries(), 0.0);
        let place = |i: u32, j: u32| {
            layout.place(topology, i.min(j) as usize, i.max(j) as usize, 0, 0)
        };
        for (t, corners) in topology.triangles.iter().enumerate() {
            let (area, zeta) = (input.geometry.area[t], mean_viscosity(input, corners));
            let side = tension_stabilisation::side_coefficient(area, zeta);
            for c in 0..3 {
                let (i, j) = (corners[c], corners[(c + 1) % 3]);
                self.tension[place(i, j)] -= side;
                self.tension[place(i, i)] += 2.0 * side + area / (6.0 * zeta);
            }
        }
        self.tension_inverse.clear();
        for i in 0..topology.n_vertices {
            let own = place(i as u32, i as u32);
            self.tension[own] += input.lipid[i] / (input.area_compression_modulus * input.step);
            self.tension_inverse.push(self.tension[own].recip());
        }
    }

    fn prepare_velocity(&mut self, input: &MatrixInput) -> Result<(), PhysicsError> {
        let topology = input.topology;
        let n = topology.n_vertices;
        let free = |i: usize| input.freedom[i] == Freedom::Free;
        let (scalar, pair) = (&self.scalar_layout, &self.pair_layout);
        let mut cotangent = vec![0.0; scalar.entries()];
        let mut viscous = vec![0.0; pair.entries()];
        let mut resistance = vec![0.0; n];
        for (t, corners) in topology.triangles.iter().enumerate() {
            let (area, normal) = (input.geometry.area[t], input.geometry.normal[t]);
            let gradients = &input.geometry.gradients[t];
            let projector = Matrix3::identity() - normal * normal.transpose();
            let weight = area * mean_viscosity(input, corners);
            for a in 0..3 {
                for b in 0..3 {
                    let (i, j) = (corners[a] as usize, corners[b] as usize);
                    let k = boussinesq_scriven::block(gradients, &projector, weight, a, b, input.deviatoric);
                    let k = input.freedom[i].reduce_rows(input.freedom[j].reduce_columns(k));
                    let (from, to) = (&self.frames[i], &self.frames[j]);
                    resistance[i] += from[0].dot(&(k * to[0]));
                    if i > j {
                        continue;
                    }
                    if i == j || (free(i) && free(j)) {
                        cotangent[scalar.place(topology, i, j, 0, 0)] += area * gradients[a].dot(&gradients[b]);
                    }
                    for c in 0..2 {
                        let column = k * to[1 + c];
                        for r in 0..if i == j { c + 1 } else { 2 } {
                            viscous[pair.place(topology, i, j, r, c)] += from[1 + r].dot(&column);
                        }
                    }
                }
            }
        }
        let radius_squared = input.geometry.total_area / (4.0 * std::f64::consts::PI);
        self.between.clear();
        for i in 0..n {
            let (own, mass) = (scalar.place(topology, i, i, 0, 0), input.geometry.vertex_area[i]);
            let stiff = input.step * input.bending_rigidity[i];
            if free(i) {
                let least = LEAST_RESISTANCE * input.viscosity[i] / radius_squared;
                let c = (resistance[i] / mass).max(least) + input.friction[i] / mass;
                cotangent[own] += mass * (c / stiff).sqrt();
                self.between.push(mass / stiff);
            } else {
                cotangent[own] = 1.0;
                self.between.push(input.viscosity[i].recip());
            }
            for r in 0..2 {
                let moves = free(i) || (r == 0 && matches!(input.freedom[i], Freedom::Along(_)));
                viscous[pair.place(topology, i, i, r, r)] +=
                    if moves { input.friction[i] } else { input.viscosity[i] };
            }
        }
        self.normal.factorise(&cotangent)?;
        self.tangential.factorise(&viscous)?;
        Ok(())
    }

    /// Galerkin matrix of the monomials in each of the three unknowns of a vertex.
    fn prepare_coarse(&mut self, input: &MatrixInput, values: &[f64]) {
        let n = input.topology.n_vertices;
        let radius = (input.geometry.total_area / (4.0 * std::f64::consts::PI)).sqrt();
        let centre = input.positions.iter().sum::<Vec3>() / n as f64;
        self.monomials = input.positions.iter().map(|x| monomials(&((x - centre) / radius))).collect();
        for (row, freedom) in self.monomials.iter_mut().zip(input.freedom) {
            if *freedom != Freedom::Free {
                *row = [0.0; MONOMIALS];
            }
        }
        let mut matrix = DMatrix::zeros(3 * MONOMIALS, 3 * MONOMIALS);
        let mut x = vec![0.0; 4 * n];
        let mut y = vec![0.0; 4 * n];
        for column in 0..3 * MONOMIALS {
            let (axis, k) = (column / MONOMIALS, column % MONOMIALS);
            x.fill(0.0);
            for (x, row) in x.chunks_exact_mut(4).zip(&self.monomials) {
                x[axis] = row[k];
            }
            input.pattern.multiply(values, &x, &mut y, &mut self.work.product);
            let sums = self.project(&y);
            for (row, sum) in sums.iter().enumerate() {
                matrix[(row, column)] = *sum;
            }
        }
        // A polynomial that vanishes on the surface (or everything, without free vertices) leaves a zero.
        let largest = matrix.diagonal().amax().max(f64::MIN_POSITIVE);
        for k in 0..3 * MONOMIALS {
            matrix[(k, k)] += 1e-10 * largest;
        }
        self.coarse = matrix.try_inverse().unwrap_or_else(|| DMatrix::zeros(3 * MONOMIALS, 3 * MONOMIALS));
    }

    fn project(&self, vector: &[f64]) -> Vec<f64> {
        let mut sums = vec![0.0; 3 * MONOMIALS];
        for (v, row) in vector.chunks_exact(4).zip(&self.monomials) {
            for axis in 0..3 {
                for (sum, m) in sums[axis * MONOMIALS..(axis + 1) * MONOMIALS].iter_mut().zip(row) {
                    *sum += v[axis] * m;
                }
            }
        }
        sums
    }

    /// Replace a vector by the approximate inverse times it; `values` is the present matrix.
    pub fn apply(&mut self, input: &MatrixInput, values: &[f64], vector: &mut [f64]) {
        let mut work = std::mem::take(&mut self.work);
        work.solution.clear();
        work.solution.resize(vector.len(), 0.0);
        work.residual.resize(vector.len(), 0.0);
        self.guess_tension(input.topology, vector, &mut work);
        let residual = |work: &mut Work| {
            let Work { solution, residual, product, .. } = work;
            input.pattern.multiply(values, solution, residual, product);
            for (r, b) in residual.iter_mut().zip(vector.iter()) {
                *r = b - *r;
            }
        };
        residual(&mut work);
        self.sweep_normal(&mut work);
        residual(&mut work);
        self.sweep_tangential(&mut work);
        residual(&mut work);
        self.sweep_normal(&mut work);
        residual(&mut work);
        self.sweep_coarse(&mut work);
        vector.copy_from_slice(&work.solution);
        self.work = work;
    }

    /// λ̂ = −Ŝ⁻¹ b_λ.
    fn guess_tension(&self, topology: &Topology, vector: &[f64], work: &mut Work) {
        let n = topology.n_vertices;
        let Work { solution, scalar, pair, .. } = work;
        let inverse = &self.tension_inverse;
        scalar.clear();
        scalar.extend(vector.iter().skip(3).step_by(4).zip(inverse).map(|(b, d)| -b * d));
        pair.resize(n, 0.0);
        for _ in 0..JACOBI_SWEEPS {
            self.scalar_layout.multiply(topology, &self.tension, scalar, &mut pair[..n]);
            for i in 0..n {
                scalar[i] += DAMPING * inverse[i] * (-vector[4 * i + 3] - pair[i]);
            }
        }
        for (x, tension) in solution.chunks_exact_mut(4).zip(scalar.iter()) {
            x[3] = *tension;
        }
    }

    fn sweep_normal(&mut self, work: &mut Work) {
        let Work { solution, residual, scalar, .. } = work;
        scalar.clear();
        scalar.extend(residual.chunks_exact(4).zip(&self.frames).map(|(r, f)| along(r, &f[0])));
        self.normal.solve_in_place(scalar);
        scalar.iter_mut().zip(&self.between).for_each(|(s, b)| *s *= b);
        self.normal.solve_in_place(scalar);
        for ((x, s), frame) in solution.chunks_exact_mut(4).zip(scalar.iter()).zip(&self.frames) {
            add(x, &frame[0], *s);
        }
    }

    fn sweep_tangential(&mut self, work: &mut Work) {
        let Work { solution, residual, pair, .. } = work;
        pair.clear();
        for (r, frame) in residual.chunks_exact(4).zip(&self.frames) {
            pair.extend([along(r, &frame[1]), along(r, &frame[2])]);
        }
        self.tangential.solve_in_place(pair);
        for ((x, p), frame) in solution.chunks_exact_mut(4).zip(pair.chunks_exact(2)).zip(&self.frames) {
            add(x, &frame[1], p[0]);
            add(x, &frame[2], p[1]);
        }
    }

    fn sweep_coarse(&mut self, work: &mut Work) {
        let sums = nalgebra::DVector::from_vec(self.project(&work.residual));
        let amounts = &self.coarse * sums;
        for (x, row) in work.solution.chunks_exact_mut(4).zip(&self.monomials) {
            for axis in 0..3 {
                let part = &amounts.as_slice()[axis * MONOMIALS..(axis + 1) * MONOMIALS];
                x[axis] += part.iter().zip(row).map(|(a, m)| a * m).sum::<f64>();
            }
        }
    }
}

fn mean_viscosity(input: &MatrixInput, corners: &[u32; 3]) -> f64 {
    corners.iter().map(|&v| input.viscosity[v as usize]).sum::<f64>() / 3.0
}

fn along(r: &[f64], direction: &Vec3) -> f64 {
    r[0] * direction.x + r[1] * direction.y + r[2] * direction.z
}

fn add(x: &mut [f64], direction: &Vec3, amount: f64) {
    for (x, d) in x.iter_mut().zip(direction.iter()) {
        *x += amount * d;
    }
}

/// Normal and tangents. Where motion is restricted the unknowns are not Cartesian: the first one is along the surface.
fn frame((freedom, normal): (&Freedom, &Vec3)) -> Frame {
    if *freedom != Freedom::Free {
        return [Vec3::z(), Vec3::x(), Vec3::y()];
    }
    let axis = normal.iamin();
    let mut other = Vec3::zeros();
    other[axis] = 1.0;
    let first = normal.cross(&other).normalize();
    [*normal, first, normal.cross(&first)]
}

fn monomials(x: &Vec3) -> [f64; MONOMIALS] {
    let (x, y, z) = (x.x, x.y, x.z);
    [
        1.0, x, y, z, x * x, y * y, z * z, x * y, y * z, z * x, x * x * x, y * y * y, z * z * z, x * x * y, x * x * z,
        y * y * x, y * y * z, z * z * x, z * z * y, x * y * z,
    ]
}
