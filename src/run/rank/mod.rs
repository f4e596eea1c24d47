//! A sample table into a ranking: every row through the whole chain, then order, statistics and products.
//!
//! What is known of a source while others are worked on is on disk, in the journal; what the order needs of
//! it, some 7 kB, is in memory. Rows of the ranking are read again from the journal as they are written.

#[cfg(feature = "figures")]
mod figures;
mod products;
mod record;
mod sketch;
mod table;

pub use products::RankFiles;
pub use record::{PairRecord, ROWS};
pub use sketch::{LineSketch, Sketch};
pub use table::{SampleRow, SampleTable};

use super::{
    BatchSettings, Ended, Failure, Journal, JournalPlace, Opened, PairJob, Progress, RunError,
    RunIdentity, RunRecord, RunSheet, Watch, inputs_sha256,
};
use crate::fit::Workspace;
use crate::rank::{
    Finding, Quantity, RankSpread, Sample, Source, SourceFacts, combine, compare, leading,
    quantity, rank_spreads, sample,
};
use crate::report::Value;
use std::collections::{BTreeMap, HashMap};
use std::path::{Path, PathBuf};

/// A sample to be ranked.
#[derive(Clone, Debug)]
pub struct RankRun {
    /// The sample table.
    pub table: PathBuf,
    /// Where the products go.
    pub directory: PathBuf,
    /// What holds for every source: a run sheet without lines and files.
    pub sheet: RunSheet,
    /// How many first places `p_top` is about.
    pub top: usize,
    /// Whether the tables of a paper are written.
    pub latex: bool,
    /// Goes on with an unfinished run.
    pub resume: bool,
}

/// How a ranking ended.
#[derive(Debug)]
pub enum RankEnd {
    /// Products are written.
    Finished(Box<Ranking>),
    /// Stopped; a later run goes on.
    Stopped(Progress),
    /// It was finished before.
    Before(RunRecord),
}

/// A finished ranking.
#[derive(Debug)]
pub struct Ranking {
    /// What was written.
    pub files: RankFiles,
    /// The first places and the statistics, as text.
    pub text: String,
    /// Rows of the sample table without a result: source, line pair and why.
    pub failures: Vec<(String, String, Failure)>,
    /// Columns of the sample table that nothing was done with.
    pub unused: Vec<String>,
    /// What was assumed of files, and of how many.
    pub notes: Vec<(String, usize)>,
}

/// What a place in the order is about.
pub const DEFAULT_TOP: usize = 10;

/// Ranks a sample and writes its products.
///
/// # Errors
///
/// [`RunError::Sample`] for a table that is none, [`RunError::Setting`] for settings that cannot be used,
/// [`RunError::Journal`] and [`RunError::Occupied`] for a directory that holds something else, and where
/// something cannot be written. Sources that cannot be used are no error.
pub fn rank(run: &RankRun, batch: &BatchSettings, watch: Watch<'_>) -> Result<RankEnd, RunError> {
    let table = SampleTable::read(&run.table)?;
    let base = run.table.parent().unwrap_or(Path::new(""));
    // a setting that serves no source is an error of the run, not of every source
    run.sheet.pair_settings()?;
    run.sheet.prepare_settings(&run.sheet.thick)?;
    if run.top == 0 {
        return Err(RunError::setting("top", "0", "at least 1"));
    }
    let settings = run.sheet.to_toml()?;
    let files = table
        .rows
        .iter()
        .flat_map(|row| [&row.thick_file, &row.thin_file]);
    let inputs = std::iter::once(run.table.clone()).chain(files.map(|file| base.join(file)));
    let identity = RunIdentity::new(
        "rank",
        table.rows.len() as u64,
        &settings,
        inputs_sha256(inputs),
    );
    let mut journal = match Journal::<PairRecord>::open(&run.directory, identity, run.resume)? {
        Opened::Journal(journal) => journal,
        Opened::Finished(record) => return Ok(RankEnd::Before(record)),
    };
    let ended = batch.run_durably(
        &mut journal,
        &table.rows,
        Workspace::new,
        |workspace, row| {
            let sheet = Box::new(row.sheet(&run.sheet));
            let (source, seed) = (sheet.source.properties()?, sheet.seed);
            let base = base.to_owned();
            let outcome = PairJob::Sheet { sheet, base }.fit(workspace)?;
            PairRecord::of(&outcome, &source, seed)
        },
        watch,
    )?;
    if let Ended::Stopped(progress) = ended {
        return Ok(RankEnd::Stopped(progress));
    }
    let ordered = Ordered::of(&table, &journal, run)?;
    let files = products::write(&ordered, &journal, run, batch)?;
    let unusable = ordered.failures.len() as u64;
    let ranking = Ranking {
        text: ordered.text(&journal)?,
        files,
        failures: (ordered.failures.iter())
            .map(|(row, failure)| {
                let row = &table.rows[*row];
                (row.id.clone(), row.line_pair(), failure.clone())
            })
            .collect(),
        notes: ordered.notes,
        unused: table.unused,
    };
    journal.finish(unusable)?;
    Ok(RankEnd::Finished(Box::new(ranking)))
}

