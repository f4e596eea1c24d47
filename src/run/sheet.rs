//! The run sheet: everything that decides a run, as TOML.
//!
//! Unknown keys are errors that name the nearest known key. A resolved sheet, with every default
//! written out, goes beside the results: running it again gives the same bytes.

use super::error::line_at;
use super::{PairSettings, RunError, VerdictSettings};
use crate::derive::{DeriveSettings, Input, SourceProperties};
use crate::fit::clump::ClumpSettings;
use crate::fit::conflict::replaced;
use crate::fit::hypotheses::{Hypothesis, Odds};
use crate::fit::posterior::PosteriorSettings;
use crate::fit::priors::{PRIORS, Prior, Priors};
use crate::fit::{FitRange, FitSettings};
use crate::line::{Component, Line, LineError};
use crate::model::Model;
use crate::numeric::Estimate;
use crate::prepare::PrepareSettings;
use crate::prepare::scale::ScaleSettings;
use crate::read::cube::SkyBeam;
use crate::read::sky::{SkyFrame, SkyPosition};
use crate::read::{ReadOptions, ValueUnit};
use crate::spectrum::{BeamArcsec, Window};
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

/// A number, or a number with its standard error.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(untagged, expecting = "expected a number, or [value, error]")]
pub enum Given {
    /// The value alone.
    Value(f64),
    /// Value and error.
    WithError([f64; 2]),
}

impl Given {
    /// Value and error, 0 where none is given.
    #[must_use]
    pub fn estimate(self) -> Estimate {
        match self {
            Self::Value(value) => Estimate { value, err: 0.0 },
            Self::WithError([value, err]) => Estimate { value, err },
        }
    }
}

/// One number, or two.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(untagged, expecting = "expected a width, or [major, minor], in arcsec")]
pub enum Beam {
    /// A round beam's full width at half maximum.
    Round(f64),
    /// Major and minor axis.
    Elliptical([f64; 2]),
}

/// A number or a word.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(
    untagged,
    expecting = "expected a whole number from 0, or a text in quotes"
)]
pub enum NumberOrWord {
    /// A whole number.
    Number(usize),
    /// A word.
    Word(String),
}

/// A range of velocities or a word.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(untagged, expecting = "expected [low, high] in km/s, or \"all\"")]
pub enum RangeOrWord {
    /// Low and high, km/s.
    Range([f64; 2]),
    /// A word.
    Word(String),
}

/// A run sheet.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct RunSheet {
    /// Seed of everything random.
    #[serde(default)]
    pub seed: u64,
    /// What is observed.
    #[serde(default)]
    pub source: SourceSection,
    /// The optically thick line.
    #[serde(default)]
    pub thick: LineSection,
    /// The optically thin line.
    #[serde(default)]
    pub thin: LineSection,
    /// Baseline, window, noise.
    #[serde(default)]
    pub prepare: PrepareSection,
    /// Models.
    #[serde(default)]
    pub fit: FitSection,
    /// Priors in place of the default ones, by name: the numbers of the density.
    #[serde(default, skip_serializing_if = "BTreeMap::is_empty")]
    pub priors: BTreeMap<String, Given>,
    /// Prior odds of the hypotheses.
    #[serde(default)]
    pub odds: OddsSection,
    /// Derived quantities.
    #[serde(default)]
    pub derive: DeriveSection,
    /// A map's pointings.
    #[serde(default, skip_serializing_if = "GridSection::is_default")]
    pub grid: GridSection,
    /// Products.
    #[serde(default)]
    pub output: OutputSection,
    /// What a finished run writes of itself.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub record: Option<Record>,
}

