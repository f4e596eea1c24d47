//! Verdicts on the pairs of tests/data/spheres, which no slab made, against their truth.

use super::{Setup, parallel};
use inrush::fit::hypotheses::{Hypothesis, Odds, Verdict, verdict};
use inrush::fit::posterior::pair_posterior;
use inrush::run::{LineSection, RunSheet, fit_pair};
use std::collections::HashMap;
use std::error::Error;
use std::path::Path;

type Truth = HashMap<String, String>;

/// Prints a row a pair and how many of each kind have p_infall > 0.9.
pub fn print(setup: Setup) -> Result<(), Box<dyn Error>> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/spheres");
    let rows: Vec<Truth> = csv::Reader::from_path(folder.join("truth.csv"))?
        .deserialize()
        .collect::<Result<_, _>>()?;
    let results = parallel(rows.len(), |index| judge(&rows[index], &folder, setup));
    println!(
        "id,kind,snr,v_over_sigma,p_infall,p_expansion,p_static,p_two_clouds,v_in_over_sigma,lo68,hi68,lo95,hi95,between,trusted"
    );
    for (truth, result) in rows.iter().zip(&results) {
        match result {
            Ok(verdict) => print_row(truth, verdict),
            Err(error) => println!("{},{},{error}", truth["id"], truth["kind"]),
        }
    }
    let sure = |name: &str, belongs: &dyn Fn(&Truth) -> bool| {
        let of: Vec<f64> = rows
            .iter()
            .zip(&results)
            .filter(|(truth, _)| belongs(truth))
            .filter_map(|(_, result)| {
                let verdict = result.as_ref().ok()?;
                Some(verdict.probability(Hypothesis::Infall))
            })
            .collect();
        let count = of.iter().filter(|p| **p > 0.9).count();
        println!("p_infall > 0.9: {name} {count} of {}", of.len());
    };
    for kind in ["static", "twocloud", "expand"] {
        sure(kind, &|truth| truth["kind"] == kind);
    }
    sure("infall at S/N >= 20, v_in > 0.3 sigma", &|truth| {
        truth["kind"] == "infall" && number(truth, "snr_thick") >= 20.0 && speed(truth) > 0.3
    });
    let moving: Vec<(f64, &Verdict)> = rows
        .iter()
        .zip(&results)
        .filter(|(truth, _)| truth["kind"] == "infall" || truth["kind"] == "expand")
        .filter_map(|(truth, result)| Some((number(truth, "v_in_km_s"), result.as_ref().ok()?)))
        .collect();
    let within = |ends: fn(&Verdict) -> (f64, f64)| {
        let inside = moving.iter().filter(|(truth, verdict)| {
            let (low, high) = ends(verdict);
            (low..=high).contains(truth)
        });
        inside.count()
    };
    let mut ratios: Vec<f64> = moving
        .iter()
        .map(|(truth, verdict)| verdict.v_in_km_s.median / truth)
        .collect();
    ratios.sort_by(f64::total_cmp);
    println!(
        "infall and expand: truth in the 68 % interval {} of {}, in the 95 % interval {}, median v_in/v_true {:.2}",
        within(|verdict| verdict.v_in_km_s.interval68),
        moving.len(),
        within(|verdict| verdict.v_in_km_s.interval95),
        ratios[ratios.len() / 2],
    );
    Ok(())
}

fn number(truth: &Truth, column: &str) -> f64 {
    truth[column].parse().unwrap_or(f64::NAN)
}

/// True speed over the dispersion.
fn speed(truth: &Truth) -> f64 {
    let column = if truth["kind"] == "infall-ff" {
        "v_at_radius_km_s"
    } else {
        "v_in_km_s"
    };
    number(truth, column) / number(truth, "sigma_km_s")
}

fn judge(truth: &Truth, folder: &Path, setup: Setup) -> Result<Verdict, String> {
    let line = |which: &str| LineSection {
        line: Some(truth[&format!("{which}_line")].clone()),
        file: Some(format!("{}-{which}.csv", truth["id"]).into()),
        ..LineSection::default()
    };
    let sheet = RunSheet {
        thick: line("thick"),
        thin: line("thin"),
        ..RunSheet::default()
    };
    let outcome = fit_pair(&sheet, folder, &mut inrush::fit::Workspace::new())
        .map_err(|error| error.to_string())?;
    let posterior = pair_posterior(
        &outcome.thick.prepared,
        &outcome.thin.prepared,
        (&outcome.thick.line, &outcome.thin.line),
        outcome.thin_fit.line.as_ref(),
        &setup.settings(),
    )
    .map_err(|error| error.to_string())?;
    verdict(&posterior, &Odds::default()).map_err(|error| error.to_string())
}

fn print_row(truth: &Truth, verdict: &Verdict) {
    let p = verdict
        .standings
        .map(|one| format!("{:.3}", one.probability));
    let v = verdict.v_in_km_s;
    let (low68, high68) = v.interval68;
    let (low95, high95) = v.interval95;
    let between = verdict.between_models_km_s;
    let scaled = [v.median, low68, high68, low95, high95, between]
        .map(|value| format!("{:.2}", value / number(truth, "sigma_km_s")));
    println!(
        "{},{},{},{:.2},{},{},{}",
        truth["id"],
        truth["kind"],
        truth["snr_thick"],
        speed(truth),
        p.join(","),
        scaled.join(","),
        verdict.trusted
    );
}
