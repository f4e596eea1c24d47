//! One table as CSV, ECSV and FITS, a row at a time.
//!
//! However many rows there are, none is kept in memory: each goes to the disk as it comes, and the
//! files take their names when the last is there.

use std::fs::File;
use std::io::Write;
use std::path::{Path, PathBuf};

use super::csv::CsvRows;
use super::files::{Unfinished, file_error, naming};
use super::fits_table::FitsRows;
use super::{ReportError, Row, Schema, Value, ecsv};

/// The three files of a table under way. Their bytes are those of [`write_csv`](super::write_csv),
/// [`write_ecsv`](super::write_ecsv) and [`write_fits`](super::write_fits) for the same rows. Dropped
/// before [`TableFiles::finish`], it leaves nothing behind.
///
/// ```
/// use inrush::report::{TableFiles, columns};
///
/// let directory = tempfile::tempdir()?;
/// let schema = columns::results();
/// let mut files = TableFiles::begin(directory.path(), "sample", &schema, Vec::new())?;
/// for speed_km_s in [0.31, -0.02] {
///     let mut row = schema.row();
///     row.set("v_in_km_s", speed_km_s)?;
///     files.push(&row)?;
/// }
/// let written = files.finish()?;
/// assert_eq!(written[0], directory.path().join("sample.csv"));
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
#[derive(Debug)]
pub struct TableFiles {
    /// Both texts hold the same rows.
    texts: CsvRows<Both>,
    /// Written from its rows when the last is there.
    fits: Unfinished,
    fits_rows: FitsRows<File>,
    meta: Vec<(String, Value)>,
    paths: [PathBuf; 3],
}

impl TableFiles {
    /// Begins `stem.csv`, `stem.ecsv` and `stem.fits` in a directory that exists. `meta` are facts about
    /// the whole table, as in [`Table::meta`](super::Table::meta).
    ///
    /// # Errors
    ///
    /// [`ReportError::File`] where the directory cannot be written to, [`ReportError::TooManyColumns`]
    /// beyond 999.
    pub fn begin(
        directory: &Path,
        stem: &str,
        schema: &Schema,
        meta: Vec<(String, Value)>,
    ) -> Result<Self, ReportError> {
        let paths = ["csv", "ecsv", "fits"].map(|kind| directory.join(format!("{stem}.{kind}")));
        let [csv, ecsv, fits] = &paths;
        let mut both = Both {
            csv: Unfinished::create(csv)?,
            ecsv: Unfinished::create(ecsv)?,
        };
        let header = ecsv::header(schema, &meta);
        (both.ecsv.write_all(header.as_bytes())).map_err(|error| naming(ecsv, error.into()))?;
        let spool = tempfile::tempfile_in(directory).map_err(|source| file_error(fits, source))?;
        Ok(Self {
            texts: CsvRows::begin(schema, both).map_err(|error| naming(csv, error))?,
            fits: Unfinished::create(fits)?,
            fits_rows: FitsRows::begin(schema, spool)?,
            meta,
            paths,
        })
    }

    /// Writes a row.
    ///
    /// # Errors
    ///
    /// [`ReportError::ForeignRow`] where it was made for other columns, [`ReportError::File`] naming the
    /// file that cannot be written.
    pub fn push(&mut self, row: &Row) -> Result<(), ReportError> {
        let [csv, _, fits] = &self.paths;
        (self.texts.push(row)).map_err(|error| naming(csv, error))?;
        (self.fits_rows.push(row)).map_err(|error| naming(fits, error))
    }

    /// Completes the files and gives them their names, replacing files of these names; returns their
    /// paths, CSV, ECSV and FITS.
    ///
    /// # Errors
    ///
    /// [`ReportError::File`] naming the file that cannot be written.
    pub fn finish(self) -> Result<Vec<PathBuf>, ReportError> {
        let [csv, _, fits] = &self.paths;
        let mut fits_file = self.fits;
        (self.fits_rows.finish(&self.meta, &mut fits_file)).map_err(|error| naming(fits, error))?;
        let both = (self.texts.finish()).map_err(|error| naming(csv, error))?;
        both.csv.finish()?;
        both.ecsv.finish()?;
        fits_file.finish()?;
        Ok(self.paths.into())
    }
}

/// The same bytes into both files.
#[derive(Debug)]
struct Both {
    csv: Unfinished,
    ecsv: Unfinished,
}

impl Write for Both {
    fn write(&mut self, bytes: &[u8]) -> std::io::Result<usize> {
        self.csv.write_all(bytes)?;
        self.ecsv.write_all(bytes)?;
        Ok(bytes.len())
    }

    fn flush(&mut self) -> std::io::Result<()> {
        self.csv.flush()?;
        self.ecsv.flush()
    }
}
