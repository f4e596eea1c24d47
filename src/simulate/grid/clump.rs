//! A clump on the sky: density, excitation and motion at every place in it and in its two lobes.
//!
//! Offsets are arcsec: x east, y north, z away from us; speeds km/s, positive z receding. A position
//! angle is counted from north through east, a tilt from the plane of the sky.

use serde::{Deserialize, Serialize};

/// A spherical clump that falls in, rotates and drives an outflow, each as far as it is given.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct ClumpTruth {
    /// Radius R, arcsec; nothing is outside but the lobes.
    pub radius_arcsec: f64,
    /// Radius a of the flat core of density and excitation, arcsec.
    pub core_arcsec: f64,
    /// Slope p of the density, (1 + r^2/a^2)^(-p/2).
    pub density_slope: f64,
    /// Excitation temperature in the centre, K.
    pub t_centre_k: f64,
    /// Excitation temperature at the radius, K.
    pub t_edge_k: f64,
    /// Slope m with which excitation falls between them, (1 + r^2/a^2)^(-m/2).
    pub excitation_slope: f64,
    /// Optical depth of the thick line through the centre, in its peak and at rest.
    pub tau: f64,
    /// Optical depth of the thick line over that of the thin line, everywhere.
    pub isotope_ratio: f64,
    /// Systemic velocity, km/s.
    pub v_lsr_km_s: f64,
    /// Velocity dispersion, km/s.
    pub sigma_km_s: f64,
    /// Radial motion.
    pub infall: InfallTruth,
    /// Rotation.
    pub rotation: RotationTruth,
    /// Bipolar outflow.
    pub outflow: OutflowTruth,
}

/// Radial motion: speed ((R^2 + a^2)/(r^2 + a^2))^(q/2).
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct InfallTruth {
    /// Inward speed at the clump's radius, km/s; 0 for none, negative for expansion.
    pub speed_km_s: f64,
    /// Slope q: 0 for the same speed everywhere, 0.5 for free fall onto a point.
    pub slope: f64,
}

/// Rotation about an axis through the centre:
/// speed (d/R) ((R^2 + a^2)/(d^2 + a^2))^((1 - s)/2) at a distance d from the axis.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct RotationTruth {
    /// Speed at the equator, km/s; 0 for none.
    pub speed_km_s: f64,
    /// Slope s of the speed far from the core: 1 for a solid body, 0 for the same speed, -0.5 about a
    /// point mass.
    pub slope: f64,
    /// Position angle of the axis, deg. The side 90 deg further (east of a northward axis) approaches.
    pub axis_deg: f64,
    /// Tilt of the axis toward us, deg.
    pub tilt_deg: f64,
}

impl Default for RotationTruth {
    fn default() -> Self {
        Self {
            speed_km_s: 0.0,
            slope: 1.0,
            axis_deg: 0.0,
            tilt_deg: 0.0,
        }
    }
}

/// Two lobes on either side of the centre, Gaussian in density, each moving away from it.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct OutflowTruth {
    /// Speed along the axis, km/s; 0 for no outflow.
    pub speed_km_s: f64,
    /// Position angle of the approaching lobe, deg.
    pub angle_deg: f64,
    /// Tilt of the approaching lobe toward us, deg.
    pub tilt_deg: f64,
    /// Distance of each lobe's middle from the clump's centre, in space, arcsec.
    pub distance_arcsec: f64,
    /// Full width at half maximum of a lobe, arcsec.
    pub fwhm_arcsec: f64,
    /// Velocity dispersion in a lobe, km/s.
    pub sigma_km_s: f64,
    /// Optical depth of the thick line through the middle of a lobe.
    pub tau: f64,
    /// Excitation temperature of the lobes, K.
    pub t_ex_k: f64,
}

impl Default for OutflowTruth {
    fn default() -> Self {
        Self {
            speed_km_s: 0.0,
            angle_deg: 45.0,
            tilt_deg: 45.0,
            distance_arcsec: 35.0,
            fwhm_arcsec: 25.0,
            sigma_km_s: 0.8,
            tau: 0.5,
            t_ex_k: 15.0,
        }
    }
}

impl Default for ClumpTruth {
    fn default() -> Self {
        Self {
            radius_arcsec: 60.0,
            core_arcsec: 10.0,
            density_slope: 1.5,
            t_centre_k: 20.0,
            t_edge_k: 5.0,
            excitation_slope: 0.8,
            tau: 20.0,
            isotope_ratio: 60.0,
            v_lsr_km_s: 0.0,
            sigma_km_s: 0.5,
            infall: InfallTruth::default(),
            rotation: RotationTruth::default(),
            outflow: OutflowTruth::default(),
        }
    }
}