/// A source with its place.
struct Member {
    source: Source,
    group: Option<String>,
    /// Rows of the sample table that were used.
    rows: Vec<usize>,
    /// Row whose columns stand in the ranking.
    leading: usize,
    /// Why other rows of it have no result.
    lost: Vec<String>,
    spread: Option<RankSpread>,
}

/// Everything in order, before it is written.
struct Ordered<'a> {
    table: &'a SampleTable,
    /// Where each row's result is; `None` where it failed.
    places: Vec<Option<JournalPlace>>,
    members: Vec<Member>,
    /// Rows without a result, in the order of the table.
    failures: Vec<(usize, Failure)>,
    quantity: Quantity,
    #[cfg_attr(
        not(feature = "figures"),
        allow(dead_code, reason = "figures alone ask for it")
    )]
    facts: Vec<SourceFacts>,
    statistics: Sample,
    notes: Vec<(String, usize)>,
    top: usize,
}

impl<'a> Ordered<'a> {
    fn of(
        table: &'a SampleTable,
        journal: &Journal<PairRecord>,
        run: &RankRun,
    ) -> Result<Self, RunError> {
        let mut places = Vec::with_capacity(table.rows.len());
        let mut failures = Vec::new();
        let mut facts = Vec::new();
        let mut notes: BTreeMap<String, usize> = BTreeMap::new();
        let mut findings: Vec<Option<Finding>> = Vec::with_capacity(table.rows.len());
        for (row, result) in journal.results()?.enumerate() {
            let (place, result) = result?;
            match result {
                Ok(record) => {
                    facts.push(source_facts(&table.rows[row], &record));
                    for note in record.notes {
                        *notes.entry(note).or_default() += 1;
                    }
                    places.push(Some(place));
                    findings.push(Some(record.finding));
                }
                Err(failure) => {
                    places.push(None);
                    findings.push(None);
                    failures.push((row, failure));
                }
            }
        }
        let mut members = members(table, &findings, &failures);
        let quantity = quantity(members.iter().map(|member| &member.source));
        members.sort_by(|a, b| compare(&a.source, &b.source, quantity));
        let sources: Vec<&Source> = members.iter().map(|member| &member.source).collect();
        let spreads = rank_spreads(&sources, quantity, run.top, run.sheet.seed);
        let statistics = sample(&facts, &sources, run.sheet.seed);
        for (member, spread) in members.iter_mut().zip(spreads) {
            member.spread = spread;
        }
        Ok(Self {
            table,
            places,
            members,
            failures,
            quantity,
            facts,
            statistics,
            notes: notes.into_iter().collect(),
            top: run.top,
        })
    }
}

/// Sources with a result, in the order of the table.
fn members(
    table: &SampleTable,
    findings: &[Option<Finding>],
    failures: &[(usize, Failure)],
) -> Vec<Member> {
    let mut order: Vec<&str> = Vec::new();
    let mut rows_of: HashMap<&str, Vec<usize>> = HashMap::new();
    for (index, row) in table.rows.iter().enumerate() {
        let rows = rows_of.entry(&row.id).or_default();
        if rows.is_empty() {
            order.push(&row.id);
        }
        rows.push(index);
    }
    let mut members = Vec::new();
    for id in order {
        let rows = &rows_of[id];
        let used: Vec<usize> = (rows.iter().copied())
            .filter(|row| findings[*row].is_some())
            .collect();
        let own: Vec<&Finding> = used
            .iter()
            .filter_map(|row| findings[*row].as_ref())
            .collect();
        let (Some(finding), Some(first)) = (combine(&own), leading(&own)) else {
            continue;
        };
        let lost = rows.iter().filter(|row| findings[**row].is_none());
        members.push(Member {
            source: Source {
                id: id.to_owned(),
                finding,
            },
            group: table.rows[used[first]].group.clone(),
            leading: used[first],
            lost: lost
                .filter_map(|row| failures.iter().find(|(failed, _)| failed == row))
                .map(|(row, failure)| {
                    format!(
                        "{} cannot be used: {}",
                        table.rows[*row].line_pair(),
                        failure.message
                    )
                })
                .collect(),
            rows: used,
            spread: None,
        });
    }
    members
}

fn source_facts(row: &SampleRow, record: &PairRecord) -> SourceFacts {
    let schema = crate::report::columns::results();
    let cell = |name: &str| {
        let position = schema
            .columns()
            .iter()
            .position(|column| column.name == name)?;
        record.cells.get(position).and_then(Value::number)
    };
    SourceFacts {
        line_pair: row.line_pair(),
        group: row.group.clone(),
        profile: record.profile,
        delta_v: cell("delta_v"),
        asymmetry: cell("asymmetry"),
    }
}
