//! Products of a map, from what is in its journal: tables, FITS maps, figures.

#[cfg(feature = "figures")]
use super::super::PairOutcome;
use super::super::products::make_directory;
use super::super::{Given, Journal, RunError};
use super::field::Field;
#[cfg(feature = "figures")]
use super::final_outcome;
use super::motions::{self, MapMotions};
use super::pointing::{Pointing, Work};
use super::{Found, MapRun, Second};
#[cfg(feature = "figures")]
use crate::fit::Workspace;
use crate::report::files::write_atomically;
use crate::report::motions as motions_table;
use crate::report::motions::{Entry, Part};
use crate::report::sky_map::{MapFrame, write_caution_map, write_map};
use crate::report::{Kind, ReportError, Row, TableFiles, Value, columns};
use std::collections::BTreeMap;
use std::fs::File;
use std::io::{BufReader, BufWriter, Read, Seek, Write};
use std::ops::Range;
use std::path::{Path, PathBuf};

/// What became of the pointings of a map.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct MapCounts {
    /// All, those outside of the coverage included.
    pub pointings: usize,
    /// Outside of the coverage of either line.
    pub blank: usize,
    /// Below the threshold.
    pub skipped: usize,
    /// Fitted.
    pub fitted: usize,
    /// Not usable.
    pub unusable: usize,
    /// The first few of those, with what was found.
    pub problems: Vec<String>,
}

/// Problems that are told one by one.
const MOST_PROBLEMS: usize = 5;

/// Products that are written.
pub(super) struct Made {
    pub counts: MapCounts,
    pub written: Vec<PathBuf>,
    /// What the map says of motions, for people.
    pub motions: String,
}

/// Writes all products; each is whole or absent.
pub(super) fn write(
    run: &MapRun,
    work: &Work<'_>,
    blocks: &[Range<usize>],
    journal: &Journal<Found>,
    #[cfg_attr(
        not(feature = "figures"),
        allow(unused_variables, reason = "figures alone ask for it")
    )]
    second: &Second,
) -> Result<Made, RunError> {
    let directory = &run.directory;
    let schema = columns::results();
    let meta = meta(run, work);
    let mut tables = TableFiles::begin(directory, "pointings", &schema, meta.clone())?;
    let mut maps = Maps::new(work.field);
    let mut counts = MapCounts {
        pointings: work.field.len(),
        ..MapCounts::default()
    };
    let (mut fitted, mut seen) = (Vec::new(), Vec::new());
    each_pointing(journal, blocks.len(), directory, |site, pointing| {
        let mut motions = None;
        let values = match pointing {
            Pointing::Blank | Pointing::Weak | Pointing::Moment(_) => return Ok(()),
            Pointing::Unusable { values, message } => {
                counts.unusable += 1;
                if counts.problems.len() < MOST_PROBLEMS {
                    counts
                        .problems
                        .push(format!("{}: {message}", work.field.id(site)));
                }
                values
            }
            Pointing::Skipped { values } => {
                counts.skipped += 1;
                values
            }
            Pointing::Fitted {
                values,
                motions: of,
                ..
            } => {
                counts.fitted += 1;
                fitted.push(site);
                motions = Some(of);
                values
            }
        };
        let row = schema.row_of(values)?;
        seen.extend(motions.and_then(|motions| motions::of_row(&row, &motions)));
        maps.take(work.field.cell(site).unwrap_or(site), &row);
        Ok(tables.push(&row)?)
    })?;
    counts.blank = counts.pointings - counts.skipped - counts.fitted - counts.unusable;
    if counts.fitted + counts.skipped == 0 {
        return Err(RunError::NoPointing {
            pointings: counts.unusable,
            first: counts.problems.first().cloned().unwrap_or_default(),
        });
    }
    let mut written = tables.finish()?;
    let distance_kpc = run.sheet.source.distance_kpc.map(Given::estimate);
    let found = motions::read(work, &fitted, seen, distance_kpc)?;
    written.extend(write_motions(&found, directory, &meta)?);
    maps.write(work.field, directory, (&meta, &found), &mut written)?;
    #[cfg(feature = "figures")]
    if run.sheet.output.figures {
        super::figures::write(run, work, &maps, &mut written)?;
        super::figures_of_motions::write(run, work, &maps, &found, &mut written)?;
        super::figures::write_spectra(run, work, second, &fitted, &mut written)?;
        if run.pages {
            write_pages(run, work, second, &fitted, &mut written)?;
        }
    }
    let sheet = run.resolved();
    let path = directory.join("run.toml");
    let text = sheet.to_toml()?;
    write_atomically(&path, |writer| Ok(writer.write_all(text.as_bytes())?))?;
    written.push(path);
    let [thick, thin] = work.field.lines();
    let name = (work.field.name()).map_or_else(String::new, |name| format!("{name}: "));
    let title = format!("{name}{} (thick) and {} (thin)", thick.name, thin.name);
    Ok(Made {
        counts,
        written,
        motions: motions_table::text(&title, &found.entries),
    })
}

