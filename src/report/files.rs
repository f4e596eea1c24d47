//! Files that are whole or absent: written under a temporary name beside their place, then renamed.

use std::io::{BufWriter, Write};
use std::path::Path;

use super::ReportError;

/// Writes a file through `write`; on any error the path is left as it was, and no temporary file
/// stays behind. An existing file is replaced.
///
/// ```
/// use inrush::report::files::write_atomically;
///
/// let directory = tempfile::tempdir()?;
/// let path = directory.path().join("note.txt");
/// write_atomically(&path, |writer| Ok(writer.write_all(b"whole")?))?;
/// assert_eq!(std::fs::read(&path)?, b"whole");
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
///
/// # Errors
///
/// [`ReportError::File`] naming the path where the system refuses, and whatever `write` returns.
pub fn write_atomically(
    path: &Path,
    write: impl FnOnce(&mut dyn Write) -> Result<(), ReportError>,
) -> Result<(), ReportError> {
    let failed = |source| ReportError::File {
        path: path.to_owned(),
        source,
    };
    let directory = match path.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent,
        _ => Path::new("."),
    };
    let file = temporary(directory).map_err(failed)?;
    let mut writer = BufWriter::new(file);
    write(&mut writer).map_err(|error| match error {
        ReportError::Stream(source) => failed(source),
        other => other,
    })?;
    let file = writer
        .into_inner()
        .map_err(|error| failed(error.into_error()))?;
    file.persist(path).map_err(|error| failed(error.error))?;
    Ok(())
}

fn temporary(directory: &Path) -> std::io::Result<tempfile::NamedTempFile> {
    let mut builder = tempfile::Builder::new();
    builder.prefix(".unfinished-");
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        // As any new file: readable to all, less what the umask takes away.
        builder.permissions(std::fs::Permissions::from_mode(0o666));
    }
    builder.tempfile_in(directory)
}
