//! The products of a ranking: tables, statistics, figures, the sheet that repeats it.

use super::record::set_combined;
use super::{Member, Ordered, PairRecord, RankRun};
use crate::rank::{Quantity, expected, why};
use crate::report::{
    self, PaperTable, ReportError, Row, Schema, TableFiles, Value, columns, ranking,
    sample_statistics,
};
use crate::run::{BatchSettings, Failure, Journal, RunError};
use std::path::PathBuf;

/// What a ranking wrote, in order.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct RankFiles {
    /// Paths.
    pub paths: Vec<PathBuf>,
}

/// Writes every product. Each is whole or absent.
pub(super) fn write(
    ordered: &Ordered<'_>,
    journal: &Journal<PairRecord>,
    run: &RankRun,
    batch: &BatchSettings,
) -> Result<RankFiles, RunError> {
    let mut files = RankFiles::default();
    let schema = ranking::schema(run.top)?;
    let mut paper = if run.latex {
        Some(PaperTable::new(&schema, run.sheet.fit.formal)?)
    } else {
        None
    };
    let written = write_ranking(ordered, journal, run, &schema, paper.as_mut())?;
    files.paths.extend(written);
    if ordered.members.iter().any(|member| member.rows.len() > 1) {
        files.paths.extend(write_pairs(ordered, journal, run)?);
    }
    let mut write =
        |name: &str, content: &dyn Fn(&mut dyn std::io::Write) -> Result<(), ReportError>| {
            let path = run.directory.join(name);
            report::files::write_atomically(&path, content)?;
            files.paths.push(path);
            Ok::<(), RunError>(())
        };
    let mut statistics = sample_statistics::table(&ordered.statistics)?;
    statistics.meta = meta(run);
    let text = sample_statistics::text(&ordered.statistics);
    write("statistics.csv", &|writer| {
        report::write_csv(&statistics, writer)
    })?;
    write("statistics.ecsv", &|writer| {
        report::write_ecsv(&statistics, writer)
    })?;
    write("statistics.txt", &|writer| {
        Ok(writer.write_all(text.as_bytes())?)
    })?;
    if let Some(paper) = &paper {
        let latex = paper.latex();
        let mut twin = paper.twin().clone();
        twin.meta = meta(run);
        write("paper.tex", &|writer| {
            Ok(writer.write_all(latex.as_bytes())?)
        })?;
        write("paper.ecsv", &|writer| report::write_ecsv(&twin, writer))?;
    }
    let sheet = run.sheet.to_toml()?;
    let sheet =
        format!("# What held for every source: inrush rank TABLE --sheet run.toml\n\n{sheet}");
    write(
        "run.toml",
        &|writer| Ok(writer.write_all(sheet.as_bytes())?),
    )?;
    #[cfg(feature = "figures")]
    if run.sheet.output.figures {
        let figures = super::figures::write(ordered, journal, run, batch)?;
        files.paths.extend(figures);
    }
    #[cfg(not(feature = "figures"))]
    let _ = batch;
    Ok(files)
}

fn meta(run: &RankRun) -> Vec<(String, Value)> {
    let number = |value: usize| Value::Integer(i64::try_from(value).unwrap_or(i64::MAX));
    let seed = i64::try_from(run.sheet.seed).unwrap_or(i64::MAX);
    vec![
        ("program".to_owned(), Value::from("Inrush")),
        ("version".to_owned(), Value::from(env!("CARGO_PKG_VERSION"))),
        ("seed".to_owned(), Value::Integer(seed)),
        ("top".to_owned(), number(run.top)),
        (
            "errors".to_owned(),
            Value::from(if run.sheet.fit.formal {
                "formal, from the curvature of chi2 at its minimum"
            } else {
                "speeds and what follows from them: from the posterior; other fitted parameters: formal"
            }),
        ),
    ]
}

