//! What a map is made from.

use super::ClumpTruth;
use crate::line::Line;
use crate::simulate::{Axis, Correlation, NoiseLevel, SimulateError};
use serde::{Deserialize, Serialize};

/// Everything that a simulated map follows from.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct GridTruth {
    /// Seed of noise and of what is bad, at most 2^63 - 1.
    pub seed: u64,
    /// Pointings in a row, from west to east.
    pub columns: usize,
    /// Rows, from south to north.
    pub rows: usize,
    /// Distance of neighbouring pointings, arcsec.
    pub spacing_arcsec: f64,
    /// Full width at half maximum of the beam, major and minor axis, arcsec.
    pub beam_arcsec: [f64; 2],
    /// Position angle of the beam's major axis, deg from north through east.
    pub beam_angle_deg: f64,
    /// Right ascension of the map's centre, deg (ICRS).
    pub ra_deg: f64,
    /// Declination of the map's centre, deg.
    pub dec_deg: f64,
    /// Offset of the clump's centre from the map's, east and north, arcsec.
    pub centre_arcsec: [f64; 2],
    /// Noise in the middle of the map, thick line; a ratio is that of the map's brightest channel.
    pub noise: NoiseLevel,
    /// The same of the thin line.
    pub noise_thin: NoiseLevel,
    /// Noise in the corners over that in the middle; in between it grows with the square of the distance.
    pub noise_edge_ratio: f64,
    /// Correlation of the noise from channel to channel.
    pub correlation: Correlation,
    /// Full width of the kernel that smooths the noise from pointing to pointing, arcsec; 0 for
    /// independent pointings. At a distance d the correlation is 2^(-2 d^2/width^2).
    pub noise_fwhm_arcsec: f64,
    /// Pointings that are spoilt: blank and rippled in turn.
    pub bad_pointings: usize,
    /// Width of a channel, km/s.
    pub channel_km_s: f64,
    /// First and last channel, km/s; far enough about the lines where absent.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub range_km_s: Option<[f64; 2]>,
    /// The clump.
    pub clump: ClumpTruth,
}

impl Default for GridTruth {
    fn default() -> Self {
        Self {
            seed: 1,
            columns: 9,
            rows: 9,
            spacing_arcsec: 10.0,
            beam_arcsec: [20.0, 20.0],
            beam_angle_deg: 0.0,
            ra_deg: 120.0,
            dec_deg: -30.0,
            centre_arcsec: [0.0, 0.0],
            noise: NoiseLevel::SignalToNoise(40.0),
            noise_thin: NoiseLevel::SignalToNoise(20.0),
            noise_edge_ratio: 1.0,
            correlation: Correlation::White,
            noise_fwhm_arcsec: 0.0,
            bad_pointings: 0,
            channel_km_s: 0.1,
            range_km_s: None,
            clump: ClumpTruth::default(),
        }
    }
}

/// Band beyond the fastest gas on either side, in dispersions.
const BAND_SIGMAS: f64 = 12.0;

impl GridTruth {
    /// Offsets of the pointings to the east and north, arcsec: row by row from the south, each from west
    /// to east.
    #[must_use]
    pub fn positions(&self) -> Vec<[f64; 2]> {
        let offset = |index: usize, count: usize| {
            self.spacing_arcsec * (index as f64 - 0.5 * (count as f64 - 1.0))
        };
        (0..self.rows)
            .flat_map(|row| (0..self.columns).map(move |column| (column, row)))
            .map(|(column, row)| [offset(column, self.columns), offset(row, self.rows)])
            .collect()
    }

    /// Channels of both lines.
    ///
    /// # Errors
    ///
    /// [`SimulateError`] where there are too few or too many.
    pub fn axis(&self, lines: (&Line, &Line)) -> Result<Axis, SimulateError> {
        let clump = &self.clump;
        let fastest = clump.infall.speed_km_s.abs()
            + clump.rotation.speed_km_s.abs()
            + clump.outflow.speed_km_s.abs();
        let margin = fastest + BAND_SIGMAS * self.widest_km_s();
        let offsets = [lines.0, lines.1]
            .into_iter()
            .flat_map(|line| line.components.iter().map(|one| one.offset_km_s));
        let (below, above) = offsets.fold((0.0f64, 0.0f64), |(low, high), offset| {
            (low.min(offset), high.max(offset))
        });
        let [low_km_s, high_km_s] = self.range_km_s.unwrap_or([
            (clump.v_lsr_km_s + below - margin).floor(),
            (clump.v_lsr_km_s + above + margin).ceil(),
        ]);
        let axis = Axis {
            low_km_s,
            high_km_s,
            channel_km_s: self.channel_km_s,
        };
        axis.check(super::PairLine::Thick)?;
        Ok(axis)
    }

    fn has_outflow(&self) -> bool {
        self.clump.outflow.speed_km_s != 0.0
    }

    fn widest_km_s(&self) -> f64 {
        let clump = &self.clump;
        if self.has_outflow() {
            clump.sigma_km_s.max(clump.outflow.sigma_km_s)
        } else {
            clump.sigma_km_s
        }
    }

    pub(super) fn narrowest_km_s(&self) -> f64 {
        let clump = &self.clump;
        if self.has_outflow() {
            clump.sigma_km_s.min(clump.outflow.sigma_km_s)
        } else {
            clump.sigma_km_s
        }
    }
}
