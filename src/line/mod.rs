//! Transitions: rest frequencies with uncertainties, multiplets, and the names people write.
//!
//! A name becomes a [`Line`]; so do a rest frequency and components of the user's own. Zero of the
//! velocity scale is a line's rest frequency, and component offsets are relative to it.

mod isotopologues;
mod names;
mod transitions;

pub use isotopologues::{AbundanceRatio, CARBON_RATIO, IsotopologuePair, isotopologue_pair};
pub use names::{find, search};
pub use transitions::{HyperfineComponent, SourceClass, TRANSITIONS, Transition};

use crate::constants::SPEED_OF_LIGHT_KM_S;

/// Lowest rest frequency taken for a line of the user's own, GHz.
pub const LOWEST_FREQUENCY_GHZ: f64 = 1.0;

/// Highest rest frequency taken for a line of the user's own, GHz.
pub const HIGHEST_FREQUENCY_GHZ: f64 = 10_000.0;

/// Most components that a line of the user's own may have.
pub const MOST_COMPONENTS: usize = 64;

/// Largest offset of a component and largest uncertainty of a rest frequency, as velocities in km/s.
pub const LARGEST_OFFSET_KM_S: f64 = 1000.0;

/// One hyperfine component of a transition.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Component {
    /// Velocity offset from the line's rest frequency, km/s; positive is toward lower frequency.
    pub offset_km_s: f64,
    /// Share of the total optical depth; the shares of a multiplet sum to 1.
    pub weight: f64,
}

impl Component {
    /// The one component of a line without resolved structure.
    pub const SINGLE: Self = Self {
        offset_km_s: 0.0,
        weight: 1.0,
    };
}

/// A line that a spectrum is read and fitted with: built in, or the user's own.
#[derive(Clone, Debug, PartialEq)]
pub struct Line {
    /// Name as shown in tables and figures, such as `HCO+ 1-0`.
    pub name: String,
    /// Rest frequency, GHz.
    pub rest_frequency_ghz: f64,
    /// Standard uncertainty of the rest frequency, GHz.
    pub rest_frequency_err_ghz: f64,
    /// Components; a single one of weight 1 at offset 0 for a line without resolved structure.
    pub components: Vec<Component>,
}

impl Line {
    /// A line of the user's own.
    ///
    /// Without an uncertainty (GHz) it gets that of a value quoted by a secondary source,
    /// [`SourceClass::floor_km_s`]. Component weights are relative: they are divided by their sum.
    ///
    /// # Errors
    ///
    /// [`LineError`] where the name is empty, the frequency lies outside 1 to 10000 GHz, the
    /// uncertainty is negative or above 1000 km/s, or the components are none, more than
    /// [`MOST_COMPONENTS`], farther out than 1000 km/s or not of positive weight.
    pub fn custom(
        name: &str,
        rest_frequency_ghz: f64,
        rest_frequency_err_ghz: Option<f64>,
        components: Option<Vec<Component>>,
    ) -> Result<Self, LineError> {
        let name = name.trim();
        if name.is_empty() {
            return Err(LineError::NoName);
        }
        check_frequency(rest_frequency_ghz)?;
        let components = match components {
            Some(components) => normalised(components)?,
            None => vec![Component::SINGLE],
        };
        Ok(Self {
            name: name.to_owned(),
            rest_frequency_ghz,
            rest_frequency_err_ghz: checked_uncertainty(
                rest_frequency_err_ghz,
                rest_frequency_ghz,
            )?,
            components,
        })
    }

    /// The line with another rest frequency (GHz) and its uncertainty (GHz; `None` as for
    /// [`Line::custom`]), and with it another zero of the velocity scale.
    ///
    /// A single line moves with it. The components of a multiplet keep their frequencies, so their
    /// offsets change: a multiplet can be referred to one of its components in this way.
    ///
    /// # Errors
    ///
    /// [`LineError`] as for [`Line::custom`].
    pub fn with_rest_frequency(
        &self,
        rest_frequency_ghz: f64,
        rest_frequency_err_ghz: Option<f64>,
    ) -> Result<Self, LineError> {
        check_frequency(rest_frequency_ghz)?;
        let ratio = self.rest_frequency_ghz / rest_frequency_ghz;
        let referred = |component: &Component| Component {
            // c (1 - nu/nu0') with nu = nu0 (1 - d/c)
            offset_km_s: SPEED_OF_LIGHT_KM_S * (1.0 - ratio) + component.offset_km_s * ratio,
            weight: component.weight,
        };
        let components = match self.components.as_slice() {
            [_] => self.components.clone(),
            several => normalised(several.iter().map(referred).collect())?,
        };
        Ok(Self {
            name: self.name.clone(),
            rest_frequency_ghz,
            rest_frequency_err_ghz: checked_uncertainty(
                rest_frequency_err_ghz,
                rest_frequency_ghz,
            )?,
            components,
        })
    }

    /// Uncertainty of every velocity on this line's scale from its rest frequency, km/s.
    ///
    /// c err/nu0; the same for all spectra of the line, so it does not average out.
    ///
    /// ```
    /// let line = inrush::line::find("N2H+ 1-0")?;
    /// assert!((line.velocity_systematic_km_s() - 0.0322).abs() < 1e-4); // 10 kHz
    /// # Ok::<(), inrush::line::LineError>(())
    /// ```
    pub fn velocity_systematic_km_s(&self) -> f64 {
        SPEED_OF_LIGHT_KM_S * self.rest_frequency_err_ghz / self.rest_frequency_ghz
    }

    /// The built-in transition of this line's name, whatever its rest frequency; `None` for a name
    /// of the user's own.
    pub fn transition(&self) -> Option<&'static Transition> {
        names::transition_named(&self.name)
    }
}

