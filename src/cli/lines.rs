//! `inrush lines`.

use super::Exit;
use super::output::Output;
use clap::Args;
use inrush::line::{SourceClass, Transition, search};
use inrush::run::RunError;
use std::fmt::Write;

/// List the built-in transitions.
///
/// Example:
///
///   inrush lines "HCO+"
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct LinesArguments {
    /// A species, a part of a name, or a frequency in GHz; all lines without it.
    text: Option<String>,
}

/// Prints the table.
pub fn run(arguments: &LinesArguments) -> Result<Exit, RunError> {
    let text = arguments.text.as_deref().unwrap_or_default();
    let found = search(text);
    if found.is_empty() {
        Output::error(
            &format!(
                "no built-in line matches `{text}`, expected a species, a part of a name or a frequency in GHz"
            ),
            Some(
                "inrush lines without a text shows them all; a line of your own is given by its rest frequency",
            ),
        );
        return Ok(Exit::Unusable);
    }
    Output::data(&table(&found))?;
    Ok(Exit::Done)
}

fn table(transitions: &[&Transition]) -> String {
    let mut text = format!(
        "{:<24} {:>13} {:>9} {:>9} {:>11} {:>8} {:>5}  {:<10}\n",
        "line", "rest_freq_ghz", "err_khz", "err_km_s", "a_ul_per_s", "e_u_k", "parts", "source"
    );
    for transition in transitions {
        let optional = |value: Option<f64>, digits: usize| {
            value.map_or("-".to_owned(), |value| format!("{value:.digits$}"))
        };
        let class = match transition.class {
            SourceClass::Tabulated => "tabulated",
            SourceClass::Quoted => "quoted",
            SourceClass::Memory => "memory",
        };
        let _ = writeln!(
            text,
            "{:<24} {:>13.7} {:>9.1} {:>9.4} {:>11} {:>8} {:>5}  {:<10}",
            transition.name(),
            transition.rest_frequency_ghz,
            transition.rest_frequency_err_ghz * 1e6,
            transition.line().velocity_systematic_km_s(),
            transition
                .einstein_a_per_s
                .map_or("-".to_owned(), |a| format!("{a:.3e}")),
            optional(transition.upper_energy_k, 2),
            transition.hyperfine.len().max(1),
            class,
        );
    }
    text
}
