//! Whether a loop is shorter than the fronts of equal distance on both of its sides.

use super::distance::{Distance, march};
use super::walk::{Loop, ends, follow};
use super::{BREADTH, DIP, FLARE, PROMINENCE, TUBE};
use crate::geometry::Geometry;
use crate::{Mesh, Topology, Vec3};
use std::collections::{HashMap, HashSet};
use std::f64::consts::{PI, TAU};

/// Distance between fronts in units of the loop's radius.
const SPACING: f64 = 0.2;
/// Most fronts measured on a side.
const MOST_FRONTS: usize = 500;

/// Largest angle between the axis of a loop and the way to the centre of a front that does not lean [rad].
const LEAN: f64 = 0.12;

/// What a loop turns out to be.
pub(super) enum Verdict {
    /// A neck, or the thinnest place of a tube.
    Neck {
        /// Area on the left and on the right.
        side_area: [f64; 2],
        /// Vertices between the first wider fronts on both sides.
        region: Vec<u32>,
    },
    /// There is a shorter front not far from it: this one.
    Shorter(Loop),
    /// Neither.
    Nothing,
}

/// How the fronts on one side go on.
#[derive(Default)]
struct Side {
    /// Distance of the first front longer by the prominence, if it comes before a shorter one.
    wider: Option<f64>,
    /// Largest length before the first shorter front, relative to the loop's.
    flare: f64,
    /// Distance up to which fronts are neither longer nor shorter.
    reach: f64,
    /// Distance of the shortest front before they become longer again, if they do.
    shortest: Option<f64>,
}

/// Judge a loop. `tube`: whether its end may be thinner than itself.
pub(super) fn verify(
    mesh: &Mesh,
    topology: &Topology,
    geometry: &Geometry,
    curve: &Loop,
    length: f64,
    tube: bool,
) -> Verdict {
    let radius = length / TAU;
    let Some((starts, crossed)) = starts(mesh, topology, curve) else {
        return Verdict::Nothing;
    };
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
    let sphere_radius = side_area.map(|area| (area / (4.0 * PI)).sqrt());
    let spacing = SPACING * radius;
    let fronts = front_lengths(mesh, topology, &distance.value, &distance.label, &crossed, spacing);
    let sides = [0, 1].map(|side| judge(&fronts[side], length, spacing, rim_at[side]));
    let cut = |&(a, b): &(u32, u32)| distance.label[a as usize] != distance.label[b as usize];
    let as_tube = tube
        // The loop cuts the surface in two.
        && topology.edges().filter(cut).count() == curve.through.len()
        && [(0, 1), (1, 0)].iter().any(|&(flared, other): &(usize, usize)| {
            sides[flared].flare >= FLARE
                && sides[other].wider.is_none()
                && sides[other].shortest.is_none()
                && sphere_radius[other].is_finite()
                && sphere_radius[other] >= TUBE * radius
        });
    if !as_tube {
        for side in 0..2 {
            if sides[side].wider.is_none() {
                return sides[side]
                    .shortest
                    .and_then(|level| front(topology, &distance, side, level))
                    .map_or(Verdict::Nothing, Verdict::Shorter);
            }
        }
        let flared = sides.iter().all(|side| side.flare >= FLARE);
        if radius > BREADTH * sphere_radius[0].min(sphere_radius[1])
            || !(flared || (0..2).all(|side| upright(mesh, topology, &distance, side, &sides[side], curve)))
        {
            return Verdict::Nothing;
        }
    }
    let region = (0..topology.n_vertices)
        .filter(|&v| {
            let side = distance.label[v] as usize;
            side <= 1 && distance.value[v] <= sides[side].wider.unwrap_or(sides[side].reach) + spacing
        })
        .map(|v| v as u32)
        .collect();
    Verdict::Neck { side_area, region }
}

/// Distance on one side, its negative on the other.
fn signed(distance: &Distance, side: usize) -> Vec<f64> {
    distance
        .value
        .iter()
        .zip(&distance.label)
        .map(|(d, label)| if *label as usize == side { *d } else { -d })
        .collect()
}

/// A front on one side at a distance; `None` when there is none, or it ends in a rim.
fn front(topology: &Topology, distance: &Distance, side: usize, level: f64) -> Option<Loop> {
    let field = signed(distance, side);
    let start = (0..topology.twin.len() as u32).find(|&h| {
        let (a, b) = ends(topology, h);
        let (low, high) = (field[a as usize], field[b as usize]);
        low > 0.0 && low < level && level <= high
    });
    follow(topology, &field, level, start?)
}

/// Whether the first longer front of a side lies along the axis of the loop.
///
/// Fronts on a bent tube of even width stay parallel to the loop they started from and become longer only because
/// the tube leans: by 5 % where it has turned by 0.45 rad, half of which is the angle to the front's centre.
fn upright(mesh: &Mesh, topology: &Topology, distance: &Distance, side: usize, judged: &Side, curve: &Loop) -> bool {
    let Some(front) = judged.wider.and_then(|level| front(topology, distance, side, level)) else {
        return true;
    };
    let (centre, axis) = curve.centre_and_axis(mesh, topology);
    let way = mesh.nearest_image(front.centre_and_axis(mesh, topology).0 - centre);
    let angle = axis.angle(&way);
    angle.min(PI - angle) <= LEAN
}

/// Starting distances of the corners of the triangles that a loop runs through, labelled 0 left, 1 right, and for
/// each such triangle its index. `None` when a vertex lies on both sides.
#[allow(clippy::type_complexity)]
pub(super) fn starts(
    mesh: &Mesh,
    topology: &Topology,
    curve: &Loop,
) -> Option<(Vec<(u32, f64, u8)>, HashSet<u32>)> {
    let mut side: HashMap<u32, u8> = HashMap::new();
    for &h in &curve.through {
        let (right, left) = ends(topology, h);
        if *side.entry(left).or_insert(0) != 0 || *side.entry(right).or_insert(1) != 1 {
            return None;
        }
    }
    let n = curve.through.len();
    let mut starts = Vec::with_capacity(3 * n);
    let mut crossed = HashSet::with_capacity(n);
    for k in 0..n {
        let t = curve.through[k] / 3;
        crossed.insert(t);
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
    crossed: &HashSet<u32>,
    spacing: f64,
) -> [Vec<f64>; 2] {
    let farthest = distance.iter().copied().filter(|d| d.is_finite()).fold(0.0, f64::max);
    let count = ((farthest / spacing).ceil() as usize).min(MOST_FRONTS);
    let mut lengths = [vec![0.0; count], vec![0.0; count]];
    for (t, corners) in topology.triangles.iter().enumerate() {
        let x = mesh.corners(t);
        let sides = corners.map(|v| label[v as usize]);
        let split = crossed.contains(&(t as u32));
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
    let mut side = Side::default();
    let mut least = (f64::INFINITY, 0.0);
    for (k, front) in fronts.iter().enumerate() {
        let s = (k + 1) as f64 * spacing;
        // Beyond a rim the surface is as wide as its frame.
        let ratio = if s >= rim_at { f64::INFINITY } else { front / length };
        if ratio < 1.0 - DIP || least.0 < 1.0 {
            if side.wider.is_some() {
                break;
            }
            // Shorter fronts: on to where they grow again.
            if ratio < least.0 {
                least = (ratio, s);
            } else if ratio > least.0 * (1.0 + PROMINENCE) {
                side.shortest = Some(least.1);
                break;
            }
            continue;
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
