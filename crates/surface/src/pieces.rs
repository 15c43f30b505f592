//! The connected pieces of a surface, one by one.

use crate::{Mesh, Topology, Vec3};

/// One piece as a mesh of its own, and the vertex of the whole that each of its vertices is.
pub fn extract(mesh: &Mesh, topology: &Topology, piece: usize) -> (Mesh, Vec<u32>) {
    let mut name = vec![u32::MAX; mesh.n_vertices()];
    let mut vertices = Vec::new();
    for (v, p) in topology.piece.iter().enumerate() {
        if *p as usize == piece {
            name[v] = vertices.len() as u32;
            vertices.push(v as u32);
        }
    }
    let mesh = Mesh {
        positions: vertices.iter().map(|&v| mesh.positions[v as usize]).collect(),
        triangles: mesh
            .triangles
            .iter()
            .filter(|corners| topology.piece[corners[0] as usize] as usize == piece)
            .map(|corners| corners.map(|v| name[v as usize]))
            .collect(),
        period: mesh.period,
    };
    (mesh, vertices)
}

/// Positions with every piece in one part, and whether each piece goes on endlessly through the period.
///
/// Without a period these are the positions as they are.
pub fn unwrapped(mesh: &Mesh, topology: &Topology) -> (Vec<Vec3>, Vec<bool>) {
    let mut places = mesh.positions.clone();
    let mut endless = vec![false; topology.n_pieces];
    let Some(period) = mesh.period else {
        return (places, endless);
    };
    let mut seen = vec![false; topology.n_vertices];
    let mut waiting = Vec::new();
    for first in 0..topology.n_vertices {
        if std::mem::replace(&mut seen[first], true) {
            continue;
        }
        waiting.push(first);
        while let Some(v) = waiting.pop() {
            for &w in topology.neighbours.of(v) {
                if !std::mem::replace(&mut seen[w as usize], true) {
                    places[w as usize] = places[v] + mesh.edge(v as u32, w);
                    waiting.push(w as usize);
                }
            }
        }
    }
    for (i, j) in topology.edges() {
        let jump = (places[j as usize] - places[i as usize]).z - mesh.edge(i, j).z;
        if jump.abs() > 0.5 * period {
            endless[topology.piece[i as usize] as usize] = true;
        }
    }
    (places, endless)
}

/// Which old piece each new piece was, after a change that neither joins nor parts pieces; `old_to_new` gives the new
/// name of each old vertex (`None`: nothing was renamed). A piece of which no vertex is left has no entry.
pub fn successors(old: &Topology, new: &Topology, old_to_new: Option<&[Option<u32>]>) -> Vec<Option<u32>> {
    let mut was = vec![None; new.n_pieces];
    for v in 0..old.n_vertices {
        let image = old_to_new.map_or(Some(v as u32), |map| map[v]);
        if let Some(w) = image {
            was[new.piece[w as usize] as usize].get_or_insert(old.piece[v]);
        }
    }
    was
}
