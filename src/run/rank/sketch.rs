//! The lines of a pair in single precision, as far as a small figure shows them.

use crate::prepare::Prepared;
use crate::run::PairOutcome;
use serde::{Deserialize, Serialize};

/// One line.
#[derive(Clone, Debug, Default, Serialize, Deserialize)]
pub struct LineSketch {
    /// Channel centres, km/s.
    pub velocity_km_s: Vec<f32>,
    /// Main-beam temperatures, K; `NaN` where masked.
    pub temperature_k: Vec<f32>,
}

/// Both lines of a pair.
#[derive(Clone, Debug, Default, Serialize, Deserialize)]
pub struct Sketch {
    /// The thick line.
    pub thick: LineSketch,
    /// The thin line.
    pub thin: LineSketch,
    /// Velocity of the thin line, km/s.
    pub v_thin_km_s: Option<f64>,
}

/// Part of the windows' common width that is shown on either side of them.
const MARGIN: f64 = 0.5;

impl Sketch {
    /// The channels of both windows and a margin.
    pub fn of(outcome: &PairOutcome) -> Self {
        let (thick, thin) = (&outcome.thick.prepared, &outcome.thin.prepared);
        let low = thick.window.low_km_s.min(thin.window.low_km_s);
        let high = thick.window.high_km_s.max(thin.window.high_km_s);
        let margin = MARGIN * (high - low);
        let line = |prepared: &Prepared| LineSketch::between(prepared, low - margin, high + margin);
        Self {
            thick: line(thick),
            thin: line(thin),
            v_thin_km_s: outcome.thin_fit.line.map(|line| line.v_km_s.value),
        }
    }
}

impl LineSketch {
    #[allow(clippy::cast_possible_truncation, reason = "what a small figure shows")]
    fn between(prepared: &Prepared, low: f64, high: f64) -> Self {
        let spectrum = &prepared.spectrum;
        let channels = (spectrum.velocity_km_s().iter()).zip(spectrum.temperature_k());
        let shown = channels.filter(|(velocity, _)| (low..=high).contains(*velocity));
        let (velocity_km_s, temperature_k) = shown
            .map(|(velocity, temperature)| (*velocity as f32, *temperature as f32))
            .unzip();
        Self {
            velocity_km_s,
            temperature_k,
        }
    }
}
