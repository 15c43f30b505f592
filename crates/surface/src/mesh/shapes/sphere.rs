//! Spheres by subdivision of an icosahedron.

use super::relax::{Relaxation, Rule};
use super::surface::Ellipsoid;
use super::{affordable, positive};
use crate::{Mesh, MeshError, Vec3};
use std::collections::HashMap;
use std::f64::consts::{PI, TAU};

/// Sphere about the origin with edges near `edge`: every edge of an icosahedron divided into n equal parts
/// (10 n² + 2 vertices, all of valence 6 but twelve of valence 5), smoothed on the sphere.
///
/// # Shapes and units
/// `radius`, `edge`: lengths in the unit wanted for the mesh. As n is a whole number, the mean edge differs from
/// `edge` by up to a factor 1 ± 1/(2n).
/// # Errors
/// [`MeshError::Impossible`] for values that are not positive or an edge longer than the radius.
/// # Source
/// Geodesic subdivision: Baumgardner & Frederickson, SIAM J. Numer. Anal. 22 (1985) 1107.
pub fn sphere(radius: f64, edge: f64) -> Result<Mesh, MeshError> {
    let radius = positive("radius", radius)?;
    let edge = positive("edge length", edge)?;
    if edge > radius {
        return Err(MeshError::Impossible {
            quantity: "edge length",
            value: edge,
            mend: format!("a sphere of radius {radius} needs edges no longer than its radius"),
        });
    }
    affordable(edge, 4.0 * PI * radius * radius)?;
    // Equilateral triangles of side h on 20 n² faces: 4πR² = 20 n² √3/4 h².
    let frequency = (radius / edge * (16.0 * PI / (20.0 * 3f64.sqrt())).sqrt()).round();
    let mut mesh = geodesic((frequency as usize).max(1));
    let surface = Ellipsoid {
        axes: Vec3::repeat(1.0),
    };
    // Regular connectivity must stay, so no flips. Twenty steps leave the edges a spread of 4 to 5 % for all n
    // (measured), the shortest at the twelve five-valent vertices.
    Relaxation {
        surface: &surface,
        fixed: &[],
        edge_length: None,
        flip: false,
    }
    .run(&mut mesh, Rule::Centroids, 20)?;
    for p in &mut mesh.positions {
        *p *= radius;
    }
    Ok(mesh)
}

/// Unit icosahedron with every face divided into n² triangles, points pushed out to the sphere.
fn geodesic(n: usize) -> Mesh {
    let corners = icosahedron();
    let mut positions: Vec<Vec3> = corners.to_vec();
    let mut triangles = Vec::with_capacity(20 * n * n);
    // Interior points of each icosahedron edge, listed from its lower to its higher corner.
    let mut on_edges: HashMap<(usize, usize), usize> = HashMap::new();
    for face in faces(&corners) {
        let mut grid: HashMap<(usize, usize), u32> = HashMap::new();
        // Barycentric place (i, j, n−i−j) belongs to corners 0, 1, 2.
        for i in 0..=n {
            for j in 0..=(n - i) {
                let weights = [i, j, n - i - j];
                let vertex = match (0..3).filter(|&c| weights[c] > 0).collect::<Vec<_>>()[..] {
                    [only] => face[only],
                    [p, q] => {
                        let (low, high) = if face[p] < face[q] { (p, q) } else { (q, p) };
                        let first = *on_edges.entry((face[low], face[high])).or_insert_with(|| {
                            let first = positions.len();
                            for step in 1..n {
                                positions.push(slerp(
                                    &corners[face[low]],
                                    &corners[face[high]],
                                    step as f64 / n as f64,
                                ));
                            }
                            first
                        });
                        first + weights[high] - 1
                    }
                    _ => {
                        positions.push(inside(&face.map(|v| corners[v]), weights, n));
                        positions.len() - 1
                    }
                };
                grid.insert((i, j), vertex as u32);
            }
        }
        for i in 0..n {
            for j in 0..(n - i) {
                triangles.push([grid[&(i + 1, j)], grid[&(i, j + 1)], grid[&(i, j)]]);
                if i + j + 2 <= n {
                    triangles.push([grid[&(i + 1, j)], grid[&(i + 1, j + 1)], grid[&(i, j + 1)]]);
                }
            }
        }
    }
    Mesh::new(positions, triangles)
}

/// Point between a and b that divides their great-circle arc.
fn slerp(a: &Vec3, b: &Vec3, share: f64) -> Vec3 {
    let angle = a.dot(b).clamp(-1.0, 1.0).acos();
    (a * ((1.0 - share) * angle).sin() + b * (share * angle).sin()) / angle.sin()
}

/// Mean of the three points found by dividing arcs parallel to each side.
fn inside(corners: &[Vec3; 3], weights: [usize; 3], n: usize) -> Vec3 {
    let mut sum = Vec3::zeros();
    for c in 0..3 {
        let (p, q) = ((c + 1) % 3, (c + 2) % 3);
        let share = 1.0 - weights[c] as f64 / n as f64;
        let left = slerp(&corners[c], &corners[p], share);
        let right = slerp(&corners[c], &corners[q], share);
        sum += slerp(
            &left,
            &right,
            weights[q] as f64 / (weights[p] + weights[q]) as f64,
        );
    }
    sum.normalize()
}

/// The twelve corners of a unit icosahedron, two of them on the z axis.
fn icosahedron() -> [Vec3; 12] {
    let mut corners = [Vec3::z(); 12];
    let (height, width) = (1.0 / 5f64.sqrt(), 2.0 / 5f64.sqrt());
    for i in 0..5 {
        let angle = TAU * i as f64 / 5.0;
        let turned = angle + PI / 5.0;
        corners[1 + i] = Vec3::new(width * angle.cos(), width * angle.sin(), height);
        corners[6 + i] = Vec3::new(width * turned.cos(), width * turned.sin(), -height);
    }
    corners[11] = -Vec3::z();
    corners
}

/// Its twenty faces, counter-clockwise seen from outside: all triples of mutual neighbours.
fn faces(corners: &[Vec3; 12]) -> Vec<[usize; 3]> {
    let near = |a: usize, b: usize| corners[a].dot(&corners[b]) > 0.4;
    let mut faces = Vec::with_capacity(20);
    for a in 0..12 {
        for b in (a + 1)..12 {
            for c in (b + 1)..12 {
                if near(a, b) && near(b, c) && near(c, a) {
                    let outward = corners[a].cross(&corners[b]).dot(&corners[c]) > 0.0;
                    faces.push(if outward { [a, b, c] } else { [a, c, b] });
                }
            }
        }
    }
    faces
}
