//! Writing frames beside the computation.
//!
//! A second thread takes whole frames from a bounded queue, writes each file and then its
//! entry in the series. The queue's bound caps the memory: when the disk is slower than the
//! computation, `submit` waits. The first failure stops the thread; the frame that failed
//! and those behind it stay in order and come back from `finish`, so that nothing is lost.

use std::any::Any;
use std::collections::VecDeque;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use std::thread::{self, JoinHandle};

use crate::{Compression, OwnedFrame, Series, VtkError, write_vtu};

/// Writes the frames of a series in a second thread.
///
/// Dropping it waits until the queue is written, but loses the error and the frames if that
/// fails; call [`finish`](Self::finish).
#[derive(Debug)]
pub struct BackgroundWriter {
    shared: Arc<Shared>,
    worker: Option<JoinHandle<Series>>,
    capacity: usize,
}

/// A frame that was not taken because an earlier one failed.
#[derive(Debug, thiserror::Error)]
#[error("{error}")]
pub struct Rejected {
    /// Why the earlier frame failed.
    #[source]
    pub error: VtkError,
    /// The frame that was not taken.
    pub frame: OwnedFrame,
}

/// What is left when not every frame could be written.
#[derive(Debug, thiserror::Error)]
#[error("{error} ({} frames are not written)", unwritten.len())]
pub struct Unfinished {
    /// Why the first of them failed.
    #[source]
    pub error: VtkError,
    /// The series with the frames written so far; `None` only after an internal error.
    pub series: Option<Series>,
    /// The frames not written, oldest first.
    pub unwritten: Vec<OwnedFrame>,
}

impl From<Box<Rejected>> for VtkError {
    fn from(rejected: Box<Rejected>) -> Self {
        rejected.error
    }
}

impl From<Box<Unfinished>> for VtkError {
    fn from(unfinished: Box<Unfinished>) -> Self {
        unfinished.error
    }
}

#[derive(Debug, Default)]
struct Shared {
    state: Mutex<State>,
    changed: Condvar,
}

#[derive(Debug, Default)]
struct State {
    /// Frames accepted and not yet written; the worker removes one only after it is safe.
    queue: VecDeque<Arc<OwnedFrame>>,
    closing: bool,
    failure: Option<Failure>,
}

#[derive(Clone, Debug)]
struct Failure {
    file_name: String,
    source: Arc<VtkError>,
}

impl Failure {
    fn error(&self) -> VtkError {
        VtkError::Background {
            file_name: self.file_name.clone(),
            source: Arc::clone(&self.source),
        }
    }
}

impl Shared {
    // The state holds no half-made changes at any point that could panic.
    fn lock(&self) -> MutexGuard<'_, State> {
        self.state.lock().unwrap_or_else(PoisonError::into_inner)
    }

    fn wait<'s>(&self, state: MutexGuard<'s, State>) -> MutexGuard<'s, State> {
        self.changed
            .wait(state)
            .unwrap_or_else(PoisonError::into_inner)
    }
}

impl BackgroundWriter {
    /// Starts the thread. `capacity` is the number of frames that may wait or be in work, at
    /// least 1; two let the computation go on while one frame is written.
    ///
    /// # Errors
    /// `Thread` if the system refuses one.
    pub fn start(
        series: Series,
        compression: Compression,
        capacity: usize,
    ) -> Result<Self, VtkError> {
        let shared = Arc::new(Shared::default());
        let worker = thread::Builder::new()
            .name("frame writer".into())
            .spawn({
                let shared = Arc::clone(&shared);
                move || work(&shared, series, compression)
            })
            .map_err(|source| VtkError::Thread { source })?;
        Ok(Self {
            shared,
            worker: Some(worker),
            capacity: capacity.max(1),
        })
    }

    /// Hands over a frame, waiting while the queue is full.
    ///
    /// # Errors
    /// [`Rejected`] if an earlier frame failed, at this and every later call; the frame is in it.
    pub fn submit(&self, frame: OwnedFrame) -> Result<(), Box<Rejected>> {
        let mut state = self.shared.lock();
        while state.failure.is_none() && state.queue.len() >= self.capacity {
            state = self.shared.wait(state);
        }
        if let Some(failure) = &state.failure {
            let error = failure.error();
            return Err(Box::new(Rejected { error, frame }));
        }
        state.queue.push_back(Arc::new(frame));
        self.shared.changed.notify_all();
        Ok(())
    }

    /// Waits until every frame handed over is on the disk and listed in the series, as is
    /// needed before a checkpoint counts them.
    ///
    /// # Errors
    /// `Background` if a frame failed.
    pub fn flush(&self) -> Result<(), VtkError> {
        let mut state = self.shared.lock();
        while state.failure.is_none() && !state.queue.is_empty() {
            state = self.shared.wait(state);
        }
        match &state.failure {
            Some(failure) => Err(failure.error()),
            None => Ok(()),
        }
    }

    /// Writes what is queued, ends the thread, and gives the series back.
    ///
    /// # Errors
    /// [`Unfinished`], with the frames that are not written.
    pub fn finish(mut self) -> Result<Series, Box<Unfinished>> {
        let joined = self.close();
        let mut state = self.shared.lock();
        let queue = std::mem::take(&mut state.queue);
        let unwritten = queue.into_iter().map(Arc::unwrap_or_clone).collect();
        let (error, series) = match (&state.failure, joined) {
            (None, Some(Ok(series))) => return Ok(series),
            (Some(failure), Some(Ok(series))) => (failure.error(), Some(series)),
            (_, Some(Err(payload))) => (panicked(payload.as_ref()), None),
            // `close` is called once before this, in `drop`, which `self` has not reached.
            (_, None) => (panicked(&"the thread is gone"), None),
        };
        Err(Box::new(Unfinished {
            error,
            series,
            unwritten,
        }))
    }

    fn close(&mut self) -> Option<thread::Result<Series>> {
        self.shared.lock().closing = true;
        self.shared.changed.notify_all();
        self.worker.take().map(JoinHandle::join)
    }
}

impl Drop for BackgroundWriter {
    fn drop(&mut self) {
        self.close();
    }
}

/// The thread's loop: front frame, write, remove; until closed and empty, or until a failure.
fn work(shared: &Shared, mut series: Series, compression: Compression) -> Series {
    loop {
        let mut state = shared.lock();
        while state.queue.is_empty() && !state.closing {
            state = shared.wait(state);
        }
        let Some(frame) = state.queue.front().map(Arc::clone) else {
            return series;
        };
        drop(state);

        let attempt = catch_unwind(AssertUnwindSafe(|| {
            series.check(frame.time, &frame.file_name)?;
            let path = series.frame_path(&frame.file_name);
            write_vtu(&path, &frame.borrow(), compression)?;
            series.push(frame.time, frame.file_name.as_str())
        }));
        let outcome = attempt.unwrap_or_else(|payload| Err(panicked(payload.as_ref())));
        let file_name = frame.file_name.clone();
        drop(frame);

        let mut state = shared.lock();
        let failed = match outcome {
            Ok(()) => {
                state.queue.pop_front();
                false
            }
            Err(error) => {
                let source = Arc::new(error);
                state.failure = Some(Failure { file_name, source });
                true
            }
        };
        shared.changed.notify_all();
        if failed {
            return series;
        }
    }
}

fn panicked(payload: &(dyn Any + Send)) -> VtkError {
    let message = payload
        .downcast_ref::<&str>()
        .map(|text| (*text).to_owned())
        .or_else(|| payload.downcast_ref::<String>().cloned())
        .unwrap_or_else(|| "no message".to_owned());
    VtkError::WriterPanicked { message }
}
