//! The loop over steps.

use super::checkpoint::Checkpoint;
use super::columns::Row;
use super::cursor::{Cursor, Ended, longest_step, snapped};
use super::frames::FrameWriter;
use super::lock::Lock;
use super::log::Log;
use super::plan::Plan;
use super::progress::{Moment, Progress};
use super::series::SeriesFile;
use super::signals::Interrupt;
use super::summary::{self, Accounts, Outcome};
use super::words::with_unit;
use crate::failure::Failure;
use pellicle_physics::diagnostics::{Diagnostics, size};
use pellicle_physics::step::control::Reason;
use pellicle_physics::{PhysicsError, Simulation, StepReport};
use std::path::PathBuf;
use std::time::Instant;

/// Accepted steps between looks for necks that end the run: finding them is a good part of a step.
const NECK_LOOK_EVERY: u64 = 4;

/// A run at work.
pub struct Driver {
    /// Directory of the results.
    pub folder: PathBuf,
    /// What does not change.
    pub plan: Plan,
    /// The membrane.
    pub simulation: Simulation,
    /// What has been written.
    pub cursor: Cursor,
    /// Time spent before this program took the run up.
    pub accounts: Accounts,
    /// Rows.
    pub series: SeriesFile,
    /// Rows for each piece, where necks are severed.
    pub pieces: Option<SeriesFile>,
    /// Frames.
    pub frames: FrameWriter,
    /// Log.
    pub log: Log,
    /// Progress.
    pub progress: Progress,
    /// Whether someone has asked to stop.
    pub interrupt: Interrupt,
    /// What the user should know, beside the scenario's warnings.
    pub warnings: Vec<String>,
    /// The right to write into the directory, held until the run ends.
    #[expect(dead_code, reason = "only its existence counts")]
    pub lock: Lock,
}

/// How a run ended.
pub struct Finish {
    /// Why; `None` when it was interrupted.
    pub ended: Option<Ended>,
    /// The last row.
    pub row: Row,
    /// The last checkpoint.
    pub checkpoint: Checkpoint,
    /// The progress display, for the closing lines.
    pub progress: Progress,
}

/// Clocks of this program's share of a run.
struct Clocks {
    start: Instant,
    from: f64,
    output: f64,
    checkpoint: Instant,
}

impl Driver {
    /// Step until a reason to stop.
    ///
    /// # Errors
    /// [`Failure::Files`] when results cannot be written. Numerical trouble is no error here but a way to end.
    pub fn run(mut self) -> Result<Finish, Failure> {
        let mut clocks = Clocks {
            start: Instant::now(),
            from: self.simulation.state.time,
            output: 0.0,
            checkpoint: Instant::now(),
        };
        let outcome = self.steps(&mut clocks);
        self.progress.clear();
        if let Err(failure) = &outcome {
            self.log.line(format_args!("ended by an error: {failure}"));
        }
        let ended = outcome?;
        let seen = Diagnostics::measure(&self.simulation);
        if ended.is_some() {
            self.write_due(&seen, true)?;
        }
        let checkpoint = self.checkpoint(&mut clocks)?;
        let row = Row::measure(&self.plan, &self.simulation, &seen, &self.cursor);
        let (word, words) = match &ended {
            Some(ended) => (ended.word(), ended.words(&self.plan)),
            None => ("interrupted", "the run was interrupted".to_owned()),
        };
        self.log.line(format_args!("ended: {words}"));
        let t = &self.simulation.timings;
        self.log.line(format_args!(
            "since this start: {} linear systems, {} factors, {} iterations, {} new connectivities",
            t.systems, t.factors, t.iterations, t.analyses
        ));
        let outcome = Outcome { word, words: &words, warnings: &self.warnings };
        summary::write(&self.folder, &self.plan, &checkpoint, &row, &outcome)?;
        self.frames.finish()?;
        Ok(Finish { ended, row, checkpoint, progress: self.progress })
    }

