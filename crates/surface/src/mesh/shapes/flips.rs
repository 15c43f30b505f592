//! Edge flips towards the Delaunay triangulation.

use crate::mesh::topology::NONE;
use crate::{Mesh, Vec3};

/// Flip interior edges until every one is Delaunay: opposite angles sum to π or less.
///
/// `twin` holds the partner of each half-edge (as in [`crate::Topology::twin`]) and is kept up to date. An edge stays
/// when its flip would double an existing edge or turn a triangle over. Positions do not change. Returns the number
/// of flips.
///
/// # Source
/// Lawson's flip algorithm; on a curved surface with the angles of the flat triangles, e.g. Bobenko &
/// Springborn, Discrete Comput. Geom. 38 (2007) 740.
pub(super) fn flip_to_delaunay(mesh: &mut Mesh, twin: &mut [u32]) -> usize {
    let mut queue: Vec<u32> = (0..twin.len() as u32).collect();
    let mut waiting = vec![true; twin.len()];
    let mut flips = 0;
    // Flips lower a bounded energy and end by themselves; the bound guards against rounding.
    let limit = 50 * twin.len();
    while let Some(edge) = queue.pop() {
        waiting[edge as usize] = false;
        if flips >= limit || !wants_flip(mesh, twin, edge) {
            continue;
        }
        let [t, s] = flip(mesh, twin, edge);
        flips += 1;
        for half_edge in [3 * t, 3 * t + 2, 3 * s, 3 * s + 1] {
            if !waiting[half_edge as usize] {
                waiting[half_edge as usize] = true;
                queue.push(half_edge);
            }
        }
    }
    flips
}

/// Next half-edge in the same triangle.
fn next(half_edge: u32) -> u32 {
    half_edge - half_edge % 3 + (half_edge + 1) % 3
}

/// Start vertex of a half-edge.
fn start(mesh: &Mesh, half_edge: u32) -> u32 {
    mesh.triangles[half_edge as usize / 3][half_edge as usize % 3]
}

fn wants_flip(mesh: &Mesh, twin: &[u32], edge: u32) -> bool {
    let other = twin[edge as usize];
    if other == NONE {
        return false;
    }
    let (i, j) = (start(mesh, edge), start(mesh, next(edge)));
    let (k, l) = (
        start(mesh, next(next(edge))),
        start(mesh, next(next(other))),
    );
    let (ki, kj) = (mesh.edge(k, i), mesh.edge(k, j));
    let (li, lj) = (mesh.edge(l, i), mesh.edge(l, j));
    // sin(α+β) < 0, with a margin so that cocircular edges do not flip to and fro.
    let (left, right) = (ki.cross(&kj), lj.cross(&li));
    let sine = left.norm() * li.dot(&lj) + right.norm() * ki.dot(&kj);
    let scale = ki.norm() * kj.norm() * li.norm() * lj.norm();
    if sine >= -1e-9 * scale || k == l {
        return false;
    }
    // The new triangles must look the same way as the old pair.
    let normal: Vec3 = left + right;
    let (il, jk, ik) = (-li, -kj, -ki);
    let first = il.cross(&ik);
    let second = jk.cross(&-lj);
    first.dot(&normal) > 0.0 && second.dot(&normal) > 0.0 && !connected(mesh, twin, edge, l)
}

/// Whether the vertex opposite to `edge` already has an edge to `target`.
fn connected(mesh: &Mesh, twin: &[u32], edge: u32, target: u32) -> bool {
    let first = next(next(edge));
    let mut spoke = first;
    loop {
        if start(mesh, next(spoke)) == target || start(mesh, next(next(spoke))) == target {
            return true;
        }
        let across = twin[next(next(spoke)) as usize];
        if across == NONE {
            break;
        }
        if across == first {
            return false;
        }
        spoke = across;
    }
    // A rim stopped the walk: go round the other way.
    spoke = first;
    while twin[spoke as usize] != NONE {
        spoke = next(twin[spoke as usize]);
        if start(mesh, next(spoke)) == target || start(mesh, next(next(spoke))) == target {
            return true;
        }
    }
    false
}

/// Replace triangles (i, j, k) and (j, i, l) by (i, l, k) and (l, j, k); returns their numbers.
fn flip(mesh: &mut Mesh, twin: &mut [u32], edge: u32) -> [u32; 2] {
    let other = twin[edge as usize];
    let (t, s) = (edge / 3, other / 3);
    let (i, j) = (start(mesh, edge), start(mesh, next(edge)));
    let (jk, ki) = (next(edge), next(next(edge)));
    let (il, lj) = (next(other), next(next(other)));
    let (k, l) = (start(mesh, ki), start(mesh, lj));
    let outside = [il, ki, lj, jk].map(|half_edge| twin[half_edge as usize]);
    mesh.triangles[t as usize] = [i, l, k];
    mesh.triangles[s as usize] = [l, j, k];
    let inside = [3 * t, 3 * t + 2, 3 * s, 3 * s + 1];
    for (mine, theirs) in inside.into_iter().zip(outside) {
        twin[mine as usize] = theirs;
        if theirs != NONE {
            twin[theirs as usize] = mine;
        }
    }
    twin[3 * t as usize + 1] = 3 * s + 2;
    twin[3 * s as usize + 2] = 3 * t + 1;
    [t, s]
}
