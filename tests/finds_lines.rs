//! Names become lines, and the built-in lines hold together.

use inrush::constants::{SPEED_OF_LIGHT_KM_S, photon_temperature_k};
use inrush::line::{
    Component, Line, LineError, TRANSITIONS, Transition, find, isotopologue_pair, search,
};

fn named(text: &str) -> Line {
    find(text).unwrap_or_else(|error| panic!("{text}: {error}"))
}

fn transitions_of(species: &str) -> impl Iterator<Item = &'static Transition> {
    TRANSITIONS
        .iter()
        .filter(move |transition| transition.species == species)
}

/// J of the upper level of a linear molecule's transition.
fn upper_j(transition: &Transition) -> Option<f64> {
    let (upper, lower) = transition.quantum_label.split_once('-')?;
    let (upper, lower): (u32, u32) = (upper.parse().ok()?, lower.parse().ok()?);
    (upper == lower + 1).then_some(f64::from(upper))
}

#[test]
fn one_line_in_many_spellings() {
    let cases: &[(&str, &[&str])] = &[
        (
            "HCO+ 1-0",
            &[
                "HCO+ 1-0",
                "hco+(1-0)",
                "HCO+ J=1-0",
                "HCO+(J=1-0)",
                "HCO+ (J = 1 - 0)",
                "HCO+ 1→0",
                "HCO+ 1->0",
                "HCO⁺ 1–0",
                "HCO$^+$ ($J$=1-0)",
                "  HCO+1-0\n",
            ],
        ),
        (
            "H13CO+ 1-0",
            &[
                "H13CO+ 1-0",
                "h13co+ j=1-0",
                "H¹³CO⁺ 1−0",
                "H^{13}CO^+ (1-0)",
            ],
        ),
        ("N2H+ 1-0", &["N2H+ (1-0)", "N₂H⁺ 1-0", "n2h+ 1-0"]),
        ("13CO 2-1", &["13CO 2-1", "¹³CO J=2→1"]),
        ("CO 3-2", &["co 3-2", "12CO(3-2)", "¹²CO 3-2"]),
        ("CS 2-1", &["Cs 2-1", "cs(2-1)"]),
        ("HCN 1-0", &["HCN J=1-0", "hcn 1-0"]),
        (
            "o-H2CO 2(1,2)-1(1,1)",
            &[
                "o-H2CO 2(1,2)-1(1,1)",
                "ortho-H2CO 2(12)-1(11)",
                "H₂CO 2₁₂–1₁₁",
                "H2CO 212-111",
            ],
        ),
        (
            "p-H2CO 3(0,3)-2(0,2)",
            &["p-H2CO 303-202", "para-H2CO 3_{03}-2_{02}"],
        ),
        (
            "CCH 1-0",
            &["CCH 1-0", "C2H 1-0", "C₂H N=1-0", "CCH 1-0 (3/2-1/2, 2-1)"],
        ),
    ];
    for (name, spellings) in cases {
        for spelling in *spellings {
            assert_eq!(named(spelling).name, *name, "{spelling}");
        }
    }
}

#[test]
fn every_listed_name_finds_its_own_transition() {
    for transition in TRANSITIONS {
        let line = named(&transition.name());
        assert_eq!(line.rest_frequency_ghz, transition.rest_frequency_ghz);
        assert_eq!(line.transition(), Some(transition));
    }
}

#[test]
fn an_unknown_name_gets_the_nearest_ones() {
    let error = find("HCP+ 1-0").unwrap_err();
    let LineError::Unknown { text, nearest } = &error else {
        panic!("{error:?}");
    };
    assert_eq!(text, "HCP+ 1-0");
    assert_eq!(nearest[0], "HCO+ 1-0");
    assert_eq!(nearest.len(), 3);
    assert!(error.to_string().contains("`HCP+ 1-0`"));
    assert!(error.hint().unwrap().contains("HCO+ 1-0"));
    // Another species that only begins like a known one.
    for text in ["CO2 1-0", "C2H5OH 1-0"] {
        let error = find(text).unwrap_err();
        assert!(matches!(error, LineError::Unknown { .. }), "{error:?}");
    }
}

