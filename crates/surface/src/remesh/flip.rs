//! Edge flips: keep the mesh Delaunay.

use super::edit::{EditLimits, EditMesh};
use super::guard::shape;
use super::links::Links;
use super::spread::even_out;
use super::transfer::VertexData;
use crate::mesh::topology::NONE;
use crate::{Mesh, MeshError, Vec3};

/// A mesh after edge flips; the vertices are the same.
#[derive(Clone, Debug, PartialEq)]
pub struct FlipOutcome {
    /// The mesh.
    pub mesh: Mesh,
    /// What its vertices carry: amounts follow the changed vertex areas, fields are as they were.
    pub data: VertexData,
    /// Number of flips.
    pub flips: usize,
}

/// Flip edges until every edge has cot α + cot β ≥ −`tolerance`, α and β being the angles opposite to it.
///
/// Returns the mesh with the same vertices and the number of flips. When the mesh is Delaunay already this
/// costs only the check. Edges whose flip would fold the surface or double an edge stay.
///
/// # Errors
/// Defects of the mesh as in [`crate::Topology::new`].
pub fn flip_to_delaunay(mesh: &Mesh, tolerance: f64) -> Result<(Mesh, usize), MeshError> {
    if is_delaunay(mesh, tolerance)? {
        return Ok((mesh.clone(), 0));
    }
    let outcome = flip_and_carry(mesh, &VertexData::default(), tolerance)?;
    Ok((outcome.mesh, outcome.flips))
}

/// [`flip_to_delaunay`] with amounts redistributed to the new vertex areas (see [`super::remesh`]).
///
/// # Errors
/// Defects of the mesh as in [`crate::Topology::new`], and of the data as in [`VertexData::check`].
pub fn flip_to_delaunay_with(
    mesh: &Mesh,
    data: &VertexData,
    tolerance: f64,
) -> Result<FlipOutcome, MeshError> {
    if is_delaunay(mesh, tolerance)? {
        data.check(mesh.n_vertices())?;
        return Ok(FlipOutcome {
            mesh: mesh.clone(),
            data: data.clone(),
            flips: 0,
        });
    }
    flip_and_carry(mesh, data, tolerance)
}

fn flip_and_carry(
    mesh: &Mesh,
    data: &VertexData,
    tolerance: f64,
) -> Result<FlipOutcome, MeshError> {
    let mut edit = EditMesh::new(
        mesh,
        data.clone(),
        vec![1.0; mesh.n_vertices()],
        &[],
        EditLimits::default(),
    )?;
    let flips = edit.flip_all(tolerance);
    let mut edited = edit.finish();
    if flips > 0 {
        even_out(&edited.mesh, &mut edited.data, &edited.density);
    }
    Ok(FlipOutcome {
        mesh: edited.mesh,
        data: edited.data,
        flips,
    })
}

/// Whether all edges have cot α + cot β ≥ −`tolerance`.
fn is_delaunay(mesh: &Mesh, tolerance: f64) -> Result<bool, MeshError> {
    let links = Links::new(mesh.n_vertices(), &mesh.triangles)?;
    let mut cotangent = vec![0.0; links.corner.len()];
    for t in 0..mesh.n_triangles() {
        let x = mesh.corners(t);
        for c in 0..3 {
            let apex = x[(c + 2) % 3];
            cotangent[3 * t + c] = cot(&(x[c] - apex), &(x[(c + 1) % 3] - apex));
        }
    }
    Ok(links
        .twin
        .iter()
        .zip(&cotangent)
        .all(|(&twin, &own)| twin == NONE || own + cotangent[twin as usize] >= -tolerance))
}

/// Cotangent of the angle between two vectors.
fn cot(u: &Vec3, v: &Vec3) -> f64 {
    u.dot(v) / u.cross(v).norm().max(f64::MIN_POSITIVE)
}

