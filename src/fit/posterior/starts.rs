//! Where the search for peaks of a posterior begins.

use super::family::Family;
use super::target::Target;
use super::{ShapeErrors, sigma_km_s};
use crate::measure::ThinLine;
use crate::numeric::sampling::{Density, Peak, Point, climb, padded};
use crate::prepare::Prepared;

/// Width of the sharpest feature of a profile, in dispersions. Sharper ones, the edges of an opaque
/// line, are lost among the shape errors.
pub(super) const NARROWEST: f64 = 0.6;

/// Centre and dispersion, km/s.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::fit) struct Kinematics {
    pub v_km_s: f64,
    pub sigma_km_s: f64,
}

/// The dispersion of the gas in that of a self-absorbed thick line's intensity.
const SHARE_OF_INTENSITY: f64 = 0.6;

/// The thin line where it is detected, and the thick line's intensity.
pub(super) fn kinematics(
    thick: &Prepared,
    thin: &Prepared,
    thin_line: Option<&ThinLine>,
) -> Vec<Kinematics> {
    let from_thin = thin_line.map(|line| Kinematics {
        v_km_s: line.v_km_s.value,
        sigma_km_s: sigma_km_s(line),
    });
    let from_thick = intensity(thick);
    let rest = if thin_line.is_some() {
        vec![from_thick]
    } else {
        vec![from_thick, intensity(thin)]
    };
    from_thin.into_iter().chain(rest).collect()
}

/// Shape errors of a prepared line: about its intensity, a share of its peak.
pub(super) fn shape_errors(prepared: &Prepared, share: f64, gas: Kinematics) -> ShapeErrors {
    let about = intensity(prepared);
    let (spectrum, window) = (&prepared.spectrum, prepared.window);
    let inside = spectrum
        .velocity_km_s()
        .iter()
        .zip(spectrum.temperature_k())
        .filter(|(v, t)| window.contains(**v) && t.is_finite());
    let peak = inside.map(|(_, t)| *t).fold(0.0, f64::max);
    ShapeErrors {
        deviation_k: share * (peak - prepared.noise.rms_k).max(0.0),
        middle_km_s: about.v_km_s,
        reach_km_s: 1.5 * about.sigma_km_s / SHARE_OF_INTENSITY,
        sigma_km_s: gas.sigma_km_s,
    }
}

/// First and second moment of the positive intensity in the window.
fn intensity(prepared: &Prepared) -> Kinematics {
    let (spectrum, window) = (&prepared.spectrum, prepared.window);
    let mut sums = [0.0; 3];
    for (v, t) in spectrum
        .velocity_km_s()
        .iter()
        .zip(spectrum.temperature_k())
    {
        if window.contains(*v) && *t > 0.0 {
            for (power, sum) in (0..).zip(&mut sums) {
                *sum += t * v.powi(power);
            }
        }
    }
    let width = window.high_km_s - window.low_km_s;
    if sums[0] <= 0.0 {
        return Kinematics {
            v_km_s: 0.5 * (window.low_km_s + window.high_km_s),
            sigma_km_s: 0.15 * width,
        };
    }
    let mean = sums[1] / sums[0];
    let variance = (sums[2] / sums[0] - mean * mean).max((0.05 * width).powi(2));
    Kinematics {
        v_km_s: mean,
        sigma_km_s: SHARE_OF_INTENSITY * variance.sqrt(),
    }
}

/// Candidates of each kind (sign of the third coordinate) that are followed to a peak. Of three the
/// highest peak was missed in one pair of 150 (`examples/calibrate`, coverage).
const FOLLOWED: usize = 6;

/// Most steps to a peak.
const STEPS: usize = 40;

/// A climb ends where it comes this close, in units of the scales, to a peak that is known.
const KNOWN: f64 = 0.2;

/// Peaks lower than the highest by more than this hold nothing.
const DEEPEST: f64 = 15.0;

/// A climb rises no further than by this many times its last step's rise.
const RISES_LEFT: f64 = 10.0;

/// The peaks of a family that differ and matter, and evaluations of the density on the way.
pub(super) fn peaks(
    family: Family,
    target: &mut Target<'_>,
    kinematics: &[Kinematics],
) -> (Vec<Peak>, usize) {
    let scales = target.scales(kinematics[0].sigma_km_s);
    let starts = starts(family, target, kinematics);
    let dimensions = target.dimensions();
    let mut counted = Counted {
        target,
        evaluations: starts.1,
    };
    let mut tops: Vec<(Point, f64)> = Vec::new();
    let mut highest = f64::NEG_INFINITY;
    for start in starts.0 {
        let vain = |point: &Point, ln: f64, rise: f64| {
            let known = |(top, _): &(Point, f64)| {
                (0..dimensions).all(|i| (point[i] - top[i]).abs() < KNOWN * scales[i])
            };
            ln + RISES_LEFT * rise < highest - DEEPEST || tops.iter().any(known)
        };
        if let Some((top, ln)) = climb(&mut counted, &start, &scales, STEPS, vain) {
            highest = highest.max(ln);
            tops.push((top, ln));
        }
    }
    let peaks = tops
        .into_iter()
        .filter(|(_, ln)| highest - ln < DEEPEST)
        .map(|(point, ln)| Peak::measured(&mut counted, point, ln, &scales))
        .collect();
    (distinct(peaks, dimensions), counted.evaluations)
}

