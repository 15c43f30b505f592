//! From cells of a file to triangles.

use super::{Limits, check_limit};
use crate::VtkError;

/// Codes of the cells that make a surface.
const TRIANGLE: u64 = 5;
const POLYGON: u64 = 7;
const QUAD: u64 = 9;

/// Cells as VTK 9 holds them.
pub(super) struct Cells {
    /// Where each cell ends in `connectivity`.
    pub ends: Vec<u64>,
    /// Point indices of all cells.
    pub connectivity: Vec<u64>,
    /// Code of each cell; `None` if all are polygons.
    pub types: Option<Vec<u64>>,
}

/// Most point indices that cells within the limits can have: a polygon of n corners makes
/// n − 2 triangles.
pub(super) fn max_connectivity(limits: &Limits) -> u64 {
    limits.max_cells.saturating_mul(3)
}

impl Cells {
    /// Cells from the layout of legacy files before version 5: corner count and corners in turn.
    pub fn from_counted(count: u64, list: Vec<u64>) -> Result<Self, VtkError> {
        let mut ends = Vec::new();
        let mut connectivity = Vec::with_capacity(list.len());
        let mut rest = list.as_slice();
        while let Some((&corners, tail)) = rest.split_first() {
            let corners = usize::try_from(corners)
                .ok()
                .filter(|&corners| corners <= tail.len())
                .ok_or_else(|| {
                    let problem = format!("{corners} corners are announced, but fewer follow");
                    VtkError::malformed(format!("cell {}", ends.len()), problem)
                })?;
            let (cell, tail) = tail.split_at(corners);
            connectivity.extend_from_slice(cell);
            ends.push(connectivity.len() as u64);
            rest = tail;
        }
        if ends.len() as u64 != count {
            let problem = format!("{count} are announced, but {} follow", ends.len());
            return Err(VtkError::malformed("cells", problem));
        }
        Ok(Self {
            ends,
            connectivity,
            types: None,
        })
    }

    /// Triangles, polygons being cut into fans.
    ///
    /// # Errors
    /// `Malformed`, `UnsupportedCell`, `PointIndex`, or `LimitExceeded`.
    pub fn triangulate(&self, points: usize, limits: &Limits) -> Result<Vec<[u32; 3]>, VtkError> {
        if let Some(types) = &self.types
            && types.len() != self.ends.len()
        {
            let problem = format!("{} types for {} cells", types.len(), self.ends.len());
            return Err(VtkError::malformed("cells", problem));
        }
        let mut triangles = Vec::new();
        let mut start = 0;
        for (cell, &end) in self.ends.iter().enumerate() {
            let corners = usize::try_from(end)
                .ok()
                .and_then(|end| self.connectivity.get(start..end))
                .ok_or_else(|| {
                    let problem = format!(
                        "it runs from {start} to {end} in a list of {}",
                        self.connectivity.len()
                    );
                    VtkError::malformed(format!("cell {cell}"), problem)
                })?;
            start += corners.len();
            let code = self.types.as_ref().map_or(POLYGON, |types| types[cell]);
            check_kind(cell, code, corners.len())?;
            if let Some(&point) = corners.iter().find(|&&point| point >= points as u64) {
                return Err(VtkError::PointIndex {
                    cell,
                    point,
                    points,
                });
            }
            let made = (triangles.len() + corners.len() - 2) as u64;
            check_limit("number of triangles", made, limits.max_cells)?;
            // Cannot overflow: `points` is kept below 2³² by the readers.
            triangles.extend(
                corners[1..]
                    .windows(2)
                    .map(|edge| [corners[0] as u32, edge[0] as u32, edge[1] as u32]),
            );
        }
        if start != self.connectivity.len() {
            let problem = format!(
                "the cells use {start} of {} point indices",
                self.connectivity.len()
            );
            return Err(VtkError::malformed("cells", problem));
        }
        Ok(triangles)
    }
}

/// Refuses all but triangles, quads and polygons of the right number of corners.
fn check_kind(cell: usize, code: u64, corners: usize) -> Result<(), VtkError> {
    let fits = match code {
        TRIANGLE => corners == 3,
        QUAD => corners == 4,
        POLYGON => corners >= 3,
        _ => {
            return Err(VtkError::UnsupportedCell {
                cell,
                kind: kind_name(code),
            });
        }
    };
    if !fits {
        let problem = format!("{corners} corners do not make {}", kind_name(code));
        return Err(VtkError::malformed(format!("cell {cell}"), problem));
    }
    Ok(())
}

/// Name of a cell type; those a surface mesher may leave behind are spelt out.
fn kind_name(code: u64) -> String {
    let name = match code {
        0 => "an empty cell",
        1 | 2 => "a vertex",
        3 => "a line",
        4 => "a polyline",
        5 => "a triangle",
        6 => "a triangle strip",
        7 => "a polygon",
        8 => "a pixel",
        9 => "a quad",
        10 => "a tetrahedron",
        11 => "a voxel",
        12 => "a hexahedron",
        13 => "a wedge",
        14 => "a pyramid",
        21 => "a quadratic edge",
        22 => "a quadratic triangle",
        23 => "a quadratic quad",
        24 => "a quadratic tetrahedron",
        _ => return format!("a cell of VTK type {code}"),
    };
    name.to_owned()
}
