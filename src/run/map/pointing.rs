//! One pointing of a map through the chain, and what the journal keeps of it.

use super::super::pair::{fit_prepared, prepare_lines};
use super::super::{PairInput, PairOutcome, PairSettings, RunError, pair_row};
use super::field::{Block, Field};
use crate::fit::{PairFit, Workspace, fit_thin};
use crate::grid::{GridCaution, ThinMean};
use crate::measure::{Sides, first_moment, sides};
use crate::model::Model;
use crate::numeric::Estimate;
use crate::prepare::{Expected, PrepareError, PrepareSettings, Prepared, prepare};
use crate::report::{Row, Value, columns};
use crate::spectrum::{Spectrum, Window};
use serde::{Deserialize, Serialize};

/// What became of a pointing.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub enum Pointing {
    /// Outside of the coverage of either line.
    Blank,
    /// Its spectra cannot be used.
    Unusable {
        /// Its row.
        values: Vec<Value>,
        /// What was found and expected.
        message: String,
    },
    /// The thick line is below the threshold: not fitted.
    Skipped {
        /// Its row.
        values: Vec<Value>,
    },
    /// The thin line is not detected: to be fitted with a mean in its place.
    Weak,
    /// Fitted.
    Fitted {
        /// Its row.
        values: Vec<Value>,
        /// Solution of every model.
        solutions: Vec<Solution>,
        /// What it says of motions beside its row.
        motions: Box<Motions>,
    },
    /// Fitted in the first pass for good: its first moment over the map's range of velocities.
    Moment(Option<Estimate>),
}

/// What a fitted pointing says of motions beside its row.
#[derive(Clone, Copy, Debug, Serialize, Deserialize)]
pub struct Motions {
    /// Window of its thick line, km/s.
    pub window_km_s: [f64; 2],
    /// Blue less red in core and wings.
    pub sides: Option<Sides>,
    /// Change of the asymmetry by the systematic of the rest frequencies.
    pub asymmetry_systematic: Option<f64>,
    /// First moment of the thick line, km/s.
    pub thick_moment_km_s: Option<Estimate>,
    /// Whether the thin line is its own.
    pub own_thin: bool,
}

/// Significance from which core, wings and first moment are taken.
const DETECTION: f64 = 5.0;

/// A model's solution, to begin a neighbour's search with.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct Solution {
    /// Position of the model in [`Model::ALL`].
    model: u8,
    /// All parameters.
    parameters: Vec<f64>,
    /// Inward speed and its error, km/s, of a model that has one.
    v_in_km_s: Option<f64>,
    v_in_err_km_s: Option<f64>,
}

impl Solution {
    fn all(fit: &PairFit) -> Vec<Self> {
        let solution = |fit: &crate::fit::ModelFit| {
            let place = Model::ALL.iter().position(|model| *model == fit.model);
            let v_in = fit.parameter("v_in_km_s");
            Self {
                // There are far fewer models than 255.
                model: place
                    .and_then(|place| u8::try_from(place).ok())
                    .unwrap_or(u8::MAX),
                parameters: fit.parameters.iter().map(|one| one.value).collect(),
                v_in_km_s: v_in.map(|one| one.value),
                v_in_err_km_s: v_in.and_then(|one| one.err),
            }
        };
        fit.models.iter().map(solution).collect()
    }

    /// A start of the model's search.
    pub fn start(&self) -> Option<(Model, Vec<f64>)> {
        let model = Model::ALL.get(usize::from(self.model))?;
        Some((*model, self.parameters.clone()))
    }

    /// Whether a neighbour's solution is another one than this, beyond what noise makes of one.
    pub fn differs_from(&self, other: &Self) -> bool {
        /// Formal errors in which two speeds are the same.
        const SAME: f64 = 3.0;
        if self.model != other.model {
            return false;
        }
        match (self.v_in_km_s, other.v_in_km_s) {
            (Some(own), Some(theirs)) => match (self.v_in_err_km_s, other.v_in_err_km_s) {
                (Some(a), Some(b)) => (own - theirs).abs() > SAME * a.hypot(b),
                // Nothing to be learnt from one that is not determined either.
                (_, other) => other.is_some(),
            },
            _ => false,
        }
    }
}

