//! Published numbers, redone: each check names the source of the number it checks against.
//!
//! "astropy 8.0.2" values are computed with that version of the library (CODATA 2022, IAU 2015).

use inrush::constants::{
    ATOMIC_MASS, BOLTZMANN, Constant, FWHM_PER_SIGMA, GRAVITATION, HYDROGEN_MASS, PARSEC, PLANCK,
    SOLAR_MASS, SPEED_OF_LIGHT, SPEED_OF_LIGHT_KM_S, YEAR, photon_temperature_k,
};
use inrush::line::{Line, find};
use statrs::distribution::{Binomial, DiscreteCDF};
use statrs::statistics::Distribution;

/// Two roundings of a double.
const ROUNDING: f64 = 4.5e-16;

fn relative_difference(found: f64, expected: f64) -> f64 {
    (found / expected - 1.0).abs()
}

fn named(name: &str) -> Line {
    find(name).unwrap_or_else(|error| panic!("{name}: {error}"))
}

/// Values and uncertainties of `astropy.constants` 8.0.2.
#[test]
fn constants_are_those_of_astropy() {
    let cases: [(Constant, f64, f64); 7] = [
        (PLANCK, 6.626_070_15e-34, 0.0),
        (BOLTZMANN, 1.380_649e-23, 0.0),
        (SPEED_OF_LIGHT, 299_792_458.0, 0.0),
        (GRAVITATION, 6.6743e-11, 1.5e-15),
        (ATOMIC_MASS, 1.660_539_068_92e-27, 5.2e-37),
        (
            SOLAR_MASS,
            1.988_409_870_698_051e30,
            4.468_805_426_856_864e25,
        ),
        (PARSEC, 3.085_677_581_491_367e16, 0.0),
    ];
    for (constant, value, uncertainty) in cases {
        assert_eq!(constant.value, value, "{}", constant.name);
        assert_eq!(constant.uncertainty, uncertainty, "{}", constant.name);
    }
}

/// Definitions behind the derived constants: IAU 2015 Resolutions B2 and B3, IAU 2012 Resolution B2
/// (astronomical unit); relative mass of hydrogen-1 from memory of the atomic mass evaluation.
#[test]
fn derived_constants_follow_from_their_definitions() {
    let solar_mass_kg = 1.327_124_4e20 / GRAVITATION.value;
    assert!(relative_difference(SOLAR_MASS.value, solar_mass_kg) < ROUNDING);
    let relative_uncertainty = SOLAR_MASS.uncertainty / SOLAR_MASS.value;
    let of_gravitation = GRAVITATION.uncertainty / GRAVITATION.value;
    assert!(relative_difference(relative_uncertainty, of_gravitation) < ROUNDING);

    let parsec_m = 648_000.0 / std::f64::consts::PI * 149_597_870_700.0;
    assert!(relative_difference(PARSEC.value, parsec_m) < ROUNDING);

    let hydrogen_kg = 1.007_825_032_23 * ATOMIC_MASS.value;
    assert!(relative_difference(HYDROGEN_MASS.value, hydrogen_kg) < ROUNDING);

    assert_eq!(YEAR.value, 365.25 * 86_400.0);
}

/// astropy 8.0.2: one solar mass a year is 6.300890659296178e22 kg/s.
#[test]
fn a_solar_mass_a_year_is_that_of_astropy() {
    let found_kg_per_s = SOLAR_MASS.value / YEAR.value;
    assert!(relative_difference(found_kg_per_s, 6.300_890_659_296_178e22) < ROUNDING);
}

/// astropy 8.0.2: h/k is 0.04799243073366221 K/GHz; at HCO+ 1-0 4.280374093902271 K.
#[test]
fn photon_temperatures_are_those_of_astropy() {
    for (frequency_ghz, expected_k) in [
        (1.0, 0.047_992_430_733_662_21),
        (89.188_524_7, 4.280_374_093_902_271),
    ] {
        let found_k = photon_temperature_k(frequency_ghz);
        assert!(
            relative_difference(found_k, expected_k) < ROUNDING,
            "{found_k}"
        );
    }
}

/// Area of a Gaussian over peak times FWHM: sqrt(pi/(4 ln 2)) = 1.0644670194. Lopez-Sepulcre et al.
/// 2010, A&A 517, A66, table A.3, HCO+ 1-0: peak 11.2 K and FWHM 3.7 km/s go with 44.1 K km/s.
#[test]
fn a_published_gaussian_has_its_published_integral() {
    let factor = std::f64::consts::TAU.sqrt() / FWHM_PER_SIGMA;
    assert!((factor - 1.064_467_019_4).abs() < 5e-11, "{factor}");
    let integral_k_km_s = factor * 11.2 * 3.7;
    assert!((integral_k_km_s - 44.11).abs() < 0.005, "{integral_k_km_s}");
}

