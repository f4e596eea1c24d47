//! Derived quantities: intervals hold the truth as often as they say, errors are correlated through the
//! distance, and what is missing or impossible is said.
#![allow(clippy::unwrap_used)]

use inrush::derive::{
    DeriveCaution, Derived, FitDraws, Input, Lack, MassSource, Quantity, RateFormula, Sampled,
    SourceProperties, Tracers, alfven_speed_km_s, column_density_cm2, sample,
};
use inrush::derive::{Emitter, free_fall_speed_km_s, mass_rate_from_mass_msun_yr};
use inrush::line::{Line, find};
use inrush::model::{Model, RadiationTemperature};
use inrush::numeric::Estimate;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal, Uniform};

fn lines() -> (Line, Line) {
    (find("HCO+ 1-0").unwrap(), find("H13CO+ 1-0").unwrap())
}

fn source(inputs: &[(Input, f64, f64)]) -> SourceProperties {
    let mut source = SourceProperties::default();
    for (input, value, err) in inputs.iter().copied() {
        source.set(input, Estimate { value, err }).unwrap();
    }
    source
}

fn normal(generator: &mut ChaCha8Rng) -> f64 {
    StandardNormal.sample(generator)
}

/// A fit of exact values, or with normal errors.
fn fit(parameters: &[(&str, f64, f64)], rows: usize, seed: u64) -> FitDraws {
    let mut generator = ChaCha8Rng::seed_from_u64(seed);
    parameters
        .iter()
        .fold(FitDraws::new(rows), |draws, (name, value, err)| {
            let column = (0..rows)
                .map(|_| value + err * normal(&mut generator))
                .collect();
            draws.with(name, *value, column).unwrap()
        })
}

fn sampled(source: &SourceProperties, fit: &FitDraws, model: Option<Model>) -> Sampled {
    let (thick, thin) = lines();
    let tracers = Tracers {
        thick: &thick,
        thin: &thin,
        model,
    };
    sample(source, fit, &tracers, 7).unwrap()
}

fn derived(inputs: &[(Input, f64, f64)], parameters: &[(&str, f64, f64)]) -> Derived {
    sampled(&source(inputs), &fit(parameters, 2000, 1), None).derived()
}

fn value(derived: &Derived, quantity: Quantity) -> f64 {
    derived
        .get(quantity)
        .unwrap_or_else(|| panic!("{quantity:?}"))
        .value
}

/// How measurements scatter about a truth: by a factor that is log-normal, or by a normal error.
#[derive(Clone, Copy, Debug)]
enum Scatter {
    Factor,
    Sum,
}

impl Scatter {
    /// A measured value and its stated error; `share` is the standard deviation over the mean.
    fn measure(self, truth: f64, share: f64, generator: &mut ChaCha8Rng) -> (f64, f64) {
        match self {
            Self::Factor => {
                // such that the truth, seen from the measured value, is log-normal with that value
                // as its mean and share of it as its standard deviation
                let variance = (share * share).ln_1p();
                let z = normal(generator);
                let measured = truth * (0.5 * variance + variance.sqrt() * z).exp();
                (measured, share * measured)
            }
            Self::Sum => (truth * (1.0 + share * normal(generator)), share * truth),
        }
    }
}

