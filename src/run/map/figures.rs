//! Figures of a map: what is drawn, handed to the report.

use super::super::products::{make_directory, write_figure};
use super::super::{PairOutcome, RunError};
use super::pointing::Work;
use super::products::Maps;
use super::{MapRun, Second, final_outcome};
use crate::fit::Workspace;
use crate::grid::cubes::pixel_arcsec;
use crate::model::Sampling;
use crate::numeric::robust::median;
use crate::read::sky::{SkyFrame, SkyPosition};
use crate::report::figure::{
    ColourScale, MapCells, MapFigure, ScaleBar, SpectraSheet, SpectrumPanel,
};
use crate::report::sky_map::MapAxes;
use crate::spectrum::Spectrum;
use std::ops::ControlFlow;
use std::path::PathBuf;

/// Quantities that have a figure, with their label and colours.
const DRAWN: [(&str, &str, ColourScale); 9] = [
    (
        "integral_thick_k_km_s",
        "integrated intensity, thick line (K km/s)",
        ColourScale::Sequential,
    ),
    (
        "integral_thin_k_km_s",
        "integrated intensity, thin line (K km/s)",
        ColourScale::Sequential,
    ),
    (
        "v_thin_km_s",
        "velocity of the thin line (km/s)",
        ColourScale::Sequential,
    ),
    (
        "fwhm_thin_km_s",
        "width of the thin line (km/s)",
        ColourScale::Sequential,
    ),
    (
        "delta_v",
        "velocity difference \u{3b4}V",
        ColourScale::CentredBlueBelow,
    ),
    (
        "asymmetry",
        "intensity asymmetry",
        ColourScale::CentredBlueAbove,
    ),
    (
        "two_layer_v_in_km_s",
        "inward speed, two layers (km/s)",
        ColourScale::CentredBlueAbove,
    ),
    (
        "hill_v_in_km_s",
        "inward speed, hill (km/s)",
        ColourScale::CentredBlueAbove,
    ),
    (
        "v_in_km_s",
        "adopted inward speed (km/s)",
        ColourScale::CentredBlueAbove,
    ),
];

/// Shares of the peak at which contours lie.
const LEVELS: [f64; 4] = [0.2, 0.4, 0.6, 0.8];

/// Width of a map's PNG, pixels: 88 mm at 460 dots an inch.
pub(super) const MAP_PX: u32 = 1600;
/// Of the sheet of spectra: 180 mm at 340 dots an inch.
const SHEET_PX: u32 = 2400;

/// Panels of the sheet of spectra along an axis; of larger maps every second, third, ... pointing is shown.
const MOST_PANELS: usize = 11;

const PC_PER_KPC: f64 = 1000.0;
const ARCSEC_PER_RADIAN: f64 = 648_000.0 / std::f64::consts::PI;

/// Draws every quantity that there is.
pub(super) fn write(
    run: &MapRun,
    work: &Work<'_>,
    maps: &Maps,
    written: &mut Vec<PathBuf>,
) -> Result<(), RunError> {
    let folder = run.directory.join("figures");
    make_directory(&folder)?;
    let maker = MapMaker::of(run, work, maps);
    for (name, label, colours) in DRAWN {
        let Some(values) = maps.column(name) else {
            continue;
        };
        let note = (colours != ColourScale::Sequential).then_some("blue: as infall makes it");
        let values: Vec<f64> = values.iter().copied().map(f64::from).collect();
        let figure = maker.figure(label, note, colours, values);
        written.extend(write_figure(&folder, name, &figure.svg()?, MAP_PX)?);
    }
    Ok(())
}

/// Makes figures of maps that share all but their values.
pub(super) struct MapMaker<'a> {
    run: &'a MapRun,
    work: &'a Work<'a>,
    plane: Option<Plane>,
    /// The thin line's integral, cell by cell; empty off a raster.
    contoured: Vec<f64>,
    peak: f64,
}

impl<'a> MapMaker<'a> {
    pub fn of(run: &'a MapRun, work: &'a Work<'a>, maps: &Maps) -> Self {
        let plane = Plane::of(work);
        let contoured: Vec<f64> = (maps.column("integral_thin_k_km_s"))
            .filter(|_| plane.is_some())
            .map(|values| values.iter().copied().map(f64::from).collect())
            .unwrap_or_default();
        let peak = (contoured.iter().copied())
            .filter(|value| value.is_finite())
            .fold(0.0, f64::max);
        Self {
            run,
            work,
            plane,
            contoured,
            peak,
        }
    }

