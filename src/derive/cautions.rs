//! What a reader of a derived quantity has to know: typed, with a short code and a sentence.

use super::field::LARGEST_ANGLE_DISPERSION_DEG;
use super::source::{Input, SourceProperties};

/// A reason to take a derived quantity with care.
#[derive(Clone, Debug, PartialEq)]
pub enum DeriveCaution {
    /// A given value is possible, but seldom.
    OddInput {
        /// Which.
        input: Input,
        /// Its value in the input's unit.
        value: f64,
        /// What is usual.
        usual: (f64, f64),
    },
    /// A given error is larger than its value.
    ErrorExceedsValue {
        /// Which.
        input: Input,
    },
    /// A given value has no use beside another one, or beside what the fit found.
    UnusedInput {
        /// Which.
        input: Input,
        /// What stands above it.
        beside: &'static str,
    },
    /// Two ways to the mass differ.
    MassesDisagree {
        /// The mass that was taken, solar masses.
        taken_msun: f64,
        /// The dust's mass, solar masses.
        dust_msun: f64,
    },
    /// The given density is not that of the mass at the radius.
    DensityDisagrees {
        /// Given, cm-3.
        given_cm3: f64,
        /// From mass, radius and slope, cm-3.
        from_mass_cm3: f64,
    },
    /// The gas moves outward: a rate of loss.
    OutwardSpeed {
        /// Inward speed, km/s.
        v_in_km_s: f64,
    },
    /// The rate's 95 % interval holds zero.
    RateHoldsZero,
    /// The gas is faster than gravity of the given mass can make it.
    FasterThanFreeFall {
        /// Inward over free-fall speed.
        ratio: f64,
    },
    /// The line is narrower than its molecules' thermal motion.
    NarrowerThanThermal {
        /// Dispersion, km/s.
        sigma_km_s: f64,
        /// Thermal dispersion, km/s.
        thermal_km_s: f64,
    },
    /// Field angles scatter beyond what the relation is good for.
    WideFieldAngles {
        /// Their dispersion, degrees.
        dispersion_deg: f64,
    },
    /// The thin line is brighter than a layer of the given excitation temperature can be.
    BrighterThanExcitation {
        /// The given temperature, K.
        t_ex_k: f64,
    },
}

impl DeriveCaution {
    /// The short code of the tables.
    #[must_use]
    pub fn code(&self) -> &'static str {
        match self {
            Self::OddInput { .. } => "odd-input",
            Self::ErrorExceedsValue { .. } => "error-exceeds-value",
            Self::UnusedInput { .. } => "unused-input",
            Self::MassesDisagree { .. } => "masses-disagree",
            Self::DensityDisagrees { .. } => "density-disagrees",
            Self::OutwardSpeed { .. } => "outward-speed",
            Self::RateHoldsZero => "rate-holds-zero",
            Self::FasterThanFreeFall { .. } => "faster-than-free-fall",
            Self::NarrowerThanThermal { .. } => "narrower-than-thermal",
            Self::WideFieldAngles { .. } => "wide-field-angles",
            Self::BrighterThanExcitation { .. } => "brighter-than-excitation",
        }
    }

    /// The sentence for people.
    #[must_use]
    pub fn text(&self) -> String {
        match self {
            Self::OddInput {
                input,
                value,
                usual,
            } => format!(
                "{} of {value} {} lies outside the usual {} to {}: check its unit",
                input.key(),
                input.unit(),
                shown(usual.0),
                shown(usual.1)
            ),
            Self::ErrorExceedsValue { input } => format!(
                "{} has an error larger than its value: what follows from it is known to an order of magnitude at best",
                input.key()
            ),
            Self::UnusedInput { input, beside } => {
                format!("{} is not used: {beside} stands above it", input.key())
            }
            Self::MassesDisagree {
                taken_msun,
                dust_msun,
            } => format!(
                "the mass of {taken_msun:.3e} Msun and that of the dust, {dust_msun:.3e} Msun, differ by more than a factor of {DISAGREEMENT}"
            ),
            Self::DensityDisagrees {
                given_cm3,
                from_mass_cm3,
            } => format!(
                "n_h2_cm3 of {given_cm3:.3e} and the density at the radius from mass, radius and slope, {from_mass_cm3:.3e} cm-3, differ by more than a factor of {DISAGREEMENT}: n_h2_cm3 is the density at the radius, not the mean"
            ),
            Self::OutwardSpeed { v_in_km_s } => format!(
                "the adopted speed, {v_in_km_s:+.3} km/s, is outward: the mass rate is a loss, and there is no doubling time"
            ),
            Self::RateHoldsZero => {
                "the 95 % interval of the mass infall rate holds zero".to_owned()
            }
            Self::FasterThanFreeFall { ratio } => format!(
                "the inward speed is {ratio:.2} times the free-fall speed: gravity of the given mass cannot make it"
            ),
            Self::NarrowerThanThermal {
                sigma_km_s,
                thermal_km_s,
            } => format!(
                "the dispersion of {sigma_km_s:.3} km/s is below the thermal one at t_kin_k, {thermal_km_s:.3} km/s: the gas is colder"
            ),
            Self::WideFieldAngles { dispersion_deg } => format!(
                "field angles scatter by {dispersion_deg:.0} degrees; the relation for the field strength is good below {LARGEST_ANGLE_DISPERSION_DEG:.0}"
            ),
            Self::BrighterThanExcitation { t_ex_k } => format!(
                "the thin line is brighter than any layer at thin_t_ex_k, {t_ex_k:.1} K: no column density follows"
            ),
        }
    }
}

/// A limit to two digits.
fn shown(limit: f64) -> String {
    if (1e-2..1e4).contains(&limit) {
        format!("{}", (limit * 1e4).round() / 1e4)
    } else {
        format!("{limit:.1e}")
    }
}

/// Factor from which two values of one quantity are said to disagree.
pub(super) const DISAGREEMENT: f64 = 2.0;

/// How far an opacity may be from 0.1 cm2 g-1 (nu/1000 GHz)^1.8 before it is odd: a factor of 20. An
/// opacity per gram of dust alone is a hundred times too large.
const OPACITY_FACTOR: f64 = 20.0;

/// Cautions about what is given, before anything is computed.
pub(super) fn of_inputs(source: &SourceProperties, found: &mut Vec<DeriveCaution>) {
    for input in Input::ALL {
        let Some(given) = source.get(input) else {
            continue;
        };
        let mut usual = input.facts().usual;
        if let (Input::DustOpacity, Some(frequency)) = (input, source.get(Input::DustFrequency)) {
            let typical = 0.1 * (frequency.value / 1000.0).powf(1.8);
            usual = (typical / OPACITY_FACTOR, typical * OPACITY_FACTOR);
        }
        if !(usual.0..=usual.1).contains(&given.value) {
            found.push(DeriveCaution::OddInput {
                input,
                value: given.value,
                usual,
            });
        }
        if given.err > given.value && input != Input::Slope {
            found.push(DeriveCaution::ErrorExceedsValue { input });
        }
    }
    // a given field leaves the angles unused
    let angles = source
        .get(Input::AngleDispersion)
        .filter(|_| source.get(Input::Field).is_none());
    if let Some(angles) = angles.filter(|angles| angles.value > LARGEST_ANGLE_DISPERSION_DEG) {
        found.push(DeriveCaution::WideFieldAngles {
            dispersion_deg: angles.value,
        });
    }
}
