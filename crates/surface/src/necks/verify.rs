//! Whether a loop is shorter than the fronts of equal distance on both of its sides.

use super::distance::march;
use super::walk::{Loop, ends};
use super::{BREADTH, DIP, FLARE, PROMINENCE, TUBE};
use crate::geometry::Geometry;
use crate::{Mesh, Topology, Vec3};
use std::collections::HashMap;
use std::f64::consts::{PI, TAU};

/// Distance between fronts in units of the loop's radius.
const SPACING: f64 = 0.2;
/// Most fronts measured on a side.
const MOST_FRONTS: usize = 500;

/// What an accepted loop stands for.
pub(super) struct Verdict {
    /// Area on the left and on the right.
    pub side_area: [f64; 2],
    /// Vertices between the first wider fronts on both sides.
    pub region: Vec<u32>,
}

/// How the fronts on one side go on.
struct Side {
    /// Distance of the first front longer by the prominence, if it comes before a shorter one.
    wider: Option<f64>,
    /// Largest length before the first shorter front, relative to the loop's.
    flare: f64,
    /// Distance up to which fronts are neither longer nor shorter.
    reach: f64,
}

/// `None`: not a neck.
pub(super) fn verify(
    mesh: &Mesh,
    topology: &Topology,
    geometry: &Geometry,
    curve: &Loop,
    length: f64,
    tube: bool,
) -> Option<Verdict> {
    let radius = length / TAU;
    let (starts, crossed) = starts(mesh, topology, curve)?;
    let distance = march(mesh, topology, &starts);
    let mut side_area = [0.0; 2];
    let mut rim_at = [f64::INFINITY; 2];
    for v in 0..topology.n_vertices {
        let side = distance.label[v] as usize;
        if side > 1 {
            continue;
        }
        side_area[side] += geometry.vertex_area[v];
        if topology.on_rim[v] {
            rim_at[side] = rim_at[side].min(distance.value[v]);
        }
    }
    for side in 0..2 {
        if rim_at[side].is_finite() {
            side_area[side] = f64::INFINITY;
        }
    }
    let smaller = (side_area[0].min(side_area[1]) / (4.0 * PI)).sqrt();
    if radius > BREADTH * smaller {
        return None;
    }

    let spacing = SPACING * radius;
    let fronts = front_lengths(mesh, topology, &distance.value, &distance.label, &crossed, spacing);
    let sides = [0, 1].map(|side| judge(&fronts[side], length, spacing, rim_at[side]));
    let both = sides.iter().all(|side| side.wider.is_some());
    let as_tube = tube
        && [(0, 1), (1, 0)].iter().any(|&(flared, other): &(usize, usize)| {
            sides[flared].flare >= FLARE
                && side_area[other].is_finite()
                && (side_area[other] / (4.0 * PI)).sqrt() >= TUBE * radius
        });
    if !both && !as_tube {
        return None;
    }
    let region = (0..topology.n_vertices)
        .filter(|&v| {
            let side = distance.label[v] as usize;
            side <= 1 && distance.value[v] <= sides[side].wider.unwrap_or(sides[side].reach) + spacing
        })
        .map(|v| v as u32)
        .collect();
    Some(Verdict { side_area, region })
}

/// Starting distances of the corners of the triangles that a loop runs through, labelled 0 left, 1 right, and for
/// each such triangle its index. `None` when a vertex lies on both sides.
#[allow(clippy::type_complexity)]
fn starts(
    mesh: &Mesh,
    topology: &Topology,
    curve: &Loop,
) -> Option<(Vec<(u32, f64, u8)>, HashMap<u32, ()>)> {
    let mut side: HashMap<u32, u8> = HashMap::new();
    for &h in &curve.through {
        let (right, left) = ends(topology, h);
        if *side.entry(left).or_insert(0) != 0 || *side.entry(right).or_insert(1) != 1 {
            return None;
        }
    }
    let n = curve.through.len();
    let mut starts = Vec::with_capacity(3 * n);
    let mut crossed = HashMap::with_capacity(n);
    for k in 0..n {
        let t = curve.through[k] / 3;
        crossed.insert(t, ());
        let (p, q) = (curve.point(mesh, topology, (k + n - 1) % n), curve.point(mesh, topology, k));
        let along = mesh.nearest_image(q - p);
        for v in topology.triangles[t as usize] {
            let d = mesh.nearest_image(mesh.positions[v as usize] - p);
            let share = (d.dot(&along) / along.norm_squared().max(f64::MIN_POSITIVE)).clamp(0.0, 1.0);
            starts.push((v, (d - along * share).norm(), side.get(&v).copied()?));
        }
    }
    Some((starts, crossed))
}

/// Total length of the fronts at multiples of `spacing` (from one on), on the left and on the right.
fn front_lengths(
    mesh: &Mesh,
    topology: &Topology,
    distance: &[f64],
    label: &[u8],
    crossed: &HashMap<u32, ()>,
    spacing: f64,
) -> [Vec<f64>; 2] {
    let farthest = distance.iter().copied().filter(|d| d.is_finite()).fold(0.0, f64::max);
    let count = ((farthest / spacing).ceil() as usize).min(MOST_FRONTS);
    let mut lengths = [vec![0.0; count], vec![0.0; count]];
    for (t, corners) in topology.triangles.iter().enumerate() {
        let x = mesh.corners(t);
        let sides = corners.map(|v| label[v as usize]);
        let split = crossed.contains_key(&(t as u32));
        for side in 0..2u8 {
            if split || sides == [side; 3] {
                let value = [0, 1, 2].map(|c| {
                    let d = distance[corners[c] as usize];
                    if sides[c] == side { d } else { -d }
                });
                add_fronts(&x, value, spacing, &mut lengths[side as usize]);
            }
        }
    }
    lengths
}

/// Add the lengths of a triangle's level lines at multiples of `spacing`.
fn add_fronts(x: &[Vec3; 3], value: [f64; 3], spacing: f64, lengths: &mut [f64]) {
    let mut order = [0, 1, 2];
    order.sort_by(|&a: &usize, &b| value[a].total_cmp(&value[b]));
    let [low, middle, high] = order;
    let (a, b, c) = (value[low], value[middle], value[high]);
    if !(c > a) || !c.is_finite() || c <= 0.0 {
        return;
    }
    // The level line through the middle corner is the longest.
    let longest = (x[low] + (x[high] - x[low]) * ((b - a) / (c - a)) - x[middle]).norm();
    let first = (a.max(0.0) / spacing).floor() as usize;
    for k in first..lengths.len() {
        let s = (k + 1) as f64 * spacing;
        if s >= c {
            break;
        }
        if s <= a {
            continue;
        }
        lengths[k] += longest * if s < b { (s - a) / (b - a) } else { (c - s) / (c - b) };
    }
}

fn judge(fronts: &[f64], length: f64, spacing: f64, rim_at: f64) -> Side {
    let mut side = Side {
        wider: None,
        flare: 0.0,
        reach: 0.0,
    };
    for (k, front) in fronts.iter().enumerate() {
        let s = (k + 1) as f64 * spacing;
        // Beyond a rim the surface is as wide as its frame.
        let ratio = if s >= rim_at { f64::INFINITY } else { front / length };
        if ratio < 1.0 - DIP {
            break;
        }
        side.flare = side.flare.max(ratio);
        if ratio >= 1.0 + PROMINENCE && side.wider.is_none() {
            side.wider = Some(s);
        }
        if side.wider.is_none() {
            side.reach = s;
        }
    }
    side
}