    /// The figure of values, cell by cell.
    pub fn figure(
        &self,
        label: &str,
        note: Option<&str>,
        colours: ColourScale,
        values: Vec<f64>,
    ) -> MapFigure {
        let (run, work, peak) = (self.run, self.work, self.peak);
        let notes = [
            note,
            (peak > 0.0).then_some("contours: thin line, 20, 40, 60, 80 % of its peak"),
        ];
        let cells = match &self.plane {
            Some(plane) => MapCells::Raster {
                width: plane.size.0,
                height: plane.size.1,
                first_arcsec: plane.first_arcsec,
                column_arcsec: plane.column_arcsec,
                row_arcsec: plane.row_arcsec,
                values,
                contoured: self.contoured.clone(),
                levels: LEVELS.map(|share| share * peak).to_vec(),
            },
            None => MapCells::Points {
                step_arcsec: work.field.step_arcsec(),
                points: (values.iter().enumerate())
                    .filter_map(|(site, value)| Some((work.field.offsets_arcsec(site)?, *value)))
                    .collect(),
            },
        };
        MapFigure {
            title: title(run, work),
            label: label.to_owned(),
            note: notes.into_iter().flatten().collect::<Vec<_>>().join("; "),
            axes: axis_names(work),
            cells,
            colours,
            beam: work.field.beam(),
            scale_bar: scale_bar(run, work),
        }
    }
}

/// The raster about the reference position, as a plane.
struct Plane {
    size: (usize, usize),
    first_arcsec: [f64; 2],
    column_arcsec: [f64; 2],
    row_arcsec: [f64; 2],
}

impl Plane {
    fn of(work: &Work<'_>) -> Option<Self> {
        let size = work.field.raster()?;
        let (first_arcsec, column_arcsec, row_arcsec) = match work.field.axes()? {
            MapAxes::Offsets {
                first_arcsec,
                step_arcsec,
            } => (first_arcsec, [-step_arcsec, 0.0], [0.0, step_arcsec]),
            MapAxes::Sky(sky) => {
                let middle = [size.0, size.1].map(|count| (count as f64 - 1.0) / 2.0);
                let [[a, b], [c, d]] = pixel_arcsec(&sky, middle)?;
                let position = sky.position(middle)?;
                let reference = work.field.reference()?.converted(position.frame).ok()?;
                let at = position.offsets_arcsec(&reference)?;
                let first = [
                    at[0] - a * middle[0] - b * middle[1],
                    at[1] - c * middle[0] - d * middle[1],
                ];
                (first, [a, c], [b, d])
            }
        };
        Some(Self {
            size,
            first_arcsec,
            column_arcsec,
            row_arcsec,
        })
    }
}

pub(super) fn title(run: &MapRun, work: &Work<'_>) -> String {
    let name = run.sheet.source.name.clone().or_else(|| work.field.name());
    match (name, work.field.reference()) {
        (Some(name), Some(position)) => format!("{name}, {}", sexagesimal(&position)),
        (None, Some(position)) => sexagesimal(&position),
        (Some(name), None) => name,
        (None, None) => "map".to_owned(),
    }
}

/// A position as it is written on figures.
fn sexagesimal(position: &SkyPosition) -> String {
    if position.frame == SkyFrame::Galactic {
        return format!(
            "l {:.4}\u{b0} b {:+.4}\u{b0}",
            position.longitude_deg, position.latitude_deg
        );
    }
    // Tenths of a second of time, whole seconds of arc.
    let parts = |value: f64, unit: f64| {
        let whole = (value.abs() * 3600.0 * unit).round() / unit;
        let (first, rest) = ((whole / 3600.0).floor(), whole % 3600.0);
        (first, (rest / 60.0).floor(), rest % 60.0)
    };
    let (h, m, s) = parts(position.longitude_deg / 15.0, 10.0);
    let (d, am, arcsec) = parts(position.latitude_deg, 1.0);
    let sign = if position.latitude_deg < 0.0 {
        '\u{2212}'
    } else {
        '+'
    };
    format!(
        "{:02}:{m:02}:{s:04.1} {sign}{d:02}:{am:02}:{arcsec:02}",
        h % 24.0
    )
}

fn axis_names(work: &Work<'_>) -> [String; 2] {
    let galactic = work
        .field
        .reference()
        .is_some_and(|at| at.frame == SkyFrame::Galactic);
    if galactic {
        [
            "offset in l (arcsec)".to_owned(),
            "offset in b (arcsec)".to_owned(),
        ]
    } else {
        [
            "offset in right ascension (arcsec)".to_owned(),
            "offset in declination (arcsec)".to_owned(),
        ]
    }
}

/// A round length of at most a third of the field, where the distance is known.
fn scale_bar(run: &MapRun, work: &Work<'_>) -> Option<ScaleBar> {
    let distance_pc = run.sheet.source.distance_kpc?.estimate().value * PC_PER_KPC;
    let east = (0..work.field.len()).filter_map(|site| Some(work.field.offsets_arcsec(site)?[0]));
    let (low, high) = east.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), east| {
        (low.min(east), high.max(east))
    });
    let width = high - low + work.field.step_arcsec();
    let pc_per_arcsec = distance_pc / ARCSEC_PER_RADIAN;
    let most = width / 3.0 * pc_per_arcsec;
    let power = 10_f64.powf(most.log10().floor());
    let pc = [5.0, 2.0, 1.0]
        .into_iter()
        .map(|factor| factor * power)
        .find(|length| *length <= most)?;
    Some(ScaleBar {
        arcsec: pc / pc_per_arcsec,
        label: format!("{pc} pc"),
    })
}