impl Motions {
    fn of(outcome: &PairOutcome, again: &Again) -> Self {
        let (thick, thin) = (&outcome.thick, &outcome.thin);
        let window = thick.prepared.window;
        let components = thick.line.components.len();
        let systematic =
            (thick.line.velocity_systematic_km_s()).hypot(thin.line.velocity_systematic_km_s());
        let of_line = |line| sides(&thick.prepared, line, components, systematic, DETECTION);
        let moment = |range| first_moment(&thick.prepared, range, DETECTION);
        Self {
            window_km_s: [window.low_km_s, window.high_km_s],
            sides: outcome.thin_fit.line.as_ref().and_then(of_line),
            asymmetry_systematic: outcome.measures.asymmetry_systematic,
            thick_moment_km_s: again.range.and_then(moment),
            own_thin: again.thin.is_none(),
        }
    }

    /// The window of the thick line.
    pub fn window(&self) -> Window {
        let [low_km_s, high_km_s] = self.window_km_s;
        Window {
            low_km_s,
            high_km_s,
        }
    }
}

/// What all pointings of a run share.
#[derive(Clone, Copy, Debug)]
pub struct Work<'a> {
    pub field: &'a Field,
    pub settings: &'a PairSettings,
    pub threshold_sigma: f64,
}

/// A pointing as it is fitted in the end.
#[derive(Clone, Debug, Default)]
pub struct Again {
    /// Starts of its neighbours' solutions.
    pub starts: Vec<(Model, Vec<f64>)>,
    /// The thin line's mean in its place.
    pub thin: Option<(ThinMean, Spectrum)>,
    /// Velocities of first moments.
    pub range: Option<Window>,
}

/// A pair that is to be fitted, or why not.
enum Ready {
    Blank,
    Below(Option<(f64, f64)>),
    Pair(Box<PairInput>, Box<(Prepared, Prepared)>),
}