    fn steps(&mut self, clocks: &mut Clocks) -> Result<Option<Ended>, Failure> {
        if self.cursor.rows == 0 {
            self.cursor.note_energy(self.simulation.energies.total());
            let seen = Diagnostics::measure(&self.simulation);
            self.note_domains(&seen);
            self.write_due(&seen, true)?;
            self.checkpoint(clocks)?;
        }
        loop {
            if let Some(ended) = &self.cursor.ended {
                return Ok(Some(ended.clone()));
            }
            if self.interrupt.asked() {
                return Ok(None);
            }
            let (cadence, stop) = (self.plan.cadence, self.plan.stop);
            let event = self.cursor.next_event(&cadence, &stop, self.simulation.state.time);
            let state = &self.simulation.state;
            let wanted = state.step.min(self.plan.parameters.step.longest);
            let report = match self.simulation.advance(longest_step(state.time, wanted, event)) {
                Ok(report) => report,
                Err(error) => {
                    self.cursor.ended = Some(match error {
                        PhysicsError::SelfContact { place, .. } => Ended::SelfContact(place.into()),
                        error => Ended::Trouble(self.trouble(&error)),
                    });
                    continue;
                }
            };
            self.simulation.state.time = snapped(self.simulation.state.time, event);
            self.note_step(&report);

            let clock = Instant::now();
            let state = &self.simulation.state;
            let severed = !report.severed.is_empty();
            let by_look = (stop.neck_radius.is_some() && state.ledger.accepted % NECK_LOOK_EVERY == 0)
                || stop.domain_count.is_some();
            let writes = severed
                || self.cursor.row_due(&cadence, state.time)
                || self.cursor.frame_due(&cadence, state.time, report.free_energy, size(&self.simulation));
            let seen = (by_look || writes).then(|| Diagnostics::measure(&self.simulation));
            if let Some(seen) = &seen {
                self.note_domains(seen);
                self.write_due(seen, severed)?;
            }
            self.cursor.ended = self.reason_to_stop(seen.as_ref());
            self.show(&report, clocks.from);
            clocks.output += clock.elapsed().as_secs_f64();
            if self.cursor.ended.is_none()
                && clocks.checkpoint.elapsed().as_secs_f64() >= cadence.checkpoint_seconds
            {
                self.checkpoint(clocks)?;
            }
        }
    }

    /// Book-keeping of an accepted step.
    fn note_step(&mut self, report: &StepReport) {
        for (step, reason) in &report.refused {
            self.cursor.refused_for.add(*reason);
            self.log.line(format_args!(
                "step of {} refused: {}",
                with_unit(step * self.plan.scales.time, "s"),
                reason.words()
            ));
        }
        for neck in &report.severed {
            let scales = &self.plan.scales;
            let shed = match neck.shed {
                Some(piece) => format!("piece {piece} was shed"),
                None => "the surface stays in one piece".to_owned(),
            };
            self.log.line(format_args!(
                "a neck of radius {} was severed at {}: {shed}, the free energy changed by {:.4} kBT",
                with_unit(neck.radius * scales.length, "m"),
                with_unit(self.simulation.state.time * scales.time, "s"),
                neck.energy_change * scales.energy / scales.thermal_energy,
            ));
        }
        self.cursor.bounded_by.add(report.bounded_by);
        if self.plan.stop.at_rest.is_some() && report.unrest.is_finite() {
            let risen = report.refused.iter().any(|(_, reason)| *reason == Reason::EnergyRise);
            self.cursor.note_stall(self.simulation.state.time, report.step, report.free_energy, risen);
        }
        self.cursor.stepped(report.step, report.free_energy, report.speed * report.step);
        if let Some(limit) = self.plan.stop.at_rest {
            self.cursor.note_rest(limit, report.unrest);
        }
    }

    fn note_domains(&mut self, seen: &Diagnostics) {
        let count = seen.domain_count.unwrap_or(0) as u64;
        self.cursor.most_domains = self.cursor.most_domains.max(count);
    }

