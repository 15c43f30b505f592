//! Connectivity derived from the triangles: half-edges, hinges, rims, one-rings, Euler characteristic.

use crate::MeshError;
use std::collections::HashMap;

/// Marks a half-edge without a partner.
pub const NONE: u32 = u32::MAX;

/// An interior edge from `i` to `j` with its two wings: `k` completes the triangle in which the edge runs
/// i→j, `l` the one in which it runs j→i.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Hinge {
    /// Start of the edge.
    pub i: u32,
    /// End of the edge.
    pub j: u32,
    /// Third corner of the left triangle (i, j, k).
    pub k: u32,
    /// Third corner of the right triangle (j, i, l).
    pub l: u32,
    /// Triangle (i, j, k).
    pub left: u32,
    /// Triangle (j, i, l).
    pub right: u32,
}

/// An edge of the rim, running i→j in its only triangle (i, j, k).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct RimEdge {
    /// Start of the edge.
    pub i: u32,
    /// End of the edge.
    pub j: u32,
    /// Third corner of the triangle.
    pub k: u32,
    /// The triangle.
    pub triangle: u32,
}

/// Lists of different lengths, stored end to end.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Lists {
    /// Where each list starts; one more entry than lists.
    pub start: Vec<u32>,
    /// All entries.
    pub items: Vec<u32>,
}

impl Lists {
    /// One list.
    #[inline]
    pub fn of(&self, index: usize) -> &[u32] {
        &self.items[self.start[index] as usize..self.start[index + 1] as usize]
    }

    /// Number of lists.
    pub fn len(&self) -> usize {
        self.start.len().saturating_sub(1)
    }

    /// Whether there are no lists.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// Group `items` by key (`0..n`), keeping their order.
    pub fn group(n: usize, pairs: impl Iterator<Item = (u32, u32)> + Clone) -> Self {
        let mut start = vec![0u32; n + 1];
        for (key, _) in pairs.clone() {
            start[key as usize + 1] += 1;
        }
        for index in 0..n {
            start[index + 1] += start[index];
        }
        let mut next = start.clone();
        let mut items = vec![0u32; start[n] as usize];
        for (key, item) in pairs {
            items[next[key as usize] as usize] = item;
            next[key as usize] += 1;
        }
        Self { start, items }
    }
}

/// Connectivity of an oriented manifold triangulation, with or without rims.
///
/// Half-edge `3 t + c` runs from corner `c` of triangle `t` to its next corner.
#[derive(Clone, Debug)]
pub struct Topology {
    /// Number of vertices.
    pub n_vertices: usize,
    /// Triangles, as in the mesh.
    pub triangles: Vec<[u32; 3]>,
    /// Partner of each half-edge, or [`NONE`] on the rim.
    pub twin: Vec<u32>,
    /// Interior edges, sorted by their vertices.
    pub hinges: Vec<Hinge>,
    /// Rim edges, sorted by their vertices.
    pub rim_edges: Vec<RimEdge>,
    /// Whether a vertex lies on a rim.
    pub on_rim: Vec<bool>,
    /// Neighbours of each vertex, ascending.
    pub neighbours: Lists,
    /// Triangles of each vertex, ascending.
    pub vertex_triangles: Lists,
    /// Connected piece of each vertex, numbered from 0 in the order of their first vertex.
    pub piece: Vec<u32>,
    /// Number of pieces.
    pub n_pieces: usize,
}