/// Gas at one place: what it adds to a line of sight.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Gas {
    /// Optical depth of the thick line in its peak, per arcsec.
    pub opacity: f64,
    /// Excitation temperature, K.
    pub t_ex_k: f64,
    /// Velocity along the line of sight, km/s from the systemic one.
    pub v_km_s: f64,
    /// Dispersion, km/s.
    pub sigma_km_s: f64,
}

/// A clump made ready: directions as vectors, opacity in the centre from the optical depth.
#[derive(Clone, Debug)]
pub(super) struct Clump {
    truth: ClumpTruth,
    central_opacity: f64,
    axis: [f64; 3],
    lobe: Option<Lobe>,
}

#[derive(Clone, Copy, Debug)]
struct Lobe {
    /// Middle of the approaching one, arcsec.
    middle: [f64; 3],
    /// Standard deviation of its density, arcsec.
    width: f64,
    /// Its velocity along the line of sight, km/s.
    v_km_s: f64,
    central_opacity: f64,
}

/// Cells a dispersion of a lobe, or a fraction of the distance from the centre, that keep the sum over
/// a line of sight within a thousandth of the peak (`tests/simulates_grids.rs`).
const CELLS_PER_LOBE_WIDTH: f64 = 2.0;
const CELL_PER_DISTANCE: f64 = 0.12;

/// Fewest cells on either side of the middle, where a line of sight passes the edge.
const FEWEST_CELLS: usize = 8;

/// Nearest distance to the centre, over the core's radius, at which cells become finer still.
const FINEST_PER_CORE: f64 = 0.05;

/// Dispersions of a lobe beyond which it is nothing.
const LOBE_REACH: f64 = 4.0;

impl Clump {
    pub fn new(truth: &ClumpTruth) -> Self {
        let (outflow, rotation) = (&truth.outflow, &truth.rotation);
        let lobe = (outflow.speed_km_s != 0.0).then(|| {
            let direction = direction(outflow.angle_deg, outflow.tilt_deg);
            let width = outflow.fwhm_arcsec / crate::constants::FWHM_PER_SIGMA;
            Lobe {
                middle: direction.map(|part| part * outflow.distance_arcsec),
                width,
                v_km_s: outflow.speed_km_s * direction[2],
                central_opacity: outflow.tau / (width * std::f64::consts::TAU.sqrt()),
            }
        });
        let mut clump = Self {
            truth: truth.clone(),
            central_opacity: 1.0,
            axis: direction(rotation.axis_deg, rotation.tilt_deg),
            lobe,
        };
        let radius = truth.radius_arcsec;
        let depth: f64 = clump
            .inner_cells(0.0, radius)
            .map(|(z, width)| clump.density(z.abs()) * width)
            .sum();
        clump.central_opacity = truth.tau / depth;
        clump
    }

    /// Distance from the centre on the sky beyond which nothing is, arcsec.
    pub fn reach_arcsec(&self) -> f64 {
        let lobe = self.lobe.map_or(0.0, |lobe| {
            lobe.middle[0].hypot(lobe.middle[1]) + LOBE_REACH * lobe.width
        });
        self.truth.radius_arcsec.max(lobe)
    }

    /// Middles and widths of the cells along a line of sight, from the rear to the front, arcsec.
    pub fn cells(&self, x: f64, y: f64) -> Vec<(f64, f64)> {
        let distance = x.hypot(y);
        let half_chord = (self.truth.radius_arcsec.powi(2) - distance * distance)
            .max(0.0)
            .sqrt();
        let mut cells = Vec::new();
        if half_chord > 0.0 {
            cells.extend(self.inner_cells(distance, half_chord));
        }
        if let Some(lobe) = &self.lobe {
            let beside = [1.0, -1.0].into_iter().any(|side| {
                (x - side * lobe.middle[0]).hypot(y - side * lobe.middle[1])
                    < LOBE_REACH * lobe.width
            });
            let end = lobe.middle[2].abs() + LOBE_REACH * lobe.width;
            if beside && end > half_chord {
                let parts = parts(end - half_chord, lobe.width / CELLS_PER_LOBE_WIDTH);
                let width = (end - half_chord) / parts as f64;
                for part in 0..parts {
                    let z = half_chord + width * (part as f64 + 0.5);
                    cells.extend([(z, width), (-z, width)]);
                }
            }
        }
        cells.sort_by(|a, b| b.0.total_cmp(&a.0));
        cells
    }

