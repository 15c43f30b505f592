//! Repairs of a mesh, made only when asked for.

use super::topology::number_in_order;
use crate::{Mesh, MeshError};
use petgraph::unionfind::UnionFind;
use std::collections::HashMap;

/// Turn every triangle over.
pub fn turn_inside_out(mesh: &mut Mesh) {
    for [_, b, c] in &mut mesh.triangles {
        std::mem::swap(b, c);
    }
}

/// Turn single triangles so that all neighbours agree, as few as possible in each connected piece; returns how many
/// were turned.
///
/// Which side is outward stays with the majority; [`super::check::check`] settles it for closed surfaces.
///
/// # Errors
/// [`MeshError::NonManifoldEdge`] for three triangles at an edge; [`MeshError::NotOrientable`] for a surface with one
/// side.
pub fn orient_consistently(mesh: &mut Mesh) -> Result<usize, MeshError> {
    // Every edge with its triangles, and whether they run along it upwards.
    let mut at_edge: HashMap<(u32, u32), Vec<(usize, bool)>> = HashMap::new();
    for (t, corners) in mesh.triangles.iter().enumerate() {
        for c in 0..3 {
            let (a, b) = (corners[c], corners[(c + 1) % 3]);
            let here = at_edge.entry((a.min(b), a.max(b))).or_default();
            here.push((t, a < b));
        }
    }
    let mut neighbours: Vec<Vec<(usize, bool)>> = vec![Vec::new(); mesh.n_triangles()];
    let mut crowded: Option<(u32, u32)> = None;
    for (&(a, b), here) in &at_edge {
        match here[..] {
            [(t, up), (s, other_up)] => {
                neighbours[t].push((s, up == other_up));
                neighbours[s].push((t, up == other_up));
            }
            [_] => {}
            _ => crowded = Some(crowded.map_or((a, b), |least| least.min((a, b)))),
        }
    }
    if let Some((a, b)) = crowded {
        return Err(MeshError::NonManifoldEdge {
            a: a as usize,
            b: b as usize,
            count: at_edge[&(a, b)].len(),
        });
    }
    let mut turned: Vec<Option<bool>> = vec![None; mesh.n_triangles()];
    let mut total = 0;
    for seed in 0..mesh.n_triangles() {
        if turned[seed].is_some() {
            continue;
        }
        turned[seed] = Some(false);
        let mut piece = vec![seed];
        let mut next = 0;
        while next < piece.len() {
            let t = piece[next];
            next += 1;
            for &(s, disagree) in &neighbours[t] {
                let wanted = turned[t].map(|mine| mine != disagree);
                if turned[s].is_none() {
                    turned[s] = wanted;
                    piece.push(s);
                } else if turned[s] != wanted {
                    return Err(MeshError::NotOrientable { triangle: s });
                }
            }
        }
        let count = piece.iter().filter(|&&t| turned[t] == Some(true)).count();
        let minority = 2 * count <= piece.len();
        total += if minority { count } else { piece.len() - count };
        for t in piece {
            if turned[t] == Some(minority) {
                mesh.triangles[t].swap(1, 2);
            }
        }
    }
    Ok(total)
}

/// What a merge of points did.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Merge {
    /// Number of points that went into others.
    pub merged_points: usize,
    /// Number of triangles that lost their area by it and were removed.
    pub removed_triangles: usize,
    /// New number of each old vertex.
    pub new_index: Vec<u32>,
}

/// Merge points no further than `tolerance` apart (through the period on a tube) into the first of them.
///
/// # Errors
/// [`MeshError::Impossible`] for a tolerance that is negative, not finite or above half of the mean edge;
/// [`MeshError::IndexOutOfRange`], [`MeshError::NonFinite`] or a senseless period for broken meshes.
pub fn merge_duplicate_points(mesh: &mut Mesh, tolerance: f64) -> Result<Merge, MeshError> {
    refuse_broken(mesh)?;
    let most = 0.5 * mesh.mean_edge_length();
    if !(tolerance >= 0.0 && tolerance <= most) {
        return Err(MeshError::Impossible {
            quantity: "tolerance for coinciding points",
            value: tolerance,
            mend: format!("give a length from 0 to half of the mean edge, {most:.3e}"),
        });
    }
    let all: Vec<u32> = (0..mesh.n_vertices() as u32).collect();
    let (new_index, count) = number_in_order(&coincident(mesh, &all, tolerance));
    let merged_points = mesh.n_vertices() - count;
    let mut kept = Vec::with_capacity(count);
    for (vertex, &index) in new_index.iter().enumerate() {
        if index as usize == kept.len() {
            kept.push(mesh.positions[vertex]);
        }
    }
    mesh.positions = kept;
    let before = mesh.n_triangles();
    for corner in mesh.triangles.iter_mut().flatten() {
        *corner = new_index[*corner as usize];
    }
    mesh.triangles
        .retain(|[a, b, c]| a != b && b != c && c != a);
    Ok(Merge {
        merged_points,
        removed_triangles: before - mesh.n_triangles(),
        new_index,
    })
}