/// What is observed: each number alone or with its standard error. A radius, mass and density are those
/// at the given distance; see [`SourceProperties`].
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SourceSection {
    /// Name in tables and figures.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub name: Option<String>,
    /// Distance, kpc.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub distance_kpc: Option<Given>,
    /// Radius, pc, at that distance.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub radius_pc: Option<Given>,
    /// Mass within the radius, solar masses, at that distance.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub mass_msun: Option<Given>,
    /// Number density of H2 at the radius, cm-3, at that distance.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub n_h2_cm3: Option<Given>,
    /// Slope p of the density, rho ~ r^-p.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub density_slope: Option<Given>,
    /// Kinetic temperature, K.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub t_kin_k: Option<Given>,
    /// Flux of the dust, Jy.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub dust_flux_jy: Option<Given>,
    /// Frequency of that flux, GHz.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub dust_freq_ghz: Option<Given>,
    /// Temperature of the dust, K.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub dust_temperature_k: Option<Given>,
    /// Opacity of the dust per gram of gas and dust at that frequency, cm2/g.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub dust_kappa_cm2_g: Option<Given>,
    /// Magnetic field strength, microgauss.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub field_ug: Option<Given>,
    /// Dispersion of the field's angles, degrees.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub angle_dispersion_deg: Option<Given>,
    /// Excitation temperature of the thin line where its model has none, K.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub thin_t_ex_k: Option<Given>,
}

impl SourceSection {
    fn given(&self, input: Input) -> Option<Given> {
        match input {
            Input::Distance => self.distance_kpc,
            Input::Radius => self.radius_pc,
            Input::Mass => self.mass_msun,
            Input::Density => self.n_h2_cm3,
            Input::Slope => self.density_slope,
            Input::Kinetic => self.t_kin_k,
            Input::DustFlux => self.dust_flux_jy,
            Input::DustFrequency => self.dust_freq_ghz,
            Input::DustTemperature => self.dust_temperature_k,
            Input::DustOpacity => self.dust_kappa_cm2_g,
            Input::Field => self.field_ug,
            Input::AngleDispersion => self.angle_dispersion_deg,
            Input::ThinExcitation => self.thin_t_ex_k,
        }
    }

    /// Replaces what is given.
    pub fn set(&mut self, input: Input, given: Given) {
        let target = match input {
            Input::Distance => &mut self.distance_kpc,
            Input::Radius => &mut self.radius_pc,
            Input::Mass => &mut self.mass_msun,
            Input::Density => &mut self.n_h2_cm3,
            Input::Slope => &mut self.density_slope,
            Input::Kinetic => &mut self.t_kin_k,
            Input::DustFlux => &mut self.dust_flux_jy,
            Input::DustFrequency => &mut self.dust_freq_ghz,
            Input::DustTemperature => &mut self.dust_temperature_k,
            Input::DustOpacity => &mut self.dust_kappa_cm2_g,
            Input::Field => &mut self.field_ug,
            Input::AngleDispersion => &mut self.angle_dispersion_deg,
            Input::ThinExcitation => &mut self.thin_t_ex_k,
        };
        *target = Some(given);
    }

    /// What is given of the source, checked.
    ///
    /// # Errors
    ///
    /// [`RunError::Derive`] for a value that no source has, with the physical reason.
    pub fn properties(&self) -> Result<SourceProperties, RunError> {
        let mut properties = SourceProperties::default();
        for input in Input::ALL {
            if let Some(given) = self.given(input) {
                properties.set(input, given.estimate())?;
            }
        }
        Ok(properties)
    }
}

/// Derived quantities.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct DeriveSection {
    /// Draws behind each interval.
    pub draws: usize,
}

impl Default for DeriveSection {
    fn default() -> Self {
        Self {
            draws: DeriveSettings::default().draws,
        }
    }
}

/// A map's pointings. Without a table, the lines' files are cubes, or tables of one spectrum a row.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct GridSection {
    /// Table of pointings, relative to the run sheet.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub pointings: Option<PathBuf>,
    /// Right ascension and declination (ICRS, degrees) of the position that offsets are from.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub centre_deg: Option<[f64; 2]>,
    /// Peak of the thick line over the noise of a channel from which a pointing is fitted.
    pub threshold_sigma: f64,
}

impl Default for GridSection {
    fn default() -> Self {
        Self {
            pointings: None,
            centre_deg: None,
            threshold_sigma: 5.0,
        }
    }
}

impl GridSection {
    fn is_default(&self) -> bool {
        *self == Self::default()
    }

