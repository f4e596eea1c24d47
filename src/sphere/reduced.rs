//! A pair of lines of a clump in scaled units, fast enough to be fitted.
//!
//! Radii are over the outer radius, velocities over the dispersion, brightness over J(T) - J(T_bg) at the
//! outer radius. What excites a line is two levels, as in `closure.rs`, with slopes of their own for
//! opacity, collisions and temperature: what a molecule with many levels does to them a pair of
//! lines cannot tell.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::emergent::density as beam_density;
use super::power_integral;
use super::rays::LANES;

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
    /// a of opacity ~ r^-a E^-g, E how near the line's excitation comes to that of the gas.
    pub opacity_slope: f64,
    /// g of that: opacity falls where upper levels fill (of ground-state lines) or rises (below 0).
    pub opacity_response: f64,
    /// Collisional de-excitations over spontaneous emissions at the outer radius.
    pub collision_ratio: f64,
    /// s of that ratio ~ r^-s.
    pub collision_slope: f64,
    /// m of J(T) - J(T_bg) ~ r^-m.
    pub temperature_slope: f64,
    /// y of b_thin = b^(1 - y) b_thick^y, b the thin line's own share of escaping photons: at 0 it is excited
    /// by itself, at 1 as the thick line.
    pub shared_trapping: f64,
}

/// The radius from which [`ReducedClump::depth`] counts, over the outer one.
pub const DEPTH_FROM: f64 = 0.1;

/// Radius over the outer one within which density, and speed in free fall, level off.
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

/// Optical depth of the wings at which the velocities end.
const LEAST_DEPTH: f64 = 0.03;

/// Standard deviations of the wider beam that rays reach.
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
const DIRECTIONS: [(f64, f64); 4] = [
    (-0.861_136_311_594_052_6, 0.173_927_422_568_726_9),
    (-0.339_981_043_584_856_3, 0.326_072_577_431_273_1),
    (0.339_981_043_584_856_3, 0.326_072_577_431_273_1),
    (0.861_136_311_594_052_6, 0.173_927_422_568_726_9),
];

/// Offsets of the mean over the line profile, in dispersions: half of them.
const OFFSETS: usize = 7;
const OFFSET_STEP: f64 = 0.6;

/// Steps along a direction in the mean over a sphere.
const FLIGHT_STEPS: usize = 6;

/// Radii at which opacity and sources are tabulated, less one; at every [`SPARSE`]th of them photons'
/// escape is computed.
const RADII: usize = 36;
const SPARSE: usize = 3;

/// Largest steps along a ray: of asinh(z/p), and of the line-of-sight speed in dispersions.
const LENGTH_STEP: f64 = 0.4;
const SPEED_STEP: f64 = 0.7;

/// Excitation, in units of the gas temperature's, that even the coldest levels have: what opacity depends on
/// does not vanish with J(T_ex) - J(T_bg).
const LEAST_EXCITATION: f64 = 0.1;

/// Most lines of a pair.
const LINES: usize = 2;

/// Spectra of a reduced clump, with the space that they take.
#[derive(Clone, Debug, Default)]
pub struct ReducedPair {
    velocities: Vec<f64>,
    spectra: [Vec<f64>; LINES],
    intensity: [Vec<f32>; LINES],
    profile: Vec<f32>,
    single_velocities: Vec<f32>,
    cells: Vec<Cell>,
    /// Emission over opacity at the ends of cells, a value a line.
    sources: Vec<[f64; LINES]>,
    columns: Vec<f64>,
    flights: Vec<f64>,
    ln_escape: [Vec<f64>; LINES],
    /// At the tabulated radii: opacity and source of both lines.
    opacity: [Vec<f64>; LINES],
    source: [Vec<f64>; LINES],
}

/// A part of the near half of a ray.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Cell {
    /// Optical depth at the line's centre, without motion.
    depth: [f64; LINES],
    /// Line-of-sight speed over the dispersion.
    speed: f64,
    /// Width of the line in it over the dispersion: the speed changes on the way.
    width: f64,
}

impl ReducedClump {
    fn speed(&self, radius: f64) -> f64 {
        if self.velocity_slope == 0.0 {
            self.v_in_over_sigma
        } else if self.velocity_slope == 0.5 {
            self.v_in_over_sigma / radius.sqrt()
        } else {
            self.v_in_over_sigma * radius.powf(-self.velocity_slope)
        }
    }
}

