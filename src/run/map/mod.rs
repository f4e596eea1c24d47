//! A map: every pointing of a field through the whole chain, on all cores.
//!
//! Two passes. In the first, each pointing is fitted by itself. In the second, those whose neighbours found
//! another solution are fitted with these among the starts, those whose thin line is not detected with
//! its mean over the beam, or over the map, in its place, and all get a first moment over one range. Each pass depends on what the one before found
//! alone, so that results are the same for any number of threads. What is done is in a journal (see
//! `durable.rs`); products are made from it.

mod field;
#[cfg(feature = "figures")]
mod figures;
#[cfg(feature = "figures")]
mod figures_of_motions;
mod motions;
mod pointing;
mod products;

pub use products::MapCounts;

use super::{
    BatchSettings, Ended, Journal, Opened, Progress, RunError, RunIdentity, RunRecord, RunSheet,
    Watch, inputs_sha256,
};
use crate::fit::{Workspace, fit_thin};
use crate::grid::{ThinMean, common_range};
use crate::prepare::{Expected, prepare};
use crate::spectrum::{Spectrum, Window};
use field::{Block, Field};
use pointing::{Again, Pointing, Solution, Work};
use std::collections::HashMap;
use std::ops::Range;
use std::path::{Path, PathBuf};

/// Neighbours whose solutions a search begins with.
const MOST_NEIGHBOURS: usize = 4;

/// A map to be made.
#[derive(Clone, Debug)]
pub struct MapRun {
    /// The run sheet.
    pub sheet: RunSheet,
    /// What its paths are relative to.
    pub base: PathBuf,
    /// Directory of the products.
    pub directory: PathBuf,
    /// Threads.
    pub batch: BatchSettings,
    /// Whether an unfinished run is gone on with.
    pub resume: bool,
    /// Whether every fitted pointing gets a page.
    pub pages: bool,
}

/// How a map ended.
#[derive(Clone, Debug)]
pub enum MapEnd {
    /// All products are written.
    Done {
        /// What became of the pointings.
        counts: MapCounts,
        /// The products, in order.
        written: Vec<PathBuf>,
        /// What was done or assumed on the way.
        notes: Vec<String>,
        /// What the map says of motions, for people.
        motions: String,
    },
    /// This run was finished before.
    Before(RunRecord),
    /// Stopped; it can be gone on with.
    Stopped(Progress),
}

/// What a block of a pass found: number of the pointing, and what became of it.
type Found = Vec<(u64, Pointing)>;

/// Makes a map.
///
/// # Errors
///
/// [`RunError`] where sheet, files or output directory cannot be used, or no pointing can.
pub fn make_map(run: &MapRun, watch: Watch<'_>) -> Result<MapEnd, RunError> {
    let settings = run.sheet.pair_settings()?;
    super::check_directory(&run.directory)?;
    let scratch = Scratch::beside(&run.directory)?;
    let field = Field::open(&run.sheet, &run.base, scratch.path())?;
    let blocks = field.blocks();
    let identity = RunIdentity::new(
        "map",
        2 * blocks.len() as u64,
        &run.sheet.to_toml()?,
        inputs_sha256(run.inputs()),
    );
    let mut journal: Journal<Found> = match Journal::open(&run.directory, identity, run.resume)? {
        Opened::Journal(journal) => journal,
        Opened::Finished(record) => return Ok(MapEnd::Before(record)),
    };
    let work = Work {
        field: &field,
        settings: &settings,
        threshold_sigma: run.sheet.grid.threshold_sigma,
    };
    let ended = passes(run, &work, &blocks, &mut journal, watch)?;
    if let Ended::Stopped(progress) = ended {
        return Ok(MapEnd::Stopped(progress));
    }
    let second = Second::plan(&work, &journal, blocks.len())?;
    let made = products::write(run, &work, &blocks, &journal, &second)?;
    journal.finish(made.counts.unusable as u64)?;
    Ok(MapEnd::Done {
        counts: made.counts,
        written: made.written,
        notes: field.notes().to_vec(),
        motions: made.motions,
    })
}

impl MapRun {
    /// The sheet with every default written out, and paths as seen from the products.
    fn resolved(&self) -> RunSheet {
        let mut sheet = self.sheet.clone();
        let files = [
            &mut sheet.thick.file,
            &mut sheet.thin.file,
            &mut sheet.grid.pointings,
        ];
        for file in files.into_iter().flatten() {
            *file = super::products::relative(&self.base.join(&*file), &self.directory);
        }
        sheet
    }

