//! Parallel rays through the shells, and the transfer equation along them.
//!
//! A sphere looks the same from everywhere, so the rays of one direction serve all: averaged over
//! a shell's volume they give its mean intensity, and at their ends the spectrum.
//!
//! Along the passage of a ray through a shell tau(u) = alpha C(u), with
//! C(u) = integral of n/n_mean phi(u - w) ds, w the line-of-sight speed of the gas, and alpha the
//! mean of the shell's edges; the source is linear in tau. C does not depend on the excitation: it
//! is tabulated once, with the passage divided so that w changes by little in each part, and used for
//! every transition and iteration.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::parts_needed;
use super::shells::Shells;
use crate::line::Component;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::numeric::exponential::exp_negative;

/// Velocities that one step of a kernel treats.
pub(super) const LANES: usize = 8;

/// Gauss's two points and their weights on 0 to 1.
const GAUSS: [(f64, f64); 2] = [
    (0.211_324_865_405_187_1, 0.5),
    (0.788_675_134_594_812_9, 0.5),
];

/// Abscissae and weights of Gauss's rules for the integral of 2 y f(y) from 0 to 1, by number of
/// points less one (scipy 1.17, `roots_jacobi`).
const RADIAL: [&[(f64, f64)]; 4] = [
    &[(0.666_666_666_666_666_6, 1.0)],
    &[
        (0.355_051_025_721_682_1, 0.363_917_236_512_045_7),
        (0.844_948_974_278_317_8, 0.636_082_763_487_954_3),
    ],
    &[
        (0.212_340_538_239_153, 0.139_653_959_802_908_3),
        (0.590_533_135_559_265_3, 0.458_482_212_719_172_6),
        (0.911_412_040_487_296_1, 0.401_863_827_477_919_1),
    ],
    &[
        (0.139_759_864_343_780_6, 0.062_361_941_900_016_1),
        (0.416_409_567_631_083_2, 0.259_695_095_216_464_9),
        (0.723_156_986_361_876_2, 0.406_929_136_020_542_9),
        (0.942_895_803_885_482_3, 0.271_013_826_862_976),
    ],
];

/// A ray at a distance from the centre, with its share of a sum over rays.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Ray {
    pub(super) impact_pc: f64,
    pub(super) weight: f64,
}

/// Rays in the annulus between two impact parameters, `points` of them; weights sum to the
/// difference of the squares.
///
/// Paths through a shell end like the square root of the distance from its edge; with
/// p^2 = b^2 - (b^2 - a^2) y^2 they are smooth in y.
pub(super) fn annulus(a: f64, b: f64, points: usize) -> impl Iterator<Item = Ray> {
    let area = b * b - a * a;
    RADIAL[points.clamp(1, RADIAL.len()) - 1]
        .iter()
        .map(move |(y, weight)| Ray {
            impact_pc: (b * b - area * y * y).max(0.0).sqrt(),
            weight: weight * area,
        })
}

/// A shell on the way of a ray, or a part of it; radii only grow or only fall on the way.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Passage {
    shell: usize,
    /// Where the ray enters and leaves: 0 at the shell's inner edge, 1 at its outer.
    enters: f64,
    leaves: f64,
    /// Distances from the point nearest to the centre, pc.
    near_pc: f64,
    far_pc: f64,
}

/// Into what a ray is divided.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Division {
    /// Largest change of w in a passage, in dispersions; passages end at edges anyway.
    pub(super) passage: f64,
    /// Largest change of w in a part of a passage, over which the profile is integrated.
    pub(super) part: f64,
}

/// Rays through shells, and C(u) of each of their passages.
#[derive(Clone, Debug)]
pub(super) struct RayTable {
    velocities: usize,
    rays: Vec<(Ray, usize)>,
    passages: Vec<Passage>,
    paths: Vec<f64>,
    /// Sum of C over velocities and rays, weights included, in each shell.
    norms: Vec<f64>,
}

