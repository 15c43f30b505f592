//! Values of the coupled matrix: viscosity, friction, implicit bending and tension stiffness, lipid constraint.

use super::pattern::{ABSENT, BlockPattern};
use crate::dissipation::{boussinesq_scriven, tension_stabilisation};
use nalgebra::Matrix3;
use pellicle_surface::geometry::Geometry;
use pellicle_surface::{Topology, Vec3};
use rayon::prelude::*;

/// How a vertex may move.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Freedom {
    /// In all directions.
    Free,
    /// Only along a unit vector (an open rim: lipid passes along the conormal).
    Along(Vec3),
    /// Not at all.
    Pinned,
}

impl Freedom {
    /// Velocity from the vertex's three unknowns.
    #[inline]
    pub fn expand(&self, y: &[f64]) -> Vec3 {
        match self {
            Freedom::Free => Vec3::new(y[0], y[1], y[2]),
            Freedom::Along(direction) => direction * y[0],
            Freedom::Pinned => Vec3::zeros(),
        }
    }

    /// Force on the vertex's three unknowns.
    #[inline]
    pub fn reduce(&self, force: &Vec3) -> [f64; 3] {
        match self {
            Freedom::Free => [force.x, force.y, force.z],
            Freedom::Along(direction) => [direction.dot(force), 0.0, 0.0],
            Freedom::Pinned => [0.0; 3],
        }
    }

    #[inline]
    pub(super) fn reduce_rows(&self, m: Matrix3<f64>) -> Matrix3<f64> {
        match self {
            Freedom::Free => m,
            Freedom::Along(direction) => {
                let row = direction.transpose() * m;
                let mut out = Matrix3::zeros();
                out.set_row(0, &row);
                out
            }
            Freedom::Pinned => Matrix3::zeros(),
        }
    }

    #[inline]
    pub(super) fn reduce_columns(&self, m: Matrix3<f64>) -> Matrix3<f64> {
        match self {
            Freedom::Free => m,
            Freedom::Along(direction) => {
                let column = m * direction;
                let mut out = Matrix3::zeros();
                out.set_column(0, &column);
                out
            }
            Freedom::Pinned => Matrix3::zeros(),
        }
    }
}

/// Positive part of the in-plane stress of a triangle, λ P + interface stress: eigenvalue `across` along `direction`,
/// `along` at right angles to it. It stiffens normal motion, implicitly.
#[derive(Clone, Copy, Debug)]
pub struct PositiveStress {
    /// Eigenvalue at right angles to `direction`.
    pub along: f64,
    /// Eigenvalue along `direction`.
    pub across: f64,
    /// Unit vector (any, when both eigenvalues are equal).
    pub direction: Vec3,
}

/// What the matrix is made of.
pub struct MatrixInput<'a> {
    /// Connectivity.
    pub topology: &'a Topology,
    /// Positions of the vertices.
    pub positions: &'a [Vec3],
    /// Geometry at the start of the step.
    pub geometry: &'a Geometry,
    /// Scatter indices.
    pub pattern: &'a BlockPattern,
    /// Rows J of the bending residuals over the stencils.
    pub bending_rows: &'a [Vec3],
    /// κ at vertices.
    pub bending_rigidity: &'a [f64],
    /// Positive stress of each triangle.
    pub stress: &'a [PositiveStress],
    /// Shear viscosity at vertices.
    pub viscosity: &'a [f64],
    /// Friction weight at vertices.
    pub friction: &'a [f64],
    /// Relaxed lipid area at vertices.
    pub lipid: &'a [f64],
    /// K_A.
    pub area_compression_modulus: f64,
    /// Time step.
    pub step: f64,
    /// Whether viscosity acts on the trace-free rate of strain only.
    pub deviatoric: bool,
    /// Freedom of each vertex.
    pub freedom: &'a [Freedom],
    /// Stiffness of the repulsion between facing parts, a block per vertex; empty without.
    pub repulsion: &'a [Matrix3<f64>],
}

/// Vertices whose columns one task assembles.
const CHUNK: usize = 128;

/// Fill the values of the matrix
/// [K + ξM + dt (JᵀJ + H_λ), Bᵀ; B, −(m/(K_A dt) + S)].
///
/// # Shapes
/// `values`: as many as the pattern has entries.
pub fn assemble(input: &MatrixInput, values: &mut [f64]) {
    let n = input.topology.n_vertices;
    let mut pieces: Vec<(usize, &mut [f64])> = Vec::with_capacity(n / CHUNK + 1);
    let mut rest = values;
    let mut first = 0;
    while first < n {
        let end = (first + CHUNK).min(n);
        let length = input.pattern.piece_start[end] - input.pattern.piece_start[first];
        let (piece, tail) = rest.split_at_mut(length);
        pieces.push((first, piece));
        rest = tail;
        first = end;
    }
    pieces.into_par_iter().for_each(|(first, mut piece)| {
        for j in first..(first + CHUNK).min(n) {
            let (columns, tail) = piece.split_at_mut(input.pattern.piece(j).len());
            assemble_columns(input, j, columns);
            piece = tail;
        }
    });
}

