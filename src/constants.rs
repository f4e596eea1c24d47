//! Physical constants, each with its unit, uncertainty and source.
//!
//! CODATA 2022 values: Mohr, Newell, Taylor & Tiesinga 2025, Rev. Mod. Phys. 97, 025002.
//! Nominal solar values: IAU 2015 Resolution B3; parsec: IAU 2015 Resolution B2.

/// A constant of nature: it cannot exist without an uncertainty and a reference.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Constant {
    /// What it is, in words.
    pub name: &'static str,
    /// Its value in [`Constant::unit`].
    pub value: f64,
    /// Its unit.
    pub unit: &'static str,
    /// Its standard uncertainty in the same unit; zero where it is exact by definition.
    pub uncertainty: f64,
    /// Where the value comes from.
    pub reference: &'static str,
}

/// Speed of light in vacuum.
pub const SPEED_OF_LIGHT: Constant = Constant {
    name: "speed of light in vacuum",
    value: 299_792_458.0,
    unit: "m s-1",
    uncertainty: 0.0,
    reference: "CODATA 2022 (exact, SI)",
};

/// Planck constant.
pub const PLANCK: Constant = Constant {
    name: "Planck constant",
    value: 6.626_070_15e-34,
    unit: "J s",
    uncertainty: 0.0,
    reference: "CODATA 2022 (exact, SI)",
};

/// Boltzmann constant.
pub const BOLTZMANN: Constant = Constant {
    name: "Boltzmann constant",
    value: 1.380_649e-23,
    unit: "J K-1",
    uncertainty: 0.0,
    reference: "CODATA 2022 (exact, SI)",
};

/// Temperature of the cosmic microwave background.
pub const BACKGROUND_TEMPERATURE: Constant = Constant {
    name: "temperature of the cosmic microwave background",
    value: 2.725_48,
    unit: "K",
    uncertainty: 0.000_57,
    reference: "Fixsen 2009, ApJ 707, 916, doi:10.1088/0004-637X/707/2/916",
};

/// Speed of light in km/s, the unit of every velocity here.
pub const SPEED_OF_LIGHT_KM_S: f64 = SPEED_OF_LIGHT.value * 1e-3;

/// FWHM of a Gaussian over its standard deviation, sqrt(8 ln 2).
pub const FWHM_PER_SIGMA: f64 = 2.354_820_045_030_949_3;

/// h nu / k of a frequency, in K.
///
/// ```
/// let kelvin = inrush::constants::photon_temperature_k(89.1885247);
/// assert!((kelvin - 4.280374093902271).abs() < 1e-12); // astropy 8.0.2
/// ```
#[must_use]
pub fn photon_temperature_k(frequency_ghz: f64) -> f64 {
    PLANCK.value * 1e9 / BOLTZMANN.value * frequency_ghz
}
