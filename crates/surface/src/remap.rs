//! Amounts onto a mesh whose vertices have slid along the surface: conservative, second order, bounded.
//!
//! Vertices sweep area through the dual edges (side midpoint to triangle centre). Lipid is moved as the deviation
//! from its mean density, so that what the flat triangles leave open in the swept areas does not show as tension.
//! Mass fluxes are then corrected by the gradient of a potential until they explain the new lipid amounts exactly;
//! every carried amount moves with those fluxes at a limited second-order reconstruction (monotonised central, van
//! Leer, J. Comput. Phys. 23 (1977) 276), in two stages (Shu & Osher, J. Comput. Phys. 77 (1988) 439).

use crate::geometry::Geometry;
use crate::{Mesh, Topology, Vec3};

/// What to move, in place.
pub struct Carried<'a> {
    /// Relaxed lipid area of each vertex.
    pub lipid: &'a mut Vec<f64>,
    /// Amounts carried by the lipids (concentration × lipid); empty lists are left alone.
    pub amounts: Vec<&'a mut Vec<f64>>,
}

/// Edge fluxes between dual cells: `flux[e]` is what the first end gains from the second.
struct EdgeFluxes {
    ends: Vec<(u32, u32)>,
    flux: Vec<f64>,
}

impl EdgeFluxes {
    fn divergence(&self, n: usize, values: impl Fn(usize) -> f64) -> Vec<f64> {
        let mut out = vec![0.0; n];
        for (e, (i, j)) in self.ends.iter().enumerate() {
            let moved = values(e);
            out[*i as usize] += moved;
            out[*j as usize] -= moved;
        }
        out
    }
}

/// Remap from `before` to `after` (same connectivity). With `reservoir_density`, rim vertices exchange lipid with a
/// reservoir of that density; otherwise every total is kept exactly.
///
/// Returns the lipid gained from the reservoir.
pub fn remap(
    before: &Mesh,
    after: &Mesh,
    topology: &Topology,
    geometry_before: &Geometry,
    geometry_after: &Geometry,
    reservoir_density: Option<f64>,
    carried: Carried,
) -> f64 {
    let n = topology.n_vertices;
    let swept = swept_areas(before, after, topology);
    let Carried { lipid, mut amounts } = carried;
    let density: Vec<f64> = lipid.iter().zip(&geometry_before.vertex_area).map(|(m, a)| m / a).collect();
    // Pieces exchange nothing; only those with a rim reach the reservoir.
    let piece = |i: usize| topology.piece[i] as usize;
    let sums = |values: &dyn Fn(usize) -> f64| {
        let mut sums = vec![0.0; topology.n_pieces];
        (0..n).for_each(|i| sums[piece(i)] += values(i));
        sums
    };
    let total = sums(&|i| lipid[i]);
    let reservoir: Vec<Option<f64>> =
        topology.closed_pieces().iter().map(|closed| reservoir_density.filter(|_| !closed)).collect();
    let areas_before = geometry_before.piece_areas(topology);
    let areas_after = geometry_after.piece_areas(topology);
    let mean: Vec<f64> =
        (0..topology.n_pieces).map(|p| reservoir[p].unwrap_or(total[p] / areas_before[p])).collect();
    let deviation_flux = swept.divergence(n, |e| {
        let (i, j) = swept.ends[e];
        let upwind = if swept.flux[e] > 0.0 { j } else { i } as usize;
        swept.flux[e] * (density[upwind] - mean[piece(upwind)])
    });
    let deviation: Vec<f64> = (0..n)
        .map(|i| lipid[i] - mean[piece(i)] * geometry_before.vertex_area[i] + deviation_flux[i])
        .collect();
    let deviations = sums(&|i| deviation[i]);
    let mean_after: Vec<f64> = (0..topology.n_pieces)
        .map(|p| reservoir[p].unwrap_or((total[p] - deviations[p]) / areas_after[p]))
        .collect();
    let wanted: Vec<f64> = (0..n)
        .map(|i| mean_after[piece(i)] * geometry_after.vertex_area[i] + deviation[i])
        .collect();
    let mut mass = EdgeFluxes {
        flux: (0..swept.ends.len())
            .map(|e| {
                let (i, j) = swept.ends[e];
                let upwind = if swept.flux[e] > 0.0 { j } else { i } as usize;
                swept.flux[e] * density[upwind]
            })
            .collect(),
        ends: swept.ends,
    };
    let explained = mass.divergence(n, |e| mass.flux[e]);
    let missing: Vec<f64> = (0..n).map(|i| wanted[i] - lipid[i] - explained[i]).collect();
    let open_rim: Vec<bool> = topology.on_rim.iter().map(|rim| *rim && reservoir_density.is_some()).collect();
    let potential = graph_potential(topology, &missing, &open_rim);
    for (flux, (i, j)) in mass.flux.iter_mut().zip(&mass.ends) {
        *flux += potential[*i as usize] - potential[*j as usize];
    }
    let gained = mass.divergence(n, |e| mass.flux[e]);
    // Through an open rim the reservoir makes up the rest, at the concentration found there.
    let entering: Vec<f64> = (0..n)
        .map(|i| if open_rim[i] { wanted[i] - lipid[i] - gained[i] } else { 0.0 })
        .collect();
    let new_lipid: Vec<f64> = (0..n).map(|i| lipid[i] + gained[i] + entering[i]).collect();
    for amount in &mut amounts {
        if amount.is_empty() {
            continue;
        }
        let old: Vec<f64> = amount.iter().zip(lipid.iter()).map(|(a, m)| a / m).collect();
        let advance = |from: &[f64], concentration: &[f64]| -> Vec<f64> {
            let faces = face_values(before, topology, geometry_before, &mass, concentration);
            let change = mass.divergence(n, |e| mass.flux[e] * faces[e]);
            (0..n).map(|i| from[i] + change[i] + entering[i] * concentration[i]).collect()
        };
        let first = advance(amount, &old);
        let middle: Vec<f64> = first.iter().zip(&new_lipid).map(|(a, m)| a / m).collect();
        let second = advance(&first, &middle);
        for i in 0..n {
            amount[i] = 0.5 * (amount[i] + second[i]);
        }
    }
    *lipid = new_lipid;
    entering.iter().sum()
}

