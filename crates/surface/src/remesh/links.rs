//! Half-edges that can be rewired: the bare connectivity behind [`super::EditMesh`].

use crate::MeshError;
use crate::mesh::topology::{NONE, Topology};

/// Half-edges of a triangulation under change.
///
/// Half-edge `3 t + c` runs from corner `c` of triangle slot `t` to the next corner. Slots of removed triangles
/// hold [`NONE`] and are dropped at the end.
#[derive(Clone, Debug)]
pub struct Links {
    /// Vertex at which each half-edge starts; [`NONE`] in removed triangles.
    pub(super) corner: Vec<u32>,
    /// Partner of each half-edge, [`NONE`] on the rim.
    pub(super) twin: Vec<u32>,
    /// One half-edge that leaves each vertex; on a rim the one along the rim, from which turning
    /// counter-clockwise meets the whole fan. [`NONE`] for removed vertices.
    pub(super) outgoing: Vec<u32>,
    /// Whether a vertex lies on a rim.
    pub(super) rim: Vec<bool>,
}

/// Next half-edge of the same triangle.
#[inline]
pub(super) fn next(h: u32) -> u32 {
    if h % 3 == 2 { h - 2 } else { h + 1 }
}

/// Previous half-edge of the same triangle.
#[inline]
pub(super) fn previous(h: u32) -> u32 {
    if h.is_multiple_of(3) { h + 2 } else { h - 1 }
}

impl Links {
    /// Connect triangles.
    ///
    /// # Errors
    /// As [`Topology::new`]: the first defect that keeps the triangles from being an oriented manifold.
    pub fn new(n_vertices: usize, triangles: &[[u32; 3]]) -> Result<Self, MeshError> {
        if let Some(links) = Self::connect(n_vertices, triangles) {
            return Ok(links);
        }
        // The quick way found a defect; the thorough one names it.
        Topology::new(n_vertices, triangles)?;
        Err(MeshError::Empty {
            vertices: n_vertices,
            triangles: triangles.len(),
        })
    }

    /// Pair half-edges by looking each up among the few that leave its end: no hashing, a millisecond for ten
    /// thousand vertices. `None` if anything is wrong.
    fn connect(n_vertices: usize, triangles: &[[u32; 3]]) -> Option<Self> {
        if n_vertices == 0 || triangles.is_empty() {
            return None;
        }
        let corner: Vec<u32> = triangles.iter().flatten().copied().collect();
        let mut start = vec![0u32; n_vertices + 1];
        for &v in &corner {
            *start.get_mut(v as usize + 1)? += 1;
        }
        for v in 0..n_vertices {
            start[v + 1] += start[v];
        }
        let mut fill = start.clone();
        let mut leaving = vec![(0u32, 0u32); corner.len()];
        for h in 0..corner.len() as u32 {
            let (from, to) = (corner[h as usize], corner[next(h) as usize]);
            if from == to {
                return None;
            }
            let place = &mut fill[from as usize];
            leaving[*place as usize] = (to, h);
            *place += 1;
        }
        let of = |v: u32| &leaving[start[v as usize] as usize..start[v as usize + 1] as usize];
        let mut twin = vec![NONE; corner.len()];
        let mut outgoing = vec![NONE; n_vertices];
        let mut rim = vec![false; n_vertices];
        for h in 0..corner.len() as u32 {
            let (from, to) = (corner[h as usize], corner[next(h) as usize]);
            if of(from).iter().any(|&(end, other)| end == to && other != h) {
                return None;
            }
            match of(to).iter().find(|&&(end, _)| end == from) {
                Some(&(_, partner)) => twin[h as usize] = partner,
                None => {
                    if rim[from as usize] {
                        return None;
                    }
                    rim[from as usize] = true;
                    outgoing[from as usize] = h;
                }
            }
            if outgoing[from as usize] == NONE {
                outgoing[from as usize] = h;
            }
        }
        let links = Self {
            corner,
            twin,
            outgoing,
            rim,
        };
        for v in 0..n_vertices as u32 {
            let around = of(v).len();
            if around == 0 || links.spokes(v).take(around + 1).count() != around {
                return None;
            }
        }
        Some(links)
    }

