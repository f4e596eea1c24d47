//! A pair of lines of a clump in scaled units, fast enough to be fitted.
//!
//! Radii are over the outer radius, velocities over the dispersion, brightness over J(T) - J(T_bg) at the
//! outer radius. What excites a line is two levels, as in `closure.rs`, with slopes of their own for
//! opacity, collisions and temperature: what a molecule with many levels does to them a pair of
//! lines cannot tell.

use super::emergent::density as beam_density;
use super::power_integral;
use super::rays::{LANES, PassageTransfer, add_profile};
use crate::line::Component;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::numeric::exponential::exp_in_place;

/// A clump in scaled units.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ReducedClump {
    /// Inward speed at the outer radius over the dispersion; negative is expansion.
    pub v_in_over_sigma: f64,
    /// q of v_in ~ r^-q.
    pub velocity_slope: f64,
    /// Optical depth of the thick line's centre along a radius beyond [`DEPTH_FROM`], as if nothing
    /// moved.
    pub depth: f64,
    /// a of opacity ~ r^-a.
    pub opacity_slope: f64,
    /// Collisional de-excitations over spontaneous emissions at the outer radius.
    pub collision_ratio: f64,
    /// s of that ratio ~ r^-s.
    pub collision_slope: f64,
    /// m of J(T) - J(T_bg) ~ r^-m.
    pub temperature_slope: f64,
}

/// The radius from which [`ReducedClump::depth`] counts, over the outer one.
pub const DEPTH_FROM: f64 = 0.1;

/// Radius over the outer one within which density and speed level off.
const CORE: f64 = 0.02;

/// A line of a reduced clump.
#[derive(Clone, Debug, PartialEq)]
pub struct ReducedLine {
    /// Opacity over that of the thick line.
    pub opacity_ratio: f64,
    /// Full width at half maximum of the beam over the outer radius.
    pub beam_over_radius: f64,
    /// Components, offsets over the dispersion.
    pub components: Vec<Component>,
}

/// Spacing of the velocities, in dispersions.
const STEP: f64 = 0.25;

/// Velocities reach farther than the inward speed and the components by this, in dispersions.
const REACH: f64 = 4.5;

/// Rays of a beam, and standard deviations of the widest beam that they reach.
const BEAM_REACH: f64 = 4.5;

/// Gauss-Legendre nodes and weights on 0 to 1 (numpy, `leggauss(10)`, halved).
const RAYS: [(f64, f64); 10] = [
    (0.013_046_735_741_414, 0.033_335_672_154_344),
    (0.067_468_316_655_508, 0.074_725_674_575_290),
    (0.160_295_215_850_488, 0.109_543_181_257_991),
    (0.283_302_302_935_376, 0.134_633_359_654_998),
    (0.425_562_830_509_184, 0.147_762_112_357_376),
    (0.574_437_169_490_816, 0.147_762_112_357_376),
    (0.716_697_697_064_624, 0.134_633_359_654_998),
    (0.839_704_784_149_512, 0.109_543_181_257_991),
    (0.932_531_683_344_492, 0.074_725_674_575_290),
    (0.986_953_264_258_586, 0.033_335_672_154_344),
];

/// Directions of the mean over a sphere: Gauss-Legendre cosines and weights.
const DIRECTIONS: [(f64, f64); 6] = [
    (-0.932_469_514_203_152, 0.085_662_246_189_585_2),
    (-0.661_209_386_466_264_5, 0.180_380_786_524_069_3),
    (-0.238_619_186_083_196_9, 0.233_956_967_286_345_5),
    (0.238_619_186_083_196_9, 0.233_956_967_286_345_5),
    (0.661_209_386_466_264_5, 0.180_380_786_524_069_3),
    (0.932_469_514_203_152, 0.085_662_246_189_585_2),
];

/// Offsets of the mean over the line profile, in dispersions: half of them.
const OFFSETS: usize = 8;
const OFFSET_STEP: f64 = 0.5;

/// Steps along a direction in the mean over a sphere.
const FLIGHT_STEPS: usize = 8;

