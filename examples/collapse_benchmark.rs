//! HCO+ in a collapsing cloud against an independent solution: prints excitation temperatures and
//! level shares side by side (van Zadelhoff et al. 2002, A&A 395, 373, problem 2a).
//!
//! `cargo run --release --example collapse_benchmark`

#![allow(clippy::print_stdout)]

use inrush::constants::PARSEC;
use inrush::sphere::{
    EquilibriumSettings, Molecule, Populations, ShellTable, Shells, SphereError, solve,
};

/// Radius at which the last shell ends, cm.
const OUTER_CM: f64 = 4.628_40e17;

/// Rows of the benchmark's table.
fn rows() -> Vec<Vec<f64>> {
    include_str!("../tests/data/collapse/shells.csv")
        .lines()
        .skip(1)
        .map(|line| {
            line.split(',')
                .filter_map(|field| field.parse().ok())
                .collect()
        })
        .collect()
}

fn main() -> Result<(), SphereError> {
    let rows = rows();
    let column = |index: usize| -> Vec<f64> { rows.iter().map(|row| row[index]).collect() };
    let cm_per_pc = PARSEC.value * 100.0;
    let mut edge_pc: Vec<f64> = column(0).iter().map(|cm| cm / cm_per_pc).collect();
    edge_pc.push(OUTER_CM / cm_per_pc);
    let shells = Shells::of_table(ShellTable {
        edge_pc,
        n_h2_cm3: column(1),
        t_kin_k: column(2),
        v_in_km_s: column(3),
        sigma_km_s: column(4)
            .iter()
            .map(|b| b / std::f64::consts::SQRT_2)
            .collect(),
        abundance: vec![1e-9; rows.len()],
    })?;
    let molecule = Molecule::built_in("HCO+")?;
    let start = std::time::Instant::now();
    let settings = EquilibriumSettings {
        levels: 21,
        ..EquilibriumSettings::default()
    };
    let solution = solve(&shells, &molecule, &settings, None)?;
    println!(
        "{} iterations, estimated error {:.1e}, {:.0} ms",
        solution.iterations,
        solution.error,
        1e3 * start.elapsed().as_secs_f64()
    );
    let theirs = Populations::new(5, rows.iter().flat_map(|row| row[5..10].to_vec()).collect())?;
    println!(
        "shell    r/cm     T_ex of 1-0, 2-1, 3-2, 4-3: here / Monte Carlo          shares J = 0..4: here over Monte Carlo, %"
    );
    for (shell, row) in rows.iter().enumerate() {
        print!("{shell:5} {:.2e} ", row[0]);
        for line in 0..4 {
            print!(
                " {:6.2}/{:6.2}",
                solution
                    .populations
                    .excitation_temperature_k(&molecule, line)[shell],
                theirs.excitation_temperature_k(&molecule, line)[shell],
            );
        }
        for level in 0..5 {
            let ratio = solution.populations.shell(shell)[level] / row[5 + level];
            print!(" {:+6.1}", 100.0 * (ratio - 1.0));
        }
        println!();
    }
    Ok(())
}