/// How often 68 and 95 % intervals of rate and free-fall speed hold the truth, in 1000 sources.
fn coverage(scatter: Scatter) -> [[f64; 2]; 2] {
    const SOURCES: u32 = 1000;
    let mut generator = ChaCha8Rng::seed_from_u64(2026);
    let mut held = [[0_u32; 2]; 2];
    for number in 0..SOURCES {
        let mut between = |low: f64, high: f64| -> f64 {
            let logarithm = Uniform::new(low.ln(), high.ln()).unwrap();
            logarithm.sample(&mut generator).exp()
        };
        let (distance, radius) = (between(0.5, 8.0), between(0.1, 1.0));
        let (mass, v_in) = (between(30.0, 5000.0), between(0.1, 1.0));
        let slope = 1.6;
        let g = &mut generator;
        let (d, d_err) = scatter.measure(distance, 0.10, g);
        // an angle and a flux are what is observed: radius and mass are worked out with the measured
        // distance
        let factor = d / distance;
        let (r, r_err) = scatter.measure(radius * factor, 0.08, g);
        let (m, m_err) = scatter.measure(mass * factor * factor, 0.20, g);
        let p = slope + 0.1 * normal(g);
        let v = v_in + 0.1 * v_in * normal(g);
        let given = source(&[
            (Input::Distance, d, d_err),
            (Input::Radius, r, r_err),
            (Input::Mass, m, m_err),
            (Input::Slope, p, 0.1),
        ]);
        let draws = fit(&[("v_in_km_s", v, 0.1 * v_in)], 2000, u64::from(number));
        let (thick, thin) = lines();
        let tracers = Tracers {
            thick: &thick,
            thin: &thin,
            model: None,
        };
        let derived = sample(&given, &draws, &tracers, u64::from(number))
            .unwrap()
            .derived();
        let truths = [
            (
                Quantity::MassRate,
                mass_rate_from_mass_msun_yr(mass, radius, slope, v_in),
            ),
            (Quantity::FreeFallSpeed, free_fall_speed_km_s(mass, radius)),
        ];
        for ((quantity, truth), held) in truths.into_iter().zip(&mut held) {
            let spread = derived.get(quantity).unwrap();
            for ([low, high], held) in [spread.interval68, spread.interval95].into_iter().zip(held)
            {
                *held += u32::from(low.unwrap() <= truth && truth <= high.unwrap());
            }
        }
    }
    held.map(|both| both.map(|count| 100.0 * f64::from(count) / f64::from(SOURCES)))
}

#[test]
fn intervals_hold_the_truth_as_often_as_they_say() {
    for scatter in [Scatter::Factor, Scatter::Sum] {
        let shares = coverage(scatter);
        println!("{scatter:?}: rate and free-fall speed, 68 and 95 %: {shares:?}");
        for [in68, in95] in shares {
            // 1000 sources: one standard deviation is 1.5 and 0.7 %
            assert!((in68 - 68.0).abs() <= 3.0, "{scatter:?}: {shares:?}");
            assert!((in95 - 95.0).abs() <= 2.0, "{scatter:?}: {shares:?}");
        }
    }
}

/// Standard deviation of logarithms.
fn log_deviation(sampled: &Sampled, quantity: Quantity) -> f64 {
    let logarithms: Vec<f64> = sampled
        .get(quantity)
        .unwrap()
        .draws
        .iter()
        .map(|x| x.ln())
        .collect();
    let mean = logarithms.iter().sum::<f64>() / logarithms.len() as f64;
    let square = logarithms.iter().map(|x| (x - mean).powi(2)).sum::<f64>();
    (square / logarithms.len() as f64).sqrt()
}