#[test]
fn a_species_alone_gets_its_transitions() {
    let error = find("hco⁺").unwrap_err();
    assert_eq!(
        error,
        LineError::SpeciesOnly {
            text: "hco⁺".into(),
            transitions: vec!["HCO+ 1-0".into(), "HCO+ 3-2".into(), "HCO+ 4-3".into()],
        }
    );
    assert_eq!(error.hint().unwrap(), "use HCO+ 1-0, HCO+ 3-2 or HCO+ 4-3");
}

#[test]
fn states_that_are_not_built_in_get_those_that_are() {
    for text in ["HCO+ 2-1", "hco+(J=10-9)"] {
        let error = find(text).unwrap_err();
        let LineError::NoSuchTransition {
            species,
            transitions,
            ..
        } = &error
        else {
            panic!("{error:?}");
        };
        assert_eq!(*species, "HCO+");
        assert_eq!(transitions.len(), 3);
    }
}

#[test]
fn no_name_is_an_error() {
    for text in ["", "  ", "()"] {
        assert_eq!(find(text), Err(LineError::NoName));
    }
}

#[test]
fn search_lists_species_frequencies_and_fragments() {
    let names = |text: &str| -> Vec<String> { search(text).iter().map(|one| one.name()).collect() };
    assert_eq!(search("").len(), TRANSITIONS.len());
    assert_eq!(
        names("hco+"),
        [
            "HCO+ 1-0",
            "HCO+ 3-2",
            "HCO+ 4-3",
            "H13CO+ 1-0",
            "H13CO+ 3-2",
            "H13CO+ 4-3",
            "HC18O+ 1-0"
        ]
    );
    assert_eq!(names("93.17"), ["N2H+ 1-0"]);
    assert_eq!(
        names("H2CO"),
        ["o-H2CO 2(1,2)-1(1,1)", "p-H2CO 3(0,3)-2(0,2)"]
    );
    assert_eq!(names("N₂"), ["N2H+ 1-0", "N2H+ 3-2", "N2D+ 1-0"]);
    assert!(names("xyz").is_empty());
}

#[test]
fn no_rest_frequency_is_taken_as_exact() {
    for transition in TRANSITIONS {
        let name = transition.name();
        let systematic_km_s = transition.line().velocity_systematic_km_s();
        // From the best stated (CO 3-2, 0.5 kHz) to the worst disagreement (DCO+ 1-0, 42 kHz).
        assert!(
            (0.0004..0.175).contains(&systematic_km_s),
            "{name}: {systematic_km_s}"
        );
        assert!(!transition.source.is_empty(), "{name}");
    }
}

/// Stated: CO 0.5 kHz (CDMS), CCH 4 kHz (Sakai et al. 2010, A&A 512, A31, table 1). Between
/// databases: HCO+ and DCO+ (LAMDA against CDMS); between authors: N2H+ (Pagani et al. 2009,
/// arXiv:0811.3289).
#[test]
fn uncertainties_cover_what_sources_state_and_disagree_by() {
    for (name, khz) in [
        ("CO 1-0", 0.5),
        ("CO 3-2", 0.5),
        ("CCH 1-0", 4.0),
        ("N2H+ 1-0", 10.0),
    ] {
        let found_khz = named(name).rest_frequency_err_ghz * 1e6;
        assert!((found_khz - khz).abs() < 1e-9, "{name}: {found_khz}");
    }
    for (name, other_ghz) in [
        ("HCO+ 1-0", 89.188_523_0),
        ("HCO+ 3-2", 267.557_619_0),
        ("HCO+ 4-3", 356.734_288_0),
        ("DCO+ 1-0", 72.039_312_2),
    ] {
        let line = named(name);
        let difference_ghz = (line.rest_frequency_ghz - other_ghz).abs();
        let ratio = line.rest_frequency_err_ghz / difference_ghz;
        assert!((ratio - 1.0).abs() < 0.001, "{name}: {ratio}");
    }
}

