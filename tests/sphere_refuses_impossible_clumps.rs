//! Clumps, shells and beams that cannot be are refused with what was found and what was expected.

#![allow(clippy::unwrap_used)]

use inrush::line::Component;
use inrush::sphere::{
    Beam, Clump, EquilibriumSettings, Fineness, LineField, Molecule, Populations, ShellTable,
    Shells, SphereError, emergent, solve,
};

fn clump() -> Clump {
    Clump {
        inner_radius_pc: 0.01,
        outer_radius_pc: 0.2,
        n_h2_cm3: 1e4,
        density_slope: 1.5,
        t_kin_k: 12.0,
        temperature_slope: 0.2,
        v_in_km_s: 0.1,
        velocity_slope: 0.5,
        sigma_km_s: 0.3,
        abundance: 1e-9,
    }
}

fn message(clump: Clump) -> String {
    Shells::of_clump(&clump, 4).unwrap_err().to_string()
}

#[test]
fn every_property_of_a_clump_has_its_range() {
    let good = clump();
    assert!(good.checked().is_ok());
    let cases = [
        (
            Clump {
                inner_radius_pc: 0.0,
                ..good
            },
            "inner_radius_pc 0, expected more than 0",
        ),
        (
            Clump {
                outer_radius_pc: 0.01,
                ..good
            },
            "outer_radius_pc 0.01, expected more than the inner radius",
        ),
        (
            Clump {
                n_h2_cm3: -1.0,
                ..good
            },
            "n_h2_cm3 -1, expected more than 0",
        ),
        (
            Clump {
                density_slope: 5.5,
                ..good
            },
            "density_slope 5.5, expected -5 to 5",
        ),
        (
            Clump {
                t_kin_k: 2.0,
                ..good
            },
            "t_kin_k 2, expected 2.72548 (the background) to 10000",
        ),
        (
            Clump {
                temperature_slope: f64::NAN,
                ..good
            },
            "temperature_slope NaN, expected -2 to 2",
        ),
        (
            Clump {
                v_in_km_s: 101.0,
                ..good
            },
            "v_in_km_s 101, expected -100 to 100",
        ),
        (
            Clump {
                velocity_slope: -3.0,
                ..good
            },
            "velocity_slope -3, expected -2 to 2",
        ),
        (
            Clump {
                sigma_km_s: 0.0,
                ..good
            },
            "sigma_km_s 0, expected more than 0",
        ),
        (
            Clump {
                abundance: 1.5,
                ..good
            },
            "abundance 1.5, expected above 0, at most 1",
        ),
        (
            Clump {
                n_h2_cm3: f64::INFINITY,
                ..good
            },
            "n_h2_cm3 inf, expected more than 0",
        ),
    ];
    for (clump, expected) in cases {
        assert_eq!(message(clump), expected);
    }
}

#[test]
fn columns_of_a_table_of_shells_go_together() {
    let table = ShellTable {
        edge_pc: vec![0.01, 0.1, 0.2],
        n_h2_cm3: vec![1e5, 1e4],
        t_kin_k: vec![12.0, 10.0],
        v_in_km_s: vec![0.2, -0.1],
        sigma_km_s: vec![0.3, 0.3],
        abundance: vec![1e-9, 1e-9],
    };
    assert!(Shells::of_table(table.clone()).is_ok());
    let short = ShellTable {
        t_kin_k: vec![12.0],
        ..table.clone()
    };
    let error = Shells::of_table(short).unwrap_err();
    assert_eq!(error.to_string(), "1 values of t_kin_k, expected 2");
    assert!(error.hint().unwrap().contains("one edge more"));
    let crossed = ShellTable {
        edge_pc: vec![0.01, 0.3, 0.2],
        ..table
    };
    let error = Shells::of_table(crossed).unwrap_err();
    assert_eq!(
        error.to_string(),
        "edge_pc 0.2, expected more than the edge before"
    );
}

#[test]
fn beams_settings_and_lines_that_are_none_are_refused() {
    let shells = Shells::of_clump(&clump(), 4).unwrap();
    let molecule = Molecule::built_in("HCO+").unwrap();
    let populations = Populations::thermal(&shells, &molecule);
    let field = LineField::new(&shells, &molecule, 0, &populations);
    let seen = |beam: Beam| {
        emergent(
            &shells,
            &field,
            &[Component::SINGLE],
            beam,
            &[0.0],
            &Fineness::default(),
        )
    };
    let nothing = Beam::Gaussian {
        fwhm_pc: 0.0,
        offset_pc: 0.0,
    };
    assert_eq!(
        seen(nothing).unwrap_err().to_string(),
        "fwhm_pc 0, expected more than 0"
    );
    // beside the clump there is nothing to see
    assert_eq!(seen(Beam::Pencil { offset_pc: 0.3 }).unwrap(), [0.0]);
    let settings = EquilibriumSettings {
        levels: 1,
        ..EquilibriumSettings::default()
    };
    let error = solve(&shells, &molecule, &settings, None).unwrap_err();
    assert_eq!(error.to_string(), "levels 1, expected 2 or more");
    let error = molecule.transition_at(100.0).unwrap_err();
    assert!(matches!(
        error,
        SphereError::NoTransition {
            nearest_ghz: 89.188_523,
            ..
        }
    ));
}
