//! Figures of what a map says of motions: parts even and odd about the centre, and what goes with radius.

use super::super::RunError;
use super::super::products::{make_directory, write_figure};
use super::MapRun;
use super::figures::{MAP_PX, MapMaker, title};
use super::motions::MapMotions;
use super::pointing::Work;
use super::products::Maps;
use crate::grid::{CentralSpot, Diagnosis, PointingMotions, SpeedProfile};
use crate::numeric::Estimate;
use crate::report::figure::{ColourScale, Interval, RadiusCurve, RadiusFigure, RadiusPanel};
use crate::report::rounded;
use std::path::PathBuf;

/// Steps of a curve.
const STEPS: u32 = 120;

/// Draws what there is; nothing where the map could not be read.
pub(super) fn write(
    run: &MapRun,
    work: &Work<'_>,
    maps: &Maps,
    found: &MapMotions,
    written: &mut Vec<PathBuf>,
) -> Result<(), RunError> {
    let Ok(diagnosis) = &found.diagnosis else {
        return Ok(());
    };
    let folder = run.directory.join("figures");
    make_directory(&folder)?;
    let maker = MapMaker::of(run, work, maps);
    for (name, words, parity, colours) in [
        (
            "asymmetry",
            "asymmetry",
            &diagnosis.asymmetry,
            ColourScale::CentredBlueAbove,
        ),
        (
            "delta_v",
            "velocity difference \u{3b4}V",
            &diagnosis.delta_v,
            ColourScale::CentredBlueBelow,
        ),
    ] {
        let (Ok(parity), Some(values)) = (parity, maps.column(name)) else {
            continue;
        };
        let [x, y] = diagnosis.centre.at_arcsec;
        let less = |fitted: &dyn Fn([f64; 2]) -> f64| {
            let mut left = vec![f64::NAN; values.len()];
            for site in 0..work.field.len() {
                let cell = work.field.cell(site).unwrap_or(site);
                if let Some([east, north]) = work.field.offsets_arcsec(site) {
                    left[cell] = f64::from(values[cell]) - fitted([east - x, north - y]);
                }
            }
            left
        };
        let parts = [
            (
                "even",
                "less its odd part",
                Some("blue: as infall makes it"),
                less(&|at| parity.odd_at(at)),
            ),
            (
                "odd",
                "less its even part",
                None,
                less(&|[east, north]| parity.even_at(east.hypot(north))),
            ),
        ];
        for (part, taken_off, note, values) in parts {
            let label = format!("{words}, {taken_off}");
            let figure = maker.figure(&label, note, colours, values);
            let name = format!("{name}_{part}");
            written.extend(write_figure(&folder, &name, &figure.svg()?, MAP_PX)?);
        }
    }
    let panels: Vec<RadiusPanel> = [
        (diagnosis.spot.as_ref().ok()).map(|spot| moment_panel(diagnosis, spot, &found.pointings)),
        (diagnosis.speed.as_ref().ok())
            .map(|speed| speed_panel(work, diagnosis, speed, &found.pointings)),
    ]
    .into_iter()
    .flatten()
    .collect();
    if !panels.is_empty() {
        let figure = RadiusFigure {
            title: title(run, work),
            panels,
        };
        written.extend(write_figure(&folder, "radius", &figure.svg()?, MAP_PX)?);
    }
    Ok(())
}

/// As figures write it.
fn shown(estimate: Estimate) -> String {
    rounded(estimate.value, estimate.err)
        .replace("+-", "\u{b1}")
        .replace('-', "\u{2212}")
}

fn interval(estimate: Estimate) -> Interval {
    Interval {
        value: estimate.value,
        low: estimate.value - estimate.err,
        high: estimate.value + estimate.err,
    }
}

/// Distances of a quantity's pointings from the centre, with its value.
fn against_radius<'a>(
    diagnosis: &'a Diagnosis,
    pointings: &'a [PointingMotions],
    of: impl Fn(&PointingMotions) -> Option<Estimate> + 'a,
) -> impl Iterator<Item = ([f64; 2], f64, Estimate)> + 'a {
    let [x, y] = diagnosis.centre.at_arcsec;
    pointings.iter().filter_map(move |one| {
        let from = [one.at_arcsec[0] - x, one.at_arcsec[1] - y];
        Some((
            from,
            from[0].hypot(from[1]),
            of(one).filter(|one| one.err > 0.0)?,
        ))
    })
}

fn curve(label: &str, farthest: f64, value: impl Fn(f64) -> f64) -> RadiusCurve {
    let radii = (0..=STEPS).map(|step| farthest * f64::from(step) / f64::from(STEPS));
    RadiusCurve {
        label: label.to_owned(),
        points: radii.map(|radius| (radius, value(radius))).collect(),
    }
}

fn farthest(points: &[(f64, Interval)]) -> f64 {
    points.iter().map(|(radius, _)| *radius).fold(0.0, f64::max)
}

fn moment_panel(
    diagnosis: &Diagnosis,
    spot: &CentralSpot,
    pointings: &[PointingMotions],
) -> RadiusPanel {
    let moments = against_radius(diagnosis, pointings, |one| one.thick_moment_km_s);
    let [by_east, by_north] = spot.plane_km_s_arcsec;
    let points: Vec<(f64, Interval)> = moments
        .map(|([east, north], radius, moment)| {
            let value = moment.value - by_east * east - by_north * north;
            (radius, interval(Estimate { value, ..moment }))
        })
        .collect();
    let slope = spot.slope_km_s_arcsec;
    let (centre, farthest) = (spot.v_centre_km_s.value, farthest(&points));
    RadiusPanel {
        label: "first moment (km/s)".to_owned(),
        curves: vec![curve("fit", farthest, |radius| {
            centre + slope.value * radius
        })],
        notes: vec![format!(
            "its plane taken off; slope {} km/s/arcsec ({:.1}\u{3c3})",
            shown(slope),
            spot.significance
        )],
        points,
    }
}

fn speed_panel(
    work: &Work<'_>,
    diagnosis: &Diagnosis,
    speed: &SpeedProfile,
    pointings: &[PointingMotions],
) -> RadiusPanel {
    let speeds = against_radius(diagnosis, pointings, |one| one.v_in_km_s);
    let points: Vec<(f64, Interval)> = speeds
        .map(|(_, radius, speed)| (radius, interval(speed)))
        .collect();
    let farthest = farthest(&points);
    let constant = speed.constant_km_s.value;
    let beam_arcsec =
        (work.field.beam()).map_or(0.0, |beam| (beam.major_arcsec * beam.minor_arcsec).sqrt());
    RadiusPanel {
        label: "adopted inward speed (km/s)".to_owned(),
        curves: vec![
            curve(
                &format!("slope q = {}", shown(speed.slope)),
                farthest,
                |radius| speed.at(radius, beam_arcsec),
            ),
            curve("one speed", farthest, |_| constant),
        ],
        notes: vec![
            format!(
                "\u{3c7}\u{b2} above the best slope's: one speed {:.1}, free fall {:.1}",
                speed.chi2_over_constant, speed.chi2_over_free_fall
            ),
            "fitted speeds do not tell one speed of the gas from free fall".to_owned(),
        ],
        points,
    }
}
