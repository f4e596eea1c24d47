//! Level populations in statistical equilibrium: limits that can be written down, a published
//! benchmark, and that neither start nor discretisation matters.

#![allow(clippy::unwrap_used)]

#[path = "../examples/collapse_benchmark/table.rs"]
mod table;

use inrush::line::Component;
use inrush::sphere::{
    Beam, Clump, Equilibrium, EquilibriumSettings, LineView, Mode, Molecule, PairView, Populations,
    Shells, SphereError, pair_spectra, solve,
};
use table::benchmark;

fn clump() -> Clump {
    Clump {
        inner_radius_pc: 0.004,
        outer_radius_pc: 0.15,
        n_h2_cm3: 1e4,
        density_slope: 1.5,
        t_kin_k: 14.0,
        temperature_slope: 0.2,
        v_in_km_s: 0.2,
        velocity_slope: 0.5,
        sigma_km_s: 0.3,
        abundance: 2e-9,
    }
}

fn hco_plus() -> Molecule {
    Molecule::built_in("HCO+").unwrap()
}

fn solved(clump: &Clump, shells: usize, settings: &EquilibriumSettings) -> (Shells, Equilibrium) {
    let shells = Shells::of_clump(clump, shells).unwrap();
    let solution = solve(&shells, &hco_plus(), settings, None).unwrap();
    (shells, solution)
}

fn few_levels() -> EquilibriumSettings {
    EquilibriumSettings {
        levels: 9,
        ..EquilibriumSettings::default()
    }
}

#[test]
fn dense_gas_takes_its_kinetic_temperature() {
    let dense = Clump {
        n_h2_cm3: 1e10,
        abundance: 1e-15,
        ..clump()
    };
    let (shells, solution) = solved(&dense, 8, &few_levels());
    for line in 0..3 {
        let found = solution
            .populations
            .excitation_temperature_k(&hco_plus(), line);
        for (found, expected) in found.iter().zip(&shells.table().t_kin_k) {
            assert!(
                (found / expected - 1.0).abs() < 1e-3,
                "{line}: {found} {expected}"
            );
        }
    }
}

#[test]
fn empty_gas_takes_the_temperature_of_the_background() {
    let empty = Clump {
        n_h2_cm3: 1e-4,
        abundance: 1e-12,
        ..clump()
    };
    let (_, solution) = solved(&empty, 8, &few_levels());
    for line in 0..3 {
        for found in solution
            .populations
            .excitation_temperature_k(&hco_plus(), line)
        {
            // 2.72548 K: Fixsen 2009
            assert!((found / 2.725_48 - 1.0).abs() < 1e-3, "{line}: {found}");
        }
    }
}

#[test]
fn two_levels_of_a_thin_cloud_balance_as_written_down() {
    // n_1/n_0 = (C_01 + A w N)/(C_10 + A (1 + N)), N photons a mode of the background, w = 3
    let thin = Clump {
        density_slope: 0.0,
        temperature_slope: 0.0,
        abundance: 1e-15,
        ..clump()
    };
    let settings = EquilibriumSettings {
        levels: 2,
        ..few_levels()
    };
    let (_, solution) = solved(&thin, 6, &settings);
    // HCO+ 1-0 as the file states it: A, and rates 2.6e-10 at 10 K, 2.3e-10 at 20 K
    let (a, down) = (4.2512e-5, 1e4 * (2.6e-10 - 0.4 * 0.3e-10));
    let energy_k = 2.975 * 1.438_776_877;
    let photons =
        1.0 / ((6.626_070_15e-34 * 89.188_523e9 / 1.380_649e-23 / 2.725_48_f64).exp() - 1.0);
    let up = down * 3.0 * f64::exp(-energy_k / 14.0);
    let expected = (up + a * 3.0 * photons) / (down + a * (1.0 + photons));
    for shell in 0..6 {
        let shares = solution.populations.shell(shell);
        assert!((shares[1] / shares[0] / expected - 1.0).abs() < 1e-4);
    }
}