/// The table of what the map says of motions.
fn write_motions(
    found: &MapMotions,
    directory: &Path,
    meta: &[(String, Value)],
) -> Result<Vec<PathBuf>, RunError> {
    let schema = motions_table::schema()?;
    let mut files = TableFiles::begin(directory, "motions", &schema, meta.to_vec())?;
    for row in motions_table::table(&found.entries)?.rows() {
        files.push(row)?;
    }
    Ok(files.finish()?)
}

/// Every pointing as it is in the end, in order: that of the second pass in place of that of the first.
fn each_pointing(
    journal: &Journal<Found>,
    blocks: usize,
    directory: &Path,
    mut each: impl FnMut(usize, Pointing) -> Result<(), RunError>,
) -> Result<(), RunError> {
    let failed = |source| RunError::File {
        path: directory.to_owned(),
        source,
    };
    let internal = |error: &dyn std::fmt::Display| RunError::Internal(error.to_string());
    // The second pass waits in a temporary file, not in memory.
    let mut spool = BufWriter::new(tempfile::tempfile_in(directory).map_err(failed)?);
    for found in journal.results()?.skip(blocks) {
        for replaced in found?
            .1
            .map_err(|failure| RunError::Internal(failure.message))?
        {
            let bytes = postcard::to_allocvec(&replaced).map_err(|error| internal(&error))?;
            let length = u32::try_from(bytes.len()).unwrap_or(u32::MAX);
            spool.write_all(&length.to_be_bytes()).map_err(failed)?;
            spool.write_all(&bytes).map_err(failed)?;
        }
    }
    let mut spool = (spool.into_inner()).map_err(|error| failed(error.into_error()))?;
    spool.rewind().map_err(failed)?;
    let mut spool = BufReader::new(spool);
    let mut next = next_of(&mut spool).map_err(failed)?;
    for found in journal.results()?.take(blocks) {
        for (number, mut pointing) in found?
            .1
            .map_err(|failure| RunError::Internal(failure.message))?
        {
            let site = usize::try_from(number).unwrap_or(usize::MAX);
            let replaced = next.take_if(|(other, _)| *other == number);
            if let Some((_, replaced)) = replaced {
                next = next_of(&mut spool).map_err(failed)?;
                match (&mut pointing, replaced) {
                    (Pointing::Fitted { motions, .. }, Pointing::Moment(moment)) => {
                        motions.thick_moment_km_s = moment;
                    }
                    (_, replaced) => pointing = replaced,
                }
            }
            each(site, pointing)?;
        }
    }
    Ok(())
}

fn next_of(spool: &mut BufReader<File>) -> std::io::Result<Option<(u64, Pointing)>> {
    let mut length = [0; 4];
    match spool.read_exact(&mut length) {
        Err(error) if error.kind() == std::io::ErrorKind::UnexpectedEof => return Ok(None),
        other => other?,
    }
    let mut bytes = vec![0; u32::from_be_bytes(length) as usize];
    spool.read_exact(&mut bytes)?;
    postcard::from_bytes(&bytes)
        .map(Some)
        .map_err(std::io::Error::other)
}

