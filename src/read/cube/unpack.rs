//! Gzip streams of any length into a temporary file.

use std::fs::File;
use std::io::{self, BufReader, BufWriter, Read, Seek, Write};
use std::path::Path;

use flate2::read::MultiGzDecoder;

use super::unreadable;
use crate::read::bytes::GZIP_MAGIC;
use crate::read::error::ReadError;
use crate::read::fits;

const BUFFER_BYTES: usize = 1 << 18;

/// The file itself, or what its gzip stream holds.
pub(super) fn gunzipped(path: &Path, mut file: File, scratch: &Path) -> Result<File, ReadError> {
    let mut magic = [0; 2];
    let packed = file.read_exact(&mut magic).is_ok() && magic == GZIP_MAGIC;
    file.rewind().map_err(|error| unreadable(path, &error))?;
    if !packed {
        return Ok(file);
    }
    let no_scratch = |error: io::Error| no_scratch(path, scratch, &error);
    let mut unpacked = BufWriter::with_capacity(BUFFER_BYTES, temporary(path, scratch)?);
    let mut stream = MultiGzDecoder::new(BufReader::with_capacity(BUFFER_BYTES, file));
    let mut buffer = vec![0; BUFFER_BYTES];
    loop {
        let length = stream
            .read(&mut buffer)
            .map_err(|error| ReadError::DamagedGzip {
                path: path.to_path_buf(),
                reason: error.to_string(),
            })?;
        if length == 0 {
            break;
        }
        unpacked.write_all(&buffer[..length]).map_err(no_scratch)?;
    }
    let mut unpacked = (unpacked.into_inner()).map_err(|error| no_scratch(error.into_error()))?;
    unpacked.rewind().map_err(no_scratch)?;
    Ok(unpacked)
}

/// Refuses a file that does not begin as FITS does.
pub(super) fn refuse_other_content(
    path: &Path,
    file: &mut File,
    length: u64,
) -> Result<(), ReadError> {
    if length == 0 {
        return Err(ReadError::Empty {
            path: path.to_path_buf(),
        });
    }
    let mut start = Vec::new();
    (Read::by_ref(file)
        .take(fits::MAGIC.len() as u64)
        .read_to_end(&mut start))
    .map_err(|error| unreadable(path, &error))?;
    if start == fits::MAGIC {
        return Ok(());
    }
    Err(ReadError::NotFits {
        path: path.to_path_buf(),
        found: start.escape_ascii().to_string(),
    })
}

/// A nameless file that is gone when it is closed.
pub(super) fn temporary(path: &Path, scratch: &Path) -> Result<File, ReadError> {
    tempfile::tempfile_in(scratch).map_err(|error| no_scratch(path, scratch, &error))
}

pub(super) fn no_scratch(path: &Path, scratch: &Path, error: &io::Error) -> ReadError {
    ReadError::NoScratch {
        path: path.to_path_buf(),
        scratch: scratch.to_path_buf(),
        reason: error.to_string(),
    }
}