/// Where a radius lies in the table: radii are dense toward the surface.
fn place_of(ln_radius: f64) -> (usize, f64) {
    let place = RADII as f64 * (ln_radius / CORE.ln()).max(0.0).sqrt();
    let place = place.min(RADII as f64 - 1e-9);
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "between 0 and RADII"
    )]
    let index = place as usize;
    (index, place - index as f64)
}

/// ln of a tabulated radius, the surface first.
fn ln_radius(index: usize) -> f64 {
    let x = index as f64 / RADII as f64;
    CORE.ln() * x * x
}

fn between(column: &[f64], (index, fraction): (usize, f64)) -> f64 {
    column[index] + fraction * (column[index + 1] - column[index])
}

impl ReducedPair {
    /// Computes the spectra of both lines.
    pub fn trace(&mut self, clump: &ReducedClump, lines: [&ReducedLine; LINES]) {
        self.set_velocities(clump, lines);
        self.set_tables(clump, lines);
        let fwhm = crate::constants::FWHM_PER_SIGMA;
        let beams = lines.map(|line| line.beam_over_radius / fwhm);
        let farthest = (BEAM_REACH * beams[0].max(beams[1])).min(1.0);
        let same = lines[0].components == lines[1].components;
        let velocities = self.velocities.len();
        self.profile.resize(velocities, 0.0);
        for line in 0..LINES {
            self.spectra[line].clear();
            self.spectra[line].resize(velocities, 0.0);
        }
        for (q, share) in RAYS {
            // p = P q^2: even in what the beam and the steep density see
            let impact = farthest * q * q;
            let area = 4.0 * farthest * farthest * q * q * q * share;
            self.divide(clump, impact);
            for line in 0..LINES {
                self.intensity[line].clear();
                self.intensity[line].resize(velocities, 0.0);
            }
            let [thick, thin] = &mut self.intensity;
            dispatch(Trace {
                components: lines.map(|line| &line.components[..]),
                same,
                velocities: &self.single_velocities,
                cells: &self.cells,
                sources: &self.sources,
                profile: &mut self.profile,
                intensity: [thick, thin],
            });
            for line in 0..LINES {
                let weight = area * beam_density(impact, 0.0, beams[line]);
                for (sum, value) in self.spectra[line].iter_mut().zip(&self.intensity[line]) {
                    *sum += weight * f64::from(*value);
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
        // where the optical depth has fallen to LEAST_DEPTH
        let wing = (2.0 * (10.0 * clump.depth / LEAST_DEPTH).ln().max(2.0)).sqrt();
        let reach = wing + clump.v_in_over_sigma.abs() * (1.0 + 2.0 * clump.velocity_slope);
        let (low, high) = (low - reach, high + reach);
        let count = super::parts_needed(high - low, STEP).next_multiple_of(LANES);
        self.velocities.clear();
        self.velocities
            .extend((0..count).map(|index| low + STEP * index as f64));
        self.single_velocities.clear();
        self.single_velocities
            .extend(self.velocities.iter().map(|v| single(*v)));
    }

    /// Opacity and source of both lines at the tabulated radii.
    fn set_tables(&mut self, clump: &ReducedClump, lines: [&ReducedLine; LINES]) {
        self.columns.clear();
        for index in (0..=RADII).step_by(SPARSE) {
            let radius = ln_radius(index).exp();
            for (cosine, _) in DIRECTIONS {
                self.columns.push(overlapping_column(clump, radius, cosine));
            }
        }
        let first = clump.depth / power_integral(DEPTH_FROM, 1.0, -clump.opacity_slope);
        for line in 0..LINES {
            self.set_escape(line, first * lines[line].opacity_ratio);
            if line == 1 {
                let [thick, thin] = &mut self.ln_escape;
                for (thin, thick) in thin.iter_mut().zip(thick) {
                    *thin += clump.shared_trapping * (*thick - *thin);
                }
            }
            let (source, opacity) = (&mut self.source[line], &mut self.opacity[line]);
            source.clear();
            opacity.clear();
            for index in 0..=RADII {
                let ln_r = ln_radius(index);
                let coarse = (index / SPARSE).min(RADII / SPARSE - 1);
                let fraction = index as f64 / SPARSE as f64 - coarse as f64;
                let escape = between(&self.ln_escape[line], (coarse, fraction)).exp();
                let collisions = clump.collision_ratio * (-clump.collision_slope * ln_r).exp();
                let share = collisions / (collisions + escape);
                source.push(share * (-clump.temperature_slope * ln_r).exp());
                let excitation = share + LEAST_EXCITATION;
                let response = excitation.powf(-clump.opacity_response);
                opacity.push(response * (-clump.opacity_slope * ln_r).exp());
            }
        }
        // the thick line has the depth that is asked for
        let mut depth = 0.0;
        let (mut r, mut kappa) = (1.0, self.opacity[0][0]);
        for index in 1..=RADII {
            let (next, there) = (ln_radius(index).exp(), self.opacity[0][index]);
            let end = next.max(DEPTH_FROM);
            let at_end = kappa + (there - kappa) * (r - end) / (r - next);
            depth += 0.5 * (kappa + at_end) * (r - end);
            (r, kappa) = (next, there);
            if next <= DEPTH_FROM {
                break;
            }
        }
        for line in 0..LINES {
            let factor = clump.depth / depth * lines[line].opacity_ratio;
            for value in &mut self.opacity[line] {
                *value *= factor;
            }
        }
    }

    /// ln of the shares of a line's photons that leave the clump in their first flight.
    fn set_escape(&mut self, line: usize, opacity: f64) {
        let profile: [f64; OFFSETS] = std::array::from_fn(|index| {
            let x = OFFSET_STEP * index as f64;
            (-0.5 * x * x).exp()
        });
        let share = |index: usize| if index == 0 { 0.5 } else { 1.0 };
        let norm: f64 = (0..OFFSETS).map(|k| share(k) * profile[k]).sum();
        self.flights.clear();
        for column in &self.columns {
            self.flights
                .extend(profile.iter().map(|profile| -opacity * column * profile));
        }
        exp_in_place(&mut self.flights);
        let escape = &mut self.ln_escape[line];
        escape.clear();
        for flights in self.flights.chunks(OFFSETS * DIRECTIONS.len()) {
            let mut sum = 0.0;
            for (flights, (_, weight)) in flights.chunks(OFFSETS).zip(DIRECTIONS) {
                let mean: f64 = (0..OFFSETS)
                    .map(|k| share(k) * profile[k] * flights[k])
                    .sum();
                sum += weight * mean / norm;
            }
            escape.push(sum.max(f64::MIN_POSITIVE).ln());
        }
    }

    /// Divides the near half of a ray.
    fn divide(&mut self, clump: &ReducedClump, impact: f64) {
        self.cells.clear();
        self.sources.clear();
        let p = impact.hypot(CORE);
        if p >= 1.0 {
            return;
        }
        let end = (1.0 / p).acosh();
        // z = p sinh t, r = p cosh t: radius, levelled off, and line-of-sight speed
        let at = |t: f64| {
            let e = t.exp();
            let (grows, falls) = (0.5 * e, 0.5 / e);
            let (radius, z) = (p * (grows + falls), p * (grows - falls));
            let share = z / (z * z + impact * impact).sqrt().max(f64::MIN_POSITIVE);
            (radius, clump.speed(radius) * share)
        };
        let place = |radius: f64| place_of(radius.ln());
        let (mut t, (mut radius, mut here)) = (0.0, at(0.0));
        let mut begins = place(radius);
        self.sources
            .push([0, 1].map(|line| between(&self.source[line], begins)));
        while t < end {
            let probe = (t + LENGTH_STEP).min(end);
            let mut next = probe;
            let mut ends = at(next);
            let mut middle = at(0.5 * (t + next));
            let change = (middle.1 - here).abs().max((ends.1 - here).abs());
            if change > SPEED_STEP {
                next = t + (probe - t) * SPEED_STEP / change;
                ends = at(next);
                middle = at(0.5 * (t + next));
            }
            let step = next - t;
            let (there, half) = (place(ends.0), place(middle.0));
            // opacity ds = opacity r dt; Simpson's rule
            let depth = [0, 1].map(|line| {
                let opacity = &self.opacity[line];
                let sum = radius * between(opacity, begins)
                    + 4.0 * middle.0 * between(opacity, half)
                    + ends.0 * between(opacity, there);
                sum * step / 6.0
            });
            let change = ends.1 - here;
            self.cells.push(Cell {
                depth,
                speed: (here + 4.0 * middle.1 + ends.1) / 6.0,
                width: (1.0 + change * change / 12.0).sqrt(),
            });
            self.sources
                .push([0, 1].map(|line| between(&self.source[line], there)));
            (t, radius, here, begins) = (next, ends.0, ends.1, there);
        }
    }
}

/// Integral of r^-a from a radius to the surface, each step by how much of its line overlaps with that of the
/// gas at the start.
fn overlapping_column(clump: &ReducedClump, radius: f64, cosine: f64) -> f64 {
    let p = radius * (1.0 - cosine * cosine).sqrt();
    let from = (radius * cosine / p).asinh();
    let to = ((1.0 - p * p).max(0.0).sqrt() / p).asinh();
    let step = (to - from).max(0.0) / FLIGHT_STEPS as f64;
    let here = clump.speed(radius) * cosine;
    let mut e = (from + 0.5 * step).exp();
    let factor = step.exp();
    let mut sum = 0.0;
    for _ in 0..FLIGHT_STEPS {
        let (grows, falls) = (0.5 * e, 0.5 / e);
        let r = p * (grows + falls);
        let apart = clump.speed(r) * (grows - falls) / (grows + falls) - here;
        sum += step * ((1.0 - clump.opacity_slope) * r.ln() - 0.25 * apart * apart).exp();
        e *= factor;
    }
    sum
}

struct Trace<'a> {
    components: [&'a [Component]; LINES],
    /// Whether both lines have the same components.
    same: bool,
    velocities: &'a [f32],
    cells: &'a [Cell],
    sources: &'a [[f64; LINES]],
    profile: &'a mut [f32],
    intensity: [&'a mut [f32]; LINES],
}

/// A number as precise as spectra are needed.
#[inline(always)]
#[expect(
    clippy::cast_possible_truncation,
    reason = "1e-7 of a spectrum is nothing"
)]
fn single(value: f64) -> f32 {
    value as f32
}

impl Kernel for Trace<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let count = self.cells.len();
        let [thick, thin] = self.intensity;
        for step in 0..2 * count {
            let near = step >= count;
            let (index, side) = if near {
                (step - count, 1.0)
            } else {
                (count - 1 - step, -1.0)
            };
            let cell = &self.cells[index];
            let inverse = 1.0 / cell.width;
            for line in 0..LINES {
                if line == 0 || !self.same {
                    self.profile.fill(0.0);
                    for component in self.components[line] {
                        let centre = single(side * cell.speed + component.offset_km_s);
                        let height = single(component.weight * inverse);
                        add_gaussian(
                            self.velocities,
                            centre,
                            single(inverse),
                            height,
                            self.profile,
                        );
                    }
                }
                let (inner, outer) = (self.sources[index][line], self.sources[index + 1][line]);
                let ends = if near { [inner, outer] } else { [outer, inner] }.map(single);
                let depth = single(cell.depth[line]);
                let intensity = if line == 0 { &mut *thick } else { &mut *thin };
                if depth * single(inverse) < SERIES_BELOW {
                    pass_thin(self.profile, depth, ends, intensity);
                } else {
                    pass(self.profile, depth, ends, intensity);
                }
            }
        }
    }
}