/// Powers of the distance: rate 1, free-fall speed 1/2, free-fall time 1/2, virial parameter -1, doubling
/// time 1. Plain algebra of R ~ d, M ~ d^2, n ~ 1/d.
#[test]
fn one_distance_enters_everything_it_touches() {
    let share = 0.1_f64;
    let width = (share * share).ln_1p().sqrt();
    let exact = |input| (input, 1.0, 0.0);
    let mass = [
        (Input::Distance, 2.0, 2.0 * share),
        (Input::Radius, 0.3, 0.0),
        (Input::Mass, 350.0, 0.0),
        (Input::Slope, 1.5, 0.0),
        (Input::Kinetic, 18.0, 0.0),
        exact(Input::DustFlux),
        (Input::DustFrequency, 230.0, 0.0),
        (Input::DustTemperature, 18.0, 0.0),
        (Input::DustOpacity, 0.007, 0.0),
    ];
    let speeds = [("v_in_km_s", 0.3, 0.0), ("sigma_km_s", 0.7, 0.0)];
    let from_mass = sampled(&source(&mass), &fit(&speeds, 4000, 1), None);
    for (quantity, power) in [
        (Quantity::MassDust, 2.0),
        (Quantity::Mass, 2.0),
        (Quantity::MeanDensity, 1.0),
        (Quantity::MassRate, 1.0),
        (Quantity::FreeFallSpeed, 0.5),
        (Quantity::FreeFallTime, 0.5),
        (Quantity::DoublingTime, 1.0),
        (Quantity::Virial, 1.0),
        (Quantity::Mach, 0.0),
    ] {
        let found = log_deviation(&from_mass, quantity);
        // the same deviates: exact but for their own scatter, 1.1 %
        assert!(
            (found - power * width).abs() < 0.03 * width,
            "{quantity:?}: {}",
            found / width
        );
    }
    let density = [
        (Input::Distance, 2.0, 2.0 * share),
        (Input::Radius, 0.3, 0.0),
        (Input::Density, 2e4, 0.0),
        (Input::Slope, 1.5, 0.0),
    ];
    let from_density = sampled(&source(&density), &fit(&speeds, 4000, 1), None);
    for (quantity, power) in [(Quantity::MassRate, 1.0), (Quantity::Mass, 2.0)] {
        let found = log_deviation(&from_density, quantity);
        assert!(
            (found - power * width).abs() < 0.03 * width,
            "{quantity:?}: {}",
            found / width
        );
    }
}

#[test]
fn draws_of_a_fit_keep_their_correlation() {
    // speed and dispersion that move together: their ratio to the rate of a^3/G is narrower than
    // independent ones would make it
    let rows = 2000;
    let mut generator = ChaCha8Rng::seed_from_u64(3);
    let common: Vec<f64> = (0..rows).map(|_| 0.1 * normal(&mut generator)).collect();
    let column = |value: f64| common.iter().map(|z| value * z.exp()).collect();
    let draws = FitDraws::new(rows)
        .with("v_in_km_s", 0.3, column(0.3))
        .unwrap()
        .with("sigma_km_s", 0.7, column(0.7))
        .unwrap();
    let given = source(&[
        (Input::Mass, 100.0, 0.0),
        (Input::Radius, 0.3, 0.0),
        (Input::Slope, 2.0, 0.0),
    ]);
    let sampled = sampled(&given, &draws, None);
    let rate = &sampled.get(Quantity::MassRate).unwrap().draws;
    for (rate, z) in rate.iter().zip(&common) {
        let expected = mass_rate_from_mass_msun_yr(100.0, 0.3, 2.0, 0.3 * z.exp());
        assert!((rate / expected - 1.0).abs() < 1e-14);
    }
}

#[test]
fn expansion_is_a_loss_without_a_doubling_time() {
    let given = [
        (Input::Mass, 100.0, 10.0),
        (Input::Radius, 0.3, 0.0),
        (Input::Slope, 2.0, 0.0),
    ];
    let inward = derived(&given, &[("v_in_km_s", 0.2, 0.0)]);
    let outward = derived(&given, &[("v_in_km_s", -0.2, 0.0)]);
    let (rate, loss) = (
        value(&inward, Quantity::MassRate),
        value(&outward, Quantity::MassRate),
    );
    assert_eq!(rate, -loss);
    assert!(inward.get(Quantity::DoublingTime).is_some());
    assert!(outward.get(Quantity::DoublingTime).is_none());
    let codes: Vec<&str> = outward.cautions.iter().map(DeriveCaution::code).collect();
    assert_eq!(codes, ["outward-speed"]);
    // a speed that may be zero: the time may be infinite
    let open = derived(&given, &[("v_in_km_s", 0.2, 0.15)]);
    let time = open.get(Quantity::DoublingTime).unwrap();
    assert!(time.interval68[0].is_some() && time.interval95[1].is_none());
    assert_eq!(open.cautions[0].code(), "rate-holds-zero");
}

fn needed(derived: &Derived, quantity: Quantity) -> Vec<&'static str> {
    let missing = derived.missing();
    let lack = missing
        .iter()
        .find(|(_, quantities)| quantities.contains(&quantity));
    lack.map_or(Vec::new(), |(lack, _): &(Lack, _)| lack.names())
}