#[test]
fn radiation_in_a_very_thick_static_sphere_is_that_of_its_gas() {
    // far below the critical density; trapping alone thermalises the middle where tau >> A/C
    let thick = Clump {
        n_h2_cm3: 1e5,
        density_slope: 0.0,
        temperature_slope: 0.0,
        v_in_km_s: 0.0,
        abundance: 1e-5,
        ..clump()
    };
    let (_, solution) = solved(&thick, 12, &few_levels());
    let found = solution
        .populations
        .excitation_temperature_k(&hco_plus(), 0);
    assert!((found[0] / 14.0 - 1.0).abs() < 1e-3, "{}", found[0]);
    assert!(found[11] < found[0], "{}", found[11]);
}

/// Largest relative difference of populations of levels that hold more than 1e-4.
fn difference(a: &Populations, b: &Populations) -> f64 {
    (0..a.shells())
        .flat_map(|shell| {
            let pairs = a.shell(shell).iter().zip(b.shell(shell));
            pairs.map(|(a, b)| if *a > 1e-4 { (a / b - 1.0).abs() } else { 0.0 })
        })
        .fold(0.0, f64::max)
}

#[test]
fn the_stated_error_is_the_distance_from_the_solution_whatever_the_start() {
    for abundance in [1e-10, 3e-9, 1e-7] {
        let clump = Clump {
            abundance,
            ..clump()
        };
        let shells = Shells::of_clump(&clump, 16).unwrap();
        let molecule = hco_plus();
        let deep = EquilibriumSettings {
            tolerance: 1e-8,
            ..few_levels()
        };
        let exact = solve(&shells, &molecule, &deep, None).unwrap();
        let cold = molecule.lowest_levels(9).boltzmann(2.8);
        let cold = Populations::new(9, cold.repeat(16)).unwrap();
        for tolerance in [1e-2, 1e-4] {
            let settings = EquilibriumSettings { tolerance, ..deep };
            for start in [None, Some(&cold)] {
                let found = solve(&shells, &molecule, &settings, start).unwrap();
                let distance = difference(&found.populations, &exact.populations);
                println!(
                    "{abundance:.0e}, from {}: {} iterations, estimated {:.1e}, true {distance:.1e}",
                    if start.is_some() { "below" } else { "above" },
                    found.iterations,
                    found.error,
                );
                assert!(
                    distance < 3.0 * tolerance,
                    "{abundance} {tolerance}: {distance}"
                );
            }
        }
    }
}

#[test]
fn too_few_iterations_are_an_error_that_says_how_far_it_came() {
    let shells = Shells::of_clump(&clump(), 8).unwrap();
    let settings = EquilibriumSettings {
        max_iterations: 3,
        ..few_levels()
    };
    let error = solve(&shells, &hco_plus(), &settings, None).unwrap_err();
    assert!(
        matches!(error, SphereError::NotConverged { iterations: 3, .. }),
        "{error}"
    );
    assert!(error.hint().is_some());
}

#[test]
fn rays_and_velocities_are_fine_enough() {
    let default = few_levels();
    let (_, reference) = solved(&clump(), 32, &default);
    for (finer, largest) in [
        (EquilibriumSettings { rays: 4, ..default }, 2e-3),
        (
            EquilibriumSettings {
                velocity_step: 0.25,
                ..default
            },
            2e-3,
        ),
        (
            EquilibriumSettings {
                source_step: 0.125,
                ..default
            },
            2e-3,
        ),
        (
            EquilibriumSettings {
                profile_step: 0.1,
                ..default
            },
            2e-3,
        ),
    ] {
        let (_, found) = solved(&clump(), 32, &finer);
        let difference = difference(&found.populations, &reference.populations);
        println!("{finer:?}: {difference:.1e}");
        assert!(difference < largest, "{finer:?}: {difference}");
    }
}