/// Why there is no such line.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum LineError {
    /// The name is empty.
    #[error("the line has no name, expected one such as `HCO+ 1-0`")]
    NoName,
    /// Neither a built-in transition nor one of a built-in species.
    #[error("unknown line `{text}`, expected a species and its states, such as `HCO+ 1-0`")]
    Unknown {
        /// What was asked for.
        text: String,
        /// Built-in names most like it.
        nearest: Vec<String>,
    },
    /// A species without its states.
    #[error("`{text}` names a species, expected a transition of it")]
    SpeciesOnly {
        /// What was asked for.
        text: String,
        /// The species' built-in transitions.
        transitions: Vec<String>,
    },
    /// A known species with states that are not built in.
    #[error("`{text}` is not built in, expected a known transition of {species}")]
    NoSuchTransition {
        /// What was asked for.
        text: String,
        /// The species recognised in it.
        species: &'static str,
        /// The species' built-in transitions.
        transitions: Vec<String>,
    },
    /// The rest frequency is not one of a molecular line.
    #[error(
        "rest frequency {found_ghz} GHz, expected {LOWEST_FREQUENCY_GHZ} to {HIGHEST_FREQUENCY_GHZ} GHz"
    )]
    Frequency {
        /// What was given, GHz.
        found_ghz: f64,
    },
    /// The uncertainty of the rest frequency is not usable.
    #[error("rest frequency uncertain by {found_ghz} GHz, expected 0 to {largest_ghz} GHz")]
    Uncertainty {
        /// What was given, GHz.
        found_ghz: f64,
        /// The largest taken at this frequency, GHz.
        largest_ghz: f64,
    },
    /// Too few or too many components.
    #[error("{found} components, expected 1 to {MOST_COMPONENTS}")]
    ComponentCount {
        /// Number of components given.
        found: usize,
    },
    /// A component's weight is not positive.
    #[error(
        "component {component} (counted from 1) has weight {found}, expected a positive number"
    )]
    Weight {
        /// Which component, from 1.
        component: usize,
        /// Its weight.
        found: f64,
    },
    /// A component's offset is not usable.
    #[error(
        "component {component} (counted from 1) lies at {found_km_s} km/s, expected at most {LARGEST_OFFSET_KM_S} km/s from the rest frequency"
    )]
    Offset {
        /// Which component, from 1.
        component: usize,
        /// Its offset, km/s.
        found_km_s: f64,
    },
}

impl LineError {
    /// What to do about it.
    pub fn hint(&self) -> Option<String> {
        Some(match self {
            Self::NoName => {
                "name the species and its states, or list the built-in ones with `inrush lines`"
                    .to_owned()
            }
            Self::Unknown { nearest, .. } => format!(
                "nearest built-in lines: {}; any other line can be given by its rest frequency",
                nearest.join(", ")
            ),
            Self::SpeciesOnly { transitions, .. } => format!("use {}", alternatives(transitions)),
            Self::NoSuchTransition { transitions, .. } => format!(
                "use {}, or give the line's rest frequency",
                alternatives(transitions)
            ),
            Self::Frequency { .. } => "give the rest frequency in GHz, not in MHz or Hz".to_owned(),
            Self::Uncertainty { .. } => {
                "give the uncertainty in GHz: 10 kHz is 0.00001 GHz".to_owned()
            }
            Self::ComponentCount { .. } => {
                "leave the components out for a line without resolved structure".to_owned()
            }
            Self::Weight { .. } => "give relative intensities, such as 5, 3 and 1".to_owned(),
            Self::Offset { .. } => {
                "give offsets as velocities in km/s, positive toward lower frequency".to_owned()
            }
        })
    }
}

fn alternatives(names: &[String]) -> String {
    match names {
        [] => String::new(),
        [only] => only.clone(),
        [first @ .., last] => format!("{} or {last}", first.join(", ")),
    }
}

fn check_frequency(found_ghz: f64) -> Result<(), LineError> {
    if (LOWEST_FREQUENCY_GHZ..=HIGHEST_FREQUENCY_GHZ).contains(&found_ghz) {
        Ok(())
    } else {
        Err(LineError::Frequency { found_ghz })
    }
}

fn checked_uncertainty(
    uncertainty_ghz: Option<f64>,
    rest_frequency_ghz: f64,
) -> Result<f64, LineError> {
    let ghz_per_km_s = rest_frequency_ghz / SPEED_OF_LIGHT_KM_S;
    let largest_ghz = LARGEST_OFFSET_KM_S * ghz_per_km_s;
    match uncertainty_ghz {
        None => Ok(SourceClass::Quoted.floor_km_s() * ghz_per_km_s),
        Some(found_ghz) if (0.0..=largest_ghz).contains(&found_ghz) => Ok(found_ghz),
        Some(found_ghz) => Err(LineError::Uncertainty {
            found_ghz,
            largest_ghz,
        }),
    }
}

/// Components with their weights divided by the sum.
fn normalised(mut components: Vec<Component>) -> Result<Vec<Component>, LineError> {
    if components.is_empty() || components.len() > MOST_COMPONENTS {
        return Err(LineError::ComponentCount {
            found: components.len(),
        });
    }
    for (index, component) in components.iter().enumerate() {
        let offset_usable = component.offset_km_s.abs() <= LARGEST_OFFSET_KM_S;
        if !offset_usable {
            return Err(LineError::Offset {
                component: index + 1,
                found_km_s: component.offset_km_s,
            });
        }
        if !(component.weight > 0.0 && component.weight.is_finite()) {
            return Err(LineError::Weight {
                component: index + 1,
                found: component.weight,
            });
        }
    }
    let total: f64 = components.iter().map(|component| component.weight).sum();
    for component in &mut components {
        component.weight /= total;
    }
    Ok(components)
}
