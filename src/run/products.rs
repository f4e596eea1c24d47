//! Results into rows, text and files.

use super::{Adopted, LineOutcome, PairOutcome, Record, RunError, RunSheet};
use crate::derive::{Derived, MassSource, Quantity, RateFormula};
use crate::fit::ModelFit;
use crate::fit::hypotheses::Speed;
use crate::fit::posterior::{Family, FamilyPosterior, Interval};
use crate::measure::ProfileClass;
use crate::report::{self, ReportError, Row, Table, Value};
use std::path::{Path, PathBuf};

/// One row of the result columns.
///
/// # Errors
///
/// [`RunError::Report`] where a column does not exist or a value is infinite: a defect.
pub fn pair_row(outcome: &PairOutcome) -> Result<Row, RunError> {
    let mut row = report::columns::results().row();
    let measures = &outcome.measures;
    let (thick, thin) = (&outcome.thick, &outcome.thin);
    row.set("id", outcome.name.as_str())?;
    row.set("thick_line", thick.line.name.as_str())?;
    row.set("thin_line", thin.line.name.as_str())?;
    row.set("noise_thick_k", thick.prepared.noise.rms_k)?;
    row.set("noise_thin_k", thin.prepared.noise.rms_k)?;
    row.set_estimate("peak_thick_k", measures.peak_thick_k)?;
    row.set_estimate("peak_thin_k", measures.peak_thin_k)?;
    row.set_estimate("integral_thick_k_km_s", measures.integral_thick_k_km_s)?;
    row.set_estimate("integral_thin_k_km_s", measures.integral_thin_k_km_s)?;
    row.set_estimate("v_thin_km_s", outcome.thin_fit.line.map(|line| line.v_km_s))?;
    row.set_estimate(
        "fwhm_thin_km_s",
        outcome.thin_fit.line.map(|line| line.fwhm_km_s),
    )?;
    row.set_estimate("v_thick_km_s", measures.v_thick_km_s)?;
    row.set_estimate("delta_v", measures.delta_v)?;
    row.set("delta_v_systematic", measures.delta_v_systematic)?;
    row.set_estimate("peak_ratio", measures.peak_ratio)?;
    row.set_estimate("asymmetry", measures.asymmetry)?;
    row.set_estimate("skewness", measures.skewness)?;
    row.set("profile", profile_word(measures.profile))?;
    row.set_estimate("v_closed_form_km_s", measures.v_closed_form_km_s)?;
    for fit in &outcome.fit.models {
        set_model(&mut row, fit)?;
    }
    set_speed(&mut row, outcome)?;
    if let Some(sphere) = &outcome.sphere {
        row.set("sphere_v_in_km_s", sphere.v_in_km_s.median)?;
        row.set("sphere_v_in_km_s_err", sphere.deviation("v_in_km_s"))?;
        set_intervals(&mut row, "sphere_v_in_km_s", &sphere.v_in_km_s)?;
        row.set("sphere_law", sphere.law.name())?;
        row.set("sphere_chi2_red", sphere.residuals.chi2_reduced())?;
    }
    if let Some(judged) = &outcome.judged {
        for standing in &judged.verdict.standings {
            let column = format!("p_{}", standing.hypothesis.name());
            row.set(&column, standing.probability)?;
        }
        let detected = outcome.measures.peak_thick_k.is_some();
        let sentences = report::verdict_sentences(&judged.verdict, detected);
        row.set("verdict", sentences.join(". ") + ".")?;
    }
    set_derived(&mut row, outcome)?;
    let mut codes: Vec<&str> = Vec::new();
    for (code, _) in outcome.all_cautions() {
        if !codes.contains(&code) {
            codes.push(code);
        }
    }
    row.set("cautions", codes.join(";"))?;
    Ok(row)
}

