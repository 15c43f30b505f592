//! Delaunay triangulations of scattered points on the sphere and on flat periodic rectangles.

use crate::{MeshError, Vec3};
use spade::{DelaunayTriangulation, HasPosition, Point2, Triangulation};

/// A point that remembers its number.
struct Numbered {
    place: Point2<f64>,
    number: u32,
}

impl HasPosition for Numbered {
    type Scalar = f64;
    fn position(&self) -> Point2<f64> {
        self.place
    }
}

fn triangulate(
    points: impl Iterator<Item = [f64; 2]>,
) -> Result<DelaunayTriangulation<Numbered>, MeshError> {
    let numbered = points
        .enumerate()
        .map(|(number, [x, y])| Numbered {
            place: Point2::new(x, y),
            number: number as u32,
        })
        .collect();
    DelaunayTriangulation::bulk_load(numbered).map_err(|error| MeshError::Impossible {
        quantity: "point coordinate",
        value: f64::NAN,
        mend: format!("the points cannot be triangulated ({error})"),
    })
}

/// Delaunay triangles (counter-clockwise seen from outside) of unit vectors.
///
/// Stereographic projection from the first point takes circles to circles, so the planar Delaunay triangles of the
/// others are spherical ones too; the convex hull closes at the first point.
///
/// # Errors
/// [`MeshError::Impossible`] for coordinates that are not finite.
pub(super) fn spherical(directions: &[Vec3]) -> Result<Vec<[u32; 3]>, MeshError> {
    let Some(pole) = directions.first() else {
        return Ok(Vec::new());
    };
    // Any axis away from the pole spans the plane with it.
    let aside = if pole.x.abs() < 0.8 {
        Vec3::x()
    } else {
        Vec3::y()
    };
    let first = pole.cross(&aside).normalize();
    let second = pole.cross(&first);
    let net = triangulate(directions[1..].iter().map(|d| {
        let height = 1.0 - d.dot(pole);
        [d.dot(&first) / height, d.dot(&second) / height]
    }))?;
    // The plane is seen from inside the sphere: reverse every triangle.
    let mut triangles: Vec<[u32; 3]> = net
        .inner_faces()
        .map(|face| {
            let [a, b, c] = face.vertices().map(|v| v.data().number + 1);
            [a, c, b]
        })
        .collect();
    for edge in net.convex_hull() {
        // The hull runs clockwise in the plane.
        let [from, to] = [edge.from(), edge.to()].map(|v| v.data().number + 1);
        triangles.push([0, to, from]);
    }
    Ok(triangles)
}

/// Delaunay triangles of points in the flat torus [0, width) × [0, height).
///
/// # Errors
/// [`MeshError::Impossible`] for coordinates that are not finite.
pub(super) fn periodic(
    points: &[[f64; 2]],
    width: f64,
    height: f64,
) -> Result<Vec<[u32; 3]>, MeshError> {
    let n = points.len() as u32;
    let copies = [0.0, -1.0, 1.0]
        .into_iter()
        .flat_map(|i| [0.0, -1.0, 1.0].map(|j| [i * width, j * height]));
    let net = triangulate(
        copies.flat_map(|[dx, dy]| points.iter().map(move |p| [p[0] + dx, p[1] + dy])),
    )?;
    let mut triangles = Vec::with_capacity(2 * points.len());
    for face in net.inner_faces() {
        let corners = face.vertices().map(|v| v.data().number);
        let original = corners.map(|corner| corner % n);
        // Of the copies of a triangle keep the one whose lowest vertex lies in the middle copy.
        let lowest = original[0].min(original[1]).min(original[2]);
        if corners.contains(&lowest) {
            triangles.push(original);
        }
    }
    Ok(triangles)
}
