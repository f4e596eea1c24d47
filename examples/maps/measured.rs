//! A simulated map's pointings, prepared, measured and fitted as the pairs that they are.

use inrush::fit::{FitSettings, Workspace, fit_pair, fit_thin};
use inrush::grid::{ClumpMaps, Diagnosis, Field, GridError, Reading, centre, diagnose};
use inrush::line::Line;
use inrush::measure::{MeasureSettings, Sides, ThinLine, first_moment, measure, sides};
use inrush::model::Model;
use inrush::numeric::Estimate;
use inrush::prepare::{Expected, PrepareSettings, Prepared, prepare_pair};
use inrush::simulate::grid::{GridTruth, SimulatedGrid, SimulatedPointing, simulate_grid};
use inrush::spectrum::{Spectrum, Window};

/// What a pointing brings.
pub struct Measured {
    pub at_arcsec: [f64; 2],
    pub thin: Option<ThinLine>,
    pub integral_thin_k_km_s: Estimate,
    pub sides: Option<Sides>,
    pub thick_moment_km_s: Option<Estimate>,
    pub v_in_km_s: Option<Estimate>,
}

/// Significance from which a moment is taken.
const DETECTION: f64 = 5.0;

/// What a simulated map says, from its spectra alone: centre, parities, verdict.
pub fn diagnosed(
    truth: &GridTruth,
    lines: &(Line, Line),
    with_fits: bool,
    workspace: &mut Workspace,
) -> Result<Diagnosis, Box<dyn std::error::Error>> {
    let grid = simulate_grid(truth, (&lines.0, &lines.1))?;
    let pointings = measured(&grid, lines, with_fits, workspace);
    Ok(diagnosis(&pointings, truth)?)
}

fn diagnosis(pointings: &[Measured], truth: &GridTruth) -> Result<Diagnosis, GridError> {
    let beam_arcsec = truth.beam_arcsec[0];
    let field = |of: &dyn Fn(&Measured) -> Option<Estimate>| {
        let readings = pointings.iter().filter_map(|one| {
            let Estimate { value, err } = of(one)?;
            let [dx_arcsec, dy_arcsec] = one.at_arcsec;
            (err > 0.0).then_some(Reading {
                dx_arcsec,
                dy_arcsec,
                value,
                err,
            })
        });
        Field::new(readings.collect(), truth.noise_fwhm_arcsec)
    };
    let maps = ClumpMaps {
        thin_velocity: field(&|one| Some(one.thin?.v_km_s))?,
        thick_moment: field(&|one| one.thick_moment_km_s)?,
        core: field(&|one| Some(one.sides?.core))?,
        wings: field(&|one| Some(one.sides?.wings))?,
        core_systematic: pointings
            .iter()
            .filter_map(|one| Some(one.sides?.core_systematic))
            .collect(),
        speed: field(&|one| one.v_in_km_s)?,
    };
    let integrals = field(&|one| Some(one.integral_thin_k_km_s))?;
    Ok(diagnose(&maps, &centre(&integrals)?, beam_arcsec))
}

fn integral_thin(thick: &Prepared, thin: &Prepared, systematic_km_s: f64) -> Estimate {
    let settings = MeasureSettings::default();
    measure(thick, thin, None, systematic_km_s, &settings).integral_thin_k_km_s
}

/// All pointings whose spectra can be prepared.
fn measured(
    grid: &SimulatedGrid,
    lines: &(Line, Line),
    with_fits: bool,
    workspace: &mut Workspace,
) -> Vec<Measured> {
    let prepared: Vec<(&SimulatedPointing, Prepared, Prepared)> = grid
        .pointings
        .iter()
        .filter_map(|pointing| {
            let (thick, thin) = prepared(grid, pointing, lines)?;
            Some((pointing, thick, thin))
        })
        .collect();
    let range = common_range(&prepared);
    prepared
        .iter()
        .map(|(pointing, thick, thin)| {
            let fit = fit_thin(thin, &lines.1, &FitSettings::default(), workspace);
            let line = fit.ok().and_then(|fit| fit.line);
            let systematic = lines
                .0
                .velocity_systematic_km_s()
                .hypot(lines.1.velocity_systematic_km_s());
            let v_in_km_s = line
                .as_ref()
                .filter(|_| with_fits)
                .and_then(|line| speed(thick, thin, lines, line, workspace));
            Measured {
                at_arcsec: [pointing.dx_arcsec, pointing.dy_arcsec],
                integral_thin_k_km_s: integral_thin(thick, thin, systematic),
                thick_moment_km_s: first_moment(thick, range, DETECTION),
                sides: line
                    .as_ref()
                    .and_then(|line| sides(thick, line, 1, systematic, DETECTION)),
                v_in_km_s,
                thin: line,
            }
        })
        .collect()
}

fn prepared(
    grid: &SimulatedGrid,
    pointing: &SimulatedPointing,
    lines: &(Line, Line),
) -> Option<(Prepared, Prepared)> {
    let spectrum = |values: &Vec<f64>| {
        let widths = vec![grid.channel_km_s; values.len()];
        Spectrum::new(grid.velocity_km_s.clone(), widths, values.clone()).ok()
    };
    let thick = spectrum(&pointing.thick.temperature_k)?;
    let thin = spectrum(&pointing.thin.temperature_k)?;
    let expected = |line: &Line| Expected {
        components: line.components.clone(),
        window: None,
    };
    let settings = PrepareSettings::default();
    prepare_pair(
        (&thick, &settings, &expected(&lines.0)),
        (&thin, &settings, &expected(&lines.1)),
    )
    .ok()
}

/// The windows of all thick lines together.
fn common_range(prepared: &[(&SimulatedPointing, Prepared, Prepared)]) -> Window {
    let empty = Window {
        low_km_s: f64::INFINITY,
        high_km_s: f64::NEG_INFINITY,
    };
    prepared.iter().fold(empty, |range, (_, thick, _)| Window {
        low_km_s: range.low_km_s.min(thick.window.low_km_s),
        high_km_s: range.high_km_s.max(thick.window.high_km_s),
    })
}

fn speed(
    thick: &Prepared,
    thin: &Prepared,
    lines: &(Line, Line),
    line: &ThinLine,
    workspace: &mut Workspace,
) -> Option<Estimate> {
    let settings = FitSettings {
        models: vec![Model::Hill],
        ..FitSettings::default()
    };
    let both = (&lines.0, &lines.1);
    let fit = fit_pair(thick, thin, both, Some(line), &settings, workspace).ok()?;
    fit.adopted()?.estimate("v_in_km_s")
}