    /// Write the row and the frame that are due now; with `always`, those not yet written for this time.
    fn write_due(&mut self, seen: &Diagnostics, always: bool) -> Result<(), Failure> {
        let cadence = self.plan.cadence;
        let (time, free_energy) = (self.simulation.state.time, self.simulation.energies.total());
        let row_missing = self.cursor.row_time != Some(time);
        if self.cursor.row_due(&cadence, time) || (always && row_missing) {
            let row = Row::measure(&self.plan, &self.simulation, seen, &self.cursor);
            let bytes = self.series.push(&row)?;
            if let Some(pieces) = &mut self.pieces {
                pieces.push_pieces(&self.plan, time, &seen.pieces)?;
                self.cursor.pieces_bytes = pieces.bytes();
            }
            let bytes = if self.cursor.rows == 0 { self.series.bytes() } else { bytes };
            self.cursor.row_written(&cadence, time, bytes);
            self.log.line(format_args!(
                "t = {}, step {}, F = {:.6} kBT, {} steps, {} refused",
                with_unit(time * self.plan.scales.time, "s"),
                with_unit(self.cursor.last_step.unwrap_or(0.0) * self.plan.scales.time, "s"),
                free_energy * self.plan.scales.energy / self.plan.scales.thermal_energy,
                self.simulation.state.ledger.accepted,
                self.simulation.state.ledger.refused,
            ));
        }
        let frame_missing = self.cursor.frame_time != Some(time);
        if self.cursor.frame_due(&cadence, time, free_energy, size(&self.simulation)) || (always && frame_missing) {
            self.frames.push(&self.plan, &self.simulation, self.cursor.frames)?;
            self.cursor.frame_written(&cadence, time, free_energy);
        }
        Ok(())
    }

    fn reason_to_stop(&self, seen: Option<&Diagnostics>) -> Option<Ended> {
        let stop = &self.plan.stop;
        if let (Some(limit), Some(radius)) = (stop.neck_radius, seen.and_then(|seen| seen.neck_radius))
            && radius <= limit
        {
            return Some(Ended::Neck(radius));
        }
        if let (Some(limit), Some(count)) = (stop.domain_count, seen.and_then(|seen| seen.domain_count))
            && count <= limit
            && self.cursor.most_domains > limit as u64
        {
            return Some(Ended::Domains(count as u64));
        }
        if stop.at_rest.is_some() && self.cursor.at_rest() {
            return Some(Ended::Rest);
        }
        if stop.at_rest.is_some() && self.cursor.is_stalled() {
            return Some(Ended::Stalled);
        }
        (self.simulation.state.time >= stop.time).then_some(Ended::Time)
    }

    /// Numerical trouble in plain words.
    fn trouble(&self, error: &PhysicsError) -> String {
        let scale = self.plan.scales.time;
        match error {
            PhysicsError::StepFloor { time, step, floor, reason } => format!(
                "the solver could not go on at {}: even a step of {} was refused ({reason}), and {} is the shortest \
                 allowed; a finer mesh, a softer start or another shortest step may help",
                with_unit(time * scale, "s"),
                with_unit(step * scale, "s"),
                with_unit(floor * scale, "s"),
            ),
            other => format!(
                "the solver could not go on at {}: {other}",
                with_unit(self.simulation.state.time * scale, "s")
            ),
        }
    }

    fn show(&mut self, report: &StepReport, from: f64) {
        let scales = &self.plan.scales;
        let state = &self.simulation.state;
        self.progress.update(&Moment {
            time: state.time * scales.time,
            until: self.plan.stop.time * scales.time,
            from: from * scales.time,
            step: report.step * scales.time,
            steps: state.ledger.accepted,
            free_energy: report.free_energy * scales.energy,
            free_energy_thermal: report.free_energy * scales.energy / scales.thermal_energy,
        });
    }

    /// Bring rows and frames onto the disk, then the checkpoint that counts them.
    fn checkpoint(&mut self, clocks: &mut Clocks) -> Result<Checkpoint, Failure> {
        let clock = Instant::now();
        self.series.sync()?;
        if let Some(pieces) = &self.pieces {
            pieces.sync()?;
        }
        self.frames.flush()?;
        let total = clocks.start.elapsed().as_secs_f64();
        let accounts = self.accounts.with(&self.simulation.timings, total, clocks.output);
        let checkpoint = Checkpoint::of(&self.plan, &self.simulation, &self.cursor, &accounts);
        checkpoint.write(&self.folder)?;
        clocks.output += clock.elapsed().as_secs_f64();
        clocks.checkpoint = Instant::now();
        Ok(checkpoint)
    }
}
