//! Writes a small table of invented results in every format.
//!
//!     cargo run --example write_tables -- DIRECTORY

use std::path::{Path, PathBuf};

use inrush::numeric::Estimate;
use inrush::report::{self, ReportError, Row, Table, Value, columns, files::write_atomically};

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let directory: PathBuf = std::env::args_os()
        .nth(1)
        .ok_or("expected a directory as the only argument")?
        .into();
    std::fs::create_dir_all(&directory)?;
    write_everything(&directory)?;
    Ok(())
}

fn write_everything(directory: &Path) -> Result<(), ReportError> {
    let table = table()?;
    write_atomically(&directory.join("results.csv"), |writer| {
        report::write_csv(&table, writer)
    })?;
    write_atomically(&directory.join("results.ecsv"), |writer| {
        report::write_ecsv(&table, writer)
    })?;
    write_atomically(&directory.join("results.fits"), |writer| {
        report::write_fits(&table, writer)
    })?;
    write_atomically(&directory.join("results.json"), |writer| {
        report::write_json_rows(&table, writer)
    })?;
    let empty = Table::new(columns::results());
    write_atomically(&directory.join("empty.ecsv"), |writer| {
        report::write_ecsv(&empty, writer)
    })?;
    write_atomically(&directory.join("empty.fits"), |writer| {
        report::write_fits(&empty, writer)
    })
}

/// Three rows: a full one, one with names that need escapes, and one with nothing but a name.
fn table() -> Result<Table, ReportError> {
    let mut table = Table::new(columns::results());
    table.meta = vec![
        ("software".to_owned(), Value::from("inrush")),
        ("version".to_owned(), Value::from(env!("CARGO_PKG_VERSION"))),
        ("seed".to_owned(), Value::Integer(42)),
        ("ratio".to_owned(), Value::Real(1e-7)),
        (
            "settings".to_owned(),
            Value::from(
                "models = \"two-layer, hill\"; window = [-2.5, 3.5] km/s; it's a text longer than one card",
            ),
        ),
    ];
    table.push(full_row()?)?;
    let mut escaped = columns::results().row();
    escaped
        .set("id", "clump \"B\", the one at 3'; left\\right")?
        .set("v_lsr_km_s", 1.0 / 3.0)?
        .set("t_ff_yr", 1e300)?;
    table.push(escaped)?;
    let mut bare = columns::results().row();
    bare.set("id", "#3 caf\u{e9}\nsecond line")?;
    table.push(bare)?;
    Ok(table)
}

fn full_row() -> Result<Row, ReportError> {
    let estimate = |value, err| Some(Estimate { value, err });
    let mut row = columns::results().row();
    row.set("id", "clump A")?
        .set("thick_line", "HCO+ 1-0")?
        .set("thin_line", "H13CO+ 1-0")?
        .set("noise_thick_k", 0.052)?
        .set_estimate("v_thin_km_s", estimate(-0.021, 0.013))?
        .set_estimate("delta_v", estimate(-0.52, 0.041))?
        .set("profile", "blue")?
        .set_estimate("hill_v_in_km_s", estimate(0.4812, 0.0347))?
        .set("hill_chi2_red", 1.04)?
        .set_estimate("v_in_km_s", estimate(0.4812, 0.0347))?
        .set("v_in_km_s_lo68", 0.441)?
        .set("v_in_km_s_hi68", 0.532)?
        .set("v_in_model", "hill")?
        .set("mass_rate_msun_yr", 1.234e-5)?
        .set("cautions", "low_signal;correlated_noise")?;
    Ok(row)
}
