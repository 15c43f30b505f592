//! The runs of a study, some at a time.

use super::launch::{Job, Moment};
use super::record::{State, fail, settle};
use crate::commands::check::cost::cost;
use crate::failure::Failure;
use crate::run::signals::Interrupt;
use std::collections::VecDeque;
use std::path::Path;
use std::sync::mpsc::{RecvTimeoutError, channel};
use std::time::{Duration, Instant};

/// Time between two looks at the memory that runs take.
const PAUSE: Duration = Duration::from_millis(500);

/// How many at a time.
pub struct Pool<'a> {
    /// Runs at a time.
    pub parallel: usize,
    /// Memory of all runs at a time [byte]; `None`: not looked at.
    pub memory: Option<f64>,
    /// Directory of the study file.
    pub here: &'a Path,
    /// Whether someone has asked to stop.
    pub interrupt: &'a Interrupt,
}

/// Where the whole is.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Overview {
    /// Runs of the study.
    pub total: usize,
    /// Of these, at their end or failed.
    pub done: usize,
    /// Of these, failed.
    pub failed: usize,
    /// At work.
    pub running: usize,
    /// Share of all the work that is done.
    pub fraction: f64,
    /// Wall time left [s], once it can be told.
    pub left: Option<f64>,
}

/// What is told on the way.
pub enum Event<'a> {
    /// Time has passed.
    Moment(Overview),
    /// A run has been settled, or was interrupted.
    Settled(usize, &'a State, Overview),
}

/// A run at work.
struct Flight {
    index: usize,
    /// Memory it was thought to take [byte].
    estimate: f64,
    process: Option<u32>,
    /// Share done when this program took it up, once told, and now.
    begun: Option<f64>,
    fraction: f64,
}

impl Flight {
    /// Memory it takes, or will take [byte].
    fn memory(&self) -> f64 {
        self.process.and_then(resident).unwrap_or(0.0).max(self.estimate)
    }
}

enum Report {
    Moment(usize, Moment),
    Settled(usize, Result<State, Failure>),
}

impl Pool<'_> {
    /// Settle all runs whose state is not; returns the states of all.
    ///
    /// # Errors
    /// [`Failure::Files`] when failures cannot be written down.
    pub fn settle_all(
        &self,
        jobs: &[Job],
        mut states: Vec<State>,
        tell: &mut dyn FnMut(Event<'_>),
    ) -> Result<Vec<State>, Failure> {
        let mut waiting: VecDeque<usize> = (0..jobs.len()).filter(|k| !states[*k].is_settled()).collect();
        let mut flights: Vec<Flight> = Vec::new();
        let mut clock = Clock { started: Instant::now(), worked: 0.0 };
        let (sender, receiver) = channel();
        std::thread::scope(|scope| {
            loop {
                let stopping = self.interrupt.asked();
                while !stopping && flights.len() < self.parallel.max(1) {
                    let Some(index) = waiting.front().copied() else { break };
                    let estimate = self.memory.and_then(|_| estimate(&jobs[index])).unwrap_or(0.0);
                    if let Some(memory) = self.memory.filter(|memory| estimate > *memory) {
                        waiting.pop_front();
                        let reason = format!(
                            "it needs about {:.2} GB, more than the {:.2} GB that the study may take",
                            estimate / 1e9,
                            memory / 1e9
                        );
                        states[index] = fail(&jobs[index].folder, reason, false)?;
                        tell(Event::Settled(index, &states[index], overview(&states, &flights, &clock)));
                        continue;
                    }
                    let taken: f64 = flights.iter().map(Flight::memory).sum();
                    if self.memory.is_some_and(|memory| taken + estimate > memory) && !flights.is_empty() {
                        break;
                    }
                    waiting.pop_front();
                    flights.push(Flight { index, estimate, process: None, begun: None, fraction: 0.0 });
                    let (sender, job) = (sender.clone(), &jobs[index]);
                    scope.spawn(move || {
                        let moments = sender.clone();
                        // Nobody listens any more only when the whole has failed.
                        let state = settle(job, self.here, self.interrupt, &mut |moment| {
                            let _ = moments.send(Report::Moment(index, *moment));
                        });
                        let _ = sender.send(Report::Settled(index, state));
                    });
                }
                if flights.is_empty() && (stopping || waiting.is_empty()) {
                    return Ok(());
                }
                match receiver.recv_timeout(PAUSE) {
                    Ok(Report::Moment(index, moment)) => {
                        if let Some(flight) = flights.iter_mut().find(|flight| flight.index == index) {
                            flight.process = moment.process;
                            flight.begun.get_or_insert(moment.fraction);
                            flight.fraction = moment.fraction;
                        }
                        tell(Event::Moment(overview(&states, &flights, &clock)));
                    }
                    Ok(Report::Settled(index, state)) => {
                        let begun = flights.iter().find(|flight| flight.index == index).and_then(|flight| flight.begun);
                        flights.retain(|flight| flight.index != index);
                        states[index] = state?;
                        clock.worked += 1.0 - begun.unwrap_or(0.0);
                        tell(Event::Settled(index, &states[index], overview(&states, &flights, &clock)));
                    }
                    Err(RecvTimeoutError::Timeout) => tell(Event::Moment(overview(&states, &flights, &clock))),
                    Err(RecvTimeoutError::Disconnected) => return Ok(()),
                }
            }
        })
        .map(|()| states)
    }
}

/// What tells how long the rest will take.
struct Clock {
    started: Instant,
    /// Runs settled since then; less than one for those taken up on their way.
    worked: f64,
}

fn overview(states: &[State], flights: &[Flight], clock: &Clock) -> Overview {
    let total = states.len();
    let done = states.iter().filter(|state| !matches!(state, State::Unfinished)).count();
    let on_the_way: f64 = flights.iter().map(|flight| flight.fraction).sum();
    let worked: f64 =
        clock.worked + flights.iter().map(|flight| flight.fraction - flight.begun.unwrap_or(0.0)).sum::<f64>();
    let rest = total as f64 - done as f64 - on_the_way;
    let spent = clock.started.elapsed().as_secs_f64();
    Overview {
        total,
        done,
        failed: states.iter().filter(|state| state.failure().is_some()).count(),
        running: flights.len(),
        fraction: (done as f64 + on_the_way) / (total.max(1) as f64),
        left: (worked > 0.0).then(|| spent * rest.max(0.0) / worked),
    }
}

/// Memory that a run will take at its start, as `check` says [byte]; `None` for one that cannot start.
fn estimate(job: &Job) -> Option<f64> {
    let setup = crate::scenario::load(&job.scenario, &job.overrides).ok()?;
    Some(cost(setup.state.mesh.n_vertices()).bytes)
}

/// Memory that a process holds [byte], where the system tells it.
fn resident(process: u32) -> Option<f64> {
    let text = std::fs::read_to_string(format!("/proc/{process}/status")).ok()?;
    let line = text.lines().find_map(|line| line.strip_prefix("VmRSS:"))?;
    line.trim().strip_suffix("kB")?.trim().parse::<f64>().ok().map(|kilobytes| 1024.0 * kilobytes)
}
