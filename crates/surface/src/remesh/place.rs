//! Where vertices go: on the surface that the vertices around suggest.
//!
//! A polynomial height function z(u, v) is fitted by least squares to the vertices around an edge or a
//! vertex, in a frame along the surface normal. Only differences of its heights are used, as an increment to
//! where the mesh is, so vertices that lie off the fit are not pulled onto it.
//!
//! Middles of edges take the two rings and a quadratic: the neighbourhood is nearly symmetric about the
//! middle, so cubic terms cancel, and a wider cubic fit measured worse. Moves of a vertex take two rings and
//! a cubic, because a quadratic gets the slope at the vertex wrong by second order (measured: two to three
//! times the error).

use super::edit::EditMesh;
use super::links::next;
use crate::Vec3;
use crate::mesh::topology::NONE;
use nalgebra::{SMatrix, SVector};

/// Quadratic height function.
pub(super) type Quadratic = HeightFit<6>;
/// Cubic height function.
pub(super) type Cubic = HeightFit<10>;

/// z = Σ c_k b_k(u, v) in a local frame, lengths divided by `scale`; b = 1, u, v, u², uv, v² and for ten
/// terms also u³, u²v, uv², v³.
#[derive(Clone, Copy, Debug)]
pub(super) struct HeightFit<const TERMS: usize> {
    axis_u: Vec3,
    axis_v: Vec3,
    scale: f64,
    coefficients: SVector<f64, TERMS>,
}

impl<const TERMS: usize> HeightFit<TERMS> {
    /// Smallest entry of the Cholesky factor beside the largest. Factors of good neighbourhoods have 0.4–0.6
    /// (quadratic) and 0.05–0.2 (cubic); of bad ones, such as three points nearly in line, far less.
    const LEAST_PIVOT: f64 = if TERMS > 6 { 0.01 } else { 0.03 };

    /// Fit heights above the plane across the unit vector `normal`; `along` lies in it roughly. `None` if the
    /// points do not determine the function well or lie too far off it.
    pub(super) fn new(normal: Vec3, along: Vec3, points: &[Vec3], scale: f64) -> Option<Self> {
        if points.len() <= TERMS {
            return None;
        }
        let axis_u = (along - normal * normal.dot(&along)).try_normalize(1e-9 * scale)?;
        let axis_v = normal.cross(&axis_u);
        let mut fit = Self {
            axis_u,
            axis_v,
            scale,
            coefficients: SVector::zeros(),
        };
        let mut matrix = SMatrix::<f64, TERMS, TERMS>::zeros();
        let mut right = SVector::<f64, TERMS>::zeros();
        for p in points {
            let b = fit.basis(p);
            let weight = 1.0 / (0.5 + p.norm_squared() / (scale * scale));
            matrix.ger(weight, &b, &b, 1.0);
            right.axpy(weight * (p.dot(&normal) / scale), &b, 1.0);
        }
        let factor = matrix.cholesky()?;
        let diagonal = factor.l_dirty().diagonal();
        if diagonal.min() < Self::LEAST_PIVOT * diagonal.max() {
            return None;
        }
        fit.coefficients = factor.solve(&right);
        let misfit = points
            .iter()
            .map(|p| (p.dot(&normal) - fit.height(p)).abs())
            .fold(0.0, f64::max);
        (misfit < 0.2 * scale).then_some(fit)
    }

    fn basis(&self, p: &Vec3) -> SVector<f64, TERMS> {
        let (u, v) = (
            p.dot(&self.axis_u) / self.scale,
            p.dot(&self.axis_v) / self.scale,
        );
        let (uu, uv, vv) = (u * u, u * v, v * v);
        let all = [1.0, u, v, uu, uv, vv, uu * u, uu * v, u * vv, vv * v];
        SVector::from_fn(|k, _| all[k])
    }

    /// Height of the fit above the plane at a place given by a vector in space.
    pub(super) fn height(&self, p: &Vec3) -> f64 {
        self.scale * self.basis(p).dot(&self.coefficients)
    }
}

/// A quadratic wants a few more points than its six terms.
const ENOUGH: usize = 10;

/// Vertices around a place and where they are, seen from it; each once.
pub(super) struct Points {
    names: Vec<u32>,
    pub(super) places: Vec<Vec3>,
}