/// Radii at which photons' escape is known, less one.
const RADII: usize = 16;

/// Largest steps along a ray: of asinh(z/p), and of the line-of-sight speed in dispersions.
const LENGTH_STEP: f64 = 0.35;
const SPEED_STEP: f64 = 0.7;

/// Most lines of a pair.
const LINES: usize = 2;

/// Spectra of a reduced clump, with the space that they take.
#[derive(Clone, Debug, Default)]
pub struct ReducedPair {
    velocities: Vec<f64>,
    spectra: [Vec<f64>; LINES],
    intensity: Vec<f64>,
    paths: Vec<f64>,
    cells: Vec<Cell>,
    /// Sources at the ends of cells, a value a line.
    sources: Vec<[f64; LINES]>,
    columns: Vec<f64>,
    flights: Vec<f64>,
    radius: Vec<f64>,
    ln_escape: [Vec<f64>; LINES],
}

/// A part of the near half of a ray.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Cell {
    /// Integral of opacity over its value at the outer radius.
    path: f64,
    /// Line-of-sight speed over the dispersion.
    speed: f64,
    /// Width of the line in it over the dispersion: the speed changes on the way.
    width: f64,
}

impl ReducedClump {
    fn speed(&self, radius: f64) -> f64 {
        if self.velocity_slope == 0.0 {
            self.v_in_over_sigma
        } else {
            self.v_in_over_sigma * radius.powf(-self.velocity_slope)
        }
    }

    /// Opacity at the outer radius at the line's centre.
    fn opacity(&self) -> f64 {
        self.depth / power_integral(DEPTH_FROM, 1.0, -self.opacity_slope)
    }
}

impl ReducedPair {
    /// Computes the spectra of both lines.
    pub fn trace(&mut self, clump: &ReducedClump, lines: [&ReducedLine; LINES]) {
        self.set_velocities(clump, lines);
        self.set_escape(clump, lines);
        let widest = lines[0].beam_over_radius.max(lines[1].beam_over_radius);
        let fwhm = crate::constants::FWHM_PER_SIGMA;
        let farthest = (BEAM_REACH * widest / fwhm).min(1.0);
        for spectrum in &mut self.spectra {
            spectrum.clear();
            spectrum.resize(self.velocities.len(), 0.0);
        }
        let opacity = clump.opacity();
        for (q, share) in RAYS {
            // p = P q^2: even in what the beam and the steep density see
            let impact = farthest * q * q;
            let area = 4.0 * farthest * farthest * q * q * q * share;
            self.divide(clump, lines, impact);
            for line in 0..LINES {
                let beam = lines[line].beam_over_radius / fwhm;
                let weight = area * beam_density(impact, 0.0, beam);
                self.intensity.clear();
                self.intensity.resize(self.velocities.len(), 0.0);
                self.paths.resize(self.velocities.len(), 0.0);
                dispatch(Trace {
                    line,
                    components: &lines[line].components,
                    opacity: opacity * lines[line].opacity_ratio,
                    velocities: &self.velocities,
                    cells: &self.cells,
                    sources: &self.sources,
                    paths: &mut self.paths,
                    intensity: &mut self.intensity,
                });
                for (sum, value) in self.spectra[line].iter_mut().zip(&self.intensity) {
                    *sum += weight * value;
                }
            }
        }
    }

