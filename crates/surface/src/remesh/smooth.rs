//! Tangential smoothing: move vertices along the surface to where the wanted edge lengths are shared evenly.

use super::edit::EditMesh;
use super::guard::shape;
use super::transfer::shifted_value;
use crate::Vec3;

impl EditMesh {
    /// Move a free vertex off the rim by `step` (0–1) of the way to the mean of its neighbours, weighted by
    /// 1/(h_i + h_j) with the wanted edge lengths h, along the fitted surface. Refused (`false`) if its
    /// triangles get worse.
    ///
    /// Fields and ratios are taken from a linear fit at the new place, within the values around.
    pub fn try_relocate(&mut self, vertex: u32, step: f64) -> bool {
        if !self.is_free(vertex) || self.links.rim[vertex as usize] {
            return false;
        }
        let v = vertex;
        let mut group = std::mem::take(&mut self.scratch);
        self.links.ring(v, &mut group);
        let moved = self
            .relocation(v, step, &group)
            .filter(|x| self.relocation_is_sound(v, x));
        if let Some(offset) = moved {
            let weights = self.linear_weights(v, &offset, &group);
            let n_ring = group.len();
            group.push(v);
            self.gather(&group);
            self.book_star(v, -1.0);
            self.position[v as usize] = self.wrap(self.position[v as usize] + offset);
            self.book_star(v, 1.0);
            let ring = &group[..n_ring];
            let at = v as usize;
            self.data.shift(at, ring, &weights);
            self.density[at] = shifted_value(&|w| self.density[w], at, ring, &weights);
            self.target[at] = shifted_value(&|w| self.target[w], at, ring, &weights);
            self.scatter(&group);
        }
        self.scratch = group;
        moved.is_some()
    }

    fn book_star(&mut self, v: u32, sign: f64) {
        let star: Vec<u32> = self.links.spokes(v).collect();
        for h in star {
            self.book_area(h, sign);
        }
    }

    /// Displacement along the fitted surface.
    fn relocation(&self, v: u32, step: f64, ring: &[u32]) -> Option<Vec3> {
        let normal = self.normal_now(v)?;
        let (mut sum, mut weights, mut length) = (Vec3::zeros(), 0.0, 0.0);
        for &w in ring {
            let d = self.edge(v, w);
            let weight = 1.0 / (self.target[v as usize] + self.target[w as usize]);
            sum += weight * d;
            weights += weight;
            length += d.norm();
        }
        length /= ring.len() as f64;
        let mut shift = sum * (step / weights);
        shift -= normal * normal.dot(&shift);
        if shift.norm() < 1e-3 * length {
            return None;
        }
        let rise = self.rise_over(v, &shift, &normal, ring, length)?;
        Some(shift + normal * rise)
    }

    /// Unit normal of the fan as it is.
    fn normal_now(&self, v: u32) -> Option<Vec3> {
        self.fan(v)
            .map(|(a, b)| self.edge(v, a).cross(&self.edge(v, b)))
            .sum::<Vec3>()
            .try_normalize(0.0)
    }

    fn relocation_is_sound(&self, v: u32, x: &Vec3) -> bool {
        let star: Vec<u32> = self.links.spokes(v).collect();
        let (facets, border) = self.cavity(&star);
        let before = shape(&facets, &border);
        let normal = |w: u32| self.normal[w as usize];
        let new: Vec<_> = self
            .fan(v)
            .map(|(a, b)| {
                self.facet_at(
                    [v, a, b],
                    [*x, self.edge(v, a), self.edge(v, b)],
                    [normal(v), normal(a), normal(b)],
                )
            })
            .collect();
        let after = shape(&new, &border);
        // Good triangles may trade some quality for even lengths.
        after.quality >= before.quality.min(0.7) && self.limits.accept(&before, &after)
    }

    /// Weights that turn differences to the ring into the linear change over `offset` (least squares in the
    /// tangent plane).
    fn linear_weights(&self, v: u32, offset: &Vec3, ring: &[u32]) -> Vec<f64> {
        let normal = self.normal_now(v).unwrap_or(self.normal[v as usize]);
        let across = |d: Vec3| d - normal * normal.dot(&d);
        let mut matrix = nalgebra::Matrix3::zeros();
        for &w in ring {
            let d = across(self.edge(v, w));
            matrix += d * d.transpose();
        }
        // Makes the third direction regular without touching the plane.
        matrix += normal * normal.transpose() * matrix.trace();
        let slope = matrix
            .cholesky()
            .map_or_else(Vec3::zeros, |factor| factor.solve(&across(*offset)));
        ring.iter()
            .map(|&w| slope.dot(&across(self.edge(v, w))))
            .collect()
    }

    /// Relocate the vertices that edits touched. Returns how many moved.
    pub(super) fn smooth_touched(&mut self, step: f64) -> usize {
        (0..self.n_names())
            .filter(|&v| self.touched[v as usize] && self.try_relocate(v, step))
            .count()
    }
}