impl Topology {
    /// Derive the connectivity.
    ///
    /// # Errors
    /// The first defect found: an index out of range, a vertex used twice, a non-manifold edge or vertex, a
    /// flipped triangle, a vertex without triangles.
    pub fn new(n_vertices: usize, triangles: &[[u32; 3]]) -> Result<Self, MeshError> {
        if n_vertices == 0 || triangles.is_empty() {
            return Err(MeshError::Empty {
                vertices: n_vertices,
                triangles: triangles.len(),
            });
        }
        let mut directed: HashMap<(u32, u32), u32> = HashMap::with_capacity(3 * triangles.len());
        for (t, corners) in triangles.iter().enumerate() {
            for c in 0..3 {
                let (a, b) = (corners[c], corners[(c + 1) % 3]);
                if a as usize >= n_vertices {
                    return Err(MeshError::IndexOutOfRange {
                        triangle: t,
                        index: a as usize,
                        vertices: n_vertices,
                    });
                }
                if a == b {
                    return Err(MeshError::RepeatedVertex {
                        triangle: t,
                        vertex: a as usize,
                    });
                }
                if let Some(first) = directed.insert((a, b), (3 * t + c) as u32) {
                    return Err(Self::explain_clash(triangles, a, b, first as usize / 3, t));
                }
            }
        }
        let mut twin = vec![NONE; 3 * triangles.len()];
        let mut hinges = Vec::with_capacity(3 * triangles.len() / 2);
        let mut rim_edges = Vec::new();
        for (t, corners) in triangles.iter().enumerate() {
            for c in 0..3 {
                let (i, j, k) = (corners[c], corners[(c + 1) % 3], corners[(c + 2) % 3]);
                match directed.get(&(j, i)) {
                    Some(&other) => {
                        twin[3 * t + c] = other;
                        if i < j {
                            let (s, d) = (other as usize / 3, other as usize % 3);
                            hinges.push(Hinge {
                                i,
                                j,
                                k,
                                l: triangles[s][(d + 2) % 3],
                                left: t as u32,
                                right: s as u32,
                            });
                        }
                    }
                    None => rim_edges.push(RimEdge {
                        i,
                        j,
                        k,
                        triangle: t as u32,
                    }),
                }
            }
        }
        hinges.sort_unstable_by_key(|h| (h.i, h.j));
        rim_edges.sort_unstable_by_key(|e| (e.i, e.j));
        let mut on_rim = vec![false; n_vertices];
        for edge in &rim_edges {
            on_rim[edge.i as usize] = true;
            on_rim[edge.j as usize] = true;
        }
        let vertex_triangles = Lists::group(
            n_vertices,
            triangles
                .iter()
                .enumerate()
                .flat_map(|(t, corners)| corners.iter().map(move |&v| (v, t as u32))),
        );
        let mut ends: Vec<(u32, u32)> = Vec::with_capacity(2 * hinges.len() + 2 * rim_edges.len());
        ends.extend(hinges.iter().flat_map(|h| [(h.i, h.j), (h.j, h.i)]));
        ends.extend(rim_edges.iter().flat_map(|e| [(e.i, e.j), (e.j, e.i)]));
        ends.sort_unstable();
        let neighbours = Lists::group(n_vertices, ends.iter().copied());
        let mut sets = petgraph::unionfind::UnionFind::<u32>::new(n_vertices);
        for &[a, b, c] in triangles {
            sets.union(a, b);
            sets.union(b, c);
        }
        let (piece, n_pieces) = number_in_order(&sets.into_labeling());
        let topology = Self {
            n_vertices,
            triangles: triangles.to_vec(),
            twin,
            hinges,
            rim_edges,
            on_rim,
            neighbours,
            vertex_triangles,
            piece,
            n_pieces,
        };
        topology.check_vertices()?;
        Ok(topology)
    }

    /// Two half-edges in the same direction: either too many triangles at the edge, or one of them flipped.
    fn explain_clash(triangles: &[[u32; 3]], a: u32, b: u32, first: usize, second: usize) -> MeshError {
        let count = triangles
            .iter()
            .filter(|corners| corners.contains(&a) && corners.contains(&b))
            .count();
        if count > 2 {
            MeshError::NonManifoldEdge {
                a: a as usize,
                b: b as usize,
                count,
            }
        } else {
            MeshError::InconsistentOrientation {
                a: a as usize,
                b: b as usize,
                first,
                second,
            }
        }
    }

