//! `inrush fit`.

use super::Exit;
use super::output::Output;
use super::source::SourceArguments;
use super::values::{given, named, number, numbers, range};
use clap::Args;
use inrush::fit::Workspace;
use inrush::report;
use inrush::run::{
    Beam, Given, LineSection, NumberOrWord, RangeOrWord, RunError, RunSheet, check_directory,
    fit_pair, pair_row, pair_summary, write_products,
};
use std::path::{Path, PathBuf};

/// Fit one pair of lines.
///
/// Examples:
///
///   inrush fit demo-spectra/lantern7.toml --out results
///
///   inrush fit --thick thick.csv --thin thin.fits --thick-line "HCO+ 1-0" --thin-line "H13CO+ 1-0"
///
/// Options stand above the run sheet.
#[derive(Debug, Args)]
#[allow(
    clippy::struct_excessive_bools,
    reason = "each is a switch of the command line"
)]
#[command(verbatim_doc_comment)]
pub struct FitArguments {
    /// Run sheet (TOML).
    sheet: Option<PathBuf>,

    /// Spectrum of the optically thick line.
    #[arg(long, value_name = "FILE", help_heading = "Pair")]
    thick: Option<PathBuf>,
    /// Spectrum of the optically thin line.
    #[arg(long, value_name = "FILE", help_heading = "Pair")]
    thin: Option<PathBuf>,
    /// The thick line, such as "HCO+ 1-0".
    #[arg(long, value_name = "LINE", help_heading = "Pair")]
    thick_line: Option<String>,
    /// The thin line, such as "H13CO+ 1-0".
    #[arg(long, value_name = "LINE", help_heading = "Pair")]
    thin_line: Option<String>,
    /// Name of the source.
    #[arg(long, value_name = "NAME", help_heading = "Pair")]
    name: Option<String>,

