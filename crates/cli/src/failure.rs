//! Why the program ends without having done what was asked, and the exit code that says so.

use pellicle_vtk::VtkError;
use std::io;
use std::path::Path;

/// Exit code of a run that was interrupted (128 + SIGINT, as shells have it).
pub const INTERRUPTED: u8 = 130;

/// Why the program ends without having done what was asked.
#[derive(Debug, thiserror::Error)]
pub enum Failure {
    /// The command line, the scenario, or a directory that must not be overwritten.
    #[error("{0}")]
    Input(String),
    /// Unreadable, unwritable, disc full, damaged, or in use.
    #[error("{0}")]
    Files(String),
    /// The solver stopped the run.
    #[error("{0}")]
    Numerical(String),
}

impl Failure {
    /// The process's exit code.
    pub fn exit_code(&self) -> u8 {
        match self {
            Self::Numerical(_) => 1,
            Self::Input(_) => 2,
            Self::Files(_) => 3,
        }
    }

    /// The system refused something: `cannot write series.csv: disc full`.
    pub fn system(action: &str, path: &Path, error: &io::Error) -> Self {
        let mend = match error.kind() {
            io::ErrorKind::StorageFull | io::ErrorKind::QuotaExceeded => {
                "; make room, then go on with `pellicle resume`"
            }
            io::ErrorKind::FileTooLarge => "; raise the limit on file sizes, then go on with `pellicle resume`",
            io::ErrorKind::PermissionDenied | io::ErrorKind::ReadOnlyFilesystem => {
                "; choose a directory that may be written with --out"
            }
            _ => "",
        };
        Self::Files(format!("cannot {action} {}: {error}{mend}", path.display()))
    }
}

impl From<VtkError> for Failure {
    fn from(error: VtkError) -> Self {
        match &error {
            VtkError::Io {
                action,
                path,
                source,
            } => Self::system(action, path, source),
            VtkError::Background { source, .. } => match source.as_ref() {
                VtkError::Io {
                    action,
                    path,
                    source,
                } => Self::system(action, path, source),
                _ => Self::Files(error.to_string()),
            },
            _ => Self::Files(error.to_string()),
        }
    }
}