/// Wu & Evans 2003 (abstract, astro-ph/0306543): 12 blue and 6 red of 28, 11 blue and 3 red of 18
/// two-peak lines. The chances of as many blue or more are scipy 1.17.1's `binomtest`.
#[test]
fn chances_of_a_blue_majority_are_those_of_scipy() {
    for (blue, red, expected) in [
        (12, 6, 0.118_942_260_742_187_5),
        (11, 3, 0.028_686_523_437_5),
    ] {
        let binomial = Binomial::new(0.5, blue + red).expect("a probability");
        let found = binomial.sf(blue - 1);
        assert!((found - expected).abs() < 1e-13, "{blue}, {red}: {found}");
    }
}

/// Jackson et al. 2019 (abstract, arXiv:1811.05545): of 1093 clumps a fraction of 0.607 +- 0.015 has a
/// positive asymmetry; sqrt(p(1-p)/N) is 0.01477.
#[test]
fn a_published_fraction_has_its_published_error() {
    let binomial = Binomial::new(0.607, 1093).expect("a probability");
    let error = binomial.std_dev().expect("finite") / 1093.0;
    assert!((error - 0.014_77).abs() < 5e-6, "{error}");
}

/// Frequencies (MHz) as published and offsets from F = 2-1 worked out from them: LAMDA's
/// hyperfine file of HCN (Schoier et al. 2005, A&A 432, 369).
#[test]
fn hcn_components_lie_at_their_published_frequencies() {
    let line = named("HCN 1-0");
    assert_eq!(line.rest_frequency_ghz, 88.631_602_2);
    check_multiplet(
        &line,
        88_631.847_5,
        &[
            (88_630.415_6, 3.0 / 9.0, 4.8433),
            (88_631.847_5, 5.0 / 9.0, 0.0),
            (88_633.935_7, 1.0 / 9.0, -7.0632),
        ],
    );
}

/// Frequencies (MHz) as in Caselli, Myers & Thaddeus 1995 (from memory), weights (2F+1)/27 exact,
/// offsets from F1 F = 2 3-1 2 worked out from them.
#[test]
fn n2h_plus_components_lie_at_their_published_frequencies() {
    let line = named("N2H+ 1-0");
    assert_eq!(line.rest_frequency_ghz, 93.173_397_7);
    check_multiplet(
        &line,
        93_173.776_7,
        &[
            (93_171.621_0, 1.0 / 27.0, 6.936),
            (93_171.916_8, 5.0 / 27.0, 5.984),
            (93_172.053_3, 3.0 / 27.0, 5.545),
            (93_173.479_6, 5.0 / 27.0, 0.956),
            (93_173.776_7, 7.0 / 27.0, 0.0),
            (93_173.966_6, 3.0 / 27.0, -0.611),
            (93_176.265_0, 3.0 / 27.0, -8.006),
        ],
    );
}

/// Frequencies (MHz) computed with a quadrupole coupling from memory, 2 kHz.
#[test]
fn h13cn_components_lie_at_their_computed_frequencies() {
    let line = named("H13CN 1-0");
    let expected = [
        (86_338.734_5, 3.0 / 9.0),
        (86_340.166_8, 5.0 / 9.0),
        (86_342.255_3, 1.0 / 9.0),
    ];
    check_frequencies(&line, &expected);
}

fn check_frequencies(line: &Line, expected: &[(f64, f64)]) {
    assert_eq!(line.components.len(), expected.len());
    for (component, (frequency_mhz, weight)) in line.components.iter().zip(expected) {
        let found_mhz =
            line.rest_frequency_ghz * 1e3 * (1.0 - component.offset_km_s / SPEED_OF_LIGHT_KM_S);
        // The last digit given is 0.1 kHz.
        assert!((found_mhz - frequency_mhz).abs() < 1e-8, "{found_mhz}");
        assert!((component.weight - weight).abs() < 1e-15);
    }
}

/// Frequencies and weights, and the offsets after the line is referred to one component.
fn check_multiplet(line: &Line, reference_mhz: f64, expected: &[(f64, f64, f64)]) {
    let frequencies: Vec<(f64, f64)> = expected.iter().map(|row| (row.0, row.1)).collect();
    check_frequencies(line, &frequencies);
    let referred = line
        .with_rest_frequency(reference_mhz * 1e-3, None)
        .expect("a valid rest frequency");
    for (component, (_, _, offset_km_s)) in referred.components.iter().zip(expected) {
        let difference = component.offset_km_s - offset_km_s;
        assert!(difference.abs() < 6e-4, "{difference}");
    }
}