/// An older data file has HCO+ 1-0 at 89.1883957 GHz.
#[test]
fn hco_plus_is_not_at_the_frequency_that_shifts_it() {
    let line = named("HCO+ 1-0");
    let shift_km_s = SPEED_OF_LIGHT_KM_S * (1.0 - 89.188_395_7 / line.rest_frequency_ghz);
    assert!((shift_km_s - 0.43).abs() < 0.005, "{shift_km_s}");
    assert!(line.velocity_systematic_km_s() < 0.01);
}

/// What the rotor formula nu = 2 B J - 4 D J^3 for J to J-1 (linear molecules, common practice)
/// puts at J = `third`, as weights of two other transitions' frequencies: nu/J is linear in J^2.
fn rotor_weights(first: f64, second: f64, third: f64) -> (f64, f64) {
    let share = (third.powi(2) - first.powi(2)) / (second.powi(2) - first.powi(2));
    (third / first * (1.0 - share), third / second * share)
}

#[test]
fn frequencies_of_a_linear_molecule_obey_the_rotor_formula() {
    let mut checked = 0;
    for species in [
        "HCO+", "H13CO+", "DCO+", "HCN", "H13CN", "HNC", "CS", "C34S", "CO", "13CO", "C18O",
    ] {
        let lines: Vec<(f64, Line)> = transitions_of(species)
            .map(|one| (upper_j(one).expect("linear"), one.line()))
            .collect();
        for three in lines.windows(3) {
            let [(j1, one), (j2, two), (j3, last)] = three else {
                unreachable!()
            };
            let (weight1, weight2) = rotor_weights(*j1, *j2, *j3);
            let miss_ghz = last.rest_frequency_ghz
                - weight1 * one.rest_frequency_ghz
                - weight2 * two.rest_frequency_ghz;
            let err_ghz = last
                .rest_frequency_err_ghz
                .hypot(weight1 * one.rest_frequency_err_ghz)
                .hypot(weight2 * two.rest_frequency_err_ghz);
            println!("{species} {miss_ghz:.9} +- {err_ghz:.9} GHz");
            assert!(
                miss_ghz.abs() < 2.0 * err_ghz,
                "{species}: {miss_ghz} +- {err_ghz} GHz"
            );
            checked += 1;
        }
    }
    assert_eq!(checked, 13);
}

/// The same formula tells which of two databases' HCO+ 4-3 goes with their 1-0 and 3-2.
#[test]
fn the_adopted_hco_plus_frequencies_are_the_consistent_set() {
    let (weight1, weight3) = rotor_weights(1.0, 3.0, 4.0);
    let miss_khz = |ghz: [f64; 3]| (ghz[2] - weight1 * ghz[0] - weight3 * ghz[1]) * 1e6;
    let adopted_khz =
        miss_khz(["HCO+ 1-0", "HCO+ 3-2", "HCO+ 4-3"].map(|name| named(name).rest_frequency_ghz));
    let other_khz = miss_khz([89.188_523_0, 267.557_619_0, 356.734_288_0]);
    assert!(adopted_khz.abs() < 6.0, "{adopted_khz}");
    assert!((other_khz - 71.0).abs() < 1.0, "{other_khz}");
}

/// `E_u` = (h nu/k)(J+1)/2 for a rigid rotor; centrifugal distortion is far below 0.3 %, and the
/// listed values are rounded to 0.1 K at worst.
#[test]
fn upper_energies_are_those_of_a_rotor() {
    let mut checked = 0;
    for transition in TRANSITIONS {
        let (Some(j), Some(energy_k)) = (upper_j(transition), transition.upper_energy_k) else {
            continue;
        };
        let rotor_k = photon_temperature_k(transition.rest_frequency_ghz) * (j + 1.0) / 2.0;
        assert!(
            (energy_k - rotor_k).abs() < 0.003 * rotor_k + 0.05,
            "{}: {energy_k} K, rotor {rotor_k} K",
            transition.name()
        );
        checked += 1;
    }
    assert_eq!(checked, 22);
}

