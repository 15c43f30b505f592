//! A surface under change: half-edges, positions and what the vertices carry.

use super::links::{Links, previous};
use super::transfer::{Pool, VertexData};
use crate::mesh::topology::NONE;
use crate::{Mesh, MeshError, Vec3};

/// When an edit is refused. A cavity that was already worse than a limit may stay as bad, never get worse.
#[derive(Clone, Debug, PartialEq)]
pub struct EditLimits {
    /// Quality (see [`super::quality`]) below which no edit may bring a triangle. Default 0.3.
    pub quality_floor: f64,
    /// Largest angle, in radians, between neighbouring triangles, and between a triangle and the surface
    /// normal at its corners, that an edit may create. Default π/3.
    pub max_fold: f64,
    /// Most neighbours a vertex may get by a collapse. Default 9.
    pub max_valence: usize,
    /// Fewest triangles a vertex off the rim may keep after a collapse. Default 4.
    pub min_valence: usize,
}

impl Default for EditLimits {
    fn default() -> Self {
        Self {
            quality_floor: 0.3,
            max_fold: std::f64::consts::FRAC_PI_3,
            max_valence: 9,
            min_valence: 4,
        }
    }
}

/// A mesh that can be edited locally, with the amounts and fields of its vertices.
///
/// The edits are [`EditMesh::try_split`], [`EditMesh::try_collapse`], [`EditMesh::try_flip`] and
/// [`EditMesh::try_relocate`]. Each refuses what would spoil the surface, conserves every amount and never
/// touches rim vertices or rim edges. Half-edge `3 t + c` runs from corner `c` of triangle `t` to the next;
/// edits reuse numbers, so a half-edge may denote another edge after one.
#[derive(Clone, Debug)]
pub struct EditMesh {
    pub(super) links: Links,
    pub(super) limits: EditLimits,
    pub(super) position: Vec<Vec3>,
    /// Unit normals of the surface as it was given (new vertices: interpolated).
    pub(super) normal: Vec<Vec3>,
    /// Wanted edge length.
    pub(super) target: Vec<f64>,
    /// One third of the area of the triangles around each vertex.
    pub(super) area: Vec<f64>,
    /// Lipid amount per area wanted at each vertex: that of the given mesh, interpolated.
    pub(super) density: Vec<f64>,
    pub(super) data: VertexData,
    /// Vertices that must stay where they are.
    pub(super) kept: Vec<bool>,
    /// Vertices in or next to an edit since the marks were cleared.
    pub(super) touched: Vec<bool>,
    pub(super) pool: Pool,
    /// Storage reused by the edits.
    pub(super) scratch: Vec<u32>,
    period: Option<f64>,
    /// Lower end of the interval of stored z on a periodic tube.
    z_low: f64,
    n_given: usize,
    n_alive: usize,
}

/// What an edited mesh has become.
#[derive(Clone, Debug, PartialEq)]
pub struct Edited {
    /// The mesh: surviving vertices in their old order, then new ones.
    pub mesh: Mesh,
    /// What its vertices carry.
    pub data: VertexData,
    /// Wanted edge length at its vertices.
    pub target_edge: Vec<f64>,
    /// New index of each vertex of the given mesh, `None` if it was removed.
    pub old_to_new: Vec<Option<u32>>,
    /// Density the data should have, up to a common factor, at the new vertices.
    pub(super) density: Vec<f64>,
}

