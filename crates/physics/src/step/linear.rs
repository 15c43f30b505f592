//! The linear system of a step: an older factor drives a short Krylov iteration until a new one is cheaper.
//!
//! From step to step the matrix changes little, so GMRES preconditioned with the factor of an earlier step needs a
//! handful of iterations, each of which costs about a tenth of a factorisation. The scalar unknowns are part of the
//! iteration: the preconditioner is the inverse of the *bordered* matrix of the earlier step, so they cost nothing
//! beyond a few products.
//!
//! A new factor is due when solving with the old one costs more than the average since that was made, its making
//! included; this keeps the average near its smallest value. Costs are counted, never timed, so that a run does not
//! depend on the machine, and [`Origin`] and [`Tally`] are enough to make the same factor again.

use super::assemble::MatrixInput;
use super::borders::Border;
use super::mechanics::Timings;
use super::preconditioner::{Preconditioner, Way};
use crate::PhysicsError;
use crate::state::State;
use nalgebra::DMatrix;
use pellicle_sparse::{GmresOutcome, GmresWorkspace, gmres_while};
use pellicle_surface::Vec3;
use serde::{Deserialize, Serialize};
use std::time::Instant;

/// Residual at which a solution is accepted, relative to the right-hand side, rows scaled by the roots of the diagonal.
/// Forward errors stay below 1e-8, and volume and lipids are kept by construction, not by the solver.
const TOLERANCE: f64 = 1e-9;
/// Residual that rounding leaves, relative to the solution in the same scaling, in which the matrix is of the order of one:
/// no iteration need get below.
const ROUNDING: f64 = 1e-13;
/// Rounds of GMRES; a round ends when its own recurrence has converged, which rounding may have led astray.
const ROUNDS: usize = 4;
/// Iterations after which a fresh factor has done what rounding lets it.
const FRESH_ITERATIONS: usize = 8;
/// Most new factors in a row before an old one is tried again.
const LONGEST_WAIT: u32 = 15;
/// Cost of an iteration [applications of the factor]: the product with the matrix and the Krylov basis come on top.
const ITERATION: f64 = 1.3;

/// What a factor was made from: the part of a state that the matrix depends on.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Origin {
    /// Time at the start of the step.
    pub time: f64,
    /// Length of the step.
    pub step: f64,
    /// Positions of the vertices.
    pub positions: Vec<Vec3>,
    /// Relaxed lipid area of each vertex.
    pub lipid: Vec<f64>,
    /// φ m of each vertex; empty without phases.
    pub composition_amount: Vec<f64>,
    /// θ m of each vertex; empty without protein.
    pub bound_amount: Vec<f64>,
    /// Tension of each vertex.
    pub tension: Vec<f64>,
    /// Centres of the loads.
    pub load_centres: Vec<Vec3>,
}

impl Origin {
    /// The origin of the matrix of a step from `state`.
    pub fn of(state: &State, step: f64) -> Self {
        Self {
            time: state.time,
            step,
            positions: state.mesh.positions.clone(),
            lipid: state.lipid.clone(),
            composition_amount: state.composition_amount.clone(),
            bound_amount: state.bound_amount.clone(),
            tension: state.tension.clone(),
            load_centres: state.loads.iter().map(|load| load.centre).collect(),
        }
    }

    /// Whether the lists have the lengths of a state's.
    pub fn fits(&self, state: &State) -> bool {
        self.positions.len() == state.mesh.positions.len()
            && self.lipid.len() == state.lipid.len()
            && self.composition_amount.len() == state.composition_amount.len()
            && self.bound_amount.len() == state.bound_amount.len()
            && self.tension.len() == state.tension.len()
            && self.load_centres.len() == state.loads.len()
    }

    /// A state whose matrix is that of the origin; what the matrix does not depend on is `state`'s.
    pub fn state(&self, state: &State) -> State {
        let mut then = state.clone();
        then.time = self.time;
        then.mesh.positions.clone_from(&self.positions);
        then.lipid.clone_from(&self.lipid);
        then.composition_amount.clone_from(&self.composition_amount);
        then.bound_amount.clone_from(&self.bound_amount);
        then.tension.clone_from(&self.tension);
        for (load, centre) in then.loads.iter_mut().zip(&self.load_centres) {
            load.centre = *centre;
        }
        then
    }
}