    /// Rest frequency of the thick line, GHz, optionally with its error.
    #[arg(long, value_name = "GHZ[,ERR]", value_parser = given, help_heading = "Reading")]
    thick_rest_freq_ghz: Option<Given>,
    /// Rest frequency of the thin line, GHz, optionally with its error.
    #[arg(long, value_name = "GHZ[,ERR]", value_parser = given, help_heading = "Reading")]
    thin_rest_freq_ghz: Option<Given>,
    /// Columns of both files, such as "1:km/s,2:K".
    #[arg(long, value_name = "AXIS,VALUE", help_heading = "Reading")]
    columns: Option<String>,
    /// Row of the thick line's table: a number, or COLUMN=VALUE.
    #[arg(long, value_name = "ROW", help_heading = "Reading")]
    thick_row: Option<String>,
    /// Row of the thin line's table: a number, or COLUMN=VALUE.
    #[arg(long, value_name = "ROW", help_heading = "Reading")]
    thin_row: Option<String>,
    /// Main-beam efficiency of the thick line, for T_A*.
    #[arg(
        long,
        value_name = "ETA",
        allow_negative_numbers = true,
        help_heading = "Reading"
    )]
    thick_eta_mb: Option<f64>,
    /// Main-beam efficiency of the thin line, for T_A*.
    #[arg(
        long,
        value_name = "ETA",
        allow_negative_numbers = true,
        help_heading = "Reading"
    )]
    thin_eta_mb: Option<f64>,
    /// Beam of the thick line, full width at half maximum, for Jy/beam.
    #[arg(long, value_name = "ARCSEC[,ARCSEC]", value_parser = beam, allow_hyphen_values = true, help_heading = "Reading")]
    thick_beam_arcsec: Option<Beam>,
    /// Beam of the thin line, full width at half maximum, for Jy/beam.
    #[arg(long, value_name = "ARCSEC[,ARCSEC]", value_parser = beam, allow_hyphen_values = true, help_heading = "Reading")]
    thin_beam_arcsec: Option<Beam>,
    /// Velocity that brings both files' frame to LSRK, km/s.
    #[arg(
        long,
        value_name = "KM_S",
        allow_negative_numbers = true,
        help_heading = "Reading"
    )]
    frame_offset_km_s: Option<f64>,

    /// Line window of both lines, km/s.
    #[arg(long, value_name = "LOW,HIGH", value_parser = range, allow_hyphen_values = true, help_heading = "Preparing")]
    window_km_s: Option<[f64; 2]>,
    /// Line window of the thick line alone, km/s.
    #[arg(long, value_name = "LOW,HIGH", value_parser = range, allow_hyphen_values = true, help_heading = "Preparing")]
    thick_window_km_s: Option<[f64; 2]>,
    /// Line window of the thin line alone, km/s.
    #[arg(long, value_name = "LOW,HIGH", value_parser = range, allow_hyphen_values = true, help_heading = "Preparing")]
    thin_window_km_s: Option<[f64; 2]>,
    /// Order of the polynomial baseline, 0 to 3, or none.
    #[arg(long, value_name = "ORDER", value_parser = number_or_word, help_heading = "Preparing")]
    baseline_order: Option<NumberOrWord>,
    /// Average to channels of this width, km/s.
    #[arg(
        long,
        value_name = "KM_S",
        allow_negative_numbers = true,
        help_heading = "Preparing"
    )]
    smooth_to_km_s: Option<f64>,

    /// Models, separated by commas: gaussian, two-gaussians, layer, two-layer, two-layer-continuum,
    /// hill, hill-surface.
    #[arg(
        long,
        value_name = "MODELS",
        value_delimiter = ',',
        help_heading = "Fitting"
    )]
    models: Vec<String>,
    /// Velocities whose channels count, km/s, or all.
    #[arg(long, value_name = "LOW,HIGH", value_parser = range_or_word, allow_hyphen_values = true, help_heading = "Fitting")]
    range_km_s: Option<RangeOrWord>,
    /// Give the thin line a velocity of its own.
    #[arg(long, help_heading = "Fitting")]
    free_thin_velocity: bool,
    /// Give the thin line a dispersion of its own.
    #[arg(long, help_heading = "Fitting")]
    free_thin_sigma: bool,
    /// Link the optical depths: thick over thin, optionally with its error.
    #[arg(long, value_name = "RATIO[,ERR]", value_parser = given, help_heading = "Fitting")]
    isotope_ratio: Option<Given>,
    /// Hold a parameter at a value, or give it a Gaussian prior.
    #[arg(long, value_name = "NAME=VALUE[,ERR]", value_parser = named_given, help_heading = "Fitting")]
    given: Vec<(String, Given)>,
    /// Bounds of a parameter.
    #[arg(long, value_name = "NAME=LOW,HIGH", value_parser = named_range, help_heading = "Fitting")]
    bounds: Vec<(String, [f64; 2])>,
    /// Stop after least squares: no posterior, no probabilities.
    #[arg(long, help_heading = "Fitting")]
    formal: bool,
    /// Replace a prior: the numbers of its density (docs/methods.md has the table).
    #[arg(long, value_name = "NAME=NUMBER[,NUMBER]", value_parser = named_given, help_heading = "Fitting")]
    prior: Vec<(String, Given)>,
    /// Prior odds of infall, expansion, static or two_clouds; 1 each unless given.
    #[arg(long, value_name = "NAME=ODDS", value_parser = named_number, help_heading = "Fitting")]
    odds: Vec<(String, f64)>,
    /// Effective draws of a posterior.
    #[arg(long, value_name = "N", help_heading = "Fitting")]
    posterior_draws: Option<usize>,

    #[command(flatten)]
    source: SourceArguments,
    /// Draws behind each interval of derived quantities.
    #[arg(long, value_name = "N", help_heading = "Source")]
    draws: Option<usize>,

    /// Write tables, figures and the resolved run sheet into this directory.
    #[arg(long, value_name = "DIR", help_heading = "Products")]
    out: Option<PathBuf>,
    /// Print the results as one JSON object.
    #[arg(long, help_heading = "Products")]
    json: bool,
    /// Leave the figures out.
    #[arg(long, help_heading = "Products")]
    no_figures: bool,
    /// Seed of everything random.
    #[arg(
        long,
        value_name = "SEED",
        allow_negative_numbers = true,
        help_heading = "Products"
    )]
    seed: Option<u64>,
}

