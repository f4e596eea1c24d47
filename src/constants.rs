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

/// Newtonian constant of gravitation.
pub const GRAVITATION: Constant = Constant {
    name: "Newtonian constant of gravitation",
    value: 6.674_3e-11,
    unit: "m3 kg-1 s-2",
    uncertainty: 1.5e-15,
    reference: "CODATA 2022",
};

/// Solar mass: the nominal G M of the Sun over G, so its uncertainty is that of G.
pub const SOLAR_MASS: Constant = Constant {
    name: "solar mass",
    value: 1.988_409_870_698_051e30,
    unit: "kg",
    uncertainty: 4.468_805_426_856_864e25,
    reference: "IAU 2015 Resolution B3 (G M = 1.3271244e20 m3 s-2) with G of CODATA 2022",
};

/// Parsec, 648000/pi astronomical units.
pub const PARSEC: Constant = Constant {
    name: "parsec",
    value: 3.085_677_581_491_367e16,
    unit: "m",
    uncertainty: 0.0,
    reference: "IAU 2015 Resolution B2 note 4 (exact)",
};

/// Atomic mass constant, a twelfth of the mass of carbon-12.
pub const ATOMIC_MASS: Constant = Constant {
    name: "atomic mass constant",
    value: 1.660_539_068_92e-27,
    unit: "kg",
    uncertainty: 5.2e-37,
    reference: "CODATA 2022",
};

/// Mass of the hydrogen-1 atom: 1.00782503223 atomic mass constants.
pub const HYDROGEN_MASS: Constant = Constant {
    name: "mass of the hydrogen atom",
    value: 1.673_532_840_653_473e-27,
    unit: "kg",
    uncertainty: 5.2e-37,
    reference: "relative mass 1.00782503223 (atomic mass evaluation, from memory) times the atomic mass constant of CODATA 2022",
};

/// Julian year of 365.25 days of 86400 s.
pub const YEAR: Constant = Constant {
    name: "Julian year",
    value: 31_557_600.0,
    unit: "s",
    uncertainty: 0.0,
    reference: "IAU (1976) System of Astronomical Constants (exact)",
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
