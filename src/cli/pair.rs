//! Arguments that say what a pair is and how it is fitted: a run sheet, and options above it.

use super::output::Output;
use super::source::SourceArguments;
use super::values::{given, named, number, numbers, range};
use clap::Args;
use inrush::run::{
    Beam, Given, LineSection, NumberOrWord, PairOutcome, RangeOrWord, RunError, RunSheet,
};
use std::path::{Path, PathBuf};

/// A pair and how it is fitted.
#[derive(Debug, Args)]
#[expect(
    clippy::struct_excessive_bools,
    reason = "each is a switch of the command line"
)]
pub struct PairArguments {
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
    #[arg(long, value_name = "GHZ[,ERR]", value_parser = given, allow_hyphen_values = true, help_heading = "Reading")]
    thick_rest_freq_ghz: Option<Given>,
    /// Rest frequency of the thin line, GHz, optionally with its error.
    #[arg(long, value_name = "GHZ[,ERR]", value_parser = given, allow_hyphen_values = true, help_heading = "Reading")]
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
    /// Main-beam efficiency of the thick line, for T_A*, optionally with its error.
    #[arg(long, value_name = "ETA[,ERR]", value_parser = given, allow_hyphen_values = true, help_heading = "Reading")]
    thick_eta_mb: Option<Given>,
    /// Main-beam efficiency of the thin line, for T_A*, optionally with its error.
    #[arg(long, value_name = "ETA[,ERR]", value_parser = given, allow_hyphen_values = true, help_heading = "Reading")]
    thin_eta_mb: Option<Given>,
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
    #[arg(long, value_name = "RATIO[,ERR]", value_parser = given, allow_hyphen_values = true, help_heading = "Fitting")]
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
    /// Find the speed of a collapsing sphere too, and adopt it where the sphere fits: seconds a pair.
    #[arg(long, conflicts_with = "formal", help_heading = "Fitting")]
    sphere: bool,
    /// Replace a prior: the numbers of its density (docs/methods.md has the table).
    #[arg(long, value_name = "NAME=NUMBER[,NUMBER]", value_parser = named_given, help_heading = "Fitting")]
    prior: Vec<(String, Given)>,
    /// Prior odds of infall, expansion, static or two_clouds; 1 each unless given.
    #[arg(long, value_name = "NAME=ODDS", value_parser = named_number, help_heading = "Fitting")]
    odds: Vec<(String, f64)>,
    /// Effective draws of a posterior.
    #[arg(
        long,
        value_name = "N",
        allow_negative_numbers = true,
        help_heading = "Fitting"
    )]
    posterior_draws: Option<usize>,

    #[command(flatten)]
    source: SourceArguments,
    /// Seed of everything random.
    #[arg(
        long,
        value_name = "SEED",
        allow_negative_numbers = true,
        help_heading = "Fitting"
    )]
    seed: Option<u64>,
}

impl PairArguments {
    /// The run sheet's file, where there is one.
    pub fn sheet(&self) -> Option<&Path> {
        self.sheet.as_deref()
    }

    /// The run sheet with the options over it, and what its paths are relative to.
    pub fn resolve(&self) -> Result<(RunSheet, PathBuf), RunError> {
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
        sheet.fit.sphere |= self.sphere;
        sheet.priors.extend(self.prior.iter().cloned());
        for (name, odds) in &self.odds {
            sheet.odds.set(name, *odds)?;
        }
        if let Some(draws) = self.posterior_draws {
            sheet.fit.posterior_draws = draws;
        }
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

/// Notes what was assumed on the way to the common scale, and whether the files are others than those
/// of the run that the sheet records.
pub fn tell(outcome: &PairOutcome, sheet: &RunSheet, output: &Output) {
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
