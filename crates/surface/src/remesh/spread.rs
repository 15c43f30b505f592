//! Evening out the lipid density after a change of the mesh.
//!
//! Edits change the polyhedron's area by second order in the edge length, so each group of vertices that
//! shared an edit is left with slightly too many or too few lipids. Multiplied with the area modulus this
//! would be a tension spike, which nearly incompressible lipids answer at once with a flow over the whole
//! membrane. That flow is taken here in one go: lipid fluxes along the edges, the gradient of a potential,
//! bring the density to (one factor per connected piece) × (density of the old mesh, interpolated). All other
//! amounts ride on the fluxes with the ratio of the vertex they leave, so they are conserved and their ratios
//! stay bounded.

use super::transfer::VertexData;
use crate::Mesh;
use crate::mesh::topology::{Lists, number_in_order};

/// Relative error of a vertex's lipid amount that is left.
const TOLERANCE: f64 = 1e-9;

/// Move amounts along edges until lipids are in proportion to `density` × vertex area.
pub(super) fn even_out(mesh: &Mesh, data: &mut VertexData, density: &[f64]) {
    let Some(lipids) = data.amounts.first() else {
        return;
    };
    let neighbours = neighbours(mesh);
    let surplus = surplus(mesh, lipids, density);
    let potential = potential(&neighbours, &surplus, lipids);
    ride(&neighbours, data, &potential);
}

/// Both neighbours' entries of every edge.
fn neighbours(mesh: &Mesh) -> Lists {
    // An interior edge appears once in each direction; a rim edge only once, so add both and drop doubles.
    let mut pairs: Vec<(u32, u32)> = mesh
        .triangles
        .iter()
        .flat_map(|&[a, b, c]| [(a, b), (b, a), (b, c), (c, b), (c, a), (a, c)])
        .collect();
    pairs.sort_unstable();
    pairs.dedup();
    Lists::group(mesh.n_vertices(), pairs.iter().copied())
}

/// Lipids each vertex has beyond its share.
fn surplus(mesh: &Mesh, lipids: &[f64], density: &[f64]) -> Vec<f64> {
    let mut share = vec![0.0; lipids.len()];
    let mut sets = petgraph::unionfind::UnionFind::<u32>::new(lipids.len());
    for (t, &[a, b, c]) in mesh.triangles.iter().enumerate() {
        let x = mesh.corners(t);
        let third = (x[1] - x[0]).cross(&(x[2] - x[0])).norm() / 6.0;
        for v in [a, b, c] {
            share[v as usize] += third * density[v as usize];
        }
        sets.union(a, b);
        sets.union(b, c);
    }
    let (piece, n_pieces) = number_in_order(&sets.into_labeling());
    let (mut held, mut due) = (vec![0.0; n_pieces], vec![0.0; n_pieces]);
    for (v, &p) in piece.iter().enumerate() {
        held[p as usize] += lipids[v];
        due[p as usize] += share[v];
    }
    (0..lipids.len())
        .map(|v| {
            let p = piece[v] as usize;
            lipids[v] - share[v] * (held[p] / due[p])
        })
        .collect()
}

/// Potential ψ with Σ_w (ψ_v − ψ_w) = surplus of v, by conjugate gradients.
///
/// Unit weights on edges are, on any shape of triangles that are nearly equilateral, proportional to the
/// cotangent weights of the Laplacian, so the flow is the shortest one on the surface.
fn potential(neighbours: &Lists, surplus: &[f64], lipids: &[f64]) -> Vec<f64> {
    let n = surplus.len();
    let mut potential = vec![0.0; n];
    let mut residual = surplus.to_vec();
    let mut direction = residual.clone();
    let mut image = vec![0.0; n];
    let dot = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(x, y)| x * y).sum::<f64>();
    let mut square = dot(&residual, &residual);
    for _ in 0..4 * n {
        let done = residual
            .iter()
            .zip(lipids)
            .all(|(r, m)| r.abs() <= TOLERANCE * m);
        if done {
            break;
        }
        for (v, entry) in image.iter_mut().enumerate() {
            let own = direction[v];
            *entry = neighbours
                .of(v)
                .iter()
                .map(|&w| own - direction[w as usize])
                .sum();
        }
        let curvature = dot(&direction, &image);
        if curvature <= 0.0 {
            break;
        }
        let step = square / curvature;
        for v in 0..n {
            potential[v] += step * direction[v];
            residual[v] -= step * image[v];
        }
        let new_square = dot(&residual, &residual);
        let keep = new_square / square;
        square = new_square;
        for v in 0..n {
            direction[v] = residual[v] + keep * direction[v];
        }
    }
    potential
}

/// Let all amounts flow along the edges, in steps that never empty a vertex by more than half.
fn ride(neighbours: &Lists, data: &mut VertexData, potential: &[f64]) {
    let Some((lipids, others)) = data.amounts.split_first_mut() else {
        return;
    };
    let out = |v: usize| -> f64 {
        let down = |&w: &u32| (potential[v] - potential[w as usize]).max(0.0);
        neighbours.of(v).iter().map(down).sum()
    };
    let net = |v: usize| -> f64 {
        let down = |&w: &u32| potential[v] - potential[w as usize];
        neighbours.of(v).iter().map(down).sum()
    };
    let drain = (0..lipids.len())
        .map(|v| out(v) / lipids[v].min((lipids[v] - net(v)).max(0.1 * lipids[v])))
        .fold(0.0, f64::max);
    let steps = (2.0 * drain).ceil().clamp(1.0, 1000.0);
    for _ in 0..steps as usize {
        let mut ratio = vec![0.0; lipids.len()];
        for list in others.iter_mut() {
            for (r, (n, m)) in ratio.iter_mut().zip(list.iter().zip(lipids.iter())) {
                *r = n / m;
            }
            each_flux(neighbours, potential, |from, to, lipid_flux| {
                let carried = lipid_flux / steps * ratio[from];
                list[from] -= carried;
                list[to] += carried;
            });
        }
        each_flux(neighbours, potential, |from, to, lipid_flux| {
            lipids[from] -= lipid_flux / steps;
            lipids[to] += lipid_flux / steps;
        });
    }
}

/// Every flux once, downhill.
fn each_flux(neighbours: &Lists, potential: &[f64], mut act: impl FnMut(usize, usize, f64)) {
    for v in 0..potential.len() {
        for &w in neighbours.of(v) {
            let drop = potential[v] - potential[w as usize];
            if drop > 0.0 {
                act(v, w as usize, drop);
            }
        }
    }
}
