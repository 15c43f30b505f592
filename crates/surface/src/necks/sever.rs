//! Severing a neck: a band round it is taken out, and both holes are closed by domes.
//!
//! The band is as long as the neck is wide and the domes are nearly hemispheres, so the area stays nearly the same.
//! Whatever the vertices carry stays on its side of the neck: the amounts of each new piece add up to what its
//! vertices had before.

use super::Neck;
use super::cap::{Dome, Rim};
use super::distance::{Distance, march};
use super::verify::starts;
use super::walk::{Loop, ends};
use crate::geometry::Geometry;
use crate::remesh::{VertexData, match_total};
use crate::{Mesh, MeshError, Topology, Vec3, contact};
use std::collections::{HashMap, HashSet};

/// Half widths of the band to try, in units of the neck's radius.
const BANDS: [f64; 4] = [1.0, 0.6, 0.3, 0.0];
/// Height of a dome in units of its radius, and of the gap between both holes at most.
const HEIGHT: f64 = 0.6;
const GAP: f64 = 0.35;
/// Rounds in which what hangs loosely on a rim is taken away.
const ROUNDS: usize = 20;
/// Fewest vertices of a side.
const LEAST_VERTICES: usize = 12;
/// Fewest vertices of a rim.
const LEAST_RIM: usize = 5;

/// A surface with a neck severed.
#[derive(Clone, Debug, PartialEq)]
pub struct Severed {
    /// The mesh: surviving vertices in their old order, then those of the domes.
    pub mesh: Mesh,
    /// What its vertices carry.
    pub data: VertexData,
    /// New index of each old vertex, `None` if it was in the band.
    pub old_to_new: Vec<Option<u32>>,
    /// Old vertex that each new one takes after (itself where it survived).
    pub model: Vec<u32>,
}

/// Sever a neck. `None` when the mesh round it is too coarse or too tangled: a later step may do better.
///
/// # Shapes and units
/// `topology` and `geometry` must belong to `mesh`, the neck as well (see [`super::find`]); `data` has one entry per
/// vertex in each list.
///
/// # Errors
/// [`MeshError::Impossible`] for lists of a wrong length or lipid amounts that are not positive.
pub fn sever(
    mesh: &Mesh,
    topology: &Topology,
    geometry: &Geometry,
    neck: &Neck,
    data: &VertexData,
) -> Result<Option<Severed>, MeshError> {
    data.check(mesh.n_vertices())?;
    let Some(curve) = loop_of(topology, neck) else {
        return Ok(None);
    };
    let Some((from, crossed)) = starts(mesh, topology, &curve) else {
        return Ok(None);
    };
    let distance = march(mesh, topology, &from);
    let crossings_before = contact::intersections(mesh).len();
    for band in BANDS {
        let cut = Cut { mesh, topology, geometry, distance: &distance, crossed: &crossed, data };
        let severed = cut.attempt(band * neck.radius);
        if let Some(severed) = severed
            && contact::intersections(&severed.mesh).len() <= crossings_before
        {
            return Ok(Some(severed));
        }
    }
    Ok(None)
}

/// The half-edges that a neck's loop runs through.
fn loop_of(topology: &Topology, neck: &Neck) -> Option<Loop> {
    let mut curve = Loop::default();
    for crossing in &neck.crossings {
        let around = topology.vertex_triangles.of(crossing.right as usize);
        let half_edge = around
            .iter()
            .flat_map(|&t| [3 * t, 3 * t + 1, 3 * t + 2])
            .find(|&h| ends(topology, h) == (crossing.right, crossing.left))?;
        curve.through.push(half_edge);
        curve.at.push(crossing.share);
    }
    Some(curve)
}

/// A neck about to be severed.
struct Cut<'a> {
    mesh: &'a Mesh,
    topology: &'a Topology,
    geometry: &'a Geometry,
    distance: &'a Distance,
    crossed: &'a HashSet<u32>,
    data: &'a VertexData,
}

