//! Index lists for quantities of a vertex that depend on itself and its neighbours.

use crate::Topology;

/// For each vertex the list [itself, its neighbours ascending], and for each triangle, hinge and rim edge the
/// places of its vertices in those lists, so that gradients are accumulated without any search.
#[derive(Clone, Debug, Default)]
pub struct Stencils {
    /// Where each vertex's list starts; one more entry than vertices.
    pub start: Vec<u32>,
    /// Members of all lists: the vertex itself first.
    pub members: Vec<u32>,
    /// `[c][d]`: place of corner d in the list of corner c, for each triangle.
    pub triangle: Vec<[[u32; 3]; 3]>,
    /// Places of (i, j, k, l) in the lists of i and of j, for each hinge.
    pub hinge: Vec<[[u32; 4]; 2]>,
    /// Places of (i, j, k) in the lists of i and of j, for each rim edge.
    pub rim: Vec<[[u32; 3]; 2]>,
}

impl Stencils {
    /// Build the lists of a connectivity.
    pub fn new(topology: &Topology) -> Self {
        let n = topology.n_vertices;
        let mut start = Vec::with_capacity(n + 1);
        let mut members = Vec::with_capacity(n + topology.neighbours.items.len());
        for vertex in 0..n {
            start.push(members.len() as u32);
            members.push(vertex as u32);
            members.extend_from_slice(topology.neighbours.of(vertex));
        }
        start.push(members.len() as u32);
        let place = |owner: u32, member: u32| -> u32 {
            if owner == member {
                return start[owner as usize];
            }
            let around = topology.neighbours.of(owner as usize);
            start[owner as usize] + 1 + around.partition_point(|&v| v < member) as u32
        };
        let triangle = topology
            .triangles
            .iter()
            .map(|t| t.map(|owner| t.map(|member| place(owner, member))))
            .collect();
        let hinge = topology
            .hinges
            .iter()
            .map(|h| [h.i, h.j].map(|owner| [h.i, h.j, h.k, h.l].map(|m| place(owner, m))))
            .collect();
        let rim = topology
            .rim_edges
            .iter()
            .map(|e| [e.i, e.j].map(|owner| [e.i, e.j, e.k].map(|m| place(owner, m))))
            .collect();
        Self {
            start,
            members,
            triangle,
            hinge,
            rim,
        }
    }

    /// Range of the list of a vertex.
    #[inline]
    pub fn range(&self, vertex: usize) -> std::ops::Range<usize> {
        self.start[vertex] as usize..self.start[vertex + 1] as usize
    }
}
