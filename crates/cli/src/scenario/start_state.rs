//! The end state of another run as the start of this one.
//!
//! Taken over: mesh, amounts of lipid, composition, bound protein and marker, tension, pressure, the clamp's normals and
//! the places of loads. Time, ledger and velocity start anew; parameters are those of the scenario. With a reservoir the
//! density of the lipids adapts to its tension.

use super::problem::Problem;
use super::values::Values;
use crate::run::checkpoint;
use crate::run::cursor::Ended;
use crate::setup::{Origin, Scales};
use crate::units::measure as m;
use pellicle_physics::parameters::{AreaCondition, BindingRegion, Parameters};
use pellicle_physics::{Simulation, State};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::{Mesh, Topology, Vec3};
use std::path::Path;

/// Periods that differ by less than this share are equal: they went through a file as text.
const SAME_PERIOD: f64 = 1e-9;

/// A state that another run left, in the units of this one.
pub struct Source {
    /// The state.
    pub state: State,
    /// Area-compression modulus of the lipids there.
    compression_modulus: f64,
    /// Where it is from.
    pub origin: Origin,
}

/// The state that `start_from` names, if it names one.
pub fn find(values: &Values, scales: &Scales, warnings: &mut Vec<String>) -> Result<Option<Source>, Problem> {
    if values.entry("start_from").is_none() {
        return Ok(None);
    }
    let folder = values.text("start_from").to_owned();
    let (found, problem) = checkpoint::newest(Path::new(&folder)).map_err(|failure| {
        Problem::unreadable(
            values.place("start_from"),
            format!("start_from: {failure}"),
            "name the directory of a run; a path in a scenario is relative to its folder",
        )
    })?;
    warnings.extend(problem);
    match &found.cursor.ended {
        None => warnings.push(format!("{folder} holds a run that has not ended; its newest state is taken")),
        Some(Ended::Trouble(why)) => warnings.push(format!("the run in {folder} ended in trouble: {why}")),
        Some(_) => {}
    }
    let origin = Origin { folder, state_sha256: found.fingerprint() };
    let (old, parameters) = (&found.plan.scales, &found.plan.parameters);
    let compression_modulus = parameters.area_compression_modulus * old.of(&m::TENSION) / scales.of(&m::TENSION);
    Ok(Some(Source { state: in_units(found.state, old, scales), compression_modulus, origin }))
}

/// A state in other units, at rest at time zero.
fn in_units(mut state: State, old: &Scales, new: &Scales) -> State {
    let factor = |measure| old.of(&measure) / new.of(&measure);
    let (length, area) = (factor(m::LENGTH), factor(m::AREA));
    let (tension, pressure, force) = (factor(m::TENSION), factor(m::PRESSURE), factor(m::FORCE));
    state.time = 0.0;
    state.mesh.positions.iter_mut().for_each(|x| *x *= length);
    state.mesh.period = state.mesh.period.map(|period| period * length);
    for amounts in
        [&mut state.lipid, &mut state.composition_amount, &mut state.bound_amount, &mut state.marker_amount]
    {
        amounts.iter_mut().for_each(|amount| *amount *= area);
    }
    state.tension.iter_mut().for_each(|t| *t *= tension);
    state.interface_width.iter_mut().for_each(|width| *width *= length);
    state.pressure *= pressure;
    for piece in &mut state.pieces {
        piece.pressure *= pressure;
    }
    state.velocity.fill(Vec3::zeros());
    for load in &mut state.loads {
        for x in [&mut load.centre, &mut load.start, &mut load.position] {
            *x *= length;
        }
        load.force *= force;
    }
    state
}