impl Cut<'_> {
    fn attempt(&self, width: f64) -> Option<Severed> {
        let (kept, rims) = self.open(width)?;
        let n = self.mesh.n_vertices();
        let mut used = vec![false; n];
        for (t, _) in kept.iter().enumerate().filter(|(_, kept)| **kept) {
            self.topology.triangles[t].iter().for_each(|&v| used[v as usize] = true);
        }
        let mut old_to_new = vec![None; n];
        let mut model = Vec::new();
        for v in (0..n).filter(|&v| used[v]) {
            old_to_new[v] = Some(model.len() as u32);
            model.push(v as u32);
        }
        let new = |v: u32| old_to_new[v as usize];
        let mut mesh = Mesh {
            positions: model.iter().map(|&v| self.mesh.positions[v as usize]).collect(),
            triangles: Vec::new(),
            period: self.mesh.period,
        };
        for (t, _) in kept.iter().enumerate().filter(|(_, kept)| **kept) {
            let [a, b, c] = self.topology.triangles[t];
            mesh.triangles.push([new(a)?, new(b)?, new(c)?]);
        }
        let mut round: Vec<Vec<u32>> = Vec::new();
        for rim in &rims {
            round.push(rim.iter().map(|&v| new(v)).collect::<Option<_>>()?);
        }
        even_rims(&mut mesh, &round);
        let holes: Vec<Rim> = round
            .iter()
            .map(|rim| {
                let first = mesh.positions[rim[0] as usize];
                Rim::new(rim.iter().map(|&v| mesh.nearest_image(mesh.positions[v as usize] - first)).collect())
            })
            .collect::<Option<_>>()?;
        let middle = |k: usize| mesh.positions[round[k][0] as usize] + holes[k].centre;
        let gap = mesh.nearest_image(middle(1) - middle(0)).norm();
        let mut domes = Vec::new();
        for (rim, hole) in round.iter().zip(&holes) {
            let dome = hole.dome((HEIGHT * hole.radius()).min(GAP * gap));
            let first = mesh.positions[rim[0] as usize];
            let (k, offset) = (rim.len() as u32, mesh.positions.len() as u32);
            let name = |v: u32| if v < k { rim[v as usize] } else { offset + v - k };
            mesh.triangles.extend(dome.triangles.iter().map(|corners| corners.map(name)));
            for vertex in &dome.vertices {
                mesh.positions.push(first + vertex.place);
                model.push(model[rim[vertex.beside.0] as usize]);
            }
            domes.push(dome);
        }
        let topology = Topology::new(mesh.n_vertices(), &mesh.triangles).ok()?;
        let whole = topology.euler_characteristic() == self.topology.euler_characteristic() + 2
            && topology.rim_edges.len() == self.topology.rim_edges.len();
        let data = if whole { self.deal(&mesh, &topology, &old_to_new, &round, &domes)? } else { return None };
        Some(Severed { mesh, data, old_to_new, model })
    }

    /// Which triangles stay when everything nearer to the loop than `width` goes, and both new rims, each seen from
    /// outside its hole counter-clockwise.
    fn open(&self, width: f64) -> Option<(Vec<bool>, [Vec<u32>; 2])> {
        let topology = self.topology;
        let mut gone: Vec<bool> = self.distance.value.iter().map(|d| *d < width).collect();
        for _ in 0..ROUNDS {
            let mut kept: Vec<bool> = (0..topology.triangles.len())
                .map(|t| {
                    !self.crossed.contains(&(t as u32)) && topology.triangles[t].iter().all(|&v| !gone[v as usize])
                })
                .collect();
            self.drop_islands(&mut kept);
            let (next, loose) = self.rim_edges(&kept)?;
            if loose.is_empty() {
                let rims = trace(&next)?;
                let side = |rim: &Vec<u32>| {
                    let label = self.distance.label[rim[0] as usize];
                    rim.iter().all(|&v| self.distance.label[v as usize] == label).then_some(label)
                };
                let mut count = [0; 2];
                let mut seen = HashSet::new();
                for (t, _) in kept.iter().enumerate().filter(|(_, kept)| **kept) {
                    for &v in topology.triangles[t].iter().filter(|v| seen.insert(**v)) {
                        if let Some(c) = count.get_mut(self.distance.label[v as usize] as usize) {
                            *c += 1;
                        }
                    }
                }
                let sound = side(&rims[0])? != side(&rims[1])?
                    && rims.iter().all(|rim| rim.len() >= LEAST_RIM)
                    && count.iter().all(|c| *c >= LEAST_VERTICES);
                return sound.then_some((kept, rims));
            }
            for v in loose {
                gone[v as usize] = true;
            }
        }
        None
    }

    /// Keep the largest connected part of each side, and pieces that the neck does not belong to.
    fn drop_islands(&self, kept: &mut [bool]) {
        let topology = self.topology;
        let mut sets = petgraph::unionfind::UnionFind::<u32>::new(topology.n_vertices);
        for (t, _) in kept.iter().enumerate().filter(|(_, kept)| **kept) {
            let [a, b, c] = topology.triangles[t];
            sets.union(a, b);
            sets.union(b, c);
        }
        let set = sets.into_labeling();
        let mut size: [HashMap<u32, usize>; 2] = Default::default();
        for (t, _) in kept.iter().enumerate().filter(|(_, kept)| **kept) {
            let v = topology.triangles[t][0] as usize;
            if let Some(size) = size.get_mut(self.distance.label[v] as usize) {
                *size.entry(set[v]).or_default() += 1;
            }
        }
        let largest = size.map(|size| size.into_iter().max_by_key(|(set, count)| (*count, *set)).map(|(set, _)| set));
        for (t, kept) in kept.iter_mut().enumerate() {
            let v = topology.triangles[t][0] as usize;
            let far = self.distance.label[v] > 1;
            *kept &= far || largest.contains(&Some(set[v]));
        }
    }

    /// The new rims as steps from vertex to vertex (kept triangles on the right), and vertices that must go because a
    /// rim runs through them twice or a triangle hangs on them by its tip. `None` where the surface's own rim is near.
    fn rim_edges(&self, kept: &[bool]) -> Option<(HashMap<u32, u32>, Vec<u32>)> {
        let topology = self.topology;
        let mut next = HashMap::new();
        let (mut loose, mut triangles) = (Vec::new(), vec![0u32; topology.n_vertices]);
        for (t, _) in kept.iter().enumerate().filter(|(_, kept)| **kept) {
            topology.triangles[t].iter().for_each(|&v| triangles[v as usize] += 1);
            for h in 3 * t as u32..3 * t as u32 + 3 {
                let twin = topology.twin[h as usize];
                if twin == crate::mesh::topology::NONE || kept[twin as usize / 3] {
                    continue;
                }
                let (from, to) = ends(topology, h);
                if topology.on_rim[from as usize] || topology.on_rim[to as usize] {
                    return None;
                }
                if next.insert(to, from).is_some() {
                    loose.push(to);
                }
            }
        }
        loose.extend(next.keys().filter(|v| triangles[**v as usize] == 1));
        loose.sort_unstable();
        loose.dedup();
        Some((next, loose))
    }

    /// What the new vertices carry: densities and ratios of the rims, then one factor per piece.
    fn deal(
        &self,
        mesh: &Mesh,
        topology: &Topology,
        old_to_new: &[Option<u32>],
        rims: &[Vec<u32>],
        domes: &[Dome],
    ) -> Option<VertexData> {
        let survivors: Vec<usize> = (0..old_to_new.len()).filter(|&v| old_to_new[v].is_some()).collect();
        let spread = |values: &dyn Fn(usize) -> f64| -> Vec<f64> {
            let mut list: Vec<f64> = survivors.iter().map(|&v| values(v)).collect();
            for (rim, dome) in rims.iter().zip(domes) {
                let on_rim: Vec<f64> = rim.iter().map(|&v| list[v as usize]).collect();
                let mean = on_rim.iter().sum::<f64>() / on_rim.len() as f64;
                list.extend(dome.vertices.iter().map(|vertex| {
                    let (a, b, s) = vertex.beside;
                    let there = on_rim[a] + s * (on_rim[b] - on_rim[a]);
                    mean + vertex.share * (there - mean)
                }));
            }
            list
        };
        let fields = self.data.fields.iter().map(|list| spread(&|v| list[v])).collect();
        let mut amounts = Vec::new();
        if let Some((lipids, others)) = self.data.amounts.split_first() {
            let piece_of_side = [0, 1].map(|side| {
                let rim = rims.iter().find(|rim| {
                    let v = survivors[rim[0] as usize];
                    self.distance.label[v] == side
                });
                rim.map(|rim| topology.piece[rim[0] as usize] as usize)
            });
            // Where the amounts of each old vertex belong now.
            let mut home = Vec::with_capacity(old_to_new.len());
            for (v, new) in old_to_new.iter().enumerate() {
                home.push(match new {
                    Some(new) => topology.piece[*new as usize] as usize,
                    None => (*piece_of_side.get(self.distance.label[v] as usize)?)?,
                });
            }
            let sums = |list: &[f64], home: &dyn Fn(usize) -> usize| {
                let mut sums = vec![0.0; topology.n_pieces];
                list.iter().enumerate().for_each(|(v, x)| sums[home(v)] += x);
                sums
            };
            let now = |v: usize| topology.piece[v] as usize;
            let geometry = Geometry::new(mesh);
            let density = spread(&|v| lipids[v] / self.geometry.vertex_area[v]);
            let mut dealt: Vec<f64> = density.iter().zip(&geometry.vertex_area).map(|(d, a)| d * a).collect();
            let (due, has) = (sums(lipids, &|v| home[v]), sums(&dealt, &now));
            for (v, m) in dealt.iter_mut().enumerate() {
                *m *= due[now(v)] / has[now(v)];
            }
            for list in others {
                let ratio_before: Vec<f64> = list.iter().zip(lipids).map(|(n, m)| n / m).collect();
                let ratio = spread(&|v| ratio_before[v]);
                let due = sums(list, &|v| home[v]);
                let mut amount = vec![0.0; dealt.len()];
                for (piece, due) in due.iter().enumerate() {
                    let members: Vec<usize> = (0..dealt.len()).filter(|&v| now(v) == piece).collect();
                    let mut part: Vec<f64> = members.iter().map(|&v| ratio[v]).collect();
                    let held: Vec<f64> = members.iter().map(|&v| dealt[v]).collect();
                    let within = ratio_before.iter().zip(&home).filter(|(_, p)| **p == piece).map(|(r, _)| *r);
                    let (low, high) =
                        within.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), r| (l.min(r), h.max(r)));
                    match_total(&mut part, &held, *due, low, high);
                    for (&v, (r, m)) in members.iter().zip(part.iter().zip(&held)) {
                        amount[v] = r * m;
                    }
                }
                amounts.push(amount);
            }
            amounts.insert(0, dealt);
        }
        Some(VertexData { amounts, fields })
    }
}

