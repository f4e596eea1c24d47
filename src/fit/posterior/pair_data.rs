//! The data of both lines as every posterior of a pair needs them: which velocities count, and channels
//! enough.

use super::data::LineData;
use super::settings::PosteriorError;
use super::starts::{Kinematics, NARROWEST, kinematics, shape_errors};
use crate::fit::{Averaging, FitRange, default_range};
use crate::line::Line;
use crate::measure::ThinLine;
use crate::model::LineShape;
use crate::prepare::Prepared;
use crate::spectrum::Window;

/// Fewest channels of a line in the fitted range.
const FEWEST_CHANNELS: usize = 10;

/// What is chosen of the data.
#[derive(Clone, Copy, Debug)]
pub(in crate::fit) struct Choice {
    /// Velocities whose channels hold the lines; `None` takes the windows and as much on either side.
    pub range: Option<FitRange>,
    /// How the model's value in a channel is formed.
    pub averaging: Averaging,
    /// Standard deviation of smooth departures from any family's profile, over each line's peak.
    pub shape_error: f64,
}

/// Both lines' data.
#[derive(Clone, Debug)]
pub(in crate::fit) struct PairData {
    /// The thick and the thin line's.
    pub lines: [LineData; 2],
    /// Velocities whose channels hold the lines.
    pub range: Window,
    /// What the lines look like, the best guess first.
    pub kinematics: Vec<Kinematics>,
}

impl PairData {
    /// Data of a pair; [`PosteriorError::TooFewChannels`] where the range leaves too few.
    pub fn new(
        thick: &Prepared,
        thin: &Prepared,
        lines: (&Line, &Line),
        thin_line: Option<&ThinLine>,
        choice: &Choice,
    ) -> Result<Self, PosteriorError> {
        let range = range(thick, thin, choice.range);
        let kinematics = kinematics(thick, thin, thin_line);
        let about = kinematics[0];
        let of = |name: &'static str, prepared: &Prepared, line: &Line| {
            let shape = LineShape::new(line.rest_frequency_ghz, line.components.clone());
            let errors = shape_errors(prepared, choice.shape_error, about);
            let narrowest = NARROWEST * about.sigma_km_s;
            let data = LineData::new(
                prepared,
                &shape,
                range,
                choice.averaging,
                narrowest,
                &errors,
            );
            let channels = data.channels().len();
            if channels < FEWEST_CHANNELS {
                return Err(PosteriorError::TooFewChannels {
                    line: name,
                    channels,
                    needed: FEWEST_CHANNELS,
                });
            }
            Ok(data)
        };
        Ok(Self {
            lines: [of("thick", thick, lines.0)?, of("thin", thin, lines.1)?],
            range,
            kinematics,
        })
    }
}

fn range(thick: &Prepared, thin: &Prepared, chosen: Option<FitRange>) -> Window {
    match chosen {
        Some(FitRange::Within(window)) => window,
        Some(FitRange::All) => {
            let ends = [thick, thin].map(|prepared| {
                let velocity = prepared.spectrum.velocity_km_s();
                (velocity[0], velocity[velocity.len() - 1])
            });
            Window {
                low_km_s: ends[0].0.min(ends[1].0),
                high_km_s: ends[0].1.max(ends[1].1),
            }
        }
        None => default_range(thick, thin),
    }
}