    /// The position that offsets are from, where it is given.
    ///
    /// # Errors
    ///
    /// [`RunError::Setting`] for one that is none.
    pub fn centre(&self) -> Result<Option<SkyPosition>, RunError> {
        let Some([longitude_deg, latitude_deg]) = self.centre_deg else {
            return Ok(None);
        };
        if !((0.0..=360.0).contains(&longitude_deg) && latitude_deg.abs() <= 90.0) {
            return Err(RunError::setting(
                "grid.centre_deg",
                &format!("[{longitude_deg}, {latitude_deg}]"),
                "right ascension from 0 to 360 and declination from -90 to 90, degrees",
            )
            .hinted("both are decimal degrees, ICRS"));
        }
        Ok(Some(SkyPosition {
            frame: SkyFrame::Icrs,
            longitude_deg,
            latitude_deg,
        }))
    }
}

/// One line of the pair.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct LineSection {
    /// Its name, such as `HCO+ 1-0`.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub line: Option<String>,
    /// Its spectrum, relative to the run sheet.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub file: Option<PathBuf>,
    /// Rest frequency in place of the built-in one, GHz.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub rest_freq_ghz: Option<Given>,
    /// Components of a line of the user's own: velocity offset (km/s) and relative weight.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub components: Option<Vec<[f64; 2]>>,
    /// Beam, full width at half maximum, arcsec.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub beam_arcsec: Option<Beam>,
    /// Angle of an elliptical beam's major axis from north through east, degrees; for maps.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub beam_angle_deg: Option<f64>,
    /// Main-beam efficiency; its relative error is one of the line's scale.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub eta_mb: Option<Given>,
    /// Velocity that brings the file's frame to LSRK, km/s.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub frame_offset_km_s: Option<f64>,
    /// Columns of a text or table, such as `1:km/s,2:K`.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub columns: Option<String>,
    /// Row of a table with one spectrum a row: a number, or `COLUMN=VALUE`.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub row: Option<NumberOrWord>,
    /// Header-data unit of a FITS file, from 0.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub hdu: Option<usize>,
    /// Unit of the values of a FITS file that states none.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub value_unit: Option<String>,
    /// Line window in place of the automatic one, km/s.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub window_km_s: Option<[f64; 2]>,
}

/// Baseline, window, noise.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct PrepareSection {
    /// Order of the polynomial baseline, 0 to 3, or `none`.
    pub baseline_order: NumberOrWord,
    /// Channel width to average to, km/s.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub smooth_to_km_s: Option<f64>,
    /// Line window of both lines, km/s, where a line has none of its own.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub window_km_s: Option<[f64; 2]>,
    /// Line-free channels beyond this many standard deviations are left out of the baseline.
    pub clip_sigma: f64,
    /// Significance from which signal counts as a line, in standard deviations.
    pub detection_sigma: f64,
    /// Highest order of the noise's correlation from channel to channel; 0 takes it as white.
    pub noise_order: usize,
}

impl Default for PrepareSection {
    fn default() -> Self {
        let settings = PrepareSettings::default();
        Self {
            baseline_order: settings.baseline_order.map_or_else(
                || NumberOrWord::Word("none".to_owned()),
                NumberOrWord::Number,
            ),
            smooth_to_km_s: settings.smooth_to_km_s,
            window_km_s: None,
            clip_sigma: settings.clip_sigma,
            detection_sigma: settings.detection_sigma,
            noise_order: settings.noise_order,
        }
    }
}

/// Models.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
#[expect(
    clippy::struct_excessive_bools,
    reason = "each is a switch of the run sheet"
)]
pub struct FitSection {
    /// Models of the thick line.
    pub models: Vec<String>,
    /// Velocities whose channels count, km/s, or `all`; the windows with a margin where absent.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub range_km_s: Option<RangeOrWord>,
    /// Gives the thin line a velocity of its own.
    pub free_thin_velocity: bool,
    /// Gives the thin line a dispersion of its own.
    pub free_thin_sigma: bool,
    /// Links the optical depths: thick over thin, with an error.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub isotope_ratio: Option<Given>,
    /// Parameters held at a value, or with a Gaussian prior `[value, error]`.
    #[serde(skip_serializing_if = "BTreeMap::is_empty")]
    pub given: BTreeMap<String, Given>,
    /// Bounds of parameters, `[low, high]`.
    #[serde(skip_serializing_if = "BTreeMap::is_empty")]
    pub bounds: BTreeMap<String, [f64; 2]>,
    /// Stops after least squares: no posterior, no probabilities.
    pub formal: bool,
    /// Also finds the speed of a collapsing sphere: seconds a pair.
    pub sphere: bool,
    /// Effective draws at which the sampling of a posterior ends, and draws that are kept of it.
    pub posterior_draws: usize,
}