/// What a factor has cost and whether it shall be used again.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Tally {
    /// Solutions with the present factor.
    pub solves: u64,
    /// Cost of the factor and of these solutions [applications of the factor].
    pub spent: f64,
    /// Whether the next solution shall have a new one.
    pub due: bool,
    /// New factors to make before an old one is tried again, and how many it shall be after the next failure.
    pub waiting: u32,
    /// See `waiting`.
    pub next_wait: u32,
}

/// Matrix and borders of one linear system.
pub struct LinearSystem<'a> {
    /// Values of the matrix.
    pub values: &'a [f64],
    /// Scalar unknowns.
    pub borders: &'a [Border],
    /// What the matrix was made of.
    pub input: &'a MatrixInput<'a>,
}

impl LinearSystem<'_> {
    /// w = A v with all borders.
    fn multiply(&self, v: &[f64], w: &mut [f64], scratch: &mut Vec<f64>) {
        let n = 4 * self.input.pattern.n_vertices();
        self.input.pattern.multiply(self.values, &v[..n], &mut w[..n], scratch);
        for (k, border) in self.borders.iter().enumerate() {
            let z = v[n + k];
            for (w, c) in w[..n].iter_mut().zip(&border.column) {
                *w += z * c;
            }
            w[n + k] = dot(&border.column, &v[..n]) + border.diagonal * z;
        }
    }
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(x, y)| x * y).sum()
}

/// Solver of one connectivity.
pub struct LinearSolver {
    preconditioner: Preconditioner,
    /// Solutions with the columns of the borders as right-hand sides.
    responses: Vec<Vec<f64>>,
    /// Inverse of the borders' Schur complement, and its diagonal before.
    corner: DMatrix<f64>,
    corner_diagonal: Vec<f64>,
    corner_product: Vec<f64>,
    origin: Option<Origin>,
    tally: Tally,
    krylov: GmresWorkspace,
    work: Work,
}

#[derive(Default)]
struct Work {
    scale: Vec<f64>,
    rhs: Vec<f64>,
    solution: Vec<f64>,
    scaled: Vec<f64>,
    product: Vec<f64>,
}

impl LinearSolver {
    /// A solver without a factor.
    pub fn new(preconditioner: Preconditioner) -> Self {
        Self {
            preconditioner,
            responses: Vec::new(),
            corner: DMatrix::zeros(0, 0),
            corner_diagonal: Vec::new(),
            corner_product: Vec::new(),
            origin: None,
            tally: Tally::default(),
            krylov: GmresWorkspace::new(),
            work: Work::default(),
        }
    }

    /// Give the memory back, before the solver is replaced.
    pub(super) fn release(&mut self) {
        self.origin = None;
        self.preconditioner.release();
        self.responses = Vec::new();
        self.krylov = GmresWorkspace::new();
    }

    /// The way systems are solved.
    pub fn way(&self) -> Way {
        self.preconditioner.way()
    }

    /// What is needed to make the present factor again, if it will be used again.
    pub fn memory(&self) -> (Option<Origin>, Tally) {
        let reused = !self.tally.due && self.tally.waiting == 0;
        (self.origin.clone().filter(|_| reused), self.tally)
    }


    /// Go on with the factor that was made again from a memory; without an origin the next solution makes a new one.
    pub(super) fn take_up(&mut self, origin: Option<Origin>, tally: Tally) {
        self.origin = origin;
        self.tally = tally;
    }