impl Ordered<'_> {
    /// The row of a source in the ranking.
    pub(super) fn row(
        &self,
        schema: &Schema,
        place: usize,
        member: &Member,
        journal: &Journal<PairRecord>,
    ) -> Result<Row, RunError> {
        let mut results = columns::results().row_of(self.record(journal, member.leading)?.cells)?;
        let finding = &member.source.finding;
        if finding.disagreement.is_some() {
            set_combined(&mut results, finding)?;
        }
        let mut row = ranking::with_results(schema, &results)?;
        row.set("rank", i64::try_from(place).unwrap_or(i64::MAX))?;
        row.set(
            "mass_rate_expected_msun_yr",
            expected(finding, Quantity::Rate),
        )?;
        row.set("v_in_expected_km_s", expected(finding, Quantity::Speed))?;
        if let Some(spread) = member.spread {
            row.set("rank_lo68", i64::from(spread.interval68[0]))?;
            row.set("rank_hi68", i64::from(spread.interval68[1]))?;
            row.set("p_top", spread.p_top)?;
        }
        row.set("group", member.group.as_deref())?;
        row.set(
            "line_pairs",
            i64::try_from(member.rows.len()).unwrap_or(i64::MAX),
        )?;
        row.set("pair_disagreement", finding.disagreement)?;
        let mut reason = why(finding, self.quantity);
        for lost in &member.lost {
            reason.push_str(" - ");
            reason.push_str(lost);
        }
        row.set("why", reason)?;
        Ok(row)
    }

    /// The row of a line pair that has no result, of a source that has none at all.
    fn failed_row(&self, schema: &Schema, row: usize, failure: &Failure) -> Result<Row, RunError> {
        let given = &self.table.rows[row];
        let mut made = schema.row();
        made.set("id", given.id.as_str())?;
        made.set("thick_line", given.thick_line.as_str())?;
        made.set("thin_line", given.thin_line.as_str())?;
        made.set("group", given.group.as_deref())?;
        made.set("why", format!("not ranked: {}", failure.message))?;
        Ok(made)
    }

    pub(super) fn record(
        &self,
        journal: &Journal<PairRecord>,
        row: usize,
    ) -> Result<PairRecord, RunError> {
        let place = self.places[row]
            .ok_or_else(|| RunError::Internal(format!("row {row} without a result is read")))?;
        let kept = journal.at(place)?;
        kept.map_err(|failure| RunError::Internal(failure.message))
    }

    /// Rows of sources without any result.
    fn unranked(&self) -> impl Iterator<Item = &(usize, Failure)> {
        let ranked: std::collections::HashSet<&str> = (self.members.iter())
            .map(|member| member.source.id.as_str())
            .collect();
        let failures = self.failures.iter();
        failures.filter(move |(row, _)| !ranked.contains(self.table.rows[*row].id.as_str()))
    }

    /// The first places, what could not be ranked, and the sample's statistics.
    pub(super) fn text(&self, journal: &Journal<PairRecord>) -> Result<String, RunError> {
        let schema = ranking::schema(self.top)?;
        let shown = self.members.iter().enumerate().take(ranking::MOST_SHOWN);
        let rows = shown
            .map(|(index, member)| self.row(&schema, index + 1, member, journal))
            .collect::<Result<Vec<Row>, RunError>>()?;
        let counts = (self.members.len(), self.unranked().count());
        let mut text = ranking::text(&rows, counts, self.quantity, self.top);
        text.push('\n');
        text.push_str(&sample_statistics::text(&self.statistics));
        Ok(text)
    }
}

fn write_ranking(
    ordered: &Ordered<'_>,
    journal: &Journal<PairRecord>,
    run: &RankRun,
    schema: &Schema,
    mut paper: Option<&mut PaperTable>,
) -> Result<Vec<PathBuf>, RunError> {
    let mut files = TableFiles::begin(&run.directory, "ranking", schema, meta(run))?;
    let mut push = |row: Row| -> Result<(), RunError> {
        files.push(&row)?;
        if let Some(paper) = &mut paper {
            paper.push(&row)?;
        }
        Ok(())
    };
    for (index, member) in ordered.members.iter().enumerate() {
        push(ordered.row(schema, index + 1, member, journal)?)?;
    }
    for (row, failure) in ordered.unranked() {
        push(ordered.failed_row(schema, *row, failure)?)?;
    }
    Ok(files.finish()?)
}

/// Every line pair by itself, in the order of the sample table.
fn write_pairs(
    ordered: &Ordered<'_>,
    journal: &Journal<PairRecord>,
    run: &RankRun,
) -> Result<Vec<PathBuf>, RunError> {
    let schema = columns::results();
    let mut files = TableFiles::begin(&run.directory, "pairs", &schema, meta(run))?;
    for row in 0..ordered.places.len() {
        if ordered.places[row].is_some() {
            let record = ordered.record(journal, row)?;
            files.push(&schema.row_of(record.cells)?)?;
        }
    }
    Ok(files.finish()?)
}
