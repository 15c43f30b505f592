//! Fill-reducing ordering by geometric nested dissection (George, SIAM J. Numer. Anal. 10 (1973)
//! 345).
//!
//! A cut is sought along scalar functions of the nodes: their projections on 13 directions (the
//! axes, face diagonals and space diagonals of a cube) and their graph distance from a far node.
//! For each function every threshold is tried at once: a node p belongs to the separator of
//! threshold t if p ≤ t and one of its neighbours lies above t, so counting the intervals
//! [p, highest neighbour) that contain t sizes all separators in one sweep. As separators come
//! from the graph, they stay valid where coordinates mislead: on a periodic tube the nodes at the
//! seam simply count as part of the cut, which gives the two circles that a ring needs.
//!
//! The chosen separator is then reduced to the smallest one the same crossing edges allow.

use crate::cover::smallest_cover;
use crate::graph::Graph;

/// Pieces of at most this many nodes are not cut further.
const LEAF: usize = 6;
/// Pieces above this size are worth a second task.
const PARALLEL: usize = 400;

const DIRECTIONS: [[f64; 3]; 13] = [
    [1.0, 0.0, 0.0],
    [0.0, 1.0, 0.0],
    [0.0, 0.0, 1.0],
    [1.0, 1.0, 0.0],
    [1.0, -1.0, 0.0],
    [1.0, 0.0, 1.0],
    [1.0, 0.0, -1.0],
    [0.0, 1.0, 1.0],
    [0.0, 1.0, -1.0],
    [1.0, 1.0, 1.0],
    [1.0, 1.0, -1.0],
    [1.0, -1.0, 1.0],
    [1.0, -1.0, -1.0],
];

/// Where a node lies with respect to a cut.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Side {
    Below,
    Above,
    Separator,
}

/// A part of the graph, renumbered from zero.
struct Piece {
    graph: Graph,
    points: Vec<[f64; 3]>,
    /// Original number of each node.
    names: Vec<u32>,
}

/// Elimination order of the nodes: entry k is the node eliminated k-th.
pub(crate) fn nested_dissection(graph: &Graph, points: &[[f64; 3]]) -> Vec<u32> {
    let nodes = graph.nodes();
    let mut order = vec![0; nodes];
    let piece = Piece {
        graph: graph.clone(),
        points: points.to_vec(),
        names: (0..nodes as u32).collect(),
    };
    dissect(piece, &mut order);
    order
}

/// Writes the order of `piece`: below, above, separator last.
fn dissect(piece: Piece, order: &mut [u32]) {
    let nodes = piece.names.len();
    let sides = if nodes > LEAF { cut(&piece) } else { None };
    let Some(sides) = sides else {
        order.copy_from_slice(&piece.names);
        return;
    };
    let below = extract(&piece, &sides, Side::Below);
    let above = extract(&piece, &sides, Side::Above);
    let (lower, rest) = order.split_at_mut(below.names.len());
    let (upper, last) = rest.split_at_mut(above.names.len());
    let separator = (0..nodes).filter(|&k| sides[k] == Side::Separator);
    for (place, node) in last.iter_mut().zip(separator) {
        *place = piece.names[node];
    }
    drop(piece);
    if nodes > PARALLEL {
        rayon::join(|| dissect(below, lower), || dissect(above, upper));
    } else {
        dissect(below, lower);
        dissect(above, upper);
    }
}

/// The nodes on one side with the edges among them.
fn extract(piece: &Piece, sides: &[Side], side: Side) -> Piece {
    let mut number = vec![u32::MAX; sides.len()];
    let mut kept = Vec::new();
    for (node, &s) in sides.iter().enumerate() {
        if s == side {
            number[node] = kept.len() as u32;
            kept.push(node);
        }
    }
    let mut start = Vec::with_capacity(kept.len() + 1);
    start.push(0);
    let mut neighbours = Vec::new();
    for &node in &kept {
        let inside = piece.graph.neighbours(node).iter().map(|&k| number[k as usize]);
        neighbours.extend(inside.filter(|&k| k != u32::MAX));
        start.push(neighbours.len() as u32);
    }
    Piece {
        graph: Graph { start, neighbours },
        points: kept.iter().map(|&k| piece.points[k]).collect(),
        names: kept.iter().map(|&k| piece.names[k]).collect(),
    }
}

/// A candidate: nodes in the order of some function, cut after the `threshold` lowest.
struct Candidate {
    cost: f64,
    ranks: Vec<u32>,
    threshold: usize,
}

