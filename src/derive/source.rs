//! What is given of a source: which inputs there are, what they may be, and how they are drawn.

use super::DeriveError;
use crate::constants::BACKGROUND_TEMPERATURE;
use crate::numeric::Estimate;

/// A property of the source that can be given.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Input {
    /// Distance, kpc.
    Distance,
    /// Radius, pc.
    Radius,
    /// Mass within the radius, solar masses.
    Mass,
    /// Number density of H2 at the radius, cm-3.
    Density,
    /// Slope p of the density, rho ~ r^-p.
    Slope,
    /// Kinetic temperature, K.
    Kinetic,
    /// Flux of the dust, Jy.
    DustFlux,
    /// Frequency of that flux, GHz.
    DustFrequency,
    /// Temperature of the dust, K.
    DustTemperature,
    /// Opacity per gram of gas and dust at that frequency, cm2 g-1.
    DustOpacity,
    /// Field strength, microgauss.
    Field,
    /// Dispersion of the field's angles, degrees.
    AngleDispersion,
    /// Excitation temperature of the thin line where its model has none, K.
    ThinExcitation,
}

/// How an input with an error is drawn.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Law {
    /// Log-normal with the given value as its mean and the given error as its standard deviation.
    LogNormal,
    /// Normal, cut off at the limits.
    Truncated,
}

/// All that is known of an input before a value is.
#[derive(Clone, Copy, Debug)]
pub(super) struct Facts {
    pub key: &'static str,
    pub unit: &'static str,
    /// Lowest and highest possible value.
    pub limits: (f64, f64),
    /// Why nothing lies below and above them.
    pub reasons: (&'static str, &'static str),
    /// Lowest and highest usual value.
    pub usual: (f64, f64),
    pub law: Law,
    /// The power of the distance that the value was worked out with.
    pub distance_power: i32,
}

/// Errors as large, in units of the value, say that nothing is known.
const WIDEST_ERROR: f64 = 10.0;

const POSITIVE: &str = "it is positive";

const fn facts(
    key: &'static str,
    unit: &'static str,
    limits: (f64, f64),
    reasons: (&'static str, &'static str),
    usual: (f64, f64),
) -> Facts {
    Facts {
        key,
        unit,
        limits,
        reasons,
        usual,
        law: Law::LogNormal,
        distance_power: 0,
    }
}

const fn with_distance(facts: Facts, distance_power: i32) -> Facts {
    Facts {
        distance_power,
        ..facts
    }
}

const COLDEST: f64 = BACKGROUND_TEMPERATURE.value;
const WARMER: &str = "nothing in equilibrium with the cosmic background is colder than it";

/// Dispersion of angles that are spread evenly over 180 degrees: 180/sqrt(12).
const RANDOM_ANGLES_DEG: f64 = 51.962;

impl Input {
    /// Every input, in the order of the run sheet.
    pub const ALL: [Self; 13] = [
        Self::Distance,
        Self::Radius,
        Self::Mass,
        Self::Density,
        Self::Slope,
        Self::Kinetic,
        Self::DustFlux,
        Self::DustFrequency,
        Self::DustTemperature,
        Self::DustOpacity,
        Self::Field,
        Self::AngleDispersion,
        Self::ThinExcitation,
    ];

    #[rustfmt::skip]
    pub(super) const fn facts(self) -> Facts {
        match self {
            Self::Distance => with_distance(facts("distance_kpc", "kpc", (1e-3, 1e3),
                ("a parsec holds no star-forming cloud but is our own neighbourhood",
                 "a single dish sees no single clump beyond a megaparsec"), (0.05, 30.0)), 1),
            Self::Radius => with_distance(facts("radius_pc", "pc", (1e-5, 300.0),
                ("a clump is larger than a planetary system's inner part (2 au)",
                 "no molecular cloud is as large"), (3e-3, 10.0)), 1),
            Self::Mass => with_distance(facts("mass_msun", "Msun", (1e-4, 1e8),
                ("no gas that collapses is lighter than a tenth of Jupiter's mass",
                 "no molecular cloud is as heavy"), (0.03, 1e5)), 2),
            Self::Density => with_distance(facts("n_h2_cm3", "cm-3", (0.1, 1e14),
                ("gas as thin holds no H2", "gas as dense is a star's or a disk's, and opaque to its lines"),
                (1e2, 1e9)), -1),
            Self::Slope => Facts { law: Law::Truncated, ..facts("density_slope", "", (0.0, 3.0),
                ("density does not rise outward in a clump that collapses",
                 "the mass within any radius would be infinite"), (0.0, 2.5)) },
            Self::Kinetic => facts("t_kin_k", "K", (COLDEST, 3000.0),
                (WARMER, "molecules are dissociated there"), (5.0, 300.0)),
            Self::DustFlux => facts("dust_flux_jy", "Jy", (1e-9, 1e7),
                (POSITIVE, "no clump's dust is as bright"), (1e-4, 1e4)),
            Self::DustFrequency => facts("dust_freq_ghz", "GHz", (10.0, 30_000.0),
                ("dust is not what shines there", "thermal dust is opaque there"), (80.0, 2000.0)),
            Self::DustTemperature => facts("dust_temperature_k", "K", (COLDEST, 2000.0),
                (WARMER, "dust sublimates"), (5.0, 100.0)),
            Self::DustOpacity => facts("dust_kappa_cm2_g", "cm2 g-1", (1e-8, 1e3),
                (POSITIVE, "no gas and dust is as opaque at these frequencies"), (1e-5, 10.0)),
            Self::Field => facts("field_ug", "uG", (1e-3, 1e6),
                ("fields between galaxies are as weak", "even masers show less than a gauss"), (1.0, 2e4)),
            Self::AngleDispersion => facts("angle_dispersion_deg", "deg", (1e-3, RANDOM_ANGLES_DEG),
                (POSITIVE, "angles without any order have a dispersion of 52 degrees"), (0.5, RANDOM_ANGLES_DEG)),
            Self::ThinExcitation => facts("thin_t_ex_k", "K", (COLDEST, 1000.0),
                ("a line in emission is excited above the background", "molecules are dissociated there"), (3.0, 200.0)),
        }
    }