    /// Files whose contents the results depend on.
    fn inputs(&self) -> Vec<PathBuf> {
        let sheet = &self.sheet;
        let mut files = Vec::new();
        if let Some(table) = &sheet.grid.pointings {
            let table = self.base.join(table);
            // A table that cannot be read has been refused already.
            let pointings = crate::read::pointings::read_pointings(&table).unwrap_or_default();
            files.push(table);
            files.extend(pointings.into_iter().flat_map(|one| [one.thick, one.thin]));
        } else {
            let given = [&sheet.thick.file, &sheet.thin.file];
            files.extend(given.into_iter().flatten().map(|file| self.base.join(file)));
        }
        files
    }
}

/// A folder for temporary files beside the products: where they go there is room.
struct Scratch(PathBuf);

impl Scratch {
    fn beside(directory: &Path) -> Result<Self, RunError> {
        let parent = super::products::parent(directory);
        super::products::make_directory(parent)?;
        Ok(Self(parent.to_owned()))
    }

    fn path(&self) -> &Path {
        &self.0
    }
}

/// Both passes, as far as they are not in the journal.
fn passes(
    run: &MapRun,
    work: &Work<'_>,
    blocks: &[Range<usize>],
    journal: &mut Journal<Found>,
    watch: Watch<'_>,
) -> Result<Ended, RunError> {
    let Watch { stop, progress } = watch;
    let first = run.batch.run_durably(
        journal,
        blocks.iter(),
        Workspace::new,
        |workspace, sites: &Range<usize>| {
            let block = work.field.read(sites)?;
            Ok((sites.clone())
                .map(|site| (site as u64, work.alone(site, &block, workspace)))
                .filter(|(_, pointing)| !matches!(pointing, Pointing::Blank))
                .collect())
        },
        Watch { stop, progress },
    )?;
    if matches!(first, Ended::Stopped(_)) {
        return Ok(first);
    }
    let second = Second::plan(work, journal, blocks.len())?;
    let none = 0..0;
    run.batch.run_durably(
        journal,
        blocks.iter().map(|_| &none).chain(blocks),
        Workspace::new,
        |workspace, sites: &Range<usize>| {
            let wanted: Vec<usize> = (sites.clone())
                .filter(|site| second.concerns(*site) || second.windows.contains_key(site))
                .collect();
            if wanted.is_empty() {
                return Ok(Found::new());
            }
            let block = work.field.read(sites)?;
            wanted
                .into_iter()
                .map(|site| {
                    if let (false, Some(window), Some(range)) = (
                        second.concerns(site),
                        second.windows.get(&site),
                        second.range,
                    ) {
                        return Ok((site as u64, work.moment(site, &block, *window, range)));
                    }
                    let again = second.again(work.field, site)?;
                    Ok((site as u64, work.again(site, &block, &again, workspace)))
                })
                .collect()
        },
        Watch { stop, progress },
    )
}

/// What the first pass found, as far as the second needs it.
#[derive(Debug)]
pub(super) struct Second {
    /// Solutions of the fitted pointings.
    solutions: HashMap<usize, Vec<Solution>>,
    /// Windows of their thick lines.
    windows: HashMap<usize, Window>,
    /// Velocities of first moments.
    range: Option<Window>,
    /// Pointings that are fitted with neighbours' solutions among their starts.
    flagged: HashMap<usize, Vec<usize>>,
    /// Pointings whose thin line is not detected, with the mean that takes its place.
    weak: HashMap<usize, Option<ThinMean>>,
    /// The thin line's mean over the map, where it shows the line.
    map_mean: Option<Spectrum>,
}