impl Work<'_> {
    /// The pointing by itself.
    pub fn alone(&self, site: usize, block: &Block, workspace: &mut Workspace) -> Pointing {
        match self.try_alone(site, block, workspace) {
            Ok(pointing) => pointing,
            Err(error) => self.unusable(site, &error),
        }
    }

    fn try_alone(
        &self,
        site: usize,
        block: &Block,
        workspace: &mut Workspace,
    ) -> Result<Pointing, RunError> {
        match self.ready(site, block, None)? {
            Ready::Blank => Ok(Pointing::Blank),
            Ready::Below(noise_k) => self.skipped(site, noise_k),
            Ready::Pair(pair, prepared) => {
                let thin = fit_thin(&prepared.1, &pair.thin.line, &self.settings.fit, workspace)?;
                if thin.line.is_none() {
                    return Ok(Pointing::Weak);
                }
                let outcome = fit_prepared(*pair, *prepared, self.settings, workspace)?;
                self.fitted(site, &outcome, &Again::default())
            }
        }
    }

    /// The pointing with what is known of its neighbours.
    pub fn again(
        &self,
        site: usize,
        block: &Block,
        again: &Again,
        workspace: &mut Workspace,
    ) -> Pointing {
        let pointing =
            self.outcome(site, block, again, workspace)
                .and_then(|outcome| match outcome {
                    Some(outcome) => self.fitted(site, &outcome, again),
                    None => Ok(Pointing::Blank),
                });
        pointing.unwrap_or_else(|error| self.unusable(site, &error))
    }

    /// Everything that is found of a pointing; none where it is not fitted.
    pub fn outcome(
        &self,
        site: usize,
        block: &Block,
        again: &Again,
        workspace: &mut Workspace,
    ) -> Result<Option<PairOutcome>, RunError> {
        let thin = again.thin.as_ref().map(|(_, spectrum)| spectrum);
        let Ready::Pair(pair, prepared) = self.ready(site, block, thin)? else {
            return Ok(None);
        };
        let mut settings = self.settings.clone();
        settings.fit.starts.extend(again.starts.iter().cloned());
        fit_prepared(*pair, *prepared, &settings, workspace).map(Some)
    }

    /// First moment of the thick line of a pointing that was fitted, its window known.
    pub fn moment(&self, site: usize, block: &Block, window: Window, range: Window) -> Pointing {
        // What cannot be read or prepared has been told of.
        let pair = self.field.pair(site, block).ok().flatten();
        let prepared = pair.and_then(|pair| {
            let expected = Expected {
                components: pair.thick.line.components.clone(),
                window: None,
            };
            let settings = PrepareSettings {
                window: Some(window),
                ..pair.thick.prepare.clone()
            };
            prepare(&pair.thick.spectrum, &settings, &expected).ok()
        });
        Pointing::Moment(prepared.and_then(|thick| first_moment(&thick, range, DETECTION)))
    }

    /// Both lines of a pointing, where they can be prepared.
    pub fn prepared(&self, site: usize) -> Result<Option<(Prepared, Prepared)>, RunError> {
        let block = self.field.read_one(site)?;
        let pair = self.field.pair(site, &block).ok().flatten();
        Ok(pair.and_then(|pair| prepare_lines(&pair).ok()))
    }

    fn ready(
        &self,
        site: usize,
        block: &Block,
        thin: Option<&Spectrum>,
    ) -> Result<Ready, RunError> {
        let Some(mut pair) = self.field.pair(site, block)? else {
            return Ok(Ready::Blank);
        };
        if let Some(thin) = thin {
            pair.thin.spectrum = thin.clone();
        }
        let prepared = match prepare_lines(&pair) {
            Ok(prepared) => prepared,
            Err(RunError::Prepare {
                error: PrepareError::NoLine { .. },
                ..
            }) => return Ok(Ready::Below(None)),
            Err(error) => return Err(error),
        };
        let (thick, thin) = (&prepared.0, &prepared.1);
        if signal_to_noise(thick) < self.threshold_sigma {
            return Ok(Ready::Below(Some((thick.noise.rms_k, thin.noise.rms_k))));
        }
        Ok(Ready::Pair(Box::new(pair), Box::new(prepared)))
    }

    fn fitted(
        &self,
        site: usize,
        outcome: &PairOutcome,
        again: &Again,
    ) -> Result<Pointing, RunError> {
        let thin = again.thin.as_ref().map(|(mean, _)| *mean);
        let mut row = pair_row(outcome)?;
        self.place(site, &mut row)?;
        if let Some(mean) = thin {
            let codes = row.get("cautions")?.text().unwrap_or_default().to_owned();
            let code = GridCaution::ThinMean(mean).code();
            let joined = if codes.is_empty() {
                code.to_owned()
            } else {
                format!("{codes};{code}")
            };
            row.set("cautions", joined)?;
        }
        Ok(Pointing::Fitted {
            values: row.into_values(),
            solutions: Solution::all(&outcome.fit),
            motions: Box::new(Motions::of(outcome, again)),
        })
    }

    fn skipped(&self, site: usize, noise_k: Option<(f64, f64)>) -> Result<Pointing, RunError> {
        let mut row = self.empty_row(site, GridCaution::BelowThreshold)?;
        row.set("noise_thick_k", noise_k.map(|noise| noise.0))?;
        row.set("noise_thin_k", noise_k.map(|noise| noise.1))?;
        Ok(Pointing::Skipped {
            values: row.into_values(),
        })
    }

    fn unusable(&self, site: usize, error: &RunError) -> Pointing {
        let row = self.empty_row(site, GridCaution::Unusable);
        Pointing::Unusable {
            values: row.map(Row::into_values).unwrap_or_default(),
            message: error.to_string(),
        }
    }

    fn empty_row(&self, site: usize, caution: GridCaution) -> Result<Row, RunError> {
        let mut row = columns::results().row();
        let [thick, thin] = self.field.lines();
        row.set("id", self.field.id(site))?;
        row.set("thick_line", thick.name.as_str())?;
        row.set("thin_line", thin.name.as_str())?;
        row.set("profile", "undetected")?;
        row.set("cautions", caution.code())?;
        self.place(site, &mut row)?;
        Ok(row)
    }

    fn place(&self, site: usize, row: &mut Row) -> Result<(), RunError> {
        if let Some([dx, dy]) = self.field.offsets_arcsec(site) {
            row.set("dx_arcsec", dx)?;
            row.set("dy_arcsec", dy)?;
        }
        Ok(())
    }
}

/// The highest channel of a line's window over the noise.
fn signal_to_noise(prepared: &Prepared) -> f64 {
    let spectrum = &prepared.spectrum;
    let channels = spectrum
        .velocity_km_s()
        .iter()
        .zip(spectrum.temperature_k());
    let highest = channels
        .filter(|(velocity, _)| prepared.window.contains(**velocity))
        .map(|(_, temperature)| *temperature)
        .fold(f64::NEG_INFINITY, f64::max);
    highest / prepared.noise.rms_k
}