#[test]
fn a_missing_input_is_named_with_what_it_would_fill() {
    let speeds = [("v_in_km_s", 0.3, 0.01), ("sigma_km_s", 0.7, 0.01)];
    let found = derived(
        &[(Input::Mass, 350.0, 90.0), (Input::Radius, 0.3, 0.0)],
        &speeds,
    );
    assert!(found.get(Quantity::FreeFallSpeed).is_some());
    assert_eq!(needed(&found, Quantity::MassRate), ["density_slope"]);
    assert_eq!(needed(&found, Quantity::DoublingTime), ["density_slope"]);
    assert_eq!(needed(&found, Quantity::Mach), ["t_kin_k"]);
    assert_eq!(needed(&found, Quantity::Virial), ["t_kin_k"]);
    assert_eq!(
        needed(&found, Quantity::Field),
        ["field_ug (or angle_dispersion_deg)"]
    );
    // a mass is there: dust is not asked for
    assert!(needed(&found, Quantity::MassDust).is_empty());
    let begun = derived(
        &[(Input::DustFlux, 1.0, 0.1), (Input::Radius, 0.3, 0.0)],
        &speeds,
    );
    assert_eq!(
        needed(&begun, Quantity::FreeFallSpeed),
        [
            "distance_kpc",
            "dust_freq_ghz",
            "dust_temperature_k",
            "dust_kappa_cm2_g"
        ]
    );
    let nothing = derived(&[], &[]);
    assert_eq!(
        needed(&nothing, Quantity::MassRate),
        [
            "radius_pc",
            "mass_msun (or a dust flux)",
            "density_slope",
            "an inward speed"
        ]
    );
    assert!(
        Quantity::ALL
            .iter()
            .all(|quantity| nothing.get(*quantity).is_none())
    );
    // the same with a density
    let dense = derived(
        &[(Input::Density, 1e5, 0.0), (Input::Radius, 0.1, 0.0)],
        &speeds,
    );
    assert_eq!(dense.rate_from, Some(RateFormula::Density));
    assert_eq!(dense.mass_from, None);
    let given = [
        (Input::Density, 1e5, 0.0),
        (Input::Radius, 0.1, 0.0),
        (Input::Slope, 1.0, 0.0),
    ];
    assert_eq!(
        derived(&given, &speeds).mass_from,
        Some(MassSource::Density)
    );
}

#[test]
fn two_ways_to_a_mass_and_a_density_are_compared() {
    let dust = [
        (Input::Distance, 1.0, 0.0),
        (Input::DustFlux, 1.0, 0.0),
        (Input::DustFrequency, 230.0, 0.0),
        (Input::DustTemperature, 20.0, 0.0),
        (Input::DustOpacity, 0.01, 0.0),
    ];
    // astropy 8.0.2: 19.66 solar masses
    let alone = derived(&dust, &[]);
    assert_eq!(alone.mass_from, Some(MassSource::Dust));
    assert!((value(&alone, Quantity::Mass) / 19.66 - 1.0).abs() < 1e-3);
    for (mass, codes) in [(25.0, vec![]), (50.0, vec!["masses-disagree"])] {
        let mut both = dust.to_vec();
        both.push((Input::Mass, mass, 0.0));
        let found = derived(&both, &[]);
        assert_eq!(value(&found, Quantity::Mass), mass);
        assert!((value(&found, Quantity::MassDust) / 19.66 - 1.0).abs() < 1e-3);
        let found: Vec<&str> = found.cautions.iter().map(DeriveCaution::code).collect();
        assert_eq!(found, codes);
    }
    // the mean density, 4.47e4, in the place of that at the radius, 1.49e4
    let given = [
        (Input::Mass, 350.0, 0.0),
        (Input::Radius, 0.3, 0.0),
        (Input::Slope, 2.0, 0.0),
        (Input::Density, 4.47e4, 0.0),
    ];
    let found = derived(&given, &[]);
    assert_eq!(found.cautions[0].code(), "density-disagrees");
}