    /// Vertex at which a half-edge starts.
    #[inline]
    pub(super) fn from(&self, h: u32) -> u32 {
        self.corner[h as usize]
    }

    /// Vertex at which a half-edge ends.
    #[inline]
    pub(super) fn to(&self, h: u32) -> u32 {
        self.corner[next(h) as usize]
    }

    /// Third corner of a half-edge's triangle.
    #[inline]
    pub(super) fn apex(&self, h: u32) -> u32 {
        self.corner[previous(h) as usize]
    }

    /// Corners of a triangle slot, or `None` if it was removed.
    #[inline]
    pub(super) fn triangle(&self, t: u32) -> Option<[u32; 3]> {
        let first = 3 * t as usize;
        let corners = [
            self.corner[first],
            self.corner[first + 1],
            self.corner[first + 2],
        ];
        (corners[0] != NONE).then_some(corners)
    }

    /// Whether a half-edge is alive and has a triangle on both sides.
    #[inline]
    pub(super) fn is_interior(&self, h: u32) -> bool {
        self.corner[h as usize] != NONE && self.twin[h as usize] != NONE
    }

    /// Half-edges leaving a vertex, counter-clockwise; one per triangle around it.
    pub(super) fn spokes(&self, v: u32) -> Spokes<'_> {
        Spokes {
            links: self,
            first: self.outgoing[v as usize],
            current: self.outgoing[v as usize],
        }
    }

    /// Neighbours of a vertex, counter-clockwise; on a rim they start and end with the rim's neighbours.
    pub(super) fn ring(&self, v: u32, into: &mut Vec<u32>) {
        into.clear();
        let mut last = NONE;
        for h in self.spokes(v) {
            into.push(self.to(h));
            last = h;
        }
        if self.rim[v as usize] && last != NONE {
            into.push(self.apex(last));
        }
    }

    /// Number of neighbours.
    pub(super) fn valence(&self, v: u32) -> usize {
        self.spokes(v).count() + usize::from(self.rim[v as usize])
    }

    /// Whether two vertices share an edge.
    pub(super) fn adjacent(&self, a: u32, b: u32) -> bool {
        self.spokes(a).any(|h| self.to(h) == b || self.apex(h) == b)
    }

    fn pair(&mut self, a: u32, b: u32) {
        if a != NONE {
            self.twin[a as usize] = b;
        }
        if b != NONE {
            self.twin[b as usize] = a;
        }
    }

    fn set_corners(&mut self, t: u32, corners: [u32; 3]) {
        let first = 3 * t as usize;
        self.corner[first..first + 3].copy_from_slice(&corners);
    }

    /// Let the vertex leave by `h`, or on a rim by the half-edge that begins its fan.
    fn leave_by(&mut self, v: u32, mut h: u32) {
        if self.rim[v as usize] {
            while self.twin[h as usize] != NONE {
                h = next(self.twin[h as usize]);
            }
        }
        self.outgoing[v as usize] = h;
    }

    /// Turn the interior edge of `h` within its two triangles.
    ///
    /// Triangles (i, j, k) and (j, i, l) become (i, l, k) and (l, j, k); the new edge is half-edge
    /// `3 (h/3) + 1`, running l→k.
    pub(super) fn flip(&mut self, h: u32) {
        let g = self.twin[h as usize];
        let (i, j, k, l) = (self.from(h), self.to(h), self.apex(h), self.apex(g));
        let (jk, ki) = (self.twin[next(h) as usize], self.twin[previous(h) as usize]);
        let (il, lj) = (self.twin[next(g) as usize], self.twin[previous(g) as usize]);
        let (t, s) = (h / 3, g / 3);
        self.set_corners(t, [i, l, k]);
        self.set_corners(s, [l, j, k]);
        self.pair(3 * t, il);
        self.pair(3 * t + 1, 3 * s + 2);
        self.pair(3 * t + 2, ki);
        self.pair(3 * s, lj);
        self.pair(3 * s + 1, jk);
        self.leave_by(i, 3 * t);
        self.leave_by(l, 3 * s);
        self.leave_by(j, 3 * s + 1);
        self.leave_by(k, 3 * t + 2);
    }

    /// Put a new vertex into the interior edge of `h`; returns it. The half of the edge at the start of `h`
    /// keeps the name `h`.
    pub(super) fn split(&mut self, h: u32) -> u32 {
        let g = self.twin[h as usize];
        let (i, j, k, l) = (self.from(h), self.to(h), self.apex(h), self.apex(g));
        let middle = self.outgoing.len() as u32;
        let (jk, il) = (self.twin[next(h) as usize], self.twin[next(g) as usize]);
        let t = (self.corner.len() / 3) as u32;
        let s = t + 1;
        self.corner.extend([middle, j, k, middle, i, l]);
        self.twin.extend([NONE; 6]);
        self.outgoing.push(3 * t);
        self.rim.push(false);
        // (i, j, k) → (i, m, k) + (m, j, k) and (j, i, l) → (j, m, l) + (m, i, l).
        self.corner[next(h) as usize] = middle;
        self.corner[next(g) as usize] = middle;
        self.pair(3 * t, g);
        self.pair(3 * t + 1, jk);
        self.pair(3 * t + 2, next(h));
        self.pair(3 * s, h);
        self.pair(3 * s + 1, il);
        self.pair(3 * s + 2, next(g));
        self.leave_by(i, 3 * s + 1);
        self.leave_by(j, 3 * t + 1);
        middle
    }

    /// Whether the end of `h` can be merged into its start without spoiling the manifold: an interior edge
    /// whose end is off the rim, whose ends share only the two opposite corners, and whose opposite corners
    /// keep enough triangles (`least` for those off the rim).
    pub(super) fn can_collapse(&self, h: u32, least: usize) -> bool {
        if !self.is_interior(h) {
            return false;
        }
        let (i, j) = (self.from(h), self.to(h));
        if self.rim[j as usize] {
            return false;
        }
        let common = self
            .spokes(i)
            .map(|g| self.to(g))
            .chain(self.rim[i as usize].then(|| self.rim_end(i)))
            .filter(|&v| self.adjacent(j, v))
            .count();
        let keeps_enough = |v: u32| {
            let around = self.spokes(v).count();
            around
                > if self.rim[v as usize] {
                    1
                } else {
                    least.max(3)
                }
        };
        common == 2 && keeps_enough(self.apex(h)) && keeps_enough(self.apex(self.twin[h as usize]))
    }

    /// The last neighbour of a rim vertex.
    fn rim_end(&self, v: u32) -> u32 {
        self.spokes(v).last().map_or(NONE, |h| self.apex(h))
    }

    /// Merge the end of `h` into its start; [`Links::can_collapse`] must have allowed it.
    pub(super) fn collapse(&mut self, h: u32) {
        let g = self.twin[h as usize];
        let (i, j, k, l) = (self.from(h), self.to(h), self.apex(h), self.apex(g));
        let (kj, ik) = (self.twin[next(h) as usize], self.twin[previous(h) as usize]);
        let (li, jl) = (self.twin[next(g) as usize], self.twin[previous(g) as usize]);
        let leaving: Vec<u32> = self.spokes(j).collect();
        for spoke in leaving {
            self.corner[spoke as usize] = i;
        }
        for t in [h / 3, g / 3] {
            self.set_corners(t, [NONE; 3]);
        }
        self.pair(kj, ik);
        self.pair(li, jl);
        self.outgoing[j as usize] = NONE;
        self.leave_by(i, jl);
        self.leave_by(k, kj);
        self.leave_by(l, next(jl));
    }
}

/// Half-edges leaving a vertex.
pub(super) struct Spokes<'a> {
    links: &'a Links,
    first: u32,
    current: u32,
}

impl Iterator for Spokes<'_> {
    type Item = u32;

    fn next(&mut self) -> Option<u32> {
        if self.current == NONE {
            return None;
        }
        let h = self.current;
        let turned = self.links.twin[previous(h) as usize];
        self.current = if turned == self.first { NONE } else { turned };
        Some(h)
    }
}
