//! Molecular data in LAMDA format: what the built-in files hold, and what damaged ones are told.

#![allow(clippy::unwrap_used)]

use inrush::sphere::{Molecule, Partner, SphereError, ortho_share};

const SMALL: &str = "!MOLECULE
test rotor
!MOLECULAR WEIGHT
30.0
!NUMBER OF ENERGY LEVELS
3
!LEVEL + ENERGIES(cm^-1) + WEIGHT + J
1 0.0 1.0 0
2 3.0 3.0 1
3 9.0 5.0 2
!NUMBER OF RADIATIVE TRANSITIONS
2
!TRANS + UP + LOW + EINSTEINA(s^-1) + FREQ(GHz) + E_u(K)
1 2 1 1.0D-05 90.0 4.3
2 3 2 1.0E-04 180.0 12.9
!NUMBER OF COLL PARTNERS
1
!COLLISIONS BETWEEN
1 rotor - H2
!NUMBER OF COLL TRANS
3
!NUMBER OF COLL TEMPS
2
!COLL TEMPS
10.0 20.0
!TRANS + UP + LOW + COLLRATES(cm^3 s^-1)
1 2 1 1.0e-10 3.0e-10
2 3 1 2.0e-10 2.0e-10
3 3 2 4.0e-10 4.0e-10
";

fn refused(text: &str) -> (String, Option<String>) {
    let error = Molecule::parse(text, "rotor.dat").unwrap_err();
    assert!(matches!(error, SphereError::Molecule { .. }), "{error:?}");
    (error.to_string(), error.hint())
}

#[test]
fn built_in_files_hold_what_their_text_states() {
    // counts, Einstein coefficients and frequencies as printed in the files
    for (name, levels, a, ghz, partners) in [
        ("HCO+", 31, 4.2512e-5, 89.188_523, vec![Partner::Hydrogen]),
        (
            "HCN",
            26,
            2.407e-5,
            88.631_602_2,
            vec![Partner::Hydrogen, Partner::Other],
        ),
        (
            "CS",
            31,
            1.749e-6,
            48.990_954_9,
            vec![Partner::ParaHydrogen, Partner::OrthoHydrogen],
        ),
    ] {
        let molecule = Molecule::built_in(name).unwrap();
        assert_eq!(molecule.levels.len(), levels, "{name}");
        assert_eq!(molecule.radiative.len(), levels - 1);
        assert_eq!(molecule.radiative[0].einstein_a_per_s, a);
        assert_eq!(molecule.radiative[0].frequency_ghz, ghz);
        assert_eq!(molecule.transition_at(ghz * 1.000_01).unwrap(), 0);
        let found: Vec<_> = molecule.collisions.iter().map(|one| one.partner).collect();
        assert_eq!(found, partners);
    }
    assert_eq!(
        Molecule::built_in("CO").unwrap_err().to_string(),
        "no collision data of `CO` are built in, expected one of HCO+, HCN, CS"
    );
}

#[test]
fn rates_are_interpolated_and_upward_ones_follow_from_detailed_balance() {
    let molecule = Molecule::parse(SMALL, "rotor.dat").unwrap();
    assert_eq!(molecule.radiative[0].einstein_a_per_s, 1e-5);
    for (temperature, rate) in [
        (5.0, 1e-10),
        (10.0, 1e-10),
        (15.0, 2e-10),
        (20.0, 3e-10),
        (90.0, 3e-10),
    ] {
        let rates = molecule.collision_rates(1e4, temperature).unwrap();
        assert!(
            (rates[3] / (1e4 * rate) - 1.0).abs() < 1e-12,
            "{temperature}"
        );
        // 3 cm^-1 h c/k = 4.316 K
        let upward = 3.0 * (-4.316_330_6 / temperature).exp();
        assert!(
            (rates[1] / rates[3] / upward - 1.0).abs() < 1e-6,
            "{temperature}"
        );
    }
}

#[test]
fn hydrogen_is_para_when_cold() {
    // 3 at high temperature; 9 exp(-170.5/T) below
    assert!(ortho_share(10.0) < 1e-6);
    assert!((ortho_share(30.0) - 0.0297).abs() < 1e-4);
    assert_eq!(ortho_share(300.0), 0.75);
    let cs = Molecule::built_in("CS").unwrap();
    let rates = cs.collision_rates(1.0, 10.1).unwrap();
    // CS 2-1 (J) with para-H2 at 10.1 K as printed: 4.690e-11
    assert!((rates[2 * 31 + 1] / 4.690e-11 - 1.0).abs() < 1e-4);
}

#[test]
fn fewer_levels_keep_their_own_transitions_only() {
    let two = Molecule::parse(SMALL, "rotor.dat")
        .unwrap()
        .lowest_levels(2);
    assert_eq!((two.levels.len(), two.radiative.len()), (2, 1));
    assert_eq!(two.collisions[0].levels, [(1, 0)]);
    assert_eq!(two.collisions[0].rates_cm3_per_s, [1e-10, 3e-10]);
}

#[test]
fn damaged_files_are_refused_with_the_line() {
    let (message, hint) = refused("");
    assert_eq!(
        message,
        "rotor.dat:1: the file ends, expected a comment line that starts with `!`"
    );
    assert!(hint.unwrap().contains("LAMDA"));
    for (from, to, expected) in [
        (
            "30.0",
            "heavy",
            "rotor.dat:4: `heavy`, expected the molecular weight",
        ),
        (
            "\n3\n!LEVEL",
            "\n4\n!LEVEL",
            "rotor.dat:11: `!NUMBER`, expected level 4 of 4: number, energy in cm^-1, weight",
        ),
        (
            "2 3.0 3.0 1",
            "3 3.0 3.0 1",
            "rotor.dat:9: level 3, expected level 2 of 3: number, energy in cm^-1, weight",
        ),
        (
            "2 3 2 1.0E-04 180.0",
            "2 4 2 1.0E-04 180.0",
            "rotor.dat:15: `4`, expected a level from 1 to 3",
        ),
        (
            "2 3 2 1.0E-04",
            "2 3 2 NaN",
            "rotor.dat:15: `NaN`, expected radiative transition 2 of 2: number, upper and lower level, A in s^-1, frequency in GHz",
        ),
        (
            "1 rotor - H2",
            "rotor - H2",
            "rotor.dat:19: `rotor`, expected a collision partner's number: 1 H2, 2 para-H2, 3 ortho-H2, 4 electrons, 5 H, 6 He, 7 H+",
        ),
        (
            "10.0 20.0",
            "20.0 10.0",
            "rotor.dat:25: `20.0 10.0`, expected 2 ascending temperatures in K",
        ),
        (
            "2 3 1 2.0e-10 2.0e-10",
            "2 3 1 2.0e-10",
            "rotor.dat:28: `2 3 1 2.0e-10`, expected collision 2 of 3: number, upper and lower level, 2 rates in cm^3 s^-1",
        ),
        (
            "3 3 2 4.0e-10 4.0e-10\n",
            "",
            "rotor.dat:29: the file ends, expected collision 3 of 3: number, upper and lower level, 2 rates in cm^3 s^-1",
        ),
    ] {
        assert!(SMALL.contains(from));
        assert_eq!(refused(&SMALL.replacen(from, to, 1)).0, expected);
    }
}

#[test]
fn every_shortened_file_is_refused_or_whole() {
    let text = include_str!("../src/sphere/data/cs.dat");
    for end in (0..text.len()).step_by(997) {
        assert!(
            Molecule::parse(&text[..end], "cs.dat").is_err(),
            "{end} bytes"
        );
    }
}
