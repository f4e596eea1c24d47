//! Files that are whole or absent: written under a temporary name beside their place, then renamed.

use std::io::{BufWriter, Write};
use std::path::{Path, PathBuf};

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
    let mut file = Unfinished::create(path)?;
    write(&mut file).map_err(|error| naming(path, error))?;
    file.finish()
}

/// A file that takes its name when it is finished; before that, dropping it leaves nothing behind.
#[derive(Debug)]
pub(super) struct Unfinished {
    path: PathBuf,
    writer: BufWriter<tempfile::NamedTempFile>,
}

impl Unfinished {
    /// An empty file beside its place.
    pub(super) fn create(path: &Path) -> Result<Self, ReportError> {
        let file = temporary(directory_of(path)).map_err(|source| file_error(path, source))?;
        Ok(Self {
            path: path.to_owned(),
            writer: BufWriter::new(file),
        })
    }

    /// Gives it its name; an existing file is replaced.
    pub(super) fn finish(self) -> Result<(), ReportError> {
        let path = &self.path;
        let file =
            (self.writer.into_inner()).map_err(|error| file_error(path, error.into_error()))?;
        file.persist(path)
            .map_err(|error| file_error(path, error.error))?;
        Ok(())
    }
}

/// Its errors carry the file's path: see [`naming`].
impl Write for Unfinished {
    fn write(&mut self, bytes: &[u8]) -> std::io::Result<usize> {
        (self.writer.write(bytes)).map_err(|source| with_path(&self.path, source))
    }

    fn flush(&mut self) -> std::io::Result<()> {
        (self.writer.flush()).map_err(|source| with_path(&self.path, source))
    }
}

fn with_path(path: &Path, source: std::io::Error) -> std::io::Error {
    std::io::Error::new(source.kind(), file_error(path, source))
}

/// An error of writing with the file that it is about: the one that it carries, else `path`.
pub(super) fn naming(path: &Path, error: ReportError) -> ReportError {
    match error {
        ReportError::Stream(source) => match source.downcast::<ReportError>() {
            Ok(named) => named,
            Err(source) => file_error(path, source),
        },
        other => other,
    }
}

pub(super) fn file_error(path: &Path, source: std::io::Error) -> ReportError {
    ReportError::File {
        path: path.to_owned(),
        source,
    }
}

fn directory_of(path: &Path) -> &Path {
    match path.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent,
        _ => Path::new("."),
    }
}

/// A new file under a name that says that it is unfinished.
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

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_error_keeps_the_name_of_its_own_file() {
        let full = || std::io::Error::from(std::io::ErrorKind::StorageFull);
        let table = Path::new("table.csv");
        let own = naming(table, with_path(Path::new("table.ecsv"), full()).into());
        assert!(own.to_string().starts_with("table.ecsv: cannot be written"));
        let other = naming(table, full().into());
        assert!(
            other
                .to_string()
                .starts_with("table.csv: cannot be written")
        );
        let not_of_a_file = ReportError::TooManyColumns { found: 1000 };
        let kept = naming(table, not_of_a_file);
        assert!(matches!(kept, ReportError::TooManyColumns { found: 1000 }));
    }
}