/// Area swept into the first end's dual cell from the second's, at half-way geometry.
fn swept_areas(before: &Mesh, after: &Mesh, topology: &Topology) -> EdgeFluxes {
    let ends: Vec<(u32, u32)> = topology.edges().collect();
    let mut half_way = before.clone();
    let displacement: Vec<Vec3> = before
        .positions
        .iter()
        .zip(&after.positions)
        .map(|(a, b)| before.nearest_image(b - a))
        .collect();
    for (x, d) in half_way.positions.iter_mut().zip(&displacement) {
        *x += d * 0.5;
    }
    let edge_index = edge_index(topology);
    let mut flux = vec![0.0; ends.len()];
    for (t, corners) in topology.triangles.iter().enumerate() {
        let x = half_way.corners(t);
        let normal = (x[1] - x[0]).cross(&(x[2] - x[0])).normalize();
        let centre = (x[0] + x[1] + x[2]) / 3.0;
        let moves = corners.map(|v| displacement[v as usize]);
        let mean_move = (moves[0] + moves[1] + moves[2]) / 3.0;
        for a in 0..3 {
            let b = (a + 1) % 3;
            let middle = (x[a] + x[b]) * 0.5;
            let across = (centre - middle).cross(&normal);
            let travel = ((moves[a] + moves[b]) * 0.5 + mean_move) * 0.5;
            let e = edge_index[3 * t + a] as usize;
            let sign = if ends[e].0 == corners[a] { 1.0 } else { -1.0 };
            flux[e] += sign * travel.dot(&across);
        }
    }
    EdgeFluxes { ends, flux }
}

