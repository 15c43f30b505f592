//! A dome of triangles over a hole: rings that shrink towards a tip, as wide apart as the rim's edges are long.

use crate::Vec3;
use std::f64::consts::{FRAC_PI_2, TAU};

/// Fewest vertices of a ring; below it the tip follows.
const LEAST_RING: usize = 5;
/// Height of a triangle over its side, if it is equilateral.
const ROW: f64 = 0.87;

/// A vertex of a dome.
pub(super) struct DomeVertex {
    /// Position, relative to the rim's first vertex.
    pub place: Vec3,
    /// Two neighbouring rim vertices and the weight of the second, between which it lies going round.
    pub beside: (usize, usize, f64),
    /// Weight of the rim there, against the mean over the whole rim.
    pub share: f64,
}

/// New vertices and triangles; a triangle names rim vertices 0..k, then new ones from k on.
pub(super) struct Dome {
    pub vertices: Vec<DomeVertex>,
    pub triangles: Vec<[u32; 3]>,
}

/// The rim of a hole, seen from outside counter-clockwise, relative to its first vertex.
pub(super) struct Rim {
    pub places: Vec<Vec3>,
    /// Length along the rim up to each vertex, as a share of the whole.
    along: Vec<f64>,
    pub length: f64,
    pub centre: Vec3,
    /// Unit vector out of the hole.
    pub axis: Vec3,
}

impl Rim {
    /// `None` for a rim without extent.
    pub fn new(places: Vec<Vec3>) -> Option<Self> {
        let k = places.len();
        let (mut along, mut length, mut centre, mut area) = (Vec::new(), 0.0, Vec3::zeros(), Vec3::zeros());
        for m in 0..k {
            let (p, q) = (places[m], places[(m + 1) % k]);
            along.push(length);
            let step = (q - p).norm();
            length += step;
            centre += (p + q) * (0.5 * step);
            area += p.cross(&q);
        }
        let axis = area.try_normalize(0.0)?;
        along.iter_mut().for_each(|a| *a /= length);
        (length > 0.0).then(|| Self { along, length, centre: centre / length, axis, places })
    }

    /// Mean radius.
    pub fn radius(&self) -> f64 {
        self.length / TAU
    }

    /// Neighbouring vertices at a share of the way round, and the weight of the second.
    fn beside(&self, share: f64) -> (usize, usize, f64) {
        let k = self.places.len();
        let share = share - share.floor();
        let m = self.along.partition_point(|a| *a <= share).max(1) - 1;
        let end = self.along.get(m + 1).copied().unwrap_or(1.0);
        (m, (m + 1) % k, (share - self.along[m]) / (end - self.along[m]).max(f64::MIN_POSITIVE))
    }

    /// A dome of the given height over the rim.
    pub fn dome(&self, height: f64) -> Dome {
        let k = self.places.len();
        let radius = self.radius();
        let arc = FRAC_PI_2 * (0.5 * (radius * radius + height * height)).sqrt();
        let rows = (arc / (ROW * self.length / k as f64)).round().max(1.0) as usize;
        let mut dome = Dome { vertices: Vec::new(), triangles: Vec::new() };
        let mut outer: Vec<(f64, u32)> = self.along.iter().zip(0..).map(|(a, m)| (*a, m)).collect();
        for row in 1..rows {
            let angle = FRAC_PI_2 * row as f64 / rows as f64;
            let count = (k as f64 * angle.cos()).round() as usize;
            if count < LEAST_RING {
                break;
            }
            // Half an edge on, so that triangles stand upright.
            let start = outer[0].0 + 0.5 / outer.len() as f64;
            let first = (k + dome.vertices.len()) as u32;
            let inner: Vec<(f64, u32)> =
                (0..count as u32).map(|j| (start + f64::from(j) / count as f64, first + j)).collect();
            for (along, _) in &inner {
                let beside = self.beside(*along);
                let at = self.places[beside.0].lerp(&self.places[beside.1], beside.2);
                dome.vertices.push(DomeVertex {
                    place: self.centre + (at - self.centre) * angle.cos() + self.axis * (height * angle.sin()),
                    beside,
                    share: angle.cos(),
                });
            }
            stitch(&outer, &inner, &mut dome.triangles);
            outer = inner;
        }
        let tip = (k + dome.vertices.len()) as u32;
        for m in 0..outer.len() {
            dome.triangles.push([outer[m].1, outer[(m + 1) % outer.len()].1, tip]);
        }
        dome.vertices.push(DomeVertex {
            place: self.centre + self.axis * height,
            beside: (0, 0, 0.0),
            share: 0.0,
        });
        dome
    }
}

/// Triangles between two rings, (share of the way round, name) each, the inner starting after the outer.
fn stitch(outer: &[(f64, u32)], inner: &[(f64, u32)], triangles: &mut Vec<[u32; 3]>) {
    let at = |ring: &[(f64, u32)], m: usize| ring[m % ring.len()].0 + (m / ring.len()) as f64;
    let name = |ring: &[(f64, u32)], m: usize| ring[m % ring.len()].1;
    let (mut i, mut j) = (0, 0);
    while i < outer.len() || j < inner.len() {
        let next_outer = at(outer, i) + at(outer, i + 1);
        let next_inner = at(inner, j) + at(inner, j + 1);
        if j == inner.len() || (i < outer.len() && next_outer <= next_inner) {
            triangles.push([name(outer, i), name(outer, i + 1), name(inner, j)]);
            i += 1;
        } else {
            triangles.push([name(outer, i), name(inner, j + 1), name(inner, j)]);
            j += 1;
        }
    }
}
