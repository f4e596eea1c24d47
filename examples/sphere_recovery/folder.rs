//! Pairs of a folder with truth.csv, such as tests/data/spheres.

use crate::{Row, infer, summary};
use inrush::fit::clump::{ClumpSettings, SpeedLaw};
use inrush::line::find;
use inrush::spectrum::Spectrum;
use std::collections::HashMap;
use std::error::Error;
use std::path::Path;

type Truth = HashMap<String, String>;

fn spectrum(path: &Path) -> Result<Spectrum, Box<dyn Error>> {
    let rows: Vec<(f64, f64)> = csv::Reader::from_path(path)?
        .deserialize()
        .collect::<Result<_, _>>()?;
    let (velocity, temperature): (Vec<f64>, Vec<f64>) = rows.into_iter().unzip();
    let width = (velocity[velocity.len() - 1] - velocity[0]) / (velocity.len() - 1) as f64;
    let widths = vec![width; velocity.len()];
    Ok(Spectrum::new(velocity, widths, temperature)?)
}

/// Prints a row a pair and what they amount to.
pub fn print(folder: &str, settings: &ClumpSettings) -> Result<(), Box<dyn Error>> {
    let folder = Path::new(folder);
    let rows: Vec<Truth> = csv::Reader::from_path(folder.join("truth.csv"))?
        .deserialize()
        .collect::<Result<_, _>>()?;
    let number = |truth: &Truth, column: &str| truth[column].parse::<f64>().unwrap_or(f64::NAN);
    let (mut constant, mut falling) = (Vec::new(), Vec::new());
    for truth in &rows {
        let [thick, thin] = ["thick", "thin"]
            .map(|which| spectrum(&folder.join(format!("{}-{which}.csv", truth["id"]))));
        let (thick, thin) = (thick?, thin?);
        let lines = (find(&truth["thick_line"])?, find(&truth["thin_line"])?);
        let snr = number(truth, "snr_thick");
        let speed = number(truth, "v_at_radius_km_s");
        let [found, other] = SpeedLaw::ALL.map(|law| infer(&thick, &thin, &lines, law, settings));
        let (found, other) = (found?, other?);
        let odds = other.posterior.ln_evidence - found.posterior.ln_evidence;
        let v = found.posterior.v_in_km_s.interval95;
        let row = Row::new(&truth["thick_line"], &found, speed, snr);
        let fall = Row::new(&truth["thick_line"], &other, speed, snr);
        println!(
            "{} {} {} depth {} v/sigma {:+.2} | {} | free fall ratio {:.3} ln odds {odds:+.2} | 95 % {:.3} to {:.3} km/s",
            truth["id"],
            truth["kind"],
            truth["thick_line"],
            truth["tau_thick"],
            speed / number(truth, "sigma_km_s"),
            row.text(),
            fall.ratio,
            v.0,
            v.1
        );
        match truth["kind"].as_str() {
            "infall" | "expand" => constant.push(row),
            "infall-ff" => falling.push(fall),
            _ => {}
        }
    }
    summary("constant", &constant);
    for line in ["HCO+ 1-0", "HCO+ 4-3"] {
        let some: Vec<Row> = constant
            .iter()
            .filter(|row| row.line == line)
            .cloned()
            .collect();
        summary(line, &some);
    }
    summary("free fall", &falling);
    Ok(())
}