    /// Cells within the clump: narrow near the centre, ever wider outward, the same on both sides.
    fn inner_cells(&self, distance: f64, half_chord: f64) -> impl Iterator<Item = (f64, f64)> {
        let scale = distance.max(FINEST_PER_CORE * self.truth.core_arcsec);
        let end = (half_chord / scale).asinh();
        let speed = self.truth.infall.speed_km_s.abs() + self.truth.rotation.speed_km_s.abs();
        let mut step = CELL_PER_DISTANCE / (0.5 * speed / self.truth.sigma_km_s).max(1.0);
        if let Some(lobe) = &self.lobe {
            let far = lobe.middle[2].abs() + lobe.width;
            step = step.min(lobe.width / CELLS_PER_LOBE_WIDTH / far);
        }
        let half = parts(end, step).max(FEWEST_CELLS);
        let edge = move |index: usize| scale * (end * (index as f64 / half as f64 - 1.0)).sinh();
        (0..2 * half).map(move |index| {
            let (low, high) = (edge(index), edge(index + 1));
            (-0.5 * (low + high), high - low)
        })
    }

    /// Density over that in the centre.
    fn density(&self, r: f64) -> f64 {
        self.fall(r, self.truth.density_slope)
    }

    fn fall(&self, r: f64, slope: f64) -> f64 {
        (1.0 + (r / self.truth.core_arcsec).powi(2)).powf(-0.5 * slope)
    }

    fn t_ex_k(&self, r: f64) -> f64 {
        let truth = &self.truth;
        let edge = self.fall(truth.radius_arcsec, truth.excitation_slope);
        let share = (self.fall(r, truth.excitation_slope) - edge) / (1.0 - edge);
        truth.t_edge_k + (truth.t_centre_k - truth.t_edge_k) * share
    }

    /// (R^2 + a^2)/(r^2 + a^2).
    fn softened(&self, r: f64) -> f64 {
        let (radius, core) = (self.truth.radius_arcsec, self.truth.core_arcsec);
        (radius * radius + core * core) / (r * r + core * core)
    }

    /// Velocity along the line of sight of the clump's gas, km/s.
    fn v_km_s(&self, [x, y, z]: [f64; 3], r: f64) -> f64 {
        let (infall, rotation) = (&self.truth.infall, &self.truth.rotation);
        let mut v_km_s = 0.0;
        if infall.speed_km_s != 0.0 && r > 0.0 {
            v_km_s -= infall.speed_km_s * self.softened(r).powf(0.5 * infall.slope) * z / r;
        }
        if rotation.speed_km_s != 0.0 {
            let along = self.axis[0] * x + self.axis[1] * y + self.axis[2] * z;
            let from_axis = (r * r - along * along).max(0.0).sqrt();
            let turn = rotation.speed_km_s / self.truth.radius_arcsec
                * self.softened(from_axis).powf(0.5 * (1.0 - rotation.slope));
            v_km_s += turn * (self.axis[0] * y - self.axis[1] * x);
        }
        v_km_s
    }

    /// Inward speed at a distance from the centre, km/s.
    pub fn inward_km_s(&self, r: f64) -> f64 {
        let infall = &self.truth.infall;
        infall.speed_km_s * self.softened(r).powf(0.5 * infall.slope)
    }

    /// All gas at a place.
    pub fn gas(&self, place: [f64; 3], found: &mut Vec<Gas>) {
        found.clear();
        let [x, y, z] = place;
        let r = (x * x + y * y + z * z).sqrt();
        if r <= self.truth.radius_arcsec {
            found.push(Gas {
                opacity: self.central_opacity * self.density(r),
                t_ex_k: self.t_ex_k(r),
                v_km_s: self.v_km_s(place, r),
                sigma_km_s: self.truth.sigma_km_s,
            });
        }
        let Some(lobe) = &self.lobe else { return };
        for side in [1.0, -1.0] {
            let square: f64 = (0..3)
                .map(|axis| (place[axis] - side * lobe.middle[axis]).powi(2))
                .sum();
            if square < (LOBE_REACH * lobe.width).powi(2) {
                found.push(Gas {
                    opacity: lobe.central_opacity * (-0.5 * square / lobe.width.powi(2)).exp(),
                    t_ex_k: self.truth.outflow.t_ex_k,
                    v_km_s: side * lobe.v_km_s,
                    sigma_km_s: self.truth.outflow.sigma_km_s,
                });
            }
        }
    }
}

/// Unit vector of a position angle and a tilt toward us, deg.
fn direction(angle_deg: f64, tilt_deg: f64) -> [f64; 3] {
    let (sin, cos) = angle_deg.to_radians().sin_cos();
    let (up, along) = tilt_deg.to_radians().sin_cos();
    [along * sin, along * cos, -up]
}

/// Most parts that a line of sight is divided into on either side of the centre.
const MOST_PARTS: f64 = 2000.0;

/// Number of parts, at least 1, of which none is wider than `widest`.
#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "a whole number between 1 and MOST_PARTS"
)]
fn parts(whole: f64, widest: f64) -> usize {
    (whole / widest).ceil().clamp(1.0, MOST_PARTS) as usize
}
