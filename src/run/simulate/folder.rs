//! A new folder that is whole or absent: made under a temporary name, then renamed.

use crate::run::products::{holds_something, make_directory, parent};
use crate::run::{RunError, check_directory};
use std::fs;
use std::path::Path;

/// Makes a folder through `fill`, which gets its temporary place.
///
/// # Errors
///
/// [`RunError::Occupied`] where the folder holds something, [`RunError::File`] where it cannot be made, and
/// whatever `fill` returns.
pub(super) fn fill_folder(
    directory: &Path,
    fill: impl FnOnce(&Path) -> Result<(), RunError>,
) -> Result<(), RunError> {
    check_directory(directory)?;
    if holds_something(directory)? {
        return Err(RunError::Occupied {
            path: directory.to_owned(),
        });
    }
    let unfinished = unfinished_beside(directory)?;
    fill(unfinished.path())?;
    let failed = |source| file_error(directory, source);
    if directory.exists() {
        fs::remove_dir(directory).map_err(failed)?;
    }
    fs::rename(unfinished.path(), directory).map_err(failed)?;
    // it has another name now: nothing is left to remove
    let _ = unfinished.keep();
    Ok(())
}

/// A folder under a temporary name, on the file system of its later place.
fn unfinished_beside(directory: &Path) -> Result<tempfile::TempDir, RunError> {
    let parent = parent(directory);
    make_directory(parent)?;
    let mut builder = tempfile::Builder::new();
    builder.prefix(".unfinished-");
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        // as any new folder: open to all, less what the umask takes away
        builder.permissions(fs::Permissions::from_mode(0o777));
    }
    builder
        .tempdir_in(parent)
        .map_err(|source| file_error(parent, source))
}

pub(super) fn file_error(path: &Path, source: std::io::Error) -> RunError {
    RunError::File {
        path: path.to_owned(),
        source,
    }
}