/// Emission and opacity of one molecule a cm^3 in one transition: in each shell, at its inner and its
/// outer edge.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct Transfer {
    /// Opacity integrated over velocity, km/s per pc.
    pub(super) opacity: Vec<[f64; 2]>,
    /// Emission integrated over velocity, K km/s per pc.
    pub(super) emission: Vec<[f64; 2]>,
}

impl Transfer {
    pub(super) fn clear(&mut self) {
        self.opacity.clear();
        self.emission.clear();
    }
}

/// Means over shells, weighted with their molecules and the line profile.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct MeanIntensity {
    /// Intensity, K.
    pub(super) intensity_k: Vec<f64>,
    /// Share of the photons of a passage of a ray through a shell that leave it there.
    pub(super) escape: Vec<f64>,
}

impl MeanIntensity {
    /// Of shells that neither absorb nor emit.
    pub(super) fn transparent(&mut self, shells: usize, background_k: f64) {
        for (column, value) in [
            (&mut self.intensity_k, background_k),
            (&mut self.escape, 1.0),
        ] {
            column.clear();
            column.resize(shells, value);
        }
    }
}

/// What a passage absorbs and emits for each unit of C.
struct PassageTransfer {
    opacity: f64,
    enters: f64,
    leaves: f64,
}

impl Passage {
    /// Values at its ends, between those at the edges of its shell.
    #[inline(always)]
    fn transfer(&self, edges: &Transfer, density: &[f64]) -> PassageTransfer {
        let between = |column: &[[f64; 2]], fraction: f64| {
            let [inner, outer] = column[self.shell];
            density[self.shell] * (inner + fraction * (outer - inner))
        };
        PassageTransfer {
            opacity: 0.5
                * (between(&edges.opacity, self.enters) + between(&edges.opacity, self.leaves)),
            enters: between(&edges.emission, self.enters),
            leaves: between(&edges.emission, self.leaves),
        }
    }
}

impl RayTable {
    /// Rays through shells at velocities (km/s, a multiple of [`LANES`]).
    pub(super) fn new(
        shells: &Shells,
        rays: &[Ray],
        velocity_km_s: &[f64],
        components: &[Component],
        division: Division,
    ) -> Self {
        assert_eq!(velocity_km_s.len() % LANES, 0, "whole lanes");
        let mut table = Self {
            velocities: velocity_km_s.len(),
            rays: Vec::new(),
            passages: Vec::new(),
            paths: Vec::new(),
            norms: vec![0.0; shells.count()],
        };
        let mut outward = Vec::new();
        let mut parts = Vec::new();
        for ray in rays {
            outward.clear();
            pass_outward(shells, ray.impact_pc, division.passage, &mut outward);
            // the far side mirrors the near one: it comes toward us during infall
            let halves = outward.len();
            let first = table.passages.len();
            table
                .passages
                .extend(outward.iter().rev().map(|near| Passage {
                    enters: near.leaves,
                    leaves: near.enters,
                    ..*near
                }));
            table.passages.extend_from_slice(&outward);
            let row = |index: usize| index * table.velocities..(index + 1) * table.velocities;
            table.paths.resize(row(first + 2 * halves).start, 0.0);
            for (index, passage) in outward.iter().enumerate() {
                divide(shells, passage, ray.impact_pc, division.part, &mut parts);
                let rows = [row(first + halves + index), row(first + halves - 1 - index)];
                for (side, row) in [1.0, -1.0].into_iter().zip(rows) {
                    dispatch(Paths {
                        parts: &parts,
                        side,
                        components,
                        sigma_km_s: shells.table.sigma_km_s[passage.shell],
                        velocity_km_s,
                        row: &mut table.paths[row],
                    });
                }
            }
            for (index, passage) in table.passages.iter().enumerate().skip(first) {
                let sum = table.paths[row(index)].iter().sum::<f64>();
                table.norms[passage.shell] += ray.weight * sum;
            }
            table.rays.push((*ray, 2 * outward.len()));
        }
        table
    }

