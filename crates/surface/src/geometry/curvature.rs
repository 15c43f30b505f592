//! Discrete mean and Gaussian curvature at vertices.
//!
//! Mean curvature is the edge (Steiner) measure b_i = ½ Σ_{e∋i} L_e θ_e, with θ the signed angle between the two
//! triangle normals (positive where convex), over the *mixed circumcentric* area A_i of Meyer, Desbrun, Schröder
//! & Barr, in: Visualization and Mathematics III (2003) 35: circumcentric corners, ½ and ¼ of the triangle where
//! it is obtuse. 2H_i = b_i/A_i. Second order on irregular meshes once the vertices have relaxed, positive on
//! every mesh, continuous across Delaunay flips. Barycentric areas would carry one per cent of noise that does
//! not converge. Gaussian curvature is the angle defect (integrated).

use super::{Geometry, Stencils};
use crate::{Mesh, Topology, Vec3};

/// What the surface does beyond its rim.
#[derive(Clone, Copy, Debug)]
pub enum RimCondition<'a> {
    /// Nothing is known: rim edges carry no curvature (hinged, or no rim).
    Free,
    /// The surface continues with a prescribed unit normal, one per vertex (only rim vertices are read).
    Clamped(&'a [Vec3]),
}

/// Curvature measures of vertices.
#[derive(Clone, Debug, Default)]
pub struct Curvature {
    /// b_i = ∫ 2H over the cell of the vertex [length].
    pub integrated: Vec<f64>,
    /// Mixed circumcentric area A_i of the cell.
    pub area: Vec<f64>,
    /// 2π − Σ angles at interior vertices, π − Σ angles at rim vertices.
    pub angle_defect: Vec<f64>,
}

/// Gradients of b_i and A_i over the members of each vertex's stencil.
#[derive(Clone, Debug, Default)]
pub struct CurvatureGradient {
    /// ∂b_i/∂x for each stencil entry.
    pub integrated: Vec<Vec3>,
    /// ∂A_i/∂x for each stencil entry.
    pub area: Vec<Vec3>,
}

/// Angle from `left` to `right` about the unit vector `axis`.
#[inline]
fn signed_angle(left: &Vec3, right: &Vec3, axis: &Vec3) -> f64 {
    left.cross(right).dot(axis).atan2(left.dot(right))
}

/// Cotangents of a triangle's corners from its corner positions.
#[inline]
pub fn cotangents(x: &[Vec3; 3]) -> [f64; 3] {
    let twice_area = (x[1] - x[0]).cross(&(x[2] - x[0])).norm();
    let cot = |c: usize| {
        let (u, v) = (x[(c + 1) % 3] - x[c], x[(c + 2) % 3] - x[c]);
        u.dot(&v) / twice_area
    };
    [cot(0), cot(1), cot(2)]
}

/// Mixed circumcentric corner areas of a triangle.
#[inline]
pub fn corner_areas(x: &[Vec3; 3], area: f64) -> [f64; 3] {
    let cot = cotangents(x);
    if let Some(obtuse) = (0..3).find(|&c| cot[c] < 0.0) {
        let mut corner = [0.25 * area; 3];
        corner[obtuse] = 0.5 * area;
        return corner;
    }
    let mut corner = [0.0; 3];
    for c in 0..3 {
        let (a, b) = ((c + 1) % 3, (c + 2) % 3);
        let term = (x[b] - x[a]).norm_squared() * cot[c] / 8.0;
        corner[a] += term;
        corner[b] += term;
    }
    corner
}

