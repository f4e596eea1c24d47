//! HCO+ in a collapsing cloud against an independent solution: prints excitation temperatures and
//! level shares side by side (van Zadelhoff et al. 2002, A&A 395, 373, problem 2a).
//!
//! `cargo run --release --example collapse_benchmark`

#![allow(clippy::print_stdout)]

mod table;

use inrush::sphere::{EquilibriumSettings, Molecule, Populations, SphereError, solve};
use table::benchmark;

fn main() -> Result<(), SphereError> {
    let (shells, rows) = benchmark()?;
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