#[inline]
fn add_velocity_block(out: &mut [f64], start: &[u32; 4], block: &Matrix3<f64>, diagonal: bool) {
    for c in 0..3 {
        let base = start[c] as usize;
        let height = if diagonal { c + 1 } else { 3 };
        for r in 0..height {
            out[base + r] += block[(r, c)];
        }
    }
}

fn assemble_columns(input: &MatrixInput, j: usize, out: &mut [f64]) {
    out.fill(0.0);
    let pattern = input.pattern;
    let own = &input.freedom[j];
    let mut lipid_flux = 0.0;
    for &t in input.topology.vertex_triangles.of(j) {
        let t = t as usize;
        let corners = &input.topology.triangles[t];
        let gradients = &input.geometry.gradients[t];
        let (area, normal) = (input.geometry.area[t], input.geometry.normal[t]);
        let zeta = corners.iter().map(|&v| input.viscosity[v as usize]).sum::<f64>() / 3.0;
        let normal_normal = normal * normal.transpose();
        let projector = Matrix3::identity() - normal_normal;
        let stress = &input.stress[t];
        let side = tension_stabilisation::side_coefficient(area, zeta);
        let b = corners.iter().position(|&v| v as usize == j).unwrap_or(0);
        let at_j = own.reduce(&(gradients[b] * (area / 3.0)));
        lipid_flux += 2.0 * side;
        for a in 0..3 {
            let block = pattern.triangle_blocks[t][a][b];
            if block == ABSENT {
                continue;
            }
            let start = &pattern.block_start[block as usize];
            let diagonal = a == b;
            let other = &input.freedom[corners[a] as usize];
            let (ga, gb) = (&gradients[a], &gradients[b]);
            let stiff = stress.along * ga.dot(gb)
                + (stress.across - stress.along) * ga.dot(&stress.direction) * gb.dot(&stress.direction);
            let velocity = boussinesq_scriven::block(gradients, &projector, zeta * area, a, b, input.deviatoric)
                + normal_normal * (input.step * area * stiff);
            let velocity = other.reduce_rows(own.reduce_columns(velocity));
            add_velocity_block(out, start, &velocity, diagonal);
            // Bᵀ: velocity of a on the tension of j; B: velocity of j on the tension of a.
            let at_a = other.reduce(&(ga * (area / 3.0)));
            let base = start[3] as usize;
            for r in 0..3 {
                out[base + r] += at_a[r];
            }
            if !diagonal {
                for c in 0..3 {
                    out[start[c] as usize + 3] += at_j[c];
                }
                out[base + 3] += side;
            }
        }
    }
    let gram = pattern.gram_start[j] as usize..pattern.gram_start[j + 1] as usize;
    for &[place_a, place_j, block] in &pattern.gram[gram] {
        let row = &input.bending_rows[place_a as usize];
        let column = input.bending_rows[place_j as usize] * input.step;
        let start = &pattern.block_start[block as usize];
        let diagonal = pattern.block_row[block as usize] as usize == j;
        add_velocity_block(out, start, &(row * column.transpose()), diagonal);
    }
    // The diagonal block closes the list of the column.
    let last = pattern.column_blocks[j + 1] as usize - 1;
    let start = &pattern.block_start[last];
    let friction = input.friction[j];
    if let Some(stiff) = input.repulsion.get(j) {
        let block = own.reduce_rows(own.reduce_columns(stiff * input.step));
        add_velocity_block(out, start, &block, true);
    }
    match own {
        Freedom::Free => {
            for (c, first) in start[..3].iter().enumerate() {
                out[*first as usize + c] += friction;
            }
        }
        Freedom::Along(_) => {
            out[start[0] as usize] += friction;
            out[start[1] as usize + 1] += input.viscosity[j];
            out[start[2] as usize + 2] += input.viscosity[j];
        }
        Freedom::Pinned => {
            for (c, first) in start[..3].iter().enumerate() {
                out[*first as usize + c] += input.viscosity[j];
            }
        }
    }
    out[start[3] as usize + 3] -=
        input.lipid[j] / (input.area_compression_modulus * input.step) + lipid_flux;
}
