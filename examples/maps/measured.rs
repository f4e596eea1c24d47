//! A simulated map's pointings, prepared, measured and fitted as the pairs that they are.

use inrush::fit::{FitSettings, Workspace, fit_pair, fit_thin};
use inrush::line::Line;
use inrush::measure::{MeasureSettings, Measures, ThinLine, first_moment, measure};
use inrush::model::Model;
use inrush::numeric::Estimate;
use inrush::prepare::{Expected, PrepareSettings, Prepared, prepare_pair};
use inrush::simulate::grid::{SimulatedGrid, SimulatedPointing};
use inrush::spectrum::{Spectrum, Window};

/// What a pointing brings.
pub struct Measured {
    pub dx_arcsec: f64,
    pub dy_arcsec: f64,
    pub thin: Option<ThinLine>,
    pub measures: Measures,
    pub mean_thick_km_s: Option<Estimate>,
    pub v_in_km_s: Option<Estimate>,
}

/// Significance from which a moment is taken.
const DETECTION: f64 = 5.0;

/// All pointings whose spectra can be prepared.
pub fn measured(
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
            let line = std::panic::catch_unwind(std::panic::AssertUnwindSafe(|| {
                fit_thin(thin, &lines.1, &FitSettings::default(), workspace)
                    .ok()
                    .and_then(|fit| fit.line)
            }))
            .unwrap_or(None);
            let systematic = lines
                .0
                .velocity_systematic_km_s()
                .hypot(lines.1.velocity_systematic_km_s());
            let settings = MeasureSettings::default();
            let v_in_km_s = line
                .as_ref()
                .filter(|_| with_fits)
                .and_then(|line| speed(thick, thin, lines, line, workspace));
            Measured {
                dx_arcsec: pointing.dx_arcsec,
                dy_arcsec: pointing.dy_arcsec,
                measures: measure(thick, thin, line.as_ref(), systematic, &settings),
                mean_thick_km_s: first_moment(thick, range, DETECTION),
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