/// Fits the pair, prints its results and writes its products.
pub fn run(arguments: &FitArguments, output: &Output) -> Result<Exit, RunError> {
    let (sheet, base) = arguments.resolve()?;
    if let Some(directory) = &arguments.out {
        check_directory(directory)?;
    }
    let outcome = fit_pair(&sheet, &base, &mut Workspace::new())
        .map_err(|error| error.of_sheet(arguments.sheet.as_deref()))?;
    if let Some(record) = &sheet.record {
        let changed = [
            (&record.thick_sha256, &outcome.thick),
            (&record.thin_sha256, &outcome.thin),
        ];
        for (recorded, line) in changed {
            if recorded.is_some() && *recorded != line.sha256 {
                output.note(&format!(
                    "{}: not the file of the recorded run (its checksum differs)",
                    line.origin.path.display()
                ));
            }
        }
    }
    for line in [&outcome.thick, &outcome.thin] {
        let notes: Vec<String> = line.notes.iter().map(ToString::to_string).collect();
        if !notes.is_empty() {
            output.note(&format!(
                "{}: {}",
                line.origin.path.display(),
                notes.join("; ")
            ));
        }
    }
    let text = if arguments.json {
        let mut bytes = Vec::new();
        report::write_json(&pair_row(&outcome)?, &mut bytes)?;
        String::from_utf8(bytes).map_err(|error| RunError::Internal(error.to_string()))?
    } else {
        pair_summary(&outcome)?
    };
    let written = match &arguments.out {
        Some(directory) => write_products(&outcome, &sheet, &base, directory)?,
        None => Vec::new(),
    };
    Output::data(&text).map_err(|source| RunError::File {
        path: PathBuf::from("stdout"),
        source,
    })?;
    if let (Some(directory), Some(_)) = (&arguments.out, written.first()) {
        let names: Vec<String> = written
            .iter()
            .filter_map(|path| Some(path.file_name()?.to_string_lossy().into_owned()))
            .collect();
        output.note(&format!(
            "wrote {} into {}",
            names.join(", "),
            directory.display()
        ));
    }
    Ok(Exit::Done)
}

