//! Amounts and fields carried through edits.
//!
//! Every edit changes the areas of a few vertices only. Their lipids are pooled and dealt out again in
//! proportion to (carried density × new area), so a uniform density stays uniform up to one factor, the change
//! of the total area. Every other amount keeps its ratio to the lipids at each vertex; what is then missing
//! or left over in the pool (second order in the edge length for a smooth ratio) is spread with a weight that
//! vanishes at the largest and the smallest ratio of the pool, so no ratio leaves its old bounds.

use super::EditMesh;
use crate::MeshError;

/// What the vertices carry: one list per quantity, one entry per vertex.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct VertexData {
    /// Extensive quantities: their sums are kept. The first is the lipid amount (relaxed area), which must be
    /// positive; the others (amount of a phase, bound amount, marker) move with the lipids.
    pub amounts: Vec<Vec<f64>>,
    /// Intensive quantities (tension, velocity components): interpolated linearly.
    pub fields: Vec<Vec<f64>>,
}

impl VertexData {
    /// Check lengths and values.
    ///
    /// # Errors
    /// [`MeshError::Impossible`] if a list has another length than `n_vertices`, an entry is not finite, or a
    /// lipid amount is not positive.
    pub fn check(&self, n_vertices: usize) -> Result<(), MeshError> {
        for list in self.amounts.iter().chain(&self.fields) {
            if list.len() != n_vertices {
                return Err(MeshError::Impossible {
                    quantity: "number of values carried by the vertices",
                    value: list.len() as f64,
                    mend: format!("give one value for each of the {n_vertices} vertices"),
                });
            }
            if let Some(&value) = list.iter().find(|value| !value.is_finite()) {
                return Err(MeshError::Impossible {
                    quantity: "value carried by a vertex",
                    value,
                    mend: "it must be a finite number".into(),
                });
            }
        }
        if let Some(&value) = self
            .amounts
            .first()
            .and_then(|lipids| lipids.iter().find(|&&m| m <= 0.0))
        {
            return Err(MeshError::Impossible {
                quantity: "lipid amount of a vertex",
                value,
                mend: "every vertex needs a positive amount".into(),
            });
        }
        Ok(())
    }

    /// Append a vertex halfway between two others. Amounts are placeholders that fix its ratios; the pool
    /// sets their size.
    pub(super) fn push_between(&mut self, i: usize, j: usize) {
        let lipids = self.amounts.first().map(|m| (m[i], m[j]));
        for (q, list) in self.amounts.iter_mut().enumerate() {
            list.push(match lipids {
                Some((m_i, m_j)) if q > 0 => 0.5 * (list[i] / m_i + list[j] / m_j),
                _ => 1.0,
            });
        }
        for list in &mut self.fields {
            list.push(0.5 * (list[i] + list[j]));
        }
    }

    /// Give vertex `i` the values at a `share` of the way to `j`; amounts as in [`VertexData::push_between`].
    pub(super) fn move_towards(&mut self, i: usize, j: usize, share: f64) {
        let between = |own: f64, other: f64| own + share * (other - own);
        if let Some((lipids, others)) = self.amounts.split_first_mut() {
            for list in others {
                list[i] = between(list[i] / lipids[i], list[j] / lipids[j]);
            }
            lipids[i] = 1.0;
        }
        for list in &mut self.fields {
            list[i] = between(list[i], list[j]);
        }
    }

    /// Give vertex `v` the value of a linear fit: own value plus weighted differences to `others`, kept within
    /// the values there.
    pub(super) fn shift(&mut self, v: usize, others: &[u32], weights: &[f64]) {
        let shifted = |of: &dyn Fn(usize) -> f64| shifted_value(of, v, others, weights);
        if let Some((lipids, rest)) = self.amounts.split_first_mut() {
            for list in rest {
                list[v] = shifted(&|w| list[w] / lipids[w]);
            }
            lipids[v] = 1.0;
        }
        for list in &mut self.fields {
            list[v] = shifted(&|w| list[w]);
        }
    }
}