/// Gradients of the mixed corner areas: `[corner][moved vertex]`.
fn corner_area_gradients(x: &[Vec3; 3], geometry: &Geometry, t: usize) -> [[Vec3; 3]; 3] {
    let (area, normal) = (geometry.area[t], geometry.normal[t]);
    let cot = cotangents(x);
    let mut gradient = [[Vec3::zeros(); 3]; 3];
    if let Some(obtuse) = (0..3).find(|&c| cot[c] < 0.0) {
        for (corner, row) in gradient.iter_mut().enumerate() {
            let share = if corner == obtuse { 0.5 } else { 0.25 };
            for (moved, entry) in row.iter_mut().enumerate() {
                *entry = geometry.gradients[t][moved] * (share * area);
            }
        }
        return gradient;
    }
    let twice_area = 2.0 * area;
    for c in 0..3 {
        let (a, b) = ((c + 1) % 3, (c + 2) % 3);
        let (u, v, d) = (x[a] - x[c], x[b] - x[c], x[b] - x[a]);
        let length_squared = d.norm_squared();
        let by_u = (v - v.cross(&normal) * cot[c]) / twice_area;
        let by_v = (u - normal.cross(&u) * cot[c]) / twice_area;
        let at_a = (by_u * length_squared - d * (2.0 * cot[c])) / 8.0;
        let at_b = (by_v * length_squared + d * (2.0 * cot[c])) / 8.0;
        let at_c = -(by_u + by_v) * (length_squared / 8.0);
        for corner in [a, b] {
            gradient[corner][a] += at_a;
            gradient[corner][b] += at_b;
            gradient[corner][c] += at_c;
        }
    }
    gradient
}

/// One wing of an edge: height foot as a fraction of the edge, and the turn of its normal per displacement of
/// the wing's tip.
#[inline]
fn wing(edge_unit: &Vec3, length: f64, to_tip: &Vec3, normal: &Vec3) -> (f64, Vec3) {
    let along = to_tip.dot(edge_unit);
    let height = (to_tip - edge_unit * along).norm();
    (along / length, normal / height)
}

impl Curvature {
    /// Measure curvature.
    pub fn new(mesh: &Mesh, topology: &Topology, geometry: &Geometry, rim: RimCondition) -> Self {
        let mut curvature = Self::default();
        curvature.update(mesh, topology, geometry, rim);
        curvature
    }

    /// Measure again after vertices moved.
    pub fn update(&mut self, mesh: &Mesh, topology: &Topology, geometry: &Geometry, rim: RimCondition) {
        let n = topology.n_vertices;
        for list in [&mut self.integrated, &mut self.area, &mut self.angle_defect] {
            list.clear();
            list.resize(n, 0.0);
        }
        for (v, defect) in self.angle_defect.iter_mut().enumerate() {
            *defect = std::f64::consts::PI * if topology.on_rim[v] { 1.0 } else { 2.0 };
        }
        for (t, corners) in topology.triangles.iter().enumerate() {
            let x = mesh.corners(t);
            let area = corner_areas(&x, geometry.area[t]);
            for c in 0..3 {
                let (u, v) = (x[(c + 1) % 3] - x[c], x[(c + 2) % 3] - x[c]);
                self.area[corners[c] as usize] += area[c];
                self.angle_defect[corners[c] as usize] -=
                    (2.0 * geometry.area[t]).atan2(u.dot(&v));
            }
        }
        for hinge in &topology.hinges {
            let edge = mesh.edge(hinge.i, hinge.j);
            let length = edge.norm();
            let angle = signed_angle(
                &geometry.normal[hinge.left as usize],
                &geometry.normal[hinge.right as usize],
                &(edge / length),
            );
            self.integrated[hinge.i as usize] += 0.5 * length * angle;
            self.integrated[hinge.j as usize] += 0.5 * length * angle;
        }
        if let RimCondition::Clamped(normals) = rim {
            for rim_edge in &topology.rim_edges {
                let edge = mesh.edge(rim_edge.i, rim_edge.j);
                let length = edge.norm();
                let outer = clamp_normal(normals, rim_edge.i, rim_edge.j);
                let angle = signed_angle(
                    &geometry.normal[rim_edge.triangle as usize],
                    &outer,
                    &(edge / length),
                );
                self.integrated[rim_edge.i as usize] += 0.5 * length * angle;
                self.integrated[rim_edge.j as usize] += 0.5 * length * angle;
            }
        }
    }

    /// Twice the mean curvature 2H = c₁ + c₂ of each vertex.
    pub fn twice_mean(&self) -> Vec<f64> {
        self.integrated
            .iter()
            .zip(&self.area)
            .map(|(b, a)| b / a)
            .collect()
    }

    /// Gaussian curvature of each vertex: angle defect over cell area.
    pub fn gaussian(&self) -> Vec<f64> {
        self.angle_defect
            .iter()
            .zip(&self.area)
            .map(|(d, a)| d / a)
            .collect()
    }
}