impl Default for FitSection {
    fn default() -> Self {
        let settings = FitSettings::default();
        Self {
            models: settings
                .models
                .iter()
                .map(|model| model.name().to_owned())
                .collect(),
            range_km_s: None,
            free_thin_velocity: settings.free_thin_velocity,
            free_thin_sigma: settings.free_thin_sigma,
            isotope_ratio: None,
            given: BTreeMap::new(),
            bounds: BTreeMap::new(),
            formal: false,
            sphere: false,
            posterior_draws: PosteriorSettings::default().draws,
        }
    }
}

/// Prior odds of the hypotheses; only their ratios count.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct OddsSection {
    /// Infall.
    pub infall: f64,
    /// Expansion.
    pub expansion: f64,
    /// Neither.
    #[serde(rename = "static")]
    pub at_rest: f64,
    /// Two clouds on one line of sight.
    pub two_clouds: f64,
}

impl Default for OddsSection {
    fn default() -> Self {
        let [infall, expansion, at_rest, two_clouds] = Odds::default().0;
        Self {
            infall,
            expansion,
            at_rest,
            two_clouds,
        }
    }
}

impl OddsSection {
    /// Replaces the odds of a hypothesis by its name.
    ///
    /// # Errors
    ///
    /// [`RunError::Setting`] with the nearest name for another one.
    pub fn set(&mut self, name: &str, odds: f64) -> Result<(), RunError> {
        let known = Hypothesis::ALL.map(Hypothesis::name);
        let hypothesis = Hypothesis::ALL.into_iter().find(|one| one.name() == name);
        *match hypothesis {
            Some(Hypothesis::Infall) => &mut self.infall,
            Some(Hypothesis::Expansion) => &mut self.expansion,
            Some(Hypothesis::Static) => &mut self.at_rest,
            Some(Hypothesis::TwoClouds) => &mut self.two_clouds,
            None => {
                return Err(unknown("odds", name, &known));
            }
        } = odds;
        Ok(())
    }

    fn odds(self) -> Odds {
        Odds([self.infall, self.expansion, self.at_rest, self.two_clouds])
    }
}

/// Products.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct OutputSection {
    /// Whether figures are drawn.
    pub figures: bool,
}

impl Default for OutputSection {
    fn default() -> Self {
        Self { figures: true }
    }
}

/// What a finished run writes of itself.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Record {
    /// Version of Inrush.
    pub version: String,
    /// SHA-256 of the thick line's file.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub thick_sha256: Option<String>,
    /// SHA-256 of the thin line's file.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub thin_sha256: Option<String>,
}

impl RunSheet {
    /// Reads a run sheet.
    ///
    /// # Errors
    ///
    /// [`RunError::File`] where it cannot be read, [`RunError::Sheet`] with the line and the nearest
    /// known key where it is not one.
    pub fn read(path: &Path) -> Result<Self, RunError> {
        let bytes = std::fs::read(path).map_err(|source| match source.kind() {
            std::io::ErrorKind::NotFound => RunError::NoSheet {
                path: path.to_owned(),
            },
            _ => RunError::File {
                path: path.to_owned(),
                source,
            },
        })?;
        let text = String::from_utf8(bytes).map_err(|_| RunError::Sheet {
            path: path.to_owned(),
            line: None,
            message: "bytes that are not UTF-8 text, expected a run sheet in TOML".to_owned(),
            hint: Some(NO_SHEET_HINT.to_owned()),
        })?;
        Self::parse(&text, path)
    }

    /// Parses a run sheet; `path` serves messages only.
    ///
    /// # Errors
    ///
    /// As [`RunSheet::read`].
    pub fn parse(text: &str, path: &Path) -> Result<Self, RunError> {
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        toml::from_str(text).map_err(|error| {
            let span = error.span();
            let found = span.clone().and_then(|span| text.get(span));
            let (message, hint) = explain(error.message(), found.unwrap_or_default());
            RunError::Sheet {
                path: path.to_owned(),
                line: span.map(|span| line_at(text, span.start)),
                message,
                hint,
            }
        })
    }

