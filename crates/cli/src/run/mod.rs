//! One run: the loop over steps, what it writes, and how it is taken up again.
//!
//! Data flow: plan + simulation → [`drive`] → rows ([`series`]), frames ([`frames`]), checkpoints ([`checkpoint`]),
//! log and progress, and at the end [`summary`]. What has been written and what comes next stands in a [`cursor`],
//! which is part of each checkpoint; everything on the disk beyond it is dropped when a run is taken up again.

pub mod checkpoint;
pub mod columns;
pub mod cursor;
pub mod drive;
pub mod folder;
pub mod frames;
pub mod lock;
pub mod log;
pub mod plan;
pub mod progress;
pub mod reasons;
pub mod resume;
pub mod seam;
pub mod series;
pub mod signals;
pub mod start;
pub mod summary;
pub mod words;