impl Source {
    /// The state as a start for these parameters. `described`: the mesh that the scenario's surface would have.
    pub fn state_for(&self, values: &Values, parameters: &Parameters, described: &Mesh) -> Result<State, Problem> {
        let mut state = self.state.clone();
        let refuse = |message: String, mend: &str| {
            let message = format!("start_from: {message} ({})", self.origin.folder);
            Err(Problem::new(values.place("start_from"), message, "does not fit", mend))
        };
        if let Some((here, there, mend)) = self.misfit(parameters, described) {
            return refuse(format!("this scenario has {here}, the run it starts from {there}"), mend);
        }
        if parameters.protein.as_ref().is_none_or(|protein| protein.region != BindingRegion::Marked) {
            state.marker_amount.clear();
        }
        if state.loads.is_empty() && !parameters.loads.is_empty() {
            match State::at_rest(parameters, state.mesh.clone(), &[], &[], &[]) {
                Ok(fresh) => state.loads = fresh.loads,
                Err(error) => return refuse(error.to_string(), "start from another run"),
            }
        }
        if let AreaCondition::Reservoir(tension) = parameters.area {
            self.settle(&mut state, tension, parameters.area_compression_modulus);
        }
        if let Some(phases) = &parameters.phases {
            let narrow = phases.width_per_radius > 0.0;
            for width in &mut state.interface_width {
                *width = if narrow { width.min(phases.interface_width) } else { phases.interface_width };
            }
        }
        state.step = parameters.step.first;
        match Simulation::begin_from(parameters.clone(), state.clone()) {
            Ok(_) => Ok(state),
            Err(error) => refuse(error.to_string(), "start from a run that this scenario can go on from"),
        }
    }

    /// Let the lipids exchange with another reservoir at once: their mean tension becomes its tension, differences of
    /// tension and of what they carry stay. Otherwise the first step would stretch them, and the ledger miss the energy.
    fn settle(&self, state: &mut State, tension: f64, modulus: f64) {
        let area = Geometry::new(&state.mesh).vertex_area;
        let strained: Vec<f64> =
            area.iter().zip(&state.lipid).map(|(a, m)| self.compression_modulus * (a / m - 1.0)).collect();
        let mean = strained.iter().zip(&area).map(|(t, a)| t * a).sum::<f64>() / area.iter().sum::<f64>();
        let State { lipid, composition_amount, bound_amount, marker_amount, tension: felt, .. } = state;
        for (i, (m, t)) in lipid.iter_mut().zip(&strained).enumerate() {
            let factor = area[i] / (1.0 + (t - mean + tension) / modulus) / *m;
            *m *= factor;
            felt[i] += tension - mean;
            for amounts in [&mut *composition_amount, &mut *bound_amount, &mut *marker_amount] {
                amounts.get_mut(i).into_iter().for_each(|amount| *amount *= factor);
            }
        }
    }

    /// What does not fit, in words: here, there, and the mend.
    fn misfit(&self, parameters: &Parameters, described: &Mesh) -> Option<(String, String, &'static str)> {
        let state = &self.state;
        let yes = |yes: bool, what: &str| if yes { what.to_owned() } else { format!("no {what}") };
        let presence = [
            (parameters.phases.is_some(), !state.composition_amount.is_empty(), "[composition]"),
            (parameters.protein.is_some(), !state.bound_amount.is_empty(), "[protein]"),
        ];
        for (here, there, what) in presence {
            if here != there {
                let mend = "start from a run of the same kind; amounts that are to be negligible may be small";
                return Some((yes(here, what), yes(there, what), mend));
            }
        }
        let marked = parameters.protein.as_ref().is_some_and(|protein| protein.region == BindingRegion::Marked);
        if marked && state.marker_amount.is_empty() {
            let mend = "start from a run with the same [protein.spot]";
            return Some(("protein that binds on a spot".into(), "no spot".into(), mend));
        }
        let closed = |mesh: &Mesh| Topology::new(mesh.n_vertices(), &mesh.triangles).is_ok_and(|t| t.is_closed());
        let (here, there) = (closed(described), closed(&state.mesh));
        if here != there {
            let mend = "start from a run of the same kind of surface";
            let words = |closed: bool| if closed { "a closed surface" } else { "a framed patch" }.to_owned();
            return Some((words(here), words(there), mend));
        }
        let period = |mesh: &Mesh| match mesh.period {
            Some(period) => format!("a period of {period:.6} sizes"),
            None => "no period".to_owned(),
        };
        let same = match (described.period, state.mesh.period) {
            (Some(here), Some(there)) => (here - there).abs() <= SAME_PERIOD * here,
            (here, there) => here.is_none() && there.is_none(),
        };
        if !same {
            let mend = "give [surface] the period that the other run has";
            return Some((period(described), period(&state.mesh), mend));
        }
        let (here, there) = (parameters.loads.len(), state.loads.len());
        if there > 0 && here != there {
            let mend = "give as many [[load]] as the other run has, or start from one without";
            return Some((format!("{here} loads"), there.to_string(), mend));
        }
        None
    }
}