#[test]
fn odd_inputs_and_results_are_cautioned() {
    let codes =
        |inputs: &[(Input, f64, f64)], parameters: &[(&str, f64, f64)]| -> Vec<&'static str> {
            derived(inputs, parameters)
                .cautions
                .iter()
                .map(DeriveCaution::code)
                .collect()
        };
    assert_eq!(codes(&[(Input::Mass, 3e5, 0.0)], &[]), ["odd-input"]);
    assert_eq!(
        codes(&[(Input::Mass, 350.0, 400.0)], &[]),
        ["error-exceeds-value"]
    );
    // an opacity per gram of dust alone
    let opacity = [
        (Input::DustOpacity, 0.9, 0.0),
        (Input::DustFrequency, 230.0, 0.0),
    ];
    assert_eq!(codes(&opacity, &[]), ["odd-input"]);
    let opacity = [
        (Input::DustOpacity, 0.009, 0.0),
        (Input::DustFrequency, 230.0, 0.0),
    ];
    assert!(codes(&opacity, &[]).is_empty());
    assert_eq!(
        codes(&[(Input::AngleDispersion, 30.0, 0.0)], &[]),
        ["wide-field-angles"]
    );
    assert!(codes(&[(Input::AngleDispersion, 20.0, 0.0)], &[]).is_empty());
    let field = [
        (Input::AngleDispersion, 30.0, 0.0),
        (Input::Field, 100.0, 0.0),
    ];
    assert_eq!(codes(&field, &[]), ["unused-input"]);
    let light = [(Input::Mass, 1.0, 0.0), (Input::Radius, 0.3, 0.0)];
    assert_eq!(
        codes(&light, &[("v_in_km_s", 0.3, 0.0)]),
        ["faster-than-free-fall"]
    );
    // 0.0706 km/s is H13CO+'s thermal dispersion at 18 K
    let cold = [(Input::Kinetic, 18.0, 0.0)];
    assert_eq!(
        codes(&cold, &[("sigma_km_s", 0.06, 0.0)]),
        ["narrower-than-thermal"]
    );
    assert!(codes(&cold, &[("sigma_km_s", 0.08, 0.0)]).is_empty());
    let bright = [("sigma_km_s", 0.7, 0.0), ("peak_thin_k", 9.0, 0.0)];
    assert_eq!(
        codes(&[(Input::ThinExcitation, 8.0, 0.0)], &bright),
        ["brighter-than-excitation"]
    );
}

#[test]
fn a_field_from_angles_gives_back_the_ratio_of_the_relation() {
    // v_A = Q sigma_nt/sigma_phi, whatever the density: Davis, Chandrasekhar & Fermi's relation
    let given = [
        (Input::Mass, 350.0, 0.0),
        (Input::Radius, 0.3, 0.0),
        (Input::Kinetic, 18.0, 0.0),
        (Input::AngleDispersion, 12.0, 0.0),
    ];
    let found = derived(&given, &[("sigma_km_s", 0.7, 0.0), ("v_in_km_s", 0.3, 0.0)]);
    let expected = 0.5 * value(&found, Quantity::NonThermal) / 12.0_f64.to_radians();
    assert!((value(&found, Quantity::AlfvenSpeed) / expected - 1.0).abs() < 1e-13);
    assert!((value(&found, Quantity::AlfvenRatio) - 0.3 / expected).abs() < 1e-13);
    let (field, density) = (
        value(&found, Quantity::Field),
        value(&found, Quantity::MeanDensity),
    );
    assert!((alfven_speed_km_s(field, density) / expected - 1.0).abs() < 1e-13);
}

#[test]
fn virial_parts_add_up() {
    let given = [
        (Input::Mass, 350.0, 90.0),
        (Input::Radius, 0.3, 0.0),
        (Input::Kinetic, 18.0, 0.0),
    ];
    let found = derived(&given, &[("sigma_km_s", 0.7, 0.0)]);
    let parts = value(&found, Quantity::VirialThermal) + value(&found, Quantity::VirialNonThermal);
    assert!((value(&found, Quantity::Virial) / parts - 1.0).abs() < 1e-14);
}

