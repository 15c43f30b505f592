//! Fronts of equal distance and the places where their length is least.

use super::distance::Distance;
use super::walk::{Loop, before, ends, follow};
use super::{Candidate, TUBE};
use crate::geometry::Geometry;
use crate::{Mesh, Topology};
use petgraph::unionfind::UnionFind;
use std::f64::consts::PI;

/// Least ratio of the next maximum to a minimum of front length that makes a candidate.
const RIDGE: f64 = 1.03;

/// One connected front.
struct Band {
    /// The front; `None` at its starting point and where it runs into a rim.
    curve: Option<Loop>,
    /// Its length; 0 at a point, infinite into a rim.
    length: f64,
    /// Area of the vertices nearer than it.
    area: f64,
}

/// Vertices farther than all others within two edges, farthest first.
pub(super) fn summits(topology: &Topology, distance: &[f64]) -> Vec<u32> {
    let lower = |v: u32, than: usize| distance[v as usize] <= distance[than];
    let mut summits: Vec<u32> = (0..topology.n_vertices)
        .filter(|&v| {
            topology.neighbours.of(v).iter().all(|&u| {
                lower(u, v) && topology.neighbours.of(u as usize).iter().all(|&w| lower(w, v))
            })
        })
        .map(|v| v as u32)
        .collect();
    summits.sort_by(|&a, &b| distance[b as usize].total_cmp(&distance[a as usize]).then(a.cmp(&b)));
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
            let curve = inward.and_then(|h| follow(topology, value, level, h));
            let length = match (&curve, inward) {
                (Some(curve), _) => curve.length(mesh, topology),
                (None, Some(_)) => f64::INFINITY,
                (None, None) => 0.0,
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
