//! The shells of the collapse benchmark (tests/data/collapse/README.md).

use inrush::constants::PARSEC;
use inrush::sphere::{ShellTable, Shells, SphereError};

/// Radius at which the last shell ends, cm.
const OUTER_CM: f64 = 4.628_40e17;

/// The shells, and the rows of the table that they and the published level shares come from.
///
/// # Errors
///
/// [`SphereError`] where they are no shells.
pub fn benchmark() -> Result<(Shells, Vec<Vec<f64>>), SphereError> {
    let rows: Vec<Vec<f64>> = include_str!("../../tests/data/collapse/shells.csv")
        .lines()
        .skip(1)
        .map(|line| {
            line.split(',')
                .filter_map(|field| field.parse().ok())
                .collect()
        })
        .collect();
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
    Ok((shells, rows))
}