/// The adopted speed, velocity and dispersion: of the sphere, else of the posterior averaged over slab
/// models, else of the adopted least-squares fit. Shares and intervals of slab models stand beside them.
fn set_speed(row: &mut Row, outcome: &PairOutcome) -> Result<(), RunError> {
    set_shares(row, outcome)?;
    let Some(adopted) = outcome.adopted() else {
        return Ok(());
    };
    row.set("v_in_model", adopted.models())?;
    if let Adopted::Formal(fit) = adopted {
        for name in ["v_lsr_km_s", "sigma_km_s", "v_in_km_s"] {
            set_parameter(row, name, fit, name)?;
        }
        row.set("v_in_errors", FORMAL)?;
        return Ok(());
    }
    row.set("v_in_errors", POSTERIOR)?;
    let detected = outcome.measures.peak_thick_k.is_some();
    if detected || outcome.thin_fit.line.is_some() {
        for name in ["v_lsr_km_s", "sigma_km_s"] {
            row.set(name, adopted.marginal(name).map(|one| one.median))?;
            row.set(&format!("{name}_err"), adopted.deviation(name))?;
        }
    }
    if let Some(Speed::Below { limit_km_s }) = adopted.speed() {
        row.set("v_in_limit_km_s", limit_km_s)?;
    }
    if detected && adopted.speed() != Some(Speed::Unconstrained) {
        if let Some(v_in) = adopted.marginal("v_in_km_s") {
            row.set("v_in_km_s", v_in.median)?;
            set_intervals(row, "v_in_km_s", &v_in)?;
        }
        row.set("v_in_km_s_err", adopted.deviation("v_in_km_s"))?;
        let judged = outcome.judged.as_ref();
        let shares = judged.map_or(0, |judged| judged.verdict.shares.len());
        if shares > 1 && matches!(adopted, Adopted::Slabs(..)) {
            let systematic = judged.map(|judged| judged.verdict.between_models_km_s);
            row.set("v_in_systematic_km_s", systematic)?;
        }
    }
    Ok(())
}

/// Shares of the slab models in the evidence, and each one's interval.
fn set_shares(row: &mut Row, outcome: &PairOutcome) -> Result<(), RunError> {
    let Some(judged) = (outcome.judged.as_ref()).filter(|judged| judged.adopted().is_some()) else {
        return Ok(());
    };
    for (model, share) in &judged.verdict.shares {
        let prefix = model.column_prefix();
        row.set(&format!("{prefix}_share"), *share)?;
        let own = judged.posterior.of(Family::Moving(*model));
        if let Some(interval) = own.and_then(FamilyPosterior::v_in_km_s) {
            set_intervals(row, &format!("{prefix}_v_in_km_s"), &interval)?;
        }
    }
    Ok(())
}

/// What the column `v_in_errors` says.
const POSTERIOR: &str = "posterior";
const FORMAL: &str = "formal";

fn set_intervals(row: &mut Row, column: &str, of: &Interval) -> Result<(), RunError> {
    for (percent, (low, high)) in [("68", of.interval68), ("95", of.interval95)] {
        row.set(&format!("{column}_lo{percent}"), low)?;
        row.set(&format!("{column}_hi{percent}"), high)?;
    }
    Ok(())
}

/// Derived quantities, how they were found, and what is missing.
fn set_derived(row: &mut Row, outcome: &PairOutcome) -> Result<(), RunError> {
    let derived = &outcome.derived;
    for quantity in Quantity::ALL {
        let Some(spread) = derived.get(quantity) else {
            continue;
        };
        let column = quantity.column();
        row.set(column, spread.value)?;
        let intervals = [("68", spread.interval68), ("95", spread.interval95)];
        for (percent, [low, high]) in intervals {
            row.set(&format!("{column}_lo{percent}"), low)?;
            row.set(&format!("{column}_hi{percent}"), high)?;
        }
    }
    row.set("mass_from", derived.mass_from.map(MassSource::text))?;
    row.set("mass_rate_from", derived.rate_from.map(RateFormula::text))?;
    let missing = if outcome.source_given {
        missing(derived)
    } else {
        NOTHING_GIVEN.to_owned()
    };
    row.set("missing_inputs", missing)?;
    Ok(())
}

/// What is said in place of a long list where nothing is given of a source.
const NOTHING_GIVEN: &str = "radius_pc + mass_msun + density_slope + t_kin_k and others would fill mass_rate_msun_yr and others";

/// `INPUTS would fill COLUMNS`, `;` between; no comma, so that tables can be cut at commas.
fn missing(derived: &Derived) -> String {
    let each: Vec<String> = derived
        .missing()
        .into_iter()
        .map(|(lack, quantities)| {
            let columns: Vec<&str> = quantities.into_iter().map(Quantity::column).collect();
            format!(
                "{} would fill {}",
                lack.names().join(" + "),
                columns.join(" + ")
            )
        })
        .collect();
    each.join("; ")
}

