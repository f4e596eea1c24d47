//! Published numbers, redone: each check names the source of the number it checks against.
//!
//! "astropy 8.0.2" values are computed with that version of the library (CODATA 2022, IAU 2015).

use inrush::constants::{
    ATOMIC_MASS, BOLTZMANN, Constant, FWHM_PER_SIGMA, GRAVITATION, HYDROGEN_MASS, PARSEC, PLANCK,
    SOLAR_MASS, SPEED_OF_LIGHT, SPEED_OF_LIGHT_KM_S, YEAR, photon_temperature_k,
};
use inrush::derive::{
    Emitter, alfven_speed_km_s, column_density_cm2, doubling_time_yr, dust_mass_msun,
    field_from_angles_ug, free_fall_speed_km_s, free_fall_time_yr, isothermal_rate_msun_yr,
    mass_density_g_cm3, mass_rate_from_density_msun_yr, mass_rate_from_mass_msun_yr, mass_to_flux,
    mean_h2_density_cm3, planck_w_m2_hz_sr, sound_speed_km_s, thermal_dispersion_km_s,
    virial_parameter,
};
use inrush::line::{Line, find};

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

/// Wu & Evans 2003 (abstract, astro-ph/0306543): 12 blue and 6 red of 28 cores, an excess of 0.21; 11 blue and 3
/// red of 18 two-peak lines, 0.44. The chances of as many blue or more are scipy 1.17.1's `binomtest`.
#[test]
fn blue_excesses_and_chances_of_a_blue_majority_are_those_published() {
    use inrush::rank::{Profile, SourceFacts, sample};
    for (all, blue, red, excess, chance) in [
        (28, 12, 6, 0.214, 0.118_942_260_742_187_5),
        (18, 11, 3, 0.444, 0.028_686_523_437_5),
    ] {
        let facts: Vec<SourceFacts> = (0..all)
            .map(|index| SourceFacts {
                line_pair: "thick / thin".to_owned(),
                group: None,
                profile: match index {
                    _ if index < blue => Profile::Blue,
                    _ if index < blue + red => Profile::Red,
                    _ => Profile::Neither,
                },
                delta_v: None,
                asymmetry: None,
            })
            .collect();
        let found = &sample(&facts, &[], 1).line_pairs[0];
        // three decimals are given
        assert!((found.excess.expect("detected") - excess).abs() < 5e-4);
        assert!((found.chance_blue - chance).abs() < 1e-13);
    }
}

/// Jackson et al. 2019 (abstract, arXiv:1811.05545): of 1093 clumps a fraction of 0.607 +- 0.015 has a
/// positive asymmetry; sqrt(p(1-p)/N) is 0.01477. Wilson's interval of 663 of 1093 is as wide.
#[test]
fn a_published_fraction_has_its_published_error() {
    use inrush::numeric::samples::{ONE_SIGMA, wilson_interval};
    let error = (0.607_f64 * 0.393 / 1093.0).sqrt();
    assert!((error - 0.014_77).abs() < 5e-6, "{error}");
    let [low, high] = wilson_interval(663, 1093, ONE_SIGMA).expect("tries");
    // of order 1/N narrower than the normal one
    assert!(
        (0.5 * (high - low) / error - 1.0).abs() < 1e-3,
        "{low} {high}"
    );
    assert!(low < 0.607 && 0.607 < high);
}

