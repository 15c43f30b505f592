//! Local changes of connectivity and the choice where to make them.
//!
//! [`remesh`] brings edges to wanted lengths by splits, collapses, flips and tangential smoothing;
//! [`flip_to_delaunay`] only flips. Both take along what the vertices carry: amounts exactly, fields by
//! interpolation.

mod collapse;
mod edit;
mod flip;
mod guard;
mod links;
mod place;
mod quality;
mod rim;
mod sizing;
mod smooth;
mod split;
mod spread;
mod transfer;

pub use edit::{EditLimits, EditMesh, Edited};
pub use flip::{FlipOutcome, flip_to_delaunay, flip_to_delaunay_with};
pub use quality::quality;
pub use sizing::{SizingRequest, curvature_size, sizing_field};
pub use transfer::VertexData;
pub(crate) use transfer::match_total;

use crate::{Mesh, MeshError};

/// When and how to remesh.
#[derive(Clone, Debug, PartialEq)]
pub struct RemeshOptions {
    /// Split edges longer than this multiple of their wanted length (mean over the ends). Default 1.4.
    pub split_above: f64,
    /// Collapse edges shorter than this multiple of their wanted length. Default 0.6. Twice this must be less
    /// than `split_above`, or halves of a split edge would be collapsed again.
    pub collapse_below: f64,
    /// Flip an edge when cot α + cot β < −this, α and β being the angles opposite to it. Default 0.02: enough
    /// that rounding and slow motion do not flip an edge to and fro.
    pub flip_tolerance: f64,
    /// No splits beyond this number of vertices. Default: no limit.
    pub max_vertices: usize,
    /// Rounds of smoothing of the neighbourhoods of edits. Default 3; 0 turns smoothing off.
    pub smoothing_rounds: usize,
    /// Vertices that must survive and stay where they are. Rim vertices always do.
    pub keep: Vec<u32>,
    /// What no single edit may do.
    pub limits: EditLimits,
    /// Even out, over the whole surface, the small density errors that changes of the polyhedron's area leave
    /// (default). Otherwise amounts only move within the neighbourhood of an edit.
    pub even_out: bool,
}

impl Default for RemeshOptions {
    fn default() -> Self {
        Self {
            split_above: 1.4,
            collapse_below: 0.6,
            flip_tolerance: 0.02,
            max_vertices: usize::MAX,
            smoothing_rounds: 3,
            keep: Vec::new(),
            limits: EditLimits::default(),
            even_out: true,
        }
    }
}

/// A remeshed surface and how it came about.
#[derive(Clone, Debug, PartialEq)]
pub struct RemeshOutcome {
    /// The new mesh: surviving vertices in their old order, then new ones.
    pub mesh: Mesh,
    /// What its vertices carry.
    pub data: VertexData,
    /// Wanted edge length at its vertices, as it was used (matched to the rim, interpolated).
    pub target_edge: Vec<f64>,
    /// New index of each vertex of [`RemeshOptions::keep`].
    pub kept: Vec<u32>,
    /// Number of splits.
    pub splits: usize,
    /// Number of collapses.
    pub collapses: usize,
    /// Number of flips.
    pub flips: usize,
    /// Number of tangential moves.
    pub moves: usize,
    /// New index of each old vertex, `None` if it was removed. Survivors may have moved.
    pub old_to_new: Vec<Option<u32>>,
}

impl RemeshOutcome {
    /// Whether anything changed.
    pub fn changed(&self) -> bool {
        self.splits + self.collapses + self.flips + self.moves > 0
    }
}

/// Bring the edges of a surface to wanted lengths.
///
/// Edges longer than `split_above` × wanted are split, edges shorter than `collapse_below` × wanted
/// collapsed, the mesh is kept Delaunay by flips, and the neighbourhoods of edits are smoothed along the
/// surface. New places lie on the surface that the vertices around suggest, to third order in the edge
/// length. Rim vertices and rim edges stay as they are; near a rim the wanted lengths are bent towards those
/// of the rim's edges. Right after a call, a second one finds (almost) nothing to do.
///
/// `data`: one entry per vertex in each list; amounts are conserved to rounding, their ratios to the lipids (the
/// first amount) stay within the bounds they had, and the density lipids/area stays that of the old mesh up
/// to one factor per connected piece, in which the change of the polyhedron's area shows. `target_edge`:
/// wanted edge length at each vertex, for example from [`sizing_field`].
///
/// # Errors
/// Defects of the mesh as in [`crate::Topology::new`]; [`MeshError::Impossible`] for lists of a wrong length,
/// values out of range, or thresholds that would undo each other.
pub fn remesh(
    mesh: &Mesh,
    data: &VertexData,
    target_edge: &[f64],
    options: &RemeshOptions,
) -> Result<RemeshOutcome, MeshError> {
    if !(options.collapse_below >= 0.0 && 2.0 * options.collapse_below < options.split_above) {
        return Err(MeshError::Impossible {
            quantity: "collapse threshold over split threshold",
            value: options.collapse_below / options.split_above,
            mend: "it must be below one half, or splits and collapses would undo each other".into(),
        });
    }
    let mut edit = EditMesh::new(
        mesh,
        data.clone(),
        target_edge.to_vec(),
        &options.keep,
        options.limits.clone(),
    )?;
    edit.match_targets_to_rim();
    let counts = run(&mut edit, options);
    let mut edited = edit.finish();
    if options.even_out && (counts != Counts::default()) {
        spread::even_out(&edited.mesh, &mut edited.data, &edited.density);
    }
    let kept = options
        .keep
        .iter()
        .filter_map(|&v| edited.old_to_new[v as usize])
        .collect();
    Ok(RemeshOutcome {
        mesh: edited.mesh,
        data: edited.data,
        target_edge: edited.target_edge,
        kept,
        splits: counts.splits,
        collapses: counts.collapses,
        flips: counts.flips,
        moves: counts.moves,
        old_to_new: edited.old_to_new,
    })
}

#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
struct Counts {
    splits: usize,
    collapses: usize,
    flips: usize,
    moves: usize,
}

/// Splits, collapses and flips until there is nothing to do; then smoothing, which may make some more
/// necessary.
fn run(edit: &mut EditMesh, options: &RemeshOptions) -> Counts {
    const MOST_PASSES: usize = 20;
    let mut counts = Counts {
        flips: edit.flip_all(options.flip_tolerance),
        ..Counts::default()
    };
    // A collapse must not make an edge that asks for a split.
    let longest = 0.95 * options.split_above;
    let mut rounds = 0;
    for _ in 0..MOST_PASSES {
        let splits = edit.split_long(options.split_above, options.max_vertices);
        counts.flips += edit.flip_all(options.flip_tolerance);
        let collapses = edit.collapse_short(options.collapse_below, longest);
        counts.flips += edit.flip_all(options.flip_tolerance);
        counts.splits += splits;
        counts.collapses += collapses;
        if splits + collapses == 0 {
            if rounds >= options.smoothing_rounds {
                break;
            }
            rounds += 1;
            let moves = edit.smooth_touched(0.5);
            counts.flips += edit.flip_all(options.flip_tolerance);
            counts.moves += moves;
            if moves == 0 {
                break;
            }
        }
    }
    counts
}