/// A is proportional to nu^3 J/(2J+1) within a linear molecule (common practice).
#[test]
fn einstein_coefficients_scale_as_those_of_a_rotor() {
    for species in ["HCO+", "H13CO+", "DCO+", "HCN", "CS", "CO", "C18O"] {
        let reduced: Vec<f64> = transitions_of(species)
            .map(|one| {
                let j = upper_j(one).expect("linear");
                let rate_per_s = one.einstein_a_per_s.expect("listed");
                rate_per_s / (one.rest_frequency_ghz.powi(3) * j / (2.0 * j + 1.0))
            })
            .collect();
        for value in &reduced[1..] {
            let ratio = value / reduced[0];
            assert!((ratio - 1.0).abs() < 0.004, "{species}: {ratio}");
        }
    }
}

#[test]
fn weights_of_every_multiplet_sum_to_one() {
    let mut multiplets = Vec::new();
    for transition in TRANSITIONS {
        let line = transition.line();
        let sum: f64 = line.components.iter().map(|one| one.weight).sum();
        assert!((sum - 1.0).abs() < 1e-15, "{}: {sum}", line.name);
        if line.components != [Component::SINGLE] {
            multiplets.push((line.name, line.components.len()));
        }
    }
    let expected = [("HCN 1-0", 3), ("H13CN 1-0", 3), ("N2H+ 1-0", 7)];
    assert_eq!(
        multiplets,
        expected.map(|(name, components)| (name.to_owned(), components))
    );
}

/// Frequencies without hyperfine splitting are the weighted means of the components'.
#[test]
fn a_multiplets_centre_is_its_rest_frequency() {
    for transition in TRANSITIONS.iter().filter(|one| !one.hyperfine.is_empty()) {
        let line = transition.line();
        let centre_km_s: f64 = line
            .components
            .iter()
            .map(|one| one.weight * one.offset_km_s)
            .sum();
        assert!(
            centre_km_s.abs() < line.velocity_systematic_km_s(),
            "{}: {centre_km_s} km/s",
            line.name
        );
    }
}

#[test]
fn a_multiplet_keeps_its_frequencies_at_another_rest_frequency() {
    let frequency_ghz = |line: &Line, component: &Component| {
        line.rest_frequency_ghz * (1.0 - component.offset_km_s / SPEED_OF_LIGHT_KM_S)
    };
    let usual = named("N2H+ 1-0");
    let referred = usual.with_rest_frequency(93.176_265_0, None).unwrap();
    assert_eq!(referred.name, usual.name);
    for (before, after) in usual.components.iter().zip(&referred.components) {
        let change_ghz = frequency_ghz(&referred, after) - frequency_ghz(&usual, before);
        assert!(change_ghz.abs() < 1e-12, "{change_ghz}");
        assert!((before.weight - after.weight).abs() < 1e-15);
    }
    assert!(referred.components[6].offset_km_s.abs() < 1e-9);

    // A single line moves with its rest frequency.
    let moved = named("CO 1-0")
        .with_rest_frequency(115.2713, Some(1e-6))
        .unwrap();
    assert_eq!(moved.components, [Component::SINGLE]);
    assert_eq!(moved.rest_frequency_ghz, 115.2713);
    assert_eq!(moved.rest_frequency_err_ghz, 1e-6);
}

