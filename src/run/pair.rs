//! One pair through every stage.

use super::journal::hexadecimal;
use super::judge::{PreparedPair, judge, judgement};
use super::{Judged, LineSection, RunError, RunSheet, VerdictSettings};
use crate::derive::{DeriveSettings, Derived, FitDraws, Input, SourceProperties, Tracers};
use crate::fit::clump::{
    ClumpPosterior, ClumpPosteriors, ClumpSettings, KnownClump, clump_posteriors,
};
use crate::fit::conflict::replaced;
use crate::fit::hypotheses::Speed;
use crate::fit::posterior::PosteriorError;
use crate::fit::{
    Caution, FitSettings, ModelFit, PairFacts, PairFit, ThinFit, Workspace, cautions, fit_thin,
    sphere_cautions,
};
use crate::line::{Line, isotopologue_pair};
use crate::measure::{MeasureSettings, Measures, ThinLine, measure};
use crate::model::Model;
use crate::prepare::scale::{ScaleNote, to_spectrum};
use crate::prepare::{Expected, PrepareSettings, Prepared, prepare_pair};
use crate::read::{ReadOptions, load, spectrum_from_bytes};
use crate::spectrum::{Origin, Spectrum};
use sha2::{Digest, Sha256};
use std::path::Path;

/// One line of a pair before it is prepared.
#[derive(Clone, Debug)]
pub struct LineInput {
    /// The line.
    pub line: Line,
    /// Its spectrum on the common scale: ascending LSRK km/s and main-beam K.
    pub spectrum: Spectrum,
    /// How it is prepared.
    pub prepare: PrepareSettings,
    /// Its file and format; of spectra that no file holds, what messages shall call them.
    pub origin: Origin,
    /// SHA-256 of its file, where there is one.
    pub sha256: Option<String>,
    /// Name of the source that its file states.
    pub object: Option<String>,
    /// What was assumed on the way to the common scale.
    pub notes: Vec<ScaleNote>,
    /// Relative error of its main-beam efficiency; 0 where none is known.
    pub calibration_error: f64,
}

/// A pair before it is prepared.
#[derive(Clone, Debug)]
pub struct PairInput {
    /// Name of the source; `None` takes what the files state, else the name of the thick line's file.
    pub name: Option<String>,
    /// What is given of the source.
    pub source: SourceProperties,
    /// The optically thick line.
    pub thick: LineInput,
    /// The optically thin line.
    pub thin: LineInput,
}

/// How a pair is fitted, and how quantities are derived from the fit.
#[derive(Clone, Debug, PartialEq)]
pub struct PairSettings {
    /// The fit.
    pub fit: FitSettings,
    /// Posteriors and verdict; `None` stops after least squares.
    pub verdict: Option<VerdictSettings>,
    /// The speed of a collapsing sphere; `None` leaves it out.
    pub sphere: Option<ClumpSettings>,
    /// What follows from them.
    pub derive: DeriveSettings,
}

impl Default for PairSettings {
    fn default() -> Self {
        Self {
            verdict: Some(VerdictSettings::default()),
            ..Self::formal()
        }
    }
}

impl PairSettings {
    /// Default settings that stop after least squares.
    #[must_use]
    pub fn formal() -> Self {
        Self {
            fit: FitSettings::default(),
            verdict: None,
            sphere: None,
            derive: DeriveSettings::default(),
        }
    }
}

/// One line of a pair, read and prepared.
#[derive(Clone, Debug)]
pub struct LineOutcome {
    /// The line.
    pub line: Line,
    /// Its file and format.
    pub origin: Origin,
    /// SHA-256 of the file, where there is one.
    pub sha256: Option<String>,
    /// What was assumed on the way to the common scale.
    pub notes: Vec<ScaleNote>,
    /// The prepared spectrum.
    pub prepared: Prepared,
}

/// A pair with everything that was found of it.
#[derive(Clone, Debug)]
pub struct PairOutcome {
    /// Name of the source.
    pub name: String,
    /// The optically thick line.
    pub thick: LineOutcome,
    /// The optically thin line.
    pub thin: LineOutcome,
    /// The thin line's own fit.
    pub thin_fit: ThinFit,
    /// Asymmetry measures.
    pub measures: Measures,
    /// The joint fits.
    pub fit: PairFit,
    /// Posteriors and verdict; `None` where they were not asked for, or a caution says why not.
    pub judged: Option<Judged>,
    /// Posterior of the collapsing sphere, of the speed law that the pair prefers; `None` where it was not
    /// asked for, or a caution says why not.
    pub sphere: Option<ClumpPosterior>,
    /// Whether its speed is the adopted one; where it is not, a caution says why.
    pub sphere_stands: bool,
    /// Cautions, the gravest first.
    pub cautions: Vec<Caution>,
    /// What follows from the fit and the source's properties, with cautions of its own.
    pub derived: Derived,
    /// Whether anything but its name is given of the source.
    pub source_given: bool,
}