/// Optical depth below which a cell's functions come from their series.
const SERIES_BELOW: f32 = 0.3;

/// e^-t of t >= 0, within 3e-7: 2^n times Taylor's polynomial of 2^f, abs(f) <= 1/2.
#[inline(always)]
fn exp_minus(t: f32) -> f32 {
    /// 1.5 * 2^23: adding it rounds to an integer that then stands in the low mantissa bits.
    const ROUNDER: f32 = 12_582_912.0;
    const LN_2: f32 = std::f32::consts::LN_2;
    const TERMS: [f32; 7] = [
        LN_2 * LN_2 * LN_2 * LN_2 * LN_2 * LN_2 / 720.0,
        LN_2 * LN_2 * LN_2 * LN_2 * LN_2 / 120.0,
        LN_2 * LN_2 * LN_2 * LN_2 / 24.0,
        LN_2 * LN_2 * LN_2 / 6.0,
        LN_2 * LN_2 / 2.0,
        LN_2,
        1.0,
    ];
    let y = t.min(87.0) * -std::f32::consts::LOG2_E;
    let rounded = y + ROUNDER;
    let f = y - (rounded - ROUNDER);
    let mut power = TERMS[0];
    for term in &TERMS[1..] {
        power = power * f + term;
    }
    f32::from_bits(power.to_bits().wrapping_add(rounded.to_bits() << 23))
}