impl EditMesh {
    /// Open a mesh for editing.
    ///
    /// `data` has one entry per vertex in every list, `target_edge` one wanted edge length per vertex, `keep`
    /// lists vertices that must neither move nor vanish.
    ///
    /// # Errors
    /// Defects of the mesh as in [`crate::Topology::new`]; [`MeshError::Impossible`] for lists of a wrong
    /// length, edge lengths or lipid amounts that are not positive, and indices out of range.
    pub fn new(
        mesh: &Mesh,
        data: VertexData,
        target_edge: Vec<f64>,
        keep: &[u32],
        limits: EditLimits,
    ) -> Result<Self, MeshError> {
        let n = mesh.n_vertices();
        let links = Links::new(n, &mesh.triangles)?;
        data.check(n)?;
        check_target(&target_edge, n)?;
        let mut kept = links.rim.clone();
        for &v in keep {
            *kept
                .get_mut(v as usize)
                .ok_or_else(|| MeshError::Impossible {
                    quantity: "index of a vertex to keep",
                    value: f64::from(v),
                    mend: format!("the mesh has {n} vertices, counted from 0"),
                })? = true;
        }
        if let Some(vertex) = mesh
            .positions
            .iter()
            .position(|x| x.iter().any(|c| !c.is_finite()))
        {
            return Err(MeshError::NonFinite { vertex });
        }
        let mut edit = Self {
            links,
            limits,
            position: mesh.positions.clone(),
            normal: vec![Vec3::zeros(); n],
            target: target_edge,
            area: vec![0.0; n],
            density: vec![1.0; n],
            data,
            kept,
            touched: vec![false; n],
            pool: Pool::default(),
            scratch: Vec::new(),
            period: mesh.period,
            z_low: 0.0,
            n_given: n,
            n_alive: n,
        };
        if let Some(period) = mesh.period
            && mesh.positions.iter().any(|x| x.z < 0.0)
        {
            edit.z_low = -0.5 * period;
        }
        edit.measure()?;
        Ok(edit)
    }

    /// Vertex areas, normals and densities from scratch.
    fn measure(&mut self) -> Result<(), MeshError> {
        let n_triangles = self.links.corner.len() / 3;
        let mut total = 0.0;
        for t in 0..n_triangles as u32 {
            if let Some(corners) = self.links.triangle(t) {
                let vector = self.area_vector(corners);
                let area = vector.norm();
                total += area;
                for v in corners {
                    self.normal[v as usize] += vector;
                    self.area[v as usize] += area / 3.0;
                }
            }
        }
        for (v, normal) in self.normal.iter_mut().enumerate() {
            let length = normal.norm();
            if length <= f64::MIN_POSITIVE || self.area[v] <= 0.0 {
                return Err(MeshError::ZeroArea {
                    triangle: (self.links.outgoing[v] / 3) as usize,
                    area: self.area[v],
                    mean: total / n_triangles as f64,
                });
            }
            *normal /= length;
        }
        if let Some(lipids) = self.data.amounts.first() {
            for ((density, m), area) in self.density.iter_mut().zip(lipids).zip(&self.area) {
                *density = m / area;
            }
        }
        Ok(())
    }

    /// Number of vertices at present.
    pub fn n_vertices(&self) -> usize {
        self.n_alive
    }

    /// Number of half-edge names, those of removed triangles included.
    pub fn n_half_edges(&self) -> u32 {
        self.links.corner.len() as u32
    }

    /// Whether a half-edge exists and has triangles on both sides.
    pub fn is_interior(&self, half_edge: u32) -> bool {
        (half_edge as usize) < self.links.corner.len() && self.links.is_interior(half_edge)
    }

    /// Start and end of an existing half-edge; they are names inside this structure, given vertices keep
    /// theirs.
    pub fn ends(&self, half_edge: u32) -> (u32, u32) {
        (self.links.from(half_edge), self.links.to(half_edge))
    }

    /// Number of vertex names, removed vertices included.
    pub fn n_names(&self) -> u32 {
        self.position.len() as u32
    }

    /// Whether a vertex exists and may move.
    pub fn is_free(&self, vertex: u32) -> bool {
        self.links
            .outgoing
            .get(vertex as usize)
            .is_some_and(|&h| h != NONE)
            && !self.kept[vertex as usize]
    }

    /// Vector from one vertex to another (nearest image).
    #[inline]
    pub(super) fn edge(&self, from: u32, to: u32) -> Vec3 {
        let mut d = self.position[to as usize] - self.position[from as usize];
        if let Some(period) = self.period {
            d.z -= period * (d.z / period).round();
        }
        d
    }

    /// Length over wanted length.
    #[inline]
    pub(super) fn ratio(&self, a: u32, b: u32) -> f64 {
        self.edge(a, b).norm() / (0.5 * (self.target[a as usize] + self.target[b as usize]))
    }

    /// Whether a difference of positions is surely its own nearest image.
    #[inline]
    pub(super) fn is_short(&self, d: &Vec3) -> bool {
        self.period.is_none_or(|period| d.z.abs() < 0.45 * period)
    }