/// Myers et al. 1996 (abstract, doi:10.1086/310146): mass infall rates within a factor of about 2 of sigma^3/G,
/// which is plain arithmetic.
#[test]
fn a_published_rate_is_the_cube_of_a_dispersion_over_g() {
    use inrush::derive::isothermal_rate_msun_yr;
    // Shu's 0.975 a^3/G is one of them: 0.2 km/s cubed over G is 1.9023e-6 solar masses a year
    let rate = isothermal_rate_msun_yr(0.2) / 0.975;
    assert!((rate / 1.9023e-6 - 1.0).abs() < 5e-5, "{rate}");
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

/// Plain arithmetic with CODATA 2022, IAU 2015 masses and m_H = 1.673532840653e-27 kg, done outside
/// this program to ten digits.
#[test]
fn rates_times_and_speeds_of_collapse_are_plain_arithmetic() {
    for (found, expected, digits) in [
        // 4 pi R^2 n mu m_H v: 0.1 pc, 1e5 cm-3, mu = 2.8, 0.5 km/s
        (
            mass_rate_from_density_msun_yr(0.1, 1e5, 0.5),
            4.449_090_972e-4,
            10,
        ),
        // 3 M v/R: 1000 Msun, 0.5 pc, 1 km/s
        (
            mass_rate_from_mass_msun_yr(1000.0, 0.5, 0.0, 1.0),
            6.136_272_990e-3,
            10,
        ),
        // 1e5 cm-3, mu = 2.8
        (free_fall_time_yr(1e5), 97_242.83, 7),
        // 100 Msun, 0.1 pc
        (free_fall_speed_km_s(100.0, 0.1), 2.932_888, 7),
    ] {
        assert_eq!(digits_of(found, digits), digits_of(expected, digits));
    }
}

/// A number rounded to significant digits.
fn digits_of(number: f64, digits: usize) -> String {
    format!("{number:.*e}", digits - 1)
}

/// Peretto et al. 2013, A&A 555, A112 (abstract): 2.5e-3 Msun/yr over a free-fall time of 3e5 yr bring
/// in 750 Msun.
#[test]
fn a_published_rate_brings_in_its_published_mass() {
    assert!(relative_difference(doubling_time_yr(750.0, 2.5e-3), 3e5) < ROUNDING);
}

/// Shu 1977: 0.975 a^3/G = 4.36e-6 (T/20 K)^1.5 Msun/yr with mu = 2.33. Today's constants give 4.369e-6:
/// the published number is within one of its last digit.
#[test]
fn the_rate_of_an_isothermal_sphere_is_that_of_shu() {
    for (temperature_k, factor) in [(20.0, 1.0), (80.0, 8.0), (5.0, 0.125)] {
        let found = isothermal_rate_msun_yr(sound_speed_km_s(temperature_k));
        let off = found / factor - 4.36e-6;
        assert!(off.abs() < 0.01e-6, "{temperature_k} K: {found}");
    }
}

/// astropy 8.0.2, `BlackBody`, W m-2 Hz-1 sr-1.
#[test]
fn planck_functions_are_those_of_astropy() {
    for (frequency_ghz, temperature_k, expected) in [
        (89.188_524_7, 2.725, 2.745_373_302_917_225_6e-18),
        (89.188_524_7, 2.7255, 2.746_372_259_419_671_7e-18),
        (89.188_524_7, 5.0, 7.726_521_121_478_568e-18),
        (89.188_524_7, 10.0, 1.958_088_573_661_002_2e-17),
        (89.188_524_7, 15.0, 3.167_698_330_456_583e-17),
        (89.188_524_7, 20.0, 4.383_466_806_625_823e-17),
        (89.188_524_7, 50.0, 1.170_409_398_522_522e-16),
        (93.173_397_7, 2.725, 2.866_910_321_628_471e-18),
        (93.173_397_7, 2.7255, 2.867_981_068_363_78e-18),
        (93.173_397_7, 5.0, 8.249_886_574_541_028e-18),
        (93.173_397_7, 10.0, 2.115_161_430_825_306e-17),
        (93.173_397_7, 15.0, 3.434_051_175_655_014_5e-17),
        (93.173_397_7, 20.0, 4.760_269_779_315_715_6e-17),
        (93.173_397_7, 50.0, 1.274_855_704_351_978_8e-16),
        (97.980_953_3, 2.725, 3.004_677_621_976_789e-18),
        (97.980_953_3, 2.7255, 3.005_835_141_648_826_4e-18),
        (97.980_953_3, 5.0, 8.884_154_441_755_405e-18),
        (97.980_953_3, 10.0, 2.310_208_241_467_953e-17),
        (97.980_953_3, 15.0, 3.767_004_550_106_603e-17),
        (97.980_953_3, 20.0, 5.232_753_422_648_971_6e-17),
        (97.980_953_3, 50.0, 1.406_511_011_206_243_5e-16),
        (115.271_201_8, 2.725, 3.414_009_462_963_748e-18),
        (115.271_201_8, 2.7255, 3.415_473_524_555_57e-18),
        (115.271_201_8, 5.0, 1.116_078_732_388_388_7e-17),
        (115.271_201_8, 10.0, 3.056_753_880_461_726e-17),
        (115.271_201_8, 15.0, 5.063_609_187_999_015e-17),
        (115.271_201_8, 20.0, 7.087_537_436_801_986e-17),
        (115.271_201_8, 50.0, 1.930_350_696_636_104_3e-16),
        (267.557_625_9, 2.725, 2.560_557_900_336_134e-18),
        (267.557_625_9, 2.7255, 2.562_792_464_865_677_7e-18),
        (267.557_625_9, 5.0, 2.345_365_763_098_049e-17),
        (267.557_625_9, 10.0, 1.081_523_820_275_003_8e-16),
        (267.557_625_9, 15.0, 2.086_067_026_644_246_7e-16),
        (267.557_625_9, 20.0, 3.136_795_478_102_613_4e-16),
        (267.557_625_9, 50.0, 9.645_330_110_682_401e-16),
        (356.734_223, 2.725, 1.252_909_315_053_884_3e-18),
        (356.734_223, 2.7255, 1.254_356_945_911_718_4e-18),
        (356.734_223, 5.0, 2.254_196_125_089_552_7e-17),
        (356.734_223, 10.0, 1.474_318_882_820_829_5e-16),
        (356.734_223, 15.0, 3.141_120_598_389_686e-16),
        (356.734_223, 20.0, 4.944_557_069_041_256e-16),
        (356.734_223, 50.0, 1.639_299_483_951_246e-15),
    ] {
        let found = planck_w_m2_hz_sr(frequency_ghz, temperature_k);
        // The library cancels exp(x) - 1 at low x, which costs it two digits.
        assert!(relative_difference(found, expected) < 1e-13, "{found}");
    }
}

/// The same quantities with units by astropy 8.0.2 and m_H = 1.673532840653e-27 kg.
#[test]
fn support_and_field_are_those_of_astropy() {
    for (found, expected) in [
        (mass_density_g_cm3(1e5), 4.685_891_953_828_4e-19),
        (mean_h2_density_cm3(350.0, 0.3), 44_696.927_976_712_9),
        (sound_speed_km_s(20.0), 0.266_110_223_099_439),
        (thermal_dispersion_km_s(18.0, 30.0), 0.070_630_571_041_483_6),
        (virial_parameter(0.7, 0.3, 350.0), 0.488_267_936_384_250_7),
        (
            dust_mass_msun(1.0, 1.0, 0.01, 230.0, 20.0),
            19.659_938_472_396_05,
        ),
        (field_from_angles_ug(1e4, 0.5, 10.0), 109.916_706_871_114_6),
        (alfven_speed_km_s(100.0, 1e4), 1.303_163_575_949_055_4),
        (mass_to_flux(100.0, 0.3, 100.0), 1.198_933_700_876_544_5),
    ] {
        assert!(
            relative_difference(found, expected) < 1e-12,
            "{found} {expected}"
        );
    }
}

/// The equation of Mangum & Shirley 2015 written out with numpy 2.4.6 and a rigid rotor's partition
/// function: H13CO+ 1-0 with tau = 0.147, sigma = 0.7 km/s, T_ex = 11 K.
#[test]
fn a_column_density_is_that_of_a_rigid_rotor() {
    let emitter = Emitter::of(&named("H13CO+ 1-0")).expect("a linear molecule");
    let found = column_density_cm2(&emitter, 0.147, 0.7, 11.0);
    // the tabulated partition function is a rigid rotor's within 0.1 %
    assert!(
        relative_difference(found, 2.428_047_904_494e12) < 1e-3,
        "{found}"
    );
}
