//! Fronts of equal distance and the places where their length is least.

use super::distance::Distance;
use super::walk::{Loop, before, ends, follow};
use super::{Candidate, TUBE};
use crate::geometry::Geometry;
use crate::{Mesh, Topology, Vec3};
use petgraph::unionfind::UnionFind;
use std::collections::HashSet;
use std::f64::consts::PI;

/// Least ratio of the next maximum to a minimum of front length that makes a candidate.
const RIDGE: f64 = 1.03;

/// One connected front.
struct Band {
    /// The front; `None` at a single vertex and where it runs into a rim.
    curve: Option<Loop>,
    /// Its length; 0 at a point, infinite into a rim.
    length: f64,
    /// Area of the vertices nearer than it.
    area: f64,
}

/// Edges that a summit of distance must rise over the pass to a higher one.
const RISE: f64 = 2.0;

/// Summits of distance, farthest first, without those of the mesh's making.
///
/// Vertices join in the order of falling distance; when two hills meet, the lower summit counts if it rises over
/// the pass by [`RISE`] local edges.
pub(super) fn summits(mesh: &Mesh, topology: &Topology, distance: &Distance) -> Vec<u32> {
    let n = topology.n_vertices;
    let mut hills = UnionFind::<u32>::new(n);
    let mut top: Vec<u32> = (0..n as u32).collect();
    let mut seen = vec![false; n];
    let mut summits: Vec<u32> = distance.order.last().copied().into_iter().collect();
    for &v in distance.order.iter().rev() {
        seen[v as usize] = true;
        for &u in topology.neighbours.of(v as usize).iter().filter(|&&u| seen[u as usize]) {
            let (a, b) = (hills.find(u), hills.find(v));
            if a == b {
                continue;
            }
            let (mut high, mut low) = (top[a as usize], top[b as usize]);
            if distance.value[high as usize] < distance.value[low as usize] {
                std::mem::swap(&mut high, &mut low);
            }
            let around = topology.neighbours.of(low as usize);
            let edge: f64 = around.iter().map(|&w| mesh.edge(low, w).norm()).sum::<f64>() / around.len() as f64;
            if distance.value[low as usize] - distance.value[v as usize] >= RISE * edge {
                summits.push(low);
            }
            hills.union(a, b);
            top[hills.find(a) as usize] = high;
        }
    }
    summits.sort_by(|&a, &b| {
        distance.value[b as usize].total_cmp(&distance.value[a as usize]).then(a.cmp(&b))
    });
    summits
}

/// Loops that might be necks, shortest first.
pub(super) fn candidates(
    mesh: &Mesh,
    topology: &Topology,
    geometry: &Geometry,
    distance: &Distance,
) -> Vec<Candidate> {
    let (band_of, mut bands) = bands(mesh, topology, geometry, distance);
    let mut chosen = minima(topology, &band_of, &bands);
    let tube = (0..bands.len())
        .filter(|&b| {
            let Band { length, area, .. } = bands[b];
            // Area of a sphere of TUBE times the radius length/2π.
            length > 0.0 && length.is_finite() && area >= TUBE * TUBE * length * length / PI
        })
        .min_by(|&a, &b| bands[a].length.total_cmp(&bands[b].length));
    chosen.sort_by(|&a, &b| bands[a].length.total_cmp(&bands[b].length));
    let mut taken: Vec<Candidate> = chosen
        .into_iter()
        .filter(|b| Some(*b) != tube)
        .filter_map(|b| bands[b].curve.clone())
        .map(|curve| Candidate { curve, tube: false })
        .collect();
    if let Some(curve) = tube.and_then(|b| bands[b].curve.take()) {
        taken.push(Candidate { curve, tube: true });
    }
    taken
}