/// A model's parameters. Velocity and dispersion of a model with an inward speed stand with the
/// adopted speed only.
fn set_model(row: &mut Row, fit: &ModelFit) -> Result<(), RunError> {
    let prefix = fit.model.column_prefix();
    let elsewhere = if fit.model.has_infall() { 2 } else { 0 };
    for parameter in &fit.model.parameters()[elsewhere..] {
        let column = format!("{prefix}_{}", parameter.name);
        set_parameter(row, &column, fit, parameter.name)?;
    }
    row.set(&format!("{prefix}_chi2_red"), fit.chi2_reduced())?;
    Ok(())
}

fn set_parameter(row: &mut Row, column: &str, fit: &ModelFit, name: &str) -> Result<(), RunError> {
    let parameter = fit.parameter(name).ok_or_else(|| {
        RunError::Internal(format!("{} has no parameter {name}", fit.model.name()))
    })?;
    row.set(column, parameter.value)?;
    row.set(&format!("{column}_err"), parameter.err)?;
    Ok(())
}

pub(super) fn profile_word(profile: ProfileClass) -> &'static str {
    match profile {
        ProfileClass::Blue => "blue",
        ProfileClass::Red => "red",
        ProfileClass::Neither => "neither",
        ProfileClass::Undetected => "undetected",
    }
}

/// The readable table of a pair.
///
/// # Errors
///
/// As [`pair_row`].
pub fn pair_summary(outcome: &PairOutcome) -> Result<String, RunError> {
    let sentences: Vec<String> = outcome
        .all_cautions()
        .into_iter()
        .map(|(_, sentence)| sentence)
        .collect();
    Ok(report::summary(&pair_row(outcome)?, &sentences))
}

/// Whether products can be written into a directory, as far as can be told without making it: before
/// a long run, not after it.
///
/// # Errors
///
/// [`RunError::NotADirectory`] where a file stands in its place or above it.
pub fn check_directory(directory: &Path) -> Result<(), RunError> {
    let existing = directory.ancestors().find(|path| path.exists());
    match existing {
        Some(path) if !path.is_dir() => Err(RunError::NotADirectory {
            path: path.to_owned(),
        }),
        _ => Ok(()),
    }
}

/// Whether a directory is there and not empty.
pub(super) fn holds_something(directory: &Path) -> Result<bool, RunError> {
    if !directory.exists() {
        return Ok(false);
    }
    let mut entries = std::fs::read_dir(directory).map_err(|source| RunError::File {
        path: directory.to_owned(),
        source,
    })?;
    Ok(entries.next().is_some())
}

/// Makes a directory, and those above it, where it is not there.
pub(super) fn make_directory(directory: &Path) -> Result<(), RunError> {
    std::fs::create_dir_all(directory).map_err(|source| RunError::File {
        path: directory.to_owned(),
        source,
    })
}

/// The directory that another one is in.
pub(super) fn parent(directory: &Path) -> &Path {
    match directory.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent,
        _ => Path::new("."),
    }
}

/// Writes a figure as SVG, PNG and PDF and returns their paths. Each file is whole or absent.
#[cfg(feature = "figures")]
pub(super) fn write_figure(
    directory: &Path,
    stem: &str,
    svg: &str,
    width_px: u32,
) -> Result<Vec<PathBuf>, RunError> {
    let contents = [
        ("svg", svg.as_bytes().to_vec()),
        ("png", report::figure::svg_to_png(svg, width_px)?),
        ("pdf", report::figure::svg_to_pdf(svg)?),
    ];
    let mut written = Vec::with_capacity(contents.len());
    for (kind, bytes) in contents {
        let path = directory.join(format!("{stem}.{kind}"));
        report::files::write_atomically(&path, |writer| Ok(writer.write_all(&bytes)?))?;
        written.push(path);
    }
    Ok(written)
}