#[inline(always)]
fn add_gaussian(velocities: &[f32], centre: f32, inverse: f32, height: f32, row: &mut [f32]) {
    let row = &mut row[..velocities.len()];
    for (value, velocity) in row.iter_mut().zip(velocities) {
        let x = (velocity - centre) * inverse;
        *value += height * exp_minus(0.5 * x * x);
    }
}

/// Shares of the sources at both ends in what a cell emits, of a small optical depth t: g - e^-t and 1 - g,
/// g = (1 - e^-t)/t.
#[inline(always)]
fn shares(t: f32) -> [f32; 2] {
    let first = t * (0.5 - t * (1.0 / 3.0 - t * (0.125 - t * (1.0 / 30.0 - t * (1.0 / 144.0)))));
    let last =
        t * (0.5 - t * (1.0 / 6.0 - t * (1.0 / 24.0 - t * (1.0 / 120.0 - t * (1.0 / 720.0)))));
    [first, last]
}

/// Takes intensities through a cell whose source is linear in optical depth between its ends.
#[inline(always)]
fn pass(profile: &[f32], depth: f32, [enters, leaves]: [f32; 2], intensity: &mut [f32]) {
    let intensity = &mut intensity[..profile.len()];
    for (intensity, phi) in intensity.iter_mut().zip(profile) {
        let t = depth * phi;
        let e = exp_minus(t);
        let g = (1.0 - e) / t.max(0.5 * SERIES_BELOW);
        let [first, last] = shares(t);
        let small = t < SERIES_BELOW;
        let first = if small { first } else { g - e };
        let last = if small { last } else { 1.0 - g };
        *intensity = *intensity * e + enters * first + leaves * last;
    }
}

