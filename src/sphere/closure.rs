//! Excitation without a molecule: two levels, collisions and photons that escape or stay.
//!
//! For lines whose collision rates nobody has, and for fits, where what a molecule and a chemistry
//! would fix is unknown anyway: an optical depth, how well collisions compete with escaping
//! photons, and the gas temperature describe a line. No iteration; what it is worth is in
//! docs/methods.md.

use super::clump::Clump;
use super::error::{SphereError, checked};
use super::excitation::LineField;
use super::power_integral;
use super::rays::Transfer;
use super::shells::Shells;
use crate::model::RadiationTemperature;
use crate::numeric::exponential::exp_in_place;

/// A line of two levels in a clump.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TwoLevel {
    /// Frequency, GHz.
    pub frequency_ghz: f64,
    /// Optical depth at the line's centre from the inner to the outer radius, as if nothing moved:
    /// above 0.
    pub radial_depth: f64,
    /// Collisional de-excitations over spontaneous emissions at the outer radius, stimulated
    /// emission taken out: above 0. Grows inward like the density.
    pub collision_ratio: f64,
}

/// Directions of the mean over a sphere: Gauss-Legendre cosines and weights.
const DIRECTIONS: [(f64, f64); 6] = [
    (-0.932_469_514_203_152, 0.085_662_246_189_585_2),
    (-0.661_209_386_466_264_5, 0.180_380_786_524_069_3),
    (-0.238_619_186_083_196_9, 0.233_956_967_286_345_5),
    (0.238_619_186_083_196_9, 0.233_956_967_286_345_5),
    (0.661_209_386_466_264_5, 0.180_380_786_524_069_3),
    (0.932_469_514_203_152, 0.085_662_246_189_585_2),
];

/// Offsets from the line's centre in dispersions, half of those of the mean over the profile.
const OFFSETS: usize = 8;
const OFFSET_STEP: f64 = 0.5;

impl LineField {
    /// A line of two levels in a clump of given kinematics, density and temperature.
    ///
    /// S(r) = (beta J(T_bg) + e J(T(r)))/(beta + e), e(r) = e_R (r/R)^-p,
    ///
    /// beta(r) the share of photons that leave the clump from r in their first flight: the mean over
    /// directions and the line profile of e^-tau, where gas on the way counts by how much of its
    /// line overlaps, exp(-(w - w_0)^2/(4 sigma^2)). Opacity is proportional to density.
    ///
    /// # Errors
    ///
    /// [`SphereError::Impossible`] for a depth or ratio that is not above 0.
    pub fn two_level(shells: &Shells, clump: &Clump, line: &TwoLevel) -> Result<Self, SphereError> {
        let depth = line.radial_depth;
        checked("radial_depth", depth, depth > 0.0, "more than 0")?;
        let ratio = line.collision_ratio;
        checked("collision_ratio", ratio, ratio > 0.0, "more than 0")?;
        let outer = clump.outer_radius_pc;
        let inner = clump.inner_radius_pc / outer;
        let column = clump.n_h2_cm3 * outer * power_integral(inner, 1.0, -clump.density_slope);
        // km/s per pc and H2 a cm^3
        let opacity = depth * std::f64::consts::TAU.sqrt() * clump.sigma_km_s / column;
        let radiation = RadiationTemperature::new(line.frequency_ghz);
        let edges = &shells.table.edge_pc;
        let emission: Vec<f64> = edges
            .iter()
            .map(|radius| {
                let escape = escape(shells, clump, depth / column, *radius);
                let collisions = ratio * (radius / outer).powf(-clump.density_slope);
                let gas = radiation.at(clump.temperature_k(*radius));
                let source =
                    (escape * radiation.background() + collisions * gas) / (escape + collisions);
                opacity * source
            })
            .collect();
        Ok(Self {
            frequency_ghz: line.frequency_ghz,
            edges: Transfer {
                opacity: vec![[opacity; 2]; shells.count()],
                emission: emission.windows(2).map(|pair| [pair[0], pair[1]]).collect(),
            },
            density_cm3: shells.table.n_h2_cm3.clone(),
        })
    }
}

/// Share of the photons emitted at a radius that leave in their first flight; `depth` is the optical
/// depth at the line's centre of one pc with one H2 a cm^3.
fn escape(shells: &Shells, clump: &Clump, depth: f64, radius_pc: f64) -> f64 {
    let mut flights = [0.0; DIRECTIONS.len() * OFFSETS];
    for ((cosine, _), flights) in DIRECTIONS.iter().zip(flights.chunks_mut(OFFSETS)) {
        let depth = depth * overlapping_column(shells, clump, radius_pc, *cosine);
        for (index, flight) in flights.iter_mut().enumerate() {
            *flight = -depth * profile(index);
        }
    }
    exp_in_place(&mut flights);
    let norm: f64 = (0..OFFSETS)
        .map(|index| share(index) * profile(index))
        .sum();
    DIRECTIONS
        .iter()
        .zip(flights.chunks(OFFSETS))
        .map(|((_, weight), flights)| {
            let mean: f64 = flights
                .iter()
                .enumerate()
                .map(|(index, flight)| share(index) * profile(index) * flight)
                .sum();
            weight * mean / norm
        })
        .sum()
}

/// The line profile at an offset, 1 at its centre.
fn profile(index: usize) -> f64 {
    let x = OFFSET_STEP * index as f64;
    (-0.5 * x * x).exp()
}

/// The centre stands once in a sum over both sides, all else twice.
fn share(index: usize) -> f64 {
    if index == 0 { 0.5 } else { 1.0 }
}

/// H2 per cm^3 times pc along a direction from a radius to the surface, each shell's by how much of
/// its line overlaps with that of the gas at the start.
fn overlapping_column(shells: &Shells, clump: &Clump, radius_pc: f64, cosine: f64) -> f64 {
    let edges = &shells.table.edge_pc;
    let impact = radius_pc * (1.0 - cosine * cosine).sqrt();
    let depth = |radius: f64| ((radius - impact) * (radius + impact)).max(0.0).sqrt();
    // z grows along the direction; inward motion is against it on the near side
    let speed = |z: f64| {
        let radius = z.hypot(impact).max(edges[0]);
        clump.inward_speed_km_s(radius) * z / radius
    };
    let start = radius_pc * cosine;
    let here = speed(start);
    let part = |shell: usize, from: f64, to: f64| {
        if to <= from {
            return 0.0;
        }
        let middle = 0.5 * (from + to);
        let z = (speed(middle) - here) / clump.sigma_km_s;
        let [relative, _] = shells.inside(shell, middle.hypot(impact));
        let density = shells.table.n_h2_cm3[shell] * relative;
        density * (to - from) * (-0.25 * z * z).exp()
    };
    (0..shells.count())
        .map(|shell| {
            let (low, high) = (depth(edges[shell]), depth(edges[shell + 1]));
            // both halves of the way through the shell, as far as they lie ahead
            part(shell, low.max(start), high.max(start))
                + part(shell, (-high).max(start), (-low).max(start))
        })
        .sum()
}