    /// Where the middle of each shell lies between its edges: the mean of [`Passage::enters`] and
    /// [`Passage::leaves`] over its molecules.
    pub(super) fn middles(&self) -> Vec<f64> {
        let mut sums = vec![0.0; self.norms.len()];
        let mut passages = self.passages.iter().zip(self.paths.chunks(self.velocities));
        for (ray, count) in &self.rays {
            for (passage, row) in passages.by_ref().take(*count) {
                let weight = ray.weight * row.iter().sum::<f64>();
                sums[passage.shell] += weight * 0.5 * (passage.enters + passage.leaves);
            }
        }
        sums.iter()
            .zip(&self.norms)
            .map(|(sum, norm)| sum / norm)
            .collect()
    }

    /// Mean intensity in each shell of radiation that enters with `background_k`; molecules a
    /// cm^3 in each shell are `density`.
    pub(super) fn mean_intensity(
        &self,
        edges: &Transfer,
        density: &[f64],
        background_k: f64,
        result: &mut MeanIntensity,
    ) {
        result.intensity_k.clear();
        result.intensity_k.resize(density.len(), 0.0);
        result.escape.clear();
        result.escape.resize(density.len(), 0.0);
        dispatch(Mean {
            table: self,
            edges,
            density,
            background_k,
            space: &mut vec![0.0; 3 * self.velocities],
            result,
        });
    }

    /// Intensity above the background of the rays, each times its weight, summed: K.
    pub(super) fn emergent(
        &self,
        edges: &Transfer,
        density: &[f64],
        background_k: f64,
    ) -> Vec<f64> {
        let mut spectrum = vec![0.0; self.velocities];
        dispatch(Emergent {
            table: self,
            edges,
            density,
            background_k,
            intensity: &mut vec![background_k; self.velocities],
            spectrum: &mut spectrum,
        });
        spectrum
    }
}

/// Where the logarithm of a radius lies between those of a shell's edges.
fn fraction(edges: &[f64], shell: usize, radius: f64) -> f64 {
    ((radius / edges[shell]).ln() / (edges[shell + 1] / edges[shell]).ln()).clamp(0.0, 1.0)
}

/// A part of a passage: length times relative density, pc, and line-of-sight speed on the near side,
/// km/s.
struct Part {
    path_pc: f64,
    speed_km_s: f64,
}

/// How much the line-of-sight speed changes on the way between two distances from the point of a
/// ray nearest to the centre, km/s.
fn speed_change(shells: &Shells, shell: usize, impact_pc: f64, from: f64, to: f64) -> f64 {
    const PROBES: usize = 4;
    let speeds: [f64; PROBES + 1] = std::array::from_fn(|index| {
        let z = from + (to - from) * index as f64 / PROBES as f64;
        shells.inside(shell, z.hypot(impact_pc))[1] * z
    });
    speeds
        .windows(2)
        .map(|pair| (pair[1] - pair[0]).abs())
        .sum()
}

/// Passages of the near half of a ray, from the centre outward.
fn pass_outward(shells: &Shells, impact_pc: f64, widest: f64, passages: &mut Vec<Passage>) {
    let edges = &shells.table.edge_pc;
    let p = impact_pc;
    let depth = |radius: f64| ((radius - p) * (radius + p)).max(0.0).sqrt();
    for shell in edges[1..].partition_point(|edge| *edge <= p)..shells.count() {
        let (low, high) = (depth(p.max(edges[shell])), depth(edges[shell + 1]));
        let change = speed_change(shells, shell, p, low, high);
        let count = parts_needed(change, widest * shells.table.sigma_km_s[shell]);
        let width = (high - low) / count as f64;
        for index in 0..count {
            let near_pc = low + width * index as f64;
            let far_pc = near_pc + width;
            passages.push(Passage {
                shell,
                enters: fraction(edges, shell, near_pc.hypot(p)),
                leaves: fraction(edges, shell, far_pc.hypot(p)),
                near_pc,
                far_pc,
            });
        }
    }
}