impl Points {
    /// A vertex at the origin and its two rings.
    pub(super) fn around(edit: &EditMesh, v: u32, ring: &[u32]) -> Self {
        let mut points = Self {
            names: vec![v],
            places: vec![Vec3::zeros()],
        };
        for &w in ring {
            points.add(w, edit.edge(v, w));
        }
        let mut second = Vec::with_capacity(8);
        for &w in ring {
            points.add_ring(edit, w, edit.edge(v, w), &mut second);
        }
        points
    }

    fn add(&mut self, name: u32, place: Vec3) {
        if !self.names.contains(&name) {
            self.names.push(name);
            self.places.push(place);
        }
    }

    /// Neighbours of `v`, which is at `offset`.
    fn add_ring(&mut self, edit: &EditMesh, v: u32, offset: Vec3, ring: &mut Vec<u32>) {
        edit.links.ring(v, ring);
        for &w in ring.iter() {
            self.add(w, offset + edit.edge(v, w));
        }
    }

    /// Corners of the triangles across the ring of `v`, which is at `offset`.
    fn add_corners_beyond(&mut self, edit: &EditMesh, v: u32, offset: Vec3) {
        for h in edit.links.spokes(v) {
            let across = edit.links.twin[next(h) as usize];
            if across != NONE {
                let near = edit.links.to(h);
                let far = edit.links.apex(across);
                self.add(far, offset + edit.edge(v, near) + edit.edge(near, far));
            }
        }
    }
}

impl EditMesh {
    /// Middle of an edge on the surface, seen from its first end.
    ///
    /// Chord middle plus the rise −z_uu L²/8 of the fitted surface; where no fit is possible, the cubic
    /// Hermite curve through both ends normal to their normals: ½e + ((e·n_j) n_j − (e·n_i) n_i)/8.
    pub(super) fn middle(&self, i: u32, j: u32, ring: &mut Vec<u32>) -> Vec3 {
        let e = self.edge(i, j);
        let length = e.norm();
        let (n_i, n_j) = (self.normal[i as usize], self.normal[j as usize]);
        let rise = self
            .fitted_rise(i, j, &e, ring)
            .unwrap_or_else(|| (n_j * e.dot(&n_j) - n_i * e.dot(&n_i)) / 8.0);
        let size = rise.norm();
        let most = 0.25 * length;
        0.5 * e
            + if size > most {
                rise * (most / size)
            } else {
                rise
            }
    }

    fn fitted_rise(&self, i: u32, j: u32, e: &Vec3, ring: &mut Vec<u32>) -> Option<Vec3> {
        let length = e.norm();
        let sum = self.normal[i as usize] + self.normal[j as usize];
        let normal = (sum - e * (sum.dot(e) / (length * length))).try_normalize(0.1)?;
        let half = 0.5 * e;
        let mut points = Points {
            names: vec![i, j],
            places: vec![-half, half],
        };
        points.add_ring(self, i, -half, ring);
        points.add_ring(self, j, half, ring);
        if points.places.len() < ENOUGH {
            points.add_corners_beyond(self, i, -half);
            points.add_corners_beyond(self, j, half);
        }
        let fit = Quadratic::new(normal, *e, &points.places, length)?;
        // Both ends have height 0, so the rise is that of the middle over the mean of the ends.
        let rise = fit.height(&Vec3::zeros()) - 0.5 * (fit.height(&half) + fit.height(&-half));
        Some(normal * rise)
    }

    /// Change of height over a tangential move of `v`: what to add along `normal` to stay on the surface.
    /// `None` if too few vertices are around.
    pub(super) fn rise_over(
        &self,
        v: u32,
        shift: &Vec3,
        normal: &Vec3,
        ring: &[u32],
        scale: f64,
    ) -> Option<f64> {
        let points = Points::around(self, v, ring);
        let origin = Vec3::zeros();
        let cubic = (points.places.len() > 13)
            .then(|| Cubic::new(*normal, *shift, &points.places, scale))
            .flatten();
        match cubic {
            Some(fit) => Some(fit.height(shift) - fit.height(&origin)),
            None => Quadratic::new(*normal, *shift, &points.places, scale)
                .map(|fit| fit.height(shift) - fit.height(&origin)),
        }
    }
}
