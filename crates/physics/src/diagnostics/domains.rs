//! Domains of the phases and the length of the lines between them.

use pellicle_surface::{Mesh, Topology};
use petgraph::unionfind::UnionFind;
use std::collections::HashMap;

/// Fewer vertices than this are no domain.
const LEAST_VERTICES: usize = 4;

/// Number of domains of the minority phase: connected sets of at least four vertices with φ > ½ where the mean
/// composition is at most ½, with φ < ½ otherwise.
///
/// # Shapes
/// `composition`: φ, one per vertex.
pub fn count(topology: &Topology, composition: &[f64], mean: f64) -> usize {
    // The margin keeps an even mixture from changing sides by rounding.
    let minority_is_one = mean <= 0.5 + 1e-9;
    let inside: Vec<bool> = composition
        .iter()
        .map(|phi| if minority_is_one { *phi > 0.5 } else { *phi < 0.5 })
        .collect();
    let mut sets = UnionFind::<u32>::new(topology.n_vertices);
    for (i, j) in topology.edges() {
        if inside[i as usize] && inside[j as usize] {
            sets.union(i, j);
        }
    }
    let mut sizes: HashMap<u32, usize> = HashMap::new();
    for (vertex, set) in sets.into_labeling().into_iter().enumerate() {
        if inside[vertex] {
            *sizes.entry(set).or_insert(0) += 1;
        }
    }
    sizes.values().filter(|size| **size >= LEAST_VERTICES).count()
}

/// Length of the line φ = ½ of the piecewise linear composition [length].
///
/// # Shapes
/// `composition`: φ, one per vertex.
pub fn interface_length(mesh: &Mesh, composition: &[f64]) -> f64 {
    let mut length = 0.0;
    for (t, corners) in mesh.triangles.iter().enumerate() {
        let value = corners.map(|v| composition[v as usize] - 0.5);
        let above = value.map(|v| v > 0.0);
        if above[0] == above[1] && above[1] == above[2] {
            continue;
        }
        // The corner that is alone on its side of the line.
        let alone = (0..3).find(|&c| above[c] != above[(c + 1) % 3] && above[c] != above[(c + 2) % 3]);
        let Some(c) = alone else { continue };
        let x = mesh.corners(t);
        let cut = |other: usize| x[c] + (x[other] - x[c]) * (value[c] / (value[c] - value[other]));
        length += (cut((c + 1) % 3) - cut((c + 2) % 3)).norm();
    }
    length
}