    /// Make a factor of a system.
    ///
    /// # Errors
    /// A singular matrix; [`PhysicsError::Contradiction`] when the borders are dependent.
    pub fn factorise(&mut self, system: &LinearSystem) -> Result<(), PhysicsError> {
        self.origin = None;
        self.preconditioner.prepare(system)?;
        let borders = system.borders;
        self.responses.truncate(borders.len());
        self.responses.resize_with(borders.len(), Vec::new);
        for (response, border) in self.responses.iter_mut().zip(borders) {
            response.clone_from(&border.column);
            self.preconditioner.apply(system, response);
        }
        let k = borders.len();
        let complement = DMatrix::from_fn(k, k, |r, c| {
            let diagonal = if r == c { borders[r].diagonal } else { 0.0 };
            diagonal - dot(&borders[r].column, &self.responses[c])
        });
        self.corner_diagonal.clear();
        self.corner_diagonal.extend((0..k).map(|r| complement[(r, r)]));
        self.corner = complement.try_inverse().filter(|m| m.iter().all(|v| v.is_finite())).ok_or(
            PhysicsError::Contradiction(
                "volume, reservoir and loads cannot all be met at once (dependent constraints)",
            ),
        )?;
        self.tally = Tally {
            solves: 0,
            spent: self.preconditioner.cost() + k as f64,
            due: false,
            ..self.tally
        };
        Ok(())
    }

    /// Replace a vector by the inverse of the bordered matrix of the last factor times it.
    ///
    /// # Shapes
    /// Four numbers per vertex, then one per border.
    pub fn apply_inverse(&mut self, system: &LinearSystem, vector: &mut [f64]) {
        let Self { preconditioner, responses, corner, corner_product, .. } = self;
        apply_inverse(preconditioner, system, responses, corner, corner_product, vector);
    }

    /// Solve a system. `y` holds the right-hand side on entry and the solution on exit; `guess` a first guess.
    /// Returns the relative residual.
    ///
    /// # Shapes
    /// `y`, `guess`: four numbers per vertex, then one per border.
    ///
    /// # Errors
    /// As [`LinearSolver::factorise`].
    pub fn solve(
        &mut self,
        system: &LinearSystem,
        guess: &[f64],
        y: &mut [f64],
        origin: impl FnOnce() -> Origin,
        timings: &mut Timings,
    ) -> Result<f64, PhysicsError> {
        let usable = self.origin.is_some()
            && !self.tally.due
            && self.tally.waiting == 0
            && self.responses.len() == system.borders.len();
        let mut iterations = 0;
        let mut outcome = None;
        if usable {
            // Beyond this a new factor would have been cheaper.
            let most = self.preconditioner.most_iterations();
            let most = most.unwrap_or(1 + (self.preconditioner.cost() / ITERATION) as usize);
            let clock = Instant::now();
            outcome = Some(self.iterate(system, guess, y, most));
            timings.solves += clock.elapsed().as_secs_f64();
            iterations += outcome.map_or(0, |o| o.iterations);
        }
        let led = outcome.is_some();
        if outcome.is_some_and(|o| !o.converged) {
            self.tally.waiting = self.tally.next_wait;
            self.tally.next_wait = (2 * self.tally.next_wait + 1).min(LONGEST_WAIT);
        } else if led {
            self.tally.next_wait = 0;
        } else {
            self.tally.waiting = self.tally.waiting.saturating_sub(1);
        }
        let outcome = match outcome.filter(|o| o.converged) {
            Some(outcome) => outcome,
            None => {
                let clock = Instant::now();
                self.factorise(system)?;
                timings.factorisation += clock.elapsed().as_secs_f64();
                timings.factors += 1;
                self.origin = Some(origin());
                let clock = Instant::now();
                let most = self.preconditioner.most_iterations().unwrap_or(FRESH_ITERATIONS);
                // Go on from where the old factor has led.
                let start = if led { std::mem::take(&mut self.work.solution) } else { Vec::new() };
                let outcome = self.iterate(system, if led { &start } else { guess }, y, most);
                timings.solves += clock.elapsed().as_secs_f64();
                if !outcome.converged && self.preconditioner.most_iterations().is_some() {
                    self.origin = None;
                    return Err(PhysicsError::Contradiction("the iteration for the motion did not converge"));
                }
                iterations += outcome.iterations;
                outcome
            }
        };
        y.copy_from_slice(&self.work.solution);
        timings.systems += 1;
        timings.iterations += iterations as u64;
        let cost = ITERATION * outcome.iterations as f64;
        self.tally.solves += 1;
        self.tally.spent += cost;
        self.tally.due = self.tally.solves > 1 && cost * self.tally.solves as f64 >= self.tally.spent;
        Ok(outcome.relative_residual)
    }