    /// Area times normal of a triangle.
    #[inline]
    pub(super) fn area_vector(&self, [a, b, c]: [u32; 3]) -> Vec3 {
        0.5 * self.edge(a, b).cross(&self.edge(a, c))
    }

    /// Add `sign` times a triangle's area to its corners.
    pub(super) fn book_area(&mut self, h: u32, sign: f64) {
        if let Some(corners) = self.links.triangle(h / 3) {
            let share = sign * self.area_vector(corners).norm() / 3.0;
            for v in corners {
                self.area[v as usize] += share;
            }
        }
    }

    /// Store a point, wrapped into the tube's period.
    pub(super) fn wrap(&self, mut x: Vec3) -> Vec3 {
        if let Some(period) = self.period {
            x.z = self.z_low + (x.z - self.z_low).rem_euclid(period);
        }
        x
    }

    /// Add a vertex halfway between two others in all that is carried, at the given place.
    pub(super) fn push_vertex(&mut self, i: u32, j: u32, position: Vec3) {
        let (i, j) = (i as usize, j as usize);
        self.position.push(position);
        let normal = self.normal[i] + self.normal[j];
        self.normal
            .push(normal / normal.norm().max(f64::MIN_POSITIVE));
        self.target.push(0.5 * (self.target[i] + self.target[j]));
        self.density.push(0.5 * (self.density[i] + self.density[j]));
        self.area.push(0.0);
        self.data.push_between(i, j);
        self.kept.push(false);
        self.touched.push(true);
        self.n_alive += 1;
    }

    /// Book the removal of one vertex.
    pub(super) fn one_less(&mut self) {
        self.n_alive -= 1;
    }

    /// Half-edges of every edge once, with a triangle on both sides.
    pub(super) fn interior_edges(&self) -> impl Iterator<Item = u32> + '_ {
        (0..self.n_half_edges()).filter(|&h| {
            let twin = self.links.twin[h as usize];
            h < twin && twin != NONE && self.links.corner[h as usize] != NONE
        })
    }

    /// Triangles around a vertex as pairs of the half-edges' two other ends (a, b) with corners (v, a, b).
    pub(super) fn fan(&self, v: u32) -> impl Iterator<Item = (u32, u32)> + '_ {
        self.links
            .spokes(v)
            .map(|h| (self.links.to(h), self.links.corner[previous(h) as usize]))
    }

    /// Close the editing: drop removed vertices and triangles.
    pub fn finish(mut self) -> Edited {
        let mut new_index = vec![NONE; self.position.len()];
        let mut alive = Vec::with_capacity(self.n_alive);
        for (v, &h) in self.links.outgoing.iter().enumerate() {
            if h != NONE {
                new_index[v] = alive.len() as u32;
                alive.push(v);
            }
        }
        let pick = |list: &mut Vec<f64>| *list = alive.iter().map(|&v| list[v]).collect();
        self.data
            .amounts
            .iter_mut()
            .chain(&mut self.data.fields)
            .for_each(pick);
        pick(&mut self.target);
        pick(&mut self.density);
        let n_triangles = self.links.corner.len() as u32 / 3;
        let triangles = (0..n_triangles)
            .filter_map(|t| self.links.triangle(t))
            .map(|corners| corners.map(|v| new_index[v as usize]))
            .collect();
        Edited {
            mesh: Mesh {
                positions: alive.iter().map(|&v| self.position[v]).collect(),
                triangles,
                period: self.period,
            },
            data: self.data,
            target_edge: self.target,
            old_to_new: new_index[..self.n_given]
                .iter()
                .map(|&v| (v != NONE).then_some(v))
                .collect(),
            density: self.density,
        }
    }
}

/// One positive length per vertex.
fn check_target(target_edge: &[f64], n_vertices: usize) -> Result<(), MeshError> {
    if target_edge.len() != n_vertices {
        return Err(MeshError::Impossible {
            quantity: "number of wanted edge lengths",
            value: target_edge.len() as f64,
            mend: format!("give one for each of the {n_vertices} vertices"),
        });
    }
    match target_edge.iter().find(|&&h| !(h > 0.0 && h.is_finite())) {
        None => Ok(()),
        Some(&value) => Err(MeshError::Impossible {
            quantity: "wanted edge length",
            value,
            mend: "it must be positive and finite".into(),
        }),
    }
}
