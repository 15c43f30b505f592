//! Error bars: a scenario at three levels of mesh, time step and, if wanted, interface width, and what the differences
//! say about every number of its summary.
//!
//! Data flow: [`levels`] makes scenarios coarser, [`crate::study::launch`] runs them, [`richardson`] extrapolates,
//! [`write`] tells.

pub mod levels;
pub mod richardson;
pub mod run;
pub mod write;

use crate::run::columns::COLUMNS;
use crate::study::launch::EndOfRun;
use levels::Refinement;
use richardson::{Estimate, Level, combined, estimate};

/// Columns that describe the mesh or the step, not the membrane.
const NOT_PHYSICAL: [&str; 6] =
    ["step_s", "mesh_energy_J", "energy_balance_error", "vertex_count", "quality_min", "edge_length_mean_m"];

/// The ends of the runs of one refinement, finest first.
pub struct Family {
    /// What was refined.
    pub refinement: Refinement,
    /// The ends.
    pub ends: [EndOfRun; levels::LEVELS],
}

/// One number of the summary with its error bar.
#[derive(Clone, Debug, PartialEq)]
pub struct Quantity {
    /// Column of the series.
    pub name: &'static str,
    /// At the finest level.
    pub finest: f64,
    /// Extrapolated where possible.
    pub value: f64,
    /// Half width of the error bar.
    pub uncertainty: f64,
    /// What each refinement says: name, levels and estimate.
    pub parts: Vec<(String, [Level; levels::LEVELS], Estimate)>,
}

impl Quantity {
    /// Warnings, each with the refinement it is about.
    pub fn warnings(&self) -> impl Iterator<Item = (&str, &'static str)> {
        self.parts.iter().filter_map(|(name, _, estimate)| Some((name.as_str(), estimate.verdict.warning()?)))
    }
}

/// Error bars of all numbers that every level has.
pub fn quantities(families: &[Family]) -> Vec<Quantity> {
    COLUMNS.into_iter().filter(|name| !NOT_PHYSICAL.contains(name)).filter_map(|name| quantity(name, families)).collect()
}

fn quantity(name: &'static str, families: &[Family]) -> Option<Quantity> {
    let finest = families.first()?.ends[0].end(name)?;
    let mut parts = Vec::new();
    for Family { refinement, ends } in families {
        let mut found = [Level { size: 0.0, value: 0.0, bracket: 0.0 }; levels::LEVELS];
        for (k, (level, end)) in found.iter_mut().zip(ends).enumerate() {
            *level = Level { size: refinement.size(end, k), value: end.end(name)?, bracket: 0.0 };
        }
        parts.push((refinement.name.clone(), found, estimate(found, refinement.order)));
    }
    let estimates: Vec<Estimate> = parts.iter().map(|part| part.2).collect();
    let (value, uncertainty) = combined(finest, &estimates);
    Some(Quantity { name, finest, value, uncertainty, parts })
}

/// What the user should know about the levels as a whole.
pub fn warnings(families: &[Family]) -> Vec<String> {
    let mut warnings = Vec::new();
    for Family { refinement, ends } in families {
        for (k, end) in ends.iter().enumerate() {
            let level = format!("{} level {} of {}", refinement.name, k + 1, levels::LEVELS);
            if let Some(why) = end.trouble() {
                warnings.push(format!("{level} ended in trouble: {why}"));
            } else if end.stopped_by() != ends[0].stopped_by() {
                warnings.push(format!(
                    "{level} was stopped by {}, the finest by {}: their ends may not be the same moment",
                    end.stopped_by(),
                    ends[0].stopped_by()
                ));
            }
        }
    }
    warnings
}