/// Writes every product of a pair into a directory and returns their paths, in order.
///
/// `sheet` as it was run, `base` what its paths are relative to. Each file is whole or absent.
///
/// # Errors
///
/// [`RunError::File`] or [`RunError::Report`] naming the file that cannot be written.
pub fn write_products(
    outcome: &PairOutcome,
    sheet: &RunSheet,
    base: &Path,
    directory: &Path,
) -> Result<Vec<PathBuf>, RunError> {
    make_directory(directory)?;
    let mut table = Table::new(report::columns::results());
    table.push(pair_row(outcome)?)?;
    table.meta = meta(outcome, sheet);
    let resolved = resolved(outcome, sheet, base, directory).to_toml()?;
    let write =
        |name: &str, content: &dyn Fn(&mut dyn std::io::Write) -> Result<(), ReportError>| {
            let path = directory.join(name);
            report::files::write_atomically(&path, content)?;
            Ok::<PathBuf, RunError>(path)
        };
    let mut written = vec![
        write("pair.csv", &|writer| report::write_csv(&table, writer))?,
        write("pair.ecsv", &|writer| report::write_ecsv(&table, writer))?,
        write("pair.fits", &|writer| report::write_fits(&table, writer))?,
    ];
    #[cfg(feature = "figures")]
    if sheet.output.figures {
        let svg = super::figure::pair_figure(outcome).svg()?;
        let figure = write_figure(directory, "pair", &svg, super::figure::WIDTH_PX)?;
        written.extend(figure);
    }
    written.push(write("run.toml", &|writer| {
        Ok(writer.write_all(resolved.as_bytes())?)
    })?);
    Ok(written)
}

pub(super) fn meta(outcome: &PairOutcome, sheet: &RunSheet) -> Vec<(String, Value)> {
    let text = |text: &str| Value::Text(text.to_owned());
    let line = |which: &str, line: &LineOutcome| {
        vec![
            (
                format!("{which}_sha256"),
                Value::from(line.sha256.as_deref()),
            ),
            (
                format!("{which}_rest_frequency_ghz"),
                Value::Real(line.line.rest_frequency_ghz),
            ),
        ]
    };
    let mut meta = vec![
        ("program".to_owned(), text("Inrush")),
        ("version".to_owned(), text(env!("CARGO_PKG_VERSION"))),
        (
            "seed".to_owned(),
            Value::Integer(i64::try_from(sheet.seed).unwrap_or(i64::MAX)),
        ),
        (
            "errors".to_owned(),
            text(if outcome.judged.is_some() {
                "of models formal, from the curvature of chi2 at its minimum; v_in_errors says what those of the adopted speed are"
            } else {
                "formal, from the curvature of chi2 at its minimum"
            }),
        ),
        (
            "draws".to_owned(),
            Value::Integer(i64::try_from(sheet.derive.draws).unwrap_or(i64::MAX)),
        ),
    ];
    meta.extend(line("thick", &outcome.thick));
    meta.extend(line("thin", &outcome.thin));
    meta
}

/// The sheet with every default written out, paths relative to the results, and the record.
pub(super) fn resolved(
    outcome: &PairOutcome,
    sheet: &RunSheet,
    base: &Path,
    directory: &Path,
) -> RunSheet {
    let mut resolved = sheet.clone().with_all_priors();
    resolved.source.name = Some(outcome.name.clone());
    for (section, line) in [
        (&mut resolved.thick, &outcome.thick),
        (&mut resolved.thin, &outcome.thin),
    ] {
        section.line = Some(
            section
                .line
                .clone()
                .unwrap_or_else(|| line.line.name.clone()),
        );
        section.file = section
            .file
            .as_ref()
            .map(|file| relative(&base.join(file), directory));
    }
    resolved.record = Some(Record {
        version: env!("CARGO_PKG_VERSION").to_owned(),
        thick_sha256: outcome.thick.sha256.clone(),
        thin_sha256: outcome.thin.sha256.clone(),
    });
    resolved
}

/// A path as seen from a directory; absolute where the two share no root.
pub(super) fn relative(path: &Path, from: &Path) -> PathBuf {
    let (Ok(path), Ok(from)) = (path.canonicalize(), from.canonicalize()) else {
        return path.to_owned();
    };
    let shared = path
        .components()
        .zip(from.components())
        .take_while(|(a, b)| a == b)
        .count();
    if shared == 0 {
        return path;
    }
    let up = std::iter::repeat_n(
        std::path::Component::ParentDir,
        from.components().count() - shared,
    );
    up.chain(path.components().skip(shared)).collect()
}
