//! Periodic tubes cut open for viewers: triangles across the seam get copies of their far corners.

use pellicle_surface::Mesh;
use std::collections::HashMap;

/// A surface as a viewer needs it.
#[derive(Debug, Default, PartialEq)]
pub struct Unwrapped {
    /// Positions, in the mesh's unit.
    pub points: Vec<[f64; 3]>,
    /// Triangles, as many and in the same order as the mesh's.
    pub triangles: Vec<[u32; 3]>,
    /// Vertex of the mesh that each point beyond the mesh's own vertices copies.
    pub copies: Vec<u32>,
}

impl Unwrapped {
    /// Unwrap a mesh.
    pub fn new(mesh: &Mesh) -> Self {
        let mut points: Vec<[f64; 3]> = mesh.positions.iter().map(|p| [p.x, p.y, p.z]).collect();
        let mut triangles = mesh.triangles.clone();
        let mut copies = Vec::new();
        if let Some(period) = mesh.period {
            let mut known: HashMap<(u32, i64), u32> = HashMap::new();
            for (t, corners) in triangles.iter_mut().enumerate() {
                let places = mesh.corners(t);
                for (corner, place) in corners.iter_mut().zip(places) {
                    let shift = ((place.z - mesh.positions[*corner as usize].z) / period).round();
                    if shift == 0.0 {
                        continue;
                    }
                    let vertex = *corner;
                    *corner = *known.entry((vertex, shift as i64)).or_insert_with(|| {
                        points.push([place.x, place.y, place.z]);
                        copies.push(vertex);
                        points.len() as u32 - 1
                    });
                }
            }
        }
        Self { points, triangles, copies }
    }

    /// A field of the mesh on all points.
    pub fn spread<T: Copy>(&self, mut field: Vec<T>) -> Vec<T> {
        field.extend(self.copies.iter().filter_map(|&v| field.get(v as usize).copied()).collect::<Vec<_>>());
        field
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use pellicle_surface::mesh::shapes;

    #[test]
    fn no_triangle_crosses_the_picture() -> Result<(), Box<dyn std::error::Error>> {
        let mesh = shapes::tube(1.0, 6.0, 0.3)?;
        let unwrapped = Unwrapped::new(&mesh);
        assert!(!unwrapped.copies.is_empty());
        for corners in &unwrapped.triangles {
            let z = corners.map(|c| unwrapped.points[c as usize][2]);
            assert!(z[0].max(z[1]).max(z[2]) - z[0].min(z[1]).min(z[2]) < 1.0);
        }
        let field = unwrapped.spread((0..mesh.n_vertices()).collect());
        assert_eq!(field.len(), unwrapped.points.len());
        Ok(())
    }

    #[test]
    fn closed_surfaces_stay_as_they_are() -> Result<(), Box<dyn std::error::Error>> {
        let mesh = shapes::sphere(1.0, 0.4)?;
        let unwrapped = Unwrapped::new(&mesh);
        assert_eq!(unwrapped.triangles, mesh.triangles);
        assert_eq!(unwrapped.points.len(), mesh.n_vertices());
        Ok(())
    }
}