/// The sheet of spectra with their fits.
pub(super) fn write_spectra(
    run: &MapRun,
    work: &Work<'_>,
    second: &Second,
    fitted: &[usize],
    written: &mut Vec<PathBuf>,
) -> Result<(), RunError> {
    let Some((width, height)) = work.field.raster() else {
        return Ok(());
    };
    let cells: Vec<(usize, (usize, usize))> = (fitted.iter())
        .filter_map(|site| {
            work.field
                .cell(*site)
                .map(|cell| (*site, (cell % width, cell / width)))
        })
        .collect();
    let range = |axis: fn(&(usize, usize)) -> usize| {
        let all = || cells.iter().map(|(_, cell)| axis(cell));
        Some((all().min()?, all().max()?))
    };
    let (Some(columns), Some(rows)) = (range(|cell| cell.0), range(|cell| cell.1)) else {
        return Ok(());
    };
    debug_assert!(columns.1 < width && rows.1 < height);
    let spread = (columns.1 - columns.0).max(rows.1 - rows.0) + 1;
    let every = spread.div_ceil(MOST_PANELS);
    let shown: Vec<(usize, (usize, usize))> = (cells.into_iter())
        .filter(|(_, (x, y))| (x - columns.0) % every == 0 && (y - rows.0) % every == 0)
        .map(|(site, (x, y))| (site, ((x - columns.0) / every, (rows.1 - y) / every)))
        .collect();
    let mut panels = Vec::new();
    let mut windows = Vec::new();
    let ended = run.batch.run(
        shown,
        Workspace::new,
        |workspace, (site, place)| {
            let outcome = final_outcome(work, second, site, workspace)?;
            Ok::<_, RunError>(outcome.map(|outcome| (panel(&outcome, place), window(&outcome))))
        },
        |_, drawn| match drawn {
            Ok(Some((panel, window))) => {
                panels.push(panel);
                windows.push(window);
                ControlFlow::Continue(())
            }
            Ok(None) => ControlFlow::Continue(()),
            Err(error) => ControlFlow::Break(error),
        },
    )?;
    if let ControlFlow::Break(error) = ended {
        return Err(error);
    }
    if panels.is_empty() {
        return Ok(());
    }
    // Of one pointing a window may be far too wide.
    let middle =
        |end: fn(&(f64, f64)) -> f64| median(&windows.iter().map(end).collect::<Vec<f64>>());
    let (low, high) = (middle(|window| window.0), middle(|window| window.1));
    let margin = 0.5 * (high - low);
    let of = |spread: (usize, usize)| (spread.1 - spread.0) / every + 1;
    let sheet = SpectraSheet {
        title: title(run, work),
        note: note(work, every),
        size: (of(columns), of(rows)),
        velocity_km_s: (low - margin, high + margin),
        panels,
    };
    let folder = run.directory.join("figures");
    written.extend(write_figure(&folder, "spectra", &sheet.svg()?, SHEET_PX)?);
    Ok(())
}

fn note(work: &Work<'_>, every: usize) -> String {
    let [thick, thin] = work.field.lines();
    let step = work.field.step_arcsec() * every as f64;
    format!(
        "{} dark, {} light, adopted or first model over both; panels {step:.1} arcsec apart, north up, east left",
        thick.name, thin.name
    )
}

/// Velocities about the thick line.
fn window(outcome: &PairOutcome) -> (f64, f64) {
    let window = outcome.thick.prepared.window;
    (window.low_km_s, window.high_km_s)
}

fn panel(outcome: &PairOutcome, place: (usize, usize)) -> SpectrumPanel {
    let points = |spectrum: &Spectrum| {
        let channels = spectrum
            .velocity_km_s()
            .iter()
            .zip(spectrum.temperature_k());
        channels.map(|(v, t)| (*v, *t)).collect::<Vec<_>>()
    };
    let model = outcome.fit.adopted().or(outcome.fit.models.first());
    let curves = model.map(|fit| {
        let steps = 160;
        let (low, high) = window(outcome);
        let margin = 0.3 * (high - low);
        let fine: Vec<f64> = (0..=steps)
            .map(|step| {
                low - margin + (high - low + 2.0 * margin) * f64::from(step) / f64::from(steps)
            })
            .collect();
        let sampling = Sampling::at(fine.clone());
        [
            fit.thick_profile_k(&sampling),
            fit.thin_profile_k(&sampling),
        ]
        .map(|values| fine.iter().copied().zip(values).collect())
    });
    SpectrumPanel {
        place,
        thick: points(&outcome.thick.prepared.spectrum),
        thin: points(&outcome.thin.prepared.spectrum),
        models: curves.unwrap_or_default(),
    }
}