/// Drop vertices without triangles; returns the old numbers of those that stay, for data stored with them.
///
/// # Errors
/// As [`merge_duplicate_points`] for broken meshes.
pub fn remove_unused_vertices(mesh: &mut Mesh) -> Result<Vec<u32>, MeshError> {
    refuse_broken(mesh)?;
    let mut used = vec![false; mesh.n_vertices()];
    for &corner in mesh.triangles.iter().flatten() {
        used[corner as usize] = true;
    }
    let kept: Vec<u32> = (0..mesh.n_vertices() as u32)
        .filter(|&v| used[v as usize])
        .collect();
    let mut new_index = vec![0; mesh.n_vertices()];
    for (new, &old) in kept.iter().enumerate() {
        new_index[old as usize] = new as u32;
    }
    mesh.positions = kept.iter().map(|&v| mesh.positions[v as usize]).collect();
    for corner in mesh.triangles.iter_mut().flatten() {
        *corner = new_index[*corner as usize];
    }
    Ok(kept)
}

fn refuse_broken(mesh: &Mesh) -> Result<(), MeshError> {
    for (triangle, corners) in mesh.triangles.iter().enumerate() {
        for &corner in corners {
            if corner as usize >= mesh.n_vertices() {
                return Err(MeshError::IndexOutOfRange {
                    triangle,
                    index: corner as usize,
                    vertices: mesh.n_vertices(),
                });
            }
        }
    }
    if let Some(period) = mesh.period
        && !(period > 0.0 && period.is_finite())
    {
        return Err(MeshError::Impossible {
            quantity: "period",
            value: period,
            mend: "give a positive, finite length".into(),
        });
    }
    match mesh
        .positions
        .iter()
        .position(|p| !p.iter().all(|x| x.is_finite()))
    {
        Some(vertex) => Err(MeshError::NonFinite { vertex }),
        None => Ok(()),
    }
}

/// For each of the given vertices, the place in the list of the first one it coincides with (its own if none), chains
/// of neighbours included.
pub(super) fn coincident(mesh: &Mesh, vertices: &[u32], tolerance: f64) -> Vec<u32> {
    // Points are sorted into cubes wider than the tolerance; only neighbouring cubes are compared. On a tube the
    // cubes along z divide the period evenly, so that they wrap round.
    let size = mesh
        .positions
        .iter()
        .fold(0.0f64, |most, p| most.max(p.amax()));
    let cell = (1.01 * tolerance).max(1e-14 * size).max(f64::MIN_POSITIVE);
    let layers = mesh
        .period
        .map(|period| (period / cell).floor().clamp(1.0, 1e15));
    let cube = |place: usize| {
        let p = mesh.positions[vertices[place] as usize];
        let z = match (mesh.period, layers) {
            (Some(period), Some(layers)) => (p.z / period).rem_euclid(1.0) * layers,
            _ => p.z / cell,
        };
        [p.x / cell, p.y / cell, z].map(|x| x.floor() as i64)
    };
    let mut cubes: HashMap<[i64; 3], Vec<u32>> = HashMap::new();
    let mut sets = UnionFind::<u32>::new(vertices.len());
    for place in 0..vertices.len() {
        let [x, y, z] = cube(place);
        for (dx, dy, dz) in around() {
            let mut layer = z + dz;
            if let Some(layers) = layers {
                layer = layer.rem_euclid(layers as i64);
            }
            for &other in cubes.get(&[x + dx, y + dy, layer]).into_iter().flatten() {
                let gap = mesh.edge(vertices[place], vertices[other as usize]).norm();
                if gap <= tolerance {
                    sets.union(place as u32, other);
                }
            }
        }
        let layer = layers.map_or(z, |layers| z.rem_euclid(layers as i64));
        cubes.entry([x, y, layer]).or_default().push(place as u32);
    }
    let mut first: HashMap<u32, u32> = HashMap::new();
    (0..vertices.len() as u32)
        .map(|place| *first.entry(sets.find(place)).or_insert(place))
        .collect()
}

/// The 27 offsets to a cube and its neighbours.
fn around() -> impl Iterator<Item = (i64, i64, i64)> {
    (0..27).map(|k| (k % 3 - 1, k / 3 % 3 - 1, k / 9 - 1))
}
