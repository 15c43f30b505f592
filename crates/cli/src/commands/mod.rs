//! What the program can be told to do, one file per command.

pub mod check;
pub mod closing;
pub mod completions;
pub mod measure;
pub mod report;
pub mod resume;
pub mod run;
pub mod scan;
pub mod schema;