/// The cheapest cut found, or none if the piece is too dense to be separated.
fn cut(piece: &Piece) -> Option<Vec<Side>> {
    let nodes = piece.names.len();
    let mut best: Option<Candidate> = None;
    let mut keys = Vec::with_capacity(nodes);
    for direction in &DIRECTIONS {
        keys.clear();
        keys.extend(
            piece
                .points
                .iter()
                .zip(0_u32..)
                .map(|(x, k)| (x[0] * direction[0] + x[1] * direction[1] + x[2] * direction[2], k)),
        );
        sweep(&piece.graph, &mut keys, &mut best);
    }
    keys.clear();
    keys.extend(distances(&piece.graph).into_iter().zip(0..));
    sweep(&piece.graph, &mut keys, &mut best);
    let best = best?;
    let sides = smallest_cover(&piece.graph, &best.ranks, best.threshold);
    let count = |side| sides.iter().filter(|&&s| s == side).count();
    (count(Side::Below) > 0 && count(Side::Above) > 0).then_some(sides)
}

/// Sizes the separators of all thresholds along the function `keys` and keeps the best.
fn sweep(graph: &Graph, keys: &mut [(f64, u32)], best: &mut Option<Candidate>) {
    let nodes = keys.len();
    keys.sort_unstable_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
    let mut ranks = vec![0_u32; nodes];
    for (rank, &(_, node)) in keys.iter().enumerate() {
        ranks[node as usize] = rank as u32;
    }
    // Change of the separator's size from threshold t − 1 to t, for the separator taken from
    // the nodes below and for the one taken from those above.
    let mut below = vec![0_i32; nodes + 1];
    let mut above = vec![0_i32; nodes + 1];
    for node in 0..nodes {
        let rank = ranks[node];
        let (mut lowest, mut highest) = (rank, rank);
        for &k in graph.neighbours(node) {
            lowest = lowest.min(ranks[k as usize]);
            highest = highest.max(ranks[k as usize]);
        }
        // Threshold t puts ranks < t below. In the separator if rank < t ≤ highest …
        below[rank as usize + 1] += 1;
        below[highest as usize + 1] -= 1;
        // … or if lowest < t ≤ rank.
        above[lowest as usize + 1] += 1;
        above[rank as usize + 1] -= 1;
    }
    let (mut size_below, mut size_above) = (0, 0);
    let margin = nodes / 4;
    let mut found = None;
    for threshold in 1..nodes {
        size_below += below[threshold];
        size_above += above[threshold];
        if threshold < margin || threshold > nodes - margin {
            continue;
        }
        let size = size_below.min(size_above) as usize;
        let cost = cost(size, threshold, nodes);
        if best.as_ref().is_none_or(|b| cost < b.cost)
            && found.is_none_or(|(c, _)| cost < c)
        {
            found = Some((cost, threshold));
        }
    }
    if let Some((cost, threshold)) = found {
        *best = Some(Candidate {
            cost,
            ranks,
            threshold,
        });
    }
}

/// Size of the separator, made dearer by imbalance.
fn cost(separator: usize, threshold: usize, nodes: usize) -> f64 {
    let tilt = 2.0 * threshold as f64 / nodes as f64 - 1.0;
    separator as f64 * (1.0 + tilt * tilt)
}

/// Graph distance of every node from one that is far from most; components follow one another.
fn distances(graph: &Graph) -> Vec<f64> {
    let nodes = graph.nodes();
    let mut level = vec![u32::MAX; nodes];
    let mut queue: Vec<u32> = Vec::with_capacity(nodes);
    let mut next_level = 0;
    for seed in 0..nodes {
        if level[seed] != u32::MAX {
            continue;
        }
        // Two searches to get from the seed to a far end, the third counts.
        let begin = queue.len();
        let mut start = seed as u32;
        for round in 0..3 {
            for &node in &queue[begin..] {
                level[node as usize] = u32::MAX;
            }
            queue.truncate(begin);
            level[start as usize] = next_level;
            queue.push(start);
            let mut head = begin;
            while head < queue.len() {
                let node = queue[head] as usize;
                head += 1;
                for &k in graph.neighbours(node) {
                    if level[k as usize] == u32::MAX {
                        level[k as usize] = level[node] + 1;
                        queue.push(k);
                    }
                }
            }
            if round < 2
                && let Some(&last) = queue.last()
            {
                start = last;
            }
        }
        next_level = queue.last().map_or(0, |&last| level[last as usize] + 1);
    }
    level.into_iter().map(f64::from).collect()
}
