//! What can be wrong with a surface, said so that a user can find and mend it.

use thiserror::Error;

/// Errors of meshes, generators and readers. Indices count from 0.
#[non_exhaustive]
#[derive(Debug, Error, Clone, PartialEq)]
pub enum MeshError {
    /// No vertices or no triangles.
    #[error("the mesh is empty ({vertices} vertices, {triangles} triangles)")]
    Empty {
        /// Number of vertices.
        vertices: usize,
        /// Number of triangles.
        triangles: usize,
    },
    /// A triangle points outside the vertex list.
    #[error("triangle {triangle} refers to vertex {index}, but there are only {vertices} vertices")]
    IndexOutOfRange {
        /// Offending triangle.
        triangle: usize,
        /// Offending index.
        index: usize,
        /// Number of vertices.
        vertices: usize,
    },
    /// A triangle uses a vertex twice.
    #[error("triangle {triangle} uses vertex {vertex} twice; remove it or merge duplicate points first")]
    RepeatedVertex {
        /// Offending triangle.
        triangle: usize,
        /// Offending vertex.
        vertex: usize,
    },
    /// More than two triangles share an edge.
    #[error("edge {a}–{b} is shared by {count} triangles; a surface allows two (non-manifold edge)")]
    NonManifoldEdge {
        /// One end.
        a: usize,
        /// Other end.
        b: usize,
        /// Number of triangles at the edge.
        count: usize,
    },
    /// Two neighbours run along their common edge in the same direction.
    #[error("triangles {first} and {second} run along edge {a}–{b} in the same direction: one of them is flipped")]
    InconsistentOrientation {
        /// One end.
        a: usize,
        /// Other end.
        b: usize,
        /// First triangle.
        first: usize,
        /// Second triangle.
        second: usize,
    },
    /// The triangles around a vertex form more than one fan.
    #[error("the triangles around vertex {vertex} form more than one fan (non-manifold vertex): separate the sheets there")]
    NonManifoldVertex {
        /// Offending vertex.
        vertex: usize,
    },
    /// A vertex without triangles.
    #[error("vertex {vertex} belongs to no triangle; remove it")]
    IsolatedVertex {
        /// Offending vertex.
        vertex: usize,
    },
    /// A closed surface was asked for, but there is a rim.
    #[error("the surface is open at edge {a}–{b} ({rim_edges} rim edges in all), but this run needs a closed one: close the hole or give it a frame")]
    Open {
        /// One end.
        a: usize,
        /// Other end.
        b: usize,
        /// Number of rim edges.
        rim_edges: usize,
    },
    /// A triangle of no area.
    #[error("triangle {triangle} has area {area:e}, too small beside the mean area {mean:e}")]
    ZeroArea {
        /// Offending triangle.
        triangle: usize,
        /// Its area.
        area: f64,
        /// Mean area of the triangles.
        mean: f64,
    },
    /// A coordinate is NaN or infinite.
    #[error("vertex {vertex} has a coordinate that is not a finite number")]
    NonFinite {
        /// Offending vertex.
        vertex: usize,
    },
    /// A generator got a value it cannot use.
    #[error("{quantity} = {value} is not possible: {mend}")]
    Impossible {
        /// Name of the quantity.
        quantity: &'static str,
        /// Given value.
        value: f64,
        /// What would do.
        mend: String,
    },
    /// A file could not be read or understood.
    #[error("{path}: {problem}")]
    File {
        /// Path of the file.
        path: String,
        /// What is wrong and how to mend it.
        problem: String,
    },
    /// Vertices without triangles.
    #[error("{count} vertices belong to no triangle, vertex {first} the first: remove them")]
    UnusedVertices {
        /// How many.
        count: usize,
        /// The first of them.
        first: usize,
    },
    /// A surface in several pieces.
    #[error("the surface has {count} separate pieces, but this run needs one; vertex {second} is the first of the second piece")]
    SeveralComponents {
        /// Number of pieces.
        count: usize,
        /// A vertex that is not connected to vertex 0.
        second: usize,
    },
    /// A rim along which points coincide.
    #[error("the surface is open at edge {a}–{b} ({rim_edges} rim edges in all), and {duplicates} points on its rims coincide with others: merge duplicate points")]
    UnmergedPoints {
        /// One end of the first rim edge.
        a: usize,
        /// Other end.
        b: usize,
        /// Number of rim edges.
        rim_edges: usize,
        /// Number of rim points that lie on another one.
        duplicates: usize,
    },
    /// A frame was promised, but the surface has no rim.
    #[error("the surface is closed, but a framed patch needs a rim to hold it by")]
    NoRim,
    /// A periodic tube was asked for, but the mesh has no period, or the other way round.
    #[error("the mesh {}, but this run needs one that {}", match period { Some(length) => format!("is periodic along z with the period {length}"), None => "has no period".into() }, if period.is_some() { "is not periodic" } else { "is periodic along z: give the period of the tube" })]
    WrongPeriodicity {
        /// Period of the mesh.
        period: Option<f64>,
    },
    /// A triangle longer than half of the period.
    #[error("triangle {triangle} spans half of the period {period} or more along z, so its edges are ambiguous: use a finer mesh or a longer tube")]
    SpansPeriod {
        /// Offending triangle.
        triangle: usize,
        /// Period along z.
        period: f64,
    },
    /// A surface with one side, like a Möbius strip.
    #[error("the surface cannot be oriented: following its triangles round, triangle {triangle} would need both directions")]
    NotOrientable {
        /// A triangle with contradictory neighbours.
        triangle: usize,
    },
}