/// Cross-sections of a periodic tube at right angles to its axis that are shorter than others near them.
///
/// Fronts from a point of a wide tube may go once round the period before they go round the tube.
pub(super) fn cross_sections(mesh: &Mesh, topology: &Topology, period: f64) -> Vec<Candidate> {
    // Two per edge: saddle points of the mesh hold a curve up before it finds a waist much farther away.
    let count = (2.0 * period / mesh.mean_edge_length()).ceil().max(8.0) as usize;
    let sections: Vec<Option<(f64, Loop)>> = (0..count)
        .map(|k| {
            let level = period * k as f64 / count as f64;
            let height: Vec<f64> = mesh
                .positions
                .iter()
                .map(|x| mesh.nearest_image(Vec3::new(0.0, 0.0, x.z - level)).z)
                .collect();
            let mut seen: HashSet<u32> = HashSet::new();
            let mut longest: Option<(f64, Loop)> = None;
            for h in 0..topology.twin.len() as u32 {
                let (a, b) = ends(topology, h);
                let (low, high) = (height[a as usize], height[b as usize]);
                // Not where the height jumps from +½ to −½ period.
                let crosses = low < 0.0 && high >= 0.0 && high - low < 0.5 * period;
                if !crosses || seen.contains(&h) {
                    continue;
                }
                let curve = follow(topology, &height, 0.0, h)?;
                seen.extend(&curve.through);
                let length = curve.length(mesh, topology);
                if longest.as_ref().is_none_or(|(known, _)| length > *known) {
                    longest = Some((length, curve));
                }
            }
            longest
        })
        .collect();
    let length = |k: usize| sections[k % count].as_ref().map_or(f64::INFINITY, |(length, _)| *length);
    // Going either way from a shortest section, lengths grow by the ridge before any is shorter.
    let ridge = |k: usize, step: usize| {
        (1..count)
            .map(|d| length(k + d * step))
            .find(|next| *next < length(k) || *next >= RIDGE * length(k))
            .is_some_and(|next| next >= RIDGE * length(k))
    };
    let mut chosen: Vec<(f64, Loop)> = (0..count)
        .filter(|&k| ridge(k, 1) && ridge(k, count - 1))
        .filter_map(|k| sections[k].clone())
        .collect();
    chosen.sort_by(|a, b| a.0.total_cmp(&b.0));
    chosen.into_iter().map(|(_, curve)| Candidate { curve, tube: false }).collect()
}

/// Fronts through vertices in the order of their distance, each standing for the vertices next beyond it.
fn bands(
    mesh: &Mesh,
    topology: &Topology,
    geometry: &Geometry,
    distance: &Distance,
) -> (Vec<u32>, Vec<Band>) {
    const UNSET: u32 = u32::MAX;
    let value = &distance.value;
    let mut band_of = vec![UNSET; topology.n_vertices];
    let mut bands: Vec<Band> = Vec::new();
    let mut area = 0.0;
    for &v in &distance.order {
        if band_of[v as usize] == UNSET {
            let level = value[v as usize];
            let name = bands.len() as u32;
            band_of[v as usize] = name;
            let inward = topology.vertex_triangles.of(v as usize).iter().find_map(|&t| {
                let c = topology.triangles[t as usize].iter().position(|&u| u == v)? as u32;
                let h = before(3 * t + c);
                (value[ends(topology, h).0 as usize] < level).then_some(h)
            });
            let front = inward.map(|h| follow(topology, value, level, h));
            let (curve, length) = match front {
                Some(Some(curve)) if !curve.surrounds_vertex(topology) => {
                    let length = curve.length(mesh, topology);
                    (Some(curve), length)
                }
                Some(None) => (None, f64::INFINITY),
                _ => (None, 0.0),
            };
            for &h in curve.iter().flat_map(|curve| &curve.through) {
                let beyond = ends(topology, h).1 as usize;
                if band_of[beyond] == UNSET {
                    band_of[beyond] = name;
                }
            }
            bands.push(Band { curve, length, area });
        }
        area += geometry.vertex_area[v as usize];
    }
    (band_of, bands)
}

/// Bands of least length that a longer band parts from every shorter one.
///
/// Bands join in the order of their length; when two groups meet, the one with the longer shortest band ends.
fn minima(topology: &Topology, band_of: &[u32], bands: &[Band]) -> Vec<usize> {
    let mut pairs: Vec<(u32, u32)> = topology
        .edges()
        .map(|(i, j)| (band_of[i as usize], band_of[j as usize]))
        .filter(|(a, b)| a != b)
        .map(|(a, b)| (a.min(b), a.max(b)))
        .collect();
    pairs.sort_unstable();
    pairs.dedup();
    let joined_at = |(a, b): (u32, u32)| bands[a as usize].length.max(bands[b as usize].length);
    pairs.sort_by(|&p, &q| joined_at(p).total_cmp(&joined_at(q)).then(p.cmp(&q)));
    let mut groups = UnionFind::<u32>::new(bands.len());
    let mut least: Vec<u32> = (0..bands.len() as u32).collect();
    let mut chosen = Vec::new();
    for pair in pairs {
        let (a, b) = (groups.find(pair.0), groups.find(pair.1));
        if a == b {
            continue;
        }
        let (mut short, mut long) = (least[a as usize], least[b as usize]);
        if bands[short as usize].length > bands[long as usize].length {
            std::mem::swap(&mut short, &mut long);
        }
        if joined_at(pair) >= RIDGE * bands[long as usize].length {
            chosen.push(long as usize);
        }
        groups.union(a, b);
        least[groups.find(a) as usize] = short;
    }
    chosen
}