#[test]
fn columns_are_those_of_the_models_layers() {
    let (thick, thin) = lines();
    let (thick_emitter, thin_emitter) = (Emitter::of(&thick).unwrap(), Emitter::of(&thin).unwrap());
    let column = |parameters: &[(&str, f64, f64)], model, quantity| {
        let found = sampled(
            &source(&[(Input::ThinExcitation, 11.0, 0.0)]),
            &fit(parameters, 100, 1),
            model,
        );
        found.get(quantity).map(|drawn| drawn.value)
    };
    let two = [
        ("sigma_km_s", 0.7, 0.0),
        ("tau", 2.0, 0.0),
        ("t_front_k", 6.0, 0.0),
        ("t_rear_k", 20.0, 0.0),
    ];
    let expected = column_density_cm2(&thick_emitter, 2.0, 0.7, 6.0)
        + column_density_cm2(&thick_emitter, 2.0, 0.7, 20.0);
    assert_eq!(
        column(&two, Some(Model::TwoLayer), Quantity::ColumnThick),
        Ok(expected)
    );
    let radiation = RadiationTemperature::new(thick.rest_frequency_ghz);
    let t_ex = radiation.inverse(0.5 * (radiation.at(16.0) + radiation.background()));
    let thin_radiation = RadiationTemperature::new(thin.rest_frequency_ghz);
    let peak_k =
        (thin_radiation.at(11.0) - thin_radiation.background()) * (1.0 - (-0.147_f64).exp());
    let hill = [
        ("sigma_km_s", 0.7, 0.0),
        ("tau", 5.0, 0.0),
        ("t_peak_k", 16.0, 0.0),
        ("peak_thin_k", peak_k, 0.0),
    ];
    let expected = column_density_cm2(&thick_emitter, 10.0, 0.7, t_ex);
    assert_eq!(
        column(&hill, Some(Model::Hill), Quantity::ColumnThick),
        Ok(expected)
    );
    // the peak of a layer of depth 0.147 at 11 K
    let layer = column_density_cm2(&thin_emitter, 0.147, 0.7, 11.0);
    let from_peak = column(&hill, Some(Model::Hill), Quantity::ColumnThin).unwrap();
    assert!(
        (from_peak / layer - 1.0).abs() < 1e-12,
        "{}",
        from_peak / layer
    );
    let linked = [
        ("sigma_km_s", 0.7, 0.0),
        ("tau", 5.0, 0.0),
        ("isotope_ratio", 68.0, 0.0),
        ("t_ex_thin_k", 11.0, 0.0),
    ];
    let expected = column_density_cm2(&thin_emitter, 10.0 / 68.0, 0.7, 11.0);
    let found = column(&linked, Some(Model::Hill), Quantity::ColumnThin).unwrap();
    assert!((found / expected - 1.0).abs() < 1e-14);
}

#[test]
fn the_same_seed_gives_the_same_bits_and_another_seed_other_draws() {
    let given = source(&[
        (Input::Mass, 350.0, 90.0),
        (Input::Radius, 0.3, 0.03),
        (Input::Slope, 1.6, 0.2),
    ]);
    let draws = fit(&[("v_in_km_s", 0.3, 0.01)], 500, 1);
    let (thick, thin) = lines();
    let tracers = Tracers {
        thick: &thick,
        thin: &thin,
        model: None,
    };
    let once = sample(&given, &draws, &tracers, 7).unwrap();
    let here = std::thread::scope(|scope| {
        let again = || sample(&given, &draws, &tracers, 7).unwrap();
        [scope.spawn(again), scope.spawn(again)].map(|thread| thread.join().unwrap())
    });
    assert!(here.iter().all(|again| *again == once));
    assert_ne!(sample(&given, &draws, &tracers, 8).unwrap(), once);
}

#[test]
fn draws_of_unequal_length_are_refused() {
    let error = FitDraws::new(3)
        .with("v_in_km_s", 0.3, vec![0.3; 2])
        .unwrap_err();
    assert_eq!(error.to_string(), "2 draws of v_in_km_s, expected 3");
}