/// The same where no optical depth is large.
#[inline(always)]
fn pass_thin(profile: &[f32], depth: f32, [enters, leaves]: [f32; 2], intensity: &mut [f32]) {
    let intensity = &mut intensity[..profile.len()];
    for (intensity, phi) in intensity.iter_mut().zip(profile) {
        let t = depth * phi;
        let [first, last] = shares(t);
        // 1 - e^-t is the sum of both
        *intensity += enters * first + leaves * last - *intensity * (first + last);
    }
}

#[cfg(test)]
mod tests {
    use super::super::{Beam, Clump, Fineness, LineField, Shells, TwoLevel, emergent};
    use super::*;

    /// The same physics on shells: opacity and collisions follow the density.
    #[test]
    fn spectra_agree_with_those_of_two_levels_on_shells() {
        for (speed, slope, q, beam, depth, collisions) in [
            (0.5, 1.5, 0.0, 0.5, 10.0, 0.05),
            (1.2, 2.0, 0.0, 1.0, 30.0, 0.01),
            (-0.3, 1.2, 0.0, 0.3, 3.0, 0.5),
            (0.2, 1.7, 0.5, 0.7, 60.0, 0.02),
        ] {
            let clump = Clump {
                inner_radius_pc: 0.005,
                outer_radius_pc: 1.0,
                n_h2_cm3: 1e4,
                density_slope: slope,
                t_kin_k: 20.0,
                temperature_slope: 0.0,
                v_in_km_s: speed,
                velocity_slope: q,
                sigma_km_s: 1.0,
                abundance: 1e-9,
            };
            let shells = Shells::of_clump(&clump, 60).unwrap();
            let column = |from: f64| power_integral(from, 1.0, -slope);
            let velocity: Vec<f64> = (-20..=20).map(|i| 0.25 * f64::from(i)).collect();
            let reduced = ReducedClump {
                v_in_over_sigma: speed,
                velocity_slope: q,
                depth,
                opacity_slope: slope,
                opacity_response: 0.0,
                collision_ratio: collisions,
                collision_slope: slope,
                temperature_slope: 0.0,
                shared_trapping: 0.0,
            };
            let line = |ratio: f64| ReducedLine {
                opacity_ratio: ratio,
                beam_over_radius: beam,
                components: vec![Component::SINGLE],
            };
            let mut pair = ReducedPair::default();
            pair.trace(&reduced, [&line(1.0), &line(0.03)]);
            for (index, ratio) in [1.0, 0.03].into_iter().enumerate() {
                let two = TwoLevel {
                    frequency_ghz: 89.0,
                    radial_depth: ratio * depth * column(0.005) / column(DEPTH_FROM),
                    collision_ratio: collisions,
                };
                let field = LineField::two_level(&shells, &clump, &two).unwrap();
                let radiation = crate::model::RadiationTemperature::new(89.0);
                let unit = radiation.at(20.0) - radiation.background();
                let beam = Beam::Gaussian {
                    fwhm_pc: beam,
                    offset_pc: 0.0,
                };
                let exact = emergent(
                    &shells,
                    &field,
                    &[Component::SINGLE],
                    beam,
                    &velocity,
                    &Fineness::default(),
                )
                .unwrap();
                let peak = exact.iter().copied().fold(0.0, f64::max) / unit;
                let worst = velocity
                    .iter()
                    .zip(&exact)
                    .map(|(v, exact)| (pair.at(index, *v) - exact / unit).abs() / peak)
                    .fold(0.0, f64::max);
                assert!(worst < 0.03, "{speed} {slope} {q} line {index}: {worst}");
            }
        }
    }
}