#[test]
fn isotopologues_in_the_same_transition_are_known() {
    let prior_of = |thick: &str, thin: &str| {
        isotopologue_pair(&named(thick), &named(thin))
            .map(|pair| pair.prior.map(|prior| prior.ratio))
    };
    // 12C/13C about 68 (Milam et al. 2005, doi:10.1086/497123, from memory).
    for (thick, thin) in [
        ("HCO+ 1-0", "H13CO+ 1-0"),
        ("HCN 3-2", "H13CN 3-2"),
        ("HNC 1-0", "HN13C 1-0"),
        ("CO 2-1", "13CO 2-1"),
    ] {
        assert_eq!(prior_of(thick, thin), Some(Some(68.0)), "{thick}, {thin}");
    }
    for (thick, thin) in [
        ("HCO+ 1-0", "HC18O+ 1-0"),
        ("H13CO+ 1-0", "HC18O+ 1-0"),
        ("CO 1-0", "C18O 1-0"),
        ("13CO 1-0", "C18O 1-0"),
        ("C18O 2-1", "C17O 2-1"),
        ("CS 2-1", "C34S 2-1"),
    ] {
        assert_eq!(prior_of(thick, thin), Some(None), "{thick}, {thin}");
    }
    for (thick, thin, why_not) in [
        ("HCO+ 3-2", "H13CO+ 1-0", "another transition"),
        ("H13CO+ 1-0", "HCO+ 1-0", "the rarer one is the thick line"),
        ("HCO+ 1-0", "HCO+ 1-0", "the same species"),
        ("HCO+ 1-0", "DCO+ 1-0", "a ratio set by chemistry"),
        ("N2H+ 1-0", "N2D+ 1-0", "a ratio set by chemistry"),
        ("HCN 1-0", "HN13C 1-0", "isomers"),
        ("HCO+ 1-0", "N2H+ 1-0", "unrelated"),
    ] {
        assert_eq!(prior_of(thick, thin), None, "{thick}, {thin}: {why_not}");
    }
}

#[test]
fn a_line_of_ones_own_is_taken() {
    let line = Line::custom(" SiO 2-1 ", 86.847, Some(5e-5), None).unwrap();
    assert_eq!(line.name, "SiO 2-1");
    assert_eq!(line.components, [Component::SINGLE]);
    assert!((line.velocity_systematic_km_s() - 0.172_6).abs() < 1e-4);
    assert_eq!(line.transition(), None);

    let parts = [(4.8, 3.0), (0.0, 5.0), (-7.1, 1.0)].map(|(offset_km_s, weight)| Component {
        offset_km_s,
        weight,
    });
    let multiplet = Line::custom("triplet", 86.0, None, Some(parts.to_vec())).unwrap();
    assert_eq!(multiplet.components[1].weight, 5.0 / 9.0);
    // Not stated: that of a quoted frequency.
    assert!((multiplet.velocity_systematic_km_s() - 0.021).abs() < 1e-12);
}

#[test]
fn a_line_of_ones_own_is_checked() {
    let one = |offset_km_s, weight| {
        Some(vec![Component {
            offset_km_s,
            weight,
        }])
    };
    let refused = |frequency_ghz, err_ghz, components| {
        Line::custom("line", frequency_ghz, err_ghz, components).unwrap_err()
    };
    for frequency_ghz in [0.0, -89.0, 0.5, 89_188.5, f64::NAN, f64::INFINITY] {
        let error = refused(frequency_ghz, None, None);
        assert!(matches!(error, LineError::Frequency { .. }), "{error:?}");
    }
    for err_ghz in [-1e-6, 1.0, f64::NAN] {
        let error = refused(89.0, Some(err_ghz), None);
        assert!(matches!(error, LineError::Uncertainty { .. }), "{error:?}");
    }
    for weight in [0.0, -1.0, f64::NAN, f64::INFINITY] {
        let error = refused(89.0, None, one(0.0, weight));
        assert!(
            matches!(error, LineError::Weight { component: 1, .. }),
            "{error:?}"
        );
    }
    for offset_km_s in [2e3, f64::NAN] {
        let error = refused(89.0, None, one(offset_km_s, 1.0));
        assert!(
            matches!(error, LineError::Offset { component: 1, .. }),
            "{error:?}"
        );
    }
    for found in [0, 65] {
        let error = refused(89.0, None, Some(vec![Component::SINGLE; found]));
        assert_eq!(error, LineError::ComponentCount { found });
    }
    assert_eq!(Line::custom(" ", 89.0, None, None), Err(LineError::NoName));
}

#[test]
fn messages_say_what_was_found_and_expected() {
    let error = Line::custom("line", 89_188.5, None, None).unwrap_err();
    assert_eq!(
        error.to_string(),
        "rest frequency 89188.5 GHz, expected 1 to 10000 GHz"
    );
    assert_eq!(
        error.hint().unwrap(),
        "give the rest frequency in GHz, not in MHz or Hz"
    );
}