    /// Every vertex has one fan: as many neighbours as triangles, one more on a rim.
    fn check_vertices(&self) -> Result<(), MeshError> {
        let mut rim_starts = vec![0u8; self.n_vertices];
        for edge in &self.rim_edges {
            rim_starts[edge.i as usize] = rim_starts[edge.i as usize].saturating_add(1);
        }
        for vertex in 0..self.n_vertices {
            let around = self.vertex_triangles.of(vertex);
            if around.is_empty() {
                return Err(MeshError::IsolatedVertex { vertex });
            }
            if rim_starts[vertex] > 1 || self.fan_length(vertex) != around.len() {
                return Err(MeshError::NonManifoldVertex { vertex });
            }
        }
        Ok(())
    }

    /// Number of triangles met when walking round a vertex both ways from its first triangle.
    fn fan_length(&self, vertex: usize) -> usize {
        let around = self.vertex_triangles.of(vertex);
        let corner_of = |t: u32| {
            self.triangles[t as usize]
                .iter()
                .position(|&v| v as usize == vertex)
                .unwrap_or(0) as u32
        };
        let start = around[0];
        let mut count = 1;
        let mut t = start;
        // Counter-clockwise: across the half-edge that ends in the vertex.
        loop {
            let across = self.twin[(3 * t + (corner_of(t) + 2) % 3) as usize];
            if across == NONE {
                break;
            }
            t = across / 3;
            if t == start || count > around.len() {
                return count;
            }
            count += 1;
        }
        // Clockwise from the start, when a rim stopped the walk.
        t = start;
        loop {
            let across = self.twin[(3 * t + corner_of(t)) as usize];
            if across == NONE || count > around.len() {
                return count;
            }
            t = across / 3;
            count += 1;
        }
    }

    /// Number of edges, interior and rim.
    pub fn n_edges(&self) -> usize {
        self.hinges.len() + self.rim_edges.len()
    }

    /// V − E + F.
    pub fn euler_characteristic(&self) -> i64 {
        self.n_vertices as i64 - self.n_edges() as i64 + self.triangles.len() as i64
    }

    /// Whether there is no rim.
    pub fn is_closed(&self) -> bool {
        self.rim_edges.is_empty()
    }

    /// Refuse a surface with a rim.
    ///
    /// # Errors
    /// [`MeshError::Open`] naming the first rim edge.
    pub fn require_closed(&self) -> Result<(), MeshError> {
        match self.rim_edges.first() {
            None => Ok(()),
            Some(edge) => Err(MeshError::Open {
                a: edge.i as usize,
                b: edge.j as usize,
                rim_edges: self.rim_edges.len(),
            }),
        }
    }

    /// Connected component of each vertex (numbered from 0 in the order of their first vertex) and their number.
    pub fn components(&self) -> (Vec<u32>, usize) {
        (self.piece.clone(), self.n_pieces)
    }

    /// Whether each piece is without a rim.
    pub fn closed_pieces(&self) -> Vec<bool> {
        let mut closed = vec![true; self.n_pieces];
        for edge in &self.rim_edges {
            closed[self.piece[edge.i as usize] as usize] = false;
        }
        closed
    }

    /// Piece of a triangle.
    #[inline]
    pub fn piece_of_triangle(&self, triangle: usize) -> usize {
        self.piece[self.triangles[triangle][0] as usize] as usize
    }

    /// Interior and rim edges as vertex pairs (ascending within each kind).
    pub fn edges(&self) -> impl Iterator<Item = (u32, u32)> + '_ {
        self.hinges
            .iter()
            .map(|h| (h.i, h.j))
            .chain(self.rim_edges.iter().map(|e| (e.i, e.j)))
    }
}

/// Rename labels 0, 1, … in the order of their first appearance.
pub fn number_in_order(labels: &[u32]) -> (Vec<u32>, usize) {
    let mut names: HashMap<u32, u32> = HashMap::new();
    let renamed = labels
        .iter()
        .map(|label| {
            let next = names.len() as u32;
            *names.entry(*label).or_insert(next)
        })
        .collect();
    (renamed, names.len())
}
