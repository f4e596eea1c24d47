//! `inrush cite`.

use super::Exit;
use super::output::Output;
use clap::Args;
use inrush::run::{RunError, cite_all, cite_columns, cite_results};
use std::path::PathBuf;

/// Say what results rest on: a paragraph of methods, and the publications as BibTeX.
///
/// Examples:
///
///   inrush cite results
///
///   inrush cite --for delta_v,mass_rate_msun_yr
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct CiteArguments {
    /// Directory of results; everything that Inrush can do where it is left out.
    results: Option<PathBuf>,
    /// Result columns in place of a directory, separated by commas.
    #[arg(
        long = "for",
        value_name = "COLUMNS",
        value_delimiter = ',',
        conflicts_with = "results"
    )]
    columns: Vec<String>,
    /// Print the BibTeX alone.
    #[arg(long)]
    bibtex: bool,
}

/// Prints the paragraph and the publications.
pub fn run(arguments: &CiteArguments) -> Result<Exit, RunError> {
    let citation = match &arguments.results {
        Some(directory) => cite_results(directory)?,
        None if arguments.columns.is_empty() => cite_all(),
        None => cite_columns(&arguments.columns)?,
    };
    let text = if arguments.bibtex {
        citation.bibtex
    } else {
        format!("{}\n{}", wrapped(&citation.paragraph), citation.bibtex)
    };
    Output::data(&text)?;
    Ok(Exit::Done)
}

/// A paragraph in lines of at most 100 characters.
fn wrapped(paragraph: &str) -> String {
    const WIDTH: usize = 100;
    let mut text = String::new();
    let mut length = 0;
    for word in paragraph.split_whitespace() {
        let added = word.chars().count();
        if length + 1 + added > WIDTH {
            text.push('\n');
            length = 0;
        } else if length > 0 {
            text.push(' ');
            length += 1;
        }
        text.push_str(word);
        length += added;
    }
    text.push('\n');
    text
}