    /// Brightness of a line (0 the first) at a velocity over the dispersion; cubic between the velocities
    /// that were computed, zero beyond.
    #[must_use]
    pub fn at(&self, line: usize, velocity: f64) -> f64 {
        let spectrum = &self.spectra[line];
        let place = (velocity - self.velocities[0]) / STEP;
        let last = self.velocities.len() as f64 - 3.0;
        if !(place >= 1.0 && place < last) {
            return 0.0;
        }
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "between 1 and the number of velocities"
        )]
        let index = place as usize;
        let x = place - index as f64;
        let f: [f64; 4] = std::array::from_fn(|k| spectrum[index - 1 + k]);
        // Lagrange's polynomial through four points
        f[0] * (-x * (x - 1.0) * (x - 2.0) / 6.0)
            + f[1] * ((x + 1.0) * (x - 1.0) * (x - 2.0) / 2.0)
            + f[2] * (-(x + 1.0) * x * (x - 2.0) / 2.0)
            + f[3] * ((x + 1.0) * x * (x - 1.0) / 6.0)
    }

    fn set_velocities(&mut self, clump: &ReducedClump, lines: [&ReducedLine; LINES]) {
        let offsets = lines
            .iter()
            .flat_map(|line| &line.components)
            .map(|component| component.offset_km_s);
        let (low, high) = offsets.fold((0.0, 0.0), |(low, high): (f64, f64), offset| {
            (low.min(offset), high.max(offset))
        });
        let reach = REACH + clump.v_in_over_sigma.abs() * (1.0 + 2.0 * clump.velocity_slope);
        let (low, high) = (low - reach, high + reach);
        let count = super::parts_needed(high - low, STEP).next_multiple_of(LANES);
        self.velocities.clear();
        self.velocities
            .extend((0..count).map(|index| low + STEP * index as f64));
    }

    /// Shares of photons that leave the clump in their first flight, from each of a row of radii.
    fn set_escape(&mut self, clump: &ReducedClump, lines: [&ReducedLine; LINES]) {
        self.radius.clear();
        self.columns.clear();
        for index in 0..=RADII {
            let radius = radius_at(index as f64);
            self.radius.push(radius);
            for (cosine, _) in DIRECTIONS {
                self.columns.push(overlapping_column(clump, radius, cosine));
            }
        }
        let profile: [f64; OFFSETS] = std::array::from_fn(|index| {
            let x = OFFSET_STEP * index as f64;
            (-0.5 * x * x).exp()
        });
        let share = |index: usize| if index == 0 { 0.5 } else { 1.0 };
        let norm: f64 = (0..OFFSETS).map(|k| share(k) * profile[k]).sum();
        for line in 0..LINES {
            let opacity = clump.opacity() * lines[line].opacity_ratio;
            self.flights.clear();
            for column in &self.columns {
                self.flights
                    .extend(profile.iter().map(|profile| -opacity * column * profile));
            }
            exp_in_place(&mut self.flights);
            let escape = &mut self.ln_escape[line];
            escape.clear();
            for flights in self.flights.chunks(OFFSETS * DIRECTIONS.len()) {
                let sum: f64 = flights
                    .chunks(OFFSETS)
                    .zip(DIRECTIONS)
                    .map(|(flights, (_, weight))| {
                        let mean: f64 = (0..OFFSETS)
                            .map(|k| share(k) * profile[k] * flights[k])
                            .sum();
                        weight * mean / norm
                    })
                    .sum();
                escape.push(sum.max(f64::MIN_POSITIVE).ln());
            }
        }
    }

    /// Sources of both lines at a radius.
    fn source(&self, clump: &ReducedClump, ln_radius: f64) -> [f64; LINES] {
        let place = place_of(ln_radius).clamp(0.0, RADII as f64 - 1e-9);
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "between 0 and RADII"
        )]
        let index = place as usize;
        let fraction = place - index as f64;
        let collisions = clump.collision_ratio * (-clump.collision_slope * ln_radius).exp();
        let temperature = (-clump.temperature_slope * ln_radius).exp();
        std::array::from_fn(|line| {
            let ln = &self.ln_escape[line];
            let escape = (ln[index] + fraction * (ln[index + 1] - ln[index])).exp();
            temperature * collisions / (collisions + escape)
        })
    }

    /// Divides the near half of a ray.
    fn divide(&mut self, clump: &ReducedClump, _lines: [&ReducedLine; LINES], impact: f64) {
        self.cells.clear();
        self.sources.clear();
        let p = impact.hypot(CORE);
        let ln_p = p.ln();
        if p >= 1.0 {
            return;
        }
        let end = (1.0 / p).acosh();
        let speed = |t: f64| clump.speed(p * t.cosh()) * t.tanh();
        let mut t = 0.0;
        let mut here = speed(t);
        self.sources.push(self.source(clump, ln_p));
        while t < end {
            let probe = (t + LENGTH_STEP).min(end);
            let change = (speed(0.5 * (t + probe)) - here)
                .abs()
                .max((speed(probe) - here).abs());
            let mut next = t + (probe - t) / (change / SPEED_STEP).max(1.0);
            if end - next < 0.2 * (next - t) {
                next = end;
            }
            let step = next - t;
            let there = speed(next);
            // opacity ds = r^-a r dt, r = p cosh t
            let path: f64 = [0.211_324_865_405_187_1, 0.788_675_134_594_812_9]
                .iter()
                .map(|x| {
                    let ln_r = ln_p + (t + x * step).cosh().ln();
                    0.5 * step * ((1.0 - clump.opacity_slope) * ln_r).exp()
                })
                .sum();
            let middle = speed(t + 0.5 * step);
            self.cells.push(Cell {
                path,
                speed: (here + 4.0 * middle + there) / 6.0,
                width: (1.0 + (there - here) * (there - here) / 12.0).sqrt(),
            });
            let ln_r = if next == end {
                0.0
            } else {
                ln_p + next.cosh().ln()
            };
            self.sources.push(self.source(clump, ln_r));
            (t, here) = (next, there);
        }
    }
}