impl EditMesh {
    /// Sum of the cotangents opposite to an interior edge.
    fn cotangents(&self, h: u32) -> f64 {
        let twin = self.links.twin[h as usize];
        let (i, j) = self.ends(h);
        [h, twin]
            .iter()
            .map(|&side| {
                let apex = self.links.apex(side);
                cot(&self.edge(apex, i), &self.edge(apex, j))
            })
            .sum()
    }

    /// Flip the edge of `half_edge` if it exists, is interior, and the surface stays sound: no doubled edge,
    /// no fold, no triangle below the quality floor (or below what was there). The new edge is half-edge `3
    /// (half_edge / 3) + 1`.
    pub fn try_flip(&mut self, half_edge: u32) -> bool {
        self.flip_if(half_edge, true)
    }

    fn flip_if(&mut self, h: u32, mind_quality: bool) -> bool {
        if !self.is_interior(h) {
            return false;
        }
        let g = self.links.twin[h as usize];
        let (i, j) = self.ends(h);
        let (k, l) = (self.links.apex(h), self.links.apex(g));
        let keeps_fan = |v: u32| {
            // One triangle fewer must leave a closed fan of three, or one triangle on a rim.
            let around = self.links.spokes(v).take(4).count();
            around > if self.links.rim[v as usize] { 1 } else { 3 }
        };
        if !keeps_fan(i) || !keeps_fan(j) || self.links.adjacent(k, l) {
            return false;
        }
        let (x_j, x_k, x_l) = (self.edge(i, j), self.edge(i, k), self.edge(i, l));
        if !self.is_short(&(x_k - x_l)) {
            return false;
        }
        let (facets, border) = self.cavity(&[h, g]);
        let before = shape(&facets, &border);
        let normal = |v: u32| self.normal[v as usize];
        let after = shape(
            &[
                self.facet_at(
                    [i, l, k],
                    [Vec3::zeros(), x_l, x_k],
                    [normal(i), normal(l), normal(k)],
                ),
                self.facet_at(
                    [l, j, k],
                    [x_l, x_j, x_k],
                    [normal(l), normal(j), normal(k)],
                ),
            ],
            &border,
        );
        let sound = if mind_quality {
            self.limits.accept(&before, &after)
        } else {
            self.limits.accept_any_quality(&before, &after)
        };
        if !sound {
            return false;
        }
        let group = [i, j, k, l];
        self.gather(&group);
        self.book_area(h, -1.0);
        self.book_area(g, -1.0);
        self.links.flip(h);
        self.book_area(h, 1.0);
        self.book_area(g, 1.0);
        self.scatter(&group);
        true
    }

    /// Flip until no edge has cot α + cot β below −`tolerance`, as far as soundness allows. Returns the
    /// number of flips.
    pub fn flip_all(&mut self, tolerance: f64) -> usize {
        let mut waiting: Vec<u32> = self
            .interior_edges()
            .filter(|&h| self.cotangents(h) < -tolerance)
            .collect();
        // In a plane flips must end; on a rough surface two diagonals could in principle both look wrong.
        let most = 10 * self.n_vertices() + 100;
        let mut flips = 0;
        while let Some(h) = waiting.pop() {
            if flips >= most || !self.is_interior(h) {
                continue;
            }
            let before = self.cotangents(h);
            if before >= -tolerance || self.turned_cotangents(h) <= before {
                continue;
            }
            let g = self.links.twin[h as usize];
            if self.flip_if(h, false) {
                flips += 1;
                let (t, s) = (3 * (h / 3), 3 * (g / 3));
                waiting.extend([t, t + 2, s, s + 1]);
            }
        }
        flips
    }

    /// Sum of the cotangents opposite to the edge that would replace an interior one.
    fn turned_cotangents(&self, h: u32) -> f64 {
        let g = self.links.twin[h as usize];
        let (i, j) = self.ends(h);
        let (k, l) = (self.links.apex(h), self.links.apex(g));
        cot(&self.edge(i, k), &self.edge(i, l)) + cot(&self.edge(j, k), &self.edge(j, l))
    }
}