    /// The sheet as TOML.
    ///
    /// # Errors
    ///
    /// [`RunError::Internal`] where a value has no TOML form.
    pub fn to_toml(&self) -> Result<String, RunError> {
        toml::to_string(self).map_err(|error| RunError::Internal(error.to_string()))
    }

    /// How the pair is fitted and judged, and what is derived.
    ///
    /// # Errors
    ///
    /// As [`RunSheet::fit_settings`], [`RunSheet::verdict_settings`] and
    /// [`RunSheet::derive_settings`].
    pub fn pair_settings(&self) -> Result<PairSettings, RunError> {
        Ok(PairSettings {
            fit: self.fit_settings()?,
            verdict: self.verdict_settings()?,
            sphere: self.sphere_settings()?,
            derive: self.derive_settings()?,
        })
    }

    /// How the pair is judged; `None` where the run stops after least squares.
    ///
    /// # Errors
    ///
    /// [`RunError::Setting`] for too few or too many draws, and for priors and odds that are none.
    pub fn verdict_settings(&self) -> Result<Option<VerdictSettings>, RunError> {
        let draws = self.fit.posterior_draws;
        let (least, most) = POSTERIOR_DRAWS;
        if !(least..=most).contains(&draws) {
            return Err(RunError::setting(
                "fit.posterior_draws",
                &draws.to_string(),
                &format!("{least} to {most}"),
            )
            .hinted("leave it out for the default"));
        }
        let odds = self.odds.odds();
        odds.check().map_err(|error| RunError::Setting {
            key: "odds".to_owned(),
            message: error.to_string(),
            hint: error.hint(),
        })?;
        let priors = self.replaced_priors()?;
        self.refuse_priors_of_given(&priors)?;
        if self.fit.formal {
            return Ok(None);
        }
        Ok(Some(VerdictSettings {
            posterior: PosteriorSettings {
                seed: self.seed,
                priors,
                ..PosteriorSettings::default().with_draws(draws)
            },
            odds,
        }))
    }

    /// How the speed of a sphere is found; `None` where it is not asked for. Beams that are not given are
    /// those of one telescope.
    fn sphere_settings(&self) -> Result<Option<ClumpSettings>, RunError> {
        if !self.fit.sphere {
            return Ok(None);
        }
        if self.fit.formal {
            return Err(RunError::setting(
                "fit.sphere",
                "true beside fit.formal",
                "one of them: a sphere has a posterior alone",
            )
            .hinted("leave one out"));
        }
        let width_arcsec = |section: &LineSection| {
            section.beam_arcsec.map(|beam| match beam {
                Beam::Round(width) => width,
                Beam::Elliptical([major, minor]) => (major * minor).sqrt(),
            })
        };
        let (thick, thin) = (width_arcsec(&self.thick), width_arcsec(&self.thin));
        let beam_ratio = if let (Some(thick), Some(thin)) = (thick, thin) {
            thin / thick
        } else {
            let (thick, thin) = (self.thick.line("thick")?, self.thin.line("thin")?);
            thick.rest_frequency_ghz / thin.rest_frequency_ghz
        };
        let fit = self.fit_settings()?;
        Ok(Some(ClumpSettings {
            beam_ratio,
            beam_arcsec: thick,
            range: fit.range,
            averaging: fit.averaging,
            seed: self.seed,
            ..ClumpSettings::default()
        }))
    }

    fn replaced_priors(&self) -> Result<Priors, RunError> {
        let mut priors = Priors::default();
        for (name, given) in &self.priors {
            let row = PRIORS.iter().find(|row| row.name == name);
            let Some(row) = row else {
                return Err(unknown("priors", name, &PRIORS.map(|row| row.name)));
            };
            let numbers = match given {
                Given::Value(one) => vec![*one],
                Given::WithError(two) => two.to_vec(),
            };
            let prior = row.prior.with_numbers(&numbers).ok_or_else(|| {
                RunError::setting(
                    &format!("priors.{name}"),
                    &format!("{numbers:?}"),
                    &format!(
                        "{}: the default is {}",
                        row.prior.numbers().join(" and "),
                        row.prior.text()
                    ),
                )
                .hinted("the kind of density is part of the method")
            })?;
            priors = priors
                .with(name, prior)
                .map_err(|error| RunError::Setting {
                    key: format!("priors.{name}"),
                    message: error.to_string(),
                    hint: error.hint(),
                })?;
        }
        Ok(priors)
    }

