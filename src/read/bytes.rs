//! A file's bytes, and unpacking them, within a limit.

use std::fs::File;
use std::io::{ErrorKind, Read};
use std::path::Path;

use flate2::read::MultiGzDecoder;

use super::error::ReadError;

/// Largest file, unpacked, that is read: far above any table of spectra that one position is
/// chosen from, and below what would exhaust a small machine.
const LIMIT_BYTES: u64 = 1 << 30;

/// First two bytes of a gzip stream (RFC 1952).
pub(super) const GZIP_MAGIC: [u8; 2] = [0x1f, 0x8b];

/// Reads a whole file.
///
/// # Errors
///
/// The file is missing, unreadable or too large.
pub fn load(path: &Path) -> Result<Vec<u8>, ReadError> {
    let file = open(path)?;
    take(path, file, LIMIT_BYTES).map_err(|error| unreadable(path, &error))?
}

/// Opens a file.
///
/// # Errors
///
/// The file is missing or unreadable.
pub(super) fn open(path: &Path) -> Result<File, ReadError> {
    File::open(path).map_err(|error| unreadable(path, &error))
}

/// Unpacks a gzip stream.
///
/// # Errors
///
/// The stream is damaged, or too large or empty when unpacked.
pub(super) fn unpack(path: &Path, packed: &[u8]) -> Result<Vec<u8>, ReadError> {
    let bytes = take(path, MultiGzDecoder::new(packed), LIMIT_BYTES).map_err(|error| {
        ReadError::DamagedGzip {
            path: path.to_path_buf(),
            reason: error.to_string(),
        }
    })??;
    if bytes.is_empty() {
        return Err(ReadError::Empty {
            path: path.to_path_buf(),
        });
    }
    Ok(bytes)
}

/// All bytes of a source, if they are no more than the limit.
fn take(
    path: &Path,
    source: impl Read,
    limit_bytes: u64,
) -> std::io::Result<Result<Vec<u8>, ReadError>> {
    let mut bytes = Vec::new();
    source.take(limit_bytes + 1).read_to_end(&mut bytes)?;
    if bytes.len() as u64 > limit_bytes {
        return Ok(Err(ReadError::TooLarge {
            path: path.to_path_buf(),
            limit_bytes,
        }));
    }
    Ok(Ok(bytes))
}

fn unreadable(path: &Path, error: &std::io::Error) -> ReadError {
    if error.kind() == ErrorKind::NotFound {
        return ReadError::Missing {
            path: path.to_path_buf(),
        };
    }
    ReadError::Unreadable {
        path: path.to_path_buf(),
        reason: error.to_string(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_source_beyond_the_limit_is_refused_without_reading_on() {
        let endless = std::io::repeat(b' ');
        let error = take(Path::new("f"), endless, 1000).unwrap().unwrap_err();
        assert!(
            error.to_string().contains("more than 1000 bytes"),
            "{error}"
        );
        let whole = take(Path::new("f"), &[7_u8; 1000][..], 1000).unwrap();
        assert_eq!(whole.unwrap().len(), 1000);
    }
}