impl PairOutcome {
    /// Code and sentence of every caution, the pair's before those of what is derived.
    #[must_use]
    pub fn all_cautions(&self) -> Vec<(&'static str, String)> {
        let of_pair = self.cautions.iter().map(|one| (one.code(), one.text()));
        let of_derived = &self.derived.cautions;
        of_pair
            .chain(of_derived.iter().map(|one| (one.code(), one.text())))
            .collect()
    }
}

/// Reads, prepares, measures and fits the pair of a run sheet; `base` is what its paths are
/// relative to.
///
/// # Errors
///
/// [`RunError`] for settings, files or spectra that cannot be used.
pub fn fit_pair(
    sheet: &RunSheet,
    base: &Path,
    workspace: &mut Workspace,
) -> Result<PairOutcome, RunError> {
    fit_spectra(read_pair(sheet, base)?, &sheet.pair_settings()?, workspace)
}

/// Reads the pair of a run sheet; `base` is what its paths are relative to.
///
/// # Errors
///
/// [`RunError`] for settings or files that cannot be used.
pub fn read_pair(sheet: &RunSheet, base: &Path) -> Result<PairInput, RunError> {
    let (thick_line, thin_line) = (sheet.thick.line("thick")?, sheet.thin.line("thin")?);
    refuse_exchanged_lines(&thick_line, &thin_line)?;
    let read = |section: &LineSection, which, line| {
        let prepare = sheet.prepare_settings(section)?;
        open(section, which, line, prepare, base)
    };
    Ok(PairInput {
        name: sheet.source.name.clone(),
        source: sheet.source.properties()?,
        thick: read(&sheet.thick, "thick", thick_line)?,
        thin: read(&sheet.thin, "thin", thin_line)?,
    })
}

/// Prepares, measures and fits a pair.
///
/// # Errors
///
/// [`RunError`] for settings or spectra that cannot be used.
pub fn fit_spectra(
    pair: PairInput,
    settings: &PairSettings,
    workspace: &mut Workspace,
) -> Result<PairOutcome, RunError> {
    refuse_exchanged_lines(&pair.thick.line, &pair.thin.line)?;
    let prepared = prepare_lines(&pair)?;
    fit_prepared(pair, prepared, settings, workspace)
}

/// Prepares both lines of a pair, the thick one first.
pub(super) fn prepare_lines(pair: &PairInput) -> Result<(Prepared, Prepared), RunError> {
    let (thick, thin) = (&pair.thick, &pair.thin);
    let expected = |line: &Line| Expected {
        components: line.components.clone(),
        window: None,
    };
    prepare_pair(
        (&thick.spectrum, &thick.prepare, &expected(&thick.line)),
        (&thin.spectrum, &thin.prepare, &expected(&thin.line)),
    )
    .map_err(|error| {
        RunError::of_pair(error, (thick.origin.path.clone(), thin.origin.path.clone()))
    })
}