    /// A given value stands in the place of its prior: with both, one would be left out.
    fn refuse_priors_of_given(&self, priors: &Priors) -> Result<(), RunError> {
        for (prior, _) in replaced(priors) {
            let parameter = match prior {
                "v_in_over_sigma" => "v_in_km_s",
                other => other,
            };
            if self.fit.given.contains_key(parameter) {
                return Err(RunError::setting(
                    &format!("priors.{prior}"),
                    &format!("a prior beside {parameter} as given"),
                    "one of the two",
                )
                .hinted("a given value stands in the place of the prior"));
            }
        }
        Ok(())
    }

    /// The same with every prior written out.
    #[must_use]
    pub(super) fn with_all_priors(mut self) -> Self {
        for row in PRIORS {
            let given = match row.prior {
                Prior::Normal { deviation: one } | Prior::Exponential { mean: one } => {
                    Given::Value(one)
                }
                Prior::LogNormal {
                    median,
                    ln_deviation,
                } => Given::WithError([median, ln_deviation]),
            };
            self.priors.entry(row.name.to_owned()).or_insert(given);
        }
        self
    }

    /// How the pair is fitted.
    ///
    /// # Errors
    ///
    /// [`RunError::Setting`] for a model that does not exist or a range that is none.
    pub fn fit_settings(&self) -> Result<FitSettings, RunError> {
        let fit = &self.fit;
        if fit.models.is_empty() {
            return Err(RunError::setting("fit.models", "no model", "at least one")
                .hinted("leave the key out for the default models"));
        }
        let mut models = Vec::new();
        for name in &fit.models {
            let model = Model::from_name(name).ok_or_else(|| unknown_model(name))?;
            if !models.contains(&model) {
                models.push(model);
            }
        }
        let range = match &fit.range_km_s {
            None => None,
            Some(RangeOrWord::Word(word)) if word == "all" => Some(FitRange::All),
            Some(RangeOrWord::Word(word)) => {
                return Err(RunError::setting(
                    "fit.range_km_s",
                    &format!("`{word}`"),
                    "[low, high] or \"all\"",
                )
                .hinted("leave it out to fit the line windows with a margin"));
            }
            Some(RangeOrWord::Range(range)) => {
                Some(FitRange::Within(window("fit.range_km_s", *range)?))
            }
        };
        if let Some(ratio) = fit.isotope_ratio.map(Given::estimate)
            && !(ratio.value >= 1.0 && ratio.value.is_finite() && ratio.err >= 0.0)
        {
            return Err(RunError::setting(
                "fit.isotope_ratio",
                &format!("{} +- {}", ratio.value, ratio.err),
                "thick over thin, at least 1, with an error of at least 0",
            )
            .hinted("the ratio is that of the abundances, such as 68 for 12C/13C"));
        }
        for (name, given) in &fit.given {
            let given = given.estimate();
            if !(given.value.is_finite() && given.err.is_finite() && given.err >= 0.0) {
                return Err(RunError::setting(
                    &format!("fit.given.{name}"),
                    &format!("{} +- {}", given.value, given.err),
                    "a number with an error of at least 0",
                )
                .hinted("an error of 0 or none holds the parameter, another is a Gaussian prior"));
            }
        }
        Ok(FitSettings {
            models,
            range,
            free_thin_velocity: fit.free_thin_velocity,
            free_thin_sigma: fit.free_thin_sigma,
            isotope_ratio: fit.isotope_ratio.map(Given::estimate),
            bounds: fit
                .bounds
                .iter()
                .map(|(name, [low, high])| (name.clone(), (*low, *high)))
                .collect(),
            given: fit
                .given
                .iter()
                .map(|(name, given)| (name.clone(), given.estimate()))
                .collect(),
            ..FitSettings::default()
        })
    }

    /// How derived quantities are sampled.
    ///
    /// # Errors
    ///
    /// [`RunError::Derive`] for too few or too many draws.
    pub fn derive_settings(&self) -> Result<DeriveSettings, RunError> {
        let settings = DeriveSettings {
            draws: self.derive.draws,
            seed: self.seed,
        };
        settings.check()?;
        Ok(settings)
    }