    /// Key in run sheets, column of sample tables.
    #[must_use]
    pub const fn key(self) -> &'static str {
        self.facts().key
    }

    /// Unit; empty for a pure number.
    #[must_use]
    pub const fn unit(self) -> &'static str {
        self.facts().unit
    }

    /// The power of the distance that the given value is taken to be worked out with: a radius 1, a
    /// mass 2, a density -1, all else 0.
    #[must_use]
    pub const fn distance_power(self) -> i32 {
        self.facts().distance_power
    }

    /// The input of a key.
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|input| input.key() == key)
    }

    pub(super) const fn index(self) -> usize {
        self as usize
    }
}

/// What is given of a source, each a value with its standard error (0 where it is exact).
///
/// **Distance.** A radius, mass or density that is given beside a distance is taken to be worked out at
/// that distance: when another distance is drawn, a radius moves with it, a mass with its square, a
/// density with its inverse. Their own errors are those at a known distance. Where they hold the
/// distance's already, the distance has to be given without an error.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct SourceProperties {
    values: [Option<Estimate>; Input::ALL.len()],
}

impl SourceProperties {
    /// Takes an input.
    ///
    /// ```
    /// use inrush::derive::{Input, SourceProperties};
    /// use inrush::numeric::Estimate;
    /// let mut source = SourceProperties::default();
    /// source.set(Input::Radius, Estimate { value: 0.3, err: 0.03 })?;
    /// let kiloparsec = Estimate { value: 1000.0, err: 0.0 };
    /// assert!(source.set(Input::Radius, kiloparsec).is_err());
    /// # Ok::<(), inrush::derive::DeriveError>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`DeriveError::Impossible`] with the physical reason, [`DeriveError::Error`] where the error is
    /// negative, not a number, above ten times the value, or wider than all possible slopes.
    pub fn set(&mut self, input: Input, given: Estimate) -> Result<&mut Self, DeriveError> {
        let facts = input.facts();
        let (low, high) = facts.limits;
        let impossible = |reason| DeriveError::Impossible {
            key: facts.key,
            found: given.value,
            unit: facts.unit,
            low,
            high,
            reason,
        };
        if given.value.is_nan() {
            return Err(impossible("it is a number"));
        }
        if given.value < low {
            let negative = given.value <= 0.0 && low > 0.0;
            return Err(impossible(if negative {
                POSITIVE
            } else {
                facts.reasons.0
            }));
        }
        // a slope of 3 itself has no finite mass
        if given.value > high || (facts.law == Law::Truncated && given.value >= high) {
            return Err(impossible(facts.reasons.1));
        }
        let widest = match facts.law {
            Law::LogNormal => WIDEST_ERROR * given.value,
            Law::Truncated => high - low,
        };
        if !(given.err >= 0.0 && given.err <= widest) {
            return Err(DeriveError::Error {
                key: facts.key,
                value: given.value,
                err: given.err,
                widest,
            });
        }
        self.values[input.index()] = Some(given);
        Ok(self)
    }

    /// An input; `None` where it is not given.
    #[must_use]
    pub fn get(&self, input: Input) -> Option<Estimate> {
        self.values[input.index()]
    }

    /// Whether nothing is given.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.values.iter().all(Option::is_none)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn inputs_are_in_the_order_of_their_index_and_found_by_their_keys() {
        for (index, input) in Input::ALL.into_iter().enumerate() {
            assert_eq!(input.index(), index);
            assert_eq!(Input::from_key(input.key()), Some(input));
            let facts = input.facts();
            assert!(facts.limits.0 <= facts.usual.0 && facts.usual.0 < facts.usual.1);
            assert!(facts.usual.1 <= facts.limits.1);
        }
        assert_eq!(Input::from_key("mass"), None);
    }
}
