//! Edge splits: a new vertex in the middle of a long edge.

use super::edit::EditMesh;
use super::guard::shape;
use crate::Vec3;

impl EditMesh {
    /// Split the edge of `half_edge` if it exists, is interior and no triangle gets worse than the limits.
    /// Returns the new vertex.
    ///
    /// It lies on the surface fitted to the vertices around (third order in the edge length), or on the chord
    /// if that would fold the surface.
    pub fn try_split(&mut self, half_edge: u32) -> Option<u32> {
        if !self.is_interior(half_edge) {
            return None;
        }
        let h = half_edge;
        let g = self.links.twin[h as usize];
        let (i, j) = self.ends(h);
        let (k, l) = (self.links.apex(h), self.links.apex(g));
        let e = self.edge(i, j);
        let mut rings = std::mem::take(&mut self.scratch);
        let raised = self.middle(i, j, &mut rings);
        self.scratch = rings;
        let place = if self.split_is_sound(h, &raised) {
            raised
        } else if self.is_longest(h) || self.split_is_sound(h, &(0.5 * e)) {
            // On the chord no triangle turns, and halving the longest side is what thin triangles need.
            0.5 * e
        } else {
            return None;
        };

        let group = [i, j, k, l, self.n_names()];
        self.gather(&group[..4]);
        self.book_area(h, -1.0);
        self.book_area(g, -1.0);
        let position = self.wrap(self.position[i as usize] + place);
        self.push_vertex(i, j, position);
        let middle = self.links.split(h);
        for part in [
            h,
            g,
            3 * (self.n_half_edges() / 3 - 2),
            self.n_half_edges() - 1,
        ] {
            self.book_area(part, 1.0);
        }
        self.scatter(&group);
        for v in [i, j, k, l, middle] {
            self.touched[v as usize] = true;
        }
        Some(middle)
    }

    /// Whether an edge is the longest side of both its triangles.
    fn is_longest(&self, h: u32) -> bool {
        let (i, j) = self.ends(h);
        let length = self.edge(i, j).norm_squared();
        [h, self.links.twin[h as usize]].iter().all(|&side| {
            let apex = self.links.apex(side);
            [i, j]
                .iter()
                .all(|&v| self.edge(v, apex).norm_squared() <= length)
        })
    }

    /// Whether a vertex at `x`, seen from the start of `h`, may split its edge.
    fn split_is_sound(&self, h: u32, x: &Vec3) -> bool {
        let g = self.links.twin[h as usize];
        let (i, j) = self.ends(h);
        let (k, l) = (self.links.apex(h), self.links.apex(g));
        let (x_i, x_j) = (Vec3::zeros(), self.edge(i, j));
        let (x_k, x_l) = (self.edge(i, k), self.edge(i, l));
        let normal = |v: u32| self.normal[v as usize];
        let between = (normal(i) + normal(j))
            .try_normalize(0.1)
            .unwrap_or_else(|| normal(i));
        let m = self.n_names();
        let (facets, border) = self.cavity(&[h, g]);
        let before = shape(&facets, &border);
        let part = |a: u32, x_a: Vec3, b: u32, x_b: Vec3| {
            self.facet_at([m, a, b], [*x, x_a, x_b], [between, normal(a), normal(b)])
        };
        let mut after = shape(
            &[
                part(k, x_k, i, x_i),
                part(j, x_j, k, x_k),
                part(l, x_l, j, x_j),
                part(i, x_i, l, x_l),
            ],
            &border,
        );
        // Halving a triangle makes two worse ones, which flips then mend: allow twice the usual loss.
        after.quality *= 2.0;
        self.limits.accept(&before, &after)
    }

    /// Split every edge longer than `above` times its wanted length, the longest (relative) first, as long as
    /// there are fewer than `max_vertices`. Returns the number of splits.
    pub(super) fn split_long(&mut self, above: f64, max_vertices: usize) -> usize {
        let mut long: Vec<(f64, u32, u32, u32)> = self
            .interior_edges()
            .filter_map(|h| {
                let (i, j) = self.ends(h);
                let ratio = self.ratio(i, j);
                (ratio > above).then_some((ratio, h, i, j))
            })
            .collect();
        long.sort_unstable_by(|a, b| b.0.total_cmp(&a.0).then(a.1.cmp(&b.1)));
        let mut splits = 0;
        for (_, h, i, j) in long {
            if self.n_vertices() >= max_vertices {
                break;
            }
            // An earlier split may have given the number to another edge.
            let same = self
                .links
                .spokes(i)
                .find(|&spoke| self.links.to(spoke) == j)
                .unwrap_or(h);
            if self.ends(same) == (i, j) && self.try_split(same).is_some() {
                splits += 1;
            }
        }
        splits
    }
}