    /// How a line of the pair is prepared.
    ///
    /// # Errors
    ///
    /// [`RunError::Setting`] for an order or a window that is none.
    pub fn prepare_settings(&self, section: &LineSection) -> Result<PrepareSettings, RunError> {
        let prepare = &self.prepare;
        let baseline_order = match &prepare.baseline_order {
            NumberOrWord::Number(order) => Some(*order),
            NumberOrWord::Word(word) if word == "none" => None,
            NumberOrWord::Word(word) => {
                return Err(RunError::setting(
                    "prepare.baseline_order",
                    &format!("`{word}`"),
                    "0 to 3 or \"none\"",
                )
                .hinted("0 is a constant, 1 a straight line; none subtracts nothing"));
            }
        };
        let given = section.window_km_s.or(prepare.window_km_s);
        Ok(PrepareSettings {
            window: given
                .map(|range| window("window_km_s", range))
                .transpose()?,
            baseline_order,
            smooth_to_km_s: prepare.smooth_to_km_s,
            clip_sigma: prepare.clip_sigma,
            detection_sigma: prepare.detection_sigma,
            noise_order: prepare.noise_order,
        })
    }
}

impl LineSection {
    /// The line that the section names: built in, with another rest frequency, or the user's own.
    ///
    /// # Errors
    ///
    /// [`RunError::NoLine`] where no name stands there, [`RunError::Line`] where it is unknown.
    pub fn line(&self, which: &'static str) -> Result<Line, RunError> {
        let name = self.line.as_deref().ok_or(RunError::NoLine { which })?;
        let frequency = self.rest_freq_ghz.map(Given::estimate);
        let err = frequency
            .map(|frequency| frequency.err)
            .filter(|err| *err > 0.0);
        let components = self.components.as_ref().map(|components| {
            components
                .iter()
                .map(|[offset_km_s, weight]| Component {
                    offset_km_s: *offset_km_s,
                    weight: *weight,
                })
                .collect()
        });
        let line = match (crate::line::find(name), frequency, components) {
            (Ok(line), None, None) => Ok(line),
            (Ok(line), Some(frequency), None) => line.with_rest_frequency(frequency.value, err),
            (Ok(line), frequency, Some(components)) => {
                let rest = frequency.map_or(line.rest_frequency_ghz, |frequency| frequency.value);
                let err = err.or(Some(line.rest_frequency_err_ghz));
                Line::custom(name, rest, err, Some(components))
            }
            (Err(_), Some(frequency), components) => {
                Line::custom(name, frequency.value, err, components)
            }
            (Err(error), None, _) => Err(error),
        };
        line.map_err(|error: LineError| RunError::Line { which, error })
    }

    /// How the line's file is read.
    ///
    /// # Errors
    ///
    /// [`RunError::Setting`] for columns, a row or a unit that are none.
    pub fn read_options(&self) -> Result<ReadOptions, RunError> {
        let columns = self
            .columns
            .as_ref()
            .map(|text| text.parse())
            .transpose()
            .map_err(|error: crate::read::ColumnChoiceError| RunError::Setting {
                key: "columns".to_owned(),
                message: error.to_string(),
                hint: error.hint(),
            })?;
        let row = match &self.row {
            None => None,
            Some(NumberOrWord::Number(number)) => Some(number.to_string()),
            Some(NumberOrWord::Word(word)) => Some(word.clone()),
        };
        let select = row.map(|text| text.parse()).transpose().map_err(
            |error: crate::read::RowChoiceError| RunError::Setting {
                key: "row".to_owned(),
                message: error.to_string(),
                hint: Some("give a row's number, from 1, or COLUMN=VALUE".to_owned()),
            },
        )?;
        let value_unit = self
            .value_unit
            .as_ref()
            .map(|text| ValueUnit::parse(text))
            .transpose()
            .map_err(|error| RunError::Setting {
                key: "value_unit".to_owned(),
                message: format!("`{}`, expected {}", error.found, error.expected),
                hint: error
                    .nearest
                    .map(|nearest| format!("did you mean `{nearest}`?")),
            })?;
        Ok(ReadOptions {
            columns,
            select,
            hdu: self.hdu,
            value_unit,
        })
    }

