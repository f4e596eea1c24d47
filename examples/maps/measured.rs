//! A simulated map's pointings, prepared, measured and fitted as the pairs that they are.

use inrush::fit::{FitSettings, Workspace, fit_pair, fit_thin};
use inrush::grid::{
    Diagnosis, GridError, PointingMotions, centre, clump_maps, common_range, diagnose,
};
use inrush::line::Line;
use inrush::measure::{MeasureSettings, ThinLine, first_moment, measure, sides};
use inrush::model::Model;
use inrush::numeric::Estimate;
use inrush::prepare::{Expected, PrepareSettings, Prepared, prepare_pair};
use inrush::simulate::grid::{GridTruth, SimulatedGrid, SimulatedPointing, simulate_grid};
use inrush::spectrum::{Spectrum, Window};

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

fn diagnosis(pointings: &[PointingMotions], truth: &GridTruth) -> Result<Diagnosis, GridError> {
    let (maps, integrals) = clump_maps(pointings, truth.noise_fwhm_arcsec)?;
    Ok(diagnose(&maps, &centre(&integrals)?, truth.beam_arcsec[0]))
}

/// All pointings whose spectra can be prepared.
fn measured(
    grid: &SimulatedGrid,
    lines: &(Line, Line),
    with_fits: bool,
    workspace: &mut Workspace,
) -> Vec<PointingMotions> {
    let prepared: Vec<(&SimulatedPointing, Prepared, Prepared)> = grid
        .pointings
        .iter()
        .filter_map(|pointing| {
            let (thick, thin) = prepared(grid, pointing, lines)?;
            Some((pointing, thick, thin))
        })
        .collect();
    let windows: Vec<Window> = prepared.iter().map(|(_, thick, _)| thick.window).collect();
    let range = common_range(&windows);
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
            let settings = MeasureSettings::default();
            let measures = measure(thick, thin, line.as_ref(), systematic, &settings);
            PointingMotions {
                at_arcsec: [pointing.dx_arcsec, pointing.dy_arcsec],
                integral_thin_k_km_s: Some(measures.integral_thin_k_km_s),
                v_thin_km_s: line.map(|line| line.v_km_s),
                thick_moment_km_s: range.and_then(|range| first_moment(thick, range, DETECTION)),
                sides: (line.as_ref())
                    .and_then(|line| sides(thick, line, 1, systematic, DETECTION)),
                asymmetry: measures.asymmetry.zip(measures.asymmetry_systematic),
                delta_v: measures.delta_v.zip(measures.delta_v_systematic),
                v_in_km_s,
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