/// Own value plus weighted differences to others, within the range of all of them.
pub(super) fn shifted_value(
    of: &dyn Fn(usize) -> f64,
    v: usize,
    others: &[u32],
    weights: &[f64],
) -> f64 {
    let own = of(v);
    let (mut value, mut low, mut high) = (own, own, own);
    for (&w, weight) in others.iter().zip(weights) {
        let other = of(w as usize);
        value += weight * (other - own);
        low = low.min(other);
        high = high.max(other);
    }
    value.clamp(low, high)
}

/// Amounts taken out of a group of vertices during one edit.
#[derive(Clone, Debug, Default)]
pub(super) struct Pool {
    total: Vec<f64>,
    /// Smallest and largest ratio to the lipids in the group.
    bounds: Vec<(f64, f64)>,
    lipids: Vec<f64>,
    ratio: Vec<f64>,
}

impl EditMesh {
    /// Note the amounts of a group before an edit.
    pub(super) fn gather(&mut self, group: &[u32]) {
        let (pool, amounts) = (&mut self.pool, &self.data.amounts);
        pool.total.clear();
        pool.bounds.clear();
        let Some(lipids) = amounts.first() else {
            return;
        };
        for list in amounts {
            let (mut total, mut low, mut high) = (0.0, f64::INFINITY, f64::NEG_INFINITY);
            for &v in group {
                let ratio = list[v as usize] / lipids[v as usize];
                total += list[v as usize];
                low = low.min(ratio);
                high = high.max(ratio);
            }
            pool.total.push(total);
            pool.bounds.push((low, high));
        }
    }

    /// Deal the gathered amounts out to the group after the edit.
    pub(super) fn scatter(&mut self, group: &[u32]) {
        let pool = &mut self.pool;
        let Some((lipids, others)) = self.data.amounts.split_first_mut() else {
            return;
        };
        let weight = |v: u32| self.density[v as usize] * self.area[v as usize];
        let factor = pool.total[0] / group.iter().map(|&v| weight(v)).sum::<f64>();
        pool.lipids.clear();
        pool.lipids
            .extend(group.iter().map(|&v| factor * weight(v)));
        for (list, (&total, &(low, high))) in others
            .iter_mut()
            .zip(pool.total[1..].iter().zip(&pool.bounds[1..]))
        {
            pool.ratio.clear();
            pool.ratio.extend(
                group
                    .iter()
                    .map(|&v| (list[v as usize] / lipids[v as usize]).clamp(low, high)),
            );
            match_total(&mut pool.ratio, &pool.lipids, total, low, high);
            for ((&v, ratio), m) in group.iter().zip(&pool.ratio).zip(&pool.lipids) {
                list[v as usize] = ratio * m;
            }
        }
        for (&v, &m) in group.iter().zip(&pool.lipids) {
            lipids[v as usize] = m;
        }
    }
}

/// Shift ratios within their bounds until Σ ratio·lipids is `total`.
pub(crate) fn match_total(ratio: &mut [f64], lipids: &[f64], total: f64, low: f64, high: f64) {
    let sum = |f: &dyn Fn(f64) -> f64, ratio: &[f64]| -> f64 {
        ratio.iter().zip(lipids).map(|(&r, m)| f(r) * m).sum()
    };
    let missing = total - sum(&|r| r, ratio);
    let width = high - low;
    if width > 0.0 {
        // Middling ratios first: extremes of the group, such as the bulk of a phase, keep their value.
        let middling = |r: f64| (high - r) * (r - low) / width;
        let room = sum(&middling, ratio);
        let share = missing / room;
        if share.abs() <= 0.5 {
            for r in ratio.iter_mut() {
                *r += share * middling(*r);
            }
        } else {
            let bound = if missing > 0.0 { high } else { low };
            let room = sum(&|r| bound - r, ratio);
            if room != 0.0 {
                let share = (missing / room).clamp(0.0, 1.0);
                for r in ratio.iter_mut() {
                    *r += share * (bound - *r);
                }
            }
        }
    }
}