    /// The given beam on the sky.
    #[must_use]
    pub fn sky_beam(&self) -> Option<SkyBeam> {
        let [major_arcsec, minor_arcsec] = match self.beam_arcsec? {
            Beam::Round(width) => [width, width],
            Beam::Elliptical(widths) => widths,
        };
        Some(SkyBeam {
            major_arcsec,
            minor_arcsec,
            angle_deg: self.beam_angle_deg.unwrap_or(0.0),
        })
    }

    /// How the line's spectrum is brought onto the common scale.
    #[must_use]
    pub fn scale_settings(&self, line: &Line) -> ScaleSettings {
        let eta_mb = self.eta_mb.map(Given::estimate);
        ScaleSettings {
            rest_frequency_hz: line.rest_frequency_ghz * 1e9,
            eta_mb: eta_mb.map(|eta_mb| eta_mb.value),
            eta_mb_err: eta_mb.map_or(0.0, |eta_mb| eta_mb.err),
            beam: self.beam_arcsec.map(|beam| match beam {
                Beam::Round(width) => BeamArcsec {
                    major: width,
                    minor: width,
                },
                Beam::Elliptical([major, minor]) => BeamArcsec { major, minor },
            }),
            frame_offset_km_s: self.frame_offset_km_s,
        }
    }
}

/// Fewest and most draws of a posterior.
const POSTERIOR_DRAWS: (usize, usize) = (100, 100_000);

/// A window of two velocities in order.
fn window(key: &str, [low_km_s, high_km_s]: [f64; 2]) -> Result<Window, RunError> {
    if low_km_s < high_km_s && low_km_s.is_finite() && high_km_s.is_finite() {
        Ok(Window {
            low_km_s,
            high_km_s,
        })
    } else {
        Err(RunError::setting(
            key,
            &format!("[{low_km_s}, {high_km_s}]"),
            "two velocities in km/s, the lower first",
        )
        .hinted("exchange the two"))
    }
}

fn unknown_model(name: &str) -> RunError {
    unknown("models", name, &Model::ALL.map(Model::name))
}

/// A name that is none of those known, with the nearest of them.
fn unknown(key: &str, name: &str, known: &[&str]) -> RunError {
    RunError::Setting {
        key: key.to_owned(),
        message: format!("`{name}`, expected one of {}", known.join(", ")),
        hint: super::nearest(name, known.iter().copied())
            .map(|name| format!("did you mean `{name}`?")),
    }
}

/// What to do where something else than a run sheet was given.
const NO_SHEET_HINT: &str = "spectra are given with --thick and --thin";

/// The parser's message in our words, and what to do; `found` is the text that it is about.
fn explain(message: &str, found: &str) -> (String, Option<String>) {
    let message = message.trim().replace('\n', ": ");
    let mut quoted = message.split('`').skip(1).step_by(2);
    if message.starts_with("unknown field") {
        let unknown = quoted.next().unwrap_or_default().to_owned();
        let known: Vec<&str> = quoted.collect();
        let hint = super::nearest(&unknown, known.iter().copied()).map_or_else(
            || "remove the key".to_owned(),
            |key| format!("did you mean `{key}`?"),
        );
        let message = format!("the key `{unknown}`, expected one of {}", known.join(", "));
        return (message, Some(hint));
    }
    let found = found.trim();
    if message.starts_with("duplicate key") {
        return (
            format!("the key `{found}` twice, expected it once in its section"),
            Some("remove one of the two".to_owned()),
        );
    }
    if let Some((_, expected)) = message.split_once("expected ")
        && (message.starts_with("invalid") || message.starts_with("expected "))
    {
        return (
            format!("{found}, expected {}", in_words(expected)),
            Some("text stands in quotes, numbers do not, several values in [ ]".to_owned()),
        );
    }
    let hint = format!(
        "a run sheet has lines such as `[thick]` and `file = \"thick.csv\"`; {NO_SHEET_HINT}"
    );
    (format!("{message}, in a run sheet (TOML)"), Some(hint))
}

/// What the parser expected, without the names of types.
fn in_words(expected: &str) -> &str {
    match expected {
        "f64" => "a number",
        "u64" | "usize" => "a whole number from 0",
        "a string" | "path string" => "a text in quotes",
        "an array of length 2" => "two numbers in [ ]",
        "a boolean" => "true or false",
        "a sequence" => "a list in [ ]",
        other => other,
    }
}