/// Divides a passage of the near side into parts in each of which the line-of-sight speed changes by at most
/// `widest` dispersions, and each of those into two Gauss points.
fn divide(shells: &Shells, passage: &Passage, impact_pc: f64, widest: f64, parts: &mut Vec<Part>) {
    let Passage {
        shell,
        near_pc,
        far_pc,
        ..
    } = *passage;
    parts.clear();
    let change = speed_change(shells, shell, impact_pc, near_pc, far_pc);
    let count = parts_needed(change, widest * shells.table.sigma_km_s[shell]);
    let length = (far_pc - near_pc) / count as f64;
    for part in 0..count {
        for (x, weight) in GAUSS {
            let z = near_pc + length * (part as f64 + x);
            let [density, speed_per_pc] = shells.inside(shell, z.hypot(impact_pc));
            parts.push(Part {
                path_pc: weight * length * density,
                speed_km_s: speed_per_pc * z,
            });
        }
    }
}

struct Paths<'a> {
    parts: &'a [Part],
    side: f64,
    components: &'a [Component],
    sigma_km_s: f64,
    velocity_km_s: &'a [f64],
    row: &'a mut [f64],
}

impl Kernel for Paths<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let inverse = 1.0 / self.sigma_km_s;
        let norm = inverse / std::f64::consts::TAU.sqrt();
        for part in self.parts {
            for component in self.components {
                let centre = self.side * part.speed_km_s + component.offset_km_s;
                let height = norm * part.path_pc * component.weight;
                add_profile::<A>(self.velocity_km_s, centre, inverse, height, self.row);
            }
        }
    }
}

/// Adds a Gaussian of a height to a row. A loop over slices without a sum: that is what the compiler
/// makes vectors of.
#[inline(always)]
fn add_profile<A: Arithmetic>(
    velocity_km_s: &[f64],
    centre_km_s: f64,
    inverse_sigma: f64,
    height: f64,
    row: &mut [f64],
) {
    let row = &mut row[..velocity_km_s.len()];
    for (value, velocity) in row.iter_mut().zip(velocity_km_s) {
        let x = (velocity - centre_km_s) * inverse_sigma;
        *value = A::mul_add(height, exp_negative::<A>(0.5 * x * x), *value);
    }
}

/// Below, the functions of a passage come from their series.
const SERIES_BELOW: f64 = 0.1;

/// Coefficients of `(1/2 - h)/t`, h as of [`passage`]: (-1)^k/(k + 3)!.
const SERIES: [f64; 7] = [
    1.0 / 362_880.0,
    -1.0 / 40_320.0,
    1.0 / 5040.0,
    -1.0 / 720.0,
    1.0 / 120.0,
    -1.0 / 24.0,
    1.0 / 6.0,
];

/// e^-t and, from it, g = (1 - e^-t)/t, h = (1 - g)/t and k = (1/2 - h)/t, which are 1, 1/2 and
/// 1/6 at t = 0; t may be negative (inverted populations).
///
/// A source that is linear in optical depth from S_a, where the ray enters, to S_b makes
/// t (S_a (g - h) + S_b h) where it leaves, and t (S_a (h - k) + S_b k) in the mean over the
/// passage, to which what enters adds g times itself.
#[inline(always)]
fn passage<A: Arithmetic>(t: f64) -> [f64; 4] {
    let e = exp_negative::<A>(t);
    let mut series = SERIES[0];
    for coefficient in &SERIES[1..] {
        series = A::mul_add(series, t, *coefficient);
    }
    let inverse = 1.0 / t;
    let direct_h = (1.0 - (1.0 - e) * inverse) * inverse;
    let direct_k = (0.5 - direct_h) * inverse;
    let k = if t.abs() < SERIES_BELOW {
        series
    } else {
        direct_k
    };
    let h = A::mul_add(-t, k, 0.5);
    let g = A::mul_add(-t, h, 1.0);
    [e, g, h, k]
}