impl Second {
    fn plan(work: &Work<'_>, journal: &Journal<Found>, blocks: usize) -> Result<Self, RunError> {
        let (mut solutions, mut windows) = (HashMap::new(), HashMap::new());
        let mut weak = Vec::new();
        let mut above = Vec::new();
        for found in journal.results()?.take(blocks) {
            // A block that failed as a whole has been told of.
            for (site, pointing) in found?.1.unwrap_or_default() {
                let site = usize::try_from(site).unwrap_or(usize::MAX);
                match pointing {
                    Pointing::Fitted {
                        solutions: found,
                        motions,
                        ..
                    } => {
                        solutions.insert(site, found);
                        windows.insert(site, motions.window());
                        above.push(site);
                    }
                    Pointing::Weak => {
                        weak.push(site);
                        above.push(site);
                    }
                    _ => {}
                }
            }
        }
        let mut flagged = HashMap::new();
        for site in &above {
            let Some(own) = solutions.get(site) else {
                continue;
            };
            let differ = |other: &Vec<Solution>| {
                own.iter()
                    .any(|one| other.iter().any(|other| one.differs_from(other)))
            };
            let neighbours: Vec<usize> = (work.field.neighbours(*site).into_iter())
                .filter(|other| solutions.get(other).is_some_and(differ))
                .take(MOST_NEIGHBOURS)
                .collect();
            if !neighbours.is_empty() {
                flagged.insert(*site, neighbours);
            }
        }
        let mut workspace = Workspace::new();
        let map_mean = if weak.is_empty() {
            None
        } else {
            let mean = work
                .field
                .thin_mean(above.iter().map(|site| (*site, 1.0)))?;
            mean.filter(|mean| shows_thin_line(work, mean, &mut workspace))
        };
        let mut means = HashMap::new();
        for site in weak {
            let beam = beam_mean(work.field, site)?;
            let by_beam = beam.is_some_and(|mean| shows_thin_line(work, &mean, &mut workspace));
            let mean = if by_beam {
                Some(ThinMean::Beam)
            } else {
                map_mean.as_ref().map(|_| ThinMean::Map)
            };
            means.insert(site, mean);
        }
        let all: Vec<Window> = windows.values().copied().collect();
        Ok(Self {
            solutions,
            range: common_range(&all),
            windows,
            flagged,
            weak: means,
            map_mean,
        })
    }

    fn concerns(&self, site: usize) -> bool {
        self.flagged.contains_key(&site) || self.weak.contains_key(&site)
    }

    /// How a pointing is fitted in the end.
    pub(super) fn again(&self, field: &Field, site: usize) -> Result<Again, RunError> {
        let neighbours = match self.flagged.get(&site) {
            Some(neighbours) => neighbours.clone(),
            None if self.weak.contains_key(&site) => {
                let near = field.neighbours(site).into_iter();
                near.filter(|other| self.solutions.contains_key(other))
                    .take(MOST_NEIGHBOURS)
                    .collect()
            }
            None => Vec::new(),
        };
        let starts = (neighbours.iter())
            .filter_map(|other| self.solutions.get(other))
            .flatten()
            .filter_map(Solution::start)
            .collect();
        let thin = match self.weak.get(&site).copied().flatten() {
            Some(ThinMean::Beam) => beam_mean(field, site)?.map(|mean| (ThinMean::Beam, mean)),
            Some(ThinMean::Map) => self.map_mean.clone().map(|mean| (ThinMean::Map, mean)),
            None => None,
        };
        Ok(Again {
            starts,
            thin,
            range: self.range,
        })
    }
}

/// The thin line's mean over the beam about a pointing, weighted by it; none where the beam is not known.
fn beam_mean(field: &Field, site: usize) -> Result<Option<Spectrum>, RunError> {
    let Some(beam) = field.beam() else {
        return Ok(None);
    };
    let width = (beam.major_arcsec * beam.minor_arcsec).sqrt();
    let near = field.around(site, width);
    if near.len() < 2 {
        return Ok(None);
    }
    let weighted = near.into_iter().map(|(other, distance)| {
        let weight = (-4.0 * std::f64::consts::LN_2 * (distance / width).powi(2)).exp();
        (other, weight)
    });
    field.thin_mean(weighted)
}

/// Whether a mean spectrum shows the thin line.
fn shows_thin_line(work: &Work<'_>, mean: &Spectrum, workspace: &mut Workspace) -> bool {
    let line = &work.field.lines()[1];
    let expected = Expected {
        components: line.components.clone(),
        window: None,
    };
    let prepared = prepare(mean, work.field.thin_preparation(), &expected);
    prepared.is_ok_and(|prepared| {
        fit_thin(&prepared, line, &work.settings.fit, workspace)
            .is_ok_and(|thin| thin.line.is_some())
    })
}

/// Reads one pointing's block and fits it as it was fitted in the end.
#[cfg_attr(
    not(feature = "figures"),
    allow(dead_code, reason = "figures alone ask for it")
)]
pub(super) fn final_outcome(
    work: &Work<'_>,
    second: &Second,
    site: usize,
    workspace: &mut Workspace,
) -> Result<Option<super::PairOutcome>, RunError> {
    let block: Block = work.field.read_one(site)?;
    let again = second.again(work.field, site)?;
    work.outcome(site, &block, &again, workspace)
}