/// A density whose evaluations are counted.
struct Counted<'t, 'a> {
    target: &'t mut Target<'a>,
    evaluations: usize,
}

impl Density for Counted<'_, '_> {
    fn dimensions(&self) -> usize {
        self.target.dimensions()
    }

    fn ln(&mut self, point: &Point) -> f64 {
        self.evaluations += 1;
        self.target.ln(point)
    }
}

/// The most promising candidates of a family, and how many there were.
fn starts(
    family: Family,
    target: &mut Target<'_>,
    kinematics: &[Kinematics],
) -> (Vec<Point>, usize) {
    let candidates = kinematics
        .iter()
        .flat_map(|kinematics| candidates(family, *kinematics));
    let mut ranked: Vec<(f64, Point, Point)> = candidates
        .map(|point| {
            let reduced = target.reduced(&point);
            (target.ln(&reduced), target.full(&reduced), reduced)
        })
        .collect();
    let count = ranked.len();
    ranked.retain(|(ln, ..)| ln.is_finite());
    ranked.sort_by(|a, b| b.0.total_cmp(&a.0));
    let scales = target.scales(kinematics[0].sigma_km_s);
    let signed = matches!(family, Family::Moving(_) | Family::TwoClouds);
    let mut kept: Vec<(Point, Point)> = Vec::new();
    for (_, full, reduced) in ranked {
        let same_sign = |other: &&(Point, Point)| !signed || (other.0[2] > 0.0) == (full[2] > 0.0);
        let of_sign = kept.iter().filter(same_sign).count();
        let near = |other: &(Point, Point)| {
            let apart = (0..target.dimensions()).map(|i| (reduced[i] - other.1[i]) / scales[i]);
            apart.map(|along| along * along).sum::<f64>() < 4.0
        };
        if of_sign < FOLLOWED && !kept.iter().any(near) {
            kept.push((full, reduced));
        }
    }
    let points = kept.into_iter().map(|(_, reduced)| reduced);
    (points.collect(), count)
}

/// ln of the thin line's width over the thick line's dispersion in every candidate.
const THIN_WIDTH: f64 = 0.05;

fn candidates(family: Family, about: Kinematics) -> Vec<Point> {
    let Kinematics { v_km_s, sigma_km_s } = about;
    let ln = |factor: f64| (factor * sigma_km_s).ln();
    let mut points = Vec::new();
    match family {
        Family::Moving(_) => {
            for factor in [1.1, 0.8, 0.5] {
                for speed in [-2.2, -1.0, -0.5, -0.15, 0.15, 0.5, 1.0, 2.2] {
                    for tau in [1.0f64, 4.0, 20.0] {
                        points.push(padded(&[
                            v_km_s,
                            ln(factor),
                            speed / factor,
                            tau.ln(),
                            THIN_WIDTH,
                        ]));
                    }
                }
            }
        }
        Family::Still(_) => {
            for factor in [1.3, 1.0, 0.7, 0.45] {
                for tau in [0.5f64, 2.0, 6.0, 20.0, 50.0] {
                    points.push(padded(&[v_km_s, ln(factor), tau.ln(), THIN_WIDTH]));
                }
            }
        }
        Family::Unabsorbed => {
            for factor in [0.6, 1.0, 1.4, 2.0] {
                points.push(padded(&[v_km_s, ln(factor), THIN_WIDTH]));
            }
        }
        Family::TwoClouds => {
            for apart in [0.8, 1.5, 2.5, 4.0] {
                for sign in [-1.0, 1.0] {
                    for shift in [-0.7, 0.0, 0.7] {
                        for factor in [0.5, 0.85] {
                            for tau in [2.0f64, 10.0] {
                                let v = v_km_s + (shift - 0.5 * sign * apart) * sigma_km_s;
                                points.push(padded(&[
                                    v,
                                    ln(factor),
                                    sign * apart / factor,
                                    0.0,
                                    tau.ln(),
                                    0.0,
                                    THIN_WIDTH,
                                ]));
                            }
                        }
                    }
                }
            }
        }
    }
    points
}

/// The peaks that differ, the highest first.
pub(in crate::fit) fn distinct(mut peaks: Vec<Peak>, dimensions: usize) -> Vec<Peak> {
    peaks.sort_by(|a, b| b.ln.total_cmp(&a.ln));
    let mut kept: Vec<Peak> = Vec::new();
    for peak in peaks {
        let same = |other: &Peak| {
            (0..dimensions)
                .all(|i| (peak.point[i] - other.point[i]).powi(2) < 0.25 * other.scatter[i][i])
        };
        if !kept.iter().any(same) {
            kept.push(peak);
        }
    }
    kept
}