impl PassageTransfer {
    /// Takes the intensities of a ray through a passage of given C, without the mean.
    #[inline(always)]
    fn pass<A: Arithmetic>(&self, paths: &[f64], intensity: &mut [f64]) {
        let intensity = &mut intensity[..paths.len()];
        for (intensity, c) in intensity.iter_mut().zip(paths) {
            let [e, g, h, _] = passage::<A>(self.opacity * c);
            let made = A::mul_add(self.leaves, h, self.enters * (g - h)) * c;
            *intensity = A::mul_add(*intensity, e, made);
        }
    }

    /// The same, with C times g and C times the mean over the passage.
    #[inline(always)]
    fn pass_with_mean<A: Arithmetic>(
        &self,
        paths: &[f64],
        intensity: &mut [f64],
        escape: &mut [f64],
        mean: &mut [f64],
    ) {
        let velocities = paths.len();
        let (intensity, escape) = (&mut intensity[..velocities], &mut escape[..velocities]);
        let mean = &mut mean[..velocities];
        for i in 0..velocities {
            let c = paths[i];
            let [e, g, h, k] = passage::<A>(self.opacity * c);
            let own = A::mul_add(self.leaves, k, self.enters * (h - k)) * c;
            escape[i] = c * g;
            mean[i] = c * A::mul_add(intensity[i], g, own);
            let made = A::mul_add(self.leaves, h, self.enters * (g - h)) * c;
            intensity[i] = A::mul_add(intensity[i], e, made);
        }
    }
}

/// Sum of a slice of whole lanes, in lanes.
#[inline(always)]
fn sum_of_lanes(values: &[f64]) -> f64 {
    let (chunks, _) = values.as_chunks::<LANES>();
    let mut sums = [0.0; LANES];
    for chunk in chunks {
        for lane in 0..LANES {
            sums[lane] += chunk[lane];
        }
    }
    let s = sums;
    ((s[0] + s[4]) + (s[1] + s[5])) + ((s[2] + s[6]) + (s[3] + s[7]))
}

struct Mean<'a> {
    table: &'a RayTable,
    edges: &'a Transfer,
    density: &'a [f64],
    background_k: f64,
    /// Space for a number a velocity, three times.
    space: &'a mut [f64],
    result: &'a mut MeanIntensity,
}

impl Kernel for Mean<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let velocities = self.table.velocities;
        let (intensity, rest) = self.space.split_at_mut(velocities);
        let (escape, mean) = rest.split_at_mut(velocities);
        let mut passages = self.table.passages.iter();
        let mut rows = self.table.paths.chunks_exact(velocities);
        for (ray, count) in &self.table.rays {
            intensity.fill(self.background_k);
            for (one, row) in passages.by_ref().zip(rows.by_ref()).take(*count) {
                one.transfer(self.edges, self.density)
                    .pass_with_mean::<A>(row, intensity, escape, mean);
                self.result.escape[one.shell] += ray.weight * sum_of_lanes(escape);
                self.result.intensity_k[one.shell] += ray.weight * sum_of_lanes(mean);
            }
        }
        for (shell, norm) in self.table.norms.iter().enumerate() {
            self.result.escape[shell] /= norm;
            self.result.intensity_k[shell] /= norm;
        }
    }
}

struct Emergent<'a> {
    table: &'a RayTable,
    edges: &'a Transfer,
    density: &'a [f64],
    background_k: f64,
    intensity: &'a mut [f64],
    spectrum: &'a mut [f64],
}

impl Kernel for Emergent<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let mut passages = self.table.passages.iter();
        let mut rows = self.table.paths.chunks_exact(self.table.velocities);
        for (ray, count) in &self.table.rays {
            self.intensity.fill(self.background_k);
            for (one, row) in passages.by_ref().zip(rows.by_ref()).take(*count) {
                one.transfer(self.edges, self.density)
                    .pass::<A>(row, self.intensity);
            }
            for (sum, intensity) in self.spectrum.iter_mut().zip(&*self.intensity) {
                *sum = A::mul_add(ray.weight, intensity - self.background_k, *sum);
            }
        }
    }
}