/// Edge (in the order of [`Topology::edges`]) of each half-edge.
fn edge_index(topology: &Topology) -> Vec<u32> {
    let mut index = vec![0; 3 * topology.triangles.len()];
    for (e, hinge) in topology.hinges.iter().enumerate() {
        for (t, from) in [(hinge.left, hinge.i), (hinge.right, hinge.j)] {
            let c = topology.triangles[t as usize].iter().position(|&v| v == from).unwrap_or(0);
            index[3 * t as usize + c] = e as u32;
        }
    }
    for (e, rim) in topology.rim_edges.iter().enumerate() {
        let c = topology.triangles[rim.triangle as usize].iter().position(|&v| v == rim.i).unwrap_or(0);
        index[3 * rim.triangle as usize + c] = (topology.hinges.len() + e) as u32;
    }
    index
}

/// Potential with graph Laplacian L p = right, p = 0 at `grounded` vertices; conjugate gradients.
fn graph_potential(topology: &Topology, right: &[f64], grounded: &[bool]) -> Vec<f64> {
    let n = right.len();
    let valence = |i: usize| topology.neighbours.of(i).len() as f64;
    let mut x = vec![0.0; n];
    let mut residual: Vec<f64> = (0..n).map(|i| if grounded[i] { 0.0 } else { right[i] }).collect();
    let pieces = topology.n_pieces;
    let (mut free, mut sum, mut count) = (vec![true; pieces], vec![0.0; pieces], vec![0usize; pieces]);
    for i in 0..n {
        let p = topology.piece[i] as usize;
        free[p] &= !grounded[i];
        sum[p] += residual[i];
        count[p] += 1;
    }
    for (i, r) in residual.iter_mut().enumerate() {
        let p = topology.piece[i] as usize;
        if free[p] {
            *r -= sum[p] / count[p] as f64;
        }
    }
    let mut direction: Vec<f64> = (0..n).map(|i| residual[i] / valence(i)).collect();
    let mut work = vec![0.0; n];
    let scaled = |r: &[f64]| (0..n).map(|i| r[i] * r[i] / valence(i)).sum::<f64>();
    let mut rho = scaled(&residual);
    let goal = 1e-18 * rho;
    for _ in 0..1000 {
        if rho <= goal || rho == 0.0 {
            break;
        }
        for i in 0..n {
            work[i] = if grounded[i] {
                0.0
            } else {
                let around = topology.neighbours.of(i);
                let sum: f64 = around.iter().map(|&j| direction[j as usize]).sum();
                direction[i] * around.len() as f64 - sum
            };
        }
        let curvature: f64 = direction.iter().zip(&work).map(|(d, w)| d * w).sum();
        if curvature <= 0.0 {
            break;
        }
        let alpha = rho / curvature;
        for i in 0..n {
            x[i] += alpha * direction[i];
            residual[i] -= alpha * work[i];
        }
        let next = scaled(&residual);
        let beta = next / rho;
        for i in 0..n {
            direction[i] = residual[i] / valence(i) + beta * direction[i];
        }
        rho = next;
    }
    x
}

/// Limited concentration on each dual edge, seen from the upwind side.
fn face_values(
    mesh: &Mesh,
    topology: &Topology,
    geometry: &Geometry,
    mass: &EdgeFluxes,
    concentration: &[f64],
) -> Vec<f64> {
    let mut slope = vec![Vec3::zeros(); topology.n_vertices];
    for (t, corners) in topology.triangles.iter().enumerate() {
        let g = &geometry.gradients[t];
        let gradient = (g[0] * concentration[corners[0] as usize]
            + g[1] * concentration[corners[1] as usize]
            + g[2] * concentration[corners[2] as usize])
            * (geometry.area[t] / 3.0);
        for &v in corners {
            slope[v as usize] += gradient;
        }
    }
    mass.ends
        .iter()
        .zip(&mass.flux)
        .map(|((i, j), flux)| {
            let (up, down) = if *flux > 0.0 { (*j, *i) } else { (*i, *j) };
            let (u, d) = (up as usize, down as usize);
            let difference = concentration[d] - concentration[u];
            if difference.abs() < 1e-14 {
                return concentration[u];
            }
            let central = slope[u].dot(&mesh.edge(up, down)) / geometry.vertex_area[u];
            let ratio = (2.0 * central - difference) / difference;
            let limiter = (2.0 * ratio).min(0.5 * (1.0 + ratio)).min(2.0).max(0.0);
            concentration[u] + 0.5 * limiter * difference
        })
        .collect()
}
