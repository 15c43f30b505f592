//! Files that appear whole or not at all.

use std::fs::File;
use std::io::{self, BufWriter, Write as _};
use std::path::Path;

use crate::VtkError;

/// Writes a file under a temporary name in the same folder, flushes it to the disk, and moves
/// it onto `path`. A reader, or a machine that stops, sees the old file or the new one; on an
/// error the old file stays and the temporary one is removed.
pub(crate) fn replace(
    path: &Path,
    write: impl FnOnce(&mut BufWriter<&mut File>) -> io::Result<()>,
) -> Result<(), VtkError> {
    let failed = |action| {
        move |source| VtkError::Io {
            action,
            path: path.to_owned(),
            source,
        }
    };
    let folder = match path.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent,
        _ => Path::new("."),
    };
    let mut builder = tempfile::Builder::new();
    builder.prefix(".unfinished-").suffix(".tmp");
    #[cfg(unix)]
    {
        // Temporary files are private by default; results follow the user's umask instead.
        use std::os::unix::fs::PermissionsExt as _;
        builder.permissions(std::fs::Permissions::from_mode(0o666));
    }
    let mut temporary = builder.tempfile_in(folder).map_err(failed("create"))?;
    let mut buffer = BufWriter::with_capacity(1 << 16, temporary.as_file_mut());
    write(&mut buffer)
        .and_then(|()| buffer.flush())
        .map_err(failed("write"))?;
    drop(buffer);
    temporary
        .as_file()
        .sync_all()
        .map_err(failed("flush to the disk"))?;
    temporary
        .persist(path)
        .map_err(|error| failed("move into place")(error.error))?;
    // The new name is safe only when the folder has reached the disk, too.
    #[cfg(unix)]
    File::open(folder)
        .and_then(|folder| folder.sync_all())
        .map_err(failed("flush to the disk the folder of"))?;
    Ok(())
}
