//! Transfer along one line of sight: cells of gas into the brightness that leaves them.

use super::clump::{Clump, Gas};
use crate::line::{Component, Line};
use crate::model::RadiationTemperature;
use crate::numeric::exponential::exp_in_place;

/// Dispersions from its centre beyond which a line is nothing: e^-18 of its peak.
const LINE_REACH: f64 = 6.0;

/// One line as a line of sight needs it.
#[derive(Clone, Debug)]
pub(super) struct RayLine {
    radiation: RadiationTemperature,
    components: Vec<Component>,
    /// Its optical depth over that of the thick line.
    opacity: f64,
}

impl RayLine {
    pub fn new(line: &Line, opacity: f64) -> Self {
        Self {
            radiation: RadiationTemperature::new(line.rest_frequency_ghz),
            components: line.components.clone(),
            opacity,
        }
    }

    /// Brightness above the background at velocities (ascending, km/s) of the line of sight at (x, y),
    /// K:
    /// from the rear to the front, each cell absorbs what is behind it and adds its own,
    /// T -> T e^-tau + (J(T_ex) - J(T_bg)) (1 - e^-tau), the mean over gases weighted by their depth.
    pub fn brightness(
        &self,
        clump: &Clump,
        v_lsr_km_s: f64,
        velocity_km_s: &[f64],
        [x, y]: [f64; 2],
        buffers: &mut Buffers,
    ) -> Vec<f64> {
        let mut brightness_k = vec![0.0; velocity_km_s.len()];
        let Buffers {
            gas,
            depth,
            source,
            profile,
        } = buffers;
        for buffer in [&mut *depth, &mut *source] {
            buffer.clear();
            buffer.resize(velocity_km_s.len(), 0.0);
        }
        for (z, width) in clump.cells(x, y) {
            clump.gas([x, y, z], gas);
            let (mut first, mut last) = (velocity_km_s.len(), 0);
            for one in gas.iter() {
                let excess_k = self.radiation.at(one.t_ex_k) - self.radiation.background();
                for component in &self.components {
                    let centre = v_lsr_km_s + one.v_km_s + component.offset_km_s;
                    let reach = LINE_REACH * one.sigma_km_s;
                    let start = velocity_km_s.partition_point(|v| *v < centre - reach);
                    let end = velocity_km_s.partition_point(|v| *v <= centre + reach);
                    if start >= end {
                        continue;
                    }
                    (first, last) = (first.min(start), last.max(end));
                    profile.clear();
                    profile.extend(velocity_km_s[start..end].iter().map(|v| {
                        let scaled = (v - centre) / one.sigma_km_s;
                        -0.5 * scaled * scaled
                    }));
                    exp_in_place(profile);
                    let peak = self.opacity * one.opacity * width * component.weight;
                    for (index, value) in profile.iter().enumerate() {
                        depth[start + index] += peak * value;
                        source[start + index] += peak * value * excess_k;
                    }
                }
            }
            if first >= last {
                continue;
            }
            profile.clear();
            profile.extend(depth[first..last].iter().map(|tau| -tau));
            exp_in_place(profile);
            for (index, passed) in profile.iter().enumerate() {
                let (tau, emitted) = (&mut depth[first + index], &mut source[first + index]);
                let value = &mut brightness_k[first + index];
                if *tau > 0.0 {
                    *value = *value * passed + *emitted / *tau * (1.0 - passed);
                }
                (*tau, *emitted) = (0.0, 0.0);
            }
        }
        brightness_k
    }
}

/// Memory that lines of sight share.
#[derive(Debug, Default)]
pub(super) struct Buffers {
    gas: Vec<Gas>,
    depth: Vec<f64>,
    source: Vec<f64>,
    profile: Vec<f64>,
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::line::find;
    use crate::simulate::grid::ClumpTruth;

    /// The same sum in 20 000 equal cells, for every motion together and lines of sight through
    /// centre, core, edge and lobes.
    #[test]
    fn cells_are_narrow_enough() {
        /// Of the peak: a fiftieth of the noise at a signal-to-noise ratio of 20.
        const TOLERANCE: f64 = 1e-3;
        let mut truth = ClumpTruth::default();
        truth.infall.speed_km_s = 0.6;
        truth.infall.slope = 0.5;
        truth.rotation.speed_km_s = 0.5;
        truth.rotation.slope = -0.5;
        truth.rotation.axis_deg = 20.0;
        truth.outflow.speed_km_s = 2.0;
        let clump = Clump::new(&truth);
        let line = RayLine::new(&find("HCO+ 1-0").unwrap(), 1.0);
        let velocity: Vec<f64> = (-50..=50).map(|step| 0.1 * f64::from(step)).collect();
        let mut buffers = Buffers::default();
        for place in [
            [0.0, 0.0],
            [0.3, -0.2],
            [5.0, 8.0],
            [18.0, 17.0],
            [-30.0, 10.0],
            [-33.0, -31.0],
            [58.0, 0.0],
        ] {
            let found = line.brightness(&clump, 0.0, &velocity, place, &mut buffers);
            let expected = in_equal_cells(&clump, &line, &velocity, place);
            let peak = expected.iter().copied().fold(0.0, f64::max);
            for (channel, (found, expected)) in found.iter().zip(&expected).enumerate() {
                assert!(
                    (found - expected).abs() < TOLERANCE * peak,
                    "{place:?}, channel {channel}: {found}, expected {expected}"
                );
            }
        }
    }

    fn in_equal_cells(
        clump: &Clump,
        line: &RayLine,
        velocity: &[f64],
        [x, y]: [f64; 2],
    ) -> Vec<f64> {
        const CELLS: u32 = 20_000;
        const END_ARCSEC: f64 = 80.0;
        let width = 2.0 * END_ARCSEC / f64::from(CELLS);
        let mut gas = Vec::new();
        let mut brightness = vec![0.0; velocity.len()];
        for cell in 0..CELLS {
            let z = END_ARCSEC - width * (f64::from(cell) + 0.5);
            clump.gas([x, y, z], &mut gas);
            for (value, v) in brightness.iter_mut().zip(velocity) {
                let depths = gas.iter().map(|one| {
                    let scaled = (v - one.v_km_s) / one.sigma_km_s;
                    let depth = one.opacity * width * (-0.5 * scaled * scaled).exp();
                    (
                        depth,
                        line.radiation.at(one.t_ex_k) - line.radiation.background(),
                    )
                });
                let (depth, source) = depths.fold((0.0, 0.0), |sum, (depth, excess)| {
                    (sum.0 + depth, sum.1 + depth * excess)
                });
                if depth > 0.0 {
                    *value = *value * (-depth).exp() - source / depth * (-depth).exp_m1();
                }
            }
        }
        brightness
    }
}