/// Measures and fits a pair whose lines are prepared.
pub(super) fn fit_prepared(
    pair: PairInput,
    (prepared_thick, prepared_thin): (Prepared, Prepared),
    settings: &PairSettings,
    workspace: &mut Workspace,
) -> Result<PairOutcome, RunError> {
    let PairInput {
        name,
        source,
        thick,
        thin,
    } = pair;
    let (thick_line, thin_line) = (&thick.line, &thin.line);
    let thin_fit = fit_thin(&prepared_thin, thin_line, &settings.fit, workspace)?;
    let systematic_km_s = thick_line
        .velocity_systematic_km_s()
        .hypot(thin_line.velocity_systematic_km_s());
    let measures = measure(
        &prepared_thick,
        &prepared_thin,
        thin_fit.line.as_ref(),
        systematic_km_s,
        &MeasureSettings {
            thick_components: thick_line.components.clone(),
            thin_components: thin_line.components.clone(),
            ..MeasureSettings::default()
        },
    );
    refuse_exchanged_brightness(
        (thick_line, thin_line),
        (&thick.origin.path, &thin.origin.path),
        &thin_fit,
        &measures,
    )?;
    let fit = crate::fit::fit_pair(
        &prepared_thick,
        &prepared_thin,
        (thick_line, thin_line),
        thin_fit.line.as_ref(),
        &settings.fit,
        workspace,
    )
    .map_err(|error| {
        RunError::of_fit(error, (thick.origin.path.clone(), thin.origin.path.clone()))
    })?;
    let prepared = PreparedPair {
        thick: &prepared_thick,
        thin: &prepared_thin,
        lines: (thick_line, thin_line),
        thin_line: thin_fit.line.as_ref(),
        measures: &measures,
        calibration_error: (thick.calibration_error, thin.calibration_error),
    };
    let judged = (settings.verdict.as_ref())
        .map(|verdict| judge(&prepared, &settings.fit, verdict))
        .transpose()?;
    let sphere =
        (settings.sphere.as_ref()).map(|sphere| preferred_sphere(&prepared, &source, sphere));
    let unheard = unheard_by_sphere(settings);
    let standing = sphere.as_ref().and_then(|sphere| sphere.as_ref().ok());
    let detected = measures.peak_thick_k.is_some();
    let standing = standing.filter(|sphere| sphere.stands() && detected && unheard.is_empty());
    let mut cautions = cautions(&PairFacts {
        thick: &prepared_thick,
        thin: &prepared_thin,
        thin_fit: &thin_fit,
        measures: &measures,
        fit: &fit,
        judgement: judgement(judged.as_ref()),
        sphere: standing,
    });
    if let Some(sphere) = &sphere {
        cautions.extend(sphere_cautions(sphere.as_ref(), &unheard));
    }
    let judged = judged.and_then(Result::ok);
    let slabs = Slabs {
        judged: judged.as_ref(),
        described: fit.adopted().or_else(|| layer(&fit)),
        thin_line: thin_fit.line.as_ref(),
    };
    let derived = slabs.derived((thick_line, thin_line), standing, &source, &settings.derive)?;
    let sphere_stands = standing.is_some();
    let sphere = sphere.and_then(Result::ok);
    let name = name
        .or_else(|| thick.object.clone())
        .or_else(|| thin.object.clone())
        .unwrap_or_else(|| stem(&thick.origin.path));
    Ok(PairOutcome {
        name,
        thick: thick.outcome(prepared_thick),
        thin: thin.outcome(prepared_thin),
        thin_fit,
        measures,
        fit,
        judged,
        sphere,
        sphere_stands,
        cautions,
        derived,
        source_given: !source.is_empty(),
    })
}

/// The sphere of the speed law that a pair prefers.
fn preferred_sphere(
    pair: &PreparedPair<'_>,
    source: &SourceProperties,
    settings: &ClumpSettings,
) -> Result<ClumpPosterior, PosteriorError> {
    let settings = ClumpSettings {
        known: known(source, settings.beam_arcsec),
        ..settings.clone()
    };
    clump_posteriors(pair.thick, pair.thin, pair.lines, pair.thin_line, &settings)
        .map(ClumpPosteriors::into_preferred)
}

/// What is known of a pair's slabs.
struct Slabs<'a> {
    judged: Option<&'a Judged>,
    described: Option<&'a ModelFit>,
    thin_line: Option<&'a ThinLine>,
}

impl Slabs<'_> {
    /// What follows from the source and from draws of the slabs or of a sphere that stands.
    fn derived(
        &self,
        (thick, thin): (&Line, &Line),
        sphere: Option<&ClumpPosterior>,
        source: &SourceProperties,
        settings: &DeriveSettings,
    ) -> Result<Derived, RunError> {
        let draws = self.draws(thick, sphere, settings);
        let averaged = self.judged.and_then(Judged::adopted);
        let described = self.described.filter(|_| averaged.is_none());
        let tracers = Tracers {
            thick,
            thin,
            model: described.map(|fit| fit.model),
        };
        Ok(crate::derive::sample(source, &draws, &tracers, settings.seed)?.derived())
    }

    /// Draws of what is derived from: the slabs', and in the place of their speed that of a sphere that
    /// stands.
    fn draws(
        &self,
        thick_line: &Line,
        sphere: Option<&ClumpPosterior>,
        settings: &DeriveSettings,
    ) -> FitDraws {
        let averaged = self.judged.and_then(Judged::adopted);
        let draws = match (self.judged, &averaged, self.described, self.thin_line) {
            (Some(judged), Some(averaged), ..) => {
                let with_speed = judged.speed != Speed::Unconstrained;
                FitDraws::of_posterior(averaged, thick_line, with_speed, settings)
            }
            (_, _, Some(fit), _) => FitDraws::formal(fit, settings),
            (_, _, None, Some(line)) => FitDraws::of_thin_line(line, settings),
            (_, _, None, None) => FitDraws::new(settings.draws),
        };
        match sphere {
            Some(sphere) => {
                let with_speed = sphere.speed() != Speed::Unconstrained;
                draws.with_sphere(sphere, with_speed, settings)
            }
            None => draws,
        }
    }
}