#[test]
fn twice_as_many_shells_in_the_full_mode_change_spectra_by_less_than_a_percent() {
    let molecule = hco_plus();
    let line = LineView {
        transition: 0,
        components: vec![Component::SINGLE],
        beam: Beam::Gaussian {
            fwhm_pc: 0.1,
            offset_pc: 0.0,
        },
        velocity_km_s: (-20..=20).map(|step| 0.075 * f64::from(step)).collect(),
    };
    let view = PairView {
        thin_molecule: molecule.isotopologue(86.754_288_4 / 89.188_524_7),
        thick_molecule: molecule,
        thick: line.clone(),
        thin: line,
    };
    let mut full = Mode::full();
    full.equilibrium.levels = 9;
    let finer = Mode {
        shells: 2 * full.shells,
        ..full
    };
    let [a, b] =
        [full, finer].map(|mode| pair_spectra(&clump(), 50.0, &view, &mode, None).unwrap());
    for (name, a, b) in [
        ("thick", &a.thick_k, &b.thick_k),
        ("thin", &a.thin_k, &b.thin_k),
    ] {
        let peak = a.iter().copied().fold(0.0, f64::max);
        let worst = a
            .iter()
            .zip(b)
            .map(|(a, b)| (a - b).abs())
            .fold(0.0, f64::max);
        println!("{name}: {:.1e} of the peak, {peak:.2} K", worst / peak);
        assert!(worst < 0.01 * peak, "{name}: {}", worst / peak);
    }
    // infall toward warmer gas: the thick line is brighter in the blue
    let (blue, red) = a.thick_k.split_at(20);
    let largest = |side: &[f64]| side.iter().copied().fold(0.0, f64::max);
    assert!(largest(blue) > 1.1 * largest(red));
}

/// tests/data/collapse/README.md: van Zadelhoff et al. 2002, A&A 395, 373, problem 2a, against an
/// independent Monte Carlo solution.
///
/// Bounds are what is found here, rounded up. Outside of 5e16 cm they are of the size of the Monte
/// Carlo solution's own scatter from shell to shell. Inside, the two differ in what fills the
/// cavity: nothing here; continuing the innermost gas halves the difference.
#[test]
fn a_collapsing_cloud_agrees_with_a_published_benchmark() {
    let (shells, rows) = benchmark().unwrap();
    let settings = EquilibriumSettings {
        levels: 12,
        ..EquilibriumSettings::default()
    };
    let solution = solve(&shells, &hco_plus(), &settings, None).unwrap();
    let outside = |row: &Vec<f64>| row[0] > 5e16;
    let worst = |level: usize, wanted: bool| {
        rows.iter()
            .enumerate()
            .filter(|(_, row)| outside(row) == wanted)
            .map(|(shell, row)| {
                (solution.populations.shell(shell)[level] / row[5 + level] - 1.0).abs()
            })
            .fold(0.0, f64::max)
    };
    for (level, (outer, inner)) in [
        (0.025, 0.085),
        (0.011, 0.095),
        (0.048, 0.075),
        (0.065, 0.26),
        (0.02, 0.21),
    ]
    .into_iter()
    .enumerate()
    {
        println!(
            "J = {level}: {:.3} outside, {:.3} inside",
            worst(level, true),
            worst(level, false)
        );
        assert!(worst(level, true) < outer, "J = {level}");
        assert!(worst(level, false) < inner, "J = {level}");
    }
    // innermost excitation temperatures as published with the solution: 19.56, 8.40 and 6.96 K
    for (line, published, within) in [(0, 19.56, 0.04), (2, 8.40, 0.13), (3, 6.96, 0.04)] {
        let found = solution
            .populations
            .excitation_temperature_k(&hco_plus(), line)[0];
        assert!((found / published - 1.0).abs() < within, "{line}: {found}");
    }
}