impl FitArguments {
    /// The run sheet with the options over it, and what its paths are relative to.
    fn resolve(&self) -> Result<(RunSheet, PathBuf), RunError> {
        let (mut sheet, base) = match &self.sheet {
            Some(path) => {
                let base = path.parent().map_or_else(PathBuf::new, Path::to_owned);
                (RunSheet::read(path)?, base)
            }
            None => (RunSheet::default(), PathBuf::new()),
        };
        // options name files from where the command runs, not from the sheet's folder
        let here = |file: &PathBuf| -> Result<PathBuf, RunError> {
            if base.as_os_str().is_empty() {
                return Ok(file.clone());
            }
            std::path::absolute(file).map_err(|source| RunError::File {
                path: file.clone(),
                source,
            })
        };
        set(
            &mut sheet.thick.file,
            self.thick.as_ref().map(here).transpose()?,
        );
        set(
            &mut sheet.thin.file,
            self.thin.as_ref().map(here).transpose()?,
        );
        set(&mut sheet.thick.line, self.thick_line.clone());
        set(&mut sheet.thin.line, self.thin_line.clone());
        set(&mut sheet.source.name, self.name.clone());
        self.source.set(&mut sheet.source);
        if let Some(draws) = self.draws {
            sheet.derive.draws = draws;
        }
        set(&mut sheet.thick.rest_freq_ghz, self.thick_rest_freq_ghz);
        set(&mut sheet.thin.rest_freq_ghz, self.thin_rest_freq_ghz);
        set(
            &mut sheet.thick.row,
            self.thick_row.clone().map(NumberOrWord::Word),
        );
        set(
            &mut sheet.thin.row,
            self.thin_row.clone().map(NumberOrWord::Word),
        );
        set(&mut sheet.thick.eta_mb, self.thick_eta_mb);
        set(&mut sheet.thin.eta_mb, self.thin_eta_mb);
        set(&mut sheet.thick.beam_arcsec, self.thick_beam_arcsec);
        set(&mut sheet.thin.beam_arcsec, self.thin_beam_arcsec);
        set(&mut sheet.thick.window_km_s, self.thick_window_km_s);
        set(&mut sheet.thin.window_km_s, self.thin_window_km_s);
        for section in [&mut sheet.thick, &mut sheet.thin] {
            self.set_both(section);
        }
        set(&mut sheet.prepare.smooth_to_km_s, self.smooth_to_km_s);
        if let Some(order) = &self.baseline_order {
            sheet.prepare.baseline_order = order.clone();
        }
        if let Some(window) = self.window_km_s {
            sheet.prepare.window_km_s = Some(window);
            for (section, own) in [
                (&mut sheet.thick, self.thick_window_km_s),
                (&mut sheet.thin, self.thin_window_km_s),
            ] {
                section.window_km_s = own;
            }
        }
        if !self.models.is_empty() {
            sheet.fit.models.clone_from(&self.models);
        }
        set(&mut sheet.fit.range_km_s, self.range_km_s.clone());
        sheet.fit.free_thin_velocity |= self.free_thin_velocity;
        sheet.fit.free_thin_sigma |= self.free_thin_sigma;
        set(&mut sheet.fit.isotope_ratio, self.isotope_ratio);
        sheet.fit.given.extend(self.given.iter().cloned());
        sheet.fit.bounds.extend(self.bounds.iter().cloned());
        sheet.fit.formal |= self.formal;
        sheet.priors.extend(self.prior.iter().cloned());
        for (name, odds) in &self.odds {
            sheet.odds.set(name, *odds)?;
        }
        if let Some(draws) = self.posterior_draws {
            sheet.fit.posterior_draws = draws;
        }
        sheet.output.figures &= !self.no_figures;
        if let Some(seed) = self.seed {
            sheet.seed = seed;
        }
        Ok((sheet, base))
    }

    fn set_both(&self, section: &mut LineSection) {
        set(&mut section.columns, self.columns.clone());
        set(&mut section.frame_offset_km_s, self.frame_offset_km_s);
    }
}

/// An option stands above the sheet.
fn set<T>(target: &mut Option<T>, value: Option<T>) {
    if value.is_some() {
        *target = value;
    }
}

fn beam(text: &str) -> Result<Beam, String> {
    match numbers(text)?[..] {
        [width] => Ok(Beam::Round(width)),
        [major, minor] => Ok(Beam::Elliptical([major, minor])),
        _ => Err("expected a width, or major and minor axis, in arcsec".to_owned()),
    }
}

fn range_or_word(text: &str) -> Result<RangeOrWord, String> {
    if text == "all" {
        return Ok(RangeOrWord::Word(text.to_owned()));
    }
    range(text)
        .map(RangeOrWord::Range)
        .map_err(|message| format!("{message}; or `all`"))
}

// clap's parsers return a result
#[allow(clippy::unnecessary_wraps)]
fn number_or_word(text: &str) -> Result<NumberOrWord, String> {
    Ok(text.parse().map_or_else(
        |_| NumberOrWord::Word(text.to_owned()),
        NumberOrWord::Number,
    ))
}

fn named_given(text: &str) -> Result<(String, Given), String> {
    named(text, given)
}

fn named_number(text: &str) -> Result<(String, f64), String> {
    named(text, number)
}

fn named_range(text: &str) -> Result<(String, [f64; 2]), String> {
    named(text, range)
}