/// What a source's properties say of its sphere.
fn known(source: &SourceProperties, beam_arcsec: Option<f64>) -> KnownClump {
    let (distance, radius) = (source.get(Input::Distance), source.get(Input::Radius));
    let beam = match (beam_arcsec, distance, radius) {
        (Some(beam), Some(distance), Some(radius)) => {
            Some(KnownClump::beam_over_radius(beam, distance, radius))
        }
        _ => None,
    };
    KnownClump {
        t_kin_k: source.get(Input::Kinetic),
        t_dust_k: source.get(Input::DustTemperature),
        density_slope: source.get(Input::Slope),
        beam_over_radius: beam,
    }
}

/// Settings of a fit that the sphere knows nothing of, as run sheets name them: with any, its speed is not
/// the adopted one.
fn unheard_by_sphere(settings: &PairSettings) -> Vec<String> {
    let fit = &settings.fit;
    let given = fit.given.keys().map(|name| format!("given {name}"));
    let bounds = fit.bounds.keys().map(|name| format!("bounds of {name}"));
    let priors = (settings.verdict.iter())
        .flat_map(|verdict| replaced(&verdict.posterior.priors))
        .map(|(name, _)| format!("priors of {name}"));
    given.chain(bounds).chain(priors).collect()
}

/// Without an inward speed, a uniform layer still has a depth and an excitation temperature.
fn layer(fit: &PairFit) -> Option<&ModelFit> {
    let usable = |fit: &&ModelFit| fit.model == Model::Layer && fit.converged() && fit.determined();
    fit.models.iter().find(usable)
}

impl LineInput {
    /// A spectrum that no file holds, prepared with the default settings; messages call it `called`.
    #[must_use]
    pub fn in_memory(line: Line, spectrum: Spectrum, called: &str) -> Self {
        Self {
            line,
            spectrum,
            prepare: PrepareSettings::default(),
            origin: Origin {
                path: called.into(),
                format: "in memory".to_owned(),
            },
            sha256: None,
            object: None,
            notes: Vec::new(),
            calibration_error: 0.0,
        }
    }

    fn outcome(self, prepared: Prepared) -> LineOutcome {
        LineOutcome {
            line: self.line,
            origin: self.origin,
            sha256: self.sha256,
            notes: self.notes,
            prepared,
        }
    }
}

/// A line's file, read and on the common scale.
pub(super) fn open(
    section: &LineSection,
    which: &'static str,
    line: Line,
    prepare: PrepareSettings,
    base: &Path,
) -> Result<LineInput, RunError> {
    let file = section.file.as_ref().ok_or(RunError::NoFile { which })?;
    let path = base.join(file);
    let options: ReadOptions = section.read_options()?;
    let content = load(&path)?;
    let raw = spectrum_from_bytes(&path, &content, &options)?;
    let scaled = to_spectrum(&raw, &section.scale_settings(&line))?;
    Ok(LineInput {
        line,
        spectrum: scaled.spectrum,
        prepare,
        sha256: Some(hexadecimal(&Sha256::digest(&content))),
        object: raw.object.clone(),
        origin: raw.origin,
        notes: scaled.notes,
        calibration_error: scaled.calibration_error,
    })
}

fn stem(path: &Path) -> String {
    path.file_stem().map_or_else(
        || "source".to_owned(),
        |stem| stem.to_string_lossy().into_owned(),
    )
}

/// The rarer isotopologue as the thick line.
pub(super) fn refuse_exchanged_lines(thick: &Line, thin: &Line) -> Result<(), RunError> {
    let exchanged =
        isotopologue_pair(thick, thin).is_none() && isotopologue_pair(thin, thick).is_some();
    if exchanged {
        return Err(RunError::Swapped {
            evidence: format!(
                "{} as the thick line of {}, its more abundant isotopologue",
                thick.name, thin.name
            ),
        });
    }
    Ok(())
}

/// How much brighter than the thick line an isotopologue in its place is that cannot be one.
const IMPOSSIBLE_BRIGHTNESS: f64 = 1.5;

fn refuse_exchanged_brightness(
    (thick, thin): (&Line, &Line),
    (thick_path, thin_path): (&Path, &Path),
    thin_fit: &ThinFit,
    measures: &Measures,
) -> Result<(), RunError> {
    let (Some(line), Some(peak)) = (&thin_fit.line, measures.peak_thick_k) else {
        return Ok(());
    };
    let excess = line.peak_k.value - IMPOSSIBLE_BRIGHTNESS * peak.value;
    let significant = excess > 5.0 * line.peak_k.err.hypot(peak.err);
    if significant && isotopologue_pair(thick, thin).is_some() {
        return Err(RunError::Swapped {
            evidence: format!(
                "{}: {} peaks at {:.2} K, and in {} {}, its rarer isotopologue, at {:.2} K",
                thick_path.display(),
                thick.name,
                peak.value,
                thin_path.display(),
                thin.name,
                line.peak_k.value
            ),
        });
    }
    Ok(())
}