    /// Iterate for the solution with right-hand side `b`, into `work.solution`.
    fn iterate(&mut self, system: &LinearSystem, guess: &[f64], b: &[f64], most: usize) -> GmresOutcome {
        let Self { preconditioner, responses, corner, corner_diagonal, corner_product, krylov, work, .. } = self;
        let Work { scale, rhs, solution, scaled, product } = work;
        system.input.pattern.diagonal(system.values, scale);
        scale.extend_from_slice(corner_diagonal);
        for s in scale.iter_mut() {
            *s = if *s == 0.0 { 1.0 } else { s.abs().sqrt().recip() };
        }
        let scale = scale.as_slice();
        rhs.clear();
        rhs.extend(b.iter().zip(scale).map(|(b, s)| b * s));
        scaled.resize(b.len(), 0.0);
        solution.clear();
        solution.extend(guess.iter().zip(scale).map(|(x, s)| x / s));
        let mut apply = |v: &[f64], w: &mut [f64]| {
            for ((t, v), s) in scaled.iter_mut().zip(v).zip(scale) {
                *t = v * s;
            }
            system.multiply(scaled, w, product);
            w.iter_mut().zip(scale).for_each(|(w, s)| *w *= s);
        };
        let mut precondition = |v: &mut [f64]| {
            v.iter_mut().zip(scale).for_each(|(v, s)| *v /= s);
            apply_inverse(preconditioner, system, responses, corner, corner_product, v);
            v.iter_mut().zip(scale).for_each(|(v, s)| *v /= s);
        };
        let goal = TOLERANCE.ln();
        let size = dot(rhs, rhs).sqrt();
        let mut outcome = GmresOutcome { iterations: 0, relative_residual: f64::INFINITY, converged: false };
        for _ in 0..ROUNDS {
            let done = outcome.iterations;
            let round = gmres_while(
                &mut apply,
                &mut precondition,
                rhs,
                solution,
                TOLERANCE,
                |iterations, left: f64| {
                    let all = done + iterations;
                    // What looks hopeless after a few iterations is, although convergence gets faster as it goes.
                    all < most && (iterations < 2 || done > 0 || left.ln() / all as f64 * 1.5 * (most as f64) < goal)
                },
                krylov,
            );
            let better = round.relative_residual < 0.5 * outcome.relative_residual;
            outcome = GmresOutcome { iterations: done + round.iterations, ..round };
            let floor = ROUNDING * dot(solution, solution).sqrt();
            outcome.converged |= outcome.relative_residual * size <= floor;
            if outcome.converged || !better || round.iterations == 0 || outcome.iterations >= most {
                break;
            }
        }
        solution.iter_mut().zip(scale).for_each(|(x, s)| *x *= s);
        outcome
    }
}

/// y = w − R z with w = A⁻¹ r and z = S⁻¹ (s − Cᵀ w), R the responses: the inverse of a bordered matrix.
fn apply_inverse(
    preconditioner: &mut Preconditioner,
    system: &LinearSystem,
    responses: &[Vec<f64>],
    corner: &DMatrix<f64>,
    z: &mut Vec<f64>,
    vector: &mut [f64],
) {
    let k = responses.len();
    let (mesh, scalars) = vector.split_at_mut(vector.len() - k);
    preconditioner.apply(system, mesh);
    for (s, border) in scalars.iter_mut().zip(system.borders) {
        *s -= dot(&border.column, mesh);
    }
    z.clear();
    z.extend((0..k).map(|r| (0..k).map(|c| corner[(r, c)] * scalars[c]).sum::<f64>()));
    for (z, response) in z.iter().zip(responses) {
        for (y, r) in mesh.iter_mut().zip(response) {
            *y -= z * r;
        }
    }
    scalars.copy_from_slice(z);
}