/// Radii are even in their cube root, thinner toward the surface.
fn radius_at(index: f64) -> f64 {
    let low = CORE.cbrt();
    let t = 1.0 - (1.0 - index / RADII as f64).powf(1.5);
    (low + (1.0 - low) * t).powi(3)
}

fn place_of(ln_radius: f64) -> f64 {
    let low = CORE.cbrt();
    let t = ((ln_radius / 3.0).exp() - low) / (1.0 - low);
    RADII as f64 * (1.0 - (1.0 - t.clamp(0.0, 1.0)).cbrt().powi(2))
}

/// Integral of the opacity over its value at the outer radius from a radius to the surface, each
/// step by how much of its line overlaps with that of the gas at the start.
fn overlapping_column(clump: &ReducedClump, radius: f64, cosine: f64) -> f64 {
    let p = radius * (1.0 - cosine * cosine).sqrt();
    let from = (radius * cosine / p).asinh();
    let to = ((1.0 - p * p).max(0.0).sqrt() / p).asinh();
    let step = (to - from).max(0.0) / FLIGHT_STEPS as f64;
    let here = clump.speed(radius) * cosine;
    (0..FLIGHT_STEPS)
        .map(|index| {
            let t = from + (index as f64 + 0.5) * step;
            let cosh = t.cosh();
            let r = p * cosh;
            let apart = clump.speed(r) * t.tanh() - here;
            step * ((1.0 - clump.opacity_slope) * r.ln() - 0.25 * apart * apart).exp()
        })
        .sum()
}

struct Trace<'a> {
    line: usize,
    components: &'a [Component],
    opacity: f64,
    velocities: &'a [f64],
    cells: &'a [Cell],
    sources: &'a [[f64; LINES]],
    paths: &'a mut [f64],
    intensity: &'a mut [f64],
}

impl Kernel for Trace<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let count = self.cells.len();
        for step in 0..2 * count {
            let near = step >= count;
            let (index, side) = if near {
                (step - count, 1.0)
            } else {
                (count - 1 - step, -1.0)
            };
            let cell = &self.cells[index];
            let inverse = 1.0 / cell.width;
            self.paths.fill(0.0);
            for component in self.components {
                let centre = side * cell.speed + component.offset_km_s;
                let height = cell.path * component.weight * inverse;
                add_profile::<A>(self.velocities, centre, inverse, height, self.paths);
            }
            let inner = self.opacity * self.sources[index][self.line];
            let outer = self.opacity * self.sources[index + 1][self.line];
            let (enters, leaves) = if near { (inner, outer) } else { (outer, inner) };
            PassageTransfer {
                opacity: self.opacity,
                enters,
                leaves,
            }
            .pass::<A>(self.paths, self.intensity);
        }
    }
}
