//! Arguments in, messages out. Results go to stdout, everything else to stderr.

mod calibrate;
mod check;
mod cite;
mod fit;
mod interrupt;
mod lines;
mod map;
mod output;
mod pair;
mod progress;
mod rank;
mod simulate;
mod source;
mod values;

use clap::{Parser, Subcommand};
use inrush::run::RunError;
use output::Output;
use std::process::ExitCode;

/// How a run ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Exit {
    /// All done.
    Done,
    /// Finished, some spectra unusable.
    SomeUnusable,
    /// Bad usage, input or setting.
    Unusable,
    /// Interrupted; what was done is kept.
    Interrupted,
}

/// Exit code of an interrupted run: 128 and the number of SIGINT.
const INTERRUPTED: u8 = 130;

impl From<Exit> for ExitCode {
    fn from(exit: Exit) -> Self {
        Self::from(match exit {
            Exit::Done => 0,
            Exit::SomeUnusable => 1,
            Exit::Unusable => 2,
            Exit::Interrupted => INTERRUPTED,
        })
    }
}

/// Infall velocities from an optically thick and an optically thin line.
///
/// Example:
///
///   inrush fit demo-spectra/lantern7.toml --out results
#[derive(Debug, Parser)]
#[command(
    name = "inrush",
    version,
    arg_required_else_help = true,
    verbatim_doc_comment
)]
struct Arguments {
    #[command(subcommand)]
    command: Command,

    /// Say only what went wrong.
    #[arg(short, long, global = true)]
    quiet: bool,

    /// Threads to use; results are the same for any number.
    #[arg(long, global = true, value_name = "N", value_parser = clap::value_parser!(u16).range(1..))]
    threads: Option<u16>,
}

#[derive(Debug, Subcommand)]
enum Command {
    Calibrate(Box<calibrate::CalibrateArguments>),
    Check(check::CheckArguments),
    Cite(cite::CiteArguments),
    Fit(Box<fit::FitArguments>),
    Lines(lines::LinesArguments),
    Map(map::MapArguments),
    Rank(rank::RankArguments),
    Simulate(simulate::SimulateArgs),
}

/// Runs the command line and returns its exit code.
pub fn main() -> ExitCode {
    let arguments = match Arguments::try_parse() {
        Ok(arguments) => arguments,
        Err(error) => {
            // help and version go to stdout with code 0, usage errors to stderr with code 2
            if error.use_stderr() {
                usage_error(&error);
                return Exit::Unusable.into();
            }
            let _ = error.print();
            return Exit::Done.into();
        }
    };
    let output = Output::new(arguments.quiet);
    let result = match &arguments.command {
        Command::Calibrate(calibrate) => calibrate::run(calibrate, arguments.threads, &output),
        Command::Check(check) => check::run(check),
        Command::Cite(cite) => cite::run(cite),
        Command::Fit(fit) => fit::run(fit, &output),
        Command::Lines(lines) => lines::run(lines),
        Command::Map(map) => map::run(map, arguments.threads, &output),
        Command::Rank(sample) => rank::run(sample, arguments.threads, &output),
        Command::Simulate(simulate) => simulate::run(simulate, arguments.threads, &output),
    };
    match result {
        Ok(exit) => exit.into(),
        Err(error) => {
            report(&error);
            Exit::Unusable.into()
        }
    }
}

/// A wrong command line: what the parser says, and its tip or the help as the hint.
fn usage_error(error: &clap::Error) {
    use clap::error::ErrorKind;
    if error.kind() == ErrorKind::DisplayHelpOnMissingArgumentOrSubcommand {
        let _ = error.print();
        return;
    }
    let text = error.render().to_string();
    let mut paragraphs = text.split("\n\n");
    let message = paragraphs.next().unwrap_or_default().trim();
    let message = message.strip_prefix("error: ").unwrap_or(message);
    let tip = paragraphs.find_map(|paragraph| paragraph.trim().strip_prefix("tip: "));
    let hint = tip.unwrap_or("`--help` behind the command shows every option");
    Output::error(message, Some(hint));
}

/// An error with what to do about it.
fn report(error: &RunError) {
    Output::error(&error.to_string(), error.hint().as_deref());
}
