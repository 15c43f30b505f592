//! What an edit may do to the shape of the triangles around it.

use super::edit::{EditLimits, EditMesh};
use super::quality::triangle_quality;
use crate::Vec3;
use crate::mesh::topology::NONE;

/// One triangle of a cavity, before or after an edit.
#[derive(Clone, Copy, Debug)]
pub(super) struct Facet {
    corners: [u32; 3],
    normal: Vec3,
    quality: f64,
    /// Smallest cosine between its normal and the surface normals at its corners.
    alignment: f64,
}

/// Triangles around a cavity: directed edge as seen from inside, and the outer triangle's unit normal.
pub(super) type Border = Vec<(u32, u32, Vec3)>;

/// The worst of a cavity.
#[derive(Clone, Copy, Debug)]
pub(super) struct Shape {
    pub(super) quality: f64,
    alignment: f64,
    /// Smallest cosine between neighbouring triangles.
    fold: f64,
}

impl EditLimits {
    /// Whether a cavity may change like this.
    pub(super) fn accept(&self, before: &Shape, after: &Shape) -> bool {
        let least_cosine = self.max_fold.cos();
        after.quality >= self.quality_floor.min(before.quality)
            && self.accept_folds(before, after, least_cosine)
    }

    /// The same without regard to quality.
    pub(super) fn accept_any_quality(&self, before: &Shape, after: &Shape) -> bool {
        self.accept_folds(before, after, self.max_fold.cos())
    }

    fn accept_folds(&self, before: &Shape, after: &Shape, least_cosine: f64) -> bool {
        after.alignment >= least_cosine.min(before.alignment)
            && after.fold >= least_cosine.min(before.fold)
    }
}

impl EditMesh {
    /// A triangle with given (possibly new) corner positions. `normal_of` gives the surface normals.
    pub(super) fn facet_at(&self, corners: [u32; 3], x: [Vec3; 3], normals: [Vec3; 3]) -> Facet {
        let cross = (x[1] - x[0]).cross(&(x[2] - x[0]));
        let length = cross.norm();
        let normal = if length > 0.0 {
            cross / length
        } else {
            Vec3::zeros()
        };
        Facet {
            corners,
            normal,
            quality: triangle_quality(&x),
            alignment: normals
                .iter()
                .map(|n| n.dot(&normal))
                .fold(f64::INFINITY, f64::min),
        }
    }

    /// The triangle of a half-edge as it stands.
    pub(super) fn facet_of(&self, corners: [u32; 3]) -> Facet {
        let [a, b, c] = corners;
        self.facet_at(
            corners,
            [Vec3::zeros(), self.edge(a, b), self.edge(a, c)],
            corners.map(|v| self.normal[v as usize]),
        )
    }

    /// Triangles of the given half-edges as they stand, and their surroundings.
    pub(super) fn cavity(&self, half_edges: &[u32]) -> (Vec<Facet>, Border) {
        let mut facets = Vec::with_capacity(half_edges.len());
        let mut border = Vec::with_capacity(half_edges.len() + 2);
        for &h in half_edges {
            let t = h / 3;
            let Some(corners) = self.links.triangle(t) else {
                continue;
            };
            facets.push(self.facet_of(corners));
            for side in 3 * t..3 * t + 3 {
                let twin = self.links.twin[side as usize];
                if twin != NONE
                    && !half_edges.iter().any(|&other| other / 3 == twin / 3)
                    && let Some(outer) = self.links.triangle(twin / 3)
                {
                    let vector = self.area_vector(outer);
                    border.push((
                        self.links.from(side),
                        self.links.to(side),
                        vector / vector.norm().max(f64::MIN_POSITIVE),
                    ));
                }
            }
        }
        (facets, border)
    }
}

/// The worst quality, alignment and fold of a cavity.
pub(super) fn shape(facets: &[Facet], border: &Border) -> Shape {
    let mut worst = Shape {
        quality: f64::INFINITY,
        alignment: f64::INFINITY,
        fold: f64::INFINITY,
    };
    for (index, facet) in facets.iter().enumerate() {
        worst.quality = worst.quality.min(facet.quality);
        worst.alignment = worst.alignment.min(facet.alignment);
        for c in 0..3 {
            let (a, b) = (facet.corners[c], facet.corners[(c + 1) % 3]);
            let inside = facets[index + 1..]
                .iter()
                .filter(|other| other.runs(b, a))
                .map(|other| other.normal);
            let outside = border
                .iter()
                .filter(|&&(from, to, _)| from == a && to == b)
                .map(|&(_, _, normal)| normal);
            for normal in inside.chain(outside) {
                worst.fold = worst.fold.min(facet.normal.dot(&normal));
            }
        }
    }
    worst
}

impl Facet {
    /// Whether one of its sides runs from `a` to `b`.
    fn runs(&self, a: u32, b: u32) -> bool {
        let [i, j, k] = self.corners;
        (i == a && j == b) || (j == a && k == b) || (k == a && i == b)
    }
}