/// Two closed rims out of their steps.
fn trace(next: &HashMap<u32, u32>) -> Option<[Vec<u32>; 2]> {
    let mut left: Vec<u32> = next.keys().copied().collect();
    left.sort_unstable();
    let mut seen = HashSet::new();
    let mut rims = Vec::new();
    for start in left {
        if seen.contains(&start) {
            continue;
        }
        let mut rim = Vec::new();
        let mut v = start;
        while seen.insert(v) {
            rim.push(v);
            v = *next.get(&v)?;
        }
        if v != start {
            return None;
        }
        rims.push(rim);
    }
    rims.try_into().ok()
}

/// Take the zigzag out of rims, unless a triangle beside them would turn over.
fn even_rims(mesh: &mut Mesh, rims: &[Vec<u32>]) {
    let before = mesh.clone();
    for rim in rims {
        let k = rim.len();
        for _ in 0..2 {
            let moves: Vec<Vec3> = (0..k)
                .map(|m| {
                    let (a, b) = (mesh.edge(rim[m], rim[(m + k - 1) % k]), mesh.edge(rim[m], rim[(m + 1) % k]));
                    (a + b) * 0.25
                })
                .collect();
            for (&v, by) in rim.iter().zip(moves) {
                mesh.positions[v as usize] += by;
            }
        }
    }
    let area = |mesh: &Mesh, t: usize| {
        let x = mesh.corners(t);
        (x[1] - x[0]).cross(&(x[2] - x[0]))
    };
    let sound = (0..mesh.n_triangles()).all(|t| {
        let (old, new) = (area(&before, t), area(mesh, t));
        new.dot(&old) > 0.3 * old.norm_squared()
    });
    if !sound {
        *mesh = before;
    }
}