/// Prescribed normal of a rim edge: the mean of its ends'.
#[inline]
fn clamp_normal(normals: &[Vec3], i: u32, j: u32) -> Vec3 {
    (normals[i as usize] + normals[j as usize]).normalize()
}

impl CurvatureGradient {
    /// Exact gradients of the integrated curvature and of the cell areas.
    ///
    /// # Source
    /// ∂θ/∂(tip) = −n/h (Schläfli: Σ L_e ∂θ_e vanishes on closed surfaces, not vertex by vertex).
    pub fn update(
        &mut self,
        mesh: &Mesh,
        topology: &Topology,
        stencils: &Stencils,
        geometry: &Geometry,
        rim: RimCondition,
    ) {
        let n = stencils.members.len();
        for list in [&mut self.integrated, &mut self.area] {
            list.clear();
            list.resize(n, Vec3::zeros());
        }
        for (t, places) in stencils.triangle.iter().enumerate() {
            let gradient = corner_area_gradients(&mesh.corners(t), geometry, t);
            for corner in 0..3 {
                for moved in 0..3 {
                    self.area[places[corner][moved] as usize] += gradient[corner][moved];
                }
            }
        }
        for (hinge, places) in topology.hinges.iter().zip(&stencils.hinge) {
            let edge = mesh.edge(hinge.i, hinge.j);
            let length = edge.norm();
            let unit = edge / length;
            let (left, right) = (
                &geometry.normal[hinge.left as usize],
                &geometry.normal[hinge.right as usize],
            );
            let half_angle = 0.5 * signed_angle(left, right, &unit);
            let half = 0.5 * length;
            let (s, turn_k) = wing(&unit, length, &mesh.edge(hinge.i, hinge.k), left);
            let (r, turn_l) = wing(&unit, length, &mesh.edge(hinge.i, hinge.l), right);
            let at = [
                (turn_k * (1.0 - s) + turn_l * (1.0 - r)) * half - unit * half_angle,
                (turn_k * s + turn_l * r) * half + unit * half_angle,
                turn_k * -half,
                turn_l * -half,
            ];
            for owner in places {
                for (place, value) in owner.iter().zip(&at) {
                    self.integrated[*place as usize] += value;
                }
            }
        }
        if let RimCondition::Clamped(normals) = rim {
            for (rim_edge, places) in topology.rim_edges.iter().zip(&stencils.rim) {
                let edge = mesh.edge(rim_edge.i, rim_edge.j);
                let length = edge.norm();
                let unit = edge / length;
                let normal = &geometry.normal[rim_edge.triangle as usize];
                let outer = clamp_normal(normals, rim_edge.i, rim_edge.j);
                let half_angle = 0.5 * signed_angle(normal, &outer, &unit);
                let half = 0.5 * length;
                let (s, turn) = wing(&unit, length, &mesh.edge(rim_edge.i, rim_edge.k), normal);
                let at = [
                    turn * ((1.0 - s) * half) - unit * half_angle,
                    turn * (s * half) + unit * half_angle,
                    turn * -half,
                ];
                for owner in places {
                    for (place, value) in owner.iter().zip(&at) {
                        self.integrated[*place as usize] += value;
                    }
                }
            }
        }
    }
}

/// Gradient of Σ_i w_i (angle defect)_i with respect to vertex positions, added to `gradient`.
///
/// # Shapes
/// `weight`: one per vertex; `gradient`: one vector per vertex.
pub fn add_angle_defect_gradient(
    mesh: &Mesh,
    geometry: &Geometry,
    weight: &[f64],
    gradient: &mut [Vec3],
) {
    for (t, corners) in mesh.triangles.iter().enumerate() {
        let x = mesh.corners(t);
        let normal = geometry.normal[t];
        for c in 0..3 {
            let (a, b) = ((c + 1) % 3, (c + 2) % 3);
            let (u, v) = (x[a] - x[c], x[b] - x[c]);
            let w = weight[corners[c] as usize];
            let at_a = normal.cross(&u) * (w / u.norm_squared());
            let at_b = normal.cross(&v) * (-w / v.norm_squared());
            gradient[corners[a] as usize] += at_a;
            gradient[corners[b] as usize] += at_b;
            gradient[corners[c] as usize] -= at_a + at_b;
        }
    }
}