/// Facts about the run that every product carries.
fn meta(run: &MapRun, work: &Work<'_>) -> Vec<(String, Value)> {
    let text = |text: &str| Value::from(text);
    let sheet = &run.sheet;
    let mut meta = vec![
        ("program".to_owned(), text("Inrush")),
        ("version".to_owned(), text(env!("CARGO_PKG_VERSION"))),
        (
            "seed".to_owned(),
            Value::Integer(i64::try_from(sheet.seed).unwrap_or(i64::MAX)),
        ),
        ("source".to_owned(), Value::from(work.field.name())),
        ("models".to_owned(), text(&sheet.fit.models.join(" "))),
        (
            "threshold_sigma".to_owned(),
            Value::Real(sheet.grid.threshold_sigma),
        ),
    ];
    for (which, line) in ["thick", "thin"].into_iter().zip(work.field.lines()) {
        meta.push((format!("{which}_line"), text(&line.name)));
        meta.push((
            format!("{which}_rest_frequency_ghz"),
            Value::Real(line.rest_frequency_ghz),
        ));
    }
    if let Some(position) = work.field.reference() {
        meta.push((
            "offsets_from_frame".to_owned(),
            text(&position.frame.to_string()),
        ));
        for (name, value) in [
            ("offsets_from_longitude_deg", position.longitude_deg),
            ("offsets_from_latitude_deg", position.latitude_deg),
        ] {
            meta.push((name.to_owned(), Value::Real(value)));
        }
    }
    if let Some(beam) = work.field.beam() {
        for (name, value) in [
            ("beam_major_arcsec", beam.major_arcsec),
            ("beam_minor_arcsec", beam.minor_arcsec),
            ("beam_angle_deg", beam.angle_deg),
        ] {
            meta.push((name.to_owned(), Value::Real(value)));
        }
    }
    if !work.field.notes().is_empty() {
        meta.push(("notes".to_owned(), text(&work.field.notes().join("; "))));
    }
    meta
}

/// Every numeric column over the raster, or, where there is none, one pointing after the other.
pub(super) struct Maps {
    /// Columns and rows.
    size: (usize, usize),
    /// A column's values, from the first that is there.
    columns: Vec<Option<Vec<f32>>>,
    /// Bits of the cautions by the order in which they came, and which code each is.
    bits: Vec<u64>,
    codes: Vec<String>,
}

/// Columns that say where a pointing is are no maps.
const PLACES: [&str; 2] = ["dx_arcsec", "dy_arcsec"];

/// Bits of the caution map.
const MOST_CODES: usize = 63;

impl Maps {
    fn new(field: &Field) -> Self {
        let size = field.raster().unwrap_or((field.len(), 1));
        Self {
            size,
            columns: vec![None; columns::results().columns().len()],
            bits: vec![0; size.0 * size.1],
            codes: Vec::new(),
        }
    }

    // Maps are single precision, as their data are.
    #[allow(clippy::cast_possible_truncation)]
    fn take(&mut self, cell: usize, row: &Row) {
        let (width, height) = self.size;
        for (column, value) in self.columns.iter_mut().zip(row.values()) {
            if let Value::Real(number) = value {
                let values = column.get_or_insert_with(|| vec![f32::NAN; width * height]);
                values[cell] = *number as f32;
            }
        }
        let codes = row.find("cautions").and_then(Value::text);
        for code in codes
            .unwrap_or_default()
            .split(';')
            .filter(|code| !code.is_empty())
        {
            let known = self.codes.iter().position(|known| known == code);
            let bit = known.unwrap_or_else(|| {
                self.codes.push(code.to_owned());
                self.codes.len() - 1
            });
            if bit < MOST_CODES {
                self.bits[cell] |= 1 << bit;
            }
        }
    }

    /// Values of a column, cell by cell.
    #[cfg(feature = "figures")]
    pub fn column(&self, name: &str) -> Option<&[f32]> {
        let schema = columns::results();
        let place = (schema.columns().iter()).position(|column| column.name == name)?;
        self.columns[place].as_deref()
    }

