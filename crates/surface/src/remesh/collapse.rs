//! Edge collapses: merge the ends of a short edge.

use super::edit::EditMesh;
use super::guard::shape;
use super::quality::triangle_quality;
use crate::Vec3;

/// Quality of triangles that need repair rather than mere refinement.
const THIN: f64 = 0.5;

impl EditMesh {
    /// Merge the ends of the edge of `half_edge` if the surface stays sound. Returns the surviving vertex.
    ///
    /// The survivor is the end that must be kept, if one must, and stays there; otherwise it moves to the
    /// middle of the edge on the fitted surface, or, if that would spoil a triangle, to one of the ends.
    /// Refused if both ends must be kept, if the link condition fails (the ends share other neighbours than
    /// the two opposite corners), if a valence leaves its limits, if a triangle would fold or fall below the
    /// quality floor, or if a new edge would exceed `longest` times its wanted length.
    pub fn try_collapse(&mut self, half_edge: u32, longest: f64) -> Option<u32> {
        if !self.is_interior(half_edge) {
            return None;
        }
        let h = if self.kept[self.links.to(half_edge) as usize] {
            self.links.twin[half_edge as usize]
        } else {
            half_edge
        };
        let (i, j) = self.ends(h);
        if self.kept[j as usize]
            || !self.links.can_collapse(h, self.limits.min_valence)
            || self.links.valence(i) + self.links.valence(j) > self.limits.max_valence + 4
        {
            return None;
        }
        let (place, share) = self.sound_place(h, longest)?;

        let mut group = std::mem::take(&mut self.scratch);
        self.links.ring(j, &mut group);
        let mut around = Vec::with_capacity(16);
        self.links.ring(i, &mut around);
        around.extend(
            group
                .iter()
                .filter(|v| **v != i && !around.contains(v))
                .copied()
                .collect::<Vec<_>>(),
        );
        around.push(i);
        self.gather(&around);
        for v in [i, j] {
            self.book_fan(v, -1.0, j);
        }
        if place != Vec3::zeros() {
            self.position[i as usize] = self.wrap(self.position[i as usize] + place);
        }
        self.merge_data(i, j, share);
        self.links.collapse(h);
        self.one_less();
        self.book_fan(i, 1.0, u32::MAX);
        around.retain(|&v| v != j);
        self.scatter(&around);
        for &v in &around {
            self.touched[v as usize] = true;
        }
        self.scratch = group;
        Some(i)
    }

    /// Book the triangles around `v`, when `v` is not `other` those without `other` only.
    fn book_fan(&mut self, v: u32, sign: f64, other: u32) {
        let fan: Vec<u32> = self
            .links
            .spokes(v)
            .filter(|&h| v == other || (self.links.to(h) != other && self.links.apex(h) != other))
            .collect();
        for h in fan {
            self.book_area(h, sign);
        }
    }

    /// Where the survivor may go, seen from the start of `h`, and how far that is along the edge (0–1).
    fn sound_place(&mut self, h: u32, longest: f64) -> Option<(Vec3, f64)> {
        let (i, j) = self.ends(h);
        let e = self.edge(i, j);
        let choices = if self.kept[i as usize] {
            [Some((Vec3::zeros(), 0.0)), None, None]
        } else {
            let mut rings = std::mem::take(&mut self.scratch);
            let middle = self.middle(i, j, &mut rings);
            self.scratch = rings;
            [
                Some((middle, 0.5)),
                Some((Vec3::zeros(), 0.0)),
                Some((e, 1.0)),
            ]
        };
        let mut half_edges: Vec<u32> = self.links.spokes(i).collect();
        half_edges.extend(
            self.links
                .spokes(j)
                .filter(|&spoke| self.links.to(spoke) != i && self.links.apex(spoke) != i),
        );
        let (facets, border) = self.cavity(&half_edges);
        let before = shape(&facets, &border);
        choices.into_iter().flatten().find(|(x, share)| {
            let mut new = Vec::with_capacity(half_edges.len());
            let target = self.target_between(i, j, *share);
            let normal = self.normal_between(i, j, *share);
            for (v, offset) in [(i, Vec3::zeros()), (j, e)] {
                for (a, b) in self
                    .fan(v)
                    .filter(|&(a, b)| ![a, b].contains(&i) && ![a, b].contains(&j))
                {
                    let (x_a, x_b) = (offset + self.edge(v, a), offset + self.edge(v, b));
                    let wanted = |w: u32| 0.5 * (target + self.target[w as usize]);
                    let long = |y: Vec3, w: u32| {
                        !self.is_short(&(y - x)) || (y - x).norm() > longest * wanted(w)
                    };
                    if long(x_a, a) || long(x_b, b) {
                        return false;
                    }
                    new.push(self.facet_at(
                        [i, a, b],
                        [*x, x_a, x_b],
                        [normal, self.normal[a as usize], self.normal[b as usize]],
                    ));
                }
            }
            self.limits.accept(&before, &shape(&new, &border))
        })
    }

    /// The worse quality of the two triangles at an edge.
    fn quality_beside(&self, h: u32) -> f64 {
        let (i, j) = self.ends(h);
        let e = self.edge(i, j);
        [h, self.links.twin[h as usize]]
            .iter()
            .map(|&side| triangle_quality(&[Vec3::zeros(), e, self.edge(i, self.links.apex(side))]))
            .fold(f64::INFINITY, f64::min)
    }

    fn target_between(&self, i: u32, j: u32, share: f64) -> f64 {
        let (own, other) = (self.target[i as usize], self.target[j as usize]);
        own + share * (other - own)
    }

    fn normal_between(&self, i: u32, j: u32, share: f64) -> Vec3 {
        let (own, other) = (self.normal[i as usize], self.normal[j as usize]);
        (own + share * (other - own))
            .try_normalize(0.1)
            .unwrap_or(own)
    }

    /// Give `i` what is carried at a `share` of the way to `j`.
    fn merge_data(&mut self, i: u32, j: u32, share: f64) {
        if share == 0.0 {
            return;
        }
        let (at, other) = (i as usize, j as usize);
        self.normal[at] = self.normal_between(i, j, share);
        self.target[at] = self.target_between(i, j, share);
        self.density[at] += share * (self.density[other] - self.density[at]);
        self.data.move_towards(at, other, share);
    }

    /// Collapse edges shorter than `below` times their wanted length, the shortest (relative) first, unless
    /// that makes an edge longer than `longest` times its wanted length. Returns the number of collapses.
    pub(super) fn collapse_short(&mut self, below: f64, longest: f64) -> usize {
        let mut short: Vec<(f64, u32, u32, u32)> = self
            .interior_edges()
            .filter_map(|h| {
                let (i, j) = self.ends(h);
                let ratio = self.ratio(i, j);
                (ratio < below).then_some((ratio, h, i, j))
            })
            .collect();
        short.sort_unstable_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
        let mut collapses = 0;
        for (_, h, i, j) in short {
            // Earlier collapses may have moved or removed the ends, or renamed the half-edge.
            let same = self
                .links
                .spokes(i)
                .find(|&spoke| self.links.to(spoke) == j)
                .unwrap_or(h);
            if self.ends(same) != (i, j) || self.ratio(i, j) >= below {
                continue;
            }
            // Between thin triangles the rows must first come closer than the edges along them allow; a split
            // of the long side follows.
            let longest = if self.quality_beside(same) < THIN {
                1.4 * longest
            } else {
                longest
            };
            if self.try_collapse(same, longest).is_some() {
                collapses += 1;
            }
        }
        collapses
    }
}