    fn write(
        &self,
        field: &Field,
        directory: &Path,
        (meta, found): (&[(String, Value)], &MapMotions),
        written: &mut Vec<PathBuf>,
    ) -> Result<(), RunError> {
        // Pointings off any raster have a table alone.
        let (Some((width, height)), Some(axes)) = (field.raster(), field.axes()) else {
            return Ok(());
        };
        let folder = directory.join("maps");
        make_directory(&folder)?;
        let verdict = |entry: &&Entry| entry.part == Part::Verdict;
        let lines = |keep: &dyn Fn(&&Entry) -> bool| {
            let entries = found.entries.iter().filter(keep);
            let pairs = entries.map(motions_table::line);
            pairs
                .map(|(name, text)| (name, Value::from(text)))
                .collect::<Vec<_>>()
        };
        let mut frame = MapFrame {
            width,
            height,
            axes,
            beam: field.beam(),
            meta: [meta, &lines(&verdict)].concat(),
        };
        let common = frame.meta.clone();
        let mut write =
            |name: &str, content: &dyn Fn(&mut dyn Write) -> Result<(), ReportError>| {
                let path = folder.join(format!("{name}.fits"));
                write_atomically(&path, content)?;
                written.push(path);
                Ok::<(), RunError>(())
            };
        let schema = columns::results();
        for (column, values) in schema.columns().iter().zip(&self.columns) {
            let Some(values) = values else {
                continue;
            };
            if column.kind != Kind::Real || PLACES.contains(&column.name.as_str()) {
                continue;
            }
            frame.meta = [&common[..], &lines(&|entry| entry.column == column.name)].concat();
            let words = (&*column.name, column.unit.as_deref(), &*column.description);
            write(&column.name, &|writer| {
                write_map(&frame, words, values, writer)
            })?;
        }
        frame.meta = common;
        // Bits in the order of the codes' names, whatever the order in which they came.
        let sorted: BTreeMap<&String, usize> = (self.codes.iter().take(MOST_CODES))
            .enumerate()
            .map(|(bit, code)| (code, bit))
            .collect();
        let bits: Vec<u64> = (self.bits.iter())
            .map(|bits| {
                (sorted.values().enumerate())
                    .map(|(new, old)| (bits >> old & 1) << new)
                    .sum()
            })
            .collect();
        let legend: Vec<String> = sorted.into_keys().cloned().collect();
        write("cautions", &|writer| {
            write_caution_map(&frame, &legend, &bits, writer)
        })
    }
}

/// A page for every fitted pointing.
#[cfg(feature = "figures")]
fn write_pages(
    run: &MapRun,
    work: &Work<'_>,
    second: &Second,
    fitted: &[usize],
    written: &mut Vec<PathBuf>,
) -> Result<(), RunError> {
    use std::ops::ControlFlow;
    let folder = run.directory.join("pages");
    make_directory(&folder)?;
    let draw = |outcome: &PairOutcome| super::super::figure::pair_figure(outcome).pdf();
    let ended = run.batch.run(
        fitted.iter().copied(),
        Workspace::new,
        |workspace, site| {
            let path = folder.join(format!("{}.pdf", file_name(&work.field.id(site))));
            if let Some(outcome) = final_outcome(work, second, site, workspace)? {
                let bytes = draw(&outcome)?;
                write_atomically(&path, |writer| Ok(writer.write_all(&bytes)?))?;
            }
            Ok::<PathBuf, RunError>(path)
        },
        |_, path| match path {
            Ok(path) => {
                written.push(path);
                ControlFlow::Continue(())
            }
            Err(error) => ControlFlow::Break(error),
        },
    )?;
    match ended {
        ControlFlow::Break(error) => Err(error),
        ControlFlow::Continue(_) => Ok(()),
    }
}

/// A name without what paths give a meaning to.
#[cfg(feature = "figures")]
fn file_name(id: &str) -> String {
    let safe = |letter: char| letter.is_alphanumeric() || "-_.+".contains(letter);
    let name: String = id.chars().map(|c| if safe(c) { c } else { '_' }).collect();
    name.trim_start_matches('.').to_owned()
}
